"""Area balance: the detachment from lost areas, beside that of a construction.

Areas are squares of the study's length unit, elevations and displacements are in that
unit, all in section coordinates.
"""

from dataclasses import dataclass
from statistics import NormalDist
from typing import Optional

import numpy as np

from .errors import ConstructionError, Doubt
from .lostarea import (
    AreaConvergence,
    LostArea,
    area_convergence,
    integral,
    lost_area,
    lost_areas,
    require_area,
    why_no_area,
)
from .regression import line_with_errors

__all__ = [
    "AreaConvergence",
    "AreaDepth",
    "DetachmentComparison",
    "LostArea",
    "OneHorizonDetachment",
    "area_convergence",
    "area_depth",
    "compare_detachment",
    "detachment_from_area",
    "lost_area",
    "lost_areas",
    "why_no_area",
]


@dataclass(frozen=True)
class OneHorizonDetachment:
    """Depth of the detachment from the lost area of one horizon.

    Parameters
    ----------
    where, horizon : str
    z, sigma : float
        Elevation of the detachment (mean fault under the last strip), and one
        standard deviation.
    displacement, displacement_sigma : float
        H it was divided by.
    displacement_from : str
        Where H comes from, in words.
    independent : bool
        Whether it tests a construction from the same horizon.
    statement : str
        What it is worth, in words.
    """

    where: str
    horizon: str
    z: float
    sigma: float
    displacement: float
    displacement_sigma: float
    displacement_from: str
    independent: bool
    statement: str


def detachment_from_area(lost, displacement=None, sigma=0.0, source=""):
    """Give the depth of the detachment from one horizon's area, z = R - A/H.

    Parameters
    ----------
    lost : LostArea
    displacement : float, optional
        H on the detachment measured otherwise; that of the horizon's own cut-offs
        if not given.
    sigma : float
        One standard deviation of it.
    source : str
        Where it was measured, in words; required with it.

    Returns
    -------
    OneHorizonDetachment

    Raises
    ------
    ConstructionError
        If the model does not keep area, or a displacement came without its source.
    """
    require_area(lost.why_no_depth, lost.where)
    own = displacement is None
    if not own and (not source or displacement <= 0):
        raise ConstructionError(
            "displacement-source",
            f"a displacement of {displacement:g} from elsewhere has to be above 0 and "
            "to say where it was measured.",
            lost.where,
            "State where it comes from.",
        )
    heave = lost.displacement if own else float(displacement)
    sigma = lost.displacement_sigma if own else float(sigma)
    depth = lost.total / heave
    variance = lost.regional_sigma**2 + (lost.sigma / heave) ** 2
    variance += (depth * sigma / heave) ** 2 - 2.0 * lost.covariance / heave
    return OneHorizonDetachment(
        lost.where,
        lost.horizon,
        lost.regional_z - depth,
        float(np.sqrt(max(variance, 0.0))),
        heave,
        sigma,
        "the horizon's own cut-offs" if own else source,
        not own,
        _one_horizon_words(own, source),
    )


def _one_horizon_words(own, source):
    if own:
        return (
            "No independent test: with H from the horizon's own cut-offs the area is "
            "the construction's own equation summed up. Only several horizons, or a "
            "displacement measured otherwise, test it."
        )
    return (
        f"A test as far as the displacement is independent: it was measured otherwise "
        f"({source})."
    )


