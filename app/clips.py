"""Clips to listen to: test signals made here, and the person's own."""

import math
from dataclasses import dataclass

import numpy as np
from scipy.signal import resample_poly

from app.wav import read_wav

RATE = 48000             # Hz, of every clip
TAIL = 0.2               # s of silence at a clip's end, in which the film rings out
TONE = 3.0               # s a tone lasts
FADE = 0.03              # s in which a signal comes and goes
TONES = (10.0, 7e3)      # Hz, frequencies of tones: what is rendered ends at 7.5 kHz
SWEEP = (20.0, 7e3)      # Hz
NOISE = (50.0, 7e3)      # Hz
SEED = 4                 # of the noise
FAINTEST = 1e-5          # peak of what counts as a sound, full scale 1
# Melody of our own: (semitones above A4, units of 0.16 s), and its bass
UNIT = 0.16
MELODY = ((-12, 2), (-5, 1), (-2, 1), (3, 2), (2, 1), (-2, 1), (0, 3), (-4, 1), (-5, 1), (-7, 1), (-10, 2), (-9, 2), (-12, 4))
BASS = ((-36, 4), (-33, 4), (-28, 4), (-31, 2), (-29, 4), (-36, 4))


@dataclass(frozen=True, eq=False)
class Clip:
    """A signal of largest value 1 at `RATE`. frequency: Hz, of a single tone; None for anything else."""

    name: str
    samples: np.ndarray      # (n,)
    frequency: float | None = None


def tone(frequency):
    """Clip of one tone, frequency in Hz."""
    return Clip(f"tone {frequency:.4g} Hz", _finished(np.sin(2 * np.pi * frequency * _time(TONE))), float(frequency))


def periodic(frequency, components):
    """Samples (n,) of components (n_harmonics+1,) complex, the mean first, that come and go as a `tone` does."""
    turning = np.exp(2j * np.pi * frequency * _time(TONE))
    wave = np.polynomial.polynomial.polyval(turning, np.asarray(components)).real
    return np.pad(_faded(wave), (0, round(TAIL * RATE)))


def two_tones(low, high):
    """Clip of two equally strong tones, frequencies in Hz."""
    t = _time(TONE)
    both = np.sin(2 * np.pi * low * t) + np.sin(2 * np.pi * high * t)
    return Clip(f"tones {low:.4g} and {high:.4g} Hz", _finished(both))


def sweep():
    """Clip of a tone that rises through `SWEEP` by the same ratio in the same time."""
    (start, end), length = SWEEP, 3.8
    growth = math.log(end / start) / length
    return Clip("sweep", _finished(np.sin(2 * np.pi * start / growth * np.expm1(growth * _time(length)))))


def melody():
    """Clip of a short melody of our own over a bass: plucked notes of eight harmonics."""
    parts = [_plucked(MELODY, strength=0.5, decay=0.35), _plucked(BASS, strength=1.0, decay=0.5)]
    length = max(map(len, parts))
    return Clip("melody", _finished(sum(np.pad(part, (0, length - len(part))) for part in parts)))


def noise():
    """Clip of six bursts of pink noise, of the band `NOISE`, with pauses between; always the same."""
    n, frequency = round(0.3 * RATE), np.fft.rfftfreq(round(0.3 * RATE), 1 / RATE)
    rng = np.random.default_rng(SEED)
    shape = np.where((frequency >= NOISE[0]) & (frequency <= NOISE[1]), 1 / np.sqrt(np.maximum(frequency, 1.0)), 0.0)
    bursts = [np.fft.irfft(shape * np.exp(2j * np.pi * rng.random(len(shape))), n) for _ in range(6)]
    return Clip("noise bursts", _finished(np.concatenate([np.pad(_faded(b), (0, round(0.2 * RATE))) for b in bursts])))


# what can be listened to: name -> its maker and how many frequencies it takes
SIGNALS = {"tone": (tone, 1), "two tones": (two_tones, 2), "sweep": (sweep, 0), "melody": (melody, 0),
           "noise bursts": (noise, 0)}


def from_wav(data, name):
    """Clip of a WAV file: the mean of its channels at `RATE`, its largest value made 1.

    Parameters
    ----------
    data : bytes
    name : str
        File's name, for messages.

    Raises
    ------
    ValueError
        If it cannot be read, is longer than 30 s or silent: file, what is wrong, remedy.
    """
    samples, rate = read_wav(data, name)
    if rate != RATE:
        common = math.gcd(rate, RATE)
        samples = resample_poly(samples, RATE // common, rate // common)
    if not np.max(np.abs(samples)) > FAINTEST:
        raise ValueError(f"{name} is silent (the mean of its channels counts). Choose a file with sound.")
    return Clip(name, _finished(samples, fade=0.002))


def _time(length):
    return np.arange(round(length * RATE)) / RATE


def _faded(samples, fade=FADE):
    """Samples that come and go softly."""
    n = min(round(fade * RATE), len(samples) // 2)
    ramp = np.sin(0.5 * np.pi * (np.arange(n) + 0.5) / max(n, 1)) ** 2
    return np.concatenate([samples[:n] * ramp, samples[n:len(samples) - n], samples[len(samples) - n:] * ramp[::-1]])


def _finished(samples, fade=FADE):
    """Faded, its largest value 1, and silence after it; read-only."""
    faded = _faded(samples, fade)
    done = np.pad(faded / np.max(np.abs(faded)), (0, round(TAIL * RATE)))
    done.flags.writeable = False
    return done


def _plucked(notes, strength, decay):
    """Notes (semitones above A4, units) one after another, decay in s."""
    played = []
    for semitones, units in notes:
        t = _time(units * UNIT)
        f = 440.0 * 2 ** (semitones / 12)
        wave = sum(np.sin(2 * np.pi * h * f * t) / h**1.5 * np.exp(-h**0.5 * t / decay) for h in range(1, 9))
        played.append(strength * _faded(wave, 0.008))
    return np.concatenate(played)
