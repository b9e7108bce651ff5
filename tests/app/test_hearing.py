"""Each version asks the engine for what it is called: a stand-in that shows what it was asked, and once the engine itself."""

import numpy as np
import pytest

import engine
from app import clips, hearing
from app.hearing import heard
from engine.design import Design
from engine.errors import InvalidDesign, NotConverged


class Drive:
    """A stand-in for engine.CompensatedDrive."""

    source_voltage = np.array([-3.0, 200.0, -20j])
    achieved, finding = True, ""


@pytest.fixture
def asked(monkeypatch):
    """Arguments of each call of engine.render, which gives twice its samples."""
    calls = []

    def render(design, samples, rate, progress=None, stop=None, linear=False, volts=False):
        calls.append({"law": design.drive.law, "samples": samples, "rate": rate, "linear": linear, "volts": volts,
                      "told": (progress, stop)})
        return 2.0 * samples

    monkeypatch.setattr(engine, "render", render)
    monkeypatch.setattr(engine, "compensated_drive", lambda design, frequency: Drive())
    return calls


@pytest.mark.parametrize(("version", "law", "linear"), [
    ("sine", "sine", False), ("square-root", "square-root", False), ("undistorted", "sine", True)])
@pytest.mark.parametrize("own", ["sine", "square-root"])
def test_a_version_has_its_law_whatever_the_design_says(asked, version, law, linear, own):
    clip = clips.melody()
    made = heard(Design().with_values({"drive.law": own}), clip, version, max, min)
    (call,) = asked
    assert (call["law"], call["linear"], call["volts"], call["rate"]) == (law, linear, False, 48000)
    assert call["samples"] is clip.samples and call["told"] == (max, min)
    assert made.pressure.dtype == np.float32 and made.pressure == pytest.approx(2 * clip.samples, abs=1e-6)
    assert made.sound.peak == pytest.approx(2.0)


def test_the_compensated_version_drives_with_the_voltage_found(asked):
    heard(Design(), clips.tone(100.0), "compensated", max, min)
    (call,) = asked
    assert (call["volts"], call["linear"]) == (True, False)
    steady = call["samples"][24000:120000]
    assert np.fft.rfft(steady)[[0, 200, 400]] / len(steady) == pytest.approx([-3.0, 100.0, -10j])


def test_what_cannot_be_had_is_said_in_the_engines_words(asked, monkeypatch):
    with pytest.raises(NotConverged, match="Only a tone"):
        heard(Design(), clips.melody(), "compensated", max, min)
    monkeypatch.setattr(Drive, "achieved", False)
    monkeypatch.setattr(Drive, "finding", "It would take 24 kV, more than 20 kV.")
    with pytest.raises(NotConverged, match="24 kV"):
        heard(Design(), clips.tone(100.0), "compensated", max, min)
    with pytest.raises(InvalidDesign, match="more than half the bias"):
        heard(Design().with_values({"drive.amplitude": 1200.0}), clips.tone(100.0), "square-root", max, min)
    assert asked == []
    assert set(hearing.VERSIONS) == {"sine", "square-root", "compensated", "undistorted"}


def test_an_undistorted_tone_has_the_level_of_the_response():
    """The engine itself, by another way: its linear response there. Coming on, the tone is a little louder."""
    design = Design()
    made = heard(design, clips.tone(300.0), "undistorted", lambda part: None, lambda: False)
    expected = float(engine.response(design, np.array([300.0])).level_db[0])
    steady = made.pressure[48000:96000].astype(float)
    assert 20 * np.log10(np.sqrt(np.mean(steady**2)) / 20e-6) == pytest.approx(expected, abs=0.02)
    assert expected - 0.01 < made.sound.level_db < expected + 0.1
