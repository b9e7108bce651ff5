"""What a design's field says about itself: label, unit, bounds, step, meaning; and how its values are shown.

Every field of a design is a dataclass field whose metadata holds

======== ===========================================================================================
kind     "number", "count" (a whole number), "choice", "flag" (yes or no) or "list" (a tuple)
label    words for a control
unit     display unit, a key of ``UNITS`` ("" for a plain number)
bounds   (low, high), inclusive, SI; None where there are none
step     of a control, SI; None where there is none
meaning  one line
scale    "linear" or "log": which slider suits
log_from lowest value above zero of a log slider, SI (its first stop is ``bounds[0]``)
choices  allowed words of a choice
columns  display units of the columns of a list's rows; () for a plain row of numbers
required whether a design file must hold it; (other, word): only where the group's other field is that word
later    True while only the default is computed
======== ===========================================================================================
"""

import dataclasses
import math
from dataclasses import dataclass
from decimal import Decimal
from types import MappingProxyType

from engine.errors import InvalidDesign

PI = Decimal("3.14159265358979323846264338327950288")


@dataclass(frozen=True)
class Unit:
    """A display unit: ``SI value = factor * display value + offset``; ``si`` names the SI unit ("" for a ratio)."""

    symbol: str
    factor: Decimal
    si: str
    offset: Decimal = Decimal(0)

    def display(self, value):
        """Display value (float) of an SI value, as exact as a float can be."""
        return float((Decimal(repr(float(value))) - self.offset) / self.factor)

    def si_value(self, shown):
        """SI value (float) of a display value given as float or Decimal."""
        return float(self._si(shown if isinstance(shown, Decimal) else Decimal(repr(float(shown)))))

    def exact(self, value):
        """Shortest decimal text in this unit whose SI value is ``value`` to the last bit."""
        shown = (Decimal(repr(float(value))) - self.offset) / self.factor
        for digits in range(15, 25):
            rounded = Decimal(f"{shown:.{digits}g}")
            if float(self._si(rounded)) == value:
                return _plain(rounded)
        return _plain(shown)

    def _si(self, shown):
        return shown * self.factor + self.offset


UNITS = MappingProxyType({unit.symbol: unit for unit in (
    Unit("", Decimal(1), ""),
    Unit("%", Decimal("1e-2"), ""),
    Unit("m", Decimal(1), "m"),
    Unit("mm", Decimal("1e-3"), "m"),
    Unit("cm²", Decimal("1e-4"), "m²"),
    Unit("µm", Decimal("1e-6"), "m"),
    Unit("l", Decimal("1e-3"), "m³"),
    Unit("g", Decimal("1e-3"), "kg"),
    Unit("kg/m³", Decimal(1), "kg/m³"),
    Unit("s", Decimal(1), "s"),
    Unit("N/m", Decimal(1), "N/m"),
    Unit("Pa", Decimal(1), "Pa"),
    Unit("kPa", Decimal("1e3"), "Pa"),
    Unit("Pa·s", Decimal(1), "Pa·s"),
    Unit("V", Decimal(1), "V"),
    Unit("kV", Decimal("1e3"), "V"),
    Unit("V/µm", Decimal("1e6"), "V/m"),
    Unit("mA", Decimal("1e-3"), "A"),
    Unit("Ω", Decimal(1), "Ω"),
    Unit("kΩ", Decimal("1e3"), "Ω"),
    Unit("°C", Decimal(1), "K", Decimal("273.15")),
    Unit("°", PI / 180, "rad"),
)})


def number(default, label, unit, bounds, step, meaning, *, scale="linear", log_from=None, required=True, later=False):
    """Dataclass field of a number in SI units; a default of None means that the value may be absent."""
    if scale == "log" and log_from is None:
        log_from = bounds[0]
    return _field(default, "number", label, meaning, unit=unit, bounds=bounds, step=step, scale=scale,
                  log_from=log_from, required=required, later=later)


def count(default, label, bounds, meaning, *, required=True):
    """Dataclass field of a whole number."""
    return _field(default, "count", label, meaning, bounds=bounds, step=1, required=required)


def choice(default, label, choices, meaning, *, required=True, later=False):
    """Dataclass field of one word out of ``choices``."""
    return _field(default, "choice", label, meaning, choices=tuple(choices), required=required, later=later)


def flag(default, label, meaning, *, required=True):
    """Dataclass field of yes or no."""
    return _field(default, "flag", label, meaning, required=required)


def listing(default, label, meaning, *, columns=(), later=False):
    """Dataclass field of a tuple, a design file need not hold it; its content is checked by the class that owns it."""
    return _field(default, "list", label, meaning, columns=columns, required=False, later=later)


def display_value(field, value):
    """Display value of a field's SI value: ``0.052`` -> ``52.0`` for a field shown in mm."""
    return UNITS[field.metadata["unit"]].display(value)


def si_value(field, shown):
    """SI value of a field's display value; the same float that a design file with that text gives."""
    return UNITS[field.metadata["unit"]].si_value(shown)


