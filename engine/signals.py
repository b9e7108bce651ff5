"""An arbitrary clip through the nonlinear film: source voltage in, pressure at the listener out."""

from dataclasses import replace
from fractions import Fraction
from functools import lru_cache

import numpy as np
from scipy.signal import firwin, resample_poly

from engine import blocks
from engine.design import Listener
from engine.distortion import listening
from engine.errors import InvalidDesign, NotConverged, Stopped
from engine.linear import MODES_TO
from engine.response import DEFAULT_BAND, basis_for

RATES = (8e3, 192e3)     # Hz
OVERSAMPLING = 2.5       # of the basis's highest frequency
MOST_VOLTS = 20e3
HALF_LENGTH = 24         # of the resampling filter, in periods of its cut-off
AROUND = HALF_LENGTH + 2         # samples that the filter reaches to either side
ATTENUATION = 8.6        # its Kaiser window's shape: -86 dB


def render(design, samples, rate, progress=None, stop=None, linear=False, volts=False):
    """Pressure (n_samples,) Pa at the listener of a clip played through the full nonlinear film, from rest.

    Parameters
    ----------
    samples : (n_samples,) within -1 ... 1: the signal, 1 being the design's drive.amplitude, shaped by drive.law.
    rate : Hz, 8 kHz to 192 kHz, of samples and result.
    progress : called with the share done, 0 ... 1, after every block.
    stop : an event (is_set) or a function; once true, Stopped is raised.
    linear : the undistorted sound instead, of the film's linear response.
    volts : samples are the source's deviation from the bias in V, whatever the law: a compensated drive, for one.

    Only what lies below 7.5 kHz is rendered: the modes reach no further. The delay to the listener is kept. The linear
    part's memory is cut at about a third of a second (less for more than some 60 modes): the ringing of a film that rings
    longer is shortened. Memory beside the clip and the result is bounded, below 1 GiB.

    Raises: NoRestState, NotConverged (no motion: the film passes pull-in, lower the amplitude); InvalidDesign for samples
    or rates that cannot be rendered; Stopped.
    """
    samples = _checked(design, samples, rate, volts)
    top = MODES_TO*DEFAULT_BAND[1]
    ratio = Fraction(OVERSAMPLING*top/rate).limit_denominator(200)
    made = _table(replace(design, name="-", note="", listener=Listener(), drive=replace(
        design.drive, amplitude=0.0, law="sine")), float(rate*ratio))
    system, basis = basis_for(design, DEFAULT_BAND[1])
    transfer, monopole = listening(system, basis, made.omega[:made.task.theta.shape[1]], design.listener)
    drive = _Source(design, samples, ratio, linear, volts, len(made.task.free) > 0)
    n = -(-len(samples)*ratio.numerator//ratio.denominator)
    heard = np.zeros(n + made.n_new, np.float32)
    march = blocks.March(made)
    voltage = drive.voltage(-made.n_context - made.n_new, made.n_samples)
    for start in range(0, n + made.n_new, made.n_new):          # each block gives the sound of the chunk before its own
        _halt(stop)
        later = drive.voltage(start - made.n_context + made.n_samples - made.n_new, made.n_new)
        voltage = np.concatenate([voltage[made.n_new:], later])
        state = blocks.answer(made, voltage, march.r)
        if start > 0:
            heard[start - made.n_new:start] = blocks.pressure(made, transfer, monopole, state, march.volume)[:len(heard)]
        if start >= n:
            break
        if not linear:
            try:
                march.chunk(blocks.samples(made, state, voltage), lambda: _halt(stop))
            except NotConverged as found:
                raise NotConverged(f"No motion of the film was found {start/made.rate:.2g} s into the clip: the film passes "
                                   "pull-in, or its motion does not settle. Lower the amplitude or the bias.") from found
            march.advance()
        if progress is not None:
            progress(min(1.0, (start + made.n_new)/n))
    out = np.empty(len(samples))
    step = ratio.denominator*max(1, int(rate)//ratio.denominator)
    for start in range(0, len(out), step):
        part = resampled(heard, ratio.denominator, ratio.numerator, start, min(step, len(out) - start))
        out[start:start + step] = part
    return out


@lru_cache(maxsize=1)
def _table(design, rate):
    """Table of a design whatever drives it; the last one is kept."""
    return blocks.table(*basis_for(design, DEFAULT_BAND[1]), MODES_TO*DEFAULT_BAND[1], rate)


def _halt(stop):
    if stop is not None and (stop.is_set() if hasattr(stop, "is_set") else stop()):
        raise Stopped("Rendering was stopped.")


def _checked(design, samples, rate, volts):
    """Samples as a float array; raises InvalidDesign."""
    try:
        samples, rate = np.asarray(samples, float), float(rate)
    except (TypeError, ValueError) as fault:
        raise InvalidDesign("A clip is a row of numbers and its rate a number in Hz.") from fault
    if not RATES[0] <= rate <= RATES[1]:
        raise InvalidDesign(f"The clip's rate of {rate:g} Hz cannot be rendered: give 8 kHz to 192 kHz.", value=rate,
                            bounds=RATES)
    if samples.ndim != 1 or not samples.size:
        raise InvalidDesign(f"A clip is one row of samples, and these have the shape {samples.shape}: give one channel, "
                            "with one sample at least.")
    bad = np.flatnonzero(~np.isfinite(samples))
    if len(bad):
        raise InvalidDesign(f"{len(bad)} of the clip's samples are no numbers, the first sample {bad[0]}: mend the clip.")
    most, limit = np.max(np.abs(samples)), MOST_VOLTS if volts else 1.0
    if most > limit*(1 + 1e-9):
        unit, remedy = (" V", "Lower the voltage") if volts else ("", "Divide the clip by its peak and raise drive.amplitude")
        raise InvalidDesign(f"The clip reaches {most:.4g}{unit}, and {limit:g}{unit} is the most: {remedy}.", value=float(most))
    return samples


class _Source:
    """Source voltages of a clip at the internal rate, a piece at a time."""

    def __init__(self, design, samples, ratio, linear, volts, filtered):
        self.bias, self.samples, self.ratio = design.drive.bias, samples, ratio
        self.scale = 1.0 if volts else design.drive.amplitude
        self.rooted = design.drive.law == "square-root" and not volts and not linear
        self.linear, self.filtered = linear, filtered

    def voltage(self, start, count):
        """(count,) V of deviation from the bias from sample start on.

        Where the film is fed without resistance only the square of the voltage counts: it is what is kept of the band.
        Otherwise the source's voltage is, shaped at four times the rate.
        """
        V, up, down = self.bias, self.ratio.numerator, self.ratio.denominator
        signal = self.scale*resampled(self.samples, up, down, start, count)
        if self.linear or (self.filtered and not self.rooted):
            return signal
        if self.filtered:
            fine = self._fine(4, start, count)
            return resampled(np.sqrt(np.maximum(V**2 + 2*V*fine, 0.0)) - V, 1, 4, AROUND, count)
        square = 2*V*signal
        if not self.rooted:
            square = square + resampled(self._fine(2, start, count)**2, 1, 2, AROUND, count)
        return np.sqrt(np.maximum(V**2 + square, 0.0)) - V

    def _fine(self, times, start, count):
        """(times*(count + 2 AROUND),) V of signal at times the internal rate, with what a filter needs on both sides."""
        up, down = times*self.ratio.numerator, self.ratio.denominator
        return self.scale*resampled(self.samples, up, down, times*(start - AROUND), times*(count + 2*AROUND))


@lru_cache(maxsize=16)
def _filter(most):
    return firwin(2*HALF_LENGTH*most + 1, 1/most, window=("kaiser", ATTENUATION))


def resampled(samples, up, down, start, count):
    """(count,) samples from start on of the endless samples (zero outside), at up/down times their rate."""
    common = np.gcd(up, down)
    up, down = up//common, down//common
    most = max(up, down)
    margin = HALF_LENGTH*most//(up*down) + 2                     # in steps of down samples in, up samples out
    first = start//up - margin
    last = -(-(start + count)//up) + margin
    i, j = first*down, last*down
    known = samples[max(i, 0):max(j, 0)]
    known = np.concatenate([np.zeros(max(min(-i, j - i), 0)), known])
    known = np.concatenate([known, np.zeros(j - i - len(known))])
    if up == down:
        return known[start - i:start - i + count]
    out = resample_poly(known, up, down, window=_filter(most))
    return out[start - first*up:][:count]
