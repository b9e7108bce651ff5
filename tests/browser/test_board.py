"""The figures in a real Chromium: cursor, phasor chain, section, gallery, words and files against the engine's results.

What the browser draws is read back from the sources it draws from and compared with `engine` called here.
"""

import re

import numpy as np
import pytest

import engine
from app import theme
from app.state import DEFAULT_BAND
from engine.design import Design

PLOT = "Bokeh.index.find_one(Bokeh.documents[0].get_model_by_name('{}_plot'))"
FRAMES = "new Promise((done) => { let n = 0; const f = () => ++n < 20 ? requestAnimationFrame(f) : done(); f() })"


@pytest.fixture(scope="module")
def visit(request, chromium, address):
    """One visit for all tests here that need no page of their own: the cursor and choices are the visitor's alone."""
    kind = next(plugin.Visit for plugin in request.config.pluginmanager.get_plugins() if hasattr(plugin, "Visit"))
    made = kind(chromium.new_page())
    made.page.set_viewport_size({"width": 1440, "height": 900})
    yield made.open(address)
    made.page.close()
    assert made.faults == []


@pytest.fixture(scope="module")
def response():
    return engine.overview(Design(), DEFAULT_BAND).response


def cursor(visit):
    return visit.evaluate("data('cursor').frequency[0]")


def words(visit, name):
    return visit.evaluate(f"Array.from(data('{name}').text)")


def press(visit, plot, key):
    """A key while a plot has the focus."""
    visit.page.evaluate(PLOT.format(plot) + ".el.focus()")
    visit.page.keyboard.press(key)


def put_cursor(visit, part):
    """Press the pointer at a part of the level plot's width; the frequency it went to."""
    left, top, width, height = visit.page.evaluate(f"""(() => {{
        const view = {PLOT.format('level')}, outer = view.el.getBoundingClientRect(), box = view.frame.bbox
        return [outer.left + box.left, outer.top + box.top, box.width, box.height] }})()""")
    visit.page.mouse.click(left + part * width, top + height / 2)
    return cursor(visit)


def index_of(response, frequency):
    i = int(np.argmin(np.abs(response.frequency - frequency)))
    assert response.frequency[i] == pytest.approx(frequency, rel=1e-6)
    return i


def sentence(visit):
    return visit.evaluate("deep('[data-word=sentence]')[0].textContent")


def test_the_chain_is_the_engines_at_three_frequencies(visit, response):
    for part in (0.2, 0.45, 0.8):
        i = index_of(response, put_cursor(visit, part))
        chain = {name: visit.evaluate(f"Array.from(data('phasor').{name})") for name in ("x1", "y1", "magnitude", "phase")}
        shown = visit.evaluate("Array.from(data('gallery').mode)")
        contribution, total = response.contribution[i], response.pressure[i]
        made = np.abs(contribution).sum()
        turned = contribution[shown] * np.conj(total) / abs(total)
        assert np.allclose(np.array(chain["magnitude"])[:len(shown)], np.abs(turned), rtol=1e-5, atol=1e-6 * made)
        drawn = np.array(chain["magnitude"])[:len(shown)] * np.exp(1j * np.array(chain["phase"])[:len(shown)])
        assert np.max(np.abs(drawn - turned)) < 1e-5 * made
        assert chain["x1"][-1] == pytest.approx(abs(total), abs=1e-5 * made)
        assert chain["y1"][-1] == pytest.approx(0, abs=1e-5 * made)


