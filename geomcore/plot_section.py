"""What a section figure shows inside its frame: picks, horizons, fault, dimensions."""

from dataclasses import dataclass, field

import numpy as np

from .plot_page import FreePlaces, KeyEntry, clean, nearest_of_box
from .profile import profile_from_picks

__all__ = ["Drawing", "SectionView", "annotate", "draw_section", "number", "view_of"]

# Okabe & Ito (2008), told apart with any kind of colour vision (value from memory);
# the fault keeps vermillion for itself.
FAULT_COLOUR = "#d55e00"
HORIZON_COLOURS = ("#009e73", "#56b4e9", "#cc79a7", "#e69f00", "#0072b2")
GREY = "#6e6e6e"

#: Marker of each kind of pick; further sources of one name take the next shape.
MARKERS = {
    "horizon": ("o", "^", "v", "p", "h"),
    "fault": ("s", "D"),
    "cutoff": ("P", "X"),
    "dip": ("d",),
}
KIND_WORDS = {"horizon": "", "fault": "fault ", "cutoff": "cut-off ", "dip": "dip "}
#: Line styles of the parts of a fault; the lengths are in line widths.
FAULT_STYLES = {
    "known": ("-", 2.2),
    "assumed": ((0, (0.9, 1.3)), 2.2),
    "predicted": ((0, (5.0, 1.8)), 2.0),
    "out of reach": ((0, (1.0, 4.0)), 1.4),
}
REGIONAL_STYLE = (0, (7.0, 3.5))
#: Dimension arrows shorter than this (points) are replaced by one label.
SHORT_ARROW = 14.0
#: Length of the arrow that says that the fault goes on down.
DEEPER_ARROW = 20.0
LABEL_SIZE = 8.0


def number(value, unit=""):
    """Give a number with its unit: whole from 100 on, one decimal below."""
    text = f"{value:.0f}" if abs(value) >= 99.95 else f"{value:.1f}"
    text = text[1:] if text in ("-0", "-0.0") else text
    text = text.replace("-", "\N{MINUS SIGN}")
    unit = "ft" if unit == "us-ft" else unit  # which foot it is stands at the axes
    return f"{text}\N{NO-BREAK SPACE}{unit}" if unit else text


@dataclass(frozen=True, eq=False)
class SectionView:
    """What of one section is shown.

    Parameters
    ----------
    study : Study
    result : SectionResult
    domain : str
        ``depth`` or ``time``.
    picks : Picks
        Of that domain.
    separations : tuple of Separation
        Of that domain.
    horizons : tuple of str
        In the order of their colours, which is the same on all sections.
    exaggeration : float
        Vertical exaggeration of the picture; 1 is true scale.
    """

    study: object
    result: object
    domain: str
    picks: object
    separations: tuple
    horizons: tuple
    exaggeration: float = 1.0

    @property
    def prediction(self):
        """The prediction, or None where there is none in this domain."""
        solved = self.domain == "depth" and self.result.prediction
        return self.result.prediction if solved else None

    @property
    def separation(self):
        """The separation whose heave and throw are drawn, or None."""
        if self.prediction:
            return self.prediction.separation
        wanted = self.study.construction.horizon
        own = [s for s in self.separations if s.horizon == wanted]
        return (own or list(self.separations) or [None])[0]

    @property
    def z_unit(self):
        """Unit of the vertical axis."""
        return self.study.length_unit if self.domain == "depth" else "ms"

    def colour(self, horizon):
        """Colour of a horizon."""
        if horizon not in self.horizons:
            return GREY
        return HORIZON_COLOURS[self.horizons.index(horizon) % len(HORIZON_COLOURS)]


def view_of(study, result, domain="", exaggeration=1.0):
    """Choose what is shown: depth where there is any, else two-way time.

    Parameters
    ----------
    study : Study
    result : SectionResult
    domain : str
        ``depth`` or ``time``; chosen if empty.
    exaggeration : float

    Returns
    -------
    SectionView
    """
    if not domain:
        has_depth = bool(result.prediction) or len(result.picks.of("horizon"))
        domain = "depth" if has_depth or not len(result.picks_time) else "time"
    picks = result.picks if domain == "depth" else result.picks_time
    separations = tuple(
        s.separation for s in result.separations if s.separation.domain == domain
    )
    names = [study.construction.horizon]
    names += [h.name for h in study.construction.further_horizons]
    names += [s.name for s in study.sources if s.role in ("horizon", "cut-off")]
    found = set(picks.name[np.isin(picks.kind, ("horizon", "cutoff"))])
    names += sorted(found | {s.horizon for s in separations}, key=str)
    order = tuple(dict.fromkeys(names))
    return SectionView(study, result, domain, picks, separations, order, exaggeration)


