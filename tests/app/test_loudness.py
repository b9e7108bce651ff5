"""Loudness against ITU-R BS.1770's own figures and the minimum-requirement signals of EBU Tech 3341 (from memory).

Those signals are of two equal channels, which read 3.01 LU higher than one.
"""

import math

import numpy as np
import pytest

from app.loudness import k_weighting, loudness, matched, measured

RATE = 48000
TWO_CHANNELS = 10 * math.log10(2)


def sine(level_db, seconds, f=1000.0, rate=RATE):
    return 10 ** (level_db / 20) * np.sin(2 * np.pi * f * np.arange(round(seconds * rate)) / rate)


def steps(*levels_and_seconds):
    return np.concatenate([sine(level, seconds) for level, seconds in levels_and_seconds])


def test_filters_at_48_khz_are_the_tables():
    """Source: ITU-R BS.1770-4, tables 1 and 2."""
    (shelf, low), (shelf_a, low_a) = k_weighting(48000)
    assert shelf == pytest.approx([1.53512485958697, -2.69169618940638, 1.19839281085285], abs=1e-9)
    assert shelf_a == pytest.approx([1.0, -1.69065929318241, 0.73248077421585], abs=1e-9)
    assert low == pytest.approx([1.0, -2.0, 1.0])
    assert low_a == pytest.approx([1.0, -1.99004745483398, 0.99007225036621], abs=1e-9)


@pytest.mark.parametrize("rate", [44100, 48000, 96000, 192000])
def test_a_full_scale_tone_of_997_hz_reads_as_the_standard_says(rate):
    """Source: ITU-R BS.1770-4, annex 1: 0 dBFS, 997 Hz, one channel: -3.01 LKFS."""
    assert loudness(sine(0.0, 5.0, 997.0, rate), rate) == pytest.approx(-3.01, abs=0.01)


@pytest.mark.parametrize(("signal", "expected"), [
    (sine(-23.0, 20.0), -23.0),
    (sine(-33.0, 20.0), -33.0),
    (steps((-36, 10), (-23, 60), (-36, 10)), -23.0),
    (steps((-72, 10), (-36, 10), (-23, 60), (-36, 10), (-72, 10)), -23.0),
    (steps((-26, 20), (-20, 20.1), (-26, 20)), -23.0),
])
def test_minimum_requirement_signals(signal, expected):
    """Source: EBU Tech 3341, table 1, cases 1 to 5: within 0.1 LU."""
    assert loudness(signal, RATE) + TWO_CHANNELS == pytest.approx(expected, abs=0.1)


def test_short_and_silent_sounds_have_an_answer():
    assert loudness(sine(-23.0, 0.2), RATE) + TWO_CHANNELS == pytest.approx(-23.0, abs=0.1)
    assert loudness(np.zeros(RATE), RATE) == -math.inf
    assert loudness(np.zeros(0), RATE) == -math.inf


def test_matched_versions_are_equally_loud_and_within_full_scale():
    rng = np.random.default_rng(5)
    peaked = np.zeros(RATE)
    peaked[::9600] = 1.0
    versions = {"faint": 1e-4 * sine(0, 1.0), "low": 40.0 * sine(0, 1.0, 60.0), "noise": rng.normal(0, 0.3, RATE),
                "clicks": peaked, "nothing": np.zeros(RATE)}
    match = matched({name: measured(samples, RATE) for name, samples in versions.items()})
    played = {name: match.gain[name] * samples for name, samples in versions.items()}
    assert match.gain["nothing"] == 0.0
    for name in ("faint", "low", "noise", "clicks"):
        assert loudness(played[name], RATE) == pytest.approx(match.target, abs=0.01)
        assert np.max(np.abs(played[name])) < 10 ** (-0.99 / 20)
    assert np.max(np.abs(played["clicks"])) == pytest.approx(10 ** (-1 / 20))      # the one that decides
    match = matched({name: measured(versions[name], RATE) for name in ("low", "faint")})
    assert match.target == -23.0


def test_the_level_is_of_the_loudest_part():
    """Source: ISO 1683: 1 Pa r.m.s. is 94 dB re 20 µPa (93.98)."""
    tone = np.concatenate([np.zeros(RATE), math.sqrt(2) * sine(0.0, 1.0), 0.5 * sine(0.0, 1.0)])
    sound = measured(tone, RATE)
    assert sound.level_db == pytest.approx(20 * math.log10(1 / 20e-6), abs=0.01)
    assert sound.peak == pytest.approx(math.sqrt(2), rel=1e-3)
    assert measured(0.1 * sine(0.0, 0.1), RATE).level_db == pytest.approx(20 * math.log10(0.1 / math.sqrt(2) / 20e-6), abs=0.01)
    assert measured(np.zeros(10), RATE).level_db == -math.inf
