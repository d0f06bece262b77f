"""Strict reading of JSON objects into frozen dataclasses."""

from dataclasses import MISSING, fields

from .errors import StudyError

__all__ = ["read_object", "write_object"]


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


def _check_type(field, value, where):
    """Refuse a text where a number belongs, and the like."""
    if value is None:
        return
    if field.type in (float, "float", "Optional[float]") or str(field.type) == "float]":
        wrong = isinstance(value, bool) or not isinstance(value, (int, float))
        if wrong or value != value:
            raise StudyError(
                "bad-study", f"{field.name} is {value!r}, not a number.", where
            )
    if field.type in (str, "str") and not isinstance(value, str):
        raise StudyError("bad-study", f"{field.name} is {value!r}, not a text.", where)


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
