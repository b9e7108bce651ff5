"""Distortion over frequency under one drive law, and at the cursor: bars, one cycle, and over the amplitude."""

import math

import numpy as np
from bokeh.models import Line, MultiLine, Quad, Segment, Span

from app import theme
from app.figures.axes import Axes, log_percent, percent_steps, short
from app.figures.canvas import source, span, text
from app.figures.marks import runs
from app.figures.spine import frequency_ticks

LAWS = {"sine": "Sine drive", "square-root": "Square-root drive"}
ORDERS = (2, 3, 4, 5)
CURVES = ("thd", *(f"h{order}" for order in ORDERS))
DASHES = {"thd": [], "h2": [], "h3": [6, 3], "h4": [2, 3], "h5": [7, 2, 2, 2]}
PLACES = {"thd": 0.9, "h2": 0.06, "h3": 0.26, "h4": 0.46, "h5": 0.68}     # of each curve's name along the axis
PERCENT = (-2.0, 2.0)         # log10 of the axis of percent
DECIBELS = (-90.0, 4.0)       # of the axis of the bars
MOST_BARS = 8
PARTS = ("p_re", "p_im", "c_re", "c_im", "v_re", "v_im")
CAUSES = {"slack": "slack", "breakdown": "breakdown", "pull-in": "no periodic motion"}
NAMED = 5                     # frequencies named on a narrow axis, at most


class Curves:
    """THD and harmonics 2 to 5 over frequency under one law; its sources also hold what the cursor's pictures need."""

    def __init__(self, inks, x_range, law):
        key = {"sine": "sine", "square-root": "root"}[law]
        self.law, self.name = law, key
        self.axes = Axes(inks, f"{key}_plot", x_range)
        plot = self.axes.plot
        self.data = source(f"distortion_{key}", x=[], frequency=[], **{name: [] for name in CURVES})
        self.parts = source(f"distortion_{key}_parts", **{name: [] for name in PARTS})
        self.held = source(f"held_distortion_{key}", x=[], thd=[])
        self.names = source(x=[], y=[], text=[])
        self.bars, self.bar_words = source(x0=[], y0=[], x1=[], y1=[]), source(x=[], y=[], text=[], align=[], shift=[])
        self.fault = source(x=[], y=[], text=[])
        self.reading = source(f"{key}_reading", x=[], y=[], text=[])
        plot.add_glyph(self.held, inks(Line(x="x", y="thd", line_width=2), line_color="held"))
        for name in CURVES[::-1]:
            line = Line(x="x", y=name, line_width=2.4 if name == "thd" else 1.2, line_dash=DASHES[name], line_join="round")
            plot.add_glyph(self.data, inks(line, line_color="ink" if name == "thd" else "muted"))
        bar = Segment(x0="x0", y0="y0", x1="x1", y1="y1", line_width=6, line_alpha=0.75)
        plot.add_glyph(self.bars, inks(bar, line_color="warn"))
        text(plot, inks, self.names, color="ink", text_align="center", y_offset=-9)
        text(plot, inks, self.bar_words, color="warn", text_align={"field": "align"}, x_offset={"field": "shift"}, y_offset=-6)
        text(plot, inks, self.fault, color="warn", text_align="left", x_offset=6, y_offset=16)
        text(plot, inks, self.reading, size=12, color="accent", text_align="right", x_offset=-28, y_offset=-10,
             text_font_style="bold")
        self.cursor = inks(Span(dimension="height", location=None, line_width=1.4, level="overlay", syncable=False),
                           line_color="accent")
        plot.add_layout(self.cursor)

    def show(self, view):
        """Replace everything by a DistortionView's part of this law."""
        at = frequency_ticks(*view.band)
        at = at if len(at) <= NAMED else at[[theme.tick(f)[0] in "15" for f in at]]
        self.axes.set((np.log10(at), [theme.tick(f) for f in at]), percent_steps(*PERCENT), PERCENT,
                      f"{LAWS[self.law]}, % of the total", "Frequency, Hz")
        found, start = view.found.get(self.law), self.axes.x_range.start
        fault = view.faults.get(self.law, "")
        self.fault.data = {"x": [start] * bool(fault), "y": [PERCENT[1]] * bool(fault), "text": lines_of(fault)[:1]}
        if found is None:
            for data in (self.data, self.parts, self.names, self.bars, self.bar_words):
                data.data = {name: [] for name in data.data}
            return
        columns = self.data.data = curve_columns(found)
        self.parts.data = part_columns(found)
        self._name(columns)
        self._mark(found, columns["x"])

    def hold(self, view):
        """Another design's THD in grey; None: nothing."""
        found = view and view.found.get(self.law)
        columns = curve_columns(found) if found else {"x": [], "thd": []}
        self.held.data = {"x": columns["x"], "thd": columns["thd"]}

    def _name(self, columns):
        """Each curve's name on the curve, each at its own place along the axis."""
        words = {"x": [], "y": [], "text": []}
        for name, part in PLACES.items():
            i = round(part*(len(columns["x"]) - 1))
            if np.isfinite(columns[name][i]) and PERCENT[0] < columns[name][i] < PERCENT[1]:
                words["x"].append(float(columns["x"][i]))
                words["y"].append(float(columns[name][i]))
                words["text"].append("THD" if name == "thd" else name[1:])
        self.names.data = words

    def _mark(self, found, x):
        """A bar at the foot where a cycle meets a limit, and which."""
        told = [[c.name for c in conditions if c.name in CAUSES] for conditions in found.conditions]
        left, right = runs(x, np.array([bool(names) for names in told]))
        foot, names = PERCENT[0], [name for name in CAUSES if any(name in each for each in told)]
        self.bars.data = {"x0": left, "y0": np.full(len(left), foot), "x1": right, "y1": np.full(len(left), foot)}
        seen = len(left) > 0
        late = seen and left[0] > (self.axes.x_range.start + self.axes.x_range.end)/2
        self.bar_words.data = {"x": [self.axes.x_range.end if late else left[0]] * seen if seen else [], "y": [foot] * seen,
                               "text": ["within the cycle: " + ", ".join(CAUSES[name] for name in names)] * seen,
                               "align": ["right" if late else "left"] * seen, "shift": [-5 if late else 5] * seen}