def exact_text(field, value):
    """A number with its display unit and all its digits ("52.125 mm"), words and lists as they are."""
    if field.metadata["kind"] not in ("number", "count") or not is_finite_number(value):
        return words(value)
    return with_unit(UNITS[field.metadata["unit"]].exact(value), field)


def format_number(field, value):
    """Digits for the screen, in the display unit, without it.

    Linear fields show the decimals of their step, log fields three significant digits; both show up to three more where
    the value has them. None is "none".
    """
    if value is None:
        return "none"
    shown = display_value(field, value)
    if field.metadata["kind"] == "count":
        return f"{shown:.0f}"
    if field.metadata["scale"] == "log":
        first = min(max(2 - math.floor(math.log10(abs(shown))), 0), 9) if shown else 0
    else:
        first = _decimals_of(display_step(field))
    more = (d for d in range(first, first + 3) if abs(round(shown, d) - shown) <= 1e-9 * abs(shown))
    decimals = next(more, first + 3)
    return f"{shown + 0.0:.{decimals}f}"


def format_value(field, value):
    """``format_number`` with the unit ("52.0 mm"); words for choices, flags and lists."""
    if field.metadata["kind"] not in ("number", "count"):
        return words(value)
    return "none" if value is None else with_unit(format_number(field, value), field)


def display_step(field):
    """Step of a control in the display unit."""
    return float(Decimal(repr(float(field.metadata["step"]))) / UNITS[field.metadata["unit"]].factor)


def bounds_text(field):
    """The allowed range in words: "5 mm to 200 mm"."""
    low, high = field.metadata["bounds"]
    return f"{exact_text(field, low)} to {exact_text(field, high)}"


def with_unit(digits, field):
    """Digits followed by the field's display unit; no space before the degree of an angle."""
    unit = field.metadata["unit"]
    return f"{digits}°" if unit == "°" else f"{digits} {unit}".rstrip()


def slider_position(field, value):
    """Place of an SI value on the field's slider, 0 to 1; the first stop of a log slider is its lower bound."""
    low, high = field.metadata["bounds"]
    if field.metadata["scale"] == "linear":
        return (value - low) / (high - low)
    start = field.metadata["log_from"]
    return math.log(value / start) / math.log(high / start) if value > start else 0.0


def at_slider_position(field, position):
    """SI value at a place 0 to 1 of the slider: on the steps if linear, of three significant digits if log."""
    low, high = field.metadata["bounds"]
    unit = UNITS[field.metadata["unit"]]
    if field.metadata["scale"] == "linear":
        step = display_step(field)
        shown = round(unit.display(low + position * (high - low)) / step) * step
        value = unit.si_value(round(shown, _decimals_of(step) + 1))
    elif position <= 0.0:
        value = low
    else:
        start = field.metadata["log_from"]
        value = unit.si_value(float(f"{unit.display(start * (high / start) ** position):.3g}"))
    return min(max(value, low), high)


def words(value):
    """Any received value, short enough for a message."""
    if isinstance(value, str):
        text = f'"{value}"'
    elif value is None or isinstance(value, bool):
        text = {None: "none", True: "true", False: "false"}[value]
    elif isinstance(value, tuple | list):
        text = "[" + ", ".join(map(words, value)) + "]"
    elif isinstance(value, int) and abs(value) > 10**20:
        text = "a number far too large"
    elif isinstance(value, int | float):
        text = f"{float(value):.15g}"
    else:
        text = {"dict": "a table", "datetime": "a date", "date": "a date", "time": "a time of day"}.get(
            type(value).__name__, f"something of type {type(value).__name__}")
    return text if len(text) <= 80 else text[:77] + "..."


def is_finite_number(value):
    """Whether a received value is a number that a float can hold, and finite; yes or no is no number."""
    if isinstance(value, bool | str | bytes) or value is None:
        return False
    try:
        return math.isfinite(float(value))
    except (TypeError, ValueError, OverflowError):
        return False


def invalid(message, key=None, value=None, bounds=None):
    """An InvalidDesign that also carries the field's path, the received SI value and the bounds in SI."""
    error = InvalidDesign(message)
    error.key, error.value, error.bounds = key, value, bounds
    return error


def _field(default, kind, label, meaning, *, unit="", bounds=None, step=None, scale="linear", log_from=None,
           choices=(), columns=(), required=True, later=False):
    return dataclasses.field(default=default, metadata={
        "kind": kind, "label": label, "unit": unit, "bounds": bounds, "step": step, "meaning": meaning, "scale": scale,
        "log_from": log_from, "choices": choices, "columns": columns, "required": required,
        "later": later})


def _plain(value):
    """A Decimal without trailing zeros, without exponent between 1e-7 and 1e15."""
    if value == 0:
        return "0"
    value = value.normalize()
    return f"{value:f}" if -7 <= value.adjusted() < 15 else f"{value:e}".replace("e+", "e")


def _decimals_of(step):
    return next((d for d in range(6) if abs(round(step, d) - step) < 1e-9 * step), 6)
