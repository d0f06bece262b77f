"""What one section gives a solver, and what a solver gives back."""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .compaction import Compaction
from .errors import ConstructionError
from .kinematics import to_shear_frame
from .profile import Profile, pool_to_increasing
from .stepping import at_origin, march
from .subsidiary import blocks_between_cutoffs, blocks_under

__all__ = [
    "MarchOptions",
    "OtherHorizon",
    "Problem",
    "Solution",
    "bed_from",
    "bed_in_frame",
    "solve_march",
    "start_piece",
]

#: Times the branch points of subsidiary faults are found anew from the fault.
PASSES = 3
#: Heaves of shadow over which the fault is taken as straight at most.
WIDEST_SHADOW = 1.5


@dataclass(frozen=True)
class MarchOptions:
    """How a section is solved.

    Parameters
    ----------
    samples_per_strip : int
        Nodes in one oblique heave; the step is the heave over it, exactly.
    shear_angle_sigma : float
        One standard deviation of the shear angle in degrees, for the stated sigma.
    robust : bool
        The fit gives picks that miss by more than twice their sigma less weight.
    detachment_z, detachment_sigma : float
        Detachment level known from elsewhere and its sigma; the fit takes it as a
        soft constraint.
    compaction : Compaction, optional
        Columns keep their solid thickness; the march only.
    """

    samples_per_strip: int = 40
    shear_angle_sigma: float = 0.0
    robust: bool = False
    detachment_z: Optional[float] = None
    detachment_sigma: float = 50.0
    compaction: Optional[Compaction] = None


@dataclass(frozen=True, eq=False)
class OtherHorizon:
    """A further horizon for the fit, with its own cut-offs and regional.

    Parameters
    ----------
    name : str
    separation : Separation
    bed : Profile
        In the hanging wall.
    regional : Regional
    subsidiaries : tuple of SubsidiaryFault
        How they cut this horizon.
    """

    name: str
    separation: object
    bed: Profile
    regional: object
    subsidiaries: tuple = ()


@dataclass(frozen=True, eq=False)
class Problem:
    """What one section gives a construction.

    Parameters
    ----------
    where : str
        Section, for messages.
    separation : Separation
    fault : KnownFault
    bed : Profile
        Hanging-wall horizon; its first point is the hanging-wall cut-off.
    regional : Regional
        Written against the footwall cut-off.
    model : object
        Kinematic model.
    options : MarchOptions
    others : tuple of OtherHorizon
        Further horizons the fit uses besides.
    subsidiaries : tuple of SubsidiaryFault
        Faults of the hanging wall that cut the horizon, from the master outwards;
        the bed has no picks in their gaps.
    """

    where: str
    separation: object
    fault: object
    bed: Profile
    regional: object
    model: object
    options: MarchOptions
    others: tuple = ()
    subsidiaries: tuple = ()

    @property
    def tan(self):
        """Tangent of the shear angle: u = x - z tan."""
        return float(np.tan(np.radians(self.model.shear_angle)))

    @property
    def oblique_heave(self):
        """Displacement of the columns along the frame's axis at the cut-offs."""
        separation = self.separation
        return float(self.model.displacement(separation.heave, separation.throw))

    def regional_at(self, u):
        """Give R~(u) = (R(0) + s u)/(1 - s tan a) of the straight regional."""
        line = self.regional
        at_zero = line.z0 - line.slope * line.x0
        return (at_zero + line.slope * u) / (1.0 - line.slope * self.tan)


