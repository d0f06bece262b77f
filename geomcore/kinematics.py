"""Kinematic models: where each column of the hanging wall stood before the fault moved.

A model answers one question, `origin`, and its reverse, `arrival`. Adding a model is
one class with these and one entry in `MODELS`; the study's schema, the choices of the
algorithms, the methods page and the shared tests read that list.
"""

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from .errors import ConstructionError

__all__ = [
    "MODELS",
    "ConstantBedLength",
    "ConstantHeave",
    "ConstantSlip",
    "from_shear_frame",
    "model_named",
    "smoothed_line",
    "tan_of",
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


def tan_of(model):
    """Give the tangent of a model's shear angle, as in u = x - z tan."""
    return float(np.tan(np.radians(model.shear_angle)))


@dataclass(frozen=True)
class ConstantHeave:
    """Every column moves by the same oblique heave along planes of one shear angle.

    With shear angle 0 it is constant heave (vertical shear): columns stay vertical
    and keep their length.

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
    REFERENCE: ClassVar[str] = (
        "Verrall 1982; Gibbs 1983; White, Jackson & McKenzie 1986; Groshong 2006"
    )
    USE_WHEN: ClassVar[str] = (
        "Soft sediment that deforms by many small faults; with antithetic faults "
        "seen, an angle near theirs."
    )
    NOT_WHEN: ClassVar[str] = (
        "Layers that keep their thickness and length, or a hanging wall cut by a few "
        "large faults that are not picked."
    )
    KEEPS_AREA: ClassVar[bool] = True
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

    def origin(self, u, bed, problem):  # noqa: ARG002 - every model has this form
        """Give where the columns now at u stood before the fault moved."""
        return u - problem.oblique_heave

    def arrival(self, u, fault, regional_slope, displacement):  # noqa: ARG002
        """Give where the columns that stood at u are now."""
        return u + displacement


@dataclass(frozen=True)
class _UprightModel:
    """What models that move upright columns by a changing heave have in common."""

    shear_angle: float = 0.0

    def __post_init__(self):
        if self.shear_angle != 0:
            raise ConstructionError(
                "bad-shear-angle",
                f"{self.NAME} has no shear angle; {self.shear_angle:g} was given.",
                remedy="Give 0, or use constant heave.",
            )

    @property
    def label(self):
        """Name of the method for tables and figures."""
        return self.NAME


@dataclass(frozen=True)
class ConstantSlip(_UprightModel):
    """Every column moves by the same straight distance D between its two feet.

    The heave grows outwards from the cut-offs' to D. Area is not kept (Wheeler
    1987), so it gives no depth from lost area.

    References
    ----------
    Williams & Vann 1987; D is the straight distance between the cut-offs
    (through methods.md section 3).
    """

    NAME: ClassVar[str] = "constant slip"
    REFERENCE: ClassVar[str] = "Williams & Vann 1987; Wheeler 1987 for the area"
    USE_WHEN: ClassVar[str] = (
        "Uniform slip over a rigid footwall; it fitted a sand model best in one "
        "published test (Groshong & Chai 1996)."
    )
    NOT_WHEN: ClassVar[str] = "Area balance is to be used, or throw exceeds the slip."
    KEEPS_AREA: ClassVar[bool] = False

    def displacement(self, heave, throw):
        """Give D, the straight distance between the cut-offs."""
        return np.hypot(heave, throw)

    def origin(self, u, bed, problem):
        """Give the origin from vx^2 + (B(X) - R(X - vx))^2 = D^2.

        Raises
        ------
        ConstructionError
            Where the bed lies farther from the regional than D.
        """
        slope = problem.regional.slope
        slip = problem.oblique_heave
        below = np.interp(u, bed.x, bed.z) - problem.regional_at(u)
        under = slip**2 * (1.0 + slope**2) - below**2
        # at the cut-off itself rounding may leave a little less than nothing
        lost = under < -1e-9 * slip**2
        beyond = u > problem.separation.hanging_wall.x
        if np.any(lost & beyond):
            at = float(u[lost & beyond][0])
            raise ConstructionError(
                "slip-too-small",
                f"near x = {at:.0f} the bed lies farther from the regional than the "
                f"slip of {slip:.0f}: constant slip has no solution there.",
                problem.where,
                "Check cut-offs and regional, or use another model.",
            )
        root = np.sqrt(np.maximum(under, 0.0))
        return u - (root - below * slope) / (1.0 + slope**2)

    def arrival(self, u, fault, regional_slope, displacement):  # noqa: ARG002
        """Give X at the straight distance D along the fault (bisection)."""
        low, high = u.copy(), u + displacement
        here = fault(u)
        for _ in range(60):
            middle = 0.5 * (low + high)
            far = np.hypot(middle - u, fault(middle) - here) > displacement
            low, high = np.where(far, low, middle), np.where(far, middle, high)
        return 0.5 * (low + high)


@dataclass(frozen=True)
class ConstantBedLength(_UprightModel):
    """The bed keeps its length from the cut-off outwards.

    Area is not kept. The length is measured on a smoothed bed, because noise
    lengthens it by about (sigma/spacing)^2.

    References
    ----------
    Davison 1986 (through methods.md section 3).
    """

    NAME: ClassVar[str] = "constant bed length"
    REFERENCE: ClassVar[str] = "Davison 1986; Wheeler 1987 for the area"
    USE_WHEN: ClassVar[str] = "Stiff layers that keep thickness and length."
    NOT_WHEN: ClassVar[str] = (
        "Area balance is to be used, or the fault flattens too fast for the bed to "
        "keep its length."
    )
    KEEPS_AREA: ClassVar[bool] = False
    #: Lengthening by noise that is let through, relative.
    NOISE: ClassVar[float] = 2e-4

    def displacement(self, heave, throw):  # noqa: ARG002 - every model has this form
        """Give the heave at the cut-offs, from which the length is counted."""
        return heave

    def origin(self, u, bed, problem):
        """Give x on the regional as long from the footwall cut-off as B to X."""
        x, z = smoothed_line(bed, self.NOISE)
        length = np.r_[0.0, np.cumsum(np.hypot(np.diff(x), np.diff(z)))]
        foot = problem.separation.footwall.x
        stretch = np.hypot(1.0, problem.regional.slope)
        beyond = foot + np.interp(u, x, length) / stretch
        # before the cut-off nothing is asked of it; keep it growing
        return np.where(u > x[0], beyond, foot + (u - x[0]))

    def arrival(self, u, fault, regional_slope, displacement):
        """Integrate p^2 + (r - f + e p)^2 = 1 + r^2 outwards, p = dX/dx.

        Raises
        ------
        ConstructionError
            Where the fault flattens too fast for any solution.
        """
        r, step = regional_slope, 1e-3 * displacement

        def rate(x, big_x):
            f = (fault(x + step) - fault(x - step)) / (2 * step)
            e = (fault(big_x + step) - fault(big_x - step)) / (2 * step)
            b, under = e * (r - f), (1 + e * e) * (1 + r * r) - (r - f) ** 2
            if under < 0:
                raise ConstructionError(
                    "bed-too-long",
                    f"near x = {float(x):.0f} the fault flattens too fast for the bed "
                    "to keep its length.",
                    remedy="Use another model.",
                )
            return (-b + np.sqrt(under)) / (1 + e * e)

        result = np.empty(len(u))
        result[0] = u[0] + displacement
        for i in range(len(u) - 1):
            h, big_x = u[i + 1] - u[i], result[i]
            k1 = rate(u[i], big_x)
            k2 = rate(u[i] + h / 2, big_x + h / 2 * k1)
            k3 = rate(u[i] + h / 2, big_x + h / 2 * k2)
            k4 = rate(u[i + 1], big_x + h * k3)
            result[i + 1] = big_x + h * (k1 + 2 * k2 + 2 * k3 + k4) / 6
        return result


def smoothed_line(bed, tolerance):
    """Average a bed over bins wide enough that noise lengthens it no more.

    Parameters
    ----------
    bed : Profile
    tolerance : float
        Lengthening that is let through, relative.

    Returns
    -------
    x, z : ndarray (n,)
        First and last point kept.
    """
    n, sigma = len(bed.x), float(np.median(bed.sigma))
    if n < 3 or sigma == 0:
        return bed.x, bed.z
    spacing = float(np.median(np.diff(bed.x)))
    # n picks a bin: sigma^2/(n (n spacing)^2) of lengthening is let through
    group = int(np.ceil((sigma**2 / (spacing**2 * tolerance)) ** (1.0 / 3.0)))
    if group <= 1:
        return bed.x, bed.z
    at = np.arange(1, n - 1, group)
    if len(at) < 2:
        return bed.x[[0, -1]], bed.z[[0, -1]]
    counts = np.diff(np.r_[at, n - 1])
    inner = slice(1, n - 1)
    x = np.add.reduceat(bed.x[inner], at - 1) / counts
    z = np.add.reduceat(bed.z[inner], at - 1) / counts
    return np.r_[bed.x[0], x, bed.x[-1]], np.r_[bed.z[0], z, bed.z[-1]]


#: Every kinematic model of columns; slip lines are a forward model of their own.
MODELS = (ConstantHeave, ConstantSlip, ConstantBedLength)


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
