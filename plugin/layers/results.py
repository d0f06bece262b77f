"""Layers that an earlier run wrote, read back: picks and predicted fault traces."""

import numpy as np
from qgis.core import Qgis, QgsWkbTypes

from ...geomcore.errors import SourceError
from ...geomcore.picks import Picks
from ...geomcore.profile import line_through
from ...geomcore.study import GivenTrace, SectionPicks
from .reading import field_index, layer_name, numbers, read_table, texts

__all__ = ["read_picks", "read_traces"]

_PICK_NUMBERS = ("x", "distance", "off_section", "dip")
_PICK_ERRORS = ("sigma_x", "correlation")
_PICK_TEXTS = ("section_id", "kind", "name", "wall", "reason", "source")


def read_picks(layer, time_layer, crs, transform_context, feedback=None):
    """Read picks back from the layers ``picks`` and ``picks_time``.

    Parameters
    ----------
    layer : QgsVectorLayer or QgsProcessingFeatureSource, or None
        Picks in depth.
    time_layer : the same, or None
        Picks in two-way time.
    crs, transform_context, feedback
        As in `read_source`.

    Returns
    -------
    dict of str to SectionPicks
        By section id, in the order of the layer; whatever a user has changed in
        ``used`` or ``wall`` holds.

    Raises
    ------
    SourceError
        If a field is missing or a pick's place is unknown.
    """
    found = {}
    for domain, one in (("depth", layer), ("time", time_layer)):
        if one is None:
            continue
        for section_id, picks in _picks_of(
            one, domain, crs, transform_context, feedback
        ).items():
            found.setdefault(section_id, {})[domain] = picks
    return {
        section_id: SectionPicks(
            own.get("depth") or Picks.empty(section_id),
            own.get("time") or Picks.empty(section_id, "time"),
        )
        for section_id, own in found.items()
    }


def _read_columns(layer, names, crs, transform_context, feedback, where):
    indices = [field_index(layer.fields(), n, where) for n in names]
    table = read_table(layer, indices, crs, transform_context, feedback)
    return table, dict(zip(names, table.columns))


def _picks_of(layer, domain, crs, transform_context, feedback):
    where = f"picks layer '{layer_name(layer)}'"
    sigma = "sigma_twt" if domain == "time" else "sigma_z"
    names = [*_PICK_NUMBERS, *_PICK_TEXTS, "used", "source_fid", sigma, *_PICK_ERRORS]
    names += ["twt_ms"] if domain == "time" else []
    table, raw = _read_columns(layer, names, crs, transform_context, feedback, where)
    columns = _pick_columns(raw, table.fid, where)
    columns["sigma_z"] = _number(raw, sigma, table.fid, where, missing=0.0)
    for name in _PICK_ERRORS:
        columns[name] = _number(raw, name, table.fid, where, missing=0.0)
    if domain == "time":
        columns["z"] = -_number(raw, "twt_ms", table.fid, where)
    else:
        columns["z"] = _elevations(layer, table, where)
    columns["used"] &= np.isfinite(columns["z"])
    section = columns.pop("section_id")
    return {
        name: Picks(name, domain, **{k: v[section == name] for k, v in columns.items()})
        for name in dict.fromkeys(section)
    }


def _pick_columns(raw, fid, where):
    columns = {name: texts(raw[name]) for name in _PICK_TEXTS}
    for name in _PICK_NUMBERS:
        columns[name] = _number(raw, name, fid, where)
    unknown = ~np.isfinite(columns["x"]) | (columns["section_id"] == "")
    if unknown.any():
        i = int(np.argmax(unknown))
        raise SourceError(
            "bad-picks-layer",
            f"feature {fid[i]} has no section_id or no x.",
            where,
            "Use the layers that 'Pull picks' writes.",
        )
    columns["off_section"] = np.nan_to_num(columns["off_section"], nan=0.0)
    used, _ = numbers([int(v) if isinstance(v, bool) else v for v in raw["used"]])
    columns["used"] = used == 1
    source, _ = numbers(raw["source_fid"])
    columns["source_fid"] = np.array(
        [None if v != v else int(v) for v in source], dtype=object
    )
    return columns


