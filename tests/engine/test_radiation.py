"""The air load of baffled sources, against closed forms, published values and slow integrals."""

import threading

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import iv, ive, jn_zeros, jv, struve
from threadpoolctl import threadpool_limits

from engine import radiation, radiation_tables
from tests.references import acoustics as ref


@pytest.fixture(autouse=True, scope="module")
def one_blas_thread():
    """As the programs run it; two threads slow these small products tenfold."""
    with threadpool_limits(limits=1, user_api="blas"):
        yield


def disk_rule(n_points, edges=(0.0, 1.0)):
    """Points rho and weights rho d rho, Gauss-Legendre in arcsin(rho) between the edges."""
    u, weight = np.polynomial.legendre.leggauss(n_points)
    psi = np.arcsin(np.asarray(edges))
    half = 0.5 * np.diff(psi)[:, None]
    p = psi[:-1, None] + half * (1.0 + u)
    return np.sin(p).ravel(), (half * weight * np.sin(p) * np.cos(p)).ravel()


def coefficients(shape, n_polynomials=48, order=0, edges=(0.0, 1.0)):
    """Zernike coefficients (J, 1) of a velocity shape(rho)."""
    rho, area = disk_rule(4 * n_polynomials, edges)
    return radiation.project(rho, (area * shape(rho))[:, None], n_polynomials, order)


def over_area(c, x, order=0):
    """Z/(rho c pi b^2) of one shape at every x."""
    return radiation.impedance(c, np.asarray(x, dtype=float), 1.0, 1.0, order)[:, 0, 0] / np.pi


def greenspan(n):
    """Coefficients of (n+1) (1-rho^2)^n."""
    return coefficients(lambda rho: (n + 1) * (1.0 - rho**2) ** n)


def membrane(m):
    """Coefficients of J0(j_0m rho) over its mean, and the mean square of that."""
    root = jn_zeros(0, m)[-1]
    mean = 2.0 * jv(1, root) / root
    return coefficients(lambda rho: jv(0, root * rho) / mean), jv(1, root) ** 2 / mean**2


def test_piston_impedance():
    """Rayleigh's piston functions; Kinsler & Frey sec. 7.5."""
    twice_x, resistance, reactance = np.array(ref.PISTON).T
    Z = over_area(radiation.disk(1.0, 16)[:, None], twice_x / 2.0)
    np.testing.assert_allclose(Z.real, resistance, rtol=2e-9)
    np.testing.assert_allclose(Z.imag, reactance, rtol=2e-9)


@pytest.mark.parametrize("x_max", [3.0, 14.0, 60.0, 125.0])
def test_piston_impedance_on_every_table(x_max):
    """The same functions from scipy over each table's whole range, judged by |Z|."""
    x = np.linspace(0.01, x_max, 200)
    Z = over_area(radiation.disk(1.0, 16)[:, None], x)
    exact = 1.0 - jv(1, 2.0 * x) / x + 1j * struve(1, 2.0 * x) / x
    assert np.max(np.abs(Z - exact) / np.abs(exact)) < 3e-9
    assert np.max(np.abs(Z.real - exact.real)) < 2e-10


@pytest.mark.parametrize("n", [0, 1, 2])
def test_greenspan_impedance(n):
    """King 1934, Greenspan 1979; the reference's reactance is good to 1e-8."""
    x, resistance, reactance = np.array(ref.GREENSPAN_IMPEDANCE[n]).T
    Z = over_area(greenspan(n), x)
    np.testing.assert_allclose(Z.real, resistance, rtol=5e-9)
    np.testing.assert_allclose(Z.imag, reactance, rtol=6e-8)


@pytest.mark.parametrize("n", [0, 1, 2, 3])
def test_low_frequency_resistance(n):
    """rho c S x^2/2 per unit mean velocity, whatever the profile (monopole limit, Kinsler & Frey sec. 7.5)."""
    x = np.array([1e-3, 3e-3])
    np.testing.assert_allclose(over_area(greenspan(n), x).real, x**2 / 2.0, rtol=2e-5)


