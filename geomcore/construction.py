"""The march: the fault from the rollover, and the rollover from the fault."""

from dataclasses import dataclass, field
from typing import Optional, Tuple

import numpy as np

from .errors import ConstructionError, Doubt
from .kinematics import from_shear_frame, to_shear_frame
from .profile import Profile, pool_to_increasing

__all__ = [
    "FaultTrace",
    "MarchOptions",
    "MarchTable",
    "Prediction",
    "march",
    "predict_fault",
    "predict_horizon",
]

#: Strips beyond which a march without a deep tie should not be trusted
#: (methods.md section 13, rule 2).
MANY_STRIPS = 6


@dataclass(frozen=True)
class MarchOptions:
    """How finely the march is sampled and when the detachment counts as reached.

    Parameters
    ----------
    samples_per_strip : int
        Nodes in one oblique heave; the step is the heave over it, exactly.
    shear_angle_sigma : float
        One standard deviation of the shear angle in degrees, for the stated sigma.
    """

    samples_per_strip: int = 40
    shear_angle_sigma: float = 0.0


@dataclass(frozen=True, eq=False)
class FaultTrace:
    """A fault in section, from the footwall end down dip.

    Parameters
    ----------
    x, z : ndarray (n,)
        Points, x growing.
    dip : ndarray (n,)
        Degrees, positive down towards the hanging wall.
    strip : ndarray (n,) of int
        0 down to the hanging-wall cut-off, then the number of the strip.
    constrained : ndarray (n,) of str
        ``known``, ``assumed`` or ``predicted``.
    sigma_z : ndarray (n,)
        One standard deviation of z at fixed x, NaN where nothing can be said.
    """

    x: np.ndarray
    z: np.ndarray
    dip: np.ndarray
    strip: np.ndarray
    constrained: np.ndarray
    sigma_z: np.ndarray

    def __len__(self):
        return len(self.x)

    def z_at(self, x):
        """Give the fault's z at x, NaN beyond its ends."""
        return np.interp(x, self.x, self.z, left=np.nan, right=np.nan)

    @property
    def length(self):
        """Length along the trace."""
        return float(np.hypot(np.diff(self.x), np.diff(self.z)).sum())


@dataclass(frozen=True, eq=False)
class MarchTable:
    """The march one row per strip end, to be checked by hand.

    F = F_origin + B - R_origin on every row; in the shear frame u replaces x.

    Parameters
    ----------
    strip : ndarray (n,) of int
    x, u : ndarray (n,)
        Place of the fault point, and the place of its column in the shear frame.
    bed, regional, increment, fault : ndarray (n,)
        B there, R one heave inwards, their difference, and F.
    """

    strip: np.ndarray
    x: np.ndarray
    u: np.ndarray
    bed: np.ndarray
    regional: np.ndarray
    increment: np.ndarray
    fault: np.ndarray


@dataclass(frozen=True, eq=False)
class Prediction:
    """What the construction says of one section.

    Parameters
    ----------
    section_id, horizon : str
    model : object
        Kinematic model used.
    solver : str
        ``march``.
    separation : Separation
    regional : Regional
        Written against the footwall cut-off.
    oblique_heave : float
        H = heave + throw tan(a).
    trace : FaultTrace
    table : MarchTable
    detachment_z : float or None
        Where the bed is back at its far position; else None.
    deepest_z : float
        Last elevation reached: the fault goes at least this deep.
    doubts : tuple of Doubt
    """

    section_id: str
    horizon: str
    model: object
    solver: str
    separation: object
    regional: object
    oblique_heave: float
    trace: FaultTrace
    table: MarchTable
    detachment_z: Optional[float]
    deepest_z: float
    doubts: Tuple[Doubt, ...] = field(default=())

    @property
    def strips(self):
        """Number of the last strip."""
        return int(self.trace.strip.max())


