"""Single-valued curves of a section: horizons and the straight regional."""

from dataclasses import dataclass
from typing import Optional

import numpy as np

from .errors import ConstructionError, PicksError

__all__ = [
    "Profile",
    "Regional",
    "fit_covariance",
    "fit_line",
    "line_through",
    "pool_to_increasing",
    "profile_from_picks",
    "require_depth",
]


def pool_to_increasing(key, *columns, least=0.0):
    """Average neighbours until a key grows strictly (pool adjacent violators).

    Parameters
    ----------
    key : ndarray (n,)
        Should grow along the row; noise may break that.
    *columns : ndarray (n,)
        Averaged along with the key.
    least : float
        Smallest growth from one to the next.

    Returns
    -------
    list of ndarray (m,), m <= n
        Key and columns, averaged where needed; last the number of values in each.
    """
    key = np.asarray(key, dtype=float)
    if np.all(np.diff(key) > least):
        plain = [np.array(c, dtype=float) for c in (key, *columns)]
        return [*plain, np.ones(len(key))]
    stack = []
    for row in zip(key, *columns):
        stack.append((np.array(row, dtype=float), 1))
        while len(stack) > 1 and stack[-1][0][0] - stack[-2][0][0] <= least:
            (b, nb), (a, na) = stack.pop(), stack.pop()
            stack.append(((a * na + b * nb) / (na + nb), na + nb))
    rows = np.array([s[0] for s in stack])
    return [*rows.T, np.array([s[1] for s in stack])]


@dataclass(frozen=True, eq=False)
class Profile:
    """A horizon as a single-valued curve, straight between its points.

    Parameters
    ----------
    x, z : ndarray (n,)
        Points, x strictly growing.
    sigma : ndarray (n,)
        One standard deviation of z.
    correlation : ndarray (n,), optional
        Length over which the errors of neighbouring points go together, as
        exp(-distance/length); 0 where they are independent.
    """

    x: np.ndarray
    z: np.ndarray
    sigma: np.ndarray
    correlation: Optional[np.ndarray] = None

    def __post_init__(self):
        if self.correlation is None:
            object.__setattr__(self, "correlation", np.zeros(len(self.x)))
        for name in ("x", "z", "sigma", "correlation"):
            value = np.array(getattr(self, name), dtype=float)
            value.flags.writeable = False
            object.__setattr__(self, name, value)

    def __call__(self, x):
        """Give z at x, NaN beyond the ends."""
        return np.interp(x, self.x, self.z, left=np.nan, right=np.nan)

    def __len__(self):
        return len(self.x)

    def covariance(self):
        """Give the covariance (n, n) of the errors of its points."""
        length = np.minimum.outer(self.correlation, self.correlation)
        apart = np.abs(np.subtract.outer(self.x, self.x))
        with np.errstate(divide="ignore", invalid="ignore"):
            together = np.where(length > 0, np.exp(-apart / length), 0.0)
        np.fill_diagonal(together, 1.0)
        return together * np.outer(self.sigma, self.sigma)


def profile_from_picks(picks):
    """Make a profile from the used picks of one horizon in one wall.

    Picks at one place are averaged, weighted by 1/sigma^2; the average keeps the
    smallest sigma of its picks, since picks at one place seldom err independently.

    Parameters
    ----------
    picks : Picks

    Returns
    -------
    Profile
    """
    picks = picks.select(picks.used)
    order = np.argsort(picks.x, kind="stable")
    x, z, sigma = picks.x[order], picks.z[order], picks.sigma_z[order]
    if not len(x):
        return Profile(x, z, sigma)
    first = np.r_[True, np.diff(x) > 1e-6]
    at = np.flatnonzero(first)
    weight = 1.0 / np.maximum(sigma, 1e-6) ** 2
    total = np.add.reduceat(weight, at)
    return Profile(
        x[at],
        np.add.reduceat(weight * z, at) / total,
        np.minimum.reduceat(sigma, at),
        np.maximum.reduceat(picks.correlation[order], at),
    )


@dataclass(frozen=True)
class Regional:
    """A straight regional z = z0 + slope (x - x0).

    Parameters
    ----------
    x0, z0 : float
        A point of it; after the cut-offs are known, the footwall cut-off.
    slope : float
        dz/dx, so the dip down towards the hanging wall is atan(-slope).
    covariance : tuple of float
        Variance of z0, covariance of z0 and slope, variance of slope.
    n_picks : int
        Picks it was fitted to; 0 if given.
    how : str
        Where it comes from, in words.
    """

    x0: float
    z0: float
    slope: float
    covariance: tuple = (0.0, 0.0, 0.0)
    n_picks: int = 0
    how: str = "given"

    def __call__(self, x):
        """Give the regional's z at x."""
        return self.z0 + self.slope * (np.asarray(x, dtype=float) - self.x0)

    @property
    def dip(self):
        """Dip in degrees, positive down towards the hanging wall."""
        return float(np.degrees(np.arctan(-self.slope)))

    def sigma_at(self, x):
        """Give one standard deviation of z at x."""
        d = np.asarray(x, dtype=float) - self.x0
        a, b, c = self.covariance
        return np.sqrt(np.maximum(a + 2 * b * d + c * d * d, 0.0))

    def moved_to(self, x0):
        """Give the same line written against another point of it."""
        d = x0 - self.x0
        a, b, c = self.covariance
        return Regional(
            float(x0),
            float(self(x0)),
            self.slope,
            (a + 2 * b * d + c * d * d, b + c * d, c),
            self.n_picks,
            self.how,
        )

    def shifted(self, dz, dslope):
        """Give the line with another level and slope at its point."""
        return Regional(self.x0, self.z0 + dz, self.slope + dslope)


