"""The design: its values, their validation, and what its fields say of themselves."""

import dataclasses
import math
import pickle

import numpy as np
import pytest
import scipy.constants as const

from engine.design import GROUPS, TYPICAL_LAW_PARAMETERS, Design, Drive, Film, Geometry, field_of, paths
from engine.errors import InvalidDesign
from engine.fields import (
    UNITS,
    at_slider_position,
    display_value,
    exact_text,
    format_number,
    format_value,
    si_value,
    slider_position,
)

# The project's own limits, as the specification of the first page states them, in SI units.
SPECIFIED_BOUNDS = {
    "geometry.frame_radius": (5e-3, 200e-3), "geometry.centre_radius": (0.5e-3, 150e-3),
    "film.thickness": (5e-6, 500e-6), "film.layers": (1, 50),
    "film.prestretch": (1, 5), "film.shear_modulus": (5e3, 3e6), "film.density": (800, 2000),
    "film.relative_permittivity": (1.5, 20), "film.breakdown_field": (10e6, 500e6), "film.viscosity": (0, 5e3),
    "electrodes.thickness": (0, 100e-6), "centre.mass": (0, 100e-3), "centre.spring_rate": (0, 100e3),
    "centre.spring_free_height": (-100e-3, 200e-3), "rear.volume": (1e-6, 1), "drive.bias": (0, 20e3),
    "drive.amplitude": (0, 10e3), "listener.distance": (10e-3, 100), "listener.angle": (0, math.pi / 2)}
LATER = ("geometry.layout", "electrodes.zones", "rear.static_pressure")
BOUNDED = [path for path in paths() if field_of(path).metadata["bounds"]]
# What lets a single field reach its own bounds without breaking a rule between two fields.
ROOM = {"geometry.frame_radius": {"geometry.centre_radius": 0.5e-3},
        "geometry.centre_radius": {"geometry.frame_radius": 0.2}}


def refused(changes):
    """The error of a design with these changes."""
    with pytest.raises(InvalidDesign) as caught:
        Design().with_values(changes)
    return caught.value


@pytest.mark.parametrize("path", SPECIFIED_BOUNDS)
def test_bounds_are_the_specified_ones(path):
    assert field_of(path).metadata["bounds"] == SPECIFIED_BOUNDS[path]


@pytest.mark.parametrize("path", [path for path in BOUNDED if path not in LATER])
def test_bounds_are_inclusive_and_nothing_beyond_is_accepted(path):
    low, high = field_of(path).metadata["bounds"]
    room = ROOM.get(path, {})
    for value in (low, high):
        assert Design().with_values({**room, path: value}).value(path) == value
    is_count = field_of(path).metadata["kind"] == "count"
    for value in (low - 1, high + 1) if is_count else (np.nextafter(low, -math.inf), np.nextafter(high, math.inf)):
        error = refused({**room, path: value})
        assert (error.key, error.value, error.bounds) == (path, value, (low, high))


@pytest.mark.parametrize("path", BOUNDED)
@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, "1", True, 1j, [1.0], 10**400], ids=repr)
def test_only_finite_numbers_are_numbers(path, value):
    assert refused({path: value}).key == path


def test_a_message_names_quantity_value_range_and_remedy():
    words = str(refused({"film.thickness": 1e-3}))
    for part in ("Film thickness", "film.thickness", "1000 µm", "5 µm to 500 µm", "Lower it"):
        assert part in words


def test_centre_must_be_smaller_than_the_frame():
    for centre in (50e-3, 60e-3):
        error = refused({"geometry.centre_radius": centre})
        assert error.key == "geometry.centre_radius"
        for part in (f"{centre * 1e3:g} mm", "50 mm", "geometry.frame_radius", "Make the centre smaller"):
            assert part in str(error)
    assert refused({"geometry.frame_radius": 10e-3}).key == "geometry.centre_radius"


@pytest.mark.parametrize(("path", "value"), [
    ("geometry.layout", "dome"), ("electrodes.zones", ((0.0, 0.5, 1.0),)),
    ("electrodes.zones", ((0.0, 1.0, 0.5),)), ("electrodes.zones", ((0.0, 0.5, 1.0), (0.5, 1.0, 1.0))),
    ("rear.static_pressure", 10.0)])
