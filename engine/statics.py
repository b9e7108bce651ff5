"""The rest state of the biased film, and the judgement of it."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Finding:
    """One named remark on a result: what, where, how far, in words.

    name is "slack", "pull-in", "breakdown" (rest state) or another short name; at is "bias" or "peak of the drive";
    where is the reference radius in m (None: nowhere in particular); value and limit carry the compared quantities in
    SI units; text is one plain sentence.
    """

    name: str
    text: str
    at: str = "bias"
    where: float | None = None
    value: float | None = None
    limit: float | None = None


@dataclass(frozen=True)
class Equilibrium:
    """Rest state at the bias; arrays (n_nodes,) run from the centre's edge to the frame, in SI units, read-only."""

    reference_radius: np.ndarray
    radius: np.ndarray
    height: np.ndarray
    stretch_meridional: np.ndarray
    stretch_hoop: np.ndarray
    stress_meridional: np.ndarray   # Cauchy, Pa
    stress_hoop: np.ndarray
    field: np.ndarray               # V/m
    centre_height: float            # m above the frame plane
    capacitance: float              # F
    swept_volume: float             # m3 between the film with its centre and the frame plane
    peak_field: float               # V/m, largest anywhere, at the peak of the drive
    breakdown_ratio: float          # peak_field over the film's breakdown field
    least_stress: float             # Pa, smallest principal stress anywhere, at the peak of the drive
    conditions: tuple = ()          # of Finding
