"""What a section figure says in words: method, scale, section line, warnings."""

from .plot_page import clean
from .plot_section import number
from .section import OBLIQUITY_WARNING

__all__ = [
    "bearing",
    "caution_words",
    "compass_point",
    "end_words",
    "line_words",
    "method_words",
    "note_words",
    "run_words",
    "scale_words",
    "status_words",
    "title_words",
    "unit_words",
    "warning_words",
]

_CAUTION = (
    "A model, not an observation: it follows from the picks and the method stated "
    "here, and has to be reviewed by a qualified geologist before it is used for any "
    "decision."
)
_CAUTION_UNSOLVED = (
    "Picks as they were read, no fault is predicted here. To be reviewed by a "
    "qualified geologist before they are used for any decision."
)
_UNITS = {"m": "m", "ft": "ft", "us-ft": "US survey ft"}
_COMPASS_POINTS = (
    *("N", "NNE", "NE", "ENE", "E", "ESE", "SE", "SSE"),
    *("S", "SSW", "SW", "WSW", "W", "WNW", "NW", "NNW"),
)


def bearing(azimuth):
    """Give an azimuth as three digits.

    Examples
    --------
    >>> bearing(89.6), bearing(359.9)
    ('090°', '000°')
    """
    return f"{round(azimuth) % 360:03d}°"


def compass_point(azimuth):
    """Give the nearest of the sixteen points of the compass.

    Examples
    --------
    >>> compass_point(270.0), compass_point(350.0)
    ('W', 'N')
    """
    return _COMPASS_POINTS[round(azimuth / 22.5) % 16]


def unit_words(view):
    """Name the study's length unit; numbers have it shortened."""
    return _UNITS[view.study.length_unit]


def caution_words(view):
    """Say what the figure is not; stands at its foot."""
    return _CAUTION if view.prediction else _CAUTION_UNSOLVED


def title_words(view):
    """Name section and fault."""
    section, fault = clean(view.result.frame.section_id), clean(view.study.fault)
    lead = "" if section.casefold().startswith("section") else "Section "
    return f"{lead}{section} \N{EN DASH} {fault}"


def status_words(view):
    """Say why a section is not solved; nothing where it is."""
    if view.result.prediction:
        return ""
    reason = clean(view.result.prediction.reason)
    lead = f"section {clean(view.result.frame.section_id)}: "
    reason = reason[len(lead) :] if reason.startswith(lead) else reason
    return f"Not solved: {reason}"


def method_words(view):
    """Say how the fault was made and what came out."""
    words = []
    if view.domain == "time":
        words.append("Two-way times: no depths, thicknesses or dips can be read off.")
    if view.prediction:
        words.append(_construction_words(view.prediction))
    if view.separation:
        words.append(_separation_words(view, view.separation))
    if view.prediction:
        words += [_regional_words(view), _reach_words(view)]
    return " ".join(words)


def _construction_words(prediction):
    method, solver = clean(prediction.model.label), clean(prediction.solver)
    words = f"Fault by {method}, solver: {solver}, from horizon "
    words += f"{clean(prediction.horizon)}."
    if prediction.detail is None:
        return words
    misfit = prediction.detail.misfit_rms
    return f"{words} It misses the picks by {misfit:.1f} sigma rms."


def _separation_words(view, separation):
    heave = number(separation.heave, view.study.length_unit)
    throw = number(separation.throw, view.z_unit)
    reverse = " (reverse separation)" if separation.heave < 0 else ""
    words = f"heave {heave}{reverse}, throw {throw}."
    if separation.horizon == view.study.construction.horizon:
        return words[:1].upper() + words[1:]
    return f"{clean(separation.horizon)}: {words}"


def _regional_words(view):
    regional = view.prediction.regional
    level, dip = number(regional.z0, view.z_unit), regional.dip
    side = "towards the hanging wall" if dip > 0 else "towards the footwall"
    lie = "level" if abs(dip) < 0.05 else f"dipping {abs(dip):.1f}° {side}"
    return f"Regional {level} at the footwall cut-off, {lie} ({clean(regional.how)})."


def _reach_words(view):
    prediction = view.prediction
    if prediction.detachment_z is not None:
        return f"Detachment at {number(prediction.detachment_z, view.z_unit)}."
    deep = number(prediction.deepest_z, view.z_unit)
    return f"No detachment reached: the fault goes down to {deep} at least."


