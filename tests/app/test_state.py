"""The state: display units from the metadata, undo by steps, invalid values that wait.

Expected numbers are unit conversions done by hand and by pint (a general-purpose units library); the rest follows from
the issue's words ("a drag is one step", "the plots stay at the last good state").
"""

import dataclasses

import pint
import pytest

from app.state import GROUP_CLASSES, DesignState, Invalid, samples
from engine.design import GROUPS, field_of
from engine.errors import InvalidDesign


@pytest.fixture
def state(design, clock):
    return DesignState(design, clock)


def test_every_computed_field_has_a_parameter_and_later_ones_have_none():
    for name, cls in GROUPS.items():
        shown = {field.name for field in dataclasses.fields(cls) if not field.metadata["later"]}
        assert set(GROUP_CLASSES[name].param) - {"name"} == shown
    assert "zones" not in GROUP_CLASSES["electrodes"].param or not field_of("electrodes.zones").metadata["later"]


@pytest.mark.parametrize(("key", "unit"), [
    ("geometry.frame_radius", "mm"), ("film.shear_modulus", "kPa"), ("film.thickness", "um"), ("rear.volume", "l"),
    ("centre.mass", "g"), ("drive.bias", "kV"), ("film.breakdown_field", "V/um"), ("listener.angle", "degree")])
def test_values_are_shown_in_their_unit(state, key, unit):
    """Against pint's own table of units."""
    registry = pint.UnitRegistry()
    group, name = key.split(".")
    base = registry(unit).to_base_units()
    assert getattr(state.groups[group], name) == pytest.approx(state.design.value(key) / base.magnitude, rel=1e-12)


def test_a_control_changes_only_its_own_value(state, design):
    state.groups["film"].prestretch = 1.3
    assert state.design == design.with_values({"film.prestretch": 1.3})
    assert state.touched == "film.prestretch"


def test_a_drag_is_one_step(state, design, clock):
    for prestretch in (1.26, 1.27, 1.28):
        state.groups["film"].prestretch = prestretch
        clock.now += 5
    state.release()
    state.undo()
    assert state.design == design
    assert not state.can_undo
    state.redo()
    assert state.design.film.prestretch == 1.28


def test_key_presses_close_together_are_one_step_and_apart_two(state, design, clock):
    for wait in (0.1, 0.1, 2.0):
        state.groups["film"].prestretch = state.groups["film"].prestretch + 0.01
        state.release()
        clock.now += wait
    state.groups["film"].prestretch = 1.5
    state.undo()
    assert state.design.film.prestretch == pytest.approx(1.28)
    state.undo()
    assert state.design == design


def test_another_control_begins_another_step(state, design):
    state.groups["film"].prestretch = 1.3
    state.groups["drive"].bias = 2.0
    state.undo()
    assert state.design == design.with_values({"film.prestretch": 1.3})
    assert state.groups["drive"].bias == 1.9


def test_a_new_step_ends_the_redo_list(state):
    state.groups["film"].prestretch = 1.3
    state.undo()
    assert state.can_redo
    state.groups["drive"].bias = 2.0
    assert not state.can_redo


def test_invalid_values_wait_at_their_control_and_the_design_stays(state, design):
    state.groups["geometry"].centre_radius = 60.0
    assert state.design == design
    assert state.invalid.key == "geometry.centre_radius"
    with pytest.raises(InvalidDesign) as refusal:
        design.with_values({"geometry.centre_radius": 0.06})
    assert state.invalid.text == str(refusal.value)
    state.groups["geometry"].frame_radius = 70.0
    assert state.invalid is None
    assert (state.design.geometry.centre_radius, state.design.geometry.frame_radius) == (0.06, 0.07)


