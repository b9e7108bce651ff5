"""Rest states against independent solutions, closed forms and what must be refused."""

import numpy as np
import pytest

import engine
from engine import film as flm
from engine.errors import NoRestState, NotConverged
from engine.mesh import interpolate
from engine.statics import peak_voltage, solve
from tests.engine.dimensionless import EPS_R, MU, A, H, cone, voltage
from tests.references import membranes as ref

cones = pytest.mark.parametrize("c", ref.CONES, ids=lambda c: f"{c['law']}-{c['q']}-{c['prestretch']}-{c['h']}-{c['e']}")


def sprung(c, rate=0.5*2*np.pi):
    """The reference's cone, held at its height by a spring of K = rate mu H."""
    return cone(c["q"], c["prestretch"], c["e"], rate, c["h"] + c["force"]/rate, law=c["law"], parameters=c["parameters"])


@cones
def test_cone(c):
    """Derived values (boundary-value problem of He et al. 2009, J. Appl. Phys. 106:083522): shape, volume, capacitance."""
    rest = engine.equilibrium(sprung(c))
    assert rest.centre_height/A == pytest.approx(c["h"], abs=2e-9*c["force"])
    assert rest.stretch_meridional[[0, -1]] == pytest.approx((c["lam_in"], c["lam_out"]), rel=1e-8)
    middle = c["prestretch"]*A*(1 + c["q"])/2
    solved = solve(sprung(c))
    r, z = interpolate(solved.film.mesh, np.stack(flm.expand(solved.film, solved.state, at_rest=True)), np.array([middle]))
    assert (r[0]/A, z[0]/A) == pytest.approx((c["r_mid"], c["z_mid"]), rel=1e-8)
    assert rest.swept_volume/A**3 == pytest.approx(c["volume"], rel=1e-8)
    flat = flm.VACUUM_PERMITTIVITY*EPS_R*np.pi*A**2*(c["q"]**2 - 1)/H
    assert rest.capacitance/flat == pytest.approx(c["capacitance"], rel=1e-8)
    # the table's is the nominal stress, Cauchy stress over stretch, least of all points; ours is at the nodes
    assert np.min(rest.stress_hoop/rest.stretch_hoop)/MU == pytest.approx(c["least"], rel=1e-3)
    assert not rest.conditions


@cones
def test_tangent_is_the_derivative_of_the_residual(c):
    """Central differences of the residual, and of the potential, at the rest state and a little off it."""
    solved = solve(sprung(c))
    film, rng = solved.film, np.random.default_rng(5)
    q = solved.state + 1e-3*A*rng.standard_normal(film.n_dof)*np.exp(-np.arange(film.n_dof)/20)
    direction = rng.standard_normal(film.n_dof)*np.exp(-np.arange(film.n_dof)/10)
    direction *= 1e-6*A/np.max(np.abs(direction))
    _, g, K = flm.linearise(film, q, solved.bias)
    difference = flm.residual(film, q + direction, solved.bias) - flm.residual(film, q - direction, solved.bias)
    scale = np.max(np.abs(K @ direction))
    np.testing.assert_allclose(difference/2, K @ direction, atol=1e-7*scale)
    energy = flm.potential(film, q + direction, solved.bias) - flm.potential(film, q - direction, solved.bias)
    assert energy/2 == pytest.approx(g @ direction, rel=1e-5)


@pytest.mark.parametrize("row", ref.SPRING_BIASED, ids=lambda r: f"{r[0]}-{r[2]}")
def test_spring_biased(row):
    """Derived values (set-up of Carpi et al. 2008): height and capacitance grow as voltage softens the film."""
    law, parameters, q, prestretch, rate, free, points = row
    flat = flm.VACUUM_PERMITTIVITY*EPS_R*np.pi*A**2*(q**2 - 1)/H
    for e, height, capacitance in points:
        rest = engine.equilibrium(cone(q, prestretch, e, rate, free, law=law, parameters=parameters))
        assert (rest.centre_height/A, rest.capacitance/flat) == pytest.approx((height, capacitance), rel=1e-8)