@dataclass(frozen=True, eq=False)
class AreaDepth:
    """Lost area against regional elevation: one line for all pre-growth horizons.

    Parameters
    ----------
    where : str
    horizons : tuple of str
        Used, in the order given.
    z, area, sigma_z, sigma_area : ndarray (n,)
        Regional elevation, lost area and their standard deviations.
    line : StraightLine
        A = H (z - z_det): slope H, zero crossing z_det.
    level : float
        Of the confidence intervals.
    displacement : float
        H on the detachment; not the heave, unless shear is vertical.
    displacement_interval : tuple (low, high)
    detachment_z : float
    detachment_interval : tuple (low, high) or None
        None where the areas do not resolve the slope.
    left_out : tuple of (str, str)
        Horizons not used, and why.
    doubts : tuple of Doubt
    text : str
    end_u : float
        First shear line where one of the areas ends.
    """

    where: str
    horizons: tuple
    z: np.ndarray
    area: np.ndarray
    sigma_z: np.ndarray
    sigma_area: np.ndarray
    line: object
    level: float
    displacement: float
    displacement_interval: tuple
    detachment_z: float
    detachment_interval: Optional[tuple]
    left_out: tuple
    doubts: tuple
    text: str
    end_u: float

    @property
    def resolved(self):
        """Whether the detachment has an interval at all."""
        return self.detachment_interval is not None

    def __repr__(self):
        return (
            f"AreaDepth({self.horizons}, displacement={self.displacement:.6g} "
            f"{self.displacement_interval}, detachment_z={self.detachment_z:.6g} "
            f"{self.detachment_interval}, left_out={self.left_out})"
        )


def area_depth(areas, growth=(), level=0.9):
    """Regress lost area on regional elevation over several pre-growth horizons.

    Parameters
    ----------
    areas : sequence of LostArea
        Of one section; best up to one shear line (`lost_areas`).
    growth : sequence of str
        Horizons laid down while the fault moved. They are left out, because each
        lies on a line of its own, with its own displacement.
    level : float
        Of the confidence intervals.

    Returns
    -------
    AreaDepth

    Raises
    ------
    ConstructionError
        If fewer than two pre-growth horizons are left, the model does not keep area,
        or larger areas go with higher regionals nowhere (slope not positive).

    Notes
    -----
    Both area and regional have errors, tied to each other by the regional; the line
    is that of York et al. 2004. Errors of different horizons are taken as
    independent. The interval of the detachment follows Fieller.

    References
    ----------
    Groshong 1994, 2006 (eq. 8 of methods.md). Needs a level detachment, level
    regionals and plane strain; without them, and up to one shear line, the zero
    crossing is the mean of the fault under the last strip (eq. 8a).
    """
    where = areas[0].where if areas else ""
    for lost in areas:
        require_area(lost.why_no_depth, lost.where)
    used = [a for a in areas if a.horizon not in growth]
    why = "a growth horizon lies on a line of its own, with its own displacement"
    left_out = tuple((a.horizon, why) for a in areas if a.horizon in growth)
    if len(used) < 2:
        raise ConstructionError(
            "one-horizon",
            f"{len(used)} pre-growth horizon(s) give no line of area against depth; "
            "the area of one is no independent test.",
            where,
            "Bring in further horizons that are older than the fault.",
        )
    z, area, sigma_z, sigma_area, covariance = np.array(
        [(a.regional_z, a.total, a.regional_sigma, a.sigma, a.covariance) for a in used]
    ).T
    product = np.maximum(sigma_z * sigma_area, 1e-300)
    line = line_with_errors(z, area, sigma_z, sigma_area, covariance / product)
    if line.slope <= 0:
        raise ConstructionError(
            "area-against-depth",
            "the lost areas do not grow upwards: their horizons share no detachment.",
            where,
            "Check regionals and cut-offs, and leave growth horizons out.",
        )
    interval = line.zero_interval(level)
    doubts = tuple(_area_doubts(used, line, where))
    return AreaDepth(
        where,
        tuple(a.horizon for a in used),
        z,
        area,
        sigma_z,
        sigma_area,
        line,
        level,
        line.slope,
        line.slope_interval(level),
        float(line.zero),
        interval,
        left_out,
        doubts,
        _area_depth_words(line, interval, level, len(used)),
        min(a.end_u for a in used),
    )