def test_physics_of_later_issues_is_refused_in_plain_words(path, value):
    error = refused({path: value})
    assert error.key == path and "not computed yet" in str(error) and "Leave it at" in str(error)


def test_the_neutral_values_of_later_physics_are_accepted():
    neutral = {"geometry.layout": "cone", "electrodes.sheet_resistance": 0, "electrodes.zones": [[0, 1, 1]],
               "rear.static_pressure": 0, "drive.source_resistance": 0, "drive.current_limit": None}
    assert Design().with_values(neutral) == Design()
    assert Design().with_values({"electrodes.zones": ()}).value("electrodes.zones") == ()


def test_a_current_limit_of_zero_is_a_limit_and_none_is_none():
    assert Design().with_values({"drive.current_limit": 0}).drive.current_limit == 0.0
    assert Design().with_values({"drive.current_limit": None}).drive.current_limit is None
    for value in (math.inf, math.nan, -1e-6):
        assert "0 mA to 1000 mA" in str(refused({"drive.current_limit": value}))


def test_square_root_law_allows_half_the_bias_and_no_more():
    """The square root of V0^2 + 2 V0 v cos(wt) is real for v <= V0/2."""
    for bias, amplitude in ((1900.0, 950.0), (0.0, 0.0)):
        Drive(bias=bias, amplitude=amplitude, law="square-root")
        assert bias**2 - 2 * bias * amplitude >= 0
    error = refused({"drive.law": "square-root", "drive.amplitude": np.nextafter(950.0, 951.0)})
    assert error.key == "drive.amplitude" and "1.9 kV" in str(error)
    Drive(bias=100.0, amplitude=500.0, law="sine")


def test_gent_film_must_reach_its_prestretch():
    """I1 of an equibiaxial incompressible stretch is 2 lam^2 + lam^-4 (Gent 1996): 8.0625 at 2, so J_m > 5.0625."""
    Film(law="gent", law_parameters=(5.0626,), prestretch=2.0)
    with pytest.raises(InvalidDesign, match=r"5\.062.*Raise J_m") as caught:
        Film(law="gent", law_parameters=(5.0625,), prestretch=2.0)
    assert caught.value.key == "film.law_parameters"


@pytest.mark.parametrize(("law", "parameters"), [
    ("neo-hookean", (1.0,)), ("mooney-rivlin", ()), ("mooney-rivlin", (0.1, 0.2)), ("mooney-rivlin", (-1.0,)),
    ("gent", ()), ("gent", (-5.0,)), ("yeoh", (0.1,)), ("yeoh", (0.1, 0.1, 0.1)), ("ogden", ()), ("ogden", (1.0,)),
    ("ogden", (1.0, 2.0, 3.0)),
    ("ogden", (1.0, -2.0)), ("ogden", (1.0, 0.0)), ("ogden", (1.0, 50.0)), ("ogden", (1.0, 2.0, -1.0, 2.0)),
    ("ogden", (1.0, 2.0) * 7), ("yeoh", (1e9, 0.0)), ("gent", ((5.0,),))])
def test_law_parameters_of_wrong_count_or_without_stiffness_are_refused(law, parameters):
    """Small-strain moduli: 2 (C1 + C2) for Mooney-Rivlin, half the sum of mu_i alpha_i for Ogden (Ogden 1984)."""
    assert refused({"film.law": law, "film.law_parameters": parameters}).key == "film.law_parameters"


@pytest.mark.parametrize("law", TYPICAL_LAW_PARAMETERS)
def test_every_law_has_parameters_to_start_from(law):
    assert Film(law=law, law_parameters=TYPICAL_LAW_PARAMETERS[law]).law == law


@pytest.mark.parametrize("relaxation", [
    ((0.1,),), (0.1, 0.2), ((-0.1, 1.0),), ((0.1, 0.0),), ((0.1, 1e9),), ((0.1, 1.0),) * 13, "abc", 3.0, (("a", 1.0),)],
    ids=str)
