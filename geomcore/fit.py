"""The fit: one weighted least-squares system for the fault under all the data.

The fault is one unknown a node along the shear lines. Every pick of every horizon,
every known fault point, deep tie and detachment level is a row, and the rows of
curvature decide what the data cannot see. How much smoothness is chosen by the
marginal likelihood of the data (REML), never by a chi-square near one.
"""

from dataclasses import dataclass, field

import numpy as np

from .errors import ConstructionError

__all__ = [
    "BedRows",
    "FitOptions",
    "FitSystem",
    "PickResiduals",
    "assemble",
    "best_smoothness",
    "golden_maximum",
    "solve_fit",
    "straight_evidence",
]


@dataclass(frozen=True)
class FitOptions:
    """How the system is set up.

    Parameters
    ----------
    nodes_per_strip : int
        Nodes in one oblique heave.
    robust : bool
        Give picks that miss by more than twice their sigma less weight (Huber).
    detachment_z, detachment_sigma : float or None
        Detachment level known from elsewhere, as a soft constraint.
    """

    nodes_per_strip: int = 10
    robust: bool = False
    detachment_z: object = None
    detachment_sigma: float = 50.0


@dataclass(frozen=True, eq=False)
class BedRows:
    """One horizon's contribution: its bed in the shear frame and its own regional.

    Parameters
    ----------
    name : str
    u, z, sigma : ndarray (n,)
        Hanging-wall picks along the shear lines.
    correlation : ndarray (n,)
        Length over which the errors of neighbouring picks go together; 0 where
        they are independent.
    regional : ndarray (n,)
        R~ one oblique heave inboard of each pick.
    heave : float
        Oblique heave of this horizon.
    """

    name: str
    u: np.ndarray
    z: np.ndarray
    sigma: np.ndarray
    correlation: np.ndarray
    regional: np.ndarray
    heave: float


@dataclass(frozen=True, eq=False)
class PickResiduals:
    """Misfit of each bed pick of a fit.

    Parameters
    ----------
    horizon : ndarray (n,) of str
    u, z, residual, standardised : ndarray (n,)
        Residual is observed minus fitted, along the shear line; standardised by
        the pick's sigma.
    outlier : ndarray (n,) of bool
        Beyond 3 standard deviations (common practice, no source).
    """

    horizon: np.ndarray
    u: np.ndarray
    z: np.ndarray
    residual: np.ndarray
    standardised: np.ndarray
    outlier: np.ndarray = field(default=None)


@dataclass(frozen=True, eq=False)
class FitSystem:
    """Rows of the system, weighted: ``matrix @ F = right`` with unit errors.

    Parameters
    ----------
    u : ndarray (n,)
        Nodes, evenly spaced.
    matrix : ndarray (m, n)
    right : ndarray (m,)
    beds : int
        The first rows are bed picks, the others points on the fault.
    curvature : ndarray (n - 2, n)
        Second differences, scaled so that the sum of squares is the integral of
        F''^2.
    """

    u: np.ndarray
    matrix: np.ndarray
    right: np.ndarray
    beds: int
    curvature: np.ndarray


def _weights(u, at):
    """Rows of linear interpolation between evenly spaced nodes."""
    step = u[1] - u[0]
    j = np.clip(np.floor((at - u[0]) / step).astype(int), 0, len(u) - 2)
    f = (at - u[j]) / step
    rows = np.zeros((len(at), len(u)))
    k = np.arange(len(at))
    rows[k, j] = 1.0 - f
    rows[k, j + 1] = f
    return rows


def whitened(rows, u, sigma, correlation):
    """Divide rows by their errors; neighbours with correlated errors are differenced.

    Errors go together as exp(-distance/length) between neighbours, so the row of a
    pick less its neighbour's share is independent of it (a first-order
    autoregression). Picks closer than the length then count by their effective
    number and no more.

    Parameters
    ----------
    rows : ndarray (n, ...)
    u, sigma, correlation : ndarray (n,)
        In order of u.
    """
    shape = (-1,) + (1,) * (rows.ndim - 1)
    scaled = rows / sigma.reshape(shape)
    if len(u) < 2 or not correlation.any():
        return scaled
    length = np.minimum(correlation[1:], correlation[:-1])
    with np.errstate(divide="ignore"):
        rho = np.where(length > 0, np.exp(-np.diff(u) / length), 0.0)
    rho = np.minimum(rho, 0.999)
    out = scaled.copy()
    share, rest = rho.reshape(shape), np.sqrt(1.0 - rho**2).reshape(shape)
    out[1:] = (scaled[1:] - share * scaled[:-1]) / rest
    return out


