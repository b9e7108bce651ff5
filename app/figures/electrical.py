"""What the source sees: impedance in magnitude and phase, and the current, over the frequency axis of the page."""

import math

import numpy as np
from bokeh.models import Line, Span

from app import theme
from app.figures.canvas import bare_plot, gridlines, source, span, text
from app.figures.window import log_ticks

LEFT, RIGHT, TOP, BOTTOM, LAST_BOTTOM = 62, 14, 24, 6, 32    # px of the margins
NAMES = ("impedance", "phase", "current")
TITLES = {"impedance": "Impedance", "phase": "Phase of the impedance", "current": "Current, peak"}
EMPTY = {name: [] for name in ("x", "frequency", "impedance", "phase", "current", "log_impedance", "log_current")}
SHOWN = {"impedance": "log_impedance", "phase": "phase", "current": "log_current"}


class Electrical:
    """``plots`` by name; all show columns of the one source ``electrical``."""

    def __init__(self, inks, x_range):
        self.x_range = x_range
        self.data, self.held = source("electrical", **EMPTY), source("held_electrical", **EMPTY)
        self.readings, self.cursors, self.corners, self.plots, self._parts = {}, [], [], {}, {}
        for name in NAMES:
            self.plots[name] = self._plot(inks, name)
        self.limit = inks(Span(dimension="width", location=0, line_width=1.4, visible=False, syncable=False,
                               editable=False), line_color="warn")
        self.plots["current"].add_layout(self.limit)
        self.limit_words = source("current_limit", x=[], y=[], text=[])
        self.corner_words = source("charging_corner", x=[], y=[], text=[], align=[], shift=[])
        text(self.plots["current"], inks, self.limit_words, color="warn", text_align="left", x_offset=4, y_offset=-3)
        text(self.plots["phase"], inks, self.corner_words, text_align={"field": "align"}, x_offset={"field": "shift"},
             y_offset=14)

    def _plot(self, inks, name):
        last = name == NAMES[-1]
        plot = bare_plot(inks, self.x_range, span(0, 1), name=f"{name}_plot", min_border_left=LEFT,
                         min_border_right=RIGHT, min_border_top=TOP, min_border_bottom=LAST_BOTTOM if last else BOTTOM)
        parts = {part: source(x=[], y=[], text=[]) for part in ("labels", "ticks", "title", "axis")}
        parts["grid"] = source(x0=[], y0=[], x1=[], y1=[])
        self._parts[name] = parts
        gridlines(plot, inks, parts["grid"])
        plot.add_glyph(self.held, inks(Line(x="x", y=SHOWN[name], line_width=1.5), line_color="held"))
        plot.add_glyph(self.data, inks(Line(x="x", y=SHOWN[name], line_width=1.8, line_join="round"), line_color="ink"))
        text(plot, inks, parts["labels"], text_align="right", text_baseline="middle", x_offset=-8)
        text(plot, inks, parts["ticks"], text_align="center", text_baseline="alphabetic", y_offset=13)
        text(plot, inks, parts["axis"], text_align="right", text_baseline="alphabetic", y_offset=25)
        text(plot, inks, parts["title"], size=12, color="ink", text_align="left", x_offset=-LEFT + 8, y_offset=-10)
        self.readings[name] = source(f"{name}_reading", x=[], y=[], text=[])
        text(plot, inks, self.readings[name], size=12, color="accent", text_align="right", x_offset=-28, y_offset=-10,
             text_font_style="bold")
        quiet = {"dimension": "height", "location": None, "syncable": False}
        self.cursors.append(inks(Span(line_width=1.4, level="overlay", **quiet), line_color="accent"))
        self.corners.append(inks(Span(line_width=1.2, line_dash=[2, 3], **quiet), line_color="muted"))
        plot.add_layout(self.cursors[-1])
        plot.add_layout(self.corners[-1])
        return plot

    def show(self, found, limit):
        """Replace everything by a Response's, under a limit of the source's current (A, or None)."""
        values = self.data.data = _columns(found)
        magnitude, current = values["impedance"], values["current"]
        self._axis("impedance", *_decades(magnitude), "Ω")
        self._axis("current", *_decades(current, limit), "A")
        self._phase(values["phase"])
        self._mark_limit(limit)
        self._mark_corner(found.charging_corner)

    def hold(self, response):
        """Draw another design's curves in grey; None: nothing."""
        self.held.data = dict(EMPTY) if response is None else _columns(response)

    def _axis(self, name, low, high, unit):
        named = log_ticks(10.0**low, 10.0**high)
        self._frame(name, np.log10(named), low, high, [theme.quantity(v, unit) for v in named])

    def _phase(self, phase):
        high = 95.0 if phase.max() > 5 else 8.0
        named = [v for v in (-90.0, -45.0, 0.0, 45.0, 90.0) if v < high]
        self._frame("phase", np.array(named), -98.0, high, [theme.digits(v) + "°" for v in named])

    def _frame(self, name, y, low, high, words):
        """Range, grid, labels and title of one plot."""
        parts, plot, start, end = self._parts[name], self.plots[name], self.x_range.start, self.x_range.end
        plot.y_range.update(start=low, end=high)
        if high - low > 6 and name != "phase":
            y, words = y[::2], words[::2]
        hertz = frequencies(10**start, 10**end)
        x = np.log10(hertz)
        parts["grid"].data = {"x0": np.append(np.full(len(y), start), x), "x1": np.append(np.full(len(y), end), x),
                              "y0": np.append(y, np.full(len(x), low)), "y1": np.append(y, np.full(len(x), high))}
        parts["labels"].data = {"x": [start] * len(y), "y": y, "text": words}
        parts["title"].data = {"x": [start], "y": [high], "text": [TITLES[name]]}
        if name == NAMES[-1]:
            parts["ticks"].data = {"x": x, "y": [low] * len(x), "text": [theme.tick(f) for f in hertz]}
            parts["axis"].data = {"x": [end], "y": [low], "text": ["Frequency, Hz"]}

    def _mark_limit(self, limit):
        plot, start = self.plots["current"], self.x_range.start
        place = _log(np.array([limit]))[0] if limit else None
        inside = place is not None and plot.y_range.start < place < plot.y_range.end
        self.limit.update(location=place if inside else 0, visible=bool(inside))
        words = [] if limit is None else ["limit 0: the source delivers no current" if limit == 0 else
                                          f"limit {theme.quantity(limit, 'A')}" + ("" if inside else ", beyond this axis")]
        at = place if inside else plot.y_range.start
        self.limit_words.data = {"x": [start] * len(words), "y": [at] * len(words), "text": words}

    def _mark_corner(self, corner):
        start, end = self.x_range.start, self.x_range.end
        place = None if corner is None else math.log10(corner)
        for line in self.corners:
            line.location = place
        seen = place is not None
        right = seen and place > start + 0.65 * (end - start)
        self.corner_words.data = {
            "x": [place] * seen, "y": [self.plots["phase"].y_range.end] * seen,
            "text": [f"71 % charged up to {theme.hertz(corner)}" if seen else ""] * seen,
            "align": ["right" if right else "left"] * seen, "shift": [-4 if right else 4] * seen}