@dataclass(eq=False)
class Drawing:
    """What has been drawn so far: its key, and where data lie.

    Parameters
    ----------
    axes : matplotlib Axes
    view : SectionView
    key : list of KeyEntry
    lines, marks : list of tuple (x, z)
        Data drawn as lines and as markers.
    """

    axes: object
    view: SectionView
    key: list = field(default_factory=list)
    lines: list = field(default_factory=list)
    marks: list = field(default_factory=list)

    def line(self, gid, x, z, label="", **look):
        """Draw a line, with an entry in the key if it has a label."""
        self.lines.append((np.asarray(x, float), np.asarray(z, float)))
        self.axes.plot(x, z, gid=gid, **look)
        self.explain(gid, label, **look)

    def mark(self, gid, x, z, label="", **look):
        """Draw markers, whole ones at the edge of the frame too."""
        look = {"linestyle": "none", "clip_on": False, **look}
        self.marks.append((np.asarray(x, float), np.asarray(z, float)))
        self.axes.plot(x, z, gid=gid, **look)
        look.pop("clip_on")
        self.explain(gid, label, **look)

    def explain(self, gid, label, **look):
        """Put an entry into the key."""
        if label:
            look.pop("zorder", None)
            if "markersize" in look:
                look["markersize"] = max(look["markersize"], 5.0)
            self.key.append(KeyEntry(f"key-{gid}", label, look))

    @property
    def extent(self):
        """Least x, greatest x, least z, greatest z of everything drawn; or None."""
        if not self.lines + self.marks:
            return None
        x, z = (np.concatenate(v) for v in zip(*self.lines, *self.marks))
        x, z = x[np.isfinite(x)], z[np.isfinite(z)]
        if not len(x) or not len(z):
            return None
        return float(x.min()), float(x.max()), float(z.min()), float(z.max())


def draw_section(axes, view, faults=None):
    """Draw everything of a section that does not depend on the size of the frame.

    Parameters
    ----------
    axes : matplotlib Axes
    view : SectionView
    faults : callable, optional
        ``faults(drawing)`` draws other faults instead of the section's own, and
        nothing that follows from it.

    Returns
    -------
    Drawing
    """
    drawing = Drawing(axes, view)
    _draw_picks(drawing)
    _draw_beds(drawing)
    _draw_regional(drawing)
    for draw in (_draw_further, _draw_fault) if faults is None else (faults,):
        draw(drawing)
    _draw_cutoffs(drawing)
    if faults is None:
        _draw_shear_planes(drawing)
    _draw_section_line(drawing)
    _draw_datum(drawing)
    return drawing


# --- picks ---------------------------------------------------------------------------


def _draw_picks(drawing):
    """Draw picks by source: shape for the kind, colour for the horizon."""
    for i, (group, marker) in enumerate(_pick_groups(drawing.view)):
        _draw_group(drawing, f"picks-{i + 1}", group, marker)
    _draw_dips(drawing)
    _explain_left_out(drawing)


def _pick_groups(view):
    """Give the picks of each kind, name and source, with their markers."""
    picks, declared = view.picks, [s.key for s in view.study.sources]
    groups = sorted(
        set(zip(picks.kind, picks.name, picks.source)),
        key=lambda g: (
            list(MARKERS).index(g[0]),
            view.horizons.index(g[1]) if g[1] in view.horizons else 0,
            declared.index(g[2]) if g[2] in declared else len(declared),
            str(g),
        ),
    )
    before = {}
    for kind, name, source in groups:
        n = before[kind, name] = before.get((kind, name), -1) + 1
        # a sixth horizon has the first one's colour again, and another shape
        if name in view.horizons:
            n += view.horizons.index(name) // len(HORIZON_COLOURS)
        mask = (picks.kind == kind) & (picks.name == name) & (picks.source == source)
        yield picks.select(mask), MARKERS[kind][n % len(MARKERS[kind])]


