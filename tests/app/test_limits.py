"""The page of the limits on the server: what is drawn and said is what the engine says; it computes only when shown.

Expected values come from `engine` called here; where words are compared, they are the issue's own.
"""

import dataclasses
import re

import numpy as np
import pytest

import engine
from app.controls import JudgedBy
from app.figures.board import Board
from app.figures.columns import columns
from app.figures.limits import LimitsBoard
from app.figures.marks import runs
from app.figures.spine import Spine
from app.figures.verdict import FROM_MEMORY, verdict_html
from app.figures.window import log_ticks, nice_range, rounds
from app.pages.limits import LimitsPage
from app.pages.response import ResponsePage
from app.session import Session
from app.state import DEFAULT_BAND, DesignState
from engine.design import Design
from engine.limits import Judgement
from engine.statics import Finding

FLOAT32 = float(np.finfo(np.float32).eps)


def viewed(design, judgement=None):
    seen = engine.overview(design, DEFAULT_BAND)
    return engine.limits_view(design, seen.response, seen.excursion, seen.key_figures.mean_level_db,
                              judgement or Judgement())


@pytest.fixture(scope="module")
def bench():
    return viewed(Design())


@pytest.fixture
def board():
    return LimitsBoard(Board(), lambda volts, released: None)


def test_the_window_is_drawn_as_the_engine_has_it(board, bench):
    board.show(bench)
    stable, beyond = board._window.stable.data, board._window.beyond.data
    window = bench.window
    n = int(window.stable.sum())
    np.testing.assert_allclose(stable["bias_kv"], window.bias[:n] / 1e3, rtol=2 * FLOAT32)
    np.testing.assert_allclose(stable["height_mm"], window.centre_height[:n] * 1e3, rtol=2 * FLOAT32)
    assert beyond["bias_kv"][0] == stable["bias_kv"][-1] and len(beyond["bias_kv"]) == len(window.bias) - n + 1
    modes = board._window.mode_lines.data
    assert len(modes["ys"]) == 8
    np.testing.assert_allclose(10.0 ** modes["ys"][0][:40], window.frequency[:40, 0], rtol=1e-5)


def test_walls_stand_at_their_voltages_and_breakdown_is_a_band(board, bench):
    board.show(bench)
    drawn = board._window
    for line in drawn.walls["slack"]:
        assert line.visible and line.location == pytest.approx(bench.window.slack_voltage / 1e3)
    low, median, high = bench.breakdown_band
    for box in drawn.bands:
        assert (box.left, box.right) == pytest.approx((low / 1e3, high / 1e3)) and box.visible
    assert all(line.location == pytest.approx(median / 1e3) for line in drawn.medians)
    words = " ".join(drawn.wall_words.data["text"])
    assert all(word in words for word in ("slack 6.7 kV", "pull-in 7.77 kV", "breakdown", "5 – 95 % of films"))
    wide = viewed(Design(), Judgement(modulus=5.0))
    board.show(wide)
    assert drawn.bands[0].right / drawn.bands[0].left > 2 > 1.5 > high / low


def test_impedance_and_current_are_the_engines(board, bench):
    board.show(bench)
    drawn = board._electrical.data.data
    np.testing.assert_allclose(drawn["impedance"], abs(bench.response.impedance), rtol=2 * FLOAT32)
    np.testing.assert_allclose(drawn["phase"], np.degrees(np.angle(bench.response.impedance)), atol=1e-4)
    np.testing.assert_allclose(drawn["current"], abs(bench.response.current), rtol=2 * FLOAT32)
    assert not board._electrical.limit.visible and board._electrical.limit_words.data["text"] == []


def test_limit_and_charging_corner_are_marked(board):
    design = Design().with_values({"drive.current_limit": 2e-3, "electrodes.sheet_resistance": 3e5})
    view = viewed(design)
    board.show(view)
    drawn = board._electrical
    assert drawn.limit.visible and 10**drawn.limit.location == pytest.approx(2e-3)
    assert drawn.limit_words.data["text"] == ["limit 2 mA"]
    assert all(10**line.location == pytest.approx(view.response.charging_corner) for line in drawn.corners)
    board.show(viewed(Design().with_values({"drive.current_limit": 0.0})))
    assert not drawn.limit.visible and "no current" in drawn.limit_words.data["text"][0]


