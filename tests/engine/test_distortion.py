"""Distortion against an independent time integration, the linear response, and identities of the drive laws."""

import sys
from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import engine
from engine import balance, harmonic
from engine import film as flm
from engine.compensation import compensated_drive
from engine.distortion import distortion, waveform
from engine.errors import InvalidDesign
from engine.intermodulation import intermodulation
from engine.response import basis_for

samples = pytest.mark.parametrize("name", ("fern-label", "bench-back", "palm-house-arch"))


def sample(name):
    return engine.load(f"sample_designs/{name}.toml")


def decibels(a, b):
    return 20*np.log10(np.abs(a)/np.abs(b))


def viscous(law, viscosity, amplitude=250.0):
    """bench-back without what has memory: film losses viscous, the air and its rear off."""
    return sample("bench-back").with_values({
        "air.load": False, "rear.kind": "open", "film.loss_factor": 0.0, "film.viscosity": viscosity,
        "centre.spring_loss_factor": 0.0, "drive.law": law, "drive.amplitude": amplitude})


def few_modes(design, f, n_harmonics):
    """(system, shapes, problem, source components) of one fundamental in the modes below 900 Hz."""
    system, basis = basis_for(design, 5000.0)
    keep = np.flatnonzero(basis.modes.frequency < 900.0)
    few = replace(basis, shapes=basis.shapes[keep], projected=tuple(t[:, keep][:, :, keep] for t in basis.projected))
    order, n = np.arange(n_harmonics + 1), 8*n_harmonics
    phase = 2*np.pi*np.arange(n)/n
    task = harmonic.problem(system, few, 2*np.pi*f*order[None], phase[:, None]*order)
    return system, few.shapes, task, harmonic.components(task, waveform(design.drive, phase)[None, :, None])[..., 0]


def integrated(design, system, P, f, x):
    """Harmonics 0 to 4 (5,) of the swept volume, by scipy's DOP853 on M q'' + eta D0 q' + dPi/dq(q, V(t)) = 0, three
    periods after the motion x (n_harmonics+1, n_modes). The film's force is evaluated on the mesh state by state."""
    M, D = (P*system.mass) @ P.T, design.film.viscosity*P @ system.dissipation @ P.T
    inverse, omega, order = np.linalg.inv(M), 2*np.pi*f, np.arange(len(x))

    def slope(t, y):
        q, u = np.split(y, 2)
        V = design.drive.bias + waveform(design.drive, np.array([omega*t]))[0]
        return np.concatenate([u, -inverse @ (P @ flm.residual(system.film, system.state + q @ P, V) + D @ u)])

    start = np.concatenate([x.sum(axis=0).real, (1j*omega*order @ x).real])
    t = (3 + np.arange(96)/96)/f
    y = solve_ivp(slope, (0, t[-1]), start, method="DOP853", t_eval=t, rtol=1e-7, atol=1e-11).y[:len(P)]
    return np.exp(-2j*np.pi*np.outer(np.arange(5), np.arange(96))/96)*2/96 @ (P @ system.volume @ y)


def assert_same_harmonics(balanced, expected, least):
    """Harmonics 1 to 4 within 0.1 dB where above least of the total; they are a percent at least, heard from afar."""
    heard = np.abs(expected)*np.arange(5)**2        # far pressure goes with the volume's acceleration
    assert np.linalg.norm(heard[2:])/np.linalg.norm(heard[1:]) > 0.01
    loud = np.flatnonzero(np.abs(expected) > least*np.linalg.norm(expected[1:]))
    assert np.all(np.abs(decibels(balanced[loud], expected[loud])[loud > 0]) < 0.1)


@pytest.mark.parametrize("law, f", (("square-root", 120.0), ("sine", 45.0)))
def test_against_time_integration(law, f):
    """From the balanced state on: three periods later the harmonics are the same (a state that is no solution drifts)."""
    design = viscous(law, 150.0)
    system, P, task, drive = few_modes(design, f, 12)
    solved = balance.balance(task, drive)
    assert solved.converged[0]
    assert_same_harmonics(solved.motion[0] @ (P @ system.volume), integrated(design, system, P, f, solved.motion[0]), 1e-3)


