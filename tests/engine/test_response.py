"""The response: sums, energy, limits, convergence, and what must be refused."""

import sys

import numpy as np
import pytest

import engine
from engine import film as flm
from engine import linear, radiation
from engine.errors import InvalidDesign
from engine.mesh import interpolate
from engine.motion import reduce
from engine.resonances import resonances
from tests.engine.dimensionless import cone

mod = sys.modules["engine.response"]
samples = pytest.mark.parametrize("name", ("fern-label", "bench-back", "palm-house-arch"))
FREQUENCY = np.geomspace(20, 5000, 120)


def sample(name):
    return engine.load(f"sample_designs/{name}.toml")


def surface_motion(found):
    """Complex (n_freq, n_dof) motion of every free number of the mesh: modes and static corrections together."""
    return found.motion.unit*found.amplitude @ found.motion.basis.shapes


@samples
@pytest.mark.parametrize("angle", (0.0, 1.0))
def test_contributions_sum_to_the_pressure_of_the_total_motion(name, angle):
    """Rayleigh integral over the moving surface itself, by other quadrature points: composite midpoint in azimuth."""
    design = sample(name).with_values({"listener.angle": angle})
    found = engine.response(design, FREQUENCY[::8])
    np.testing.assert_allclose(found.contribution.sum(axis=1), found.pressure, rtol=0, atol=1e-10*np.abs(found.pressure).max())
    system, u = found.motion.system, surface_motion(found)
    film, d, c = system.film, design.listener.distance, system.air.sound_speed
    x, w = np.polynomial.legendre.leggauss(40)
    edges = film.mesh.edges
    r0 = (edges[:-1, None] + np.diff(edges)[:, None]*(1 + x)/2).ravel()
    weight = (np.diff(edges)[:, None]*w/2).ravel()
    radial, axial = flm.expand(film, system.state, at_rest=True)
    d_radial, d_axial = flm.expand(film, u)
    r, z, dr, dz = (interpolate(film.mesh, v, r0) for v in (radial, axial, _slope(film, radial), _slope(film, axial)))
    flow = (dr*interpolate(film.mesh, d_axial, r0) - dz*interpolate(film.mesh, d_radial, r0))*2*np.pi*r*weight
    rc = edges[0]*(1 + x)/2
    flow = np.concatenate([flow, u[:, :1]*np.pi*edges[0]*w*rc], axis=1)
    r, z = np.append(r, rc), np.append(z, np.full(len(rc), system.state[0]))
    phi = 2*np.pi*(np.arange(240) + 0.5)/240
    k = 2*np.pi*found.frequency/c
    total = np.zeros(len(k), complex)
    for p in phi:
        R = np.sqrt((d*np.sin(angle) - r*np.cos(p))**2 + (r*np.sin(p))**2 + (d*np.cos(angle) - z)**2)
        total += np.sum(flow*np.exp(-1j*np.outer(k, R))/R, axis=1)/len(phi)
    total *= -(2*np.pi*found.frequency)**2*system.air.density/(2*np.pi)*10**(-system.air.absorption(found.frequency)*d/20)
    np.testing.assert_allclose(total, found.pressure, rtol=1e-9, atol=1e-10*np.abs(found.pressure).max())


def _slope(film, values):
    """Nodal derivative by r0 where it is single-valued: average of both sides at edges."""
    slope = film.mesh.derivative(values)
    out, count = np.zeros(film.mesh.n_nodes), np.zeros(film.mesh.n_nodes)
    np.add.at(out, film.mesh.nodes, slope)
    np.add.at(count, film.mesh.nodes, 1.0)
    return out/count


