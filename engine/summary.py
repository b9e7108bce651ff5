"""What a person reads off a response at a glance: key figures, and how much each mode matters in a band."""

from dataclasses import dataclass

import numpy as np

from engine.design import Design
from engine.response import Response


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