def test_newton_where_the_fixed_point_fails():
    """Little damped, at a resonance, a signal of half the bias: the fixed point does not settle, Newton's method does, and
    the time integration stays there."""
    design = viscous("sine", 10.0, 1000.0)
    system, P, task, drive = few_modes(design, 58.6, 12)
    assert not balance.solve(task, drive)[1][0]
    assert not balance.balance(task, drive, thorough=False).converged[0]
    solved = balance.balance(task, drive)
    assert solved.converged[0]
    assert_same_harmonics(solved.motion[0] @ (P @ system.volume), integrated(design, system, P, 58.6, solved.motion[0]), 1e-3)


def test_newton_and_the_fixed_point_agree():
    """Where both work they find the same motion (elementary), the electrodes' line and source included."""
    design = sample("fern-label").with_values({"drive.source_resistance": 1e5, "electrodes.sheet_resistance": 2e4})
    system, basis = basis_for(design, 5000.0)
    f, order = np.array([70.0, 300.0]), np.arange(7)
    phase = 2*np.pi*np.arange(64)/64
    task = harmonic.problem(system, basis, 2*np.pi*f[:, None]*order, phase[:, None]*order)
    drive = np.repeat(harmonic.components(task, waveform(design.drive, phase)[None, :, None])[..., 0], 2, axis=0)
    x, settled = balance.solve(task, drive)
    y, found = balance.follow(task, drive, np.arange(2))
    assert settled.all() and found.all()
    np.testing.assert_allclose(y, x, rtol=0, atol=3e-5*np.abs(x).max())


@samples
def test_small_signals_are_the_linear_response(name):
    """The limit of small amplitude (elementary); the harmonics fall with the amplitude to their power."""
    f = np.array([35.0, 90.0, 260.0, 900.0, 2600.0])
    tiny = sample(name).with_values({"drive.amplitude": 0.05})
    np.testing.assert_allclose(distortion(tiny, f).harmonic_pressure[:, 0], engine.response(tiny, f).pressure, rtol=2e-3)
    low, high = (distortion(sample(name), f, amplitude=a).harmonic_pressure for a in (0.5, 1.0))
    np.testing.assert_allclose(np.abs(high[:, 1])/np.abs(low[:, 1]), 4.0, rtol=1e-2)


def test_square_root_identity():
    """The square of the shaped voltage is a pure tone: V^2 = V0^2 + 2 V0 v cos (identity)."""
    drive = sample("bench-back").with_values({"drive.law": "square-root"}).drive
    phase = np.linspace(0, 2*np.pi, 50)
    square = (drive.bias + waveform(drive, phase))**2
    np.testing.assert_allclose(square, drive.bias**2 + 2*drive.bias*drive.amplitude*np.cos(phase), rtol=1e-12)


def test_square_law_of_a_film_that_hardly_moves():
    """Force goes with V^2: the second harmonic of a sine is V1/4V0 of the fundamental, at equal response.

    Elementary; a heavy stiff centre keeps the film still, so the charge it draws at each harmonic tells of V alone: here
    the mean shift of the centre, v^2/2 against 2 V0 v of the fundamental, far below resonance.
    """
    design = sample("bench-back").with_values({"centre.spring_rate": 2e4, "centre.spring_free_height": 0.0115,
                                               "rear.kind": "open", "drive.amplitude": 10.0, "film.loss_factor": 0.0,
                                               "centre.spring_loss_factor": 0.0})
    found = distortion(design, [5.0])
    mean, first, second = found.centre_motion[0, :3]
    assert abs(mean)/abs(first) == pytest.approx(10.0/(4*1900.0), rel=0.02)
    assert abs(second)/abs(first) == pytest.approx(10.0/(4*1900.0), rel=0.02)


