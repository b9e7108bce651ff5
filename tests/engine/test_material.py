"""Strain energies and viscoelastic factors against tables and finite differences."""

import numpy as np
import pytest

from engine.material import LAWS, energy_slopes, strain_energy, viscous_modulus
from tests.references import membranes as ref

PARAMETERS = {"neo-hookean": (), "mooney-rivlin": (0.3,), "gent": (40.0,), "yeoh": (-0.02, 0.0008),
              "ogden": (6.3, 1.3, 0.012, 5.0, -0.1, -2.0)}


def nominal(law, mu, parameters, lam1, lam2):
    """Nominal stresses dW/dlam1, dW/dlam2 by the chain rule from the derivatives in A and B (no prestretch)."""
    A, B = np.array([lam1**2]), np.array([lam2**2])
    _, WA, WB, *_ = strain_energy(law, parameters, mu, 1.0, A, B)
    return 2*lam1*WA[0], 2*lam2*WB[0]


@pytest.mark.parametrize("row", ref.NOMINAL_STRESS, ids=lambda r: f"{r[0]}-{r[3]}")
def test_nominal_stress(row):
    """Treloar 1975; Mooney 1940; Gent 1996; Yeoh 1990; Ogden 1972: uniaxial, equibiaxial, pure shear."""
    law, mu, parameters, lam, uniaxial, equibiaxial, shear, held = row
    if law == "ogden":      # the table's moduli are absolute: mu = sum(m alpha)/2
        mu = sum(m*a for m, a in zip(parameters[::2], parameters[1::2], strict=True))/2
    assert nominal(law, mu, parameters, lam, lam**-0.5)[0] == pytest.approx(uniaxial, rel=2e-9)
    assert nominal(law, mu, parameters, lam, lam)[0] == pytest.approx(equibiaxial, rel=2e-9)
    assert nominal(law, mu, parameters, lam, 1.0) == pytest.approx((shear, held), rel=2e-9)


@pytest.mark.parametrize("law", LAWS)
def test_small_strain_modulus_is_mu(law):
    """Pure shear at small strain: s1 = 4 mu e for an incompressible solid (elementary)."""
    e = 1e-6
    assert nominal(law, 2.5, PARAMETERS[law], 1 + e, 1.0)[0] == pytest.approx(4*2.5*e, rel=1e-4)


@pytest.mark.parametrize("law", LAWS)
def test_derivatives(law):
    """Central differences of the energy itself, at random stretches."""
    rng = np.random.default_rng(3)
    A, B = rng.uniform(0.8, 2.5, (2, 50))
    d = 1e-5

    def W(A, B):
        return np.array(strain_energy(law, PARAMETERS[law], 1.7, 1.2, A, B))

    at = W(A, B)
    dA, dB = (W(A + d, B) - W(A - d, B))/(2*d), (W(A, B + d) - W(A, B - d))/(2*d)
    for found, expected in ((at[1], dA[0]), (at[2], dB[0]), (at[3], dA[1]), (at[4], dA[2]), (at[4], dB[1]), (at[5], dB[2])):
        np.testing.assert_allclose(found, expected, rtol=2e-7, atol=2e-8)


@pytest.mark.parametrize("law", LAWS)
def test_slopes_alone(law):
    """Central differences of the energy; single precision stays single."""
    rng = np.random.default_rng(4)
    A, B = rng.uniform(0.8, 2.5, (2, 3, 20))
    d = 1e-5

    def W(A, B):
        return strain_energy(law, PARAMETERS[law], 1.7, 1.2, A, B)[0]

    found = energy_slopes(law, PARAMETERS[law], 1.7, 1.2, A, B)
    np.testing.assert_allclose(found[0], (W(A + d, B) - W(A - d, B))/(2*d), rtol=1e-6)
    np.testing.assert_allclose(found[1], (W(A, B + d) - W(A, B - d))/(2*d), rtol=1e-6)
    single = energy_slopes(law, PARAMETERS[law], 1.7, 1.2, A.astype(np.float32), B.astype(np.float32))
    assert single[0].dtype == single[1].dtype == np.float32
    np.testing.assert_allclose(single[0], found[0], rtol=1e-4)


def test_gent_has_a_limit():
    """Gent 1996: the energy ends where I1 - 3 = J_m."""
    energy = strain_energy("gent", (3.0,), 1.0, 1.0, np.array([1.5, 3.0]), np.array([1.5, 3.0]))[0]
    assert np.isfinite(energy[0]) and energy[1] == np.inf


def test_generalised_maxwell():
    """Ferry 1980: two branches over a long-time modulus; E' - E0 and E''."""
    E0, branches, omega, storage, loss = ref.MAXWELL
    S = viscous_modulus(np.array([omega]), E0, 0.0, 0.0, tuple((E/E0, tau) for E, tau in branches))[0]
    assert (E0 + S.real, S.imag) == pytest.approx((storage, loss), rel=1e-9)


def test_constant_loss_and_viscosity():
    """S = i mu tan(delta) + i omega eta; nothing at rest. Kelvin-Voigt: Ferry 1980, ch. 1."""
    np.testing.assert_allclose(viscous_modulus(np.array([0.0, 10.0]), 2.0, 0.1, 0.5), [0, 1j*(0.2 + 5.0)])