def test_relaxation_is_a_list_of_pairs(relaxation):
    assert refused({"film.relaxation": relaxation}).key == "film.relaxation"


@pytest.mark.parametrize("zones", [
    ((0.5, 0.5, 1.0),), ((0.0, 1.1, 1.0),), ((0.0, 1.0, 2.0),), ((0.0, 1.0),), (1.0,)], ids=str)
def test_zones_are_rings_inside_the_film(zones):
    assert "inner edge" in str(refused({"electrodes.zones": zones}))


@pytest.mark.parametrize(("path", "value"), [
    ("film.law", "hooke"), ("film.law", 3), ("rear.kind", "closed"), ("drive.law", ""), ("air.load", 1),
    ("air.load", "yes"),
    ("film.layers", 1.5), ("name", ""), ("name", 3), ("name", "a\nb"), ("name", "x" * 101), ("note", "\x00"),
    ("note", "x" * 2001), ("name", "\ud800")])
def test_words_flags_and_counts_of_the_wrong_kind_are_refused(path, value):
    assert refused({path: value}).key == path


def test_values_come_back_in_their_own_types():
    design = Design().with_values({
        "film.layers": 3.0, "drive.bias": np.float32(2000), "film.relaxation": np.array([[0.1, 2]]),
        "air.load": np.bool_(False), "centre.spring_free_height": -0.0})
    assert type(design.film.layers) is int and type(design.drive.bias) is float and type(design.air.load) is bool
    assert design.film.relaxation == ((0.1, 2.0),) and math.copysign(1.0, design.centre.spring_free_height) == 1.0


def test_changed_copies_leave_the_original_and_hash_by_value():
    design = Design()
    changed = design.with_values({"film.prestretch": 1.3, "drive.bias": 2000, "name": "Other"})
    assert design == Design() and (changed.film.prestretch, changed.drive.bias, changed.name) == (1.3, 2000.0, "Other")
    back = changed.with_values({"film.prestretch": 1.25, "drive.bias": 1900.0, "name": "Bench back"})
    assert back == design and hash(back) == hash(design) and len({design, back, changed}) == 2
    assert pickle.loads(pickle.dumps(changed)) == changed
    with pytest.raises(dataclasses.FrozenInstanceError):
        design.film.prestretch = 2.0


def test_two_changes_that_only_fit_together_are_made_together():
    design = Design().with_values({"geometry.centre_radius": 100e-3, "geometry.frame_radius": 150e-3})
    assert design.geometry == Geometry(frame_radius=150e-3, centre_radius=100e-3)


@pytest.mark.parametrize(("wrong", "right"), [
    ("film.prestrech", "film.prestretch"), ("prestretch", "film.prestretch"),
    ("film.Spring-Rate", "centre.spring_rate"),
    ("rear.temperature", "air.temperature"), ("drive.biass", "drive.bias"), ("nam", "name"),
    ("electrodes.shear_moduls", "electrodes.shear_modulus")])
def test_an_unknown_path_names_the_nearest_right_one(wrong, right):
    for ask in (Design().value, lambda path: Design().with_values({path: 1.0}), field_of):
        with pytest.raises(InvalidDesign, match=f"did you mean '{right}'") as caught:
            ask(wrong)
        assert caught.value.key == wrong


@pytest.mark.parametrize("path", [
    "film", "", ".", "film.", ".prestretch", "film.group", "film.prestretch.x", "value"])
def test_what_is_no_value_is_an_unknown_path(path):
    assert "There is no" in str(refused({path: 1.0}))


def test_groups_must_be_groups():
    with pytest.raises(InvalidDesign, match="Make it with Film"):
        Design(film=Geometry())


@pytest.mark.parametrize("path", paths())
def test_every_field_says_what_it_is(path):
    field, about = field_of(path), field_of(path).metadata
    assert about["label"][0].isupper() and len(about["label"]) <= 24
    assert about["meaning"] and "\n" not in about["meaning"] and len(about["meaning"]) <= 100
    assert about["unit"] in UNITS and about["scale"] in ("linear", "log")
    if about["kind"] in ("number", "count"):
        low, high = about["bounds"]
        assert low < high and 0 < about["step"] < high - low
        assert field.default is None or low <= field.default <= high
    if about["scale"] == "log":
        assert 0 < about["log_from"] < about["bounds"][1] and about["bounds"][0] >= 0
    assert about["later"] == (path in LATER)


