"""Slip lines parallel to the fault: a forward model of its own.

Particles of the hanging wall move along lines parallel to the fault, all by one
distance. It is no column model and has no inverse here: use it to see what rollover
such a movement would make.
"""

import numpy as np

from .errors import ConstructionError
from .profile import Profile

__all__ = ["REFERENCE", "slide_along", "slip_line_horizon"]

REFERENCE = "Williams & Vann 1987; Egan et al. 1997 (through methods.md section 5)"


class _Fault:
    """A polyline with its dip domains; lines turn on the bisectors at its bends."""

    def __init__(self, x, z):
        self.points = np.column_stack([x, z]).astype(float)
        legs = np.diff(self.points, axis=0)
        length = np.hypot(legs[:, 0], legs[:, 1])
        if len(length) == 0 or np.any(length <= 0):
            raise ConstructionError("bad-fault", "the fault has points without a way.")
        self.tangent = legs / length[:, None]
        # to the left of down dip: up into the hanging wall
        self.normal = np.column_stack([-self.tangent[:, 1], self.tangent[:, 0]])
        self.length = length
        turn = np.arctan2(
            self.tangent[:-1, 0] * self.tangent[1:, 1]
            - self.tangent[:-1, 1] * self.tangent[1:, 0],
            (self.tangent[:-1] * self.tangent[1:]).sum(axis=1),
        )
        # at height n over the fault a leg is shorter by n tan(turn/2) at either end
        self.cut = np.r_[0.0, np.tan(0.5 * turn), 0.0]

    def legs_at(self, n):
        """Lengths of the legs of the parallel line at height n."""
        return self.length - n * (self.cut[:-1] + self.cut[1:])

    def corner(self, i, n):
        """Start of leg i on the parallel line at height n."""
        return self.points[i] + n * self.normal[i] + n * self.cut[i] * self.tangent[i]

    def locate(self, point):
        """Give leg, height over the fault and way along the parallel line."""
        best = None
        for i in range(len(self.length)):
            d = point - self.points[i]
            n = float(d @ self.normal[i])
            along = float(d @ self.tangent[i]) - n * self.cut[i]
            inside = -1e-9 <= along <= self.legs_at(n)[i] + 1e-9
            if n >= -1e-9 and inside and (best is None or n < best[1]):
                best = i, n, along
        return best


def slide_along(fault_x, fault_z, points, slip):
    """Move points along lines parallel to the fault.

    Parameters
    ----------
    fault_x, fault_z : ndarray (n,)
        The fault, x growing.
    points : array_like (m, 2)
        Points of the hanging wall (x, z), on or above the fault.
    slip : float
        Distance along the lines.

    Returns
    -------
    ndarray (m, 2)
        Where they come to lie; NaN where a point lies over no leg of the fault or
        the lines end before the slip is spent.

    Raises
    ------
    ConstructionError
        If a point passes a bend farther from it than its radius of curvature, where
        parallel lines cross.

    Notes
    -----
    At a bend the lines turn on the bisector of the two dips. Parallel lines keep
    their distance and the slip is one value, so area is kept; over a circular fault a
    particle at radius r turns by slip/r (methods.md section 5).
    """
    fault = _Fault(np.asarray(fault_x), np.asarray(fault_z))
    return np.array([_slid(fault, np.asarray(p, dtype=float), slip) for p in points])


def _slid(fault, point, slip):
    place = fault.locate(point)
    if place is None:
        return np.full(2, np.nan)
    i, n, along = place
    legs = fault.legs_at(n)
    rest = along + slip
    while i < len(legs) - 1 and rest > legs[i]:
        rest -= legs[i]
        i += 1
        if legs[i] < 0:  # parallel lines this high cross each other here
            raise ConstructionError(
                "beyond-radius",
                f"the point at x = {point[0]:.0f}, z = {point[1]:.0f} passes a bend at "
                "a height beyond the fault's radius of curvature.",
                remedy="Use another model, or a horizon nearer to the fault.",
            )
    if rest > legs[i] + 1e-9:
        return np.full(2, np.nan)
    return fault.corner(i, n) + rest * fault.tangent[i]


def slip_line_horizon(fault_x, fault_z, regional, slip, x_end, samples=200):
    """Give the rollover that slip lines make of a horizon.

    Parameters
    ----------
    fault_x, fault_z : ndarray (n,)
        The fault, x growing.
    regional : Regional
        Of the horizon.
    slip : float
    x_end : float
        Where the undeformed horizon ends in the hanging wall.
    samples : int

    Returns
    -------
    horizon : Profile
        Deformed, as far as it is single-valued, the fault reaches and it lies within
        the fault's radius of curvature.
    footwall : tuple (x, z)
        Its footwall cut-off.

    Raises
    ------
    ConstructionError
        If the regional does not meet the fault, the horizon lies beyond the fault's
        radius of curvature, or the fault ends before the slip is spent.
    """
    gap = np.asarray(fault_z) - regional(np.asarray(fault_x))
    hit = np.flatnonzero((gap[:-1] >= 0) & (gap[1:] < 0))
    if not len(hit):
        raise ConstructionError(
            "no-cutoff", "the horizon's regional does not meet the fault."
        )
    i = int(hit[0])
    f = gap[i] / (gap[i] - gap[i + 1])
    foot = fault_x[i] + f * (fault_x[i + 1] - fault_x[i])
    x = np.linspace(foot, x_end, samples)
    moved = _slid_until(fault_x, fault_z, np.column_stack([x, regional(x)]), slip)
    moved = moved[np.isfinite(moved[:, 0])]
    if len(moved) < 2:
        raise ConstructionError(
            "fault-too-short", "the fault ends before the slip along it is spent."
        )
    keep = np.r_[True, np.diff(moved[:, 0]) > 0]
    horizon = Profile(moved[keep, 0], moved[keep, 1], np.zeros(int(keep.sum())))
    return horizon, (float(foot), float(regional(foot)))


def _slid_until(fault_x, fault_z, points, slip):
    """Slide points in their order until one lies beyond the radius of curvature."""
    fault = _Fault(np.asarray(fault_x), np.asarray(fault_z))
    moved = []
    for point in points:
        try:
            moved.append(_slid(fault, point, slip))
        except ConstructionError:
            if len(moved) < 2:
                raise
            break
    return np.array(moved)
