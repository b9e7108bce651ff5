"""The engine's levels against the slow chain of tests/references, and the slow chain against tables of its own.

Source of the comparison: two routes to one number that share no code and no method, except the statement of the
physics: shooting against Newton on spectral elements, one polynomial basis unreduced against modes in air, wavenumber
integrals against Zernike tables, rings against Gauss points.
"""

from dataclasses import replace
from math import pi, sqrt
from pathlib import Path

import numpy as np
import pytest
from scipy.linalg import eigh
from threadpoolctl import threadpool_limits

import engine
from tests.references import acoustics, membranes, slow_chain
from tests.references.slow_chain import VACUUM_PERMITTIVITY, Chain, King, Plan

SAMPLES = Path(__file__).parents[2] / "sample_designs"
TOLERANCE = 0.05       # dB

# Ten or eleven of the highest peaks of each sample, Hz: maxima of the slow chain's level, searched to 1e-6 about the
# maxima on a grid of some 400 frequencies and about the engine's own.
PEAKS = {
    "fern-label": (1618.78, 2449.44, 4110.42, 1201.39, 4940.83, 3279.53, 560.77, 4526.78, 2031.13, 3695.57, 2864.78),
    "bench-back": (4844.19, 4380.56, 3916.90, 900.29, 3453.24, 2989.39, 2292.27, 2525.43, 1829.03, 665.22),
    "palm-house-arch": (101.55, 48.37, 3035.11, 3301.17, 2769.05, 3567.25, 2502.97, 2236.86, 3833.36, 1970.70)}
FLANK = 3e-3           # of the frequency, to either side: several half-widths of the narrow peaks
EVEN = np.geomspace(20.0, 5000.0, 22)


@pytest.fixture(autouse=True, scope="module")
def one_blas_thread():
    """As the programs run it; two threads slow these small products tenfold."""
    with threadpool_limits(limits=1, user_api="blas"):
        yield


# The slow chain against tables --------------------------------------------------------------------------------------

A, H, MU, RHO = 10e-3, 100e-6, 100e3, 1000.0     # undeformed centre radius, film


def cone_plan(q, prestretch, e=0.0, **values):
    """A film alone, in the units of the cone tables."""
    permittivity = 3.0
    return Plan(**({"frame_radius": q*prestretch*A, "centre_radius": prestretch*A, "shear_modulus": MU,
                    "film_density": RHO, "thickness": H, "prestretch": prestretch, "permittivity": permittivity,
                    "loss_factor": 0.0, "electrode_thickness": 0.0, "electrode_density": 0.0, "centre_mass": 0.0,
                    "spring_rate": 0.0, "spring_free_height": 0.0, "spring_loss_factor": 0.0, "rear_volume": None,
                    "rear_loss_factor": 0.0, "bias": H*sqrt(e*MU/(VACUUM_PERMITTIVITY*permittivity)),
                    "amplitude": 1.0, "air_load": False} | values))


def eigenvalues(plan, held=False, axial_only=False):
    """omega^2 of the chain's motion in vacuo, ascending."""
    chain = Chain(plan, n_bubbles=36)
    m = chain.matrices
    keep = [i for i in range(len(m.mass)) if not (held and i == m.centre) and not (axial_only and i < m.centre)]
    return eigh(m.stiffness[np.ix_(keep, keep)], m.mass[np.ix_(keep, keep)], eigvals_only=True)


@pytest.mark.parametrize("row", [row for row in membranes.CONES if row["law"] == "neo-hookean"])
def test_cones_rest_and_move_as_tabulated(row):
    """Source: tests/references/membranes.py, CONES (derived)."""
    plan = cone_plan(row["q"], row["prestretch"], row["e"], held=row["h"]*A)
    rest = Chain(plan, n_bubbles=36).rest
    volume = np.sum(pi*rest.radius**2*rest.lam1*np.sin(rest.theta)*rest.weight)
    assert (rest.force/(MU*H*A), rest.rim_lam1, volume/A**3) == pytest.approx(
        (row["force"], row["lam_out"], row["volume"]), rel=3e-9)
    unit, mass, spring = MU/(RHO*A**2), 4*pi*RHO*H*A**2, pi*MU*H
    assert eigenvalues(plan, held=True)[:3]/unit == pytest.approx(row["held"], rel=1e-8)
    assert eigenvalues(replace(plan, centre_mass=mass))[:3]/unit == pytest.approx(row["free"], rel=1e-8)
    assert eigenvalues(replace(plan, centre_mass=mass, spring_rate=spring))[:3]/unit == \
        pytest.approx(row["sprung"], rel=1e-8)


