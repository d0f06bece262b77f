"""One fault under several horizons, cut-offs and regionals free within their errors.

The fault is a smooth curve z(x) in the section itself, the same unknowns whatever the
shear angle, so that angles can be compared by how probable they make the data.
"""

from copy import copy
from dataclasses import dataclass, replace

import numpy as np

from .fit import golden_maximum
from .jointrows import HorizonData, LeaningFault
from .kinematics import ConstantHeave
from .problem import solve_march
from .splines import EvenSplines

__all__ = ["JointFit", "JointSystem"]

#: Knots in the smallest heave, and the most pieces altogether.
_KNOTS, _MOST = 3.0, 120
#: Least standard deviation of any datum, as a share of the throw.
_LEAST = 1e-3
#: Largest log weight of the curvature against that of the data: beyond, a fault that is
#: straight already gets no straighter, only the numbers worse.
_STIFF = 12.0
#: Gauss-Newton steps at most. They end where the misfit is going to lessen by no more
#: than this, or this share of it.
_STEPS, _SMALL, _SHARE = 20, 0.01, 2e-5
#: Decrease of the misfit that rounding may feign with a stiff fault.
_ROUNDING = 0.1


@dataclass(frozen=True, eq=False)
class JointFit:
    """The most probable fault at one shear angle.

    Parameters
    ----------
    angle : float
    deviance : float
        Minus twice the log marginal likelihood of the data, up to a constant.
    misfit : float
        Of data and curvature together; at one weight of the curvature its differences
        between angles say how well they suit the data.
    chi2 : float
        Misfit of the data in units of their errors, pulls of the regionals included.
    rows : int
        Number of data.
    log_weight : float
        Logarithm of the weight of the squared curvature.
    state : tuple
        Coefficients of the curve; for each horizon its own unknowns and its bed.
    linear : _Linear
        The system linearised there.
    """

    angle: float
    deviance: float
    misfit: float
    chi2: float
    rows: int
    log_weight: float
    state: tuple
    linear: object

    @property
    def freedom(self):
        """Number of data less the unknowns they decide."""
        return self.rows - self.linear.decided(self.log_weight)

    def of_one(self, number):
        """Give the same fault with the unknowns of one horizon only."""
        coefficients, own, beds = self.state
        return replace(self, state=(coefficients, own[[number]], [beds[number]]))


@dataclass(frozen=True, eq=False)
class _Linear:
    """The system linearised at a state, with unit errors.

    Parameters
    ----------
    square : float
        Sum of squares of residuals and pulls.
    normal, gradient : ndarray
        Normal matrix, and half the gradient of `square`.
    coefficients : ndarray
        Of the fault, at the state.
    bent : ndarray
        Matrix of the squared curvature.
    """

    square: float
    normal: np.ndarray
    gradient: np.ndarray
    coefficients: np.ndarray
    bent: np.ndarray

    def solved(self, log_weight):
        """Give deviance, misfit, and the step to them; None if singular."""
        import scipy.linalg

        n, weight = len(self.coefficients), np.exp(log_weight)
        full, half = self.normal.copy(), self.gradient.copy()
        full[:n, :n] += weight * self.bent
        bend = weight * (self.bent @ self.coefficients)
        half[:n] += bend
        try:
            factor = scipy.linalg.cho_factor(full, lower=True, check_finite=False)
        except np.linalg.LinAlgError:
            return None
        step = -scipy.linalg.cho_solve(factor, half, check_finite=False)
        decrease = float(-half @ step)
        misfit = self.square + self.coefficients @ bend - decrease
        log_det = 2.0 * np.log(np.diag(factor[0])).sum()
        deviance = misfit + log_det - (n - 2) * log_weight
        return float(deviance), float(misfit), step, decrease

    def best_weight(self, near=None):
        """Give the log weight of the curvature of largest marginal likelihood."""

        def value(log_weight):
            found = self.solved(log_weight)
            return -np.inf if found is None else -found[0]

        n = len(self.coefficients)
        scale = np.log(np.trace(self.normal[:n, :n]) / np.trace(self.bent))
        if near is not None:
            near = min(near, scale + _STIFF)
            return golden_maximum(value, near - 1.2, near + 1.2, 5)
        grid = scale + np.arange(-12.0, _STIFF + 0.1, 2.0)
        best = int(np.argmax([value(w) for w in grid]))
        low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]
        return golden_maximum(value, low, high, 8)

    def decided(self, log_weight):
        """Give how many unknowns the data decide rather than the curvature."""
        n, full = len(self.coefficients), self.normal.copy()
        full[:n, :n] += np.exp(log_weight) * self.bent
        return float(np.trace(np.linalg.solve(full, self.normal)))


