"""Subsidiary faults: straight faults of the hanging wall that cut the horizon.

Outboard of a subsidiary fault the columns have moved by its oblique heave besides, and
between the shear lines through its cut-offs and through its branch point on the master
fault the horizon does not see the master: the shadow.
"""

from dataclasses import dataclass, replace

import numpy as np

from .errors import Doubt
from .offsets import pick_scatter
from .profile import Profile, pool_to_increasing, profile_from_picks
from .separation import CUTOFF_PICKS, CutOff, local_curve
from .walls import tracked_gap

__all__ = [
    "SubsidiaryBlocks",
    "SubsidiaryFault",
    "SubsidiaryPlane",
    "SubsidiaryShare",
    "blocks_between_cutoffs",
    "blocks_under",
    "leave_out_near_subsidiaries",
    "measure_subsidiaries",
    "subsidiary_doubts",
    "subsidiary_planes",
    "subsidiary_shares",
    "without_gaps",
]

#: Within this of the shear direction, in degrees, a fault is part of the shear.
PARALLEL = 1.0
#: Antithetic faults within this of the shear direction may be in the model already
#: (methods.md section 4 says near; the number is common practice, no source).
COUNTED_TWICE = 10.0


@dataclass(frozen=True)
class SubsidiaryPlane:
    """A subsidiary fault in section: a straight line.

    Parameters
    ----------
    name : str
    x0, z0 : float
        A point of it.
    run : float
        dx/dz: positive where it dips towards the master fault (antithetic).
    """

    name: str
    x0: float
    z0: float
    run: float

    def x_at(self, z):
        """Give its x at an elevation."""
        return self.x0 + self.run * (np.asarray(z, dtype=float) - self.z0)

    def slope_at(self, x):  # noqa: ARG002 - as a fault's, which may bend
        """Give dz/dx."""
        return 1.0 / self.run

    @property
    def angle(self):
        """Degrees from the vertical, positive antithetic, as a shear angle."""
        return float(np.degrees(np.arctan(self.run)))

    @property
    def sense(self):
        """``antithetic`` or ``synthetic``."""
        return "antithetic" if self.run > 0 else "synthetic"


@dataclass(frozen=True)
class SubsidiaryFault:
    """A subsidiary fault and how it cuts one horizon.

    Parameters
    ----------
    plane : SubsidiaryPlane
    inboard, outboard : CutOff
        Where the horizon meets it on the side of the master and beyond.
    """

    plane: SubsidiaryPlane
    inboard: CutOff
    outboard: CutOff

    @property
    def heave(self):
        """Horizontal separation of the cut-offs, positive for a normal fault."""
        return self.outboard.x - self.inboard.x

    @property
    def throw(self):
        """Vertical separation, positive for a normal fault."""
        rise = self.outboard.z - self.inboard.z
        return rise if self.plane.run > 0 else -rise

    def added_heave(self, tan):
        """Oblique heave it adds outboard, for the tangent of a shear angle.

        h2 - t2 tan a where antithetic, h2 + t2 tan a where synthetic (eq. 7 of
        methods.md).
        """
        return self.heave - (self.outboard.z - self.inboard.z) * tan

    def added_sigma(self, tan):
        """One standard deviation of `added_heave`: the cut-offs slide along it."""
        both = np.hypot(self.inboard.sigma_z, self.outboard.sigma_z)
        return float(both * abs(self.plane.run - tan))