@pytest.mark.parametrize(("e", "height", "slope"), [(0.1, 1.156238259, 1.55684), (0.2, 1.336306263, 2.09965)])
def test_spring_biased_cone_and_the_pull_of_the_signal(e, height, slope):
    """Height, and dh/de, which is a static answer to the electrode load: dV = V de/(2 e).

    Source: derived; set-up as in He, Zhao, Chen & Suo 2009 (J. Appl. Phys. 106:083522).
    """
    plan = cone_plan(3.0, 1.2, e, spring_rate=1.5*MU*H, spring_free_height=4*A)
    chain = Chain(plan, n_bubbles=36)
    assert chain.rest.centre_height/A == pytest.approx(height, rel=1e-9)
    per_volt = np.linalg.solve(chain.matrices.stiffness, chain.matrices.load)[chain.matrices.centre]
    assert per_volt*plan.bias/(2*e)/A == pytest.approx(slope, rel=3e-6)


def test_swept_volume_is_the_change_of_volume():
    """s.dq against the volumes of two rest states, -int pi r^2 dz (definition)."""
    plan = cone_plan(3.0, 1.2, 0.1, spring_rate=1.5*MU*H, spring_free_height=4*A)
    m = Chain(plan, n_bubbles=36).matrices
    push = np.zeros(len(m.swept))
    push[m.centre] = plan.spring_rate
    step, volumes = 1e-3*A, []
    for height in (4*A - step, 4*A + step):
        rest = Chain(replace(plan, spring_free_height=height), n_bubbles=36).rest
        volumes.append(np.sum(pi*rest.radius**2*rest.lam1*np.sin(rest.theta)*rest.weight))
    assert m.swept @ np.linalg.solve(m.stiffness, push) == pytest.approx((volumes[1] - volumes[0])/(2*step), rel=1e-6)


def test_dissipation_is_the_stiffness_of_a_relaxed_film_per_modulus():
    """Incompressible elasticity of small strain: K = mu D0 where the film is flat and free of stress (Hooke's law)."""
    plan = cone_plan(3.0, 1.0)
    rest = Chain(cone_plan(3.0, 1.2, held=0.0), n_bubbles=12).rest      # whose Gauss points are those of both
    one = np.ones_like(rest.R)
    flat = replace(rest, radius=rest.R, lam1=one, lam2=one, theta=0*one)
    m = slow_chain.assemble(plan, flat, 12)
    assert np.max(np.abs(m.stiffness - MU*m.dissipation)) < 1e-12*np.max(m.stiffness)


@pytest.mark.parametrize(("q", "mass", "spring", "ka"), membranes.DISK_ON_ANNULUS)
def test_flat_film_with_a_disk(q, mass, spring, ka):
    """Source: tests/references/membranes.py, DISK_ON_ANNULUS (A&S Table 9.7 without mass and spring, else derived)."""
    prestretch = 1.3
    a, sigma, tension = prestretch*A, RHO*H/prestretch**2, MU*H*(1 - prestretch**-6)
    plan = cone_plan(q, prestretch, centre_mass=mass*pi*a**2*sigma, spring_rate=spring*2*pi*tension)
    assert a*np.sqrt(eigenvalues(plan, axial_only=True)[:3]*sigma/tension) == pytest.approx(ka, rel=1e-9)


def test_piston_in_a_baffle():
    """Source: tests/references/acoustics.py, PISTON (Rayleigh, sec. 302). Its tail falls slowly, hence the far end."""
    piston = King(lambda kappa: slow_chain.disk_transform(kappa, 1.0)[:, None], 1.0, far=4000.0)
    for x, resistance, reactance in acoustics.PISTON:
        assert piston(x/2)[0, 0]/pi == pytest.approx(resistance + 1j*reactance, rel=1e-6)