@pytest.mark.parametrize("m", [1, 2])
def test_membrane_impedance(m):
    """Lommel and Rayleigh integrals of membrane modes (derived); efficiency as in ISO 7849."""
    x, resistance, reactance, efficiency = np.array(ref.MEMBRANE_IMPEDANCE[m]).T
    c, mean_square = membrane(m)
    Z = over_area(c, x)
    np.testing.assert_allclose(Z.real, resistance, rtol=5e-9)
    np.testing.assert_allclose(Z.imag, reactance, rtol=3e-8)
    np.testing.assert_allclose(Z.real / mean_square, efficiency, rtol=5e-9)


@pytest.mark.parametrize("x", list(ref.RING))
def test_disk_and_ring(x):
    """Self and mutual impedance of a disk and a ring around it (King integral, derived); jumps converge slowly in J."""
    e = 1.0 / 2.5
    errors = []
    for J in (128, 256):
        whole, disk = radiation.disk(1.0, J), radiation.disk(e, J)
        Z = radiation.impedance(np.stack([disk, whole - disk], axis=1), np.array([x]), 1.0, 1.0)[0]
        ring = Z[1, 1] / (np.pi * (1.0 - e**2))
        found = [ring.real, ring.imag, Z[0, 1].real, Z[0, 1].imag, Z[0, 0].real, Z[0, 0].imag]
        errors.append(np.abs(np.array(found) - ref.RING[x]))
        assert Z.sum() == pytest.approx(radiation.impedance(whole[:, None], np.array([x]), 1.0, 1.0)[0, 0, 0], rel=1e-9)
    assert np.max(errors[-1][[0, 2, 4]]) < 1e-8 + 1e-8 * x
    assert np.max(errors[-1][[1, 3, 5]]) < 3e-6 * x
    assert np.max(errors[-1][[1, 3, 5]]) < 0.3 * np.max(errors[0][[1, 3, 5]])      # error ~ 1/J^2


@pytest.mark.parametrize("x", list(ref.FLAT_CONE))
def test_flat_cone(x):
    """A rigid disk with a logarithmic skirt (derived), the film's quasi-static shape; the kink is a segment's edge."""
    e, J = 1.0 / 2.5, 128
    skirt = coefficients(lambda rho: np.log(1.0 / rho) / np.log(2.5), J, edges=(e, 1.0))
    c = radiation.disk(e, J)[:, None] + skirt
    volume = c[0, 0]          # mean velocity over the whole disk
    assert volume / e**2 == pytest.approx(ref.FLAT_CONE_VOLUME, rel=1e-9)
    resistance, reactance, at_60, at_90 = ref.FLAT_CONE[x]
    Z = over_area(c / volume, [x])[0]
    assert Z.real == pytest.approx(resistance, rel=1e-8)
    assert Z.imag == pytest.approx(reactance, rel=3e-7)
    Phi = radiation.far_field(c, x * np.sin(np.radians([0.0, 60.0, 90.0])))[:, 0]
    np.testing.assert_allclose(Phi[1:] / Phi[0], [at_60, at_90], rtol=1e-8)


def test_low_frequency_masses():
    """Greenspan 1979 for the profiles; membrane modes derived (Weber-Schafheitlin, A&S 11.4.33)."""
    for n, mass in enumerate(ref.GREENSPAN_MASS):
        assert radiation.low_frequency_mass(greenspan(n), 1.0, 1.0)[0, 0] == pytest.approx(mass, rel=1e-10)
    for m, mass in enumerate(ref.MEMBRANE_MASS, start=1):
        c, _ = membrane(m)
        assert radiation.low_frequency_mass(c, 1.0, 1.0)[0, 0] == pytest.approx(mass, rel=1e-8)
    root = jn_zeros(0, 1)[0]
    c = coefficients(lambda rho: jv(0, root * rho))
    assert radiation.low_frequency_mass(c, 1.2, 0.03)[0, 0] == pytest.approx(
        ref.MEMBRANE_MASS_UNIT_CENTRE * 1.2 * 0.03**3, rel=1e-8)


def mass_factor(shape, order=0):
    """Air mass over rho b^3 by that of an areal density sigma over sigma b^2."""
    rho, area = disk_rule(200)
    c = coefficients(shape, 48, order)
    return radiation.low_frequency_mass(c, 1.0, 1.0, order)[0, 0] / (
        radiation.azimuth(order) * np.sum(area * shape(rho) ** 2))


