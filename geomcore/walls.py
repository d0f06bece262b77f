"""Which wall a pick lies in, and which picks are too near the fault to be trusted."""

from dataclasses import replace

import numpy as np

from .fault import KnownFault

__all__ = [
    "LEDGE",
    "assign_walls",
    "is_upright",
    "leave_out_near_fault",
    "tracked_gap",
    "upright_line",
]

#: Quiet samples that do not end a fault gap. Autotrackers hold a level for some
#: samples before they jump to the other block: ledges of up to six samples lie in the
#: gaps of an openly licensed tracked horizon offshore Nova Scotia, and the published
#: open data in the project's table bridge three and eight. No source gives a number.
LEDGE = 6
#: A step belongs to the gap if it stands out by more than this share of the steepest
#: one (common practice, no source): drag and dip changes beside the fault do not.
STEEP_SHARE = 0.25
#: Picks a line of either block is laid through where its walls are told by level.
_NEXT_PICKS = 4
#: dz/dx of a line that only tells left from right.
_UPRIGHT = -1e6


def upright_line(x, z):
    """Make the guide for a fault of which no more than its place at x is known."""
    place = np.array([float(x)]), np.array([float(z)])
    return KnownFault(*place, 0.0, _UPRIGHT, _UPRIGHT, "an upright line")


def is_upright(fault):
    """Tell whether a fault is a guide whose dip says nothing."""
    return len(fault.x) == 1 and fault.slope_below == _UPRIGHT


def assign_walls(picks, fault):
    """Give each horizon pick its wall by its side of the fault.

    Parameters
    ----------
    picks : Picks
        Picks of one section.
    fault : KnownFault
        Carried on straight beyond what is known, which is enough to tell the side:
        hanging-wall beds lie above a listric fault and above its straight
        continuation.

    Returns
    -------
    Picks
        Horizon and dip picks get ``footwall`` or ``hanging wall`` unless their
        source declares it.

    Notes
    -----
    A listric fault lies beyond its straight continuation, so below what is known of
    it footwall picks may seem to lie beyond it. The first ones of a horizon there are
    given back to the footwall as long as they lie nearer to its line than to that of
    the next picks.
    """
    beyond = picks.x > fault.x_at(picks.z)
    side = np.where(beyond, "hanging wall", "footwall").astype(object)
    bed = np.isin(picks.kind, ("horizon", "dip")) & np.isfinite(picks.z)
    told = bed & (picks.wall == "")
    wall = np.where(told, side, picks.wall)
    if not is_upright(fault):
        guessed = told & (picks.z < fault.z[-1]) & picks.used
        for name in sorted(set(picks.name[guessed])):
            own = (picks.kind == "horizon") & (picks.name == name) & picks.used
            wall[_strays(picks, wall, own, guessed)] = "footwall"
    return replace(picks, wall=wall)


def _strays(picks, wall, own, guessed):
    """Give the footwall picks of one horizon that a straight fault puts beyond it."""
    foot = np.flatnonzero(own & (wall == "footwall"))
    hang = np.flatnonzero(own & guessed & (wall == "hanging wall"))
    foot, hang = (i[np.argsort(picks.x[i], kind="stable")] for i in (foot, hang))
    foot = foot[-_NEXT_PICKS:]
    count = 0
    while len(foot) > 1 and len(hang) - count > 2:
        at = hang[count]
        after = hang[count + 1 : count + 1 + _NEXT_PICKS]
        low, high = (_level_at(picks, i, picks.x[at]) for i in (after, foot))
        apart = high - low > 4.0 * picks.sigma_z[at]
        if not apart or picks.z[at] - low <= high - picks.z[at]:
            break
        count += 1
    return hang[:count]


def _level_at(picks, chosen, x):
    """Level of a line through picks, carried to a place; their mean if at one place."""
    d, z = picks.x[chosen] - x, picks.z[chosen]
    if np.ptp(d) == 0:
        return float(z.mean())
    return float(np.polyfit(d, z, 1)[1])


def leave_out_near_fault(picks, fault, buffer, gridded=()):
    """Leave out horizon picks near the fault and grid values across its gap.

    Parameters
    ----------
    picks : Picks
        With walls assigned.
    fault : KnownFault
    buffer : float
        Distance from the fault: in the section plane for depths, along x for
        times (a distance between metres and milliseconds means nothing).
    gridded : collection of str
        Keys of the sources that are grids or tracked picks; their values across
        the gap are looked for by `tracked_gap` too.

    Returns
    -------
    Picks
    """
    bed = picks.kind == "horizon"
    for key in gridded:
        for name in sorted(set(picks.name[bed & (picks.source == key)])):
            mask = bed & (picks.source == key) & (picks.name == name) & picks.used
            picks = _leave_out_gap(picks, np.flatnonzero(mask), fault)
    distance = np.full(len(picks), np.inf)
    distance[bed] = _distance_to_fault(picks, bed, fault)
    return picks.left_out(distance < buffer, f"within {buffer:g} of the fault")


