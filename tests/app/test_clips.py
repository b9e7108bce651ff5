"""Test signals are what they are called; a person's own clip comes at our rate. Spectra by numpy's FFT."""

import numpy as np
import pytest

from app import clips
from app.wav import write_wav

RATE = 48000


def spectrum(samples, rate=RATE):
    """(frequency, amplitude) of samples seen through a Hann window."""
    window = np.hanning(len(samples))
    return np.fft.rfftfreq(len(samples), 1 / rate), 2 * np.abs(np.fft.rfft(samples * window)) / window.sum()


def peaks(samples, least):
    """Frequencies at which the spectrum has a maximum of at least so much."""
    f, a = spectrum(samples)
    top = (a[1:-1] > a[:-2]) & (a[1:-1] > a[2:]) & (a[1:-1] > least)
    return f[1:-1][top]


@pytest.mark.parametrize("clip", [clips.tone(69.0), clips.two_tones(69.0, 552.0), clips.sweep(), clips.melody(), clips.noise()],
                         ids=lambda clip: clip.name)
def test_every_signal_begins_and_ends_softly_within_full_scale(clip):
    samples = clip.samples
    assert clips.RATE == RATE and 2 * RATE <= len(samples) <= 4 * RATE
    assert np.max(np.abs(samples)) == pytest.approx(1.0)
    assert not samples[-round(0.2 * RATE):].any()              # silence in which the film rings out
    assert np.max(np.abs(np.diff(samples[:48]))) < 0.02 and abs(samples[0]) < 1e-3
    assert abs(samples.mean()) < 1e-3
    assert not samples.flags.writeable


@pytest.mark.parametrize("f", [69.0, 1234.5, 9000.0])
def test_a_tone_has_its_frequency_and_no_other(f):
    samples = clips.tone(f).samples[RATE // 2:5 * RATE // 2]
    found = peaks(samples, 1e-4)
    assert found == pytest.approx([f], abs=0.5)
    assert clips.tone(f).frequency == f


def test_a_periodic_signal_has_the_given_harmonics():
    samples = clips.periodic(100.0, [3.0, 2.0, 0.5j, 0.1])
    assert len(samples) == len(clips.tone(100.0).samples) and samples[0] == pytest.approx(0.0, abs=0.01)
    steady = samples[RATE // 2:5 * RATE // 2]
    bins = np.fft.rfft(steady) / len(steady)
    assert bins[[0, 200, 400, 600]] == pytest.approx([3.0, 1.0, 0.25j, 0.05])
    assert np.sum(np.abs(bins) > 1e-9) == 4


def test_two_tones_are_equally_strong():
    samples = clips.two_tones(70.0, 560.0).samples[RATE // 2:5 * RATE // 2]
    assert peaks(samples, 1e-3) == pytest.approx([70.0, 560.0], abs=0.5)
    f, a = spectrum(samples)
    assert a[f == 70.0] == pytest.approx(a[f == 560.0], rel=1e-3)
    assert clips.two_tones(70.0, 560.0).frequency is None


def test_the_sweep_takes_the_same_time_for_every_octave():
    """Source: the definition of a logarithmic sweep; the moment of each frequency from the zero crossings."""
    samples = clips.sweep().samples
    rising = np.flatnonzero((samples[:-1] < 0) & (samples[1:] >= 0))
    period, moment = np.diff(rising) / RATE, (rising[1:] + rising[:-1]) / 2 / RATE
    octave = 3.8 / np.log2(7e3 / 20)
    for f in (40.0, 80.0, 160.0, 320.0, 640.0, 1280.0):
        assert np.interp(f, 1 / period[moment < 3.6], moment[moment < 3.6]) == pytest.approx(np.log2(f / 20) * octave, abs=0.03)


def test_noise_bursts_are_pink_with_pauses_and_the_same_each_time():
    """Source: pink noise has equal power in every octave."""
    samples = clips.noise().samples
    assert np.array_equal(samples, clips.noise().samples)
    bursts = samples.reshape(-1, RATE // 10)[:30].reshape(6, 5, -1)      # 0.3 s of sound, 0.2 s of silence
    assert not bursts[:, 3:].any() and (np.abs(bursts[:, :3]).max(axis=2) > 0.1).all()
    power = np.abs(np.fft.rfft(bursts[:, :3].reshape(6, -1))) ** 2
    f = np.fft.rfftfreq(3 * RATE // 10, 1 / RATE)
    octaves = [power[:, (f > low) & (f < 2 * low)].sum() for low in (100, 200, 400, 800, 1600, 3200)]
    assert 10 * np.log10(octaves / np.mean(octaves)) == pytest.approx(0.0, abs=1.0)


def test_the_melody_is_of_the_twelve_tone_scale():
    """Source: equal temperament with A4 at 440 Hz (ISO 16)."""
    start = clips.melody().samples[:round(0.32 * RATE)]
    f, a = spectrum(np.pad(start, (0, 9 * len(start))))
    assert f[np.argmax(a)] == pytest.approx(440 / 8, rel=0.03)            # the bass: A1
    upper = f > 180
    assert f[upper][np.argmax(a[upper])] == pytest.approx(440 / 2, rel=0.01)    # A3


@pytest.mark.parametrize("rate", [8000, 11025, 44100, 48000, 96000, 192000])
def test_an_own_clip_keeps_its_tone_and_length_at_any_rate(rate):
    t = np.arange(rate) / rate
    clip = clips.from_wav(write_wav(0.1 * np.sin(2 * np.pi * 1000 * t), rate), "own.wav")
    assert len(clip.samples) == RATE + round(0.2 * RATE)
    assert np.max(np.abs(clip.samples)) == pytest.approx(1.0)
    found = peaks(clip.samples[RATE // 10:9 * RATE // 10], 1e-3)
    assert found == pytest.approx([1000.0], abs=1.0)


def test_a_silent_own_clip_is_refused_and_a_short_one_taken():
    with pytest.raises(ValueError, match=r"hush\.wav is silent.*Choose"):
        clips.from_wav(write_wav(np.zeros(1000), RATE), "hush.wav")
    assert np.max(np.abs(clips.from_wav(write_wav(np.array([0.5]), 44100), "click.wav").samples)) == pytest.approx(1.0)
