"""Cut-offs of a horizon, heave and throw, and the separation of its two blocks."""

from dataclasses import dataclass

import numpy as np

from .errors import PicksError
from .profile import fit_covariance

__all__ = [
    "CutOff",
    "Separation",
    "crossing_sigma",
    "extend_to_fault",
    "level_separation",
    "local_curve",
]

#: Picks nearest the fault that extend a horizon to it (common practice, no source).
CUTOFF_PICKS = 8


@dataclass(frozen=True)
class CutOff:
    """Where a horizon meets the fault.

    Parameters
    ----------
    wall : str
        ``footwall`` or ``hanging wall``.
    x, z : float
        Its place in the section.
    sigma_x, sigma_z : float
        One standard deviation; the two are tied by the fault's slope.
    how : str
        ``given`` or how the horizon was extended to the fault.
    slides : bool
        Its error slides it along the fault (found cut-offs); otherwise the errors
        of x and z are independent (given ones).
    horizon_slope : float
        dz/dx of the horizon there, for found cut-offs: an error of the fault slides
        them along the horizon.
    """

    wall: str
    x: float
    z: float
    sigma_x: float = 0.0
    sigma_z: float = 0.0
    how: str = "given"
    slides: bool = False
    horizon_slope: float = 0.0


@dataclass(frozen=True)
class Separation:
    """Cut-offs of a horizon, and heave and throw from them.

    Parameters
    ----------
    horizon : str
    footwall, hanging_wall : CutOff
    domain : str
        In ``time`` the throw is in ms and there is no displacement.
    """

    horizon: str
    footwall: CutOff
    hanging_wall: CutOff
    domain: str = "depth"

    @property
    def heave(self):
        """Horizontal separation along transport; negative for reverse separation."""
        return self.hanging_wall.x - self.footwall.x

    @property
    def throw(self):
        """Vertical separation, down to the hanging wall."""
        return self.footwall.z - self.hanging_wall.z

    @property
    def displacement(self):
        """Straight distance between the cut-offs; not defined in time."""
        if self.domain == "time":
            return float("nan")
        return float(np.hypot(self.heave, self.throw))

    @property
    def cutoff_dip(self):
        """Dip of the line through the cut-offs, degrees; not defined in time."""
        if self.domain == "time":
            return float("nan")
        return float(np.degrees(np.arctan2(self.throw, self.heave)))


def extend_to_fault(picks, fault, wall, where):
    """Extend a horizon from one wall to the fault.

    Parameters
    ----------
    picks : Profile
        Horizon in that wall.
    fault : KnownFault
    wall : str
    where : str
        Section, for messages.

    Returns
    -------
    cutoff : CutOff
    reach : float
        Distance over which the horizon had to be extended.

    Notes
    -----
    The nearest `CUTOFF_PICKS` picks are extended by a straight line, or by a
    parabola where its curvature is significant (beyond 3 standard errors) and the
    extension is shorter than the picks used. Its error and the fault's move the
    cut-off as `crossing_sigma` says.

    Raises
    ------
    PicksError
        If there is no pick, or the horizon does not meet the fault.
    """
    if len(picks) < 2:
        raise PicksError(
            "no-cutoff",
            f"{len(picks)} {wall} pick(s) of the horizon cannot be extended to the "
            "fault.",
            where,
            "Give more picks or the cut-off itself.",
        )
    near = (
        slice(None, CUTOFF_PICKS)
        if wall == "hanging wall"
        else slice(-CUTOFF_PICKS, None)
    )
    x, z = picks.x[near], picks.z[near]
    sigma = np.maximum(picks.sigma[near], 1e-3)
    end = x[0] if wall == "hanging wall" else x[-1]
    curve, variance = local_curve(x, z, sigma, end, fault)
    span = max(np.ptp(picks.x), abs(float(fault.x_at(z.mean())) - end)) + 1.0
    low, high = (
        (end - 2 * span, end + span)
        if wall == "hanging wall"
        else (end - span, end + 2 * span)
    )
    at = fault.crossing(curve, low, high)
    if at is None:
        raise PicksError(
            "no-cutoff",
            f"the {wall} horizon, extended from x = {end:.0f}, does not meet the "
            "fault.",
            where,
            "Check the fault picks and the walls of the picks, or give the cut-off.",
        )
    step = 1e-3 * span
    bed = float(curve(at + step) - curve(at - step)) / (2 * step)
    slope = float(fault.slope_at(at))
    sigma_x, sigma_z = crossing_sigma(np.sqrt(variance(at)), fault.sigma, bed, slope)
    reach = end - at if wall == "hanging wall" else at - end
    cut = CutOff(
        wall,
        at,
        float(fault.z_at(at)),
        sigma_x,
        sigma_z,
        f"extended over {max(reach, 0.0):.0f}",
        slides=True,
        horizon_slope=bed,
    )
    return cut, float(reach)


