"""The voltage window: what the rest state and the modes do as the bias rises, and the walls it must stay between."""

from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import islice, pairwise

import numpy as np
import scipy.linalg

from engine import air, radiation, rear, source, statics
from engine import film as flm
from engine.branch import DRAWN, arc, follow, is_stable, march
from engine.design import Drive, Listener
from engine.statics import extremes, frozen, peak_voltage

HIGHEST_BIAS = 20e3           # V, the bound of the bias
N_BIAS, N_MODES = 60, 8
FIRST_REACH = 100.0           # V
N_BEYOND = 8                 # points drawn past a turning point
KNOWN_EVERY = 8               # states from one whole eigenproblem and air mass to the next
SPARE = 4                     # shapes beyond the modes wanted, among which they are sought between those
LAST_TENSION = 2e-3           # of the unbiased one: what the last stable state of a flat film has left
N_POLYNOMIALS = 24            # of the air's mass: enough for the lowest modes


@dataclass(frozen=True)
class VoltageWindow:
    """Rest states along the branch from zero bias, past its turning point where one lies in the picture; SI, read-only.

    bias is ascending up to the turning point (stable states); what follows it is drawn only (unstable or snapped).
    frequency is NaN-free: an unstable state's imaginary frequencies are put at 0.
    """

    bias: np.ndarray             # (n_bias,) V
    stable: np.ndarray           # (n_bias,) bool
    centre_height: np.ndarray    # (n_bias,) m
    peak_field: np.ndarray       # (n_bias,) V/m
    least_stress: np.ndarray     # (n_bias,) Pa
    capacitance: np.ndarray      # (n_bias,) F
    field: np.ndarray            # (n_bias, n_points) V/m, at the mesh's points
    area: np.ndarray             # (n_bias, n_points) m2, of deformed film at them
    frequency: np.ndarray        # (n_bias, n_modes) Hz, in air, rear included
    slack_voltage: float | None          # where the least principal stress falls to zero
    pull_in_voltage: float | None        # where the stable branch ends
    breakdown_voltage: float | None      # where the largest field reaches the film's breakdown field


def voltage_window(design, n_bias=N_BIAS, n_modes=N_MODES):
    """Voltage window of a design: n_bias rest states from zero to beyond its walls, n_modes lowest modes at each.

    The walls are searched up to the highest bias a design may have, 20 kV, each to 0.1 %; None: not reached. A turning
    point is followed by pseudo-arc-length. Where the last wall is passed, the window reaches on in doublings of 100 V
    until it holds the peak of the drive, so that moving the drive seldom changes it.

    Returns: VoltageWindow.
    Raises: NoRestState where there is no stable rest state even without bias; NotConverged.
    """
    doublings = np.ceil(np.log2(max(1.25*peak_voltage(design.drive), FIRST_REACH)/FIRST_REACH))
    without = replace(design, name="-", note="", drive=Drive(bias=0.0, amplitude=0.0), listener=Listener())
    return _window(without, n_bias, n_modes, float(FIRST_REACH*2**doublings))


@lru_cache(maxsize=8)
def _window(design, n_bias, n_modes, reach):
    """voltage_window of a design without drive, to at least `reach` volts where the film holds so long."""
    start = statics.solve(design)
    film, q = start.film, start.state
    K = flm.linearise(film, q, 0.0)[2]
    path = [(q, K, 0.0, None), *march(film, q, K, 0.0, HIGHEST_BIAS)]
    pull_in = path[-1][3]
    slack = _crossing(film, path, lambda q, V: extremes(film, q, V)[0][0], 0.0)
    if slack is None and pull_in is not None and _least(film, path[-1]) < LAST_TENSION*_least(film, path[0]):
        slack = pull_in        # a flat film loses its tension and its stability together
    breakdown = _crossing(film, path, lambda q, V: -extremes(film, q, V)[1][0], -design.film.breakdown_field)
    last = max((v for v in (slack, pull_in, breakdown) if v is not None), default=0.0)
    wanted = max(reach if reach > last else 0.0, 1.08*last)
    top = min(wanted, pull_in or HIGHEST_BIAS, HIGHEST_BIAS)
    along = np.linspace(0.0, 1.0, n_bias)
    if pull_in is not None and top == pull_in:
        along = 1 - (1 - along)**1.5             # closer together where everything turns
    points = list(_stable_points(film, path, top*along))
    if pull_in is not None and top == pull_in:
        q, K, V, _ = points[-1]
        points += [(q, K, V, None) for q, V, K in islice(arc(film, q, K, V, settled=DRAWN), N_BEYOND)]
    return _collect(design, film, points, n_modes, n_bias, slack, pull_in, breakdown)


def _least(film, point):
    return extremes(film, point[0], point[2])[0][0]