@dataclass(frozen=True, eq=False)
class Solution:
    """One march: everything at its nodes, against u along the shear lines.

    Parameters
    ----------
    u, z : ndarray (n,)
        Nodes from the footwall cut-off on, and the fault there.
    origin_index, origin_fraction : ndarray (n,)
        Where the column of each node came from, as for `march`.
    bed_z, regional_z : ndarray (n,)
        The bed at the node, the regional at its origin.
    bed : Profile
        The bed against u, its sigma along the shear lines.
    start : int
        Nodes on the known or assumed piece.
    reach : ndarray (n,) of bool, optional
        False where a node has no data near it.
    detail : object, optional
        What else the solver has to tell (`FitDetail`).
    thinning : ndarray (n,) or float
        By how much the column at the node is thinner than when the fault moved.
    gains : tuple of ndarray (n,), optional
        dF/dF(origin) and dF/dB at the nodes, where they are not 1.
    blocks : SubsidiaryBlocks, optional
        Blocks of the hanging wall and the shadows between them, where subsidiary
        faults cut it.
    """

    u: np.ndarray
    z: np.ndarray
    origin_index: np.ndarray
    origin_fraction: np.ndarray
    bed_z: np.ndarray
    regional_z: np.ndarray
    bed: Profile
    start: int
    reach: object = None
    detail: object = None
    thinning: object = 0.0
    gains: object = None
    blocks: object = None

    @property
    def increment(self):
        """F at each node less F at its origin; the start piece has none."""
        return self.bed_z - self.regional_z + self.thinning

    def carried(self, errors):
        """Carry small errors of the bed at the nodes (n, k) through the march."""
        start = np.zeros((self.start, errors.shape[1]))
        step = None
        if self.gains is not None:
            of_fault, of_bed = (g[:, None] for g in self.gains)

            def step(inner, nodes):
                return of_fault[nodes] * inner + of_bed[nodes] * errors[nodes]

        return march(self.origin_index, self.origin_fraction, start, errors, step)

    @property
    def strip(self):
        """Number of the strip of each node, 0 on the start piece."""
        near = self.origin_index + (self.origin_fraction > 0)
        # across a wide shadow a node hangs on itself; it counts from the last before
        near = np.clip(near, 0, np.maximum(np.arange(len(near)) - 1, 0))
        steps = np.ones(len(self.u))
        start = np.zeros(self.start)
        return march(near, np.zeros(len(near)), start, steps).astype(int)


def bed_in_frame(problem):
    """Write the bed against u; noise that breaks its order is averaged."""
    bed, angle, tan = problem.bed, problem.model.shear_angle, problem.tan
    u = to_shear_frame(bed.x, bed.z, angle)
    if problem.subsidiaries:
        # beside a subsidiary fault the bed may overturn; along the frame it does not
        return _overturned(u, bed, tan)
    u, z, sigma, x, length, count = pool_to_increasing(
        u, bed.z, bed.sigma, bed.x, bed.correlation, least=1e-9
    )
    if count.max() > 1:
        _check_pooling(problem, x, count)
    slope = np.gradient(z, x) if len(x) > 1 else np.zeros(1)
    # a vertical error of the pick is longer along an inclined shear line
    factor = np.maximum(np.abs(1.0 - slope * tan), 0.2)
    return Profile(u, z, sigma / factor, length)


def _overturned(u, bed, tan):
    """Write a bed that is single-valued in u only."""
    order = np.argsort(u, kind="stable")
    columns = (c[order] for c in (u, bed.z, bed.sigma, bed.correlation))
    u, z, sigma, length, _ = pool_to_increasing(*columns, least=1e-9)
    along = np.gradient(z, u) if len(u) > 1 else np.zeros(1)
    # 1 - B' tan in terms of the slope along the frame
    factor = np.clip(1.0 / np.abs(1.0 + along * tan), 0.2, None)
    return Profile(u, z, sigma / factor, length)


def _check_pooling(problem, x, count):
    """Refuse a bed whose order breaks over more than noise could."""
    # how far in x the averaging reaches: noise folds little, a steep bed a lot
    last = np.cumsum(count).astype(int) - 1
    first = last - count.astype(int) + 1
    width = problem.bed.x[last] - problem.bed.x[first]
    i = int(np.argmax(width))
    if width[i] > 0.5 * problem.oblique_heave:
        raise ConstructionError(
            "shear-parallel-to-bed",
            f"near x = {x[i]:.0f} the bed dips more steeply than the shear planes of "
            f"{problem.model.shear_angle:g} degrees allow.",
            problem.where,
            "Use a smaller shear angle, or check the picks there.",
        )


def start_piece(problem, u):
    """F~ on the nodes between the cut-offs, through both of them exactly."""
    fault = problem.fault
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    inner = fault.x[(fault.x > foot.x) & (fault.x < hang.x)]
    x = np.r_[foot.x, inner, hang.x]
    z = np.r_[foot.z, fault.z_at(inner), hang.z]
    return np.interp(u, x - z * problem.tan, z)


