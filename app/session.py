"""One visitor's session: watches the state, asks the worker, publishes the result, busy and the problem."""

import asyncio
from dataclasses import dataclass
from functools import partial

import param

from app import worker
from app.state import DesignState, samples

PATIENCE = 0.5      # s the next result waits for a browser that does not say it has painted (a tab out of sight)

__all__ = ["PAGES", "Problem", "Session", "samples", "visit"]

PAGES = ("response", "limits", "distortion")


@dataclass(frozen=True)
class Problem:
    """Why the plots show an earlier design: in words, and at which control."""

    text: str
    key: str | None      # "group.name" of the control that caused it
    kind: str            # "invalid", "no rest state", "not converged", "unexpected", as in worker.Failure


class Session(param.Parameterized):
    """State in, results out. The last good overview stays when a later design has none.

    Parameters
    ----------
    state : DesignState
    document : bokeh.document.Document or None
        Where results are shown, once `connected` is called; None publishes at once (tests, scripts).
    updater, limits_updater : callable
        Make the access to the worker from (publish), for overviews and for the limits; replaced in tests.
    """

    state = param.ClassSelector(class_=DesignState, constant=True)
    overview = param.Parameter(doc="Overview of the last design that could be computed, or None")
    held = param.Parameter(doc="Overview of the held design in the band shown, or None")
    page = param.Selector(default=PAGES[0], objects=list(PAGES), doc="the page shown")
    limits = param.Parameter(doc="LimitsView of the last design whose limits could be computed, or None")
    held_limits = param.Parameter(doc="LimitsView of the held design, or None")
    limits_fault = param.String(default="", doc="why the newest design's limits are not shown, or nothing")
    busy = param.Boolean(default=False, doc="whether a newer design than the one shown is being computed")
    problem = param.ClassSelector(class_=Problem, allow_None=True, doc="why the newest design is not shown, or None")

    def __init__(self, state, document=None, updater=None, limits_updater=None):
        super().__init__(state=state)
        self._document = document
        self._connected = document is None
        self._waiting = {}           # what to publish once the browser is there
        self._closed, self._endings = False, []
        updater = updater or _shared_updater
        self._painted = asyncio.Event()
        self._painted.set()
        self._shown = updater(self._publish, self._browser_ready)
        self._grey = updater(self._publish_held)
        self._walls = (limits_updater or _shared_limits)(self._publish_limits)
        self._grey_walls = (limits_updater or _shared_limits)(self._publish_held_limits)
        self._watches = [state.param.watch(self._ask, ["design", "band", "invalid"], what="value"),
                         state.param.watch(self._ask_held, ["held", "band"]),
                         state.param.watch(self._ask_limits, "judgement")]
        self.param.watch(self._ask_limits, ["page", "overview"])
        self.param.watch(self._ask_held_limits, ["page", "held"])

    def start(self):
        """Ask for the first overview."""
        self._ask()

    def connected(self):
        """The browser has the document: from now on, and with what has waited, results are published.

        What changes between the browser's copy of the document and its connection would be lost on the way.
        """
        self._connected = True
        for take, outcome in self._waiting.items():
            self.in_document(take, outcome)
        self._waiting = {}

    def painted(self):
        """The browser has painted the last overview: the next may come."""
        self._painted.set()

    async def _browser_ready(self):
        """Wait until the browser has painted what it was sent, so that results never queue up there."""
        if self._document is not None and self._connected:
            try:
                await asyncio.wait_for(self._painted.wait(), PATIENCE)
            except TimeoutError:
                self._painted.set()

    def hold(self):
        """Hold the design shown as the grey reference, or let the held one go."""
        self.state.held = self.overview.design if self.state.held is None and self.overview is not None else None

    def close(self):
        """End with the visitor: nothing is computed or published for this session any more."""
        self._closed = True
        for ending in self._endings:
            ending()
        for watch in self._watches:
            self.state.param.unwatch(watch)
        for updater in (self._shown, self._grey, self._walls, self._grey_walls):
            updater.close()

    def on_close(self, ending):
        """Call ``ending`` (no arguments) when the session ends."""
        self._endings.append(ending)

    def _ask(self, *events):
        """Want the newest design; one that is invalid is a problem at once and leaves the plots."""
        invalid = self.state.invalid
        if invalid is not None:
            self.problem = Problem(invalid.text, invalid.key, "invalid")
        elif events and all(event.name == "invalid" for event in events) and self._is_shown():
            self.problem = None
        else:
            self.busy = True
            self._shown.want(self.state.design, self.state.band)

    def _is_shown(self):
        """Whether the overview is that of the state's design and band."""
        shown = self.overview
        return shown is not None and (shown.design, tuple(shown.band)) == (self.state.design, self.state.band)

    def _ask_held(self, *_):
        """Want the held design in the band shown."""
        design, band = self.state.held, self.state.band
        shown = self.overview
        if design is None:
            self.held = None
        elif shown is not None and (shown.design, tuple(shown.band)) == (design, band):
            self.held = shown
        else:
            self._grey.want(design, band)

    def _ask_limits(self, *_):
        """Want the limits of the design shown, where the page of the limits is."""
        if self.page == "limits" and self.overview is not None:
            self._walls.want(self.overview.design, tuple(self.overview.band), self.state.judgement)

    def _ask_held_limits(self, *_):
        """Want the limits of the held design, where the page of the limits is."""
        if self.held is None:
            self.held_limits = None
        elif self.page == "limits":
            self._grey_walls.want(self.held.design, tuple(self.held.band), self.state.judgement)

    def _publish(self, outcome):
        """Take a result or a failure to the document."""
        self.in_document(self._take, outcome)

    def _publish_held(self, outcome):
        """Take the held design's result to the document."""
        self.in_document(self._take_held, outcome)

    def _publish_limits(self, outcome):
        """Take the limits to the document."""
        self.in_document(self._take_limits, outcome)

    def _publish_held_limits(self, outcome):
        """Take the held design's limits to the document."""
        self.in_document(self._take_held_limits, outcome)

    def in_document(self, take, outcome):
        """Publish under the document's lock, or at once without a document; wait for a browser that is not there yet."""
        if self._closed:
            return
        if not self._connected:
            self._waiting[take] = outcome
        elif self._document is None:
            take(outcome)
        else:
            self._document.add_next_tick_callback(partial(take, outcome))

    def _take(self, outcome):
        """Publish result, problem and busy in one update."""
        if self._closed:
            return
        values = {"busy": (self.state.design, self.state.band) != outcome.wish and self.state.invalid is None}
        failure = outcome.failure
        if failure is None:
            values.update(overview=outcome.result)
            self._painted.clear()
        if self.state.invalid is None:
            values["problem"] = failure and Problem(failure.text, failure.key or self.state.touched, failure.kind)
        self.param.update(**values)

    def _take_held(self, outcome):
        """Publish the held design's overview if it is still held."""
        if outcome.failure is None and outcome.wish == (self.state.held, self.state.band):
            self.held = outcome.result

    def _take_held_limits(self, outcome):
        """Publish the held design's limits if it is still held."""
        if outcome.failure is None and self.held is not None and outcome.wish[0] == self.held.design:
            self.held_limits = outcome.result

    def _take_limits(self, outcome):
        """Publish the limits, or why there are none."""
        if outcome.failure is None:
            self.param.update(limits=outcome.result, limits_fault="")
        else:
            self.limits_fault = outcome.failure.text


def _shared_limits(publish):
    """Access to the process's worker for the limits."""
    shared = worker.shared()
    return worker.Updater(shared.limits, publish, shared.side)


def _shared_updater(publish, ready=None):
    """Access to the process's worker."""
    shared = worker.shared()
    return worker.Updater(shared.overview, publish, shared.executor, ready)


def visit(design, document=None, updater=None):
    """A new visitor's session, beginning with that design; it ends with the document's.

    Parameters
    ----------
    design : engine.design.Design
    document : bokeh.document.Document or None
    updater : callable or None
        As for `Session`.
    """
    session = Session(DesignState(design), document, updater)
    if document is not None:
        document.on_session_destroyed(lambda _: session.close())
    return session
