"""The session publishes results, keeps the last good one, and says why; the worker drops stale wishes.

No outside reference: the behaviour is the issue's and screen.md's own words. The computation is a stand-in except where
the engine's own exception is compared with the words on the page.
"""

import asyncio
import threading
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import pytest
from threadpoolctl import threadpool_info

import engine
from app import worker
from app.session import Session, visit
from app.state import DesignState
from engine.design import Design
from engine.errors import InvalidDesign, NoRestState, NotConverged


@dataclass(frozen=True)
class Overview:
    """A stand-in for engine.summary.Overview."""

    design: Design
    band: tuple


def slack_above(limit):
    """A computation without a rest state above some prestretch."""
    def compute(design, band):
        if design.film.prestretch > limit:
            raise NoRestState(f"no rest state at {design.film.prestretch:.2f}", "slack")
        return Overview(design, band)
    return compute


@pytest.fixture
def session(design, at_once):
    session = Session(DesignState(design), updater=at_once(slack_above(2.0)))
    session.start()
    return session


def test_every_change_is_published(session):
    session.state.groups["film"].prestretch = 1.4
    assert session.overview.design == session.state.design
    session.state.set_band((50.0, 1e3))
    assert session.overview.band == (50.0, 1e3)
    assert not session.busy
    assert session.problem is None


def test_no_rest_state_keeps_the_last_good_result_and_names_the_control(session):
    good = session.overview
    session.state.groups["film"].prestretch = 2.5
    assert session.overview is good
    assert session.problem.key == "film.prestretch"
    assert session.problem.text == "no rest state at 2.50"
    session.state.undo()
    assert session.problem is None
    assert session.overview.design == session.state.design


def test_an_invalid_value_is_a_problem_without_a_computation(session):
    good = session.overview
    session.state.groups["geometry"].centre_radius = 60.0
    assert session.overview is good
    assert (session.problem.key, session.problem.kind) == ("geometry.centre_radius", "invalid")
    session.state.groups["geometry"].centre_radius = 12.0
    assert session.problem is None
    assert not session.busy


@pytest.mark.parametrize(("error", "kind"), [
    (NotConverged("ran out of steps"), "not converged"), (InvalidDesign("cannot be"), "invalid"),
    (ZeroDivisionError("inside"), "unexpected")])
def test_every_exception_becomes_words(design, at_once, caplog, error, kind):
    def compute(design, band):
        raise error
    session = Session(DesignState(design), updater=at_once(compute))
    session.start()
    assert session.problem.kind == kind
    assert not session.busy
    assert ("inside" in caplog.text) == (kind == "unexpected")
    assert "inside" not in session.problem.text


def test_hold_and_let_go(session, design):
    session.hold()
    assert session.held.design == design
    session.state.groups["film"].prestretch = 1.4
    assert session.held.design == design
    session.state.set_band((50.0, 1e3))
    assert session.held == Overview(design, (50.0, 1e3))
    session.hold()
    assert session.held is None


def test_nothing_is_published_after_the_end(session, design):
    session.close()
    session.state.groups["film"].prestretch = 1.4
    assert session.overview.design == design


def test_a_visit_ends_with_its_document(design, at_once):
    class Document:
        ends, ticks = (), ()

        def on_session_destroyed(self, *callbacks):
            self.ends = callbacks

        def add_next_tick_callback(self, callback):
            self.ticks = (*self.ticks, callback)

    document = Document()
    session = visit(design, document, at_once(slack_above(2.0)))
    session.start()
    assert document.ticks == ()
    session.connected()
    assert len(document.ticks) == 1
    assert session.overview is None
    document.ends[0](None)
    document.ticks[0]()
    assert session.overview is None


def test_two_visitors_share_nothing(design, at_once):
    one, two = (Session(DesignState(design), updater=at_once(slack_above(2.0))) for _ in range(2))
    one.state.groups["film"].prestretch = 1.4
    one.state.groups["film"].law = "gent"
    assert two.state.design == design
    assert two.state.groups["film"].law == "neo-hookean"
    assert not two.state.can_undo


def gated():
    """A computation that begins at once and ends when its gate opens, and the record of its designs."""
    gate, began, seen = threading.Semaphore(0), threading.Semaphore(0), []

    def compute(wish):
        seen.append(wish)
        began.release()
        assert gate.acquire(timeout=20)
        return wish
    return compute, gate, began, seen


def test_the_latest_wish_wins_and_stale_ones_are_dropped():
    compute, gate, began, seen = gated()
    published = []

    async def drag():
        with ThreadPoolExecutor(1) as executor:
            updater = worker.Updater(compute, published.append, executor)
            updater.want(0)
            await asyncio.get_running_loop().run_in_executor(None, began.acquire)
            for wish in range(1, 60):
                updater.want(wish)
            assert updater.busy
            gate.release(2)
            while updater.busy:
                await asyncio.wait([updater._task])
    asyncio.run(drag())
    assert seen == [0, 59]
    assert [outcome.result for outcome in published] == [0, 59]


def test_a_closed_updater_publishes_nothing():
    compute, gate, began, _ = gated()
    published = []

    async def leave():
        with ThreadPoolExecutor(1) as executor:
            updater = worker.Updater(compute, published.append, executor)
            updater.want(0)
            await asyncio.get_running_loop().run_in_executor(None, began.acquire)
            updater.close()
            updater.want(1)
            gate.release(2)
            await asyncio.wait([updater._task])
    asyncio.run(leave())
    assert published == []


def test_results_wait_for_the_browser_to_paint():
    """While one is being painted the next is computed but not sent; meanwhile the latest wish still wins."""
    published, painted = [], []

    async def drag():
        gate = asyncio.Event()

        async def ready():
            painted.append(len(published))
            await gate.wait()

        with ThreadPoolExecutor(1) as executor:
            updater = worker.Updater(lambda wish: wish, published.append, executor, ready)
            updater.want(0)
            while not painted:
                await asyncio.wait([updater._task], timeout=0.01)
            updater.want(1)
            updater.want(2)
            assert published == []
            gate.set()
            await updater._task
    asyncio.run(drag())
    assert [outcome.result for outcome in published] == [0, 2]
    assert painted == [0, 1]


def test_one_blas_thread_and_few_of_our_own():
    shared = worker.shared()
    shared.executor.submit(engine.Design).result()
    assert all(library["num_threads"] == 1 for library in threadpool_info() if library["user_api"] == "blas")
    assert worker.shared() is shared
    assert shared.executor._max_workers <= 2


def test_the_words_of_the_engine_reach_the_page(design, at_once):
    """A film driven far beyond its bias limit: the exception's own words, at the control that was moved."""
    session = Session(DesignState(design), updater=at_once(engine.overview))
    session.start()
    good = session.overview
    session.state.groups["drive"].bias = 15.0
    with pytest.raises(NoRestState) as refusal:
        engine.overview(session.state.design, session.state.band)
    assert session.problem.text == str(refusal.value)
    assert session.problem.key == "drive.bias"
    assert session.overview is good