def curve_columns(found):
    """The columns over frequency of a Distortion: log10 of percent of the total."""
    size = np.abs(found.harmonic_pressure)
    total = np.sqrt((size**2).sum(axis=1))
    part = np.where(found.converged[:, None], size/np.maximum(total, 1e-300)[:, None], np.nan)
    # harmonics beyond what the basis carries were left out: no value, rather than none
    reach = np.array([min([c.limit for c in told if c.name == "resolution"], default=np.inf) for told in found.conditions])
    order = np.arange(1, size.shape[1] + 1)
    part = np.where(found.frequency[:, None]*order > reach[:, None], np.nan, part)
    columns = {f"h{order}": log_percent(part[:, order - 1]) for order in ORDERS}
    return {"x": short(np.log10(found.frequency)), "frequency": short(found.frequency),
            "thd": log_percent(np.where(np.isfinite(part[:, 1]), found.thd, np.nan)), **columns}


def part_columns(found):
    """Complex amplitudes of sound, centre and source, flat, frequency leading, MOST_BARS + 1 orders with the mean first."""
    def padded(values, mean):
        whole = np.zeros((len(values), MOST_BARS + 1), complex)
        n = min(values.shape[1], MOST_BARS + 1 - mean)
        whole[:, mean:mean + n] = values[:, :n]
        return whole.ravel()
    parts = padded(found.harmonic_pressure, 1), padded(found.centre_motion, 0), padded(found.source_voltage, 0)
    return {name: short(part) for name, part in zip(PARTS, (x for p in parts for x in (p.real, p.imag)), strict=True)}


def lines_of(text, most=64):
    """Words cut into lines that a narrow plot can hold."""
    lines = [""]
    for word in text.split():
        if len(lines[-1]) + len(word) > most:
            lines.append("")
        lines[-1] = f"{lines[-1]} {word}".strip()
    return [line for line in lines if line]


class Cursor:
    """What holds at the cursor's frequency: bars of the harmonics and one cycle, drawn by the browser."""

    def __init__(self, inks):
        self.bars = Axes(inks, "harmonics_plot", span(0.4, MOST_BARS + 0.6))
        self.cycle = Axes(inks, "cycle_plot", span(0, 360), left=120, right=96)
        self.quads = source("harmonic_bars", left=[], right=[], top=[], bottom=[])
        self.open_quads = source("harmonic_open_bars", left=[], right=[], top=[], bottom=[])
        self.waves, self.other_waves = source("cycle", xs=[], ys=[]), source("other_cycle", xs=[], ys=[])
        self.wave_words = source("cycle_words", x=[], y=[], text=[], align=[], shift=[])
        self.bar_reading = source("harmonics_reading", x=[], y=[], text=[])
        quad = {"left": "left", "right": "right", "top": "top", "bottom": "bottom"}
        bars = self.bars.plot
        bars.add_glyph(self.quads, inks(Quad(**quad, line_width=1), fill_color="ink", line_color="ink"))
        bars.add_glyph(self.open_quads, inks(Quad(**quad, line_width=1.2), fill_color="page", line_color="ink"))
        text(bars, inks, self.bar_reading, size=12, color="accent", text_align="right", x_offset=-28, y_offset=-10,
             text_font_style="bold")
        cycle = self.cycle.plot
        other = MultiLine(xs="xs", ys="ys", line_width=1.2, line_dash=[5, 3])
        cycle.add_glyph(self.other_waves, inks(other, line_color="muted"))
        cycle.add_glyph(self.waves, inks(MultiLine(xs="xs", ys="ys", line_width=1.8), line_color="ink"))
        text(cycle, inks, self.wave_words, text_align={"field": "align"}, x_offset={"field": "shift"}, text_baseline="middle")
        orders = np.arange(1, MOST_BARS + 1)
        decibels = np.arange(-80.0, 1, 20)
        self.bars.set((orders, [str(n) for n in orders]), (decibels, [theme.digits(v) for v in decibels]), DECIBELS,
                      "Harmonics, dB: sine filled, root open", "Harmonic, 1 the fundamental")
        turns = np.arange(0.0, 361, 90)
        self.cycle.set((turns, [f"{v:.0f}°" for v in turns]), ([0.5, 1.5, 2.5], ["", "", ""]), (0.0, 3.0),
                       "One cycle", "Phase of the signal")


