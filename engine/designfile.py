"""Design files and links: a design as a text that people read, and back to the last bit.

A design file is TOML 1.0: ``name``, an optional ``note``, and one table per group of the design. A value with a
dimension is a text of number and unit in any unit of its dimension ("52 mm", "2.4 kV", "0.31 MPa", "90 um", "20 degC",
"50 %"), a ratio is a plain number, a choice is a word, yes or no is ``true`` or ``false``, no current limit is
"none". ``film.law_parameters`` is a list of numbers, ``film.relaxation`` a list of pairs ``[0.2, "15 ms"]``,
``electrodes.zones`` a list of ``[inner, outer, gain]``.

These keys may be left out and then take their neutral values: ``geometry.layout``, ``film.layers``,
``film.law_parameters``, ``film.viscosity``, ``film.relaxation``, ``electrodes.shear_modulus``,
``electrodes.sheet_resistance``, ``electrodes.zones``, ``rear.volume`` (if open), ``rear.loss_factor``,
``rear.static_pressure``, the whole of ``air``, ``drive.law``, ``drive.source_resistance``, ``drive.current_limit``, the
whole of ``listener``. All others must be there.
"""

import base64
import binascii
import os
import re
import stat
import tempfile
import tomllib
import zlib
from dataclasses import fields
from decimal import Decimal
from functools import cache

import pint

from engine.checks import named
from engine.design import GROUPS, Design, nearest, paths
from engine.errors import InvalidDesign
from engine.fields import UNITS, bounds_text, exact_text, invalid, words

LONGEST_QUANTITY = 100     # characters
LARGEST_FILE = 64 * 1024   # bytes
LONGEST_LINK = 32 * 1024   # characters
LINK_VERSION = "1"
NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?"
NUMBER_AND_UNIT = re.compile(rf"\s*({NUMBER})\s*((?:[^\s,.0-9].*?)?)\s*")
# what may reach the units library: names, small powers, products, quotients; no sums and no large powers
UNIT_NAME = r"(?:[°%]?[^\W\d]+|[°%])(?:\s*(?:\*\*|\^)\s*-?[1-9])?"
UNIT_TEXT = re.compile(rf"(?:{UNIT_NAME}(?:\s*[*/·⋅ ]\s*{UNIT_NAME}){{0,5}})?")


def load(path):
    """Design in the file at ``path``; InvalidDesign names the file, the key, the value, the range and the remedy."""
    source = str(path)
    try:
        is_file = stat.S_ISREG(os.stat(path).st_mode)
        data = _head(path) if is_file else b""
    except FileNotFoundError:
        raise InvalidDesign(f"{source}: there is no such file. Check the name and the folder.") from None
    except (OSError, ValueError) as error:
        raise InvalidDesign(f"{source}: cannot be read ({error}). Check the name and your right to read it.") from None
    if not is_file:
        raise InvalidDesign(f"{source}: is a folder or a device, not a file. Name a design file.")
    return from_bytes(data, source)


def from_bytes(data, source="the design file"):
    """Design in the bytes of a file, such as an upload; ``source`` is what messages call it."""
    if len(data) > LARGEST_FILE:
        raise InvalidDesign(f"{source}: is larger than {LARGEST_FILE // 1024} kB, which no design file is. "
                            "Choose a design file.")
    try:
        return loads(data.decode("utf-8-sig"), source)
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InvalidDesign(f"{source}: line {line} is not UTF-8 text. Save the file as UTF-8.") from None


def loads(text, source="the design file"):
    """Design in the text of a design file; ``source`` is what messages call it."""
    if not text.strip():
        raise InvalidDesign(f"{source}: is empty. Write a design into it, or save one from the page.")
    if len(text) > LARGEST_FILE:
        raise InvalidDesign(f"{source}: is larger than {LARGEST_FILE // 1024} kB, which no design file is.")
    tables = _parsed(text, source)
    try:
        return _design(tables)
    except InvalidDesign as error:
        attributes = vars(error)
        about = [attributes.get(name) for name in ("key", "value", "bounds")]
        raise invalid(f"{source}: {error}", *about) from None


def dumps(design):
    """Text of the design file of a design; ``loads`` gives back an equal design."""
    lines = [f"name = {_quoted(design.name)}"]
    if design.note:
        lines.append(f"note = {_quoted(design.note)}")
    for key, cls in GROUPS.items():
        lines += ["", f"[{key}]"]
        group = getattr(design, key)
        lines += [f"{field.name} = {_written(field, getattr(group, field.name))}" for field in fields(cls)]
    return "\n".join(lines) + "\n"


