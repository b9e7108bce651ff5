"""Margins, states, stored charge, power and cautions in words, as HTML from a LimitsView."""

from html import escape

from app.theme import decibel, digits, hertz, percent, quantity

CAUTIONS = (
    "Kilovolts can kill, also from a small source: current through the heart does it, not size.",
    "Film, cable and source stay charged after they are switched off, and a film can regain charge by itself.",
    "Before touching: switch off, discharge through a resistor, short-circuit, keep it shorted.",
    "Local rules and qualified people decide what may be built and switched on here. This page does not.")
FROM_MEMORY = "IEC 61010-1: 45 µC up to 15 kV, 350 mJ above; from memory, check the standard."


def verdict_html(view):
    """Everything the page of the limits says beside its plots."""
    parts = (_margins(view), _states(view), _stored(view), _power(view), _findings(view), _cautions())
    return '<div class="verdict">' + "".join(parts) + "</div>"


def _margins(view):
    rows = "".join(f"<p><b>{escape(name)}</b> {escape(said)}</p>" for name, said in margin_words(view))
    return f"<h3>Margins, safety factor {digits(view.judgement.safety)}</h3>{rows}"


def margin_words(view):
    """(wall, sentence) of each margin."""
    return [(margin.wall, margin_sentence(margin, view.design.drive)) for margin in view.margins]


def margin_sentence(margin, drive):
    """How far one wall allows amplitude and bias to go."""
    if margin.voltage is None:
        return "not reached up to 20 kV."
    now = quantity(drive.bias, "V")
    if not margin.largest_amplitude:
        loud = f"no amplitude is left at {now}"
    else:
        loud = f"amplitude up to {quantity(margin.largest_amplitude, 'V')} at {now}"
        if margin.level_db is not None:
            change = digits(margin.level_change_db, 2)
            loud += f": {decibel(margin.level_db)} mean, {'' if change.startswith('−') else '+'}{change} dB"
    if margin.largest_bias:
        high = f"bias up to {quantity(margin.largest_bias, 'V')} at {quantity(drive.amplitude, 'V')}"
    else:
        high = f"no bias holds {quantity(drive.amplitude, 'V')}"
    return f"at {quantity(margin.voltage, 'V')}; {loud}; {high}."


def _states(view):
    limit = view.design.film.breakdown_field
    cells = [("at rest", view.at_rest), ("slow peak", view.at_peak), ("worst", view.at_worst)]
    rows = ""
    for name, state in cells:
        at = state.frequency or (None,) * 3
        shown = (_cell(f"{digits(state.peak_field / 1e6)} V/µm", percent(state.peak_field / limit), at[0]),
                 _cell(quantity(state.least_stress, "Pa"), "", at[1]),
                 _cell(_stroke(state.stroke), "", at[2]))
        rows += f'<tr><th scope="row">{name}</th>' + "".join(f"<td>{cell}</td>" for cell in shown) + "</tr>"
    head = "".join(f'<th scope="col">{word}</th>' for word in ("", "peak field", "least stress", "stroke"))
    return ("<h3>Field, part of breakdown, stress, stroke</h3><p>At rest, at the peak of a drive slow against the "
            "resonances, and at the worst frequency in the band.</p>"
            f"<table><thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table>")


def _stroke(stroke):
    return "pulls in" if stroke is None else "0" if stroke == 0 else quantity(stroke, "m", 2)


def _cell(value, more, frequency):
    """A value, and under it in small type what belongs to it."""
    under = [text for text in (more, "" if frequency is None else hertz(frequency)) if text]
    return "<br>".join([escape(value), *(f"<small>{escape(text)}</small>" for text in under)])


def _stored(view):
    beyond = "above the limit of" if view.beyond_limit else "within"
    warn = ' class="warn"' if view.beyond_limit else ""
    return (f"<h3>Stored on the film</h3><p{warn}>{quantity(view.charge, 'C')}, {quantity(view.energy, 'J')} at the peak of "
            f"the drive: {beyond} {FROM_MEMORY} The source and its cables store more.</p>")


def _power(view):
    frequency, apparent, dissipated = view.worst_power
    return (f"<h3>Power</h3><p>{quantity(apparent, 'VA')} apparent, {quantity(dissipated, 'W')} dissipated at "
            f"{hertz(frequency)}, where it is largest.</p>")


def _findings(view):
    told = [finding.text for finding in (*view.response.findings, *view.excursion.findings)]
    return "<h3>Found</h3>" + "".join(f"<p>{escape(text)}</p>" for text in told) if told else ""


def _cautions():
    return '<h3>Cautions</h3><ul class="cautions">' + "".join(f"<li>{escape(text)}</li>" for text in CAUTIONS) + "</ul>"
