"""The voltage window against closed forms, its own rest states and modes, and through turning points."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import bisect

import engine
from engine import film as flm
from engine import limits, mesh, statics
from engine.branch import arc, follow
from engine.film import VACUUM_PERMITTIVITY
from tests.engine.dimensionless import EPS_R, MU, H, cone, voltage
from tests.engine.test_slow_chain import plan_of
from tests.references import membranes as ref
from tests.references import slow_chain

samples = pytest.mark.parametrize("name", ("fern-label", "bench-back", "palm-house-arch"))


def sample(name):
    return engine.load(f"sample_designs/{name}.toml")


@pytest.mark.parametrize("stress, stretch, field", ref.DEAD_LOAD_PULL_IN, ids=str)
def test_pull_in_of_an_equibiaxial_sheet(stress, stretch, field):
    """Zhao & Suo 2007; Koh et al. 2011: neo-Hookean film under dead load, critical stretch and nominal field.

    The film's own energy: w(A, B; V) of a sheet without prestretch, A = B = l^2, less the work of the load; the voltage
    that holds a stretch has its largest value at pull-in.
    """
    film = statics.solve(cone(2.5, 1.0, 0.0, 1.0, 3.0)).film
    l = np.linspace(max(stretch - 0.3, 1.01), stretch + 0.3, 60001)     # noqa: E741
    none = flm.surface_energy(film, l**2, l**2, 0.0)[1]
    volt = flm.surface_energy(film, l**2, l**2, 1.0)[1] - none          # per V^2, negative
    squares = (none - stress*MU*H/(2*l))/-volt                          # w_A = s H/(2 l)
    at = int(np.argmax(squares))
    assert l[at] == pytest.approx(stretch, rel=2e-5)
    assert np.sqrt(squares[at])/H*np.sqrt(VACUUM_PERMITTIVITY*EPS_R/MU) == pytest.approx(field, rel=1e-8)


@pytest.mark.parametrize("limit, peak, peak_field, trough, trough_field", ref.GENT_SNAP, ids=str)
def test_gent_snap_through(limit, peak, peak_field, trough, trough_field):
    """Zhao & Suo 2010: maximum and following minimum of the voltage-stretch curve of a Gent film, no load."""
    film = statics.solve(cone(2.5, 1.0, 0.0, 1.0, 3.0, law="gent", parameters=(limit,))).film
    for stretch, field, pick in ((peak, peak_field, np.argmax), (trough, trough_field, np.argmin)):
        l = np.linspace(0.9*stretch, 1.1*stretch, 60001)                # noqa: E741
        none = flm.surface_energy(film, l**2, l**2, 0.0)[1]
        squares = none/(none - flm.surface_energy(film, l**2, l**2, 1.0)[1])
        at = int(pick(squares))
        assert l[at] == pytest.approx(stretch, rel=1e-5)
        assert np.sqrt(squares[at])/H*np.sqrt(VACUUM_PERMITTIVITY*EPS_R/MU) == pytest.approx(field, rel=1e-8)


@pytest.mark.parametrize("row", ref.FLAT_TENSION, ids=lambda r: f"{r[0]}-{r[1]}")
def test_loss_of_tension(row):
    """Elementary: e = l^-2 - l^-8 takes the tension of a flat clamped film; the first mode goes with sqrt(T)."""
    prestretch, e, _, lost = row
    design = cone(2.5, prestretch, e, 0.5, 0.0, mass=1e-5).with_values({"drive.amplitude": 0.2*voltage(lost)})
    window = engine.voltage_window(design)
    assert window.slack_voltage == pytest.approx(voltage(lost), rel=1e-3)
    assert window.pull_in_voltage == pytest.approx(voltage(lost), rel=1e-3)
    # capacitance of the flat film: l^4 times that of the film as bought
    assert window.capacitance[0] == pytest.approx(window.capacitance[5], rel=1e-9)


@samples
def test_window_is_made_of_rest_states_and_modes(name):
    """Each column equals the rest state and the modes computed for that bias alone."""
    design = sample(name)
    window = engine.voltage_window(design)
    assert len(window.bias) >= 60 and window.frequency.shape == (len(window.bias), 8)
    assert window.bias[0] == 0 and window.bias[-1] > design.drive.bias + design.drive.amplitude
    for i in (0, 17, 40):
        alone = design.with_values({"drive.bias": window.bias[i], "drive.amplitude": 0.0})
        rest = engine.equilibrium(alone)
        assert window.centre_height[i] == pytest.approx(rest.centre_height, rel=1e-7)
        assert window.peak_field[i] == pytest.approx(rest.peak_field, rel=1e-6)
        assert window.least_stress[i] == pytest.approx(rest.least_stress, rel=1e-6)
        assert window.capacitance[i] == pytest.approx(rest.capacitance, rel=1e-7)
        np.testing.assert_allclose(window.frequency[i], engine.modes(alone).frequency[:8], rtol=1e-3)


@samples
def test_walls(name):
    """Where each wall is said to be, its quantity is at its limit; the samples' first is breakdown (printed in kV)."""
    design = sample(name)
    window = engine.voltage_window(design)
    expected = {"fern-label": 2.3, "bench-back": 3.8, "palm-house-arch": 7.5}[name]
    assert window.breakdown_voltage/1e3 == pytest.approx(expected, abs=0.11)
    at = design.with_values({"drive.amplitude": 0.0, "drive.bias": window.breakdown_voltage})
    assert engine.equilibrium(at).breakdown_ratio == pytest.approx(1.0, rel=2e-3)
    at = design.with_values({"drive.amplitude": 0.0, "drive.bias": window.slack_voltage})
    stress = [engine.equilibrium(at.with_values({"drive.bias": k*window.slack_voltage})).least_stress for k in (0.998, 1.002)]
    assert stress[0] > 0 > stress[1]
    engine.equilibrium(design.with_values({"drive.amplitude": 0.0, "drive.bias": 0.999*window.pull_in_voltage}))
    with pytest.raises(engine.NoRestState):
        engine.equilibrium(design.with_values({"drive.amplitude": 0.0, "drive.bias": 1.001*window.pull_in_voltage}))


