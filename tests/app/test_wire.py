"""What changes together goes in one message, and arrives as it was: float32 for long columns, text for short ones.

Source: the float32 format (IEEE 754) and JSON themselves; the messages are Bokeh's own (general-purpose library).
"""

import json

import numpy as np
import pytest
from bokeh.document import Document
from bokeh.models import ColumnDataSource, Range1d, Row, Span

from app.wire import SMALL, Inbox, Outbox, packed, send


def unpacked(text, floats):
    """What the browser makes of a parcel, in Python."""
    def column(entries):
        if isinstance(entries, list):
            return entries
        if "each" in entries:
            return [column(entry) for entry in entries["each"]]
        return floats[entries["at"]:entries["at"] + entries["n"]].reshape(entries.get("shape", (-1,)))

    return {key: {name: {c: column(v) for c, v in value.items()} if name == "data" else value
                  for name, value in attributes.items()} for key, attributes in json.loads(text).items()}


def test_columns_of_all_kinds_arrive():
    rng = np.random.default_rng(7)
    long, image, gaps = rng.normal(size=500).astype(np.float32), rng.normal(size=(3, 70)).astype(np.float32), np.full(9, np.nan)
    data = {"long": long, "image": [image], "lines": [long[:60], long[60:90]], "gaps": gaps, "few": np.arange(4),
            "words": ["a", "b"], "none": [None, 1.5], "own": [np.float64(2.5)], "empty": [], "lack": [1.0, float("nan")]}
    values = {"a": {"data": data, "visible": True}, "b": {"start": 1.25}}
    text, floats = packed(values)
    back = unpacked(text, floats)
    assert floats.dtype == np.float32 and back["b"] == {"start": 1.25} and back["a"]["visible"] is True
    found = back["a"]["data"]
    np.testing.assert_array_equal(found["long"], long)
    np.testing.assert_array_equal(found["image"][0], image)
    np.testing.assert_array_equal(found["lines"][0], long[:60])
    assert list(found["lines"][1]) == long[60:90].tolist() and np.isnan(found["gaps"]).all()
    assert found["few"] == [0, 1, 2, 3] and found["words"] == ["a", "b"] and found["none"] == [None, 1.5]
    assert found["own"] == [2.5] and found["empty"] == [] and len(long) > SMALL
    assert found["lack"][0] == 1 and np.isnan(found["lack"][1])


@pytest.fixture
def page():
    """Outbox, source, range, span, a list of the document's events."""
    outbox, source, axis, line = Outbox(), ColumnDataSource(data={"x": []}), Range1d(), Span(dimension="height")
    document, events = Document(), []
    for model in (outbox.model, source, axis, line):
        document.add_root(Row(tags=[model]))
    document.on_change(events.append)
    return outbox, source, axis, line, events


def test_what_changes_together_is_one_event(page):
    outbox, source, axis, line, events = page
    with outbox.together():
        source.data = {"x": np.arange(100.0)}
        with outbox.together():
            axis.end = 5
            source.data = {"x": np.arange(200.0)}
        line.line_color = "#123456"
    assert [event.model for event in events] == [line, outbox.model]       # a colour goes Bokeh's way
    back = unpacked(outbox.model.data["json"][0], outbox.model.data["floats"][0])
    assert back[axis.id] == {"end": 5} and len(back[source.id]["data"]["x"]) == 200
    assert outbox.count == 1 == outbox.model.data["count"][0]
    assert axis.end == 5 and len(source.data["x"]) == 200                  # the server's models have it too
    axis.end = 6
    assert events[-1].model is axis                                        # afterwards all is as before


def test_a_failure_inside_sends_what_was_changed_and_is_not_hidden(page):
    outbox, _, axis, _, events = page
    with pytest.raises(ZeroDivisionError), outbox.together():
        axis.end = 7
        _ = 1 / 0
    assert [event.model for event in events] == [outbox.model]
    axis.end = 8
    assert events[-1].model is axis


def test_nothing_changed_sends_nothing(page):
    outbox, *_, events = page
    with outbox.together():
        pass
    assert events == [] and outbox.count == 0


def test_without_a_connection_the_source_itself_is_set():
    source = ColumnDataSource(data={"json": []})
    send(source, {"json": ["words"]})
    assert source.data["json"] == ["words"]


def test_the_inbox_hears_each_word():
    inbox, heard = Inbox(), []
    inbox.on("painted", heard.append)
    inbox.on("moves", heard.extend)
    inbox.model.data = {"json": ['{"painted": 3, "moves": ["a", "b"]}'], "count": [1]}
    assert heard == [3, "a", "b"]