def _draw_group(drawing, gid, group, marker):
    view, known = drawing.view, np.isfinite(group.z)
    colour = FAULT_COLOUR
    if group.kind[0] in ("horizon", "cutoff"):
        colour = view.colour(group.name[0])
    n = len(group)
    look = {
        "marker": marker,
        "color": colour,
        "markersize": 5.0 if n <= 40 else 4.0 if n <= 120 else 2.8,
        "markeredgewidth": 0.8,
    }
    used, hollow = group.used & known, ~group.used & known
    words = _group_words(view, group)
    if used.any() or not hollow.any():
        drawing.mark(gid, group.x[used], group.z[used], words, zorder=4, **look)
        words = ""
    if hollow.any():
        look["markerfacecolor"] = "none"
        x, z = group.x[hollow], group.z[hollow]
        drawing.mark(f"{gid}-left-out", x, z, words, zorder=3.9, **look)


def _group_words(view, group):
    """Name, layer, counts and the largest distance off the line."""
    source = str(group.source[0])
    declared = {s.key: s.layer or s.key for s in view.study.sources}
    known = np.isfinite(group.z)
    left_out, unknown = int((~group.used & known).sum()), int((~known).sum())
    counts = [f"{int((group.used & known).sum())} used"]
    counts += [f"{left_out} left out"] if left_out else []
    counts += [f"{unknown} without a value"] if unknown else []
    off = np.abs(group.off_section[np.isfinite(group.off_section)])
    if off.size and off.max() >= 0.5:
        far = number(off.max(), view.study.length_unit)
        counts.append(f"from up to {far} off the line")
    name = clean(group.name[0])
    name = "" if name == clean(view.study.fault) and group.kind[0] == "fault" else name
    lead = f"{name} {KIND_WORDS[group.kind[0]]}picks".strip()
    layer = clean(declared.get(source, source))
    return f"{lead}{', ' + layer if layer else ''}: {', '.join(counts)}"


def _explain_left_out(drawing):
    """Say what a hollow marker is, with the reasons and their counts."""
    picks = drawing.view.picks
    lost = picks.select(~picks.used & np.isfinite(picks.z))
    if not len(lost):
        return
    reasons = [clean(r) or "no reason given" for r in lost.reason]
    words = ", ".join(f"{reasons.count(r)} {r}" for r in sorted(set(reasons)))
    look = {"marker": "o", "color": GREY, "markersize": 5.0, "linestyle": "none"}
    look["markerfacecolor"] = "none"
    drawing.explain(
        "left-out", f"hollow: left out of the construction ({words})", **look
    )


def _draw_dips(drawing):
    """Draw a short line of the apparent dip through each pick that has one."""
    view = drawing.view
    picks = view.picks.select(np.isfinite(view.picks.dip) & np.isfinite(view.picks.z))
    if not len(picks) or view.domain == "time":
        return
    half = 0.012 * view.result.frame.x_max
    dip = np.radians(picks.dip)
    dx, dz, gap = half * np.cos(dip), half * np.sin(dip), np.full(len(dip), np.nan)
    x = np.column_stack([picks.x - dx, picks.x + dx, gap]).ravel()
    z = np.column_stack([picks.z + dz, picks.z - dz, gap]).ravel()
    words = "apparent dip along transport, at its pick"
    look = {"color": "black", "linewidth": 1.0}
    drawing.line("dips", x, z, zorder=4.2, **look)
    drawing.explain("dips", words, slant=(1.0, -1.2), **look)


# --- horizons ------------------------------------------------------------------------


def _draw_beds(drawing):
    """Draw each horizon as the construction takes it: straight between its picks.

    Without a known fault nothing tells the walls apart, and a line would run across
    the fault; horizons that are predicted have a line of their own.
    """
    view, drawn = drawing.view, False
    if view.domain == "time" or view.result.fault is None:
        return
    predicted = {h.name for h in view.result.horizons if h} if view.prediction else ()
    for i, name in enumerate(view.horizons):
        if name in predicted and name != view.study.construction.horizon:
            continue
        cuts = [s for s in view.separations if s.horizon == name]
        for wall in ("footwall", "hanging wall"):
            x, z = _bed(view.picks, name, wall, cuts)
            if len(x) < 2:
                continue
            gid = f"bed-{i + 1}-{wall.replace(' ', '-')}"
            look = {"color": view.colour(name), "linewidth": 0.8, "zorder": 3}
            drawing.line(gid, x, z, **look)
            drawn = True
    if drawn:
        words = "horizon, straight between its picks and cut-offs"
        drawing.explain("beds", words, color=GREY, linewidth=0.8)


