"""Controls are generated from the metadata; what a person does reaches the state, bad typing gets its message.

The browser's side is tested with a real browser in tests/browser.
"""

import dataclasses

import panel as pn
import panel_material_ui as pmui
import pytest
from panel.reactive import Syncable
from panel.util import edit_readonly

from app.controls import Controls
from app.main import INPUT_DELAY, ignore_busy, lower_input_delay
from app.state import DesignState
from app.values import on_slider
from engine.design import GROUPS, field_of


@pytest.fixture
def state(design, clock):
    return DesignState(design, clock)


@pytest.fixture
def controls(state):
    return Controls(state)


def move(controls, key, **what):
    """What the browser sends when a person moves a control."""
    group, _, name = key.partition(".")
    at = controls.groups[group]
    at.take({"name": name, "n": at._answered.get(name, 0) + 1, "released": True, **what})


def shown(controls, key):
    group, _, name = key.partition(".")
    return controls.groups[group].shown[name]


def test_every_computed_field_has_a_control_with_label_and_meaning(controls):
    for name, cls in GROUPS.items():
        specs = {spec["name"]: spec for spec in controls.groups[name].fields}
        fields = [field for field in dataclasses.fields(cls) if not field.metadata["later"]]
        assert list(specs) == [field.name for field in fields]
        for field in fields:
            assert specs[field.name]["label"] == field.metadata["label"]
            assert specs[field.name]["meaning"].startswith(field.metadata["meaning"])


def test_the_slider_moves_the_design(controls, state):
    place = on_slider(field_of("film.prestretch"), 1.3)
    move(controls, "film.prestretch", place=place)
    assert state.design.film.prestretch == 1.3
    assert shown(controls, "film.prestretch")["text"] == "1.30"


def test_a_logarithmic_slider_gives_round_values(controls, state):
    move(controls, "film.shear_modulus", place=on_slider(field_of("film.shear_modulus"), 412.345))
    assert state.design.film.shear_modulus == 412e3


def test_typing_with_a_unit(controls, state):
    move(controls, "drive.bias", text="2100 V")
    assert state.design.drive.bias == 2100.0
    assert shown(controls, "drive.bias")["text"] == "2.10 kV"


def test_bad_typing_gets_a_message_and_the_next_change_takes_it_away(controls, state, design):
    move(controls, "drive.bias", text="lots")
    assert "'lots' is no number" in shown(controls, "drive.bias")["message"]
    assert state.design == design
    move(controls, "drive.bias", text="2.0")
    assert shown(controls, "drive.bias")["message"] == ""


def test_out_of_bounds_typing_is_refused_by_the_engine(controls, state):
    move(controls, "film.prestretch", text="7")
    assert state.invalid.key == "film.prestretch"
    assert "allowed is 1 to 5" in state.invalid.text


def test_half_a_layer_is_refused(controls, state, design):
    move(controls, "film.layers", text="1.5")
    assert "whole number" in shown(controls, "film.layers")["message"]
    move(controls, "film.layers", text="3")
    assert state.design == design.with_values({"film.layers": 3})


def test_choice_flag_and_list(controls, state):
    move(controls, "rear.kind", value="open")
    move(controls, "air.load", value=False)
    move(controls, "film.relaxation", text="0.3 0.01; 0.1 0.5")
    assert state.design.rear.kind == "open"
    assert state.design.air.load is False
    assert state.design.film.relaxation == ((0.3, 0.01), (0.1, 0.5))
    move(controls, "film.relaxation", text="")
    assert state.design.film.relaxation == ()


def test_what_has_no_effect_is_left_out(controls):
    assert shown(controls, "film.law_parameters")["hidden"]
    assert not shown(controls, "rear.volume")["hidden"]
    move(controls, "rear.kind", value="open")
    move(controls, "film.law", value="yeoh")
    assert not shown(controls, "film.law_parameters")["hidden"]
    assert shown(controls, "film.law_parameters")["text"] == "-0.01 0.0002"
    assert shown(controls, "rear.volume")["hidden"]


def test_controls_follow_undo_and_opening(controls, state):
    move(controls, "film.prestretch", text="1.4")
    state.undo()
    assert shown(controls, "film.prestretch")["text"] == "1.25"
    state.open_sample("fern-label.toml")
    assert shown(controls, "geometry.frame_radius")["text"] == "25.0 mm"


def test_a_message_is_at_one_control_only(controls):
    controls.blame("drive.bias", "too much")
    controls.blame("film.prestretch", "slack")
    messages = [field["message"] for group in controls.groups.values() for field in group.shown.values()]
    assert [text for text in messages if text] == ["slack"]
    assert shown(controls, "film.prestretch")["message"] == "slack"
    controls.blame(None, "")
    assert not any(field["message"] for group in controls.groups.values() for field in group.shown.values())


def test_a_message_stays_while_other_controls_move(controls):
    """A rest state that is still missing is still said, whatever else in the group was moved."""
    controls.blame("film.prestretch", "slack")
    move(controls, "film.density", text="1100")
    assert shown(controls, "film.prestretch")["message"] == "slack"


def test_the_servers_input_delay_is_lowered(controls):
    """Panel's own delay (50 ms) is a private attribute: this fails when it disappears or is no longer what counts."""
    assert isinstance(Syncable.__dict__["_debounce"], int)
    lower_input_delay()
    assert controls.groups["film"]._debounce == INPUT_DELAY == 20


def test_the_frame_is_left_alone_while_the_server_is_busy():
    """Its busy mark changed twice for every move of a slider, each time at the cost of a look through all models."""
    frame = pmui.Page()
    ignore_busy(frame)
    seen = []
    frame.param.watch(seen.append, "busy")
    for busy in (True, False):
        with edit_readonly(pn.state):
            pn.state.busy = busy
    assert seen == []