def test_the_section_moves_as_the_engine_says(visit, response):
    """The drawn shape is rest + factor Re(U exp(i phase)) with the phase the animation was stopped at."""
    press(visit, "section", " ")
    visit.wait("deep('[data-word=pause]')[0].textContent === 'play'")
    for part in (0.15, 0.4):
        i = index_of(response, put_cursor(visit, part))
        factor = float(re.search(r"drawn × ([\d.]+)", " ".join(words(visit, "section_words"))).group(1))
        y, rest = (np.array(visit.evaluate(f"Array.from(data('{name}').y)")) for name in ("section", "section_rest"))
        n = len(y) // 2
        motion = 1e3 * factor * (response.displacement[i] @ response.modes.axial)
        nodes = response.rest.reference_radius
        drawn = np.interp(nodes, np.linspace(nodes[0], nodes[-1], n), (y - rest)[n:])
        basis = np.stack([motion.real, -motion.imag], axis=1)
        cosine, sine = phase = np.linalg.lstsq(basis, drawn, rcond=None)[0]
        assert np.max(np.abs(basis @ phase - drawn)) < 0.03 * np.max(np.abs(motion))
        if np.max(np.abs(motion.imag)) > 0.1 * np.max(np.abs(motion)):
            assert np.hypot(cosine, sine) == pytest.approx(1, abs=0.05)
        assert np.allclose((y - rest)[:n][::-1], (y - rest)[n:])


def test_the_sentence_names_what_cancels_and_how_much_is_heard(visit, response):
    put_cursor(visit, 0.3)
    press(visit, "level", "d")
    while cursor(visit) < 300:
        f = cursor(visit)
        visit.page.keyboard.press("d")
        visit.wait(f"data('cursor').frequency[0] !== {f}")
    while cursor(visit) > 300:           # round the end to the first dip
        f = cursor(visit)
        visit.page.keyboard.press("d")
        visit.wait(f"data('cursor').frequency[0] !== {f}")
    i = index_of(response, cursor(visit))
    modes = response.modes
    assert response.level_db[i] < response.level_db[[i - 2, i + 2]].min()
    said = sentence(visit)
    first, second = sorted(np.argsort(-np.abs(response.contribution[i, :-1]))[:2])
    assert "cancel" in said
    assert theme.hertz(modes.frequency[first]) in said and theme.hertz(modes.frequency[second]) in said
    assert f"{theme.percent(response.survival[i])} of what the motions make is heard" in said
    press(visit, "level", "n")
    visit.wait(f"data('cursor').frequency[0] !== {response.frequency[i]}")
    j = index_of(response, cursor(visit))
    lead = int(np.argmax(response.signed_share[j, :-1]))
    assert f"the {theme.hertz(modes.frequency[lead])} film mode makes the peak" in sentence(visit)


def test_arrows_move_the_cursor_only_where_a_plot_has_the_focus(visit):
    start = cursor(visit)
    press(visit, "share", "ArrowRight")
    after = cursor(visit)
    assert after > start
    press(visit, "level", "ArrowLeft")
    back = cursor(visit)
    assert back < after
    visit.page.locator("[data-act=next-peak]").focus()
    visit.page.keyboard.press("ArrowLeft")
    visit.page.keyboard.press("ArrowRight")
    visit.page.evaluate(FRAMES)
    assert cursor(visit) == back


def test_moving_the_cursor_and_the_animation_say_nothing_to_the_server(visit):
    visit.page.evaluate("""() => {
        window.sent = []
        const send = WebSocket.prototype.send
        WebSocket.prototype.send = function (message) { window.sent.push(String(message)); return send.call(this, message) } }
    """)
    for part in (0.2, 0.5, 0.7):
        put_cursor(visit, part)
    press(visit, "level", "ArrowRight")
    press(visit, "gallery", "ArrowRight")
    visit.page.evaluate(FRAMES)
    assert visit.evaluate("window.sent") == []


def test_the_animation_runs_pauses_and_rests_for_those_who_ask(visitor):
    visit = visitor()
    count = """async () => { const s = Bokeh.documents[0].get_model_by_name('section'); let n = 0
        const count = () => { n += 1 }; s.change.connect(count); await """ + FRAMES + "; s.change.disconnect(count); return n }"
    assert visit.page.evaluate(count) > 3
    press(visit, "section", " ")
    visit.wait("deep('[data-word=pause]')[0].textContent === 'play'")
    visit.page.evaluate(FRAMES)
    assert visit.page.evaluate(count) == 0
    visit.page.emulate_media(reduced_motion="reduce")
    visit.open(visit.page.url)
    visit.wait("deep('[data-word=pause]')[0]?.textContent === 'play'")


