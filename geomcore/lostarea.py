"""The area a horizon has lost below its regional, and how it grows along the section.

Areas are squares of the study's length unit, elevations and displacements are in that
unit, all in section coordinates. An area ends at a shear line, since columns move with
their shear lines: A(U) up to the line u = U.
"""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .errors import ConstructionError
from .problem import bed_in_frame, start_piece
from .profile import Profile

__all__ = [
    "AreaConvergence",
    "LostArea",
    "area_convergence",
    "integral",
    "lost_area",
    "lost_areas",
    "require_area",
    "why_no_area",
]

#: Change of A/H over the last strip, as a share of it, below which the area is taken
#: to have levelled off (common practice, no source).
LEVELLED = 0.02


def why_no_area(model, compaction=None):
    """Say why the area below the regional tells no depth; '' where it does.

    Parameters
    ----------
    model : object
        Kinematic model.
    compaction : Compaction or None
    """
    if not model.KEEPS_AREA:
        return (
            f"{model.label} does not keep area (Wheeler 1987), so that neither a depth "
            "nor a restored section may be taken from the area."
        )
    if compaction is not None:
        return (
            "with compaction the columns lose pore space, so that the area below the "
            "regional is not that of the displacement alone."
        )
    return ""


def require_area(why, where=""):
    """Refuse what follows from the area only, with the reason, unless it is ''."""
    if why:
        remedy = "Use constant heave without compaction for the balance."
        raise ConstructionError("area-not-kept", why, where, remedy)


@dataclass(frozen=True, eq=False)
class LostArea:
    """The area a horizon has lost below its regional, up to a shear line.

    Parameters
    ----------
    where, horizon : str
    gap : float
        Between regional and fault from cut-off to cut-off.
    below, above : float
        Between regional and bed beyond, where the bed lies below the regional, and
        (negative) above it.
    footwall : float
        Between regional and bed in the footwall; negative where it was lifted.
    sigma : float
        One standard deviation of the whole, from picks, regional and known fault.
    end_u, end_x : float
        Shear line where it ends, and where that line meets the bed.
    displacement, displacement_sigma : float
        H of the horizon from its own cut-offs.
    regional_z, regional_sigma : float
        Mean of the regional over the last strip; its elevation, if it is level.
    covariance : float
        Of the area and `regional_z`, which share the error of the regional.
    why_no_depth : str
        Why it tells no depth of the detachment; '' where it does.
    """

    where: str
    horizon: str
    gap: float
    below: float
    above: float
    footwall: float
    sigma: float
    end_u: float
    end_x: float
    displacement: float
    displacement_sigma: float
    regional_z: float
    regional_sigma: float
    covariance: float
    why_no_depth: str = ""

    @property
    def total(self):
        """The whole area: gap, bed below and above the regional, and footwall."""
        return self.gap + self.below + self.above + self.footwall


def integral(height, u):
    """Integrate straight pieces between points."""
    return float((0.5 * (height[1:] + height[:-1]) * np.diff(u)).sum())


def _signed_areas(u, height):
    """Area where a height is positive and where it is negative, straight between."""
    a, b = height[:-1], height[1:]
    width = np.diff(u)
    whole = 0.5 * (a + b) * width
    crosses = a * b < 0
    share = np.abs(np.where(crosses, a, 0.0)) / np.maximum(
        np.abs(a) + np.abs(b), 1e-300
    )
    first = 0.5 * a * width * share
    second = 0.5 * b * width * (1.0 - share)
    parts = np.where(crosses, [first, second], [whole, np.zeros_like(whole)])
    return float(parts[parts > 0].sum()), float(parts[parts < 0].sum())


def _gap_nodes(problem):
    """Shear lines of the cut-offs and of the fault's own points between them."""
    fault, tan = problem.fault, problem.tan
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    x = fault.x[(fault.x > foot.x) & (fault.x < hang.x)]
    x = np.r_[foot.x, x, hang.x]
    z = np.r_[foot.z, fault.z_at(x[1:-1]), hang.z]
    return x - z * tan


