"""The design of a film loudspeaker: frozen groups of values in SI units, validated when they are made.

``field.metadata`` of every field says its label, unit, bounds, step and meaning (``engine.fields``); the design file,
the controls and the documentation are made from it. The defaults are the bench-back sample (invented data).
"""

import difflib
import math
from dataclasses import dataclass, fields, replace
from typing import ClassVar

from engine.checks import checked, named, refuse_later
from engine.fields import choice, count, exact_text, flag, invalid, listing, number, words
from engine.laws import LAW_PARAMETER_NAMES, LAWS, TYPICAL_LAW_PARAMETERS, parameter_fault

MOST_RELAXATION_TERMS = 12
RELAXATION_TIMES = (1e-7, 1e5)  # s
LONGEST_NAME, LONGEST_NOTE = 100, 2000
RIGHT_ANGLE = math.pi / 2


class _Group:
    """Checks every field by its metadata, then what the group's fields say about one another."""

    group: ClassVar[str]

    def __post_init__(self):
        for field in fields(self):
            key = f"{self.group}.{field.name}"
            object.__setattr__(self, field.name, checked(field, key, getattr(self, field.name)))
        self._check_together()
        for field in fields(self):
            refuse_later(field, f"{self.group}.{field.name}", getattr(self, field.name))

    def _check_together(self):
        """Raise InvalidDesign where single values are allowed but not together."""

    def _refuse(self, name, problem):
        """Raise InvalidDesign about one field, with its label and path before the words."""
        field = self.__dataclass_fields__[name]
        key = f"{self.group}.{name}"
        raise invalid(f"{named(field, key)} {problem}", key, getattr(self, name), field.metadata["bounds"])

    def _text(self, name):
        """The value of one field with its unit."""
        return exact_text(self.__dataclass_fields__[name], getattr(self, name))


def _is_row(row, length):
    return isinstance(row, tuple) and len(row) == length and all(isinstance(item, float) for item in row)


@dataclass(frozen=True)
class Geometry(_Group):
    """Outline in the frame plane."""

    group: ClassVar[str] = "geometry"
    layout: str = choice("cone", "Layout", ("cone", "dome"), "Film with a rigid centre (cone), or without one (dome)",
                         required=False, later=True)
    frame_radius: float = number(50e-3, "Frame radius", "mm", (5e-3, 200e-3), 0.5e-3,
                                 "Inner radius of the rigid frame the film is bonded to", scale="log")
    centre_radius: float = number(12e-3, "Centre radius", "mm", (0.5e-3, 150e-3), 0.5e-3,
                                  "Radius of the rigid disk bonded to the middle of the film", scale="log")

    def _check_together(self):
        if self.centre_radius >= self.frame_radius:
            self._refuse("centre_radius", f"is {self._text('centre_radius')}, not smaller than the frame radius "
                         f"(geometry.frame_radius) of {self._text('frame_radius')}. Make the centre smaller or the "
                         "frame larger.")


