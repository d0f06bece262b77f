"""A shear angle from a misfit curve: best value, interval, and whether it is resolved.

Every way of finding the angle gives a curve chi-square(angle). Curves of independent
data add up, so that sections can be calibrated jointly.
"""

from dataclasses import dataclass
from typing import Optional

import numpy as np

from .errors import ConstructionError

__all__ = [
    "ANGLES",
    "AREA",
    "CUTOFFS",
    "HORIZONS",
    "TIES",
    "WAYS",
    "AngleEstimate",
    "estimate",
    "joint_angle",
    "refined",
    "require_scipy",
    "unresolved",
]

#: The ways of finding the angle, as recipes and results name them.
HORIZONS, TIES, CUTOFFS, AREA = WAYS = ("horizons", "ties", "cut-offs", "area")

#: Angles tried, degrees (methods.md section 6: -35 to 50 in steps of 5, then refined).
ANGLES = np.arange(-35.0, 50.1, 5.0)
#: Width of the 90 % interval beyond which the angle is called not resolved.
NOT_RESOLVED = 30.0
#: Spacing of the angles tried near the best one: about one standard deviation of the
#: likelihood, within these bounds, degrees.
_FINEST, _COARSEST = 0.1, 2.5
#: Spacing at which the curve is first read, degrees.
_SPACING = 0.05
#: Likelihood at an end of the angles, relative to the best, from which on it is said to
#: run into that end (common practice, no source).
_AT_END = 0.02
#: Misfit above the least beyond which the curve does not count.
_FAR = 30.0


@dataclass(frozen=True, eq=False)
class AngleEstimate:
    """A shear angle from data.

    Parameters
    ----------
    way : str
        One of `WAYS`.
    best : float or None
        Angle of least misfit, degrees; None where no angle could be told at all.
    mean, sd : float or None
        Of the likelihood exp(-chi2/2) over the angles tried.
    low, high : float or None
        90 % interval, degrees.
    angles, chi2 : ndarray (n,)
        Misfit curve, angles growing; infinite where the construction has no solution.
    freedom : float
        Degrees of freedom of chi2 at its least.
    resolved : bool
    text : str
        What the data say, in words.
    """

    way: str
    best: Optional[float]
    mean: Optional[float]
    sd: Optional[float]
    low: Optional[float]
    high: Optional[float]
    angles: np.ndarray
    chi2: np.ndarray
    freedom: float
    resolved: bool
    text: str

    def __repr__(self):
        return f"AngleEstimate({self.way!r}: {self.text})"


def require_scipy(where=""):
    """Refuse to go on where scipy is missing.

    Raises
    ------
    ConstructionError
        With code ``no-scipy``.
    """
    try:
        import scipy.interpolate
        import scipy.linalg  # noqa: F401 - only whether it is there
    except ImportError:
        raise ConstructionError(
            "no-scipy",
            "the shear angle is found with the Python package scipy, which is not "
            "installed.",
            where,
            "Install scipy.",
        ) from None


def unresolved(way, why):
    """Give the estimate of data that tell no angle at all, with the reason."""
    angles = np.array(ANGLES)
    text = f"Not resolved: {why}"
    none = (None,) * 5
    return AngleEstimate(way, *none, angles, np.zeros(len(angles)), 0.0, False, text)


def read_curve(angles, chi2, at):
    """Read a misfit curve between the angles tried.

    Parameters
    ----------
    angles, chi2 : ndarray (n,)
    at : ndarray (m,)

    Returns
    -------
    ndarray (m,)
        Infinite beyond the ends and next to angles without a solution. A cubic spline
        near the minimum; straight far up the sides, where a spline could overshoot.
    """
    finite = np.isfinite(chi2)
    out = np.full(len(at), np.inf)
    if not finite.any():
        return out
    # one stretch of solutions: nothing is bridged where there are none
    least = int(np.argmin(np.where(finite, chi2, np.inf)))
    first, last = least, least
    while first > 0 and finite[first - 1]:
        first -= 1
    while last < len(angles) - 1 and finite[last + 1]:
        last += 1
    a, c = angles[first : last + 1], chi2[first : last + 1]
    inside = (at >= a[0] - 1e-9) & (at <= a[-1] + 1e-9)
    out[inside] = _between(a, c, at[inside])
    return out


