"""How sure the predicted fault is: linear propagation of the stated errors."""

from dataclasses import replace

import numpy as np

from .fitting import solve_by_fit
from .kinematics import from_shear_frame
from .problem import solve_march
from .profile import Profile
from .stepping import hat_matrix, march

__all__ = ["solution_sigma"]


def solution_sigma(problem, solution):
    """Give one standard deviation of the predicted fault at fixed x.

    Parameters
    ----------
    problem : Problem
    solution : Solution

    Returns
    -------
    ndarray (n,)
        At the nodes of the solution.

    Notes
    -----
    Pick noise is carried through the march itself, which is linear in the bed, or is
    the posterior of the fit;
    level and dip of the regional, the hanging-wall cut-off and the shear angle
    through differences of whole marches. The error of the known piece is copied
    into every strip and does not grow (methods.md section 13). An error along the
    shear line becomes a vertical one by 1 + tan(dip) tan(a) (section 8).
    """
    x = from_shear_frame(solution.u, solution.z, problem.model.shear_angle)
    frame_factor = 1.0 - _mean_slope(x, solution) * problem.tan
    from_picks = solution.sigma if solution.sigma is not None else _carried(solution)
    variance = (from_picks * frame_factor) ** 2 + problem.fault.sigma**2
    columns, covariance = _parameter_errors(problem, solution, x)
    variance += np.einsum("ni,ij,nj->n", columns, covariance, columns)
    return np.sqrt(np.maximum(variance, 0.0))


def _mean_slope(x, solution):
    """Slope of the fault over a third of a strip to either side, free of pick noise."""
    reach = max(1, solution.start // 3)
    k = np.arange(len(x))
    low, high = np.maximum(k - reach, 0), np.minimum(k + reach, len(x) - 1)
    return (solution.z[high] - solution.z[low]) / (x[high] - x[low])


def _carried(solution):
    """Pick noise carried through the march, along the shear lines."""
    bed = solution.bed
    weights = hat_matrix(solution.u, bed.x)
    weights[:, 0] = 0.0  # the bed's first point is the cut-off, varied apart
    rows = march(
        solution.origin_index,
        solution.origin_fraction,
        np.zeros((solution.start, weights.shape[1])),
        weights,
    )
    if not bed.correlation.any():
        return np.sqrt(rows**2 @ bed.sigma**2)
    covariance = bed.covariance()
    return np.sqrt(np.einsum("ni,ij,nj->n", rows, covariance, rows))


def _parameter_errors(problem, solution, x):
    """Change of F at fixed x with each parameter, and their covariance.

    The differences are taken over one standard deviation to either side: over less
    the noise of single picks, which slides under the strips, would pass for an
    effect of the parameter.
    """
    a, b, c = problem.regional.covariance
    small = 1e-3 * problem.separation.throw
    sigmas = {
        "level": np.sqrt(a),
        "slope": np.sqrt(c),
        "hanging_wall": problem.separation.hanging_wall.sigma_z,
        "angle": problem.options.shear_angle_sigma,
    }
    least = {"level": small, "slope": 1e-4, "hanging_wall": small, "angle": 0.0}
    trials = {n: max(s, least[n]) for n, s in sigmas.items() if max(s, least[n]) > 0}
    columns = np.empty((len(x), len(trials)))
    for i, (name, step) in enumerate(trials.items()):
        up, down = (
            np.interp(x, *_solve_again(_moved(problem, name, way * step), solution))
            for way in (1, -1)
        )
        columns[:, i] = (up - down) / (2.0 * step)
    covariance = np.diag([sigmas[n] ** 2 for n in trials])
    covariance[:2, :2] = [[a, b], [b, c]]
    return columns, covariance


def _solve_again(problem, solution):
    """Solve by the same solver; x and z of the fault."""
    if solution.detail is None:
        moved = solve_march(problem)
    else:
        moved = solve_by_fit(problem, solution.detail.smoothness)
    return from_shear_frame(moved.u, moved.z, problem.model.shear_angle), moved.z


def _moved(problem, name, step):
    """Move one parameter; cut-offs slide along the fault."""
    separation, fault = problem.separation, problem.fault
    foot, hang = separation.footwall, separation.hanging_wall
    if name == "angle":
        angle = problem.model.shear_angle + step
        return replace(problem, model=replace(problem.model, shear_angle=angle))
    if name == "slope":
        return replace(problem, regional=problem.regional.shifted(0.0, step))
    if name == "level":
        # a regional raised by step meets the fault at another place
        steep = float(fault.slope_at(foot.x))
        dx = step / (steep - problem.regional.slope)
        foot = replace(foot, x=foot.x + dx, z=foot.z + steep * dx)
        line = problem.regional.shifted(step, 0.0).moved_to(foot.x)
        return replace(
            problem, separation=replace(separation, footwall=foot), regional=line
        )
    slope = float(fault.slope_at(hang.x))
    hang = replace(hang, x=hang.x + step / slope, z=hang.z + step)
    bed = problem.bed
    bed = Profile(
        np.r_[hang.x, bed.x[1:]], np.r_[hang.z, bed.z[1:]], bed.sigma, bed.correlation
    )
    return replace(problem, separation=replace(separation, hanging_wall=hang), bed=bed)
