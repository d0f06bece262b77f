"""Growth strata: expansion, history of heave and throw, forward growth sections."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError, Doubt
from .forward import forward_horizon
from .kinematics import to_shear_frame
from .profile import profile_from_picks
from .separation import CUTOFF_PICKS, local_curve

__all__ = [
    "BEYOND_ERROR",
    "Expansion",
    "GrowthHorizon",
    "GrowthSection",
    "HistoryRow",
    "SectionHistory",
    "forward_growth",
    "growth_doubts",
    "history",
    "section_history",
]

#: Standard deviations by which an expansion index has to exceed 1 to be called growth
#: (common practice, no source).
BEYOND_ERROR = 2.0
#: Expansion that straight or curved extensions of clean picks may feign.
LEAST = 0.01


@dataclass(frozen=True)
class Expansion:
    """How much thicker an interval is in the hanging wall than in the footwall.

    Parameters
    ----------
    upper, lower : str
        Horizons that bound it.
    hanging_wall, footwall : float
        Thickness along the shear lines, where the lower horizon meets the fault in
        the hanging wall and the upper one in the footwall.
    sigma_hanging_wall, sigma_footwall : float
        One standard deviation of each.
    """

    upper: str
    lower: str
    hanging_wall: float
    footwall: float
    sigma_hanging_wall: float
    sigma_footwall: float

    @property
    def index(self):
        """Expansion index: hanging-wall over footwall thickness (Thorsen 1963)."""
        return self.hanging_wall / self.footwall

    @property
    def sigma(self):
        """One standard deviation of the index."""
        of_hanging = self.sigma_hanging_wall / self.footwall
        of_foot = self.index * self.sigma_footwall / self.footwall
        return float(np.hypot(of_hanging, of_foot))

    @property
    def is_growth(self):
        """Tell whether it thickens by more than its error."""
        return self.index - 1.0 > max(BEYOND_ERROR * self.sigma, LEAST)


@dataclass(frozen=True)
class HistoryRow:
    """What the fault has moved since one horizon was laid down.

    Parameters
    ----------
    horizon : str
    heave, throw, oblique_heave : float
        Of its cut-offs: all that followed its deposition.
    sigma_heave, sigma_throw : float
    heave_before, throw_before : float or None
        What the fault moved between the next older horizon and this one; None for
        the oldest.
    """

    horizon: str
    heave: float
    throw: float
    oblique_heave: float
    sigma_heave: float
    sigma_throw: float
    heave_before: object = None
    throw_before: object = None


@dataclass(frozen=True, eq=False)
class SectionHistory:
    """Growth of one section.

    Parameters
    ----------
    rows : tuple of HistoryRow
        From the oldest horizon to the youngest.
    intervals : tuple of Expansion
        Between neighbours, from the oldest to the youngest.
    left_out : tuple of str
        Intervals that could not be measured, with the reason.
    """

    rows: tuple
    intervals: tuple
    left_out: tuple = ()


def history(separations, shear_angle=0.0):
    """Give heave and throw since each horizon, oldest to youngest.

    Parameters
    ----------
    separations : sequence of Separation
        In depth; the order does not matter.
    shear_angle : float
        For the oblique heave H = heave + throw tan(a).

    Returns
    -------
    tuple of HistoryRow

    Notes
    -----
    Older is what lies deeper in the footwall (order of the footwall cut-offs).
    Horizons older than the fault share one oblique heave; a growth horizon has what
    was left of it (methods.md section 6).
    """
    tan = np.tan(np.radians(shear_angle))
    rows, older = [], None
    for one in sorted(separations, key=lambda s: s.footwall.z):
        walls = (one.footwall, one.hanging_wall)
        rows.append(
            HistoryRow(
                one.horizon,
                one.heave,
                one.throw,
                float(one.heave + one.throw * tan),
                float(np.hypot(*(c.sigma_x for c in walls))),
                float(np.hypot(*(c.sigma_z for c in walls))),
                None if older is None else older.heave - one.heave,
                None if older is None else older.throw - one.throw,
            )
        )
        older = one
    return tuple(rows)


def section_history(picks, separations, shear_angle=0.0):
    """Give the history of a section and the expansion of each interval.

    Parameters
    ----------
    picks : Picks
        In depth, with walls.
    separations : sequence of Separation
        Of the horizons to be looked at.
    shear_angle : float
        Thickness is measured along the shear lines, which constant heave keeps.

    Returns
    -------
    SectionHistory
    """
    depth = [s for s in separations if s.domain == "depth"]
    rows = history(depth, shear_angle)
    by_name = {s.horizon: s for s in depth}
    intervals, left_out = [], []
    for lower, upper in zip(rows, rows[1:]):
        pair = by_name[upper.horizon], by_name[lower.horizon]
        try:
            intervals.append(expansion(picks, *pair, shear_angle))
        except ConstructionError as error:
            left_out.append(f"{upper.horizon} to {lower.horizon}: {error.reason}")
    return SectionHistory(rows, tuple(intervals), tuple(left_out))


def expansion(picks, upper, lower, shear_angle=0.0):
    """Measure the expansion of the interval between two horizons at the fault.

    Parameters
    ----------
    picks : Picks
    upper, lower : Separation
    shear_angle : float

    Returns
    -------
    Expansion

    Raises
    ------
    ConstructionError
        If one of them has too few picks there, or the interval has no thickness in
        the footwall.

    Notes
    -----
    The levels are those of local lines (or parabolas, see `local_curve`) through the
    picks nearest to the shear line. Columns keep their length along the shear lines,
    so an interval older than the fault has an index of 1 whatever the fault's shape;
    cut-offs alone would not show that, since they lie on different shear lines. With
    a wrong shear angle such an interval seems to expand or thin.
    """
    at_hang = _u(lower.hanging_wall, shear_angle)
    at_foot = _u(upper.footwall, shear_angle)
    hanging, s_hanging = _thickness(
        picks, upper, lower, "hanging wall", at_hang, shear_angle
    )
    footwall, s_footwall = _thickness(
        picks, upper, lower, "footwall", at_foot, shear_angle
    )
    if footwall <= 0:
        raise ConstructionError(
            "no-thickness",
            f"the interval has a thickness of {footwall:.1f} in the footwall.",
            f"horizons {upper.horizon} and {lower.horizon}",
            "Check the names of the horizons and their picks.",
        )
    return Expansion(
        upper.horizon, lower.horizon, hanging, footwall, s_hanging, s_footwall
    )


def _u(cut, shear_angle):
    return float(to_shear_frame(cut.x, cut.z, shear_angle))


def _thickness(picks, upper, lower, wall, at, shear_angle):
    """Thickness along the shear line at u, and its standard deviation."""
    levels = [
        _level(picks, one.horizon, wall, at, shear_angle) for one in (upper, lower)
    ]
    (top, of_top), (base, of_base) = levels
    return top - base, float(np.sqrt(of_top + of_base))


@dataclass(frozen=True)
class _Line:
    """A shear line in the frame: upright."""

    u: float

    def x_at(self, z):  # noqa: ARG002 - asked as a fault is
        return self.u


def _level(picks, horizon, wall, at, shear_angle):
    """Level of a horizon on the shear line at u, and its variance."""
    bed = profile_from_picks(picks.of("horizon", horizon, wall))
    u = to_shear_frame(bed.x, bed.z, shear_angle)
    near = np.sort(np.argsort(np.abs(u - at), kind="stable")[:CUTOFF_PICKS])
    if len(near) < 2 or np.ptp(u[near]) == 0:
        raise ConstructionError(
            "too-few-picks", f"'{horizon}' has {len(near)} pick(s) in the {wall}."
        )
    sigma = np.maximum(bed.sigma[near], 1e-3)
    end = u[near][np.argmin(np.abs(u[near] - at))]
    curve, variance = local_curve(u[near], bed.z[near], sigma, end, _Line(at))
    if np.median(bed.correlation[near]) > np.ptp(u[near]) / len(near):
        # errors that go together do not average out
        return float(curve(at)), max(float(variance(at)), float(np.median(sigma) ** 2))
    return float(curve(at)), float(variance(at))


def growth_doubts(picks, separations, horizon, shear_angle=0.0, shared=()):
    """Doubt horizons that are used as older than the fault but grew with it.

    Parameters
    ----------
    picks : Picks
    separations : sequence of Separation
    horizon : str
        The horizon the fault is constructed from.
    shear_angle : float
    shared : collection of str
        Horizons that are predicted with the heave of that horizon.

    Returns
    -------
    list of Doubt
    """
    depth = {s.horizon: s for s in separations if s.domain == "depth"}
    own, doubts = depth.pop(horizon, None), []
    if own is None:
        return []
    for name in sorted(depth):
        other = depth[name]
        is_older = other.footwall.z < own.footwall.z
        if not is_older and name not in shared:
            continue
        pair = (own, other) if is_older else (other, own)
        try:
            found = expansion(picks, *pair, shear_angle)
        except ConstructionError:
            continue  # too few picks: nothing can be said
        if found.is_growth:
            doubts.append(_growth_doubt(found, picks.section_id))
    return doubts


def _growth_doubt(found, section_id):
    text = (
        f"from '{found.lower}' up to '{found.upper}' the strata are {found.index:.2f} "
        f"(+/- {found.sigma:.2f}) times as thick in the hanging wall: '{found.upper}' "
        f"was laid down while the fault moved and has only the heave since then, not "
        f"that of '{found.lower}'."
    )
    return Doubt("growth-horizon", text, f"section {section_id}")


@dataclass(frozen=True)
class GrowthHorizon:
    """A horizon of a forward growth section.

    Parameters
    ----------
    name : str
    regional : Regional
        Where it was laid down.
    displacement : float
        What the fault moves after that (the model's measure, see `forward_horizon`);
        0 for one that seals the fault.
    """

    name: str
    regional: object
    displacement: float


@dataclass(frozen=True, eq=False)
class GrowthSection:
    """One horizon of a forward growth section as it lies now.

    Parameters
    ----------
    name : str
    profile : Profile or None
        In the hanging wall; None for a horizon that seals the fault.
    footwall, hanging_wall : tuple (x, z) or None
        Cut-offs.
    """

    name: str
    profile: object
    footwall: object
    hanging_wall: object


def forward_growth(trace_x, trace_z, horizons, model, compaction=None):
    """Predict growth strata: each horizon moves by what was left when it was laid down.

    Parameters
    ----------
    trace_x, trace_z : ndarray (n,)
        The fault, x growing.
    horizons : sequence of GrowthHorizon
        From the oldest to the youngest.
    model : object
        Kinematic model.
    compaction : Compaction, optional

    Returns
    -------
    tuple of GrowthSection

    Raises
    ------
    ConstructionError
        If a younger horizon would have moved farther than an older one, or as
        `forward_horizon`.
    """
    found, before = [], np.inf
    for one in horizons:
        if not 0 <= one.displacement <= before:
            raise ConstructionError(
                "growth-order",
                f"horizon '{one.name}' is to move {one.displacement:g}, the next older "
                f"one {before:g}.",
                f"horizon {one.name}",
                "List the horizons from the oldest to the youngest, with what the "
                "fault moved since each.",
            )
        before = one.displacement
        parts = (None, None, None)
        if one.displacement > 0:
            parts = forward_horizon(
                trace_x,
                trace_z,
                one.regional,
                one.displacement,
                model,
                compaction=compaction,
            )
        found.append(GrowthSection(one.name, *parts))
    return tuple(found)
