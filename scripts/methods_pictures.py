"""The figures of the methods page: what each method does, and how it was verified."""

import matplotlib
import numpy as np
from matplotlib.figure import Figure
from methods_cases import (
    FIT_CASE,
    FIT_HEAVE,
    FIT_NOISE,
    FIT_PICKS,
    LISTRIC,
    SAGGED,
    assumed,
    by_strip,
    case_of,
    circle,
    compacted,
    noisy_runs,
    round_trip,
    shown,
    turns,
)

from geomcore.kinematics import ConstantHeave
from geomcore.profile import line_through
from geomcore.sliplines import slide_along, slip_line_horizon

FAULT, BED, OTHER, GREY = "#d55e00", "#009e73", "#0072b2", "#6e6e6e"
#: Everything is drawn with settings of its own, so that the files stay the same.
_SETTINGS = {"font.size": 7.5, "axes.linewidth": 0.6, "lines.linewidth": 1.2}
_SIZE, _DPI = (7.0, 2.7), 100


def _axes(count=1, equal=True):
    figure = Figure(figsize=_SIZE, layout="constrained", facecolor="white")
    axes = np.atleast_1d(figure.subplots(1, count))
    for own in axes:
        own.tick_params(labelsize=7, width=0.5)
        own.grid(color="#e6e6e6", linewidth=0.5)
        if equal:
            own.set_aspect("equal")
            own.set(xlabel="x (m)", ylabel="z (m)")
    return figure, axes


def save(figure, path):
    """Write a figure as PNG without dates or program names."""
    figure.savefig(path, dpi=_DPI, metadata={"Software": None})


def drawn(make, *arguments):
    """Make a figure with our own settings only."""
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_SETTINGS)
        return make(*arguments)


# ---- column models ------------------------------------------------------------------


def model_picture(model):
    """Draw columns before and after the fault moved, for each instance shown."""
    instances = shown(model)
    figure, axes = _axes(len(instances))
    for own, instance in zip(axes, instances):
        _columns(own, instance, case_of(model))
        own.set_title(instance.label, fontsize=8)
    return figure


def _columns(axes, model, case):
    x, z = case.points(10.0, 12000.0)
    bed, foot, hang = case.forward(model)
    tan = np.tan(np.radians(model.shear_angle))
    level = case.regional
    axes.plot(x, z, color=FAULT)
    axes.plot([-1200.0, foot[0]], [level, level], color=BED)
    axes.plot([foot[0], 8000.0], [level, level], color=BED, lw=0.8, ls=(0, (6, 3)))
    keep = bed.x < 8000.0
    axes.plot(bed.x[keep], bed.z[keep], color=BED)
    axes.plot(*zip(foot, hang), ".", color="black", ms=4)
    _moved_columns(axes, model, case, (x - z * tan, z), foot[0] - level * tan)
    axes.set(xlim=(-1200.0, 8000.0), ylim=(case.detachment - 250.0, 500.0))


def _moved_columns(axes, model, case, fault, start):
    """Draw some columns as they stood and as they stand now, with the feet's way."""
    fu, fz = fault
    tan = np.tan(np.radians(model.shear_angle))
    # many more than are drawn: a model may integrate its arrivals outwards
    u = np.linspace(start, start + 7000.0, 1401)
    moved = model.arrival(u, lambda v: np.interp(v, fu, fz), 0.0, case.displacement)
    for i in range(120, 1100, 240):
        before, after = np.interp([u[i], moved[i]], fu, fz)
        top = case.regional + after - before
        for v, low, high, look in (
            (u[i], before, case.regional, {"color": GREY, "ls": (0, (3, 2))}),
            (moved[i], after, top, {"color": OTHER}),
        ):
            ends = np.array([low, high])
            axes.plot(v + ends * tan, ends, lw=1.0, **look)
        way = {"arrowstyle": "-|>", "color": "black", "lw": 0.7}
        tip = (moved[i] + after * tan, after)
        axes.annotate(
            "", tip, (u[i] + before * tan, before), arrowprops={**way, "shrinkB": 0}
        )


def model_check(model):
    """Draw the error of the round trip along the fault, in % of its depth."""
    figure, (axes,) = _axes(1, equal=False)
    instances = shown(model)
    if hasattr(model, "ANGLE_BOUNDS"):
        instances = tuple(model(a) for a in (-15.0, 0.0, 20.0, 30.0, 45.0))
    for instance in instances:
        x, miss, depth = round_trip(instance)
        # the largest error so far: the errors themselves change sign all the time
        worst = np.maximum.accumulate(np.abs(miss)) / depth * 100.0
        axes.semilogy(x, np.maximum(worst, 1e-7), label=instance.label)
    axes.axhline(0.2, color="black", ls=(0, (6, 3)), lw=0.8, label="0.2 %")
    axes.set(xlabel="x (m)", ylabel="largest error up to x (% of depth)")
    axes.set(ylim=(1e-7, 1.0), title="Fault marched from the bed the model made")
    axes.legend(fontsize=6.5, ncols=2, loc="lower right")
    return figure


