"""The march: the fault from the rollover, strip by strip."""

from dataclasses import dataclass, field
from typing import Optional

import numpy as np

from .doubts import march_doubts
from .errors import ConstructionError
from .kinematics import from_shear_frame, to_shear_frame
from .profile import Profile, pool_to_increasing
from .stepping import march
from .uncertainty import march_sigma

__all__ = [
    "FaultTrace",
    "MarchOptions",
    "MarchTable",
    "Prediction",
    "Problem",
    "Solution",
    "bed_from",
    "march",
    "predict_fault",
    "solve",
]


@dataclass(frozen=True)
class MarchOptions:
    """How finely the march is sampled and when the detachment counts as reached.

    Parameters
    ----------
    samples_per_strip : int
        Nodes in one oblique heave; the step is the heave over it, exactly.
    shear_angle_sigma : float
        One standard deviation of the shear angle in degrees, for the stated sigma.
    """

    samples_per_strip: int = 40
    shear_angle_sigma: float = 0.0


@dataclass(frozen=True, eq=False)
class FaultTrace:
    """A fault in section, from the footwall end down dip.

    Parameters
    ----------
    x, z : ndarray (n,)
        Points, x growing.
    dip : ndarray (n,)
        Degrees, positive down towards the hanging wall.
    strip : ndarray (n,) of int
        0 down to the hanging-wall cut-off, then the number of the strip.
    constrained : ndarray (n,) of str
        ``known``, ``assumed`` or ``predicted``.
    sigma_z : ndarray (n,)
        One standard deviation of z at fixed x, NaN where nothing can be said.
    """

    x: np.ndarray
    z: np.ndarray
    dip: np.ndarray
    strip: np.ndarray
    constrained: np.ndarray
    sigma_z: np.ndarray

    def __len__(self):
        return len(self.x)

    def z_at(self, x):
        """Give the fault's z at x, NaN beyond its ends."""
        return np.interp(x, self.x, self.z, left=np.nan, right=np.nan)

    @property
    def length(self):
        """Length along the trace."""
        return float(np.hypot(np.diff(self.x), np.diff(self.z)).sum())


@dataclass(frozen=True, eq=False)
class MarchTable:
    """The march one row per strip end, to be checked by hand.

    F = F_origin + B - R_origin on every row; in the shear frame u replaces x.

    Parameters
    ----------
    strip : ndarray (n,) of int
    x, u : ndarray (n,)
        Place of the fault point, and the place of its column in the shear frame.
    bed, regional, increment, fault : ndarray (n,)
        B there, R one heave inwards, their difference, and F.
    """

    strip: np.ndarray
    x: np.ndarray
    u: np.ndarray
    bed: np.ndarray
    regional: np.ndarray
    increment: np.ndarray
    fault: np.ndarray


@dataclass(frozen=True, eq=False)
class Prediction:
    """What the construction says of one section.

    Parameters
    ----------
    section_id, horizon : str
    model : object
        Kinematic model used.
    solver : str
        ``march``.
    separation : Separation
    regional : Regional
        Written against the footwall cut-off.
    oblique_heave : float
        H = heave + throw tan(a).
    trace : FaultTrace
    table : MarchTable
    detachment_z : float or None
        Where the bed is back at its far position; else None.
    deepest_z : float
        Last elevation reached: the fault goes at least this deep.
    doubts : tuple of Doubt
    """

    section_id: str
    horizon: str
    model: object
    solver: str
    separation: object
    regional: object
    oblique_heave: float
    trace: FaultTrace
    table: MarchTable
    detachment_z: Optional[float]
    deepest_z: float
    doubts: tuple = field(default=())

    @property
    def strips(self):
        """Number of the last strip."""
        return int(self.trace.strip.max())


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
    """

    where: str
    separation: object
    fault: object
    bed: Profile
    regional: object
    model: object
    options: MarchOptions

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
    """

    u: np.ndarray
    z: np.ndarray
    origin_index: np.ndarray
    origin_fraction: np.ndarray
    bed_z: np.ndarray
    regional_z: np.ndarray
    bed: Profile
    start: int

    @property
    def strip(self):
        """Number of the strip of each node, 0 on the start piece."""
        near = self.origin_index + (self.origin_fraction > 0)
        steps = np.ones(len(self.u))
        start = np.zeros(self.start)
        return march(near, np.zeros(len(near)), start, steps).astype(int)