def _bed(picks, name, wall, cuts):
    """Give a horizon in one wall up to its cut-off; picks beyond are left out."""
    profile = profile_from_picks(picks.of("horizon", name, wall))
    if not len(profile) or not cuts:
        return profile.x, profile.z
    if wall == "footwall":
        cut = cuts[0].footwall
        keep = profile.x < cut.x
        return np.r_[profile.x[keep], cut.x], np.r_[profile.z[keep], cut.z]
    cut = cuts[0].hanging_wall
    keep = profile.x > cut.x
    return np.r_[cut.x, profile.x[keep]], np.r_[cut.z, profile.z[keep]]


def _draw_regional(drawing):
    prediction, view = drawing.view.prediction, drawing.view
    if not prediction:
        return
    x = np.array([0.0, view.result.frame.x_max])
    words = f"regional of {clean(prediction.horizon)}"
    look = {"color": view.colour(prediction.horizon), "linestyle": REGIONAL_STYLE}
    z = prediction.regional(x)
    drawing.line("regional", x, z, words, linewidth=1.1, zorder=2.5, **look)


def _draw_further(drawing):
    """Draw the horizons predicted from the fault, with their misfit in the key."""
    view = drawing.view
    if not view.prediction:
        return
    unit = view.z_unit
    for i, horizon in enumerate(h for h in view.result.horizons if h):
        foot, hang = horizon.footwall, horizon.hanging_wall
        words = f"{clean(horizon.name)} predicted from the fault"
        if horizon.misfit_rms is None:
            words += f" ({clean(horizon.misfit_note)})"
        else:
            rms, most = (
                number(horizon.misfit_rms, unit),
                number(horizon.misfit_max, unit),
            )
            words += f": misses {horizon.misfit_n} picks by {rms} rms, {most} at most"
        look = {"color": view.colour(horizon.name), "linewidth": 1.4, "zorder": 3.2}
        x = np.r_[0.0, foot[0], np.nan, horizon.profile.x]
        z = np.r_[horizon.regional(0.0), foot[1], np.nan, horizon.profile.z]
        look["linestyle"] = (0, (6.0, 1.5, 1.0, 1.5))
        drawing.line(f"further-horizon-{i + 1}", x, z, words, **look)
        ends = ([foot[0], hang[0]], [foot[1], hang[1]])
        dots = {"color": look["color"], "marker": ".", "markersize": 5.0}
        drawing.mark(f"further-cutoffs-{i + 1}", *ends, zorder=5, **dots)


# --- the fault -----------------------------------------------------------------------


def _draw_fault(drawing):
    view = drawing.view
    if view.prediction:
        _draw_trace(drawing, view.prediction.trace)
        _draw_envelope(drawing, view.prediction.trace)
        _draw_detachment(drawing)
    elif view.domain == "depth" and view.result.fault is not None:
        fault = view.result.fault
        if len(fault.x) > 1:
            _draw_piece(drawing, "known", fault.x, fault.z)


def _draw_trace(drawing, trace):
    """Draw the parts of the trace; a segment is of the kind of its lower end."""
    of_segment = trace.constrained[1:]
    for state in (*FAULT_STYLES, *sorted(set(of_segment) - set(FAULT_STYLES))):
        own = np.flatnonzero(of_segment == state)
        if not len(own):
            continue
        runs = np.split(own, np.flatnonzero(np.diff(own) > 1) + 1)
        pieces = [np.r_[run, run[-1] + 1] for run in runs]
        x = np.concatenate([np.r_[trace.x[p], np.nan] for p in pieces])[:-1]
        z = np.concatenate([np.r_[trace.z[p], np.nan] for p in pieces])[:-1]
        _draw_piece(drawing, state, x, z)


def _draw_piece(drawing, state, x, z):
    style, width = FAULT_STYLES.get(state, FAULT_STYLES["out of reach"])
    drawing.line(
        f"fault-{state.replace(' ', '-')}",
        x,
        z,
        f"fault, {state}",
        color=FAULT_COLOUR,
        linestyle=style,
        linewidth=width,
        zorder=6,
    )