def test_swing_of_both_drive_laws(board, bench):
    board.show(bench)
    assert (board.now.data["low_kv"][0], board.now.data["high_kv"][0]) == pytest.approx((1.65, 2.15))
    board.show(viewed(Design().with_values({"drive.law": "square-root"})))
    low, high = board.now.data["low_kv"][0], board.now.data["high_kv"][0]
    assert low**2 == pytest.approx(1.9**2 - 2 * 1.9 * 0.25) and high**2 == pytest.approx(1.9**2 + 2 * 1.9 * 0.25)


def test_the_verdict_says_margins_states_charge_power_and_cautions(bench):
    text = re.sub("<[^>]+>", " ", verdict_html(bench))
    for words in ("safety factor 1.2", "slack", "pull-in", "breakdown", "amplitude up to", "bias up to", "at rest",
                  "slow peak", "worst", "6.63 µC", "7.13 mJ", "within", "apparent", "dissipated", "regain charge",
                  "short-circuit", "Local rules and qualified people", "check the standard"):
        assert words in text, words
    beyond = dataclasses.replace(bench, charge=46e-6, beyond_limit=True)
    assert 'class="warn"' in verdict_html(beyond) and "above the limit of IEC 61010-1" in verdict_html(beyond)
    assert FROM_MEMORY in verdict_html(bench)


def test_texts_of_users_are_escaped(board, bench):
    finding = Finding("x", "<b>y</b>", "response")
    told = dataclasses.replace(bench, excursion=dataclasses.replace(bench.excursion, findings=(finding,)))
    assert "&lt;b&gt;y" in verdict_html(told)
    board.dim("<i>no</i>")
    assert "&lt;i&gt;" in board._places.notices["window"].text
    board.dim(None)
    assert not board._places.notices["window"].visible


@pytest.fixture
def page(at_once, clock):
    """Session, response page and limits page that compute where they are asked; how often limits were computed."""
    asked = []

    def limits(design, band, judgement):
        asked.append(design)
        return viewed(design, judgement)

    session = Session(DesignState(Design(), clock), updater=at_once(engine.overview), limits_updater=at_once(limits))
    response = ResponsePage(session)
    made = LimitsPage(session, response)
    session.start()
    return session, response, made, asked


def test_limits_are_computed_only_where_their_page_is_shown(page):
    session, response, made, asked = page
    session.state.groups["drive"].bias = 2.0
    assert asked == [] and made.board is None
    session.page = "limits"
    assert asked == [session.state.design]
    assert made.board.now.data["bias_kv"] == [2.0]
    assert not any(part.visible for part in response.own) and made.board.window.visible
    session.state.groups["drive"].bias = 2.1
    assert made.board.now.data["bias_kv"] == [2.1]
    session.page = "response"
    session.state.groups["drive"].bias = 2.2
    assert len(asked) == 2 and all(part.visible for part in response.own) and not made.board.window.visible


def test_the_bias_moved_in_the_picture_is_a_step_of_the_design(page):
    session, _, made, _ = page
    session.page = "limits"
    for count, (volts, released) in enumerate(((2003.0, False), (2187.0, False), (2204.4, True))):
        made.board.moved.data = {"volts": [volts], "released": [released], "count": [count]}
    assert session.state.design.drive.bias == 2200.0 and session.state.groups["drive"].bias == 2.2
    session.state.undo()
    assert session.state.design == Design() and not session.state.can_undo


def test_a_bias_without_rest_state_is_said_over_the_window(page):
    session, _, made, _ = page
    session.page = "limits"
    made.board.moved.data = {"volts": [12e3], "released": [True], "count": [1]}
    assert "pulls in at" in made.board._places.notices["window"].text and made.board.now.data["bias_kv"] == [1.9]
    session.state.undo()
    assert not made.board._places.notices["window"].visible


def test_the_judgement_has_controls_of_its_own(page):
    session, response, made, _ = page
    assert not any(isinstance(control, JudgedBy) for control in response.controls.view)
    session.page = "limits"
    control = response.controls.view[0]
    assert [spec["name"] for spec in control.fields] == ["safety", "modulus", "reference_area"]
    control.take({"name": "safety", "n": 1, "text": "2", "released": True})
    assert session.state.judgement.safety == 2.0 and "safety factor 2" in made.board.now.data["html"][0]
    assert not session.state.dirty and not session.state.can_undo
    control.take({"name": "safety", "n": 2, "text": "0.5", "released": True})
    assert "allowed is 1 to 5" in control.shown["safety"]["message"] and session.state.judgement.safety == 2.0


