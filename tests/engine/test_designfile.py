"""Design files and links: read with units, written back to the last bit, refused with words."""

import base64
import os
import tomllib
import tracemalloc
import zlib
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from engine import designfile
from engine.design import TYPICAL_LAW_PARAMETERS, Design, field_of, paths
from engine.designfile import dumps, from_bytes, from_link, load, loads, save, to_link
from engine.errors import InvalidDesign

SAMPLE = Path(__file__).parents[2] / "sample_designs" / "bench-back.toml"
TEXT = dumps(Design())


def random_design(rng):
    """A design anywhere inside the bounds, one value in four at a bound or a neighbour of it."""
    changes = {}
    for path in paths():
        about = field_of(path).metadata
        if about["later"] or about["kind"] not in ("number", "count"):
            continue
        low, high = about["bounds"]
        value = rng.uniform(low, high) if rng.random() < 0.5 else low + (high - low) * 10 ** rng.uniform(-12, 0)
        ends = (low, high, np.nextafter(low, high), np.nextafter(high, low), 5e-324 if low == 0 else low)
        value = rng.choice(ends) if rng.random() < 0.25 else round(value, 6) if rng.random() < 0.2 else value
        value = min(max(value, low), high)
        changes[path] = int(value) if about["kind"] == "count" else float(value)
    radii = sorted((changes["geometry.frame_radius"], changes["geometry.centre_radius"]))
    if radii[0] < radii[1] and radii[0] <= 0.15 and radii[1] >= 5e-3:
        changes["geometry.centre_radius"], changes["geometry.frame_radius"] = radii
    else:
        changes["geometry.centre_radius"], changes["geometry.frame_radius"] = 1e-3, 0.2
    law = rng.choice(list(TYPICAL_LAW_PARAMETERS))
    changes |= {"film.law": str(law), "rear.kind": str(rng.choice(["open", "sealed"])),
                "air.load": bool(rng.random() < 0.5),
                "film.law_parameters": tuple(v * rng.uniform(1.0, 3.0) for v in TYPICAL_LAW_PARAMETERS[law]),
                "film.relaxation": tuple((rng.random(), 10 ** rng.uniform(-7, 5)) for _ in range(rng.integers(4))),
                "name": "".join(map(chr, rng.integers(0x21, 0x7f, 12))),
                "note": str(rng.choice(["", "a\n\t\"b\"\\ µΩ ü 植"]))}
    return Design().with_values(changes)


def test_designs_come_back_to_the_last_bit_from_file_and_link(tmp_path):
    rng = np.random.default_rng(2024)
    path = tmp_path / "design.toml"
    for index in range(300):
        design = random_design(rng)
        assert loads(dumps(design)) == design, dumps(design)
        if index % 10 == 0:
            save(design, path)
            assert load(path) == design and from_link(to_link(design)) == design


def test_the_written_file_is_toml_with_units():
    """Read back with the standard library's TOML reader (TOML 1.0)."""
    tables = tomllib.loads(TEXT)
    assert tables["geometry"]["frame_radius"] == "50 mm" and tables["film"]["thickness"] == "100 µm"
    assert tables["film"]["prestretch"] == 1.25 and tables["film"]["layers"] == 1 and tables["air"]["load"] is True
    assert tables["drive"]["bias"] == "1.9 kV" and tables["air"]["temperature"] == "20 °C"
    sizes = {"geometry": 3, "film": 12, "electrodes": 5, "centre": 4, "rear": 4, "air": 4, "drive": 5, "listener": 2}
    assert {key: len(tables[key]) for key in sizes} == sizes