@samples
def test_motion_solves_the_unreduced_system(name):
    """Full matrices of the mesh and of the air, no modes: motion of the centre within 0.05 dB (an independent solution)."""
    found = engine.response(sample(name), FREQUENCY[5::12])
    s = found.motion.system
    v, e = s.volume, np.eye(s.film.n_dof)[0]
    design = sample(name)
    for i, f in enumerate(found.frequency):
        omega = 2*np.pi*f
        Z = radiation.impedance(s.projector, np.array([omega*s.frame_radius/s.air.sound_speed]),
                                s.air.density*s.air.sound_speed, s.frame_radius)[0]
        A = (s.stiffness + 1j*design.film.shear_modulus*design.film.loss_factor*s.dissipation
             + 1j*design.centre.spring_loss_factor*design.centre.spring_rate*np.outer(e, e)
             + (1 + 1j*s.rear.loss_factor)*s.rear.stiffness*np.outer(v, v) + 1j*omega*s.rear.faces*Z
             - omega**2*np.diag(s.mass))
        full = np.linalg.solve(A, s.circuit.loads[0]*design.drive.amplitude)
        reduced = surface_motion(found)[i]
        assert abs(20*np.log10(abs(reduced @ v)/abs(full @ v))) < 0.05
        assert abs(20*np.log10(abs(reduced[0])/abs(full[0]))) < 0.05


@samples
def test_shares_and_survival(name):
    """Definition of the share map: a column sums to the survival, everything within +-1."""
    found = engine.response(sample(name), FREQUENCY)
    np.testing.assert_allclose(found.signed_share.sum(axis=1), found.survival, atol=1e-12)
    assert np.all(np.abs(found.signed_share) <= 1) and np.all((found.survival > 0) & (found.survival <= 1 + 1e-12))


def test_pumping_makes_the_pumping_peak():
    """In the basis in air the pumping resonance is one mode's: share and survival 1.00 on a sealed sample."""
    design = sample("bench-back")
    modes = engine.modes(design)
    found = engine.response(design, np.array([modes.frequency[modes.pumping], 5000.0]))
    assert found.signed_share[0, modes.pumping] == pytest.approx(1.0, abs=0.02)
    assert found.survival[0] == pytest.approx(1.0, abs=0.02)


def test_low_frequency_level_is_a_monopole():
    """Half-space monopole, |p| = rho omega^2 V/(2 pi r) (Pierce 1989, ch. 4), from the swept volume far away."""
    design = sample("fern-label").with_values({"listener.distance": 20.0, "air.relative_humidity": 0.5})
    found = engine.response(design, np.array([20.0, 25.0, 30.0]))
    s = found.motion.system
    V = np.abs(surface_motion(found) @ s.volume)
    expected = s.air.density*(2*np.pi*found.frequency)**2*V/(2*np.pi*20.0)
    np.testing.assert_allclose(np.abs(found.pressure), expected, rtol=2e-3)
    np.testing.assert_allclose(found.level_db, 20*np.log10(expected/np.sqrt(2)/20e-6), atol=0.02)


def test_static_limit_of_the_motion():
    """Far below resonance the centre follows dh/dV of the rest states, by central differences of the bias."""
    design = sample("bench-back").with_values({
        "rear.kind": "open", "film.loss_factor": 0.0, "centre.spring_loss_factor": 0.0, "drive.amplitude": 1.0})
    found = engine.response(design, np.array([0.5, 5000.0]))
    up, down = (engine.equilibrium(design.with_values({"drive.bias": 1900.0 + d})).centre_height for d in (1.0, -1.0))
    assert found.stroke[0] == pytest.approx(abs(up - down)/2, rel=1e-3)


def test_sound_power_is_the_far_field_integral():
    """Power of a nearly flat film = intensity over the half-space (Kinsler & Frey, ch. 7), by Gauss quadrature."""
    design = cone(2.5, 1.3, 0.1, 5.0, 1e-3, mass=2e-4).with_values({
        "air.load": True, "film.loss_factor": 0.05, "drive.amplitude": 10.0, "listener.distance": 100.0,
        "air.relative_humidity": 0.0})
    x, w = np.polynomial.legendre.leggauss(24)
    angles, weight = np.pi/4*(1 + x), np.pi/4*w
    found = engine.response(design, np.array([200.0, 900.0, 2500.0, 5000.0]))
    s = found.motion.system
    p = np.abs(found.directivity(angles))*10**(s.air.absorption(found.frequency)*100.0/20)[:, None]
    integral = np.sum(p**2*np.sin(angles)*weight, axis=1)*2*np.pi*100.0**2/(2*s.air.density*s.air.sound_speed)
    np.testing.assert_allclose(found.sound_power, integral, rtol=3e-4)


