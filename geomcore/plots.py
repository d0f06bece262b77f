"""Section figures: one clear page per section, for PNG, SVG and PDF.

The page is put together here; `plot_section` draws what lies inside the frame,
`plot_words` says what stands round it, `plot_page` sets the text.
"""

import io
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from .errors import GeomcoreError
from .plot_page import (
    FAMILY,
    TextRuler,
    TextTable,
    clean,
    draw_block,
    draw_key,
    draw_table,
    layout_key,
    text_block,
)
from .plot_section import annotate, draw_section, view_of
from .plot_words import (
    caution_words,
    end_words,
    line_words,
    method_words,
    note_words,
    run_words,
    scale_words,
    status_words,
    title_words,
    unit_words,
    warning_words,
)
from .units import LENGTH_UNITS

__all__ = [
    "FORMATS",
    "FigureOptions",
    "Page",
    "page_figure",
    "save_section_figure",
    "section_figure",
]

FORMATS = ("png", "svg", "pdf")
#: A4 landscape in inches.
A4_WIDTH, A4_HEIGHT = 297.0 / 25.4, 210.0 / 25.4
POINT = 72.0  # points in an inch

# Sizes of type in points; nothing is smaller than 7.5, to be read on paper.
TITLE, TEXT, SMALL = 14.0, 8.5, 7.5
# Room round the frame in points.
MARGIN, AXIS_LEFT, AXIS_RIGHT, AXIS_BELOW, ENDS_ABOVE = 28.0, 46.0, 16.0, 36.0, 32.0
GAP = 7.0
#: Room inside the frame above and below the data: markers, dimensions, last arrow.
ROOM_ABOVE, ROOM_BELOW = 16.0, 34.0
LEAST_FRAME, TIME_FRAME = 130.0, 290.0
WARNING_COLOUR, QUIET_COLOUR = "#9c3d00", "#555555"
_MANTISSAS = (1.0, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 3.5, 4.0, 4.5, 5.0, 6.0, 7.0, 8.0)
_MANTISSAS += (9.0, 10.0)
#: Settings of our own, so that a matplotlib style of the user changes nothing.
_SETTINGS = {
    "font.family": [FAMILY],
    "svg.fonttype": "none",  # text stays text
    "svg.hashsalt": "heaveline",  # the same figure gives the same file
    "pdf.fonttype": 42,
    "path.simplify": False,
}


@dataclass(frozen=True)
class FigureOptions:
    """How a section is shown.

    Parameters
    ----------
    vertical_exaggeration : float
        1 is true scale; anything else is stated on the figure.
    domain : str
        ``depth`` or ``time``; empty takes depth where the section has any.
    width, height : float
        Page in inches, A4 landscape unless given. The width is kept; the page is as
        high as it needs, `height` at most unless its words alone need more.
    run_id : str
        Name of the run, for the foot of the page.
    made_with : str
        Program and version, and the date if it is wanted.
    doubts : tuple of Doubt
        Of the study as a whole, to be listed with the section's own.
    """

    vertical_exaggeration: float = 1.0
    domain: str = ""
    width: float = A4_WIDTH
    height: float = A4_HEIGHT
    run_id: str = ""
    made_with: str = ""
    doubts: tuple = ()

    @classmethod
    def of_run(cls, run, **more):
        """Take name and doubts of a run; other options by name."""
        return cls(run_id=run.run_id, doubts=tuple(run.doubts), **more)

    def __post_init__(self):
        ve = self.vertical_exaggeration
        if not 0.05 <= ve <= 100.0:
            _refuse(f"the vertical exaggeration is {ve}.", "Give 0.05 to 100.")
        if self.domain not in ("", "depth", "time"):
            _refuse(f"the domain is '{self.domain}'.", "Give depth, time or nothing.")
        if not (self.width >= 6.0 and self.height >= 4.0):
            _refuse("the page is too small.", "Give 6 by 4 inches or more.")


def _refuse(reason, remedy, code="bad-figure"):
    raise GeomcoreError(code, reason, "section figure", remedy) from None


def _matplotlib():
    """Import matplotlib, or say that it is missing."""
    try:
        import matplotlib
        import matplotlib.figure
    except ImportError:
        _refuse(
            "figures need the Python package matplotlib, which is not installed.",
            "Install matplotlib, or run without figures.",
            "no-matplotlib",
        )
    return matplotlib