@pytest.mark.parametrize("kb", acoustics.RING)
def test_ring_and_disk_in_a_baffle(kb):
    """Source: tests/references/acoustics.py, RING (derived), b/a = 2.5."""
    def transform(kappa):
        disk = slow_chain.disk_transform(kappa, 0.4)
        return np.stack([disk, slow_chain.disk_transform(kappa, 1.0) - disk], axis=1)

    Z = King(transform, 1.0, far=4000.0)(kb)
    ring, mutual, disk = Z[1, 1]/(pi*(1 - 0.4**2)), Z[0, 1], Z[0, 0]
    assert [part for z in (ring, mutual, disk) for part in (z.real, z.imag)] == \
        pytest.approx(acoustics.RING[kb], rel=3e-6, abs=1e-7)


def test_pressure_of_a_flat_piston():
    """On the axis near and far, and off it: acoustics.PISTON_ON_AXIS, PISTON_DIRECTIVITY (Kinsler & Frey, ch. 7)."""
    r, w = slow_chain.gauss_panels(np.linspace(0.0, 1.0, 9), 12)

    def over_rho_c(k, distance, angle):
        return k*abs(slow_chain.propagator(r, 0*r, k, distance, angle) @ (r*w))

    for ka, distance, amplitude in acoustics.PISTON_ON_AXIS:
        assert over_rho_c(ka, distance, 0.0) == pytest.approx(amplitude, rel=1e-9)
    for s, amplitude in acoustics.PISTON_DIRECTIVITY:
        k = s/np.sin(pi/3)
        ratio = over_rho_c(k, 1e5, pi/3)/over_rho_c(k, 1e5, 0.0)
        assert ratio == pytest.approx(abs(amplitude), rel=1e-4, abs=1e-4)


@pytest.mark.parametrize(("exponent", "celsius", "humidity", "per_km"), [row[1:5] for row in acoustics.ABSORPTION])
def test_absorption(exponent, celsius, humidity, per_km):
    """Source: tests/references/acoustics.py, ABSORPTION (ISO 9613-1:1993)."""
    assert 1e3*slow_chain.absorption(10**exponent, celsius + 273.15, 101325.0, humidity) == \
        pytest.approx(per_km, rel=1e-9)


# The engine against the slow chain ----------------------------------------------------------------------------------

def plan_of(design):
    """What the slow chain needs of a design; only what it knows of may be in it."""
    geometry, film, electrodes, centre, rear = (design.geometry, design.film, design.electrodes, design.centre,
                                                design.rear)
    assert design.air == engine.Air() and design.drive.law == "sine" and film.law == "neo-hookean"
    assert film.viscosity == 0 and film.relaxation == () and electrodes.shear_modulus == 0
    return Plan(
        frame_radius=geometry.frame_radius, centre_radius=geometry.centre_radius, shear_modulus=film.shear_modulus,
        film_density=film.density, thickness=film.thickness, layers=film.layers, prestretch=film.prestretch,
        permittivity=film.relative_permittivity, loss_factor=film.loss_factor,
        electrode_thickness=electrodes.thickness, electrode_density=electrodes.density, centre_mass=centre.mass,
        spring_rate=centre.spring_rate, spring_free_height=centre.spring_free_height,
        spring_loss_factor=centre.spring_loss_factor, rear_volume=rear.volume if rear.kind == "sealed" else None,
        rear_loss_factor=rear.loss_factor, bias=design.drive.bias, amplitude=design.drive.amplitude)


def frequencies(name):
    """(n_freq,) Hz, ascending: peaks, both flanks of each, and an even log grid, nothing left out.

    More than 25 dB below the median lie the lowest one or two of a sealed sample and 164 Hz of the arch, in a dip.
    """
    peaks = np.array(PEAKS[name])
    return np.unique(np.concatenate([EVEN, peaks, peaks*(1 - FLANK), peaks*(1 + FLANK)]))


@pytest.fixture(params=PEAKS)
def sample(request):
    return request.param, engine.load(SAMPLES / f"{request.param}.toml")


def test_level_of_the_samples(sample):
    """All that the engine leaves out or rounds together: below 0.05 dB on peaks, flanks and between them."""
    name, design = sample
    f = frequencies(name)
    chain = Chain(plan_of(design))
    response = engine.response(design, f)
    difference = response.level_db - chain.levels(f)[0]
    assert response.rest.centre_height == pytest.approx(chain.rest.centre_height, rel=1e-8)
    assert np.max(np.abs(difference)) < TOLERANCE, (f[np.argmax(np.abs(difference))], difference)


