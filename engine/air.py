"""Density, speed of sound and absorption of moist air."""

from dataclasses import dataclass
from math import exp, sqrt

import numpy as np

from engine.errors import InvalidDesign

CARBON_DIOXIDE = 4e-4                      # mole fraction the reference equations are quoted for
REFERENCE_PRESSURE = 101325.0              # Pa, ISO 9613-1
REFERENCE_TEMPERATURE = 293.15             # K, ISO 9613-1
TRIPLE_POINT = 273.16                      # K
TEMPERATURE_RANGE = (253.0, 323.5)         # K, -20 to 50 C: span of the tables of ISO 9613-1
PRESSURE_RANGE = (50e3, 110e3)             # Pa


@dataclass(frozen=True)
class Air:
    """Air of one temperature, pressure and humidity."""

    temperature: float          # K
    pressure: float             # Pa
    relative_humidity: float    # 0 ... 1
    density: float              # kg/m3
    sound_speed: float          # m/s, at zero frequency

    def absorption(self, frequency):
        """Attenuation of a plane pure tone by the atmosphere, ISO 9613-1 eqs (3) to (5).

        Parameters: frequency, array of any shape, Hz.
        Returns: dB/m, the same shape.
        Source: ISO 9613-1:1993, annex B for the water vapour.
        """
        f2 = np.square(np.asarray(frequency, dtype=float))
        T, theta = self.temperature, self.temperature / REFERENCE_TEMPERATURE
        p = self.pressure / REFERENCE_PRESSURE
        saturation = 10.0 ** (-6.8346 * (TRIPLE_POINT / T) ** 1.261 + 4.6151)      # (B.2), (B.3)
        h = 100.0 * self.relative_humidity * saturation / p                          # percent, (B.1)
        oxygen = p * (24.0 + 4.04e4 * h * (0.02 + h) / (0.391 + h))
        nitrogen = p / sqrt(theta) * (9.0 + 280.0 * h * exp(-4.170 * (theta ** (-1.0 / 3.0) - 1.0)))
        classical = 1.84e-11 * sqrt(theta) / p
        relaxation = theta**-2.5 * (0.01275 * exp(-2239.1 / T) / (oxygen + f2 / oxygen)
                                    + 0.1068 * exp(-3352.0 / T) / (nitrogen + f2 / nitrogen))
        return 8.686 * f2 * (classical + relaxation)


def properties(temperature, pressure, relative_humidity):
    """Air at a temperature (K), a static pressure (Pa) and a relative humidity (0 ... 1).

    Density by CIPM-2007, speed of sound by Cramer's zero-frequency polynomial.

    Returns: Air.
    Raises: InvalidDesign outside 253 ... 323.5 K, 50 ... 110 kPa, humidity 0 ... 1.
    Source: Picard et al. 2008 (Metrologia 45:149); Cramer 1993 (J. Acoust. Soc. Am. 93:2510); both as restated in
    IEC 61094-2:2009 annex F, for a carbon dioxide fraction of 0.0004.
    """
    _require("air.temperature", temperature, TEMPERATURE_RANGE, "K")
    _require("air.pressure", pressure, PRESSURE_RANGE, "Pa")
    _require("air.relative_humidity", relative_humidity, (0.0, 1.0), "(a fraction, not per cent)")
    T, p = float(temperature), float(pressure)
    t = T - 273.15
    x = _vapour_fraction(T, t, p, relative_humidity)
    return Air(temperature=T, pressure=p, relative_humidity=float(relative_humidity),
               density=3.483740e-3 * p / (_compressibility(T, t, p, x) * T) * (1.0 - 0.3780 * x),
               sound_speed=_sound_speed(t, p, x, CARBON_DIOXIDE))


def _require(field, value, bounds, unit):
    """Refuse a value outside the range of the air equations."""
    low, high = bounds
    if not low <= value <= high:
        raise InvalidDesign(f"{field} is {value:g} {unit}; the equations for air hold from {low:g} to {high:g}: "
                            "choose a value inside")


def _vapour_fraction(T, t, p, humidity):
    """Mole fraction of water vapour, CIPM-2007 annex A.1."""
    saturation = exp(1.2378847e-5 * T * T - 1.9121316e-2 * T + 33.93711047 - 6.3431645e3 / T)
    enhancement = 1.00062 + 3.14e-8 * p + 5.6e-7 * t * t
    return humidity * saturation / p * enhancement


def _compressibility(T, t, p, x):
    """Compressibility factor of moist air, CIPM-2007 annex A.2."""
    first = (1.58123e-6 - 2.9331e-8 * t + 1.1043e-10 * t * t + (5.707e-6 - 2.051e-8 * t) * x
             + (1.9898e-4 - 2.376e-6 * t) * x * x)
    return 1.0 - p / T * first + (p / T) ** 2 * (1.83e-11 - 0.765e-8 * x * x)


def _sound_speed(t, p, x, xc):
    """Zero-frequency speed of sound, Cramer 1993 table III; t in degrees Celsius."""
    return (331.5024 + 0.603055 * t - 0.000528 * t * t
            + (51.471935 + 0.1495874 * t - 0.000782 * t * t) * x
            + (-1.82e-7 + 3.73e-8 * t - 2.93e-10 * t * t) * p
            + (-85.20931 - 0.228525 * t + 5.91e-5 * t * t) * xc
            - 2.835149 * x * x - 2.15e-13 * p * p + 29.179762 * xc * xc + 0.000486 * x * p * xc)