@dataclass(frozen=True, eq=False)
class SubsidiaryBlocks:
    """Blocks of the hanging wall along the frame's axis, and the shadows between.

    Parameters
    ----------
    faults : tuple of SubsidiaryFault
        From the master outwards.
    tan : float
        Tangent of the shear angle.
    start, end : ndarray (k,)
        u between which the horizon does not see the master, for each fault.
    added : ndarray (k + 1,)
        Oblique heave added in each block; 0 in the first.
    branch_z : ndarray (k,)
        Elevation of the branch points, NaN where there is none yet.
    """

    faults: tuple
    tan: float
    start: np.ndarray
    end: np.ndarray
    added: np.ndarray
    branch_z: np.ndarray

    def in_shadow(self, u):
        """Tell where u lies in a shadow."""
        u = np.asarray(u, dtype=float)[..., None]
        return ((u > self.start + 1e-9) & (u < self.end - 1e-9)).any(axis=-1)

    def added_at(self, u):
        """Oblique heave added at u; in a shadow that of the block inboard."""
        u = np.asarray(u, dtype=float)[..., None]
        return self.added[(u >= self.end - 1e-9).sum(axis=-1)]

    def widened(self, share):
        """Give the same with shadows wider by a share on the branch point's side."""
        more = share * (self.end - self.start)
        inwards = np.array([f.plane.run > self.tan for f in self.faults])
        return replace(
            self,
            start=np.where(inwards, self.start - more, self.start),
            end=np.where(inwards, self.end, self.end + more),
        )

    def block_of(self, u):
        """Give the number of the block a place on the horizon belongs to."""
        middle = [0.5 * (a + b) for a, b in self._cutoffs()]
        return np.searchsorted(middle, u)

    def _cutoffs(self):
        """Give u of the inboard and the outboard cut-off of each fault."""
        for fault in self.faults:
            cuts = (fault.inboard, fault.outboard)
            yield tuple(c.x - c.z * self.tan for c in cuts)

    def seen(self, bed):
        """Give the part of a bed that sees the master, against u.

        Parameters
        ----------
        bed : Profile
            Against u, without picks in the gaps.

        Returns
        -------
        Profile
            Each block out to its cut-offs or to the edge of the shadow.
        """
        block, pieces = self.block_of(bed.x), []
        cuts = list(self._cutoffs())
        for j in range(len(self.faults) + 1):
            own = block == j
            rows = np.column_stack([bed.x, bed.z, bed.sigma, bed.correlation])[own]
            if j > 0:
                cut = self.faults[j - 1].outboard
                rows = np.vstack([[cuts[j - 1][1], cut.z, cut.sigma_z, 0.0], rows])
            if j < len(self.faults):
                cut = self.faults[j].inboard
                rows = np.vstack([rows, [cuts[j][0], cut.z, cut.sigma_z, 0.0]])
            low = self.end[j - 1] if j > 0 else -np.inf
            high = self.start[j] if j < len(self.faults) else np.inf
            pieces.append(_clipped(rows, low, high))
        whole = pool_to_increasing(*np.vstack(pieces).T, least=1e-9)
        return Profile(*whole[:4])


def _clipped(rows, low, high):
    """Cut rows of (u, ...) off at two places, with points read there."""
    u = rows[:, 0]
    if not len(rows) or high <= u[0] or low >= u[-1]:
        return rows[:0]
    at = [v for v in (low, high) if u[0] < v < u[-1]]
    edges = [np.array([np.interp(v, u, c) for c in rows.T]) for v in at]
    kept = rows[(u >= low) & (u <= high)]
    whole = np.vstack([kept, *edges])
    return whole[np.argsort(whole[:, 0], kind="stable")]


def subsidiary_planes(picks):
    """Lay straight lines through the picks of each subsidiary fault.

    Parameters
    ----------
    picks : Picks
        Fault picks with wall ``hanging wall`` are theirs, told apart by name.

    Returns
    -------
    planes : tuple of SubsidiaryPlane
    doubts : list of Doubt
        Of faults with one pick and no dip, or level ones.
    """
    marks = picks.of("fault", wall="hanging wall")
    planes, doubts = [], []
    for name in sorted(set(marks.name)):
        own = marks.select(marks.name == name)
        run = _run_of(own)
        if run is None:
            text = "neither a second pick at another depth nor a dip tells its way."
            doubts.append(_not_used(name, text, picks))
            continue
        z0 = float(own.z.mean())
        planes.append(SubsidiaryPlane(name, float(own.x.mean()), z0, run))
    return tuple(planes), doubts