def test_air_mass_of_discs_in_water():
    """Lamb 1920 for the shape (1-rho^2)^2 and Kwak & Kim 1991 for the exact clamped-plate mode [from memory]."""
    assert mass_factor(lambda rho: (1.0 - rho**2) ** 2) == pytest.approx(ref.LAMB_FACTOR, abs=6e-6)
    k = 3.196220616582541         # J0(k) I1(k) + I0(k) J1(k) = 0, clamped circular plate (Leissa, NASA SP-160)
    assert jv(0, k) * ive(1, k) + ive(0, k) * jv(1, k) == pytest.approx(0.0, abs=1e-12)
    clamped = mass_factor(lambda rho: jv(0, k * rho) - jv(0, k) / iv(0, k) * iv(0, k * rho))
    assert clamped == pytest.approx(ref.KWAK_FACTOR, abs=6e-6)


@pytest.mark.parametrize("order", [0, 1, 2, 3, 4])
def test_air_mass_of_membrane_modes(order):
    """Modes J_n(j_nm rho), m = 1 ... 4 (derived)."""
    for root, factor in zip(jn_zeros(order, 4), ref.MEMBRANE_FACTOR[order], strict=True):
        assert mass_factor(lambda rho, k=root: jv(order, k * rho), order) == pytest.approx(factor, abs=6e-6)


@pytest.mark.parametrize("order", [0, 1, 2, 3])
@pytest.mark.parametrize("x", [0.3, 2.0, 9.0])
def test_every_order_against_the_wavenumber_integral(order, x):
    """int J_mu J_nu/s^2 over the radiating wavenumbers, by adaptive quadrature (King 1934), relative even at low x."""
    pairs = ((0, 0), (0, 1), (1, 1), (1, 2))
    J = 3
    Z = radiation.impedance(np.eye(J), np.array([x]), 1.0, 1.0, order)[0] / radiation.azimuth(order)
    for i, j in pairs:
        mu, nu = order + 2 * i + 1, order + 2 * j + 1

        def integrand(u, mu=mu, nu=nu):
            s = x * np.sqrt(1.0 - u * u)
            return (jv(mu, s) / s) * (jv(nu, s) / s) if s > 0.0 else 0.25 * (mu == nu == 1)

        exact = (-1) ** (i + j) * x**2 * quad(integrand, 0.0, 1.0, epsabs=0.0, epsrel=1e-11)[0]
        assert Z[i, j].real == pytest.approx(exact, rel=1e-9)


@pytest.mark.parametrize("order", [0, 1, 2])
def test_reactance_against_the_autocorrelation(order):
    """Rayleigh's e^{-ikR}/R gives B(x) = int_0^2 C(t) cos(xt) dt and x A(x) = int_0^2 C(t) sin(xt) dt with one C.

    C, the autocorrelation of the velocity, ends at the diameter: it is a sine series of x A at the multiples of pi/2,
    and B follows from A alone. The jump C(0) = int J^2/s ds = sum c_j^2/(2 (n+2j+1)) is taken out in closed form; what
    is left of the series falls like the cube, 40 terms give 3e-5.
    """
    c = coefficients(lambda rho: rho**order * (1.0 - rho**2) ** 3, 16, order)
    jump = np.sum(c[:, 0] ** 2 / (2.0 * (order + 2 * np.arange(16) + 1)))
    x = 0.5 * np.pi * np.arange(1, 41)
    resistance = radiation.impedance(c, x, 1.0, 1.0, order)[:, 0, 0].real / radiation.azimuth(order)
    smooth = resistance / x - jump / x          # the sine transform of C(t) - C(0) (1 - t/2)
    t, weight = np.polynomial.legendre.leggauss(200)
    t = 1.0 + t
    C = np.sin(np.outer(t, x)) @ smooth + jump * (1.0 - 0.5 * t)
    at = np.array([1e-3, 0.7, 2.5, 6.0])
    expected = np.cos(np.outer(at, t)) @ (weight * C)
    B = radiation.impedance(c, at, 1.0, 1.0, order)[:, 0, 0].imag / radiation.azimuth(order) / at
    np.testing.assert_allclose(B, expected, atol=1e-4 * np.abs(expected).max(), rtol=0.0)


