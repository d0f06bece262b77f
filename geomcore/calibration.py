"""The shear angle from the data: several ways, each with its interval.

Every way gives a misfit curve chi-square(angle). Curves of independent data add up,
so sections can be calibrated jointly, and the interval comes from the curve.
"""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .construction import check_problem
from .errors import ConstructionError, GeomcoreError
from .kinematics import ConstantHeave, from_shear_frame
from .problem import Problem, bed_from, solve_march
from .uncertainty import error_columns

__all__ = [
    "ANGLES",
    "AngleEstimate",
    "angle_from_area",
    "angle_from_cutoffs",
    "angle_from_horizons",
    "angle_from_ties",
    "joint_angle",
]

#: Angles tried, degrees (methods.md section 6: -35 to 50, then refined).
ANGLES = np.arange(-35.0, 50.1, 2.5)
#: Points of the common reach at which predicted faults are compared.
_POINTS = 16
#: Width of the 90 % interval beyond which the angle is called not resolved.
NOT_RESOLVED = 40.0


@dataclass(frozen=True, eq=False)
class AngleEstimate:
    """A shear angle from data.

    Parameters
    ----------
    method : str
        Which data, in words.
    best : float or None
        Angle of least misfit, degrees; None where no angle could be tried.
    mean, sd : float or None
        Of the likelihood exp(-chi2/2) over the angles tried.
    low, high : float or None
        90 % interval, degrees.
    angles, chi2 : ndarray (n,)
        Misfit curve; infinite where the construction has no solution.
    freedom : int
        Degrees of freedom of chi2.
    resolved : bool
    text : str
        What the data say, in words.
    """

    method: str
    best: Optional[float]
    mean: Optional[float]
    sd: Optional[float]
    low: Optional[float]
    high: Optional[float]
    angles: np.ndarray
    chi2: np.ndarray
    freedom: int
    resolved: bool
    text: str


def _fine(angles, chi2):
    """Curve on a fine grid by local parabolas through its finite stretch."""
    finite = np.isfinite(chi2)
    if finite.sum() < 3:
        return angles[finite], chi2[finite]
    a, c = angles[finite], chi2[finite]
    fine = np.arange(a[0], a[-1] + 1e-9, 0.05)
    k = np.clip(np.searchsorted(a, fine), 1, len(a) - 2)
    k = np.where(np.abs(fine - a[k - 1]) < np.abs(fine - a[k]), k - 1, k)
    k = np.clip(k, 1, len(a) - 2)
    x0, x1, x2 = a[k - 1], a[k], a[k + 1]
    l0 = (fine - x1) * (fine - x2) / ((x0 - x1) * (x0 - x2))
    l1 = (fine - x0) * (fine - x2) / ((x1 - x0) * (x1 - x2))
    l2 = (fine - x0) * (fine - x1) / ((x2 - x0) * (x2 - x1))
    # near its minimum the curve is close to a parabola; far up its steep sides a
    # parabola would overshoot, and where angles have no solution nothing is bridged
    inside = np.interp(fine, angles, (~finite).astype(float)) < 0.5
    values = l0 * c[k - 1] + l1 * c[k] + l2 * c[k + 1]
    low = np.maximum(np.maximum(c[k - 1], c[k]), c[k + 1]) < c.min() + 100.0
    values = np.where(low, values, np.interp(fine, a, c))
    return fine[inside], values[inside]


def estimate(method, angles, chi2, freedom):
    """Make an estimate from a misfit curve.

    Parameters
    ----------
    method : str
    angles, chi2 : ndarray (n,)
    freedom : int

    Returns
    -------
    AngleEstimate

    Notes
    -----
    The likelihood exp(-chi2/2), with every angle tried equally probable before,
    gives mean, standard deviation and the 90 % interval. The angle is not resolved
    where that interval is wider than `NOT_RESOLVED` or runs into the end of the
    angles tried.
    """
    fine, curve = _fine(angles, chi2)
    if not len(fine):
        text = "No angle could be tried: the construction has no solution."
        return AngleEstimate(
            method, None, None, None, None, None, angles, chi2, freedom, False, text
        )
    weight = np.exp(-0.5 * (curve - curve.min()))
    weight /= weight.sum()
    best = float(fine[int(np.argmin(curve))])
    mean = float(weight @ fine)
    sd = float(np.sqrt(weight @ (fine - mean) ** 2))
    total = np.cumsum(weight)
    low, high = (float(np.interp(q, total, fine)) for q in (0.05, 0.95))
    at_end = weight[0] > 0.02 * weight.max() or weight[-1] > 0.02 * weight.max()
    resolved = high - low < NOT_RESOLVED and not at_end
    text = _words(best, low, high, curve.min(), freedom, resolved)
    return AngleEstimate(
        method, best, mean, sd, low, high, angles, chi2, freedom, resolved, text
    )