def _bed_in_frame(problem):
    """Write the bed against u; noise that breaks its order is averaged."""
    bed, angle, tan = problem.bed, problem.model.shear_angle, problem.tan
    u = to_shear_frame(bed.x, bed.z, angle)
    u, z, sigma, x, count = pool_to_increasing(u, bed.z, bed.sigma, bed.x, least=1e-9)
    if count.max() > 1:
        _check_pooling(problem, x, count)
    slope = np.gradient(z, x) if len(x) > 1 else np.zeros(1)
    # a vertical error of the pick is longer along an inclined shear line
    factor = np.maximum(np.abs(1.0 - slope * tan), 0.2)
    return Profile(u, z, sigma / factor)


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


def _check_fault_in_frame(problem):
    """Refuse a start piece that is not single-valued along the shear lines."""
    low, high = problem.separation.footwall.x, problem.separation.hanging_wall.x
    slope = problem.fault.slope_at(np.linspace(low, high, 50))
    if (1.0 - slope * problem.tan).min() <= 0.05:
        raise ConstructionError(
            "shear-parallel-to-fault",
            f"the fault dips {np.degrees(np.arctan(-slope.min())):.0f} degrees, too "
            "near the synthetic shear planes of "
            f"{problem.model.shear_angle:g} degrees.",
            problem.where,
            "Use a smaller synthetic angle.",
        )


def _start_piece(problem, u):
    """F~ on the nodes between the cut-offs, through both of them exactly."""
    fault = problem.fault
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    inner = fault.x[(fault.x > foot.x) & (fault.x < hang.x)]
    x = np.r_[foot.x, inner, hang.x]
    z = np.r_[foot.z, fault.z_at(inner), hang.z]
    return np.interp(u, x - z * problem.tan, z)


def solve(problem):
    """March one section.

    The nodes stand one oblique heave over `samples_per_strip` apart, exactly, from
    the footwall cut-off to the last pick.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    Solution
    """
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    bed = _bed_in_frame(problem)
    m = problem.options.samples_per_strip
    u0 = foot.x - foot.z * problem.tan
    step = (hang.x - hang.z * problem.tan - u0) / m
    count = int(np.floor((bed.x[-1] - u0) / step + 1e-6)) + 1
    u = u0 + step * np.arange(max(count, m + 1))
    origin = problem.model.origin(u, bed, problem)
    at = np.maximum((origin - u0) / step, 0.0)
    index = np.floor(at + 1e-6).astype(int)
    fraction = np.where(np.abs(at - index) < 1e-6, 0.0, at - index)
    bed_z = np.interp(u, bed.x, bed.z)
    regional_z = problem.regional_at(origin)
    start = _start_piece(problem, u[: m + 1])
    z = march(index, fraction, start, bed_z - regional_z)
    return Solution(u, z, index, fraction, bed_z, regional_z, bed, m + 1)


def bed_from(cutoff, bed):
    """Give the bed from its hanging-wall cut-off on, picks inboard left out."""
    beyond = bed.x > cutoff.x + 1e-6
    return Profile(
        np.r_[cutoff.x, bed.x[beyond]],
        np.r_[cutoff.z, bed.z[beyond]],
        np.r_[cutoff.sigma_z, bed.sigma[beyond]],
    )


def predict_fault(section, separation, fault, bed, regional, model, options=None):
    """Predict the fault from the rollover of one horizon by the march.

    Assumes plane strain along transport, a rigid footwall and columns that slide
    with their foot on the fault.

    Parameters
    ----------
    section : SectionFrame
        For its name and obliquity.
    separation : Separation
        Cut-offs of the horizon.
    fault : KnownFault
        Known piece; honoured down to the hanging-wall cut-off, carried on straight
        (and marked assumed) where it ends before.
    bed : Profile
        The horizon in the hanging wall.
    regional : Regional
        Through the footwall cut-off.
    model : ConstantHeave
    options : MarchOptions, optional

    Returns
    -------
    Prediction

    Raises
    ------
    ConstructionError
        If the separation is reverse, the heave is too small, the bed ends inside
        the first strip or the shear direction is parallel to fault or bed.

    References
    ----------
    Eqs. 2-4 of methods.md (Verrall 1982; White et al. 1986; Groshong 2006).
    """
    problem = Problem(
        f"section {section.section_id}",
        separation,
        fault,
        bed_from(separation.hanging_wall, bed),
        regional,
        model,
        options or MarchOptions(),
    )
    _check_separation(problem)
    _check_fault_in_frame(problem)
    solution = solve(problem)
    if len(solution.u) <= solution.start:
        raise ConstructionError(
            "bed-too-short",
            "the hanging-wall horizon ends within one heave of its cut-off, so it "
            "says nothing of the fault at depth.",
            problem.where,
            "Extend the section or the picks into the hanging wall.",
        )
    x = from_shear_frame(solution.u, solution.z, model.shear_angle)
    _check_single_valued(x, problem.where)
    trace = _trace(problem, solution, x)
    detachment = _detachment(problem, solution)
    return Prediction(
        section.section_id,
        separation.horizon,
        model,
        "march",
        separation,
        regional,
        problem.oblique_heave,
        trace,
        _table(solution, x),
        detachment,
        float(solution.z[-1]),
        tuple(march_doubts(problem, solution, trace, detachment)),
    )


