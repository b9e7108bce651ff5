"""The sound of baffled sources in the far and the near field, against closed forms and slow sums."""

import numpy as np
import pytest
from scipy.integrate import dblquad, quad
from scipy.special import jn_zeros, jv
from threadpoolctl import threadpool_limits

from engine import radiation
from engine.errors import InvalidDesign
from tests.references import acoustics as ref

DENSITY, SPEED = 1.2, 343.0


@pytest.fixture(autouse=True, scope="module")
def one_blas_thread():
    """As the programs run it."""
    with threadpool_limits(limits=1, user_api="blas"):
        yield


def shape_coefficients(shape, n_polynomials=48, order=0):
    """Zernike coefficients (J, 1) of a velocity shape(rho), by Gauss-Legendre in arcsin(rho)."""
    u, weight = np.polynomial.legendre.leggauss(4 * n_polynomials)
    psi = 0.25 * np.pi * (1.0 + u)
    flow = 0.25 * np.pi * weight * np.sin(psi) * np.cos(psi) * shape(np.sin(psi))
    return radiation.project(np.sin(psi), flow[:, None], n_polynomials, order)


def cone_source(frame_radius, height, n_points, n_shapes, seed=3):
    """Radii and heights of a straight cone's points and random flows through them."""
    random = np.random.default_rng(seed)
    r, area = radiation.disk_points(frame_radius, n_points)
    return r, height * (1.0 - r / frame_radius), random.standard_normal((n_points, n_shapes)) * area[:, None]


def direct_sum(r, z, flow, k, distance, angle, n_azimuth=3000):
    """-omega^2 rho/(2 pi) sum nu <e^{-ikR}/R>, one frequency and one azimuth point at a time."""
    phi = np.pi * (np.arange(n_azimuth) + 0.5) / n_azimuth
    R = np.sqrt((distance * np.sin(angle) - r[:, None] * np.cos(phi)) ** 2 + (r[:, None] * np.sin(phi)) ** 2
                + (distance * np.cos(angle) - z[:, None]) ** 2)
    kernel = np.array([(np.exp(-1j * ki * R) / R).mean(axis=1) for ki in k])
    return -((k * SPEED) ** 2 * DENSITY / (2.0 * np.pi))[:, None] * (kernel @ flow)


def transfer(r, z, flow, k, distance, angle):
    """listener_transfer in this file's air."""
    return radiation.listener_transfer(r, z, flow, k, distance, angle, DENSITY, SPEED)


@pytest.mark.parametrize(("ka", "distance", "level"), ref.PISTON_ON_AXIS)
def test_piston_on_its_axis(ka, distance, level):
    """Kinsler & Frey eq. (7.4.5); pressure per displacement is i omega times pressure per velocity."""
    a = 0.04
    r, area = radiation.disk_points(a, 60)
    p = transfer(r, np.zeros_like(r), area[:, None], np.array([ka / a]), distance * a, 0.0)[0, 0]
    velocity = p / (1j * ka / a * SPEED)
    assert abs(velocity) / (DENSITY * SPEED) == pytest.approx(level, rel=2e-9)
    k, d = ka / a, distance * a          # with its phase: rho c (e^{-ikd} - e^{-ik sqrt(d^2+a^2)})
    exact = DENSITY * SPEED * (np.exp(-1j * k * d) - np.exp(-1j * k * np.hypot(d, a)))
    assert velocity == pytest.approx(exact, rel=1e-9)


@pytest.mark.parametrize(("s", "amplitude"), ref.PISTON_DIRECTIVITY)
def test_piston_directivity(s, amplitude):
    """Kinsler & Frey sec. 7.4: 2 J1(s)/s, half power, half amplitude, first null, first side lobe."""
    Phi = radiation.far_field(radiation.disk(1.0, 16)[:, None], np.array([0.0, s]))[:, 0]
    assert Phi[0] == pytest.approx(0.5, rel=1e-12)
    assert Phi[1] / Phi[0] == pytest.approx(amplitude, abs=1e-9)


