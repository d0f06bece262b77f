"""Strict reading of JSON objects into frozen dataclasses."""

import math
from dataclasses import MISSING, fields
from typing import get_args

from .errors import StudyError

__all__ = ["read_list", "read_object", "require", "write_object"]


def require(condition, reason, where, remedy=""):
    """Refuse a study, with a reason, where a condition does not hold."""
    if not condition:
        raise StudyError("bad-study", reason, where, remedy)


def read_list(document, name, where):
    """Give a list of an object's, empty if it is not there; refuse anything else."""
    value = document.get(name, [])
    require(
        isinstance(value, (list, tuple)), f"{name} is {value!r}, not a list.", where
    )
    return value


def read_object(cls, document, where, **given):
    """Build a dataclass from a JSON object, refusing what it does not know.

    Parameters
    ----------
    cls : type
        Dataclass to build.
    document : dict
        The object.
    where : str
        Place in the study, for messages.
    **given
        Values already read from sub-objects, by field name.

    Raises
    ------
    StudyError
        If the object is not an object, an entry is unknown or a required one is
        missing.
    """
    if not isinstance(document, dict):
        raise StudyError(
            "bad-study", "an object with named entries is expected.", where
        )
    known = {f.name: f for f in fields(cls)}
    unknown = sorted(set(document) - set(known))
    if unknown:
        raise StudyError(
            "bad-study",
            f"unknown entries: {', '.join(map(repr, unknown))}.",
            where,
            "Known entries: " + ", ".join(known) + ".",
        )
    values = {**document, **given}
    missing = [
        name
        for name, f in known.items()
        if f.default is MISSING
        and f.default_factory is MISSING
        and values.get(name) in (None, "")
    ]
    if missing:
        raise StudyError(
            "bad-study",
            f"not given: {', '.join(missing)}.",
            where,
            "Nothing is guessed.",
        )
    for name, value in values.items():
        _check_type(known[name], value, where)
    return cls(**values)


def _is_number(value):
    whole = isinstance(value, (int, float)) and not isinstance(value, bool)
    return whole and math.isfinite(value)


def _is_whole(value):
    return isinstance(value, int) and not isinstance(value, bool)


#: What a JSON value has to be for a field of each type, and how to say it.
_KINDS = {
    float: ("a number", _is_number),
    int: ("a whole number", _is_whole),
    bool: ("true or false", lambda value: isinstance(value, bool)),
    str: ("a text", lambda value: isinstance(value, str)),
    tuple: ("a list", lambda value: isinstance(value, (list, tuple))),
}


def _check_type(field, value, where):
    """Refuse a text where a number belongs, and the like."""
    kinds = get_args(field.type) or (field.type,)
    if value is None and type(None) in kinds:
        return
    name, fits = _KINDS.get(kinds[0], ("", None))
    if fits is not None and not fits(value):
        raise StudyError("bad-study", f"{field.name} is {value!r}, not {name}.", where)


def write_object(thing):
    """Give a dataclass as a JSON object, entries at their default left out."""
    document = {}
    for f in fields(thing):
        value = getattr(thing, f.name)
        default = f.default_factory() if f.default_factory is not MISSING else f.default
        if value != default:
            document[f.name] = _plain(value)
    return document


def _plain(value):
    if hasattr(value, "__dataclass_fields__"):
        return write_object(value)
    if isinstance(value, (tuple, list)):
        return [_plain(v) for v in value]
    if isinstance(value, dict):
        return {k: _plain(v) for k, v in value.items()}
    return value