def line_words(view):
    """Say how the section line runs."""
    frame, unit = view.result.frame, view.study.length_unit
    words = f"Transport {bearing(frame.transport_azimuth)} (from grid north); line "
    words += number(frame.length, unit)
    if frame.obliquity >= 0.5:
        words += f", up to {frame.obliquity:.0f}° off transport"
    bends = len(frame.bends_between(0.0, frame.x_max))
    if bends:
        words += f", {bends} bend{'s' if bends > 1 else ''}"
    if frame.forward:
        return words + ", drawn from left to right."
    return (
        f"{words}, drawn from right to left: with the footwall on the left, x grows "
        "against the drawn direction."
    )


def end_words(view):
    """Mark, bearing and side of the footwall end and of the hanging-wall end.

    The first end drawn has the section's name, the last one the name with a prime.

    Returns
    -------
    tuple of two tuples (mark, bearing, side)
    """
    frame = view.result.frame
    out = frame.azimuth if frame.forward else (frame.azimuth + 180.0) % 360.0
    left, right = ("", "\N{PRIME}") if frame.forward else ("\N{PRIME}", "")
    back = (out + 180.0) % 360.0
    return (
        (left, f"{compass_point(back)} {bearing(back)}", "footwall side"),
        (right, f"{compass_point(out)} {bearing(out)}", "hanging-wall side"),
    )


def scale_words(view, ratio, page_mm):
    """Say scale, exaggeration, unit, datum and coordinate system.

    Parameters
    ----------
    view : SectionView
    ratio : float
        The horizontal scale is 1:ratio.
    page_mm : float
        On a page of this width.
    """
    ve, crs = view.exaggeration, clean(view.study.crs)
    paper = f"1:{ratio:.0f} on a page {page_mm:.0f} mm wide"
    if view.domain == "time":
        return (
            f"Horizontal scale {paper}; the vertical axis is two-way time in ms, so "
            f"there is no true scale. {crs}."
        )
    steep = "steeper" if ve > 1 else "gentler"
    scale = f"Vertical exaggeration {ve:g}x (dips look {steep}), horizontally {paper}"
    if ve == 1.0:
        scale = f"True scale (vertical = horizontal, V.E. 1x), {paper}"
    unit, datum = unit_words(view), clean(view.study.vertical_datum)
    return f"{scale}. Elevation in {unit}, up positive, datum {datum}. {crs}."


def note_words(view):
    """Say what else was measured, and what is not shown."""
    shown = {view.separation.horizon} if view.separation else set()
    others = [s for s in view.separations if s.horizon not in shown]
    notes = [_separation_words(view, s) for s in others]
    notes = ["Other horizons \N{EN DASH}", *notes] if notes else []
    depth = view.domain == "depth"
    other = view.result.picks_time if depth else view.result.picks
    if len(other):
        what = "in two-way time" if depth else "in depth"
        picks = "pick" if len(other) == 1 else "picks"
        notes.append(f"Not shown: {len(other)} {picks} {what}.")
    if not depth and view.result.prediction:
        notes.append("Not shown: the fault predicted in depth.")
    return " ".join(notes)


def warning_words(view, more=()):
    """Give every doubt once, numbered.

    Parameters
    ----------
    view : SectionView
    more : iterable of Doubt
        Of the study as a whole; those that name another section are left out.

    Returns
    -------
    list of str
    """
    frame, result = view.result.frame, view.result
    own = f"section {frame.section_id}"
    doubts = [d for d in more if not d.where.startswith("section ") or d.where == own]
    doubts += result.all_doubts
    doubts += [d for s in result.separations for d in s.doubts]
    texts = [clean(d.text) for d in doubts]
    if frame.obliquity > OBLIQUITY_WARNING:
        texts.append(f"up to {frame.obliquity:.0f} degrees off transport.")
    if result.prediction:
        texts += [f"not predicted: {clean(h.reason)}" for h in result.horizons if not h]
    texts = list(dict.fromkeys(texts))
    return [f"Warning {i + 1}: {text}" for i, text in enumerate(texts)]


def run_words(view, run_id, made_with):
    """Name study, run and program."""
    words = [f"Study {clean(view.study.name)}"]
    words += [f"run {clean(run_id)}"] if run_id else []
    words += [clean(made_with)] if made_with else []
    return " \N{MIDDLE DOT} ".join(words)
