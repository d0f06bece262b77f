"""How far a predicted fault can be trusted, and what makes it unsure."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Optional

import numpy as np

from .doubts import MANY_STRIPS

__all__ = ["Trust", "error_shares", "trusted_reach"]

#: Half-width of the band, as a share of the depth below the regional, beyond which a
#: fault is not trusted; and the factor from sigma to the half-width that holds 80 %
#: (methods.md section 13, rule 2).
BAND_LIMIT = 0.15
_HALF_WIDTH = 1.2816


@dataclass(frozen=True)
class Trust:
    """Where trust in a predicted fault ends.

    Parameters
    ----------
    x, z : float or None
        Last point trusted; None where none is.
    reason : str
        What ends it, in words; empty where nothing does.
    """

    x: Optional[float]
    z: Optional[float]
    reason: str


def trusted_reach(prediction, has_deep_tie=False):
    """Say how far a prediction can be trusted.

    Parameters
    ----------
    prediction : Prediction
    has_deep_tie : bool
        Deep ties hold the fault, so the number of strips does not count.

    Returns
    -------
    Trust

    Notes
    -----
    Trust ends where the 80 % band is wider to one side than 15 % of the depth below
    the regional, or after six strips without a deep tie (methods.md section 13).
    """
    trace = prediction.trace
    depth = prediction.regional(trace.x) - trace.z
    half = _HALF_WIDTH * trace.sigma_z
    predicted = trace.strip > 0
    too_wide = predicted & (half > BAND_LIMIT * np.maximum(depth, 0.0))
    too_many = (trace.strip > MANY_STRIPS) & (not has_deep_tie)
    ends = [
        (mask, reason)
        for mask, reason in (
            (too_wide, "the band is wider than 15 % of the depth below the regional"),
            (too_many, f"more than {MANY_STRIPS} strips without a deep tie"),
        )
        if mask.any()
    ]
    if not ends:
        return Trust(float(trace.x[-1]), float(trace.z[-1]), "")
    mask, reason = min(ends, key=lambda e: int(np.argmax(e[0])))
    first = int(np.argmax(mask))
    if first == 0:
        return Trust(None, None, reason)
    return Trust(float(trace.x[first - 1]), float(trace.z[first - 1]), reason)


def error_shares(columns, x=None) -> Mapping[str, float]:
    """Give what each source of error does to the fault, as one standard deviation.

    Parameters
    ----------
    columns : ErrorColumns
    x : float, optional
        Where; the deepest point of the fault if not given.

    Returns
    -------
    dict of str to float
        Standard deviation of z from each source alone; their squares add up to the
        variance. The regional counts in every strip, so its share grows fastest.
    """
    at = np.array([columns.x[-1] if x is None else x])
    row = columns.at(at)[0]
    return {
        str(source): float(np.sqrt((row[columns.source == source] ** 2).sum()))
        for source in dict.fromkeys(columns.source)
    }
