"""Small motions about the rest state: modes in air, their kinds and damping."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Modes:
    """Modes of circumferential order n, lowest first; shapes are scaled to a largest displacement of 1."""

    order: int
    frequency: np.ndarray            # (n_modes,) Hz, in air unless the air's load is off, rear included
    frequency_vacuum: np.ndarray     # (n_modes,) Hz, same-ranked mode without air and rear
    damping_ratio: np.ndarray        # (n_modes,) film, spring and radiation
    kind: tuple                      # (n_modes,) "pumping", "transverse" or "in-plane"
    reference_radius: np.ndarray     # (n_nodes,) m
    radial: np.ndarray               # (n_modes, n_nodes)
    axial: np.ndarray                # (n_modes, n_nodes)
    modal_mass: np.ndarray           # (n_modes,) kg, the air's share included
    volume_displacement: np.ndarray  # (n_modes,) m2: swept volume per unit of modal amplitude, >= 0
    centre_share: np.ndarray         # (n_modes,) of the kinetic energy, in the centre
    in_plane_share: np.ndarray       # (n_modes,) of the film's kinetic energy, along the meridian

    @property
    def pumping(self):
        """Index of the pumping mode."""
        return self.kind.index("pumping")

    @property
    def first_break_up(self):
        """Index of the lowest transverse mode above the pumping mode, None if there is none."""
        above = [i for i, kind in enumerate(self.kind) if kind == "transverse" and i > self.pumping]
        return above[0] if above else None
