"""The page in a real Chromium: it shows what the engine computes, while a person drags, types, undoes and opens.

Expected values come from `engine` called here, to the precision of the float32 that is sent; expected words from its
exceptions. Every visit also fails on an outside request, a failed request or an error in the console (conftest).
"""

import numpy as np
import pytest

import engine
from app.state import DEFAULT_BAND, DesignState
from app.values import from_slider, value_text
from engine.design import Design, field_of
from engine.designfile import dumps, loads

FLOAT32 = float(np.finfo(np.float32).eps)


def assert_shows(visit, design, band=DEFAULT_BAND):
    """The level plot shows this design: at three frequencies, as the engine has it."""
    response = engine.overview(design, band).response
    frequency, level = map(np.array, visit.level())
    inside = (response.frequency >= band[0]) & (response.frequency <= band[1])
    assert frequency[0] == pytest.approx(response.frequency[inside][0], rel=FLOAT32)
    for at in (0.1, 0.5, 0.9):
        i = int(at * inside.sum()) + int(np.argmax(inside))
        j = int(np.argmin(abs(frequency - response.frequency[i])))
        assert frequency[j] == pytest.approx(response.frequency[i], rel=FLOAT32)
        assert level[j] == pytest.approx(response.level_db[i], rel=2 * FLOAT32, abs=1e-5)


def test_the_first_page_shows_the_design(visit):
    assert_shows(visit, Design())
    assert visit.page.title() == "Bench back · Elastovox"
    assert visit.entry("film.prestretch").input_value() == "1.25"
    assert "of breakdown" in visit.words(".region-strip")
    assert visit.page.locator(".region-foot").is_visible()


def test_a_key_on_a_slider_repaints(visit):
    visit.changed(lambda: visit.slider("film.prestretch").press("ArrowRight"))
    assert visit.entry("film.prestretch").input_value() == "1.26"
    assert_shows(visit, Design().with_values({"film.prestretch": 1.26}))


def test_dragging_ends_at_the_last_place_in_one_step(visit):
    slider = visit.slider("drive.amplitude")
    slider.scroll_into_view_if_needed()
    box = slider.bounding_box()
    middle = box["y"] + box["height"] / 2
    start = float(slider.evaluate("node => (node.value - node.min) / (node.max - node.min)"))
    mouse = visit.page.mouse
    mouse.move(box["x"] + 5 + start * (box["width"] - 10), middle)
    mouse.down()
    mouse.move(box["x"] + 0.3 * box["width"], middle, steps=25)
    mouse.up()
    field = field_of("drive.amplitude")
    amplitude = from_slider(field, float(slider.evaluate("node => node.value")))
    assert amplitude < 50
    visit.wait(f"deep('.field-drive-amplitude input.entry')[0].value === '{value_text(field, amplitude)}'")
    design = Design().with_values({"drive.amplitude": amplitude})
    loudest = float(np.max(engine.overview(design, DEFAULT_BAND).response.level_db))
    visit.wait(f"Math.abs(Math.max(...data('level').level_db) - {loudest}) < 0.001")
    assert_shows(visit, design)
    visit.changed(visit.button("undo").click)
    assert_shows(visit, Design())
    assert visit.button("undo").is_disabled()


def test_typing_with_units_and_bad_typing(visit):
    visit.changed(lambda: visit.type("drive.bias", "2100 V"))
    assert_shows(visit, Design().with_values({"drive.bias": 2100.0}))
    visit.type("drive.bias", "plenty")
    visit.message("drive.bias").filter(has_text="'plenty' is no number").wait_for()
    assert_shows(visit, Design().with_values({"drive.bias": 2100.0}))


def test_undo_and_redo_by_keys(visit):
    slider = visit.slider("film.prestretch")
    visit.changed(lambda: slider.press("ArrowRight"))
    visit.changed(lambda: slider.press("Control+z"))
    assert_shows(visit, Design())
    visit.changed(lambda: slider.press("Control+Shift+z"))
    assert_shows(visit, Design().with_values({"film.prestretch": 1.26}))
    visit.changed(lambda: slider.press("u"))
    assert_shows(visit, Design())


def test_hold_keeps_the_design_in_grey_and_says_what_changed(visit):
    visit.button("hold").click()
    visit.button("let go").wait_for()
    table = visit.page.locator(".region-changes table")
    table.wait_for()
    before = table.inner_text()
    visit.changed(lambda: visit.type("film.prestretch", "1.4"))
    visit.wait(f"deep('.region-changes')[0].shadowRoot.querySelector('table').innerText !== {before!r}")
    visit.button("let go").click()
    table.wait_for(state="hidden")


def test_the_cursor_moves_by_keys_without_the_server(visit):
    before = visit.words(".sentence")
    visit.page.locator(".region-sentence button", has_text="dip").press("Enter")
    visit.wait(f"deep('.sentence')[0].shadowRoot.querySelector('.bk-clearfix').textContent !== {before!r}")
    dip = visit.evaluate("data('cursor').frequency[0]")
    assert_shows(visit, Design())
    response = engine.overview(Design(), DEFAULT_BAND).response
    i = int(np.argmin(abs(response.frequency - dip)))
    assert response.level_db[i] < min(response.level_db[i - 3], response.level_db[i + 3])