def section_figure(study, section_result, options=None):
    """Draw one section, solved or not.

    The footwall is on the left. At true scale the section fills the page at a round
    scale; for two-way times the vertical scale is free.

    Parameters
    ----------
    study : Study
    section_result : SectionResult
    options : FigureOptions, optional

    Returns
    -------
    matplotlib.figure.Figure
        Its artists carry group ids (``fault-known``, ``picks-1``, ``regional``,
        ``dimension-heave``, ``caution-1``, ...), which are the ids in the SVG too.

    Raises
    ------
    GeomcoreError
        If matplotlib is missing (code ``no-matplotlib``).
    """
    options = options or FigureOptions()
    ve = options.vertical_exaggeration
    _matplotlib()
    view = view_of(study, section_result, options.domain, ve)
    return page_figure(view, options)


@dataclass(frozen=True)
class Page:
    """What stands on a page; a section figure unless said otherwise.

    Parameters
    ----------
    faults : callable, optional
        As for `draw_section`.
    labels : sequence, optional
        As for `annotate`.
    title : str
        Added to the title.
    above, below : callable, optional
        ``above(block)`` and ``below(block, ruler, width)`` give the blocks between
        title and frame, and those between key and cautions.
    """

    faults: object = None
    labels: object = None
    title: str = ""
    above: object = None
    below: object = None


def page_figure(view, options, page=None):
    """Put a section on a page at a round scale.

    Parameters
    ----------
    view : SectionView
    options : FigureOptions
    page : Page, optional

    Returns
    -------
    matplotlib.figure.Figure
    """
    matplotlib, page = _matplotlib(), page or Page()
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(_SETTINGS)
        figure = matplotlib.figure.Figure(facecolor="white")
        figure.set_label(title_words(view) + page.title)
        axes = figure.add_axes((0.1, 0.1, 0.8, 0.8), gid="section")
        drawing = draw_section(axes, view, page.faults)
        ruler = TextRuler(_all_names(view, options))
        texts = _texts(view, options, ruler, drawing.key, page)
        frame = _size_frame(view, drawing.extent, options, texts)
        _compose(figure, drawing, ruler, texts, frame, options, page.labels)
    return figure


def _all_names(view, options):
    """Every name that users give, for finding fonts that have their letters."""
    study = view.study
    names = [study.name, study.fault, study.vertical_datum, study.crs]
    names += [*view.horizons, view.result.frame.section_id, options.made_with]
    names += [s.layer + s.key + s.name for s in study.sources]
    names += [*view.picks.name, *view.picks.source, *view.picks.reason]
    names += [h.name for h in view.result.horizons if h]
    return clean(" ".join(map(str, [*names, status_words(view)])))


@dataclass(frozen=True)
class _Texts:
    """The blocks of text above and below the frame, and the key."""

    above: tuple
    key: object
    below: tuple

    @property
    def height(self):
        """Height in points, gaps included."""
        below = [b for b in (self.key, *self.below) if b.height]
        return sum(b.height for b in (*self.above, *below)) + GAP * (len(below) + 1)


def _texts(view, options, ruler, entries, page):
    width = options.width * POINT - 2 * MARGIN

    def block(gid, text, size=TEXT, **look):
        return text_block(ruler, gid, text, size, width, **look)

    loud, quiet = {"colour": WARNING_COLOUR}, {"colour": QUIET_COLOUR}
    warnings = warning_words(view, options.doubts)
    run = run_words(view, options.run_id, options.made_with)
    method = (block("method", method_words(view)),)
    notes = (block("notes", note_words(view), SMALL),)
    above = (
        block("title", title_words(view) + page.title, TITLE, weight="bold"),
        block("status", status_words(view), weight="bold", **loud),
        *(page.above(block) if page.above else method),
        block("line", line_words(view)),
    )
    below = (
        *(page.below(block, ruler, width) if page.below else notes),
        block("warnings", warnings, SMALL, **loud),
        block("caution", caution_words(view), SMALL, style="italic"),
        block("run", run, SMALL, **quiet),
    )
    return _Texts(above, layout_key(ruler, entries, width, SMALL), below)


@dataclass(frozen=True)
class _FrameSize:
    """Limits of the axes, size of the frame in points, horizontal scale 1:ratio."""

    x: tuple
    z: tuple
    width: float
    height: float
    ratio: float


