"""Map of THD over frequency and amplitude, computed on demand."""

import math

import numpy as np
from bokeh.models import Image, LinearColorMapper, Span

from app import theme
from app.figures.axes import Axes, log_percent
from app.figures.canvas import source, text
from app.figures.harmonics import NAMED, PERCENT
from app.figures.spine import frequency_ticks

STEPS = 65


class ThdMap:
    """``axes.plot`` is the Bokeh plot."""

    def __init__(self, inks, x_range):
        self._inks = inks
        self.axes = Axes(inks, "map_plot", x_range, right=14)
        plot = self.axes.plot
        self.colours = LinearColorMapper(low=PERCENT[0], high=PERCENT[1], palette=ramp(inks.palette),
                                         nan_color=inks.palette.warn + "60", syncable=False)
        self.data = source("thd_map", image=[], x=[], y=[], dw=[], dh=[])
        self.numbers = source("thd_map_numbers", frequency=[], amplitude=[], thd_percent=[])
        self.words = source(x=[], y=[], text=[])
        glyph = Image(image="image", x="x", y="y", dw="dw", dh="dh", color_mapper=self.colours)
        plot.add_glyph(self.data, glyph, level="image")
        text(plot, inks, self.words, text_align="center", text_baseline="middle")
        self.cursor = inks(Span(dimension="height", location=None, line_width=1.4, level="overlay", syncable=False),
                           line_color="accent")
        self.now = inks(Span(dimension="width", location=None, line_width=1.4, line_dash=[2, 3], syncable=False),
                        line_color="ink")
        plot.add_layout(self.cursor)
        plot.add_layout(self.now)

    def show(self, found, design, band):
        """Replace everything by a DistortionMap's, or by an empty map (None)."""
        at = frequency_ticks(*band)
        at = at if len(at) <= NAMED else at[[theme.tick(f)[0] in "15" for f in at]]
        x = (np.log10(at), [theme.tick(f) for f in at])
        if found is None or not len(found.amplitude):
            self.data.data = {name: [] for name in self.data.data}
            self.numbers.data = {name: [] for name in self.numbers.data}
            self.axes.set(x, ([], []), (0.0, 1.0), "Map of THD", "Frequency, Hz")
            self.now.location = None
            middle = (self.axes.x_range.start + self.axes.x_range.end)/2
            said = "the drive's amplitude is zero" if found is not None else "computed on demand: frequency × amplitude"
            self.words.data = {"x": [middle], "y": [0.5], "text": [said]}
            return
        self.words.data = {"x": [], "y": [], "text": []}
        half = [0.5*math.log10(v[1]/v[0]) for v in (found.frequency, found.amplitude)]
        left, right = math.log10(found.frequency[0]) - half[0], math.log10(found.frequency[-1]) + half[0]
        low, high = math.log10(found.amplitude[0]) - half[1], math.log10(found.amplitude[-1]) + half[1]
        volts = frequency_ticks(found.amplitude[0], found.amplitude[-1])
        self.axes.set(x, (np.log10(volts), [theme.quantity(v, "V") for v in volts]), (low, high),
                      f"THD, {found.law} drive: faint 0.01 %, strong 100 %", "Frequency, Hz")
        image = log_percent(found.thd)
        self.data.data = {"image": [image], "x": [left], "y": [low], "dw": [right - left], "dh": [high - low]}
        frequency, amplitude = np.meshgrid(found.frequency, found.amplitude)
        self.numbers.data = {"frequency": np.float32(frequency.ravel()), "amplitude": np.float32(amplitude.ravel()),
                             "thd_percent": np.float32(100*found.thd.ravel())}
        v = design.drive.amplitude
        self.now.location = math.log10(v) if v > 0 else None

    def change_colours(self, palette):
        """Light or dark."""
        self.colours.update(palette=ramp(palette), nan_color=palette.warn + "60")


def ramp(palette):
    """Colours from the page to its ink."""
    return theme.sequential(palette.page, palette.ink, STEPS)
