"""The executor: one for the process, small; for each session the latest wish wins and stale ones are dropped."""

import asyncio
import functools
import logging
import sys
import threading
import time
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

from threadpoolctl import threadpool_limits

import engine
from engine.errors import InvalidDesign, NoRestState, NotConverged, Stopped

N_THREADS = 1            # for overviews: two at a time are each slower than one after the other
SWITCH_INTERVAL = 1e-3   # s a computing thread may keep the interpreter while the event loop waits for it
REMEMBERED = 24          # overviews kept for the whole process: undo, redo and a sample's first sight cost nothing
N_LONG = 1               # long computations at a time; the others wait
PROGRESS_EVERY = 0.2     # s between two words of progress
KINDS = {Stopped: "stopped", InvalidDesign: "invalid", NoRestState: "no rest state", NotConverged: "not converged"}

log = logging.getLogger(__name__)


@dataclass(frozen=True)
class Failure:
    """Why there is no result."""

    kind: str                # "invalid", "no rest state", "not converged", "stopped" or "unexpected"
    text: str
    key: str | None = None


@dataclass(frozen=True)
class Outcome:
    """What became of one wish: a result, or the failure that stands in its place."""

    wish: tuple
    result: object = None
    failure: Failure | None = None


class Worker:
    """Threads that compute for every session of the process, and what they remember."""

    def __init__(self, n_threads=N_THREADS):
        pin_blas()
        sys.setswitchinterval(SWITCH_INTERVAL)
        self.executor = ThreadPoolExecutor(n_threads, thread_name_prefix="compute")
        self.side = ThreadPoolExecutor(1, thread_name_prefix="side")      # what other pages ask beside the overviews
        self.long = ThreadPoolExecutor(N_LONG, thread_name_prefix="long")
        self.overview = functools.lru_cache(maxsize=REMEMBERED)(_overview)
        self.limits = functools.lru_cache(maxsize=REMEMBERED)(self._limits)
        self.distortion = functools.lru_cache(maxsize=REMEMBERED)(_distortion)
        self.series = functools.lru_cache(maxsize=REMEMBERED)(_series)
        self.thd_map = _thd_map

    def _limits(self, design, band, judgement):
        """`engine.limits_view` of an overview, which is computed or remembered."""
        seen = self.overview(design, band)
        return engine.limits_view(design, seen.response, seen.excursion, seen.key_figures.mean_level_db, judgement)


class Job:
    """A long computation of one session, in the background: at most one at a time, with progress, and stopped at will.

    Parameters
    ----------
    tell : callable
        Called on the event loop's thread with a `Stage`: now and then while it works, and once at its end.
    executor : concurrent.futures.Executor
        Threads for long work alone: they never keep a slider waiting.
    """

    def __init__(self, tell, executor):
        self._tell, self._executor, self._stop = tell, executor, None

    @property
    def busy(self):
        """Whether something is under way."""
        return self._stop is not None

    def start(self, compute, *wish):
        """Begin ``compute(*wish, progress, stop)``; what is under way is stopped and never heard of again.

        progress takes the part done, 0 to 1; stop tells whether to end, upon which compute raises `Stopped`, or returns what
        it has.
        """
        self.stop(silently=True)
        loop, stop, told = asyncio.get_running_loop(), threading.Event(), [0.0]
        self._stop = stop

        def here(stage):
            if self._stop is stop:
                if stage.outcome is not None:
                    self._stop = None
                self._tell(stage)

        def progress(part):
            now = time.monotonic()
            if now - told[0] > PROGRESS_EVERY:
                told[0] = now
                loop.call_soon_threadsafe(here, Stage(float(part), now - begun))

        def work():
            outcome = attempt(lambda *given: compute(*given, progress, stop.is_set), wish)
            loop.call_soon_threadsafe(here, Stage(1.0, time.monotonic() - begun, outcome))

        begun = time.monotonic()
        self._executor.submit(work)

    def stop(self, silently=False):
        """End what is under way; it is told as stopped unless ``silently``."""
        if self._stop is not None:
            self._stop.set()
            if silently:
                self._stop = None


@dataclass(frozen=True)
class Stage:
    """How far a job is: the part done, the seconds so far, and at its end the `Outcome`."""

    part: float
    seconds: float
    outcome: Outcome | None = None

    @property
    def seconds_left(self):
        """Seconds still to go at the pace so far; None while nothing can be said."""
        return self.seconds*(1 - self.part)/self.part if self.part > 0.02 else None


class Updater:
    """One session's access to the worker.

    Parameters
    ----------
    compute : callable
        Runs in the executor with the wish's items as arguments.
    publish : callable
        Called with an `Outcome` on the event loop's thread, once for every computation.
    executor : concurrent.futures.Executor
    ready : callable or None
        Coroutine function awaited before each publication: when the last one has been painted. None: always ready.
    """

    def __init__(self, compute, publish, executor, ready=None):
        self._compute, self._publish, self._executor, self._ready = compute, publish, executor, ready
        self._wanted = None
        self._task = None
        self._closed = False

    @property
    def busy(self):
        """Whether something is being computed or waits to be."""
        return self._task is not None and not self._task.done()

    def want(self, *wish):
        """Ask for a computation; an earlier wish that has not begun is dropped."""
        if self._closed:
            return
        if self.busy:
            self._wanted = wish
        else:
            loop = asyncio.get_running_loop()
            self._task = loop.create_task(self._work(self._begin(loop, wish)))

    def close(self):
        """End: publish nothing more."""
        self._closed = True
        self._wanted = None
        if self._task is not None:
            self._task.cancel()

    def _begin(self, loop, wish):
        """Start a computation at once, not when the event loop next comes round."""
        return loop.run_in_executor(self._executor, attempt, self._compute, wish)

    async def _work(self, future):
        """Publish what is being computed, go on with the newest wish, until there is none."""
        loop = asyncio.get_running_loop()
        while True:
            outcome = await future
            if self._ready is not None:
                await self._ready()
            self._publish(outcome)
            if self._wanted is None:
                return
            newest, self._wanted = self._wanted, None
            future = self._begin(loop, newest)


def attempt(compute, wish):
    """The outcome of one computation; an unforeseen error is logged and becomes one too: the page lives on."""
    try:
        return Outcome(wish, compute(*wish))
    except Exception as error:
        failure = describe(error)
        if failure.kind == "unexpected":
            log.exception("computation failed for %s", wish)
        return Outcome(wish, failure=failure)


def describe(error):
    """The failure an exception of a computation is."""
    for exception, kind in KINDS.items():
        if isinstance(error, exception):
            return Failure(kind, str(error), getattr(error, "key", None))
    return Failure("unexpected", "This design could not be computed, for a reason of the program's own "
                   f"({type(error).__name__}). Undo the last change; the terminal has the details.")


def pin_blas():
    """One BLAS thread for the process: two cores serve two visitors, and small matrices gain nothing from more."""
    threadpool_limits(limits=1)


_lock = threading.Lock()
_worker = None


def shared():
    """The process's worker, made at its first use."""
    global _worker
    with _lock:
        if _worker is None:
            _worker = Worker()
        return _worker


def _overview(design, band):
    """`engine.overview`, looked up when called."""
    return engine.overview(design, band)


def _distortion(design, band, count):
    """`engine.distortion_view`, looked up when called."""
    return engine.distortion_view(design, band, count)


def _series(design, frequency):
    """`engine.amplitude_series`, looked up when called."""
    return engine.amplitude_series(design, frequency)


def _thd_map(design, band, progress, stop):
    """`engine.distortion_map`, looked up when called."""
    return engine.distortion_map(design, band, progress=progress, stop=stop)
