"""Cut-offs of a horizon, given or found, its regional, heave and throw."""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .errors import ConstructionError, Doubt, PicksError
from .fault import known_fault
from .profile import fit_line, profile_from_picks
from .separation import (
    CutOff,
    Separation,
    crossing_sigma,
    extend_to_fault,
    level_separation,
)
from .walls import upright_line

__all__ = [
    "CutoffOptions",
    "GivenCutoffs",
    "RegionalResult",
    "SeparationResult",
    "given_cutoffs",
    "measure_separation",
    "refuse_reverse",
    "regional_and_separation",
    "wall_guide",
]


#: How a cut-off came about that is the last pick before the fault gap.
EDGE = "edge of the fault gap"


@dataclass(frozen=True)
class CutoffOptions:
    """Distances outside the cut-offs between which block levels are fitted."""

    separation_from: float = 50.0
    separation_to: float = 500.0


@dataclass(frozen=True)
class GivenCutoffs:
    """Cut-offs that came in as picks, and what is doubtful about them."""

    footwall: Optional[CutOff]
    hanging_wall: Optional[CutOff]
    doubts: tuple = ()

    @property
    def cutoffs(self):
        """Those that are there and not crossed, from the footwall on."""
        both = [c for c in (self.footwall, self.hanging_wall) if c is not None]
        crossed = len(both) == 2 and both[0].x >= both[1].x
        return () if crossed else tuple(both)


@dataclass(frozen=True)
class SeparationResult:
    """A measured separation.

    Parameters
    ----------
    separation : Separation
    level_difference : float or None
        Vertical separation at mid gap from straight fits outside the cut-offs.
    doubts : tuple of Doubt
    """

    separation: Separation
    level_difference: Optional[float]
    doubts: tuple = ()


@dataclass(frozen=True)
class RegionalResult:
    """Regional and separation of the horizon a construction uses."""

    regional: object
    separation: Separation
    result: SeparationResult
    doubts: tuple


def wall_guide(picks, other=None):
    """Give the fault a section's walls are told by, or None.

    It is the known fault where there is one; else an upright line through the one
    point known of it, or through the middle of the given cut-offs; else an upright
    line where the picks of the other domain have the fault.
    """
    try:
        return known_fault(picks)[0]
    except PicksError as error:
        if error.code == "wrong-side":
            return None  # the section is refused for it when it is constructed
    for table in (picks, other):
        if table is None:
            continue
        for marks in (table.of("fault", wall=""), table.of("cutoff")):
            if len(marks):
                z = (
                    float(np.median(picks.z[np.isfinite(picks.z)]))
                    if len(picks)
                    else 0.0
                )
                return upright_line(0.5 * (marks.x.min() + marks.x.max()), z)
    return None


def _block_level(picks, horizon, side, at, options):
    """Level of a horizon in one block, carried straight to a place; None if unknown.

    Carried by a line through the picks between the distances of `options`: their
    middle alone would mistake a dip for a change of level. Two picks carry no line;
    they give their mean.
    """
    bed = picks.of("horizon", horizon)
    d = side * (bed.x - at)
    near = (d >= options.separation_from) & (d <= options.separation_to)
    if near.sum() < 2:
        return None
    if near.sum() == 2 or np.ptp(d[near]) == 0:
        return float(bed.z[near].mean())
    return float(np.polyval(np.polyfit(d[near], bed.z[near], 1), 0.0))


