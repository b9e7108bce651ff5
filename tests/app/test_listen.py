"""Listening, server side: versions come one after another, the wanted one first; files come in pieces; faults in words.

No outside reference for the order of things: it is the issue's. Levels against ISO 1683, files read by the standard library.
"""

import asyncio
import base64
import io
import threading
import wave
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from app import clips, hearing, upload
from app.hearing import Rendition
from app.listen import Listen
from app.loudness import measured
from app.renditions import full_scale
from app.state import DesignState
from app.upload import Upload
from app.wav import write_wav
from engine.errors import NotConverged, Stopped

STRENGTH = {"sine": 2.0, "square-root": 1.0, "compensated": 0.5, "undistorted": 1.5}      # Pa


class Studio:
    """A component whose computation is a stand-in, and what it tells the browser."""

    def __init__(self, design, pool):
        self.state, self.gate, self.calls, self.stopped = DesignState(design), threading.Event(), [], []
        self.refused, self.told = {}, []
        self.gate.set()
        self.listen = Listen(self.state, hear=self.compute, executors=(pool, pool))
        self.listen._send_msg = self.told.append

    def compute(self, design, clip, version, progress, stop):
        self.calls.append((design, clip.name, version))
        while not self.gate.wait(0.001):
            if stop():
                self.stopped.append(version)
                raise Stopped("told to")
        progress(0.5)
        if version in self.refused:
            raise NotConverged(self.refused[version])
        pressure = STRENGTH[version] * clip.samples
        return Rendition(pressure.astype(np.float32), measured(pressure, clips.RATE))

    def ask(self, **message):
        self.listen._handle_msg(message)

    def render(self, signal="tone", *frequencies, first="sine"):
        self.ask(render={"signal": signal, "frequencies": list(frequencies or ("100 Hz", "800 Hz")), "first": first})

    def last(self, word):
        """The newest message of a kind."""
        return next((message[word] for message in reversed(self.told) if word in message), None)

    def row(self, version):
        return self.last("shown")["rows"][version]

    def heard(self):
        """Versions whose sound was sent, in order."""
        return [message["audio"]["version"] for message in self.told if "audio" in message]

    async def until(self, true):
        while not true():
            await asyncio.sleep(0)

    async def rest(self):
        """Until nothing is being rendered."""
        await self.until(lambda: self.last("shown")["working"] is None)

    def send(self, data, name="own.wav", size=None):
        """Send a file as the browser does, as far as it is asked to."""
        at = 0
        while at is not None:
            content = base64.b64encode(data[at:at + upload.PIECE]).decode()
            self.ask(piece={"name": name, "size": len(data) if size is None else size, "at": at, "content": content})
            answer = self.last("upload")
            at = answer.get("at") if answer and answer is self.told[-1].get("upload") else None


@pytest.fixture
def studio(design):
    with ThreadPoolExecutor(1) as pool:
        made = Studio(design, pool)
        yield made
        made.gate.set()


def run(steps):
    asyncio.run(asyncio.wait_for(steps, 20))


def test_it_is_quiet_until_used(studio):
    studio.state.groups["film"].prestretch = 1.3
    assert studio.told == [] and studio.calls == [] and studio.listen._render_job is None
    studio.ask(ready=True)
    assert {row["state"] for row in studio.last("shown")["rows"].values()} == {"none"}


def test_the_wanted_version_comes_first_then_the_others(studio):
    async def steps():
        studio.render(first="compensated")
        await studio.rest()
    run(steps())
    assert studio.heard() == ["compensated", "undistorted", "sine", "square-root"]
    shown = studio.last("shown")
    assert shown["rendered"] == "tone 100 Hz, 3.0 s" and not shown["stale"]
    assert all(studio.row(version)["state"] == "ready" for version in STRENGTH)
    audio = studio.last("audio")
    assert (audio["rate"], audio["samples"].dtype) == (48000, np.float32)
    assert "−23.0 LKFS" in shown["matched"] and "BS.1770" in shown["matched"]
    # a sine of amplitude 2 Pa: 2/sqrt(2) Pa re 20 µPa (ISO 1683), 12.0 dB over one of 0.5 Pa
    assert studio.row("sine")["level"] == "97.0 dB" and studio.row("compensated")["level"] == "84.9 dB"
    assert studio.row("sine")["gain"] == "−12.0 dB" and studio.row("compensated")["gain"] == "0.0 dB"
    assert [shown["gains"][name] * STRENGTH[name] for name in STRENGTH] == pytest.approx([shown["gains"]["sine"] * 2.0] * 4)