@dataclass(frozen=True)
class Film(_Group):
    """The elastomer film: material, layers, prestretch."""

    group: ClassVar[str] = "film"
    law: str = choice("neo-hookean", "Material law", LAWS, "Strain-energy law of the film")
    shear_modulus: float = number(350e3, "Shear modulus", "kPa", (5e3, 3e6), 1e3,
                                  "Small-strain shear modulus of the film, long-time value", scale="log")
    law_parameters: tuple = listing((), "Law parameters", "Ratios that shape the material law beyond its modulus")
    density: float = number(1080.0, "Film density", "kg/m³", (800.0, 2000.0), 10.0, "Mass density of the film")
    thickness: float = number(100e-6, "Film thickness", "µm", (5e-6, 500e-6), 1e-6,
                              "Thickness of one layer as bought, before it is stretched", scale="log")
    layers: int = count(1, "Layers", (1, 50), "Number of film layers driven in parallel", required=False)
    prestretch: float = number(1.25, "Prestretch", "", (1.0, 5.0), 0.01,
                               "Stretched length over free length, equal in both directions")
    relative_permittivity: float = number(2.8, "Relative permittivity", "", (1.5, 20.0), 0.1,
                                          "Permittivity of the film over that of vacuum")
    breakdown_field: float = number(70e6, "Breakdown field", "V/µm", (10e6, 500e6), 1e6,
                                    "True field at which the film as mounted breaks down")
    loss_factor: float = number(0.08, "Film loss factor", "", (0.0, 1.0), 0.01,
                                "Constant loss factor tan δ of the film, its default damping")
    viscosity: float = number(0.0, "Film viscosity", "Pa·s", (0.0, 5e3), 1.0,
                              "Damping that grows with frequency, added to the loss factor", scale="log", log_from=0.1,
                              required=False)
    relaxation: tuple = listing((), "Relaxation", "Pairs of modulus (over the shear modulus) and relaxation time",
                                columns=("", "s"))

    def _check_together(self):
        fault = parameter_fault(self.law, self.law_parameters, self.prestretch)
        if fault:
            self._refuse("law_parameters", fault)
        if len(self.relaxation) > MOST_RELAXATION_TERMS or not all(_is_row(term, 2) for term in self.relaxation):
            self._refuse("relaxation", f"must be a list of at most {MOST_RELAXATION_TERMS} pairs of modulus ratio and "
                         "relaxation time.")
        low, high = RELAXATION_TIMES
        for ratio, time in self.relaxation:
            if not (0.0 <= ratio <= 100.0 and low <= time <= high):
                self._refuse("relaxation", f"holds a ratio of {ratio:g} with a time of {time:g} s; allowed are "
                             f"ratios of 0 to 100 and times of {low:g} s to {high:g} s. Change or remove that pair.")


@dataclass(frozen=True)
class Electrodes(_Group):
    """Compliant electrode sheets, one more than there are layers."""

    group: ClassVar[str] = "electrodes"
    thickness: float = number(6e-6, "Electrode thickness", "µm", (0.0, 100e-6), 0.5e-6,
                              "Thickness of one electrode sheet on the stretched film")
    density: float = number(1200.0, "Electrode density", "kg/m³", (100.0, 22000.0), 10.0,
                            "Mass density of the electrodes")
    shear_modulus: float = number(0.0, "Electrode modulus", "kPa", (0.0, 1e8), 1e3,
                                  "Shear modulus of the electrodes, unstressed on the flat stretched film", scale="log",
                                  log_from=1e3, required=False)
    sheet_resistance: float = number(0.0, "Sheet resistance", "kΩ", (0.0, 1e9), 100.0,
                                     "Resistance of a square of one electrode sheet", scale="log", log_from=100.0,
                                     required=False)
    zones: tuple = listing(((0.0, 1.0, 1.0),), "Zones", "Electrode rings: inner, outer edge as fractions of the film's "
                           "width, and gain", columns=("", "", ""), later=True)

    def _check_together(self):
        for zone in self.zones:
            if not (_is_row(zone, 3) and 0.0 <= zone[0] < zone[1] <= 1.0 and abs(zone[2]) <= 1.0):
                self._refuse("zones", f"is {self._text('zones')}; each zone needs an inner edge, an outer edge (0 to "
                             "1, rising) and a gain (-1 to 1). Correct or remove that zone.")


@dataclass(frozen=True)
class Centre(_Group):
    """The rigid disk in the middle and the spring that holds it."""

    group: ClassVar[str] = "centre"
    mass: float = number(2e-3, "Centre mass", "g", (0.0, 0.1), 1e-4, "Mass of the rigid centre, its spring's share "
                         "included", scale="log", log_from=1e-4)
    spring_rate: float = number(150.0, "Spring rate", "N/m", (0.0, 1e5), 1.0,
                                "Stiffness of the spring under the centre", scale="log", log_from=1.0)
    spring_free_height: float = number(20e-3, "Spring free height", "mm", (-0.1, 0.2), 0.5e-3,
                                       "Height of the centre above the frame plane at which the spring is unloaded")
    spring_loss_factor: float = number(0.15, "Spring loss factor", "", (0.0, 1.0), 0.01, "Loss factor of the spring")