# Exact factors to the SI: SI Brochure (BIPM, 9th edition, tables 7 and 8); inch and pound: exact since 1959.
EXACT_FACTORS = {
    "geometry.frame_radius": {"mm": (1, 1000), "cm": (1, 100), "m": (1, 1), "inch": (254, 10000), "µm": (1, 10**6)},
    "film.thickness": {"um": (1, 10**6), "µm": (1, 10**6), "\u03bcm": (1, 10**6), "mm": (1, 1000), "nm": (1, 10**9)},
    "film.shear_modulus": {"MPa": (10**6, 1), "kPa": (1000, 1), "Pa": (1, 1), "N/mm^2": (10**6, 1), "bar": (10**5, 1)},
    "film.breakdown_field": {"V/µm": (10**6, 1), "kV/mm": (10**6, 1), "MV/m": (10**6, 1), "V / um": (10**6, 1)},
    "film.density": {"kg/m³": (1, 1), "g/cm**3": (1000, 1), "kg/m^3": (1, 1), "g/l": (1, 1)},
    "film.viscosity": {"Pa·s": (1, 1), "Pa*s": (1, 1), "Pa s": (1, 1), "mPa·s": (1, 1000)},
    "centre.mass": {"g": (1, 1000), "mg": (1, 10**6), "kg": (1, 1), "lb": (45359237, 10**8)},
    "centre.spring_rate": {"N/m": (1, 1), "N/mm": (1000, 1), "mN/mm": (1, 1), "kN/m": (1000, 1)},
    "rear.volume": {"l": (1, 1000), "L": (1, 1000), "ml": (1, 10**6), "cm³": (1, 10**6), "m**3": (1, 1)},
    "drive.bias": {"V": (1, 1), "kV": (1000, 1), "MV": (10**6, 1)},
    "air.relative_humidity": {"%": (1, 100), "percent": (1, 100)}}


@pytest.mark.parametrize("path", EXACT_FACTORS)
def test_quantities_are_the_float_nearest_to_their_exact_value(path):
    """Against rational arithmetic: float(Fraction) rounds correctly."""
    rng = np.random.default_rng(5)
    key, _, name = path.partition(".")
    low, high = (Fraction(bound) for bound in field_of(path).metadata["bounds"])
    for unit, factor in EXACT_FACTORS[path].items():
        for _ in range(5):
            exact = low + (high - low) * Fraction(int(rng.integers(100, 900)), 1000) / 2
            digits = f"{float(exact / Fraction(*factor)):.7f}"
            if float(digits) == 0.0:
                continue
            text = TEXT.replace(f"{name} = ", f"{name} = \"{digits} {unit}\" #", 1) if name != "thickness" else \
                TEXT.replace('thickness = "100 µm"', f'thickness = "{digits} {unit}"')
            text = text.replace('centre_radius = "12 mm"', 'centre_radius = "1 mm"')
            assert text != TEXT
            assert getattr(getattr(loads(text), key), name) == float(Fraction(digits) * Fraction(*factor))


@pytest.mark.parametrize(("written", "kelvin"), [
    ("20 degC", 293.15), ("20 °C", 293.15), ("293.15 K", 293.15), ("68 degF", 293.15),
    ("-20 °C", 253.15), ("50°C", 323.15)])
def test_temperatures_have_their_offset(written, kelvin):
    """Zero Celsius is 273.15 K (SI Brochure); 68 degrees Fahrenheit are 20 degrees Celsius by definition."""
    assert loads(TEXT.replace("20 °C", written)).air.temperature == pytest.approx(kelvin, rel=1e-15)


@pytest.mark.parametrize(("written", "radians"), [
    ('"90 deg"', np.pi / 2), ('"90°"', np.pi / 2), ('"30 °"', np.pi / 6), ('"0.5 rad"', 0.5), ('"500 mrad"', 0.5)])
def test_angles_have_their_unit(written, radians):
    assert loads(TEXT.replace('"0 °"', written)).listener.angle == pytest.approx(radians, rel=1e-15)


@pytest.mark.parametrize(("old", "new", "value"), [
    ("relaxation = []", 'relaxation = [[0.2, "15 ms"], [0.1, "2 min"]]',
     {"film.relaxation": ((0.2, 0.015), (0.1, 120.0))}),
    ("zones = [[0.0, 1.0, 1.0]]", "zones = []", {"electrodes.zones": ()}),
    ("layers = 1", "layers = 3.0", {"film.layers": 3}),
    ("density = \"1200", "density = \"+1.2e3", {}),
    ("prestretch = 1.25", "prestretch = \"1.25\"", {}),
    ("relative_humidity = \"50 %\"", "relative_humidity = 0.5", {}),
    ("amplitude = \"250 V\"", "amplitude = \"  0.25kV \"", {})])
def test_other_ways_to_write_a_value(old, new, value):
    assert old in TEXT
    assert loads(TEXT.replace(old, new)) == Design().with_values(value)