@samples
def test_power_balance(name):
    """Electrical power in = film + spring + rear loss + power of the loaded faces, cycle averages (energy)."""
    found = engine.response(sample(name), FREQUENCY[::4])
    design, s, u = sample(name), found.motion.system, surface_motion(found)
    omega = 2*np.pi*found.frequency
    power_in = (design.drive.amplitude**2/2*(1/found.impedance)).real
    film = omega/2*design.film.shear_modulus*design.film.loss_factor*np.einsum("fi,ij,fj->f", u.conj(), s.dissipation, u).real
    spring = omega/2*design.centre.spring_loss_factor*design.centre.spring_rate*np.abs(u[:, 0])**2
    rear = omega/2*s.rear.loss_factor*s.rear.stiffness*np.abs(u @ s.volume)**2
    np.testing.assert_allclose(power_in, film + spring + rear + s.rear.faces*found.sound_power, rtol=1e-9)


def test_level_is_linear_in_the_amplitude():
    quiet, loud = (engine.response(sample("bench-back").with_values({"drive.amplitude": a}), FREQUENCY) for a in (25.0, 250.0))
    np.testing.assert_allclose(loud.level_db - quiet.level_db, 20.0, atol=1e-9)


def test_impedance_is_a_capacitance_far_from_resonance():
    """1/(i omega C) with the static change of charge by the motion in C at low frequency (elementary)."""
    design = sample("bench-back").with_values({"drive.bias": 10.0, "drive.amplitude": 1.0})
    found = engine.response(design, np.array([30.0, 5000.0]))
    np.testing.assert_allclose(found.impedance, 1/(2j*np.pi*found.frequency*found.rest.capacitance), rtol=1e-4)


@samples
def test_levels_converge(name):
    """Doubling mesh, polynomials and modes moves no level by 0.2 dB away from dips."""
    design = sample(name)
    coarse = engine.response(design, FREQUENCY)
    kept = linear.MODES_TO
    linear.MODES_TO = 2*kept
    try:
        system = linear.build(design, 5000.0, refinement=2.0)
        basis = sys.modules["engine.modes"].solve(system)
        motion = mod.solve_motion(system, basis, FREQUENCY)
    finally:
        linear.MODES_TO = kept
    assert len(basis.modes.frequency) > 1.6*len(coarse.modes.frequency)
    p = np.sum(mod._transfer(motion, 1.0, 0.0)*motion.unit, axis=1)*design.drive.amplitude
    change = np.abs(mod.level(p) - coarse.level_db)
    dip = coarse.level_db < np.median(coarse.level_db) - 15
    assert np.max(change[~dip]) < 0.2


def test_grid_is_refined_around_resonances():
    """A grid of even steps is filled up so that a peak is not missed: half-power points within the step (common practice)."""
    found = engine.response(sample("palm-house-arch"))
    assert found.frequency[0] == 20.0 and found.frequency[-1] == 5000.0 and np.all(np.diff(found.frequency) > 0)
    fine = engine.response(sample("palm-house-arch"), np.geomspace(20, 5000, 6000))
    peaks = (fine.level_db[1:-1] > fine.level_db[:-2]) & (fine.level_db[1:-1] > fine.level_db[2:])
    at, level = fine.frequency[1:-1][peaks], fine.level_db[1:-1][peaks]
    high = level > np.median(fine.level_db)
    missed = level[high] - np.interp(np.log(at[high]), np.log(found.frequency), found.level_db)
    assert np.max(missed) < 1.0


