"""The rest state of the biased film, and the judgement of it."""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from engine import film as flm
from engine import mesh as msh
from engine.branch import follow, graded_edges, unbiased, unresolved
from engine.errors import NoRestState

STATIC_ORDER = 10
MOST_STATIC_ELEMENTS = 16
RESOLVED = 1e-8          # last Legendre coefficient of a resolved shape, relative to the frame radius
COARSE = 1e-5            # what is enough to place a pull-in, and above which a finding says that the shape is not resolved


@dataclass(frozen=True)
class Finding:
    """One named remark on a result: what, where, how far, in words.

    name is "slack", "pull-in", "breakdown" (rest state) or another short name; at is "bias" or "peak of the drive";
    where is the reference radius in m (None: nowhere in particular); value and limit carry the compared quantities in
    SI units; text is one plain sentence.
    """

    name: str
    text: str
    at: str = "bias"
    where: float | None = None
    value: float | None = None
    limit: float | None = None


@dataclass(frozen=True)
class Equilibrium:
    """Rest state at the bias; arrays (n_nodes,) run from the centre's edge to the frame, in SI units, read-only."""

    reference_radius: np.ndarray
    radius: np.ndarray
    height: np.ndarray
    stretch_meridional: np.ndarray
    stretch_hoop: np.ndarray
    stress_meridional: np.ndarray   # Cauchy, Pa
    stress_hoop: np.ndarray
    field: np.ndarray               # V/m
    centre_height: float            # m above the frame plane
    capacitance: float              # F
    swept_volume: float             # m3 between the film with its centre and the frame plane
    peak_field: float               # V/m, largest anywhere, at the peak of the drive
    breakdown_ratio: float          # peak_field over the film's breakdown field
    least_stress: float             # Pa, smallest principal stress anywhere, at the peak of the drive
    conditions: tuple = ()          # of Finding


@dataclass(frozen=True)
class Rest:
    """Solved rest state on the static mesh: film, state at the bias, state at the peak of the drive (None: pulled in)."""

    film: flm.Film
    state: np.ndarray
    bias: float
    peak_state: np.ndarray | None
    peak_voltage: float
    pull_in_voltage: float | None


def peak_voltage(drive):
    """V, the highest voltage of the drive: bias + amplitude, or sqrt(V0^2 + 2 V0 v) for the square-root law."""
    if drive.law == "square-root":
        return float(np.sqrt(drive.bias**2 + 2*drive.bias*drive.amplitude))
    return drive.bias + drive.amplitude


def solve(design):
    """Rest state of a design on the static mesh, refined until the shape is resolved.

    Raises NoRestState (pull-in before the bias, with the voltage; a slack film without stiffness), NotConverged.
    """
    g, d = design.geometry, design.drive
    fields = g.centre_radius, g.frame_radius, design.film, design.electrodes, design.centre, d.bias
    film, q, K = _biased(*fields)
    peak = peak_voltage(d)
    top, _, end = follow(film, q, K, d.bias, peak)
    return Rest(film, q, d.bias, top if end is None else None, peak, end)


@lru_cache(maxsize=16)
def _biased(a, b, film_fields, electrodes, centre, bias):
    """(film, state, tangent) at the bias, on a mesh that resolves it."""
    n_elements = 4 + int(np.log(b/a)/3)
    while True:
        film = flm.from_fields(film_fields, electrodes, centre,
                               msh.build(graded_edges(a, b, n_elements), STATIC_ORDER))
        q, K = unbiased(film)
        q, K, end = follow(film, q, K, 0.0, bias)
        taut = extremes(film, q, bias)[0][0] > 0       # a slack film's wrinkles have no resolved shape here
        enough = np.inf if not taut else RESOLVED if end is None else COARSE
        if unresolved(film, q) > enough and 2*n_elements <= MOST_STATIC_ELEMENTS:
            n_elements *= 2
        elif end is None:
            return film, q, K
        else:
            raise NoRestState(
                f"The film pulls in at {end/1e3:.4g} kV, before the bias of {bias/1e3:.4g} kV: lower the bias, raise the "
                "prestretch or use a thicker film.", "pull-in", end)


def on_mesh(rest, mesh, state=None):
    """(film, state) of a solved rest state carried to another mesh."""
    film = replace(rest.film, mesh=mesh)
    radial, axial = flm.expand(rest.film, rest.state if state is None else state, at_rest=True)
    r, z = msh.interpolate(rest.film.mesh, np.stack([radial, axial]), mesh.radius)
    return film, flm.collect(film, r, z)