class JointSystem:
    """All data of one section that bear on one fault.

    Parameters
    ----------
    problems : sequence of Problem
        One for each horizon, on one known fault. Their shear angles do not count.
    least : float
        Least standard deviation of any datum, as a share of the throw: no less than
        what a curve between knots may miss a bend by.

    Notes
    -----
    Unknowns are the coefficients of the fault and those of each horizon
    (`HorizonData`). Known fault points and deep ties are data like the picks. Before
    the data a smooth fault is more probable: its squared curvature has a weight found
    by marginal likelihood (REML) at each angle. The deviance is that of the system
    linearised at its solution (Laplace).
    """

    def __init__(self, problems, least=_LEAST):
        throw = max(p.separation.throw for p in problems)
        self._least = least * throw
        self.horizons = [HorizonData(p, self._least) for p in problems]
        upright = [replace(p, model=ConstantHeave(0.0)) for p in problems]
        widest = max(upright, key=lambda p: p.separation.heave)
        march = solve_march(widest)
        self.splines = _reach(problems, march)
        self.bent = self.splines.roughness()
        self.points = _fault_points(widest.fault)
        self._know(*self.points)
        own = np.array([h.start for h in self.horizons])
        guess = self.splines.following(lambda x: _guess(widest, march, x))
        self.start = guess, own, [h.z for h in self.horizons]

    def _know(self, x, z, sigma):
        """Take the points of the fault within reach as data."""
        inside = (x >= self.splines.low) & (x <= self.splines.high)
        x, z, sigma = x[inside], z[inside], np.maximum(sigma[inside], self._least)
        self.known, self.known_z = self.splines.rows(x) / sigma[:, None], z / sigma

    def of_one(self, number, hang_x):
        """Give the system of one horizon and the known fault down to its cut-off.

        Parameters
        ----------
        number : int
            Of the horizon.
        hang_x : float
            x of its hanging-wall cut-off.
        """
        one = copy(self)
        one.horizons = [self.horizons[number]]
        x, z, sigma = self.points
        above = x <= hang_x
        one._know(x[above], z[above], sigma[above])
        guess, own, beds = self.start
        one.start = guess, own[[number]], [beds[number]]
        return one

    def solve(self, angle, near=None, log_weight=None):
        """Find the most probable fault at a shear angle.

        Parameters
        ----------
        angle : float
            Degrees from the vertical, positive antithetic.
        near : JointFit, optional
            Of a neighbouring angle, to start from.
        log_weight : float, optional
            Of the squared curvature; that of largest marginal likelihood if not given.

        Returns
        -------
        JointFit or None
            None where the construction has no solution, or none was found.
        """
        tan = float(np.tan(np.radians(angle)))
        state = near.state if near else self.start
        fixed = log_weight is not None
        if not fixed:
            log_weight = near.log_weight if near else None
        now = self._linearised(state, tan)
        if now is None:
            return None
        for step in range(_STEPS):
            state, linear, rows = now
            if not fixed and step < (2 if near else 4):
                # far from a solution the best weight of one step misleads the next
                log_weight = linear.best_weight(log_weight if near else None)
            found = linear.solved(log_weight)
            if found is None:
                return None
            deviance, misfit, change, decrease = found
            if decrease > _SMALL + _SHARE * linear.square:
                now = self._moved(state, tan, change, decrease, log_weight)
                if now is not None:
                    continue
                # a small decrease that cannot be had is rounding
                if decrease > _ROUNDING:
                    return None
            found = deviance, misfit, linear.square, rows, log_weight
            return JointFit(angle, *found, state, linear)
        return None

    def slope_noise(self, fit):
        """Give the variance that the fault's own noise adds to the misfit's slope.

        Parameters
        ----------
        fit : JointFit

        Returns
        -------
        float
            Of half the derivative of the misfit with the angle, per degree squared.

        Notes
        -----
        With data y = J(a) F + e the fitted fault is F + K e, and half the slope of the
        misfit at the true angle is e'Q J_a F - e'Q J_a K e, with J_a the derivative of
        J, K = N^-1 J', Q = 1 - J K and N the normal matrix with its curvature. The
        curve itself states the variance of the first part. That of the second, a
        quadratic form in unit normal errors, is tr(M^2) + tr(M M') with M = Q J_a K.
        """
        coefficients, own, _ = fit.state
        n, size = len(coefficients), len(coefficients) + own.size
        step = 0.25
        tangents = np.tan(np.radians(fit.angle + step * np.arange(-1, 2)))
        parts = [self._compared(fit.state, t, rows=True) for t in tangents]
        if any(p is None for p in parts):
            return 0.0
        both, turn = np.zeros((size, size)), np.zeros((size, size))
        for k, (low, here, high) in enumerate(zip(*parts)):
            at = np.r_[np.arange(n), n + 3 * k + np.arange(3)]
            rows = np.hstack(here[1:3])
            change = (np.hstack(high[1:3]) - np.hstack(low[1:3])) / (2.0 * step)
            both[np.ix_(at, at)] += rows.T @ change
            turn[np.ix_(at, at)] += change.T @ change
        data, full = fit.linear.normal, fit.linear.normal.copy()
        full[:n, :n] += np.exp(fit.log_weight) * self.bent
        inner = np.linalg.solve(full, np.hstack([both, data]))
        of_both, of_data = inner[:, :size], inner[:, size:]
        left = np.linalg.solve(full, (both - data @ of_both).T)
        squared = turn - 2.0 * both.T @ of_both + of_both.T @ data @ of_both
        spread = np.linalg.solve(full, of_data.T).T
        return float(np.trace(left @ left) + np.trace(spread @ squared))

    def _compared(self, state, tan, rows):
        """Compare all horizons with a fault; None without a solution."""
        coefficients, own, beds = state
        fault = LeaningFault(self.splines, coefficients, tan)
        if not fault.single:
            return None
        parts = []
        for horizon, unknowns, bed in zip(self.horizons, own, beds):
            parts.append(horizon.evaluate(fault, unknowns, bed, rows))
            if parts[-1] is None:
                return None
        return parts

    def _square(self, state, parts):
        """Sum of squares of residuals and pulls."""
        coefficients, own, _ = state
        known = self.known @ coefficients - self.known_z
        square = known @ known + (own[:, :2] ** 2).sum()
        return float(square + sum(p[0] @ p[0] for p in parts))

    def _linearised(self, state, tan):
        """Linearise at a state; state with its beds, system, number of data."""
        parts = self._compared(state, tan, rows=True)
        if parts is None:
            return None
        coefficients, own, _ = state
        n, size = len(coefficients), len(coefficients) + own.size
        normal, gradient = np.zeros((size, size)), np.zeros(size)
        normal[:n, :n] = self.known.T @ self.known
        gradient[:n] = self.known.T @ (self.known @ coefficients - self.known_z)
        for k, (residual, by_fault, by_own, _) in enumerate(parts):
            at = slice(n + 3 * k, n + 3 * k + 3)
            normal[:n, :n] += by_fault.T @ by_fault
            normal[:n, at] = by_fault.T @ by_own
            normal[at, :n] = normal[:n, at].T
            # pulls have unit errors of their own
            normal[at, at] = by_own.T @ by_own + np.diag([1.0, 1.0, 0.0])
            gradient[:n] += by_fault.T @ residual
            gradient[at] = by_own.T @ residual + own[k] * [1.0, 1.0, 0.0]
        square = self._square(state, parts)
        linear = _Linear(square, normal, gradient, coefficients, self.bent)
        rows = len(self.known_z) + sum(len(p[0]) + 2 for p in parts)
        return (coefficients, own, [p[3] for p in parts]), linear, rows

    def _moved(self, state, tan, change, decrease, log_weight):
        """Go the step, or the part of it that lessens the misfit; None if none does."""
        before = self._misfit(state, tan, log_weight)[0]
        share, best = 1.0, None
        for _ in range(5):
            further = _stepped(state, share * change)
            after, parts = self._misfit(further, tan, log_weight)
            if after < (before + _SMALL if best is None else best[0]):
                best = after, further, parts
            if after < before - 0.75 * share * (2.0 - share) * decrease:
                break
            # the lowest point of the parabola through what is known of the way
            bend = (after - before) / share**2 + 2.0 * decrease / share
            shorter = decrease / bend if np.isfinite(bend) else 0.2 * share
            if best is not None and shorter > 0.8 * share:
                break
            share = float(np.clip(shorter, 0.1 * share, 0.7 * share))
        if best is None:
            return None
        _, (coefficients, own, _), parts = best
        return self._linearised((coefficients, own, [p[3] for p in parts]), tan)

    def _misfit(self, state, tan, log_weight):
        """Misfit of data and curvature, infinite without a solution, and its parts."""
        parts = self._compared(state, tan, rows=False)
        if parts is None:
            return np.inf, None
        coefficients = state[0]
        rough = np.exp(log_weight) * (coefficients @ self.bent @ coefficients)
        return self._square(state, parts) + rough, parts