def _run_of(own):
    """Slope dx/dz of a line through picks, or from a dip; None if nothing tells."""
    if len(own) > 1 and np.ptp(own.z) > 0:
        run = float(np.polyfit(own.z - own.z.mean(), own.x, 1)[0])
        return run if abs(run) > 1e-9 else 1e-9
    dip = own.dip[np.isfinite(own.dip) & (own.dip != 0)]
    # a dip down towards the hanging-wall side is synthetic
    return float(-1.0 / np.tan(np.radians(np.median(dip)))) if len(dip) else None


def _not_used(name, why, picks):
    text = f"the subsidiary fault '{name}' is not used: {why}"
    return Doubt("subsidiary-not-used", text, f"section {picks.section_id}")


def leave_out_near_subsidiaries(picks, buffer, gridded=()):
    """Leave out horizon picks near subsidiary faults and values drawn across them.

    Parameters
    ----------
    picks : Picks
        With walls.
    buffer : float
        Distance from the fault, in the section plane for depths, along x for times.
    gridded : collection of str
        Keys of grids and tracked sources, in whose picks the gap is looked for.
    """
    bed = (picks.kind == "horizon") & (picks.wall == "hanging wall")
    for plane in subsidiary_planes(picks)[0]:
        for key in gridded:
            for name in sorted(set(picks.name[bed & (picks.source == key)])):
                own = bed & (picks.source == key) & (picks.name == name) & picks.used
                picks = _without_drawn(picks, np.flatnonzero(own), plane)
        across = np.abs(picks.x - plane.x_at(picks.z))
        if picks.domain == "depth":
            across = across * np.cos(np.radians(plane.angle))
        why = f"within {buffer:g} of the subsidiary fault"
        picks = picks.left_out(bed & (across < buffer), why)
    return picks


def _without_drawn(picks, at, plane):
    """Leave out values that a gridder or tracker drew across the gap of a plane."""
    way = -1.0 if plane.run > 0 else 1.0
    # seen from outboard an antithetic fault drops the horizon as a synthetic one does
    at = at[np.argsort(way * picks.x[at], kind="stable")]
    seen = replace(plane, x0=way * plane.x0, run=way * plane.run)
    inside = np.zeros(len(picks), dtype=bool)
    inside[at] = tracked_gap(way * picks.x[at], picks.z[at], seen)
    return picks.left_out(inside, "tracked across a subsidiary fault")


def measure_subsidiaries(picks, horizon):
    """Find how the subsidiary faults of a section cut a horizon.

    Parameters
    ----------
    picks : Picks
    horizon : str

    Returns
    -------
    faults : tuple of SubsidiaryFault
        From the master outwards.
    doubts : list of Doubt
        Of those that cannot be used, with the reason.

    Notes
    -----
    The horizon is extended to the fault from both sides, by the picks nearest to it
    (see `separation.local_curve`).
    """
    bed = profile_from_picks(picks.of("horizon", horizon, "hanging wall"))
    planes, doubts = subsidiary_planes(picks)
    if not len(bed):
        return (), doubts
    planes = sorted(planes, key=lambda p: float(p.x_at(np.median(bed.z))))
    error = np.maximum(bed.sigma, pick_scatter(bed.x, bed.z))
    while planes:
        found, bad = [], None
        block = sum((bed.x > p.x_at(bed.z)).astype(int) for p in planes)
        for j, plane in enumerate(planes):
            # noise may put a pick beside its cut-off on the wrong side
            told = np.abs(bed.x - plane.x_at(bed.z)) > 3.0 * error * abs(plane.run)
            inboard, outboard = (
                _cut(bed, told & (block == k), plane, error) for k in (j, j + 1)
            )
            fault, why = _checked(plane, inboard, outboard)
            if why:
                bad = (plane, why)
                break
            found.append(fault)
        if bad is None:
            return tuple(found), doubts
        planes.remove(bad[0])
        doubts.append(_not_used(bad[0].name, bad[1], picks))
    return (), doubts


