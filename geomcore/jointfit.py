"""One fault under several horizons, cut-offs and regionals free within their errors.

The system of the fit is linear in the fault only. Here the cut-offs and regionals of
every horizon are unknowns too, held by their stated errors, and the system is solved
by Gauss-Newton steps. Its marginal likelihood says how well a shear angle suits all
the data together.
"""

from dataclasses import dataclass

import numpy as np

from .fit import whitened
from .problem import bed_in_frame
from .uncertainty import moved_problem, parameter_roots

__all__ = ["JointFit", "joint_fit"]

#: Nodes in the smallest oblique heave, and the most nodes altogether.
_NODES = 10
_MOST = 160
#: Standard deviation of a cut-off off the fault, as a share of the throw.
_EXACT = 3e-3


@dataclass(frozen=True, eq=False)
class JointFit:
    """Solution at one shear angle.

    Parameters
    ----------
    u, z : ndarray (n,)
        Fault along the shear lines.
    deviance : float
        Minus twice the log marginal likelihood, up to a constant.
    chi2 : float
        Misfit of data, parameters' pulls included.
    rows : int
        Number of data.
    pulls : ndarray (k,)
        Shift of each parameter in units of its sigma.
    """

    u: np.ndarray
    z: np.ndarray
    deviance: float
    chi2: float
    rows: int
    pulls: np.ndarray


class _Horizon:
    """One horizon at one angle: its picks in the frame, its parameters."""

    def __init__(self, problem):
        self.problem = problem
        bed = bed_in_frame(problem)
        least = 1e-4 * problem.separation.throw
        self.u, self.z = bed.x[1:], bed.z[1:]
        self.sigma = np.maximum(bed.sigma[1:], least)
        self.correlation = bed.correlation[1:]
        self.exact = _EXACT * problem.separation.throw
        self.names, self.root = parameter_roots(problem)

    def cutoff_errors(self):
        """Give how far in z the two cut-offs may lie off the fault."""
        separation, fault = self.problem.separation, self.problem.fault
        cuts = (separation.footwall, separation.hanging_wall)
        steep = [abs(float(fault.slope_at(c.x))) for c in cuts]
        return np.array([c.sigma_z + s * c.sigma_x for c, s in zip(cuts, steep)])

    def moved(self, pulls):
        """Give the problem with its parameters shifted by pulls (unit sigmas)."""
        problem = self.problem
        for name, shift in zip(self.names, self.root @ pulls):
            if shift != 0.0:
                problem = moved_problem(problem, name, shift)
        return problem

    def residual(self, pulls, u, z):
        """Rows: bed picks, then the two cut-offs on the fault; unit errors."""
        problem = self.moved(pulls)
        heave, tan = problem.oblique_heave, problem.tan
        modelled = np.interp(self.u, u, z) - np.interp(self.u - heave, u, z)
        miss = modelled + problem.regional_at(self.u - heave) - self.z
        bed = whitened(miss, self.u, self.sigma, self.correlation)
        cuts = (problem.separation.footwall, problem.separation.hanging_wall)
        on_fault = [(np.interp(c.x - c.z * tan, u, z) - c.z) / self.exact for c in cuts]
        return np.concatenate([bed, on_fault])

    def rows(self, pulls, u):
        """Give the derivative of the residual with the fault's nodes."""
        problem = self.moved(pulls)
        heave, tan = problem.oblique_heave, problem.tan
        beds = _hats(u, self.u) - _hats(u, self.u - heave)
        beds = whitened(beds, self.u, self.sigma, self.correlation)
        cuts = (problem.separation.footwall, problem.separation.hanging_wall)
        at = np.array([c.x - c.z * tan for c in cuts])
        return np.vstack([beds, _hats(u, at) / self.exact])


def _hats(u, at):
    step = u[1] - u[0]
    j = np.clip(np.floor((at - u[0]) / step).astype(int), 0, len(u) - 2)
    f = np.clip((at - u[j]) / step, 0.0, 1.0)
    rows = np.zeros((len(at), len(u)))
    k = np.arange(len(at))
    rows[k, j], rows[k, j + 1] = 1.0 - f, f
    return rows


def _fault_rows(fault, tan, u, least):
    """Known fault points and deep ties as rows, their right sides apart."""
    shorter = 1.0 - fault.slope_at(fault.x) * tan
    known = np.maximum(fault.sigma / shorter, least)
    at = np.r_[fault.x - fault.z * tan, fault.tie_x - fault.tie_z * tan]
    z = np.r_[fault.z, fault.tie_z]
    sigma = np.r_[known, np.maximum(fault.tie_sigma, least)]
    inside = (at >= u[0]) & (at <= u[-1])
    rows = _hats(u, at[inside]) / sigma[inside, None]
    return rows, z[inside] / sigma[inside]


def _grid(horizons):
    """Nodes from the highest footwall cut-off to the last pick, and a margin."""
    heave = min(h.problem.oblique_heave for h in horizons)
    tan = horizons[0].problem.tan
    feet = [h.problem.separation.footwall for h in horizons]
    margin = 0.3 * heave
    low = min(f.x - f.z * tan for f in feet) - margin
    high = max(h.u[-1] for h in horizons) + margin
    step = max(heave / _NODES, (high - low) / _MOST)
    return low + step * np.arange(int(np.ceil((high - low) / step)) + 2)


