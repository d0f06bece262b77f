"""Length units and the one place where they are converted."""

from .errors import SourceError

__all__ = ["LENGTH_UNITS", "length_factor"]

#: Metres in one unit. The foot is exact by definition (0.3048 m); the US survey
#: foot is 1200/3937 m (deprecated 2022, still in many layers).
LENGTH_UNITS = {"m": 1.0, "ft": 0.3048, "us-ft": 1200.0 / 3937.0}


def length_factor(from_unit, to_unit):
    """Give the factor that turns a length in one unit into another.

    Parameters
    ----------
    from_unit, to_unit : str
        Keys of `LENGTH_UNITS`: ``m``, ``ft`` (international), ``us-ft``.

    Returns
    -------
    float
        Multiply a length in `from_unit` by it to get `to_unit`; exactly 1 for
        equal units.

    Raises
    ------
    SourceError
        If a unit is not in the list.

    Examples
    --------
    >>> length_factor("ft", "m")
    0.3048
    >>> length_factor("m", "m")
    1.0
    """
    for unit in (from_unit, to_unit):
        if unit not in LENGTH_UNITS:
            raise SourceError(
                "unknown-unit",
                f"'{unit}' is not a known length unit.",
                remedy="Use one of: " + ", ".join(LENGTH_UNITS) + ".",
            )
    if from_unit == to_unit:
        return 1.0
    return LENGTH_UNITS[from_unit] / LENGTH_UNITS[to_unit]
