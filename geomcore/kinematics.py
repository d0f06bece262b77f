"""Kinematic models: how far each column of the hanging wall has moved."""

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from .errors import ConstructionError

__all__ = [
    "MODELS",
    "ConstantHeave",
    "from_shear_frame",
    "model_named",
    "to_shear_frame",
]


def to_shear_frame(x, z, shear_angle):
    """Give u = x - z tan(a), constant along a shear line.

    Parameters
    ----------
    x, z : array_like
        Section coordinates.
    shear_angle : float
        Degrees from the vertical, positive antithetic.

    Notes
    -----
    The map (x, z) -> (u, z) keeps area (methods.md section 2).
    """
    return np.asarray(x, dtype=float) - np.asarray(z) * np.tan(np.radians(shear_angle))


def from_shear_frame(u, z, shear_angle):
    """Give x = u + z tan(a), the way back from `to_shear_frame`."""
    return np.asarray(u, dtype=float) + np.asarray(z) * np.tan(np.radians(shear_angle))


@dataclass(frozen=True)
class ConstantHeave:
    """Every column moves by the same oblique heave along planes of one shear angle.

    Suits soft sediment that deforms by many small faults. With shear angle 0 it is
    constant heave (vertical shear): columns stay vertical and keep their length.

    Parameters
    ----------
    shear_angle : float
        Degrees from the vertical, positive antithetic, -45 to 60.

    References
    ----------
    Verrall 1982; Gibbs 1983; White, Jackson & McKenzie 1986; Groshong 2006
    section 11.7.2 (through methods.md sections 1-2).
    """

    NAME: ClassVar[str] = "constant heave"
    ANGLE_BOUNDS: ClassVar[tuple] = (-45.0, 60.0)

    shear_angle: float = 0.0

    def __post_init__(self):
        low, high = self.ANGLE_BOUNDS
        if not low <= self.shear_angle <= high:
            raise ConstructionError(
                "bad-shear-angle",
                f"the shear angle is {self.shear_angle:g} degrees.",
                remedy=f"Give {low:g} to {high:g} degrees from the vertical, "
                "positive antithetic.",
            )

    @property
    def label(self):
        """Name of the method for tables and figures."""
        if self.shear_angle == 0:
            return "constant heave (vertical shear)"
        sense = "antithetic" if self.shear_angle > 0 else "synthetic"
        return f"constant heave ({abs(self.shear_angle):g} degrees {sense} shear)"

    def displacement(self, heave, throw):
        """Give the oblique heave H = heave + throw tan(a) of the column map.

        Eq. 4 of methods.md; it is also the displacement on a level detachment.
        """
        return heave + throw * np.tan(np.radians(self.shear_angle))

    def origin(self, u, oblique_heave):
        """Give where the columns now at u stood before the fault moved."""
        return u - oblique_heave


#: Every kinematic model; the study schema, the algorithms and the tests read it.
MODELS = (ConstantHeave,)


def model_named(name, **parameters):
    """Give a kinematic model by its name.

    Raises
    ------
    ConstructionError
        If there is no such model.
    """
    for model in MODELS:
        if name == model.NAME:
            return model(**parameters)
    raise ConstructionError(
        "unknown-model",
        f"there is no kinematic model '{name}'.",
        remedy="Use one of: " + ", ".join(m.NAME for m in MODELS) + ".",
    )