def crossing_sigma(of_bed, of_fault, bed_slope, fault_slope):
    """Give the sigmas of x and z where a bed meets a fault.

    Parameters
    ----------
    of_bed, of_fault : float
        Sigma of z of either at the crossing, independent of each other.
    bed_slope, fault_slope : float
        dz/dx of either.

    Notes
    -----
    An error of the bed slides the crossing along the fault, one of the fault slides
    it along the bed: sigma_x^2 = (s_B^2 + s_F^2)/(F' - B')^2 and
    sigma_z^2 = (F'^2 s_B^2 + B'^2 s_F^2)/(F' - B')^2.
    """
    across = max(abs(fault_slope - bed_slope), 1e-9)
    in_z = np.hypot(fault_slope * of_bed, bed_slope * of_fault)
    return float(np.hypot(of_bed, of_fault) / across), float(in_z / across)


def local_curve(x, z, sigma, end, fault):
    """Fit a line or parabola to the picks nearest a fault; the curve and its variance.

    Parameters
    ----------
    x, z, sigma : ndarray (n,)
        The picks.
    end : float
        x of the one nearest the fault.
    fault : object
        Has ``x_at(z)``.

    Returns
    -------
    curve, variance : callable
        Of x.
    """
    d = x - end
    scale = max(np.ptp(d), 1e-9)
    best = None
    for degree in (1, 2):
        if len(x) < degree + 3 and degree == 2:
            break
        design = np.vander(d / scale, degree + 1, increasing=True)
        weighted = design / sigma[:, None]
        coefficient = np.linalg.lstsq(weighted, z / sigma, rcond=None)[0]
        residual = z - design @ coefficient
        cov = fit_covariance(
            weighted.T @ weighted, residual, len(x) - degree - 1, sigma
        )
        if degree == 2:
            gap = abs(float(fault.x_at(z[np.argmin(np.abs(d))])) - end)
            if abs(coefficient[2]) < 3 * np.sqrt(cov[2, 2]) or gap > scale:
                break
        best = coefficient, cov, degree
    coefficient, cov, degree = best

    def curve(at):
        return (
            np.vander((np.atleast_1d(at) - end) / scale, degree + 1, increasing=True)
            @ coefficient
        )

    def variance(at):
        row = np.vander((np.atleast_1d(at) - end) / scale, degree + 1, increasing=True)
        return np.einsum("ij,jk,ik->i", row, cov, row)[0]

    return (lambda at: curve(at) if np.ndim(at) else float(curve(at)[0])), variance


def level_separation(footwall, hanging_wall, x_footwall, x_hanging_wall, inner, outer):
    """Measure the vertical separation of a horizon at the middle of the fault gap.

    Parameters
    ----------
    footwall, hanging_wall : Profile
        The horizon in either wall.
    x_footwall, x_hanging_wall : float
        Cut-off positions, either order (an overlap has them crossed).
    inner, outer : float
        Straight lines are fitted between these distances outside the cut-offs.

    Returns
    -------
    float
        Footwall line minus hanging-wall line at mid gap; in the unit of z.

    Raises
    ------
    PicksError
        If either side has fewer than two picks there.
    """
    middle = 0.5 * (x_footwall + x_hanging_wall)
    level = []
    for profile, at, side in (
        (footwall, x_footwall, -1),
        (hanging_wall, x_hanging_wall, 1),
    ):
        d = side * (profile.x - at)
        near = (d >= inner) & (d <= outer)
        if near.sum() < 2:
            raise PicksError(
                "no-separation",
                f"{int(near.sum())} pick(s) between {inner:g} and {outer:g} outside "
                "the cut-off.",
                remedy="Give picks there or other distances.",
            )
        level.append(
            float(
                np.polyval(
                    np.polyfit(profile.x[near] - middle, profile.z[near], 1), 0.0
                )
            )
        )
    return level[0] - level[1]
