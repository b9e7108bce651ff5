"""Sound of an axisymmetric source in an infinite baffle: air load, near and far field.

The normal velocity of circumferential order n is expanded in radial Zernike polynomials of rho = r/b,
v = sum_j c_j R_j(rho), R_j = rho^n P_j^(0,n)(2 rho^2 - 1), whose Hankel transforms are closed:
int_0^1 R_j J_n(s rho) rho d rho = (-1)^j J_{n+2j+1}(s)/s. The impedance of the polynomials depends on x = k b only, so
that its tables serve every film. Everywhere eps = 2 pi for n = 0 and pi for n >= 1 (the integral of cos^2 n phi).

Source: Rayleigh integral in wavenumber space (King 1934); Hankel transform of the Zernike polynomials: Born & Wolf,
Principles of Optics, appendix VII; expansion of baffled sources in them: Aarts & Janssen 2009.
"""

from functools import lru_cache

import numpy as np

from engine.errors import InvalidDesign
from engine.radiation_tables import (
    ROUNDING,
    Tables,
    bessel_over_argument,
    chebyshev_matrix,
    chebyshev_nodes,
    kept,
    n_terms,
    prepare,
    signs,
    static_table,
    table_range,
    tables,
)

__all__ = ["Tables", "azimuth", "depth_estimate_limit", "disk", "disk_points", "far_field", "far_field_series",
           "gauss_legendre", "impedance", "impedance_tables", "interpolation", "listener_transfer", "low_frequency_mass",
           "n_polynomials", "points_per_segment", "prepare", "project", "project_tables", "projection_matrix",
           "squared_far_field", "static_mass_matrix", "tables"]

NEAREST = 1e-3            # of the source's size: closer than this the listener is on the surface
DEPTH_LIMIT = ((0.1, 12.0), (0.2, 1.0), (0.3, 0.75), (0.4, 0.643))     # height/b, k b; see depth_estimate_limit


def azimuth(order=0):
    """eps, the integral of cos^2(n phi) over the circle."""
    return 2.0 * np.pi if order == 0 else np.pi


def n_polynomials(wavenumber_max, frame_radius):
    """Polynomials needed for film wavenumbers up to wavenumber_max (1/m): 0.4 kappa b + 16, rounded up to 16."""
    return int(np.ceil((0.4 * wavenumber_max * frame_radius + 16.0) / ROUNDING)) * ROUNDING


def points_per_segment(delta_psi, n_polynomials, order=0):
    """Gauss-Legendre points a mesh segment needs so that the projection is exact to about 1e-10.

    Parameters: delta_psi, the segment's extent in psi = arcsin(r/b), rad (array or scalar; pi/2 for the whole disk);
    n_polynomials, J; order, n. The points may lie Gauss-Legendre in the reference radius: see projection_matrix.
    Returns: whole numbers of the shape of delta_psi.
    """
    return np.ceil(0.6 * np.asarray(delta_psi) * (2 * n_polynomials + order)).astype(int) + 5


def projection_matrix(rho, n_polynomials, order=0):
    """Rows that turn a source's flow into coefficients: c = projection_matrix @ flow.

    Parameters
    ----------
    rho : (n_points,) positions r/b of quadrature points, 0 ... 1.
    n_polynomials, order : J and n.

    Returns
    -------
    (J, n_points): 2 (n+2j+1) R_j(rho). It multiplies flow (n_points, m) = v rho d rho with the quadrature weights in; a
    local volume flow nu dr = v 2 pi r dr (n = 0) is 2 pi b^2 times that.
    """
    rho = np.asarray(rho, dtype=float)
    n, xi = order, 2.0 * np.square(rho) - 1.0
    R = np.empty((n_polynomials, rho.size))
    R[0] = rho**n
    if n_polynomials > 1:
        R[1] = 0.5 * ((n + 2) * xi - n) * R[0]
    for j in range(2, n_polynomials):       # recurrence of P_j^(0,n), A&S 22.7.1
        s = 2 * j + n
        R[j] = ((s - 1) * (s * (s - 2) * xi - n * n) * R[j - 1]
                - 2 * (j - 1) * (j + n - 1) * s * R[j - 2]) / (2 * j * (j + n) * (s - 2))
    return 2.0 * (n + 2 * np.arange(n_polynomials) + 1)[:, None] * R


