"""Plots in their places: each with its save menu and a notice over it, dimmed together when what they show is old."""

from html import escape

from bokeh.models import Column

LAST_GOOD = '<p class="notice aside">last good state</p>'
DIMMED = "0.35"


class Places:
    """``boxes`` by name of plot; ``menus`` and ``notices`` are the HTML over them.

    Parameters
    ----------
    html : callable
        Makes words from (text, **styles), such as `Board.html`.
    plots : dict
        Name -> Bokeh plot; the first one's notice says why the plots are dimmed, the others' only that they are old.
    """

    def __init__(self, html, plots):
        self.plots = plots
        self.menus = {name: html(menu_html(name), position="absolute", top="0", right="0", z_index="2") for name in plots}
        self.notices = {name: html("", position="absolute", top="32%", left="12%", width="76%", z_index="2") for name in plots}
        for notice in self.notices.values():
            notice.visible = False
        self.boxes = {name: Column(plot, self.menus[name], self.notices[name], sizing_mode="stretch_both",
                                   css_classes=[f"plot-{name}", f"region-{name}"], styles={"position": "relative"})
                      for name, plot in plots.items()}

    def models(self):
        """Plots and menus under the names by which the browser's code knows them."""
        return {**{f"{name}_plot": plot for name, plot in self.plots.items()},
                **{f"{name}_menu": menu for name, menu in self.menus.items()}}

    def dim(self, text, also=()):
        """Dim the plots, and other models, and say the text over them; None lights them up again."""
        opacity = "1" if text is None else DIMMED
        for model in (*self.plots.values(), *also):
            if model.styles.get("opacity", "1") != opacity:
                model.styles = {**model.styles, "opacity": opacity}
        first = next(iter(self.plots))
        for name, notice in self.notices.items():
            said = "" if text is None else LAST_GOOD if name != first else f'<p class="notice" role="alert">{escape(text)}</p>'
            if notice.text != said:                # an unchanged one would be drawn anew too
                notice.text = said
            notice.visible = text is not None


def menu_html(name):
    """The small save menu of a plot."""
    forms = "".join(f'<button data-act="save" data-plot="{name}" data-form="{form}">{form.upper()}</button>'
                    for form in ("png", "svg", "csv"))
    pause = '<button data-act="pause" data-word="pause">pause</button>' if name == "section" else ""
    return (f'<div class="save">{pause}<details><summary aria-label="Save the {name} plot" title="Save this plot">⋯'
            f"</summary><div>{forms}</div></details></div>")
