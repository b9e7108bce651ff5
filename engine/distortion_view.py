"""What a page shows of distortion: both drive laws over frequency, over amplitude, and a map over both."""

from dataclasses import dataclass

import numpy as np

from engine.design import Design
from engine.distortion import LAWS, distortion
from engine.errors import InvalidDesign, Stopped
from engine.statics import frozen

HARMONICS = 8
LEAST_PART, MOST_PART = 0.05, 2.0    # of the design's amplitude, in series and maps
HIGHEST = 20e3                       # Hz


@dataclass(frozen=True)
class DistortionView:
    """Distortion of a design under each drive law, or why there is none."""

    design: Design
    band: tuple                      # (low, high) Hz
    found: dict                      # law -> Distortion
    faults: dict                     # law -> words


@dataclass(frozen=True)
class AmplitudeSeries:
    """THD against amplitude at one frequency; NaN nowhere: a point that did not settle is left out."""

    frequency: float                 # Hz
    amplitude: dict                  # law -> (n,) V
    thd: dict                        # law -> (n,) part of the total
    faults: dict                     # law -> why it ends where it ends, or nothing
    found: dict                      # law -> Distortion at the design's own amplitude, one frequency


@dataclass(frozen=True)
class DistortionMap:
    """THD of the design's drive law over amplitude and frequency."""

    law: str
    frequency: np.ndarray            # (n_freq,) Hz
    amplitude: np.ndarray            # (n_amplitudes,) V
    thd: np.ndarray                  # (n_amplitudes, n_freq) part of the total, NaN where nothing settled
    finished: bool


def distortion_view(design, band, count=60):
    """Distortion under both laws at count frequencies, even over the logarithm of the band (up to 20 kHz).

    Raises: NoRestState, NotConverged (see equilibrium). A law that cannot be driven is a fault, in words.
    """
    low, high = band
    frequency = np.geomspace(low, min(high, HIGHEST), count)
    found, faults = {}, {}
    for law in LAWS:
        try:
            found[law] = distortion(_driven(design, law), frequency, n_harmonics=HARMONICS)
        except InvalidDesign as error:
            faults[law] = str(error)
    return DistortionView(design, (low, high), found, faults)


def amplitude_series(design, frequency, count=9):
    """THD under both laws at one frequency (Hz), for amplitudes from a small part to twice the design's, in V.

    Raises: NoRestState, NotConverged.
    """
    amplitude, thd, faults, found = {}, {}, {}, {}
    for law in LAWS:
        try:
            found[law] = distortion(_driven(design, law), [frequency], n_harmonics=HARMONICS)
        except InvalidDesign:
            pass                          # the series ends before the design's amplitude, and says why
        steps, faults[law] = _amplitudes(design, law, count)
        points = []
        for v in steps:
            try:
                one = distortion(_driven(design, law, v), [frequency], n_harmonics=HARMONICS)
            except InvalidDesign as error:
                faults[law] = str(error)
                break
            if not one.converged[0]:
                faults[law] = one.conditions[0][0].text if one.conditions[0] else "no periodic motion was found"
                break
            points.append((v, one.thd[0]))
        table = np.array(points).reshape(-1, 2)
        amplitude[law], thd[law] = frozen(table[:, 0].copy()), frozen(table[:, 1].copy())
    return AmplitudeSeries(float(frequency), amplitude, thd, faults, found)


def distortion_map(design, band, n_freq=60, n_amplitudes=12, progress=None, stop=None):
    """THD of the design's law over the band and over amplitudes up to twice the design's, lowest amplitude first.

    Parameters
    ----------
    progress : called with the part done, 0 to 1.
    stop : called before each amplitude; true ends the map with what is done (finished False); Stopped if nothing is.
    """
    law = design.drive.law
    frequency = np.geomspace(band[0], min(band[1], HIGHEST), n_freq)
    amplitude, _ = _amplitudes(design, law, n_amplitudes)
    thd = np.full((len(amplitude), n_freq), np.nan)
    for i, v in enumerate(amplitude):
        if stop is not None and stop():
            if i == 0:
                raise Stopped("The map was stopped before its first row.")
            return DistortionMap(law, frozen(frequency), frozen(amplitude), frozen(thd), False)
        one = distortion(_driven(design, law, v), frequency, n_harmonics=HARMONICS)
        thd[i] = np.where(one.converged, one.thd, np.nan)
        if progress is not None:
            progress((i + 1)/len(amplitude))
    return DistortionMap(law, frozen(frequency), frozen(amplitude), frozen(thd), True)


def _driven(design, law, amplitude=None):
    """The design under a law, and at an amplitude."""
    changes = {"drive.law": law}
    if amplitude is not None:
        changes["drive.amplitude"] = float(amplitude)
    return design.with_values(changes)


def _amplitudes(design, law, count):
    """Amplitudes (n,) V of a series, evenly over their logarithm, and why they end early, or nothing."""
    v, bias = design.drive.amplitude, design.drive.bias
    if v <= 0:
        return np.zeros(0), "The drive's amplitude is zero."
    top, why = MOST_PART*v, ""
    if law == "square-root" and top > bias/2:
        top, why = bias/2, "The square-root law ends at half the bias."
    if top <= 0:
        return np.zeros(0), "The square-root law needs a bias."
    return np.geomspace(min(LEAST_PART*v, top/2), top, count), why
