"""The rest state of the biased film, and the judgement of it."""

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from engine import film as flm
from engine import mesh as msh
from engine.errors import NoRestState, NotConverged

STATIC_ORDER = 10
MOST_STATIC_ELEMENTS = 16
MOST_STEPS = 150         # of voltage, before the branch is given up
SETTLED = 3e-6           # Newton step, relative to the frame radius, after which the next would be below 1e-10
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


def _is_stable(K):
    """Whether the tangent is positive definite, by a margin above round-off."""
    margin = 1e-10*np.trace(K)/len(K)
    try:
        np.linalg.cholesky(K - margin*np.eye(len(K)))
    except np.linalg.LinAlgError:
        return False
    return True


def _newton(film, q, voltage, most=12):
    """Plain Newton iteration: (state, tangent), or None where it does not converge in a few steps."""
    for _ in range(most):
        energy, g, K = flm.linearise(film, q, voltage)
        if not np.isfinite(energy) or not np.all(np.isfinite(K)):
            return None
        try:
            step = np.linalg.solve(K, g)
        except np.linalg.LinAlgError:
            return None
        q = q - step
        size = np.max(np.abs(step))
        if not size < film.mesh.edges[-1]:
            return None
        if size < SETTLED*film.mesh.edges[-1]:
            return q, K
    return None


def _descend(film, q, voltage=0.0, most=200):
    """Minimise the potential by Newton steps with a shift where the tangent is not positive and a backtracking search."""
    energy, g, K = flm.linearise(film, q, voltage)
    b = film.mesh.edges[-1]
    shift = 0.0
    for _ in range(most):
        scale = np.trace(np.abs(K))/len(K)
        try:
            np.linalg.cholesky(K + shift*np.eye(len(K)))
        except np.linalg.LinAlgError:
            shift = max(4*shift, 1e-6*scale)
            continue
        step = -np.linalg.solve(K + shift*np.eye(len(K)), g)
        length = min(1.0, b/np.max(np.abs(step)))
        with np.errstate(all="ignore"):
            while length > 1e-12:
                trial = flm.potential(film, q + length*step, voltage)
                if trial <= energy + 1e-4*length*(g @ step) + 1e-13*abs(energy):
                    break
                length /= 2
        q = q + length*step
        energy, g, K = flm.linearise(film, q, voltage)
        if np.max(np.abs(step)) < 1e-9*b and (shift == 0 or shift <= 1e-6*scale):
            return q, K
        shift = shift/8 if shift > 1e-9*scale else 0.0
    raise NotConverged("The rest shape without voltage was not found; change the spring's free height in smaller steps.")


def _start(film):
    """Closed-form start: the log profile that balances the spring against the flat film's tension, no voltage."""
    r0 = film.mesh.radius
    a, b = r0[[0, -1]]
    tension = 2*flm.surface_energy(film, np.ones(1), np.ones(1), 0.0)[1][0]
    stiffness = 2*np.pi*max(tension, 1e-3*film.shear_modulus*film.thickness)/np.log(b/a)
    height = film.spring_free_height*film.spring_rate/(film.spring_rate + stiffness) if film.spring_rate else 0.0
    return flm.collect(film, r0, height*np.log(b/r0)/np.log(b/a))


def unbiased(film):
    """(state, tangent) without voltage.

    Raises NoRestState with reason "slack" where the film has no stiffness, NotConverged where no shape is found.
    """
    q = _start(film)
    while not np.isfinite(flm.potential(film, q, 0.0)):       # the strain energy's limit: start lower
        q[0::2] /= 2
        if np.max(np.abs(q[0::2])) < 1e-12:
            raise NoRestState("The prestretch is beyond the film's limiting stretch: lower the prestretch or raise "
                              "the limit in film.law_parameters.", "stretch-limit")
    with np.errstate(all="ignore"):
        found = _newton(film, q, 0.0)
        if found is None or not _is_stable(found[1]):
            found = _descend(film, q)
    if not _is_stable(found[1]):
        raise NoRestState("The film is slack without voltage and has no stiffness of its own: raise the prestretch, or "
                          "the height at which the spring is unloaded.", "slack")
    return found


def follow(film, q, K, start, stop):
    """Follow the stable branch from voltage start to stop: (state, tangent, None), or (last, tangent, voltage it ends at).

    Euler predictor in V^2, Newton corrector; a step counts only if the tangent stays positive definite and the
    correction stays small against the prediction, so a snap to another branch is not taken for this one.
    """
    s, goal = start**2/2, stop**2/2
    step = goal - s
    for _ in range(MOST_STEPS):
        if s >= goal:
            return q, K, None
        step = min(step, goal - s)
        predicted = step*np.linalg.solve(K, flm.electrode_load(film, q, 1.0))
        moved = np.max(np.abs(predicted))
        near = 0.5*moved + 1e-3*film.mesh.edges[-1]
        voltage = np.sqrt(2*(s + step)) if s + step < goal else stop
        with np.errstate(all="ignore"):
            found = _newton(film, q + predicted, voltage, most=6) if moved < film.mesh.edges[-1] else None
        if found is not None and np.max(np.abs(found[0] - q - predicted)) <= near and _is_stable(found[1]):
            (q, K), s, step = found, s + step, 1.5*step
        else:
            step /= 3
            if step < 2e-4*(s + step):         # 1e-4 in voltage
                return q, K, float(np.sqrt(2*s))
    raise NotConverged(f"The film's shape could not be followed beyond {np.sqrt(2*s)/1e3:.4g} kV: lower the bias.")


def _static_edges(a, b, n_elements):
    """Edges graded towards a small centre: half of the density even, half logarithmic."""
    r0 = np.geomspace(a, b, 400)
    return msh.equidistributed(1/(b - a) + 1/(r0*np.log(b/a)), r0, n_elements)


def _unresolved(film, q):
    """Largest of an element's last two Legendre coefficients of the shape, relative to the frame radius."""
    values = film.mesh.local(np.stack(flm.expand(film, q, at_rest=True)))
    last = values @ msh.to_legendre(film.mesh.order)[-2:].T
    return np.max(np.abs(last))/film.mesh.edges[-1]


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
                               msh.build(_static_edges(a, b, n_elements), STATIC_ORDER))
        q, K = unbiased(film)
        q, K, end = follow(film, q, K, 0.0, bias)
        taut = extremes(film, q, bias)[0][0] > 0       # a slack film's wrinkles have no resolved shape here
        enough = np.inf if not taut else RESOLVED if end is None else COARSE
        if _unresolved(film, q) > enough and 2*n_elements <= MOST_STATIC_ELEMENTS:
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
    if _unresolved(rest.film, rest.state) > COARSE:
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
