"""What a visitor's page of distortion asks of the worker: curves, coarse at once and fine at rest, series, a map."""

import asyncio

import param

from app import worker

COARSE, FINE = 16, 120        # frequencies while a hand moves, and when it rests
REST = 0.3                    # s without a newer design, after which the fine ones are asked
PAGE = "distortion"


class Harmonics(param.Parameterized):
    """Beside a Session, for one of its pages.

    Parameters
    ----------
    session : app.session.Session
    work : object
        Access to the computations: `curves`, `series`, `held` make an updater from (publish), `job` a job from (tell).
    """

    view = param.Parameter(doc="DistortionView of the last design that has one, or None")
    held = param.Parameter(doc="DistortionView of the held design, or None")
    series = param.Parameter(doc="AmplitudeSeries at the cursor's frequency, or None")
    map = param.Parameter(doc="DistortionMap, or None")
    map_of = param.Parameter(doc="(design, band) of the map")
    stage = param.Parameter(doc="Stage of the map under way, or None")
    fault = param.String(doc="why the newest design's curves are not shown, or nothing")
    map_fault = param.String(doc="why there is no map, or nothing")

    def __init__(self, session, work=None):
        super().__init__()
        work = work or Shared()
        self._session, self._later, self._closed = session, None, False
        self._curves = work.curves(self._publisher(self._take))
        self._grey = work.held(self._publisher(self._take_held))
        self._steps = work.series(self._publisher(self._take_series))
        self._job = work.job(self._publisher(self._take_stage))
        self.cursor = None
        session.param.watch(self._ask, ["page", "overview"])
        session.param.watch(self._ask_held, ["page", "held"])
        session.on_close(self.close)

    @property
    def is_stale(self):
        """Whether the map is that of an earlier design or band."""
        return self.map is not None and self.map_of != self._wish()

    def settled(self, frequency):
        """The cursor rests at a frequency, Hz."""
        self.cursor = float(frequency)
        self._ask_series()

    def toggle_map(self):
        """Compute the map of the design shown, or stop the one under way."""
        if self._job.busy:
            self._job.stop()
        elif self._session.overview is not None:
            self.param.update(stage=worker.Stage(0.0, 0.0), map_fault="")
            self._job.start(worker.shared().thd_map, *self._wish())

    def close(self):
        """End with the session."""
        self._closed = True
        for updater in (self._curves, self._grey, self._steps):
            updater.close()
        self._job.stop(silently=True)
        if self._later is not None:
            self._later.cancel()

    def _publisher(self, take):
        """What takes an outcome to the document."""
        return lambda outcome: self._closed or self._session.in_document(take, outcome)

    def _wish(self):
        """(design, band) of the overview shown."""
        shown = self._session.overview
        return shown.design, tuple(shown.band)

    def _here(self):
        return self._session.page == PAGE and self._session.overview is not None

    def _ask(self, *_):
        """Want the coarse curves of the design shown, where the page is."""
        if not self._here():
            return
        shown = self.view
        if shown is None or (shown.design, tuple(shown.band)) != self._wish():
            self._want(COARSE)

    def _want(self, count):
        if self._later is not None:
            self._later.cancel()
            self._later = None
        self._curves.want(*self._wish(), count)

    def _take(self, outcome):
        """Publish curves; ask for the fine ones when nothing newer comes."""
        design, band, count = outcome.wish
        if outcome.failure is not None:
            self.fault = outcome.failure.text
            return
        self.param.update(view=outcome.result, fault="")
        if count == COARSE and self._here() and (design, band) == self._wish():
            self._later = asyncio.get_running_loop().call_later(REST, self._refine)
        elif count == FINE:
            self._ask_series()

    def _refine(self):
        if self._here() and not self._closed:
            self._want(FINE)

    def _ask_series(self):
        if self._here() and self.cursor is not None:
            self._steps.want(self._wish()[0], self.cursor)

    def _take_series(self, outcome):
        self.series = outcome.result

    def _ask_held(self, *_):
        held = self._session.held
        if held is None:
            self.held = None
        elif self._session.page == PAGE:
            self._grey.want(held.design, tuple(held.band), FINE)

    def _take_held(self, outcome):
        held = self._session.held
        if outcome.failure is None and held is not None and held.design == outcome.wish[0]:
            self.held = outcome.result

    def _take_stage(self, stage):
        """Publish how far the map is, and at its end the map."""
        if stage.outcome is None:
            self.stage = stage
            return
        failure = stage.outcome.failure
        if failure is None:
            self.param.update(stage=None, map=stage.outcome.result, map_of=stage.outcome.wish, map_fault="")
        else:
            self.param.update(stage=None, map_fault="" if failure.kind == "stopped" else failure.text)


class Shared:
    """The process's worker."""

    def curves(self, publish):
        """Updater for DistortionViews of the design under way."""
        return worker.Updater(worker.shared().distortion, publish, worker.shared().side)

    held = curves

    def series(self, publish):
        """Updater for AmplitudeSeries."""
        return worker.Updater(worker.shared().series, publish, worker.shared().side)

    def job(self, tell):
        """Job for the map."""
        return worker.Job(tell, worker.shared().long)
