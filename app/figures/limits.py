"""Figures of the page of the limits: built when first shown, then only data are replaced; on the page's one cursor."""

from pathlib import Path

from bokeh.models import Column, CustomJS

from app.figures.canvas import source
from app.figures.electrical import NAMES, Electrical
from app.figures.places import Places
from app.figures.verdict import verdict_html
from app.figures.window import Window
from app.theme import file_stem

SCRIPT = Path(__file__).parent / "limits.js"
WINDOW_PLOTS = ("window", "tuning")


class LimitsBoard:
    """window, electrical, verdict: the parts, ready to place.

    Parameters
    ----------
    board : app.figures.board.Board
        The figures whose inks, frequency axis and cursor these share.
    on_bias : callable
        Called with (bias in V, whether it was let go) while a person moves the bias in the picture.
    """

    def __init__(self, board, on_bias):
        self._board, self._on_bias, self._seen = board, on_bias, None
        self._window, self._electrical = Window(board.inks), Electrical(board.inks, board.x_range)
        self._plots = {"window": self._window.height, "tuning": self._window.modes, **self._electrical.plots}
        self._places = Places(board.html, self._plots)
        self._words = board.html('<div data-word="verdict"></div>')
        self.now = source("limits", bias_kv=[], low_kv=[], high_kv=[], stem=[], html=[])
        self.moved = source("moved_bias", volts=[], released=[], count=[])
        self.moved.syncable = True
        self.moved.on_change("data", self._take)
        boxes = self._places.boxes
        self.window = Column(*(boxes[name] for name in WINDOW_PLOTS), sizing_mode="stretch_both")
        self.electrical = Column(*(boxes[name] for name in NAMES), sizing_mode="stretch_both")
        self.verdict = Column(self._words, sizing_mode="stretch_both")
        self._start_browser_code()

    def _start_browser_code(self):
        window, electrical = self._window, self._electrical
        models = self._places.models()
        models |= {f"{name}_reading": reading for name, reading in electrical.readings.items()}
        models |= {"level_plot": self._board.level_plot, "limits": self.now, "moved_bias": self.moved,
                   "verdict": self._words, "bias_words": window.bias_words, "electrical": electrical.data,
                   "window": window.stable, "window_beyond": window.beyond, "window_modes": window.mode_lines,
                   "window_modes_beyond": window.modes_beyond}
        args = {**models, "biases": window.biases, "swings": window.swings, "cursors": electrical.cursors}
        code = f"const models = {{{', '.join(models)}}}\n{{\n{SCRIPT.read_text(encoding='utf-8')}\n}}"
        self._window.height.js_on_change("inner_width", CustomJS(args=args, code=code))

    def show(self, view):
        """Replace all data by a LimitsView's."""
        low, high = view.swing
        with self._board.in_one():
            self._window.show(view)
            self.show_response(view.response, view.design.drive.current_limit)
            self.now.data = {"bias_kv": [view.design.drive.bias / 1e3], "low_kv": [low / 1e3], "high_kv": [high / 1e3],
                             "stem": [file_stem(view.design.name)], "html": [verdict_html(view)]}
            self.dim(None)

    def show_response(self, response, current_limit):
        """Replace what the source sees, which is known before the window is; nothing where it is shown already."""
        if response is not self._seen:
            self._seen = response
            with self._board.in_one():
                self._electrical.show(response, current_limit)

    def hold(self, view):
        """Keep a LimitsView in grey; None takes it away."""
        with self._board.in_one():
            self._window.hold(view and view.window)
            self._electrical.hold(view and view.response)

    def dim(self, text):
        """Dim the plots and say the text over them; None lights them up again."""
        with self._board.in_one():
            self._places.dim(text, (self._words,))

    def _take(self, attribute, old, new):
        """The bias was moved in the picture."""
        if len(new["volts"]):
            self._on_bias(float(new["volts"][0]), bool(new["released"][0]))