# ---- slip lines ---------------------------------------------------------------------


def slip_picture():
    """Draw slip lines over a listric fault and the horizon they make."""
    figure, (axes,) = _axes()
    x, z = LISTRIC.points(60.0, 12000.0)
    axes.plot(x, z, color=FAULT)
    for height in (500.0, 1000.0, 1500.0):
        steps = np.arange(0.0, 5200.0, 100.0)
        up = np.array([np.sin(np.radians(60.0)), np.cos(np.radians(60.0))])
        start = np.array([x[3], z[3]]) + height * up
        way = np.array([slide_along(x, z, [start], s)[0] for s in steps])
        axes.plot(*way.T, color=GREY, lw=0.7, ls=(0, (4, 2)))
    level = line_through(0.0, LISTRIC.regional, 0.0)
    bed, _ = slip_line_horizon(x, z, level, LISTRIC.displacement, 7000.0)
    axes.plot([-1200.0, 308.0], [LISTRIC.regional] * 2, color=BED)
    axes.plot(bed.x, bed.z, color=BED)
    axes.axhline(LISTRIC.regional, color=BED, lw=0.8, ls=(0, (6, 3)))
    axes.set(xlim=(-1200.0, 8000.0), ylim=(-4250.0, 500.0))
    axes.set_title("lines parallel to the fault, 500 m apart", fontsize=8)
    return figure


def slip_check():
    """Draw the turn of particles on a circular fault beside slip over radius."""
    figure, axes = _axes(2, equal=False)
    height, turned, wanted = turns()
    axes[0].plot(height, wanted, color=GREY, label="slip / radius")
    axes[0].plot(height, turned, "o", color=OTHER, ms=4, label="particles")
    axes[0].set(xlabel="height over the fault (m)", ylabel="turn (degrees)")
    axes[0].legend(fontsize=6.5)
    x, z = circle(n=200)
    axes[1].plot(x, z, color=FAULT)
    axes[1].set_aspect("equal")
    start = np.radians(205.0)
    unit = np.array([np.cos(start), np.sin(start)])
    for h in height[[1, 3, 5]]:
        way = [
            slide_along(x, z, [(5000.0 - h) * unit], s)[0]
            for s in np.linspace(0.0, 900.0, 12)
        ]
        axes[1].plot(*np.array(way).T, ".-", color=OTHER, ms=3, lw=0.8)
    axes[1].set(xlabel="x (m)", ylabel="z (m)", xlim=(-5200, 0), ylim=(-5200, -700))
    return figure


# ---- the fit ------------------------------------------------------------------------


def fit_picture():
    """Draw one noisy survey marched and fitted."""
    figure, axes = _axes(2, equal=False)
    fits, stated, marches = noisy_runs(1)
    nodes = np.arange(fits.shape[1]) * FIT_HEAVE / 10
    picks = np.arange(marches.shape[1]) * FIT_HEAVE / FIT_PICKS
    truth = FIT_CASE.fault(nodes)
    axes[0].plot(nodes, truth, color=GREY, lw=2.5, label="truth")
    axes[0].plot(picks, FIT_CASE.fault(picks) + marches[0], color=OTHER, label="march")
    axes[0].plot(nodes, truth + fits[0], color=FAULT, label="fit")
    axes[0].set(xlabel="x (m)", ylabel="z (m)", title="one survey, 10 m pick noise")
    axes[0].legend(fontsize=6.5)
    axes[1].axhline(0.0, color=GREY, lw=0.8)
    axes[1].plot(picks, marches[0], color=OTHER, lw=0.6)
    axes[1].plot(nodes, fits[0], color=FAULT)
    band = 1.2816 * stated[0]
    axes[1].fill_between(nodes, fits[0] - band, fits[0] + band, color=FAULT, alpha=0.2)
    axes[1].set(xlabel="x (m)", ylabel="error (m)", title="with the fit's 80 % band")
    axes[1].set(xlim=(0.0, 6.0 * FIT_HEAVE), ylim=(-60.0, 60.0))
    return figure