def _number(raw, name, fid, where, missing=np.nan):
    number, text = numbers(raw[name])
    if text.any():
        raise SourceError(
            "bad-picks-layer",
            f"feature {fid[int(np.argmax(text))]} has a text in the field '{name}'.",
            where,
            "Give a number.",
        )
    return np.where(np.isfinite(number), number, missing)


def _elevations(layer, table, where):
    """Z of each pick, NaN for one without geometry."""
    if not QgsWkbTypes.hasZ(layer.wkbType()):
        raise SourceError(
            "no-z",
            "the geometries have no Z.",
            where,
            "Use the layer 'picks' that 'Pull picks' writes.",
        )
    z = np.full(len(table.fid), np.nan)
    z[table.parts.owner] = table.parts.z
    return z


def read_traces(layer, frames, crs, transform_context, feedback=None):
    """Read the faults of a layer ``predicted_fault_traces`` back into their sections.

    Parameters
    ----------
    layer : QgsVectorLayer or QgsProcessingFeatureSource
    frames : sequence of SectionFrame
        Sections they are brought to.
    crs, transform_context, feedback
        As in `read_source`.

    Returns
    -------
    dict of str to GivenTrace
        By section id, for the sections that have a trace; of the bands only the
        best one is taken.

    Raises
    ------
    SourceError
        If a field is missing or null, or a section has more than one trace.
    """
    where = f"fault trace layer '{layer_name(layer)}'"
    if QgsWkbTypes.geometryType(layer.wkbType()) != Qgis.GeometryType.Line:
        raise SourceError(
            "wrong-geometry", "it holds no lines.", where, "Use predicted_fault_traces."
        )
    words = ("section_id", "horizon", "band")
    values = ("heave", "throw", "shear_angle", "regional_z", "regional_dip")
    table, raw = _read_columns(
        layer, [*words, *values], crs, transform_context, feedback, where
    )
    text = {name: texts(raw[name]) for name in words}
    number = {name: _number(raw, name, table.fid, where) for name in values}
    by_id = {frame.section_id: frame for frame in frames}
    found = {}
    for i, section_id in enumerate(text["section_id"]):
        if section_id not in by_id or text["band"][i] not in ("best", ""):
            continue
        _check_trace(i, table, number, where)
        if section_id in found:
            raise SourceError(
                "several-traces",
                f"section {section_id} has more than one trace.",
                where,
                "Filter the layer to one horizon, method and shear angle.",
            )
        row = {name: float(column[i]) for name, column in number.items()}
        found[section_id] = _trace(
            by_id[section_id],
            table.parts.select(table.parts.owner == i),
            row,
            str(text["horizon"][i]),
            where,
        )
    return found


def _check_trace(i, table, number, where):
    missing = [name for name, column in number.items() if not np.isfinite(column[i])]
    if missing or i not in table.parts.owner:
        raise SourceError(
            "bad-trace",
            f"feature {table.fid[i]} has no {', '.join(missing) or 'geometry'}.",
            where,
            "Use the layer that 'Predict fault' writes.",
        )


def _trace(frame, parts, row, horizon, where):
    x, z = frame.project(parts.xy)[0], parts.z
    if len(parts.count) != 1 or not np.isfinite(z).all() or np.any(np.diff(x) <= 0):
        raise SourceError(
            "bad-trace",
            f"the trace of section {frame.section_id} is not one line with Z that "
            "goes from the footwall end down dip.",
            where,
            "Use the layer that 'Predict fault' writes.",
        )
    tan = np.tan(np.radians(row["shear_angle"]))
    return GivenTrace(
        x,
        z,
        horizon,
        line_through(
            _first_at(x, z, row["regional_z"]),
            row["regional_z"],
            -np.tan(np.radians(row["regional_dip"])),
        ),
        row["heave"] + row["throw"] * tan,
        row["shear_angle"],
    )


def _first_at(x, z, level):
    """First x at which the fault has come down to a level: the footwall cut-off."""
    below = np.flatnonzero(z <= level + 1e-9)
    if not len(below) or below[0] == 0:
        return float(x[0] if len(below) else x[-1])
    i = int(below[0])
    f = (z[i - 1] - level) / (z[i - 1] - z[i])
    return float(x[i - 1] + min(f, 1.0) * (x[i] - x[i - 1]))
