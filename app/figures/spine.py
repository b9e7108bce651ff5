"""The frequency axis: level plot over share map on the same range and the same width."""

import math

import numpy as np
from bokeh.models import BoxAnnotation, Image, Line, LinearColorMapper, Segment, Span

from app import theme
from app.figures.canvas import bare_plot, gridlines, source, span, text
from app.figures.marks import Marks

LEFT, RIGHT, TOP = 62, 14, 24        # px of the margins, the same for both plots
LEVEL_BOTTOM, SHARE_BOTTOM = 18, 32
MENU, SCALE = 26, 84                 # px: kept free for the save menu, length of the colour scale
MOST_DB, LEAST_DB = 80, 40           # height of the level axis

LEVEL = {name: [] for name in ("x", "frequency", "level_db", "survival", "made")}


class Spine:
    """Both plots; ``level`` and ``share`` are the Bokeh plots."""

    def __init__(self, inks):
        self.x_range = span(math.log10(30), math.log10(4000))
        self.level_source = source("level", **LEVEL)
        self.held_source = source("held_level", **LEVEL)
        self.share_source = source("share", image=[], x=[], y=[], dw=[], dh=[])
        self.row_words = source("share_rows", x=[], y=[], text=[], role=[], style=[])
        self.row_ticks = source("share_ticks", x0=[], y0=[], x1=[], y1=[], role=[])
        self._drawn = None   # what the level axis shows
        self.level = self._level_plot(inks)
        self.share = self._share_plot(inks)

    def _level_plot(self, inks):
        plot = bare_plot(inks, self.x_range, span(0, 80), name="level_plot", min_border_left=LEFT,
                         min_border_right=RIGHT, min_border_top=TOP, min_border_bottom=LEVEL_BOTTOM)
        self.estimate = inks(BoxAnnotation(left=None, right=None, line_color=None, visible=False, level="image",
                                           syncable=False, editable=False), fill_color="estimate")
        plot.add_layout(self.estimate)
        self.level_grid = source(x0=[], y0=[], x1=[], y1=[])
        self.level_labels = source(x=[], y=[], text=[])
        self.level_ticks = source(x=[], y=[], text=[])
        self.level_words = source(x=[], y=[], text=[])
        self.estimate_words = source(x=[], y=[], text=[], align=[], shift=[])
        self.held_words = source(x=[], y=[], text=[])
        self.cursor_words = source("cursor_words", x=[], y=[], text=[], shift=[])
        gridlines(plot, inks, self.level_grid)
        held = inks(Line(x="x", y="level_db", line_width=1.5), line_color="held")
        line = inks(Line(x="x", y="level_db", line_width=1.8, line_join="round"), line_color="ink")
        plot.add_glyph(self.held_source, held)
        plot.add_glyph(self.level_source, line)
        self.marks = Marks(plot, inks)
        text(plot, inks, self.level_labels, text_align="right", text_baseline="middle", x_offset=-8)
        text(plot, inks, self.level_ticks, text_align="center", text_baseline="alphabetic", y_offset=13)
        text(plot, inks, self.level_words, size=12, color="ink", text_align="left", x_offset=-LEFT + 8, y_offset=-10)
        text(plot, inks, self.held_words, text_align="left", x_offset=6, y_offset=15)
        text(plot, inks, self.estimate_words, text_align={"field": "align"}, x_offset={"field": "shift"}, y_offset=-5)
        text(plot, inks, self.cursor_words, size=12, color="accent", text_align="center",
             x_offset={"field": "shift"}, y_offset=-10, text_font_style="bold")
        self.level_cursor = self._cursor(plot, inks)
        return plot

    def _share_plot(self, inks):
        plot = bare_plot(inks, self.x_range, span(0, 26), name="share_plot", min_border_left=LEFT,
                         min_border_right=RIGHT, min_border_top=TOP, min_border_bottom=SHARE_BOTTOM)
        self.colours = LinearColorMapper(low=-1, high=1, palette=theme.diverging(inks.palette), syncable=False)
        self.veil_colours = LinearColorMapper(low=0, high=1, palette=_veil(inks.palette), syncable=False)
        self.veil_source = source(image=[], x=[], y=[], dw=[], dh=[])
        self.share_labels = source(x=[], y=[], text=[])
        self.share_words = source(x=[], y=[], text=[])
        self.axis_words = source(x=[], y=[], text=[])
        self.legend = source("share_legend", image=[np.linspace(-1, 1, 65, dtype=np.float32)[None, :]], x=[0], y=[0],
                             dw=[0], dh=[0])
        self.legend_words = source(x=[], y=[], text=[], shift=[])
        image = {"x": "x", "y": "y", "dw": "dw", "dh": "dh"}
        plot.add_glyph(self.share_source, Image(image="image", color_mapper=self.colours, **image), level="image")
        plot.add_glyph(self.veil_source, Image(image="image", color_mapper=self.veil_colours, **image), level="image")
        ticks = Segment(x0="x0", y0="y0", x1="x1", y1="y1", line_width=1.5, line_color=inks.by_column())
        plot.add_glyph(self.row_ticks, ticks)
        self.row_text = text(plot, inks, self.row_words, color=None, text_align="right", text_baseline="middle",
                             x_offset=-8, text_font_style={"field": "style"}, syncable=False).glyph
        text(plot, inks, self.share_labels, text_align="center", text_baseline="alphabetic", y_offset=12)
        text(plot, inks, self.axis_words, text_align="right", text_baseline="alphabetic", y_offset=25)
        text(plot, inks, self.share_words, size=12, color="ink", text_align="left", x_offset=-LEFT + 8, y_offset=-10)
        text(plot, inks, self.legend_words, text_align="right", x_offset={"field": "shift"}, y_offset=-10)
        plot.add_glyph(self.legend, Image(image="image", color_mapper=self.colours, **image), level="annotation")
        self.chosen = inks(BoxAnnotation(bottom=0, top=1, fill_color=None, line_width=1.5, visible=False,
                                         syncable=False, editable=False, name="share_chosen"), line_color="accent")
        plot.add_layout(self.chosen)
        self.share_cursor = self._cursor(plot, inks)
        return plot

    def _cursor(self, plot, inks):
        cursor = inks(Span(dimension="height", location=None, line_width=1.4, level="overlay", syncable=False),
                      line_color="accent")
        plot.add_layout(cursor)
        return cursor

    def show(self, overview, columns, seen=True):
        """Replace the data of both plots; the map only where it is ``seen``."""
        self.level_source.data = columns.level
        if seen:
            self.share_source.data = columns.share
            self.veil_source.data = columns.veil
        self._frequency_axis(overview.band, columns.still["n_rows"][0])
        self._level_axis(overview, columns.level)
        self._mark_estimate(overview)
        self.marks.show(overview)

    def hold(self, columns):
        """Draw another design's level in grey; None: nothing."""
        self.held_source.data = LEVEL if columns is None else columns.level
        self._name_held()

    def _name_held(self):
        held = len(self.held_source.data["x"]) > 0
        self.held_words.data = {"x": [self.x_range.start] * held, "y": [self.level.y_range.end] * held,
                                "text": ["grey: held design"] * held}

    def change_colours(self, palette):
        """What the inks do not reach: the colour scales."""
        self.colours.palette = theme.diverging(palette)
        self.veil_colours.palette = _veil(palette)

    def _frequency_axis(self, band, n_rows):
        low, high = (math.log10(edge) for edge in band)
        if (self.x_range.start, self.x_range.end) == (low, high) and self.share.y_range.end == n_rows \
                and len(self.share_labels.data["x"]):
            return
        self.x_range.update(start=low, end=high)
        self.share.y_range.end = n_rows
        labelled = frequency_ticks(*band)
        self.share_labels.data = {"x": np.log10(labelled), "y": [0] * len(labelled),
                                  "text": [theme.tick(f) for f in labelled]}
        self.axis_words.data = {"x": [high], "y": [0], "text": ["Frequency, Hz"]}
        self.legend_words.data = {"x": [high] * 2, "y": [n_rows] * 2, "text": ["adds", "cancels"],
                                  "shift": [-MENU, -MENU - 34 - SCALE]}
        self.share_words.data = {"x": [low], "y": [n_rows], "text": ["Share of each mode, by its frequency in air, Hz"]}

    def _level_axis(self, overview, level):
        inside = (level["frequency"] >= overview.band[0]) & (level["frequency"] <= overview.band[1])
        low, high = steady_range(level["level_db"][inside], (self.level.y_range.start, self.level.y_range.end))
        drawn = (low, high, overview.band, level_label(overview.design.listener))
        if drawn == self._drawn:
            return
        self._drawn = drawn
        self.level.y_range.update(start=low, end=high)
        start, end = self.x_range.start, self.x_range.end
        lines = np.arange(low, high + 1, 10.0)
        named = lines if high - low <= 60 else lines[lines % 20 == 0]
        labelled = frequency_ticks(*overview.band)
        x = np.log10(labelled)
        named_hz = [theme.tick(f) for f in labelled[:-1]] + [theme.tick(labelled[-1]) + " Hz"]
        self.level_ticks.data = {"x": x, "y": np.full(len(x), low), "text": named_hz}
        self.level_grid.data = {"x0": np.append(np.full(len(lines), start), x),
                                "x1": np.append(np.full(len(lines), end), x),
                                "y0": np.append(lines, np.full(len(x), low)),
                                "y1": np.append(lines, np.full(len(x), high))}
        self.level_labels.data = {"x": np.full(len(named), start), "y": named,
                                  "text": [theme.digits(v) for v in named]}
        self.level_words.data = {"x": [start], "y": [high], "text": [drawn[-1]]}
        self._name_held()

    def _mark_estimate(self, overview):
        above, (low, high) = overview.response.estimate_above, overview.band
        seen = bool(above < high)
        left = math.log10(max(above, low)) if seen else None
        self.estimate.update(left=left, visible=seen)
        # A narrow region is named from its left side.
        room = seen and (self.x_range.end - left) > 0.2 * (self.x_range.end - self.x_range.start)
        self.estimate_words.data = {"x": [left if room else self.x_range.end] * seen,
                                    "y": [self.level.y_range.start] * seen, "text": ["estimate: cone depth"] * seen,
                                    "align": ["left" if room else "right"] * seen, "shift": [5 if room else -5] * seen}