@dataclass(frozen=True)
class Rear(_Group):
    """What is behind the film."""

    group: ClassVar[str] = "rear"
    kind: str = choice("sealed", "Rear", ("open", "sealed"), "Open to the air, or a closed volume")
    volume: float = number(4e-3, "Rear volume", "l", (1e-6, 1.0), 1e-5, "Air volume behind the film, if sealed",
                           scale="log", required=("kind", "sealed"))
    loss_factor: float = number(0.0, "Rear loss factor", "", (0.0, 1.0), 0.01,
                                "Loss factor of the air volume, wadding included", required=False)
    static_pressure: float = number(0.0, "Static pressure", "Pa", (-2e4, 2e4), 10.0,
                                    "Overpressure that inflates a dome at zero bias", required=False, later=True)


@dataclass(frozen=True)
class Air(_Group):
    """The air around."""

    group: ClassVar[str] = "air"
    temperature: float = number(293.15, "Air temperature", "°C", (253.15, 323.15), 1.0, "Temperature of the air",
                                required=False)
    pressure: float = number(101325.0, "Air pressure", "kPa", (50e3, 110e3), 100.0, "Static pressure of the air",
                             required=False)
    relative_humidity: float = number(0.5, "Relative humidity", "%", (0.0, 1.0), 0.01, "Relative humidity of the air",
                                      required=False)
    load: bool = flag(True, "Air load", "Whether the air's mass and radiation act on the film", required=False)


@dataclass(frozen=True)
class Drive(_Group):
    """Bias and signal."""

    group: ClassVar[str] = "drive"
    bias: float = number(1900.0, "Bias", "kV", (0.0, 20e3), 10.0, "Constant voltage on the film")
    amplitude: float = number(250.0, "Amplitude", "V", (0.0, 10e3), 5.0, "Peak voltage of the signal", scale="log",
                              log_from=1.0)
    law: str = choice("sine", "Drive law", ("sine", "square-root"), "Signal added to the bias, or shaped so that the "
                      "squared voltage follows it", required=False)
    source_resistance: float = number(0.0, "Source resistance", "kΩ", (0.0, 1e9), 100.0,
                                      "Resistance between source and film", scale="log", log_from=100.0,
                                      required=False)
    current_limit: float | None = number(None, "Current limit", "mA", (0.0, 1.0), 1e-5, "Largest current the source "
                                         "delivers; none: unlimited", scale="log", log_from=1e-6, required=False)

    def _check_together(self):
        if self.law == "square-root" and self.amplitude > self.bias / 2:
            self._refuse("amplitude", f"is {self._text('amplitude')}, more than half the bias (drive.bias) of "
                         f"{self._text('bias')}, which the square-root law allows. Lower the amplitude, raise the bias "
                         "or choose the law \"sine\".")


@dataclass(frozen=True)
class Listener(_Group):
    """Where the sound is heard."""

    group: ClassVar[str] = "listener"
    distance: float = number(1.0, "Distance", "m", (0.01, 100.0), 0.01, "Distance of the listener from the middle of "
                             "the frame plane", scale="log", required=False)
    angle: float = number(0.0, "Angle", "°", (0.0, RIGHT_ANGLE), math.pi / 180, "Angle of the listener off the axis",
                          required=False)


GROUPS = {cls.group: cls for cls in (Geometry, Film, Electrodes, Centre, Rear, Air, Drive, Listener)}


