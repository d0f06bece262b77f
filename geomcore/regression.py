"""A straight line through points with errors in both directions."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError

__all__ = ["StraightLine", "line_with_errors"]


@dataclass(frozen=True, eq=False)
class StraightLine:
    """A fitted line y = intercept + slope x.

    Parameters
    ----------
    intercept, slope : float
    covariance : ndarray (2, 2)
        Of intercept and slope.
    chi2 : float
        Sum of squares of the misfits in units of the stated errors.
    freedom : int
        Points less the two parameters.
    widened : bool
        The points scatter by more than their errors allow; the covariance was
        widened to that scatter, and intervals follow Student's t.
    """

    intercept: float
    slope: float
    covariance: np.ndarray
    chi2: float
    freedom: int
    widened: bool

    @property
    def slope_sigma(self):
        """One standard deviation of the slope."""
        return float(np.sqrt(self.covariance[1, 1]))

    @property
    def zero(self):
        """Give x where the line crosses y = 0."""
        return float(-self.intercept / self.slope)

    def slope_interval(self, level=0.9):
        """Give the confidence interval (low, high) of the slope."""
        half = self._quantile(level) * self.slope_sigma
        return self.slope - half, self.slope + half

    def zero_interval(self, level=0.9):
        """Give the confidence interval (low, high) of x at y = 0, or None.

        None where the slope itself may be zero: then no end can be stated.

        Notes
        -----
        Fieller's theorem: all x whose y = intercept + slope x may be zero, which
        holds for the ratio of two normal quantities whatever their errors.
        """
        q2 = self._quantile(level) ** 2
        # written about the zero crossing, where the line itself vanishes
        shift = np.array([1.0, self.zero])
        at_zero = float(shift @ self.covariance @ shift)
        both = float(shift @ self.covariance[:, 1])
        a = self.slope**2 - q2 * self.covariance[1, 1]
        if a <= 0:
            return None
        middle, root = q2 * both, np.sqrt(q2**2 * both**2 + a * q2 * at_zero)
        return self.zero + (middle - root) / a, self.zero + (middle + root) / a

    def _quantile(self, level):
        """Two-sided quantile: Student's t where the errors come from the scatter."""
        try:
            from scipy.special import ndtri, stdtrit
        except ImportError:
            raise ConstructionError(
                "no-scipy",
                "confidence intervals need the Python package scipy, which is not "
                "installed.",
                remedy="Install scipy.",
            ) from None
        p = 0.5 + 0.5 * level
        return float(stdtrit(self.freedom, p) if self.widened else ndtri(p))


def line_with_errors(x, y, sigma_x, sigma_y, correlation=0.0):
    """Fit a line to points whose x and y both have errors.

    Parameters
    ----------
    x, y : array_like (n,)
        Two points at least, not all at one x.
    sigma_x, sigma_y : array_like (n,)
        One standard deviation each; where both are 0 a billionth of the range of y
        counts, and the errors of the line come from the scatter alone.
    correlation : array_like
        Of the errors of x and y of each point.

    Returns
    -------
    StraightLine

    Raises
    ------
    ConstructionError
        If there are fewer than two points, or all stand at one x.

    References
    ----------
    York, Evensen, Martinez & De Basabe Delgado 2004, Am. J. Phys. 72, 367-375.
    """
    x, y = np.asarray(x, dtype=float), np.asarray(y, dtype=float)
    if len(x) < 2 or np.ptp(x) == 0:
        raise ConstructionError(
            "too-few-points", f"{len(x)} point(s) at one place carry no line."
        )
    sx = np.broadcast_to(np.asarray(sigma_x, dtype=float), x.shape)
    least = 1e-9 * max(np.ptp(y), np.abs(y).max(), 1e-300)
    sy = np.maximum(np.asarray(sigma_y, dtype=float), least)
    cov = np.broadcast_to(correlation, x.shape) * sx * sy
    slope = np.polyfit(x, y, 1)[0]
    for _ in range(200):
        weight = 1.0 / (sy**2 + (slope * sx) ** 2 - 2.0 * slope * cov)
        x_mean, y_mean = np.average(x, weights=weight), np.average(y, weights=weight)
        u, v = x - x_mean, y - y_mean
        beta = weight * (u * sy**2 + slope * v * sx**2 - (slope * u + v) * cov)
        before, slope = slope, (weight * beta * v).sum() / (weight * beta * u).sum()
        if abs(slope - before) <= 1e-14 * abs(slope):
            break
    return _with_errors(x, y, slope, weight, beta, x_mean, y_mean)


def _with_errors(x, y, slope, weight, beta, x_mean, y_mean):
    """Covariance at the adjusted points, widened where the scatter is larger."""
    intercept = y_mean - slope * x_mean
    adjusted = x_mean + beta
    centre = np.average(adjusted, weights=weight)
    of_slope = 1.0 / (weight * (adjusted - centre) ** 2).sum()
    of_intercept = 1.0 / weight.sum() + centre**2 * of_slope
    both = -centre * of_slope
    covariance = np.array([[of_intercept, both], [both, of_slope]])
    chi2 = float((weight * (y - intercept - slope * x) ** 2).sum())
    freedom = len(x) - 2
    # as for the regional: beyond what chance would do (see `fit_covariance`)
    chance = 1.0 + 2.0 * np.sqrt(2.0 / max(freedom, 1))
    widened = bool(freedom > 0 and chi2 / freedom > chance)
    if widened:
        covariance = covariance * (chi2 / freedom)
    return StraightLine(
        float(intercept), float(slope), covariance, chi2, freedom, widened
    )
