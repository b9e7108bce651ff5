"""Harmonic balance by alternating frequency and time: the full film force on samples, the linear part per component.

State x = (q, v): motion in the basis about the rest state, and the line voltages. A component has a frequency; component
0 is the mean. q(t) = Q_0 + Re sum_c Q_c e^{i theta_c}; amplitudes are peak values.

    Z(omega_c) Q_c - Gamma v_c = -(nonlinear film force)_c            and the line's charge likewise
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from engine import cycle, inverses, linear
from engine.modes import Basis
from engine.motion import reduce

TOLERANCE = 5e-6         # change of the state in one round, over the state; components weighted as they sound
COARSE = 3e-3            # above such a change single precision and every other sample do, in the first rounds
COARSE_ROUNDS = 3
ROUNDS = 40
MEMORY = 4               # rounds that the next one is extrapolated from


@dataclass(frozen=True)
class Balance:
    """Solved components: motion (n, n_comp, n_basis), line (n, n_comp, n_line), converged (n,), extremes of the cycle."""

    motion: np.ndarray
    line: np.ndarray
    converged: np.ndarray
    extremes: cycle.Extremes


@dataclass(frozen=True)
class Problem:
    """Components and the linear part; independent of the drive."""

    model: cycle.Nonlinear
    single: cycle.Nonlinear      # in single precision
    theta: np.ndarray            # (n_samples, n_comp) phases
    free: np.ndarray             # line functions that are unknown
    inverse: np.ndarray          # (n, n_comp-1, size, size) complex64
    static: np.ndarray           # (n_basis, n_basis): inverse of K + K_rear
    audible: np.ndarray          # (n, n_comp-1) bool: components the basis can carry
    source: np.ndarray           # (n, n_comp-1) complex ohm^-1 s: 1/(i omega R), 0 without source resistance
    weight: np.ndarray           # (n, n_comp): omega^2 over the lowest, as pressure goes with acceleration


def problem(system, basis: Basis, omega, theta):
    """Problem for components of angular frequency omega (n, n_comp), the first of them 0, with phases theta.

    Components above the basis's highest frequency are left out (audible is False there).
    """
    reduced = reduce(system, basis)
    model = cycle.nonlinear(system, basis, reduced)
    circuit = system.circuit
    free = np.arange(0 if circuit.source_resistance > 0 else 1, len(circuit.inner))
    audible = omega[:, 1:] <= 2*np.pi*system.frequency_max*linear.MODES_TO
    later = omega[:, 1:]
    source = 1/(1j*later*circuit.source_resistance) if circuit.source_resistance > 0 else 0j*later
    n_basis, size = len(basis.shapes), len(basis.shapes) + len(free)
    # (n, n_comp-1): what the voltage does where the film is still, then the whole where the basis reaches
    inverse = np.zeros((*later.shape, size, size), np.complex64)
    if len(free):
        inverse[..., n_basis:, n_basis:] = np.linalg.inv(inverses.line_part(circuit, later, free))
    inverses.fill(inverse.reshape(-1, size, size), np.flatnonzero(audible), system, basis, reduced, later[audible], free)
    lowest = np.where(omega > 0, omega, np.inf).min(axis=1, keepdims=True)
    return Problem(model, model.astype(np.float32), theta, free, inverse, np.linalg.inv(reduced.real[0]), audible, source,
                   (np.maximum(omega, lowest)/lowest)**2)


def solve(task: Problem, drive, start=None):
    """State (n, n_comp, size) and convergence (n,) for source voltages drive (n, n_comp) complex V, peak, mean first.

    Fixed point x <- (linear part)^-1 (drive - nonlinear remainder), each row extrapolated from its last MEMORY rounds
    (Anderson 1965); all rows as one batch, a row that has settled leaves it. A row that does not settle in ROUNDS rounds
    is returned as it was last, with converged False.
    """
    n = len(drive)
    right = unmoved(task, drive)
    answer = _answer(task, drive, right, np.arange(n))
    x = answer.copy() if start is None else start.copy()
    converged, rows = np.zeros(n, bool), np.arange(n)
    change, past = np.full(n, np.inf), []
    with np.errstate(all="ignore"):
        for turn in range(ROUNDS):
            if not len(rows):
                break
            coarse = (change[rows] > COARSE) & (turn < COARSE_ROUNDS)
            new = _mixed(task, drive, x[rows], rows, coarse)
            # the linear part in single precision, of the difference to the round before
            answer[rows] += _answer(task, 0.0, new - right[rows], rows)
            right[rows] = new
            step, w = answer[rows] - x[rows], task.weight[rows][..., None]
            change[rows] = _size(step, w, task)/np.maximum(_size(answer[rows], w, task), 1e-300)
            settled = (change[rows] < TOLERANCE) & ~coarse
            converged[rows[settled]] = True
            x[rows[settled]] = answer[rows[settled]]
            keep = ~settled & np.isfinite(change[rows])
            rows, past = rows[keep], [[part[keep] for part in pair] for pair in past]
            past = [*past, [x[rows], step[keep]]][-MEMORY - 1:]
            x[rows] = _extrapolated(past, w[keep]) if len(rows) else x[rows]
    return x, converged


def _size(x, weight, task):
    """(n,) of states: of the motion, weighted as it sounds."""
    return np.linalg.norm(x[..., :len(task.static)]*weight, axis=(1, 2))


def _extrapolated(past, weight):
    """Next state of each row from its past pairs (state, step): the combination whose step is the least."""
    x, step = past[-1]
    if len(past) == 1:
        return x + step
    dx, df = (np.stack([now[k] - before[k] for before, now in pairwise(past)], axis=1) for k in (0, 1))
    m = df.shape[1]
    flat = (df*weight[:, None]).reshape(len(x), m, -1).view(float)
    right = (step*weight).reshape(len(x), -1).view(float)
    scale = np.linalg.norm(flat, axis=2)
    flat = flat/np.maximum(scale, 1e-300)[..., None]
    normal = flat @ flat.transpose(0, 2, 1) + 1e-10*np.eye(m)
    share = np.linalg.solve(normal, flat @ right[..., None])[..., 0]/np.maximum(scale, 1e-300)
    return x + step - np.einsum("nm,nmcs->ncs", share, dx + df)


def _mixed(task, drive, x, rows, coarse):
    """Right side of the linear part at states x of some rows, the coarse ones coarsely."""
    if coarse.all() or not coarse.any():
        return right_side(task, drive[rows], x, rows, coarse.all())
    new = np.empty((*x.shape[:2], task.inverse.shape[-1]), complex)
    for which, single in ((coarse, True), (~coarse, False)):
        new[which] = right_side(task, drive[rows[which]], x[which], rows[which], single)
    return new


def right_side(task, d, x, rows, single=False):
    """Right side (n, n_comp, size) of the linear part: drive d less the nonlinear remainder at states x."""
    n_basis = len(task.static)
    model, theta = (task.single, task.theta[::2]) if single else (task.model, task.theta)
    return _right(task, d, *remainder(model, x[..., :n_basis], x[..., n_basis:], theta, len(task.free) > 0), rows)


def unmoved(task, drive):
    """Right side for a drive (n, n_comp) where nothing moves."""
    shape = drive.shape
    return _right(task, drive, np.zeros((*shape, len(task.static))), np.zeros((*shape, len(task.model.functions))),
                  np.arange(len(drive)))


def _waves(theta):
    """(n_samples, 2 n_comp): from real then imaginary parts of components to samples; and back."""
    wave = np.concatenate([np.cos(theta), -np.sin(theta)], axis=1)
    back = wave.T*2/len(theta)
    back[0] /= 2
    return wave, back


def _parts(x, kind):
    return np.concatenate([x.real, x.imag], axis=1).astype(kind)


def remainder(model, motion, line, theta, charged):
    """Components of what of the film's force, and of its charge (None unless charged), is not linear; see cycle."""
    kind, n_comp = model.area.dtype, motion.shape[1]
    wave, back = (part.astype(kind) for part in _waves(theta))
    force, charge = cycle.force_and_charge(model, _parts(motion, kind), _parts(line, kind), wave, back, charged)
    force = force[:, :n_comp] + 1j*force[:, n_comp:]
    force -= motion @ model.tangent - line @ model.loads
    force[:, 0] -= model.constant
    if charged:
        charge = charge[:, :n_comp] + 1j*charge[:, n_comp:]
        charge -= motion @ model.loads.T + line @ model.capacitance
        charge[:, 0] -= model.rest_charge
    return force, charge