def _draw_envelope(drawing, trace):
    """Draw one standard deviation either side, no farther than the fault is deep."""
    sigma = trace.sigma_z
    if not np.nanmax(np.nan_to_num(sigma)) > 0:
        return
    reach = max(np.ptp(trace.z), 1e-9)
    wide = bool((np.nan_to_num(sigma) > reach).any())
    sigma = np.minimum(sigma, reach)
    words = "one standard deviation of the fault either side, from the stated errors"
    if wide:
        words += " (wider than drawn in places)"
    look = {"color": FAULT_COLOUR, "linewidth": 0.6, "zorder": 3.1}
    drawing.line("envelope-upper", trace.x, trace.z + sigma, **look)
    drawing.line("envelope-lower", trace.x, trace.z - sigma, **look)
    low, high = trace.z - sigma, trace.z + sigma
    drawing.axes.fill_between(
        trace.x,
        low,
        high,
        color=FAULT_COLOUR,
        alpha=0.08,
        lw=0,
        gid="envelope",
        zorder=1,
    )
    drawing.explain("envelope", words, color=FAULT_COLOUR, linewidth=0.6)


def _draw_detachment(drawing):
    """Draw the detachment level under the last strip."""
    prediction = drawing.view.prediction
    if prediction.detachment_z is None:
        return
    trace, level = prediction.trace, prediction.detachment_z
    x = [trace.x[-1] - abs(prediction.oblique_heave), trace.x[-1]]
    look = {"color": "black", "linewidth": 1.0, "zorder": 6.1}
    drawing.line("detachment", x, [level, level], "detachment level", **look)


def _draw_cutoffs(drawing):
    """Draw the cut-offs of all horizons; their errors lie along the fault."""
    view = drawing.view
    shown = [view.prediction.separation] if view.prediction else []
    have = {s.horizon for s in shown}
    shown += [s for s in view.separations if s.horizon not in have]
    for wall, marker in (("footwall", "<"), ("hanging wall", ">")):
        for i, separation in enumerate(shown):
            cut = separation.footwall if wall == "footwall" else separation.hanging_wall
            gid = f"cutoff-{wall.replace(' ', '-')}-{i + 1}"
            look = {"color": view.colour(separation.horizon), "linewidth": 1.4}
            x, z = cut.x + cut.sigma_x * np.array([-1, 1]), [cut.z] * 2
            if view.domain == "depth":
                z = cut.z - cut.sigma_z * np.array([-1, 1])
            if np.isfinite([*x, *z]).all() and np.ptp(x) + np.ptp(z) > 0:
                drawing.line(f"{gid}-error", x, z, zorder=6.9, **look)
            look = {"color": look["color"], "markerfacecolor": "white", "zorder": 7}
            drawing.mark(gid, [cut.x], [cut.z], marker=marker, markersize=7.0, **look)
        if shown:
            look = {"markerfacecolor": "white", "linestyle": "none", "markersize": 7.0}
            gid = f"cutoff-{wall.replace(' ', '-')}"
            words = f"{wall.replace(' ', '-')} cut-off"
            drawing.explain(gid, words, color=GREY, marker=marker, **look)


def _draw_shear_planes(drawing):
    """Put the direction of the shear planes into the key, as it is on paper."""
    prediction = drawing.view.prediction
    angle = getattr(prediction.model, "shear_angle", 0.0) if prediction else 0.0
    if angle:
        sense = "antithetic" if angle > 0 else "synthetic"
        words = f"shear planes, {abs(angle):g}° from the vertical ({sense})"
        # drawn as steep as it looks in the frame
        slant = (np.tan(np.radians(angle)), drawing.view.exaggeration)
        drawing.explain("shear-planes", words, color=GREY, linewidth=1.2, slant=slant)


# --- the frame itself ----------------------------------------------------------------


