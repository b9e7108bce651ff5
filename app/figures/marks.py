"""On the level plot: where the linear result cannot hold, and the level that the source's current allows."""

import numpy as np
from bokeh.models import Line, Segment

from app import theme
from app.figures.canvas import source, text

SEEN_DB = 0.1           # a limited level nearer than this is not drawn
CAUSES = {"stroke": "large stroke", "breakdown": "breakdown", "slack": "slack film"}


class Marks:
    """Bars at the plot's foot and a second, fine line, each with words; nothing where all is well."""

    def __init__(self, plot, inks):
        self._plot = plot
        self.bars = source("not_linear", x0=[], y0=[], x1=[], y1=[])
        self.bar_words = source(x=[], y=[], text=[], align=[], shift=[])
        self.limited = source("limited_level", x=[], level_db=[])
        self.limited_words = source(x=[], y=[], text=[], align=[], shift=[])
        bar = inks(Segment(x0="x0", y0="y0", x1="x1", y1="y1", line_width=6, line_alpha=0.75), line_color="warn")
        plot.add_glyph(self.bars, bar)
        plot.add_glyph(self.limited, inks(Line(x="x", y="level_db", line_width=1.2, line_dash=[5, 2]), line_color="warn"))
        for words, above in ((self.bar_words, -20), (self.limited_words, -34)):
            text(plot, inks, words, color="warn", text_align={"field": "align"}, x_offset={"field": "shift"},
                 y_offset=above)

    def show(self, overview):
        """Replace both marks by an Overview's."""
        response, excursion, band = overview.response, overview.excursion, overview.band
        foot = self._plot.y_range.start
        x = np.log10(response.frequency)
        left, right = runs(x, ~excursion.linear)
        self.bars.data = {"x0": left, "y0": np.full(len(left), foot), "x1": right, "y1": np.full(len(left), foot)}
        causes = ", ".join(CAUSES.get(finding.name, finding.name) for finding in excursion.findings)
        self._say(self.bar_words, left[0] if len(left) else None, f"linear result cannot hold: {causes}", band)
        limited = response.limited_level_db < response.level_db - SEEN_DB
        seen = limited & (response.limited_level_db > theme.SILENCE_DB)
        self.limited.data = {"x": x.astype(np.float32) if seen.any() else [],
                             "level_db": np.where(seen, response.limited_level_db, np.nan).astype(np.float32)
                             if seen.any() else []}
        silent = limited.any() and not seen.any()
        words = "no current, no sound" if silent else "dashed: level at the source's current limit"
        self._say(self.limited_words, x[np.argmax(limited)] if limited.any() else None, words, band)

    def _say(self, words, place, said, band):
        """Words at a place of the foot, on the side where they have room; none without a place."""
        seen = place is not None
        right = seen and place > np.mean(np.log10(band))
        words.data = {"x": [np.log10(band[1]) if right else place] * seen, "y": [self._plot.y_range.start] * seen,
                      "text": [said] * seen, "align": ["right" if right else "left"] * seen,
                      "shift": [-5 if right else 5] * seen}


def runs(x, marked):
    """(starts, ends) on an axis of the runs of marked points, each reaching half way to its neighbours."""
    edges = np.concatenate([x[:1], (x[1:] + x[:-1]) / 2, x[-1:]])
    change = np.diff(np.concatenate([[False], marked, [False]]).astype(int))
    return edges[np.flatnonzero(change == 1)], edges[np.flatnonzero(change == -1)]
