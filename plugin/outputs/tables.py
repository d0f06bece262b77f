"""A run as rows of the output layers; pure Python and NumPy, knows no QGIS."""

import json
from dataclasses import dataclass

import numpy as np

from ..fields import Table
from .judging import balance_table, comparison_table, trust_values
from .movement import growth_table, subsidiary_table

__all__ = [
    "Stamp",
    "cutoffs_table",
    "fault_tables",
    "input_statement_table",
    "picks_tables",
    "predicted_horizons_table",
    "run_tables",
    "runs_table",
    "section_lines_table",
    "trace_id",
]

#: CGI vocabularies (value from memory, confirmed in the project's notes): a fault
#: predicted from rollover is a normal fault with dip slip; there is no term 'listric'.
_CGI = "http://resource.geosciml.org/classifier/cgi"
FAULT_TYPE_URI = f"{_CGI}/faulttype/normal_fault"
MOVEMENT_TYPE_URI = f"{_CGI}/faultmovementtype/dip_slip"


@dataclass(frozen=True)
class Stamp:
    """What every row of one run carries, and what single layers add to it.

    Parameters
    ----------
    run_id, study, fault : str
        On every row.
    length_unit, vertical_datum, inputs_digest, tool_version, made_at : str
        On the layers that have such a field.
    """

    run_id: str
    study: str
    fault: str
    length_unit: str = ""
    vertical_datum: str = ""
    inputs_digest: str = ""
    tool_version: str = ""
    made_at: str = ""

    @classmethod
    def of(cls, study, digest, made_at, tool_version):
        """Make the stamp of a study and the digest of what it read."""
        return cls(
            digest[:12],
            study.name,
            study.fault,
            study.length_unit,
            study.vertical_datum,
            digest,
            tool_version,
            made_at,
        )

    @property
    def short(self):
        """What every row carries."""
        return {"run_id": self.run_id, "study": self.study, "fault": self.fault}


def trace_id(fault, prediction):
    """Name a predicted trace: fault/section/horizon/method/shear angle."""
    return _trace_id(
        fault,
        prediction.section_id,
        prediction.horizon,
        prediction.model.NAME,
        prediction.model.shear_angle,
    )


def _trace_id(fault, section_id, horizon, method, shear_angle):
    return f"{fault}/{section_id}/{horizon}/{method}/{shear_angle:g}"


def run_tables(run, made_at, tool_version, versions=None):
    """Turn the product of a study into rows of all output layers.

    Parameters
    ----------
    run : StudyRun
    made_at : str
        Time of the run, ISO 8601, UTC.
    tool_version : str
    versions : dict of str to str, optional
        Of QGIS and its parts.

    Returns
    -------
    list of Table
        Those of `fields.ON_REQUEST` are empty where not asked for or where there is
        nothing of the kind.
    """
    stamp = Stamp.of(run.study, run.digest, made_at, tool_version)
    frames = [s.frame for s in run.sections]
    labels = {s.key: s.layer or s.key for s in run.study.sources}
    pulled = [(s.frame, s.picks, s.picks_time) for s in run.sections]
    tables = [
        section_lines_table(stamp, frames, run.unsolved, run.sections, run.doubts),
        *picks_tables(stamp, pulled, labels),
        *fault_tables(stamp, run.sections),
        cutoffs_table(stamp, run.sections),
        predicted_horizons_table(stamp, _horizons_of(stamp, run.sections)),
        comparison_table(stamp, run.sections),
        balance_table(stamp, run.sections),
        subsidiary_table(stamp, run.sections),
        growth_table(stamp, run.sections, run.study.construction.shear_angle),
        input_statement_table(stamp, run.statement),
    ]
    return [*tables, runs_table(stamp, run, tables, versions)]


def _warnings(doubts):
    """One sentence a line; null where nothing is doubtful."""
    return "\n".join(dict.fromkeys(map(str, doubts))) or None


def _known(value):
    """Give a plain float, or None where it is unknown."""
    value = float(value)
    return value if np.isfinite(value) else None


def _column(values):
    """Give a column as plain Python values, None where a number is unknown."""
    return [None if v is None or v != v else v for v in np.asarray(values).tolist()]


