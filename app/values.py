"""What a control shows of a field and takes from a person: display values, texts, places on a slider."""

import math
import re

from engine.design import field_of
from engine.fields import (
    UNITS,
    at_slider_position,
    bounds_text,
    display_step,
    display_value,
    format_value,
    si_value,
    slider_position,
)
from engine.limits import HAZARDOUS_VOLTAGE

TYPED = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?)\s*(.*)", re.IGNORECASE)
ABSENT = ("none", "unlimited", "")   # what is typed for no limit
LOG_STEP = 0.01              # a key press on a logarithmic slider changes the value by this ratio
LOG_POSITIONS = 1e4          # what such a slider counts from end to end


def on_screen(field, value):
    """The value a control shows for an SI value."""
    if field.metadata["kind"] == "number" and value is not None:
        return display_value(field, value)
    return value


def in_si(field, shown):
    """The SI value of what a control shows."""
    if field.metadata["kind"] == "number" and shown is not None:
        return si_value(field, shown)
    return shown


def may_be_absent(field):
    """Whether a number may be None: no limit at all."""
    return field.metadata["kind"] == "number" and field.default is None


def typed_number(field, text):
    """Display value of a typed number, with or without a unit ("1.3", "52 mm", "0.052 m"); None for "none" where allowed.

    Raises
    ------
    ValueError
        If the text is no number, or its unit is not one of the field's kind.
    """
    own = UNITS[field.metadata["unit"]]
    if may_be_absent(field) and text.strip().lower() in ABSENT:
        return None
    match = TYPED.fullmatch(text.strip().replace("−", "-").replace(",", "."))
    if not match:
        raise ValueError(f"{text.strip()[:20]!r} is no number. Type one such as {example(field)}.")
    digits, symbol = match.groups()
    symbol = symbol.strip().replace("um", "µm").replace("μ", "µ")
    if symbol in ("", own.symbol):
        return float(digits)
    if symbol not in UNITS or UNITS[symbol].si != own.si:
        raise ValueError(f"{symbol[:12]!r} is no unit for this. Type it as {example(field)}.")
    return own.display(UNITS[symbol].si_value(float(digits)))


def example(field):
    """A well-typed value of a field: its default."""
    if field.default is None:
        return f"1 {field.metadata['unit']}, or none"
    return f"{display_value(field, field.default):g} {field.metadata['unit']}".strip()


def typed_list(text, nested=False):
    """Tuple of numbers typed with commas or blanks between; nested: of such tuples, with semicolons between.

    Raises
    ------
    ValueError
        If an item is no number.
    """
    if nested:
        return tuple(typed_list(part) for part in text.split(";") if part.strip())
    items = text.replace(",", " ").split()
    try:
        return tuple(float(item) for item in items)
    except ValueError:
        raise ValueError("Type numbers with blanks between, pairs with semicolons between, or nothing.") from None


def list_text(value):
    """A tuple as `typed_list` reads it."""
    if value and isinstance(value[0], tuple):
        return "; ".join(list_text(row) for row in value)
    return " ".join(f"{item:.15g}" for item in value)


def typed_band(text):
    """(low, high) in Hz of a typed band: "20 Hz – 5 kHz", "20-5000", "100 to 10k"; ValueError if it is none."""
    found = re.findall(r"(\d+\.?\d*|\.\d+)\s*(k?)(?:hz)?", text.lower())
    if len(found) != 2:
        raise ValueError("Type two frequencies, for example 20 Hz – 5 kHz.")
    return tuple(float(digits) * (1e3 if kilo else 1.0) for digits, kilo in found)


def typed_frequency(text, bounds):
    """Hz of a typed frequency within bounds (low, high): "440", "69.3 Hz", "1.2 kHz"; ValueError if it is none."""
    match = re.fullmatch(r"(\d+\.?\d*|\.\d+)\s*(k?)(?:hz)?", text.strip().lower().replace(",", "."))
    low, high = bounds
    frequency = float(match[1]) * (1e3 if match[2] else 1.0) if match else 0.0
    if not low <= frequency <= high:
        what = f"{frequency:g} Hz is outside of what is rendered." if match else f"{text.strip()[:20]!r} is no frequency."
        raise ValueError(f"{what} Type one from {low:g} Hz to {high / 1e3:g} kHz, for example 440 Hz.")
    return frequency


def band_text(band):
    """A band as it is written on the screen."""
    return " – ".join(f"{edge / 1e3:g} kHz" if edge >= 1e3 else f"{edge:g} Hz" for edge in band)


def value_text(field, shown):
    """A display value as its control writes it, with the unit."""
    return list_text(shown) if field.metadata["kind"] == "list" else format_value(field, in_si(field, shown))


def meaning_text(field):
    """What a field means, and its allowed range where it has one."""
    return field.metadata["meaning"] + (f". {bounds_text(field)}." if field.metadata["bounds"] else ".")


def caution_text(key, shown):
    """One calm line at a control whose value can hurt, or nothing."""
    if key == "drive.bias" and in_si(field_of(key), shown) > HAZARDOUS_VOLTAGE:
        return f"Above {HAZARDOUS_VOLTAGE:g} V: dangerous to touch. Discharge first; qualified people, local rules."
    return ""


def slider_scale(field):
    """Start, end and step of a field's slider: display values, or positions on a logarithmic scale."""
    about = field.metadata
    low, high = about["bounds"]
    if about["scale"] == "log":
        step = LOG_POSITIONS * math.log1p(LOG_STEP) / math.log(high / about["log_from"])
        return {"start": 0.0, "end": LOG_POSITIONS, "step": step}
    return {"start": display_value(field, low), "end": display_value(field, high), "step": display_step(field)}


def on_slider(field, shown):
    """Place of a display value on the field's slider, within its ends; the right end where there is none."""
    low, high = field.metadata["bounds"]
    if shown is None:
        return slider_scale(field)["end"]
    inside = min(max(in_si(field, shown), low), high)
    if field.metadata["scale"] == "log":
        return LOG_POSITIONS * slider_position(field, inside)
    return on_screen(field, inside)


def from_slider(field, place):
    """Display value at a place of the field's slider; round in its digits. The right end may mean none."""
    if may_be_absent(field) and place >= slider_scale(field)["end"]:
        return None
    if field.metadata["scale"] == "log":
        position = place / LOG_POSITIONS
    else:
        low, high = (display_value(field, bound) for bound in field.metadata["bounds"])
        position = (place - low) / (high - low)
    return on_screen(field, at_slider_position(field, position))
