"""Air against the equations' published values."""

import numpy as np
import pytest

from engine.air import properties
from engine.errors import InvalidDesign
from tests.references import acoustics as ref


@pytest.mark.parametrize(("celsius", "pressure", "humidity", "density", "sound_speed"), ref.MOIST_AIR)
def test_density_and_sound_speed(celsius, pressure, humidity, density, sound_speed):
    """CIPM-2007 and Cramer 1993 as restated in IEC 61094-2:2009 annex F."""
    air = properties(celsius + 273.15, pressure, humidity)
    assert air.density == pytest.approx(density, rel=1e-9)
    assert air.sound_speed == pytest.approx(sound_speed, rel=1e-9)


def test_dry_air_at_freezing_point():
    """Cramer's dry-air reference; its CO2 fraction differs by 86 ppm, which moves both values by some 4e-5."""
    celsius, pressure, humidity, density, sound_speed = ref.DRY_AIR_LESS_CO2
    air = properties(celsius + 273.15, pressure, humidity)
    assert air.density == pytest.approx(density, rel=5e-5)
    assert air.sound_speed == pytest.approx(sound_speed, rel=5e-5)


def test_dry_air_is_nearly_an_ideal_gas():
    """rho = P M/(R T) and c = sqrt(gamma R T/M), gamma = 1.4, M = 0.0289647 kg/mol (standard atmosphere): to 0.1 %."""
    temperature = np.array([263.15, 283.15, 303.15])
    for T in temperature:
        air = properties(T, 101325.0, 0.0)
        assert air.density == pytest.approx(101325.0 * 0.0289647 / (8.314462618 * T), rel=1e-3)
        assert air.sound_speed == pytest.approx(np.sqrt(1.4 * 8.314462618 * T / 0.0289647), rel=1e-3)


@pytest.mark.parametrize(("nominal", "exponent", "celsius", "humidity", "computed", "printed"), ref.ABSORPTION)
def test_absorption(nominal, exponent, celsius, humidity, computed, printed):
    """ISO 9613-1:1993 at exact midband frequencies, equations and table."""
    air = properties(celsius + 273.15, 101325.0, humidity)
    alpha = 1e3 * air.absorption(10.0**exponent)
    assert 10.0**exponent == pytest.approx(nominal, rel=0.01)
    assert alpha == pytest.approx(computed, rel=1e-9)
    if printed is not None:
        assert alpha == pytest.approx(float(printed), abs=0.51 * 10.0 ** -len(printed.partition(".")[2]))


def test_absorption_takes_arrays():
    """One value a frequency, none at zero frequency, growing with frequency."""
    alpha = properties(293.15, 101325.0, 0.5).absorption(np.array([[0.0, 100.0], [1e3, 1e4]]))
    assert alpha.shape == (2, 2)
    assert alpha[0, 0] == 0.0
    assert np.all(np.diff(alpha.ravel()) > 0.0)


@pytest.mark.parametrize(("arguments", "field"), [
    ((20.0, 101325.0, 0.5), "air.temperature"),
    ((293.15, 1013.25, 0.5), "air.pressure"),
    ((293.15, 101325.0, 50.0), "air.relative_humidity"),
    ((float("nan"), 101325.0, 0.5), "air.temperature"),
])
def test_values_outside_the_equations_are_refused(arguments, field):
    """The message names field, value, range and remedy."""
    with pytest.raises(InvalidDesign, match=rf"{field} is .* from .* to .*choose"):
        properties(*arguments)
