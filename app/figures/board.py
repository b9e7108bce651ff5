"""All figures of the first page and their one cursor: built once, then only data are replaced."""

from pathlib import Path

import numpy as np
from bokeh.models import Column, CustomJS, Div, InlineStyleSheet, Row

from app import theme
from app.figures.canvas import Inks, source
from app.figures.columns import columns
from app.figures.gallery import Gallery
from app.figures.phasor import Phasor
from app.figures.places import Places
from app.figures.section import Section
from app.figures.spine import Spine
from app.figures.strip import changes_html, foot_html, strip_html
from app.wire import Inbox, Outbox

HERE = Path(__file__).parent
SCRIPTS = ("parcel", "html", "format", "reading", "words", "spine", "phasor", "section", "gallery", "save", "cursor", "rest",
           "pages", "boot")
SENT = ("level", "rows", "motion", "shapes", "nodes", "gallery", "moving", "still")
UNSEEN = ("motion", "shapes", "nodes", "moving")      # what no other page needs
WORDS = ("strip", "foot", "changes")
PLOTS = ("level", "share", "phasor", "section", "gallery")


class Board:
    """Figures of one session; every attribute without underscore that is a Bokeh model is ready to place.

    strip, sentence, level, share, phasor, section, gallery, foot, changes: the parts. cursor: source with the column
    ``frequency`` (Hz, one row); after the first ``show`` it belongs to the browser. words: source with the HTML of
    strip, foot and changes.
    """

    def __init__(self, dark=False):
        self.inks = Inks(theme.palette(dark))
        self._style = InlineStyleSheet(css=(HERE.parent / "board.css").read_text(encoding="utf-8"))
        self._spine, self._phasor = Spine(self.inks), Phasor(self.inks)
        self._section, self._gallery = Section(self.inks), Gallery(self.inks)
        plots = {"level": self._spine.level, "share": self._spine.share, "phasor": self._phasor.plot,
                 "section": self._section.plot, "gallery": self._gallery.plot}
        self._places = Places(self.html, plots)
        spine, modes = self._spine, self._gallery.modes
        self._sent = {"level": spine.level_source, "gallery": modes,
                      **{name: source(name, **_EMPTY[name]) for name in _EMPTY}}
        self._held_sent = {"level": spine.held_source, "gallery": source("held_gallery", **modes.data),
                           **{name: source(f"held_{name}", **_EMPTY[name]) for name in _EMPTY}}
        self.cursor = source("cursor", frequency=[])
        self.words = source("words", **{name: [] for name in WORDS})
        self._pressed = source("pressed", key=[], count=[])
        self._pressed.syncable = True
        self._outbox, self.inbox = Outbox(), Inbox()
        self.inbox.on("painted", self._on_painted)
        self._listeners, self._painted, self._awaited = {}, None, 0
        self._pressed.on_change("data", self._on_pressed)
        self.level_plot, self.x_range = self._spine.level, self._spine.x_range     # for other pages' figures
        self._place()
        self._overview = self._held = None
        self._start_browser_code()

    def _place(self):
        self.strip, self.foot, self.changes = (self.html(f'<div data-word="{name}"></div>') for name in WORDS)
        self._sentence = self.html('<div data-word="sentence" role="status"></div>')
        self._sentence.css_classes = ["sentence"]
        self._buttons = self.html(_BUTTONS)
        self._buttons.sizing_mode = None
        self.sentence = Row(self._sentence, self._buttons, sizing_mode="stretch_width")
        self._gallery_head = self.html(_GALLERY_HEAD)
        boxes = self._places.boxes
        self.level, self.share, self.phasor, self.section = (boxes[name] for name in PLOTS[:4])
        self.gallery = Column(self._gallery_head, boxes["gallery"], sizing_mode="stretch_both")
        self.changes.visible = False

    def html(self, text, **styles):
        """Words that follow light and dark, in the page's type; ``styles`` place them."""
        styles = {"--font": theme.FONT, **{name.replace("_", "-"): value for name, value in styles.items()}}
        options = {"sizing_mode": "stretch_width"} if "position" not in styles else {}
        words = Div(text=text, styles=styles, stylesheets=[self._style], syncable=False, margin=0, **options)
        return self.inks.host(words)

    def _start_browser_code(self):
        models = self._places.models()
        models |= {**self._sent, **{f"held_{name}": sent for name, sent in self._held_sent.items()}}
        spine, section, gallery = self._spine, self._section, self._gallery
        models |= {"parcel": self._outbox.model, "asked": self.inbox.model, "cursor": self.cursor}
        models |= {"pressed": self._pressed, "sentence": self._sentence,
                   "strip": self.strip, "foot": self.foot, "changes": self.changes, "words": self.words,
                   "buttons": self._buttons, "gallery_head": self._gallery_head,
                   "share_rows": spine.row_words, "share_legend": spine.legend, "share_ticks": spine.row_ticks,
                   "share_chosen": spine.chosen,
                   "row_text": spine.row_text, "level_cursor": spine.level_cursor, "share_cursor": spine.share_cursor,
                   "cursor_words": spine.cursor_words,
                   "phasor": self._phasor.chain, "phasor_held": self._phasor.held, "phasor_total": self._phasor.total,
                   "phasor_words": self._phasor.words,
                   "section": section.film, "section_rest": section.rest, "section_held": section.held,
                   "section_centre": section.centre, "section_spring": section.spring, "section_frame": section.frame,
                   "section_rear": section.rear, "section_bar": section.bar, "section_words": section.words,
                   "gallery_marks": gallery.marks, "gallery_fills": gallery.fills, "gallery_held": gallery.held,
                   "gallery_lines": gallery.lines, "gallery_axes": gallery.axes, "gallery_heads": gallery.heads,
                   "gallery_words": gallery.words}
        parts = [(HERE / f"{name}.js").read_text(encoding="utf-8") for name in SCRIPTS]
        # In a block of its own: the arguments' names are those of the models.
        code = "\n".join([f"const models = {{{', '.join(models)}}}", "{", *parts, "}"])
        self._spine.level.js_on_change("inner_width", CustomJS(args=models, code=code))

    def show(self, overview, seen=True):
        """Replace all data by an Overview's; the cursor keeps its frequency, at first it takes the highest peak.

        Where another page is in front (not ``seen``), only what that page shows too is replaced: call again when it is left.
        """
        fresh = columns(overview)
        with self.in_one():
            self._overview = overview
            self._spine.show(overview, fresh, seen)
            for name, sent in self._sent.items():
                if name != "level" and (seen or name not in UNSEEN):
                    sent.data = getattr(fresh, name)
            if not len(self.cursor.data["frequency"]):
                self.cursor.data = {"frequency": [first_cursor(overview)]}
            self._compare()
            self.dim(None)
        self._awaited = self._outbox.count

    def hold(self, overview):
        """Keep an Overview's design in grey in every plot, with a table of what changed; None takes it away."""
        with self.in_one():
            self._held = overview
            fresh = None if overview is None else columns(overview)
            self._spine.hold(fresh)
            for name, sent in self._held_sent.items():
                if name != "level":
                    sent.data = getattr(fresh, name) if fresh else {key: [] for key in sent.data}
            self._compare()

    def dim(self, text):
        """Dim the plots and say the text over them; None lights them up again."""
        with self.in_one():
            self._places.dim(text, (self.strip, self._sentence))

    def set_dark(self, dark):
        """Light or dark colours everywhere."""
        with self.in_one():
            self.inks.change(theme.palette(dark))
            self._spine.change_colours(self.inks.palette)

    def on_key(self, key, callback):
        """Call back (no arguments) when a single key is pressed outside of text entries, unless switched off."""
        self._listeners[key] = callback

    def _on_pressed(self, attribute, old, new):
        callback = self._listeners.get(new["key"][0] if len(new["key"]) else None)
        if callback:
            callback()

    def on_painted(self, callback):
        """Call back (no arguments) when the browser has painted the last overview shown."""
        self._painted = callback

    def _on_painted(self, count):
        if self._painted and count >= self._awaited:
            self._painted()

    def _compare(self):
        if self._overview is None:
            return
        changes = changes_html(self._held, self._overview) if self._held else ""
        self.words.data = {"strip": [strip_html(self._overview, self._held)], "foot": [foot_html(self._overview)],
                           "changes": [changes]}
        self.changes.visible = self._held is not None

    def in_one(self):
        """Context in which everything that changes is sent in one message."""
        return self._outbox.together()


