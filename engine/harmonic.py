"""Harmonic balance by alternating frequency and time: the full film force on samples, the linear part per component.

State x = (q, v): motion in the basis about the rest state, and the line voltages. A component has a frequency; component
0 is the mean. q(t) = Q_0 + Re sum_c Q_c e^{i theta_c}; amplitudes are peak values.

    Z(omega_c) Q_c - Gamma v_c = -(nonlinear film force)_c            and the line's charge likewise
"""

from dataclasses import dataclass

import numpy as np

from engine import cycle, inverses, linear
from engine.modes import Basis
from engine.motion import reduce


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


def right_side(task, d, x, rows, single=False):
    """Right side (n, n_comp, size) of the linear part: drive d less the nonlinear remainder at states x."""
    n_basis = len(task.static)
    model, theta = (task.single, task.theta[::2]) if single else (task.model, task.theta)
    return right_part(task, d, *remainder(model, x[..., :n_basis], x[..., n_basis:], theta, len(task.free) > 0), rows)


def unmoved(task, drive, rows):
    """Right side for a drive (n, n_comp) where nothing moves."""
    shape = drive.shape
    return right_part(task, drive, np.zeros((*shape, len(task.static))), np.zeros((*shape, len(task.model.functions))),
                  rows)


def waves(theta):
    """(n_samples, 2 n_comp): from real then imaginary parts of components to samples; and back."""
    wave = np.concatenate([np.cos(theta), -np.sin(theta)], axis=1)
    back = wave.T*2/len(theta)
    back[0] /= 2
    return wave, back


def parts(x, kind):
    return np.concatenate([x.real, x.imag], axis=1).astype(kind)


def remainder(model, motion, line, theta, charged):
    """Components of what of the film's force, and of its charge (None unless charged), is not linear; see cycle."""
    kind, n_comp = model.area.dtype, motion.shape[1]
    wave, back = (part.astype(kind) for part in waves(theta))
    force, charge = cycle.force_and_charge(model, parts(motion, kind), parts(line, kind), wave, back, charged)
    force = force[:, :n_comp] + 1j*force[:, n_comp:]
    force -= motion @ model.tangent - line @ model.loads
    force[:, 0] -= model.constant
    if charged:
        charge = charge[:, :n_comp] + 1j*charge[:, n_comp:]
        charge -= motion @ model.loads.T + line @ model.capacitance
        charge[:, 0] -= model.rest_charge
    return force, charge


def right_part(task, d, N, E, rows):
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


def answer(task, d, right, rows):
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


def linear_answer(task, drive, rows):
    """State components (n, n_comp, size) of the linear part alone for a drive (n, n_comp) of the task's rows."""
    return answer(task, drive, unmoved(task, drive, rows), rows)


def components(task, samples):
    """Components (n, n_comp, ...) of real samples (n, n_samples, ...): the mean, then peak amplitudes."""
    _, back = waves(task.theta)
    both = back @ samples
    n_comp = task.theta.shape[1]
    return both[:, :n_comp] + 1j*both[:, n_comp:]