def test_keys_with_neutral_values_may_be_left_out():
    """The sample leaves out all of them; the design of the defaults has them neutral."""
    assert replace(load(SAMPLE), note="") == Design()
    lines = SAMPLE.read_text("utf-8").splitlines(keepends=True)
    optional = ("note", "layers", "[listener]", "distance")
    assert replace(loads("".join(line for line in lines if not line.startswith(optional)))) == Design()
    without_volume = TEXT.replace('kind = "sealed"\nvolume = "4 l"\n', 'kind = "open"\n')
    assert loads(without_volume) == Design().with_values({"rear.kind": "open"})


REQUIRED = [line.partition(" = ")[0] for line in SAMPLE.read_text("utf-8").splitlines()
            if " = " in line and not line.startswith(("note", "layers", "distance"))]


@pytest.mark.parametrize("index", range(len(REQUIRED)), ids=REQUIRED)
def test_every_other_key_is_missed(index):
    lines = SAMPLE.read_text("utf-8").splitlines()
    optional = ("note", "layers", "distance")
    del lines[[i for i, line in enumerate(lines) if " = " in line and not line.startswith(optional)][index]]
    with pytest.raises(InvalidDesign, match=rf"^garden\.toml: .*is missing.*Add a line such as {REQUIRED[index]} = "):
        loads("\n".join(lines), "garden.toml")


FRAME = 'frame_radius = "50 mm"'
FAULTS = {
    "wrong dimension": (FRAME, 'frame_radius = "50 kg"',
                        ["geometry.frame_radius", "50 kg", "dimension", "5 mm to 200 mm", "Write"]),
    "decibels": (FRAME, 'frame_radius = "50 dB"', ["unknown unit"]),
    "area for length": (FRAME, 'frame_radius = "50 mm²"', ["dimension"]),
    "angle times length": (FRAME, 'frame_radius = "0.05 m*rad"', ["dimension"]),
    "unit for a ratio": ("prestretch = 1.25", 'prestretch = "1.25 mm"', ["film.prestretch", "dimension", "1 to 5"]),
    "ratio for an angle": ('angle = "0 °"', 'angle = "10 %"', ["listener.angle", "dimension"]),
    "angle for a ratio": ("prestretch = 1.25", 'prestretch = "1.25 rad"', ["dimension"]),
    "no unit": (FRAME, "frame_radius = 50", ["geometry.frame_radius", "50", "without a unit", '"50 mm"']),
    "no unit in a text": (FRAME, 'frame_radius = "50"', ["without a unit", '"50 mm"']),
    "unknown unit": (FRAME, 'frame_radius = "50 mmm"', ["unknown unit", "mmm"]),
    "unit of code": (FRAME, 'frame_radius = "50 m.__class__"', ["unknown unit"]),
    "unit of a huge power": (FRAME, 'frame_radius = "50 m**9**9**9"', ["unknown unit"]),
    "unit divided by zero": (FRAME, 'frame_radius = "50 m/0"', ["unknown unit"]),
    "a sum": (FRAME, 'frame_radius = "50 mm + 3 mm"', ["unknown unit"]),
    "decimal comma": (FRAME, 'frame_radius = "0,05 m"', ["not a decimal number"]),
    "no number": (FRAME, 'frame_radius = "fifty mm"', ["fifty mm", "not a decimal number"]),
    "far too large": (FRAME, 'frame_radius = "1e999 m"', ["finite"]),
    "long text": (FRAME, f'frame_radius = "{"5" * 500} mm"', ["not a decimal number"]),
    "list for a number": (FRAME, "frame_radius = [50]", ["[50]", "not a decimal number"]),
    "table for a number": (FRAME, "frame_radius = {value = 50}", ["a table", "not a decimal number"]),
    "date for a word": ('law = "neo-hookean"', "law = 1979-05-27", ["film.law", "a date"]),
    "flag for a number": ("prestretch = 1.25", "prestretch = true", ["film.prestretch", "true"]),
    "not a number": ("prestretch = 1.25", "prestretch = nan", ["finite"]),
    "out of bounds": (FRAME, 'frame_radius = "0.3 m"',
                      ["geometry.frame_radius", "300 mm", "5 mm to 200 mm", "Lower it"]),
    "too thin": ('"100 µm"', '"4.999 um"', ["film.thickness", "4.999 µm", "5 µm to 500 µm", "Raise it"]),
    "centre too large": ('"12 mm"', '"50 mm"',
                         ["geometry.centre_radius", "geometry.frame_radius", "Make the centre smaller"]),
    "unknown key": ("prestretch = 1.25", "pre_stretch = 1.25",
                    ["film.pre_stretch", "did you mean 'film.prestretch'"]),
    "key of another table": ("prestretch = 1.25", "prestretch = 1.25\nspring_rate = 3",
                             ["did you mean 'centre.spring_rate'"]),
    "unknown key, none near": ("prestretch = 1.25", "prestretch = 1.25\nxyzzy = 3",
                               ["film.xyzzy", "thickness, layers"]),
    "unknown table": ("[rear]", "[raer]", ["raer", "did you mean 'rear'"]),
    "value for a table": ('name = "Bench back"\n\n[geometry]', 'name = "x"\nair = 3\n[geometry]', ["[air]"]),
    "duplicate key": ("prestretch = 1.25", "prestretch = 1.25\nprestretch = 1.3", ["line 16", "prestretch", "Remove"]),
    "duplicate table": ("[rear]", "[film]", ["line 35", "[film]", "Remove"]),
    "not TOML": (FRAME, "frame_radius = 50 mm", ["not TOML", "line 5", "frame_radius = 50 mm"]),
    "unclosed": ("relaxation = []", "relaxation = [", ["not TOML"]),
    "brackets without end": ("relaxation = []", "relaxation = " + "[" * 20000, ["TOML|nested"]),
    "endless number": ("prestretch = 1.25", "prestretch = " + "9" * 6000, ["digits"]),
    "large number": ("prestretch = 1.25", "prestretch = " + "9" * 600, ["film.prestretch"]),
    "word": ('"sealed"', '"closed"', ["rear.kind", '"open", "sealed"']),
    "flag": ("load = true", 'load = "yes"', ["air.load", "true or false"]),
    "pair without unit": ("relaxation = []", "relaxation = [[0.1, 5]]", ["film.relaxation", "without a unit"]),
    "triple for a pair": ("relaxation = []", 'relaxation = [[0.1, "5 s", 1]]', ["film.relaxation"]),
    "later physics": ('static_pressure = "0 Pa"', 'static_pressure = "9 Pa"', ["rear.static_pressure", "not computed"]),
    "unlimited in another word": ('current_limit = "none"', 'current_limit = "inf mA"', ["drive.current_limit", "not a"]),
    "name of numbers": ('name = "Bench back"', "name = 3", ["name", "quotes"])}