@samples
def test_slack_and_breakdown_by_shooting_and_bisection(name):
    """Rest states of tests/references/slow_chain.py (shooting, shares nothing with the engine), bisected in the bias to 1e-4:
    where the least stress falls to zero and where V lam1 lam2/H reaches the breakdown field."""
    design = sample(name)
    window, plan = engine.voltage_window(design), plan_of(design)

    def taut(bias):
        rest = slow_chain.solve_rest(replace(plan, bias=bias), 200)
        e = slow_chain.field_number(replace(plan, bias=bias))
        return min(s.min() for s in slow_chain.stresses(rest.lam1, rest.lam2, e))

    def field_left(bias):
        rest = slow_chain.solve_rest(replace(plan, bias=bias), 200)
        return design.film.breakdown_field - bias*np.max(rest.lam1*rest.lam2)/plan.thickness

    for quantity, wall in ((taut, window.slack_voltage), (field_left, window.breakdown_voltage)):
        assert wall == pytest.approx(bisect(quantity, 0.98*wall, 1.01*wall, rtol=1e-4), rel=1e-3)


def test_pull_in_is_named_with_its_voltage():
    """A design biased beyond pull-in is refused at the voltage the window gives; each names the other (consistency)."""
    soft = cone(2.5, 1.001, 0.0, 1.0, 0.2).with_values({"film.shear_modulus": 5e3, "drive.bias": 2000.0})
    limit = engine.voltage_window(soft).pull_in_voltage
    for call in (engine.equilibrium, engine.response, engine.overview):
        with pytest.raises(engine.NoRestState, match=r"pulls in at .* kV, before the bias of 2 kV: lower the bias") as refusal:
            call(soft)
        assert refusal.value.reason == "pull-in" and refusal.value.voltage == pytest.approx(limit, rel=1e-3)