def joint_fit(problems, smooth=None, steps=4):
    """Fit one fault to several horizons at the shear angle of their model.

    Parameters
    ----------
    problems : sequence of Problem
        One for each horizon, all with the same model and known fault.
    smooth : float, optional
        Log weight of the curvature rows of a like system, to start from.
    steps : int
        Gauss-Newton steps.

    Returns
    -------
    JointFit
    smooth : float
        Log weight of the curvature rows of largest marginal likelihood.

    Notes
    -----
    Unknowns are the fault's nodes and, for each horizon, its regional and cut-offs
    in units of their stated errors; the latter have unit normal priors. The marginal
    likelihood is that of the linearised system at the solution (Laplace).
    """
    from .fit import best_smoothness

    horizons = [_Horizon(p) for p in problems]
    u = _grid(horizons)
    fault, tan = problems[0].fault, problems[0].tan
    least = min(h.exact for h in horizons)
    known, known_right = _fault_rows(fault, tan, u, least)
    curvature = np.diff(np.eye(len(u)), n=2, axis=0) / (u[1] - u[0]) ** 1.5
    penalty = curvature.T @ curvature
    counts = [len(h.names) for h in horizons]
    pulls = [np.zeros(k) for k in counts]
    z, smooth = _first_guess(horizons, u, known, known_right, penalty, smooth)
    for step in range(steps):
        matrix, right = _linearised(horizons, pulls, u, z, known, known_right)
        normal, target, square = matrix.T @ matrix, matrix.T @ right, right @ right
        prior = np.zeros_like(normal)
        prior[len(u) :, len(u) :] = np.eye(sum(counts))
        full = np.zeros_like(normal)
        full[: len(u), : len(u)] = penalty
        if step > 0:
            smooth = best_smoothness(
                normal + prior, full, target, square, len(u), near=smooth
            )
        weight = np.exp(smooth)
        solution, log_det = _solved(normal + prior + weight * full, target)
        z, shift = solution[: len(u)], solution[len(u) :]
        pulls = np.split(shift, np.cumsum(counts)[:-1])
    residual = [h.residual(p, u, z) for h, p in zip(horizons, pulls)]
    chi2 = float(sum((r**2).sum() for r in residual) + (shift**2).sum())
    chi2 += float(((known @ z - known_right) ** 2).sum())
    rough = float(weight * z @ penalty @ z)
    # grids of different angles have different lengths: their constant counts here
    _, of_curvature = np.linalg.slogdet(curvature @ curvature.T)
    deviance = chi2 + rough + log_det - (len(u) - 2) * np.log(weight) - of_curvature
    rows = len(known) + sum(len(r) for r in residual)
    return JointFit(u, z, deviance, chi2, rows, shift), np.log(weight)


def _solved(matrix, right):
    import scipy.linalg

    factor = scipy.linalg.cho_factor(matrix, lower=True)
    log_det = 2.0 * np.log(np.diag(factor[0])).sum()
    return scipy.linalg.cho_solve(factor, right), log_det


def _first_guess(horizons, u, known, known_right, penalty, smooth):
    """Solve the linear system with the parameters as stated; fault and smoothness."""
    from .fit import best_smoothness

    matrix, right = [known], [known_right]
    for h in horizons:
        zero = np.zeros(len(h.names))
        rows, miss = h.rows(zero, u), h.residual(zero, u, np.zeros(len(u)))
        # cut-offs off the known fault by their errors must not bend the first guess
        loose = np.ones(len(miss))
        loose[-2:] = h.exact / np.hypot(h.exact, h.cutoff_errors())
        matrix.append(rows * loose[:, None])
        right.append(-miss * loose)
    matrix, right = np.vstack(matrix), np.concatenate(right)
    normal, target = matrix.T @ matrix, matrix.T @ right
    square = float(right @ right)
    smooth = best_smoothness(normal, penalty, target, square, len(u), near=smooth)
    return _solved(normal + np.exp(smooth) * penalty, target)[0], smooth


def _linearised(horizons, pulls, u, z, known, known_right):
    """Rows against nodes and parameters, so that ``rows @ (z, pulls) = right``."""
    total = sum(len(p) for p in pulls)
    matrix = [np.hstack([known, np.zeros((len(known), total))])]
    right = [known_right]
    first = 0
    for h, p in zip(horizons, pulls):
        base = h.residual(p, u, z)
        nodes = h.rows(p, u)
        params = np.zeros((len(base), total))
        for k in range(len(p)):
            step = np.zeros(len(p))
            step[k] = 0.25
            up, down = h.residual(p + step, u, z), h.residual(p - step, u, z)
            params[:, first + k] = (up - down) / 0.5
        own = params[:, first : first + len(p)]
        matrix.append(np.hstack([nodes, params]))
        right.append(nodes @ z + own @ p - base)
        first += len(p)
    return np.vstack(matrix), np.concatenate(right)