def test_pieces_of_the_frequencies_do_not_matter(monkeypatch):
    """Every frequency stands for itself (elementary): taken a few at a time, or in another order, they stay what they are."""
    f = np.array([300.0, 40.0, 900.0, 90.0, 30.0])
    whole = distortion(sample("fern-label"), f)
    monkeypatch.setattr(sys.modules["engine.distortion"], "MOST_NUMBERS", 2*8*1000)
    pieces = distortion(sample("fern-label"), f)
    assert len(pieces.conditions) == 5 and pieces.centre_motion.shape == whole.centre_motion.shape
    loud = np.abs(whole.harmonic_pressure) > 1e-3*np.abs(whole.harmonic_pressure[:, :1])
    np.testing.assert_allclose(pieces.harmonic_pressure[loud], whole.harmonic_pressure[loud], rtol=1e-3)


def still_film(**changes):
    """A stiff film with a stiff heavy centre, which a signal of a few hertz moves as the square of the voltage tells."""
    return sample("bench-back").with_values({
        "film.shear_modulus": 3e6, "centre.spring_rate": 2e4, "centre.spring_free_height": 0.0115, "rear.kind": "open",
        "film.loss_factor": 0.0, "centre.spring_loss_factor": 0.0, "air.load": False, "drive.bias": 2000.0,
        "drive.amplitude": 500.0, **changes})


def test_resistance_between_source_and_film_in_numbers():
    """V0 = 2000 V, v = 500 V, omega R C = 1: ratios of the harmonics of the square of the filtered voltage. The bias
    passes, the fundamental is taken down by |H|, the second harmonic of a sine by |H|^2 (elementary)."""
    at_rest = engine.equilibrium(still_film())
    R = 1/(2*np.pi*5.0*at_rest.capacitance)
    for law, resistance, expected in (("sine", 0.0, (0.0625, 0.0)), ("sine", R, (0.04419417382, 0.0)),
                                      ("square-root", R, (0.02047500999, 0.002444595280))):
        x = np.abs(distortion(still_film(**{"drive.law": law, "drive.source_resistance": resistance}), [5.0]).centre_motion[0])
        assert x[2]/x[1] == pytest.approx(expected[0], rel=5e-3)
        assert x[3]/x[1] == pytest.approx(expected[1], rel=5e-3, abs=5e-5)


def test_two_tones_through_the_square_law_in_numbers():
    """V0 = 2000 V, V1 = 400 V, V2 = 100 V: forces in 1600 : 400 : 80 : 5 : 40 : 40 at f1, f2, 2f1, 2f2, f2 - f1, f2 + f1
    (trigonometric identity), and the sum of the last two over f2's is V1/V0; the sound of a still film has them times f^2."""
    found = intermodulation(still_film(**{"drive.amplitude": 100.0}), 3.0, 10.0, ratio=4.0)
    force = {tuple(o): abs(p)/f**2 for o, p, f in zip(found.order, found.pressure, found.frequency, strict=True)}
    for order, expected in (((0, 1), 400), ((2, 0), 80), ((0, 2), 5), ((-1, 1), 40), ((1, 1), 40)):
        assert force[order]/force[1, 0] == pytest.approx(expected/1600, rel=0.02)
    assert (force[-1, 1] + force[1, 1])/force[0, 1] == pytest.approx(400/2000, rel=0.02)
    assert force[-2, 1] + force[2, 1] < 2e-3*force[0, 1]         # no third order in a square
    p = {tuple(o): abs(q) for o, q in zip(found.order, found.pressure, strict=True)}
    assert found.modulation_2 == pytest.approx((p[-1, 1] + p[1, 1])/p[0, 1])
    assert found.difference_2 == pytest.approx(p[-1, 1]/(p[1, 0] + p[0, 1]))


@samples
def test_facts_of_the_trade(name):
    """Common practice: THD grows with amplitude; a sine distorts more than the square-root law at low frequency, which
    leaves what material and geometry make."""
    design, f = sample(name), np.array([30.0])
    thd = [distortion(design, f, amplitude=a).thd[0] for a in (20.0, 60.0, 180.0)]
    assert thd[0] < thd[1] < thd[2]
    shaped = distortion(design.with_values({"drive.law": "square-root"}), f, amplitude=180.0).thd[0]
    assert 1e-4 < shaped < 0.5*thd[2]