def section_lines_table(stamp, frames, unsolved=(), results=(), doubts=()):
    """Rows of ``section_lines``.

    Parameters
    ----------
    stamp : Stamp
    frames : sequence of SectionFrame
    unsolved : sequence of Unsolved
        Lines that gave no frame: rows without geometry that say why.
    results : sequence of SectionResult
        What became of the sections, where something was constructed.
    doubts : sequence of Doubt
        Of the section set; those that name a section go to its row.
    """
    by_id = {r.frame.section_id: r for r in results}
    rows = [
        (frame.vertices, _section_row(stamp, frame, by_id, doubts)) for frame in frames
    ]
    for lost in unsolved:
        values = {"section_id": lost.section_id, "status": "not solved"}
        rows.append((None, {**stamp.short, **values, "reason": lost.reason}))
    return Table("section_lines", rows)


def _section_row(stamp, frame, by_id, doubts):
    result = by_id.get(frame.section_id)
    own = [d for d in doubts if d.where == f"section {frame.section_id}"]
    status, reason = "", None
    if result is not None:
        own += result.all_doubts
        status = "solved" if result.prediction else "not solved"
        reason = None if result.prediction else result.prediction.reason
    return {
        **stamp.short,
        "section_id": frame.section_id,
        "azimuth": frame.azimuth,
        "transport_azimuth": frame.transport_azimuth,
        "hw_azimuth": frame.hw_azimuth,
        "obliquity": frame.obliquity,
        "length": frame.length,
        "status": status,
        "reason": reason,
        "warnings": _warnings(own),
    }


def picks_tables(stamp, pulled, labels=None):
    """Rows of ``picks`` and ``picks_time``.

    Parameters
    ----------
    stamp : Stamp
    pulled : sequence of tuple (SectionFrame, Picks, Picks)
        Frame, picks in depth, picks in time, section by section.
    labels : dict of str to str, optional
        Layer names by source key.

    Returns
    -------
    list of Table
    """
    depth, twt = [], []
    for frame, picks, picks_time in pulled:
        depth += _pick_rows(stamp, frame, picks, labels or {})
        twt += _pick_rows(stamp, frame, picks_time, labels or {})
    return [Table("picks", depth), Table("picks_time", twt)]


def _pick_rows(stamp, frame, picks, labels):
    in_time = picks.domain == "time"
    xy = frame.to_map(picks.x).tolist() if len(picks) else []
    columns = {
        name: _column(getattr(picks, name))
        for name in ("x", "distance", "off_section", "dip", "kind", "name", "used")
    }
    columns["wall"] = [w or None for w in picks.wall.tolist()]
    columns["reason"] = [r or None for r in picks.reason.tolist()]
    columns["source"] = picks.source.tolist()
    columns["source_layer"] = [labels.get(k, k) for k in columns["source"]]
    columns["source_fid"] = [_fid(f) for f in picks.source_fid.tolist()]
    columns["sigma_twt" if in_time else "sigma_z"] = _column(picks.sigma_z)
    columns["sigma_x"] = _column(picks.sigma_x)
    columns["correlation"] = _column(picks.correlation)
    if in_time:
        columns["twt_ms"] = _column(picks.twt_ms)
        places = xy
    else:
        places = [
            [*p, z] if np.isfinite(z) else None for p, z in zip(xy, picks.z.tolist())
        ]
    fixed = {**stamp.short, "section_id": frame.section_id}
    names = tuple(columns)
    return [
        (place, {**fixed, **dict(zip(names, values))})
        for place, values in zip(places, zip(*columns.values()))
    ]


def _fid(value):
    return None if value is None or value != value else int(value)


def fault_tables(stamp, results):
    """Rows of ``predicted_fault_traces``, ``fault_points`` and ``march_table``.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
        Those without a prediction give no row.

    Returns
    -------
    list of Table
    """
    traces, points, march = [], [], []
    for result in results:
        if result.prediction:
            name = trace_id(stamp.fault, result.prediction)
            traces.append(_trace_row(stamp, result, name))
            points += _point_rows(stamp, result, name)
            march += _march_rows(stamp, result.prediction, name)
    return [
        Table("predicted_fault_traces", traces),
        Table("fault_points", points),
        Table("march_table", march),
    ]