def march(origin_index, origin_fraction, start, increment):
    """Carry the fault outwards strip by strip.

    Parameters
    ----------
    origin_index : ndarray (n,) of int
        Node before the place where the column of each node came from.
    origin_fraction : ndarray (n,)
        Where between that node and the next, 0 to 1.
    start : ndarray (m, ...)
        F at the first m nodes (the known or assumed piece).
    increment : ndarray (n, ...)
        B at each node minus R at its origin; the first m rows are not used.
        Further axes run through together (several beds, or derivatives).

    Returns
    -------
    ndarray (n, ...)
        F[i] = F(origin of i) + increment[i] (eq. 5 of methods.md; 2 and 3 are
        special cases).

    Notes
    -----
    A node can be solved when its origin lies on the solved part, so a whole strip
    is solved in one step.
    """
    n = len(origin_index)
    fault = np.empty((n,) + np.shape(increment)[1:])
    done = len(start)
    fault[:done] = start
    shape = (-1,) + (1,) * (np.ndim(increment) - 1)
    needed = origin_index + (origin_fraction > 0)
    while done < n:
        stop = done + int(np.argmax(np.r_[needed[done:] >= done, True]))
        if stop == done:
            raise ConstructionError(
                "no-progress", "a column has not moved: its origin lies beyond itself."
            )
        i, f = origin_index[done:stop], origin_fraction[done:stop].reshape(shape)
        inner = fault[i] if not f.any() else (1 - f) * fault[i] + f * fault[i + 1]
        fault[done:stop] = inner + increment[done:stop]
        done = stop
    return fault


def _nodes(u_start, oblique_heave, u_end, samples):
    """Nodes at the heave over `samples`, from the footwall cut-off to the data's end."""
    step = oblique_heave / samples
    count = int(np.floor((u_end - u_start) / step + 1e-6)) + 1
    return u_start + step * np.arange(max(count, samples + 1))


@dataclass(frozen=True, eq=False)
class _Frame:
    """Everything of one section written against u along the shear lines."""

    angle: float
    tan: float
    bed: Profile
    bed_slope: np.ndarray  # dz/dx of the bed at its points, for the frame factor


def _bed_in_frame(bed, angle, step, where):
    """Write the bed against u; noise that breaks its order is averaged."""
    tan = np.tan(np.radians(angle))
    u = to_shear_frame(bed.x, bed.z, angle)
    pooled_u, z, sigma, x, count = pool_to_increasing(u, bed.z, bed.sigma, bed.x, least=1e-9)
    if count.max() > 1:
        # how far in x the averaging reaches: noise folds little, a steep bed a lot
        widest = int(np.argmax(count))
        first = int(count[:widest].sum())
        width = bed.x[int(first + count[widest]) - 1] - bed.x[first]
        if width > step:
            raise ConstructionError(
                "shear-parallel-to-bed",
                f"near x = {x[widest]:.0f} the bed dips more steeply than the shear "
                f"planes of {angle:g} degrees allow.",
                where,
                "Use a smaller shear angle, or check the picks there.",
            )
    slope = np.gradient(z, x) if len(x) > 1 else np.zeros(1)
    factor = np.maximum(np.abs(1.0 - slope * tan), 0.2)
    return _Frame(angle, tan, Profile(pooled_u, z, sigma / factor), slope)


def _check_fault_in_frame(fault, x_low, x_high, angle, where):
    """Refuse a start piece that is not single-valued along the shear lines."""
    tan = np.tan(np.radians(angle))
    x = np.linspace(x_low, x_high, 50)
    stretch = 1.0 - fault.slope_at(x) * tan
    if stretch.min() <= 0.05:
        raise ConstructionError(
            "shear-parallel-to-fault",
            f"the fault dips {np.degrees(np.arctan(-fault.slope_at(x).min())):.0f} degrees, "
            f"too near the synthetic shear planes of {angle:g} degrees.",
            where,
            "Use a smaller synthetic angle.",
        )


def _regional_in_frame(regional, u, tan):
    """R~(u) = (R(0) + s u)/(1 - s tan a) of a straight regional."""
    at_zero = regional.z0 - regional.slope * regional.x0
    return (at_zero + regional.slope * u) / (1.0 - regional.slope * tan)


def _solve(separation, fault, bed, regional, model, options, where):
    """One march: nodes, fault, increments, bed and regional at the nodes."""
    angle = model.shear_angle
    tan = np.tan(np.radians(angle))
    foot, hang = separation.footwall, separation.hanging_wall
    heave = model.displacement(separation.heave, separation.throw)
    u_foot = foot.x - foot.z * tan
    frame = _bed_in_frame(bed, angle, heave / 2.0, where)
    u = _nodes(u_foot, heave, frame.bed.x[-1], options.samples_per_strip)
    m = options.samples_per_strip
    start = _start_piece(fault, foot, hang, u[: m + 1], tan)
    bed_z = np.interp(u, frame.bed.x, frame.bed.z)
    regional_z = _regional_in_frame(regional, u - heave, tan)
    index = np.maximum(np.arange(len(u)) - m, 0)
    increment = bed_z - regional_z
    z = march(index, np.zeros(len(u)), start, increment)
    return u, z, bed_z, regional_z, heave, frame


