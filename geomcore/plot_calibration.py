"""The figure of a shear-angle calibration: misfit against angle, one panel a way."""

import numpy as np

from .anglecurve import AREA, CUTOFFS, HORIZONS, TIES, read_curve
from .errors import GeomcoreError
from .plot_page import (
    FAMILY,
    KeyEntry,
    TextRuler,
    clean,
    draw_block,
    draw_key,
    layout_key,
    text_block,
)
from .plots import A4_WIDTH, GAP, MARGIN, POINT, QUIET_COLOUR, SMALL, TEXT, TITLE

__all__ = ["calibration_figure"]

#: What each way goes by, over its panel.
WAY_WORDS = {
    HORIZONS: "several horizons, one fault",
    TIES: "deep points on the fault",
    CUTOFFS: "heave against throw, pre-growth horizons",
    AREA: "known detachment and lost area",
}
#: Misfit above the least that is shown; the likelihood is down to 1 in 400 there.
_TOP = 12.0
#: Fall of the likelihood at the ends of the 90 % interval of a parabola.
_NINETY = 2.71
_PANEL_HEIGHT, _AXIS_LEFT, _AXIS_BELOW, _BETWEEN = 210.0, 40.0, 34.0, 26.0
_SETTINGS = {
    "font.family": [FAMILY],
    "svg.fonttype": "none",
    "svg.hashsalt": "heaveline",
    "pdf.fonttype": 42,
}
# Okabe & Ito 2008, values from memory
_JOINT = {"color": "#d55e00", "linewidth": 2.2}
_SINGLE = {"color": "#0072b2", "linewidth": 0.8}
_BAND = {"color": "#f4d6bf", "linewidth": 7.0}


def calibration_figure(study, result, width=A4_WIDTH):
    """Draw the misfit curves of all sections and of all sections together.

    Parameters
    ----------
    study : Study
    result : CalibrationResult
    width : float
        Of the page in inches; it is as high as it needs.

    Returns
    -------
    matplotlib.figure.Figure
        Its artists carry group ids (``way-horizons``, ``section-S1-horizons``,
        ``joint-horizons``, ``interval-horizons``, ...).

    Raises
    ------
    GeomcoreError
        If matplotlib is missing (``no-matplotlib``), or no way was tried
        (``no-calibration``).
    """
    try:
        import matplotlib
        import matplotlib.figure
    except ImportError:
        raise GeomcoreError(
            "no-matplotlib",
            "figures need the Python package matplotlib, which is not installed.",
            "shear angle",
            "Install matplotlib, or run without figures.",
        ) from None
    if not result.joint:
        raise GeomcoreError(
            "no-calibration", "no shear angle was looked for.", "shear angle"
        )
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_SETTINGS)
        figure = matplotlib.figure.Figure(facecolor="white")
        _compose(figure, study, result, width * POINT)
    return figure


def _compose(figure, study, result, wide):
    """Put title, panels, key and words on the page, from the top down."""
    title = f"Shear angle \N{EN DASH} {clean(study.fault)}"
    figure.set_label(title)
    names = " ".join(s.section_id for s in result.sections)
    ruler = TextRuler(clean(f"{title} {names} {_doubt_words(result)}"))
    room = wide - 2 * MARGIN

    def block(gid, text, size=TEXT, **look):
        return text_block(ruler, gid, text, size, room, **look)

    head = block("title", title, TITLE, weight="bold")
    best = block("best", _best_words(result), weight="bold")
    key = layout_key(ruler, _key(result), room, SMALL)
    words = block("words", _way_words(result), SMALL)
    doubts = block("doubts", _doubt_words(result), SMALL, colour="#9c3d00")
    note = block("note", _NOTE, SMALL, colour=QUIET_COLOUR)
    below = [b for b in (words, doubts, note) if b.lines]
    frame = _BETWEEN + _PANEL_HEIGHT + _AXIS_BELOW
    high = 2 * MARGIN + head.height + best.height + frame + key.height
    high += sum(b.height + GAP for b in below) + GAP
    figure.set_size_inches(wide / POINT, high / POINT)
    page = figure.add_axes((0, 0, 1, 1), gid="page", zorder=-1)
    page.set_axis_off()
    page.set(xlim=(0, wide), ylim=(0, high))
    y = draw_block(page, ruler, head, MARGIN, high - MARGIN)
    y = draw_block(page, ruler, best, MARGIN, y) - _BETWEEN
    _panels(figure, page, ruler, result, (MARGIN, y, room), (wide, high))
    y = draw_key(page, ruler, key, MARGIN, y - _PANEL_HEIGHT - _AXIS_BELOW)
    for own in below:
        y = draw_block(page, ruler, own, MARGIN, y - GAP)


