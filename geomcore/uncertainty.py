"""How sure the predicted fault is: linear propagation of the stated errors."""

from dataclasses import dataclass, replace

import numpy as np

from .fitting import solve_by_fit
from .kinematics import from_shear_frame
from .problem import solve_march
from .profile import Profile
from .stepping import hat_matrix

__all__ = [
    "ErrorColumns",
    "error_columns",
    "moved_problem",
    "parameter_roots",
]

_ADDED = "added_heave_"


@dataclass(frozen=True, eq=False)
class ErrorColumns:
    """What each independent error of unit size does to the fault.

    Parameters
    ----------
    x : ndarray (n,)
        Nodes of the solution.
    columns : ndarray (n, k)
        Change of F at fixed x; the covariance of F is ``columns @ columns.T``.
    source : ndarray (k,) of str
        Where each error comes from: ``picks``, ``known fault``, ``regional``,
        ``cut-offs``, ``shear angle``.
    """

    x: np.ndarray
    columns: np.ndarray
    source: np.ndarray

    @property
    def sigma(self):
        """One standard deviation of F at the nodes."""
        return np.sqrt((self.columns**2).sum(axis=1))

    def at(self, x, without=()):
        """Give the columns at other places, some sources left out."""
        keep = ~np.isin(self.source.astype(str), without)
        j = np.clip(np.searchsorted(self.x, x), 1, len(self.x) - 1)
        f = ((x - self.x[j - 1]) / (self.x[j] - self.x[j - 1]))[:, None]
        return ((1 - f) * self.columns[j - 1] + f * self.columns[j])[:, keep]


def error_columns(problem, solution):
    """Propagate every stated error to the fault.

    Parameters
    ----------
    problem : Problem
    solution : Solution

    Returns
    -------
    ErrorColumns

    Notes
    -----
    Pick noise is carried through the march itself, which is linear in the bed (with
    compaction for small errors), or is the posterior of the fit. Regional, cut-offs
    and shear angle are carried by differences of whole solutions, over one standard
    deviation to either side: over less the noise of single picks, which slides under
    the strips, would pass for an effect of the parameter. The error of the known
    piece is copied along the shear lines into every strip and does not grow
    (methods.md section 13); at the cut-offs it also slides them along the horizon,
    and so changes the heave. An error along the shear line becomes a vertical one by
    1 + tan(dip) tan(a) (section 8).
    """
    x = from_shear_frame(solution.u, solution.z, problem.model.shear_angle)
    frame_factor = 1.0 - _mean_slope(x, solution) * problem.tan
    of_picks = _pick_columns(solution) * frame_factor[:, None]
    copied = frame_factor / frame_factor[: solution.start].mean()
    of_known = (problem.fault.sigma * copied)[:, None]
    of_regional = _regional_columns(problem, solution, x)
    blocks = [("picks", of_picks), ("known fault", of_known), ("regional", of_regional)]
    for name, sigma, source in _single_errors(problem):
        column = _difference(problem, solution, x, name, sigma) * sigma
        blocks.append((source, column[:, None]))
    return ErrorColumns(
        x,
        np.hstack([b for _, b in blocks]),
        np.concatenate([np.full(b.shape[1], n, dtype=object) for n, b in blocks]),
    )


