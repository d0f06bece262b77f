"""The forward model: a horizon's rollover from the fault, by any column model."""

import numpy as np

from .compaction import check_compaction, check_surfaces
from .errors import ConstructionError
from .kinematics import ConstantHeave, from_shear_frame, to_shear_frame
from .profile import Profile, pool_to_increasing

__all__ = ["forward_horizon", "forward_past_subsidiaries", "predict_horizon"]


def predict_horizon(
    trace_x,
    trace_z,
    regional,
    oblique_heave,
    shear_angle,
    samples=400,
    compaction=None,
):
    """Predict a horizon from the fault by constant heave (see `forward_horizon`)."""
    model = ConstantHeave(shear_angle)
    return forward_horizon(
        trace_x, trace_z, regional, oblique_heave, model, samples, compaction
    )


def forward_horizon(
    trace_x, trace_z, regional, displacement, model, samples=400, compaction=None
):
    """Predict a horizon in the hanging wall from the fault.

    Parameters
    ----------
    trace_x, trace_z : ndarray (n,)
        The fault, x growing.
    regional : Regional
        Of the horizon to be predicted.
    displacement : float
        The model's own measure: oblique heave H = heave + throw tan(a), slip D, or
        the heave at the cut-offs; pre-growth horizons of one fault share it.
    model : object
        Kinematic model.
    samples : int
        Points of the result, besides those at the fault's own vertices.
    compaction : Compaction, optional
        Columns keep their solid thickness.

    Returns
    -------
    horizon : Profile
        From its hanging-wall cut-off as far as the fault is given.
    footwall, hanging_wall : tuple (x, z)
        Cut-offs.

    Raises
    ------
    ConstructionError
        If the regional does not meet the fault, the fault is not given for one
        displacement beyond that, the model has no solution or does not go with
        compaction, or a bed lies above its sediment surface.

    Notes
    -----
    B(X) = R(x) + F(X) - F(x) with X the arrival of the column that stood at x, all
    in the shear frame (eqs. 3 and 5 of methods.md), less what the column thins by
    compaction.
    """
    check_compaction(compaction, model)
    trace_z = np.asarray(trace_z, dtype=float)
    fu = to_shear_frame(trace_x, trace_z, model.shear_angle)
    if np.any(np.diff(fu) <= 0):
        raise ConstructionError(
            "shear-parallel-to-fault",
            "the fault is not single-valued along these shear planes.",
            remedy="Use a smaller synthetic angle.",
        )
    tan = np.tan(np.radians(model.shear_angle))
    start = regional.z0 - regional.slope * regional.x0

    def level(u):
        return (start + regional.slope * u) / (1.0 - regional.slope * tan)

    def fault(u):
        return np.interp(u, fu, trace_z)

    u_foot = _regional_meets_fault(fu, trace_z - level(fu))
    u = _material_points(u_foot, fu, displacement, samples)
    arrived = model.arrival(u, fault, regional.slope, displacement)
    inside = arrived <= fu[-1] + 1e-9
    if inside.sum() < 2:
        raise ConstructionError(
            "fault-too-short",
            "the fault ends within one heave of the horizon's footwall cut-off.",
        )
    u, arrived = u[inside], arrived[inside]
    z = level(u) + fault(arrived) - fault(u)
    if compaction is not None:
        z = z - compaction.thinning_above(level(u), fault(u), fault(arrived))
        least = 1e-6 * displacement
        check_surfaces(compaction, z, level(u), least, least)
    x = from_shear_frame(arrived, z, model.shear_angle)
    foot_z = float(fault(u_foot))
    return (
        Profile(x, z, np.zeros(len(x))),
        (float(u_foot + foot_z * tan), foot_z),
        (float(x[0]), float(z[0])),
    )


def forward_past_subsidiaries(
    trace_x, trace_z, regional, displacement, model, shares, compaction=None
):
    """Predict a horizon that subsidiary faults cut as they cut the one used.

    Parameters
    ----------
    trace_x, trace_z, regional, displacement, model, compaction
        As for `forward_horizon`, the displacement that of the block at the master.
    shares : sequence of SubsidiaryShare
        From the master outwards; what each adds is taken as the same for the horizon.

    Returns
    -------
    horizon : Profile
        Each block as far as it sees the master, straight from one to the next.
    footwall, hanging_wall : tuple (x, z)
    hidden : list of tuple (u, u)
        Along the shear lines, where it does not see the master: nothing is predicted.

    Raises
    ------
    ConstructionError
        As `forward_horizon`.
    """
    angle, moved = model.shear_angle, displacement
    arguments = (trace_x, trace_z, regional)
    bed, foot, hang = forward_horizon(*arguments, moved, model, compaction=compaction)
    pieces, edges = [np.column_stack([bed.x, bed.z])], []
    for share in shares:
        moved += share.added_heave
        outer, _, _ = forward_horizon(*arguments, moved, model, compaction=compaction)
        outer = np.column_stack([outer.x, outer.z])
        edge = _shadow_edges(pieces[-1], outer, share, angle)
        if edge is None:
            moved -= share.added_heave
            continue
        start, end = edge
        edges.append(edge)
        pieces[-1] = pieces[-1][to_shear_frame(*pieces[-1].T, angle) <= start]
        pieces.append(outer[to_shear_frame(*outer.T, angle) >= end])
    x, z, _ = pool_to_increasing(*np.vstack(pieces).T, least=1e-9)
    return Profile(x, z, np.zeros(len(x))), foot, hang, edges


def _shadow_edges(inner, outer, share, angle):
    """Give u between which a horizon does not see the master; None if it is not cut."""
    plane, added = share.fault.plane, share.added_heave
    branch = float(to_shear_frame(*share.branch, angle))
    inwards = plane.run > np.tan(np.radians(angle))
    bed = outer if inwards else inner
    beyond = bed[:, 0] - plane.x_at(bed[:, 1])
    hit = np.flatnonzero((beyond[:-1] < 0) & (beyond[1:] >= 0))
    if not len(hit):
        return None
    i = int(hit[0])
    f = beyond[i] / (beyond[i] - beyond[i + 1])
    at = float(to_shear_frame(*(bed[i] + f * (bed[i + 1] - bed[i])), angle))
    start, end = (branch - added, at) if inwards else (at, branch + added)
    return (start, end) if start < end else None


def _regional_meets_fault(fu, gap):
    """Give u of the footwall cut-off: the first crossing down the fault."""
    hit = np.flatnonzero((gap[:-1] >= 0) & (gap[1:] < 0))
    if not len(hit):
        raise ConstructionError(
            "no-cutoff", "the horizon's regional does not meet the fault."
        )
    i = int(hit[0])
    return fu[i] + (fu[i + 1] - fu[i]) * gap[i] / (gap[i] - gap[i + 1])


def _material_points(u_foot, fu, displacement, samples):
    """Points of the regional: evenly spread, and those that bends will carry.

    The bed bends where a column's foot passes a vertex of the fault, before or
    after it moved, so both are taken (exactly, for constant heave).
    """
    spread = np.linspace(u_foot, fu[-1], samples)
    own = np.r_[fu, fu - displacement, fu[-1] - displacement]
    own = own[(own > u_foot) & (own < fu[-1])]
    u = np.unique(np.r_[spread, own])
    return u[np.r_[True, np.diff(u) > 1e-9 * displacement]]