def _trace_row(stamp, result, name):
    frame, prediction = result.frame, result.prediction
    separation, trace = prediction.separation, prediction.trace
    line = frame.curve_on_map(trace.x, trace.z)
    values = {
        **stamp.short,
        "trace_id": name,
        "section_id": frame.section_id,
        "horizon": prediction.horizon,
        "method": prediction.model.NAME,
        "solver": prediction.solver,
        "shear_angle": prediction.model.shear_angle,
        **_slip(frame, separation),
        "displacement": _known(separation.displacement),
        "regional_z": _known(prediction.regional(separation.footwall.x)),
        "regional_dip": prediction.regional.dip,
        "detachment_z": prediction.detachment_z,
        "obliquity": frame.obliquity,
        "hw_azimuth": frame.hw_azimuth,
        "z_top": _known(np.max(trace.z)),
        "z_base": _known(np.min(trace.z)),
        "band": "best",
        "location_confidence": None,
        "fault_type_uri": FAULT_TYPE_URI,
        "movement_type_uri": MOVEMENT_TYPE_URI,
        **trust_values(prediction),
        "length_unit": stamp.length_unit,
        "vertical_datum": stamp.vertical_datum,
        "warnings": _warnings(result.all_doubts),
        "inputs_digest": stamp.inputs_digest,
        "tool_version": stamp.tool_version,
        "made_at": stamp.made_at,
    }
    return (line if len(line) > 1 else None, values)


def _slip(frame, separation):
    """Heave, apparent heave and throw; the throw only in depth."""
    in_time = separation.domain == "time"
    return {
        "heave": _known(separation.heave),
        "apparent_heave": _apparent_heave(frame, separation),
        "throw": None if in_time else _known(separation.throw),
    }


def _apparent_heave(frame, separation):
    """Heave along the drawn line, signed as heave; None beyond the line's ends."""
    at = frame.distance_at([separation.footwall.x, separation.hanging_wall.x])
    return _known(np.copysign(abs(at[1] - at[0]), separation.heave))


def _point_rows(stamp, result, name):
    frame, trace = result.frame, result.prediction.trace
    xy = frame.to_map(trace.x)
    columns = {
        "x": _column(trace.x),
        "distance": _column(frame.distance_at(trace.x)),
        "z": _column(trace.z),
        "dip": _column(trace.dip),
        "strip": trace.strip.tolist(),
        "sigma_z": _column(trace.sigma_z),
        "constrained": trace.constrained.tolist(),
    }
    fixed = {**stamp.short, "trace_id": name, "section_id": frame.section_id}
    on_line = np.isfinite(xy).all(axis=1).tolist()
    places = np.column_stack([xy, trace.z]).tolist()
    return [
        (place, {**fixed, **dict(zip(columns, values))})
        for place, values, inside in zip(places, zip(*columns.values()), on_line)
        if inside
    ]


def _march_rows(stamp, prediction, name):
    table = prediction.table
    columns = {
        "strip": table.strip,
        "x": table.x,
        "u": table.u,
        "bed": table.bed,
        "regional": table.regional,
        "increment": table.increment,
        "fault_z": table.fault,
    }
    fixed = {**stamp.short, "trace_id": name, "section_id": prediction.section_id}
    rows = zip(*(_column(c) for c in columns.values()))
    return [(None, {**fixed, **dict(zip(columns, values))}) for values in rows]


def cutoffs_table(stamp, results):
    """Rows of ``cutoffs``: both walls of every horizon measured in every section.

    Parameters
    ----------
    stamp : Stamp
    results : sequence of SectionResult
        Sections that were refused have their cut-offs written all the same.
    """
    rows = []
    for result in results:
        for measured in result.separations:
            rows += _cutoff_rows(stamp, result, measured)
    return Table("cutoffs", rows)


def _cutoff_rows(stamp, result, measured):
    frame, separation = result.frame, measured.separation
    in_time = separation.domain == "time"
    fixed = {
        **stamp.short,
        "trace_id": _trace_of(stamp, result, separation),
        "section_id": frame.section_id,
        "horizon": separation.horizon,
        **_slip(frame, separation),
        "throw_ms": _known(separation.throw) if in_time else None,
        "level_difference": measured.level_difference,
        "domain": separation.domain,
        "warnings": _warnings(measured.doubts),
    }
    return [
        _cutoff_row(frame, cutoff, in_time, fixed)
        for cutoff in (separation.footwall, separation.hanging_wall)
    ]


def _trace_of(stamp, result, separation):
    """Name of the trace a separation made, or None."""
    prediction = result.prediction
    made = prediction and prediction.horizon == separation.horizon
    if not made or separation.domain == "time":
        return None
    return trace_id(stamp.fault, prediction)


