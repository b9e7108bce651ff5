"""Listening in a real Chromium: render, switch, an own file, stop, download. The rendering is a stand-in.

What is played is read off the nodes of the page's own audio graph, recorded as they are made.
"""

import io
import threading
import wave

import numpy as np
import panel as pn
import pytest
from panel.io.server import get_server
from tornado.ioloop import IOLoop

from app import clips
from app.hearing import Rendition
from app.listen import Listen
from app.loudness import measured
from app.server import free_port
from app.state import DesignState
from app.wav import write_wav
from engine.design import Design
from engine.errors import NotConverged, Stopped

STRENGTH = {"sine": 2.0, "undistorted": 1.5, "compensated": 0.5}      # Pa, in the order of rendering
# Every gain node of the page; of each source when and where it starts, whether it repeats, and the peak of its sound.
RECORD = """(() => {
  window.gains = []
  window.starts = []
  const gain = AudioContext.prototype.createGain, start = AudioBufferSourceNode.prototype.start
  AudioContext.prototype.createGain = function () {
    const made = gain.call(this)
    window.gains.push(made)
    return made
  }
  AudioBufferSourceNode.prototype.start = function (...given) {
    const peak = this.buffer.getChannelData(0).reduce((most, value) => Math.max(most, Math.abs(value)), 0)
    window.starts.push({at: String([given[0], given[1], this.loop]), peak})
    return start.call(this, ...given)
  }
})()"""
DEEP = """(selector) => {
  const deep = (root) => [...root.querySelectorAll(selector),
    ...[...root.querySelectorAll("*")].flatMap((host) => host.shadowRoot ? deep(host.shadowRoot) : [])]
  return deep(document)
}"""
GAINS = "window.gains.slice(-3).map((node) => node.gain.value)"


class Studio:
    """The component alone on a page, its computation a stand-in that waits at a gate."""

    def __init__(self, design):
        self.design, self.gate, self.listens = design, threading.Event(), []
        self.gate.set()
        self.port = free_port("127.0.0.1", 5900)
        self.loop = IOLoop()
        self.thread = threading.Thread(target=self._serve)
        self.thread.start()

    def _serve(self):
        server = get_server({"/": self.page}, port=self.port, address="127.0.0.1", loop=self.loop, show=False, start=False,
                            verbose=False)
        server.start()
        self.loop.start()
        server.stop(wait=False)

    def page(self):
        self.state = DesignState(self.design)
        self.listens.append(Listen(self.state, pn.state.curdoc, hear=self.compute))
        return pn.Column(self.listens[-1], width=310)

    def compute(self, design, clip, version, progress, stop):
        while not self.gate.wait(0.01):
            if stop():
                raise Stopped("told to")
            progress(0.25)
        if version == "square-root":
            raise NotConverged("The amplitude is more than half the bias.")
        pressure = STRENGTH[version] * clip.samples
        return Rendition(pressure.astype(np.float32), measured(pressure, clips.RATE))

    def close(self):
        self.gate.set()
        self.loop.add_callback(self.loop.stop)
        self.thread.join(60)


@pytest.fixture(scope="module")
def studio():
    made = Studio(Design())
    yield made
    made.close()


@pytest.fixture
def page(chromium, studio):
    page = chromium.new_page()
    faults = []
    page.add_init_script(RECORD)
    page.on("console", lambda message: faults.append(message.text) if message.type == "error" else None)
    page.on("pageerror", lambda error: faults.append(str(error)))
    page.on("request", lambda request: faults.append(request.url) if "127.0.0.1" not in request.url and
            not request.url.startswith(("data:", "blob:")) else None)
    page.set_default_timeout(15_000)
    page.set_viewport_size({"width": 360, "height": 700})
    page.goto(f"http://127.0.0.1:{studio.port}/")
    page.locator("button.go").wait_for()
    yield page
    page.close()
    assert faults == []


