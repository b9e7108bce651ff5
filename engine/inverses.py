"""Inverses of the linear part at many frequencies: the dynamic stiffness and the line's equations that are unknown.

Within part of an octave everything but the resonances is smooth: the modes well above and below it are eliminated at a few
Chebyshev frequencies, and only the few that resonate are inverted at every frequency.
"""

import numpy as np

from engine import radiation
from engine.motion import dynamic_stiffness
from engine.radiation_tables import chebyshev_matrix, chebyshev_nodes

# (frequencies, width of a group of them, ratio to its ends from which on modes are eliminated): narrow if there are many
GROUPS = ((2000, 2**0.25, 1.35), (0, 2**0.5, 1.7))
AT_A_TIME = 400          # inverses of a group
WORTH = 0.8              # of the modes: if more resonate than that, all are inverted


def fill(out, places, system, basis, reduced, omega, free):
    """Fill out[places] (n, size, size) with the inverses at omega (n,) rad/s; size: the basis, then the free line functions."""
    order = np.argsort(omega)
    ascending, places, modes = omega[order], places[order], 2*np.pi*basis.modes.frequency
    width, ratio = next((width, ratio) for least, width, ratio in GROUPS if len(omega) > least)
    stop = len(omega)
    while stop > 0:
        top = ascending[stop - 1]
        start = int(np.searchsorted(ascending, top/width, side="right"))
        first, last = (int(np.searchsorted(modes, at)) for at in (ascending[start]/ratio, top*ratio))
        first = min(first, len(modes) - 1)
        last = max(last, first + 1)
        nodes, weights = _nodes(system, ascending[start:stop])
        Z = linear_part(system, basis, reduced, nodes, free)
        if weights is None:
            out[places[start:stop]] = np.linalg.inv(Z)
        elif last - first > WORTH*len(modes):
            for at, w in _pieces(places[start:stop], weights):
                out[at] = np.linalg.inv(_between(w, Z))
        else:
            n, size = len(basis.shapes), Z.shape[1]
            last = n if last == len(modes) else last         # the static corrections go with the highest modes
            _eliminate(out, places[start:stop], Z, weights, (slice(first, last), slice(n, size)),
                       (slice(0, first), slice(last, n)))
        stop = start


def _nodes(system, omega):
    """(nodes (k,) rad/s, weights (n, k)): from values at the nodes to ascending omega; the frequencies themselves if few."""
    reach = np.ptp(omega)*system.frame_radius/system.air.sound_speed
    # the air's load is of exponential type 2 in k b; 3 more bring the rest below 1e-5
    k = int(np.ceil(reach + 4*np.cbrt(reach) + 5))
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


def _eliminate(out, places, Z, weights, kept, gone):
    """Fill out[places]: the unknowns gone (slices) eliminated at the nodes of Z, which is symmetric, the kept inverted."""
    n = sum(part.stop - part.start for part in kept)
    order = np.concatenate([np.arange(part.start, part.stop) for part in kept + gone])
    Z = Z[:, order[:, None], order]
    coupling = Z[:, n:, :n]
    behind = np.linalg.inv(Z[:, n:, n:])
    passed = behind @ coupling
    S = Z[:, :n, :n] - coupling.transpose(0, 2, 1) @ passed
    passed, behind = passed.astype(np.complex64), behind.astype(np.complex64)
    for at, w in _pieces(places, weights):
        T = np.linalg.inv(_between(w, S)).astype(np.complex64)
        X, G = _between(w, passed), _between(w, behind)
        XT = X @ T
        G += XT @ X.transpose(0, 2, 1)
        XT *= -1
        cells = np.empty((len(at), *Z.shape[1:]), np.complex64)
        _place(cells, T, kept, kept)
        _place(cells, XT, gone, kept)
        _place(cells, XT.transpose(0, 2, 1), kept, gone)
        _place(cells, G, gone, gone)
        out[at] = cells


def _place(cells, block, rows, columns):
    """Fill the rows and columns (slices) of cells with a block, in their order."""
    i = 0
    for row in rows:
        j = 0
        for column in columns:
            down, across = row.stop - row.start, column.stop - column.start
            cells[:, row, column] = block[:, i:i + down, j:j + across]
            j += across
        i += down


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