def project(rho, flow, n_polynomials, order=0):
    """Coefficients (J, m) of sources given as flow (n_points, m) = v rho d rho at rho; see projection_matrix."""
    return projection_matrix(rho, n_polynomials, order) @ flow


def disk(edge, n_polynomials):
    """Exact coefficients (J,) of a rigid disk r < edge b of unit velocity: (P_{j+1} - P_{j-1})(2 edge^2 - 1)/2."""
    xi = 2.0 * edge * edge - 1.0
    P = np.empty(n_polynomials + 2)         # P[i] is P_{i-1}; P_{-1} = -1 makes the first coefficient edge^2
    P[:3] = -1.0, 1.0, xi
    for j in range(2, n_polynomials + 1):
        P[j + 1] = ((2 * j - 1) * xi * P[j] - (j - 1) * P[j - 1]) / j
    return 0.5 * (P[2:] - P[:-2])


def disk_points(radius, n_points):
    """Gauss-Legendre points over a disk: radii (n_points,) and areas (n_points,) that sum to pi radius^2."""
    u, weight = np.polynomial.legendre.leggauss(n_points)
    r = 0.5 * radius * (1.0 + u)
    return r, np.pi * radius * r * weight


def project_tables(coefficients, tables):
    """The tables projected on m shapes.

    Parameters: coefficients (J, m), J at most tables.n_polynomials; tables.
    Returns: resistance and reactance (2, K, m, m), symmetric: Chebyshev coefficients of c' A c/x^(2n) and c' B c.
    With T = interpolation(x, tables),

        Z(x) = eps rho c b^2 [x^(2+2n) T @ resistance + i x T @ reactance].
    """
    m = coefficients.shape[1]
    out = np.empty((2, tables.n_terms, m, m))
    for first, last, stack in tables.blocks:
        size = len(stack)
        c = np.ascontiguousarray(coefficients[:size])
        left = c.T @ stack[:len(c)].reshape(len(c), -1)
        both = (left.reshape(-1, size)[:, :len(c)] @ c).reshape(m, 2, last - first, m)
        out[:, first:last] = both.transpose(1, 2, 0, 3)
    return out


def impedance_tables(coefficients, tables):
    """project_tables' upper triangles, each (K, m(m+1)/2), columns in the order of numpy.triu_indices(m)."""
    i, j = np.triu_indices(coefficients.shape[1])
    resistance, reactance = project_tables(coefficients, tables)
    return resistance[:, i, j], reactance[:, i, j]


def interpolation(x, tables):
    """Matrix (n_freq, K) from the tables' Chebyshev coefficients to x = k b (n_freq,), 0 <= x <= tables.x_max."""
    return chebyshev_matrix(np.square(np.asarray(x, dtype=float) / tables.x_max), tables.n_terms)


def impedance(coefficients, x, rho_c, b, order=0):
    """Radiation impedance matrix of m shapes, one side of the baffle.

    Parameters: coefficients (J, m), of velocity per unit modal velocity; x = k b (n_freq,); rho_c, Pa s/m; b, frame
    radius, m; order, n.
    Returns: (n_freq, m, m) complex, N s/m: Z_mn = int p_n v_m dA, symmetric.
    """
    x = np.asarray(x, dtype=float)
    J, m = coefficients.shape
    table = tables(x.max(initial=0.0), J, order)
    resistance, reactance = impedance_tables(coefficients, table)
    T = interpolation(x, table)
    rows = azimuth(order) * rho_c * b**2 * (x[:, None] ** (2 + 2 * order) * (T @ resistance)
                                            + 1j * x[:, None] * (T @ reactance))
    Z = np.empty((x.size, m, m), dtype=complex)
    i, j = np.triu_indices(m)
    Z[:, i, j] = Z[:, j, i] = rows
    return Z


def static_mass_matrix(n_polynomials, order=0):
    """Air mass of the polynomials, one side, in the limit k -> 0, over rho b^3: (J, J), symmetric, positive definite.

    eps/[4 pi (1/4 - d^2)(h - 1/2)(h + 1/2)], d = i - j, h = n + i + j + 1 (Weber-Schafheitlin, A&S 11.4.33); the
    first entry is the piston's 8/3.
    """
    return azimuth(order) * static_table(n_polynomials, order)


