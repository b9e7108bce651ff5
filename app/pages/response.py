"""The first page: what it sounds like, which motion makes each peak, whether it is safe to drive. Layout only."""

from pathlib import Path

import panel as pn
from bokeh.models import Column

from app.controls import Controls
from app.figures.board import Board

BESIDE = Path(__file__).parent.parent
PAGE_CSS, PLOTS_CSS, PART_CSS = ((BESIDE / name).read_text(encoding="utf-8")
                                 for name in ("page.css", "plots.css", "part.css"))


class ResponsePage:
    """Controls at the left, the figures of one design beside them.

    Parameters
    ----------
    session : app.session.Session
    dark : bool
        Whether to begin with the dark palette.
    """

    def __init__(self, session, dark=False):
        self.session, self._behind = session, False
        self.controls = Controls(session.state)
        self.board = Board(dark)
        self.board.on_painted(session.painted)
        self.controls.connect(self.board.inbox)
        self.view = pn.Column(self.controls.view, self.plots(), css_classes=["page"], stylesheets=[PAGE_CSS], margin=0,
                              sizing_mode="stretch_both")
        session.param.watch(self.show, ["overview", "problem"])
        session.param.watch(self._return, "page")
        session.param.watch(lambda event: self.board.hold(event.new), "held")
        for key, act in {"h": session.hold, "u": session.state.undo, "r": session.state.redo}.items():
            self.board.on_key(key, act)
        self.show()

    def plots(self):
        """The figures in their places: the frequency axis is the spine, what happens at the cursor beside it."""
        board = self.board
        head = _part("head", strip=board.strip, sentence=board.sentence)
        spine = _part("spine", level=board.level, share=board.share)
        side = _part("side", section=board.section, changes=board.changes, phasor=board.phasor)
        gallery = _named(board.gallery, "gallery")
        self.own = (spine, side, gallery)          # what other pages put their figures in the place of
        # the controls' answers come with the figures' models
        self._whole = Column(head, *self.own, _named(board.foot, "foot"), css_classes=["region-plots"],
                             tags=[self.controls.answers], stylesheets=[PLOTS_CSS], sizing_mode="stretch_both")
        return pn.pane.Bokeh(self._whole, css_classes=["region-plots"], margin=0, sizing_mode="stretch_both")

    def add(self, part, styled=False):
        """Give another page's part, a Bokeh layout, a place below the strip; it stacks what it holds unless ``styled``."""
        if not styled:
            part.stylesheets = [PART_CSS]
        self._whole.children = [*self._whole.children, part]

    def widen(self, wide):
        """Whether the strip reaches across the whole width, nothing standing at its side."""
        classes = ["region-plots", "wide"] if wide else ["region-plots"]
        if self._whole.css_classes != classes:
            self._whole.css_classes = classes

    def show(self, *events):
        """Show the last good overview, and say in words why a newer design is not shown."""
        session = self.session
        if session.overview is not None and (not events or any(event.name == "overview" for event in events)):
            self._behind = session.page != "response"
            self.board.show(session.overview, seen=not self._behind)
        problem = session.problem
        self.controls.blame(problem and problem.key, problem.text if problem else "")
        self.board.dim(problem and problem.text)

    def _return(self, *_):
        """Another page was left: show what was left out behind it."""
        if self._behind and self.session.page == "response":
            self._behind = False
            self.board.show(self.session.overview)

    def set_dark(self, dark):
        """Light or dark."""
        self.board.set_dark(dark)


def _part(name, **figures):
    """Figures one below the other."""
    return Column(*(_named(figure, key) for key, figure in figures.items()), css_classes=[f"region-{name}"],
                  stylesheets=[PART_CSS], sizing_mode="stretch_both")


def _named(figure, name):
    """The figure with the class its place is known by."""
    figure.css_classes = [*figure.css_classes, f"region-{name}"]
    return figure