def _size_frame(view, extent, options, texts):
    """Choose the round scale at which the section fills what is left of the page."""
    x, z = _limits(view, extent)
    span_x, span_z = x[1] - x[0], z[1] - z[0]
    wide = options.width * POINT - 2 * MARGIN - AXIS_LEFT - AXIS_RIGHT
    high = options.height * POINT - 2 * MARGIN - texts.height - AXIS_BELOW - ENDS_ABOVE
    high = max(high - 2 * SMALL * 1.3, LEAST_FRAME)  # the scale takes two lines at most
    room = high - ROOM_ABOVE - ROOM_BELOW
    per_unit = POINT / 0.0254 * LENGTH_UNITS[view.study.length_unit]
    if view.domain == "time":
        ratio = _round_ratio(span_x / wide * per_unit)
        height = min(high, TIME_FRAME)
        points_z = (height - ROOM_ABOVE - ROOM_BELOW) / span_z
    else:
        ve = view.exaggeration
        ratio = _round_ratio(max(span_x / wide, span_z * ve / room) * per_unit)
        points_z = ve * per_unit / ratio
        height = max(span_z * points_z + ROOM_ABOVE + ROOM_BELOW, LEAST_FRAME)
    spare = height - span_z * points_z - ROOM_ABOVE - ROOM_BELOW
    low = z[0] - (ROOM_BELOW + 0.5 * spare) / points_z
    limits = low, low + height / points_z
    return _FrameSize(x, limits, span_x * per_unit / ratio, height, ratio)


def _limits(view, extent):
    """Range of x (the whole section line at least) and of z."""
    x_max = view.result.frame.x_max
    if extent is None:  # nothing to show but the line itself
        return (0.0, x_max), (-0.2 * x_max, 0.0)
    x = min(0.0, extent[0]), max(x_max, extent[1])
    least = 0.02 * x_max if view.domain == "depth" else 1.0
    return x, (min(extent[2], extent[3] - least), extent[3])


def _round_ratio(least):
    """Give the next round number of a scale 1:n."""
    power = 10.0 ** np.floor(np.log10(least))
    return float(next(m for m in _MANTISSAS if m * power >= least * (1 - 1e-9)) * power)


def _compose(figure, drawing, ruler, texts, frame, options, labels):
    """Put words, frame and key on the page, from the top down."""
    view, wide = drawing.view, options.width * POINT
    words = scale_words(view, frame.ratio, options.width * 25.4)
    scale = text_block(ruler, "scale", words, SMALL, wide - 2 * MARGIN)
    high = 2 * MARGIN + texts.height + scale.height
    high += ENDS_ABOVE + frame.height + AXIS_BELOW
    figure.set_size_inches(wide / POINT, high / POINT)
    page = _page(figure, wide, high)
    y = high - MARGIN
    for block in texts.above:
        y = draw_block(page, ruler, block, MARGIN, y)
    y -= GAP + ENDS_ABOVE + frame.height
    left = MARGIN + AXIS_LEFT
    left += 0.5 * (wide - MARGIN - AXIS_RIGHT - left - frame.width)
    box = (left / wide, y / high, frame.width / wide, frame.height / high)
    _dress_axes(drawing.axes, view, frame, box, ruler)
    _draw_ends(page, view, ruler, (left, left + frame.width), y + frame.height)
    annotate(drawing, ruler, frame.width, frame.height, labels)
    y = draw_block(page, ruler, scale, MARGIN, y - AXIS_BELOW)
    if texts.key.height:
        y = draw_key(page, ruler, texts.key, MARGIN, y - GAP)
    for block in (b for b in texts.below if b.lines):
        draw = draw_table if isinstance(block, TextTable) else draw_block
        y = draw(page, ruler, block, MARGIN, y - GAP)


def _page(figure, wide, high):
    """Axes over the whole page, in points."""
    page = figure.add_axes((0, 0, 1, 1), gid="page", zorder=-1)
    page.set_axis_off()
    page.set(xlim=(0, wide), ylim=(0, high))
    return page


def _dress_axes(axes, view, frame, box, ruler):
    """Set limits, aspect, ticks and axis titles."""
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    axes.set_position(box)
    axes.set(xlim=frame.x, ylim=frame.z)
    time = view.domain == "time"
    axes.set_aspect("auto" if time else view.exaggeration, adjustable="box")
    unit = unit_words(view)
    axes.set_xlabel(f"x along transport, from the footwall end of the line ({unit})")
    axes.set_ylabel("Two-way time (ms)" if time else f"Elevation ({unit})")
    sign = -1.0 if time else 1.0
    steps = [1, 2, 2.5, 5, 10]
    for axis, span, room in (
        (axes.xaxis, frame.width, 46.0),
        (axes.yaxis, frame.height, 25.0),
    ):
        bins = max(int(span / room), 2)
        axis.set_major_locator(MaxNLocator(bins, steps=steps, min_n_ticks=2))
        axis.label.set(size=TEXT, family=ruler.families, gid=f"{axis.axis_name}-label")
    axes.xaxis.set_major_formatter(FuncFormatter(lambda v, _: _tick(v)))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda v, _: _tick(sign * v)))
    axes.tick_params(labelsize=8.0, length=3.5, width=0.7, top=True, right=True)
    axes.grid(color="#e6e6e6", linewidth=0.5)
    axes.set_axisbelow(True)


