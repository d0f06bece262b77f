"""Single-valued curves of a section: horizons, the known fault, regional, cut-offs."""

from dataclasses import dataclass

import numpy as np

from .errors import ConstructionError, Doubt, PicksError

__all__ = [
    "CutOff",
    "KnownFault",
    "Profile",
    "Regional",
    "Separation",
    "fit_line",
    "known_fault",
    "level_separation",
    "line_through",
    "pool_to_increasing",
    "profile_from_picks",
]

#: Picks nearest the fault that extend a horizon to it (common practice, no source).
CUTOFF_PICKS = 8


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
        One standard deviation of z, errors of different points independent.
    """

    x: np.ndarray
    z: np.ndarray
    sigma: np.ndarray

    def __post_init__(self):
        for name in ("x", "z", "sigma"):
            value = np.array(getattr(self, name), dtype=float)
            value.flags.writeable = False
            object.__setattr__(self, name, value)

    def __call__(self, x):
        """Give z at x, NaN beyond the ends."""
        return np.interp(x, self.x, self.z, left=np.nan, right=np.nan)

    def __len__(self):
        return len(self.x)


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
        x[at], np.add.reduceat(weight * z, at) / total, np.minimum.reduceat(sigma, at)
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


def _covariance(normal, residual, free, sigma):
    """Parameter covariance, widened where the residuals exceed the stated sigma."""
    excess = (residual**2 / sigma**2).sum() / free if free > 0 else 1.0
    return np.linalg.inv(normal) * max(1.0, excess)


def fit_line(x, z, sigma, slope=None, through=None):
    """Fit a straight regional to picks by weighted least squares.

    Parameters
    ----------
    x, z, sigma : ndarray (n,)
        Picks; sigma of 0 counts as 1e-3.
    slope : float, optional
        Fixed slope dz/dx; only the level is fitted.
    through : tuple (x, z), optional
        Point it has to go through; only the slope is fitted.

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
    w = 1.0 / sigma
    x0 = float(np.average(x, weights=w**2)) if through is None else through[0]
    z0 = 0.0 if through is None else through[1]
    columns = {"level": np.ones_like(x), "slope": x - x0}
    fixed = z0 + (0.0 if slope is None else slope) * (x - x0)
    free = [k for k in columns if not (k == "slope" and slope is not None)]
    free = [k for k in free if not (k == "level" and through is not None)]
    design = np.column_stack([columns[k] for k in free]) * w[:, None]
    found = dict(zip(free, np.linalg.lstsq(design, (z - fixed) * w, rcond=None)[0]))
    level, gradient = found.get("level", 0.0), found.get("slope", 0.0)
    residual = z - fixed - level - gradient * (x - x0)
    cov = _covariance(design.T @ design, residual, len(x) - len(free), sigma)
    full = np.zeros((2, 2))
    at = [("level", "slope").index(k) for k in free]
    full[np.ix_(at, at)] = cov
    return Regional(
        x0,
        float(z0 + level),
        float(gradient if slope is None else slope),
        (full[0, 0], full[0, 1], full[1, 1]),
        len(x),
        f"fitted to {len(x)} picks",
    )


def line_through(x0, z0, slope, how="given"):
    """Make a regional that is given, not fitted."""
    return Regional(float(x0), float(z0), float(slope), how=how)