def first_cursor(overview):
    """Frequency of the highest peak of the level in the band below the estimate; of the highest level if none is."""
    response, (low, high) = overview.response, overview.band
    inside = (response.frequency >= low) & (response.frequency <= high)
    sure = inside & (response.frequency < response.estimate_above)
    level = response.level_db
    peak = np.zeros_like(sure)
    peak[1:-1] = (level[1:-1] > level[:-2]) & (level[1:-1] >= level[2:])
    for wanted in (sure & peak, sure, inside):
        if wanted.any():
            return float(response.frequency[np.argmax(np.where(wanted, level, -np.inf))])
    return float(response.frequency[0])


_EMPTY = {"rows": {"re": [], "im": []}, "motion": {"re": [], "im": []}, "shapes": {"radial": [], "axial": []},
          "nodes": {"radius": [], "height": []}, "moving": {"row": []}, "still": {"n_rows": []}}
_BUTTONS = """<div class="bar" role="group" aria-label="Cursor">
<button data-act="previous-peak" title="key p">‹ peak</button>
<button data-act="next-peak" title="key n" tabindex="-1">peak ›</button>
<button data-act="next-dip" title="key d" tabindex="-1">dip ›</button>
<button data-act="keys" aria-pressed="true" title="Single keys on or off" tabindex="-1">keys</button></div>"""
_GALLERY_HEAD = """<div class="bar" role="group" aria-label="Modes"><b>Modes in air</b>
<span class="grow" data-word="details" role="status"></span>
<button data-act="fold" data-word="fold">show in-plane</button>
<button data-act="previous-sheet" aria-label="previous modes" tabindex="-1">‹</button>
<span data-word="sheet"></span>
<button data-act="next-sheet" aria-label="next modes" tabindex="-1">›</button><span class="menu"></span></div>"""