def _draw_section_line(drawing):
    """Mark bends of the line at the top, and its ends where data go beyond them."""
    frame = drawing.view.result.frame
    across = drawing.axes.get_xaxis_transform()
    look = {"color": GREY, "linewidth": 0.6, "transform": across, "zorder": 1.5}
    bends = frame.bends_between(0.0, frame.x_max)
    for i, x in enumerate(bends):
        gid = f"bend-{i + 1}"
        drawing.axes.plot([x, x], [0, 1], linestyle=(0, (1, 3)), gid=gid, **look)
    if len(bends):
        # a caret hangs from the top of the frame at each bend
        mark = {"marker": 11, "markersize": 7.0, "linestyle": "none", "color": GREY}
        ones = np.ones(len(bends))
        drawing.axes.plot(bends, ones, transform=across, gid="bends", **mark)
        drawing.explain("bends", "bend of the section line", **mark)
    extent = drawing.extent or (0.0, frame.x_max, 0.0, 0.0)
    tolerance = 1e-6 * frame.x_max
    if extent[0] >= -tolerance and extent[1] <= frame.x_max + tolerance:
        return
    for name, x in (("footwall", 0.0), ("hanging-wall", frame.x_max)):
        gid = f"section-end-{name}"
        drawing.axes.plot([x, x], [0, 1], linestyle="-", gid=gid, **look)
    words = "ends of the section line"
    drawing.explain("section-ends", words, color=GREY, linewidth=0.6)


def _draw_datum(drawing):
    """Draw the datum where it lies in the picture or not far above it."""
    view, extent = drawing.view, drawing.extent
    if extent is None or view.domain == "time":
        return
    low, high = extent[2:]
    if low > 0 or high < -0.3 * (high - low):
        return
    datum = clean(view.study.vertical_datum)
    look = {"color": "#444444", "linewidth": 0.6, "zorder": 1.4}
    ends = [0.0, view.result.frame.x_max]
    drawing.line("datum", ends, [0.0, 0.0], f"elevation 0: {datum}", **look)


# --- what depends on the size of the frame -------------------------------------------


@dataclass(frozen=True, eq=False)
class _Frame:
    """The frame's size on paper and what is free in it."""

    drawing: Drawing
    ruler: object
    free: FreePlaces
    scale_x: float
    scale_z: float

    @property
    def axes(self):
        return self.drawing.axes

    def points(self, x, z):
        """Place in the frame in points."""
        x0, z0 = self.axes.get_xlim()[0], self.axes.get_ylim()[0]
        return (np.asarray(x) - x0) * self.scale_x, (np.asarray(z) - z0) * self.scale_z


def annotate(drawing, ruler, width, height, labels=None):
    """Draw dimensions, bends and labels once the frame has its size.

    Parameters
    ----------
    drawing : Drawing
        On axes whose limits are final.
    ruler : TextRuler
    width, height : float
        Size of the frame in points.
    labels : sequence of tuple (gid, text, x, z), optional
        To be set near these places instead of dimensions and the fault's end.

    Notes
    -----
    A label that finds no room is left out; its number stands above the frame too.
    """
    axes = drawing.axes
    scale = width / np.ptp(axes.get_xlim()), height / np.ptp(axes.get_ylim())
    frame = _Frame(drawing, ruler, FreePlaces(width, height), *scale)
    for x, z in drawing.lines:
        frame.free.take_path(*frame.points(x, z))
    for x, z in drawing.marks:
        frame.free.take_points(*frame.points(x, z))
    if labels is None:
        wanted = [*_dimensions(frame), *_end_of_fault(frame)]
    else:
        wanted = [(gid, text, frame.points(x, z)) for gid, text, x, z in labels]
    for label in wanted:
        _place_label(frame, *label)
    if not drawing.marks:
        middle = 0.5 * width, 0.5 * height
        _place_label(frame, "empty", "no picks with a value on this section", middle)


def _dimensions(frame):
    """Draw heave and throw below and left of the cut-offs; give their labels."""
    view = frame.drawing.view
    separation = view.separation
    if separation is None:
        return
    words = _dimension_words(view, separation)
    foot, hang = separation.footwall, separation.hanging_wall
    (xf, xh), (zf, zh) = frame.points([foot.x, hang.x], [foot.z, hang.z])
    short_heave, short_throw = abs(xh - xf) < SHORT_ARROW, abs(zh - zf) < SHORT_ARROW
    if short_heave and short_throw:
        middle = 0.5 * (xf + xh), 0.5 * (zf + zh)
        yield "heave-throw-label", ", ".join(words), middle
        return
    left, low = max(min(xf, xh) - 9.0, 3.0), max(min(zf, zh) - 9.0, 3.0)
    _extension(frame, "heave", [xf, xf, np.nan, xh, xh], [zf, low, np.nan, zh, low])
    _extension(frame, "throw", [xf, left, np.nan, xh, left], [zf, zf, np.nan, zh, zh])
    _arrow(frame, "dimension-heave", (xf, low), (xh, low), short_heave)
    _arrow(frame, "dimension-throw", (left, zf), (left, zh), short_throw)
    yield "heave-label", words[0], (0.5 * (xf + xh), low)
    yield "throw-label", words[1], (left, 0.5 * (zf + zh))