def test_a_hazardous_bias_carries_one_calm_line(page):
    session, response, *_ = page
    drive = response.controls.groups["drive"]
    assert "dangerous to touch" in drive.shown["bias"]["caution"]
    session.state.groups["drive"].bias = 0.06
    assert drive.shown["bias"]["caution"] == ""


def test_the_level_plot_marks_where_the_linear_result_cannot_hold_and_what_the_current_allows():
    inks = Board().inks
    spine = Spine(inks)
    calm = engine.overview(Design(), DEFAULT_BAND)
    spine.show(calm, columns(calm))
    assert len(spine.marks.bars.data["x0"]) == 0 and len(spine.marks.limited.data["x"]) == 0
    wild = engine.overview(Design().with_values({"drive.amplitude": 1400.0, "drive.current_limit": 2e-3}), DEFAULT_BAND)
    spine.show(wild, columns(wild))
    left, right = (10 ** np.asarray(spine.marks.bars.data[name]) for name in ("x0", "x1"))
    bad = wild.response.frequency[~wild.excursion.linear]
    assert len(bad) and all(np.any((left <= f) & (f <= right)) for f in bad)
    good = wild.response.frequency[wild.excursion.linear]
    assert not any(np.any((left < f) & (f < right)) for f in good)
    assert "linear result cannot hold" in spine.marks.bar_words.data["text"][0]
    drawn = np.asarray(spine.marks.limited.data["level_db"])
    limited = wild.response.limited_level_db < wild.response.level_db - 0.1
    np.testing.assert_allclose(drawn[limited], wild.response.limited_level_db[limited], rtol=2 * FLOAT32)
    assert np.isnan(drawn[~limited]).all() and "current limit" in spine.marks.limited_words.data["text"][0]


def test_runs_and_axes():
    """By hand."""
    start, end = runs(np.array([0.0, 1, 2, 3, 4]), np.array([True, False, True, True, False]))
    np.testing.assert_allclose(start, [0, 1.5])
    np.testing.assert_allclose(end, [0.5, 3.5])
    np.testing.assert_allclose(rounds(0, 8.02, 6), [0, 2, 4, 6, 8])
    assert list(log_ticks(45, 1200)) == [50, 100, 200, 500, 1000]
    low, high = nice_range(11.0, 18.0)
    assert low < 11 and high > 18 and nice_range(1.0, 8.0)[0] == 0.0


def test_the_held_design_is_grey_in_every_picture_and_goes(board, bench):
    other = viewed(Design().with_values({"film.prestretch": 1.4}))
    board.show(bench)
    board.hold(other)
    n = int(other.window.stable.sum())
    np.testing.assert_allclose(board._window.held.data["bias_kv"], other.window.bias[:n] / 1e3, rtol=2 * FLOAT32)
    np.testing.assert_allclose(board._window.held.data["height_mm"], other.window.centre_height[:n] * 1e3, rtol=2 * FLOAT32)
    assert len(board._window.held_modes.data["ys"]) == other.window.frequency.shape[1]
    np.testing.assert_allclose(board._electrical.held.data["current"], np.abs(other.response.current), rtol=2 * FLOAT32)
    np.testing.assert_allclose(board._electrical.data.data["current"], np.abs(bench.response.current), rtol=2 * FLOAT32)
    board.hold(None)
    assert all(len(source.data[column]) == 0 for source, column in (
        (board._window.held, "bias_kv"), (board._window.held_modes, "xs"), (board._electrical.held, "x")))


def test_hold_reaches_the_page_of_the_limits(page):
    session, _, made, _ = page
    session.page = "limits"
    session.hold()
    assert session.held_limits is not None and len(made.board._window.held.data["bias_kv"]) > 10
    session.hold()
    assert session.held_limits is None and len(made.board._window.held.data["bias_kv"]) == 0


def test_what_no_other_page_shows_is_sent_when_the_first_is_back(page):
    session, response, _, _ = page
    sent = response.board._sent
    before = sent["motion"].data
    session.page = "limits"
    session.state.groups["drive"].bias = 2.0
    assert sent["motion"].data is before and len(sent["level"].data["frequency"]) == len(session.overview.response.frequency)
    session.page = "response"
    expected = columns(session.overview)
    np.testing.assert_array_equal(sent["motion"].data["re"], expected.motion["re"])
    np.testing.assert_array_equal(response.board._spine.share_source.data["image"][0], expected.share["image"][0])