def given_cutoffs(picks, horizon, options):
    """Read the cut-offs of a horizon from cut-off picks, with their walls.

    A declared wall is kept. Otherwise each crossing belongs to the block whose
    level it lies nearer to, so that an overlap is not taken for a gap; without
    levels the first along transport is taken as the footwall's, with a doubt.

    Returns
    -------
    GivenCutoffs or None
        None where no cut-off came in.

    Raises
    ------
    PicksError
        If more cut-offs came in than two walls can have.
    """
    where = f"section {picks.section_id}"
    marks = picks.of("cutoff", horizon)
    if not len(marks):
        return None
    marks = marks.select(np.argsort(marks.x, kind="stable"))
    declared = {w: marks.select(marks.wall == w) for w in ("footwall", "hanging wall")}
    free = marks.select(marks.wall == "")
    for wall, own in declared.items():
        if len(own) > 1:
            raise PicksError(
                "too-many-cutoffs",
                f"{len(own)} {wall} cut-offs of '{horizon}' came in.",
                where,
                "Filter the cut-off layer to this fault.",
            )
    found = {w: _as_cutoff(own, 0, w) for w, own in declared.items() if len(own)}
    if not len(free):
        return GivenCutoffs(found.get("footwall"), found.get("hanging wall"))
    open_walls = [w for w in declared if w not in found]
    if len(free) > len(open_walls):
        raise PicksError(
            "too-many-cutoffs",
            f"the section crosses {len(marks)} cut-off lines of '{horizon}'.",
            where,
            "Filter the cut-off layer to this fault, or shorten the section.",
        )
    if len(free) == 1:
        wall = (
            open_walls[0]
            if len(open_walls) == 1
            else _nearer_block(picks, horizon, free, options, where)
        )
        found[wall] = _as_cutoff(free, 0, wall)
        return GivenCutoffs(found.get("footwall"), found.get("hanging wall"))
    crossed, doubts = _is_crossed(picks, horizon, free, options, where)
    first, second = (1, 0) if crossed else (0, 1)
    return GivenCutoffs(
        _as_cutoff(free, first, "footwall"),
        _as_cutoff(free, second, "hanging wall"),
        doubts,
    )


def refuse_reverse(given, where):
    """Refuse to construct from cut-offs that overlap.

    Parameters
    ----------
    given : GivenCutoffs or None
    where : str
        Section, for the message.

    Raises
    ------
    ConstructionError
        With code ``reverse-separation`` if the hanging-wall cut-off does not lie
        beyond the footwall's: there is no heave to construct with.
    """
    foot = given.footwall if given else None
    hang = given.hanging_wall if given else None
    if foot is None or hang is None or hang.x > foot.x:
        return
    raise ConstructionError(
        "reverse-separation",
        f"the hanging-wall cut-off lies {foot.x - hang.x:.1f} behind the footwall "
        "cut-off (reverse separation); the construction holds for normal faults.",
        where,
        "Check the cut-offs and the hanging-wall side.",
    )


def _as_cutoff(picks, i, wall):
    return CutOff(
        wall,
        float(picks.x[i]),
        float(picks.z[i]),
        float(picks.sigma_x[i]),
        float(picks.sigma_z[i]),
        "given",
    )


def _nearer_block(picks, horizon, free, options, where):
    x, z = float(free.x[0]), float(free.z[0])
    low = _block_level(picks, horizon, -1, x, options)
    high = _block_level(picks, horizon, 1, x, options)
    if low is None or high is None:
        raise PicksError(
            "cutoff-wall",
            f"nothing tells which wall the cut-off of '{horizon}' belongs to.",
            where,
            "Declare the wall of the cut-off layer.",
        )
    return "footwall" if abs(z - low) <= abs(z - high) else "hanging wall"


def _is_crossed(picks, horizon, free, options, where):
    """Tell whether two cut-offs lie beyond each other (an overlap)."""
    low = _block_level(picks, horizon, -1, float(free.x[0]), options)
    high = _block_level(picks, horizon, 1, float(free.x[1]), options)
    if low is None or high is None:
        doubt = Doubt(
            "cutoff-walls-by-order",
            f"without levels of '{horizon}' on both sides the first cut-off along "
            "transport is taken as the footwall's; an overlap would go unseen.",
            where,
        )
        return False, (doubt,)
    straight = abs(free.z[0] - low) + abs(free.z[1] - high)
    crossed = abs(free.z[1] - low) + abs(free.z[0] - high)
    return bool(crossed < straight), ()


def _walls(picks, horizon):
    return tuple(
        profile_from_picks(picks.of("horizon", horizon, w))
        for w in ("footwall", "hanging wall")
    )


def measure_separation(picks, fault, horizon, options):
    """Measure cut-offs, heave, throw and level difference of one horizon.

    Parameters
    ----------
    picks : Picks
        Of one section, in depth or time, with walls.
    fault : KnownFault or None
        Without it (or in time) the cut-offs are the last picks before and the
        first beyond the gap.
    horizon : str
    options : CutoffOptions

    Returns
    -------
    SeparationResult

    Raises
    ------
    PicksError
        If the horizon is not there on both sides.
    """
    given = given_cutoffs(picks, horizon, options)
    foot, hang = (given.footwall, given.hanging_wall) if given else (None, None)
    footwall, hanging = _walls(picks, horizon)
    where = f"section {picks.section_id}, horizon {horizon}"
    foot = foot or _found_cutoff(footwall, fault, "footwall", where)
    hang = hang or _found_cutoff(hanging, fault, "hanging wall", where)
    separation = Separation(horizon, foot, hang, picks.domain)
    doubts = list(given.doubts) if given else []
    doubts += _gap_doubts(separation, footwall, hanging, where)
    return _with_level(separation, footwall, hanging, options, doubts)