def solve_march(problem):
    """March one section.

    The nodes stand one oblique heave over `samples_per_strip` apart, exactly, from
    the footwall cut-off to the last pick. Where subsidiary faults cut the bed there
    are none in their shadows: the fault is straight across, and the march goes on
    beyond by the heave of the next block.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    Solution
    """
    faults, tan = problem.subsidiaries, problem.tan
    if not faults:
        return _march(problem, None)
    blocks = blocks_between_cutoffs(faults, tan)
    for _ in range(PASSES):
        found = _march(problem, blocks, widest=10.0)  # a branch is looked for only
        heave = problem.oblique_heave
        blocks = blocks_under(faults, tan, found.u, found.z, heave)
    return _march(problem, blocks)


def _march(problem, blocks, widest=WIDEST_SHADOW):
    """March with the blocks of the hanging wall known, or None for a single one.

    Shadows wider than so many heaves end it.
    """
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    bed = bed_in_frame(problem)
    bed = bed if blocks is None else blocks.seen(bed)
    m = problem.options.samples_per_strip
    u0 = foot.x - foot.z * problem.tan
    step = (hang.x - hang.z * problem.tan - u0) / m
    count = int(np.floor((bed.x[-1] - u0) / step + 1e-6)) + 1
    u = u0 + step * np.arange(max(count, m + 1))
    if blocks is not None:
        u = u[~blocks.in_shadow(u) | (np.arange(len(u)) <= m)]
    origin = problem.model.origin(u, bed, problem)
    if blocks is None:
        at = np.maximum((origin - u0) / step, 0.0)
    else:
        origin = origin - blocks.added_at(u)
        # between the nodes either side of a shadow the fault is straight
        at = np.interp(origin, u, np.arange(len(u)))
    index = np.floor(at + 1e-6).astype(int)
    fraction = np.where(np.abs(at - index) < 1e-6, 0.0, at - index)
    if blocks is not None:
        last = _last_marched(problem, index, fraction, m + 1, widest)
        u, index, fraction, origin = (v[:last] for v in (u, index, fraction, origin))
    bed_z = np.interp(u, bed.x, bed.z)
    regional_z = problem.regional_at(origin)
    start = start_piece(problem, u[: m + 1])
    if problem.options.compaction is None:
        z = march(index, fraction, start, bed_z - regional_z)
        return Solution(
            u, z, index, fraction, bed_z, regional_z, bed, m + 1, blocks=blocks
        )
    solution = _compacting(
        problem.options.compaction, u, index, fraction, start, bed_z, regional_z, bed
    )
    return replace(solution, blocks=blocks)


def _last_marched(problem, index, fraction, start, widest):
    """Count the nodes up to a shadow too wide to be marched across."""
    ahead = index + (fraction > 0) >= np.arange(len(index))
    if problem.options.compaction is None:
        # a column one heave inboard of the far edge stands that far into the shadow
        ahead &= fraction > 1.0 - 1.0 / widest
    ahead[:start] = False
    return int(np.argmax(ahead)) if ahead.any() else len(index)


def _compacting(compaction, u, index, fraction, start, bed_z, regional_z, bed):
    """March columns that keep their solid thickness."""
    increment = bed_z - regional_z

    def step(inner, nodes):
        thinner = compaction.thinning(bed_z[nodes], regional_z[nodes], inner)
        return inner + increment[nodes] + thinner

    z = march(index, fraction, start, increment, step)
    inner = at_origin(index, fraction, z)
    thinning = compaction.thinning(bed_z, regional_z, inner)
    thinning[: len(start)] = 0.0
    gains = compaction.gains(bed_z, inner, z)
    return Solution(
        u,
        z,
        index,
        fraction,
        bed_z,
        regional_z,
        bed,
        len(start),
        thinning=thinning,
        gains=gains,
    )


def bed_from(cutoff, bed):
    """Give the bed from its hanging-wall cut-off on, picks inboard left out."""
    beyond = bed.x > cutoff.x + 1e-6
    return Profile(
        np.r_[cutoff.x, bed.x[beyond]],
        np.r_[cutoff.z, bed.z[beyond]],
        np.r_[cutoff.sigma_z, bed.sigma[beyond]],
        np.r_[0.0, bed.correlation[beyond]],
    )
