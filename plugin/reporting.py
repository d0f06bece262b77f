"""What a run says in words: input statement, results and doubts as aligned text."""

import math

__all__ = [
    "aligned",
    "calibration_lines",
    "doubt_lines",
    "horizon_lines",
    "lost_horizon_lines",
    "result_lines",
    "section_lines",
    "statement_lines",
    "unsolved_lines",
]


def aligned(heads, rows, right=()):
    """Lay out rows of texts in columns.

    Parameters
    ----------
    heads : sequence of str
    rows : list of sequence of str
    right : collection of int
        Columns that stand to the right, as numbers do.

    Returns
    -------
    list of str

    Examples
    --------
    >>> aligned(("section", "heave"), [("S1", "95"), ("S12", "1204")], right=[1])
    ['section  heave', 'S1          95', 'S12       1204']
    """
    lines = [tuple(heads), *map(tuple, rows)]
    widths = [max(map(len, column)) for column in zip(*lines)]
    return [
        "  ".join(
            text.rjust(width) if i in right else text.ljust(width)
            for i, (text, width) in enumerate(zip(line, widths))
        ).rstrip()
        for line in lines
    ]


def number(value, digits=0):
    """Write a number; an unknown one is a dash."""
    if value is None or not math.isfinite(value):
        return "-"
    return f"{value:.{digits}f}"


def statement_lines(statement):
    """Say of each source what came in, how it was converted, and what became of it.

    Parameters
    ----------
    statement : tuple of SourceCount

    Returns
    -------
    list of str
        A table with one row a source, then what was refused or left out and why.
    """
    if not statement:
        return []
    heads = ("source", "is", "in", "picks", "used", "raw from", "to", "now from", "to")
    rows = [
        (
            c.layer,
            f"{c.role} {c.name}".strip(),
            str(c.count_in),
            str(c.picks),
            str(c.used),
            *(number(v, 1) for v in (c.raw_min, c.raw_max, c.z_min, c.z_max)),
        )
        for c in statement
    ]
    lines = ["Input statement", *aligned(heads, rows, right=range(2, 9))]
    for c in statement:
        lines.append(f"{c.layer}: {c.conversion}")
        lines += [f"    refused: {n} ({why})" for why, n in c.refused.items()]
        lines += [f"    left out: {n} ({why})" for why, n in c.left_out.items()]
    return lines


def section_lines(section_set):
    """Say of each section frame how it lies.

    Parameters
    ----------
    section_set : SectionSet

    Returns
    -------
    list of str
    """
    heads = ("section", "azimuth", "obliquity", "length")
    rows = [
        (f.section_id, number(f.azimuth, 1), number(f.obliquity, 1), number(f.length))
        for f in section_set.frames
    ]
    return [
        f"Transport azimuth {section_set.transport_azimuth:.1f} "
        f"({section_set.transport_from})",
        *aligned(heads, rows, right=(1, 2, 3)),
    ]


def result_lines(run):
    """Say of each section what the construction gave.

    Parameters
    ----------
    run : StudyRun

    Returns
    -------
    list of str
    """
    heads = ("section", "heave", "throw", "displacement", "fault reaches z")
    rows = [_result_row(s) for s in run.sections if s.prediction]
    if not rows:
        return ["No section has a prediction."]
    return [
        f"Results, lengths in {run.study.length_unit}",
        *aligned(heads, rows, right=(1, 2, 3)),
    ]


def _result_row(section):
    prediction = section.prediction
    separation = prediction.separation
    if prediction.detachment_z is None:
        depth = f"below {number(prediction.deepest_z)}"
    else:
        depth = f"detachment at {number(prediction.detachment_z)}"
    values = (separation.heave, separation.throw, separation.displacement)
    return (section.frame.section_id, *map(number, values), depth)


def unsolved_lines(run):
    """Say of each section without a result why, one line each."""
    own = [
        f"{s.frame.section_id}: no prediction: {s.prediction.reason}"
        for s in run.sections
        if not s.prediction
    ]
    return own + [f"{u.section_id}: not used: {u.reason}" for u in run.unsolved]


def calibration_lines(result):
    """Say what shear angle each section and way gives, and all sections together.

    Parameters
    ----------
    result : CalibrationResult

    Returns
    -------
    list of str
    """
    heads = ("section", "way", "best", "low", "high", "what the data say")
    found = [(s.section_id, e) for s in result.sections for e in s.estimates]
    found += [("all", e) for e in result.joint]
    rows = [
        (name, e.way, *(number(v, 1) for v in (e.best, e.low, e.high)), e.text)
        for name, e in found
    ]
    lines = ["Shear angle, degrees from the vertical, positive antithetic"]
    lines += aligned(heads, rows, right=(2, 3, 4))
    if result.best is None:
        return [*lines, "The data do not tell the shear angle."]
    return [*lines, f"Best: {result.best.text} (way: {result.best.way})"]


def horizon_lines(items):
    """Say of each predicted horizon how it lies and how it fits.

    Parameters
    ----------
    items : list of tuple (SectionFrame, str, HorizonPrediction or Unsolved)

    Returns
    -------
    list of str
    """
    heads = ("section", "horizon", "misfit rms", "largest", "compared with")
    rows = [
        (
            frame.section_id,
            horizon.name,
            number(horizon.misfit_rms, 1),
            number(horizon.misfit_max, 1),
            horizon.misfit_note,
        )
        for frame, _, horizon in items
        if horizon
    ]
    return aligned(heads, rows, right=(2, 3)) if rows else []


def lost_horizon_lines(items, frames, traces):
    """Say which horizons could not be predicted, and which sections have no fault.

    Parameters
    ----------
    items : list of tuple (SectionFrame, str, HorizonPrediction or Unsolved)
    frames : sequence of SectionFrame
    traces : mapping of str to GivenTrace

    Returns
    -------
    list of str
    """
    lost = [
        f"{frame.section_id}: {horizon.reason}"
        for frame, _, horizon in items
        if not horizon
    ]
    bare = [f.section_id for f in frames if f.section_id not in traces]
    return lost + [f"{name}: there is no predicted fault." for name in bare]


def doubt_lines(doubts):
    """Group doubts: each text once, with the places it is about.

    Parameters
    ----------
    doubts : iterable of Doubt

    Returns
    -------
    list of str

    Examples
    --------
    >>> from collections import namedtuple
    >>> Doubt = namedtuple("Doubt", "code text where")
    >>> one, two = (Doubt("a", "too steep.", f"section {name}") for name in ("A", "B"))
    >>> doubt_lines([one, two]), doubt_lines([one])
    (['sections A, B: too steep.'], ['section A: too steep.'])
    """
    places = {}
    for doubt in doubts:
        own = places.setdefault(doubt.text, [])
        if doubt.where and doubt.where not in own:
            own.append(doubt.where)
    return [f"{_places(where)}{text}" for text, where in places.items()]


def _places(where):
    """Name places before a colon; 'sections' once where all are such."""
    section = "section "
    if len(where) > 1 and all(place.startswith(section) for place in where):
        return f"sections {', '.join(place[len(section) :] for place in where)}: "
    return f"{', '.join(where)}: " if where else ""