class Series:
    """THD against the drive's amplitude at the cursor's frequency, both laws."""

    def __init__(self, inks):
        self.x_range = span(1, 3)
        self.axes = Axes(inks, "series_plot", self.x_range)
        plot = self.axes.plot
        self.lines = {law: source(f"series_{name}", x=[], amplitude=[], thd=[]) for law, name in
                      (("sine", "sine"), ("square-root", "root"))}
        for law, data in self.lines.items():
            dash = [] if law == "sine" else [6, 3]
            plot.add_glyph(data, inks(Line(x="x", y="thd", line_width=1.8, line_dash=dash), line_color="ink"))
        self.names, self.words = source(x=[], y=[], text=[]), source(x=[], y=[], text=[])
        # at the cursor's own frequency and the design's amplitude: a row for each law that can be driven
        self.exact = source("distortion_exact", law=[], frequency=[], thd=[])
        self.exact_parts = source("distortion_exact_parts", **{name: [] for name in PARTS})
        text(plot, inks, self.names, color="ink", text_align="right", x_offset=-4, y_offset=-4)
        text(plot, inks, self.words, color="muted", text_align="left", x_offset=6, y_offset=16)
        self.now = inks(Span(dimension="height", location=None, line_width=1.4, line_dash=[2, 3], syncable=False),
                        line_color="muted")
        plot.add_layout(self.now)

    def show(self, series, design):
        """Replace everything by an AmplitudeSeries'."""
        ends = [values[[0, -1]] for values in series.amplitude.values() if len(values)]
        low, high = (min(e[0] for e in ends), max(e[1] for e in ends)) if ends else (10.0, 1000.0)
        self.x_range.update(start=math.log10(low), end=math.log10(high) + 0.02)
        at = frequency_ticks(low, high)
        self.axes.set((np.log10(at), [theme.quantity(v, "V") for v in at]), percent_steps(*PERCENT), PERCENT,
                      f"THD against amplitude at {theme.hertz(series.frequency)}", "Amplitude of the drive, peak")
        names = {"x": [], "y": [], "text": []}
        for law, data in self.lines.items():
            x, thd = short(np.log10(np.maximum(series.amplitude[law], 1e-9))), log_percent(series.thd[law])
            data.data = {"x": x, "amplitude": short(series.amplitude[law]), "thd": thd}
            if len(x):
                i = len(x) - 1 if law == "sine" else len(x)//2
                names["x"].append(float(x[i]))
                names["y"].append(float(np.clip(thd[i], PERCENT[0], PERCENT[1] - 0.3)))
                names["text"].append(law)
        self.names.data = names
        self.exact.data = {"law": list(series.found), "frequency": [f.frequency[0] for f in series.found.values()],
                           "thd": [float(curve_columns(f)["thd"][0]) for f in series.found.values()]}
        parts = [part_columns(f) for f in series.found.values()]
        self.exact_parts.data = {name: short(np.concatenate([p[name] for p in parts])) if parts else [] for name in PARTS}
        self.now.location = math.log10(design.drive.amplitude) if design.drive.amplitude > 0 else None
        faults = [f"{law}: {fault}" for law, fault in series.faults.items() if fault]
        shown = lines_of(" ".join(faults))[:1]
        self.words.data = {"x": [self.x_range.start] * len(shown), "y": [PERCENT[1]] * len(shown), "text": shown}

    def clear(self):
        """Nothing to show yet."""
        for data in (*self.lines.values(), self.names, self.words, self.exact, self.exact_parts):
            data.data = {name: [] for name in data.data}