def test_a_design_without_rest_state_is_said_in_the_engines_words(visit):
    design = Design().with_values({"drive.bias": 15e3})
    with pytest.raises(engine.NoRestState) as refusal:
        engine.overview(design, DEFAULT_BAND)
    visit.type("drive.bias", "15")
    message = visit.message("drive.bias")
    message.filter(has_text=str(refusal.value)).wait_for()
    visit.page.locator(".region-level [role=alert]", has_text=str(refusal.value)).wait_for()
    assert_shows(visit, Design())
    visit.button("undo").click()
    visit.wait("deep('.field-drive-bias .message')[0].textContent === ''")
    visit.page.locator(".region-level [role=alert]").wait_for(state="hidden")
    assert_shows(visit, Design())


def test_a_centre_larger_than_the_frame_is_said_at_the_centre(visit):
    visit.type("geometry.centre_radius", "60 mm")
    visit.message("geometry.centre_radius").filter(has_text="not smaller than the frame radius").wait_for()
    assert_shows(visit, Design())
    visit.changed(lambda: visit.type("geometry.frame_radius", "70"))
    visit.wait("deep('.field-geometry-centre_radius .message')[0].textContent === ''")


def upload(visit, folder, name, data):
    """Choose a file of these bytes, from a folder: sent through the driver, a large one takes half a minute."""
    path = folder / name
    path.write_bytes(data)
    visit.page.locator("input[type=file]").first.set_input_files(path)


def test_open_and_save(visit, tmp_path):
    design = Design().with_values({"film.prestretch": 1.4, "name": "Borrowed"})
    visit.changed(lambda: upload(visit, tmp_path, "borrowed.toml", dumps(design).encode()))
    assert_shows(visit, design)
    assert visit.page.locator("input.name").input_value() == "Borrowed"
    visit.changed(lambda: visit.type("film.prestretch", "1.35"))
    with visit.page.expect_download() as download:
        visit.button("save").click()
    assert download.value.suggested_filename == "borrowed.toml"
    text = download.value.path().read_text(encoding="utf-8")
    assert loads(text) == design.with_values({"film.prestretch": 1.35})


@pytest.mark.parametrize(("data", "words"), [
    (b"film = ", "odd.toml"), (b"\xff\xff", "UTF-8"), (b"x" * 70_000, "at most 64 kB"),
    (b"x" * 30_000_000, "at most 64 kB")])
def test_a_bad_file_is_said_and_the_page_lives_on(visit, tmp_path, data, words):
    upload(visit, tmp_path, "odd.toml", data)
    visit.page.get_by_text(words).first.wait_for()
    assert_shows(visit, Design())
    visit.changed(lambda: visit.slider("film.prestretch").press("ArrowRight"))


def test_a_link_opens_the_same_design(visit, visitor):
    design = Design().with_values({"film.prestretch": 1.4})
    visit.changed(lambda: visit.type("film.prestretch", "1.4"))
    visit.button("link").click()
    link = visit.page.locator(".share input")
    link.wait_for()
    visit.wait("deep('.share input')[0].value.includes('?d=')")
    other = visitor(at="?" + link.input_value().partition("?")[2])
    assert_shows(other, design)


def test_a_reload_loses_nothing(visit):
    visit.changed(lambda: visit.type("film.prestretch", "1.4"))
    visit.page.wait_for_function("window.location.search.includes('d=')")
    visit.open(visit.page.url)
    assert_shows(visit, Design().with_values({"film.prestretch": 1.4}))


def test_a_bad_link_is_said_and_leaves_the_address(visitor):
    visit = visitor(at="?d=nonsense")
    visit.page.get_by_text("Copy the whole link again").first.wait_for()
    assert_shows(visit, Design())
    visit.page.wait_for_function("!window.location.search.includes('d=')")


def test_samples(visit):
    visit.changed(lambda: visit.page.locator("select[aria-label='Sample designs']").select_option("fern-label.toml"))
    assert visit.entry("geometry.frame_radius").input_value() == "25.0 mm"
    assert visit.page.title().startswith("Fern label")


def test_two_visitors_have_two_designs(visitor):
    one, two = visitor(), visitor()
    one.changed(lambda: one.type("film.prestretch", "1.4"))
    assert_shows(two, Design())
    two.changed(lambda: two.type("drive.bias", "1.5"))
    assert_shows(one, Design().with_values({"film.prestretch": 1.4}))
    assert_shows(two, Design().with_values({"drive.bias": 1500.0}))


def test_the_band(visit):
    visit.changed(lambda: visit.page.locator(".field-band select").select_option("20 Hz – 2 kHz"))
    assert_shows(visit, Design(), (20.0, 2e3))
    visit.page.locator(".field-band input").fill("20")
    visit.page.locator(".field-band input").press("Enter")
    visit.page.locator(".field-band .message").filter(has_text="two frequencies").wait_for()


def test_a_fault_of_the_program_is_told_and_the_page_lives_on(visit, monkeypatch):
    """In the computation and in a callback: words on the page, never a traceback."""
    with monkeypatch.context() as broken:
        broken.setattr(engine, "overview", lambda design, band: 1 / 0)
        visit.type("film.prestretch", "1.91")
        visit.message("film.prestretch").filter(has_text="a reason of the program's own").wait_for()
        broken.setattr(DesignState, "undo", lambda state: [][0])
        visit.button("undo").click()
        notice = visit.page.get_by_text("The program failed at this (IndexError)")
        notice.wait_for()
    visit.changed(lambda: visit.type("film.prestretch", "1.3"))
    assert_shows(visit, Design().with_values({"film.prestretch": 1.3}))
