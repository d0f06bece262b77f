"""The shear angle from the data of one section: several ways, each a misfit curve."""

from dataclasses import replace

import numpy as np

from .anglecurve import (
    ANGLES,
    AREA,
    CUTOFFS,
    HORIZONS,
    TIES,
    AngleEstimate,
    estimate,
    joint_angle,
    refined,
    require_scipy,
    unresolved,
)
from .construction import check_problem
from .errors import GeomcoreError
from .jointfit import JointSystem
from .kinematics import ConstantHeave
from .lostarea import area_convergence, lost_area
from .uncertainty import moved_problem, parameter_roots

__all__ = [
    "ANGLES",
    "AngleEstimate",
    "angle_from_area",
    "angle_from_cutoffs",
    "angle_from_detachment",
    "angle_from_horizons",
    "angle_from_separations",
    "angle_from_ties",
    "has_deep_points",
    "joint_angle",
]

#: Angles at which the closed forms are tried, degrees.
_EVEN = np.arange(ANGLES[0], ANGLES[-1] + 0.1, 0.5)
#: The search ends outwards where the misfit has grown by this much.
_STEEP, _ENOUGH = 1000.0, 25.0
#: Least standard deviation of the data at first, as a share of the throw.
_BLUNT = 1e-2
#: Times the smoothness is found anew, and the change of its log that is none.
_ROUNDS, _SAME = 3, 0.5


class _Search:
    """The misfit of one section against the angle, tried where it matters.

    First coarsely with blunted data, whose misfit has no sharp walls to get stuck at;
    then with the data as they are stated, at the smoothness of the best angle.
    """

    def __init__(self, problems):
        self.problems = problems
        self.system = JointSystem(problems)
        heaves = [p.separation.heave for p in problems]
        self.widest = int(np.argmax(heaves))
        hang = problems[self.widest].separation.hanging_wall.x
        self.alone = self.system.of_one(self.widest, hang)
        self.log_weight = None
        self.starts, self.fits = {}, {}

    def run(self):
        """Give angles, misfit and degrees of freedom."""
        self._scan()
        if not self.starts:
            return ANGLES, np.full(len(ANGLES), np.inf), 0.0
        best = min(self.starts.values(), key=lambda f: f.deviance).angle
        for _ in range(_ROUNDS):
            before, self.log_weight = self.log_weight, self._smoothness(best)
            if before is not None and abs(self.log_weight - before) < _SAME:
                self.log_weight = before
                break
            self.fits = {}
            angles, values = refined(self._value, self._outwards(best))
            if not np.isfinite(values).any():
                return angles, values, 0.0
            best = float(angles[int(np.argmin(values))])
        fit = self.fits[best][0]
        # differences tell the angle; the level is that of the data's misfit
        values = (values - values.min()) * self._reliance(angles, values, fit)
        return angles, values + fit.chi2, fit.freedom

    def _smoothness(self, angle):
        """Log weight of the curvature by the data as stated, at an angle."""
        near = self._near(angle)[0]
        fit = self.system.solve(angle, near)
        return near.log_weight if fit is None else fit.log_weight

    def _near(self, angle):
        """Give the fits at the nearest angle there is one of."""
        pool = self.fits or {a: (f, None) for a, f in self.starts.items()}
        return pool[min(pool, key=lambda a: abs(a - angle))]

    def _reliance(self, angles, values, best):
        """Share of the curve that holds: the fault it rests on is noisy itself.

        A curve of standard deviation s has a slope of variance 1/s^2; what noise in
        the fitted fault adds widens the scatter of its least by that share.
        """
        found = estimate(HORIZONS, angles, values, 0.0)
        if found.sd is None:
            return 1.0
        return 1.0 / (1.0 + found.sd**2 * self.system.slope_noise(best))

    def _scan(self):
        """Try coarse angles from vertical shear outwards, smoothness free."""
        blunt = JointSystem(self.problems, _BLUNT)
        for side in (ANGLES[ANGLES >= 0], ANGLES[ANGLES < 0][::-1]):
            near = self.starts.get(0.0)
            for angle in side.tolist():
                possible = _possible(self.problems, angle)
                fit = blunt.solve(angle, near) if possible else None
                if fit is None:
                    continue
                self.starts[angle] = near = fit
                least = min(f.deviance for f in self.starts.values())
                if fit.deviance > least + _STEEP:
                    break

    def _outwards(self, best):
        """Try coarse angles to both sides of the best one, smoothness fixed."""
        tried = {}
        above = ANGLES >= best  # noqa: SIM300 - read as written
        for side in (ANGLES[above], ANGLES[~above][::-1]):
            for angle in side.tolist():
                tried[angle] = self._value(angle)
                if not tried[angle] < min(tried.values()) + _ENOUGH:
                    break
        return tried

    def _value(self, angle):
        """Misfit of all data less that of one horizon alone, at one angle."""
        if not _possible(self.problems, angle):
            return np.inf
        near = self._near(angle)
        joint = self.system.solve(angle, near[0], self.log_weight)
        if joint is None:
            return np.inf
        start = near[1] or joint.of_one(self.widest)
        alone = self.alone.solve(angle, start, self.log_weight)
        if alone is None:
            return np.inf
        self.fits[angle] = joint, alone
        return joint.misfit - alone.misfit