def _start_piece(fault, foot, hang, u, tan):
    """F~ on the nodes between the cut-offs, through both of them exactly."""
    inner = fault.x[(fault.x > foot.x) & (fault.x < hang.x)]
    x = np.r_[foot.x, inner, hang.x]
    z = np.r_[foot.z, fault.z_at(inner), hang.z]
    return np.interp(u, x - z * tan, z)


def _bed_with_cutoff(bed, cutoff):
    """The bed from its cut-off on, picks inboard of it left out."""
    beyond = bed.x > cutoff.x + 1e-6
    return Profile(
        np.r_[cutoff.x, bed.x[beyond]],
        np.r_[cutoff.z, bed.z[beyond]],
        np.r_[cutoff.sigma_z, bed.sigma[beyond]],
    )


def predict_fault(section, separation, fault, bed, regional, model, options=None):
    """Predict the fault from the rollover of one horizon by the march.

    Assumes plane strain along transport, a rigid footwall and columns that slide
    with their foot on the fault.

    Parameters
    ----------
    section : SectionFrame
        For its name and obliquity.
    separation : Separation
        Cut-offs of the horizon.
    fault : KnownFault
        Known piece; honoured down to the hanging-wall cut-off, carried on straight
        (and marked assumed) where it ends before.
    bed : Profile
        The horizon in the hanging wall.
    regional : Regional
        Through the footwall cut-off.
    model : ConstantHeave
    options : MarchOptions, optional

    Returns
    -------
    Prediction

    Raises
    ------
    ConstructionError
        If the separation is reverse, the heave is too small, the bed ends inside
        the first strip or the shear direction is parallel to fault or bed.

    References
    ----------
    Eqs. 2-4 of methods.md (Verrall 1982; White et al. 1986; Groshong 2006).
    """
    options = options or MarchOptions()
    where = f"section {section.section_id}"
    _check_separation(separation, model, where)
    bed = _bed_with_cutoff(bed, separation.hanging_wall)
    _check_fault_in_frame(
        fault, separation.footwall.x, separation.hanging_wall.x, model.shear_angle, where
    )
    u, z, bed_z, regional_z, heave, frame = _solve(
        separation, fault, bed, regional, model, options, where
    )
    m = options.samples_per_strip
    if len(u) <= m + 1:
        raise ConstructionError(
            "bed-too-short",
            "the hanging-wall horizon ends within one heave of its cut-off, so it "
            "says nothing of the fault at depth.",
            where,
            "Extend the section or the picks into the hanging wall.",
        )
    x = from_shear_frame(u, z, model.shear_angle)
    trace_doubts = _check_trace(x, z, where)
    sigma = _sigma(u, z, m, separation, fault, bed, regional, model, options, frame, where)
    trace = _trace(x, z, sigma, m, fault, separation, model)
    table = _table(u, x, z, bed_z, regional_z, m)
    detachment, reach_doubts = _detachment(u, z, bed_z, regional, heave, frame, m, where)
    doubts = [
        *_input_doubts(section, separation, fault, bed, model, heave, where),
        *trace_doubts,
        *reach_doubts,
        *_strip_doubts(trace, bed_z, regional, u, frame, m, where),
    ]
    return Prediction(
        section.section_id,
        separation.horizon,
        model,
        "march",
        separation,
        regional,
        float(heave),
        trace,
        table,
        detachment,
        float(z[-1]),
        tuple(doubts),
    )


def _check_separation(separation, model, where):
    heave, throw = separation.heave, separation.throw
    if heave <= 0:
        raise ConstructionError(
            "reverse-separation",
            f"the hanging-wall cut-off lies {-heave:.1f} behind the footwall cut-off "
            "(reverse separation); the construction holds for normal faults.",
            where,
            "Check the cut-offs and the hanging-wall side.",
        )
    if throw <= 0:
        raise ConstructionError(
            "wrong-side",
            f"the hanging wall lies {-throw:.1f} above the footwall.",
            where,
            "Check the hanging-wall side, the sign of the picks and the horizon names.",
        )
    oblique = model.displacement(heave, throw)
    if oblique < 0.15 * heave:
        raise ConstructionError(
            "shear-parallel-to-fault",
            f"the oblique heave is {oblique:.1f} at a heave of {heave:.1f}: synthetic "
            f"shear of {model.shear_angle:g} degrees runs nearly along the fault.",
            where,
            "Use a smaller synthetic angle.",
        )


