"""What a visitor has set: the design in display units, generated from the metadata; undo, hold, the band shown."""

import re
import time
from dataclasses import dataclass, fields, replace
from importlib import resources

import param

from app.values import in_si, on_screen
from engine import design as designs
from engine import designfile
from engine.errors import InvalidDesign
from engine.fields import at_slider_position, display_value, slider_position
from engine.limits import Judgement

DEFAULT_BAND = (20.0, 5e3)
BANDS = ((20.0, 2e3), DEFAULT_BAND, (20.0, 10e3), (100.0, 10e3))   # offered; others can be typed
SAMPLES = "sample_designs"    # the package of bundled designs
BAND_LIMITS = (10.0, 10e3)
NARROWEST_BAND = 1.25        # highest over lowest frequency
UNDO_STEPS = 200
SAME_STEP = 0.6              # s: a change of the same control so soon after its release belongs to the same step


@dataclass(frozen=True)
class Invalid:
    """Why the values on the controls make no design: in words, and the key of the control that caused it."""

    text: str
    key: str | None


def shown_fields():
    """Group name -> dataclass fields with a control, in order: those whose physics is computed."""
    shown = {name: [f for f in fields(cls) if not f.metadata["later"]] for name, cls in designs.GROUPS.items()}
    return {name: group for name, group in shown.items() if group}


def judged_fields():
    """The dataclass fields of a Judgement."""
    return fields(Judgement)


def _parameter(field):
    """The Param parameter of a design field, in its display unit."""
    about, words = field.metadata, {"label": field.metadata["label"], "doc": field.metadata["meaning"]}
    if about["kind"] in ("number", "count"):
        bounds = tuple(display_value(field, bound) for bound in about["bounds"])
        kind = param.Number if about["kind"] == "number" else param.Integer
        default = on_screen(field, field.default)
        return kind(default=default, softbounds=bounds, allow_None=default is None, **words)
    if about["kind"] == "choice":
        return param.Selector(default=field.default, objects=list(about["choices"]), **words)
    if about["kind"] == "flag":
        return param.Boolean(default=field.default, **words)
    return param.ClassSelector(default=field.default, class_=tuple, **words)


def _group_class(name, group):
    """The Param class of one group of the design."""
    parameters = {field.name: _parameter(field) for field in group}
    return type(f"{name.title()}Values", (param.Parameterized,), parameters)


GROUP_CLASSES = {name: _group_class(name, group) for name, group in shown_fields().items()}


