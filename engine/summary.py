"""What a person reads off a response at a glance: key figures, and how much each mode matters in a band."""

from dataclasses import dataclass

import numpy as np

from engine.design import Design
from engine.limits import Excursion, excursion
from engine.response import DEFAULT_BAND, Response, response
from engine.statics import frozen


@dataclass(frozen=True)
class KeyFigures:
    """The few numbers a design is judged by, SI units."""

    pumping_frequency: float
    first_break_up_frequency: float | None
    mean_level_db: float             # mean of the level over log frequency in the band
    ripple_db: float                 # standard deviation of the level about that mean
    breakdown_ratio: float           # at the peak of the drive
    least_stress: float              # at the peak of the drive
    centre_height: float
    largest_stroke: float
    largest_stroke_frequency: float


@dataclass(frozen=True)
class Overview:
    """Everything the first page shows of one design."""

    design: Design
    band: tuple                      # (low, high) Hz
    response: Response
    key_figures: KeyFigures
    energy_share: np.ndarray         # (n_modes+1,) of the band's sum of squared contributions, the residual last
    excursion: Excursion             # where in the band the linear result holds


def overview(design, band=DEFAULT_BAND):
    """Response of a design over a band (low, high) in Hz with its key figures. Raises as response()."""
    found = response(design, band=band)
    return Overview(design, (float(band[0]), float(band[1])), found, key_figures(found), energy_share(found),
                    excursion(design, found))


def key_figures(found):
    """KeyFigures of a response, over the band its frequencies span."""
    modes, rest = found.modes, found.rest
    weight = _log_weights(found.frequency)
    mean = np.sum(weight*found.level_db)
    largest = int(np.argmax(found.stroke))
    first = modes.first_break_up
    return KeyFigures(
        pumping_frequency=float(modes.frequency[modes.pumping]),
        first_break_up_frequency=None if first is None else float(modes.frequency[first]),
        mean_level_db=float(mean), ripple_db=float(np.sqrt(np.sum(weight*(found.level_db - mean)**2))),
        breakdown_ratio=rest.breakdown_ratio, least_stress=rest.least_stress, centre_height=rest.centre_height,
        largest_stroke=float(found.stroke[largest]), largest_stroke_frequency=float(found.frequency[largest]))


def energy_share(found):
    """(n_modes+1,) integral of each squared contribution over log frequency, over their sum; 0 where nothing moves."""
    energy = _log_weights(found.frequency) @ np.abs(found.contribution)**2
    total = energy.sum()
    return frozen(energy/total if total > 0 else np.zeros_like(energy))


def _log_weights(frequency):
    """Trapezoidal weights over log frequency, summing to 1."""
    if len(frequency) == 1:
        return np.ones(1)
    gaps = np.diff(np.log(frequency))
    weights = np.append(gaps, 0) + np.append(0, gaps)
    return weights/weights.sum()