def test_resistance_comes_before_the_square_root():
    """A source resistance filters the shaped voltage, so its square is no pure tone any more: distortion returns."""
    design = sample("bench-back").with_values({"drive.law": "square-root", "drive.amplitude": 200.0})
    clean = distortion(design, [400.0])
    filtered = distortion(design.with_values({"drive.source_resistance": 3e5}), [400.0])
    assert filtered.converged[0] and filtered.thd[0] > 1.5*clean.thd[0]
    small = design.with_values({"drive.source_resistance": 3e5, "electrodes.sheet_resistance": 1e5, "drive.amplitude": 0.2})
    np.testing.assert_allclose(distortion(small, [400.0]).harmonic_pressure[:, 0],
                               engine.response(small, np.array([400.0])).pressure, rtol=5e-3)


@pytest.mark.parametrize("frequency", [70.0, 100.0, 900.0])
def test_compensated_drive_silences_the_harmonics(frequency):
    """The drive solved for, driven: harmonics 2 to 5 at least 60 dB down, where the sine's are not; at resonances too."""
    design = sample("bench-back")
    found = compensated_drive(design, frequency, n_harmonics=5)
    p = np.abs(found.distortion.harmonic_pressure[0])
    assert found.achieved and np.all(p[1:5] < 1e-3*p[0])
    assert np.abs(distortion(design, [frequency]).harmonic_pressure[0, 1]) > 1e-2*p[0]
    assert found.peak_voltage > design.drive.bias


def test_compensation_says_when_it_cannot():
    """Three times the amplitude at a resonance: a reason, the best drive that was found, and finite numbers."""
    found = compensated_drive(sample("bench-back"), 1500.0, amplitude=1900.0)
    assert not found.achieved and "lower the amplitude" in found.finding
    assert found.residual > 1e-3 and 1900.0 < found.peak_voltage < 20e3 and np.all(np.isfinite(found.source_voltage))


def test_intermodulation_of_one_tone_is_its_harmonics():
    """With next to nothing of the second tone the products of the first are those of distortion()."""
    design = sample("fern-label").with_values({"drive.amplitude": 1e-3})
    both = intermodulation(design, 60.0, 700.0, ratio=1e5)
    alone = distortion(design.with_values({"drive.amplitude": 100.0}), [60.0])
    for k in (1, 2, 3):
        here = both.pressure[np.all(both.order == (k, 0), axis=1)][0]
        assert abs(here) == pytest.approx(abs(alone.harmonic_pressure[0, k - 1]), rel=5e-2 if k == 3 else 5e-3)


def test_intermodulation_is_symmetric_in_small_tones():
    """Second-order products of two small tones grow with the product of their amplitudes (elementary)."""
    low, high = (intermodulation(sample("bench-back"), 90.0, 400.0, amplitude=a) for a in (1.0, 2.0))
    at = np.all(low.order == (1, 1), axis=1)
    assert abs(high.pressure[at][0])/abs(low.pressure[at][0]) == pytest.approx(4.0, rel=1e-2)
    assert high.modulation_2 == pytest.approx(2*low.modulation_2, rel=1e-2)


def test_what_cannot_be_driven_is_said():
    design = sample("bench-back").with_values({"drive.amplitude": 6000.0})
    found = distortion(design, [60.0, 200.0])
    assert np.all(np.isfinite(found.thd)) and np.all(np.isfinite(found.harmonic_pressure))
    names = {f.name for told in found.conditions for f in told}
    assert names & {"pull-in", "slack", "breakdown"}
    for told, settled in zip(found.conditions, found.converged, strict=True):
        assert settled != ("pull-in" in {f.name for f in told})
    assert "resolution" in {f.name for f in distortion(sample("bench-back"), [3000.0]).conditions[0]}


@pytest.mark.parametrize("frequency, n", (([], 8), ([0.0], 8), ([np.nan], 8), ([100.0], 1), ([3e4], 8)))
def test_bad_questions_are_refused(frequency, n):
    with pytest.raises(InvalidDesign):
        distortion(sample("bench-back"), frequency, n_harmonics=n)