def _words(best, low, high, least, freedom, resolved):
    if not resolved:
        return (
            f"Not resolved: angles from {low:.0f} to {high:.0f} degrees explain the "
            "data about as well."
        )
    text = f"{best:.1f} degrees, 90 % interval {low:.1f} to {high:.1f}."
    if freedom > 0 and least > freedom + 3.0 * np.sqrt(2.0 * freedom):
        text += (
            f" The misfit is large even there (chi-square {least:.0f} for {freedom} "
            "degrees of freedom): the horizons do not agree on one fault."
        )
    return text


@dataclass(frozen=True, eq=False)
class _March:
    """One horizon marched at one angle: fault and its errors at any x."""

    x: np.ndarray
    z: np.ndarray
    errors: object
    start_x: float

    def z_at(self, x):
        return np.interp(x, self.x, self.z)


def _marched(problem, angle):
    """March a horizon at an angle; None where it has no solution."""
    trial = replace(problem, model=ConstantHeave(float(angle)))
    try:
        check_problem(trial)
        solution = solve_march(trial)
    except GeomcoreError:
        return None
    x = from_shear_frame(solution.u, solution.z, angle)
    x = np.maximum.accumulate(x)
    if len(solution.u) <= solution.start:
        return None
    hang = trial.separation.hanging_wall.x
    return _March(x, solution.z, error_columns(trial, solution), hang)


def _common(marches):
    """Points of the reach all marches have beyond their start pieces, or None."""
    low = max(m.start_x for m in marches)
    high = min(m.x[-1] for m in marches)
    return np.linspace(low, high, _POINTS + 1)[1:] if high > low else None


def _covariance(march, x):
    """Covariance of a marched fault, without the piece all horizons share."""
    columns = march.errors.at(x, without=("known fault", "shear angle"))
    own = columns @ columns.T
    # sampling at a few points leaves a little interpolation error of its own
    return own + 1e-4 * np.trace(own) / len(x) * np.eye(len(x)) + 1e-6 * np.eye(len(x))


def angle_from_horizons(problems, angles=ANGLES):
    """Find the angle at which several horizons predict one fault.

    Parameters
    ----------
    problems : sequence of Problem
        One for each horizon of a section, growth horizons with their own regional
        and cut-offs.
    angles : ndarray
        Angles tried, degrees.

    Returns
    -------
    AngleEstimate

    Notes
    -----
    At each angle every horizon is marched; the weighted mean of the predicted faults
    over their common reach is the one fault, and chi-square its misfit with the full
    covariance of pick noise, regional and cut-offs. The error of the known piece is
    shared and drops out. Idea: White 1992, White & Yielding 1991, Withjack &
    Peterson 1993 (through methods.md section 6); the weighting is ours.
    """
    if len(problems) < 2:
        raise ConstructionError(
            "one-horizon",
            "one horizon predicts a fault at any angle: it cannot tell the angle.",
            problems[0].where if problems else "",
            "Declare a second horizon with its own cut-offs.",
        )
    chi2 = np.full(len(angles), np.inf)
    for i, angle in enumerate(angles):
        marches = [_marched(p, angle) for p in problems]
        if any(m is None for m in marches):
            continue
        x = _common(marches)
        if x is not None:
            chi2[i] = _disagreement(marches, x)
    freedom = (len(problems) - 1) * _POINTS - 1
    return estimate("several horizons, one fault", np.asarray(angles), chi2, freedom)


def _disagreement(marches, x):
    """Chi-square of predicted faults about their weighted mean."""
    z = [m.z_at(x) for m in marches]
    inverse = [np.linalg.inv(_covariance(m, x)) for m in marches]
    mean = np.linalg.solve(sum(inverse), sum(w @ f for w, f in zip(inverse, z)))
    return float(sum((f - mean) @ w @ (f - mean) for w, f in zip(inverse, z)))