def _stable_points(film, path, voltages):
    """States at ascending voltages, each from the nearest known one below."""
    known = np.array([point[2] for point in path])
    q, K, here = path[0][:3]
    for V in voltages:
        i = int(np.searchsorted(known, V, side="right")) - 1
        if known[i] > here:
            q, K, here = path[i][:3]
        if here < V:
            q, K, end = follow(film, q, K, here, V, DRAWN)
            V = V if end is None else end
            here = V
        yield q, K, float(V), None


def _crossing(film, path, value, level):
    """Voltage, to 4e-4, at which value(state, voltage) falls to level on the stable path; None where it does not."""
    values = [value(point[0], point[2]) - level for point in path]
    fallen = next((i for i, v in enumerate(values) if v <= 0), None)
    if fallen is None:
        return None
    if fallen == 0:
        return 0.0
    (q, K, low, _), high = path[fallen - 1], path[fallen][2]
    f_low, f_high = values[fallen - 1], values[fallen]
    for _ in range(60):
        if high - low < 4e-4*high:
            break
        share = np.clip(f_low/(f_low - f_high), 0.02, 0.98)
        middle = np.sqrt(low**2 + share*(high**2 - low**2))
        there, K_there, _ = follow(film, q, K, low, middle)
        f = value(there, middle) - level
        if f > 0:
            q, K, low, f_low, f_high = there, K_there, middle, f, f_high/2
        else:
            high, f_high, f_low = middle, f, f_low/2
    return float(high)


def _collect(design, film, points, n_modes, n_bias, slack, pull_in, breakdown):
    states, volts = np.stack([q for q, *_ in points]), np.array([V for _, _, V, _ in points])
    s1, s2, field = flm.cauchy_stress(film, states, volts[:, None, None])
    e = flm.strain(film, states)
    stretched = (e.A*e.B).reshape(len(points), -1)
    flat = film.area.ravel()
    return VoltageWindow(
        bias=frozen(volts),
        stable=frozen(np.array([i < n_bias or is_stable(K) for i, (_, K, _, _) in enumerate(points)])),
        centre_height=frozen(states[:, 0].copy()), peak_field=frozen(field.max(axis=(1, 2))),
        least_stress=frozen(np.minimum(s1, s2).min(axis=(1, 2))),
        capacitance=frozen(film.areal_capacitance*(stretched @ flat)), field=frozen(field.reshape(len(points), -1)),
        area=frozen(flat*np.sqrt(stretched)), frequency=frozen(_frequencies(design, film, points, n_modes)),
        slack_voltage=slack, pull_in_voltage=pull_in, breakdown_voltage=breakdown)


def _frequencies(design, film, points, n_modes):
    """(n_points, n_modes) Hz of the lowest modes in air about states on the static mesh; imaginary ones at 0.

    At every KNOWN_EVERY-th state the whole eigenproblem is solved; between two of them the modes are sought among the
    lowest shapes of both (Rayleigh-Ritz: second order in what they miss), the air's mass interpolated.
    """
    gas = air.properties(design.air.temperature, design.air.pressure, design.air.relative_humidity)
    behind = rear.from_design(design, gas)
    heavy = behind.faces*gas.density*design.air.load
    known = sorted({*range(0, len(points), KNOWN_EVERY), len(points) - 1})
    masses = {i: np.diag(film.mass) + heavy*_air_mass(film, points[i][0]) for i in known}
    stiffness = {i: _with_rear(behind, film, *points[i][:2]) for i in known}
    whole = {i: scipy.linalg.eigh(stiffness[i], masses[i], check_finite=False) for i in known}
    squares = np.empty((len(points), n_modes))
    for i in known:
        squares[i] = whole[i][0][:n_modes]
    for below, above in pairwise(known):
        P = np.concatenate([whole[i][1][:, :n_modes + SPARE].T for i in (below, above)])
        P = scipy.linalg.qr(P.T, mode="economic", check_finite=False)[0].T
        ends = [P @ masses[i] @ P.T for i in (below, above)]
        for i in range(below + 1, above):
            share = (i - below)/(above - below)
            K = P @ _with_rear(behind, film, *points[i][:2]) @ P.T
            squares[i] = scipy.linalg.eigh(K, (1 - share)*ends[0] + share*ends[1], eigvals_only=True,
                                           check_finite=False)[:n_modes]
    return np.sqrt(np.maximum(squares, 0))/(2*np.pi)


def _with_rear(behind, film, q, K):
    """The tangent with the air behind the film."""
    if not behind.stiffness:
        return K
    s = flm.swept_volume(film, q)[1]
    return K + behind.stiffness*np.outer(s, s)


def _air_mass(film, q):
    """Low-frequency air mass of one face over the free numbers, per density of air, m3."""
    b = film.mesh.edges[-1]
    emitter = source.sample(film, q, film.mesh.order + 6)
    c = source.flow_projection(emitter, radiation.projection_matrix(emitter.radius/b, N_POLYNOMIALS)/(2*np.pi*b**2))
    return b**3*(c.T @ (radiation.static_mass_matrix(N_POLYNOMIALS) @ c))