@pytest.mark.parametrize("n", [0, 1, 2])
def test_greenspan_directivity(n):
    """Greenspan 1979; Sonine's first integral, DLMF 10.22.20."""
    s, D = np.array(ref.GREENSPAN_DIRECTIVITY[n]).T
    c = shape_coefficients(lambda rho: (n + 1) * (1.0 - rho**2) ** n)
    np.testing.assert_allclose(2.0 * radiation.far_field(c, s)[:, 0], D, rtol=2e-9)


@pytest.mark.parametrize("m", [1, 2])
def test_membrane_directivity(m):
    """Membrane modes, the Lommel integral of DLMF 10.22.5, its removable point included."""
    s, D = np.array(ref.MEMBRANE_DIRECTIVITY[m]).T
    root = jn_zeros(0, m)[-1]
    Phi = radiation.far_field(shape_coefficients(lambda rho: jv(0, root * rho)), np.append(0.0, s))[:, 0]
    np.testing.assert_allclose(Phi[1:] / Phi[0], D, rtol=2e-9)


@pytest.mark.parametrize("order", [0, 1, 2])
def test_far_field_against_its_integral(order):
    """int v J_n(s rho) rho d rho by adaptive quadrature, up to the end of three tables; shapes of arrays kept."""
    def shape(rho):
        return rho**order * np.cos(4.0 * rho)

    c = shape_coefficients(shape, 48, order)
    for s in (np.array([[0.0, 1.0], [2.5, 3.9]]), np.array([12.0, 15.9]), np.array([40.0, 63.5])):
        Phi = radiation.far_field(c, s, order)
        assert Phi.shape == (*s.shape, 1)
        exact = [quad(lambda rho, s=one: shape(rho) * jv(order, s * rho) * rho, 0.0, 1.0, epsabs=1e-13, limit=200)[0]
                 for one in s.ravel()]
        np.testing.assert_allclose(Phi.ravel(), exact, atol=1e-11)


@pytest.mark.parametrize("order", [0, 1, 2])
@pytest.mark.parametrize("x", [0.2, 3.0, 14.0])
def test_power_balance(order, x):
    """The power a source gives off equals that through a large hemisphere, |x Phi cos(n phi)|^2 over its angles."""
    c = shape_coefficients(lambda rho: rho**order * (np.cos(6.0 * rho) + 0.4), 64, order)
    u, weight = np.polynomial.legendre.leggauss(60)
    theta, weight = 0.25 * np.pi * (1.0 + u), 0.25 * np.pi * weight
    Phi = radiation.far_field(c, x * np.sin(theta), order)[:, 0]
    around = 2.0 * np.pi * np.mean(np.cos(order * np.linspace(0.0, 2.0 * np.pi, 12, endpoint=False)) ** 2)
    power = around * x**2 * np.sum(weight * np.sin(theta) * Phi**2)
    assert radiation.impedance(c, np.array([x]), 1.0, 1.0, order)[0, 0, 0].real == pytest.approx(power, rel=1e-10)


@pytest.mark.parametrize(("frequency", "volume", "distance", "density", "pressure"), ref.MONOPOLE)
def test_monopole(frequency, volume, distance, density, pressure):
    """rho omega^2 V/(2 pi r): Pierce ch. 4; Kinsler & Frey sec. 7.1. Any direction."""
    r, area = radiation.disk_points(1e-4, 3)
    flow = area[:, None] * volume / area.sum()
    for angle in (0.0, 0.8, 0.5 * np.pi):
        k = np.array([2.0 * np.pi * frequency / SPEED])
        p = radiation.listener_transfer(r, np.zeros(3), flow, k, distance, angle, density, SPEED)
        assert abs(p[0, 0]) / np.sqrt(2.0) == pytest.approx(pressure, rel=1e-6)


