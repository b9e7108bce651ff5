"""The figures' server side: colours and numbers, columns against the engine's results, words, hold and dim.

Expected values come from the engine's results, the definitions of the share map, and the standards named at each check.
"""

import itertools
import re
from dataclasses import replace

import numpy as np
import pytest
from bokeh.models import ColumnDataSource, Plot

import engine
from app import theme
from app.figures import spine
from app.figures.board import Board, first_cursor
from app.figures.columns import FADE_DB, MAP_COLUMNS, MOST_ROWS, columns
from app.figures.strip import changes_html, foot_html, strip_items
from engine.design import Design

FLOAT32 = float(np.finfo(np.float32).eps)
INKS = ("pumping", "transverse", "in_plane")


@pytest.fixture(scope="module")
def bench():
    return engine.overview(Design(note="Invented data."))


@pytest.fixture(scope="module")
def tauter():
    return engine.overview(Design().with_values({"film.prestretch": 1.4}))


# ---- colours

def luminance(colour):
    """Relative luminance. Source: WCAG 2.2, definition of relative luminance."""
    srgb = np.array([int(colour[i:i + 2], 16) for i in (1, 3, 5)]) / 255
    linear = np.where(srgb <= 0.04045, srgb / 12.92, ((srgb + 0.055) / 1.055)**2.4)
    return linear @ [0.2126, 0.7152, 0.0722]


def contrast(a, b):
    """Contrast ratio. Source: WCAG 2.2, definition of contrast ratio."""
    low, high = sorted((luminance(a), luminance(b)))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("dark", [False, True])
def test_words_and_lines_stand_out_from_the_page(dark):
    """At least 4.5 for text and 3 for lines. Source: WCAG 2.2, success criteria 1.4.3 and 1.4.11."""
    colours = theme.palette(dark)
    for role in ("ink", "muted", "accent", "warn", "adds", "cancels", "transverse", "pumping"):
        assert contrast(getattr(colours, role), colours.page) >= 4.5, role
    for role in INKS:
        assert contrast(getattr(colours, role), colours.page) >= 3, role


# Severe red and green blindness on linear RGB. Source: Machado, Oliveira, Fernandes (2009), table of matrices for
# severity 1.0; from memory, rows add up to 1.
BLIND = {"none": np.eye(3),
         "protan": np.array([[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216],
                             [-0.003882, -0.048116, 1.051998]]),
         "deutan": np.array([[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413],
                             [-0.011820, 0.042940, 0.968881]])}


def lab(colour, blindness):
    """CIELAB, D65. Source: CIE 15 and IEC 61966-2-1 (sRGB)."""
    srgb = np.array([int(colour[i:i + 2], 16) for i in (1, 3, 5)]) / 255
    linear = np.clip(BLIND[blindness] @ np.where(srgb <= 0.04045, srgb / 12.92, ((srgb + 0.055) / 1.055)**2.4), 0, 1)
    xyz = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]) @ linear
    ratio = xyz / [0.9505, 1.0, 1.089]
    f = np.where(ratio > (6 / 29)**3, np.cbrt(ratio), ratio / (3 * (6 / 29)**2) + 4 / 29)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("blindness", BLIND)
@pytest.mark.parametrize("dark", [False, True])
def test_kinds_accent_and_the_pair_differ_for_every_eye(dark, blindness):
    """A difference of 10 in CIELAB is seen at a glance (common practice); the pair shares no colour with the kinds."""
    colours = theme.palette(dark)
    for a, b in itertools.combinations((*INKS, "accent", "adds", "cancels"), 2):
        assert np.linalg.norm(lab(getattr(colours, a), blindness) - lab(getattr(colours, b), blindness)) > 10, (a, b)


