"""The voltage window: rest height and mode frequencies over the bias, the walls, the bias and the swing of the drive."""

import math

import numpy as np
from bokeh.models import BoxAnnotation, Line, MultiLine, Span

from app import theme
from app.figures.canvas import bare_plot, gridlines, source, span, text

LEFT, RIGHT, TOP, SMALL_TOP, BOTTOM = 58, 14, 74, 22, 32     # px of the margins
WALLS = ("slack", "pull-in")
WORDS_ROOM = 0.15             # of the heights' range
ROWS = {"breakdown": -6, "slack": -20, "pull-in": -34}       # px of each wall's words above the plot
TITLE = -56
BAND_ALPHA, SWING_ALPHA = 0.16, 0.14


class Window:
    """``height`` and ``modes`` are the Bokeh plots; they share the axis of the bias, in kV."""

    def __init__(self, inks):
        self.x_range = span(0, 5)
        self.stable = source("window", bias_kv=[], height_mm=[])
        self.beyond = source("window_beyond", bias_kv=[], height_mm=[])
        self.mode_lines = source("window_modes", xs=[], ys=[])
        self.modes_beyond = source("window_modes_beyond", xs=[], ys=[])
        self.held = source("held_window", bias_kv=[], height_mm=[])
        self.held_modes = source("held_window_modes", xs=[], ys=[])
        self.wall_words = source("wall_words", x=[], y=[], text=[], align=[], shift=[], above=[])
        self.bias_words = source("bias_words", x=[], y=[], text=[], align=[], shift=[])
        self.walls = {name: [] for name in WALLS}
        self.bands, self.medians, self.biases, self.swings = [], [], [], []
        self._drawn = {}
        self.height = self._plot(inks, "window_plot", TOP, 6)
        self.modes = self._plot(inks, "tuning_plot", SMALL_TOP, BOTTOM)
        self.height.add_glyph(self.held, inks(Line(x="bias_kv", y="height_mm", line_width=1.5), line_color="held"))
        self.modes.add_glyph(self.held_modes, inks(MultiLine(xs="xs", ys="ys", line_width=1.2), line_color="held"))
        for data, glyph in ((self.stable, Line(x="bias_kv", y="height_mm", line_width=1.8)),
                            (self.beyond, Line(x="bias_kv", y="height_mm", line_width=1.5, line_dash=[4, 3]))):
            self.height.add_glyph(data, inks(glyph, line_color="ink"))
        for data, glyph in ((self.mode_lines, MultiLine(xs="xs", ys="ys", line_width=1.5)),
                            (self.modes_beyond, MultiLine(xs="xs", ys="ys", line_width=1.2, line_dash=[4, 3]))):
            self.modes.add_glyph(data, inks(glyph, line_color="transverse"))
        text(self.height, inks, self.wall_words, color="warn", text_align={"field": "align"},
             x_offset={"field": "shift"}, y_offset={"field": "above"})
        text(self.height, inks, self.bias_words, size=12, color="accent", text_align={"field": "align"},
             x_offset={"field": "shift"}, y_offset=-6, text_font_style="bold")

    def _plot(self, inks, name, top, bottom):
        plot = bare_plot(inks, self.x_range, span(0, 1), name=name, min_border_left=LEFT, min_border_right=RIGHT,
                         min_border_top=top, min_border_bottom=bottom)
        parts = {"grid": source(x0=[], y0=[], x1=[], y1=[]), "labels": source(x=[], y=[], text=[]),
                 "ticks": source(x=[], y=[], text=[]), "title": source(x=[], y=[], text=[]),
                 "axis": source(x=[], y=[], text=[])}
        self._drawn[name] = parts
        gridlines(plot, inks, parts["grid"])
        text(plot, inks, parts["labels"], text_align="right", text_baseline="middle", x_offset=-8)
        text(plot, inks, parts["ticks"], text_align="center", text_baseline="alphabetic", y_offset=13)
        text(plot, inks, parts["axis"], text_align="right", text_baseline="alphabetic", y_offset=25)
        text(plot, inks, parts["title"], size=12, color="ink", text_align="left", x_offset=-LEFT + 8,
             y_offset=TITLE if top == TOP else -8)
        quiet = {"syncable": False, "visible": False, "editable": False}
        self.bands.append(inks(BoxAnnotation(left=0, right=1, line_color=None, fill_alpha=BAND_ALPHA, level="image",
                                             **quiet), fill_color="warn"))
        self.swings.append(inks(BoxAnnotation(left=0, right=1, line_color=None, fill_alpha=SWING_ALPHA, level="image",
                                              **quiet), fill_color="accent"))
        lines = {name: inks(Span(dimension="height", location=0, line_width=1.4, **quiet), line_color="warn")
                 for name in (*WALLS, "median")}
        self.medians.append(lines["median"])
        for wall in WALLS:
            self.walls[wall].append(lines[wall])
        self.biases.append(inks(Span(dimension="height", location=0, line_width=2, level="overlay", **quiet),
                                line_color="accent"))
        for part in (self.bands[-1], self.swings[-1], *lines.values(), self.biases[-1]):
            plot.add_layout(part)
        return plot

    def show(self, view):
        """Replace everything drawn by a LimitsView's; the bias and its swing are the browser's to draw."""
        window = view.window
        self._curves(window)
        top = max(float(window.bias.max()), view.swing[1]) / 1e3
        self.x_range.update(start=0, end=top * 1.03 or 1.0)
        self._axes(window)
        self._walls(view)

    def _curves(self, window):
        """Stable states solid, what lies beyond the turning point dashed, from the last stable one on."""
        kv, height = _short(window.bias / 1e3), _short(window.centre_height * 1e3)
        stable = window.stable.astype(bool)
        turn = len(stable) if stable.all() else int(np.argmin(stable))
        self.stable.data = {"bias_kv": kv[:turn], "height_mm": height[:turn]}
        after = slice(turn - 1, None) if turn < len(stable) else slice(0, 0)
        self.beyond.data = {"bias_kv": kv[after], "height_mm": height[after]}
        modes = _log_modes(window)
        self.mode_lines.data = {"xs": [kv[:turn]] * len(modes), "ys": [m[:turn] for m in modes]}
        self.modes_beyond.data = {"xs": [kv[after]] * len(modes), "ys": [m[after] for m in modes]}

    def hold(self, window):
        """Draw another design's stable states in grey; None: nothing."""
        if window is None:
            self.held.data, self.held_modes.data = {"bias_kv": [], "height_mm": []}, {"xs": [], "ys": []}
            return
        n = int(window.stable.sum())
        kv = _short(window.bias[:n] / 1e3)
        self.held.data = {"bias_kv": kv, "height_mm": _short(window.centre_height[:n] * 1e3)}
        self.held_modes.data = {"xs": [kv] * window.frequency.shape[1], "ys": list(_log_modes(window)[:, :n])}

    def _axes(self, window):
        end = self.x_range.end
        at = rounds(0, end, 6)
        heights = window.centre_height * 1e3
        low, high = nice_range(float(heights.min()), float(heights.max()))
        room = WORDS_ROOM*(high - low)              # under the curve, for the words of the bias
        self._frame(self.height, at, rounds(low, high, 5), low - room, high, "Rest height of the centre, mm",
                    [theme.digits(v) for v in rounds(low, high, 5)])
        found = window.frequency[window.frequency > 0]
        least = max(float(found.min()), float(found.max()) / 300) if len(found) else 10.0
        most = float(found.max()) if len(found) else 100.0
        named = log_ticks(least, most)
        self._frame(self.modes, at, np.log10(named), math.log10(least / 1.15), math.log10(most * 1.15),
                    "Modes in air, Hz", [theme.tick(f) for f in named], x_title="Bias, kV")

    def _frame(self, plot, x, y, low, high, title, words, x_title=""):
        """Range, grid, labels and title of one plot."""
        parts, end = self._drawn[plot.name], self.x_range.end
        plot.y_range.update(start=low, end=high)
        parts["grid"].data = {"x0": np.append(np.zeros(len(y)), x), "x1": np.append(np.full(len(y), end), x),
                              "y0": np.append(y, np.full(len(x), low)), "y1": np.append(y, np.full(len(x), high))}
        parts["labels"].data = {"x": [0] * len(y), "y": y, "text": words}
        parts["title"].data = {"x": [0], "y": [high], "text": [title]}
        if x_title:
            parts["ticks"].data = {"x": x, "y": [low] * len(x), "text": [theme.digits(v) for v in x]}
            parts["axis"].data = {"x": [end], "y": [low], "text": [x_title]}

    def _walls(self, view):
        """Two lines and one band, each named in words in a row of its own above the plot."""
        window, words = view.window, {}
        for name, volts in (("slack", window.slack_voltage), ("pull-in", window.pull_in_voltage)):
            seen = volts is not None and volts / 1e3 <= self.x_range.end
            for line in self.walls[name]:
                line.update(location=volts / 1e3 if seen else 0, visible=seen)
            if volts is not None:
                words[name] = (volts / 1e3, f"{name} {theme.quantity(volts, 'V')}")
        low, median, high = view.breakdown_band
        for box in self.bands:
            box.update(left=(low or 0) / 1e3, right=self.x_range.end if high is None else high / 1e3, visible=low is not None)
        for line in self.medians:
            line.update(location=(median or 0) / 1e3, visible=median is not None)
        if low is not None:
            words["breakdown"] = ((median or low) / 1e3, band_words(view.breakdown_band))
        end = self.x_range.end
        places = [min(place, end) for place, _ in words.values()]
        sides = [side(place / end) for place in places]
        self.wall_words.data = {
            "x": places, "y": [self.height.y_range.end] * len(places), "text": [said for _, said in words.values()],
            "align": [align for align, _ in sides], "shift": [shift for _, shift in sides],
            "above": [ROWS[name] for name in words]}