@pytest.mark.parametrize(("i", "j"), [(0, 0), (3, 90), (10, 12), (70, 70), (100, 103)])
@pytest.mark.parametrize("x", [10.0, 60.0])
def test_reactance_of_high_polynomials(i, j, x):
    """int F(sqrt(x^2+w^2)) - F(w) dw, F = J_mu J_nu/s^2, with scipy's Bessel functions on panels of pi up to 8000."""
    u, weight = np.polynomial.legendre.leggauss(12)
    w = (np.pi * (np.arange(2546)[:, None] + 0.5 + 0.5 * u)).ravel()

    def F(s):
        return jv(2 * i + 1, s) * jv(2 * j + 1, s) / s**2

    change = np.tile(0.5 * np.pi * weight, 2546) @ (F(np.hypot(x, w)) - F(w)) * (-1) ** (i + j)
    c = np.eye(128)[:, [i, j]]
    found = radiation.impedance(c, np.array([x]), 1.0, 1.0)[0].imag / (2.0 * np.pi * x)
    static = radiation.low_frequency_mass(c, 1.0, 1.0) / (2.0 * np.pi)
    assert found[0, 1] - static[0, 1] == pytest.approx(change, abs=2e-10 * np.sqrt(static[0, 0] * static[1, 1]) + 5e-11)


def film_like(n_shapes, J, order=0, seed=1):
    """Random smooth shapes with film wavenumbers up to 2.5 (J-16)/b, as coefficients."""
    random = np.random.default_rng(seed)
    k, phase = random.uniform(0.0, 2.5 * (J - 16), n_shapes), random.uniform(0.0, 6.0, n_shapes)
    rho, area = disk_rule(8 * J)
    shapes = np.cos(np.outer(rho, k) + phase) * (1.0 - rho[:, None] ** 2) * rho[:, None] ** order
    return lambda n: radiation.project(rho, area[:, None] * shapes, n, order)


@pytest.mark.parametrize("order", [0, 1])
def test_symmetry_and_passivity(order):
    """Reciprocity and radiated power >= 0: Z is symmetric, Re Z semidefinite, the air's mass definite."""
    c = film_like(8, 48, order)(48)
    Z = radiation.impedance(c, np.linspace(0.05, 15.0, 40), 413.0, 0.05, order)
    np.testing.assert_array_equal(Z, Z.transpose(0, 2, 1))
    eigenvalues = np.linalg.eigvalsh(Z.real)
    assert np.all(eigenvalues[:, 0] > -1e-12 * eigenvalues[:, -1])
    assert np.linalg.eigvalsh(radiation.static_mass_matrix(64, order))[0] > 0.0


@pytest.mark.parametrize("order", [0, 1])
def test_enough_polynomials(order):
    """J by the rule 0.4 kappa b + 16 against 2J: their difference is below the accuracy the levels need."""
    make = film_like(6, 48, order)
    x = np.linspace(0.05, 15.0, 20)
    Z = [radiation.impedance(make(J), x, 1.0, 1.0, order) for J in (48, 96)]
    scale = np.sqrt(np.einsum("fii,fjj->fij", np.abs(Z[1]), np.abs(Z[1])))
    assert np.max(np.abs(Z[0] - Z[1]) / scale) < 1e-3
    assert radiation.n_polynomials(2.5 * 32 / 0.05, 0.05) == 48
    assert radiation.n_polynomials(2.5 * 32 / 0.05 * 1.01, 0.05) == 64


