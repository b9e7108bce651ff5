"""The page of the limits in a real Chromium: tabs, the bias dragged in the picture, the cursor, words, files.

Expected values come from `engine` called here. Every visit also fails on an outside request or an error in the console.
"""

import re

import pytest

import engine
from app.state import DEFAULT_BAND
from engine.design import Design

READY = "Bokeh.documents[0].get_model_by_name('limits')?.data.bias_kv.length > 0"
VERDICT = "deep('[data-word=verdict]')[0]?.textContent ?? ''"
FRAME = """(() => {
  const view = Bokeh.index.find_one_by_id(Bokeh.documents[0].get_model_by_name('window_plot').id)
  const box = view.frame.bbox, outer = view.el.getBoundingClientRect(), {start, end} = view.model.x_range
  return {left: outer.left + box.left, top: outer.top + box.top, width: box.width, height: box.height, start, end}
})()"""


@pytest.fixture
def limits(visit):
    """A visit turned to the page of the limits."""
    visit.page.locator("button.tab", has_text="Limits").click()
    visit.wait(READY)
    visit.wait(f"({VERDICT}).includes('Margins')")
    return visit


def test_the_tabs_turn_the_page_and_back(limits):
    assert limits.page.locator(".region-window canvas").first.is_visible()
    assert not limits.page.locator(".region-level canvas").first.is_visible()
    assert limits.page.locator(".region-strip").is_visible()
    text = limits.evaluate(VERDICT)
    for words in ("safety factor 1.2", "slack", "pull-in", "breakdown", "amplitude up to", "Stored on the film",
                  "check the standard", "apparent", "Cautions", "qualified people"):
        assert words in text
    limits.page.locator("button.tab", has_text="Response").click()
    limits.page.locator(".region-level canvas").first.wait_for()
    assert not limits.page.locator(".region-window canvas").first.is_visible()
    limits.changed(lambda: limits.slider("film.prestretch").press("ArrowRight"))


def test_dragging_the_bias_in_the_picture_moves_slider_and_design(limits):
    frame = limits.evaluate(FRAME)
    x = lambda kv: frame["left"] + frame["width"] * (kv - frame["start"]) / (frame["end"] - frame["start"])  # noqa: E731
    y, mouse = frame["top"] + frame["height"] / 2, limits.page.mouse
    mouse.move(x(1.9), y)
    mouse.down()
    mouse.move(x(2.4), y, steps=12)
    mouse.up()
    limits.wait("Math.abs(data('limits').bias_kv[0] - 2.4) < 0.03")
    said = limits.entry("drive.bias").input_value()
    bias = float(re.match(r"[\d.]+", said).group())
    assert bias == pytest.approx(limits.evaluate("data('limits').bias_kv[0]"), abs=1e-9)
    loudest = float(engine.overview(Design().with_values({"drive.bias": 1e3 * bias}), DEFAULT_BAND).response.level_db.max())
    limits.wait(f"Math.abs(Math.max(...data('level').level_db) - {loudest}) < 0.001")
    limits.wait(f"data('bias_words').text[0].startsWith('bias {bias:.2f} kV')")
    limits.button("undo").click()
    limits.wait("data('limits').bias_kv[0] === 1.9")
    assert limits.button("undo").is_disabled()


def test_keys_move_the_bias_and_the_cursor(limits):
    plot = limits.page.locator("[aria-label^='Rest height against bias']")
    plot.focus()
    plot.press("ArrowRight")
    limits.wait("Math.abs(data('limits').bias_kv[0] - 1.91) < 1e-9")
    before = limits.evaluate("data('cursor').frequency[0]")
    reading = limits.evaluate("data('impedance_reading').text[0]")
    plot = limits.page.locator("[aria-label^='Current against frequency']")
    plot.focus()
    plot.press("Shift+ArrowLeft")
    limits.wait(f"data('cursor').frequency[0] < {before}")
    limits.wait(f"data('impedance_reading').text[0] !== {reading!r}")


def test_a_bias_beyond_pull_in_is_said_over_the_picture(limits):
    with pytest.raises(engine.NoRestState) as refusal:
        engine.overview(Design().with_values({"drive.bias": 9e3}), DEFAULT_BAND)
    limits.type("drive.bias", "9")
    limits.page.locator(".region-window [role=alert]", has_text=str(refusal.value)).wait_for()
    limits.type("drive.bias", "1.9")
    limits.page.locator(".region-window [role=alert]").wait_for(state="hidden")


def test_a_safety_factor_changes_the_margins_only(limits):
    level = limits.level()
    limits.type("judgement.safety", "1.5")
    limits.wait(f"({VERDICT}).includes('safety factor 1.5')")
    assert limits.level() == level
    assert limits.button("undo").is_disabled()


def test_an_unlimited_and_a_limited_source(limits):
    assert limits.entry("drive.current_limit").input_value() == "none"
    limits.type("drive.current_limit", "5 mA")
    limits.wait("data('current_limit').text[0] === 'limit 5 mA'")
    limits.type("drive.current_limit", "none")
    limits.wait("data('current_limit').text.length === 0")
    limits.type("drive.current_limit", "inf")
    limits.message("drive.current_limit").filter(has_text="or none").wait_for()


def test_the_window_is_saved_as_numbers(limits):
    limits.page.locator(".region-window summary").first.click()
    with limits.page.expect_download() as download:
        limits.page.locator(".region-window [data-form=csv]").first.click()
    text = download.value.path().read_text()
    assert download.value.suggested_filename == "bench-back-window.csv"
    assert text.splitlines()[0] == "bias_kV,height_mm,stable" and len(text.splitlines()) > 60