def _leave_out_gap(picks, at, fault):
    """Leave out the picks of one tracked surface that lie in the fault gap.

    Where only the place of the fault is known, or the gap lies below all that is
    known of it, the gap tells the walls better than a line through that place or
    than a straight continuation: they are taken from it.
    """
    inside = np.zeros(len(picks), dtype=bool)
    inside[at] = tracked_gap(picks.x[at], picks.z[at], fault)
    if inside.any() and (is_upright(fault) or _is_below(picks.z[inside], fault)):
        wall, gap = picks.wall.copy(), picks.x[inside]
        wall[at[picks.x[at] < gap.min()]] = "footwall"
        wall[at[picks.x[at] > gap.max()]] = "hanging wall"
        picks = replace(picks, wall=wall)
    return picks.left_out(inside, "tracked across the fault gap")


def _is_below(z, fault):
    """Tell whether elevations lie below the last known point of the fault."""
    return bool(np.median(z) < fault.z[-1])


def _distance_to_fault(picks, bed, fault):
    """Distance of picks to the fault polyline, carried on at both ends."""
    x, z = picks.x[bed], picks.z[bed]
    across = np.abs(x - fault.x_at(z))
    if picks.domain == "time":
        return across
    reach = np.nanmax(np.abs(np.r_[x - fault.x[0], z - fault.z[0], 1.0])) * 2
    px = np.r_[fault.x[0] - reach, fault.x, fault.x[-1] + reach]
    pz = fault.z_at(px)
    best = across
    for i in range(len(px) - 1):
        dx, dz = px[i + 1] - px[i], pz[i + 1] - pz[i]
        f = ((x - px[i]) * dx + (z - pz[i]) * dz) / (dx * dx + dz * dz)
        f = np.clip(f, 0.0, 1.0)
        best = np.minimum(best, np.hypot(x - px[i] - f * dx, z - pz[i] - f * dz))
    return best


def tracked_gap(x, z, fault):
    """Find samples that a gridder or tracker drew across the fault gap.

    Parameters
    ----------
    x, z : ndarray (n,)
        Samples of one surface in order of x, known values only.
    fault : KnownFault

    Returns
    -------
    ndarray (n,) of bool
        True inside the gap: between the outermost of the steps down to the hanging
        wall that hang together with the steepest one near the fault. Such a step
        stands out from the surface's usual slope by more than four times its scatter
        and by more than `STEEP_SHARE` of what the steepest one does; no more than
        `LEDGE` quiet samples part it from the next.

    Notes
    -----
    Usual slope and scatter are the median and 1.4826 times the median absolute
    deviation of all steps (common practice, no source). The search reaches as far
    either side of the fault as its heave could be: twice the drop of the surface
    there over the fault's slope, at least a ledge and a step. The gap may run on
    beyond, but its steepest step has to lie there.
    """
    inside = np.zeros(len(x), dtype=bool)
    side = x > fault.x_at(z)
    if len(x) < 8 or side.all() or not side.any():
        return inside
    apart = np.diff(x)
    # samples at one place have no slope between them
    slope = np.diff(z) / np.where(apart > 0, apart, np.inf)
    usual = np.median(slope)
    excess = usual - slope
    scatter = max(1.4826 * np.median(np.abs(excess)), 1e-3)
    within = _steps_near(x, z, fault, int(np.argmax(side)))
    if not within.any():
        return inside
    steepest = int(np.argmax(np.where(within, excess, -np.inf)))
    if excess[steepest] <= 4.0 * scatter:
        return inside
    steep = excess > max(4.0 * scatter, STEEP_SHARE * excess[steepest])
    first, last = _hanging_together(steep, steepest)
    inside[first + 1 : last + 1] = True
    return inside


def _steps_near(x, z, fault, at):
    """Tell which steps lie within reach of the fault, beyond which sample `at` is."""
    gentle = max(abs(float(fault.slope_at(x[at]))), 1e-3)
    drop = np.ptp(z[max(at - 20, 0) : at + 20])
    reach = max((LEDGE + 1) * np.median(np.diff(x)), 2.0 * drop / gentle)
    return (x[1:] >= x[at - 1] - reach) & (x[:-1] <= x[at] + reach)


def _hanging_together(steep, at):
    """Give the first and last of the steep steps round one, over ledges."""
    steps = np.flatnonzero(steep)
    own = int(np.searchsorted(steps, at))
    apart = np.flatnonzero(np.diff(steps) > LEDGE + 1)
    first = apart[apart < own].max() + 1 if (apart < own).any() else 0
    last = apart[apart >= own].min() if (apart >= own).any() else len(steps) - 1
    return int(steps[first]), int(steps[last])