def _mean_slope(x, solution):
    """Slope of the fault over a third of a strip to either side, free of pick noise."""
    reach = max(1, solution.start // 3)
    k = np.arange(len(x))
    low, high = np.maximum(k - reach, 0), np.minimum(k + reach, len(x) - 1)
    return (solution.z[high] - solution.z[low]) / (x[high] - x[low])


def _pick_columns(solution):
    """Pick errors along the shear lines, as columns."""
    if solution.detail is not None:
        return solution.detail.covariance_root
    bed = solution.bed
    weights = hat_matrix(solution.u, bed.x)
    weights[:, 0] = 0.0  # the bed's first point is the cut-off, varied apart
    rows = solution.carried(weights)
    if not bed.correlation.any():
        return rows * bed.sigma
    small = 1e-12 * np.eye(len(bed)) * bed.sigma**2
    return rows @ np.linalg.cholesky(bed.covariance() + small)


def _regional_columns(problem, solution, x):
    """Level and dip of the regional, whose errors go together."""
    of_level, _, of_slope = problem.regional.covariance
    steps = (
        max(np.sqrt(of_level), 1e-3 * problem.separation.throw),
        max(np.sqrt(of_slope), 1e-4),
    )
    names = ("level", "slope")
    effect = [_difference(problem, solution, x, n, s) for n, s in zip(names, steps)]
    _, root = parameter_roots(problem)
    return np.column_stack(effect) @ root[:2, :2]


def _single_errors(problem):
    """Errors that stand alone: name of the parameter, its sigma, its source."""
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    found = [
        ("hanging_wall_z", _of_horizon(problem, hang), "cut-offs"),
        ("hanging_wall_on_bed", _of_fault(problem, hang), "known fault"),
        ("footwall_on_regional", _of_fault(problem, foot), "known fault"),
        ("hanging_wall_x", 0.0 if hang.slides else hang.sigma_x, "cut-offs"),
        ("footwall_x", 0.0 if foot.slides else foot.sigma_x, "cut-offs"),
        ("angle", _of_angle(problem), "shear angle"),
    ]
    for i, fault in enumerate(problem.subsidiaries):
        sigma = fault.added_sigma(problem.tan)
        found.append((f"{_ADDED}{i}", sigma, "cut-offs"))
    return [f for f in found if f[1] > 0]


def _of_angle(problem):
    """Sigma of the shear angle; 0 for models that have none."""
    has_angle = hasattr(problem.model, "ANGLE_BOUNDS")
    return problem.options.shear_angle_sigma if has_angle else 0.0


def _of_fault(problem, cut):
    """Sigma of x of a found cut-off from the error of the fault alone."""
    if not cut.slides:
        return 0.0
    across = float(problem.fault.slope_at(cut.x)) - cut.horizon_slope
    return problem.fault.sigma / max(abs(across), 1e-9)


def _of_horizon(problem, cut):
    """Sigma of z of a cut-off from the error of its horizon alone."""
    if not cut.slides:
        return cut.sigma_z
    sigma_x = np.sqrt(max(cut.sigma_x**2 - _of_fault(problem, cut) ** 2, 0.0))
    return sigma_x * abs(float(problem.fault.slope_at(cut.x)))


def _difference(problem, solution, x, name, step):
    """Change of F at fixed x with a parameter, per unit of it."""
    up, down = (
        np.interp(x, *_solve_again(moved_problem(problem, name, way * step), solution))
        for way in (1, -1)
    )
    return (up - down) / (2.0 * step)


def _solve_again(problem, solution):
    """Solve by the same solver; x and z of the fault, x growing."""
    if solution.detail is None:
        moved = solve_march(problem)
    else:
        moved = solve_by_fit(problem, solution.detail.smoothness)
    x = from_shear_frame(moved.u, moved.z, problem.model.shear_angle)
    return np.maximum.accumulate(x), moved.z


def parameter_roots(problem):
    """Give the parameters of a horizon and a root of their covariance.

    Returns
    -------
    names : list of str
        For `moved_problem`.
    root : ndarray (k, k)
        ``root @ pulls`` are the shifts of the parameters for independent unit pulls.
    """
    singles = [e for e in _single_errors(problem) if e[0] != "angle"]
    names = ["level", "slope"] + [name for name, _, _ in singles]
    a, b, c = problem.regional.covariance
    values, vectors = np.linalg.eigh([[a, b], [b, c]])
    root = np.zeros((len(names), len(names)))
    root[:2, :2] = vectors * np.sqrt(np.maximum(values, 0.0))
    root[range(2, len(names)), range(2, len(names))] = [s for _, s, _ in singles]
    return names, root


def moved_problem(problem, name, step):
    """Move one parameter of a horizon; found cut-offs slide along the fault.

    Parameters
    ----------
    problem : Problem
    name : str
        ``level`` or ``slope`` of the regional, ``footwall_x``, ``hanging_wall_x``,
        ``hanging_wall_z``, ``footwall_on_regional``, ``hanging_wall_on_bed`` (along
        the horizon, by dx), ``angle``, or ``added_heave_`` and the number of a
        subsidiary fault.
    step : float
    """
    if name.startswith(_ADDED):
        return _moved_subsidiary(problem, int(name[len(_ADDED) :]), step)
    if name == "angle":
        angle = problem.model.shear_angle + step
        return replace(problem, model=replace(problem.model, shear_angle=angle))
    if name == "slope":
        return replace(problem, regional=problem.regional.shifted(0.0, step))
    if name in ("level", "footwall_x", "footwall_on_regional"):
        return _moved_footwall(problem, name, step)
    return _moved_hanging_wall(problem, name, step)


def _moved_subsidiary(problem, i, step):
    """Change what a subsidiary fault adds: its outboard cut-off slides along it."""
    faults = list(problem.subsidiaries)
    across = faults[i].plane.run - problem.tan
    dz = step / across
    cut = faults[i].outboard
    moved = replace(cut, x=cut.x + faults[i].plane.run * dz, z=cut.z + dz)
    faults[i] = replace(faults[i], outboard=moved)
    return replace(problem, subsidiaries=tuple(faults))


def _moved_footwall(problem, name, step):
    """Raise the regional, or move the footwall cut-off along it."""
    foot, regional = problem.separation.footwall, problem.regional
    if name == "footwall_x":
        dx, dz = step, 0.0
    elif name == "footwall_on_regional":
        dx, dz = step, step * regional.slope
    elif foot.slides:
        # a regional raised by step meets the fault at another place
        steep = float(problem.fault.slope_at(foot.x))
        dx = step / (steep - regional.slope)
        dz = steep * dx
    else:
        dx, dz = 0.0, step
    foot = replace(foot, x=foot.x + dx, z=foot.z + dz)
    line = regional.shifted(step if name == "level" else 0.0, 0.0)
    if name == "footwall_x":
        line = replace(line, x0=foot.x)  # it goes through the cut-off
    separation = replace(problem.separation, footwall=foot)
    return replace(problem, separation=separation, regional=line.moved_to(foot.x))


def _moved_hanging_wall(problem, name, step):
    hang = problem.separation.hanging_wall
    if name == "hanging_wall_x":
        dx, dz = step, 0.0
    elif name == "hanging_wall_on_bed":
        dx, dz = step, step * hang.horizon_slope
    elif hang.slides:
        dx, dz = step / float(problem.fault.slope_at(hang.x)), step
    else:
        dx, dz = 0.0, step
    hang = replace(hang, x=hang.x + dx, z=hang.z + dz)
    bed = problem.bed
    beyond = bed.x > hang.x + 1e-6
    beyond[0] = False
    bed = Profile(
        np.r_[hang.x, bed.x[beyond]],
        np.r_[hang.z, bed.z[beyond]],
        np.r_[bed.sigma[0], bed.sigma[beyond]],
        np.r_[0.0, bed.correlation[beyond]],
    )
    return replace(
        problem, separation=replace(problem.separation, hanging_wall=hang), bed=bed
    )
