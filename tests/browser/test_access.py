"""Keyboard, zoom and colour schemes in a real Chromium.

Sources: WCAG 2.2, criteria 1.4.10 (reflow), 1.4.13 (content on hover or focus), 2.1.1 (keyboard), 2.4.1 (bypass
blocks); the screen sizes are the issue's.
"""

import pytest

from app.state import shown_fields

N_GROUPS = len(shown_fields()) + 1      # the band is one more

FOCUSED = """(() => { let at = document.activeElement
  while (at && at.shadowRoot && at.shadowRoot.activeElement) { at = at.shadowRoot.activeElement }
  return at ? `${at.className} ${at.textContent.slice(0, 20)}` : "" })()"""


def test_one_tab_stop_a_group(visit):
    visit.page.locator(".fold").first.focus()
    for _ in range(N_GROUPS - 1):
        assert visit.page.evaluate(FOCUSED).startswith("fold")
        visit.page.keyboard.press("Tab")
    assert visit.page.evaluate(FOCUSED) == "fold Band"
    visit.page.keyboard.press("Tab")
    assert "fold" not in visit.page.evaluate(FOCUSED)
    visit.page.keyboard.press("Shift+Tab")
    assert visit.page.evaluate(FOCUSED) == "fold Band"


def test_arrows_enter_a_group_and_tab_leads_on_to_its_slider(visit):
    keyboard = visit.page.keyboard
    visit.page.locator(".fold").first.focus()
    keyboard.press("ArrowDown")
    keyboard.press("ArrowDown")
    assert visit.entry("geometry.centre_radius").evaluate("node => node.getRootNode().activeElement === node")
    keyboard.press("Tab")
    assert visit.slider("geometry.centre_radius").evaluate("node => node.getRootNode().activeElement === node")
    visit.changed(lambda: keyboard.press("ArrowRight"))
    keyboard.press("Tab")
    assert visit.page.evaluate(FOCUSED) == "fold Film"


def test_a_folded_group_opens(visit):
    assert not visit.entry("air.temperature").is_visible()
    fold = visit.page.locator(".fold", has_text="Air")
    fold.press("Enter")
    visit.entry("air.temperature").wait_for()
    assert fold.get_attribute("aria-expanded") == "true"


def test_the_meaning_shows_on_keyboard_focus_and_on_hover(visit):
    meaning = visit.page.locator(".field-film-prestretch .meaning")
    assert not meaning.is_visible()
    visit.page.keyboard.press("Tab")
    visit.entry("film.prestretch").focus()
    visit.page.keyboard.press("Tab")
    meaning.wait_for()
    assert "Stretched length over free length" in meaning.inner_text()
    visit.page.keyboard.press("Escape")
    meaning.wait_for(state="hidden")
    visit.page.locator(".field-geometry-frame_radius label").hover()
    visit.page.locator(".field-geometry-frame_radius .meaning").wait_for()


def test_sliders_speak_their_value_and_meaning(visit):
    slider = visit.slider("geometry.frame_radius")
    assert slider.get_attribute("aria-valuetext") == "50.0 mm"
    assert slider.get_attribute("aria-label") == "Frame radius"
    described = slider.get_attribute("aria-describedby").split()[0]
    assert visit.page.locator(f".field-geometry-frame_radius #{described}").count() == 1


def test_skip_links(visit):
    visit.page.locator(".skip button", has_text="plots").focus()
    visit.page.keyboard.press("Enter")
    assert "region-plots" in visit.page.evaluate(FOCUSED)
    visit.page.locator(".skip button", has_text="controls").focus()
    visit.page.keyboard.press("Enter")
    assert visit.page.evaluate(FOCUSED) == "fold Geometry"


PARTS = (".region-strip", ".region-sentence", ".region-level", ".region-share", ".region-section", ".region-phasor",
         ".region-gallery", ".region-foot")


def boxes(visit):
    return {part: visit.page.locator(part).first.bounding_box() for part in PARTS}


@pytest.mark.parametrize(("width", "height", "least"), [(1440, 900, 150), (1150, 600, 80)])
def test_everything_is_on_one_screen(visitor, width, height, least):
    visit = visitor(width, height)
    for part, box in boxes(visit).items():
        assert box["x"] >= 0, part
        assert box["x"] + box["width"] <= width, part
        assert box["y"] + box["height"] <= height, part
        if part in (".region-level", ".region-share", ".region-section", ".region-phasor", ".region-gallery"):
            assert box["height"] >= least, part
    assert visit.evaluate("document.documentElement.scrollHeight") <= height


def test_nothing_overlaps(visitor):
    for width, height in ((1440, 900), (1150, 600), (720, 450)):
        found = boxes(visitor(width, height))
        parts = [part for part in PARTS if width > 1000 or part != ".region-foot"]
        for i, one in enumerate(parts):
            for other in parts[i + 1:]:
                a, b = found[one], found[other]
                apart = (a["x"] + a["width"] <= b["x"] + 1 or b["x"] + b["width"] <= a["x"] + 1
                         or a["y"] + a["height"] <= b["y"] + 1 or b["y"] + b["height"] <= a["y"] + 1)
                assert apart, (width, height, one, other)


@pytest.mark.parametrize(("width", "height"), [(720, 450), (640, 400)])
def test_enlarged_twice_everything_can_be_scrolled_to(visitor, width, height):
    """1440 × 900 and 1280 × 800 at 200 %: no sideways scrolling, each part can be reached, the foot stays."""
    visit = visitor(width, height)
    assert visit.evaluate("document.documentElement.scrollWidth") <= width
    for part in PARTS:
        visit.page.locator(part).first.scroll_into_view_if_needed()
        box = visit.page.locator(part).first.bounding_box()
        assert box["width"] > 150
        assert box["x"] + box["width"] <= width
        assert box["y"] < height
        assert visit.page.locator(".region-foot").bounding_box()["y"] < height
    visit.changed(lambda: visit.slider("film.prestretch").press("ArrowRight"))


def test_light_and_dark(visit):
    background = "getComputedStyle(deep('.main')[0]).backgroundColor"
    light = visit.evaluate(background)
    visit.page.get_by_label("Toggle theme").click()
    visit.wait(f"{background} !== {light!r}")
    visit.changed(lambda: visit.slider("film.prestretch").press("ArrowRight"))
    visit.page.get_by_label("Toggle theme").click()
    visit.wait(f"{background} === {light!r}")
