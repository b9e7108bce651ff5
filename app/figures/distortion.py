"""Figures of the page of distortion: built when first shown, then only data are replaced; on the page's one cursor."""

from html import escape
from pathlib import Path

from bokeh.models import Column, CustomJS

from app.figures.canvas import source
from app.figures.harmonics import Cursor, Curves, Series
from app.figures.places import Places
from app.figures.thd_map import ThdMap
from app.theme import file_stem

SCRIPT = Path(__file__).parent / "distortion.js"
PLOTS = ("sine", "root", "harmonics", "cycle", "series", "map")
MAP_BUTTON = '<div class="bar"><button data-act="map">{act}</button><span>{said}</span></div>'


class DistortionBoard:
    """``plots`` is the one part, ready to place.

    Parameters
    ----------
    board : app.figures.board.Board
        The figures whose inks, frequency axis and cursor these share.
    stylesheet : str
        How the plots share their place.
    """

    def __init__(self, board, stylesheet=""):
        self._board, inks = board, board.inks
        self._curves = [Curves(inks, board.x_range, law) for law in ("sine", "square-root")]
        self._cursor, self._series, self._map = Cursor(inks), Series(inks), ThdMap(inks, board.x_range)
        axes = (*(curves.axes for curves in self._curves), self._cursor.bars, self._cursor.cycle, self._series.axes,
                self._map.axes)
        self._plots = dict(zip(PLOTS, (each.plot for each in axes), strict=True))
        self._places = Places(board.html, self._plots)
        self.now = source("distortion", law=[], stem=[], bias=[], exact=[])
        self._map_words = board.html('<div data-word="map"></div>', position="absolute", top="1px", right="34px", z_index="2")
        self.words = source("distortion_words", map=[""])
        boxes = self._places.boxes
        boxes["map"].children = [*boxes["map"].children, self._map_words]
        self.plots = Column(*boxes.values(), sizing_mode="stretch_both", stylesheets=[stylesheet])
        self.say_map(None, False)
        self._start_browser_code()

    def _start_browser_code(self):
        sine, root = self._curves
        cursor, series = self._cursor, self._series
        models = self._places.models()
        models |= {"level_plot": self._board.level_plot, "distortion": self.now, "distortion_words": self.words,
                   "map_words": self._map_words, "sine": sine.data, "root": root.data, "sine_parts": sine.parts,
                   "root_parts": root.parts, "sine_reading": sine.reading, "root_reading": root.reading,
                   "bars": cursor.quads, "open_bars": cursor.open_quads, "waves": cursor.waves,
                   "other_waves": cursor.other_waves, "wave_words": cursor.wave_words, "bar_reading": cursor.bar_reading,
                   "series_sine": series.lines["sine"], "series_root": series.lines["square-root"],
                   "map_numbers": self._map.numbers, "exact": series.exact, "exact_parts": series.exact_parts}
        args = {**models, "cursors": [sine.cursor, root.cursor, self._map.cursor]}
        code = f"const models = {{{', '.join(models)}}}\n{{\n{SCRIPT.read_text(encoding='utf-8')}\n}}"
        self._plots["sine"].js_on_change("inner_width", CustomJS(args=args, code=code))

    def show(self, view):
        """Replace the curves, and with them what the cursor shows, by a DistortionView's."""
        with self._board.in_one():
            for curves in self._curves:
                curves.show(view)
            drive = view.design.drive
            self.now.data = {"law": [drive.law], "stem": [file_stem(view.design.name)], "bias": [drive.bias], "exact": [False]}
            self.dim(None)

    def hold(self, view):
        """Keep a DistortionView in grey; None takes it away."""
        with self._board.in_one():
            for curves in self._curves:
                curves.hold(view)

    def show_series(self, series, design):
        """Replace the THD against amplitude by an AmplitudeSeries'; None: nothing yet."""
        with self._board.in_one():
            if series is None:
                self._series.clear()
            else:
                self._series.show(series, design)
                self.now.data = {**self.now.data, "exact": [True] * len(self.now.data["law"])}

    def show_map(self, found, design, band):
        """Replace the map by a DistortionMap's; None: an empty one."""
        with self._board.in_one():
            self._map.show(found, design, band)

    def say_map(self, stage, is_stale, fault=""):
        """What stands at the map: the button that computes or stops it, how far it is, whether it is an earlier design's.

        Parameters
        ----------
        stage : app.worker.Stage or None
            None: nothing is under way.
        is_stale : bool
        fault : str
            Why there is no map, or nothing.
        """
        if stage is None:
            said = fault or ("of an earlier design" if is_stale else "")
        else:
            left = stage.seconds_left
            said = f"{100*stage.part:.0f} %" + ("" if left is None else f", {max(1, round(left))} s left")
        with self._board.in_one():
            self.words.data = {"map": [MAP_BUTTON.format(act="compute" if stage is None else "stop", said=escape(said))]}

    def dim(self, text):
        """Dim the plots and say the text over them; None lights them up again."""
        with self._board.in_one():
            self._places.dim(text)

    def change_colours(self):
        """What the inks do not reach."""
        with self._board.in_one():
            self._map.change_colours(self._board.inks.palette)
