"""The piece of fault nobody has seen, between its last known point and the cut-off."""

from dataclasses import replace

import numpy as np

from .profile import profile_from_picks
from .separation import CUTOFF_PICKS

__all__ = [
    "ASSUMED_ERRORS",
    "carry_on",
    "needs_assumed_piece",
    "with_assumed_errors",
]

#: Errors an assumed piece is given: the dip at the last known point (degrees) and
#: the curvature, as a share (common practice, no source).
ASSUMED_ERRORS = {"dip_change": 3.0, "curvature_share": 0.3}


def needs_assumed_piece(fault, bed):
    """Tell whether the bed's cut-off lies beyond the observed fault.

    Parameters
    ----------
    fault : KnownFault
    bed : Profile
        The horizon in the hanging wall, without its cut-off.
    """
    if len(bed) < 2:
        return False
    level, slope = _line_near(bed, first=True)
    # a point on the cut-off itself, but for rounding, has reached it
    rounding = 1e-6 * (1.0 + np.abs(fault.z).max())
    return bool(fault.z[-1] - level - slope * fault.x[-1] > rounding)


def _line_near(profile, first):
    """Level at x = 0 and slope of a line through the picks nearest the fault."""
    near = slice(None, CUTOFF_PICKS) if first else slice(-CUTOFF_PICKS, None)
    x, z = profile.x[near], profile.z[near]
    if len(x) < 2 or np.ptp(x) == 0:
        return float(z[0]) if len(z) else 0.0, 0.0
    slope, level = np.polyfit(x, z, 1)
    return float(level), float(slope)


def carry_on(
    fault,
    picks,
    horizon,
    model,
    dip_change=0.0,
    curvature_share=1.0,
    compaction=None,
):
    """Carry the known fault on by an arc whose turn the bed prescribes.

    Parameters
    ----------
    fault : KnownFault
    picks : Picks
        Of the section, with walls.
    horizon : str
    model : object
        Kinematic model; its shear angle sets the frame.
    dip_change : float
        Added to the dip at the last known point, degrees.
    curvature_share : float
        Share of the arc's curvature that is kept; 0 is the straight line.
    compaction : Compaction, optional
        Of the construction.

    Returns
    -------
    KnownFault
        With assumed points beyond the observed ones; unchanged where the bed does
        not turn towards the fault, or no arc satisfies it.

    Notes
    -----
    Differentiating B~(u + H) = R~(u) + F~(u + H) - F~(u) gives
    F~'(u_h) = F~'(u_f) + B~'(u_h) - R~': the fault has flattened between its cut-offs
    by as much as the bed dips towards it against the regional. An arc of constant
    curvature in the shear frame that turns by that much is the simplest fault that
    agrees with the bed; a straight line agrees only with a bed parallel to the
    regional. With compaction the solid thickness is differentiated instead:
    F~'(u_h) - B~'(u_h) = g (F~'(u_f) - R~'), g the solid share of the rock at the
    footwall cut-off then over that at the hanging-wall cut-off now. The arc is ours;
    the relation is eq. 3 of methods.md.
    """
    bed = profile_from_picks(picks.of("horizon", horizon, "hanging wall"))
    foot = profile_from_picks(picks.of("horizon", horizon, "footwall"))
    if not len(foot) or not needs_assumed_piece(fault, bed):
        return fault
    tan = float(np.tan(np.radians(model.shear_angle)))
    dip = np.degrees(np.arctan(-fault.slope_below)) + dip_change
    lines = _line_near(bed, True), _footwall(foot)
    arc = _Arc(fault, np.clip(dip, 1.0, 89.0), tan, *lines, compaction)
    curvature = arc.curvature()
    if curvature is None:
        return fault if dip_change == 0 else _straight(fault, dip)
    return _with_points(fault, *arc.points(curvature * curvature_share))


def with_assumed_errors(prediction, variants):
    """Widen the stated sigmas of a prediction by what an assumed piece may be off.

    Parameters
    ----------
    prediction : Prediction
    variants : sequence of Prediction
        The same section with one error of the assumed piece each.

    Returns
    -------
    Prediction
    """
    trace, separation = prediction.trace, prediction.separation
    variance = trace.sigma_z**2
    for variant in variants:
        other = variant.trace
        end = np.interp(trace.x, other.x, other.z) - trace.z
        variance = variance + np.where(trace.constrained == "known", 0.0, end**2)
    # the regional meets the assumed piece too where nothing of it is observed
    separation = replace(
        separation,
        footwall=_widened(prediction, variants, "footwall"),
        hanging_wall=_widened(prediction, variants, "hanging_wall"),
    )
    return replace(
        prediction,
        trace=replace(trace, sigma_z=np.sqrt(variance)),
        separation=separation,
    )


def _widened(prediction, variants, wall):
    """Give a cut-off with the sigmas that the variants add to it."""
    own = getattr(prediction.separation, wall)
    others = [getattr(v.separation, wall) for v in variants]
    return replace(
        own,
        sigma_x=float(
            np.hypot(own.sigma_x, np.linalg.norm([c.x - own.x for c in others]))
        ),
        sigma_z=float(
            np.hypot(own.sigma_z, np.linalg.norm([c.z - own.z for c in others]))
        ),
    )