def _log_modes(window):
    """log10 of the mode frequencies (n_modes, n_bias), NaN where a mode has none."""
    with np.errstate(divide="ignore"):
        return np.where(window.frequency > 0, np.log10(window.frequency), np.nan).astype(np.float32).T


def side(part):
    """(align, shift in px) of words at a part of the plot's width, so that they stay inside."""
    return ("left", -4) if part < 0.35 else ("center", 0) if part < 0.62 else ("right", 4)


def band_words(band):
    """The breakdown band in words."""
    low, _, high = (None if volts is None else theme.digits(volts / 1e3) for volts in band)
    if high is None:
        return f"breakdown from {low} kV (5 % of films)"
    return f"breakdown {low} – {high} kV (5 – 95 % of films)"


def _short(values):
    return np.ascontiguousarray(values, dtype=np.float32)


def rounds(low, high, most):
    """Round values within a range, at most so many."""
    size = max(high - low, 1e-12) / most
    power = 10.0 ** math.floor(math.log10(size))
    step = next(m * power for m in (1, 2, 5, 10) if m * power >= size * 0.999)
    return np.arange(math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9) + 1) * step


def nice_range(low, high):
    """An axis (low, high) around values, with some air, from zero where they are near it."""
    room = 0.08 * max(high - low, 0.05 * max(abs(low), abs(high)), 1e-3)
    return (0.0 if 0 <= low < 0.4 * high else low - room), high + room


def log_ticks(low, high):
    """Values 1, 2, 5 in each decade within a range; decades only where there are many."""
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    factors = (1, 2, 5) if high / low < 300 else (1,)
    named = np.array([m * 10.0**d for d in decades for m in factors])
    return named[(named >= low * 0.999) & (named <= high * 1.001)]