def fit_check():
    """Draw the error of march and fit by strip, and what the fit states."""
    figure, (axes,) = _axes(1, equal=False)
    fits, stated, marches = noisy_runs()
    strip = np.arange(1, 11)
    march, fit = by_strip(marches, FIT_PICKS), by_strip(fits, 10)
    axes.plot(strip, march, "s-", color=OTHER, ms=4, label="march")
    grown = FIT_NOISE * np.sqrt(strip)
    axes.plot(
        strip,
        grown,
        color=OTHER,
        lw=0.7,
        ls=(0, (3, 2)),
        label="noise x root of strips",
    )
    axes.plot(strip, fit, "o-", color=FAULT, ms=4, label="fit")
    axes.plot(
        strip,
        by_strip(stated, 10),
        color=FAULT,
        lw=0.7,
        ls=(0, (3, 2)),
        label="fit, as it states itself",
    )
    axes.set(xlabel="strip below the hanging-wall cut-off", ylabel="rms error (m)")
    axes.set(title=f"{len(fits)} surveys, 10 m pick noise", ylim=(0.0, None))
    axes.legend(fontsize=6.5)
    return figure


# ---- the assumed arc ----------------------------------------------------------------


def arc_picture():
    """Draw what is assumed below a fault trace, beside a straight continuation."""
    figure, (axes,) = _axes()
    section, _ = assumed(20.0)
    x, z = LISTRIC.points(20.0, 6000.0)
    shift = 5000.0  # the section starts there
    fault, cut = section.fault, section.prediction.separation.hanging_wall
    axes.plot(x, z, color=GREY, lw=2.5, label="truth")
    axes.plot(fault.x - shift, fault.z, ".-", color=FAULT, ms=3, label="assumed arc")
    straight = np.array([0.0, 1600.0])
    down = -np.tan(np.radians(LISTRIC.dip)) * straight
    axes.plot(straight, down, color=OTHER, ls=(0, (5, 2)), label="straight on")
    bed, _, _ = LISTRIC.forward(ConstantHeave(20.0))
    keep = bed.x < 4000.0
    axes.plot(bed.x[keep], bed.z[keep], color=BED, label="bed")
    axes.plot([-1200.0, 308.0], [LISTRIC.regional] * 2, color=BED)
    axes.plot(cut.x - shift, cut.z, ">", color="black", ms=5, label="cut-off found")
    axes.set(xlim=(-1200.0, 4000.0), ylim=(-2700.0, 200.0))
    axes.legend(fontsize=6.5, loc="upper right")
    return figure


def arc_check():
    """Draw the heave found over the true heave against the shear angle."""
    figure, (axes,) = _axes(1, equal=False)
    angles = np.arange(-10.0, 41.0, 10.0)
    shares = []
    for angle in angles:
        section, heave = assumed(angle)
        shares.append(section.prediction.separation.heave / heave)
    axes.axhline(1.0, color=GREY, lw=0.8)
    axes.plot(angles, shares, "o-", color=FAULT, ms=4)
    axes.axhspan(0.9, 1.1, color=GREY, alpha=0.12)
    axes.set(xlabel="shear angle (degrees from the vertical)", ylim=(0.8, 1.2))
    axes.set(ylabel="heave found / true", title="fault known at its trace only")
    return figure


# ---- compaction ---------------------------------------------------------------------


def compaction_picture():
    """Draw a bed that compacted as it sank, and the same without compaction."""
    figure, (axes,) = _axes()
    *_, bed, stiff = compacted()
    x, z = SAGGED.points(20.0, 8000.0)
    axes.plot(x, z, color=FAULT, label="fault")
    axes.plot(stiff.x, stiff.z, color=GREY, label="bed of stiff columns")
    axes.plot(bed.x, bed.z, color=BED, label="bed of shale columns")
    level = [SAGGED.regional] * 2
    axes.plot([-1200.0, 8000.0], level, color=BED, lw=0.8, ls=(0, (6, 3)))
    axes.set(xlim=(-1200.0, 8000.0), ylim=(-4250.0, 300.0))
    axes.legend(fontsize=6.5, loc="lower left")
    return figure


def compaction_check():
    """Draw the fault found with and without compaction beside the true one."""
    figure, (axes,) = _axes()
    x, truth, kept, ignored, _, _ = compacted()
    axes.plot(x, truth, color=GREY, lw=3.0, label="truth")
    axes.plot(x, kept, color=FAULT, label="found with compaction")
    axes.plot(x, ignored, color=OTHER, ls=(0, (5, 2)), label="compaction ignored")
    axes.set(xlim=(0.0, 11000.0), ylim=(-5200.0, -1500.0))
    axes.legend(fontsize=6.5)
    return figure
