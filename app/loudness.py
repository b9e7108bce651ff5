"""Loudness of sounds, and the gains that make several equally loud."""

import math
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

SHELF = 1681.974450955533, 0.7071752369554196          # Hz, quality
HIGH_PASS = 38.13547087602444, 0.5003270373238773
SHELF_DB, SHELF_MIDDLE = 3.999843853973347, 0.4996667741545416
P_REF = 20e-6            # Pa
BLOCK, BLOCK_STEP = 0.4, 0.1                 # s
ABSOLUTE_GATE, RELATIVE_GATE = -70.0, -10.0  # LKFS; LU below the loudness that passes the absolute gate
PLAYED_AT = -23.0        # LKFS of every version where its peaks allow
HEADROOM = 10 ** (-1 / 20)   # highest peak played, full scale 1


def k_weighting(rate):
    """Numerators and denominators ((2, 3), (2, 3)) of the two filters of K-weighting at a rate in Hz.

    Bilinear transform of the analogue filters behind the coefficients that ITU-R BS.1770-4 tabulates for 48 kHz (tables 1
    and 2). Source: De Man 2014, "Evaluation of implementations of the EBU R128 loudness measurement", from memory.
    """
    w, q = math.tan(math.pi * SHELF[0] / rate), SHELF[1]
    high = 10 ** (SHELF_DB / 20)
    middle = high ** SHELF_MIDDLE
    shelf = np.array([high + middle * w / q + w * w, 2 * (w * w - high), high - middle * w / q + w * w])
    shelf_below, low_below = _below(*SHELF, rate), _below(*HIGH_PASS, rate)
    # table 2 leaves the high pass a gain just over 1 at 48 kHz: the same at every rate
    low = np.array([1.0, -2.0, 1.0]) * _below(*HIGH_PASS, 48000)[0]
    return (np.array([shelf / shelf_below[0], low / low_below[0]]),
            np.array([shelf_below / shelf_below[0], low_below / low_below[0]]))


def _below(frequency, q, rate):
    """Denominator (3,), not normalised, of a second-order filter of quality q."""
    w = math.tan(math.pi * frequency / rate)
    return np.array([1 + w / q + w * w, 2 * (w * w - 1), 1 - w / q + w * w])


def loudness(samples, rate):
    """Integrated loudness in LKFS of one channel (n,), full scale 1, after ITU-R BS.1770-4; -inf for silence.

    Blocks of 0.4 s every 0.1 s, gated at -70 LKFS and 10 LU below the mean. A clip shorter than a block is one block.
    """
    (b1, b2), (a1, a2) = k_weighting(rate)
    energy = np.cumsum(np.concatenate([[0.0], lfilter(b2, a2, lfilter(b1, a1, samples)) ** 2]))
    block = min(round(BLOCK * rate), len(samples))
    begin = np.arange(0, len(samples) - block + 1, round(BLOCK_STEP * rate))
    power = (energy[begin + block] - energy[begin]) / max(block, 1)
    kept = power[_lkfs(power) > ABSOLUTE_GATE]
    if not len(kept):
        return -math.inf
    return float(_lkfs(np.mean(kept[_lkfs(kept) > _lkfs(np.mean(kept)) + RELATIVE_GATE])))


def _lkfs(power):
    return -0.691 + 10 * np.log10(np.maximum(power, 1e-30))


@dataclass(frozen=True)
class Sound:
    """What is known of a sound. peak: Pa; loudness: LKFS with the peak as full scale, -inf for silence; level_db: re 20 µPa."""

    peak: float
    loudness: float
    level_db: float


def measured(pressure, rate):
    """Sound of a pressure (n,) Pa. level_db is the r.m.s. of the loudest 0.4 s: of a tone, its steady level (ISO 1683)."""
    peak = float(np.max(np.abs(pressure)))
    if not peak > 0:
        return Sound(0.0, -math.inf, -math.inf)
    scaled = np.asarray(pressure, float) / peak      # the absolute gate must not see how strong a sound is
    energy = np.cumsum(np.concatenate([[0.0], scaled**2]))
    block = min(round(BLOCK * rate), len(scaled))
    power = np.max(energy[block:] - energy[:-block]) / block
    return Sound(peak, loudness(scaled, rate), 10 * math.log10(power) + 20 * math.log10(peak / P_REF))


@dataclass(frozen=True)
class Matching:
    """Gains that make sounds equally loud. gain: name -> factor, full scale over Pa; 0 for silence. target: LKFS."""

    gain: dict
    target: float


def matched(sounds):
    """Matching of sounds (name -> Sound): at `PLAYED_AT`, or as loud as the most peaked one can be in full scale."""
    heard = {name: sound.loudness for name, sound in sounds.items() if sound.loudness > -math.inf}
    target = min([PLAYED_AT, *(value + 20 * math.log10(HEADROOM) for value in heard.values())])
    return Matching({name: 10 ** ((target - heard[name]) / 20) / sound.peak if name in heard else 0.0
                     for name, sound in sounds.items()}, target)
