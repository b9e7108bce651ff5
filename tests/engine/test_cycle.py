"""The film's force over sampled motions against derivatives of its potential, and the quantities of the cycle."""

import numpy as np
import pytest

import engine
from engine import cycle
from engine import film as flm
from engine.motion import reduce
from engine.response import basis_for


@pytest.mark.parametrize("law", ((), ("gent", (20.0,)), ("ogden", (1.0, 1.8, 0.002, 6.0))))
def test_force_charge_and_extremes(law):
    """Force: central differences of the potential (elementary). Charge: -dPi/dV. Stress, field and swept volume: those
    of the static model at the same state."""
    change = {"electrodes.shear_modulus": 2e5} | ({"film.law": law[0], "film.law_parameters": law[1]} if law else {})
    design = engine.load("sample_designs/bench-back.toml").with_values(change)
    system, basis = basis_for(design, 5000.0)
    film = system.film
    model = cycle.nonlinear(system, basis, reduce(system, basis))
    rng = np.random.default_rng(6)
    q = rng.standard_normal((2, 3, len(basis.shapes)))*1e-3/(1 + np.arange(len(basis.shapes)))**2
    q[..., -2:] *= 1e-2
    volts = rng.uniform(-300, 300, (2, 3, 1))
    one = np.eye(3)
    force, charge = cycle.force_and_charge(model, q, volts, one, one, True)
    found = cycle.extremes(model, q, volts, one)

    def potential(a, v):
        return flm.potential(film, system.state + a @ basis.shapes, system.rest.bias + v)

    a, v = q[1, 2], volts[1, 2, 0]
    for k in (0, 1, 5):
        d = np.zeros(len(a))
        d[k] = 1e-6
        held = film.spring_rate*(film.spring_free_height - system.state[0])*model.centre[k]     # part of the rest force
        expected = (potential(a + d, v) - potential(a - d, v))/2e-6 + held
        assert force[1, 2, k] == pytest.approx(expected, rel=1e-5, abs=1e-7)
    assert charge[1, 2, 0] == pytest.approx(-(potential(a, v + 1) - potential(a, v - 1))/2, rel=1e-7)

    stress, field, more = [], [], []
    s0 = flm.swept_volume(film, system.state)
    for state, signal in zip(q[1], volts[1, :, 0], strict=True):
        at = system.state + state @ basis.shapes
        s1, s2, E = flm.cauchy_stress(film, at, system.rest.bias + signal)
        stress.append(min(s1.min(), s2.min()))
        field.append(E.max())
        more.append(flm.swept_volume(film, at)[0] - s0[0] - s0[1] @ (at - system.state))
    assert found.least_stress[1] == pytest.approx(min(stress), rel=1e-10)
    assert found.peak_field[1] == pytest.approx(max(field), rel=1e-10)
    np.testing.assert_allclose(found.extra_volume[1], more, rtol=1e-6, atol=1e-6*np.max(np.abs(more)))