def _right(task, d, N, E, rows):
    """Right side (n, n_comp, size) of the linear part for a drive d and remainders N of force and E of charge."""
    model, n_basis = task.model, len(task.static)
    right = np.zeros((*N.shape[:2], n_basis + len(task.free)), complex)
    right[..., :n_basis] = -N
    right[:, 0, :n_basis] += d[:, :1]*model.loads[0]
    if task.source.any():
        right[..., n_basis:] = E[..., task.free]
        right[:, 1:, n_basis] -= task.source[rows]*d[:, 1:]
        return right
    right[:, 1:, :n_basis] += d[:, 1:, None]*model.loads[0]
    if len(task.free):
        right[..., n_basis:] = (E + d[..., None]*model.capacitance[:, 0])[..., task.free]
    return right


def _answer(task, d, right, rows):
    """State (n, n_comp, size) that the linear part makes of a right side."""
    n_basis = len(task.static)
    new = np.zeros((*right.shape[:2], n_basis + len(task.model.functions)), complex)
    new[:, 0, :n_basis] = right[:, 0, :n_basis] @ task.static
    new[:, :, n_basis] = d
    inverse = task.inverse if len(rows) == len(task.inverse) else task.inverse[rows]
    found = (inverse @ right[:, 1:].astype(np.complex64)[..., None])[..., 0]
    new[:, 1:, :n_basis] = found[..., :n_basis]
    new[:, 1:, n_basis + task.free] = found[..., n_basis:]
    return new


def linear_answer(task, drive):
    """State components (n, n_comp, size) of the linear part alone for a drive (n, n_comp)."""
    return _answer(task, drive, unmoved(task, drive), np.arange(len(drive)))


def components(task, samples):
    """Components (n, n_comp, ...) of real samples (n, n_samples, ...): the mean, then peak amplitudes."""
    _, back = _waves(task.theta)
    both = back @ samples
    n_comp = task.theta.shape[1]
    return both[:, :n_comp] + 1j*both[:, n_comp:]


def balance(task, drive):
    """Balance of a problem, with Newton's method on the rows that the fixed point leaves."""
    x, converged = solve(task, drive)
    n_basis = len(task.static)
    x[~converged & ~(np.linalg.norm(x[..., :n_basis], axis=(1, 2)) < 1e3)] = 0
    found = cycle.extremes(task.model, _parts(x[..., :n_basis], float), _parts(x[..., n_basis:], float), _waves(task.theta)[0])
    return Balance(x[..., :n_basis], x[..., n_basis:], converged, found)
