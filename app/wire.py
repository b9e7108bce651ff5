"""The page's own way over the connection: many changes of models in one parcel, a person's moves in one message.

Bokeh sends each column of each source as a message of its own, and Panel goes through all of the page's models for each
event: together half of the time between a slider and the painted plots. Here everything that one result changes goes as
one string and one array of float32, which the browser (parcel.js) puts where it belongs; and what the browser asks comes
as one small source. The models on the server's side change as ever.
"""

import json
import math
from contextlib import contextmanager

import numpy as np
import panel as pn
from bokeh.core.serialization import Buffer
from bokeh.models import BoxAnnotation, ColumnDataSource, Div, Plot, Range1d, Span
from bokeh.protocol.messages.patch_doc import patch_doc
from bokeh.util.serialization import make_id

PLAIN = (BoxAnnotation, ColumnDataSource, Div, Plot, Range1d, Span)    # models whose plain values a parcel can carry
SMALL = 48                                                             # numbers a column may have to go as text

__all__ = ["Inbox", "Outbox", "send"]


class Outbox:
    """What changes together goes in one message. ``model`` is the source that carries it; ``count`` numbers the parcels."""

    def __init__(self):
        self.model = ColumnDataSource(data={"json": [], "floats": [], "count": []}, name="parcel", syncable=False)
        self.count = 0

    @contextmanager
    def together(self):
        """Context whose changes are sent in one parcel when it ends; inside another such context, in that one's."""
        document = self.model.document
        if document is None or document.callbacks.hold_value is not None:
            yield
            return
        document.hold("collect")
        try:
            yield
        finally:
            self._send(document.callbacks)

    def _send(self, callbacks):
        """Send the events held: plain values in a parcel, anything else as Bokeh does."""
        held, callbacks._held_events, callbacks._hold = callbacks._held_events, [], None
        changed = {}
        for event in held:
            model, attribute = getattr(event, "model", None), getattr(event, "attr", None)
            if isinstance(model, PLAIN) and _is_plain(attribute, getattr(model, attribute)):
                changed.setdefault(model.id, (model, set()))[1].add(attribute)
            else:
                callbacks.trigger_on_change(event)
        if changed:
            self.count += 1
            values = {key: {name: getattr(model, name) for name in sorted(names)} for key, (model, names) in changed.items()}
            text, floats = packed(values)
            send(self.model, {"json": [text], "floats": [floats], "count": [self.count]})


def _is_plain(attribute, value):
    """Whether a property's value can go as JSON and float32 (colours are more than their text: not they)."""
    if attribute == "data":
        return True
    if attribute.endswith("color"):
        return False
    return value is None or isinstance(value, (str, bool, int, float)) or \
        (isinstance(value, dict) and all(isinstance(v, str) for v in value.values()))


def packed(values):
    """(JSON, float32 array) of {model id: {attribute: value}}.

    A long column of numbers stands in the JSON as {"at": first place in the array, "n": how many} and, for an image, "shape";
    a list of such columns as {"each": [...]}.
    """
    floats, length = [], 0

    def column(entries):
        nonlocal length
        if isinstance(entries, np.ndarray) and entries.dtype.kind in "fiu":
            if entries.ndim == 1 and len(entries) <= SMALL and (entries.dtype.kind != "f" or np.isfinite(entries).all()):
                return entries.tolist()
            floats.append(np.ascontiguousarray(entries, np.float32).ravel())
            place = {"at": length, "n": entries.size}
            length += entries.size
            return place if entries.ndim == 1 else {**place, "shape": entries.shape}
        if len(entries) and isinstance(entries[0], np.ndarray):
            return {"each": [column(entry) for entry in entries]}
        plain = [entry.item() if isinstance(entry, np.generic) else entry for entry in entries]
        if any(isinstance(entry, float) and not math.isfinite(entry) for entry in plain):
            return column(np.array(plain, float))
        return plain

    plain = {key: {name: {c: column(v) for c, v in value.items()} if name == "data" else value
                   for name, value in attributes.items()} for key, attributes in values.items()}
    text = json.dumps(plain, separators=(",", ":"), allow_nan=False)
    return text, np.concatenate(floats) if floats else np.zeros(0, np.float32)


def send(source, data):
    """Replace a source's data in the browser, with the plainest message that does it.

    For each message Bokeh writes down a reference to every model of the document, which takes as long as all the rest. The
    source has to be known to the browser; its data on the server's side stay as they were. Where there is no connection of
    that kind, they are set as ever.

    Parameters
    ----------
    source : bokeh.models.ColumnDataSource
    data : dict
        Columns of plain values, or of one float32 array.
    """
    session = getattr(getattr(source.document, "session_context", None), "session", None)
    if session is None or session._pending_writes is None:
        source.data = data
        return
    buffers, entries = [], []
    for name, column in data.items():
        if len(column) and isinstance(column[0], np.ndarray):
            buffers.append(Buffer(make_id(), column[0].tobytes()))
            column = [{"type": "ndarray", "array": {"type": "bytes", "data": {"id": buffers[-1].id}},
                       "shape": list(column[0].shape), "dtype": "float32", "order": "little"}]
        entries.append([name, column])
    event = {"kind": "ModelChanged", "model": {"id": source.id}, "attr": "data", "new": {"type": "map", "entries": entries}}
    for connection in session._subscribed_connections:
        message = patch_doc(patch_doc.create_header(), {}, {"events": [event]})
        message.add_buffers(*buffers)
        session._pending_writes.append(connection._socket.send_message(message))


class Inbox:
    """What the browser asks, by word. ``model`` is the source it comes in, in one message each."""

    def __init__(self):
        self.model = ColumnDataSource(data={"json": [], "count": []}, name="asked")
        self.model.on_change("data", self._heard)
        self._takers = {}

    def on(self, word, taker):
        """Call ``taker`` with the value of each message that has this word."""
        self._takers[word] = taker

    def _heard(self, attribute, old, new):
        for text in new["json"]:
            for word, value in json.loads(text).items():
                try:
                    self._takers[word](value)
                except Exception as error:      # told to the person and the terminal; the page lives on
                    if pn.config.exception_handler is None:
                        raise
                    pn.config.exception_handler(error)
