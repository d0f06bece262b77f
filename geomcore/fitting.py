"""One section solved by the fit."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError
from .fit import BedRows, PickResiduals, assemble, residuals, solve_fit
from .kinematics import ConstantHeave
from .problem import Problem, Solution, bed_from, bed_in_frame, solve_march
from .subsidiary import blocks_under, without_gaps

__all__ = ["FitDetail", "section_rows", "solve_by_fit"]

#: Nodes in one oblique heave (methods.md section 8).
NODES = 10
#: Standard deviation of a point that is taken as exact, as a share of the throw.
EXACT = 1e-4
#: Share of a shadow by which it is widened on the side of its branch point, whose place
#: depends on the fault: a pick left out costs little, one from the shadow a lot.
EDGE = 0.1


@dataclass(frozen=True, eq=False)
class FitDetail:
    """What the fit has to tell besides the fault.

    Parameters
    ----------
    smoothness : float
        Weight of the curvature rows, chosen by marginal likelihood.
    evidence : float
        Log marginal likelihood at that weight.
    resolution : ndarray (n,)
        Share of each node decided by the data rather than by smoothness.
    residuals : PickResiduals
        Misfit of every bed pick of every horizon used.
    misfit_rms : float
        Of the standardised residuals; about 1 where the sigmas are right.
    covariance_root : ndarray (n, n)
        Posterior of picks and fault points along the shear lines, as columns.
    """

    smoothness: float
    evidence: float
    resolution: np.ndarray
    residuals: PickResiduals
    misfit_rms: float
    covariance_root: np.ndarray


def _bed_rows(problem, name, blocks):
    """Bed picks beyond the cut-off as rows of the system, block by block.

    Picks in the shadow of a subsidiary fault say nothing of the master.
    """
    bed = bed_in_frame(problem)
    least = EXACT * problem.separation.throw
    seen = np.arange(len(bed)) > 0
    if blocks is None:
        return [_block_rows(problem, name, bed, seen, problem.oblique_heave, least)]
    seen &= ~blocks.widened(EDGE).in_shadow(bed.x)
    own = blocks.block_of(bed.x)
    return [
        _block_rows(
            problem, name, bed, seen & (own == j), problem.oblique_heave + more, least
        )
        for j, more in enumerate(blocks.added)
    ]


def _block_rows(problem, name, bed, chosen, heave, least):
    u = bed.x[chosen]
    return BedRows(
        name,
        u,
        bed.z[chosen],
        np.maximum(bed.sigma[chosen], least),
        bed.correlation[chosen],
        problem.regional_at(u - heave),
        heave,
    )


def _blocks_of(problem, master):
    """Blocks of a horizon above the marched fault; None without subsidiary faults."""
    faults, tan = problem.subsidiaries, problem.tan
    if not faults:
        return None
    return blocks_under(faults, tan, master.u, master.z, problem.oblique_heave)


def _problem_of(other, problem):
    """Write a further horizon as a problem of its own on the same fault."""
    return Problem(
        problem.where,
        other.separation,
        problem.fault,
        without_gaps(
            bed_from(other.separation.hanging_wall, other.bed), other.subsidiaries
        ),
        other.regional,
        problem.model,
        problem.options,
        subsidiaries=other.subsidiaries,
    )


def _cutoff_points(problem, least):
    """Cut-offs of a horizon as points on the fault."""
    sigma = max(problem.fault.sigma, least)
    for cut in (problem.separation.footwall, problem.separation.hanging_wall):
        yield cut.x - cut.z * problem.tan, cut.z, sigma


def _fault_points(problem, others, u_start):
    """Cut-offs, known fault and deep ties along the shear lines."""
    fault, tan = problem.fault, problem.tan
    least = EXACT * problem.separation.throw
    points = [p for own in (problem, *others) for p in _cutoff_points(own, least)]
    # an error at fixed x is shorter along the shear line
    shorter = 1.0 - fault.slope_at(fault.x) * tan
    known = np.maximum(fault.sigma / shorter, least)
    points += zip(fault.x - fault.z * tan, fault.z, known)
    tie_sigma = np.maximum(fault.tie_sigma, least)
    points += zip(fault.tie_x - fault.tie_z * tan, fault.tie_z, tie_sigma)
    points = np.array(sorted(points))
    return points[points[:, 0] >= u_start - 1e-6]


def _with_detachment(points, problem, beds, u):
    """Add the detachment level: over the last strip the fault lies on it."""
    options = problem.options
    if options.detachment_z is None:
        return points
    at = u[u >= u[-1] - beds[0].heave]
    # one statement, not one for each node
    sigma = options.detachment_sigma * np.sqrt(len(at))
    level = np.column_stack(
        [at, np.full(len(at), options.detachment_z), np.full(len(at), sigma)]
    )
    return np.vstack([points, level])


def solve_by_fit(problem, smoothness=None):
    """Solve one section by the fit.

    Parameters
    ----------
    problem : Problem
    smoothness : float, optional
        Fixed weight of the curvature rows; by marginal likelihood if not given.

    Returns
    -------
    Solution
        With `FitDetail`.

    Raises
    ------
    ConstructionError
        If the model or compaction is not linear in the fault, or the rows do not
        decide it.
    """
    if not isinstance(problem.model, ConstantHeave):
        raise ConstructionError(
            "fit-not-linear",
            f"the fit holds for constant heave only, not for {problem.model.label}.",
            problem.where,
            "Use the march.",
        )
    if problem.options.compaction is not None:
        raise ConstructionError(
            "fit-not-linear",
            "with compaction the bed no longer depends linearly on the fault, so the "
            "fit does not apply.",
            problem.where,
            "Use the march, or leave compaction out.",
        )
    robust = problem.options.robust
    if not problem.subsidiaries:
        u, beds, points = section_rows(problem)
        result = solve_fit(assemble(u, beds, points), smoothness, robust)
        return _solution(problem, beds, u, result, None)
    master = solve_march(problem)
    for _ in range(2):  # the second time with branch points on the fit itself
        blocks = _blocks_of(problem, master)
        u, beds, points = section_rows(problem, master)
        result = solve_fit(assemble(u, beds, points), smoothness, robust)
        master = _solution(problem, beds, u, result, blocks)
    return master


def section_rows(problem, master=None):
    """Give nodes, bed rows and fault points of a section's system.

    Parameters
    ----------
    problem : Problem
    master : Solution, optional
        The march, on which subsidiary faults branch off; found if not given.

    Returns
    -------
    u : ndarray (n,)
        Nodes along the shear lines.
    beds : list of BedRows
    points : tuple of ndarray (u, z, sigma)
    """
    others = [_problem_of(o, problem) for o in problem.others]
    if master is None and problem.subsidiaries:
        master = solve_march(problem)
    name = problem.separation.horizon
    beds = _bed_rows(problem, name, _blocks_of(problem, master))
    for own, other in zip(others, problem.others):
        beds += _bed_rows(own, other.name, _blocks_of(own, master))
    u_foot = min(_foot(p) for p in (problem, *others))
    heave = beds[0].heave
    points = _fault_points(problem, others, u_foot)
    end = max([b.u[-1] for b in beds if len(b.u)] + [points[-1, 0]])
    count = int(np.ceil((end - u_foot) / (heave / NODES))) + 1
    u = u_foot + heave / NODES * np.arange(max(count, NODES + 2))
    points = _with_detachment(points, problem, beds, u)
    return u, beds, tuple(points.T)


def _foot(problem):
    foot = problem.separation.footwall
    return foot.x - foot.z * problem.tan


def _solution(problem, beds, u, result, blocks):
    """Write the result as every solver does, from the horizon's own cut-off on."""
    bed = bed_in_frame(problem)
    heave = problem.oblique_heave
    if blocks is not None:
        bed, heave = blocks.seen(bed), heave + blocks.added_at(u)
    origin = np.maximum(u - heave - u[0], 0.0) / (u[1] - u[0])
    index = np.floor(origin + 1e-6).astype(int)
    fraction = np.where(np.abs(origin - index) < 1e-6, 0.0, origin - index)
    misfit = residuals(beds, u, result.z)
    detail = FitDetail(
        result.smoothness,
        result.evidence,
        result.resolution,
        misfit,
        float(np.sqrt((misfit.standardised**2).mean())),
        np.linalg.cholesky(result.covariance),
    )
    hang = problem.separation.hanging_wall
    start = int(np.searchsorted(u, hang.x - hang.z * problem.tan - 1e-6)) + 1
    return Solution(
        u,
        result.z,
        index,
        fraction,
        np.interp(u, bed.x, bed.z),
        problem.regional_at(u - heave),
        bed,
        min(start, len(u)),
        reach=_in_reach(u, beds, problem.fault, problem.tan),
        detail=detail,
        blocks=blocks,
    )


def _in_reach(u, beds, fault, tan):
    """Tell which nodes have a pick or a fault point within half a heave."""
    marks = [fault.x - fault.z * tan, fault.tie_x - fault.tie_z * tan]
    marks += [b.u for b in beds]
    marks = np.sort(np.concatenate(marks))
    j = np.clip(np.searchsorted(marks, u), 1, len(marks) - 1)
    nearest = np.minimum(np.abs(u - marks[j - 1]), np.abs(u - marks[j]))
    return nearest <= 0.5 * beds[0].heave
