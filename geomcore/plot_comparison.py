"""The figure that sets several constructions of a section side by side.

Page, frame and words are those of a section figure (`plots`); here the faults are
drawn, numbered as in the table under them.
"""

import numpy as np

from .errors import GeomcoreError
from .plot_page import clean, text_table
from .plot_section import FAULT_COLOUR, number, view_of
from .plots import SMALL, FigureOptions, Page, page_figure

__all__ = ["comparison_figure"]

#: Colours (Okabe & Ito 2008, value from memory) and dashes of the constructions; the
#: first, the study's own, has those of a predicted fault on its section figure.
_LOOKS = (
    (FAULT_COLOUR, (0, (5.0, 1.8)), 2.0),
    ("#0072b2", "-", 1.5),
    ("#8c2d6b", (0, (6.0, 1.5, 1.0, 1.5)), 1.5),
    ("#5a4a00", (0, (2.5, 1.2)), 1.5),
    ("#000000", (0, (1.0, 1.0)), 1.5),
    ("#005a40", (0, (8.0, 2.0)), 1.5),
    ("#6e6e6e", "-", 1.1),
)
_STRAIGHT = {"color": "black", "linestyle": (0, (9, 2, 1, 2, 1, 2)), "linewidth": 1.0}
_HEAD = ("", "Method", "Solver", "Heave", "Throw", "Detachment", "Misfit", "Remark")
_DASH = "\N{EN DASH}"


def comparison_figure(study, section_result, options=None):
    """Draw all constructions of a section on one page, with a table under them.

    Parameters
    ----------
    study : Study
    section_result : SectionResult
        With a comparison.
    options : FigureOptions, optional
        As for `section_figure`; the domain is depth.

    Returns
    -------
    matplotlib.figure.Figure
        Its artists carry group ids (``construction-1``, ``straight-fault``,
        ``comparison-1-1``, ...).

    Raises
    ------
    GeomcoreError
        If nothing was compared (``no-comparison``) or matplotlib is missing.
    """
    made = section_result.comparison
    if not made:
        raise GeomcoreError(
            "no-comparison",
            "nothing was compared on this section.",
            f"section {section_result.frame.section_id}",
            "List constructions in the study's construction.compare.",
        )
    options = options or FigureOptions()
    ve = options.vertical_exaggeration
    view = view_of(study, section_result, "depth", ve)
    lines = _lines(made)
    page = Page(
        lambda drawing: _draw(drawing, lines),
        [(f"{gid}-label", mark, x[-1], z[-1]) for gid, mark, x, z, _ in lines],
        ": constructions compared",
        lambda block: (block("compared", _words(view, made)),),
        lambda _, ruler, width: (_table(view, made, ruler, width),),
    )
    return page_figure(view, options, page)


def _look(i):
    colour, dashes, width = _LOOKS[i % len(_LOOKS)]
    return {"color": colour, "linestyle": dashes, "linewidth": width}


def _lines(made):
    """Give (gid, mark, x, z, look) of every fault that there is."""
    lines = []
    for i, row in enumerate(made.rows):
        if row.prediction:
            trace = row.prediction.trace
            name = f"construction-{i + 1}"
            lines.append((name, str(i + 1), trace.x, trace.z, _look(i)))
    if made.straight:
        x = _straight_reach(made)
        z = made.straight.z_at(x)
        lines.append(("straight-fault", "S", x, z, _STRAIGHT))
    return lines


def _straight_reach(made):
    """Draw the straight fault as deep as the deepest other fault, and as high."""
    (x0, z0), (x1, z1) = made.straight.through
    traces = [r.prediction.trace for r in made.solved]
    low = min([z1, *(float(t.z.min()) for t in traces)])
    high = max([z0, *(float(t.z.max()) for t in traces)])
    slope = (z1 - z0) / (x1 - x0)
    return x0 + (np.array([high, low]) - z0) / slope


def _draw(drawing, lines):
    for gid, mark, x, z, look in lines:
        thin = 6.0 if mark == "1" else 5.8
        drawing.line(gid, x, z, zorder=thin, **look)


def _words(view, made):
    """Say how far apart they lie, and whether a curve is needed at all."""
    words = [f"{len(made.solved)} of {len(made.rows)} constructions have a solution."]
    if made.spread_max is not None:
        unit = view.study.length_unit
        at = number(made.x[int(np.argmax(made.spread))], unit)
        apart = number(made.spread_max, view.z_unit)
        words.append(f"They lie up to {apart} apart, at x = {at}.")
    if made.straight:
        words.append(clean(made.straight.text))
    return " ".join(words)


def _table(view, made, ruler, width):
    rows = [(None, _HEAD)]
    for i, row in enumerate(made.rows):
        rows.append((_look(i) if row.prediction else None, _cells(view, i, row)))
    look = _STRAIGHT if made.straight else None
    rows.append((look, _straight_cells(view, made.straight)))
    return text_table(ruler, "comparison", rows, SMALL, width)


def _cells(view, i, row):
    lead = (str(i + 1), clean(row.label), row.solver)
    prediction = row.prediction
    own = "the section's own" if i == 0 else ""
    if not prediction:
        reason = _without_place(prediction)
        return (*lead, f"not solved: {reason}")
    cut, unit = prediction.separation, view.study.length_unit
    if prediction.detachment_z is None:
        level = f"{number(prediction.deepest_z, view.z_unit)} or deeper"
    else:
        level = number(prediction.detachment_z, view.z_unit)
    misfit = "none by definition"
    if row.misfit_rms is not None:
        misfit = f"{row.misfit_rms:.1f} sigma rms"
    heave, throw = number(cut.heave, unit), number(cut.throw, view.z_unit)
    return (*lead, heave, throw, level, misfit, own)


def _straight_cells(view, test):
    if not test:
        reason = f"not tested: {_without_place(test)}"
        return ("S", "straight fault", _DASH, reason)
    (x0, z0), (x1, z1) = test.through
    return (
        "S",
        f"straight fault, {test.dip:.0f}°",
        _DASH,
        number(x1 - x0, view.study.length_unit),
        number(z0 - z1, view.z_unit),
        "none",
        f"{test.misfit_rms:.1f} sigma rms",
        f"verdict: {test.verdict}",
    )


def _without_place(unsolved):
    """Give a reason without the section's name, which stands in the title."""
    reason, lead = clean(unsolved.reason), f"section {clean(unsolved.section_id)}: "
    return reason[len(lead) :] if reason.startswith(lead) else reason