_NOTE = (
    "Misfit above its least: the difference between two angles is twice the log of "
    "their likelihood ratio. The dashed line is where a parabola leaves its 90 % "
    "interval. Curves of independent sections add up."
)


def _best_words(result):
    if result.best is None:
        return "The data do not tell the shear angle."
    return f"{result.best.text} (by {WAY_WORDS[result.best.way]})"


def _way_words(result):
    return [
        clean(f"{WAY_WORDS[e.way][:1].upper()}{WAY_WORDS[e.way][1:]}: {e.text}")
        for e in result.joint
    ]


def _doubt_words(result):
    """Each doubt once, with its place."""
    return list(dict.fromkeys(clean(str(d)) for d in result.all_doubts))


def _key(result):
    single = KeyEntry("key-section", "one section", _SINGLE)
    band = KeyEntry("key-interval", "90 % interval", {**_BAND})
    joint = KeyEntry("key-joint", "all sections together", _JOINT)
    return [single, joint, band] if len(result.sections) > 1 else [joint, band]


def _panels(figure, page, ruler, result, place, size):
    """Draw one panel a way, side by side."""
    left, top, room = place
    count = len(result.joint)
    step = (room + _BETWEEN) / count
    for i, joint in enumerate(result.joint):
        x = left + i * step + _AXIS_LEFT
        width = step - _BETWEEN - _AXIS_LEFT
        box = (
            x / size[0],
            (top - _PANEL_HEIGHT) / size[1],
            width / size[0],
            _PANEL_HEIGHT / size[1],
        )
        axes = figure.add_axes(box, gid=f"way-{joint.way}")
        _panel(axes, ruler, result, joint, label=i == 0)
        words = ruler.shortened(WAY_WORDS[joint.way], TEXT, width)
        page.text(
            x,
            top + 6.0,
            ruler.shown(words),
            size=TEXT,
            family=ruler.families,
            gid=f"title-{joint.way}",
        )


def _panel(axes, ruler, result, joint, label):
    way = joint.way
    shown = [joint]
    for section in result.sections:
        own = section.by(way)
        if own is not None and own.best is not None:
            shown.append(own)
            if len(result.sections) > 1:
                gid = f"section-{section.section_id}-{way}"
                axes.plot(*_curve(own), gid=gid, zorder=3, **_SINGLE)
    if joint.best is not None:
        axes.axvspan(
            joint.low,
            joint.high,
            color=_BAND["color"],
            linewidth=0,
            zorder=1,
            gid=f"interval-{way}",
        )
        axes.plot(*_curve(joint), gid=f"joint-{way}", zorder=4, **_JOINT)
    else:
        axes.text(
            0.5,
            0.5,
            "not resolved",
            transform=axes.transAxes,
            ha="center",
            size=TEXT,
            family=ruler.families,
            gid=f"nothing-{way}",
        )
    _dress(axes, ruler, shown, label)


def _curve(estimate):
    """Misfit above its least at close angles."""
    at = np.linspace(estimate.angles[0], estimate.angles[-1], 801)
    chi2 = read_curve(estimate.angles, estimate.chi2, at)
    least = chi2.min()
    keep = np.isfinite(chi2) & (chi2 - least < 3.0 * _TOP)
    return at[keep], chi2[keep] - least


def _dress(axes, ruler, shown, label):
    """Set the limits to where the curves are low, ticks and axis titles."""
    ends = [_curve(e) for e in shown if e.best is not None]
    low = min((x[z < _TOP].min() for x, z in ends), default=-35.0)
    high = max((x[z < _TOP].max() for x, z in ends), default=50.0)
    spare = 0.05 * max(high - low, 2.0)
    axes.set(xlim=(low - spare, high + spare), ylim=(-0.3, _TOP))
    axes.axhline(_NINETY, color="#777777", linewidth=0.7, linestyle=(0, (4, 3)))
    axes.set_xlabel("Shear angle (degrees, positive antithetic)")
    if label:
        axes.set_ylabel("Misfit above its least")
    for axis in (axes.xaxis, axes.yaxis):
        axis.label.set(size=TEXT, family=ruler.families, gid=f"{axis.axis_name}-label")
    axes.tick_params(labelsize=8.0, length=3.5, width=0.7, top=True, right=True)
    axes.grid(color="#e6e6e6", linewidth=0.5)
    axes.set_axisbelow(True)
