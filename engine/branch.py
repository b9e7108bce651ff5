"""Finding and following the stable branch of rest states: Newton's method, descent, continuation in voltage."""

import numpy as np
from scipy.linalg.lapack import dposv, dpotrf

from engine import film as flm
from engine import mesh as msh
from engine.errors import NoRestState, NotConverged

MOST_STEPS = 150         # of voltage, before the branch is given up
DRAWN = 1e-4             # the same where the branch is only to be drawn
SETTLED = 3e-6           # Newton step, relative to the frame radius, after which the next would be below 1e-10


def is_stable(K):
    """Whether the tangent is positive definite, by a margin above round-off."""
    shifted = K.copy()
    shifted.flat[::len(K) + 1] -= 1e-10*np.trace(K)/len(K)
    return dpotrf(shifted.T, lower=1, overwrite_a=1)[1] == 0


def solve(K, g):
    """K^-1 g of a symmetric matrix, by Cholesky where it is positive definite; None where it is singular."""
    _, x, failed = dposv(K.T, g, lower=1)       # the transposed view is in the order that LAPACK reads
    if failed:
        try:
            x = np.linalg.solve(K, g)
        except np.linalg.LinAlgError:
            return None
    return x


def newton(film, q, voltage, most=12, settled=SETTLED, within=np.inf):
    """Plain Newton iteration: (state, tangent), or None where it does not converge in a few steps or strays from q."""
    start = q
    for _ in range(most):
        energy, g, K = flm.linearise(film, q, voltage)
        step = solve(K, g) if np.isfinite(energy) and np.isfinite(K.sum()) else None
        if step is None:
            return None
        q = q - step
        size = np.max(np.abs(step))
        if not size < film.mesh.edges[-1] or np.max(np.abs(q - start)) > within:
            return None
        if size < settled*film.mesh.edges[-1]:
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
        if found is not None and is_stable(found[1]):
            return found
        found = descend(film, q)
    if not is_stable(found[1]):
        raise NoRestState("The film is slack without voltage and has no stiffness of its own: raise the prestretch, or "
                          "the height at which the spring is unloaded.", "slack")
    return found


def follow(film, q, K, start, stop, settled=SETTLED):
    """Follow the stable branch from voltage start to stop: (state, tangent, None), or (last, tangent, voltage it ends at)."""
    *_, (q, K, _, end) = [(q, K, start, None), *march(film, q, K, start, stop, settled)]
    return q, K, end


def march(film, q, K, start, stop, settled=SETTLED):
    """Points (state, tangent, voltage, None) of the stable branch from start to stop, where it ends early with the voltage.

    Euler predictor in V^2, Newton corrector; a step counts only if the tangent stays positive definite and the
    correction stays small against the prediction, so a snap to another branch is not taken for this one. The last point
    of a branch that ends carries the voltage it ends at in place of None. Raises NotConverged.
    """
    s, goal = start**2/2, stop**2/2
    step = goal - s
    for _ in range(MOST_STEPS):
        if s >= goal:
            return
        step = min(step, goal - s)
        predicted = step*solve(K, flm.electrode_load(film, q, 1.0))
        moved = np.max(np.abs(predicted))
        near = 0.5*moved + 1e-3*film.mesh.edges[-1]
        voltage = float(np.sqrt(2*(s + step))) if s + step < goal else stop
        with np.errstate(all="ignore"):
            found = newton(film, q + predicted, voltage, 6, settled, near) if moved < film.mesh.edges[-1] else None
        if found is not None and is_stable(found[1]):
            (q, K), s, step = found, s + step, 1.5*step
            yield q, K, voltage, None
        else:
            step /= 3
            if step < 6e-4*(s + step):         # 3e-4 in voltage
                end = float(np.sqrt(2*s))
                yield q, K, end, end
                return
    raise NotConverged(f"The film's shape could not be followed beyond {np.sqrt(2*s)/1e3:.4g} kV: lower the bias.")


def graded_edges(a, b, n_elements):
    """Edges graded towards a small centre: half of the density even, half logarithmic."""
    r0 = a*np.exp(np.log(b/a)*np.linspace(0.0, 1.0, 400))
    r0[-1] = b
    return msh.equidistributed(1/(b - a) + 1/(r0*np.log(b/a)), r0, n_elements)


def unresolved(film, q):
    """Largest of an element's last two Legendre coefficients of the shape, relative to the frame radius."""
    values = film.mesh.local(np.stack(flm.expand(film, q, at_rest=True)))
    last = values @ msh.to_legendre(film.mesh.order)[-2:].T
    return np.max(np.abs(last))/film.mesh.edges[-1]


def arc(film, q, K, voltage, length=0.1, most=200, settled=SETTLED):
    """Points (state, voltage, tangent) along the branch through turning points, by pseudo-arc-length in (q, V^2/2).

    Starts at a known point and yields the next ones without end, until `most`, a return to zero voltage or a step that
    does not converge; length is the first step; 1 moves the film by some frame radii.

    Source: Keller 1977 (pseudo-arc-length continuation), Riks 1979.
    """
    b, s = film.mesh.edges[-1], voltage**2/2
    F = flm.electrode_load(film, q, 1.0)
    per_s = np.linalg.solve(K, F)
    scale = min(b/max(np.max(np.abs(per_s)), 1e-300)*0.5, max(s, 1.0)*10)      # of s: what moves the film by half of b
    weight = 1/(len(q)*b**2)
    tangent = _unit(per_s, 1.0, weight, scale)
    for _ in range(most):
        found = _arc_step(film, q, s, tangent, length, weight, scale, settled)
        while found is None and length > 1e-4:
            length /= 2
            found = _arc_step(film, q, s, tangent, length, weight, scale, settled)
        if found is None or found[1] < 0:
            return
        q, s, K, F = found
        turned = _unit(np.linalg.solve(K, F), 1.0, weight, scale)
        along = weight*(turned[0] @ tangent[0]) + turned[1]*tangent[1]/scale**2
        tangent = turned if along > 0 else (-turned[0], -turned[1])
        length = min(1.3*length, 0.3)
        yield q, float(np.sqrt(2*s)), K


def _unit(dq, ds, weight, scale):
    """(dq, ds) at length 1 in the arc's measure."""
    length = np.sqrt(weight*(dq @ dq) + (ds/scale)**2)
    return dq/length, ds/length


def _arc_step(film, q, s, tangent, step, weight, scale, settled):
    """Newton on the equilibrium and the distance along the tangent: (state, V^2/2, tangent matrix, load), or None."""
    dq, ds = tangent
    q1, s1 = q + step*dq, s + step*ds
    with np.errstate(all="ignore"):
        for _ in range(8):
            if s1 < 0:
                return q1, s1, None, None
            energy, g, K = flm.linearise(film, q1, np.sqrt(2*s1))
            F = flm.electrode_load(film, q1, 1.0)
            if not np.isfinite(energy) or not np.all(np.isfinite(K)):
                return None
            a, c = np.linalg.solve(K, np.stack([g, F], axis=1)).T
            miss = weight*(dq @ (q1 - q)) + ds*(s1 - s)/scale**2 - step
            change = (weight*(dq @ a) - miss)/(weight*(dq @ c) + ds/scale**2)
            move = c*change - a
            q1, s1 = q1 + move, s1 + change
            size = np.max(np.abs(move))/film.mesh.edges[-1]
            if not size < 1:
                return None
            if size < settled:
                return (q1, s1, K, F) if s1 >= 0 else (q1, s1, None, None)
    return None