def _between(a, c, at):
    """Cubic spline where it counts, straight elsewhere."""
    straight = np.interp(at, a, c)
    near = c < c.min() + _FAR
    # a curve narrower than its spacing is close to a parabola at its least
    least = int(np.argmin(c))
    near[max(least - 2, 0) : least + 3] = True
    first, last = np.flatnonzero(near)[[0, -1]]
    first, last = max(first - 1, 0), min(last + 1, len(a) - 1)
    if last - first < 2:
        return straight
    own = slice(first, last + 1)
    smooth = _spline(a[own], c[own], at)
    j = np.clip(np.searchsorted(a, at), 1, len(a) - 1)
    return np.where(near[j - 1] & near[j], smooth, straight)


def _spline(x, y, at):
    """Cubic spline through three points or more; a parabola through three."""
    from scipy.interpolate import CubicSpline

    return CubicSpline(x, y)(at)


def refined(value, tried, bounds=(ANGLES[0], ANGLES[-1]), rounds=8):
    """Try more angles, about one standard deviation apart, near the best one.

    Parameters
    ----------
    value : callable
        Misfit at one angle, infinite without a solution.
    tried : dict of float to float
        Misfit by angle; added to.
    bounds : tuple of float
    rounds : int
        At most.

    Returns
    -------
    angles, misfit : ndarray (n,)
        Angles growing.
    """
    for _ in range(rounds):
        known = np.array(sorted(tried))
        values = np.array([tried[a] for a in known])
        i = int(np.argmin(values))
        if not np.isfinite(values[i]):
            break
        best, spacing = _parabola(known, values, i)
        wanted = (best + spacing * np.arange(-3, 4)).round(6).tolist()
        missing = [
            a
            for a in wanted
            if np.abs(known - a).min() > 0.45 * spacing and bounds[0] <= a <= bounds[1]
        ]
        for angle in sorted(missing, key=lambda a: abs(a - best)):
            tried[angle] = value(angle)
        if not missing:
            break
    known = np.array(sorted(tried))
    return known, np.array([tried[a] for a in known])


def _parabola(angles, values, i):
    """Lowest point and standard deviation of a likelihood near angle number i.

    Where the best angle has no solution on one side, the spacing there is halved.
    """
    if not (0 < i < len(angles) - 1 and np.isfinite(values[[i - 1, i + 1]]).all()):
        apart = np.diff(angles[max(i - 1, 0) : i + 2])
        return angles[i], max(0.5 * apart.min(), _FINEST)
    near = angles[i - 1 : i + 2]
    bend, lean, _ = np.polyfit(near - angles[i], values[i - 1 : i + 2], 2)
    best = angles[i] - 0.5 * lean / bend if bend > 0 else angles[i]
    spacing = np.clip(max(bend, 1e-6) ** -0.5, _FINEST, _COARSEST)
    return np.clip(best, near[0], near[2]), spacing


def estimate(way, angles, chi2, freedom, note=""):
    """Make an estimate from a misfit curve.

    Parameters
    ----------
    way : str
    angles, chi2 : ndarray (n,)
        Angles growing.
    freedom : float
    note : str
        Added to the text.

    Returns
    -------
    AngleEstimate

    Notes
    -----
    The likelihood exp(-chi2/2), with every angle tried equally probable before, gives
    mean, standard deviation and the 90 % interval. The angle is not resolved where
    that interval is wider than `NOT_RESOLVED` or the likelihood runs into the end of
    the angles that have a solution.
    """
    angles, chi2 = np.asarray(angles, dtype=float), np.asarray(chi2, dtype=float)
    if not np.isfinite(chi2).any():
        return unresolved(way, "the construction has no solution at any angle.")
    fine = _fine_angles(angles, chi2)
    if fine is None:
        return unresolved(way, "the construction has a solution at one angle only.")
    curve = read_curve(angles, chi2, fine)
    weight = np.exp(-0.5 * (curve - curve.min()))
    weight /= weight.sum()
    best = _lowest(fine, curve)
    mean = float(weight @ fine)
    sd = float(np.sqrt(weight @ (fine - mean) ** 2))
    total = np.cumsum(weight) - 0.5 * weight
    at_end = _AT_END * weight.max()
    low, high = (float(np.interp(q, total, fine)) for q in (0.05, 0.95))
    ends = [a for a, w in ((fine[0], weight[0]), (fine[-1], weight[-1])) if w > at_end]
    resolved = bool(high - low < NOT_RESOLVED and not ends)
    text = _words(best, low, high, float(curve.min()), freedom, ends) + note
    return AngleEstimate(
        way, best, mean, sd, low, high, angles, chi2, freedom, resolved, text
    )