def low_frequency_mass(coefficients, density, b, order=0):
    """lim Im Z / omega of m shapes, one side: (m, m), kg; coefficients (J, m)."""
    return density * b**3 * (coefficients.T @ static_mass_matrix(len(coefficients), order) @ coefficients)


def far_field(coefficients, s, order=0):
    """Phi(s) = int v J_n(s rho) rho d rho of m shapes, s = k b sin theta, from a kept table.

    The far pressure is i omega rho b^2 i^n cos(n phi) e^{-ikd}/d Phi.

    Parameters: coefficients (J, m); s, array of any shape; order, n.
    Returns: s.shape + (m,).
    """
    s = np.asarray(s, dtype=float)
    top, series = far_field_series(coefficients, np.max(s, initial=0.0), order)
    return (chebyshev_matrix(np.square(s / top), len(series)) @ series) * s[..., None] ** order


def far_field_series(coefficients, s_max, order=0):
    """(top, series (K, m)): Chebyshev coefficients in s^2 over [0, top^2] of Phi(s)/s^n of m shapes, top >= s_max."""
    J = len(coefficients)
    top, rows = table_range(s_max), -(-J // ROUNDING) * ROUNDING
    table = kept(("far", top, order, rows), lambda: _far_table(top, rows, order))
    return top, table[:, :J] @ coefficients


def squared_far_field(coefficients, x, amplitude):
    """int_0^1 |Phi(x sqrt(1-u^2))|^2 du of moving shapes, n = 0: the resistance A(x) between them, by far-field angles.

    The integrand is even in u and of exponential type 2 x: half a Gauss-Legendre rule carries it to some 1e-13.

    Parameters: coefficients (J, m); x = k b (n_freq,); amplitude (n_freq, m) complex.
    Returns: (n_freq,). Times pi rho b^4/c omega^4 it is the power to one side of displacements of that amplitude.
    """
    largest = x.max(initial=0.0)
    top, series = far_field_series(coefficients, largest)
    u, weight = gauss_legendre(2 * int(np.ceil(0.5 * (largest + 6.5 * np.cbrt(largest) + 8.0))))
    u, weight = u[u > 0.0], weight[u > 0.0]
    t = 2.0 * np.square(x[:, None] / top) * (1.0 - u * u) - 1.0
    a = np.ascontiguousarray((series @ amplitude.T)[..., None])         # (K, n_freq, 1)
    here = before = np.zeros(t.shape, complex)
    for ak in a[:0:-1]:                                                  # Clenshaw's sum of a Chebyshev series
        here, before = ak + 2.0 * t * here - before, here
    field = a[0] + t * here - before
    return (np.square(field.real) + np.square(field.imag)) @ weight


@lru_cache
def gauss_legendre(n_points):
    """Gauss-Legendre rule on [-1, 1]: (points, weights)."""
    return np.polynomial.legendre.leggauss(n_points)


def _far_table(top, J, order):
    """Chebyshev coefficients (K, J) in s^2 over [0, top^2] of (-1)^j J_{n+2j+1}(s)/s^{n+1}."""
    nodes, to_coefficients = chebyshev_nodes(n_terms(0.5 * top))
    s = top * np.sqrt(nodes)
    return to_coefficients @ (signs(J)[:, None] * bessel_over_argument(order + 1, J, s) / s**order).T


def listener_transfer(radius, height, flow, wavenumber, distance, angle, density, sound_speed):
    """Pressure at the listener per unit modal displacement, with true distances, n = 0.

    p = -omega^2 rho/(2 pi) sum_i nu_i <e^{-ikR}/R> over the azimuth, R from the ring of radius r_i at height z_i to the
    listener. The kernel, freed of a common e^{-ikR0}, is tabulated at Chebyshev points of k.

    Parameters
    ----------
    radius, height : (n_points,) m, of the source's quadrature points; height 0 is the frame plane.
    flow : (n_points, m) m^2 = m^3/m, volume swept at each point per unit modal displacement, quadrature weight in it.
    wavenumber : (n_freq,) 1/m.
    distance, angle : of the listener from the centre of the frame plane, m, and from the axis, rad (0 ... pi/2).
    density, sound_speed : kg/m3, m/s.

    Returns
    -------
    (n_freq, m) complex, Pa/m.

    Raises InvalidDesign if the listener is on the source's surface.
    """
    k = np.asarray(wavenumber, dtype=float)
    R, share, starts = _ring_distances(radius, height, distance, angle, k.max(initial=0.0))
    R0 = 0.5 * (R.min() + R.max())
    reach = 0.5 * k.max(initial=0.0)
    K = n_terms(reach * 0.5 * (R.max() - R.min()))
    nodes, to_coefficients = chebyshev_nodes(K)
    phase = 2.0 * reach * nodes[:, None] * (R - R0)
    scale = share / R
    mean = [np.add.reduceat(part * scale, starts, axis=1) if len(R) > len(starts) else part * scale
            for part in (np.cos(phase), -np.sin(phase))]
    table = to_coefficients @ (np.concatenate(mean) @ flow).reshape(2, K, -1)
    T = chebyshev_matrix(k / (2.0 * reach), K) if reach > 0.0 else np.eye(1, K)
    smooth = T @ table
    omega = k * sound_speed
    return (-omega**2 * density / (2.0 * np.pi) * np.exp(-1j * k * R0))[:, None] * (smooth[0] + 1j * smooth[1])


def _ring_distances(radius, height, distance, angle, k_max):
    """Distances from azimuth points of every ring to the listener, their shares of the ring, and each ring's start.

    On the axis one point a ring; off it the midpoint rule over half the circle. Its error falls like q^(2N), where
    q = e^{-acosh(near)} is set by how close the ring comes to the listener, once 2N exceeds the phase along the ring.
    """
    r, z = np.asarray(radius, dtype=float), np.asarray(height, dtype=float)
    across, along = distance * np.sin(angle), distance * np.cos(angle) - z
    square, swing = across**2 + r**2 + along**2, 2.0 * across * r
    size = max(r.max(), np.abs(z).max())
    if np.min(square - swing) <= (NEAREST * size) ** 2:
        raise InvalidDesign(f"listener.distance is {distance:g} m: the listener lies on the moving surface, which ends "
                            f"{np.hypot(r, z).max():g} m from the centre; move it further away or nearer the axis")
    if np.all(swing <= 1e-15 * square):
        return np.sqrt(square), np.ones_like(r), np.arange(r.size)
    decay = np.arccosh(np.maximum(square / np.maximum(swing, 1e-300 * square), 1.0 + 1e-12))
    phase = 0.5 * k_max * (np.sqrt(square + swing) - np.sqrt(square - swing))
    N = np.ceil(0.5 * (phase + 6.5 * phase ** (1.0 / 3.0) + 28.0 / decay) + 3.0).astype(int)
    ring = np.repeat(np.arange(r.size), N)
    starts = np.concatenate([[0], np.cumsum(N)[:-1]])
    cosine = np.cos(np.pi * (np.arange(ring.size) - starts[ring] + 0.5) / N[ring])
    return np.sqrt(square[ring] - swing[ring] * cosine), 1.0 / N[ring], starts


def depth_estimate_limit(height_over_b):
    """k b from which on the level is an estimate because the source is taken as planar; inf for a flat source.

    Where the level error of the planar source reaches 0.5 dB against a boundary-element solution of a rigid cone of
    depth h: k h = 1.2 up to h/b = 0.1; k b = 1.0, 0.75, 0.64 at 0.2, 0.3, 0.4 (interpolated in the errors at k b = 0.5,
    1, 2); log-log between 0.1 and 0.4; beyond 0.4, outside what was computed, falling as (b/h)^2.
    """
    eta = abs(float(height_over_b))
    if eta == 0.0:
        return np.inf
    ratios, limits = np.array(DEPTH_LIMIT).T
    if eta <= ratios[0]:
        return 1.2 / eta
    if eta >= ratios[-1]:
        return limits[-1] * (ratios[-1] / eta) ** 2
    return float(np.exp(np.interp(np.log(eta), np.log(ratios), np.log(limits))))