def save(design, path):
    """Write a design to the file at ``path``, whole or not at all; OSError if the folder cannot be written."""
    target = os.path.realpath(path)
    handle, temporary = tempfile.mkstemp(dir=os.path.dirname(target), prefix=".", suffix=".part")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(dumps(design).encode())
            file.flush()
            os.fsync(file.fileno())
        os.chmod(temporary, stat.S_IMODE(os.stat(target).st_mode) if os.path.exists(target) else 0o644)
        os.replace(temporary, target)
    except BaseException:
        os.unlink(temporary)
        raise


def to_link(design):
    """Short text of a design that fits into an address: letters, digits, "-" and "_" only."""
    packed = zlib.compress(dumps(design).encode(), 9)
    return LINK_VERSION + base64.urlsafe_b64encode(packed).decode().rstrip("=")


def from_link(text):
    """Design in a text made by ``to_link``; InvalidDesign if it is damaged, too long or holds no valid design."""
    broken = "the link: is damaged or cut short. Copy the whole link again."
    if len(text) > LONGEST_LINK:
        raise InvalidDesign(f"the link: is longer than {LONGEST_LINK} characters, which no design is.")
    if not re.fullmatch(LINK_VERSION + r"[A-Za-z0-9_-]+", text):
        raise InvalidDesign(broken)
    unpacker = zlib.decompressobj()
    try:
        packed = base64.urlsafe_b64decode(text[1:] + "=" * (-len(text[1:]) % 4))
        data = unpacker.decompress(packed, LARGEST_FILE)  # never more than this, whatever the link claims
    except (binascii.Error, zlib.error):
        raise InvalidDesign(broken) from None
    if not unpacker.eof or unpacker.unused_data:
        raise InvalidDesign(broken)
    return from_bytes(data, "the link")


@cache
def _registry():
    """The units library's registry, made once at first use; decimal, so "52 mm" is the float nearest 0.052 m."""
    return pint.UnitRegistry(non_int_type=Decimal, preprocessors=[lambda text: re.sub("[·⋅]", "*", text)])


def _head(path):
    """The file's bytes, one more than allowed at most."""
    with open(path, "rb") as file:
        return file.read(LARGEST_FILE + 1)


def _parsed(text, source):
    """The TOML tables of a text."""
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise InvalidDesign(f"{source}: is not a design file: brackets are nested too deep.") from None
    except ValueError as error:
        if not isinstance(error, tomllib.TOMLDecodeError):
            raise InvalidDesign(f"{source}: holds a number of thousands of digits. Shorten it.") from None
        place = re.search(r"line (\d+)", str(error))
        number = int(place[1]) if place else text.rstrip().count("\n") + 1
        line = text.splitlines()[number - 1].strip()[:60] if number <= len(text.splitlines()) else ""
        if "overwrite" in str(error) or "twice" in str(error):
            raise InvalidDesign(f"{source}: line {number} gives a key that was given before ({line}). Remove one of "
                                "them.") from None
        reason = str(error).split(" (at ")[0]
        raise InvalidDesign(f"{source}: is not TOML, line {number} ({line}): {reason}. Correct that line.") from None


def _design(tables):
    """Design made of the parsed tables."""
    for key in tables:
        if key not in (*GROUPS, "name", "note"):
            raise invalid(f"{key} is not known here{nearest(key, (*GROUPS, 'name', 'note'))}", key)
    for key, cls in GROUPS.items():
        _check_known(key, cls, tables.get(key, {}))
    if "name" not in tables:
        raise invalid("name is missing. Add a line such as name = \"Bench back\" at the top.", "name")
    groups = {key: _group(key, cls, tables.get(key, {})) for key, cls in GROUPS.items()}
    return Design(name=tables["name"], note=tables.get("note", ""), **groups)


def _check_known(key, cls, table):
    """Raise InvalidDesign for the first key of a group's table that is none of its fields: a misspelt one is missing too."""
    if not isinstance(table, dict):
        raise invalid(f"{key} is a value, but must be a table. Write [{key}] and its values below.", key)
    known = [field.name for field in fields(cls)]
    for name in table:
        if name not in known:
            raise invalid(f"{key}.{name} is not known{nearest(f'{key}.{name}', paths())} In [{key}] stand "
                          f"{', '.join(known)}.", f"{key}.{name}")


