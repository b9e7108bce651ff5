"""One band of frequencies: its dynamic stiffness from a few places, the modes far from it condensed.

Between two frequencies the dynamic stiffness Z is a smooth function that a few Chebyshev points carry. So is what is left
of it for the modes near the band once the others, which do not resonate in it, are eliminated:

    S = Z_nn - Z_nf Z_ff^-1 Z_fn        q_f = Z_ff^-1 (loads_f v - Z_fn q_n)

which is exact. Only S is solved at every frequency.
"""

from dataclasses import dataclass

import numpy as np

from engine import circuit, material, radiation
from engine.radiation_tables import chebyshev_matrix, chebyshev_nodes

APART = 2.2             # half-widths of the band from its middle, beyond which a mode is far from it
PLACES = 14             # Chebyshev points of a band, at least; the nearest pole leaves 4.2^-n
FEW_MODES = 32          # of fewer unknowns none is condensed
AT_ONCE = 48            # frequencies: what they take stays in the processor's cache
WORTH = 0.7             # part of the work without it that condensing may take
UNRESOLVED = 1e-9       # of the largest coefficient of an entry's scale: what the last Chebyshev terms may hold


@dataclass(frozen=True)
class Level:
    """The unknowns of an octave and below: the lowest modes and the static answers of everything above them.

    real (3, n, n): K + K_rear, D0, M; constant_loss (n, n); loads (n_line, n); air (2, K, n, n): tables of the air's
    resistance and reactance;
    frequency (n_low,) Hz of the modes, ascending; columns (n_basis - n_low, n - n_low): the other unknowns on the basis.
    """

    real: np.ndarray
    constant_loss: np.ndarray
    loads: np.ndarray
    air: np.ndarray
    frequency: np.ndarray
    columns: np.ndarray


def dynamic_stiffness(system, omega, at, real, loss, resistance, reactance):
    """Dynamic stiffness Z (n_freq, n, n) complex, and omega Re(air's impedance) of one side (n_freq, n, n).

    Parameters: omega (n_freq,) rad/s; at (n_freq, n_terms): weights of the air's tables; real (3, n*n): K + K_rear, D0,
    M; loss (1, n*n); resistance, reactance (n_terms, n*n) of the air.
    """
    x = omega*system.frame_radius/system.air.sound_speed
    S = material.viscous_modulus(omega, *system.film_losses)
    # i omega N_s Z = N_s eps rho b^3 omega^2 (i x A - B)
    per_side = 2*np.pi*system.air.density*system.frame_radius**3*omega**2
    faces = system.rear.faces*system.air_load
    one = np.ones_like(omega)
    radiated = ((per_side*x)[:, None]*at) @ resistance
    size = int(np.sqrt(real.shape[1]))
    Z = np.empty((len(omega), size**2), complex)
    np.add(np.column_stack([one, S.real, -omega**2]) @ real, (-(faces*per_side)[:, None]*at) @ reactance, out=Z.real)
    np.add(np.column_stack([S.imag, one]) @ np.concatenate([real[1:2], loss]), faces*radiated, out=Z.imag)
    return Z.reshape(-1, size, size), radiated.reshape(-1, size, size)