def test_the_highest_peaks_are_compared(sample):
    """Nothing high is left out: the five highest maxima of the engine's own grid are among the peaks listed."""
    name, design = sample
    response = engine.response(design)
    level = response.level_db
    maxima = 1 + np.flatnonzero((level[1:-1] > level[:-2]) & (level[1:-1] > level[2:]))
    highest = response.frequency[maxima[np.argsort(-level[maxima])[:5]]]
    assert np.all(np.min(np.abs(highest[:, None]/np.array(PEAKS[name]) - 1), axis=1) < FLANK)


def test_needle_peaks_in_frequency_and_width(sample):
    """Where a peak is narrow its flanks measure its frequency, to 2e-5, and its width, to 2 %.

    1/|p|^2 is a parabola about a resonance: its vertex and half-width from three frequencies.
    """
    name, design = sample
    chain = Chain(plan_of(design))
    for peak in sorted(PEAKS[name])[-3:]:
        step = 2e-4
        f = peak*np.array([1 - step, 1.0, 1 + step])
        vertex, width = [], []
        for level in (chain.levels(f)[0], engine.response(design, np.append(f, 5000.0)).level_db[:3]):
            c, b, a = np.polynomial.polynomial.polyfit([-step, 0.0, step], 10**(-level/10), 2)
            vertex.append(-b/(2*a))
            width.append(sqrt(c/a - vertex[-1]**2))
        assert abs(vertex[1] - vertex[0]) < 2e-5, (peak, vertex)
        assert width[1] == pytest.approx(width[0], rel=0.02), peak


def test_level_at_another_bias_and_off_the_axis():
    design = engine.load(SAMPLES / "bench-back.toml").with_values({"drive.bias": 1400.0})
    f, angle = np.array([30.0, 70.0, 160.0, 290.0, 700.0, 1300.0, 2400.0, 3600.0, 4300.0, 5000.0]), pi/3
    ahead, aside = Chain(plan_of(design)).levels(f, ((1.0, 0.0), (1.0, angle)))
    turned = engine.response(design.with_values({"listener.angle": angle}), f)
    assert np.max(np.abs(engine.response(design, f).level_db - ahead)) < TOLERANCE
    assert np.max(np.abs(turned.level_db - aside)) < TOLERANCE
    assert np.max(np.abs(aside - ahead)) > 3.0


@pytest.mark.parametrize(("change", "least"), [
    ({"shear_modulus": 1.01}, 0.5), ({"film_density": 1.01}, 0.1), ({"loss_factor": 1.02}, 0.1),
    ({"spring_loss_factor": 1.02}, 0.05), ({"rear_volume": 1.02}, 0.05), ({"permittivity": 1.01}, 0.07),
    ({"electrode_thickness": 1.02}, 0.1)])
def test_small_errors_would_be_noticed(change, least):
    """A hundredth or two of any one constant moves some level of the comparison by more than its tolerance."""
    design = engine.load(SAMPLES / "bench-back.toml")
    plan = plan_of(design)
    f = np.array([40.0, 69.5, 75.0, 280.0, 284.0, 665.22, 700.0, 900.29])
    wrong = Chain(replace(plan, **{name: factor*getattr(plan, name) for name, factor in change.items()}), far=150.0)
    assert np.max(np.abs(engine.response(design, f).level_db - wrong.levels(f)[0])) > least


def test_a_lost_air_load_or_face_would_be_noticed(sample):
    """Without the air on the film, or with its density halved (one face for two), levels move by decibels."""
    name, design = sample
    plan, f = plan_of(design), np.array(PEAKS[name][:4])
    right = engine.response(design, np.sort(f)).level_db
    for wrong in (replace(plan, air_load=False), replace(plan, air_density=plan.air_density/2)):
        assert np.max(np.abs(Chain(wrong, far=150.0).levels(np.sort(f))[0] - right)) > 6.5


def test_the_slow_chain_has_converged(sample):
    """Twice the wavenumbers and half as many polynomials again move no compared level by a tenth of the tolerance."""
    name, design = sample
    f = frequencies(name)[-6:]
    coarse, fine = (Chain(plan_of(design), n, far).levels(f)[0] for n, far in ((90, 600.0), (135, 1200.0)))
    assert np.max(np.abs(fine - coarse)) < 0.1*TOLERANCE