def _group(key, cls, table):
    """One group made of its table."""
    known = {field.name: field for field in fields(cls)}
    for name, field in known.items():
        required = field.metadata["required"]
        if isinstance(required, tuple):
            required = table.get(required[0]) == required[1]
        if required and name not in table:
            allowed = f"; allowed is {bounds_text(field)}" if field.metadata["bounds"] else ""
            raise invalid(f"{named(field, f'{key}.{name}')} is missing{allowed}. Add a line such as "
                          f"{name} = {_written(field, field.default)} to [{key}].", f"{key}.{name}", None,
                          field.metadata["bounds"])
    return cls(**{name: _read(known[name], f"{key}.{name}", value) for name, value in table.items()})


def _read(field, key, value):
    """A field's value in SI units from its value in a file; what is not a quantity is left to the design to check."""
    kind, columns = field.metadata["kind"], field.metadata["columns"]
    if kind == "number" and not (field.default is None and value == "none"):
        return _quantity(field, key, value, field.metadata["unit"])
    if kind == "number":
        return None
    if kind == "list" and columns and isinstance(value, list):
        return tuple(tuple(_quantity(field, key, item, unit) for item, unit in zip(row, columns, strict=True))
                     if isinstance(row, list) and len(row) == len(columns) else row for row in value)
    if isinstance(value, str | bool | int | float | list):
        return value
    raise invalid(f"{named(field, key)} is a table or a date. Write it as {_written(field, field.default)}.", key)


def _quantity(field, key, value, symbol):
    """SI value of a number with unit (text) or of a ratio (plain number); ``symbol`` is the display unit."""
    unit = UNITS[symbol]
    is_plain = isinstance(value, int | float) and not isinstance(value, bool)
    if is_plain and not unit.si:
        return value
    match = NUMBER_AND_UNIT.fullmatch(value) if isinstance(value, str) and len(value) <= LONGEST_QUANTITY else None
    if is_plain or (match and unit.si and not match[2]):
        raise _misread(field, key, value, "without a unit", symbol)
    if not match:
        raise _misread(field, key, value, "not a decimal number with a unit", symbol)
    registry = _registry()
    wanted = registry.Quantity(Decimal(1), registry.parse_units(unit.si))
    try:
        known = registry.parse_units(match[2]) if UNIT_TEXT.fullmatch(match[2]) else None
        given = None if known is None else registry.Quantity(Decimal(match[1]), known)
        is_same_kind = given is not None and given.to_root_units().units == wanted.to_root_units().units
    except (pint.errors.PintError, ValueError, TypeError):  # the last: decibels and their like have no decimal value
        given = None
    if given is None:
        raise _misread(field, key, value, "with an unknown unit", symbol)
    if not is_same_kind:
        raise _misread(field, key, value, "of the wrong dimension", symbol)
    return float(given.to(wanted.units).magnitude)


def _misread(field, key, value, fault, symbol):
    """The error for a text that is no quantity of the right unit."""
    is_own = field.metadata["kind"] == "number"
    example = exact_text(field, field.default) if is_own and field.default is not None else f"1 {symbol}".rstrip()
    allowed = f"; allowed is {bounds_text(field)}" if is_own else ""
    shown = f"\"{example}\"" if symbol else example
    return invalid(f"{named(field, key)} is {words(value)}, {fault}{allowed}. Write it in {symbol or 'plain numbers'}, "
                   f"such as {shown}.", key, value, field.metadata["bounds"])


def _written(field, value):
    """A field's value as it stands in a file; read back it is the same to the last bit."""
    kind = field.metadata["kind"]
    if kind == "number":
        return '"none"' if value is None else _written_number(field, value, field.metadata["unit"])
    if kind == "list":
        columns = field.metadata["columns"]
        return "[" + ", ".join(
            "[" + ", ".join(_written_number(field, item, unit) for item, unit in zip(row, columns, strict=True)) + "]"
            if columns else repr(row) for row in value) + "]"
    return {"count": str, "choice": _quoted, "flag": lambda flag: str(flag).lower()}[kind](value)


def _written_number(field, value, symbol):
    """One number in its display unit, or in SI units where the display unit's digits would not read back the same."""
    unit = UNITS[symbol]
    if symbol == "":
        return repr(value)
    text = f"{unit.exact(value)} {symbol}"
    return f'"{text}"' if _quantity(field, "", text, symbol) == value else f'"{value!r} {unit.si}"'


def _quoted(text):
    """A TOML basic string."""
    escapes = {"\\": "\\\\", '"': '\\"', "\n": "\\n", "\t": "\\t"}
    return '"' + "".join(escapes.get(c, c) for c in text) + '"'