def _dimension_words(view, separation):
    unit = view.study.length_unit
    name = clean(separation.horizon)
    heave, throw = separation.heave, number(separation.throw, view.z_unit)
    of = f" of {name}" if name != clean(view.study.construction.horizon) else ""
    reverse = " (reverse separation)" if heave < 0 else ""
    timed = " (two-way time)" if view.domain == "time" else ""
    return f"heave{of} {number(heave, unit)}{reverse}", f"throw{of} {throw}{timed}"


def _data(frame, x, z):
    """Back from points to data."""
    x0, z0 = frame.axes.get_xlim()[0], frame.axes.get_ylim()[0]
    return x0 + np.asarray(x) / frame.scale_x, z0 + np.asarray(z) / frame.scale_z


def _extension(frame, name, x, z):
    frame.free.take_path(np.array(x, float), np.array(z, float))
    look = {"color": GREY, "linewidth": 0.5, "zorder": 5}
    at = _data(frame, np.array(x, float), np.array(z, float))
    frame.axes.plot(*at, gid=f"extension-{name}", **look)


def _arrow(frame, gid, start, end, short, style="<|-|>"):
    from matplotlib.patches import FancyArrowPatch

    frame.free.take_path(*zip(start, end))
    at = _data(frame, *zip(start, end))
    look = {"color": "black", "linewidth": 0.9, "zorder": 7.5, "gid": gid}
    look["mutation_scale"] = 3.0 if short else 7.0
    style = "-" if short else style
    patch = FancyArrowPatch(
        *zip(*at), arrowstyle=style, shrinkA=0, shrinkB=0, joinstyle="miter", **look
    )
    frame.axes.add_patch(patch)


def _end_of_fault(frame):
    """Label the detachment, or say that the fault goes on down."""
    view = frame.drawing.view
    prediction = view.prediction
    if not prediction:
        return
    x, z = frame.points(prediction.trace.x[-1], prediction.trace.z[-1])
    if prediction.detachment_z is not None:
        middle = prediction.trace.x[-1] - 0.5 * abs(prediction.oblique_heave)
        level = prediction.detachment_z
        words = f"detachment at {number(level, view.z_unit)}"
        yield "detachment-label", words, frame.points(middle, level)
        return
    _arrow(frame, "deeper", (x, z), (x, z - DEEPER_ARROW), False, "-|>")
    words = f"at least this deep: {number(prediction.deepest_z, view.z_unit)}"
    yield "deeper-label", words, (x, z - 0.5 * DEEPER_ARROW)


def _place_label(frame, gid, text, anchor):
    """Write a label at the nearest free place, if there is one."""
    width, height = frame.ruler.width(text, LABEL_SIZE) + 2.0, LABEL_SIZE * 1.15
    place = frame.free.nearest(width, height, anchor)
    if place is None:
        return
    left, low = place
    x, z = _data(frame, left + 0.5 * width, low + 0.5 * height)
    box = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 0.6}
    frame.axes.text(
        x,
        z,
        frame.ruler.shown(text),
        ha="center",
        va="center_baseline",
        size=LABEL_SIZE,
        family=frame.ruler.families,
        bbox=box,
        gid=gid,
        zorder=9,
    )
    _leader(frame, gid, anchor, left, low, width, height)


def _leader(frame, gid, anchor, left, low, width, height):
    """Join a label that stands far off to what it is about."""
    end = nearest_of_box(anchor, (left, low), width, height)
    if np.hypot(end[0] - anchor[0], end[1] - anchor[1]) < 12.0:
        return
    at = _data(frame, *zip(anchor, end))
    look = {"color": "black", "linewidth": 0.5, "zorder": 8}
    frame.axes.plot(*at, gid=f"{gid}-leader", **look)
