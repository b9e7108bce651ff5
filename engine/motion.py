"""Motion of the biased film per volt of signal: the dynamic stiffness on the basis, solved octave by octave."""

from dataclasses import dataclass

import numpy as np

from engine import circuit, linear, material, radiation
from engine.modes import Basis
from engine.radiation_tables import chebyshev_matrix, chebyshev_nodes
from engine.statics import frozen

GRID_POINTS = 240               # of the even log grid, before refinement at resonances
FEW_MODES = 14                  # below so many unknowns another octave costs more than it saves


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


def frequency_grid(basis, low, high, n_points=GRID_POINTS):
    """(n_freq,) Hz: an even log grid and, at every resonance narrower than it, points across the peak."""
    even = np.geomspace(low, high, n_points)
    f, zeta = basis.refined, basis.modes.damping_ratio
    narrow = (f > low) & (f < high) & (zeta < 2.5*np.log(high/low)/n_points)
    offsets = np.array([-1.8, -0.8, -0.35, 0.0, 0.35, 0.8, 1.8])
    extra = (f[narrow, None]*(1 + zeta[narrow, None]*offsets)).ravel()
    every = np.unique(np.concatenate([even, extra[(extra > low) & (extra < high)]]))
    keep = np.append(True, np.diff(np.log(every)) > 1e-6)
    keep[-1] = True
    return every[keep]


def solve_motion(system, basis, frequency):
    """Motion at the given ascending frequencies, octave by octave from the top.

    An octave's unknowns are the modes up to twice its upper end and the static answer of everything above them, so
    every mode keeps its contribution at every frequency. Source: DEVELOPERS.md, "Response".
    """
    reduced = reduce(system, basis)
    parts = []
    stop = len(frequency)
    while stop > 0:
        top = frequency[stop - 1]
        n_low = int(np.searchsorted(basis.modes.frequency, 2*top))
        start = 0 if n_low < FEW_MODES else int(np.searchsorted(frequency, top/2, side="right"))
        parts.append(_octave(system, basis, reduced, frequency[start:stop], n_low))
        stop = start
    return Motion(system, basis, frozen(np.array(frequency)),
                  *(frozen(np.concatenate(part[::-1])) for part in zip(*parts, strict=True)))


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


def _above(reduced, n_low, n_modes):
    """(n_basis - n_low, n) orthonormal columns: the static answers of everything above the first n_low modes."""
    if n_low == n_modes:
        return np.eye(reduced.loads.shape[1] - n_low)
    u, sizes, _ = np.linalg.svd(reduced.static[n_low:], full_matrices=False)
    return u[:, sizes > 1e-9*sizes[0]] if sizes[0] > 0 else u[:, :0]


def _project(X, n_low, above):
    """(..., n, n) of matrices (..., n_basis, n_basis) on the first n_low vectors and the columns above them."""
    if n_low + above.shape[1] == X.shape[-1]:
        return X
    right = X[..., n_low:] @ above
    n = n_low + above.shape[1]
    out = np.empty((*X.shape[:-2], n, n))
    out[..., :n_low, :n_low] = X[..., :n_low, :n_low]
    out[..., :n_low, n_low:] = right[..., :n_low, :]
    out[..., n_low:, :n_low] = np.swapaxes(right[..., :n_low, :], -1, -2)
    out[..., n_low:, n_low:] = above.T @ right[..., n_low:, :]
    return out


def dynamic_stiffness(system, omega, at, real, loss, resistance, reactance):
    """Dynamic stiffness Z (n_freq, n, n) complex, and omega Re(air's impedance) of one side (n_freq, n, n).

    Parameters: omega (n_freq,) rad/s; at (n_freq, n_terms): weights of the air's tables; real (3, n*n): K + K_rear, D0,
    M; loss (1, n*n); resistance, reactance (n_terms, n*n) of the air.
    """
    n = int(np.sqrt(real.shape[1]))
    x = omega*system.frame_radius/system.air.sound_speed
    S = material.viscous_modulus(omega, *system.film_losses)
    # i omega N_s Z = N_s eps rho b^3 omega^2 (i x A - B)
    per_side = 2*np.pi*system.air.density*system.frame_radius**3*omega**2
    faces = system.rear.faces*system.air_load
    one = np.ones_like(omega)
    Z = np.empty((len(omega), n, n), complex)
    Z.real = (np.column_stack([one, S.real, -omega**2, -(faces*per_side)[:, None]*at])
              @ np.concatenate([real, reactance])).reshape(-1, n, n)
    radiated = ((per_side*x)[:, None]*at) @ resistance
    Z.imag = (faces*radiated + np.column_stack([S.imag, one]) @ np.concatenate([real[1:2], loss])).reshape(-1, n, n)
    return Z, radiated.reshape(-1, n, n)


def _local_tables(basis, x):
    """Weights (n_freq, n) and the air's tables (n, n_basis, n_basis) at n places within the range of x = k b.

    Over an octave the load is a smooth function that a few Chebyshev points carry (it is of exponential type 2 in x);
    where they are no fewer than the tables' terms, the tables serve as they are.
    """
    reach = np.ptp(x)
    n = int(np.ceil(reach + 4.5*np.cbrt(reach) + 5))
    if n >= basis.tables.n_terms:
        return radiation.interpolation(x, basis.tables), *basis.projected
    places, to_coefficients = chebyshev_nodes(n)
    at = radiation.interpolation(x.min() + reach*places, basis.tables)
    weights = chebyshev_matrix((x - x.min())/max(reach, 1e-300), n) @ to_coefficients
    return weights, *((at @ t.reshape(len(t), -1)).reshape(n, *t.shape[1:]) for t in basis.projected)


def _octave(system, basis, reduced, frequency, n_low):
    """Motion's unit, power, line and charge of one octave whose unknowns start with n_low modes."""
    above = _above(reduced, n_low, len(basis.modes.frequency))
    n = n_low + above.shape[1]
    omega = 2*np.pi*frequency
    at, *air = _local_tables(basis, omega*system.frame_radius/system.air.sound_speed)
    matrices = (_project(X, n_low, above).reshape(-1, n*n) for X in (reduced.real, reduced.constant_loss, *air))
    Z, radiated = dynamic_stiffness(system, omega, at, *matrices)
    loads = np.concatenate([reduced.loads[:, :n_low], reduced.loads[:, n_low:] @ above], axis=1)
    each = np.linalg.solve(Z, np.broadcast_to(loads.T, (len(frequency), *loads.T.shape)).astype(complex))
    compliance = loads @ each
    line = circuit.voltages(system.circuit, omega, compliance)
    q = (each @ line[..., None])[..., 0]
    # omega^2/2 q^H Re Z q of one side
    parts = np.stack([q.real, q.imag], axis=2)
    power = omega/2*np.sum((radiated @ parts)*parts, axis=(1, 2))
    unit = np.concatenate([q[:, :n_low], q[:, n_low:] @ above.T], axis=1)
    return unit, power, line, circuit.charge(system.circuit, line, compliance)
