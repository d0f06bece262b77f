"""The construction: the fault from the rollover of a horizon."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Optional

import numpy as np

from .compaction import check_compaction, check_surfaces
from .doubts import march_doubts
from .errors import ConstructionError
from .fault import ASSUMED_GAP
from .fitting import solve_by_fit
from .kinematics import ConstantHeave, from_shear_frame
from .problem import MarchOptions, Problem, bed_from, solve_march
from .profile import pool_to_increasing
from .subsidiary import subsidiary_shares, without_gaps
from .trust import error_shares, trusted_reach
from .uncertainty import error_columns

__all__ = [
    "SOLVERS",
    "FaultTrace",
    "MarchOptions",
    "MarchTable",
    "Prediction",
    "check_problem",
    "predict_fault",
]

#: The two solvers of the kernel: the plain march and the least-squares fit.
SOLVERS = {"march": solve_march, "fit": solve_by_fit}

#: Strips beyond which a section is refused; the answer is of no use long before
#: (methods.md section 13, rule 2: after about six).
MOST_STRIPS = 300


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
        ``known``, ``assumed``, ``predicted`` or ``out of reach``.
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

    F = F_origin + B - R_origin + thinning on every row; in the shear frame u
    replaces x.

    Parameters
    ----------
    strip : ndarray (n,) of int
    x, u : ndarray (n,)
        Place of the fault point, and the place of its column in the shear frame.
    bed, regional, increment, fault : ndarray (n,)
        B there, R one heave inwards, what is added to F_origin, and F.
    thinning : ndarray (n,) or float
        Loss of column thickness by compaction, part of the increment.
    """

    strip: np.ndarray
    x: np.ndarray
    u: np.ndarray
    bed: np.ndarray
    regional: np.ndarray
    increment: np.ndarray
    fault: np.ndarray
    thinning: object = 0.0


