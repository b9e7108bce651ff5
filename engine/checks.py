"""Whether a received value may stand in a field, and the words if it may not."""

from engine.fields import bounds_text, exact_text, invalid, is_finite_number, words


def checked(field, key, value):
    """The value of a field in its own type (float, int, str, bool, tuple), or InvalidDesign.

    Lists are only turned into tuples of floats (nested where nested); their meaning is the owner's to check.
    """
    kind = field.metadata["kind"]
    check = {"number": _checked_number, "count": _checked_count, "choice": _checked_choice, "flag": _checked_flag,
             "list": _checked_list}[kind]
    return check(field, key, value)


def refuse_later(field, key, value):
    """Raise InvalidDesign if the field's physics is not computed yet and its value is not the neutral default."""
    if field.metadata["later"] and value != field.default and value != ():
        raise invalid(f"{named(field, key)} is {exact_text(field, value)}: not computed yet. "
                      f"Leave it at {exact_text(field, field.default)}.", key, value, field.metadata["bounds"])


def named(field, key):
    """The field's label with its path: "Prestretch (film.prestretch)"."""
    return f"{field.metadata['label']} ({key})"


def _checked_number(field, key, value):
    if value is None and field.default is None:
        return None
    if not is_finite_number(value):
        raise invalid(f"{named(field, key)} is {words(value)}, not a finite number. "
                      f"Give a number from {bounds_text(field)}.", key, value, field.metadata["bounds"])
    value = float(value) + 0.0  # no negative zero
    low, high = field.metadata["bounds"]
    if not low <= value <= high:
        raise invalid(f"{named(field, key)} is {exact_text(field, value)}; allowed is {bounds_text(field)}. "
                      f"{'Raise it to at least' if value < low else 'Lower it to at most'} "
                      f"{exact_text(field, low if value < low else high)}.", key, value, (low, high))
    return value


def _checked_count(field, key, value):
    number = _checked_number(field, key, value)
    if number != int(number):
        raise invalid(f"{named(field, key)} is {words(value)}, not a whole number. "
                      f"Give a whole number from {bounds_text(field)}.", key, value, field.metadata["bounds"])
    return int(number)


def _checked_choice(field, key, value):
    choices = field.metadata["choices"]
    if not isinstance(value, str) or value not in choices:
        raise invalid(f"{named(field, key)} is {words(value)}. Choose one of {', '.join(map(words, choices))}.",
                      key, value)
    return str(value)


def _checked_flag(field, key, value):
    if not isinstance(value, bool) and type(value).__name__ != "bool":
        raise invalid(f"{named(field, key)} is {words(value)}. Give true or false.", key, value)
    return bool(value)


def _checked_list(field, key, value):
    if isinstance(value, str | bytes) or not hasattr(value, "__iter__"):
        raise invalid(f"{named(field, key)} is {words(value)}. Give a list of numbers.", key, value)
    return tuple(_checked_list(field, key, item) if hasattr(item, "__iter__") and not isinstance(item, str | bytes)
                 else _item(field, key, item) for item in value)


def _item(field, key, item):
    if not is_finite_number(item):
        raise invalid(f"{named(field, key)} holds {words(item)}, not a finite number. "
                      "Give finite numbers only.", key, item)
    return float(item) + 0.0
