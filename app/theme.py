"""Colours, type and number formats of the page; nothing here knows of a plot.

Every colour has a role. Kinds of modes (pumping, transverse, in-plane) have one ink and one line style each; what adds
and what cancels has a pair of its own; whatever belongs to the cursor has the accent.
"""

import math
from dataclasses import asdict, dataclass

import numpy as np

FONT = "'Segoe UI', 'Helvetica Neue', Arial, 'DejaVu Sans', sans-serif"
LARGE_PX, TEXT_PX, SMALL_PX = 20, 13, 11
DIVERGING_STEPS = 129


@dataclass(frozen=True)
class Palette:
    """One colour (sRGB, "#rrggbb") per role."""

    page: str
    ink: str
    muted: str
    faint: str
    held: str
    accent: str
    pumping: str
    transverse: str
    in_plane: str
    adds: str
    cancels: str
    estimate: str
    warn: str

    def roles(self):
        """Role to colour."""
        return asdict(self)


LIGHT = Palette(page="#fbfaf7", ink="#1c2934", muted="#56636e", faint="#e3e0d8", held="#aeb4b9", accent="#a85a00",
                pumping="#1c2934", transverse="#1f6796", in_plane="#80756b", adds="#642a75", cancels="#17694b",
                estimate="#f0ece1", warn="#b3261e")
DARK = Palette(page="#14191d", ink="#e4e8ea", muted="#9ca8b1", faint="#2b333a", held="#59646d", accent="#f0a540",
               pumping="#e4e8ea", transverse="#4aa0d8", in_plane="#948a80", adds="#e9b8f5", cancels="#4fd6a0",
               estimate="#1e252a", warn="#ff8f80")


def palette(dark):
    """The light or the dark palette."""
    return DARK if dark else LIGHT


def diverging(colours):
    """Colours (list of "#rrggbb") from cancels (share -1) over the page (0) to adds (+1), straight lines in OKLab.

    Source: Ottosson (2020), "A perceptual color space for image processing" (OKLab), from memory.
    """
    ends = [_oklab(_linear_rgb(c)) for c in (colours.cancels, colours.page, colours.adds)]
    t = np.linspace(-1, 1, DIVERGING_STEPS)[:, None]
    lab = np.where(t < 0, ends[1] + (ends[0] - ends[1]) * -t, ends[1] + (ends[2] - ends[1]) * t)
    return [_hex(rgb) for rgb in _from_oklab(lab)]


def sequential(first, last, steps):
    """Colours (list of "#rrggbb") on the straight line from one to another in OKLab."""
    a, b = _oklab(_linear_rgb(first)), _oklab(_linear_rgb(last))
    t = np.linspace(0, 1, steps)[:, None]
    return [_hex(rgb) for rgb in _from_oklab(a + (b - a) * t)]


_TO_LMS = np.array([[0.4122214708, 0.5363325363, 0.0514459929],
                    [0.2119034982, 0.6806995451, 0.1073969566],
                    [0.0883024619, 0.2817188376, 0.6299787005]])
_TO_LAB = np.array([[0.2104542553, 0.7936177850, -0.0040720468],
                    [1.9779984951, -2.4285922050, 0.4505937099],
                    [0.0259040371, 0.7827717662, -0.8086757660]])


def _linear_rgb(colour):
    """Linear-light RGB (3,) of "#rrggbb"."""
    srgb = np.array([int(colour[i:i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(srgb <= 0.04045, srgb / 12.92, ((srgb + 0.055) / 1.055) ** 2.4)


def _oklab(linear):
    return _TO_LAB @ np.cbrt(_TO_LMS @ linear)


def _from_oklab(lab):
    """Linear RGB (n, 3) of OKLab (n, 3)."""
    return np.linalg.solve(_TO_LMS, (np.linalg.solve(_TO_LAB, lab.T) ** 3)).T


def _hex(linear):
    """ "#rrggbb" of linear RGB, cut to the gamut."""
    linear = np.clip(linear, 0, 1)
    srgb = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    return "#" + "".join(f"{round(255 * v):02x}" for v in srgb)


def digits(value, significant=3):
    """A number with so many significant digits, in plain notation, trailing zeros kept off: 0.0690, 12.3, 1830."""
    if not math.isfinite(value) or value == 0:
        return "0" if value == 0 else "–"
    rounded = float(f"{value:.{significant}g}")
    places = max(0, significant - 1 - math.floor(math.log10(abs(rounded))))
    text = f"{rounded:.{places}f}"
    return (text.rstrip("0").rstrip(".") if "." in text else text).replace("-", "−")


def tick(frequency):
    """A frequency on an axis: 50, 100, 1k, 1.25k."""
    return digits(frequency) if frequency < 1000 else digits(frequency / 1000) + "k"


def hertz(frequency):
    """A frequency in text, three digits: "69 Hz", "1829 Hz" (four from 1 kHz), "12.5 kHz"."""
    if frequency < 1000:
        return digits(frequency) + " Hz"
    return f"{frequency:.0f} Hz" if frequency < 9999.5 else digits(frequency / 1000) + " kHz"


_PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"))


def band_words(band):
    """A band (low, high) in Hz: "20 Hz – 5 kHz"."""
    return " – ".join(hertz(f) if f < 1000 else f"{digits(f / 1000)} kHz" for f in band)


def quantity(value, unit, significant=3):
    """A value with its SI prefix: "0.69 mm" is quantity(0.69e-3, "m"); metres, pascals and volts need no other."""
    if value == 0 or not math.isfinite(value):
        return f"{digits(value)} {unit}"
    size = abs(float(f"{value:.{significant}g}"))
    factor, prefix = next(((f, p) for f, p in _PREFIXES if size >= f), _PREFIXES[-1])
    return f"{digits(value / factor, significant)} {prefix}{unit}"


def percent(ratio):
    """A ratio in percent: "55 %", below 10 % with one digit more, "under 0.1 %" for traces."""
    value = 100 * ratio
    if 0 < abs(value) < 0.1:
        return "under 0.1 %"
    return f"{value:.0f} %".replace("-", "−") if abs(value) >= 9.95 else f"{digits(value, 2)} %"


SILENCE_DB = -200.0  # no sound at all: the engine's floor is far below


def decibel(value):
    """A level: "54 dB", or "silent" where nothing is heard at all."""
    return "silent" if value < SILENCE_DB else f"{value:.0f} dB".replace("-", "−")


def file_stem(name):
    """A file name without its ending from any text: letters, digits and hyphens of it, "design" if none are left."""
    words = "".join(c if c.isalnum() else " " for c in name.lower()).split()
    return "-".join(words)[:60].strip("-") or "design"