def _bed_to(problem, end_u):
    """Bed in the shear frame from its cut-off to a shear line, and their weights.

    Returns
    -------
    u, z : ndarray (n,)
    weight : ndarray (m,)
        Integral of the bed over u is weight @ its points.
    bed : Profile
    """
    bed = bed_in_frame(problem)
    end_u = bed.x[-1] if end_u is None else float(end_u)
    if not bed.x[0] < end_u <= bed.x[-1] + 1e-6 * problem.oblique_heave:
        raise ConstructionError(
            "area-end",
            f"the area is asked for up to u = {end_u:.0f}; the bed is known from "
            f"{bed.x[0]:.0f} to {bed.x[-1]:.0f}.",
            problem.where,
        )
    inside = bed.x < end_u
    u = np.r_[bed.x[inside], end_u]
    width = np.diff(u)
    of_nodes = 0.5 * (np.r_[0.0, width] + np.r_[width, 0.0])
    weight = np.zeros(len(bed))
    weight[: len(u) - 1] = of_nodes[:-1]
    # the last node lies between two picks
    i = min(len(u) - 1, len(bed) - 1)
    f = (end_u - bed.x[i - 1]) / (bed.x[i] - bed.x[i - 1])
    weight[i - 1] += of_nodes[-1] * (1.0 - f)
    weight[i] += of_nodes[-1] * f
    return u, np.interp(u, bed.x, bed.z), weight, bed


def lost_area(problem, end_u=None, footwall=None):
    """Measure the area a horizon has lost below its regional.

    Parameters
    ----------
    problem : Problem
        The horizon with its cut-offs, regional and model.
    end_u : float, optional
        Shear line up to which it counts; that of the last pick if not given.
    footwall : Profile, optional
        The horizon in the footwall, where it was lifted or dragged.

    Returns
    -------
    LostArea

    Raises
    ------
    ConstructionError
        If the bed does not reach the shear line.

    References
    ----------
    Groshong 1994, 2006 (methods.md section 7): the gap above the fault is part of it.
    """
    gap_u = _gap_nodes(problem)
    height = problem.regional_at(gap_u) - start_piece(problem, gap_u)
    gap = integral(height, gap_u)
    u, z, weight, bed = _bed_to(problem, end_u)
    below, above = _signed_areas(u, problem.regional_at(u) - z)
    of_footwall, footwall_variance, footwall_effect = _footwall_area(problem, footwall)
    effect = _regional_effect(problem, gap_u[0], u[-1]) + footwall_effect
    a, b, c = problem.regional.covariance
    regional = np.array([[a, b], [b, c]])
    level = _last_strip(problem, u[-1])
    variance = _pick_variance(bed, weight) + effect @ regional @ effect
    variance += (problem.fault.sigma * np.ptp(gap_u)) ** 2 + footwall_variance
    middle = u[-1] - 0.5 * problem.oblique_heave
    return LostArea(
        problem.where,
        problem.separation.horizon,
        gap,
        below,
        above,
        of_footwall,
        float(np.sqrt(variance)),
        float(u[-1]),
        float(u[-1] + z[-1] * problem.tan),
        problem.oblique_heave,
        _displacement_sigma(problem),
        float(problem.regional_at(middle)),
        float(np.sqrt(level @ regional @ level)),
        float(level @ regional @ effect),
        why_no_area(problem.model, problem.options.compaction),
    )


def _pick_variance(bed, weight):
    """Variance of weight @ bed; the full covariance only where errors go together."""
    if not bed.correlation.any():
        return float(((weight * bed.sigma) ** 2).sum())
    return float(weight @ bed.covariance() @ weight)


def _footwall_area(problem, footwall):
    """Area of the footwall bed, its variance by the picks, its change with R."""
    foot = problem.separation.footwall
    own = np.zeros(0, bool) if footwall is None else footwall.x < foot.x
    if not own.any():
        return 0.0, 0.0, np.zeros(2)
    x, z = np.r_[footwall.x[own], foot.x], np.r_[footwall.z[own], foot.z]
    sigma, length = footwall.sigma[own], footwall.correlation[own]
    bed = Profile(x, z, np.r_[sigma, 0.0], np.r_[length, 0.0])
    width = np.diff(x)
    weight = 0.5 * (np.r_[0.0, width] + np.r_[width, 0.0])
    area = float(weight @ (problem.regional(x) - z))
    effect = np.array([weight.sum(), weight @ (x - foot.x)])
    return area, _pick_variance(bed, weight), effect


def _regional_effect(problem, start_u, end_u):
    """Change of the area with level and slope of the regional; cut-offs slide along.

    Regional and fault meet at the start, so that moving it there changes nothing.
    """
    lean = 1.0 - problem.regional.slope * problem.tan
    length = end_u - start_u
    # R~ = z0 + slope (u - u0)/lean about the footwall cut-off
    return np.array([length / lean, 0.5 * length**2 / lean**2])


def _last_strip(problem, end_u):
    """Change of the mean regional over the last strip with level and slope."""
    foot = problem.separation.footwall
    lean = 1.0 - problem.regional.slope * problem.tan
    arm = end_u - 0.5 * problem.oblique_heave - (foot.x - foot.z * problem.tan)
    return np.array([1.0 / lean, arm / lean**2])