def test_labels_are_told_apart():
    labels = [field_of(path).metadata["label"] for path in paths()]
    assert len(set(labels)) == len(labels)
    assert list(GROUPS) == ["geometry", "film", "electrodes", "centre", "rear", "air", "drive", "listener"]


@pytest.mark.parametrize(("symbol", "factor"), [
    ("mm", const.milli), ("µm", const.micro), ("l", const.liter), ("g", const.gram), ("kPa", const.kilo),
    ("kV", const.kilo), ("V/µm", 1 / const.micro), ("mA", const.milli), ("kΩ", const.kilo), ("%", 1 / 100),
    ("°", const.degree), ("N/m", 1.0)])
def test_display_units_have_the_factors_of_the_si(symbol, factor):
    """Factors of the SI Brochure (BIPM, 9th edition, tables 7 and 8) as scipy.constants has them."""
    assert UNITS[symbol].si_value(3.7) == pytest.approx(3.7 * factor, rel=1e-15)
    assert UNITS[symbol].display(3.7 * factor) == pytest.approx(3.7, rel=1e-15)


def test_celsius_has_the_offset_of_the_si():
    assert UNITS["°C"].si_value(20.0) == const.zero_Celsius + 20.0
    assert UNITS["°C"].display(const.zero_Celsius) == 0.0


@pytest.mark.parametrize(("path", "value", "shown"), [
    ("geometry.frame_radius", 50e-3, "50.0 mm"), ("film.prestretch", 1.3, "1.30"),
    ("film.prestretch", 1.2345, "1.2345"),
    ("film.prestretch", 1.23456789, "1.23457"), ("rear.volume", 0.4e-3, "0.400 l"), ("drive.bias", 1900.0, "1.90 kV"),
    ("air.temperature", 293.15, "20 °C"), ("listener.angle", math.pi / 6, "30°"),
    ("centre.spring_rate", 0.0, "0 N/m"),
    ("film.shear_modulus", 3e6, "3000 kPa"), ("film.layers", 2, "2"), ("air.relative_humidity", 0.55, "55 %"),
    ("drive.current_limit", None, "none"), ("rear.kind", "open", '"open"'), ("air.load", True, "true")])
def test_values_are_shown_with_sensible_digits(path, value, shown):
    assert format_value(field_of(path), value) == shown


def test_typed_display_values_reach_the_same_float_as_the_literal():
    """What a person types in display units is the float nearest to the decimal number in SI units."""
    rng = np.random.default_rng(11)
    for _ in range(500):
        digits = int(rng.integers(5000, 200001))
        assert si_value(field_of("geometry.frame_radius"), float(f"{digits}e-3")) == float(f"{digits}e-6")
        assert display_value(field_of("geometry.frame_radius"), float(f"{digits}e-6")) == float(f"{digits}e-3")


@pytest.mark.parametrize("path", [path for path in BOUNDED if field_of(path).metadata["kind"] == "number"])
def test_sliders_run_from_bound_to_bound_and_rise(path):
    field = field_of(path)
    low, high = field.metadata["bounds"]
    values = [at_slider_position(field, position) for position in np.linspace(0.0, 1.0, 51)]
    assert values[0] == low and values[-1] == high and np.all(np.diff(values) > 0)
    for position, value in zip(np.linspace(0.0, 1.0, 51), values, strict=True):
        assert slider_position(field, value) == pytest.approx(position, abs=0.012)
    shown = [format_number(field, value) for value in values]
    assert max(map(len, shown)) <= 12


def test_a_message_shows_every_digit_that_matters():
    field = field_of("geometry.frame_radius")
    beyond = float(np.nextafter(0.2, 1.0))
    assert exact_text(field, beyond) != exact_text(field, 0.2) == "200 mm"