def angle_from_ties(problem, tie_x, tie_z, tie_sigma, angles=ANGLES):
    """Find the angle at which the predicted fault meets deep points on it.

    Parameters
    ----------
    problem : Problem
    tie_x, tie_z, tie_sigma : array_like (k,)
        Points on the fault from seismic or wells, and the sigma of z.
    angles : ndarray

    Returns
    -------
    AngleEstimate
    """
    tie_x, tie_z = np.atleast_1d(tie_x).astype(float), np.atleast_1d(tie_z)
    sigma = np.broadcast_to(np.asarray(tie_sigma, dtype=float), tie_x.shape)
    marches = [_marched(problem, a) for a in angles]
    solved = [m for m in marches if m is not None]
    reach = [
        (tie_x > max(m.start_x for m in solved))
        & (tie_x < min(m.x[-1] for m in solved))
        if solved
        else np.zeros(len(tie_x), dtype=bool)
    ][0]
    if not reach.any():
        raise ConstructionError(
            "no-ties",
            "no deep point lies under the picks beyond the hanging-wall cut-off.",
            problem.where,
            "Give deep points there, or extend the horizon.",
        )
    x, z, sigma = tie_x[reach], np.asarray(tie_z, dtype=float)[reach], sigma[reach]
    chi2 = np.full(len(angles), np.inf)
    for i, m in enumerate(marches):
        if m is not None:
            columns = m.errors.at(x, without=("shear angle",))
            covariance = columns @ columns.T + np.diag(sigma**2)
            miss = m.z_at(x) - z
            chi2[i] = miss @ np.linalg.solve(covariance, miss)
    return estimate("deep points on the fault", np.asarray(angles), chi2, len(x) - 1)


def angle_from_cutoffs(heave, throw, sigma_heave, sigma_throw, angles=ANGLES):
    """Find the angle from the cut-offs of several pre-growth horizons.

    Parameters
    ----------
    heave, throw : array_like (n,)
        Of horizons that all existed before the fault moved.
    sigma_heave, sigma_throw : float or array_like (n,)
    angles : ndarray

    Returns
    -------
    AngleEstimate

    Notes
    -----
    They share one H = heave + throw tan(a), so heave against throw is a straight
    line of slope -tan(a) (methods.md section 6). Poor where the fault is nearly
    straight between the cut-offs, for then heave and throw keep one ratio.
    """
    heave, throw = np.asarray(heave, dtype=float), np.asarray(throw, dtype=float)
    if len(heave) < 2:
        raise ConstructionError(
            "one-horizon", "one pair of cut-offs cannot tell the shear angle."
        )
    t = np.tan(np.radians(angles))[:, None]
    variance = np.asarray(sigma_heave) ** 2 + (t * np.asarray(sigma_throw)) ** 2
    variance = np.broadcast_to(variance, (len(angles), len(heave)))
    oblique = heave + t * throw
    mean = (oblique / variance).sum(axis=1) / (1.0 / variance).sum(axis=1)
    chi2 = ((oblique - mean[:, None]) ** 2 / variance).sum(axis=1)
    # the scale of H grows with the angle, so its variance enters the likelihood
    chi2 = chi2 + np.log(variance).sum(axis=1) - np.log(variance).sum(axis=1).min()
    return estimate("cut-offs of pre-growth horizons", angles, chi2, len(heave) - 2)


def angle_from_area(
    area, detachment_depth, heave, throw, sigma_area, sigma_depth, sigma_cutoff
):
    """Find the angle from a known detachment depth and the lost area.

    Parameters
    ----------
    area : float
        Lost area of the horizon, the gap above the fault included.
    detachment_depth : float
        Of the detachment below the level regional.
    heave, throw : float
    sigma_area, sigma_depth, sigma_cutoff : float
        One standard deviation each; `sigma_cutoff` of heave and throw.

    Returns
    -------
    AngleEstimate

    Notes
    -----
    tan(a) = (A/d - heave)/throw (methods.md section 6): A/d is the displacement on
    the detachment, which is the oblique heave. Needs a level regional and detachment.
    """
    tangent = (area / detachment_depth - heave) / throw
    along = area / detachment_depth
    relative = np.hypot(sigma_area / area, sigma_depth / detachment_depth)
    variance = (along * relative) ** 2 + sigma_cutoff**2 * (1.0 + tangent**2)
    sigma = np.sqrt(variance) / throw
    chi2 = ((np.tan(np.radians(ANGLES)) - tangent) / sigma) ** 2
    return estimate("known detachment and lost area", ANGLES, chi2, 0)


def joint_angle(estimates):
    """Join the curves of several sections or ways into one angle for the fault.

    Parameters
    ----------
    estimates : sequence of AngleEstimate
        Over the same angles, from data with independent errors.

    Returns
    -------
    AngleEstimate
    """
    usable = [e for e in estimates if np.isfinite(e.chi2).any()]
    if not usable:
        raise ConstructionError("no-estimate", "no section gives a misfit curve.")
    chi2 = sum(e.chi2 for e in usable)
    freedom = sum(e.freedom + 1 for e in usable) - 1
    return estimate(f"{len(usable)} jointly", usable[0].angles, chi2, freedom)


def horizon_problem(where, separation, fault, bed, regional, options):
    """Write one horizon of a section as a problem for the calibration."""
    return Problem(
        where,
        separation,
        fault,
        bed_from(separation.hanging_wall, bed),
        regional,
        ConstantHeave(0.0),
        options,
    )
