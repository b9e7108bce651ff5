"""Sliders with typed entry, and the other controls, generated from the design's field metadata.

A group of controls is one component: its browser code (controls.js) draws native inputs, so that a page opens fast and
every input is the browser's own for pointer, keyboard and screen readers. What a person does comes in as moves, the newest
of each control, as soon as the last ones were answered: while a slider moves fast, the latest place wins.
"""

import json
from pathlib import Path
from typing import ClassVar

import panel as pn
import param
from bokeh.models import ColumnDataSource
from panel.custom import JSComponent

from app.state import BANDS, judged_fields, shown_fields
from app.values import (
    band_text,
    caution_text,
    from_slider,
    in_si,
    meaning_text,
    on_screen,
    on_slider,
    slider_scale,
    typed_band,
    typed_list,
    typed_number,
    value_text,
)
from app.wire import send

HERE = Path(__file__).parent
GROUP_CSS, COLUMN_CSS = ((HERE / name).read_text(encoding="utf-8") for name in ("controls.css", "column.css"))
FOLDED = ("air",)            # groups that begin folded
BAND_MEANING = "Frequencies shown, and the band that mean level, ripple and shares refer to. 10 Hz to 10 kHz."


class Group(JSComponent):
    """A heading that folds the controls below it.

    Parameters
    ----------
    state : app.state.DesignState
    group : str
        Name of the group.
    """

    title = param.String(constant=True)
    group = param.String(constant=True)
    open = param.Boolean(default=True)
    fields = param.List(doc="what does not change of each field: name, kind, label, meaning, scale, options")
    shown = param.Dict(doc="field name -> text, place, value, message, hidden, n (of the last move answered)")
    _esm = HERE / "controls.js"
    _stylesheets: ClassVar = [GROUP_CSS]

    def __init__(self, state, group):
        self._state, self._key = state, group
        self._blamed, self._typed, self._answered, self._written = {}, {}, {}, {}
        self._tell = None            # where `shown` goes once the page is alive: not through Panel
        self._build(group)
        super().__init__(title=group.capitalize(), group=group, open=group not in FOLDED, fields=self._specs(),
                         shown=self._now(), css_classes=["group", f"group-{group}"], margin=0,
                         sizing_mode="stretch_width")

    def go_live(self, tell):
        """Tell what the fields show by ``tell(group, shown)`` from now on."""
        self._tell, self._told = tell, self._now()
        if self._told != self.shown:
            tell(self.group, self._told)

    def say(self, name, text):
        """Show a message at one field (None: at none), and none at the others."""
        blamed = {name: text} if name and text else {}
        if blamed != self._blamed:
            self._blamed = blamed
            self._show()

    def _build(self, group):
        """Take up the group's fields and watch their values."""
        self._fields = {field.name: field for field in shown_fields()[group]}
        self._values = self._state.groups[group]
        self._values.param.watch(self._refresh, list(self._fields))

    def _specs(self):
        """What does not change of each field."""
        return [{"name": name, "kind": field.metadata["kind"], "label": field.metadata["label"],
                 "meaning": meaning_text(field), "options": list(field.metadata["choices"]),
                 **(slider_scale(field) if field.metadata["bounds"] else {})} for name, field in self._fields.items()]

    def _now(self):
        """What each field shows now."""
        return {name: {**self._field_now(name), "n": self._answered.get(name, 0),
                       "message": self._typed.get(name) or self._blamed.get(name, "")} for name in self._names()}

    def _names(self):
        return self._fields

    def _field_now(self, name):
        """Text, place or value of one field, and whether it has no effect and is left out."""
        field, value = self._fields[name], self._value(name)
        if field.metadata["kind"] in ("choice", "flag"):
            return {"value": value, "hidden": False}
        if name not in self._written or self._written[name][0] != value:     # writing a number takes a while
            place = on_slider(field, value) if field.metadata["bounds"] else None
            self._written[name] = value, {"text": value_text(field, value), "place": place,
                                          "caution": caution_text(f"{self._key}.{name}", value)}
        return {**self._written[name][1], "hidden": self._without_effect(name)}

    def _value(self, name):
        """The display value of one field."""
        return getattr(self._values, name)

    def _without_effect(self, name):
        """Whether a field changes nothing as the others stand: a volume behind an open film, a law's parameters."""
        if self.group == "rear" and name in ("volume", "loss_factor"):
            return self._values.kind == "open"
        return name == "law_parameters" and self._values.law == "neo-hookean"

    def _refresh(self, *_):
        """The state's values changed: messages about earlier typing go."""
        self._typed = {}
        self._show()

    def _show(self):
        """Send what each field shows."""
        if self._tell is None:
            self.shown = self._now()
        else:
            now = self._now()
            if now != self._told:
                self._told = now
                self._tell(self.group, now)

    def take(self, move):
        """A person's move: to the state, or a message at the field; the text or place is set right either way.

        Parameters
        ----------
        move : dict
            name, n (number of the move), place, text or value, released (whether the control was let go).
        """
        name = move["name"]
        self._answered[name] = move["n"]
        try:
            self._set(name, move)
        except ValueError as error:
            self._typed = {name: str(error)}
        else:
            self._typed = {}
        self._show()
        if move["released"]:
            self._state.release()

    def _set(self, name, move):
        """Set the state's value from a move; ValueError if what was typed is no value."""
        field = self._fields[name]
        if "place" in move:
            value = from_slider(field, move["place"])
        elif "text" in move and move["text"] == value_text(field, self._value(name)):
            return
        elif "text" in move and field.metadata["kind"] == "list":
            value = typed_list(move["text"], nested=name == "relaxation")
        elif "text" in move:
            value = typed_number(field, move["text"])
        else:
            value = move["value"]
        if field.metadata["kind"] == "count":
            if value != round(value):
                raise ValueError(f"{value:g} is not a whole number.")
            value = round(value)
        self._put(name, value)

    def _put(self, name, value):
        """A display value to the state."""
        setattr(self._values, name, value)