def _footwall(foot):
    """Line of the footwall horizon over all its picks."""
    if len(foot) < 2 or np.ptp(foot.x) == 0:
        return float(foot.z[0]), 0.0
    slope, level = np.polyfit(foot.x, foot.z, 1)
    return float(level), float(slope)


class _Arc:
    """F~(u) = z0 + f (u - u0) + c/2 (u - u0)^2 beyond the last known point."""

    def __init__(self, fault, dip, tan, bed, regional, compaction=None):
        self.tan, self.compaction = tan, compaction
        self.x0, self.z0 = float(fault.x[-1]), float(fault.z[-1])
        self.u0 = self.x0 - self.z0 * tan
        slope = -np.tan(np.radians(dip))
        self.f = slope / (1.0 - slope * tan)
        self.bed = self._in_frame(*bed)
        self.regional = self._in_frame(*regional)
        # on an observed footwall cut-off the fault's own slope counts
        x = fault.x[fault.z > regional[0] + regional[1] * fault.x]
        self.foot_known = len(x) < len(fault.x)
        if self.foot_known:
            self.foot_u, self.foot_slope = self._observed_foot(fault, regional)

    def _in_frame(self, level, slope):
        """Line z = level + slope x written as z = a + b u."""
        stretch = 1.0 - slope * self.tan
        return level / stretch, slope / stretch

    def _observed_foot(self, fault, regional):
        gap = fault.z - regional[0] - regional[1] * fault.x
        i = max(int(np.argmax(gap < 0)), 1)
        at = fault.x[i - 1] + (fault.x[i] - fault.x[i - 1]) * gap[i - 1] / (
            gap[i - 1] - gap[i]
        )
        near = slice(max(i - 3, 0), i + 3)
        slope = float(np.polyfit(fault.x[near], fault.z[near], 1)[0])
        z = regional[0] + regional[1] * at
        return at - z * self.tan, slope / (1.0 - slope * self.tan)

    def _meets(self, line, c):
        """Give u beyond the last known point where the arc meets a line, or None."""
        # z0 + f d + c d^2/2 = a + b (u0 + d)
        a = self.z0 - line[0] - line[1] * self.u0
        b = self.f - line[1]
        if abs(c) < 1e-15:
            d = -a / b if b < 0 else -1.0
        else:
            under = b * b - 2.0 * c * a
            d = (-b - np.sqrt(under)) / c if under >= 0 else -1.0
        return self.u0 + d if d > 0 else None

    def _excess(self, c):
        """Turn of the arc between the cut-offs less the turn the bed asks for."""
        hang = self._meets(self.bed, c)
        if hang is None:
            return None
        if self.foot_known:
            foot, before = self.foot_u, self.foot_slope
        else:
            foot = self._meets(self.regional, c)
            if foot is None or foot >= hang:
                return None
            before = self.f + c * (foot - self.u0)
        asked = self._gain(foot, hang) * (before - self.regional[1]) + self.bed[1]
        return self.f + c * (hang - self.u0) - asked

    def _gain(self, foot, hang):
        """Solid share of the rock at the one cut-off then over the other's now."""
        if self.compaction is None:
            return 1.0
        zf = self.regional[0] + self.regional[1] * foot
        zh = self.bed[0] + self.bed[1] * hang
        return self.compaction.gains(zh, zf, zh)[0]

    def curvature(self):
        """Give the curvature that satisfies the bed, or None."""
        reach = abs((self.z0 - self.bed[0] - self.bed[1] * self.u0) / self.f)
        trial = np.linspace(0.0, 2.0 * abs(self.f) / max(reach, 1e-9), 401)
        last = None
        for c in trial:
            value = self._excess(c)
            if value is None:
                return None
            if last is not None and last[1] < 0 <= value:
                return float(last[0] + (c - last[0]) * last[1] / (last[1] - value))
            last = (c, value)
        return None

    def points(self, c):
        """Give x and z of the arc to a little beyond the hanging-wall cut-off."""
        end = self._meets(self.bed, c)
        flat = self.u0 - self.f / c if c > 0 else np.inf
        end = self.u0 + 1.3 * (end - self.u0) if end is not None else flat
        end = min(end, 0.05 * self.u0 + 0.95 * flat) if np.isfinite(flat) else end
        d = np.linspace(0.0, end - self.u0, 25)[1:]
        z = self.z0 + self.f * d + 0.5 * c * d * d
        return self.u0 + d + z * self.tan, z


def _with_points(fault, x, z):
    if x[-1] - x[-2] <= 0.0:
        return fault  # so near its end that rounding leaves no arc
    slope = (z[-1] - z[-2]) / (x[-1] - x[-2])
    return replace(
        fault,
        x=np.r_[fault.x, x],
        z=np.r_[fault.z, z],
        slope_below=float(slope),
        below_from="an arc that turns as much as the bed dips towards the fault",
        observed=len(fault.x),
    )


def _straight(fault, dip):
    return replace(fault, slope_below=float(-np.tan(np.radians(dip))))