def assemble(u, beds, points):
    """Write the rows of the system.

    Parameters
    ----------
    u : ndarray (n,)
        Nodes, evenly spaced.
    beds : sequence of BedRows
        Rows F~(u) - F~(u - H) = B~ - R~(u - H) (eq. 3 of methods.md).
    points : tuple of ndarray (u, z, sigma)
        Known fault points, cut-offs and deep ties along the shear lines.

    Returns
    -------
    FitSystem
    """
    matrix, right = [], []
    for bed in beds:
        difference = _weights(u, bed.u) - _weights(u, bed.u - bed.heave)
        both = np.column_stack([difference, bed.z - bed.regional])
        both = whitened(both, bed.u, bed.sigma, bed.correlation)
        matrix.append(both[:, :-1])
        right.append(both[:, -1])
    count = sum(len(r) for r in right)
    at, z, sigma = points
    matrix.append(_weights(u, at) / sigma[:, None])
    right.append(z / sigma)
    step = u[1] - u[0]
    curvature = np.diff(np.eye(len(u)), n=2, axis=0) / step**1.5
    return FitSystem(u, np.vstack(matrix), np.concatenate(right), count, curvature)


@dataclass(frozen=True, eq=False)
class FitResult:
    """Solution of a system.

    Parameters
    ----------
    z : ndarray (n,)
        Fault at the nodes.
    covariance : ndarray (n, n)
    smoothness : float
        Weight of the curvature rows (squared), chosen by marginal likelihood.
    resolution : ndarray (n,)
        Share of each node decided by the data (1) rather than smoothness (0).
    row_weight : ndarray (m,)
        Weight of each row after the robust steps; 1 if not robust.
    evidence : float
        Logarithm of the marginal likelihood, up to a constant of the nodes.
    """

    z: np.ndarray
    covariance: np.ndarray
    smoothness: float
    resolution: np.ndarray
    row_weight: np.ndarray
    evidence: float


def _factor(normal, penalty, smoothness):
    """Cholesky factor of the penalised normal matrix."""
    import scipy.linalg

    return scipy.linalg.cho_factor(normal + smoothness * penalty, lower=True)


def straight_evidence(system):
    """Give the log marginal likelihood of a straight fault, on the scale of a fit's.

    It is the limit of the evidence for ever more smoothness: the curvature's null
    space, a level and a slope, is all that is left.
    """
    u = system.u - system.u.mean()
    basis = np.column_stack([np.ones(len(u)), u])
    basis, _ = np.linalg.qr(basis)
    a, b = system.matrix @ basis, system.right
    line, *_ = np.linalg.lstsq(a, b, rcond=None)
    misfit = float(((b - a @ line) ** 2).sum())
    _, of_line = np.linalg.slogdet(a.T @ a)
    _, of_curvature = np.linalg.slogdet(system.curvature @ system.curvature.T)
    return -0.5 * (misfit + of_line + of_curvature)


def _evidence(log_weight, normal, penalty, right, square, n):
    """Log marginal likelihood at one smoothness (REML, errors of unit variance)."""
    import scipy.linalg

    smoothness = np.exp(log_weight)
    factor = _factor(normal, penalty, smoothness)
    solution = scipy.linalg.cho_solve(factor, right)
    misfit = square - right @ solution
    log_det = 2.0 * np.log(np.diag(factor[0])).sum()
    return -0.5 * (misfit + log_det - (n - 2) * log_weight)


def best_smoothness(normal, penalty, right, square, n):
    """Give the log weight of largest marginal likelihood: a scan, then refined.

    Parameters
    ----------
    normal, penalty : ndarray (m, m)
        Normal matrix of the data (and of any priors), and of the curvature rows.
    right : ndarray (m,)
    square : float
        Sum of squares of the data.
    n : int
        Number of nodes the penalty acts on.
    """

    def value(log_weight):
        try:
            return _evidence(log_weight, normal, penalty, right, square, n)
        except np.linalg.LinAlgError:
            return -np.inf

    # the scale at which data and curvature weigh the same
    scale = np.log(np.trace(normal) / np.trace(penalty))
    grid = scale + np.arange(-12.0, 22.1, 1.5)
    best = int(np.argmax([value(w) for w in grid]))
    low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]
    return golden_maximum(value, low, high, 14)