class Band(Group):
    """The band shown: typed, or one of a few."""

    def _build(self, group):
        self._state.param.watch(self._refresh, "band")

    def _specs(self):
        return [{"name": "band", "kind": "band", "label": "Band shown", "meaning": BAND_MEANING,
                 "options": [band_text(band) for band in BANDS]}]

    def _names(self):
        return ("band",)

    def _field_now(self, name):
        return {"text": band_text(self._state.band), "hidden": False}

    def _set(self, name, move):
        self._state.set_band(typed_band(move["text"]))


class JudgedBy(Group):
    """What the walls are judged by: no part of the design, so neither undone nor saved."""

    def _build(self, group):
        self._fields = {field.name: field for field in judged_fields()}
        self._state.param.watch(self._refresh, "judgement")

    def _value(self, name):
        return on_screen(self._fields[name], getattr(self._state.judgement, name))

    def _put(self, name, value):
        self._state.judge({name: in_si(self._fields[name], value)})


class Controls:
    """The column of all controls. ``answers`` is the source in which the browser is told what they show.

    Parameters
    ----------
    state : app.state.DesignState
    """

    def __init__(self, state):
        self.groups = {name: Group(state, name) for name in shown_fields()}
        self._all = {**self.groups, "band": Band(state, "band")}
        self._state, self._judged_by, self._live = state, None, False
        self._news, self._answering = {}, False
        self.answers = ColumnDataSource(data={"json": []}, name="answers", syncable=False)
        self.view = pn.Column(*self._all.values(), css_classes=["controls"], stylesheets=[COLUMN_CSS], margin=0)

    def connect(self, inbox):
        """Take a person's moves from an app.wire.Inbox."""
        inbox.on("moves", self._take)

    def go_live(self):
        """The browser has the controls: from now on what they show goes by the short way."""
        self._live = True
        for group in self._all.values():
            group.go_live(self._hear)

    def judge(self, here):
        """Put what the walls are judged by above the other controls, or take it away."""
        if here and self._judged_by is None:
            self._judged_by = self._all["judgement"] = JudgedBy(self._state, "judgement")
            if self._live:
                self._judged_by.go_live(self._hear)
        others = [control for control in self.view if control is not self._judged_by]
        self.view.objects = [self._judged_by, *others] if here else others

    def blame(self, key, text):
        """Show a message at one control, and none at the others.

        Parameters
        ----------
        key : str or None
            "group.name" of the control; None shows the message nowhere.
        text : str
        """
        at, _, name = (key or "").partition(".")
        for group, controls in self.groups.items():
            controls.say(name if group == at else None, text)

    def _take(self, moves):
        """Take moves and answer them all at once, whatever becomes of them."""
        self._answering = True
        try:
            for move in moves:
                self._all[move["group"]].take(move)
        finally:
            self._answering = False
            self._answer(answered=True)

    def _hear(self, group, shown):
        """What a group shows now: told with the answer under way, or soon, together with what else changes now."""
        soon = not self._news and not self._answering
        self._news[group] = shown
        if soon and self.answers.document is not None:
            self.answers.document.add_next_tick_callback(self._answer)

    def _answer(self, answered=False):
        """Tell the browser what changed."""
        if self._news or answered:
            send(self.answers, {"json": [json.dumps({"shown": self._news, "answered": answered})]})
            self._news = {}