def _lowest(x, y):
    """Give the lowest point of a curve, between its points."""
    i = int(np.argmin(y))
    if not 0 < i < len(x) - 1:
        return float(x[i])
    fall, rise = y[i - 1] - y[i], y[i + 1] - y[i]
    both = fall + rise
    shift = 0.5 * (fall - rise) / both if both > 0 else 0.0
    return float(x[i] + shift * (x[i + 1] - x[i]))


def _fine_angles(angles, chi2):
    """Give closely spaced angles over all that are at all likely; None if one only."""
    fine = np.arange(angles[0], angles[-1] + 0.5 * _SPACING, _SPACING)
    curve = read_curve(angles, chi2, fine)
    likely = np.flatnonzero(curve < curve.min() + _FAR)
    if np.isfinite(curve).sum() < 2:
        return None
    solved = np.flatnonzero(np.isfinite(curve))
    first, last = max(likely[0] - 1, solved[0]), min(likely[-1] + 1, solved[-1])
    return np.linspace(fine[first], fine[last], 1201)


def _words(best, low, high, least, freedom, ends):
    if high - low >= NOT_RESOLVED:
        return (
            f"Not resolved: angles from {low:.0f} to {high:.0f} degrees explain the "
            "data about as well."
        )
    if ends:
        places = " and ".join(f"{a:.0f}" for a in ends)
        return (
            f"Not resolved: the data suit best an angle near {best:.0f} degrees, but "
            f"the angles that could be tried end at {places}."
        )
    text = f"{best:.1f} degrees, 90 % interval {low:.1f} to {high:.1f}."
    if freedom > 0 and least > freedom + 3.0 * np.sqrt(2.0 * freedom):
        text += (
            f" The misfit is large even there (chi-square {least:.0f} for {freedom:.0f}"
            " degrees of freedom): the data do not agree within their stated errors."
        )
    return text


def joint_angle(estimates):
    """Join the curves of several sections into one angle for the fault.

    Parameters
    ----------
    estimates : sequence of AngleEstimate
        From data with independent errors.

    Returns
    -------
    AngleEstimate
        The text says so where the sections do not agree on one angle.

    Raises
    ------
    ConstructionError
        If no section gives a curve, or no angle has a solution in all of them.
    """
    usable = [e for e in estimates if e.best is not None]
    if not usable:
        raise ConstructionError("no-estimate", "no section gives a misfit curve.")
    at = np.unique(np.concatenate([e.angles for e in usable]).round(6))
    curves = [read_curve(e.angles, e.chi2, at) for e in usable]
    chi2 = np.sum(curves, axis=0)
    if not np.isfinite(chi2).any():
        raise ConstructionError(
            "no-common-angle", "no angle has a solution in all sections."
        )
    apart = float(chi2.min() - sum(c.min() for c in curves))
    freedom = sum(e.freedom for e in usable) + len(usable) - 1
    note = _apart_words(apart, len(usable) - 1)
    return estimate(usable[0].way, at, chi2, freedom, note)


def _apart_words(apart, freedom):
    """Say where sections disagree by more than their curves allow (1 in 100)."""
    if freedom < 1:
        return ""
    from scipy.special import chdtri

    if apart <= chdtri(freedom, 0.01):
        return ""
    return (
        f" The sections do not agree on one angle: joining them adds {apart:.0f} to "
        f"chi-square for {freedom} degrees of freedom."
    )