def _veil(palette):
    """Colours of the veil: nothing, and the page's colour almost covering."""
    return [palette.page + "00", palette.page + "b4"]


def frequency_ticks(low, high):
    """Frequencies named on the axis, 1, 2 and 5 in each decade, within a band in Hz."""
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    named = np.array([m * 10.0**d for d in decades for m in (1, 2, 5)])
    return named[(named >= low * 0.999) & (named <= high * 1.001)]


def steady_range(level, current):
    """Level axis (low, high) in dB, in steps of 10: the current one as long as it suits, never over MOST_DB high.

    A deep dip is cut off at the lower end rather than squeezing everything else.
    """
    low, high = current
    if np.max(level) < theme.SILENCE_DB:
        return current
    top, bottom = float(np.max(level)), max(float(np.min(level)), float(np.max(level)) - MOST_DB)
    if high - 22 < top < high - 1 and low - 12 < bottom < low + 32 and LEAST_DB <= high - low <= MOST_DB:
        return current
    high = 10.0 * math.ceil((top + 2) / 10)
    low = 10.0 * math.floor(bottom / 10)
    return min(max(low, high - MOST_DB), high - LEAST_DB), high


def level_label(listener):
    """Words of the level axis."""
    off = f", {theme.digits(math.degrees(listener.angle))}° off axis" if listener.angle else ""
    return f"Level at {theme.quantity(listener.distance, 'm')}{off}, dB re 20 µPa"