def _gap_doubts(separation, footwall, hanging, where):
    """Doubt a gap that is no wider than the picks are apart anyway."""
    if EDGE not in (separation.footwall.how, separation.hanging_wall.how):
        return []
    near = np.r_[np.diff(footwall.x[-9:]), np.diff(hanging.x[:9])]
    if not len(near) or separation.heave > 1.5 * np.median(near):
        return []
    text = (
        "no gap shows in the picks at the fault: heave and throw are those of "
        "neighbouring picks, only the level difference means something."
    )
    return [Doubt("no-gap", text, where)]


def _with_level(separation, footwall, hanging, options, doubts):
    try:
        level = level_separation(
            footwall,
            hanging,
            min(separation.footwall.x, separation.hanging_wall.x),
            max(separation.footwall.x, separation.hanging_wall.x),
            options.separation_from,
            options.separation_to,
        )
    except PicksError:
        level = None  # too few picks there: the field stays null
    return SeparationResult(separation, level, tuple(doubts))


def _found_cutoff(profile, fault, wall, where):
    if fault is not None:
        return extend_to_fault(profile, fault, wall, where)[0]
    if not len(profile):
        raise PicksError("no-cutoff", f"there is no {wall} pick.", where)
    i = -1 if wall == "footwall" else 0
    return CutOff(
        wall,
        float(profile.x[i]),
        float(profile.z[i]),
        0.0,
        float(profile.sigma[i]),
        EDGE,
    )


def regional_and_separation(
    picks, fault, horizon, model, spec, given, options, added_heave=0.0
):
    """Find the regional and the cut-offs of the horizon to be constructed from.

    The footwall cut-off is where the regional meets the fault, so that both are
    one statement; a given footwall cut-off or level fixes the regional there.

    Parameters
    ----------
    picks : Picks
    fault : KnownFault
    horizon : str
    model : ConstantHeave
    spec : RegionalSpec
    given : GivenCutoffs or None
    options : CutoffOptions
    added_heave : float
        What subsidiary faults add to the oblique heave of the far picks.

    Returns
    -------
    RegionalResult

    Raises
    ------
    PicksError, ConstructionError
        If regional or cut-offs cannot be found.
    """
    where = f"section {picks.section_id}"
    footwall, hanging = _walls(picks, horizon)
    foot = given.footwall if given else None
    hang = given.hanging_wall if given else None
    doubts = list(given.doubts) if given else []
    refuse_reverse(given, where)
    if hang is None:
        hang, _ = extend_to_fault(hanging, fault, "hanging wall", where)
    far = _far_picks(hanging, fault, spec)
    slope = _given_slope(picks, spec, where)
    moved_by, regional, given_foot = 0.0, None, foot
    for _ in range(4 if far is not None else 1):
        regional, foot = _regional(
            footwall, far, moved_by, fault, given_foot, spec, slope, where
        )
        separation = Separation(horizon, foot, hang)
        moved_by = model.displacement(separation.heave, separation.throw) + added_heave
    doubts += _spec_doubts(regional, spec, given_foot, far, where)
    doubts += _level_doubts(regional, footwall, where)
    result = _with_level(separation, footwall, hanging, options, tuple(doubts))
    return RegionalResult(regional, separation, result, tuple(_unique(doubts)))


def _unique(doubts):
    return list(dict.fromkeys(doubts))


def _given_slope(picks, spec, where):
    """Slope of the regional where it is given, or taken from another horizon."""
    if spec.dip is not None:
        return -np.tan(np.radians(spec.dip))
    if not spec.parallel_to:
        return None
    other = profile_from_picks(picks.of("horizon", spec.parallel_to, "footwall"))
    try:
        return fit_line(other.x, other.z, other.sigma, robust=spec.robust).slope
    except PicksError:
        raise PicksError(
            "regional-picks",
            f"horizon '{spec.parallel_to}' has {len(other)} footwall pick(s): it gives "
            "no dip for the regional.",
            where,
            "Name another horizon, or give the dip.",
        ) from None