def test_a_version_asked_for_meanwhile_is_next_and_each_is_there_when_it_is_done(studio):
    studio.gate.clear()

    async def steps():
        studio.render()
        await studio.until(lambda: studio.calls)
        assert studio.last("shown")["working"]["version"] == "sine drive"
        assert [studio.row(v)["state"] for v in STRENGTH] == ["working", "waiting", "waiting", "waiting"]
        studio.ask(first="compensated")
        studio.gate.set()
        await studio.rest()
    run(steps())
    assert studio.heard() == ["sine", "compensated", "undistorted", "square-root"]
    first = next(m["shown"] for m in studio.told if "shown" in m and m["shown"]["rows"]["sine"]["state"] == "ready")
    assert first["rows"]["square-root"]["state"] == "waiting" and first["gains"].keys() == {"sine"}


def test_what_cannot_be_rendered_says_why_and_the_others_come(studio):
    studio.refused["square-root"] = "the amplitude is more than half the bias"

    async def steps():
        studio.render("melody")
        await studio.rest()
    run(steps())
    assert studio.row("square-root") == {"state": "unavailable", "why": studio.refused["square-root"]}
    assert studio.row("compensated") == {"state": "unavailable", "why": hearing.FOR_A_TONE}
    assert studio.heard() == ["sine", "undistorted"]


def test_stop_keeps_what_is_there_and_rendering_again_does_the_rest(studio):
    async def steps():
        studio.render()
        await studio.until(lambda: studio.heard() == ["sine"])
        studio.gate.clear()
        studio.ask(stop=True)
        assert studio.last("shown")["working"] is None
        assert [studio.row(v)["state"] for v in STRENGTH] == ["ready", "none", "none", "none"]
        studio.gate.set()
        studio.render(first="square-root")
        await studio.rest()
    run(steps())
    assert studio.heard() == ["sine", "square-root", "undistorted", "compensated"]


def test_stop_ends_the_computation(studio):
    studio.gate.clear()

    async def steps():
        studio.render()
        await studio.until(lambda: studio.calls)
        studio.ask(stop=True)
        await studio.until(lambda: studio.stopped == ["sine"])
    run(steps())
    assert len(studio.calls) == 1 and {studio.row(v)["state"] for v in STRENGTH} == {"none"}


def test_an_earlier_design_is_said_and_heard_until_the_new_one_is_there(studio):
    async def steps():
        studio.render()
        await studio.rest()
        studio.state.groups["drive"].law = "square-root"
        studio.state.rename("other")
        assert not studio.last("shown")["stale"]                # neither changes what is rendered
        studio.state.groups["film"].prestretch = 1.4
        assert studio.last("shown")["stale"] and studio.row("sine")["state"] == "ready"
        studio.state.groups["film"].prestretch = 1.25
        assert not studio.last("shown")["stale"]
        studio.state.groups["film"].prestretch = 1.4
        before, studio.told[:] = studio.last("shown"), []
        studio.gate.clear()
        studio.render()
        now = studio.last("shown")
        assert not now["stale"] and now["heard"] == before["heard"] and now["gains"] == before["gains"]
        assert studio.row("sine")["state"] == "working"
        studio.gate.set()
        await studio.until(lambda: studio.heard())
        assert studio.last("audio")["batch"] != before["heard"]
        await studio.rest()
    run(steps())
    assert studio.calls[-1][0].film.prestretch == 1.4


def test_a_design_changed_while_it_is_rendered_is_stale(studio):
    studio.gate.clear()

    async def steps():
        studio.render()
        studio.state.groups["film"].prestretch = 1.4
        assert studio.last("shown")["stale"]
        studio.gate.set()
        await studio.rest()
    run(steps())
    assert studio.last("shown")["stale"] and studio.calls[-1][0].film.prestretch == 1.25


def test_silence_is_said(studio, monkeypatch):
    monkeypatch.setitem(STRENGTH, "sine", 0.0)

    async def steps():
        studio.render()
        await studio.rest()
    run(steps())
    assert studio.row("sine")["state"] == "unavailable" and "Silent" in studio.row("sine")["why"]
    assert studio.row("undistorted")["state"] == "ready"


def test_close_ends_the_work(studio):
    studio.gate.clear()

    async def steps():
        studio.render()
        await studio.until(lambda: studio.calls)
        studio.listen.close()
        studio.told.clear()
        studio.state.groups["film"].prestretch = 1.4
        await asyncio.wait_for(asyncio.get_running_loop().run_in_executor(studio.listen._threads()[0], str), 10)
        await asyncio.sleep(0)
    run(steps())
    assert studio.told == [] and len(studio.calls) == 1


def test_the_browser_drawn_anew_is_told_everything(studio):
    async def steps():
        studio.render()
        await studio.rest()
        studio.told.clear()
        studio.ask(ready=True)
    run(steps())
    assert sorted(studio.heard()) == sorted(STRENGTH) and "shown" in studio.told[-1]


