"""How a fault flattens when the rock it runs through is buried and compacts."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError
from .porosity import decompact

__all__ = ["BuriedTrace", "buried_dip", "buried_trace"]


def buried_dip(dip, law, depth_formed, depth_now):
    """Give the dip of a fault that was buried after it formed.

    tan(dip now) = tan(dip formed) (1 - phi formed)/(1 - phi now): rock loses height,
    never width. Run backwards (depths swapped) it gives the dip at which it formed.

    Parameters
    ----------
    dip : array_like
        When it formed, degrees.
    law : PorosityLaw
    depth_formed, depth_now : array_like
        Of that point of the fault, below the sediment surface of each time.

    References
    ----------
    Davison 1987; Xiao & Suppe 1989 (through methods.md section 9, from memory).
    """
    height = (1.0 - law.porosity(depth_formed)) / (1.0 - law.porosity(depth_now))
    return np.degrees(np.arctan(np.tan(np.radians(dip)) * height))


@dataclass(frozen=True, eq=False)
class BuriedTrace:
    """A fault trace carried to another burial.

    Parameters
    ----------
    x : ndarray (n,)
        As before: compaction moves nothing sideways.
    z : ndarray (n,)
        Elevations after.
    dip_before, dip : ndarray (n - 1,)
        Dips of its pieces in degrees, positive down towards the hanging wall.
    """

    x: np.ndarray
    z: np.ndarray
    dip_before: np.ndarray
    dip: np.ndarray


def buried_trace(
    x, z, law, surface_before_z, surface_z, burial_before=0.0, burial=0.0, where=""
):
    """Carry a whole fault trace to another burial: it flattens with its rock.

    Parameters
    ----------
    x, z : array_like (n,)
        The trace, x growing, z elevations.
    law : PorosityLaw
        Of the rock the fault runs through.
    surface_before_z, surface_z : float
        Elevation of the sediment surface before and after.
    burial_before, burial : float
        Depth of one marker bed below the sediment surface before and after, which
        the fault does not reach above: 0 before where it formed up to the surface.
        Swap both pairs to take a burial off.
    where : str
        Section, for messages.

    Returns
    -------
    BuriedTrace

    Raises
    ------
    ConstructionError
        If the trace reaches above the marker bed.
    """
    x, z = np.asarray(x, dtype=float), np.asarray(z, dtype=float)
    depth = surface_before_z - z
    if depth.min() < burial_before - 1e-6:
        raise ConstructionError(
            "above-marker",
            f"the trace reaches {burial_before - depth.min():.0f} above the bed whose "
            "burial is given.",
            where,
            "Cut the trace there, or give the burial of a higher bed.",
        )
    after = surface_z - decompact(law, burial_before, depth, burial)
    return BuriedTrace(x, after, _dips(x, z), _dips(x, after))


def _dips(x, z):
    return np.degrees(np.arctan2(-np.diff(z), np.diff(x)))
