"""Finding and following the stable branch of rest states: Newton's method, descent, continuation in voltage."""

import numpy as np

from engine import film as flm
from engine import mesh as msh
from engine.errors import NoRestState, NotConverged

MOST_STEPS = 150         # of voltage, before the branch is given up
SETTLED = 3e-6           # Newton step, relative to the frame radius, after which the next would be below 1e-10


def is_stable(K):
    """Whether the tangent is positive definite, by a margin above round-off."""
    margin = 1e-10*np.trace(K)/len(K)
    try:
        np.linalg.cholesky(K - margin*np.eye(len(K)))
    except np.linalg.LinAlgError:
        return False
    return True


def newton(film, q, voltage, most=12):
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


def descend(film, q, voltage=0.0, most=200):
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
        found = newton(film, q, 0.0)
        if found is None or not is_stable(found[1]):
            found = descend(film, q)
    if not is_stable(found[1]):
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
            found = newton(film, q + predicted, voltage, most=6) if moved < film.mesh.edges[-1] else None
        if found is not None and np.max(np.abs(found[0] - q - predicted)) <= near and is_stable(found[1]):
            (q, K), s, step = found, s + step, 1.5*step
        else:
            step /= 3
            if step < 2e-4*(s + step):         # 1e-4 in voltage
                return q, K, float(np.sqrt(2*s))
    raise NotConverged(f"The film's shape could not be followed beyond {np.sqrt(2*s)/1e3:.4g} kV: lower the bias.")


def graded_edges(a, b, n_elements):
    """Edges graded towards a small centre: half of the density even, half logarithmic."""
    r0 = np.geomspace(a, b, 400)
    return msh.equidistributed(1/(b - a) + 1/(r0*np.log(b/a)), r0, n_elements)


def unresolved(film, q):
    """Largest of an element's last two Legendre coefficients of the shape, relative to the frame radius."""
    values = film.mesh.local(np.stack(flm.expand(film, q, at_rest=True)))
    last = values @ msh.to_legendre(film.mesh.order)[-2:].T
    return np.max(np.abs(last))/film.mesh.edges[-1]