@pytest.mark.parametrize(("b", "h", "distance", "angle", "f_max"), [
    (0.05, 0.015, 1.0, 0.0, 5e3), (0.05, 0.015, 1.0, 0.7, 5e3), (0.05, 0.015, 100.0, 1.57, 5e3),
    (0.2, 0.06, 1.0, 1.0, 2e4), (0.05, 0.004, 0.01, 0.0, 5e3), (0.05, 0.004, 0.01, 0.5, 5e3),
    (0.05, 0.004, 0.06, 1.5, 2e4), (0.05, -0.02, 0.051, np.pi / 2, 5e3), (0.05, 0.015, 1.0, 1e-9, 5e3)])
def test_listener_transfer_against_the_direct_sum(b, h, distance, angle, f_max):
    """The tabulated kernel against one exponential per point, azimuth and frequency, from far away to the rim."""
    source = cone_source(b, h, 60, 4)
    k = 2.0 * np.pi * np.geomspace(20.0, f_max, 9) / SPEED
    p, exact = transfer(*source, k, distance, angle), direct_sum(*source, k, distance, angle)
    assert np.max(np.abs(p - exact) / np.abs(exact).max(axis=1, keepdims=True)) < 3e-11


def test_near_field_off_axis_against_adaptive_quadrature():
    """Rayleigh's integral over a profile 10 mm away, by scipy's adaptive double integral."""
    b, k, distance, angle = 0.05, 60.0, 0.01, 0.6
    x, y = distance * np.sin(angle), distance * np.cos(angle)

    def integrand(phi, r, part):
        R = np.sqrt((x - r * np.cos(phi)) ** 2 + (r * np.sin(phi)) ** 2 + y**2)
        return (1.0 - (r / b) ** 2) * part(np.exp(-1j * k * R) / R) * r

    exact = sum(unit * 2.0 * dblquad(integrand, 0.0, b, 0.0, np.pi, args=(part,), epsabs=1e-12, epsrel=1e-9)[0]
                for unit, part in ((1.0, np.real), (1j, np.imag)))
    r, area = radiation.disk_points(b, 60)
    p = transfer(r, np.zeros(60), (area * (1.0 - (r / b) ** 2))[:, None], np.array([k]), distance, angle)[0, 0]
    assert p == pytest.approx(-(k * SPEED) ** 2 * DENSITY / (2.0 * np.pi) * exact, rel=1e-8)


def test_listener_transfer_becomes_the_far_field():
    """At a great distance a flat source's true-distance pressure is that of its Hankel transform."""
    b, distance, angle = 0.05, 400.0, 0.9
    k = np.array([20.0, 60.0, 110.0])
    r, area = radiation.disk_points(b, 80)
    p = transfer(r, np.zeros(80), (area * (1.0 - (r / b) ** 2))[:, None], k, distance, angle)[:, 0]
    Phi = radiation.far_field(shape_coefficients(lambda rho: 1.0 - rho**2), k * b * np.sin(angle))[:, 0]
    far = -(k * SPEED) ** 2 * DENSITY * b**2 * np.exp(-1j * k * distance) / distance * Phi
    np.testing.assert_allclose(p, far, rtol=5e-4)


def test_listener_transfer_limits():
    """Nothing at zero frequency; one frequency and many agree; a listener on the surface is refused in words."""
    source = cone_source(0.05, 0.01, 20, 3)
    np.testing.assert_array_equal(transfer(*source, np.zeros(2), 1.0, 0.3), np.zeros((2, 3)))
    k = np.linspace(0.0, 90.0, 7)
    np.testing.assert_allclose(transfer(*source, k, 0.3, 0.3)[4:5], transfer(*source, k[4:5], 0.3, 0.3), rtol=1e-11)
    with pytest.raises(InvalidDesign, match=r"listener\.distance is 0\.01 m: .* on the moving surface.*move"):
        transfer(np.array([0.01]), np.array([0.0]), np.ones((1, 1)), k, 0.01, np.pi / 2)
