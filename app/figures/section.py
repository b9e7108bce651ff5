"""The loudspeaker's section to scale at rest, moving as it does at the cursor frequency or in one chosen mode."""

from bokeh.models import Line, MultiLine, Patches, Segment

from app.figures.canvas import bare_plot, source, text


class Section:
    """``plot`` and its sources; section.js fills them (millimetres, axis of the loudspeaker at x = 0)."""

    def __init__(self, inks):
        self.film = source("section", x=[], y=[])
        self.rest = source("section_rest", x=[], y=[])
        self.held = source("section_held", x=[], y=[])
        self.centre = source("section_centre", x0=[], y0=[], x1=[], y1=[])
        self.spring = source("section_spring", x=[], y=[])
        self.frame = source("section_frame", xs=[], ys=[])
        self.rear = source("section_rear", xs=[], ys=[])
        self.bar = source("section_bar", x=[], y=[])
        self.words = source("section_words", x=[], y=[], text=[], role=[], style=[], align=[])
        self.plot = bare_plot(inks, name="section_plot")
        add = self.plot.add_glyph
        add(self.rear, inks(MultiLine(xs="xs", ys="ys", line_width=1), line_color="held"))
        add(self.frame, inks(Patches(xs="xs", ys="ys", line_color=None), fill_color="ink"))
        add(self.held, inks(Line(x="x", y="y", line_width=1.5), line_color="held"))
        add(self.spring, inks(Line(x="x", y="y", line_width=1.2, line_join="round"), line_color="muted"))
        add(self.rest, inks(Line(x="x", y="y", line_width=1), line_color="muted"))
        # The electrodes are hinted as a pale band along both faces: their thickness is far below a pixel.
        add(self.film, inks(Line(x="x", y="y", line_width=6, line_alpha=0.22, line_join="round"), line_color="accent"))
        add(self.film, inks(Line(x="x", y="y", line_width=2, line_join="round"), line_color="accent"))
        ends = {"x0": "x0", "y0": "y0", "x1": "x1", "y1": "y1"}
        add(self.centre, inks(Segment(**ends, line_width=5), line_color="ink"))
        add(self.bar, inks(Line(x="x", y="y", line_width=2), line_color="muted"))
        text(self.plot, inks, self.words, color=None, text_align={"field": "align"}, text_baseline="middle",
             text_font_style={"field": "style"})
