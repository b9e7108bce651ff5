"""The second page: the voltage window, what the source sees, margins in words. Layout only; built when first shown."""

from app.figures.limits import LimitsBoard


class LimitsPage:
    """The figures of the limits in the place of those of the response, beside the same controls, below the same strip.

    Parameters
    ----------
    session : app.session.Session
    response : app.pages.response.ResponsePage
        The page whose controls, strip and cursor this one shares.
    """

    def __init__(self, session, response):
        self.session, self._response = session, response
        self.board = None
        session.param.watch(self.turn, "page")
        session.param.watch(self.hold, "held_limits")
        session.param.watch(self.show, ["limits", "limits_fault", "problem", "overview"])

    def turn(self, *_):
        """Show the page that the session is at."""
        here = self.session.page == "limits"
        if self.board is None and here:
            self._build()
        with self._response.board.in_one():
            for part in self._response.own:
                part.visible = self.session.page == "response"
            for part in (self.board.window, self.board.electrical, self.board.verdict) if self.board else ():
                part.visible = here
        self._response.controls.judge(here)
        self.show()

    def show(self, *events):
        """Show the limits of the last good design, and say in words why a newer one's are not shown."""
        session = self.session
        if self.board is None or session.page != "limits":
            return
        if session.overview is not None and any(event.name == "overview" for event in events):
            self.board.show_response(session.overview.response, session.overview.design.drive.current_limit)
        if session.limits is not None and (not events or any(event.name == "limits" for event in events)):
            self.board.show(session.limits)
        problem = session.problem
        self.board.dim(problem.text if problem else session.limits_fault or None)

    def hold(self, *_):
        """Keep the held design's limits in grey."""
        if self.board is not None:
            self.board.hold(self.session.held_limits)

    def _build(self):
        self.board = LimitsBoard(self._response.board, self._move_bias)
        self.hold()
        for name in ("window", "electrical", "verdict"):
            part = getattr(self.board, name)
            part.css_classes = [f"region-{name}-part"]
            self._response.add(part)

    def _move_bias(self, volts, released):
        """The bias was moved in the picture: as if by its slider."""
        state = self.session.state
        state.place("drive.bias", volts)
        if released:
            state.release()
