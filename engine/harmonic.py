"""Harmonic balance by alternating frequency and time: the full film force on samples, the linear part per component.

State x = (q, v): motion in the basis about the rest state, and the line voltages that are not prescribed. A component
has a frequency; component 0 is the mean. q(t) = Q_0 + Re sum_c Q_c e^{i theta_c}; amplitudes are peak values.

    Z(omega_c) Q_c - Gamma v_c = -(nonlinear film force)_c            and the line's charge likewise
"""

from dataclasses import dataclass

import numpy as np

from engine import film as flm
from engine import linear, radiation
from engine.modes import Basis
from engine.motion import dynamic_stiffness, reduce

TOLERANCE = 1e-6         # change of the state in one round, over the state
ROUNDS = 40


@dataclass(frozen=True)
class Samples:
    """What the film does at every sample: motion on the mesh is recovered from it where needed.

    state (n, n_samples, n_basis) m; line (n, n_samples, n_line) V of signal; least_stress, peak_field (n, n_samples).
    """

    state: np.ndarray
    line: np.ndarray
    least_stress: np.ndarray
    peak_field: np.ndarray


@dataclass(frozen=True)
class Balance:
    """Solved components: motion (n, n_comp, n_basis), line (n, n_comp, n_line), converged (n,), residual (n,), samples."""

    motion: np.ndarray
    line: np.ndarray
    converged: np.ndarray
    samples: Samples


@dataclass(frozen=True)
class Nonlinear:
    """The film's full force and charge on the basis, for many states at once."""

    film: flm.Film
    bias: float
    rest: flm.Strain
    radial: np.ndarray           # (n_basis, n_points)
    radial_slope: np.ndarray
    axial_slope: np.ndarray
    centre: np.ndarray           # (n_basis,): rise of the centre
    functions: np.ndarray        # (n_line, n_points)
    tangent: np.ndarray          # K (n_basis, n_basis), without the rear
    loads: np.ndarray            # (n_line, n_basis)
    capacitance: np.ndarray      # (n_line, n_line)
    constant: np.ndarray         # (n_basis,) force at rest: round-off
    rest_charge: np.ndarray      # (n_line,) C


def nonlinear(system, basis, reduced):
    """The film's force on a basis about a system's rest state."""
    film, mesh = system.film, system.film.mesh
    radial, axial = flm.expand(film, basis.shapes)
    flat = [part.reshape(len(part), -1) for part in (mesh.local(radial), mesh.derivative(radial), mesh.derivative(axial))]
    v = basis.shapes @ system.volume
    rest = flm.strain(film, system.state)
    lines = system.circuit.functions[:, mesh.nodes].reshape(len(system.circuit.functions), -1)
    made = Nonlinear(film, system.rest.bias, rest, *flat, basis.shapes[:, 0], lines,
                     reduced.real[0] - system.rear.stiffness*np.outer(v, v), reduced.loads, system.circuit.capacitance,
                     np.zeros(len(v)), np.zeros(len(lines)))
    none = np.zeros((1, len(v)))
    force, charge, _, _ = _force(made, none, np.zeros((1, len(lines))))
    return Nonlinear(**{**made.__dict__, "constant": force[0], "rest_charge": charge[0]})