@dataclass(frozen=True, eq=False)
class KnownFault:
    """The fault as far as it is observed, and how it is carried on from there.

    Parameters
    ----------
    x, z : ndarray (n,)
        Observed points, x growing, z falling; straight between them.
    sigma : float
        One standard deviation of z of the observed points.
    slope_above, slope_below : float
        dz/dx (negative) with which it is carried on above and below them.
    below_from : str
        What `slope_below` comes from, in words.
    """

    x: np.ndarray
    z: np.ndarray
    sigma: float
    slope_above: float
    slope_below: float
    below_from: str

    def z_at(self, x):
        """Give the fault elevation at x, carried on straight beyond the points."""
        x = np.asarray(x, dtype=float)
        z = np.interp(x, self.x, self.z)
        z = np.where(x < self.x[0], self.z[0] + self.slope_above * (x - self.x[0]), z)
        return np.where(
            x > self.x[-1], self.z[-1] + self.slope_below * (x - self.x[-1]), z
        )

    def x_at(self, z):
        """Give the fault's x at elevation z, carried on straight."""
        z = np.asarray(z, dtype=float)
        x = np.interp(-z, -self.z, self.x)
        x = np.where(z > self.z[0], self.x[0] + (z - self.z[0]) / self.slope_above, x)
        return np.where(
            z < self.z[-1], self.x[-1] + (z - self.z[-1]) / self.slope_below, x
        )

    def slope_at(self, x):
        """Give dz/dx of the fault at x."""
        slopes = np.r_[self.slope_above, np.diff(self.z) / np.diff(self.x), self.slope_below]
        return slopes[np.searchsorted(self.x, np.asarray(x, dtype=float))]

    def is_known(self, x):
        """Tell where x lies on the observed piece (more than a single point)."""
        x = np.asarray(x, dtype=float)
        if len(self.x) < 2:
            return np.zeros(x.shape, dtype=bool)
        return (x >= self.x[0] - 1e-6) & (x <= self.x[-1] + 1e-6)

    def crossing(self, curve, x_low, x_high):
        """Give x where the fault meets a curve z(x) between two x, or None.

        Parameters
        ----------
        curve : callable
            Curve z(x).
        x_low, x_high : float
            Where to look; the first crossing from the footwall side is taken.
        """
        nodes = self.x[(self.x > x_low) & (self.x < x_high)]
        x = np.union1d(np.linspace(x_low, x_high, 401), nodes)
        for _ in range(2):
            gap = self.z_at(x) - curve(x)
            hit = np.flatnonzero((gap[:-1] >= 0) & (gap[1:] < 0))
            if not len(hit):
                return None
            i = int(hit[0])
            x = np.linspace(x[i], x[i + 1], 401)
        gap = self.z_at(x) - curve(x)
        i = int(np.flatnonzero((gap[:-1] >= 0) & (gap[1:] < 0))[0])
        return float(x[i] + (x[i + 1] - x[i]) * gap[i] / (gap[i] - gap[i + 1]))


def known_fault(picks, cutoffs=()):
    """Make the known fault of a section from its fault picks and given cut-offs.

    Parameters
    ----------
    picks : Picks
        Picks of the section; the used ones of kind ``fault`` count.
    cutoffs : sequence of CutOff
        Given cut-offs, which lie on the fault too.

    Returns
    -------
    fault : KnownFault
    doubts : list of Doubt

    Raises
    ------
    PicksError
        If the section does not meet the fault, or neither a second point nor a
        dip tells which way it goes.
    """
    fault = picks.of("fault")
    where = f"section {picks.section_id}"
    x = np.r_[fault.x, [c.x for c in cutoffs]]
    z = np.r_[fault.z, [c.z for c in cutoffs]]
    dip = np.r_[fault.dip, np.full(len(cutoffs), np.nan)]
    if not len(x):
        raise PicksError(
            "no-fault",
            "the section does not meet the fault trace, a fault pick or a cut-off.",
            where,
            "Extend the section, or declare the fault trace.",
        )
    order = np.lexsort((-z, x))
    x, z, dip = x[order], z[order], dip[order]
    doubts = _wrong_way(x, z, where)
    px, minus_z, count = pool_to_increasing(x, -z, least=1e-6)
    minus_z, px, more = pool_to_increasing(minus_z, px, least=1e-6)
    if len(px) < len(np.unique(x)):
        doubts.append(
            Doubt("fault-picks-uneven", "fault picks that do not deepen steadily were averaged.", where)
        )
    pz = -minus_z
    above, _ = _slope_from(px[:2], pz[:2], dip[0], prefer_dip=True)
    below, how = _slope_from(px[-2:], pz[-2:], dip[-1], prefer_dip=False)
    if above is None or below is None:
        raise PicksError(
            "no-dip",
            "only one point of the fault is known here and no dip is given.",
            where,
            "Give the dip of the fault trace, fault picks at depth, or cut-offs.",
        )
    sigma = float(np.median(fault.sigma_z)) if len(fault) else 0.0
    return KnownFault(px, pz, sigma, above, below, how), doubts