def _checked(plane, inboard, outboard):
    """Make the fault, or say why it cannot be used."""
    if inboard is None or outboard is None:
        return None, "the horizon cannot be extended to it from both sides."
    fault = SubsidiaryFault(plane, inboard, outboard)
    if fault.throw <= 0 or fault.heave <= 0:
        return None, (
            f"the horizon has no normal offset there (heave {fault.heave:.1f}, throw "
            f"{fault.throw:.1f})."
        )
    return fault, ""


def _near_curve(x, z, sigma, error, inboard, plane):
    """Fit the picks nearest a plane: fewer where they do not lie on one curve.

    Farther back the bed bends where it comes to ride on the plane.
    """
    end = x[-1] if inboard else x[0]
    for count in range(min(CUTOFF_PICKS, len(x)), 1, -1):
        near = slice(-count, None) if inboard else slice(None, count)
        curve, variance = local_curve(x[near], z[near], sigma[near], end, plane)
        if np.all(np.abs(z[near] - curve(x[near])) <= 4.0 * error[near]):
            break
    return end, curve, variance


def _cut(bed, own, plane, error):
    """Extend one block of a bed to a plane; None where it does not reach it."""
    x, z, sigma = bed.x[own], bed.z[own], np.maximum(bed.sigma[own], 1e-3)
    if len(x) < 2:
        return None
    inboard = x[0] < plane.x_at(z[0])
    # what a parabola misses by over eight picks of a smooth bed, at least
    error = np.maximum(error[own], 1e-3 * np.ptp(bed.z))
    end, curve, variance = _near_curve(x, z, sigma, error, inboard, plane)
    at, step = float(plane.x_at(curve(end))), 1e-3 * np.ptp(x)
    for _ in range(30):
        slope = (curve(at + step) - curve(at - step)) / (2 * step)
        across = 1.0 - plane.run * slope
        if abs(across) < 1e-3:
            return None
        at -= (at - float(plane.x_at(curve(at)))) / across
    if not np.isfinite(at) or abs(at - end) > 3.0 * max(np.ptp(bed.x), 1.0):
        return None
    error = float(np.sqrt(variance(at))) / abs(across)
    wall = "hanging wall" if inboard == (plane.run > 0) else "footwall"
    how = f"extended over {abs(at - end):.0f}"
    return CutOff(
        wall,
        at,
        float(curve(at)),
        abs(plane.run) * error,
        error,
        how,
        slides=True,
        horizon_slope=float(slope),
    )


def without_gaps(bed, faults):
    """Leave out the picks of a bed between the cut-offs of subsidiary faults."""
    keep = np.ones(len(bed), dtype=bool)
    for fault in faults:
        keep &= (bed.x <= fault.inboard.x) | (bed.x >= fault.outboard.x)
    return Profile(bed.x[keep], bed.z[keep], bed.sigma[keep], bed.correlation[keep])


def _added(faults, tan):
    """Oblique heave added in each block."""
    return np.cumsum([0.0, *(f.added_heave(tan) for f in faults)])


def blocks_between_cutoffs(faults, tan):
    """Give the blocks before the fault is known: shadows from cut-off to cut-off."""
    ends = [[c.x - c.z * tan for c in (f.inboard, f.outboard)] for f in faults]
    start, end = np.sort(np.array(ends), axis=1).T
    nothing = np.full(len(faults), np.nan)
    return SubsidiaryBlocks(faults, tan, start, end, _added(faults, tan), nothing)