def test_the_message_is_at_the_control_that_was_moved(state):
    """Lowering the frame below the centre is the frame's doing, though the rule is the centre's."""
    state.groups["geometry"].frame_radius = 11.0
    assert state.invalid.key == "geometry.frame_radius"
    invalid = state.invalid
    state.groups["film"].prestretch = 1.3
    assert state.invalid == invalid


def test_too_large_an_amplitude_for_the_square_root_law(state):
    state.groups["drive"].amplitude = 1000.0
    assert state.invalid is None
    state.groups["drive"].law = "square-root"
    assert state.invalid.key == "drive.law"
    assert "half the bias" in state.invalid.text
    state.groups["drive"].amplitude = 900.0
    assert state.invalid is None
    assert state.design.drive.law == "square-root"


def test_undo_takes_invalid_values_back(state, design):
    state.groups["geometry"].centre_radius = 60.0
    assert state.can_undo
    state.undo()
    assert state.invalid is None
    assert state.groups["geometry"].centre_radius == 12.0
    assert state.design == design


def test_a_law_brings_parameters_that_fit_it(state, design):
    state.groups["film"].law = "gent"
    assert state.invalid is None
    assert len(state.design.film.law_parameters) == 1
    state.groups["film"].law_parameters = (50.0,)
    state.groups["film"].law = "neo-hookean"
    state.groups["film"].law = "gent"
    assert state.design.film.law_parameters == (50.0,)
    for _ in range(4):
        state.undo()
    assert state.design == design


@pytest.mark.parametrize("name", [name for name, _ in samples()])
def test_a_design_survives_file_and_link(state, name):
    state.open_sample(name)
    opened = state.design
    assert not state.dirty
    filename, text = state.save()
    assert filename.endswith(".toml")
    state.open_file(text.encode(), filename)
    assert state.design == opened
    state.open_link(state.link())
    assert state.design == opened


def test_dirty_follows_the_file(state):
    state.groups["film"].prestretch = 1.3
    assert state.dirty
    state.save()
    assert not state.dirty
    state.undo()
    assert state.dirty


def test_opening_can_be_undone(state, design):
    state.open_sample("fern-label.toml")
    assert state.touched is None
    state.undo()
    assert state.design == design


@pytest.mark.parametrize("data", [b"", b"\xff\xfe", b"not toml", b"x" * 70000])
def test_a_bad_file_is_refused_by_name_and_changes_nothing(state, design, data):
    with pytest.raises(InvalidDesign, match="some-file"):
        state.open_file(data, "some-file.toml")
    assert state.design == design
    assert not state.can_undo


def test_an_untouched_design_is_the_same_to_the_last_bit(design):
    """Filling the controls must not send rounded values back."""
    odd = design.with_values({"geometry.frame_radius": 0.1 / 3, "drive.bias": 1900.0000000001})
    state = DesignState(odd)
    assert state.design == odd
    state.groups["film"].prestretch = 1.31
    assert state.design == odd.with_values({"film.prestretch": 1.31})


def test_every_value_goes_to_the_screen_and_back(state, design):
    for key in (f"{name}.{parameter}" for name, cls in GROUP_CLASSES.items() for parameter in cls.param
                if parameter != "name"):
        group, name = key.split(".")
        if field_of(key).metadata["kind"] == "number" and state.design.value(key) is not None:
            shown = getattr(state.groups[group], name)
            state.groups[group].param.update(**{name: shown * 1.0000001 + 1e-7})
            state.groups[group].param.update(**{name: shown})
            assert state.design.value(key) == design.value(key)


@pytest.mark.parametrize("band", [(5.0, 5e3), (20.0, 2e4), (1e3, 1.1e3), (5e3, 20.0), (float("nan"), 1e3)])
def test_a_band_that_cannot_be_shown_is_refused(state, band):
    with pytest.raises(ValueError, match="20 Hz – 5 kHz"):
        state.set_band(band)
    assert state.band == (20.0, 5e3)


def test_invalid_is_a_value():
    assert Invalid("text", "key") == Invalid("text", "key")