def _wrong_way(x, z, where):
    """Doubt a fault that rises towards the hanging wall as a whole."""
    if len(x) > 1 and np.ptp(x) > 0 and np.polyfit(x, z, 1)[0] > 0:
        raise PicksError(
            "wrong-side",
            "the fault picks rise towards the declared hanging-wall side.",
            where,
            "Check the hanging-wall side, the sign of the picks and their datum.",
        )
    return []


def _slope_from(x, z, dip, prefer_dip):
    """Slope of a straight continuation and what it comes from."""
    from_dip = -np.tan(np.radians(dip)) if np.isfinite(dip) and 0 < dip < 90 else None
    from_picks = (z[1] - z[0]) / (x[1] - x[0]) if len(x) > 1 else None
    if from_dip is not None and (prefer_dip or from_picks is None):
        return float(from_dip), f"the dip of {dip:.0f} degrees given there"
    if from_picks is not None:
        return float(from_picks), "the line through the last two known points"
    return None, ""


@dataclass(frozen=True)
class CutOff:
    """Where a horizon meets the fault.

    Parameters
    ----------
    wall : str
        ``footwall`` or ``hanging wall``.
    x, z : float
        Its place in the section.
    sigma_x, sigma_z : float
        One standard deviation; the two are tied by the fault's slope.
    how : str
        ``given`` or how the horizon was extended to the fault.
    """

    wall: str
    x: float
    z: float
    sigma_x: float = 0.0
    sigma_z: float = 0.0
    how: str = "given"


@dataclass(frozen=True)
class Separation:
    """Cut-offs of a horizon, and heave and throw from them.

    Parameters
    ----------
    horizon : str
    footwall, hanging_wall : CutOff
    domain : str
        In ``time`` the throw is in ms and there is no displacement.
    """

    horizon: str
    footwall: CutOff
    hanging_wall: CutOff
    domain: str = "depth"

    @property
    def heave(self):
        """Horizontal separation along transport; negative for reverse separation."""
        return self.hanging_wall.x - self.footwall.x

    @property
    def throw(self):
        """Vertical separation, down to the hanging wall."""
        return self.footwall.z - self.hanging_wall.z

    @property
    def displacement(self):
        """Straight distance between the cut-offs; not defined in time."""
        if self.domain == "time":
            return float("nan")
        return float(np.hypot(self.heave, self.throw))

    @property
    def cutoff_dip(self):
        """Dip of the line through the cut-offs, degrees; not defined in time."""
        if self.domain == "time":
            return float("nan")
        return float(np.degrees(np.arctan2(self.throw, self.heave)))


def extend_to_fault(picks, fault, wall, where):
    """Extend a horizon from one wall to the fault.

    Parameters
    ----------
    picks : Profile
        Horizon in that wall.
    fault : KnownFault
    wall : str
    where : str
        Section, for messages.

    Returns
    -------
    cutoff : CutOff
    reach : float
        Distance over which the horizon had to be extended.

    Notes
    -----
    The nearest `CUTOFF_PICKS` picks are extended by a straight line, or by a
    parabola where its curvature is significant (beyond 3 standard errors) and the
    extension is shorter than the picks used. The error of the extension slides the
    cut-off along the fault: sigma_x = s/|F' - B'|, sigma_z = s |F'|/|F' - B'|.

    Raises
    ------
    PicksError
        If there is no pick, or the horizon does not meet the fault.
    """
    if len(picks) < 2:
        raise PicksError(
            "no-cutoff",
            f"{len(picks)} {wall} pick(s) of the horizon cannot be extended to the fault.",
            where,
            "Give more picks or the cut-off itself.",
        )
    near = slice(None, CUTOFF_PICKS) if wall == "hanging wall" else slice(-CUTOFF_PICKS, None)
    x, z = picks.x[near], picks.z[near]
    sigma = np.maximum(picks.sigma[near], 1e-3)
    end = x[0] if wall == "hanging wall" else x[-1]
    curve, variance = _local_fit(x, z, sigma, end, fault)
    span = max(np.ptp(picks.x), abs(float(fault.x_at(z.mean())) - end)) + 1.0
    low, high = (end - 2 * span, end + span) if wall == "hanging wall" else (end - span, end + 2 * span)
    at = fault.crossing(curve, low, high)
    if at is None:
        raise PicksError(
            "no-cutoff",
            f"the {wall} horizon, extended from x = {end:.0f}, does not meet the fault.",
            where,
            "Check the fault picks and the walls of the picks, or give the cut-off.",
        )
    step = 1e-3 * span
    bed = float(curve(at + step) - curve(at - step)) / (2 * step)
    slope = float(fault.slope_at(at))
    s = np.sqrt(float(variance(at)) + fault.sigma**2)
    across = max(abs(slope - bed), 1e-9)
    reach = end - at if wall == "hanging wall" else at - end
    cut = CutOff(
        wall,
        at,
        float(fault.z_at(at)),
        s / across,
        s * abs(slope) / across,
        f"extended over {max(reach, 0.0):.0f}",
    )
    return cut, float(reach)


