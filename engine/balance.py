"""Periodic motions of a problem of harmonic balance: an extrapolated fixed point, and Newton's method for what it leaves.

Both solve x = G(x), G the linear part's answer to the drive less the film's nonlinear remainder; see harmonic.
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from engine import cycle
from engine.harmonic import answer, linear_answer, parts, right_side, unmoved, waves

TOLERANCE = 5e-6         # change of the state in one round, over the state; components weighted as they sound
COARSE = 3e-3            # above such a change single precision and every other sample do, in the first rounds
COARSE_ROUNDS = 3
ROUNDS = 40
MEMORY = 4               # rounds that the next one is extrapolated from
STEPS = 8                # Newton's, at one drive
VECTORS = 24             # of GMRES
CLOSE = 1e-2             # what GMRES leaves of a step
DIFFERENCE = 1e-5        # of the motion, for derivatives along a vector
FIRST_STEP = 0.5         # of the drive
LEAST_STEP = 0.04
ATTEMPTS = 16


@dataclass(frozen=True)
class Balance:
    """Solved components: motion (n, n_comp, n_basis), line (n, n_comp, n_line), converged (n,), extremes of the cycle."""

    motion: np.ndarray
    line: np.ndarray
    converged: np.ndarray
    extremes: cycle.Extremes


def solve(task, drive):
    """State (n, n_comp, size) and convergence (n,) for source voltages drive (n, n_comp) complex V, peak, mean first.

    Fixed point x <- (linear part)^-1 (drive - nonlinear remainder), each row extrapolated from its last MEMORY rounds
    (Anderson 1965); all rows as one batch, a row that has settled leaves it. A row that does not settle in ROUNDS rounds
    is returned as it was last, with converged False.
    """
    n = len(drive)
    converged, rows = np.zeros(n, bool), np.arange(n)
    right = unmoved(task, drive, rows)
    found = answer(task, drive, right, rows)
    x = found.copy()
    change, past = np.full(n, np.inf), []
    with np.errstate(all="ignore"):
        for turn in range(ROUNDS):
            if not len(rows):
                break
            coarse = (change[rows] > COARSE) & (turn < COARSE_ROUNDS)
            new = _mixed(task, drive, x[rows], rows, coarse)
            # the linear part in single precision, of the difference to the round before
            found[rows] += answer(task, 0.0, new - right[rows], rows)
            right[rows] = new
            step, w = found[rows] - x[rows], task.weight[rows][..., None]
            change[rows] = _size(step, w, task)/np.maximum(_size(found[rows], w, task), 1e-300)
            settled = (change[rows] < TOLERANCE) & ~coarse
            converged[rows[settled]] = True
            x[rows[settled]] = found[rows[settled]]
            keep = ~settled & np.isfinite(change[rows])
            rows, past = rows[keep], [[part[keep] for part in pair] for pair in past]
            past = [*past, [x[rows], step[keep]]][-MEMORY - 1:]
            x[rows] = extrapolated(past, w[keep]) if len(rows) else x[rows]
    return x, converged


def _size(x, weight, task):
    """(n,) of states: of the motion, weighted as it sounds."""
    return np.linalg.norm(x[..., :len(task.static)]*weight, axis=(1, 2))


def extrapolated(past, weight):
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


def follow(task, drive, rows):
    """States (n, n_comp, size) and success (n,) of the task's rows (n,), followed from no drive to drive (n, n_comp).

    The branch of periodic motions that starts at rest is followed by Newton's method, each row with steps of its own;
    where the branch turns back, as it does at pull-in, a row does not succeed.
    """
    x = np.zeros_like(linear_answer(task, drive, rows))
    slope = linear_answer(task, drive, rows)            # dx over the share of the drive
    reached, step = np.zeros(len(rows)), np.full(len(rows), FIRST_STEP)
    with np.errstate(all="ignore"):
        for _ in range(ATTEMPTS):
            at = np.flatnonzero((reached < 1) & (step >= LEAST_STEP))
            if not len(at):
                break
            ahead = np.minimum(reached[at] + step[at], 1.0)
            by = (ahead - reached[at])[:, None, None]
            found, good = newton(task, ahead[:, None]*drive[at], x[at] + by*slope[at], rows[at])
            went = at[good]
            slope[went] = (found[good] - x[went])/by[good]
            x[went], reached[went] = found[good], ahead[good]
            step[went] *= 1.5
            step[at[~good]] /= 2.5
    return x, reached >= 1


def newton(task, drive, x, rows):
    """States and success of Newton's method from states x of the task's rows, for drive (n, n_comp).

    (1 - G') dx = G(x) - x by GMRES (Saad & Schultz 1986); derivatives are differences of the film's force.
    """
    still, x = unmoved(task, drive, rows), x.copy()
    at_rest = answer(task, drive, still, rows)
    last, good, at = np.full(len(rows), np.inf), np.zeros(len(rows), bool), np.arange(len(rows))
    for _ in range(STEPS):
        right = right_side(task, drive[at], x[at], rows[at])
        found = at_rest[at] + answer(task, 0.0, right - still[at], rows[at])
        left, w = found - x[at], task.weight[rows[at]][..., None]
        size = _size(found, w, task)
        change = _size(left, w, task)/np.maximum(size, 1e-300)
        good[at] = change < TOLERANCE
        x[at[good[at]]] = found[good[at]]
        going = ~good[at] & (change < 3*last[at])
        last[at] = change
        if not going.any():
            break
        at, right, left, w, size = (part[going] for part in (at, right, left, w, size))
        scale = np.broadcast_to(w/size[:, None, None], left.shape).copy()
        scale[..., len(task.static):] = 1/np.abs(drive[at]).max(axis=1)[:, None, None]

        def derivative(y, at=at, right=right, scale=scale):
            v = y.view(complex).reshape(scale.shape)
            turned = right_side(task, drive[at], x[at] + DIFFERENCE*v/scale, rows[at]) - right
            return y - (answer(task, 0.0, turned, rows[at])*scale).reshape(len(y), -1).view(float)/DIFFERENCE

        dx = _gmres(derivative, (left*scale).reshape(len(at), -1).view(float))
        x[at] += dx.view(complex).reshape(scale.shape)/scale
    return x, good


def _gmres(operator, right):
    """(n, size) close to the solution of operator(y) = right, row by row, all rows at once."""
    size = np.linalg.norm(right, axis=1)
    basis = [right/np.maximum(size, 1e-300)[:, None]]
    H = np.zeros((len(right), VECTORS + 1, VECTORS))
    for j in range(VECTORS):
        w = operator(basis[j])
        for _ in range(2):
            for i, v in enumerate(basis):
                h = np.einsum("nd,nd->n", v, w)
                w = w - h[:, None]*v
                H[:, i, j] += h
        H[:, j + 1, j] = np.linalg.norm(w, axis=1)
        basis.append(w/np.maximum(H[:, j + 1, j], 1e-300)[:, None])
        if j % 4 == 3:
            part = np.nan_to_num(H[:, :j + 2, :j + 1])
            y = np.linalg.pinv(part)[..., 0]
            rest = (part @ y[..., None])[..., 0]
            rest[:, 0] -= 1
            if np.all(np.linalg.norm(rest, axis=1) < CLOSE):
                break
    return size[:, None]*np.einsum("nj,jnd->nd", y, np.array(basis[:-1]))


def balance(task, drive, thorough=True):
    """Balance of a problem for source voltages drive (n, n_comp); thorough: Newton's method where the fixed point fails.

    Rows without a solution have converged False and hold the linear motion.
    """
    x, converged = solve(task, drive)
    rows = np.flatnonzero(~converged)
    if len(rows) and thorough:
        x[rows], converged[rows] = follow(task, drive[rows], rows)
        rows = np.flatnonzero(~converged)
    if len(rows):
        x[rows] = linear_answer(task, drive[rows], rows)
    n_basis = len(task.static)
    found = cycle.extremes(task.model, parts(x[..., :n_basis], float), parts(x[..., n_basis:], float), waves(task.theta)[0])
    return Balance(x[..., :n_basis], x[..., n_basis:], converged, found)
