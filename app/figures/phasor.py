"""Phasor chain at the cursor: complex pressures of the modes head to tail, from zero to the total."""

from bokeh.models import Line, Scatter, Segment

from app.figures.canvas import bare_plot, source, text


class Phasor:
    """``plot`` and its sources; phasor.js fills them (pascals, turned so that the total points to the right)."""

    def __init__(self, inks):
        self.chain = source("phasor", x0=[], y0=[], x1=[], y1=[], frequency=[], magnitude=[], phase=[], role=[],
                            dash=[], width=[])
        self.held = source("phasor_held", x=[], y=[])
        self.total = source("phasor_total", x0=[], y0=[], x1=[], y1=[], angle=[])
        self.words = source("phasor_words", x=[], y=[], text=[], role=[], style=[], align=[])
        self.plot = bare_plot(inks, name="phasor_plot")
        ends = {"x0": "x0", "y0": "y0", "x1": "x1", "y1": "y1"}
        self.plot.add_glyph(self.held, inks(Line(x="x", y="y", line_width=1.5), line_color="held"))
        self.plot.add_glyph(self.total, inks(Segment(**ends, line_width=2.4), line_color="accent"))
        self.plot.add_glyph(self.total, inks(Scatter(x="x1", y="y1", marker="triangle", size=10, angle="angle",
                                                     line_color=None), fill_color="accent"))
        self.plot.add_glyph(self.chain, Segment(**ends, line_width="width", line_dash={"field": "dash"},
                                                line_color=inks.by_column()))
        text(self.plot, inks, self.words, color=None, text_align={"field": "align"}, text_baseline="middle",
             text_font_style={"field": "style"})
