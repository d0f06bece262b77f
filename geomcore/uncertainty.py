"""How sure the predicted fault is: linear propagation of the stated errors."""

from dataclasses import replace

import numpy as np

from .kinematics import from_shear_frame
from .profile import Profile
from .stepping import hat_matrix, march

__all__ = ["march_sigma"]


def march_sigma(problem, solution):
    """Give one standard deviation of the marched fault at fixed x.

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
    Pick noise is carried through the march itself, which is linear in the bed;
    level and dip of the regional, the hanging-wall cut-off and the shear angle
    through differences of whole marches. The error of the known piece is copied
    into every strip and does not grow (methods.md section 13). An error along the
    shear line becomes a vertical one by 1 + tan(dip) tan(a) (section 8).
    """
    weights = hat_matrix(solution.u, solution.bed.x)
    weights[:, 0] = 0.0  # the bed's first point is the cut-off, varied below
    rows = march(
        solution.origin_index,
        solution.origin_fraction,
        np.zeros((solution.start, weights.shape[1])),
        weights,
    )
    x = from_shear_frame(solution.u, solution.z, problem.model.shear_angle)
    frame_factor = 1.0 - np.gradient(solution.z, x) * problem.tan
    variance = (rows**2 @ solution.bed.sigma**2) * frame_factor**2
    variance += problem.fault.sigma**2
    columns, covariance = _parameter_errors(problem, x, solution.z)
    variance += np.einsum("ni,ij,nj->n", columns, covariance, columns)
    return np.sqrt(np.maximum(variance, 0.0))


def _parameter_errors(problem, x, z):
    """Change of F at fixed x with each parameter, and their covariance."""
    small = max(1e-3 * problem.separation.throw, 1e-6)
    trials = [("level", small), ("slope", 1e-4), ("hanging_wall", small)]
    if problem.options.shear_angle_sigma > 0:
        trials.append(("angle", 0.05))
    columns = np.empty((len(x), len(trials)))
    for i, (name, step) in enumerate(trials):
        moved = _moved(problem, name, step)
        columns[:, i] = (np.interp(x, *_march_again(moved)) - z) / step
    covariance = np.zeros((len(trials), len(trials)))
    a, b, c = problem.regional.covariance
    covariance[:2, :2] = [[a, b], [b, c]]
    covariance[2, 2] = problem.separation.hanging_wall.sigma_z**2
    covariance[3:, 3:] = problem.options.shear_angle_sigma**2
    return columns, covariance


def _march_again(problem):
    from .construction import solve  # it imports this module

    solution = solve(problem)
    return (
        from_shear_frame(solution.u, solution.z, problem.model.shear_angle),
        solution.z,
    )


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
    bed = Profile(np.r_[hang.x, bed.x[1:]], np.r_[hang.z, bed.z[1:]], bed.sigma)
    return replace(problem, separation=replace(separation, hanging_wall=hang), bed=bed)
