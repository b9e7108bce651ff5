"""From the drive to the sound: motion of every mode, its pressure at the listener, and the sum."""

from dataclasses import dataclass

import numpy as np

from engine.modes import Modes
from engine.statics import Equilibrium


@dataclass(frozen=True)
class Response:
    """Linear response to the drive's amplitude; frequency is the leading axis, amplitudes are peak, e^{+i omega t}."""

    frequency: np.ndarray      # (n_freq,) Hz
    pressure: np.ndarray       # (n_freq,) complex Pa at the listener
    contribution: np.ndarray   # (n_freq, n_modes+1) complex Pa, of the modes in air, the residual last; sums to pressure
    stroke: np.ndarray         # (n_freq,) m, of the centre
    displacement: np.ndarray   # (n_freq, n_modes) complex m, of each mode's largest point
    signed_share: np.ndarray   # (n_freq, n_modes+1) Re(contribution conj(pressure)) / (|pressure| sum |contribution|)
    survival: np.ndarray       # (n_freq,) |pressure| / sum |contribution|
    level_db: np.ndarray       # (n_freq,) dB re 20 uPa
    impedance: np.ndarray      # (n_freq,) complex ohm
    sound_power: np.ndarray    # (n_freq,) W, to the listener's side
    modes: Modes
    rest: Equilibrium
    estimate_above: float      # Hz: above it the cone's depth makes the level an estimate (inf: nowhere)
    findings: tuple = ()       # of Finding