def _check_trace(x, z, where):
    """Refuse a fault that folds back; doubt one that rises or is very steep."""
    if np.any(np.diff(x) <= 0):
        i = int(np.argmax(np.diff(x) <= 0))
        raise ConstructionError(
            "fault-not-single-valued",
            f"near x = {x[i]:.0f} the predicted fault turns back on itself.",
            where,
            "Check the picks there; noise closer than a strip can do it.",
        )
    dip = np.degrees(np.arctan2(-np.diff(z), np.diff(x)))
    doubts = []
    if dip.min() < -2.0:
        i = int(np.argmin(dip))
        doubts.append(
            Doubt("fault-rises", f"the predicted fault rises outwards near x = {x[i]:.0f}.", where)
        )
    if dip.max() > 80.0:
        i = int(np.argmax(dip))
        doubts.append(
            Doubt("fault-steep", f"the predicted fault dips {dip[i]:.0f} degrees near x = {x[i]:.0f}.", where)
        )
    return doubts


def _trace(x, z, sigma, m, fault, separation, model):
    """Join the known fault above the footwall cut-off to the marched part."""
    foot = separation.footwall
    above = fault.x < foot.x - 1e-6
    full_x, full_z = np.r_[fault.x[above], x], np.r_[fault.z[above], z]
    n = int(above.sum())
    strip = np.r_[np.zeros(n, int), np.ceil(np.arange(len(x)) / m - 1e-9).astype(int) - 1]
    strip = np.maximum(strip, 0)
    state = np.full(len(full_x), "predicted", dtype=object)
    first = strip == 0
    state[first] = np.where(fault.is_known(full_x[first]), "known", "assumed")
    state[:n] = "known"
    slope = np.gradient(full_z, full_x)
    above_sigma = np.full(n, fault.sigma)
    return FaultTrace(
        full_x,
        full_z,
        np.degrees(np.arctan(-slope)),
        strip,
        state,
        np.r_[above_sigma, sigma],
    )


def _table(u, x, z, bed_z, regional_z, m):
    rows = np.arange(m, len(u), m)
    rows = np.unique(np.r_[rows, len(u) - 1])
    return MarchTable(
        np.ceil(rows / m - 1e-9).astype(int) - 1,
        x[rows],
        u[rows],
        bed_z[rows],
        regional_z[rows],
        (bed_z - regional_z)[rows],
        z[rows],
    )


def _hat_matrix(u, points):
    """Weights of linear interpolation: values at u = matrix @ values at points."""
    matrix = np.zeros((len(u), len(points)))
    j = np.clip(np.searchsorted(points, u, side="right") - 1, 0, len(points) - 2)
    f = np.clip((u - points[j]) / (points[j + 1] - points[j]), 0.0, 1.0)
    rows = np.arange(len(u))
    matrix[rows, j] = 1.0 - f
    matrix[rows, j + 1] += f
    return matrix


def _sigma(u, z, m, separation, fault, bed, regional, model, options, frame, where):
    """Standard deviation of F at fixed x by linear propagation.

    Pick noise is carried through the march itself (it is linear in the bed); level
    and dip of the regional, the hanging-wall cut-off and the shear angle through
    differences of whole marches; the error of the known piece is copied into every
    strip (methods.md section 13).
    """
    weights = _hat_matrix(u, frame.bed.x)
    weights[: m + 1] = 0.0
    weights[:, 0] = 0.0  # the bed's first point is the cut-off, varied below
    index = np.maximum(np.arange(len(u)) - m, 0)
    rows = march(index, np.zeros(len(u)), np.zeros((m + 1, weights.shape[1])), weights)
    slope = np.gradient(z, from_shear_frame(u, z, model.shear_angle))
    to_vertical = 1.0 - slope * frame.tan
    variance = (rows**2 @ frame.bed.sigma**2) * to_vertical**2
    variance += fault.sigma**2
    x = from_shear_frame(u, z, model.shear_angle)
    columns, covariance = _parameter_columns(
        x, z, separation, fault, bed, regional, model, options, where
    )
    variance += np.einsum("ni,ij,nj->n", columns, covariance, columns)
    return np.sqrt(np.maximum(variance, 0.0))


