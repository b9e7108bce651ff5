"""What all plots are made of: a bare Bokeh plot without toolbar, inks that follow light and dark, text in the margin.

Axes are drawn from segments and text: the page's frame repaints Bokeh's own axes in its style, and these stay ours.
Everything here only looks (``syncable=False``): the browser tells the server nothing about it.
"""

from bokeh.core.properties import value
from bokeh.models import CategoricalColorMapper, ColumnDataSource, InlineStyleSheet, Plot, Range1d, Segment, Text

from app.theme import FONT, SMALL_PX

PLOT_STYLE = """
:host { outline: none; touch-action: pan-y; border-radius: 3px; }
:host(:focus-visible) { outline: 2px solid var(--accent); outline-offset: -1px; }
"""


class Inks:
    """Colours by role: sets them, remembers where, changes all of them at once."""

    def __init__(self, palette):
        self.palette = palette
        self._uses, self._hosts = [], []
        roles = palette.roles()
        self._mapper = CategoricalColorMapper(factors=list(roles), palette=list(roles.values()), syncable=False)

    def __call__(self, model, **roles):
        """Set properties of a model to the colours of roles, now and after every change; returns the model."""
        self._uses.append((model, roles))
        model.update(**self._colours(roles))
        return model

    def by_column(self, column="role"):
        """Colour spec of a glyph whose column holds role names."""
        return {"field": column, "transform": self._mapper}

    def change(self, palette):
        """Use another palette everywhere."""
        self.palette = palette
        self._mapper.palette = list(palette.roles().values())
        for model, roles in self._uses:
            model.update(**self._colours(roles))
        for model in self._hosts:
            model.styles = {**model.styles, **self._variables()}

    def host(self, model):
        """Give a model's HTML the colours as CSS variables, now and after every change; returns the model."""
        self._hosts.append(model)
        model.styles = {**model.styles, **self._variables()}
        return model

    def _colours(self, roles):
        return {name: getattr(self.palette, role) for name, role in roles.items()}

    def _variables(self):
        """CSS variables of all roles."""
        return {f"--{role.replace('_', '-')}": colour for role, colour in self.palette.roles().items()}


def source(name=None, **data):
    """A source the browser may change without telling the server."""
    return ColumnDataSource(data=data, name=name, syncable=False)


def bare_plot(inks, x_range=None, y_range=None, **options):
    """An empty plot on the page's colour with nothing of its own but the frame."""
    plot = Plot(x_range=x_range or span(0, 1), y_range=y_range or span(0, 1), title=None, toolbar_location=None,
                outline_line_color=None, sizing_mode="stretch_both", syncable=False, min_border=0, lod_threshold=None,
                stylesheets=[InlineStyleSheet(css=PLOT_STYLE)], **options)
    plot.toolbar.logo = None
    return inks(inks.host(plot), background_fill_color="page", border_fill_color="page")


def span(start, end):
    """A fixed range, set by us alone."""
    return Range1d(start=start, end=end, syncable=False)


def text(plot, inks, data, size=SMALL_PX, color="muted", **options):
    """Text glyph on a source with columns x, y, text, margins included; ``color`` is a role, or None: by column."""
    glyph = Text(x="x", y="y", text="text", text_font=value(FONT), text_font_size=f"{size}px", **options)
    if color is None:
        glyph.text_color = inks.by_column()
    else:
        inks(glyph, text_color=color)
    return plot.add_glyph(data, glyph, level="annotation")


def gridlines(plot, inks, data, width=1):
    """Segments x0, y0, x1, y1 under everything else."""
    glyph = inks(Segment(x0="x0", y0="y0", x1="x1", y1="y1", line_width=width), line_color="faint")
    return plot.add_glyph(data, glyph, level="underlay")
