"""Modes against tables of flat annuli, derived values of cones in both displacements, and invariants."""

import sys

import numpy as np
import pytest
import scipy.linalg

import engine
from engine import linear
from engine.air import properties
from engine.errors import InvalidDesign
from tests.engine.dimensionless import FREQUENCY_UNIT, MU, RHO, A, H, cone
from tests.engine.test_statics import cones, sprung
from tests.references import membranes as ref

solve = sys.modules["engine.modes"].solve
SAMPLES = ("fern-label", "bench-back", "palm-house-arch")
samples = pytest.mark.parametrize("name", SAMPLES)


def squares(design, n=3):
    """omega^2 rho A^2/mu of the first n modes."""
    return (engine.modes(design, frequency_max=20*FREQUENCY_UNIT).frequency[:n]/FREQUENCY_UNIT)**2


@cones
def test_cone_modes_with_a_sprung_disk(c):
    """Derived: second variation about the static state, r and z coupled, in vacuo; the whole production path."""
    design = sprung(c, rate=0.5*2*np.pi).with_values({"centre.mass": 2*2*np.pi*RHO*H*A**2})
    np.testing.assert_allclose(squares(design), c["sprung"], rtol=1e-6)


@cones
def test_cone_modes_with_the_disk_free_and_held(c):
    """The same with the spring's stiffness taken out of the tangent, and with the disk's row struck out."""
    design = sprung(c, rate=0.5*2*np.pi).with_values({"centre.mass": 2*2*np.pi*RHO*H*A**2})
    system = linear.build(design, 20*FREQUENCY_UNIT)
    K, M = system.stiffness.copy(), np.diag(system.mass)
    K[0, 0] -= design.centre.spring_rate
    unit = (2*np.pi*FREQUENCY_UNIT)**2
    free = scipy.linalg.eigh(K, M, eigvals_only=True)[:3]/unit
    held = scipy.linalg.eigh(K[1:, 1:], M[1:, 1:], eigvals_only=True)[:3]/unit
    np.testing.assert_allclose(free, c["free"], rtol=1e-6)
    np.testing.assert_allclose(held, c["held"], rtol=1e-6)


def flat(q, mass, spring, prestretch=1.3):
    """Flat annulus with M/(pi a^2 sigma) and K/(2 pi T); (design, Hz per unit of k a, T, a)."""
    T, sigma, a = MU*H*(1 - prestretch**-6), RHO*H/prestretch**2, prestretch*A
    design = cone(q, prestretch, 0.0, spring*2*np.pi*T/(MU*H), 0.0, mass*np.pi*a**2*sigma)
    return design, np.sqrt(T/sigma)/a/(2*np.pi), T, a


def transverse(design, top):
    found = engine.modes(design, frequency_max=top)
    return found.frequency[np.array(found.kind) != "in-plane"]


@pytest.mark.parametrize("row", ref.DISK_ON_ANNULUS, ids=str)
def test_disk_on_a_flat_annulus(row):
    """Derived; without mass and spring Abramowitz & Stegun 1964, Table 9.7."""
    q, mass, spring, ka = row
    design, unit, *_ = flat(q, mass, spring)
    np.testing.assert_allclose(transverse(design, 8*unit)[:3]/unit, ka, rtol=1e-8)


@pytest.mark.parametrize("row", ref.HELD_ANNULUS, ids=lambda r: str(r[0]))
def test_clamped_annulus(row):
    """Abramowitz & Stegun 1964, Table 9.7: both rims held; the disk's row struck out of the flat film's matrices."""
    q, ka = row
    design, unit, *_ = flat(q, 1.0, 0.0)
    system = linear.build(design, 1.1*ka[-1]*unit)
    axial = np.arange(2, system.film.n_dof, 2)
    K, m = system.stiffness[np.ix_(axial, axial)], system.mass[axial]
    found = np.sqrt(scipy.linalg.eigh(K, np.diag(m), eigvals_only=True)[:3])/(2*np.pi*unit)
    np.testing.assert_allclose(found, ka, rtol=1e-8)


@pytest.mark.parametrize("row", ref.DISK_ON_SEALED_VOLUME, ids=str)
def test_disk_closing_a_sealed_volume(row):
    """Derived: 3x3 determinant with a uniform cavity pressure (kettledrum of Kinsler & Frey, ch. 4, with a disk)."""
    q, mass, spring, chi, ka = row
    design, unit, T, a = flat(q, mass, spring)
    gas = properties(design.air.temperature, design.air.pressure, design.air.relative_humidity)
    volume = np.pi*a**4*gas.density*gas.sound_speed**2/(T*chi)
    sealed = design.with_values({"rear.kind": "sealed", "rear.volume": volume, "rear.loss_factor": 0.0})
    np.testing.assert_allclose(transverse(sealed, 8*unit)[:3]/unit, ka, rtol=1e-7)