def extremes(film, q, voltage):
    """((least principal stress, reference radius), (largest field, reference radius)), element by element."""
    s1, s2, field = flm.cauchy_stress(film, q, voltage)
    r0 = film.mesh.local(film.mesh.radius)
    least = np.minimum(s1, s2)
    return (least.min(), r0.flat[least.argmin()]), (field.max(), r0.flat[field.argmax()])


def equilibrium(design):
    """Rest state of a design, with its findings.

    Newton iteration on dPi/dq = 0 with the exact tangent on the branch reached from zero bias; physics as in
    DEVELOPERS.md, "Rest state". Arrays run over the nodes of the static mesh.

    Returns: Equilibrium.
    Raises: NoRestState (pull-in before the bias, with the voltage; a slack film whose tangent is not positive
    definite); NotConverged.
    """
    rest = solve(design)
    return judge(design, rest, rest.film, rest.state)


def judge(design, rest, film, q):
    """Equilibrium of a solved rest state carried to a film's mesh as q, with what is wrong with it."""
    s1, s2, field = flm.cauchy_stress(film, q, rest.bias)
    e = flm.strain(film, q)
    radial, axial = flm.expand(film, q, at_rest=True)
    stretches = film.prestretch*np.sqrt(e.A), film.prestretch*np.sqrt(e.B)
    at_peak = rest.state if rest.peak_state is None else rest.peak_state
    at_bias = extremes(rest.film, rest.state, rest.bias)
    (least, _), (peak_field, _) = peak = extremes(rest.film, at_peak, rest.peak_voltage)
    findings = _findings(design, "bias", rest.bias, at_bias)
    named = {finding.name for finding in findings}
    if rest.pull_in_voltage is not None:
        findings.append(Finding(
            "pull-in", f"The film pulls in at {rest.pull_in_voltage/1e3:.4g} kV, below the peak of the drive at "
            f"{rest.peak_voltage/1e3:.4g} kV (held there without inertia).", "peak of the drive",
            value=rest.peak_voltage, limit=rest.pull_in_voltage))
    if unresolved(rest.film, rest.state) > COARSE:
        findings.append(Finding("resolution", "The rest shape turns too sharply somewhere to be resolved: take its "
                                "numbers as estimates."))
    findings += [f for f in _findings(design, "peak of the drive", rest.peak_voltage, peak) if f.name not in named]
    return Equilibrium(
        reference_radius=film.mesh.radius, radius=frozen(radial), height=frozen(axial),
        stretch_meridional=_nodal(film, stretches[0]), stretch_hoop=_nodal(film, stretches[1]),
        stress_meridional=_nodal(film, s1), stress_hoop=_nodal(film, s2), field=_nodal(film, field),
        centre_height=float(q[0]), capacitance=float(flm.capacitance(film, q)),
        swept_volume=float(flm.swept_volume(film, q)[0]), peak_field=float(peak_field),
        breakdown_ratio=float(peak_field/design.film.breakdown_field), least_stress=float(least),
        conditions=tuple(findings))


def _findings(design, at, voltage, found):
    """Slack and breakdown at one voltage."""
    (stress, slack_at), (field, field_at) = found
    limit = design.film.breakdown_field
    findings = []
    if stress <= 0:
        findings.append(Finding(
            "slack", f"The film goes slack and wrinkles at {slack_at*1e3:.3g} mm from the axis at the {at} "
            f"({voltage/1e3:.3g} kV): its least stress is {stress/1e3:.3g} kPa.", at, float(slack_at), float(stress), 0.0))
    if field >= limit:
        findings.append(Finding(
            "breakdown", f"The field reaches {field/1e6:.3g} V/µm at {field_at*1e3:.3g} mm from the axis at the {at} "
            f"({voltage/1e3:.3g} kV), {field/limit:.0%} of the film's breakdown field.", at, float(field_at),
            float(field), float(limit)))
    return findings


def frozen(array):
    """The array, made read-only."""
    array.setflags(write=False)
    return array


def _nodal(film, values):
    """Element values (n_elements, order+1) at the nodes; the outer element speaks for a shared edge."""
    out = np.empty(film.mesh.n_nodes)
    out[film.mesh.nodes] = values
    return frozen(out)