def test_arc_passes_a_turning_point_and_snaps():
    """Along the arc every point is an equilibrium; past the turning point the tangent has one negative direction, and a
    Gent film becomes stable again (snap-through, Zhao & Suo 2010)."""
    design = cone(2.5, 1.3, 0.05, 2.0, 3.0, law="gent", parameters=(30.0,))
    rest = statics.solve(design)
    K = flm.linearise(rest.film, rest.state, rest.bias)[2]
    points = list(arc(rest.film, rest.state, K, rest.bias, most=90))
    volts = np.array([v for _, v, _ in points])
    lowest = np.array([np.linalg.eigvalsh(k)[0] for *_, k in points])
    force = MU*H*design.geometry.centre_radius/design.film.prestretch
    for q, v, _ in points[::7]:
        assert np.max(np.abs(flm.residual(rest.film, q, v))) < 1e-3*force
    turn = int(np.argmax(np.diff(volts) < 0))
    assert turn > 0 and np.all(lowest[:turn - 1] > 0) and lowest[turn + 2] < 0
    assert np.any(lowest[turn + 2:] > 0)
    _, _, end = follow(rest.film, rest.state, K, rest.bias, 2*volts[turn])
    assert end == pytest.approx(volts[turn], rel=5e-3)


def test_unstable_branch_is_in_the_picture_where_the_drive_comes_near_it():
    design = sample("bench-back")
    limit = engine.voltage_window(design).pull_in_voltage
    near = design.with_values({"drive.bias": 0.95*limit, "drive.amplitude": 10.0, "film.breakdown_field": 500e6})
    window = engine.voltage_window(near)
    assert not np.all(window.stable) and np.all(window.stable[:60])
    for name in ("bias", "centre_height", "peak_field", "least_stress", "capacitance", "frequency"):
        assert np.all(np.isfinite(getattr(window, name)))


def test_film_that_pulls_in_below_the_first_step():
    """A film with next to no stiffness: a window with its wall, no NaN."""
    soft = cone(2.5, 1.001, 0.0, 1.0, 0.2).with_values({"film.shear_modulus": 5e3, "drive.bias": 2000.0})
    window = engine.voltage_window(soft)
    assert window.pull_in_voltage < 1000 and np.all(np.isfinite(window.frequency))
    with pytest.raises(engine.NoRestState):
        engine.response(soft)


@samples
def test_margins(name):
    """By hand: wall over safety factor, less bias or amplitude; for the square-root law its peak voltage."""
    design = sample(name)
    window = engine.voltage_window(design)
    for margin in limits.margins(design, window, safety=1.5, mean_level_db=50.0):
        assert margin.largest_amplitude == pytest.approx(max(margin.voltage/1.5 - design.drive.bias, 0))
        assert margin.largest_bias == pytest.approx(margin.voltage/1.5 - design.drive.amplitude)
        assert margin.level_db == pytest.approx(50 + 20*np.log10(margin.largest_amplitude/design.drive.amplitude))
    root = design.with_values({"drive.law": "square-root"})
    for margin in limits.margins(root, window, safety=1.0):
        v = margin.largest_amplitude
        if v < root.drive.bias/2:
            assert np.sqrt(root.drive.bias**2 + 2*root.drive.bias*v) == pytest.approx(margin.voltage)


def test_excursion_is_the_first_order_of_the_rest_states():
    """At low frequency: peak field and least stress against rest states at a slightly higher bias."""
    design = sample("bench-back").with_values({"rear.kind": "open", "film.loss_factor": 0.0,
                                               "centre.spring_loss_factor": 0.0, "drive.amplitude": 2.0})
    found = engine.response(design, np.array([0.5, 5000.0]))
    moved = limits.excursion(design, found)
    there, up = (engine.equilibrium(design.with_values({"drive.amplitude": 0.0, "drive.bias": v})) for v in (1900.0, 1902.0))
    still = limits.excursion(design, engine.response(design.with_values({"drive.amplitude": 0.0}), found.frequency))
    assert moved.peak_field[0] - still.peak_field[0] == pytest.approx(up.peak_field - there.peak_field, rel=2e-3)
    assert still.least_stress[0] - moved.least_stress[0] == pytest.approx(there.least_stress - up.least_stress, rel=3e-2)


def test_linear_result_is_marked_where_it_cannot_hold():
    """The stroke at resonance grows with the amplitude until it passes a fifth of the cone's height (a stated part)."""
    design = sample("fern-label").with_values({"drive.amplitude": 600.0})
    found = engine.response(design)
    moved = limits.excursion(design, found)
    beyond = found.stroke > 0.2*found.rest.centre_height
    assert beyond.any() and not moved.linear[beyond].any() and moved.linear[~beyond & (moved.peak_field < 70e6)].any()
    assert any(f.name == "stroke" for f in moved.findings)