@pytest.mark.parametrize("row", ref.STATIC_ANNULUS, ids=lambda r: str(r[0]))
def test_shallow_cone(row):
    """Laplace equation in an annulus (elementary): force and volume of a small height under tension T."""
    q, force, volume = row
    T = MU*H*(1 - 1.3**-6)
    h = 1e-3*A
    rate = 100.0
    rest = engine.equilibrium(cone(q, 1.3, 0.0, rate, (h + force*T*h/(rate*MU*H))/A))
    a = 1.3*A
    assert rest.centre_height == pytest.approx(h, rel=1e-4)
    assert rest.swept_volume/(np.pi*a**2*h) == pytest.approx(volume, rel=1e-4)


@pytest.mark.parametrize("row", ref.FLAT_TENSION, ids=lambda r: f"{r[0]}-{r[1]}")
def test_flat_tension_under_voltage(row):
    """Elementary: T = mu H (1 - l^-6 - e l^2); the film has no stiffness where the voltage has taken it all."""
    prestretch, e, tension, lost = row
    rest = engine.equilibrium(cone(2.5, prestretch, e, 1.0, 0.0))
    h = H/prestretch**2
    np.testing.assert_allclose(rest.stress_meridional*h/(MU*H), tension, rtol=1e-9)
    np.testing.assert_allclose(rest.stress_hoop*h/(MU*H), tension, rtol=1e-9)
    with pytest.raises(NoRestState) as refusal:
        engine.equilibrium(cone(2.5, prestretch, 1.3*lost, 1.0, 0.0))
    assert refusal.value.reason == "pull-in"
    # with a spring of its own the disk is held, so the film itself gives way first: a little above the loss of tension
    assert voltage(lost)*0.999 <= refusal.value.voltage <= voltage(1.3*lost)


def test_field_is_the_true_one():
    """Field in the stretched layer: E = V J/t (parallel plates, elementary), evaluated by hand from the stretches."""
    design = engine.load("sample_designs/bench-back.toml")
    rest = engine.equilibrium(design)
    true_thickness = design.film.thickness/(rest.stretch_meridional*rest.stretch_hoop)
    np.testing.assert_allclose(rest.field, design.drive.bias/true_thickness, rtol=1e-10)
    assert rest.peak_field > rest.field.max()*(peak_voltage(design.drive)/design.drive.bias)


def test_energy_has_its_minimum_at_the_rest_state():
    """Stable equilibrium (elementary): every small displacement raises the potential."""
    solved = solve(engine.load("sample_designs/fern-label.toml"))
    rng = np.random.default_rng(8)
    here = flm.potential(solved.film, solved.state, solved.bias)
    for _ in range(20):
        nearby = solved.state + 1e-5*rng.standard_normal(solved.film.n_dof)
        assert flm.potential(solved.film, nearby, solved.bias) > here


def test_breakdown_is_a_finding():
    bench = engine.load("sample_designs/bench-back.toml")
    rest = engine.equilibrium(bench.with_values({"film.breakdown_field": 35e6}))
    (finding,) = rest.conditions
    assert (finding.name, finding.at) == ("breakdown", "peak of the drive")
    assert finding.value > finding.limit and rest.breakdown_ratio > 1
    assert bench.geometry.centre_radius <= finding.where <= bench.geometry.frame_radius


def test_slack_film_with_a_stable_tangent_is_a_finding():
    """A cone pushed out of an unstretched film has hoop compression near the frame under voltage, yet is stable."""
    design = cone(3.0, 1.0, 0.2, 3.0, 2.0)
    rest = engine.equilibrium(design)
    assert rest.conditions[0].name == "slack" and rest.least_stress < 0
    assert "mm from the axis" in rest.conditions[0].text


def test_slack_film_without_stiffness_is_refused():
    with pytest.raises(NoRestState) as refusal:
        engine.equilibrium(cone(3.0, 1.0))
    assert refusal.value.reason == "slack" and "prestretch" in str(refusal.value)


