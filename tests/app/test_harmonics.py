"""The page of distortion on the server: what is drawn is what the engine says; coarse at once, fine at rest, a map on demand.

Expected values come from `engine` called here.
"""

import asyncio
import threading
from concurrent.futures import ThreadPoolExecutor
from types import SimpleNamespace

import numpy as np
import pytest

import engine
from app import harmonics as asked
from app.figures.board import Board
from app.figures.distortion import DistortionBoard
from app.figures.harmonics import MOST_BARS, PERCENT, curve_columns, lines_of, part_columns
from app.harmonics import COARSE, FINE, Harmonics
from app.pages.distortion import DistortionPage
from app.pages.response import ResponsePage
from app.session import Session
from app.state import DEFAULT_BAND, DesignState
from app.worker import Job, Stage, Updater
from engine.design import Design

FLOAT32 = float(np.finfo(np.float32).eps)


@pytest.fixture(scope="module")
def bench():
    return engine.distortion_view(Design(), DEFAULT_BAND, 12)


@pytest.fixture
def board():
    return DistortionBoard(Board())


def test_the_curves_are_the_engines(board, bench):
    board.show(bench)
    for curves in board._curves:
        found, drawn = bench.found[curves.law], curves.data.data
        np.testing.assert_allclose(drawn["frequency"], found.frequency, rtol=2*FLOAT32)
        total = np.sqrt((np.abs(found.harmonic_pressure)**2).sum(axis=1))
        known = np.isfinite(drawn["h2"])
        assert known[:8].all()
        second = np.abs(found.harmonic_pressure[known, 1])/total[known]
        np.testing.assert_allclose(10.0**drawn["h2"][known]/100, second, rtol=1e-5)
        np.testing.assert_allclose(10.0**drawn["thd"][known]/100, found.thd[known], rtol=1e-5)


def test_harmonics_that_were_left_out_have_no_value(bench):
    """Twice 5 kHz lies beyond the modes of a page up to 5 kHz: the engine's finding says so, the curve ends."""
    found = bench.found["sine"]
    assert any(c.name == "resolution" for c in found.conditions[-1])
    columns = curve_columns(found)
    assert np.isnan(columns["h2"][-1]) and np.isnan(columns["thd"][-1]) and np.isfinite(columns["thd"][0])


def test_the_cycle_can_be_put_together_from_what_is_sent(bench):
    found = bench.found["square-root"]
    parts = {name: column.reshape(-1, MOST_BARS + 1) for name, column in part_columns(found).items()}
    np.testing.assert_allclose(parts["p_re"][:, 1:] + 1j*parts["p_im"][:, 1:], found.harmonic_pressure, rtol=1e-5, atol=1e-12)
    assert (parts["p_re"][:, 0] == 0).all()
    phase = np.linspace(0, 2*np.pi, 50)
    order = np.arange(MOST_BARS + 1)
    wave = ((parts["v_re"][3] + 1j*parts["v_im"][3]) @ np.exp(1j*np.outer(order, phase))).real
    drive = Design().drive
    law = np.sqrt(drive.bias**2 + 2*drive.bias*drive.amplitude*np.cos(phase)) - drive.bias     # the square-root law itself
    np.testing.assert_allclose(wave, law, atol=1e-3*drive.amplitude)


def test_a_law_that_cannot_be_driven_says_why_and_draws_nothing(board):
    design = Design().with_values({"drive.bias": 600.0, "drive.amplitude": 500.0})
    board.show(engine.distortion_view(design, DEFAULT_BAND, 4))
    sine, root = board._curves
    assert len(sine.data.data["x"]) == 4 and len(root.data.data["x"]) == 0
    assert "half" in root.fault.data["text"][0] and len(sine.fault.data["text"]) == 0


def test_limits_within_the_cycle_are_marked(board):
    view = engine.distortion_view(Design().with_values({"film.breakdown_field": 36e6}), (40.0, 1e3), 6)
    board.show(view)
    sine = board._curves[0]
    names = {c.name for told in view.found["sine"].conditions for c in told}
    assert "breakdown" in names and len(sine.bars.data["x0"]) > 0 and "breakdown" in sine.bar_words.data["text"][0]


def test_the_series_and_the_point_of_the_design(board):
    design = Design()
    series = engine.amplitude_series(design, 100.0, 4)
    board.show(engine.distortion_view(design, DEFAULT_BAND, 3))
    board.show_series(series, design)
    drawn = board._series.lines["sine"].data
    np.testing.assert_allclose(10.0**drawn["thd"]/100, series.thd["sine"], rtol=1e-5)
    assert board._series.exact.data["law"] == ["sine", "square-root"] and board.now.data["exact"] == [True]
    alone = engine.distortion(design, [100.0])
    np.testing.assert_allclose(board._series.exact_parts.data["p_re"][1:MOST_BARS + 1], alone.harmonic_pressure[0].real,
                               rtol=1e-5)
    board.show_series(None, design)
    assert len(board._series.exact_parts.data["p_re"]) == 0