def _cutoff_row(frame, cutoff, in_time, fixed):
    xy = frame.to_map(cutoff.x)[0]
    place = None if in_time or not np.isfinite(xy).all() else [*xy, cutoff.z]
    values = {
        "wall": cutoff.wall,
        "x": _known(cutoff.x),
        "distance": _known(frame.distance_at(cutoff.x)),
        "twt_ms": _known(-cutoff.z) if in_time else None,
        "sigma_x": _known(cutoff.sigma_x),
        "sigma_z": _known(cutoff.sigma_z),
        "how": cutoff.how,
    }
    return (place, {**fixed, **values})


def _horizons_of(stamp, results):
    """Further horizons of solved sections with the trace they come from."""
    for result in results:
        for horizon in result.horizons:
            yield result.frame, trace_id(stamp.fault, result.prediction), horizon


def predicted_horizons_table(stamp, items):
    """Rows of ``predicted_horizons``.

    Parameters
    ----------
    stamp : Stamp
    items : iterable of tuple (SectionFrame, str, HorizonPrediction or Unsolved)
        Frame, trace id, horizon; one that could not be predicted gives a row without
        geometry that says why.
    """
    rows = []
    for frame, name, horizon in items:
        fixed = {**stamp.short, "trace_id": name, "section_id": frame.section_id}
        if not horizon:
            rows.append((None, {**fixed, "misfit_note": horizon.reason}))
            continue
        line = frame.curve_on_map(horizon.profile.x, horizon.profile.z)
        rows.append((line if len(line) > 1 else None, {**fixed, **_horizon(horizon)}))
    return Table("predicted_horizons", rows)


def _horizon(horizon):
    (foot_x, foot_z), (hang_x, hang_z) = horizon.footwall, horizon.hanging_wall
    return {
        "horizon": horizon.name,
        "regional_z": _known(horizon.regional(foot_x)),
        "regional_dip": horizon.regional.dip,
        "heave": _known(hang_x - foot_x),
        "throw": _known(foot_z - hang_z),
        "misfit_rms": horizon.misfit_rms,
        "misfit_max": horizon.misfit_max,
        "misfit_n": horizon.misfit_n,
        "misfit_note": horizon.misfit_note,
    }


def input_statement_table(stamp, statement):
    """Rows of ``input_statement``: one a source.

    Parameters
    ----------
    stamp : Stamp
    statement : sequence of SourceCount
    """
    return Table(
        "input_statement", [(None, _statement_row(stamp, s)) for s in statement]
    )


def _statement_row(stamp, count):
    return {
        **stamp.short,
        "source": count.key,
        "layer": count.layer,
        "role": count.role,
        "name": count.name,
        "conversion": count.conversion,
        "count_in": count.count_in,
        "count_refused": sum(count.refused.values()),
        "refused": _by_reason(count.refused),
        "picks": count.picks,
        "used": count.used,
        "count_left_out": sum(count.left_out.values()),
        "left_out": _by_reason(count.left_out),
        "raw_min": _known(count.raw_min),
        "raw_max": _known(count.raw_max),
        "z_min": _known(count.z_min),
        "z_max": _known(count.z_max),
    }


def _by_reason(counts):
    return "; ".join(f"{n} {why}" for why, n in counts.items()) or None


def runs_table(stamp, run, tables, versions=None):
    """Row of ``runs``.

    Parameters
    ----------
    stamp : Stamp
    run : StudyRun
    tables : sequence of Table
        The other layers written, for their counts.
    versions : dict of str to str, optional
        Of QGIS and its parts.
    """
    study = run.study
    document = study.to_dict()
    values = {
        **stamp.short,
        "study_json": study.to_json(),
        "parameters": _json(document.get("construction", {})),
        "versions": _json({**(versions or {}), "Heaveline": stamp.tool_version}),
        "inputs_digest": stamp.inputs_digest,
        "tool_version": stamp.tool_version,
        "made_at": stamp.made_at,
        "transport_azimuth": run.transport_azimuth,
        "transport_from": run.transport_from,
        "sections": len(run.sections) + len(run.unsolved),
        "solved": sum(bool(s.prediction) for s in run.sections),
        "counts": _json({t.name: len(t) for t in tables}),
        "warnings": _warnings(run.doubts),
    }
    return Table("runs", [(None, values)])


def _json(thing):
    return json.dumps(thing, sort_keys=True, ensure_ascii=False)