@pytest.mark.parametrize("n_segments", [2, 6, 20])
@pytest.mark.parametrize("n_polynomials", [32, 128])
def test_points_per_segment(n_segments, n_polynomials):
    """Gauss points in a reference coordinate with the film's stretched map: 1e-10 of the largest coefficient."""
    edges, u_w = np.linspace(0.2, 1.0, n_segments + 1), np.polynomial.legendre.leggauss

    def project(n_points):
        u, weight = u_w(n_points)
        half = 0.5 * np.diff(edges)[:, None]
        r0 = (edges[:-1, None] + half * (1.0 + u)).ravel()
        stretch = (r0 - 0.2) * (1.0 - r0)
        rho, slope = r0 + 0.3 * stretch, 1.0 + 0.3 * (1.2 - 2.0 * r0)
        flow = (half * weight).ravel() * slope * rho * np.cos(2.0 * n_polynomials * r0)
        return radiation.project(rho, flow[:, None], n_polynomials)

    actual = edges + 0.3 * (edges - 0.2) * (1.0 - edges)
    n_points = radiation.points_per_segment(np.diff(np.arcsin(actual)).max(), n_polynomials)
    exact = project(300)
    assert np.max(np.abs(project(int(n_points)) - exact)) < 1e-10 * np.max(np.abs(exact))
    assert np.max(np.abs(project(int(n_points) // 3) - exact)) > 1e-6 * np.max(np.abs(exact))


@pytest.mark.parametrize("order", [0, 1, 3])
def test_projection_is_orthonormal(order):
    """The polynomials are orthogonal (Born & Wolf appendix VII): projecting R_j gives the unit vector j."""
    rho, area = disk_rule(120)
    rows = radiation.projection_matrix(rho, 40, order)
    norm = 2.0 * (order + 2 * np.arange(40) + 1)
    np.testing.assert_allclose((rows * area) @ (rows / norm[:, None]).T, np.eye(40), atol=1e-11)


def test_disk_coefficients():
    """The closed form against quadrature over the disk."""
    rho, area = disk_rule(200, (0.0, 0.37))
    np.testing.assert_allclose(radiation.disk(0.37, 50), radiation.project(rho, area[:, None], 50)[:, 0], atol=1e-12)
    r, areas = radiation.disk_points(0.02, 12)
    assert np.sum(areas) == pytest.approx(np.pi * 0.02**2, rel=1e-13)
    assert np.sum(areas * r**2) == pytest.approx(np.pi * 0.02**4 / 2.0, rel=1e-13)


def test_upper_triangles():
    """impedance_tables holds the upper triangle of project_tables, which is that of the dense tables."""
    table = radiation.tables(10.0, 96)
    c = film_like(5, 48)(90)
    i, j = np.triu_indices(5)
    resistance, reactance = radiation.impedance_tables(c, table)
    for rows, dense in zip((resistance, reactance), table.dense(), strict=True):
        np.testing.assert_allclose(rows, np.einsum("am,kab,bn->kmn", c, dense[:, :90, :90], c)[:, i, j],
                                   atol=1e-12 * np.abs(rows).max())


def test_what_the_tables_leave_out():
    """Trimmed tables, few terms for high polynomials, against every term of all of them."""
    table = radiation.tables(60.0, 128)
    A, B = radiation_tables._coefficients(table.x_max, table.n_terms, 128, 0)
    size = np.sqrt(np.diag(radiation.static_mass_matrix(128)))
    for dense, full in zip(table.dense(), (A * table.x_max, B), strict=True):
        dense = dense * (table.x_max if full is not B else 1.0)
        assert np.max(np.abs(dense - full) / (size[:, None] * size)) < 2e-12
    assert sum(stack.size for _, _, stack in table.blocks) < 0.3 * 2 * B.size


def test_tables_are_built_once_by_one_thread():
    """Threads that ask at the same moment get the same tables; more polynomials leave the leading ones unchanged."""
    start, found = threading.Barrier(4), []

    def ask():
        start.wait()
        found.append(radiation.tables(3.0, 48, order=5))

    threads = [threading.Thread(target=ask) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(found) == 4
    assert all(table is found[0] for table in found)
    for small, large in zip(found[0].dense(), radiation.tables(3.0, 128, order=5).dense(), strict=True):
        np.testing.assert_allclose(small, large[:, :48, :48], atol=1e-12 * np.abs(large).max())


def test_tables_have_an_end():
    """A k b that no table reaches, or none at all, is refused in words."""
    with pytest.raises(ValueError, match="k b is 2000"):
        radiation.tables(2000.0, 16)
    with pytest.raises(ValueError, match="k b is nan"):
        radiation.tables(float("nan"), 16)


def test_depth_limit():
    """The figures of the boundary-element comparison; never rising with depth, the same up and down."""
    limit = radiation.depth_estimate_limit
    assert limit(0.0) == np.inf
    assert limit(0.05) == pytest.approx(24.0)
    assert limit(0.1) == pytest.approx(12.0)
    assert limit(0.2) == pytest.approx(1.0)
    assert limit(0.3) == pytest.approx(0.75)
    assert limit(0.4) == pytest.approx(0.643)
    assert limit(-0.3) == limit(0.3)
    assert np.all(np.diff([limit(eta) for eta in np.linspace(0.01, 1.5, 300)]) < 0.0)