def test_bokeh_still_has_the_parts_that_are_put_to_rest(visit):
    """Copies of glyphs, style sheets of places, words painted the long way: of every plot, or Bokeh has changed."""
    rested, glyphs, words, all_views = visit.evaluate("""(() => {
        const views = ['level', 'share', 'phasor', 'section', 'gallery'].flatMap((name) => [...Bokeh.index.find_one(
            Bokeh.documents[0].get_model_by_name(name + '_plot')).renderer_views.values()])
        return [Bokeh.documents[0].get_model_by_name('level_plot').elastovox.rested, views.filter((v) => v.glyph).length,
                views.filter((v) => v.glyph?.model.type === 'Text').length, views.length] })()""")
    assert rested == {"copies": 4 * glyphs, "words": words, "places": all_views} and min(rested.values()) > 0


def test_choosing_a_mode_lights_its_row_its_phasor_and_its_motion(visit, response):
    for key in ("Escape", "ArrowRight", "ArrowRight"):
        press(visit, "gallery", key)
        visit.page.evaluate(FRAMES)
    visit.wait("Bokeh.documents[0].get_model_by_name('share_chosen').visible")
    heads = visit.evaluate("data('gallery_heads').text.map((text, i) => [text, data('gallery_heads').mode[i]])")
    text, mode = heads[1]
    assert text == theme.hertz(response.modes.frequency[mode])
    row = visit.evaluate("Array.from(data('gallery').mode)").index(mode)
    n_rows = visit.evaluate("data('still').n_rows[0]")
    assert visit.evaluate("Bokeh.documents[0].get_model_by_name('share_chosen').top") == n_rows - row
    assert visit.evaluate("data('phasor').role")[row] == "accent"
    assert words(visit, "section_words")[0] == f"Motion of the {text} mode"
    details = visit.evaluate("deep('[data-word=details]')[0].textContent")
    assert f"{theme.hertz(response.modes.frequency_vacuum[mode])} in vacuum" in details
    press(visit, "gallery", "Escape")
    visit.wait("!Bokeh.documents[0].get_model_by_name('share_chosen').visible")
    assert "in vacuum" not in visit.evaluate("deep('[data-word=details]')[0].textContent")


def test_a_click_chooses_and_a_second_one_lets_go(visit):
    box = visit.page.evaluate("(() => { const r = " + PLOT.format("gallery")
                              + ".el.getBoundingClientRect(); return [r.left, r.top, r.height] })()")
    for chosen in ("true", "false"):
        visit.page.mouse.click(box[0] + 60, box[1] + box[2] / 3)
        visit.wait(f"Bokeh.documents[0].get_model_by_name('share_chosen').visible === {chosen}")


def test_in_plane_modes_are_folded_away_with_their_share(visit, response):
    kinds = np.array(response.modes.kind)
    energy = engine.energy_share(response)
    share = theme.percent(energy[:-1][kinds == "in-plane"].sum())
    assert f"in-plane modes ({np.sum(kinds == 'in-plane')}) folded away: {share} of the sound" in visit.evaluate(
        "deep('[data-word=details]')[0].textContent")
    assert "in-plane" not in words(visit, "gallery_words")
    visit.page.locator("[data-act=fold]").click()
    visit.wait("data('gallery_words').text.includes('in-plane')")


def test_single_keys_can_be_switched_off(visit):
    visit.page.locator("[data-act=keys]").click()
    visit.wait("deep('[data-act=keys]')[0].getAttribute('aria-pressed') === 'false'")
    before = cursor(visit)
    press(visit, "level", "d")
    visit.page.evaluate(FRAMES)
    assert cursor(visit) == before
    visit.page.locator("[data-act=keys]").click()
    press(visit, "level", "d")
    visit.wait(f"data('cursor').frequency[0] !== {before}")