def blocks_under(faults, tan, u, z, strip):
    """Give the blocks of a horizon above a fault.

    Parameters
    ----------
    faults : tuple of SubsidiaryFault
    tan : float
        Tangent of the shear angle.
    u, z : ndarray (n,)
        The master fault along the shear lines, u growing; carried on straight, as
        it runs over its last `strip`, where a branch point lies beyond.
    strip : float

    Returns
    -------
    SubsidiaryBlocks

    Notes
    -----
    With P the branch point where the line through the picks meets the master now, i
    and o the cut-offs and dH what is added, the shadow is [u_P - dH, u_o] where the
    subsidiary dips inwards in the frame and [u_i, u_P + dH] where it dips outwards
    (methods.md section 4: [xP + h1, xt + h1 + h2] and [xt + h1, xP + h1 + h2] with
    the branch point carried with the block below the subsidiary fault).
    """
    edges, depths = [], []
    for fault in faults:
        inner, outer = (c.x - c.z * tan for c in (fault.inboard, fault.outboard))
        added = fault.added_heave(tan)
        at, depth = _branch(fault.plane, tan, u, z, strip)
        if fault.plane.run > tan:
            start, end = at - added, outer
        else:
            start, end = inner, at + added
        edges.append((start, end) if added > 0 else (inner, outer))
        depths.append(depth)
    start, end = np.sort(np.array(edges), axis=1).T
    added = _added(faults, tan)
    return SubsidiaryBlocks(faults, tan, start, end, added, np.array(depths))


def _branch(plane, tan, u, z, strip):
    """Give u and z where a plane, carried down, meets the fault."""
    last = u >= u[-1] - strip
    slope = np.polyfit(u[last], z[last], 1)[0] if last.sum() > 1 else 0.0
    far = 100.0 * (u[-1] - u[0])
    u, z = np.r_[u, u[-1] + far], np.r_[z, z[-1] + min(slope, 0.0) * far]
    gap = u - (plane.x_at(z) - z * tan)
    hit = np.flatnonzero((gap[:-1] < 0) & (gap[1:] >= 0))
    if not len(hit):
        return np.inf, np.nan
    i = int(hit[0])
    f = gap[i] / (gap[i] - gap[i + 1])
    return float(u[i] + f * (u[i + 1] - u[i])), float(z[i] + f * (z[i + 1] - z[i]))


@dataclass(frozen=True)
class SubsidiaryShare:
    """What one subsidiary fault did in a construction.

    Parameters
    ----------
    fault : SubsidiaryFault
    added_heave, sigma : float
        Oblique heave it adds outboard, and its standard deviation.
    share : float
        Of the oblique heave of the outermost block.
    branch : tuple (x, z)
        Where it meets the master.
    shadow : tuple (u, u)
        Along the shear lines.
    """

    fault: SubsidiaryFault
    added_heave: float
    sigma: float
    share: float
    branch: tuple
    shadow: tuple


def subsidiary_shares(blocks, oblique_heave):
    """Give what each subsidiary fault adds, and its share of the whole extension.

    Parameters
    ----------
    blocks : SubsidiaryBlocks or None
    oblique_heave : float
        At the cut-offs of the horizon on the master.

    Returns
    -------
    tuple of SubsidiaryShare
    """
    if blocks is None:
        return ()
    total = oblique_heave + blocks.added[-1]
    return tuple(
        SubsidiaryShare(
            fault,
            float(fault.added_heave(blocks.tan)),
            fault.added_sigma(blocks.tan),
            float(fault.added_heave(blocks.tan) / total),
            (float(fault.plane.x_at(z)), float(z)),
            (float(start), float(end)),
        )
        for fault, z, start, end in zip(
            blocks.faults, blocks.branch_z, blocks.start, blocks.end
        )
    )


def subsidiary_doubts(faults, shear_angle):
    """Doubt faults that a shear angle may hold already.

    Parameters
    ----------
    faults : tuple of SubsidiaryFault
    shear_angle : float

    Yields
    ------
    code, text : str
    """
    for fault in faults:
        plane = fault.plane
        apart = abs(plane.angle - shear_angle)
        if apart <= PARALLEL:
            yield (
                "branch-parallel-to-shear",
                f"the subsidiary fault '{plane.name}' runs along the shear planes of "
                f"{shear_angle:g} degrees: it adds no heave, it is the shear.",
            )
        elif plane.run > 0 and apart <= COUNTED_TWICE:
            yield (
                "counted-twice",
                f"the antithetic fault '{plane.name}' stands {apart:.0f} degrees off "
                f"the shear planes of {shear_angle:g} degrees; if that angle was "
                "chosen for such faults, its extension is counted twice.",
            )