def _check_separation(problem):
    separation, where = problem.separation, problem.where
    heave, throw = separation.heave, separation.throw
    if heave <= 0:
        raise ConstructionError(
            "reverse-separation",
            f"the hanging-wall cut-off lies {-heave:.1f} behind the footwall cut-off "
            "(reverse separation); the construction holds for normal faults.",
            where,
            "Check the cut-offs and the hanging-wall side.",
        )
    if throw <= 0:
        raise ConstructionError(
            "wrong-side",
            f"the hanging wall lies {-throw:.1f} above the footwall.",
            where,
            "Check the hanging-wall side, the sign of the picks and the horizon names.",
        )
    if problem.oblique_heave < 0.15 * heave:
        raise ConstructionError(
            "shear-parallel-to-fault",
            f"the oblique heave is {problem.oblique_heave:.1f} at a heave of "
            f"{heave:.1f}: synthetic shear of {problem.model.shear_angle:g} degrees "
            "runs nearly along the fault.",
            where,
            "Use a smaller synthetic angle.",
        )


def _check_single_valued(x, where):
    """Refuse a fault that folds back on itself."""
    back = np.diff(x) <= 0
    if back.any():
        raise ConstructionError(
            "fault-not-single-valued",
            f"near x = {x[int(np.argmax(back))]:.0f} the predicted fault turns back on "
            "itself.",
            where,
            "Check the picks there; noise closer than a strip can do it.",
        )


def _trace(problem, solution, x):
    """Join the known fault above the footwall cut-off to the marched part."""
    fault = problem.fault
    above = fault.x < problem.separation.footwall.x - 1e-6
    n = int(above.sum())
    full_x, full_z = np.r_[fault.x[above], x], np.r_[fault.z[above], solution.z]
    strip = np.r_[np.zeros(n, int), solution.strip]
    state = np.full(len(full_x), "predicted", dtype=object)
    first = strip == 0
    state[first] = np.where(fault.is_known(full_x[first]), "known", "assumed")
    state[:n] = "known"
    return FaultTrace(
        full_x,
        full_z,
        np.degrees(np.arctan(-np.gradient(full_z, full_x))),
        strip,
        state,
        np.r_[np.full(n, fault.sigma), march_sigma(problem, solution)],
    )


def _table(solution, x):
    """One row where each strip ends, and one where the data end."""
    strip = solution.strip
    last = np.flatnonzero(np.r_[np.diff(strip) > 0, True])
    rows = last[strip[last] > 0] if strip[-1] > 0 else last
    rows = np.union1d([solution.start - 1], rows)
    increment = solution.bed_z - solution.regional_z
    return MarchTable(
        strip[rows],
        x[rows],
        solution.u[rows],
        solution.bed_z[rows],
        solution.regional_z[rows],
        increment[rows],
        solution.z[rows],
    )


def _detachment(problem, solution):
    """Give the detachment level where the bed is back at its far position, or None.

    Over one strip the bed has to lie within 2 sigma of the regional moved out by
    the heave, R~(u - H): over a level detachment it comes back there, not to the
    regional itself (methods.md section 1).
    """
    last = slice(len(solution.u) - solution.start, None)
    u, origin = solution.u[last], solution.regional_z[last]
    sigma = np.interp(u, solution.bed.x, solution.bed.sigma)
    from_regional = problem.regional.sigma_at(u - problem.oblique_heave)
    spread = np.maximum(np.hypot(sigma, from_regional), 1e-6)
    if np.all(np.abs(solution.bed_z[last] - origin) <= 2.0 * spread):
        return float(solution.z[last].mean())
    return None