def _force(model, q, line):
    """Force dPi/dq (n, n_basis), charge (n, n_line), least stress and peak field (n,) of states q, signal voltages line."""
    e, film = model.rest, model.film
    r0, area = film.mesh.local_radius.ravel(), film.area.ravel()
    r = e.r.ravel() + q @ model.radial
    dr, dz = e.dr.ravel() + q @ model.radial_slope, e.dz.ravel() + q @ model.axial_slope
    A, B = dr**2 + dz**2, (r/r0)**2
    V = model.bias + line @ model.functions
    _, wA, wB, *_ = flm.surface_energy(film, A, B, V)
    force = ((2*area*wA*dr) @ model.radial_slope.T + (2*area*wA*dz) @ model.axial_slope.T
             + (2*area*wB*r/r0**2) @ model.radial.T)
    force += film.spring_rate*(q @ model.centre)[:, None]*model.centre
    charge = (film.areal_capacitance*area*A*B*V) @ model.functions.T
    if film.electrode_stiffness:
        _, wA, wB, *_ = flm.surface_energy(film, A, B, V, electrodes=False)
    least = 2*np.minimum(A*wA, B*wB).min(axis=1)/film.thickness
    field = (np.abs(V)*np.sqrt(A*B)).max(axis=1)/film.layer_thickness
    return force, charge, least, field


@dataclass(frozen=True)
class Problem:
    """Components and the linear part: theta (n_samples, n_comp) phases; inverse (n, n_comp-1, size, size)."""

    model: Nonlinear
    theta: np.ndarray
    free: np.ndarray             # line functions that are unknown
    inverse: np.ndarray
    static: np.ndarray           # (n_basis, n_basis): inverse of K + K_rear
    audible: np.ndarray          # (n, n_comp-1) bool: components the basis can carry
    source: np.ndarray           # (n, n_comp-1) complex ohm^-1 s: 1/(i omega R), 0 without source resistance


def problem(system, basis: Basis, omega, theta):
    """Problem for components of angular frequency omega (n, n_comp), the first of them 0, with phases theta.

    Components above the basis's highest frequency are left out (audible is False there).
    """
    reduced = reduce(system, basis)
    model = nonlinear(system, basis, reduced)
    circuit = system.circuit
    n, n_comp = omega.shape
    n_basis = len(basis.shapes)
    free = np.arange(0 if circuit.source_resistance > 0 else 1, len(circuit.inner))
    top = 2*np.pi*system.frequency_max*linear.MODES_TO
    audible = omega[:, 1:] <= top
    flat = np.where(audible, omega[:, 1:], top).ravel()
    matrices = (X.reshape(-1, n_basis**2) for X in (reduced.real, reduced.constant_loss, *basis.projected))
    at = radiation.interpolation(flat*system.frame_radius/system.air.sound_speed, basis.tables)
    Z, _ = dynamic_stiffness(system, flat, at, *matrices)
    source = np.zeros(len(flat), complex)
    if len(free):
        size = n_basis + len(free)
        whole = np.zeros((len(flat), size, size), complex)
        whole[:, :n_basis, :n_basis] = Z
        whole[:, :n_basis, n_basis:] = -model.loads[free].T
        whole[:, n_basis:, :n_basis] = -model.loads[free]
        line = (circuit.capacitance + circuit.conductance/(1j*flat[:, None, None]))[:, free][:, :, free]
        if circuit.source_resistance > 0:
            source = 1/(1j*flat*circuit.source_resistance)
            line[:, 0, 0] += source
        whole[:, n_basis:, n_basis:] = -line
        Z = whole
    inverse = np.linalg.inv(Z).reshape(n, n_comp - 1, *Z.shape[1:])
    return Problem(model, theta, free, inverse, np.linalg.inv(reduced.real[0]), audible, source.reshape(n, -1))


def solve(task: Problem, drive, start=None):
    """Balance for source voltages drive (n, n_comp) complex V, peak, the mean deviation from the bias first.

    Fixed point x <- (linear part)^-1 (drive - nonlinear remainder), all rows as one batch; a row that does not settle in
    ROUNDS rounds is returned with converged False.
    """
    n, n_comp = drive.shape
    n_basis, n_line = len(task.static), len(task.model.functions)
    x = np.zeros((n, n_comp, n_basis + n_line), complex) if start is None else start
    x = _round(task, drive, x, None)[0] if start is None else x
    converged, running = np.zeros(n, bool), np.ones(n, bool)
    change = np.full(n, np.inf)
    with np.errstate(all="ignore"):
        for _ in range(ROUNDS):
            rows = np.flatnonzero(running)
            if not len(rows):
                break
            new, _ = _round(task, drive, x[rows], rows)
            size = np.linalg.norm(new[..., :n_basis], axis=(1, 2))
            change[rows] = np.linalg.norm(new[..., :n_basis] - x[rows][..., :n_basis], axis=(1, 2))/np.maximum(size, 1e-300)
            good = np.isfinite(change[rows]) & (size < 1e3)
            x[rows[good]] = new[good]
            converged[rows] = change[rows] < TOLERANCE
            running[rows[~good]] = False
            running[rows[converged[rows]]] = False
    return x, converged


