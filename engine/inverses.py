"""Inverses of the linear part at many frequencies: the dynamic stiffness and the line's equations that are unknown.

Within half an octave everything but the resonances is smooth: the modes well above it are eliminated at a few Chebyshev
frequencies, and only the few that resonate are inverted at every frequency.
"""

import numpy as np

from engine import radiation
from engine.motion import dynamic_stiffness
from engine.radiation_tables import chebyshev_matrix, chebyshev_nodes

SEPARATION = 1.5         # modes above this multiple of a group's highest frequency are eliminated
AT_A_TIME = 400          # inverses of a group
WORTH = 0.8              # of the modes: if more resonate than that, all are inverted


def fill(out, places, system, basis, reduced, omega, free):
    """Fill out[places] (n, size, size) with the inverses at omega (n,) rad/s; size: the basis, then the free line functions."""
    order = np.argsort(omega)
    ascending, places, modes = omega[order], places[order], 2*np.pi*basis.modes.frequency
    stop = len(omega)
    while stop > 0:
        top = ascending[stop - 1]
        start = int(np.searchsorted(ascending, top/np.sqrt(2), side="right"))
        n_low = max(1, int(np.searchsorted(modes, SEPARATION*top)))
        nodes, weights = _nodes(system, ascending[start:stop])
        Z = linear_part(system, basis, reduced, nodes, free)
        if weights is None:
            out[places[start:stop]] = np.linalg.inv(Z)
        elif n_low > WORTH*len(modes):
            for at, w in _pieces(places[start:stop], weights):
                out[at] = np.linalg.inv(_between(w, Z))
        else:
            line = len(basis.shapes) + np.arange(len(free))
            order = np.concatenate([np.arange(n_low), line, np.arange(n_low, len(basis.shapes))])
            _eliminate(out, places[start:stop], Z, weights, order, n_low + len(free))
        stop = start


def _nodes(system, omega):
    """(nodes (k,) rad/s, weights (n, k)): from values at the nodes to ascending omega; the frequencies themselves if few."""
    reach = np.ptp(omega)*system.frame_radius/system.air.sound_speed
    # the air's load is of exponential type 2 in k b; 3 more bring the rest below 1e-5
    k = int(np.ceil(reach + 4*np.cbrt(reach) + 4))
    if k >= len(omega):
        return omega, None
    places, to_coefficients = chebyshev_nodes(k)
    at = (omega - omega[0])/(np.ptp(omega) or 1.0)          # all at one place where they are all the same
    return omega[0] + np.ptp(omega)*places, chebyshev_matrix(at, k) @ to_coefficients


def _pieces(places, weights):
    """Consecutive pieces of places (n,) and weights (n, k)."""
    return [(places[i:i + AT_A_TIME], weights[i:i + AT_A_TIME]) for i in range(0, len(places), AT_A_TIME)]


def _between(weights, stack):
    """Values (n, ...) at other frequencies of a stack (k, ...) of complex values at the nodes."""
    kind = stack.real.dtype
    flat = np.ascontiguousarray(stack).reshape(len(stack), -1).view(kind)
    return (weights.astype(kind) @ flat).view(stack.dtype).reshape(-1, *stack.shape[1:])


def _eliminate(out, places, Z, weights, order, n):
    """Fill out[places]: all but the first n unknowns of an order eliminated at the nodes of Z, which is symmetric."""
    Z = Z[:, order[:, None], order]
    coupling = Z[:, n:, :n]
    behind = np.linalg.inv(Z[:, n:, n:])
    passed = behind @ coupling
    S = Z[:, :n, :n] - coupling.transpose(0, 2, 1) @ passed
    passed, behind = passed.astype(np.complex64), behind.astype(np.complex64)
    back = np.argsort(order)
    for at, w in _pieces(places, weights):
        T = np.linalg.inv(_between(w, S)).astype(np.complex64)
        X, G = _between(w, passed), _between(w, behind)
        cells = np.empty((len(at), *Z.shape[1:]), np.complex64)
        XT = X @ T
        cells[:, :n, :n] = T
        cells[:, n:, :n] = -XT
        cells[:, :n, n:] = -XT.transpose(0, 2, 1)
        cells[:, n:, n:] = XT @ X.transpose(0, 2, 1)
        cells[:, n:, n:] += G
        out[at] = cells if np.all(np.diff(order) > 0) else cells[:, back[:, None], back]


def linear_part(system, basis, reduced, omega, free):
    """(n, size, size) complex: the dynamic stiffness, bordered by the equations of the free line functions."""
    n_basis = len(basis.shapes)
    matrices = (X.reshape(-1, n_basis**2) for X in (reduced.real, reduced.constant_loss, *basis.projected))
    at = radiation.interpolation(omega*system.frame_radius/system.air.sound_speed, basis.tables)
    Z, _ = dynamic_stiffness(system, omega, at, *matrices)
    if not len(free):
        return Z
    size = n_basis + len(free)
    whole = np.zeros((len(omega), size, size), complex)
    whole[:, :n_basis, :n_basis] = Z
    whole[:, :n_basis, n_basis:] = -reduced.loads[free].T
    whole[:, n_basis:, :n_basis] = -reduced.loads[free]
    whole[:, n_basis:, n_basis:] = line_part(system.circuit, omega, free)
    return whole


def line_part(circuit, omega, free):
    """(..., n_free, n_free): what multiplies the free line functions in the charge's equations, the film at rest."""
    line = (circuit.capacitance + circuit.conductance/(1j*omega[..., None, None]))[..., free, :][..., free]
    if circuit.source_resistance > 0:
        line[..., 0, 0] += 1/(1j*omega*circuit.source_resistance)
    return -line