@dataclass(frozen=True)
class Design:
    """One loudspeaker: its groups of values, validated; equal designs are equal to the last bit and hash alike.

    Raises
    ------
    InvalidDesign
        With the quantity, the received value, the allowed range and the remedy; its attributes ``key``
        ("film.prestretch"), ``value`` and ``bounds`` (SI, or None) say the same to a program.
    """

    name: str = "Bench back"
    geometry: Geometry = Geometry()
    film: Film = Film()
    electrodes: Electrodes = Electrodes()
    centre: Centre = Centre()
    rear: Rear = Rear()
    air: Air = Air()
    drive: Drive = Drive()
    listener: Listener = Listener()
    note: str = ""

    def __post_init__(self):
        _check_words("name", self.name, LONGEST_NAME, blank_allowed=False)
        _check_words("note", self.note, LONGEST_NOTE, blank_allowed=True)
        for key, cls in GROUPS.items():
            if not isinstance(getattr(self, key), cls):
                raise invalid(f"{key} is not a {cls.__name__}. Make it with {cls.__name__}(...).", key)

    def value(self, path):
        """SI value at a path such as ``"film.prestretch"``; InvalidDesign names the nearest one of an unknown path."""
        return getattr(*_resolve(self, path))

    def with_values(self, changes):
        """A changed, validated copy; ``changes`` maps paths to SI values (``{"film.prestretch": 1.3}``)."""
        by_owner = {}
        for path, value in changes.items():
            field_of(path)
            owner, _, name = path.rpartition(".")
            by_owner.setdefault(owner, {})[name] = value
        plain = by_owner.pop("", {})
        return replace(self, **plain, **{key: replace(getattr(self, key), **by_owner[key]) for key in by_owner})


def paths():
    """All paths of a design's values, "name" and "note" left out, in the order of the groups."""
    return tuple(f"{key}.{field.name}" for key, cls in GROUPS.items() for field in fields(cls))


def field_of(path):
    """The dataclass field at a path, with its metadata; InvalidDesign names the nearest one of an unknown path."""
    key, _, name = path.rpartition(".")
    owner = GROUPS.get(key) if key else Design
    field = owner.__dataclass_fields__.get(name) if owner else None
    if field is None or path not in (*paths(), "name", "note"):
        raise invalid(f"There is no {path!r} in a design{nearest(path, (*paths(), 'name', 'note'))}", path)
    return field


def nearest(word, known):
    """End of a message on an unknown word: "; did you mean ...?" with the nearest known one, "." if none is near."""
    group, _, end = str(word).lower().replace(" ", "_").replace("-", "_").rpartition(".")
    own = [other for other in known if other.rpartition(".")[0] == group]
    for candidates in (own, known):
        by_end = {other.rpartition(".")[2]: other for other in reversed(candidates)}
        for close in difflib.get_close_matches(end, by_end, 1, 0.6):
            return f"; did you mean {by_end[close]!r}?"
    return "."


def _resolve(design, path):
    """Owner and attribute name of a path."""
    field_of(path)
    key, _, name = path.rpartition(".")
    return (getattr(design, key) if key else design), name


def _check_words(key, text, longest, blank_allowed):
    """Raise InvalidDesign unless the text can be shown, stored and read back."""
    if not isinstance(text, str):
        raise invalid(f"{key} is {words(text)}, not a text. Give words in quotes.", key, text)
    if len(text) > longest:
        raise invalid(f"{key} has {len(text)} characters; allowed are {longest}. Shorten it.", key, text)
    if not blank_allowed and not text.strip():
        raise invalid(f"{key} is empty. Give the design a name.", key, text)
    if not all(c.isprintable() or (blank_allowed and c in "\n\t") for c in text):
        raise invalid(f"{key} holds a control character. Remove it.", key, text)


__all__ = ["GROUPS", "LAWS", "LAW_PARAMETER_NAMES", "TYPICAL_LAW_PARAMETERS", "Air", "Centre", "Design", "Drive",
           "Electrodes", "Film", "Geometry", "Listener", "Rear", "field_of", "nearest", "paths"]