def _parameter_columns(x, z, separation, fault, bed, regional, model, options, where):
    """Change of F at fixed x with regional level, dip, cut-off and shear angle."""
    step_z = max(1e-3 * separation.throw, 1e-6)
    step_slope = 1e-4
    trials = (
        (step_z, 0.0, 0.0, 0.0),
        (0.0, step_slope, 0.0, 0.0),
        (0.0, 0.0, step_z, 0.0),
        (0.0, 0.0, 0.0, 0.05),
    )
    columns = np.zeros((len(x), 4))
    for i, trial in enumerate(trials):
        if i == 3 and options.shear_angle_sigma == 0:
            continue
        px, pz = _perturbed(trial, separation, fault, bed, regional, model, options, where)
        columns[:, i] = (np.interp(x, px, pz) - z) / (step_z, step_slope, step_z, 0.05)[i]
    covariance = np.zeros((4, 4))
    a, b, c = regional.covariance
    covariance[:2, :2] = [[a, b], [b, c]]
    covariance[2, 2] = separation.hanging_wall.sigma_z ** 2
    covariance[3, 3] = options.shear_angle_sigma**2
    return columns, covariance


def _perturbed(trial, separation, fault, bed, regional, model, options, where):
    """March again with one parameter moved; cut-offs slide along the fault."""
    from dataclasses import replace

    dz, dslope, dhang, dangle = trial
    foot, hang = separation.footwall, separation.hanging_wall
    # a regional raised by dz meets the fault at another place
    fault_slope = float(fault.slope_at(foot.x))
    dx = dz / (fault_slope - regional.slope)
    foot = replace(foot, x=foot.x + dx, z=foot.z + fault_slope * dx)
    slope = float(fault.slope_at(hang.x))
    hang = replace(hang, x=hang.x + dhang / slope, z=hang.z + dhang)
    moved = replace(separation, footwall=foot, hanging_wall=hang)
    line = regional.shifted(dz, dslope).moved_to(foot.x)
    if dangle:
        model = replace(model, shear_angle=model.shear_angle + dangle)
    bed = Profile(np.r_[hang.x, bed.x[1:]], np.r_[hang.z, bed.z[1:]], bed.sigma)
    u, z, *_ = _solve(moved, fault, bed, line, model, options, where)
    return from_shear_frame(u, z, model.shear_angle), z


def _detachment(u, z, bed_z, regional, heave, frame, m, where):
    """Detachment level where the bed is back at its far position over one strip."""
    far = _regional_in_frame(regional, u - heave, frame.tan)
    last = slice(len(u) - m - 1, None)
    sigma = np.interp(u[last], frame.bed.x, frame.bed.sigma)
    spread = np.sqrt(sigma**2 + regional.sigma_at(u[last] - heave) ** 2)
    miss = np.abs(bed_z[last] - far[last])
    if np.all(miss <= 2.0 * np.maximum(spread, 1e-6)):
        return float(z[last].mean()), []
    return None, [
        Doubt(
            "regional-not-reached",
            "the bed is not back at its far position where the picks end; the fault "
            f"goes down to {z[-1]:.0f} at least, its detachment is not reached.",
            where,
        )
    ]


def _input_doubts(section, separation, fault, bed, model, heave, where):
    """What is doubtful about the inputs of a march that runs."""
    doubts = []
    hang = separation.hanging_wall
    say = lambda code, text: doubts.append(Doubt(code, text, where))  # noqa: E731
    if not bool(fault.is_known(hang.x)):
        say(
            "assumed-piece",
            "the fault between its last known point and the hanging-wall cut-off is "
            f"assumed: straight, by {fault.below_from}.",
        )
    gap = bed.x[1] - hang.x if len(bed) > 1 else 0.0
    if gap > 0.5 * separation.heave:
        say(
            "horizon-ends-before-fault",
            f"the hanging-wall horizon ends {gap:.0f} before its cut-off and was "
            "extended over that distance.",
        )
    spacing = np.diff(bed.x)
    if len(spacing) > 1 and separation.heave < 2.0 * np.median(spacing[1:]):
        say(
            "small-heave",
            f"the heave of {separation.heave:.0f} is small against the pick spacing "
            f"of {np.median(spacing[1:]):.0f}.",
        )
    if len(spacing) > 1 and spacing[1:].max() > heave:
        i = 1 + int(np.argmax(spacing[1:]))
        say(
            "gap-in-bed",
            f"no picks for {spacing[i]:.0f} beyond x = {bed.x[i]:.0f}, more than a strip; "
            "the bed is straight there by assumption.",
        )
    if section.obliquity > 20.0:
        say(
            "oblique-section",
            f"the section is up to {section.obliquity:.0f} degrees off transport.",
        )
    margin = _shear_margin(separation, bed, model)
    if margin < 10.0:
        say(
            "shear-near-parallel",
            f"the shear planes are within {max(margin, 0):.0f} degrees of the fault or the bed.",
        )
    return doubts