def _round(task, drive, x, rows):
    """One round of the fixed point on some rows: (new state, samples)."""
    every = slice(None) if rows is None else rows
    model, n_basis = task.model, len(task.static)
    q, line = sampled(task, x)
    shape = q.shape[:2]
    force, charge, least, field = (part.reshape(*shape, *part.shape[1:]) for part in _force(
        model, q.reshape(-1, n_basis), line.reshape(-1, line.shape[-1])))
    rest = force - model.constant - q @ model.tangent + line @ model.loads
    extra = charge - model.rest_charge - q @ model.loads.T - line @ model.capacitance
    N, E = (components(task, part) for part in (rest, extra))
    return _answer(task, drive[every], x, N, E, every), Samples(q, line, least, field)


def _answer(task, d, x, N, E, every):
    """What the linear part makes of a drive d and of the remainders N of force and E of charge."""
    model, n_basis = task.model, len(task.static)
    new = np.zeros_like(x)
    new[:, 0, :n_basis] = (d[:, :1]*model.loads[0] - N[:, 0]) @ task.static
    new[:, 0, n_basis] = d[:, 0]
    right = -N[:, 1:]
    if task.source.any():
        fed = np.zeros_like(E[:, 1:])
        fed[..., 0] = -task.source[every]*d[:, 1:]
        right = np.concatenate([right, (fed + E[:, 1:])[..., task.free]], axis=-1)
    else:
        right = right + d[:, 1:, None]*model.loads[0]
        held = (E[:, 1:] + d[:, 1:, None]*model.capacitance[:, 0])[..., task.free]
        right = np.concatenate([right, held], axis=-1)
        new[:, 1:, n_basis] = d[:, 1:]
    found = (task.inverse[every] @ right[..., None])[..., 0]*task.audible[every][..., None]
    new[:, 1:, :n_basis] = found[..., :n_basis]
    new[:, 1:, n_basis + task.free] = found[..., n_basis:]
    return new


def linear_answer(task, drive, still):
    """State components of the linear part alone for a drive (n, n_comp); still: zeros of the state's shape."""
    quiet = np.zeros((drive.shape[0], drive.shape[1], len(task.static))), np.zeros((*drive.shape, len(task.model.functions)))
    return _answer(task, drive, still, *quiet, slice(None))


def sampled(task, x):
    """Real samples (n, n_samples, ...) of the motion and of the line voltages of components x."""
    wave = np.exp(1j*task.theta)
    out = (wave.real @ x.real) - (wave.imag @ x.imag)
    n_basis = len(task.static)
    return out[..., :n_basis], out[..., n_basis:]


def components(task, samples):
    """Components (n, n_comp, ...) of real samples (n, n_samples, ...): the mean, then peak amplitudes."""
    wave = np.exp(-1j*task.theta).T*2/len(task.theta)
    wave[0] /= 2
    return wave.real @ samples + 1j*(wave.imag @ samples)


def balance(task, drive):
    """Balance of a problem, with Newton's method on the rows that the fixed point leaves."""
    x, converged = solve(task, drive)
    n_basis = len(task.static)
    _, samples = _round(task, drive, x, None)
    return Balance(x[..., :n_basis], x[..., n_basis:], converged, samples)
