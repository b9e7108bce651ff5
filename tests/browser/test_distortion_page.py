"""The page of distortion in a real Chromium: curves, the cursor's pictures, a map with stop, files.

Expected values come from `engine` called here. Every visit also fails on an outside request or an error in the console.
"""

import csv
import io

import numpy as np
import pytest

import engine
from engine.design import Design

FINE = "(data('distortion_sine')?.frequency.length ?? 0) > 100"
MODEL = "Bokeh.documents[0].get_model_by_name('distortion_sine')"
MAP_WORDS = "deep('[data-word=map]')[0]?.textContent ?? ''"


@pytest.fixture
def distortion(visit):
    """A visit turned to the page of distortion, with its fine curves."""
    visit.page.locator("button.tab", has_text="Distortion").click()
    visit.wait(f"{MODEL} && {FINE}")
    return visit


def test_curves_cursor_and_series_are_the_engines(distortion):
    frequency = np.array(distortion.evaluate("Array.from(data('distortion_sine').frequency)"))
    for law, name in (("sine", "sine"), ("square-root", "root")):
        some = frequency[[5, 40, 80]]
        found = engine.distortion(Design().with_values({"drive.law": law}), some)
        drawn = np.array(distortion.evaluate(f"Array.from(data('distortion_{name}').thd)"))[[5, 40, 80]]
        np.testing.assert_allclose(10.0**drawn/100, found.thd, rtol=2e-4)
    # where the cursor rests the server is asked about its very frequency
    distortion.wait("data('distortion').exact[0] === true")
    f = distortion.evaluate("data('cursor').frequency[0]")
    distortion.wait(f"Math.abs(data('distortion_exact').frequency[0] / {f} - 1) < 1e-6")
    bars = distortion.evaluate("[data('harmonic_bars').top, data('harmonic_open_bars').top]")
    for law, drawn in zip(("sine", "square-root"), bars, strict=True):
        size = np.abs(engine.distortion(Design().with_values({"drive.law": law}), [f]).harmonic_pressure[0])
        expected = 20*np.log10(size/np.sqrt((size**2).sum()))
        np.testing.assert_allclose(drawn, expected[expected > -90][:len(drawn)], atol=0.01)
    assert distortion.evaluate("data('cycle').xs.length") == 3
    series = distortion.evaluate("[Array.from(data('series_sine').amplitude), Array.from(data('series_sine').thd)]")
    assert len(series[0]) == 9 and all(np.diff(series[1]) > 0)      # common practice: THD grows with amplitude
    # one cursor for the whole page
    distortion.page.evaluate("Bokeh.index.find_one(Bokeh.documents[0].get_model_by_name('root_plot')).el.focus()")
    distortion.page.keyboard.press("Shift+ArrowRight")
    distortion.wait(f"data('cursor').frequency[0] > {f}")
    distortion.wait("Math.abs(data('distortion_exact').frequency[0] / data('cursor').frequency[0] - 1) < 1e-6")


def test_a_drag_repaints_a_map_comes_on_demand_and_numbers_are_saved(distortion):
    assert "on demand" in distortion.evaluate("Bokeh.documents[0].get_model_by_name('map_plot').renderers"
                                              ".flatMap((r) => r.data_source.data.text ?? []).join(' ')")
    distortion.page.evaluate(f"window.curves = {MODEL}.data")
    distortion.slider("film.prestretch").press("ArrowRight")
    distortion.wait(f"{MODEL}.data !== window.curves && !({FINE})")     # coarse at once
    distortion.wait(FINE)                                               # fine when the hand rests
    button = distortion.page.locator("[data-act=map]")
    button.click()
    distortion.wait(f"({MAP_WORDS}).startsWith('stop')")
    distortion.wait("data('thd_map').image.length === 1")
    shape = distortion.evaluate("data('thd_map').image[0].shape")
    assert list(shape) == [12, 60]
    distortion.wait(f"({MAP_WORDS}) === 'compute'")
    distortion.slider("film.prestretch").press("ArrowRight")
    distortion.wait(f"({MAP_WORDS}).includes('earlier design')")
    button.click()
    distortion.wait(f"({MAP_WORDS}).startsWith('stop')")
    button.click()
    distortion.wait(f"({MAP_WORDS}).startsWith('compute')")
    distortion.wait(FINE)
    distortion.page.locator(".plot-sine summary").click()
    with distortion.page.expect_download() as saved:
        distortion.page.locator("button[data-plot=sine][data-form=csv]").click()
    rows = list(csv.DictReader(io.StringIO(open(saved.value.path(), encoding="utf-8").read())))
    assert len(rows) > 100 and 0 < float(rows[10]["thd_percent"]) < 100


def test_no_rest_state_is_said_over_the_curves(distortion):
    with pytest.raises(engine.NoRestState) as failing:
        engine.equilibrium(Design().with_values({"drive.bias": 9000.0}))
    entry = distortion.entry("drive.bias")
    entry.fill("9 kV")
    entry.press("Enter")
    words = str(failing.value)[:40]
    distortion.wait(f"deep('.plot-sine .notice, .notice').some((n) => n.textContent.includes({words!r}))")
    distortion.entry("drive.bias").fill("1.9 kV")
    distortion.entry("drive.bias").press("Enter")
    distortion.wait(f"deep('.notice').every((n) => n.textContent === '' || n.getClientRects().length === 0) && {FINE}")