def angle_from_horizons(problems):
    """Find the angle at which several horizons, and deep ties, belong to one fault.

    Parameters
    ----------
    problems : sequence of Problem
        One for each horizon of a section, growth horizons with their own regional and
        cut-offs, all on one known fault, whose observed points and deep ties count too.

    Returns
    -------
    AngleEstimate
        Not resolved where one horizon is all there is.

    Raises
    ------
    ConstructionError
        If scipy is missing.

    Notes
    -----
    At each angle one smooth fault is fitted to everything, cut-offs and regionals
    free within their errors (`JointSystem`). From its misfit that of a fit to one
    horizon alone is taken, with the known fault down to its cut-off: one horizon
    predicts a fault at any angle, and what smoothness prefers there is no evidence.
    The smoothness is that of the best angle (REML), the same at all of them. Idea:
    White 1992, White & Yielding 1991, Withjack & Peterson 1993 (through methods.md
    section 6); the weighting is ours.
    """
    problems = list(problems)
    require_scipy(problems[0].where if problems else "")
    if not problems:
        return unresolved(HORIZONS, "there is no horizon with cut-offs and picks.")
    if len(problems) == 1 and not has_deep_points(problems[0]):
        why = "one horizon predicts a fault at any angle, so it cannot tell it."
        return unresolved(HORIZONS, why)
    return estimate(HORIZONS, *_Search(problems).run())


def has_deep_points(problem):
    """Tell whether the fault is known beyond a horizon's hanging-wall cut-off.

    By a tenth of the heave at least: less is the cut-off itself within its error.
    """
    fault, hang = problem.fault, problem.separation.hanging_wall.x
    deep = np.r_[fault.x[: fault.observed], fault.tie_x]
    return bool((deep > hang + 0.1 * problem.separation.heave).any())


def angle_from_ties(problem):
    """Find the angle at which the fault of one horizon meets deep points on it.

    Parameters
    ----------
    problem : Problem
        Its known fault holds the deep points.

    Returns
    -------
    AngleEstimate
        Not resolved where no point lies beyond the hanging-wall cut-off.

    Raises
    ------
    ConstructionError
        If scipy is missing.
    """
    if not has_deep_points(problem):
        why = "no point of the fault is known beyond the hanging-wall cut-off."
        return unresolved(TIES, why)
    return replace(angle_from_horizons([problem]), way=TIES)


def angle_from_cutoffs(heave, throw, sigma_heave, sigma_throw, correlation=0.0):
    """Find the angle from the cut-offs of several pre-growth horizons.

    Parameters
    ----------
    heave, throw : array_like (n,)
        Of horizons that all existed before the fault moved.
    sigma_heave, sigma_throw : float or array_like (n,)
    correlation : float or array_like (n,)
        Of the errors of heave and throw.

    Returns
    -------
    AngleEstimate
        Not resolved for fewer than two horizons, or equal heaves and throws.

    Notes
    -----
    They share one H = heave + throw tan(a), so heave against throw is a straight line
    of slope -tan(a) (methods.md section 6). Chi-square is that of the line with errors
    in both (York et al. 2004), the lowest over H and the true throws: errors of equal
    size in both then prefer no angle. Poor where the fault is nearly straight between
    the cut-offs, for then heave and throw keep one ratio.
    """
    heave, throw = np.asarray(heave, dtype=float), np.asarray(throw, dtype=float)
    require_scipy()
    if len(heave) < 2:
        why = "one pair of cut-offs gives no line of heave against throw."
        return unresolved(CUTOFFS, why)
    t = np.tan(np.radians(_EVEN))[:, None]
    of_heave, of_throw = np.asarray(sigma_heave), t * np.asarray(sigma_throw)
    both = 2.0 * np.asarray(correlation) * of_heave * of_throw
    variance = np.broadcast_to(of_heave**2 + of_throw**2 + both, (len(t), len(heave)))
    variance = np.maximum(variance, (1e-6 * heave.max()) ** 2)
    oblique = heave + t * throw
    mean = (oblique / variance).sum(axis=1) / (1.0 / variance).sum(axis=1)
    chi2 = ((oblique - mean[:, None]) ** 2 / variance).sum(axis=1)
    return estimate(CUTOFFS, _EVEN, chi2, len(heave) - 2)


def angle_from_separations(separations):
    """Find the angle from measured cut-offs of pre-growth horizons.

    Parameters
    ----------
    separations : sequence of Separation

    Returns
    -------
    AngleEstimate
        As `angle_from_cutoffs`; the errors of cut-offs that were found slide along
        the fault, so that heave and throw grow together.
    """
    errors = [_heave_throw_errors(s) for s in separations]
    of_heave, of_throw, both = np.array(errors).reshape(-1, 3).T
    return angle_from_cutoffs(
        [s.heave for s in separations],
        [s.throw for s in separations],
        of_heave,
        of_throw,
        both,
    )


