"""The sample designs: what they are meant to be, and that they say that they are invented."""

from pathlib import Path

import pytest

from engine.designfile import dumps, load, loads

FOLDER = Path(__file__).parents[2] / "sample_designs"

# The values the designs were asked for with, in the units they were asked for in (the project's own specification):
# frame, centre radius mm; film um, prestretch; electrode um; centre g; spring N/m, mm; bias, amplitude V;
# breakdown V/um; rear l (None: open)
ASKED = {
    "fern-label": (25, 6, 50, 1.20, 4, 0.6, 60, 10, 1050, 180, 75, 0.4),
    "bench-back": (50, 12, 100, 1.25, 6, 2.0, 150, 20, 1900, 250, 70, 4),
    "palm-house-arch": (90, 22, 200, 1.25, 8, 6.0, 450, 26, 3500, 600, 65, None)}


@pytest.fixture(params=ASKED)
def sample(request):
    return request.param, load(FOLDER / f"{request.param}.toml")


def test_the_three_samples_are_there():
    assert sorted(path.stem for path in FOLDER.glob("*.toml")) == sorted(ASKED)


def test_samples_hold_the_values_asked_for(sample):
    name, design = sample
    film, centre, drive = design.film, design.centre, design.drive
    held = (design.geometry.frame_radius * 1e3, design.geometry.centre_radius * 1e3, film.thickness * 1e6,
            film.prestretch, design.electrodes.thickness * 1e6, centre.mass * 1e3, centre.spring_rate,
            centre.spring_free_height * 1e3, drive.bias, drive.amplitude, film.breakdown_field / 1e6)
    assert held == pytest.approx(ASKED[name][:-1], rel=1e-12)
    assert design.rear.kind == ("open" if ASKED[name][-1] is None else "sealed")
    assert design.rear.kind == "open" or design.rear.volume * 1e3 == pytest.approx(ASKED[name][-1], rel=1e-12)
    assert (film.law, film.shear_modulus, film.density, film.relative_permittivity, film.loss_factor, film.layers) == \
        ("neo-hookean", 350e3, 1080.0, 2.8, 0.08, 1)
    assert (centre.spring_loss_factor, design.electrodes.density, design.listener.distance) == (0.15, 1200.0, 1.0)


def test_samples_say_that_their_data_are_invented(sample):
    name, design = sample
    comments = [line for line in (FOLDER / f"{name}.toml").read_text("utf-8").splitlines() if line.startswith("#")]
    assert "invented data" in design.note and any("all its data are invented" in line for line in comments)


def test_samples_come_back_from_a_saved_file(sample):
    _, design = sample
    assert loads(dumps(design)) == design


def test_field_of_the_flat_film_is_well_below_breakdown(sample):
    """E = V lam^2/H of a flat film of constant volume (definition of the true field); a cone's is larger."""
    _, design = sample
    field = (design.drive.bias + design.drive.amplitude) * design.film.prestretch**2 / design.film.thickness
    assert 0.4 < field / design.film.breakdown_field < 0.6
