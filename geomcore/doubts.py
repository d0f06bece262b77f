"""What is doubtful about a march that runs."""

import numpy as np

from .errors import Doubt
from .fault import ASSUMED_GAP
from .offsets import unpicked_offsets
from .subsidiary import subsidiary_doubts

__all__ = ["march_doubts"]

#: Strips beyond which a march without a deep tie should not be trusted
#: (methods.md section 13, rule 2).
MANY_STRIPS = 6
#: Offsets of a horizon smaller than this share of the throw are not pointed out, and
#: gaps longer than this share of the heave not judged (common practice, no source).
SMALL_OFFSET, LONG_GAP = 0.02, 0.5

#: Sigmas beyond which a pick is named as an outlier (one in sixteen thousand by
#: chance), and the most that are named.
OUTLIER, NAMED = 4.0, 5


def march_doubts(problem, solution, trace, detachment):
    """Look over the inputs and the result of a march.

    Parameters
    ----------
    problem : Problem
    solution : Solution
    trace : FaultTrace
    detachment : float or None

    Returns
    -------
    list of Doubt
    """
    found = [
        *_of_start(problem),
        *_of_bed(problem),
        *_of_offsets(problem, solution),
        *_of_subsidiaries(problem, solution),
        *_of_shear(problem),
        *_of_compaction(problem),
        *_of_trace(solution, trace),
        *_of_reach(solution, detachment),
        *_of_strips(problem, solution),
        *_of_residuals(problem, solution),
    ]
    return [Doubt(code, text, problem.where) for code, text in found]


def _of_start(problem):
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    fault, longest = problem.fault, ASSUMED_GAP * problem.separation.heave
    if not fault.is_known(hang.x):
        yield (
            "assumed-piece",
            "the fault between its last known point and the hanging-wall cut-off is "
            f"assumed, by {fault.below_from}.",
        )
    elif not fault.is_known(np.linspace(foot.x, hang.x, 41), longest).all():
        yield (
            "assumed-piece",
            "no point of the fault is known over more than half the heave between the "
            "cut-offs; it is assumed straight there.",
        )


def _of_bed(problem):
    bed, heave = problem.bed, problem.separation.heave
    spacing = np.diff(bed.x)
    if not len(spacing):
        return
    if spacing[0] > 0.5 * heave:
        yield (
            "horizon-ends-before-fault",
            f"the hanging-wall horizon ends {spacing[0]:.0f} before its cut-off and "
            "was extended over that distance.",
        )
    spacing = spacing[1:]
    if not len(spacing):
        return
    if heave < 2.0 * np.median(spacing):
        yield (
            "small-heave",
            f"the heave of {heave:.0f} is small against the pick spacing of "
            f"{np.median(spacing):.0f}.",
        )
    if spacing.max() > problem.oblique_heave:
        i = int(np.argmax(spacing))
        yield (
            "gap-in-bed",
            f"no picks for {spacing[i]:.0f} beyond x = {bed.x[i + 1]:.0f}, more than a "
            "strip; the bed is straight there by assumption.",
        )


def _of_offsets(problem, solution):
    """Point out steps of the bed where no fault is picked; shadows are not judged."""
    bed, separation, cuts = problem.bed, problem.separation, []
    if solution.blocks is not None:
        # picks at the edge of a shadow belong to its steep side
        blocks, u = solution.blocks.widened(0.1), bed.x - bed.z * problem.tan
        for fault, low, high in zip(blocks.faults, blocks.start, blocks.end):
            inside = bed.x[(u >= low) & (u <= high)]
            x = np.r_[inside, fault.inboard.x, fault.outboard.x]
            cuts.append((x.min(), x.max()))
    for offset in unpicked_offsets(
        bed.x[1:],
        bed.z[1:],
        bed.sigma[1:],
        SMALL_OFFSET * separation.throw,
        LONG_GAP * problem.oblique_heave,
        cuts,
    ):
        way = "down" if offset.size < 0 else "up"
        yield (
            "unpicked-offset",
            f"near x = {offset.x:.0f} the bed steps {way} by {abs(offset.size):.0f} "
            "outwards, more than its slope on both sides and the errors explain, and "
            "no fault is picked there; a subsidiary fault left out makes the master "
            "too deep.",
        )


def _of_subsidiaries(problem, solution):
    """Doubt subsidiary faults in the shear already, and wide shadows."""
    if solution.blocks is None:
        return
    yield from subsidiary_doubts(problem.subsidiaries, problem.model.shear_angle)
    blocks, tan = solution.blocks, problem.tan
    widths = blocks.end - blocks.start
    heaves = problem.oblique_heave + blocks.added[1:]
    for fault, start, width, heave in zip(
        problem.subsidiaries, blocks.start, widths, heaves
    ):
        if width <= heave:
            continue
        at = start + np.interp(start, solution.u, solution.z) * tan
        beyond = (
            f"goes on for {width:.0f}" if np.isfinite(width) else "has no end in reach"
        )
        yield (
            "wide-shadow",
            f"beyond x = {at:.0f} the horizon does not see the master under the "
            f"subsidiary fault '{fault.plane.name}'; that {beyond}, more than the "
            "heave, and the fault across it is assumed straight, or ends there.",
        )