def fit_covariance(normal, residual, free, sigma):
    """Give the covariance of fitted parameters.

    It is widened where the residuals exceed the stated sigma by more than chance
    would (mean square beyond 1 + 2 sqrt(2/free)).
    """
    excess = (residual**2 / sigma**2).sum() / free if free > 0 else 1.0
    chance = 1.0 + 2.0 * np.sqrt(2.0 / max(free, 1))
    return np.linalg.inv(normal) * (excess if excess > chance else 1.0)


def fit_line(x, z, sigma, slope=None, through=None, robust=False):
    """Fit a straight regional to picks by weighted least squares.

    Parameters
    ----------
    x, z, sigma : ndarray (n,)
        Picks; sigma of 0 counts as 1e-3.
    slope : float, optional
        Fixed slope dz/dx; only the level is fitted.
    through : tuple (x, z), optional
        Point it has to go through; only the slope is fitted.
    robust : bool
        Give picks that miss by more than twice their sigma less weight (Huber's
        rule, five rounds), so that one bad pick does not tilt the line.

    Returns
    -------
    Regional

    Raises
    ------
    PicksError
        If there are too few picks for what is to be fitted.
    """
    x, z = np.asarray(x, dtype=float), np.asarray(z, dtype=float)
    sigma = np.maximum(np.asarray(sigma, dtype=float), 1e-3)
    if through is not None and slope is not None:
        return Regional(through[0], through[1], slope)
    needed = 1 if slope is not None or through is not None else 2
    if len(x) < needed or (needed == 2 and np.ptp(x) == 0):
        raise PicksError(
            "regional-picks",
            f"{len(x)} footwall pick(s) cannot carry a regional.",
            remedy="Give the regional level and dip, or more footwall picks.",
        )
    found = _line_parameters(x, z, sigma, slope, through)
    stated, bent = sigma, 0
    for _ in range(5 if robust else 0):
        x0, z0, level, gradient, *_ = found
        miss = np.abs(z - z0 - level - gradient * (x - x0)) / stated
        bent = int((miss > 2.0).sum())
        # Huber: beyond 2 sigma a pick pulls with constant force
        sigma = stated * np.sqrt(np.maximum(miss / 2.0, 1.0))
        found = _line_parameters(x, z, sigma, slope, through)
    x0, z0, level, gradient, design, free = found
    residual = z - z0 - level - gradient * (x - x0)
    cov = fit_covariance(design.T @ design, residual, len(x) - len(free), sigma)
    full = np.zeros((2, 2))
    at = [("level", "slope").index(k) for k in free]
    full[np.ix_(at, at)] = cov
    return Regional(
        x0,
        float(z0 + level),
        float(gradient),
        (full[0, 0], full[0, 1], full[1, 1]),
        len(x),
        f"fitted to {len(x)} picks" + (f", {bent} with less weight" if bent else ""),
    )


def _line_parameters(x, z, sigma, slope, through):
    """Weighted least squares of level and slope, either of which may be fixed.

    Returns
    -------
    x0, z0, level, gradient : float
        z = z0 + level + gradient (x - x0).
    design : ndarray
    free : list of str
        Parameters that were fitted.
    """
    w = 1.0 / sigma
    x0 = float(np.average(x, weights=w**2)) if through is None else through[0]
    z0 = 0.0 if through is None else through[1]
    columns = {"level": np.ones_like(x), "slope": x - x0}
    fixed = z0 + (0.0 if slope is None else slope) * (x - x0)
    free = [k for k in columns if not (k == "slope" and slope is not None)]
    free = [k for k in free if not (k == "level" and through is not None)]
    design = np.column_stack([columns[k] for k in free]) * w[:, None]
    found = dict(zip(free, np.linalg.lstsq(design, (z - fixed) * w, rcond=None)[0]))
    gradient = found.get("slope", 0.0) if slope is None else slope
    return x0, z0, found.get("level", 0.0), gradient, design, free


def line_through(x0, z0, slope, how="given"):
    """Make a regional that is given, not fitted."""
    return Regional(float(x0), float(z0), float(slope), how=how)


def require_depth(picks, where):
    """Refuse picks in time where depths are needed."""
    if picks.domain != "depth":
        raise ConstructionError(
            "time-domain",
            "the picks are two-way times; the construction holds in depth only.",
            where,
            "Convert them to depth with a velocity first.",
        )