@samples
def test_issue_frequencies(name):
    """Pumping and first break-up frequency in air of the samples, from an independent prototype (1 Hz as printed)."""
    expected = {"fern-label": (86, 559), "bench-back": (69, 279), "palm-house-arch": (48, 102)}[name]
    modes = engine.modes(engine.load(f"sample_designs/{name}.toml"))
    found = modes.frequency[modes.pumping], modes.frequency[modes.first_break_up]
    assert found == pytest.approx(expected, abs=1.0)


@samples
def test_air_lowers_every_mode(name):
    """Added mass lowers each ranked frequency of an open film (Rayleigh's theorem on constraints and masses)."""
    design = engine.load(f"sample_designs/{name}.toml").with_values({"rear.kind": "open"})
    modes = engine.modes(design)
    assert np.all(modes.frequency < modes.frequency_vacuum*(1 + 1e-9))
    off = engine.modes(design.with_values({"air.load": False}))
    np.testing.assert_allclose(off.frequency, off.frequency_vacuum, rtol=1e-9)


@samples
def test_modes_are_orthogonal_and_scaled(name):
    """Orthogonal in the wet mass; largest displacement 1, swept volume never negative, shares between 0 and 1."""
    system = linear.build(engine.load(f"sample_designs/{name}.toml"), 5000.0)
    basis = solve(system)
    wet = (basis.shapes*system.mass) @ basis.shapes.T + linear.air_mass(system, basis.shapes)
    scale = np.sqrt(np.diag(wet))
    np.testing.assert_allclose(wet/np.outer(scale, scale), np.eye(len(wet)), atol=1e-8)
    modes = basis.modes
    np.testing.assert_allclose(np.max(np.hypot(modes.radial, modes.axial), axis=1), 1.0, rtol=1e-12)
    assert np.all(modes.volume_displacement >= 0)
    assert np.all((modes.centre_share >= 0) & (modes.centre_share + modes.in_plane_share <= 1 + 1e-9))
    assert modes.kind.count("pumping") == 1 and np.all(modes.damping_ratio > 0)
    np.testing.assert_allclose(np.diag(wet)[:len(modes.modal_mass)], modes.modal_mass, rtol=1e-9)


def test_flat_film_is_not_damped_by_its_material():
    """Dissipation dilution: transverse modes of a flat film have no damping to first order (Gonzalez & Saulson 1994)."""
    design, unit, *_ = flat(2.5, 5.0, 0.0)
    lossy = engine.modes(design.with_values({"film.loss_factor": 0.5}), frequency_max=8*unit)
    kind = np.array(lossy.kind)
    assert np.all(lossy.damping_ratio[kind != "in-plane"] < 1e-12)
    # in the plane, by hand: loss 4 mu tan(delta) against a stiffness mu (l^2 + 3 l^-4) of the stretched neo-Hookean film
    np.testing.assert_allclose(lossy.damping_ratio[kind == "in-plane"], 0.5/2*4/(1.3**2 + 3*1.3**-4), rtol=1e-9)


def test_damping_of_a_lossy_spring():
    """A heavy disk on a lossy spring alone: zeta = eta/2 (structural damping, Nashif, Jones & Henderson 1985)."""
    design, *_ = flat(4.0, 0.0, 0.0)
    heavy = design.with_values({"centre.mass": 0.1, "centre.spring_rate": 1e5, "centre.spring_loss_factor": 0.15})
    modes = engine.modes(heavy)
    assert modes.frequency[modes.pumping] == pytest.approx(np.sqrt(1e5/0.1)/(2*np.pi), rel=2e-3)
    assert modes.damping_ratio[modes.pumping] == pytest.approx(0.075, rel=0.02)


@samples
def test_frequencies_converge(name):
    """Doubling the mesh and the air's polynomials moves no mode, up to 1.5 times the highest frequency, by 0.1 %."""
    design = engine.load(f"sample_designs/{name}.toml")
    coarse, fine = (solve(linear.build(design, 5000.0, refinement=k)).modes for k in (1.0, 2.0))
    n = min(len(coarse.frequency), len(fine.frequency))
    assert abs(len(coarse.frequency) - len(fine.frequency)) <= 1
    np.testing.assert_allclose(coarse.frequency[:n], fine.frequency[:n], rtol=1e-3)
    np.testing.assert_allclose(coarse.frequency_vacuum[:n], fine.frequency_vacuum[:n], rtol=1e-3)


def test_other_orders_are_refused_in_words():
    with pytest.raises(InvalidDesign, match="not computed yet"):
        engine.modes(engine.Design(), order=1)