def save(visit, plot, form):
    """Save a plot from its menu; name and bytes of the file."""
    visit.page.locator(f"summary[aria-label='Save the {plot} plot']").click()
    with visit.page.expect_download() as download:
        visit.page.locator(f"[data-plot={plot}][data-form={form}]").click()
    visit.page.locator(f"summary[aria-label='Save the {plot} plot']").click()
    with open(download.value.path(), "rb") as file:
        return download.value.suggested_filename, file.read()


def test_every_plot_saves_its_numbers(visit, response):
    tables = {}
    for plot in ("level", "share", "phasor", "section", "gallery"):
        name, content = save(visit, plot, "csv")
        assert name == f"bench-back-{plot}.csv"
        head, *rows = content.decode().split("\r\n")[:-1]
        tables[plot] = head.split(","), [row.split(",") for row in rows]
        assert all(len(row) == len(tables[plot][0]) for row in tables[plot][1])
    level = np.array(tables["level"][1], float)
    assert np.allclose(level[:, 1], response.level_db, rtol=1e-6)
    share = np.array(tables["share"][1], float)
    assert np.allclose(share[:, 1:].sum(axis=1), response.survival, atol=1e-4)


@pytest.mark.parametrize("form, start", [("png", b"\x89PNG"), ("svg", b"<svg")])
def test_plots_save_as_pictures(visit, form, start):
    for plot in ("level", "section"):
        name, content = save(visit, plot, form)
        assert name == f"bench-back-{plot}.{form}" and start in content[:200]


@pytest.mark.parametrize("width, height", [(1440, 900), (1150, 600), (720, 450)])
def test_words_keep_their_distance(visitor, width, height):
    visit = visitor(width, height)
    visit.page.evaluate(FRAMES)
    boxes = visit.evaluate("""deep('.strip > div').map((item) => {
        const range = document.createRange()
        range.selectNodeContents(item)
        const box = range.getBoundingClientRect()
        return [box.left, box.top, box.right, box.bottom] })""")
    assert len(boxes) == 6
    for i, a in enumerate(boxes):
        for b in boxes[i + 1:]:
            assert a[2] + 8 <= b[0] or b[2] + 8 <= a[0] or a[3] <= b[1] or b[3] <= a[1]
    rows = visit.evaluate("data('share_rows').y")
    pitch = visit.evaluate("Bokeh.documents[0].get_model_by_name('share_plot').inner_height / data('still').n_rows[0]")
    size = visit.evaluate("(({text_font_size: s}) => parseFloat(s.value ?? s))(Bokeh.documents[0].get_model_by_name("
                          "'share_plot').renderers.map((r) => r.glyph).find((g) => g.text_font_style?.field === 'style'))")
    digit_height = 0.75 * size           # of the common typefaces
    assert np.min(np.diff(np.sort(rows))) * pitch >= digit_height


def test_labels_of_the_chain_do_not_cover_each_other(visit):
    for part in np.linspace(0.05, 0.95, 12):
        put_cursor(visit, part)
        labels = visit.page.evaluate("""(() => { const m = Bokeh.documents[0].get_model_by_name('phasor_plot')
            const d = Bokeh.documents[0].get_model_by_name('phasor_words').data, view = Bokeh.index.find_one(m)
            const ink = document.createElement('canvas').getContext('2d'); ink.font = '11px Roboto, sans-serif'
            return d.text.map((text, i) => [view.frame.x_scale.compute(d.x[i]), view.frame.y_scale.compute(d.y[i]),
              ink.measureText(text).width, d.align[i]]).filter((l) => l[3] === 'center') })()""")
        for i, a in enumerate(labels):
            for b in labels[i + 1:]:
                assert abs(a[0] - b[0]) >= (a[2] + b[2]) / 2 or abs(a[1] - b[1]) >= 11, part
