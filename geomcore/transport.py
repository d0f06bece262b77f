"""The transport azimuth: given, or from the strike and what tells the side."""

import numpy as np

from .errors import FrameError, GeomcoreError
from .picks import Picks, PullOptions, pull_source
from .section import (
    SectionFrame,
    mean_strike,
    parallel_sections,
    parse_azimuth,
    transport_azimuth,
)
from .separation import CUTOFF_PICKS
from .sources import Features

__all__ = ["resolve_transport", "trace_parts"]


def trace_parts(prepared, *roles):
    """Parts of all line and polygon sources of some roles."""
    parts = []
    for p in prepared.values():
        if p.declaration.role not in roles or not isinstance(p.data, Features):
            continue
        if p.data.geometry != "point":
            o = p.data.offsets
            parts += [p.data.xy[a:b] for a, b in zip(o[:-1], o[1:]) if b - a > 1]
    return parts


def _strike_of(prepared):
    parts = trace_parts(prepared, "fault trace") or trace_parts(prepared, "cut-off")
    # a ring ends where it starts: its ends tell no strike
    parts = [_long_axis(p) if np.array_equal(p[0], p[-1]) else p for p in parts]
    if not parts:
        raise FrameError(
            "no-strike",
            "there is no fault trace or cut-off line to take the strike from.",
            remedy="Declare one, or give the transport azimuth.",
        )
    return mean_strike(parts)


def _long_axis(part):
    """Two points along the long axis of a ring or line (its principal direction)."""
    centred = part - part.mean(axis=0)
    axis = np.linalg.svd(centred, full_matrices=False)[2][0]
    reach = np.ptp(centred @ axis)
    return np.array([np.zeros(2), axis * reach])


def resolve_transport(study, prepared, lines):
    """Find the transport azimuth and say what it comes from.

    The order is: given; else normal to the mean strike, on the side that is
    declared, else towards the dip direction of the fault, else towards the lower
    block of the horizon.

    Returns
    -------
    azimuth : float
    how : str

    Raises
    ------
    FrameError
        If nothing tells the side.
    """
    spec = study.transport
    if spec.azimuth is not None:
        return float(spec.azimuth) % 360.0, "given"
    strike = _strike_of(prepared)
    if spec.hw_side:
        return (
            transport_azimuth(strike, parse_azimuth(spec.hw_side)),
            f"normal to the mean strike {strike:.1f}, side declared {spec.hw_side}",
        )
    dips = [
        np.asarray(p.data.columns["dip_azimuth"], dtype=float)
        for p in prepared.values()
        if p.declaration.role in ("fault trace", "fault")
        and isinstance(p.data, Features)
        and "dip_azimuth" in p.data.columns
    ]
    dips = np.concatenate(dips) if dips else np.empty(0)
    dips = np.radians(dips[np.isfinite(dips)])
    if len(dips):
        mean = np.degrees(np.arctan2(np.sin(dips).mean(), np.cos(dips).mean()))
        return (
            transport_azimuth(strike, mean % 360.0),
            f"normal to the mean strike {strike:.1f}, towards the dip direction",
        )
    return _transport_from_levels(study, prepared, lines, strike)


def _transport_from_levels(study, prepared, lines, strike):
    """Take the lower block of the horizon as the hanging wall."""
    right = (strike + 90.0) % 360.0
    drawn = [line.vertices for line in lines or ()]
    drawn = drawn or _trial_lines(study, prepared, right)
    sides = np.array(
        [
            _side_of(study, prepared, f"trial {i + 1}", vertices, right)
            for i, vertices in enumerate(drawn)
        ]
    )
    sides = sides[sides != 0]
    if not sides.sum():
        tells = "the sections do not agree" if len(sides) else "nothing tells"
        raise FrameError(
            "no-side",
            f"{tells} which side of the fault is the hanging wall.",
            remedy="Declare hw_side, dips of the fault, or the transport azimuth.",
        )
    way = np.sign(sides.sum())
    azimuth = right if way > 0 else (right + 180.0) % 360.0
    how = (
        f"normal to the mean strike {strike:.1f}, towards the lower block of "
        f"{study.construction.horizon}"
    )
    agree = int((sides == way).sum())
    if agree < len(sides):
        how += f" (in {agree} of {len(sides)} sections)"
    return azimuth, how


def _trial_lines(study, prepared, transport):
    """Lines across the fault, as long to either side, where none are drawn yet."""
    spec = study.sections.parallel
    trace = trace_parts(prepared, "fault trace") or trace_parts(prepared, "cut-off")
    if spec is None or not trace:
        return ()
    length = max(spec.footwall_length, spec.hanging_wall_length)
    return parallel_sections(trace, transport, spec.spacing, spec.count, length, length)


def _side_of(study, prepared, name, vertices, azimuth):
    """+1 if the horizon along a line is lower along an azimuth, -1 against it, or 0."""
    spec = study.picks
    options = PullOptions(spec.corridor, 0.0, spec.grid_step)
    try:
        frame = SectionFrame(name, vertices, azimuth)
        tables = [pull_source(p, frame, options) for p in prepared.values()]
    except GeomcoreError:
        return 0.0  # a line that gives no frame is reported when frames are made
    drops = 0.0
    for domain in ("depth", "time"):
        own = [t for t in tables if t.domain == domain]
        table = Picks.empty(frame.section_id, domain).joined(own)
        drops += _lower_side(table, study.construction.horizon, spec)
    return float(np.sign(drops))


def _lower_side(picks, horizon, spec):
    """+1 if the horizon is lower beyond the fault (in x), -1 if before it, else 0.

    Each block's level is carried straight to the fault, so that a regional dip is not
    taken for a throw.
    """
    marks = np.r_[picks.of("fault", wall="").x, picks.of("cutoff").x]
    bed = picks.of("horizon", horizon)
    if not len(marks) or not len(bed):
        return 0.0
    before = _level_at(bed, marks.min(), -1, spec)
    beyond = _level_at(bed, marks.max(), 1, spec)
    if before is None or beyond is None:
        return 0.0
    drop = before - beyond
    # levels that differ by rounding alone tell no side
    rounding = 1e-6 * (1.0 + max(abs(before), abs(beyond)))
    return float(np.sign(drop)) if abs(drop) > rounding else 0.0


def _level_at(bed, at, side, spec):
    """Level of a bed carried straight to a place from one side; None without picks.

    From the picks between the distances of the study, else from the nearest
    `CUTOFF_PICKS`; two picks or fewer give their mean.
    """
    d = side * (bed.x - at)
    near = (d >= spec.separation_from) & (d <= spec.separation_to)
    if near.sum() < 3:
        order = np.argsort(np.where(d > 0, d, np.inf), kind="stable")
        near = order[: min(CUTOFF_PICKS, int((d > 0).sum()))]
    d, z = d[near], bed.z[near]
    if len(d) < 3 or np.ptp(d) == 0:
        return float(z.mean()) if len(z) else None
    return float(np.polyval(np.polyfit(d, z, 1), 0.0))
