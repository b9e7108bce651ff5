"""The film's full force, charge, stress and field over sampled motions on a basis, for many motions at once.

A motion is given by real coefficients of time functions: the cosines and sines of harmonic balance, or samples themselves.
"""

from dataclasses import dataclass, fields, replace

import numpy as np

from engine import film as flm

BLOCK = 60_000          # numbers of one field that are worked on at a time: they stay in the processor's cache


@dataclass(frozen=True)
class Nonlinear:
    """The film about its rest state on n_basis vectors and n_line line functions, at n_points of the mesh."""

    film: flm.Film
    bias: float
    rest: np.ndarray             # (3, n_points): r, r', z'
    reference_radius: np.ndarray  # (n_points,) m
    fields: np.ndarray           # (n_basis, 3 n_points): of each vector, r, r', z'
    weights: np.ndarray          # (3 n_points, n_basis): from w_B r, w_A r', w_A z' to the force
    area: np.ndarray             # (n_points,) m2
    centre: np.ndarray           # (n_basis,): rise of the centre
    functions: np.ndarray        # (n_line, n_points)
    tangent: np.ndarray          # K (n_basis, n_basis), without the rear
    loads: np.ndarray            # (n_line, n_basis)
    capacitance: np.ndarray      # (n_line, n_line)
    constant: np.ndarray         # (n_basis,) force at rest, the spring's part left out
    rest_charge: np.ndarray      # (n_line,) C

    def astype(self, kind):
        """The same in another precision."""
        return replace(self, **{f.name: getattr(self, f.name).astype(kind) for f in fields(self) if f.type is np.ndarray})


@dataclass(frozen=True)
class Extremes:
    """Over the cycle, each (n,): least stress Pa, peak field V/m; extra_volume (n, n_samples) m3: S(q) - S0 - s q."""

    least_stress: np.ndarray
    peak_field: np.ndarray
    extra_volume: np.ndarray


def nonlinear(system, basis, reduced):
    """The film's force on a basis about a system's rest state; reduced: motion.reduce(system, basis)."""
    film, mesh = system.film, system.film.mesh
    radial, axial = flm.expand(film, basis.shapes)
    each = np.concatenate([part.reshape(len(part), -1) for part in (
        mesh.local(radial), mesh.derivative(radial), mesh.derivative(axial))], axis=1)
    v = basis.shapes @ system.volume
    e = flm.strain(film, system.state)
    area, r0 = film.area.ravel(), mesh.local_radius.ravel()
    functions = system.circuit.functions[:, mesh.nodes].reshape(len(system.circuit.functions), -1)
    made = Nonlinear(
        film, float(system.rest.bias), np.stack([e.r.ravel(), e.dr.ravel(), e.dz.ravel()]), r0, each,
        (each*np.concatenate([2*area/r0**2, 2*area, 2*area])).T.copy(), area, basis.shapes[:, 0], functions,
        reduced.real[0] - system.rear.stiffness*np.outer(v, v), reduced.loads, system.circuit.capacitance,
        np.zeros(len(v)), np.zeros(len(functions)))
    one = np.ones((1, 1))
    force, charge = force_and_charge(made, np.zeros((1, 1, len(v))), np.zeros((1, 1, len(functions))), one, one, True)
    return replace(made, constant=force[0, 0], rest_charge=charge[0, 0])


def _fields(model, motion, line, wave):
    """r, r', z' (n, n_samples, n_points) of motions and V, which broadcasts against them."""
    y = motion @ model.fields
    y = y if wave is None else wave @ y
    r, dr, dz = np.split(y, 3, axis=-1)
    for part, rest in zip((r, dr, dz), model.rest, strict=True):
        part += rest
    volts = line if wave is None else wave @ line
    return y, r, dr, dz, model.bias + (volts if len(model.functions) == 1 else volts @ model.functions)


def _blocks(n, n_samples, n_points):
    step = max(1, BLOCK//(n_samples*n_points))
    return [slice(i, i + step) for i in range(0, n, step)]


def force_and_charge(model, motion, line, wave, back, charged):
    """Coefficients of dPi/dq (n, n_coef, n_basis) and of the charge (n, n_coef, n_line), None unless charged.

    Parameters: motion (n, n_coef, n_basis) m, line (n, n_coef, n_line) V of signal: coefficients of the time functions
    wave (n_samples, n_coef); back (n_coef, n_samples) takes samples to coefficients; both None: the coefficients are the
    samples themselves. One precision throughout.
    """
    n, n_coef, _ = motion.shape
    n_points = len(model.area)
    force = np.empty((n, n_coef, motion.shape[2]), motion.dtype)
    charge = np.empty((n, n_coef, len(model.functions)), motion.dtype) if charged else None
    for block in _blocks(n, n_coef if wave is None else len(wave), n_points):
        y, r, dr, dz, V = _fields(model, motion[block], line[block], wave)
        A, B = dr*dr + dz*dz, r/model.reference_radius
        B *= B
        if charged:
            C = A*B
            C *= model.area*model.film.areal_capacitance
            C *= V
            charge[block] = (C if back is None else back @ C) @ model.functions.T
        wA, wB = flm.energy_slopes(model.film, A, B, V)
        r *= wB
        dr *= wA
        dz *= wA
        force[block] = (y if back is None else back @ y) @ model.weights
    force += model.film.spring_rate*(motion @ model.centre)[..., None]*model.centre
    return force, charge


def extremes(model, motion, line, wave):
    """Extremes of motions given as in force_and_charge."""
    n, film = len(motion), model.film
    n_samples = motion.shape[1] if wave is None else len(wave)
    out = Extremes(np.empty(n), np.empty(n), np.empty((n, n_samples)))
    for block in _blocks(n, n_samples, len(model.area)):
        _, r, dr, dz, V = _fields(model, motion[block], line[block], wave)
        A, B = dr*dr + dz*dz, (r/model.reference_radius)**2
        wA, wB = flm.energy_slopes(film, A, B, V, electrodes=False)
        out.least_stress[block] = 2*np.minimum(A*wA, B*wB).min(axis=(1, 2))/film.thickness
        out.peak_field[block] = np.sqrt((V*V*A*B).max(axis=(1, 2)))/film.layer_thickness
        out.extra_volume[block] = _extra(model, r - model.rest[0], dz - model.rest[2])
    return out


def _extra(model, u, slope):
    """S(q) - S0 - s q: of -pi (r+u)^2 (z'+slope) the terms of second and third order in u, slope (..., n_points)."""
    r, _, dz = model.rest
    return -np.pi*((u*u*(dz + slope) + 2*r*u*slope) @ (model.area/(2*np.pi*model.reference_radius)))


def extra_volume(model, motion):
    """(n_samples,) m3: S(q) - S0 - s q of motions (n_samples, n_basis)."""
    n = len(model.area)
    radial, slopes = model.fields[:, :n], model.fields[:, 2*n:]
    return np.concatenate([_extra(model, part @ radial, part @ slopes)
                           for part in np.split(motion, np.arange(1000, len(motion), 1000))])