@pytest.mark.parametrize("dark", [False, True])
def test_the_diverging_scale_runs_evenly_between_its_three_colours(dark):
    colours = theme.palette(dark)
    scale = theme.diverging(colours)
    assert (scale[0], scale[len(scale) // 2], scale[-1]) == (colours.cancels, colours.page, colours.adds)
    light = np.array([luminance(c) for c in scale])
    half = len(scale) // 2
    rising, falling = np.diff(light[:half + 1]), np.diff(light[half:])
    sign = -1 if dark else 1
    assert np.all(sign * rising >= -1e-4) and np.all(sign * falling <= 1e-4)


# ---- numbers

@pytest.mark.parametrize("value, text", [(50, "50"), (100, "100"), (1000, "1k"), (1250, "1.25k"), (20000, "20k")])
def test_frequencies_on_an_axis(value, text):
    assert theme.tick(value) == text


@pytest.mark.parametrize("value, text", [
    (0.69e-3, "690 µm"), (1.234e-3, "1.23 mm"), (0.9996e-3, "1 mm"), (0.0, "0 m"), (-2e-6, "−2 µm"), (3e-12, "0.003 nm")])
def test_quantities_take_their_prefix(value, text):
    assert theme.quantity(value, "m") == text


def test_shares_levels_and_file_names():
    assert [theme.percent(v) for v in (0.547, 0.0312, 0.0004, 0.0, 1.2)] == ["55 %", "3.1 %", "under 0.1 %", "0 %", "120 %"]
    assert [theme.decibel(v) for v in (54.4, -3.2, -400.0)] == ["54 dB", "−3 dB", "silent"]
    assert theme.hertz(999.9) == "1000 Hz" and theme.hertz(12345.0) == "12.3 kHz"
    assert theme.file_stem("Bench back, <b>“garden”</b>/../path") == "bench-back-b-garden-b-path"
    assert theme.file_stem("///") == "design"


# ---- columns

def test_the_level_is_the_engines(bench):
    sent = columns(bench).level
    assert np.array_equal(sent["frequency"], bench.response.frequency.astype(np.float32))
    assert np.array_equal(sent["level_db"], bench.response.level_db.astype(np.float32))
    assert {column.dtype for column in sent.values()} == {np.dtype(np.float32)}


def test_rows_are_the_modes_that_matter_most_and_add_up_to_the_pressure(bench):
    made, response = columns(bench), bench.response
    n_modes, n_rows = len(response.modes.frequency), made.still["n_rows"][0]
    shown = made.gallery["mode"]
    assert len(shown) == MOST_ROWS and np.all(np.diff(made.gallery["frequency"]) > 0)
    left_out = np.setdiff1d(np.arange(n_modes), shown)
    assert bench.energy_share[shown].min() >= bench.energy_share[left_out].max()
    rows = (made.rows["re"] + 1j * made.rows["im"]).reshape(len(response.frequency), n_rows)
    assert n_rows == MOST_ROWS + 2
    assert np.allclose(rows[:, :MOST_ROWS], response.contribution[:, shown], rtol=2 * FLOAT32, atol=0)
    scale = np.abs(response.contribution).sum(axis=1)
    assert np.max(np.abs(rows.sum(axis=1) - response.pressure) / scale) < n_rows * FLOAT32


def test_few_modes_have_no_row_of_others():
    few = engine.overview(Design(), band=(20.0, 300.0))
    still = columns(few).still
    assert still["n_others"] == [0]
    assert still["n_rows"][0] == len(few.response.modes.frequency) + 1


def test_a_column_of_the_share_map_is_the_mean_over_its_width(bench):
    """Against a dense mean of the straight lines between the response's frequencies; columns sum to the survival."""
    made, response = columns(bench), bench.response
    x = np.log10(response.frequency)
    edges = np.linspace(*np.log10(bench.band), MAP_COLUMNS + 1)
    image = made.share["image"][0]
    shown = made.gallery["mode"]
    for column in (0, 137, 300, MAP_COLUMNS - 1):
        inside = x[(x > edges[column]) & (x < edges[column + 1])]
        dense = np.sort(np.concatenate([np.linspace(edges[column], edges[column + 1], 4001), inside]))
        width = dense[-1] - dense[0]
        for row in (0, 5, 20):
            wanted = np.trapezoid(np.interp(dense, x, response.signed_share[:, shown[row]]), dense) / width
            assert image[len(image) - 1 - row, column] == pytest.approx(wanted, abs=2e-6)
        wanted = np.trapezoid(np.interp(dense, x, response.survival), dense) / width
        assert image[:, column].sum() == pytest.approx(wanted, abs=5e-6)


def test_quiet_columns_are_veiled(bench):
    """25 dB below the band's mean level: the lowest octave of the bench back, not its peaks."""
    made, response = columns(bench), bench.response
    veil = made.veil["image"][0][0]
    edges = np.geomspace(*bench.band, MAP_COLUMNS + 1)
    centres = np.sqrt(edges[1:] * edges[:-1])
    level = np.interp(np.log(centres), np.log(response.frequency), response.level_db)
    mean = bench.key_figures.mean_level_db
    assert np.all(veil[level < mean - FADE_DB - 3] == 1) and np.all(veil[level > mean - FADE_DB + 3] == 0)
    assert 0 < veil.sum() < MAP_COLUMNS


def test_shapes_run_through_the_nodes(bench):
    made, modes, rest = columns(bench), bench.response.modes, bench.response.rest
    points = len(made.nodes["radius"])
    along = np.linspace(rest.reference_radius[0], rest.reference_radius[-1], points)
    axial = made.shapes["axial"].reshape(-1, points)[made.gallery["shape"]]
    for row in (0, 3, 10):
        mode = made.gallery["mode"][row]
        drawn = np.interp(rest.reference_radius, along, axial[row])
        assert np.max(np.abs(drawn - modes.axial[mode])) < 0.01
    assert made.nodes["radius"][[0, -1]] == pytest.approx(rest.radius[[0, -1]], rel=1e-6)


def test_modes_that_move_are_sent_even_if_they_are_not_heard(bench):
    made, response = columns(bench), bench.response
    sent = np.abs((made.motion["re"] + 1j * made.motion["im"]).reshape(len(response.frequency), -1)).sum(axis=1)
    everything = np.abs(response.displacement).sum(axis=1)
    assert np.min(sent / everything) > 0.9


# ---- axis and cursor

def test_the_axis_names_one_two_and_five():
    assert spine.frequency_ticks(30, 4000).tolist() == [50, 100, 200, 500, 1000, 2000]
    assert spine.frequency_ticks(20, 5000)[[0, -1]].tolist() == [20, 5000]


def test_the_level_axis_is_steady_and_never_squeezed():
    first = spine.steady_range(np.array([12.0, 55.0, 73.0]), (0, 80))
    assert first == (0, 80)
    assert spine.steady_range(np.array([14.0, 52.0, 78.0]), first) == first
    deep = spine.steady_range(np.array([-90.0, 40.0, 84.0]), first)
    assert deep == (10, 90)
    assert spine.steady_range(np.array([60.0, 62.0]), (0, 80))[1] - spine.steady_range(np.array([60.0, 62.0]), (0, 80))[0] >= 40
    assert spine.steady_range(np.full(3, -400.0), (0, 80)) == (0, 80)


def test_the_level_axis_says_distance_and_angle():
    listener = Design().with_values({"listener.distance": 0.5, "listener.angle": np.pi / 6}).listener
    assert spine.level_label(listener) == "Level at 500 mm, 30° off axis, dB re 20 µPa"
    assert spine.level_label(Design().listener) == "Level at 1 m, dB re 20 µPa"


def test_the_cursor_starts_on_the_highest_sure_peak(bench):
    response = bench.response
    f = first_cursor(bench)
    i = int(np.argmin(np.abs(response.frequency - f)))
    assert f < response.estimate_above < bench.band[1]
    assert response.level_db[i] >= response.level_db[[i - 1, i + 1]].max()
    assert response.level_db[i] == response.level_db[response.frequency < response.estimate_above].max()
    assert response.level_db.max() > response.level_db[i], "the sample should have a higher peak inside the estimate"


# ---- words

def overview_with(overview, response=None, **figures):
    """The same overview with other key figures."""
    changed = replace(overview, key_figures=replace(overview.key_figures, **figures))
    return replace(changed, response=replace(overview.response, **response)) if response else changed


@pytest.mark.parametrize("ratio, warn, words", [(0.55, False, "of breakdown"), (0.8, False, "of breakdown"),
                                                (0.81, True, "close"), (1.0, True, "breaks down"), (1.3, True, "breaks down")])
def test_the_strip_warns_of_breakdown(bench, ratio, warn, words):
    item = strip_items(overview_with(bench, breakdown_ratio=ratio))[0]
    assert item.warn == warn and words in item.label and item.value == f"{100 * ratio:.0f} %"


def test_the_strip_says_taut_or_slack_and_missing_break_up(bench):
    items = strip_items(bench)
    assert items[1].value == "taut" and not items[1].warn
    slack = strip_items(overview_with(bench, least_stress=-1200.0, first_break_up_frequency=None))
    assert slack[1].value == "slack" and slack[1].warn and "−1.2 kPa" in slack[1].label
    assert slack[4].value == "none"
    assert items[5].label == "mean, 20 Hz – 5 kHz"


def test_the_foot_says_what_holds_and_warns(bench):
    foot = foot_html(bench)
    for words in ("mounted in a wall", "linear", "peak", "estimate above", "invented data", "High voltage can kill"):
        assert words in foot
    assert "Loud" not in foot
    loud = overview_with(bench, {"level_db": bench.response.level_db + 30, "estimate_above": np.inf})
    assert "Loud" in foot_html(loud) and "estimate" not in foot_html(loud)


def test_the_table_shows_differences_of_its_own_numbers(bench, tauter):
    table = changes_html(bench, tauter)
    row = r'<th scope="row">([^<]*)</th><td>([^<]*)</td><td>([^<]*)</td><td>([^<]*)</td>'
    rows = re.findall(row, table)
    assert len(rows) == 6
    for _, held, now, difference in rows:
        assert float(difference.replace("−", "-")) == pytest.approx(float(now) - float(held), abs=1e-9)
    assert rows[0][1] == f"{bench.key_figures.pumping_frequency:.1f}"
    assert rows[4][2] == f"{100 * tauter.key_figures.breakdown_ratio:.1f}"
    assert [cells[3] for cells in re.findall(row, changes_html(bench, bench))] == ["0.0"] * 5 + ["0.00"]


# ---- the board

def sources(board):
    found = {}
    for part in (board.strip, board.sentence, board.level, board.share, board.phasor, board.section, board.gallery,
                 board.foot, board.changes):
        for model in part.references():
            if isinstance(model, ColumnDataSource):
                found[model.name or model.id] = model
    return found


def test_the_named_sources_are_there_and_only_two_talk_to_the_server():
    found = sources(Board())
    assert {"level", "share", "phasor", "section", "gallery"} <= set(found)
    assert {name for name, source in found.items() if source.syncable} == {"asked", "pressed"}


def test_showing_replaces_data_and_builds_nothing(bench, tauter):
    board = Board()
    board.show(bench)
    before = {model.id for model in board.level.references()}
    start = board.cursor.data["frequency"][0]
    assert start == first_cursor(bench)
    board.show(tauter)
    assert {model.id for model in board.level.references()} == before
    assert np.array_equal(sources(board)["level"].data["level_db"], tauter.response.level_db.astype(np.float32))
    assert board.cursor.data["frequency"][0] == start


def test_holding_shows_the_held_design_and_the_table(bench, tauter):
    board = Board()
    board.show(bench)
    board.hold(bench)
    board.show(tauter)
    assert np.array_equal(sources(board)["held_level"].data["level_db"], bench.response.level_db.astype(np.float32))
    assert board.changes.visible and "Pumping" in board.words.data["changes"][0]
    assert "held" in board.words.data["strip"][0]
    board.hold(None)
    assert len(sources(board)["held_level"].data["x"]) == 0 and not board.changes.visible
    assert "held" not in board.words.data["strip"][0]


def test_dimming_keeps_the_plots_and_says_why_as_text(bench):
    board = Board()
    board.show(bench)
    board.dim('No rest state: <img src=x onerror="alert(1)">')
    notices = [model for model in board.level.references() if 'role="alert"' in str(getattr(model, "text", ""))]
    assert len(notices) == 1 and "&lt;img" in notices[0].text and "<img" not in notices[0].text
    plots = [model for model in board.level.references() if isinstance(model, Plot)]
    assert plots[0].styles["opacity"] == "0.35"
    board.show(bench)
    assert plots[0].styles["opacity"] == "1" and not notices[0].visible


def test_a_name_is_text_wherever_it_is_shown(bench):
    marked = replace(bench, design=replace(bench.design, name='<script>alert("x")</script>'))
    board = Board()
    board.show(marked)
    board.hold(marked)
    shown = "".join(column[0] for column in board.words.data.values())
    assert "<script" not in shown and "&lt;script" in shown
    assert sources(board)["still"].data["stem"] == ["script-alert-x-script"]


def test_dark_changes_every_ink(bench):
    board = Board()
    board.show(bench)
    board.set_dark(True)
    colours = {c for part in (board.level, board.share, board.gallery) for m in part.references()
               for c in (getattr(m, "background_fill_color", None), getattr(m, "line_color", None),
                         getattr(m, "text_color", None)) if isinstance(c, str)}
    assert not colours & (set(theme.LIGHT.roles().values()) - set(theme.DARK.roles().values()))


def test_keys_call_back():
    board, heard = Board(), []
    board.on_key("h", lambda: heard.append("h"))
    board._on_pressed("data", {}, {"key": ["h"], "count": [1]})
    board._on_pressed("data", {}, {"key": ["x"], "count": [2]})
    assert heard == ["h"]


@pytest.mark.parametrize("changes", [{"drive.amplitude": 0.0}, {"drive.bias": 0.0}, {"listener.distance": 100.0},
                                     {"film.layers": 30}, {"rear.kind": "open"}])
def test_silence_and_extremes_stay_finite(changes):
    board = Board()
    found = engine.overview(Design().with_values(changes))
    board.show(found)
    board.hold(found)
    for source in sources(board).values():
        for column in source.data.values():
            numbers = [v for v in column if isinstance(v, int | float | np.number)]
            assert np.all(np.isfinite(numbers)), source.name
    start, end = (getattr(board._spine.level.y_range, edge) for edge in ("start", "end"))
    assert 40 <= end - start <= 80