def _columns(found):
    """The source's columns of a Response, float32."""
    magnitude, current = np.abs(found.impedance), np.abs(found.current)
    values = {"x": np.log10(found.frequency), "frequency": found.frequency, "impedance": magnitude,
              "phase": np.degrees(np.angle(found.impedance)), "current": current,
              "log_impedance": _log(magnitude), "log_current": _log(current)}
    return {name: np.ascontiguousarray(column, dtype=np.float32) for name, column in values.items()}


def frequencies(low, high):
    """The few frequencies named under a narrow plot: decades, and the ends where they are far enough from them."""
    decades = [10.0**d for d in range(math.ceil(math.log10(low) - 1e-9), math.floor(math.log10(high) + 1e-9) + 1)]
    ends = [end for end in (low, high) if all(abs(math.log10(end / d)) > 0.25 for d in decades)]
    return np.array(sorted([*decades, *ends]))


def _log(values):
    """log10; what is zero is put at 1e-15."""
    return np.log10(np.maximum(values, 1e-15))


def _decades(values, also=None):
    """(low, high) log10 of an axis around positive values, and a further one if it is near them."""
    low, high = float(_log(values).min()), float(_log(values).max())
    if also and low - 2 < math.log10(also) < high + 2:
        low, high = min(low, math.log10(also) - 0.1), max(high, math.log10(also) + 0.25)
    middle = (low + high) / 2
    return min(low - 0.1, middle - 0.5), max(high + 0.1, middle + 0.5)