def test_pull_in_is_reported_with_its_voltage():
    """Raising the bias just below the reported voltage has a rest state, just above has none."""
    bench = engine.load("sample_designs/bench-back.toml")
    with pytest.raises(NoRestState) as refusal:
        engine.equilibrium(bench.with_values({"drive.bias": 19e3}))
    limit = refusal.value.voltage
    assert refusal.value.reason == "pull-in" and f"{limit/1e3:.4g} kV" in str(refusal.value)
    engine.equilibrium(bench.with_values({"drive.bias": 0.999*limit, "drive.amplitude": 0.0}))
    with pytest.raises(NoRestState):
        engine.equilibrium(bench.with_values({"drive.bias": 1.002*limit, "drive.amplitude": 0.0}))


def test_pull_in_within_the_drive_is_a_finding():
    bench = engine.load("sample_designs/bench-back.toml")
    with pytest.raises(NoRestState) as refusal:
        engine.equilibrium(bench.with_values({"drive.bias": 19e3}))
    limit = refusal.value.voltage
    rest = engine.equilibrium(bench.with_values({"drive.bias": 0.9*limit, "drive.amplitude": 0.2*limit}))
    found = {f.name: f for f in rest.conditions}
    assert found["pull-in"].at == "peak of the drive"
    assert found["pull-in"].limit == pytest.approx(limit, rel=1e-3)


def test_gent_limit():
    """A spring that would stretch a Gent film beyond its limit is stopped by the film (Gent 1996)."""
    rest = engine.equilibrium(cone(2.0, 1.5, 0.0, 1000.0, 15.0, law="gent", parameters=(20.0,)))
    I1 = rest.stretch_meridional**2 + rest.stretch_hoop**2 + (rest.stretch_meridional*rest.stretch_hoop)**-2
    assert 15.0 < np.max(I1 - 3) < 20.0


@pytest.mark.parametrize("law, parameters", [("neo-hookean", ()), ("gent", (60.0,)), ("mooney-rivlin", (0.1,)),
                                             ("yeoh", (-0.01, 0.0005)), ("ogden", (1.0, 1.8, 0.01, 5.0))])
def test_random_designs_end_in_a_result_or_a_refusal(law, parameters):
    """Inside the bounds nothing ends in a NaN or an error of another kind (seeded)."""
    rng = np.random.default_rng(11)
    for _ in range(12):
        frame = np.exp(rng.uniform(np.log(5e-3), np.log(0.2)))
        design = engine.Design().with_values({
            "geometry.frame_radius": frame, "geometry.centre_radius": max(frame*rng.uniform(0.03, 0.95), 0.5e-3),
            "film.law": law, "film.law_parameters": parameters, "film.prestretch": rng.uniform(1.0, 3.0),
            "film.thickness": np.exp(rng.uniform(np.log(5e-6), np.log(5e-4))), "film.layers": int(rng.integers(1, 20)),
            "film.shear_modulus": np.exp(rng.uniform(np.log(5e3), np.log(3e6))),
            "centre.mass": rng.uniform(0, 0.1), "centre.spring_rate": np.exp(rng.uniform(np.log(1.0), np.log(1e5))),
            "centre.spring_free_height": rng.uniform(-0.1, 0.2), "drive.bias": rng.uniform(0, 8e3)})
        try:
            rest = engine.equilibrium(design)
        except NoRestState as refusal:
            assert refusal.reason in ("pull-in", "slack", "stretch-limit")
        except NotConverged as refusal:
            assert "lower the bias" in str(refusal)
        else:
            for name in ("radius", "height", "stress_meridional", "stress_hoop", "field"):
                assert np.all(np.isfinite(getattr(rest, name)))


def test_results_are_read_only():
    rest = engine.equilibrium(engine.Design())
    with pytest.raises(ValueError):
        rest.height[0] = 1.0