def golden_maximum(value, low, high, steps):
    """Give the place of the maximum by golden section."""
    golden = 0.5 * (np.sqrt(5.0) - 1.0)
    a, b = high - golden * (high - low), low + golden * (high - low)
    fa, fb = value(a), value(b)
    for _ in range(steps):
        if fa > fb:
            high, b, fb = b, a, fa
            a = high - golden * (high - low)
            fa = value(a)
        else:
            low, a, fa = a, b, fb
            b = low + golden * (high - low)
            fb = value(b)
    return 0.5 * (low + high)


def solve_fit(system, smoothness=None, robust=False):
    """Solve a system, choosing the smoothness by marginal likelihood.

    Parameters
    ----------
    system : FitSystem
    smoothness : float, optional
        Fixed weight instead.
    robust : bool
        Reweight bed rows by Huber's rule at 2 standard deviations, five times.

    Returns
    -------
    FitResult

    Raises
    ------
    ConstructionError
        If the rows do not decide the fault (too few points on it), or a package is
        missing.

    Notes
    -----
    F minimises |A F - b|^2 + w |D F|^2; its covariance is (A'A + w D'D)^-1 and w
    maximises the marginal likelihood of b with the curvature as a Gaussian prior
    (methods.md section 8).
    """
    try:
        import scipy.linalg
    except ImportError:
        raise ConstructionError(
            "no-scipy",
            "the fit needs the Python package scipy, which is not installed.",
            remedy="Install scipy, or use the march.",
        ) from None
    penalty = system.curvature.T @ system.curvature
    weight = np.ones(len(system.right))
    for _ in range(6 if robust else 1):
        a, b = system.matrix * weight[:, None], system.right * weight
        normal, right, square = a.T @ a, a.T @ b, float(b @ b)
        log_weight = (
            best_smoothness(normal, penalty, right, square, len(right))
            if smoothness is None
            else np.log(smoothness)
        )
        try:
            factor = _factor(normal, penalty, np.exp(log_weight))
        except np.linalg.LinAlgError:
            raise ConstructionError(
                "fit-undetermined",
                "the rows do not decide the fault.",
                remedy="Give at least two points on the fault.",
            ) from None
        z = scipy.linalg.cho_solve(factor, right)
        if robust:
            weight = _huber(system, z)
    covariance = scipy.linalg.cho_solve(factor, np.eye(len(z)))
    return FitResult(
        z,
        covariance,
        float(np.exp(log_weight)),
        np.clip(np.einsum("ij,ji->i", covariance, normal), 0.0, 1.0),
        weight,
        float(_evidence(log_weight, normal, penalty, right, square, len(z))),
    )


def _huber(system, z):
    """Square root of Huber's weight on bed rows, 1 on points of the fault."""
    miss = np.abs(system.right - system.matrix @ z)
    weight = np.where(miss > 2.0, np.sqrt(2.0 / np.maximum(miss, 2.0)), 1.0)
    weight[system.beds :] = 1.0
    return weight


def residuals(beds, u, z):
    """Give the misfit of every bed pick of a solution.

    Parameters
    ----------
    beds : sequence of BedRows
    u, z : ndarray (n,)
        Nodes and fault.

    Returns
    -------
    PickResiduals
    """
    names, at, seen, miss, scaled = [], [], [], [], []
    for bed in beds:
        fitted = bed.regional + np.interp(bed.u, u, z)
        fitted = fitted - np.interp(bed.u - bed.heave, u, z)
        names.append(np.full(len(bed.u), bed.name, dtype=object))
        at.append(bed.u)
        seen.append(bed.z)
        miss.append(bed.z - fitted)
        scaled.append((bed.z - fitted) / bed.sigma)
    standardised = np.concatenate(scaled)
    return PickResiduals(
        np.concatenate(names),
        np.concatenate(at),
        np.concatenate(seen),
        np.concatenate(miss),
        standardised,
        np.abs(standardised) > 3.0,
    )