def test_a_signal_is_rendered_played_switched_stopped_and_kept(page, studio):
    said, row = page.locator(".said"), lambda words: page.get_by_label(words, exact=True)
    # rendering: progress, stop, and again
    studio.gate.clear()
    assert page.locator("button.play").is_disabled()
    studio.loop.add_callback(lambda: studio.listens[-1].set_cursor(69.3))
    page.wait_for_function(f"({DEEP})('#frequency-0')[0].value === '69.3 Hz'")
    page.locator("#frequency-0").fill("250 Hz")
    page.locator("button.go").click()
    page.locator(".working", has_text="25 %").wait_for()
    assert page.locator("button.go").inner_text() == "stop rendering"
    page.locator("button.go").click()
    page.locator("button.go", has_text="render").wait_for()
    studio.gate.set()
    page.locator("button.go").click()
    said.filter(has_text="Rendered: tone 250 Hz, 3.0 s").wait_for()
    why = page.locator("#why-square-root")
    assert why.inner_text() == "The amplitude is more than half the bias." and row("square-root drive").is_disabled()
    assert "BS.1770" in page.locator("section").inner_text() and "harms hearing" in page.locator("section").inner_text()

    # playing: all versions in step, one is heard; as loud as said; switching by keys
    page.locator("#loop").check()
    page.locator("button.play").click()
    page.wait_for_function(f"{GAINS}[0] > 0")
    starts = page.evaluate("window.starts")
    assert [start["peak"] for start in starts] == pytest.approx(list(STRENGTH.values()), rel=1e-6)
    assert len({start["at"] for start in starts}) == 1 and starts[0]["at"].endswith(",0,true")
    loud = page.evaluate(GAINS)
    assert loud[1:] == [0, 0]
    row("sine drive").press("ArrowDown")
    page.wait_for_function(f"{GAINS}[0] === 0 && {GAINS}[2] > 0")
    quiet = page.evaluate(GAINS)
    assert row("compensated drive").is_checked() and quiet[1] == 0
    assert quiet[2] * STRENGTH["compensated"] == pytest.approx(loud[0] * STRENGTH["sine"], rel=1e-4)
    # a sine at -23 LKFS peaks 20 dB below full scale and a little: K-weighting is near 0 dB at 250 Hz (BS.1770, figure 4)
    assert 20 * np.log10(loud[0] * STRENGTH["sine"]) == pytest.approx(-20 + 0.691, abs=0.7)
    page.locator("button.play").click()
    page.locator("button.play", has_text="play").wait_for()

    # the chosen version as a file
    with page.expect_download() as download:
        page.locator("button.keep").click()
    assert download.value.suggested_filename == "bench-back-tone-250-hz-compensated-drive-full-scale-2-Pa.wav"
    with wave.open(str(download.value.path())) as file:
        raw = np.frombuffer(file.readframes(file.getnframes()), np.uint8).reshape(-1, 3)
    values = np.pad(raw, ((0, 0), (1, 0))).copy().view("<i4").ravel() / 2.0**31
    assert values * 2.0 == pytest.approx(0.5 * clips.tone(250.0).samples, abs=1e-6)

    # another design: said, and still played
    studio.loop.add_callback(lambda: setattr(studio.state.groups["film"], "prestretch", 1.4))
    page.locator(".stale", has_text="Rendered for an earlier design.").wait_for()
    assert page.locator("button.play").is_enabled()


def test_an_own_file_is_sent_rendered_and_a_long_one_refused(page, studio):
    rng = np.random.default_rng(3)
    page.locator("select.signal").select_option("own WAV file")
    assert page.get_by_label("compensated drive", exact=True).is_disabled()
    long = io.BytesIO()
    with wave.open(long, "wb") as file:
        file.setnchannels(2)
        file.setsampwidth(2)
        file.setframerate(44100)
        file.writeframes(bytes(4 * 44100 * 45))
    page.locator("#wav").set_input_files({"name": "long.wav", "mimeType": "audio/wav", "buffer": long.getvalue()})
    page.locator(".message", has_text="long.wav is 45.0 s long; a clip may last 30 s").wait_for()
    own = write_wav(0.2 * rng.uniform(-1, 1, 8 * 44100), 44100)
    page.locator("#wav").set_input_files({"name": "own.wav", "mimeType": "audio/wav", "buffer": own})
    page.locator(".own", has_text="own.wav, 8.0 s").wait_for()
    assert page.locator(".message").inner_text() == ""
    page.locator("button.go").click()
    page.locator(".said", has_text="Rendered: own.wav, 8.0 s").wait_for()
    page.locator("button.play").click()
    page.wait_for_function("window.gains.length === 2 && window.gains[0].gain.value > 0")
    page.locator("button.play", has_text="stop").wait_for()
