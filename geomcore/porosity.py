"""Porosity against depth, and layers that keep their solid thickness.

Depths are counted downwards from the sediment surface; below it porosity falls
exponentially (Athy 1930). The solid part of a layer and its pores add up to the whole.
"""

from dataclasses import dataclass, replace

import numpy as np

from .errors import ConstructionError
from .units import length_factor

__all__ = ["PRESETS", "PorosityLaw", "decompact", "preset"]


@dataclass(frozen=True)
class PorosityLaw:
    """Porosity phi0 exp(-c y) at depth y below the sediment surface.

    Parameters
    ----------
    name : str
    surface_porosity : float
        phi0, a fraction of the volume, 0 (no pores: nothing compacts) to below 1.
    decay : float
        c, per `length_unit`, above 0.
    source : str
        Where the numbers come from.
    length_unit : str
        Unit of the depths it is asked for.

    Raises
    ------
    ConstructionError
        If either number is out of its range.

    References
    ----------
    Athy 1930.
    """

    name: str
    surface_porosity: float
    decay: float
    source: str = "given"
    length_unit: str = "m"

    def __post_init__(self):
        if not 0.0 <= self.surface_porosity < 1.0:
            raise ConstructionError(
                "bad-porosity",
                f"the surface porosity of {self.name} is {self.surface_porosity:g}.",
                remedy="Give a fraction of the volume, 0 to below 1.",
            )
        if not 0.0 < self.decay < np.inf:
            raise ConstructionError(
                "bad-porosity",
                f"the porosity decay of {self.name} is {self.decay:g}.",
                remedy=f"Give a number above 0, per {self.length_unit} of depth.",
            )

    def in_unit(self, length_unit):
        """Give the same law for depths in another length unit."""
        factor = length_factor(length_unit, self.length_unit)
        return replace(self, decay=self.decay * factor, length_unit=length_unit)

    def porosity(self, depth):
        """Give the porosity at a depth; above the surface that of the surface."""
        depth = np.maximum(np.asarray(depth, dtype=float), 0.0)
        return self.surface_porosity * np.exp(-self.decay * depth)

    def pore_thickness(self, top, bottom):
        """Give the thickness of the pores between two depths (array_like)."""
        return self._pores_above(bottom) - self._pores_above(top)

    def solid_thickness(self, top, bottom):
        """Give the solid thickness between two depths (array_like).

        S = y2 - y1 - (phi0/c)(exp(-c y1) - exp(-c y2)), methods.md section 9.
        """
        whole = np.asarray(bottom, dtype=float) - np.asarray(top, dtype=float)
        return whole - self.pore_thickness(top, bottom)

    def depth_of_solid(self, solid):
        """Give the depth above which a solid thickness lies (array_like).

        Notes
        -----
        The solid thickness above a depth grows strictly and is convex, so that the
        root lies between S and S/(1 - phi0), and Newton's steps from the upper end
        run down to it without ever passing it.
        """
        solid = np.asarray(solid, dtype=float)
        high = solid / (1.0 - self.surface_porosity)
        low = np.minimum(solid, high)
        depth = high
        for _ in range(200):
            excess = self.solid_thickness(0.0, depth) - solid
            better = np.clip(depth - excess / (1.0 - self.porosity(depth)), low, depth)
            done = np.all(depth - better <= 1e-14 * np.abs(high))
            depth = better
            if done:
                break
        return depth

    def _pores_above(self, depth):
        depth = np.asarray(depth, dtype=float)
        below = -np.expm1(-self.decay * np.maximum(depth, 0.0)) / self.decay
        return self.surface_porosity * (below + np.minimum(depth, 0.0))


_TABLE = "Sclater & Christie 1980, as tabulated by Wangen 2010, table 2.1"

#: Published laws for depths in metres (methods.md section 9). The table prints 1/c;
#: it is 1960, 3703 and 1408 m for the c of 0.51, 0.27 and 0.71 per km used here.
PRESETS = (
    PorosityLaw("shale", 0.63, 0.51e-3, _TABLE),
    PorosityLaw("sand", 0.49, 0.27e-3, _TABLE),
    PorosityLaw("chalk", 0.70, 0.71e-3, _TABLE),
    PorosityLaw(
        "shaly sand",
        0.56,
        1.0 / 2464.0,
        _TABLE + " (1/c = 2464 m; other tables print c = 0.39 per km, 1/c = 2564 m)",
    ),
)


def preset(name, length_unit="m"):
    """Give a published porosity law for depths in a length unit.

    Raises
    ------
    ConstructionError
        If there is none of that name.
    """
    for law in PRESETS:
        if law.name == name:
            return law.in_unit(length_unit)
    raise ConstructionError(
        "unknown-porosity-law",
        f"there is no porosity law '{name}'.",
        remedy="Use one of: "
        + ", ".join(law.name for law in PRESETS)
        + "; or give surface porosity and decay.",
    )


def decompact(law, top, bottom, new_top):
    """Give the bottom of a layer whose top comes to another depth.

    Parameters
    ----------
    law : PorosityLaw
    top, bottom : array_like
        Depths of the layer now.
    new_top : array_like
        Depth its top is moved to, up (decompaction) or down (burial).

    Returns
    -------
    ndarray
        Depth of its bottom then: the solid thickness between is the same.

    References
    ----------
    Allen & Allen 2013 (through methods.md section 9).
    """
    above = law.solid_thickness(0.0, new_top) + law.solid_thickness(top, bottom)
    return law.depth_of_solid(above)
