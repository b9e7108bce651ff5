"""Clips through the film: steady tones against harmonic balance, a burst against scipy's time integration, bad input."""

import threading
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import engine
from engine import blocks
from engine import film as flm
from engine.errors import InvalidDesign, NotConverged, Stopped
from engine.response import basis_for
from engine.signals import _Source, render, resampled

RATE = 16000


def sample(name, **changes):
    return engine.load(f"sample_designs/{name}.toml").with_values(changes)


def tone(f, duration=0.9, rate=RATE):
    """A cosine that rises within 50 ms."""
    t = np.arange(int(duration*rate))/rate
    return np.cos(2*np.pi*f*t)*np.minimum(1.0, t/0.05)


def harmonics(p, f, n=8, rate=RATE, duration=0.3):
    """Complex amplitudes (n,) in the last of the clip, whole periods of it, the very end left out."""
    stop = len(p) - rate//20
    t = np.arange(stop - int(duration*rate), stop)/rate
    return 2/len(t)*np.exp(-2j*np.pi*f*np.outer(np.arange(1, n + 1), t)) @ p[stop - len(t):stop]


@pytest.mark.parametrize("name, law, f, changes", (
    ("fern-label", "sine", 100.0, {}),
    ("fern-label", "square-root", 60.0, {}),
    ("fern-label", "square-root", 400.0, {"drive.source_resistance": 2e5, "electrodes.sheet_resistance": 2e4}),
    ("bench-back", "sine", 440.0, {})))
def test_steady_tones_are_those_of_harmonic_balance(name, law, f, changes):
    """Every harmonic above -60 dB within 0.1 dB, the fundamental's phase within a degree."""
    design = sample(name, **{"drive.law": law}, **changes)
    expected = engine.distortion(design, [f]).harmonic_pressure[0]
    found = harmonics(render(design, tone(f), RATE), f)
    loud = np.abs(expected) > 1e-3*np.linalg.norm(expected)
    assert loud.sum() >= 2
    assert np.all(np.abs(20*np.log10(np.abs(found[loud])/np.abs(expected[loud]))) < 0.1)
    assert abs(np.angle(found[0]/expected[0])) < np.radians(1)


def test_a_burst_against_time_integration():
    """scipy's DOP853 on M q'' + eta D0 q' + dPi/dq(q, V(t)) = 0 from rest, in the modes below 500 Hz: no air, viscous film,
    so that the equation has no memory. A burst of half the bias that swings the film past its resonance."""
    design = sample("bench-back", **{
        "air.load": False, "rear.kind": "open", "film.loss_factor": 0.0, "film.viscosity": 700.0,
        "centre.spring_loss_factor": 0.0})
    system, basis = basis_for(design, 5000.0)
    keep = np.flatnonzero(basis.modes.frequency < 500.0)
    few = replace(basis, shapes=basis.shapes[keep], projected=tuple(t[:, keep][:, :, keep] for t in basis.projected),
                  modes=replace(basis.modes, frequency=basis.modes.frequency[keep]))
    P, made = few.shapes, blocks.table(system, few, 7500.0, 18750.0)

    def signal(t):
        return 900.0*np.sin(2*np.pi*70*t)*np.sin(np.pi*np.clip(t/0.14, 0, 1))**2

    march, states = blocks.March(made), []
    for start in range(0, 2*made.n_new, made.n_new):
        t = (start - made.n_context + np.arange(made.n_samples))/made.rate
        voltage = signal(t)
        states.append(march.chunk(blocks.samples(made, blocks.answer(made, voltage, march.r), voltage), lambda: None))
        march.advance()
    found = np.concatenate(states)[:, :len(P)] @ (P @ system.volume)

    inverse, D = np.linalg.inv((P*system.mass) @ P.T), 700.0*P @ system.dissipation @ P.T

    def slope(t, y):
        q, u = np.split(y, 2)
        force = P @ flm.residual(system.film, system.state + q @ P, design.drive.bias + signal(t))
        return np.concatenate([u, -inverse @ (force + D @ u)])

    found = found[:2800]                   # into the second chunk
    t = np.arange(len(found))/made.rate
    y = solve_ivp(slope, (0, t[-1]), np.zeros(2*len(P)), method="DOP853", t_eval=t, rtol=1e-6, atol=1e-11).y[:len(P)]
    expected = P @ system.volume @ y
    assert np.max(np.abs(found - expected)) < 2e-3*np.max(np.abs(expected))


def test_the_linear_version_is_the_response():
    """Of two tones at once the sum of both responses (superposition), whatever the law."""
    design = sample("fern-label", **{"drive.law": "square-root"})
    p = render(design, 0.5*tone(200.0) + 0.5*tone(1000.0), RATE, linear=True)
    expected = engine.response(design, np.array([200.0, 1000.0, 5000.0])).pressure[:2]/2
    found = harmonics(p, 200.0)
    np.testing.assert_allclose(found[[0, 4]], expected, rtol=2e-3)
    assert np.all(np.abs(found[[1, 2, 3]]) < 1e-4*np.abs(found[0]))


