"""The third page: how much the film distorts under either drive law, and how it sounds. Layout only; built when first shown."""

from pathlib import Path

import panel as pn

from app.figures.distortion import DistortionBoard
from app.harmonics import PAGE, Harmonics
from app.listen import Listen

PLACES_CSS = (Path(__file__).parent.parent / "distortion.css").read_text(encoding="utf-8")


class DistortionPage:
    """The figures of distortion in the place of those of the response, beside the same controls, below the same strip.

    Parameters
    ----------
    session : app.session.Session
    response : app.pages.response.ResponsePage
        The page whose controls, strip and cursor this one shares.
    harmonics : app.harmonics.Harmonics or None
        What asks the worker; made here unless given.
    """

    def __init__(self, session, response, harmonics=None):
        self.session, self._response = session, response
        self.harmonics = harmonics or Harmonics(session)
        self.board = self.listen = None
        session.param.watch(self.turn, "page")
        session.param.watch(self.show, ["problem", "overview"])
        watch = self.harmonics.param.watch
        watch(self.show, ["view", "fault"])
        watch(lambda event: self.board and self.board.hold(event.new), "held")
        watch(self.show_series, "series")
        watch(self.show_map, "map")
        watch(self.say_map, ["stage", "map_fault", "map"])
        inbox = response.board.inbox
        inbox.on("settled", self.harmonics.settled)
        inbox.on("map", lambda _: self.harmonics.toggle_map())

    def turn(self, *_):
        """Show the page that the session is at."""
        here = self.session.page == PAGE
        if self.board is None and here:
            self._build()
        if self.board is not None:
            with self._response.board.in_one():
                self.board.plots.visible = here
            self.listen.visible = here
        self._response.widen(here)
        self.show()

    def show(self, *events):
        """Show the curves of the last good design, and say in words why a newer one's are not shown."""
        if self.board is None or self.session.page != PAGE:
            return
        view, problem = self.harmonics.view, self.session.problem
        if view is not None and (not events or any(event.name == "view" for event in events)):
            self.board.show(view)
        self.board.dim(problem.text if problem else self.harmonics.fault or None)
        if any(event.name == "overview" for event in events):
            self.say_map()

    def show_series(self, *_):
        """Show the THD against amplitude."""
        if self.board is not None and self.session.overview is not None:
            self.board.show_series(self.harmonics.series, self.session.overview.design)

    def show_map(self, *_):
        """Show the map."""
        overview = self.session.overview
        if self.board is not None and overview is not None:
            found = self.harmonics.map
            design, band = self.harmonics.map_of if found is not None else (overview.design, tuple(overview.band))
            self.board.show_map(found, design, band)

    def say_map(self, *_):
        """Say how far the map is, or whose it is."""
        if self.board is not None:
            self.board.say_map(self.harmonics.stage, self.harmonics.is_stale, self.harmonics.map_fault)

    def set_dark(self):
        """Light or dark: what the inks do not reach."""
        if self.board is not None:
            self.board.change_colours()

    def _build(self):
        self.board = DistortionBoard(self._response.board, PLACES_CSS)
        self.board.plots.css_classes = ["region-curves-part"]
        self._response.add(self.board.plots, styled=True)
        self.listen = Listen(self.session.state, pn.state.curdoc)
        self._response.view.append(self.listen)
        self.board.hold(self.harmonics.held)
        self.show_map()
        self.show_series()