def _stepped(state, change):
    coefficients, own, beds = state
    n = len(coefficients)
    return coefficients + change[:n], own + change[n:].reshape(own.shape), beds


def _fault_points(fault):
    """Observed points of the known piece and deep ties, with their errors."""
    own = slice(None, fault.observed)
    x, z = np.r_[fault.x[own], fault.tie_x], np.r_[fault.z[own], fault.tie_z]
    return x, z, np.r_[np.full(len(fault.x[own]), fault.sigma), fault.tie_sigma]


def _guess(problem, march, x):
    """Follow the known fault down to the hanging-wall cut-off, then vertical shear."""
    hang = problem.separation.hanging_wall.x
    return np.where(x > hang, np.interp(x, march.u, march.z), problem.fault.z_at(x))


def _reach(problems, march):
    """Knots from above the highest footwall cut-off to under the last pick.

    Under synthetic shear that lies farther out than the pick, by the depth of the
    fault there.
    """
    heaves = [p.separation.heave for p in problems]
    low = min(p.separation.footwall.x for p in problems) - 0.5 * max(heaves)
    last = max(float(p.bed.x[-1]) for p in problems)
    deep = max(float(march.bed_z[-1] - march.z[-1]), 0.0)
    high = last + 0.7 * deep
    step = max(min(heaves) / _KNOTS, (high - low) / _MOST)
    return EvenSplines.over(low, high, step)