def test_depth_makes_it_an_estimate():
    """Against a boundary-element solution of a rigid cone: 0.5 dB is reached near k b = 1 for h/b = 0.2 (published in
    DEVELOPERS.md)."""
    design = sample("palm-house-arch")
    found = engine.response(design, FREQUENCY)
    kb = 2*np.pi*found.estimate_above/found.motion.system.air.sound_speed*design.geometry.frame_radius
    assert 0.19 < found.rest.centre_height/design.geometry.frame_radius < 0.2 and kb == pytest.approx(1.0, rel=0.2)


def test_no_bias_no_sound():
    found = engine.response(sample("bench-back").with_values({"drive.bias": 0.0}), FREQUENCY)
    for values in (found.level_db, found.signed_share, found.survival, found.stroke, found.impedance):
        assert np.all(np.isfinite(values))
    assert np.all(found.survival == 0) and np.all(found.signed_share == 0) and np.all(found.level_db == -400)
    assert np.all(np.isfinite(engine.energy_share(found)))


def test_too_many_modes_is_said():
    found = engine.response(sample("palm-house-arch").with_values({
        "geometry.frame_radius": 0.2, "film.prestretch": 1.03, "film.shear_modulus": 2e4, "drive.bias": 100.0,
        "drive.amplitude": 10.0}), FREQUENCY)
    finding = next(f for f in found.findings if f.name == "resolution")
    assert finding.limit < 5000 and "Hz" in finding.text


@pytest.mark.parametrize("frequency", ([], [0.0, 10.0], [30.0, 20.0], [np.nan], [[1.0]], [1e6]))
def test_bad_frequencies_are_refused(frequency):
    with pytest.raises(InvalidDesign, match="frequencies"):
        engine.response(engine.Design(), np.array(frequency))


@pytest.mark.parametrize("band", ((0.0, 100.0), (100.0, 50.0), (20.0, np.inf)))
def test_bad_bands_are_refused(band):
    with pytest.raises(InvalidDesign, match="band"):
        engine.overview(engine.Design(), band)


def test_listener_behind_the_film_is_refused():
    with pytest.raises(InvalidDesign) as refusal:
        engine.response(sample("bench-back").with_values({"listener.distance": 0.01}))
    assert refusal.value.key == "listener.distance" and "further away" in str(refusal.value)


def test_overview_figures():
    """Key figures of a response are what its arrays say (by hand)."""
    found = engine.overview(sample("bench-back"), (50.0, 2000.0))
    response, key = found.response, found.key_figures
    assert (response.frequency[0], response.frequency[-1]) == (50.0, 2000.0)
    x = np.log(response.frequency)
    assert key.mean_level_db == pytest.approx(np.trapezoid(response.level_db, x)/(x[-1] - x[0]))
    assert key.largest_stroke == response.stroke.max()
    assert found.energy_share.sum() == pytest.approx(1.0)
    assert np.argmax(found.energy_share) != len(found.energy_share) - 1


@samples
def test_resonances_are_where_the_motion_peaks(name):
    """A needle's own motion, searched on a fine grid, peaks within a third of its half-width of the resonance, and its
    half-power width is about the damping ratio's (definition); close pairs, which share their peaks, are left out."""
    found = engine.response(sample(name), np.geomspace(20, 5000, 40))
    system, basis = found.motion.system, found.motion.basis
    which = np.flatnonzero((basis.modes.damping_ratio < 0.01) & (basis.refined < 4900))
    at = resonances(system, basis, reduce(system, basis), which)
    f, zeta = at.real, at.imag/at.real
    alone = np.array([np.min(np.abs(np.delete(basis.refined, m)/basis.refined[m] - 1)) > 0.008 for m in which])
    tried = np.flatnonzero(alone)[::3]
    assert len(tried) >= 3
    for i in tried:
        near = f[i]*(1 + zeta[i]*np.linspace(-2, 2, 81))
        size = np.abs(mod.solve_motion(system, basis, np.append(near, 5000.0)).unit[:-1, which[i]])
        top = np.argmax(size)
        above = near[size > size[top]/np.sqrt(2)]
        assert abs(near[top]/f[i] - 1) < zeta[i]/3
        assert 0.6 < np.ptp(above)/near[top]/(2*zeta[i]) < 1.6
