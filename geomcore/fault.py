"""The fault as far as it is observed, carried on straight beyond."""

from dataclasses import dataclass, field
from typing import Optional

import numpy as np

from .errors import Doubt, PicksError
from .profile import pool_to_increasing

__all__ = ["ASSUMED_GAP", "KnownFault", "known_fault"]

#: Known points farther apart than this share of the heave leave the fault between
#: them assumed: straight, too high by up to a quarter of what a chord from cut-off to
#: cut-off would be (methods.md section 1).
ASSUMED_GAP = 0.5
#: A gap this many times the usual spacing parts the known piece from deep ties
#: (common practice, no source).
TIE_GAP = 5.0


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
    tie_x, tie_z, tie_sigma : ndarray (k,)
        Deep ties: points on the fault far beyond the known piece. The march does
        not use them; the fit does.
    observed : int, optional
        Points observed, if assumed ones follow them; all by default.
    """

    x: np.ndarray
    z: np.ndarray
    sigma: float
    slope_above: float
    slope_below: float
    below_from: str
    tie_x: np.ndarray = field(default_factory=lambda: np.empty(0))
    tie_z: np.ndarray = field(default_factory=lambda: np.empty(0))
    tie_sigma: np.ndarray = field(default_factory=lambda: np.empty(0))
    observed: Optional[int] = None

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
        slopes = np.r_[
            self.slope_above, np.diff(self.z) / np.diff(self.x), self.slope_below
        ]
        return slopes[np.searchsorted(self.x, np.asarray(x, dtype=float))]

    def is_known(self, x, longest=np.inf):
        """Tell where x lies between observed points at most `longest` apart."""
        x, own = np.asarray(x, dtype=float), self.x[: self.observed]
        if len(own) < 2:
            return np.zeros(x.shape, dtype=bool)
        inside = (x >= own[0] - 1e-6) & (x <= own[-1] + 1e-6)
        after = np.clip(np.searchsorted(own, x), 1, len(own) - 1)
        return inside & (own[after] - own[after - 1] <= longest)

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
        Picks of the section; the used ones of kind ``fault`` count, but for those of
        subsidiary faults (wall ``hanging wall``).
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
    fault = picks.of("fault", wall="")
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
    error = np.r_[fault.sigma_z, [c.sigma_z for c in cutoffs]][order]
    doubts = _wrong_way(x, z, dip, where)
    n = _known_piece(x)
    ties = {"tie_x": x[n:], "tie_z": z[n:], "tie_sigma": error[n:]}
    x, z, dip = x[:n], z[:n], dip[:n]
    px, minus_z, _ = pool_to_increasing(x, -z, least=1e-6)
    minus_z, px, _ = pool_to_increasing(minus_z, px, least=1e-6)
    if len(px) < len(np.unique(x)):
        doubts.append(
            Doubt(
                "fault-picks-uneven",
                "fault picks that do not deepen steadily were averaged.",
                where,
            )
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
    return KnownFault(px, pz, sigma, above, below, how, **ties), doubts


def _known_piece(x):
    """Count the fault picks that make one piece; those far beyond are deep ties.

    The piece ends where the next pick stands off by more than `TIE_GAP` times the
    median spacing before it.
    """
    gaps = np.diff(x)
    for i in range(2, len(gaps)):
        usual = np.median(gaps[:i][gaps[:i] > 0]) if (gaps[:i] > 0).any() else np.inf
        if gaps[i] > TIE_GAP * usual:
            return i + 1
    return len(x)


def _wrong_way(x, z, dip, where):
    """Refuse a fault that goes the wrong way; doubt dips that do."""
    remedy = "Check the hanging-wall side, the sign of the picks and their datum."
    if len(x) > 1 and np.ptp(x) > 0 and np.polyfit(x, z, 1)[0] > 0:
        raise PicksError(
            "wrong-side",
            "the fault picks rise towards the declared hanging-wall side.",
            where,
            remedy,
        )
    if not np.any(dip < 0):
        return []
    text = (
        f"the dip given for the fault ({np.nanmin(dip):.0f} degrees along transport) "
        "dips away from the declared hanging-wall side"
    )
    if len(x) == 1:
        raise PicksError("wrong-side", f"{text}.", where, remedy)
    return [Doubt("fault-dip-away", f"{text}; it is not used.", where)]


def _slope_from(x, z, dip, prefer_dip):
    """Slope of a straight continuation and what it comes from."""
    from_dip = -np.tan(np.radians(dip)) if np.isfinite(dip) and 0 < dip < 90 else None
    from_picks = (z[1] - z[0]) / (x[1] - x[0]) if len(x) > 1 else None
    if from_dip is not None and (prefer_dip or from_picks is None):
        return float(from_dip), f"the dip of {dip:.0f} degrees given there"
    if from_picks is not None:
        return float(from_picks), "the line through the last two known points"
    return None, ""