def _of_shear(problem):
    """Doubt planes within 10 degrees of the cut-off dip or the bed."""
    a, bed = problem.model.shear_angle, problem.bed
    if a == 0 or len(bed) < 3:
        return
    slope = np.degrees(np.arctan(np.diff(bed.z) / np.diff(bed.x)))
    if a > 0:
        margin = 90.0 - a - np.percentile(slope, 95)
    else:
        fault_margin = 90.0 + a - problem.separation.cutoff_dip
        margin = min(fault_margin, 90.0 + a + np.percentile(slope, 5))
    if margin < 10.0:
        yield (
            "shear-near-parallel",
            f"the shear planes are within {max(margin, 0):.0f} degrees of the fault or "
            "the bed.",
        )


def _of_compaction(problem):
    if problem.options.compaction is not None and problem.model.shear_angle != 0:
        yield (
            "compaction-approximate",
            "the columns were compacted along the inclined shear lines, while rock "
            "compacts along the vertical: an approximation.",
        )


def _of_trace(solution, trace):
    """Doubt a fault that rises outwards by more than noise, or is very steep.

    Judged over a third of a strip: pick noise wriggles the march over less, and
    grows with the root of the number of strips.
    """
    step = max(1, solution.start // 3)
    first = int(np.argmax(trace.strip > 0))
    x, z, strip = (v[first:] for v in (trace.x, trace.z, trace.strip))
    if len(x) <= step or strip[0] == 0:
        return
    dx, drop = x[step:] - x[:-step], z[:-step] - z[step:]
    noise = np.median(solution.bed.sigma) * np.sqrt(2.0 * strip[step:])
    dip = np.degrees(np.arctan2(drop, dx))
    rising = (dip < -2.0) & (-drop > 3.0 * noise)
    if rising.any():
        at = x[int(np.argmax(rising))]
        yield "fault-rises", f"the predicted fault rises outwards near x = {at:.0f}."
    local = np.degrees(np.arctan2(z[:-1] - z[1:], np.diff(x)))[: len(drop)]
    steep = np.where(drop > 3.0 * noise, np.maximum(dip, local), 0.0)
    if steep.max() > 80.0:
        at = x[int(np.argmax(steep))]
        yield (
            "fault-steep",
            f"the predicted fault dips {steep.max():.0f} degrees near x = {at:.0f}.",
        )


def _of_residuals(problem, solution):
    """Name the picks that miss the fit by more than noise ever does."""
    if solution.detail is None:
        return
    misfit = solution.detail.residuals
    far = np.flatnonzero(np.abs(misfit.standardised) > OUTLIER)
    if not len(far):
        return
    worst = far[np.argsort(-np.abs(misfit.standardised[far]))][:NAMED]
    named = ", ".join(
        f"{misfit.horizon[i]} at x = {misfit.u[i] + misfit.z[i] * problem.tan:.0f} "
        f"({misfit.residual[i]:+.0f}, {abs(misfit.standardised[i]):.0f} sigma)"
        for i in worst
    )
    more = f" and {len(far) - NAMED} more" if len(far) > NAMED else ""
    yield (
        "fit-outliers",
        f"{len(far)} pick(s) miss the fit by more than {OUTLIER:g} sigma: "
        f"{named}{more}.",
    )


def _of_reach(solution, detachment):
    if detachment is None:
        yield (
            "regional-not-reached",
            "the bed is not back at its far position where the picks end; the fault "
            f"goes down to {solution.z[-1]:.0f} at least, its detachment is not "
            "reached.",
        )


def _of_strips(problem, solution):
    strips = int(solution.strip[-1])
    if strips > MANY_STRIPS:
        yield (
            "many-strips",
            f"{strips} strips below the cut-off without a deep tie; errors grow with "
            "every strip.",
        )
    beyond = slice(solution.start, None)
    u, bed_z = solution.u[beyond], solution.bed_z[beyond]
    sigma = np.interp(u, solution.bed.x, solution.bed.sigma)
    # one heave back: a bed over a level detachment ends there, not at R itself
    rise = solution.increment[beyond]
    spread = np.hypot(sigma, problem.regional.sigma_at(u))
    above = rise > 3.0 * spread + 1e-3 * problem.separation.throw
    if above.any():
        at = u[above][0] + bed_z[above][0] * problem.tan
        yield (
            "bed-above-regional",
            f"the bed lies above its regional, moved out by the heave, beyond "
            f"x = {at:.0f}; the fault would rise there.",
        )