@dataclass(frozen=True, eq=False)
class Prediction:
    """What the construction says of one section.

    Parameters
    ----------
    section_id, horizon : str
    model : object
        Kinematic model used.
    solver : str
        ``march`` or ``fit``.
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
    detail : FitDetail or None
        What the fit has to tell besides.
    compaction : Compaction or None
    error_shares : mapping of str to float
        Standard deviation of the deepest point from each source of error alone.
    has_deep_tie : bool
        Deep ties hold the fault.
    subsidiaries : tuple of SubsidiaryShare
        Subsidiary faults of the hanging wall and what each adds to the extension.
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
    detail: object = None
    compaction: object = None
    error_shares: Mapping[str, float] = field(default_factory=dict)
    has_deep_tie: bool = False
    subsidiaries: tuple = ()

    @property
    def trust(self):
        """Give the last point that can be trusted (see `trusted_reach`)."""
        return trusted_reach(self, self.has_deep_tie)

    @property
    def strips(self):
        """Number of the last strip."""
        return int(self.trace.strip.max())


def _check_fault_in_frame(problem):
    """Refuse a start piece that is not single-valued along the shear lines."""
    low, high = problem.separation.footwall.x, problem.separation.hanging_wall.x
    own = problem.fault.x
    # one place on every straight piece between the cut-offs
    slope = problem.fault.slope_at(np.r_[own[(own > low) & (own < high)], high])
    if (1.0 - slope * problem.tan).min() <= 0.05:
        raise ConstructionError(
            "shear-parallel-to-fault",
            f"the fault dips {np.degrees(np.arctan(-slope.min())):.0f} degrees, too "
            "near the synthetic shear planes of "
            f"{problem.model.shear_angle:g} degrees.",
            problem.where,
            "Use a smaller synthetic angle.",
        )


def predict_fault(
    section,
    separation,
    fault,
    bed,
    regional,
    model,
    options=None,
    solver="march",
    others=(),
    subsidiaries=(),
):
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
    solver : str
        ``march`` or ``fit``.
    others : sequence of OtherHorizon
        Further horizons, which only the fit uses.
    subsidiaries : sequence of SubsidiaryFault
        Faults that cut the horizon in the hanging wall (`measure_subsidiaries`).

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
        without_gaps(bed_from(separation.hanging_wall, bed), subsidiaries),
        regional,
        model,
        options or MarchOptions(),
        tuple(others),
        tuple(subsidiaries),
    )
    check_problem(problem)
    solution = SOLVERS[solver](problem)
    if len(solution.u) <= solution.start:
        raise ConstructionError(
            "bed-too-short",
            "the hanging-wall horizon ends within one heave of its cut-off, so it "
            "says nothing of the fault at depth.",
            problem.where,
            "Extend the section or the picks into the hanging wall.",
        )
    x, z = _unfolded(problem, solution)
    errors = error_columns(problem, solution)
    trace = _trace(problem, solution, x, z, errors)
    if solution.detail is None:
        trace = _with_shadows(trace, x, z, solution, problem.oblique_heave)
    detachment = _detachment(problem, solution)
    return Prediction(
        section.section_id,
        separation.horizon,
        model,
        solver,
        separation,
        regional,
        problem.oblique_heave,
        trace,
        _table(solution, x),
        detachment,
        float(solution.z[-1]),
        tuple(march_doubts(problem, solution, trace, detachment)),
        solution.detail,
        problem.options.compaction,
        error_shares(errors),
        bool(len(fault.tie_x)) and solver == "fit",
        subsidiary_shares(solution.blocks, problem.oblique_heave),
    )


def check_problem(problem):
    """Refuse a problem the kernel has no solution for.

    Raises
    ------
    ConstructionError
        If the separation is reverse or on the wrong side, the shear direction is
        parallel to the fault, compaction does not go with the model, or a bed lies
        above the sediment surface of its time.
    """
    check_compaction(problem.options.compaction, problem.model, problem.where)
    _check_subsidiaries(problem)
    _check_separation(problem)
    _check_strips(problem)
    _check_fault_in_frame(problem)
    if problem.options.compaction is not None:
        _check_surfaces(problem)


def _check_subsidiaries(problem):
    """Refuse subsidiary faults with models that have no oblique heave to add to."""
    if problem.subsidiaries and not isinstance(problem.model, ConstantHeave):
        names = ", ".join(f"'{f.plane.name}'" for f in problem.subsidiaries)
        raise ConstructionError(
            "subsidiary-model",
            f"the subsidiary fault {names} cuts the horizon; {problem.model.label} has "
            "no heave to which its own could be added.",
            problem.where,
            "Use constant heave, or leave the subsidiary faults out of the study.",
        )


def _check_surfaces(problem):
    """Refuse beds above the sediment surface by more than noise could lift them."""
    bed, regional = problem.bed, problem.regional
    # the straight regional is highest at one of the ends of what moved
    ends = np.array([problem.separation.footwall.x, bed.x[-1]])
    least = 1e-3 * problem.separation.throw
    check_surfaces(
        problem.options.compaction,
        bed.z,
        regional(ends),
        3.0 * bed.sigma + least,
        3.0 * regional.sigma_at(ends) + least,
        problem.where,
    )


def _check_strips(problem):
    """Refuse a march of more strips than anybody could trust, or a computer hold."""
    bed, hang = problem.bed, problem.separation.hanging_wall
    strips = (bed.x[-1] - hang.x) / problem.oblique_heave
    if strips > MOST_STRIPS:
        raise ConstructionError(
            "too-many-strips",
            f"with an oblique heave of {problem.oblique_heave:.1f} it takes "
            f"{strips:.0f} strips to the end of the picks; the limit is {MOST_STRIPS}.",
            problem.where,
            "Use a horizon of larger heave, or check the cut-offs.",
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


def _unfolded(problem, solution):
    """Give x and z of the fault where pick noise folds it back: neighbours averaged.

    Raises
    ------
    ConstructionError
        If it turns back over more than half a strip, which noise does not do.
    """
    angle, where = problem.model.shear_angle, problem.where
    x = from_shear_frame(solution.u, solution.z, angle)
    if np.all(np.diff(x) > 0):
        return x, solution.z
    back = np.maximum.accumulate(x) - x
    if back.max() > 0.5 * problem.oblique_heave:
        raise ConstructionError(
            "fault-not-single-valued",
            f"near x = {x[int(np.argmax(back))]:.0f} the predicted fault turns back on "
            "itself.",
            where,
            "Check the picks there, or use a smaller shear angle.",
        )
    # averaged in place, so that every node keeps its strip and its sigma
    order = np.sort(x)
    least = 1e-6 * problem.oblique_heave
    even = order + least * np.arange(len(x))
    return even, np.interp(even, *pool_to_increasing(x, solution.z)[:2])


def _trace(problem, solution, x, z, errors):
    """Join the known fault above the footwall cut-off to the marched part."""
    fault = problem.fault
    above = fault.x < problem.separation.footwall.x - 1e-6
    n = int(above.sum())
    full_x, full_z = np.r_[fault.x[above], x], np.r_[fault.z[above], z]
    strip = np.r_[np.zeros(n, int), solution.strip]
    state = np.full(len(full_x), "predicted", dtype=object)
    first = strip == 0
    known = fault.is_known(full_x[first], ASSUMED_GAP * problem.separation.heave)
    state[first] = np.where(known, "known", "assumed")
    # the points of the fault themselves are known, be there only one of them
    observed = np.arange(n) < (n if fault.observed is None else fault.observed)
    state[:n] = np.where(observed, "known", "assumed")
    if solution.reach is not None:
        state[n:][~solution.reach & ~first[n:]] = "out of reach"
    return FaultTrace(
        full_x,
        full_z,
        np.degrees(np.arctan(-np.gradient(full_z, full_x))),
        strip,
        state,
        np.r_[np.full(n, fault.sigma), errors.sigma],
    )


def _with_shadows(trace, x, z, solution, oblique_heave):
    """Put points across the shadows, marked as out of reach: straight by assumption.

    Parameters
    ----------
    trace : FaultTrace
    x, z : ndarray (n,)
        The solution's nodes, the last ones of the trace.
    """
    if solution.blocks is None:
        return trace
    step = oblique_heave / max(solution.start - 1, 1)
    gap = np.flatnonzero(np.diff(solution.u) > 1.5 * step)
    before = len(trace) - len(x)
    at, new_x = [], []
    for i in gap:
        count = int((solution.u[i + 1] - solution.u[i]) / step)
        share = np.arange(1, count + 1) / (count + 1.0)
        new_x.append(x[i] + share * (x[i + 1] - x[i]))
        at.append(np.full(count, before + i + 1))
    if not at:
        return trace
    at, new_x = np.concatenate(at), np.concatenate(new_x)

    def filled(column, values):
        return np.insert(column, at, values)

    return FaultTrace(
        filled(trace.x, new_x),
        filled(trace.z, np.interp(new_x, x, z)),
        filled(trace.dip, np.interp(new_x, trace.x, trace.dip)),
        filled(trace.strip, trace.strip[at]),
        filled(trace.constrained, np.full(len(at), "out of reach", dtype=object)),
        filled(trace.sigma_z, np.interp(new_x, trace.x, trace.sigma_z)),
    )


def _table(solution, x):
    """One row where each strip ends, and one where the data end."""
    strip = solution.strip
    last = np.flatnonzero(np.r_[np.diff(strip) > 0, True])
    rows = last[strip[last] > 0] if strip[-1] > 0 else last
    rows = np.union1d([solution.start - 1], rows)
    thinning = np.broadcast_to(solution.thinning, solution.u.shape)
    return MarchTable(
        strip[rows],
        x[rows],
        solution.u[rows],
        solution.bed_z[rows],
        solution.regional_z[rows],
        solution.increment[rows],
        solution.z[rows],
        thinning[rows],
    )


def _detachment(problem, solution):
    """Give the detachment level where the bed is back at its far position, or None.

    Over one strip the bed has to lie within 2 sigma of the regional moved out by
    the heave, R~(u - H), less what compaction takes: over a level detachment it comes
    back there, not to the regional itself (methods.md section 1).
    """
    last = slice(len(solution.u) - solution.start, None)
    u = solution.u[last]
    sigma = np.interp(u, solution.bed.x, solution.bed.sigma)
    from_regional = problem.regional.sigma_at(u - problem.oblique_heave)
    spread = np.maximum(np.hypot(sigma, from_regional), 1e-6)
    if np.all(np.abs(solution.increment[last]) <= 2.0 * spread):
        return float(solution.z[last].mean())
    return None
