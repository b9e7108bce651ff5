"""Listening: a signal is chosen, rendered in several versions one after another, and played in the browser.

What the browser shows goes to it as one message whenever it changes, a version's pressure as float32 once it is there. All
versions play in step there and one is heard, so switching takes no time and asks nothing of the server.
"""

from functools import partial
from pathlib import Path
from typing import ClassVar

import param
from panel.custom import JSComponent

from app import clips, hearing, worker
from app.renditions import Renditions, clip_words, shown
from app.upload import PIECE, Upload
from app.values import typed_frequency

HERE = Path(__file__).parent
OWN = "own WAV file"


class Listen(JSComponent):
    """A signal, its versions, and what plays them.

    Parameters
    ----------
    state : app.state.DesignState
        Its design is rendered when a person asks for it.
    document : bokeh.document.Document or None
        Where it stands; its end ends the work. None: no document (tests).
    hear : callable
        As `app.hearing.heard`; replaced in tests.
    executors : tuple of concurrent.futures.Executor or None
        Threads for rendering and for reading files; None: the process's own.
    """

    cursor = param.Number(default=None, allow_None=True, doc="Hz at which tones begin, unless the browser has a cursor")
    signals = param.List(constant=True, doc="[name, number of frequencies] of what can be listened to")
    versions = param.List(constant=True, doc="[name, words] of what can be heard")
    tones = param.List(default=list(clips.TONES), constant=True, doc="[lowest, highest] frequency of a tone, Hz")
    own = param.String(default=OWN, constant=True)
    piece = param.Integer(default=PIECE, constant=True, doc="bytes of a file to send at a time")
    for_a_tone = param.String(default=hearing.FOR_A_TONE, constant=True)

    _esm = HERE / "listen.js"
    _stylesheets: ClassVar = [(HERE / "listen.css").read_text(encoding="utf-8")]

    def __init__(self, state, document=None, hear=hearing.heard, executors=None):
        self._state, self._document, self._compute = state, document, hear
        self._executors, self._render_job, self._read_job = executors, None, None
        self._heard = None           # the Renditions that can be heard
        self._coming = None          # those rendered in its place, until something of them is there
        self._count, self._stage, self._stale = 0, None, False
        self._upload, self._clip = Upload(), None
        signals = [*([name, number] for name, (_, number) in clips.SIGNALS.items()), [OWN, 0]]
        super().__init__(signals=signals, versions=[list(item) for item in hearing.VERSIONS.items()], margin=0,
                         sizing_mode="stretch_width", css_classes=["listen"])
        self._watch = state.param.watch(self._design_changed, "design")
        if document is not None:
            document.on_session_destroyed(lambda _: self.close())

    def set_cursor(self, frequency):
        """Frequency in Hz at which tones begin, as long as a person types none."""
        self.cursor = frequency

    def close(self):
        """End: nothing is rendered or told any more."""
        if self._watch is not None:
            self._state.param.unwatch(self._watch)
            self._watch = None
        for job in filter(None, (self._render_job, self._read_job)):
            job.stop(silently=True)

    # ---- what a person asks

    def _handle_msg(self, message):
        """Do what the browser asks."""
        takers = {"ready": self._tell_all, "render": self._ask, "stop": self._end, "first": self._put_first,
                  "download": self._download, "piece": self._take_piece}
        for word, value in message.items():
            takers[word](value)

    def _ask(self, wish):
        """Render all versions of a signal, the wanted one first; what is there of the same wish stays."""
        try:
            clip = self._wished(wish["signal"], wish["frequencies"])
        except ValueError as error:
            self._send_msg({"fault": str(error)})
            return
        self._end()
        batch = self._heard
        if batch is None or not batch.is_of(self._state.design, clip):
            self._count += 1
            batch = self._coming = Renditions(self._count, self._state.design, clip)
        self._stale = False
        batch.want(wish["first"])
        self._go_on(batch)

    def _wished(self, signal, frequencies):
        """The clip of a signal's name and typed frequencies; ValueError says what is wrong with them."""
        if signal != OWN:
            make, number = clips.SIGNALS[signal]
            return make(*(typed_frequency(text, clips.TONES) for text in frequencies[:number]))
        if self._clip is None:
            raise ValueError("Choose a WAV file first.")
        return self._clip

    def _end(self, *_):
        """Stop rendering; what is there stays."""
        batch = self._at_work()
        if batch is not None:
            self._render_job.stop(silently=True)
            batch.end()
            self._stage, self._coming = None, None
            self._stale = self._is_stale()
            self._tell()

    def _put_first(self, version):
        """Render a version before the others that wait."""
        batch = self._at_work()
        if batch is not None:
            batch.prefer(version)

    def _download(self, version):
        """Send a version as a file."""
        if self._heard is not None and version in self._heard.done:
            name, data = self._heard.file(version)
            self._send_msg({"download": {"filename": name, "bytes": data}})

    def _take_piece(self, piece):
        """A piece of a person's file: ask for the next one, or read the whole."""
        try:
            complete = self._upload.take(piece)
        except ValueError as error:
            self._send_msg({"upload": {"fault": str(error)}})
            return
        if not complete:
            self._send_msg({"upload": {"at": len(self._upload.data)}})
            return
        if self._read_job is None:
            self._read_job = worker.Job(partial(self._in_document, self._take_clip), self._threads()[1])
        self._read_job.start(_read, bytes(self._upload.data), self._upload.name)
        self._upload = Upload()

    # ---- what the threads give

    def _threads(self):
        """Executors for rendering and for reading."""
        if self._executors is None:
            shared = worker.shared()
            self._executors = shared.long, shared.executor
        return self._executors

    def _in_document(self, take, stage):
        """Take what a thread gives, under the document's lock."""
        if self._document is None:
            take(stage)
        else:
            self._document.add_next_tick_callback(partial(take, stage))

    def _at_work(self):
        """What is being rendered, or None."""
        return next((batch for batch in (self._coming, self._heard) if batch is not None and batch.at_work), None)

    def _go_on(self, batch):
        """Begin with the next version, if there is one, and tell."""
        self._stage = None
        if batch.go_on():
            if self._render_job is None:
                self._render_job = worker.Job(partial(self._in_document, self._take), self._threads()[0])
            self._render_job.start(self._compute, batch.design, batch.clip, batch.at_work)
        elif self._coming is batch:           # nothing of it could be had
            self._heard, self._coming = batch, None
        self._tell()

    def _take(self, stage):
        """Progress of the version being rendered, or what became of it."""
        batch, outcome = self._at_work(), stage.outcome
        if batch is None or self._watch is None:
            return
        if outcome is None:
            self._stage = stage
            self._tell()
        elif outcome.wish == (batch.design, batch.clip, batch.at_work):     # not of what was stopped meanwhile
            if outcome.failure is None:
                batch.done[batch.at_work] = outcome.result
                self._heard, self._coming = batch, None
                self._tell_audio(batch.at_work)
            else:
                batch.faults[batch.at_work] = outcome.failure.text
            self._go_on(batch)

    def _take_clip(self, stage):
        """A person's file was read, or why not."""
        if stage.outcome is None or self._watch is None:
            return
        failure = stage.outcome.failure
        clip, fault = stage.outcome.result if failure is None else (None, failure.text)
        if clip is not None:
            self._clip = clip
        self._send_msg({"upload": {"fault": fault} if clip is None else {"clip": clip_words(clip)}})

    # ---- what the browser is told

    def _is_stale(self):
        """Whether what is shown is of an earlier design."""
        listed = self._coming or self._heard
        return listed is not None and not listed.is_of(self._state.design)

    def _design_changed(self, *_):
        """Say when what is shown becomes stale, and when it no longer is."""
        stale = self._is_stale()
        if stale != self._stale:
            self._stale = stale
            self._tell()

    def _tell_all(self, *_):
        """Everything, to a browser that has just drawn the component."""
        if self._clip is not None:
            self._send_msg({"upload": {"clip": clip_words(self._clip)}})
        for version in self._heard.done if self._heard else ():
            self._tell_audio(version)
        self._tell()

    def _tell_audio(self, version):
        """A version's pressure."""
        self._send_msg({"audio": {"batch": self._heard.number, "version": version, "rate": clips.RATE,
                                  "samples": self._heard.done[version].pressure}})

    def _tell(self):
        """What is shown now."""
        self._send_msg({"shown": shown(self._coming or self._heard, self._heard, self._stage, self._stale)})


def _read(data, name, progress, stop):
    """(clip, None) of a file's bytes, or (None, what is wrong)."""
    try:
        return clips.from_wav(data, name), None
    except ValueError as error:
        return None, str(error)
