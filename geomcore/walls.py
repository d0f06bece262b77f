"""Which wall a pick lies in, and which picks are too near the fault to be trusted."""

import numpy as np

__all__ = ["assign_walls", "leave_out_near_fault", "tracked_gap"]


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
    """
    from dataclasses import replace

    beyond = picks.x > fault.x_at(picks.z)
    side = np.where(beyond, "hanging wall", "footwall").astype(object)
    bed = np.isin(picks.kind, ("horizon", "dip")) & np.isfinite(picks.z)
    return replace(picks, wall=np.where(bed & (picks.wall == ""), side, picks.wall))


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
            inside = np.zeros(len(picks), dtype=bool)
            at = np.flatnonzero(mask)
            inside[at] = tracked_gap(picks.x[at], picks.z[at], fault)
            picks = picks.left_out(inside, "tracked across the fault gap")
    distance = np.full(len(picks), np.inf)
    distance[bed] = _distance_to_fault(picks, bed, fault)
    return picks.left_out(distance < buffer, f"within {buffer:g} of the fault")


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
        True inside the gap: the run of steps down to the hanging wall round the
        steepest one near the fault that stand out from the surface's usual slope
        by more than four times its scatter.

    Notes
    -----
    Usual slope and scatter are the median and 1.4826 times the median absolute
    deviation of all steps (common practice, no source). The search reaches as far
    either side of the fault as its heave could be: twice the drop of the surface
    there over the fault's slope, at least three steps.
    """
    n = len(x)
    inside = np.zeros(n, dtype=bool)
    if n < 8:
        return inside
    slope = np.diff(z) / np.diff(x)
    usual = np.median(slope)
    scatter = max(1.4826 * np.median(np.abs(slope - usual)), 1e-3)
    side = x > fault.x_at(z)
    if side.all() or not side.any():
        return inside
    at = int(np.argmax(side))
    middle = x[at]
    gentle = abs(float(fault.slope_at(middle)))
    drop = np.ptp(z[max(at - 20, 0) : at + 20])
    reach = max(3.0 * (x[1] - x[0]), 2.0 * drop / max(gentle, 1e-3))
    steps = np.flatnonzero((x[1:] >= middle - reach) & (x[:-1] <= middle + reach))
    if not len(steps):
        return inside
    steepest = int(steps[np.argmin(slope[steps])])
    steep = usual - slope > 4.0 * scatter
    if not steep[steepest]:
        return inside
    first = last = steepest
    # one quiet step inside the run does not end it: ledges are common there
    while first > 0 and (steep[first - 1] or (first > 1 and steep[first - 2])):
        first -= 1
    while last < n - 2 and (steep[last + 1] or (last < n - 3 and steep[last + 2])):
        last += 1
    inside[first + 1 : last + 1] = True
    return inside