def test_the_map_and_its_words(board):
    design = Design()
    found = engine.distortion_map(design, (40.0, 1e3), 5, 3)
    board.show_map(found, design, (40.0, 1e3))
    image = board._map.data.data["image"][0]
    assert image.shape == (3, 5)
    np.testing.assert_allclose(10.0**image/100, np.maximum(found.thd, 1e-6), rtol=1e-5)
    board.show_map(None, design, (40.0, 1e3))
    assert len(board._map.data.data["image"]) == 0 and "on demand" in board._map.words.data["text"][0]
    board.say_map(Stage(0.25, 2.0), False)
    assert "25 %, 6 s left" in board.words.data["map"][0] and ">stop<" in board.words.data["map"][0]
    board.say_map(None, False, "<b>no</b>")
    assert "&lt;b&gt;" in board.words.data["map"][0] and ">compute<" in board.words.data["map"][0]


def test_words_are_cut_into_lines():
    assert lines_of("one two three", 7) == ["one two", "three"] and lines_of("") == []
    assert PERCENT == (-2.0, 2.0)


class Fakes:
    """Computations at a gate: what was asked, in order."""

    def __init__(self, pool):
        self.asked, self.pool, self.gate = [], pool, threading.Event()
        self.gate.set()

    def curves(self, publish):
        def note(design, band, count):
            return self._note(SimpleNamespace(design=design, band=band, count=count))
        return Updater(note, publish, self.pool)

    held = curves

    def series(self, publish):
        return Updater(lambda design, frequency: self._note(SimpleNamespace(frequency=frequency)), publish, self.pool)

    def job(self, tell):
        return Job(tell, self.pool)

    def _note(self, wish):
        self.asked.append(wish)
        return wish


def run_with_harmonics(steps, monkeypatch):
    """Run ``steps(session, harmonics, fakes, until)`` on an event loop, with the rest shortened to nothing."""
    monkeypatch.setattr(asked, "REST", 0.0)

    async def until(found):
        while not found():
            await asyncio.sleep(0)

    async def whole():
        with ThreadPoolExecutor(1) as pool:
            fakes = Fakes(pool)

            def overview(publish, ready=None):
                return Updater(lambda design, band: SimpleNamespace(design=design, band=band), publish, pool)

            session = Session(DesignState(Design()), updater=overview, limits_updater=overview)
            harmonics = Harmonics(session, fakes)
            session.start()
            await until(lambda: session.overview is not None)
            await steps(session, harmonics, fakes, until)
            session.close()
    asyncio.run(asyncio.wait_for(whole(), 20))


def test_nothing_is_asked_until_the_page_is_shown_then_coarse_then_fine(monkeypatch):
    async def steps(session, harmonics, fakes, until):
        assert fakes.asked == []
        session.page = "distortion"
        await until(lambda: harmonics.view is not None and harmonics.view.count == FINE)
        assert [wish.count for wish in fakes.asked] == [COARSE, FINE]
        session.state.change({"film.prestretch": 1.3})
        await until(lambda: harmonics.view.design.film.prestretch == 1.3 and harmonics.view.count == FINE)
        assert [wish.count for wish in fakes.asked] == [COARSE, FINE]*2
    run_with_harmonics(steps, monkeypatch)


def test_the_cursors_frequency_is_asked_where_it_rests(monkeypatch):
    async def steps(session, harmonics, fakes, until):
        harmonics.settled(123.0)
        assert harmonics.series is None
        session.page = "distortion"
        await until(lambda: harmonics.series is not None)
        assert harmonics.series.frequency == 123.0
        harmonics.settled(456.0)
        await until(lambda: harmonics.series.frequency == 456.0)
    run_with_harmonics(steps, monkeypatch)


def test_a_map_is_computed_stopped_and_becomes_stale(monkeypatch):
    gate = threading.Event()

    def slow_map(design, band, progress, stop):
        gate.wait()
        if stop():
            raise engine.Stopped("stopped")
        return SimpleNamespace(design=design)

    monkeypatch.setattr(asked.worker, "shared", lambda: SimpleNamespace(thd_map=slow_map))

    async def steps(session, harmonics, fakes, until):
        session.page = "distortion"
        await until(lambda: harmonics.view is not None and harmonics.view.count == FINE)
        harmonics.toggle_map()
        assert harmonics.stage is not None
        harmonics.toggle_map()
        gate.set()
        await until(lambda: harmonics.stage is None)
        assert harmonics.map is None and harmonics.map_fault == ""
        harmonics.toggle_map()
        await until(lambda: harmonics.map is not None)
        assert harmonics.map.design == Design() and not harmonics.is_stale
        session.state.change({"film.prestretch": 1.3})
        await until(lambda: session.overview.design.film.prestretch == 1.3)
        assert harmonics.is_stale
    run_with_harmonics(steps, monkeypatch)


def test_the_page_is_built_when_first_shown(monkeypatch):
    monkeypatch.setattr(DistortionBoard, "show", lambda self, view: shown.append(view))
    shown, widened = [], []

    async def steps(session, harmonics, fakes, until):
        response = ResponsePage.__new__(ResponsePage)
        response.board, response.add, response.view = Board(), lambda part, styled=False: None, []
        response.widen = widened.append
        page = DistortionPage(session, response, harmonics)
        assert page.board is None
        session.page = "distortion"
        assert page.board is not None and page.board.plots.visible and response.view == [page.listen]
        await until(lambda: shown and shown[-1].count == FINE)
        session.page = "response"
        assert not page.board.plots.visible and not page.listen.visible and widened == [True, False]
    run_with_harmonics(steps, monkeypatch)