def _local_fit(x, z, sigma, end, fault):
    """Line or parabola through the picks nearest the fault, and its variance."""
    d = x - end
    scale = max(np.ptp(d), 1e-9)
    best = None
    for degree in (1, 2):
        if len(x) < degree + 3 and degree == 2:
            break
        design = np.vander(d / scale, degree + 1, increasing=True)
        weighted = design / sigma[:, None]
        coefficient = np.linalg.lstsq(weighted, z / sigma, rcond=None)[0]
        residual = z - design @ coefficient
        cov = _covariance(weighted.T @ weighted, residual, len(x) - degree - 1, sigma)
        if degree == 2:
            gap = abs(float(fault.x_at(z.mean())) - end)
            if abs(coefficient[2]) < 3 * np.sqrt(cov[2, 2]) or gap > scale:
                break
        best = coefficient, cov, degree
    coefficient, cov, degree = best

    def curve(at):
        return np.vander((np.atleast_1d(at) - end) / scale, degree + 1, increasing=True) @ coefficient

    def variance(at):
        row = np.vander((np.atleast_1d(at) - end) / scale, degree + 1, increasing=True)
        return np.einsum("ij,jk,ik->i", row, cov, row)[0]

    return (lambda at: curve(at) if np.ndim(at) else float(curve(at)[0])), variance


def level_separation(footwall, hanging_wall, x_footwall, x_hanging_wall, inner, outer):
    """Measure the vertical separation of a horizon at the middle of the fault gap.

    Parameters
    ----------
    footwall, hanging_wall : Profile
        The horizon in either wall.
    x_footwall, x_hanging_wall : float
        Cut-off positions, either order (an overlap has them crossed).
    inner, outer : float
        Straight lines are fitted between these distances outside the cut-offs.

    Returns
    -------
    float
        Footwall line minus hanging-wall line at mid gap; in the unit of z.

    Raises
    ------
    PicksError
        If either side has fewer than two picks there.
    """
    middle = 0.5 * (x_footwall + x_hanging_wall)
    level = []
    for profile, at, side in ((footwall, x_footwall, -1), (hanging_wall, x_hanging_wall, 1)):
        d = side * (profile.x - at)
        near = (d >= inner) & (d <= outer)
        if near.sum() < 2:
            raise PicksError(
                "no-separation",
                f"{int(near.sum())} pick(s) between {inner:g} and {outer:g} outside the cut-off.",
                remedy="Give picks there or other distances.",
            )
        level.append(float(np.polyval(np.polyfit(profile.x[near] - middle, profile.z[near], 1), 0.0)))
    return level[0] - level[1]


def require_depth(picks, where):
    """Refuse picks in time where depths are needed."""
    if picks.domain != "depth":
        raise ConstructionError(
            "time-domain",
            "the picks are two-way times; the construction holds in depth only.",
            where,
            "Convert them to depth with a velocity first.",
        )
