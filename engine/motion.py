"""Motion of the biased film per volt of signal: the dynamic stiffness on the basis, solved octave by octave."""

from dataclasses import dataclass

import numpy as np

from engine import linear, radiation
from engine.bands import Level, dynamic_stiffness, solve_band
from engine.modes import Basis
from engine.statics import frozen

__all__ = ["Motion", "Reduced", "dynamic_stiffness", "reduce", "solve_motion"]

FEW_MODES = 14                  # below so many unknowns another octave costs more than it saves
MANY = 40                       # from so many unknowns on, and so many times frequencies, an octave makes two bands
MANY_SOLVED = 4000


@dataclass(frozen=True)
class Motion:
    """Motion of the basis per volt of signal, without listener."""

    system: linear.System
    basis: Basis
    frequency: np.ndarray      # (n_freq,) Hz
    unit: np.ndarray           # (n_freq, n_basis) m/V: modes, then static corrections
    power: np.ndarray          # (n_freq,) W/V2 to one side
    line: np.ndarray           # (n_freq, n_line) V/V: amplitudes of the circuit's functions
    charge: np.ndarray         # (n_freq,) F: charge that has entered per volt of source


def solve_motion(system, basis, frequency, reduced=None):
    """Motion at the given ascending frequencies, octave by octave from the top, in bands; reduced: reduce(...) if known.

    An octave's unknowns are the modes up to twice its upper end and the static answer of everything above them, so
    every mode keeps its contribution at every frequency. Source: DEVELOPERS.md, "Response".
    """
    reduced = reduced or reduce(system, basis)
    level = _whole(basis, reduced)
    parts = []
    stop = len(frequency)
    while stop > 0:
        top = frequency[stop - 1]
        n_low = int(np.searchsorted(basis.modes.frequency, 2*top))
        level = _lower(level, reduced, n_low)
        start = 0 if n_low < FEW_MODES else int(np.searchsorted(frequency, top/2, side="right"))
        for low, high in _split(frequency, start, stop, level.loads.shape[1]):
            q, *rest = solve_band(system, basis, level, frequency[low:high])
            unit = q if not len(level.columns) else np.concatenate(
                [q[:, :n_low], q[:, n_low:] @ level.columns.T], axis=1)
            parts.append((unit, *rest))
        stop = start
    unit, line, charge = (frozen(np.concatenate(part[::-1])) for part in zip(*parts, strict=True))
    return Motion(system, basis, frozen(np.array(frequency)), unit, frozen(_power(system, basis, frequency, unit)), line,
                  charge)


def _power(system, basis, frequency, unit):
    """(n_freq,) W/V2 radiated to one side: pi rho b^4/c omega^4 int_0^1 |Phi(k b sqrt(1-u^2))|^2 du, Phi the far field."""
    b, c, omega = system.frame_radius, system.air.sound_speed, 2*np.pi*frequency
    coefficients = system.projector @ basis.shapes.T
    return np.pi*system.air.density*b**4/c*omega**4*radiation.squared_far_field(coefficients, omega*b/c, unit)


def _split(frequency, start, stop, n):
    """(low, high) of the bands of an octave of n unknowns, from the top."""
    middle = int(np.searchsorted(frequency, np.sqrt(frequency[start]*frequency[stop - 1])))
    many = n >= MANY and n*(stop - start) >= MANY_SOLVED
    return [(middle, stop), (start, middle)] if many and middle > start else [(start, stop)]


def _whole(basis, reduced):
    """Level of the whole basis."""
    n_modes = len(basis.modes.frequency)
    return Level(reduced.real, reduced.constant_loss, reduced.loads, basis.projected,
                 basis.modes.frequency, np.eye(len(basis.shapes) - n_modes))


def _lower(level, reduced, n_low):
    """Level of the lowest n_low modes and the static answers of everything above, out of the level above it."""
    n_before = len(level.frequency)
    if n_low >= n_before:
        return level
    columns = _above(reduced, n_low)
    # the static answers lie in what the level above spans: its modes above n_low, its own columns
    into = np.concatenate([columns[:n_before - n_low], level.columns.T @ columns[n_before - n_low:]])
    real, loss, air = (_project(X, n_low, into) for X in (level.real, level.constant_loss, level.air))
    loads = np.concatenate([level.loads[:, :n_low], level.loads[:, n_low:] @ into], axis=1)
    return Level(real, loss, loads, air, level.frequency[:n_low], columns)


@dataclass(frozen=True)
class Reduced:
    """Matrices of the dynamic stiffness on the basis, the loads per volt, and the air's tables behind them."""

    real: np.ndarray         # (3, n_basis, n_basis): K + K_rear, D0, M
    constant_loss: np.ndarray
    loads: np.ndarray        # (n_line, n_basis)
    static: np.ndarray       # (n_basis, n_line+1): answers at rest to the electrode loads and to a pressure


def reduce(system, basis):
    P = basis.shapes
    v, e = P @ system.volume, P[:, 0]
    behind = system.rear.stiffness*np.outer(v, v)
    K = P @ system.stiffness @ P.T + behind
    loads = system.circuit.loads @ P.T
    return Reduced(np.stack([K, P @ system.dissipation @ P.T, (P*system.mass) @ P.T]),
                    system.spring_loss*np.outer(e, e) + system.rear.loss_factor*behind, loads,
                    np.linalg.solve(K, np.concatenate([loads, v[None]]).T))


def _above(reduced, n_low):
    """(n_basis - n_low, n) orthonormal columns: the static answers of everything above the first n_low modes."""
    u, sizes, _ = np.linalg.svd(reduced.static[n_low:], full_matrices=False)
    return u[:, sizes > 1e-9*sizes[0]] if sizes[0] > 0 else u[:, :0]


def _project(X, n_low, above):
    """(..., n, n) of matrices (..., n_basis, n_basis) on the first n_low vectors and the columns above them."""
    right = X[..., n_low:] @ above
    n = n_low + above.shape[1]
    out = np.empty((*X.shape[:-2], n, n))
    out[..., :n_low, :n_low] = X[..., :n_low, :n_low]
    out[..., :n_low, n_low:] = right[..., :n_low, :]
    out[..., n_low:, :n_low] = np.swapaxes(right[..., :n_low, :], -1, -2)
    out[..., n_low:, n_low:] = above.T @ right[..., n_low:, :]
    return out


