"""Typed texts and places on sliders, against conversions done by hand."""

import math

import pytest

from app.values import (
    band_text,
    from_slider,
    list_text,
    on_slider,
    slider_scale,
    typed_band,
    typed_frequency,
    typed_list,
    typed_number,
    value_text,
)
from engine.design import field_of, paths

NUMBERS = [key for key in paths() if field_of(key).metadata["kind"] == "number" and not field_of(key).metadata["later"]]


@pytest.mark.parametrize(("key", "text", "shown"), [
    ("film.prestretch", "1.3", 1.3), ("film.prestretch", " 1,3 ", 1.3), ("geometry.frame_radius", "52", 52.0),
    ("geometry.frame_radius", "52 mm", 52.0), ("geometry.frame_radius", "0.052 m", 52.0),
    ("geometry.frame_radius", "52000um", 52.0), ("drive.bias", "1900 V", 1.9), ("drive.bias", "1.9kV", 1.9),
    ("drive.bias", "19e2 V", 1.9), ("air.relative_humidity", "45 %", 45.0), ("listener.angle", "30°", 30.0),
    ("centre.spring_free_height", "−20", -20.0)])
def test_typed_numbers(key, text, shown):
    assert typed_number(field_of(key), text) == pytest.approx(shown, rel=1e-12)


@pytest.mark.parametrize(("key", "text", "words"), [
    ("film.prestretch", "thick", "no number"), ("film.prestretch", "", "no number"), ("film.prestretch", "1.3.4", "no"),
    ("geometry.frame_radius", "52 kg", "'kg' is no unit"), ("film.prestretch", "1.3 mm", "no unit"),
    ("geometry.frame_radius", "nan", "no number"), ("geometry.frame_radius", "__import__('os')", "no number")])
def test_bad_typing_says_what_would_do(key, text, words):
    with pytest.raises(ValueError, match=words):
        typed_number(field_of(key), text)


@pytest.mark.parametrize("key", NUMBERS)
def test_slider_places_lead_back_to_their_values(key):
    """Every place gives a value within the bounds whose own place is the same, to a key press."""
    field = field_of(key)
    scale = slider_scale(field)
    for part in (0.0, 0.1, 0.37, 0.5, 0.93, 1.0):
        place = scale["start"] + part * (scale["end"] - scale["start"])
        value = from_slider(field, place)
        assert math.isfinite(value) if value is not None else key == "drive.current_limit" and part == 1.0
        assert on_slider(field, value) == pytest.approx(place, abs=scale["step"])


@pytest.mark.parametrize("key", NUMBERS)
def test_a_key_press_changes_the_value(key):
    """A step of the slider from anywhere must not round back to where it was."""
    field = field_of(key)
    scale = slider_scale(field)
    for part in (0.2, 0.5, 0.8):
        place = on_slider(field, from_slider(field, scale["start"] + part * (scale["end"] - scale["start"])))
        assert from_slider(field, place + scale["step"]) > from_slider(field, place)


def test_a_number_that_may_be_absent():
    field = field_of("drive.current_limit")
    end = slider_scale(field)["end"]
    assert from_slider(field, end) is None and on_slider(field, None) == end and value_text(field, None) == "none"
    assert typed_number(field, "None") is typed_number(field, "unlimited") is None
    assert typed_number(field, "250 mA") == 250.0 and from_slider(field, 0.0) == 0.0
    assert from_slider(field, 0.99 * end) < 1000.0
    with pytest.raises(ValueError, match="Type one such as 1 mA, or none"):
        typed_number(field, "inf")


def test_lists():
    assert typed_list("0.1, 0.2 3") == (0.1, 0.2, 3.0)
    assert typed_list("0.3 0.01; 0.1 0.5", nested=True) == ((0.3, 0.01), (0.1, 0.5))
    assert typed_list(" ", nested=True) == typed_list("") == ()
    assert typed_list(list_text(((0.3, 0.01),)), nested=True) == ((0.3, 0.01),)
    with pytest.raises(ValueError, match="blanks between"):
        typed_list("one two")


@pytest.mark.parametrize(("text", "band"), [
    ("20 Hz – 5 kHz", (20.0, 5e3)), ("20-5000", (20.0, 5e3)), ("100 to 10k", (100.0, 1e4)),
    ("0.1 kHz – 2 kHz", (100.0, 2e3))])
def test_bands(text, band):
    assert typed_band(text) == band
    assert typed_band(band_text(band)) == band


@pytest.mark.parametrize("text", ["", "20", "all", "1 2 3"])
def test_bad_bands(text):
    with pytest.raises(ValueError, match="two frequencies"):
        typed_band(text)


@pytest.mark.parametrize(("text", "frequency"), [
    ("440", 440.0), (" 69,3 Hz", 69.3), ("1.2 kHz", 1200.0), ("1k", 1000.0), (".1k", 100.0), ("440hz", 440.0)])
def test_frequencies(text, frequency):
    assert typed_frequency(text, (10.0, 7e3)) == pytest.approx(frequency)


@pytest.mark.parametrize(("text", "words"), [
    ("", "no frequency"), ("high", "'high' is no frequency"), ("1 2", "no frequency"), ("-5", "no frequency"),
    ("8 kHz", "8000 Hz is outside.*10 Hz to 7 kHz"), ("5", "5 Hz is outside")])
def test_bad_frequencies(text, words):
    with pytest.raises(ValueError, match=words):
        typed_frequency(text, (10.0, 7e3))