class DesignState(param.Parameterized):
    """A design under way. `groups` holds the values on the controls, `design` the last valid design they made."""

    design = param.ClassSelector(class_=designs.Design, doc="the last valid design")
    invalid = param.ClassSelector(class_=Invalid, allow_None=True, doc="why the values set are no design, or None")
    held = param.ClassSelector(class_=designs.Design, allow_None=True, doc="the design held as a reference, or None")
    band = param.Tuple(default=DEFAULT_BAND, length=2, doc="(low, high) Hz shown")
    judgement = param.ClassSelector(class_=Judgement, default=Judgement(), doc="what the walls are judged by")
    can_undo = param.Boolean(default=False)
    can_redo = param.Boolean(default=False)
    dirty = param.Boolean(default=False, doc="whether the design differs from the file it was opened from or saved to")
    touched = param.String(default=None, allow_None=True, doc="key of the control moved last, None after opening")

    def __init__(self, design, clock=time.monotonic):
        super().__init__(design=design)
        self.groups = {name: cls() for name, cls in GROUP_CLASSES.items()}
        self._clock = clock
        self._pending = {}           # SI values that make no design yet, by key
        self._law_parameters = {}    # law -> the parameters it had last
        self._filling = False
        self._undo, self._redo = [], []
        self._step, self._released = None, None
        self._saved = design
        self._fill()
        for name, values in self.groups.items():
            values.param.watch(lambda *events, name=name: self._moved(name, events), list(shown_names(name)))

    def change(self, changes):
        """Take changed SI values by key; those that make no design wait, with `invalid` saying why."""
        key = next(iter(changes))
        if not self._same_step(key):
            self._remember()
        self._step, self._released = key, None
        pending = {**self._pending, **changes}
        values = {"touched": key}
        try:
            values.update(design=self.design.with_values(pending), invalid=None)
            self._pending = {}
        except InvalidDesign as error:
            values.update(invalid=self._blamed(str(error), key))
            self._pending = pending
        self.param.update(**values)
        self._look()

    def release(self):
        """The control was let go: the step ends here, unless the same control moves on at once."""
        self._released = self._clock()

    def place(self, key, value):
        """Put a number of the design (SI) at the nearest stop of its slider: a drag in a picture."""
        field = designs.field_of(key)
        group, _, name = key.partition(".")
        low, high = field.metadata["bounds"]
        position = slider_position(field, min(max(value, low), high))
        setattr(self.groups[group], name, on_screen(field, at_slider_position(field, position)))

    def judge(self, changes):
        """Judge the walls by other values (SI, by name); InvalidDesign says what is wrong with one."""
        self.judgement = replace(self.judgement, **changes)

    def rename(self, name):
        """Give the design another name; InvalidDesign if it cannot be one."""
        renamed = self.design.with_values({"name": name})
        if renamed != self.design:
            self._remember()
            self._step = None
            self.design = renamed
            self._look()

    def undo(self):
        """Back to the design before the last step."""
        self._go(self._undo, self._redo)

    def redo(self):
        """Forward again to the design the last undo left."""
        self._go(self._redo, self._undo)

    def open(self, design):
        """Begin with another design; undo leads back."""
        self._remember()
        self._saved = design
        self._show(design)

    def open_file(self, data, name):
        """Begin with the design of a file's bytes; InvalidDesign names the file, what is wrong and how to mend it."""
        self.open(designfile.from_bytes(data, name))

    def open_sample(self, name):
        """Begin with a bundled design (a name that `samples` gives)."""
        self.open_file(resources.files(SAMPLES).joinpath(name).read_bytes(), name)

    def open_link(self, text):
        """Begin with the design a link carries; InvalidDesign says what is wrong with it."""
        self.open(designfile.from_link(text))

    def save(self):
        """File name and text of the design as it is now, which counts as saved."""
        self._saved = self.design
        self._look()
        words = re.sub(r"[^a-z0-9]+", "-", self.design.name.lower()).strip("-")
        return f"{words or 'design'}.toml", designfile.dumps(self.design)

    def link(self):
        """The text by which a link carries the design."""
        return designfile.to_link(self.design)

    def set_band(self, band):
        """Show another band; ValueError says what is wrong with it."""
        low, high = (float(edge) for edge in band)
        least, most = BAND_LIMITS
        if not (least <= low and high <= most and high >= NARROWEST_BAND * low):
            raise ValueError(f"The band must lie within {least:g} Hz to {most / 1e3:g} kHz and rise by a quarter at "
                             "least, for example 20 Hz – 5 kHz.")
        self.band = (low, high)

    def _moved(self, name, events):
        """Controls of one group were moved: their display values become SI values."""
        if self._filling:
            return
        moved = {f"{name}.{event.name}": event.new for event in events}
        changes = {key: in_si(designs.field_of(key), shown) for key, shown in moved.items()}
        law = changes.get("film.law")
        if law is not None:
            self._law_parameters[self.design.film.law] = self.design.film.law_parameters
            changes["film.law_parameters"] = self._law_parameters.get(law, designs.TYPICAL_LAW_PARAMETERS[law])
        self.change(changes)
        if law is not None:
            self._fill()

    def _blamed(self, text, key):
        """The message at the control moved when it first appeared."""
        before = self.invalid
        return before if before is not None and before.text == text else Invalid(text, key)

    def _same_step(self, key):
        """Whether a change of this control continues the step under way."""
        if key != self._step:
            return False
        return self._released is None or self._clock() - self._released < SAME_STEP

    def _remember(self):
        """Put the design on the undo list, where a step begins."""
        if not self._undo or self._undo[-1] != self.design:
            self._undo = [*self._undo[1 - UNDO_STEPS:], self.design]
        self._redo = []

    def _go(self, source, target):
        """Take a design from one list, leaving the present one on the other."""
        while source and source[-1] == self.design and not self._pending:
            source.pop()
        if source:
            if source[-1] != self.design:
                target.append(self.design)
            self._show(source.pop())

    def _show(self, design):
        """Put a whole design on the controls."""
        self._pending, self._step = {}, None
        self.param.update(design=design, invalid=None, touched=None)
        self._fill()
        self._look()

    def _fill(self):
        """Set the controls' values from the design."""
        self._filling = True
        try:
            for name, values in self.groups.items():
                keys = {field: f"{name}.{field.name}" for field in shown_fields()[name]}
                values.param.update(**{field.name: on_screen(field, self._pending.get(key, self.design.value(key)))
                                       for field, key in keys.items()})
        finally:
            self._filling = False

    def _look(self):
        """Tell what can be undone and whether a file would differ."""
        self.param.update(can_undo=bool(self._pending) or any(design != self.design for design in self._undo),
                          can_redo=bool(self._redo), dirty=self.design != self._saved)


def samples():
    """Bundled designs: (file name, design's name), by file name."""
    files = sorted((f for f in resources.files(SAMPLES).iterdir() if f.name.endswith(".toml")), key=lambda f: f.name)
    return [(f.name, designfile.from_bytes(f.read_bytes(), f.name).name) for f in files]


def shown_names(group):
    """Names of the fields of a group that have a control."""
    return tuple(field.name for field in shown_fields()[group])