def _heave_throw_errors(separation):
    """Give standard deviations of heave and throw, and their correlation."""
    cuts = (separation.footwall, separation.hanging_wall)
    of_heave = np.hypot(*(c.sigma_x for c in cuts))
    of_throw = np.hypot(*(c.sigma_z for c in cuts))
    together = sum(c.sigma_x * c.sigma_z for c in cuts if c.slides)
    return of_heave, of_throw, together / max(of_heave * of_throw, 1e-300)


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
        One standard deviation each; `sigma_cutoff` of heave and of throw.

    Returns
    -------
    AngleEstimate

    Notes
    -----
    A = d (heave + throw tan(a)), so tan(a) = (A/d - heave)/throw (methods.md section
    6). Needs a level regional and detachment. `angle_from_detachment` takes a section
    as it is.
    """
    t = np.tan(np.radians(_EVEN))
    oblique = heave + throw * t
    miss = area - detachment_depth * oblique
    variance = sigma_area**2 + (oblique * sigma_depth) ** 2
    variance = variance + (detachment_depth * sigma_cutoff) ** 2 * (1.0 + t**2)
    return estimate(AREA, _EVEN, miss**2 / variance, 0.0)


def angle_from_detachment(problem, detachment_z, detachment_sigma):
    """Find the angle at which a horizon's lost area reaches a known detachment.

    Parameters
    ----------
    problem : Problem
        Its shear angle does not count.
    detachment_z, detachment_sigma : float
        Elevation of the detachment and one standard deviation.

    Returns
    -------
    AngleEstimate
        Not resolved where A/H has not levelled off at the end of the picks: the fault
        under the last strip is not the detachment yet.

    Notes
    -----
    At each angle the area up to the last shear line is A = H (R - z_det), R the mean
    of the regional over the last strip (eq. 8a of methods.md). The misfit of that
    carries the errors of picks, known fault, regional and cut-offs through both sides,
    and what the area would still grow by beyond the picks, going by its last strips.
    """
    require_scipy(problem.where)

    found = _from_area(problem, detachment_z, detachment_sigma, 0.0)
    if found.best is None:
        return found
    course = area_convergence(_at_angle(problem, found.best))
    if not course.levelled:
        return unresolved(AREA, course.text)
    return _from_area(problem, detachment_z, detachment_sigma, _still_to_come(course))


def _from_area(problem, z, sigma, to_come):
    """Estimate from the area, a share of which may still be to come."""

    def value(angle):
        return _area_misfit(problem, angle, z, sigma, to_come)

    return estimate(AREA, *refined(value, {a: value(a) for a in ANGLES.tolist()}), 0.0)


def _still_to_come(course, per_strip=4):
    """Share of the area that strips beyond the picks would add.

    The last strip's change goes on as a geometric row by the ratio of the last two.
    """
    depth = course.depth
    if len(depth) <= 2 * per_strip:
        return 1.0
    last = depth[-1] - depth[-1 - per_strip]
    before = depth[-1 - per_strip] - depth[-1 - 2 * per_strip]
    ratio = np.clip(last / before if before != 0 else 0.0, 0.0, 0.9)
    return float(abs(last) * max(ratio / (1.0 - ratio), 1.0) / depth[-1])


def _at_angle(problem, angle):
    return replace(problem, model=ConstantHeave(float(angle)))


def _possible(problems, angle):
    """Tell whether cut-offs and known fault have a solution at an angle."""
    try:
        for problem in problems:
            check_problem(_at_angle(problem, angle))
    except GeomcoreError:
        return False
    return True


def _area_misfit(problem, angle, z, sigma, to_come):
    """Misfit of A = H (R - z_det) in units of its error, squared."""
    if not _possible([problem], angle):
        return np.inf
    problem = _at_angle(problem, angle)

    def miss(trial):
        lost = lost_area(trial)
        return lost.total - lost.displacement * (lost.regional_z - z)

    names, root = parameter_roots(problem)
    steps = np.maximum(np.abs(root).sum(axis=1), 1e-3)
    try:
        effect = [
            (miss(moved_problem(problem, n, s)) - miss(moved_problem(problem, n, -s)))
            / (2.0 * s)
            for n, s in zip(names, steps)
        ]
        exact = replace(problem.regional, covariance=(0.0, 0.0, 0.0))
        of_picks = lost_area(replace(problem, regional=exact)).sigma
        variance = of_picks**2 + ((np.array(effect) @ root) ** 2).sum()
        variance += (problem.oblique_heave * sigma) ** 2
        variance += (to_come * lost_area(problem).total) ** 2
        return float(miss(problem) ** 2 / variance)
    except GeomcoreError:
        return np.inf
