"""Mode gallery: the shapes in air as small multiples on one canvas, in pixels; gallery.js lays out the tiles."""

from bokeh.models import MultiLine, Patches, Quad, Segment

from app.figures.canvas import bare_plot, source, text
from app.theme import TEXT_PX


class Gallery:
    """``plot`` and its sources; ``modes`` comes from the server, the rest is drawn from it in the browser."""

    def __init__(self, inks):
        self.modes = source("gallery", mode=[], frequency=[], frequency_vacuum=[], kind=[], rank=[], damping_ratio=[],
                            energy_share=[], centre_share=[], in_plane_share=[], shape=[])
        self.marks = source("gallery_marks", left=[], right=[], bottom=[], top=[], role=[], alpha=[])
        self.fills = source("gallery_fills", xs=[], ys=[], role=[])
        self.held = source("gallery_held", xs=[], ys=[])
        self.lines = source("gallery_lines", xs=[], ys=[], role=[], dash=[], width=[], mode=[])
        self.axes = source("gallery_axes", x0=[], y0=[], x1=[], y1=[], role=[], width=[])
        self.heads = source("gallery_heads", x=[], y=[], text=[], role=[], mode=[])
        self.words = source("gallery_words", x=[], y=[], text=[], role=[])
        self.plot = bare_plot(inks, name="gallery_plot")
        add, colour = self.plot.add_glyph, inks.by_column()
        add(self.marks, Quad(left="left", right="right", bottom="bottom", top="top", line_color=None, fill_color=colour,
                             fill_alpha="alpha"))
        add(self.fills, Patches(xs="xs", ys="ys", line_color=None, fill_color=colour, fill_alpha=0.10))
        add(self.axes, Segment(x0="x0", y0="y0", x1="x1", y1="y1", line_color=colour, line_width="width"))
        add(self.held, inks(MultiLine(xs="xs", ys="ys", line_width=1.3), line_color="held"))
        add(self.lines, MultiLine(xs="xs", ys="ys", line_color=colour, line_width="width", line_dash={"field": "dash"},
                                  line_join="round"))
        text(self.plot, inks, self.heads, size=TEXT_PX, color=None, text_font_style="bold")
        text(self.plot, inks, self.words, color=None)