@pytest.mark.parametrize(("signal", "frequencies", "words"), [
    ("tone", ["high", ""], "'high' is no frequency"), ("two tones", ["100", "9 kHz"], "9000 Hz is outside"),
    ("own WAV file", [], "Choose a WAV file first")])
def test_a_bad_wish_is_said(studio, signal, frequencies, words):
    studio.ask(render={"signal": signal, "frequencies": frequencies, "first": "sine"})
    assert words in studio.last("fault") and studio.calls == []


def test_a_download_says_its_full_scale_and_is_read_by_others(studio):
    async def steps():
        studio.render()
        await studio.rest()
    run(steps())
    studio.ask(download="square-root")
    sent = studio.last("download")
    assert sent["filename"] == "bench-back-tone-100-hz-square-root-drive-full-scale-2-Pa.wav"
    with wave.open(io.BytesIO(sent["bytes"])) as file:
        assert (file.getframerate(), file.getsampwidth(), file.getnchannels()) == (48000, 3, 1)
        assert file.getnframes() == len(clips.tone(100.0).samples)
        raw = np.frombuffer(file.readframes(file.getnframes()), np.uint8).reshape(-1, 3)
    values = np.pad(raw, ((0, 0), (1, 0))).copy().view("<i4").ravel() / 2.0**31
    assert np.max(np.abs(values)) == pytest.approx(0.5, rel=1e-5)          # 1 Pa of 2
    assert b"Pressure at the listener, full scale 2 Pa" in sent["bytes"]


@pytest.mark.parametrize(("peak", "scale"), [(1.0, 1.0), (1.01, 2.0), (2.0, 2.0), (0.3, 0.5), (6e-4, 1e-3), (43.0, 50.0)])
def test_full_scale_is_a_round_number(peak, scale):
    assert full_scale(peak) == pytest.approx(scale, rel=1e-12)


def test_a_file_in_several_pieces_becomes_the_signal(studio):
    n = 10 * 48000
    data = write_wav(0.3 * np.sin(2 * np.pi * 1000 * np.arange(n) / 48000), 48000)
    assert len(data) > 3 * upload.PIECE

    async def steps():
        studio.send(data)
        await studio.until(lambda: "clip" in studio.last("upload"))
        assert studio.last("upload")["clip"] == "own.wav, 10.0 s"
        studio.render("own WAV file")
        await studio.rest()
    run(steps())
    assert studio.calls[0][1] == "own.wav" and studio.row("compensated")["why"] == hearing.FOR_A_TONE
    assert len(studio.last("audio")["samples"]) == n + 9600


def test_a_bad_file_is_said_when_read_and_a_long_one_before_it_is_sent(studio):
    async def steps():
        studio.send(write_wav(np.zeros(100), 48000), "hush.wav")
        await studio.until(lambda: "fault" in (studio.last("upload") or {}))
    run(steps())
    assert "hush.wav is silent" in studio.last("upload")["fault"]
    long = write_wav(np.zeros(41 * 8000), 8000)
    studio.told.clear()
    studio.send(long, "long.wav")
    assert len(long) > 2 * upload.PIECE and len(studio.told) == 1
    assert "long.wav is 41.0 s long" in studio.last("upload")["fault"]


def piece(data, at=0, size=None, content=None):
    return {"name": "x.wav", "size": len(data) if size is None else size, "at": at,
            "content": base64.b64encode(data[at:at + upload.PIECE]).decode() if content is None else content}


def test_pieces_that_do_not_fit_are_refused():
    data = write_wav(np.full(200000, 0.5), 48000)
    for wrong in (piece(data, content="%%%"), piece(data, size=100), piece(data, content=None, at=50),
                  piece(data, content=base64.b64encode(data[:1000]).decode())):
        with pytest.raises(ValueError, match=r"did not arrive whole\. Choose it again"):
            Upload().take(wrong)
    under_way = Upload()
    assert not under_way.take(piece(data))
    with pytest.raises(ValueError, match="did not arrive whole"):
        under_way.take(piece(data, at=upload.PIECE + 1))


def test_a_file_of_too_many_bytes_is_refused_at_its_first_piece():
    head = bytearray(write_wav(np.full(200000, 0.5), 192000))
    head[22:24], head[32:34] = (12).to_bytes(2, "little"), (36).to_bytes(2, "little")      # twelve channels
    size = 29 * 192000 * 36
    head[40:44] = size.to_bytes(4, "little")
    with pytest.raises(ValueError, match=r"x\.wav has 191 MiB; a file may have 48 MiB"):
        Upload().take(piece(bytes(head), size=size + 44))
