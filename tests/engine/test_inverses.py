"""The linear part's inverses, modes eliminated and interpolated, against NumPy's inverse at every frequency."""

import numpy as np
import pytest

import engine
from engine import inverses
from engine.motion import reduce
from engine.response import basis_for


@pytest.mark.parametrize("name, n", (("fern-label", 300), ("bench-back", 300), ("bench-back", 2100)))
@pytest.mark.parametrize("change", ({}, {"drive.source_resistance": 1e5, "electrodes.sheet_resistance": 2e4},
                                    {"electrodes.sheet_resistance": 2e4}))
def test_against_the_plain_inverse(name, n, change):
    """Scaled by the diagonals, to single precision where nothing cancels."""
    system, basis = basis_for(engine.load(f"sample_designs/{name}.toml").with_values(change), 5000.0)
    reduced = reduce(system, basis)
    free = np.arange(0 if system.circuit.source_resistance > 0 else 1, len(system.circuit.inner))
    omega = 2*np.pi*np.exp(np.random.default_rng(5).uniform(np.log(15), np.log(7500), n))
    size = len(basis.shapes) + len(free)
    found = np.empty((n, size, size), np.complex64)
    inverses.fill(found, np.arange(n), system, basis, reduced, omega, free)
    found, omega = found[::n//100], omega[::n//100]
    expected = np.linalg.inv(inverses.linear_part(system, basis, reduced, omega, free))
    scale = np.sqrt(np.abs(np.diagonal(expected, axis1=1, axis2=2)))
    assert np.max(np.abs(found - expected)/(scale[:, :, None]*scale[:, None, :])) < 3e-5