@pytest.mark.parametrize("fault", FAULTS)
def test_a_faulty_file_is_refused_with_words(fault):
    old, new, parts = FAULTS[fault]
    assert old in TEXT
    with pytest.raises(InvalidDesign) as caught:
        loads(TEXT.replace(old, new, 1), "garden.toml")
    words = str(caught.value)
    assert words.startswith("garden.toml: ") and len(words) < 500
    for part in parts:
        assert any(choice in words for choice in part.split("|")), words


def test_the_error_of_a_file_points_at_the_control():
    with pytest.raises(InvalidDesign) as caught:
        loads(TEXT.replace("prestretch = 1.25", "prestretch = 7"))
    assert (caught.value.key, caught.value.value, caught.value.bounds) == ("film.prestretch", 7.0, (1.0, 5.0))


@pytest.mark.parametrize(("data", "part"), [
    (b"", "is empty"), (b" \n\t\n", "is empty"), (b"#" * 65537, "larger than 64 kB"),
    (b"name = 'caf\xe9'", "line 1 is not UTF-8"),
    (TEXT.encode("utf-16"), "not UTF-8"), (b"\x00\x01\x02", "not TOML"), (b"%PDF-1.7\n", "not TOML"),
    (b"{}", "not TOML")])
def test_a_file_that_is_no_design_is_refused(tmp_path, data, part):
    path = tmp_path / "garden.toml"
    path.write_bytes(data)
    with pytest.raises(InvalidDesign, match=part) as caught:
        load(path)
    assert str(caught.value).startswith(str(path))
    with pytest.raises(InvalidDesign, match=f"^upload: .*{part}"):
        from_bytes(data, "upload")


