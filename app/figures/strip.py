"""Words around the plots: the status strip, the foot line and the table of what changed, as HTML from an Overview."""

from dataclasses import dataclass
from html import escape

from app.theme import band_words, decibel, hertz, percent, quantity

NEAR_BREAKDOWN, LOUD_DB = 0.8, 85.0
HIGH_VOLTAGE = ("High voltage can kill. Qualified people only, by the rules of the place; discharge and short-circuit "
                "before touching.")


@dataclass(frozen=True)
class Item:
    """One figure of the strip: value in large type, label under it, a warning or not."""

    value: str
    label: str
    warn: bool = False


def strip_items(overview):
    """The six figures of the strip."""
    figures = overview.key_figures
    ratio, slack = figures.breakdown_ratio, figures.least_stress <= 0
    breakdown = ("breaks down at the drive's peak" if ratio >= 1 else "of breakdown: close" if ratio > NEAR_BREAKDOWN
                 else "of breakdown")
    stress = quantity(figures.least_stress, "Pa")
    first = figures.first_break_up_frequency
    return (Item(percent(ratio), breakdown, ratio > NEAR_BREAKDOWN),
            Item("slack" if slack else "taut", f"least stress {stress}", slack),
            Item(quantity(figures.largest_stroke, "m", 2),
                 f"largest stroke, at {hertz(figures.largest_stroke_frequency)}"),
            Item(hertz(figures.pumping_frequency), "pumping"),
            Item("none" if first is None else hertz(first), "first break-up, in air"),
            Item(decibel(figures.mean_level_db), f"mean, {band_words(overview.band)}"))


def strip_html(overview, held=None):
    """The strip; under each figure the held design's, if there is one."""
    before = strip_items(held) if held else (None,) * 6
    return '<dl class="strip">' + "".join(_item(now, old) for now, old in zip(strip_items(overview), before,
                                                                              strict=True)) + "</dl>"


def _item(item, held):
    warn = ' class="warn"' if item.warn else ""
    before = f'<dd class="held">held {escape(held.value)}</dd>' if held else ""
    return f"<div{warn}><dd>{escape(item.value)}</dd><dt>{escape(item.label)}</dt>{before}</div>"


def foot_html(overview):
    """Under what assumptions all this holds, and the cautions."""
    response, design = overview.response, overview.design
    parts = ["mounted in a wall", "linear", "volts, pressures and strokes are peak values"]
    if response.estimate_above < overview.band[1]:
        parts.append(f"estimate above {hertz(response.estimate_above)}: the cone's depth is left out of the air load")
    if "invented" in design.note.lower():
        parts.append("invented data")
    cautions = [HIGH_VOLTAGE]
    loudest = float(response.level_db.max())
    if loudest > LOUD_DB:
        distance = quantity(design.listener.distance, "m")
        cautions.append(f"Loud: up to {decibel(loudest)} at {distance}; protect your hearing.")
    return (f'<p class="foot"><span>{escape(" · ".join(parts))}</span> '
            f'<span class="caution">{escape(" ".join(cautions))}</span></p>')


def changes_html(held, overview):
    """Table of the key figures: held, now, difference."""
    old, new = held.key_figures, overview.key_figures
    rows = [_row("Pumping, Hz", old.pumping_frequency, new.pumping_frequency),
            _row("First break-up, Hz", old.first_break_up_frequency, new.first_break_up_frequency),
            _row("Mean level, dB", old.mean_level_db, new.mean_level_db),
            _row("Ripple, dB", old.ripple_db, new.ripple_db),
            _row("Field / breakdown, %", old.breakdown_ratio, new.breakdown_ratio, 100),
            _row("Centre height, mm", old.centre_height, new.centre_height, 1000, 2)]
    head = "".join(f'<th scope="col">{word}</th>' for word in ("", "held", "now", "difference"))
    return (f'<table class="changes"><caption>Changed since <q>{escape(held.design.name)}</q> was held</caption>'
            f"<thead><tr>{head}</tr></thead><tbody>{''.join(rows)}</tbody></table>")


def _row(label, old, new, factor=1, places=1):
    """One figure in three cells, the difference between the printed values."""
    shown = [None if value is None else round(factor * value, places) for value in (old, new)]
    cells = ["none" if value is None else _fixed(value, places) for value in shown]
    cells.append("–" if None in shown else _fixed(shown[1] - shown[0], places, "+"))
    return f'<tr><th scope="row">{label}</th>' + "".join(f"<td>{cell}</td>" for cell in cells) + "</tr>"


def _fixed(value, places, sign=""):
    """A number with so many places; a difference that rounds to nothing has no sign."""
    text = f"{value:{sign}.{places}f}"
    return (text.lstrip("+-") if float(text) == 0 else text).replace("-", "−")
