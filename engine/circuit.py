"""Electrodes and source: the voltage that reaches the film, and the current that the film and its motion draw.

Line of the electrodes, fed at their outer edge, and mechanics, coupled both ways (N_j the nodal functions):

    (Y + i omega C) v + i omega Gamma^T q + e_b (v_b - v_s)/R_s = 0        [dynamic stiffness] q = Gamma v
    Gamma = -d2Pi/dq dv_j,  Y = int 2 pi r N'N'/(R sqrt(A)) dr0,  C_jk = int (N eps J^2/t) N_j N_k dA0

The voltage along the line is expanded in a few functions: 1, and ones that vanish at the fed edge.
"""

from dataclasses import dataclass

import numpy as np
import scipy.linalg

from engine import film as flm

LINE_FREQUENCIES = 9         # between the ends of the band, at which the line's own answer is in the expansion
KEPT = 1e-8                  # of the largest: functions below it are left out


@dataclass(frozen=True)
class Circuit:
    """Line and source on n_line functions, the first of which is 1.

    loads (n_line, n_dof) N/V: Gamma on each function; capacitance, conductance (n_line, n_line) F, S; inner (n_line,):
    the functions at the inner edge; source_resistance ohm; functions (n_line, n_nodes) on the mesh.
    """

    loads: np.ndarray
    capacitance: np.ndarray
    conductance: np.ndarray
    inner: np.ndarray
    source_resistance: float
    functions: np.ndarray


def sheet_pair_resistance(resistance, layers):
    """Ohm per square of both polarities in series: N+1 interleaved sheets, every other one in parallel."""
    return resistance*(1/(layers//2 + 1) + 1/-(-layers//2))


def build(film, q, voltage, electrodes, drive, layers, band):
    """Circuit of a film at rest; band (low, high) Hz is where the line's expansion has to hold.

    Source: telegraph equation of a disk without inductance (Carslaw & Jaeger 1959, sec. 7.6: the same as diffusion).
    """
    c, gamma = _line(film, q, voltage)
    resistance = sheet_pair_resistance(electrodes.sheet_resistance, layers)
    n = film.mesh.n_nodes
    functions = np.ones((1, n))
    Y = np.zeros((n, n))
    if resistance > 0:
        Y = _conductance(film, q, resistance)
        functions = np.concatenate([functions, _expansion(Y, c, gamma, band)])
    return Circuit(functions @ gamma.T, (functions*c) @ functions.T, functions @ Y @ functions.T, functions[:, 0],
                   drive.source_resistance, functions)


def _line(film, q, voltage):
    """Nodal capacitance (n_nodes,) F and Gamma (n_dof, n_nodes) N/V."""
    e = flm.strain(film, q)
    rows = flm.strain_rows(film, e)
    p1, nodes = film.mesh.order + 1, film.mesh.nodes
    c = np.zeros(film.mesh.n_nodes)
    np.add.at(c, nodes, film.areal_capacitance*film.area*e.A*e.B)
    weight = film.areal_capacitance*voltage*film.area
    local = (weight*e.B)[..., None]*rows[:, :p1] + (weight*e.A)[..., None]*rows[:, p1:]
    gamma = np.zeros((film.n_dof + 1, film.mesh.n_nodes))
    np.add.at(gamma, (film.dofs[:, None, :], nodes[:, :, None]), local)
    return c, gamma[:-1]


def _conductance(film, q, resistance):
    """Y (n_nodes, n_nodes) S of a sheet of the given resistance per square on the deformed meridian."""
    e = flm.strain(film, q)
    D = film.mesh.derivative_matrix
    weight = 2*np.pi*e.r*film.mesh.weight/(resistance*np.sqrt(e.A))
    blocks = D.transpose(0, 2, 1) @ (weight[..., None]*D)
    Y = np.zeros((film.mesh.n_nodes,)*2)
    nodes = film.mesh.nodes
    np.add.at(Y, (nodes[:, :, None], nodes[:, None, :]), blocks)
    return Y


def _expansion(Y, c, gamma, band):
    """Orthonormal functions (n, n_nodes), zero at the fed edge, that carry the line's own answers in the band.

    The answers to the displacement current of a uniform voltage, and to that of the motion it causes, both at a few
    frequencies; those below a hundred-millionth of the largest are left out.
    """
    inside = slice(0, -1)
    pushed = gamma @ np.ones(len(c))
    drives = np.stack([c, gamma.T @ (pushed/max(np.linalg.norm(pushed), 1e-300))], axis=1)[inside]
    drives = drives/np.maximum(np.linalg.norm(drives, axis=0), 1e-300)
    answers = []
    for omega in 2*np.pi*np.geomspace(*band, LINE_FREQUENCIES):
        found = scipy.linalg.solve(Y[inside, inside] + 1j*omega*np.diag(c[inside]), drives)
        found = found/np.maximum(np.linalg.norm(found, axis=0), 1e-300)
        answers += [found.real.T, found.imag.T]
    u, sizes, _ = np.linalg.svd(np.concatenate(answers).T, full_matrices=False)
    kept = u[:, sizes > KEPT*sizes[0]]
    return np.concatenate([kept, np.zeros((1, kept.shape[1]))]).T


def voltages(circuit, omega, compliance):
    """Line functions' amplitudes (n_freq, n_line) per volt of source, from what the motion adds to the charge.

    Parameters: omega (n_freq,) rad/s; compliance (n_freq, n_line, n_line) F: loads on the motion that each load makes.
    """
    R = circuit.source_resistance
    if len(circuit.inner) == 1 and R == 0:
        return np.ones((len(omega), 1), complex)
    S = circuit.capacitance + compliance + circuit.conductance/(1j*omega[:, None, None])
    if R > 0:
        S[:, 0, 0] += 1/(1j*omega*R)
        fed = np.zeros((len(omega), len(circuit.inner)), complex)
        fed[:, 0] = 1/(1j*omega*R)
        return np.linalg.solve(S, fed[..., None])[..., 0]
    rest = np.linalg.solve(S[:, 1:, 1:], -S[:, 1:, :1])[..., 0]
    return np.concatenate([np.ones((len(omega), 1)), rest], axis=1)


def charge(circuit, v, compliance):
    """Charge (n_freq,) C per volt of source that has entered at the fed edge."""
    return np.einsum("fl,fl->f", circuit.capacitance[0] + compliance[:, 0], v)