def _far_picks(hanging, fault, spec):
    if spec.far_from is None:
        return None
    far = hanging.x > fault.x[0] + spec.far_from
    return (hanging.x[far], hanging.z[far], hanging.sigma[far])


def _regional(footwall, far, moved_by, fault, foot, spec, slope, where):
    """Regional against the footwall cut-off, and that cut-off."""
    x, z, sigma = footwall.x, footwall.z, footwall.sigma
    if spec.footwall_within is not None:
        near = x > fault.x[0] - spec.footwall_within
        x, z, sigma = x[near], z[near], sigma[near]
    if far is not None and moved_by > 0:
        x, z, sigma = (
            np.r_[x, far[0] - moved_by],
            np.r_[z, far[1]],
            np.r_[sigma, far[2]],
        )
    if spec.z is not None and foot is None:
        foot = CutOff(
            "footwall",
            float(fault.x_at(spec.z)),
            float(spec.z),
            how="the given regional meets the fault",
            slides=True,
        )
    through = (foot.x, foot.z) if foot else None
    if through and slope is None and len(x) < 1:
        slope = 0.0
    try:
        regional = fit_line(x, z, sigma, slope, through, spec.robust)
    except PicksError as error:
        raise PicksError(error.code, error.reason, where, error.remedy) from None
    if foot is not None:
        variance = (foot.sigma_z**2, 0.0, regional.covariance[2])
        foot = replace(foot, horizon_slope=regional.slope)
        return replace(regional, covariance=variance), foot
    span = max(np.ptp(fault.x), np.ptp(x), 1.0)
    at = fault.crossing(regional, fault.x[0] - span, fault.x[-1] + 2 * span)
    if at is None:
        raise PicksError(
            "no-cutoff",
            "the regional does not meet the fault.",
            where,
            "Check the footwall picks, the regional and the fault.",
        )
    regional = regional.moved_to(at)
    slope_f = float(fault.slope_at(at))
    sigma_x, sigma_z = crossing_sigma(
        float(regional.sigma_at(at)), fault.sigma, regional.slope, slope_f
    )
    foot = CutOff(
        "footwall",
        at,
        regional.z0,
        sigma_x,
        sigma_z,
        regional.how,
        slides=True,
        horizon_slope=regional.slope,
    )
    return regional, foot


def _spec_doubts(regional, spec, given_foot, far, where):
    """Doubt a regional that is not what was asked for."""
    found = []
    if spec.dip is None and not regional.n_picks:
        found.append(("regional-level", "no picks tell its dip: it is taken as level."))
    if spec.z is not None and given_foot is not None:
        found.append(
            (
                "regional-z-unused",
                f"the level {spec.z:g} given for it is not used: it goes through the "
                f"footwall cut-off given at {given_foot.z:.1f}.",
            )
        )
    if far is not None and not len(far[0]):
        found.append(
            ("no-far-picks", f"no hanging-wall pick lies {spec.far_from:g} beyond.")
        )
    return [Doubt(code, f"regional: {text}", where) for code, text in found]


def _level_doubts(regional, footwall, where):
    """Doubt a footwall horizon that is not straight within its stated sigma."""
    if not regional.n_picks or len(footwall) < 5:
        return []
    miss = footwall.z - regional(footwall.x)
    if not footwall.sigma.any():
        return _unstated_doubts(miss, where)
    rms = float(np.sqrt(((miss / np.maximum(footwall.sigma, 1e-3)) ** 2).mean()))
    if rms <= 2.0:
        return []
    return [
        Doubt(
            "regional-misfit",
            f"the footwall picks miss the straight regional by {rms:.1f} times their "
            "sigma.",
            where,
        )
    ]


def _unstated_doubts(miss, where):
    """Say by how much picks without a stated sigma miss the regional."""
    rms = float(np.sqrt((miss**2).mean()))
    if rms <= 0.05:
        return []  # what rounding leaves
    text = (
        f"the footwall picks miss the straight regional by {rms:.1f} (root mean "
        "square); no sigma is stated for them."
    )
    return [Doubt("regional-misfit", text, where)]