def solve_band(system, basis, level, frequency):
    """Motion of a level's unknowns (n_freq, n), line (n_freq, n_line) and charge (n_freq,) per volt."""
    omega = 2*np.pi*frequency
    reach = (omega[-1] - omega[0])*system.frame_radius/system.air.sound_speed
    n_places = max(int(np.ceil(reach + 4.5*np.cbrt(reach) + 5)), PLACES)
    n = level.loads.shape[1]
    near = _near(level, frequency, n_places)
    if len(omega) > n_places:
        xi, to_coefficients = chebyshev_nodes(n_places)
        places = omega[0] + (omega[-1] - omega[0])*xi
        T = chebyshev_matrix((omega - omega[0])/(omega[-1] - omega[0]), n_places) @ to_coefficients
    else:
        places, T, to_coefficients = omega, np.eye(len(omega)), None
    at = radiation.interpolation(places*system.frame_radius/system.air.sound_speed, basis.tables)
    Z, _ = dynamic_stiffness(system, places, at, level.real.reshape(3, -1), level.constant_loss.reshape(1, -1),
                             *level.air.reshape(2, -1, n*n))
    found = _condensed(level.loads, Z, near, to_coefficients, T) if near else None
    each, compliance = found or _direct(level.loads, Z, T)
    line = circuit.voltages(system.circuit, omega, compliance)
    q = (each @ line[..., None])[..., 0]
    return q, line, circuit.charge(system.circuit, line, compliance)


def _direct(loads, Z, T):
    """(answers to each load (n_freq, n, n_line), compliance) from the whole matrix at every frequency."""
    n_line, n = loads.shape
    whole = (T @ Z.view(float).reshape(len(Z), -1)).view(complex).reshape(-1, n, n)
    each = np.linalg.solve(whole, np.broadcast_to(loads.T, (len(T), n, n_line)).astype(complex))
    return each, loads @ each


def _near(level, frequency, n_places):
    """Slice of the modes that resonate in or near the band; None where condensing the others does not pay."""
    middle, half = (frequency[-1] + frequency[0])/2, (frequency[-1] - frequency[0])/2
    near = slice(*np.searchsorted(level.frequency, (middle - APART*half, middle + APART*half)).tolist())
    n, n_near, n_freq = level.loads.shape[1], near.stop - near.start, len(frequency)
    pays = n >= FEW_MODES and 1.3*n_places + n_freq*(n_near/n)**2.2 < WORTH*n_freq      # times as measured
    return near if pays and n_near else None


def _condensed(loads, Z, near, to_coefficients, T):
    """(answers to each load (n_freq, n, n_line), compliance (n_freq, n_line, n_line)); None where it does not hold."""
    n_line, n = loads.shape
    far = np.r_[0:near.start, near.stop:n]
    n_near = near.stop - near.start
    across = Z[:, far, near]
    rhs = np.concatenate([across, np.broadcast_to(loads.T[far], (len(Z), len(far), n_line))], axis=2)
    X = np.linalg.solve(Z[:, far[:, None], far], rhs)       # (n_places, n_far, n_near + n_line)
    both = across.transpose(0, 2, 1) @ X                     # Z is symmetric
    S = Z[:, near, near] - both[..., :n_near]
    effective = loads.T[near] - both[..., n_near:]
    far_compliance = loads[:, far] @ X[..., n_near:]
    parts = [S, effective, far_compliance, X]
    flat = np.concatenate([part.reshape(len(Z), -1) for part in parts], axis=1)
    scale = np.sqrt(np.abs(np.einsum("kii->ki", S)).max(axis=0))
    last = np.abs(to_coefficients[-2:] @ S.reshape(len(Z), -1)).max(axis=0).reshape(n_near, n_near)
    if np.any(last > UNRESOLVED*np.outer(scale, scale)):
        return None
    ends = np.cumsum([part[0].size for part in parts])
    each, compliance = np.empty((len(T), n, n_line), complex), np.empty((len(T), n_line, n_line), complex)
    for some in (slice(i, i + AT_ONCE) for i in range(0, len(T), AT_ONCE)):
        spread = (T[some] @ flat.view(float)).view(complex)
        S, effective, far_compliance, X = (spread[:, end - part[0].size:end].reshape(-1, *part.shape[1:])
                                           for end, part in zip(ends, parts, strict=True))
        each[some, near] = at_near = np.linalg.solve(S, effective)
        each[some, far] = X[..., n_near:] - X[..., :n_near] @ at_near
        compliance[some] = effective.transpose(0, 2, 1) @ at_near + far_compliance
    return each, compliance