def _tick(value):
    """Write a tick without needless digits."""
    text = f"{value:.6g}" if abs(value) < 1e6 else f"{value:.0f}"
    return "0" if text == "-0" else text.replace("-", "\N{MINUS SIGN}")


def _draw_ends(page, view, ruler, ends, top):
    """Write name, bearing and side over both ends of the frame."""
    sizes = ((10.5, "bold"), (9.0, "bold"), (SMALL, "normal"))
    name = ruler.shortened(clean(view.result.frame.section_id), 10.5, 150.0, "bold")
    lines = [(name + mark, point, side) for mark, point, side in end_words(view)]
    need = sum(
        max(ruler.width(t, s, w) for t, (s, w) in zip(part, sizes)) for part in lines
    )
    # on a narrow frame they stand back to back outside its ends
    inwards = need + 20.0 < ends[1] - ends[0]
    for i, (part, side) in enumerate(zip(lines, ("left", "right"))):
        align = side if inwards else ("right", "left")[i]
        for j, (text, (size, weight)) in enumerate(zip(part, sizes)):
            page.text(
                ends[i],
                top + 24.5 - 9.5 * j,
                ruler.shown(text),
                size=size,
                weight=weight,
                ha=align,
                family=ruler.families,
                gid=f"end-{side}-{('name', 'bearing', 'side')[j]}",
            )


# --- files ---------------------------------------------------------------------------


def save_section_figure(figure, path_stem, formats=FORMATS, dpi=200):
    """Write a figure in several formats, every file whole.

    No file is replaced before all of them are drawn.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        From `section_figure`.
    path_stem : str or pathlib.Path
        Path without ending; the folder has to be there.
    formats : sequence of str
        Of `FORMATS`.
    dpi : float
        Dots per inch of the PNG.

    Returns
    -------
    list of pathlib.Path
        Files written, in the order of the formats. The same figure gives the same
        bytes: there are no dates in them.

    Raises
    ------
    GeomcoreError
        If a format is not known (``bad-figure``) or a file cannot be written
        (``figure-not-written``).
    """
    matplotlib = _matplotlib()
    unknown = [f for f in formats if f not in FORMATS]
    if unknown:
        _refuse(f"'{unknown[0]}' is not a format.", "Use " + ", ".join(FORMATS) + ".")
    stem = Path(path_stem)
    final = [stem.with_name(f"{stem.name}.{f}") for f in formats]
    parts = [path.with_name(f"{path.name}.part") for path in final]
    try:
        with matplotlib.rc_context():
            matplotlib.rcdefaults()
            matplotlib.rcParams.update(_SETTINGS)
            for path, kind in zip(parts, formats):
                path.write_bytes(_rendered(figure, kind, dpi))
        for part, path in zip(parts, final):
            part.replace(path)
    except OSError as error:
        _refuse(
            f"the figure could not be written: {error.strerror or error} "
            f"({error.filename or stem}).",
            "Check the folder, and close the file where it is open.",
            "figure-not-written",
        )
    finally:
        for part in parts:
            part.unlink(missing_ok=True)
    return final


def _rendered(figure, kind, dpi):
    """Give the bytes of a figure in one format."""
    buffer = io.BytesIO()
    figure.savefig(buffer, format=kind, dpi=dpi, metadata=_metadata(figure, kind))
    if kind != "svg":
        return buffer.getvalue()
    svg = buffer.getvalue().decode("utf-8")
    tag = re.compile('<text [^>]*style="[^"]*"')
    return tag.sub(lambda m: _simple_fonts(m.group()), svg).encode("utf-8")


def _simple_fonts(tag):
    """Write a font as single properties: Qt (QGIS layouts) knows no shorthand."""

    def simple(match):
        words, size, families = match.groups()
        names = [n.strip(" '") for n in families.split(",")]
        # the letters of Verdana, which Windows and macOS have, are as wide
        names += ["Verdana", "sans-serif"]
        parts = [f"font-size: {size}px", "font-family: " + ", ".join(names)]
        for word in words.split():
            name = "font-weight" if word.isdigit() or word == "bold" else "font-style"
            parts.append(f"{name}: {word}")
        return "; ".join(parts)

    return re.sub(r"font: ((?:[\w-]+ )*)([\d.]+)px ([^;\"]+)", simple, tag)


def _metadata(figure, kind):
    """Give the title, and no dates."""
    title = {"Title": figure.get_label()}
    if kind == "svg":
        return {**title, "Date": None}
    if kind == "pdf":
        return {**title, "CreationDate": None}
    return title