def test_largest_amplitude_meets_its_limit():
    design = sample("bench-back")
    largest = limits.excursion(design, engine.response(design)).largest_amplitude
    at = design.with_values({"drive.amplitude": largest})
    moved = limits.excursion(at, engine.response(at))
    assert moved.peak_field.max() == pytest.approx(design.film.breakdown_field, rel=1e-6) and moved.least_stress.min() > 0


def test_excursion_without_any_damping_is_finite():
    """Grid points fall on undamped resonances: numbers, however large."""
    design = sample("bench-back").with_values({"film.loss_factor": 0.0, "centre.spring_loss_factor": 0.0,
                                               "rear.loss_factor": 0.0, "air.load": False})
    with np.errstate(all="raise", under="ignore"):
        moved = limits.excursion(design, engine.response(design))
    for values in (moved.peak_field, moved.least_stress, moved.stroke, moved.largest_amplitude):
        assert np.all(np.isfinite(values))


def test_breakdown_band_of_an_even_field():
    """Weibull 1951: an even field E over area S fails at E0 (A0 ln(1/(1-F))/S)^(1/m)."""
    design = cone(2.5, 1.3, 0.05, 1.0, 0.0).with_values({"drive.amplitude": 100.0, "film.breakdown_field": 60e6})
    window = engine.voltage_window(design)
    area = np.pi*(design.geometry.frame_radius**2 - design.geometry.centre_radius**2)
    per_volt = design.film.prestretch**2/design.film.thickness
    for chance, found in zip((0.05, 0.5, 0.95), limits.breakdown_band(window, 12.0, 2e-4, 60e6), strict=True):
        assert found*per_volt == pytest.approx(60e6*(2e-4*-np.log(1 - chance)/area)**(1/12), rel=1e-4)


def test_mesh_of_the_window_is_the_static_one():
    """The eight lowest modes are resolved on it: doubling its elements moves none by 0.1 %."""
    design = sample("palm-house-arch")
    rest = statics.solve(design)
    assert rest.film.mesh.order == statics.STATIC_ORDER and isinstance(rest.film.mesh, mesh.Mesh)


@samples
def test_limits_view_says_what_the_parts_say(name):
    """Each number equals that of the part it comes from; the swing is the drive's own (elementary)."""
    design = sample(name)
    seen = engine.overview(design)
    view = engine.limits_view(design, seen.response, seen.excursion, seen.key_figures.mean_level_db,
                              engine.Judgement(safety=1.5))
    bias, amplitude = design.drive.bias, design.drive.amplitude
    assert view.swing == (bias - amplitude, bias + amplitude)
    breakdown = next(m for m in view.margins if m.wall == "breakdown")
    assert breakdown.largest_amplitude == pytest.approx(view.window.breakdown_voltage/1.5 - bias)
    peak = engine.equilibrium(design.with_values({"drive.bias": bias + amplitude, "drive.amplitude": 0.0}))
    assert view.at_peak.stroke == pytest.approx(abs(peak.centre_height - seen.response.rest.centre_height), rel=1e-6)
    assert view.at_peak.peak_field == pytest.approx(peak.peak_field, rel=1e-7)
    assert view.at_rest.least_stress > view.at_peak.least_stress > 0
    assert view.at_worst.stroke == seen.response.stroke.max() and len(view.at_worst.frequency) == 3
    root = design.with_values({"drive.law": "square-root"})
    low, high = engine.limits_view(root, seen.response, seen.excursion).swing
    assert high**2 - low**2 == pytest.approx(4*bias*amplitude)


def test_moving_the_drive_below_the_last_wall_computes_no_new_window():
    design = sample("bench-back")
    window = engine.voltage_window(design)
    assert engine.voltage_window(design.with_values({"drive.bias": 2050.0, "drive.amplitude": 120.0})) is window


def test_a_judgement_out_of_bounds_is_refused_in_words():
    with pytest.raises(engine.InvalidDesign, match=r"Safety factor .*allowed is 1 to 5"):
        engine.Judgement(safety=0.5)
