"""A bare plot with its own grid, labels, title and ticks, set anew whenever what it shows needs another range."""

import math

import numpy as np

from app.figures.canvas import bare_plot, gridlines, source, span, text

TITLE_PX = 12


class Axes:
    """``plot`` is the Bokeh plot; ``set`` gives it range, grid and words.

    Parameters
    ----------
    inks : app.figures.canvas.Inks
    name : str
        Name of the plot.
    x_range : bokeh.models.Range1d
    left, right, top, bottom : int
        Margins, px.
    """

    def __init__(self, inks, name, x_range, left=58, right=14, top=24, bottom=34):
        self.x_range = x_range
        self.plot = bare_plot(inks, x_range, span(0, 1), name=name, min_border_left=left, min_border_right=right,
                              min_border_top=top, min_border_bottom=bottom)
        self._grid = source(x0=[], y0=[], x1=[], y1=[])
        self._words = {part: source(x=[], y=[], text=[]) for part in ("labels", "ticks", "title", "axis")}
        self._drawn = None
        gridlines(self.plot, inks, self._grid)
        text(self.plot, inks, self._words["labels"], text_align="right", text_baseline="middle", x_offset=-8)
        text(self.plot, inks, self._words["ticks"], text_align="center", text_baseline="alphabetic", y_offset=13)
        text(self.plot, inks, self._words["axis"], text_align="right", text_baseline="alphabetic", y_offset=26)
        text(self.plot, inks, self._words["title"], size=TITLE_PX, color="ink", text_align="left", x_offset=8 - left,
             y_offset=-10)

    def set(self, x, y, y_range, title, x_title):
        """Grid lines at x and y, each a tuple of (places, words); nothing is done where nothing changes."""
        start, end, (low, high) = self.x_range.start, self.x_range.end, y_range
        drawn = (tuple(x[0]), tuple(x[1]), tuple(y[0]), tuple(y[1]), low, high, start, end, title, x_title)
        if drawn == self._drawn:
            return
        self._drawn = drawn
        self.plot.y_range.update(start=low, end=high)
        at_x, at_y = np.asarray(x[0], float), np.asarray(y[0], float)
        self._grid.data = {"x0": np.append(np.full(len(at_y), start), at_x), "x1": np.append(np.full(len(at_y), end), at_x),
                           "y0": np.append(at_y, np.full(len(at_x), low)), "y1": np.append(at_y, np.full(len(at_x), high))}
        self._words["labels"].data = {"x": [start] * len(at_y), "y": at_y, "text": list(y[1])}
        self._words["ticks"].data = {"x": at_x, "y": [low] * len(at_x), "text": list(x[1])}
        self._words["title"].data = {"x": [start], "y": [high], "text": [title]}
        self._words["axis"].data = {"x": [end], "y": [low], "text": [x_title]}


def short(values):
    """Contiguous float32."""
    return np.ascontiguousarray(values, dtype=np.float32)


def log_percent(ratio, floor=1e-6):
    """log10 of a ratio in percent, float32; NaN stays NaN."""
    return short(np.log10(100*np.maximum(ratio, floor)))


def percent_steps(low, high):
    """Places (log10 of percent) and words of whole powers of ten on an axis of percent."""
    at = np.arange(math.ceil(low - 1e-9), math.floor(high + 1e-9) + 1)
    return at, [f"{10.0**k:g} %" for k in at]