def test_a_compensated_drive_is_heard_without_harmonics():
    """The voltage that compensated_drive found, played as volts: harmonics 2 to 5 at least 55 dB down."""
    design, f = sample("fern-label"), 100.0
    found = engine.compensated_drive(design, f, n_harmonics=5)
    assert found.achieved
    t = np.arange(int(0.9*RATE))/RATE
    order = np.arange(len(found.source_voltage))
    voltage = np.real(np.exp(2j*np.pi*f*np.outer(t, order)) @ found.source_voltage)*np.minimum(1.0, t/0.05)
    heard = np.abs(harmonics(render(design, voltage, RATE, volts=True), f))
    assert np.all(heard[1:5] < 10**(-55/20)*heard[0])
    plain = np.abs(harmonics(render(design, tone(f), RATE), f))
    assert plain[1] > 1e-2*plain[0]


@pytest.mark.parametrize("rate", (8000, 192000))
def test_any_rate(rate):
    """The same sound at another rate: the tone's level does not change, nor does the length."""
    design = sample("fern-label", **{"drive.amplitude": 100.0})
    p = render(design, tone(250.0, 0.5, rate), rate)
    assert p.shape == (int(0.5*rate),)
    expected = engine.distortion(design, [250.0]).harmonic_pressure[0, 0]
    assert abs(harmonics(p, 250.0, 1, rate, 0.2)[0]) == pytest.approx(abs(expected), rel=5e-3)


def test_causes_come_first_and_silence_is_silent():
    """What is cut off a clip does not change what is heard before, and nothing is heard of nothing (elementary)."""
    design, clip = sample("fern-label"), tone(170.0, 0.6)
    whole, half = render(design, clip, RATE), render(design, clip[:RATE//2], RATE)
    early = slice(0, RATE//2 - RATE//20)
    assert np.max(np.abs(whole[early] - half[early])) < 2e-3*np.max(np.abs(whole))
    assert np.max(np.abs(render(design, np.zeros(1000), RATE))) < 1e-9
    assert render(design, [0.5], RATE).shape == (1,)


def test_progress_and_stop():
    design, told = sample("fern-label"), []
    render(design, tone(100.0, 0.4), RATE, progress=told.append)
    assert told == sorted(told) and len(told) > 2 and told[-1] == 1.0
    event = threading.Event()
    event.set()
    for stop in (event, lambda: True):
        with pytest.raises(Stopped):
            render(design, tone(100.0, 0.4), RATE, stop=stop)
    calls = []
    with pytest.raises(Stopped):        # in the middle
        render(design, tone(100.0, 0.4), RATE, stop=lambda: calls.append(0) or len(calls) > 5)


@pytest.mark.parametrize("law, filtered", (("sine", False), ("sine", True), ("square-root", False), ("square-root", True)))
def test_source_voltages_do_not_depend_on_the_pieces(law, filtered):
    """Whole or in pieces, the voltage is the same; slow signals are shaped exactly: sqrt(V0^2 + 2 V0 v) (identity)."""
    design = sample("bench-back", **{"drive.law": law})
    source = _Source(design, 0.9*tone(90.0, 0.1), Fraction(75, 64), False, False, filtered)
    whole = source.voltage(0, 1500)
    pieces = np.concatenate([source.voltage(start, 300) for start in range(0, 1500, 300)])
    np.testing.assert_allclose(pieces, whole, rtol=0, atol=1e-9*np.max(np.abs(whole)))
    signal = 250.0*0.9*resampled(tone(90.0, 0.1), 75, 64, 0, 1500)
    expected = signal if law == "sine" else np.sqrt(1900.0**2 + 2*1900.0*signal) - 1900.0
    np.testing.assert_allclose(whole, expected, atol=0.05)


@pytest.mark.parametrize("samples, rate, words", (
    ([], RATE, "one sample"), (np.zeros((5, 2)), RATE, "one channel"), ([0.0, np.nan], RATE, "sample 1"),
    ([0.0, np.inf], RATE, "sample 1"), ([0.0, 1.2], RATE, "reaches 1.2"), ([0.0], 7999, "8 kHz"), ([0.0], 2e5, "8 kHz"),
    ([0.0], np.nan, "8 kHz"), (["a"], RATE, "row of numbers"), ([0.0], "fast", "row of numbers"),
    ([1j], RATE, "row of numbers")))
def test_bad_clips_are_refused(samples, rate, words):
    with pytest.raises(InvalidDesign, match=words):
        render(sample("fern-label"), samples, rate)


def test_what_cannot_move_is_said():
    with pytest.raises(NotConverged, match="Lower the amplitude"):
        render(sample("fern-label"), 15000.0*tone(100.0, 0.2), RATE, volts=True)


def test_resampling_keeps_a_sine():
    """A sine well below both Nyquist frequencies at other times (closed form), in any piece of the clip."""
    t = np.arange(4000)
    x = np.sin(0.3*t)
    for up, down in ((3, 2), (25, 64), (7, 1), (1, 1)):
        for start, count in ((up*200//down, 500), (up*211//down + 1, 77)):
            expected = np.sin(0.3*(start + np.arange(count))*down/up)
            np.testing.assert_allclose(resampled(x, up, down, start, count), expected, atol=2e-4)