def _displacement_sigma(problem):
    """Error of H from the errors of the cut-offs."""
    separation, model = problem.separation, problem.model
    variance = 0.0
    for name in ("footwall", "hanging_wall"):
        cut = getattr(separation, name)
        change = {}
        for axis, step in (("x", cut.sigma_x), ("z", cut.sigma_z)):
            moved = replace(cut, **{axis: getattr(cut, axis) + step})
            other = replace(separation, **{name: moved})
            change[axis] = model.displacement(other.heave, other.throw)
            change[axis] -= problem.oblique_heave
        if cut.slides:
            # along the fault x grows where z falls: the two come from one error
            variance += (change["x"] - change["z"]) ** 2
        else:
            variance += change["x"] ** 2 + change["z"] ** 2
    return float(np.sqrt(variance))


def lost_areas(problems, footwalls=()):
    """Measure the areas of several horizons up to one common shear line.

    Parameters
    ----------
    problems : sequence of Problem
        Of one section, with one model.
    footwalls : sequence of Profile or None
        The horizons in the footwall; none if left out.

    Returns
    -------
    list of LostArea
        Up to the last shear line that all their picks reach: so that their areas
        end over one piece of the fault, whether or not it is level there.
    """
    end = min(float(bed_in_frame(p).x[-1]) for p in problems)
    footwalls = footwalls or (None,) * len(problems)
    return [lost_area(p, end, f) for p, f in zip(problems, footwalls)]


@dataclass(frozen=True, eq=False)
class AreaConvergence:
    """Lost area against the shear line where it ends.

    Parameters
    ----------
    where, horizon : str
    u, x : ndarray (n,)
        Shear lines, and where they meet the bed.
    area, sigma : ndarray (n,)
        A(U) and one standard deviation.
    depth : ndarray (n,)
        A(U)/H: mean depth of the fault below the regional over the last strip.
    fault_z : ndarray (n,)
        Mean elevation of the fault over the last strip, R~(U - H/2) - A(U)/H.
    change : float or None
        Change of the depth over the last strip as a share of it; None if the picks
        are shorter than two strips.
    levelled : bool
        It has levelled off (`LEVELLED`).
    text : str
    """

    where: str
    horizon: str
    u: np.ndarray
    x: np.ndarray
    area: np.ndarray
    sigma: np.ndarray
    depth: np.ndarray
    fault_z: np.ndarray
    change: Optional[float]
    levelled: bool
    text: str

    def __repr__(self):
        return (
            f"AreaConvergence({self.horizon!r}, {len(self.u)} shear lines, "
            f"depth={self.depth[-1]:.6g}, change={self.change}, "
            f"levelled={self.levelled})"
        )


def area_convergence(problem, footwall=None, per_strip=4):
    """Follow A(U)/H towards the end of the picks.

    Parameters
    ----------
    problem : Problem
    footwall : Profile, optional
    per_strip : int
        Shear lines in one displacement H.

    Returns
    -------
    AreaConvergence

    Raises
    ------
    ConstructionError
        If the model does not keep area, or compaction takes some of it.

    Notes
    -----
    A(U) = integral of (R~ - F~) du over [U - H, U] (eq. 8a of methods.md), for any
    regional and any end: data that stop early give the mean depth of the fault
    under the last strip, not that of the detachment.
    """
    require_area(why_no_area(problem.model, problem.options.compaction), problem.where)
    bed, heave = bed_in_frame(problem), problem.oblique_heave
    count = int(np.floor((bed.x[-1] - bed.x[0]) / heave * per_strip))
    ends = bed.x[-1] - heave / per_strip * np.arange(max(count, 1))[::-1]
    areas = [lost_area(problem, u, footwall) for u in ends]
    total = np.array([a.total for a in areas])
    depth = total / heave
    change = None
    if count > per_strip:
        change = float((depth[-1] - depth[-1 - per_strip]) / depth[-1])
    levelled = change is not None and abs(change) <= LEVELLED
    return AreaConvergence(
        problem.where,
        problem.separation.horizon,
        ends,
        np.array([a.end_x for a in areas]),
        total,
        np.array([a.sigma for a in areas]),
        depth,
        np.array([a.regional_z for a in areas]) - depth,
        change,
        levelled,
        _convergence_words(change, levelled),
    )


def _convergence_words(change, levelled):
    if change is None:
        return (
            "The picks end within two strips: A/H is the mean depth of the fault under "
            "the last strip and says nothing of the detachment."
        )
    share = f"A/H changes by {100 * change:.1f} % over the last strip"
    if levelled:
        return share + ": it has levelled off."
    return (
        share + ": it has not levelled off, and is the mean depth of the fault under "
        "the last strip, not that of the detachment."
    )