def _area_doubts(used, line, where):
    """Say what speaks against one line through these horizons."""
    heave = np.array([a.displacement for a in used])
    sigma = np.array([a.displacement_sigma for a in used])
    order = np.argsort(heave)
    middle = order[len(order) // 2]
    apart = np.abs(heave - heave[middle])
    odd = apart > 3.0 * np.hypot(sigma, sigma[middle]) + 0.01 * heave[middle]
    if odd.any():
        names = ", ".join(a.horizon for a, o in zip(used, odd) if o)
        text = (
            f"the displacement of {names} differs from that of the others: a growth "
            "horizon lies on a line of its own."
        )
        yield Doubt("unequal-displacement", text, where)
    ends = np.array([a.end_u for a in used])
    if np.ptp(ends) > 0.05 * heave.max():
        text = "the areas do not end at one shear line; measure them to a common one."
        yield Doubt("unequal-ends", text, where)
    if line.widened:
        text = (
            "the areas scatter about the line by more than their errors: the intervals "
            "were widened to that."
        )
        yield Doubt("area-scatter", text, where)


def _area_depth_words(line, interval, level, n):
    head = f"{n} pre-growth horizons: H = {line.slope:.0f}, detachment at "
    head += f"{line.zero:.0f}"
    if interval is None:
        return (
            head + "; not resolved, since within their errors the areas need not grow "
            "with the height of the regional at all."
        )
    low, high = interval
    text = head + f" ({100 * level:.0f} % between {low:.0f} and {high:.0f})."
    if n == 2:
        text += " Two horizons make a line whatever they are: no test of it."
    return text


@dataclass(frozen=True, eq=False)
class DetachmentComparison:
    """The detachment from several horizons beside that of the construction.

    Parameters
    ----------
    where : str
    area_z, area_interval : float, tuple or None
        From `area_depth`.
    construction_z, construction_sigma : float
        Mean of the predicted fault over the last strip of the areas, and its stated
        sigma in the middle of it.
    difference : float
        `area_z` less `construction_z`; negative where the areas go deeper.
    displacement, construction_displacement : float
        H from the line, and from the cut-offs of the construction.
    agree : bool or None
        Whether the construction lies within the interval, its own at the same level
        allowed for; None where the areas do not resolve it.
    text : str
    """

    where: str
    area_z: float
    area_interval: Optional[tuple]
    construction_z: float
    construction_sigma: float
    difference: float
    displacement: float
    construction_displacement: float
    agree: Optional[bool]
    text: str


def compare_detachment(balance, prediction):
    """Compare the detachment of the areas with that of a construction.

    Parameters
    ----------
    balance : AreaDepth
    prediction : Prediction

    Returns
    -------
    DetachmentComparison

    Raises
    ------
    ConstructionError
        If the model does not keep area, or the predicted fault ends before the areas.
    """
    require_area(why_no_area(prediction.model, prediction.compaction), balance.where)
    trace, heave = prediction.trace, prediction.oblique_heave
    tan = np.tan(np.radians(prediction.model.shear_angle))
    u = trace.x - trace.z * tan
    end = balance.end_u
    if u[-1] < end - 0.1 * heave:
        raise ConstructionError(
            "fault-too-short",
            "the predicted fault ends before the shear line of the areas.",
            balance.where,
            "Measure the areas up to an earlier one.",
        )
    at = np.linspace(end - heave, min(end, u[-1]), 101)
    z = integral(np.interp(at, u, trace.z), at) / float(np.ptp(at))
    sigma = float(np.interp(end - 0.5 * heave, u, trace.sigma_z))
    difference = balance.detachment_z - z
    agree = None
    if balance.resolved:
        low, high = balance.detachment_interval
        quantile = NormalDist().inv_cdf(0.5 + 0.5 * balance.level)
        room = quantile * sigma if np.isfinite(sigma) else 0.0
        agree = bool(low - room <= z <= high + room)
    return DetachmentComparison(
        balance.where,
        balance.detachment_z,
        balance.detachment_interval,
        z,
        sigma,
        difference,
        balance.displacement,
        heave,
        agree,
        _comparison_words(balance, prediction, z, difference, agree),
    )


def _comparison_words(balance, prediction, z, difference, agree):
    deeper = "deeper" if difference < 0 else "shallower"
    text = (
        f"Under the last strip the construction has the fault at {z:.0f}, the areas of "
        f"{len(balance.horizons)} horizons have it {abs(difference):.0f} {deeper}; "
        f"displacement {prediction.oblique_heave:.0f} against "
        f"{balance.displacement:.0f}."
    )
    verdict = {
        True: " They agree within the intervals.",
        False: " They do not agree.",
        None: " The areas do not resolve it.",
    }[agree]
    if len(balance.horizons) == 2:
        verdict += " Two horizons are a weak test."
    return text + verdict