def test_a_path_that_is_no_file_is_refused(tmp_path):
    for path, part in ((tmp_path, "folder"), (tmp_path / "none.toml", "no such file"), ("a\0b", "cannot be read"),
                       (os.devnull, "device"), (SAMPLE / "x", "cannot be read")):
        with pytest.raises(InvalidDesign, match=part):
            load(path)


def test_a_byte_order_mark_and_foreign_line_ends_are_read():
    assert from_bytes(b"\xef\xbb\xbf" + TEXT.replace("\n", "\r\n").encode()) == Design()


def test_damaged_files_and_links_end_in_a_design_or_in_words():
    """Random damage: whatever comes, nothing but InvalidDesign is raised. One letter in most notes does no harm."""
    rng = np.random.default_rng(7)
    text, link = dumps(Design(note="x" * 900)).encode(), to_link(Design())
    alphabet = b'0123456789eE.+-*/^"[]{}=#\n mkgVPas%\xc2\xb5_'
    outcomes = {True: 0, False: 0}
    for _ in range(300):
        data = bytearray(text)
        for place in rng.integers(0, len(data), rng.integers(1, 4)):
            data[place] = alphabet[rng.integers(len(alphabet))]
        letters = list(link)
        letters[rng.integers(len(letters))] = "AZaz09-_"[rng.integers(8)]
        for read in (lambda data=data: from_bytes(bytes(data)), lambda letters=letters: from_link("".join(letters))):
            try:
                outcomes[isinstance(read(), Design)] += 1
            except InvalidDesign:
                outcomes[False] += 1
    assert outcomes[True] > 20 and outcomes[False] > 300, outcomes


def test_no_unit_ends_in_anything_but_words():
    """Random units, decibels and half sentences among them."""
    rng = np.random.default_rng(3)
    parts = ["m", "mm", "kg", "°", "%", "°C", "degF", "/", "*", "**", "^", " ", "2", "-1", "³", "µ", "Ω", "·", "_",
             "dB", "rad", "lambda", "(", ")", "[length]", "per", "square", "delta_", "pi", "None"]
    for _ in range(300):
        unit = "".join(rng.choice(parts, rng.integers(1, 6)))
        try:
            loads(TEXT.replace('distance = "1 m"', f'distance = "1 {unit}"'))
        except InvalidDesign as error:
            assert "listener.distance" in str(error)


def test_a_link_is_short_and_safe_in_an_address():
    """Unreserved characters of RFC 3986, section 2.3, need no escaping."""
    link = to_link(Design(note="ü" * 50))
    unreserved = set("ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789-._~")
    assert set(link) <= unreserved and len(link) < 1200


def packed(data):
    """A link holding any bytes."""
    return "1" + base64.urlsafe_b64encode(zlib.compress(data, 9)).decode().rstrip("=")


@pytest.mark.parametrize("link", [
    "", "1", "1A", "2" + to_link(Design())[1:], to_link(Design())[:-6], to_link(Design()) + "AAAA", "ü", "1 2",
    "1" * 40000, packed(b"a" * 10**7), packed(b"name = 3"), packed(b""), packed(b"\xff"), "1" + "A" * 100],
    ids=lambda link: link[:12])
def test_a_link_that_is_none_is_refused(link):
    with pytest.raises(InvalidDesign, match=r"^the link: "):
        from_link(link)


def test_a_link_never_unpacks_to_more_than_a_file_may_hold():
    """Ten megabytes of one letter pack into ten kilobytes; tracemalloc sees what reading them takes."""
    link = packed(b"a" * 10**7)
    tracemalloc.start()
    with pytest.raises(InvalidDesign):
        from_link(link)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 10**6


def test_a_failed_save_leaves_the_old_file_whole(tmp_path, monkeypatch):
    path = tmp_path / "design.toml"
    save(Design(name="Old"), path)

    def fail(*_):
        raise OSError("disk full")

    monkeypatch.setattr(designfile.os, "fsync", fail)
    with pytest.raises(OSError, match="disk full"):
        save(Design(name="New"), path)
    monkeypatch.undo()
    assert load(path).name == "Old" and os.listdir(tmp_path) == ["design.toml"]
    save(Design(name="New"), str(path))
    assert load(str(path)).name == "New" and os.listdir(tmp_path) == ["design.toml"]


def test_saving_into_a_missing_folder_is_an_os_error(tmp_path):
    with pytest.raises(OSError, match="none"):
        save(Design(), tmp_path / "none" / "design.toml")