def _shear_margin(separation, bed, model):
    """Smallest angle between the shear planes and the cut-off dip or the bed."""
    a = model.shear_angle
    if a == 0 or len(bed) < 3:
        return 90.0
    dip = np.degrees(np.arctan(np.diff(bed.z) / np.diff(bed.x)))
    if a > 0:
        return float(90.0 - a - np.percentile(dip, 95))
    return float(min(90.0 + a - separation.cutoff_dip, 90.0 + a + np.percentile(dip, 5)))


def _strip_doubts(trace, bed_z, regional, u, frame, m, where):
    doubts = []
    strips = int(trace.strip.max())
    if strips > MANY_STRIPS:
        doubts.append(
            Doubt(
                "many-strips",
                f"{strips} strips below the cut-off without a deep tie; errors grow "
                "with every strip.",
                where,
            )
        )
    level = _regional_in_frame(regional, u, frame.tan)
    sigma = np.interp(u, frame.bed.x, frame.bed.sigma)
    above = bed_z[m:] - level[m:] > 3.0 * sigma[m:] + 1e-3 * np.ptp(level - bed_z)
    if above.any():
        at = from_shear_frame(u[m:][above][0], bed_z[m:][above][0], frame.angle)
        doubts.append(
            Doubt(
                "bed-above-regional",
                f"the bed lies above the regional from x = {at:.0f} on some of the way.",
                where,
            )
        )
    return doubts


def predict_horizon(trace_x, trace_z, regional, oblique_heave, shear_angle, samples=400):
    """Predict a horizon in the hanging wall from the fault.

    Parameters
    ----------
    trace_x, trace_z : ndarray (n,)
        The fault, x growing.
    regional : Regional
        Of the horizon to be predicted.
    oblique_heave : float
        H = heave + throw tan(a); pre-growth horizons of one fault share it.
    shear_angle : float
        Degrees from the vertical, positive antithetic.
    samples : int
        Points of the result.

    Returns
    -------
    horizon : Profile
        From its hanging-wall cut-off as far as the fault is given.
    footwall, hanging_wall : tuple (x, z)
        Cut-offs.

    Raises
    ------
    ConstructionError
        If the regional does not meet the fault, or the fault is not given for one
        oblique heave beyond that.

    Notes
    -----
    B~(u + H) = R~(u) + F~(u + H) - F~(u), eq. 3 of methods.md.
    """
    tan = np.tan(np.radians(shear_angle))
    fu = to_shear_frame(trace_x, trace_z, shear_angle)
    if np.any(np.diff(fu) <= 0):
        raise ConstructionError(
            "shear-parallel-to-fault",
            "the fault is not single-valued along these shear planes.",
            remedy="Use a smaller synthetic angle.",
        )
    gap = np.asarray(trace_z) - _regional_in_frame(regional, fu, tan)
    hit = np.flatnonzero((gap[:-1] >= 0) & (gap[1:] < 0))
    if not len(hit):
        raise ConstructionError(
            "no-cutoff", "the horizon's regional does not meet the fault."
        )
    i = int(hit[0])
    u_foot = fu[i] + (fu[i + 1] - fu[i]) * gap[i] / (gap[i] - gap[i + 1])
    u_hang = u_foot + oblique_heave
    if u_hang >= fu[-1]:
        raise ConstructionError(
            "fault-too-short",
            "the fault ends within one heave of the horizon's footwall cut-off.",
        )
    own = fu[(fu > u_hang) & (fu < fu[-1])]
    u = np.unique(np.r_[np.linspace(u_hang, fu[-1], samples), own])
    fault = lambda at: np.interp(at, fu, trace_z)  # noqa: E731
    z = _regional_in_frame(regional, u - oblique_heave, tan) + fault(u) - fault(u - oblique_heave)
    x = from_shear_frame(u, z, shear_angle)
    foot_z = float(fault(u_foot))
    return (
        Profile(x, z, np.zeros(len(x))),
        (float(u_foot + foot_z * tan), foot_z),
        (float(x[0]), float(z[0])),
    )
