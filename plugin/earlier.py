"""What an earlier step left in its layers: transport azimuth, study, trace names."""

from dataclasses import dataclass
from pathlib import Path

from qgis.core import (
    Qgis,
    QgsExpression,
    QgsFeatureRequest,
    QgsVariantUtils,
    QgsVectorLayer,
)

from ..geomcore.errors import GeomcoreError, StudyError
from ..geomcore.recipe import Study
from .fields import Table

__all__ = [
    "TraceName",
    "known_transport",
    "study_of",
    "trace_names",
    "with_earlier_runs",
]


def known_transport(source):
    """Give the transport azimuth that stands on section lines.

    Parameters
    ----------
    source : QgsFeatureSource
        Section lines, perhaps those an earlier step wrote.

    Returns
    -------
    float or None
        None where they have no such field or no value in it.

    Raises
    ------
    StudyError
        If the lines have different ones: they are of more than one run.
    """
    found = _values(source, "transport_azimuth")
    if len(found) > 1:
        words = ", ".join(f"{value:.1f}" for value in sorted(found))
        raise StudyError(
            "mixed-sections",
            f"the section lines have several transport azimuths: {words}.",
            source.sourceName(),
            "Filter the layer to one run.",
        )
    return float(found.pop()) if found else None


def _values(source, field):
    """Distinct values of a field, unknown ones left out; none without the field."""
    index = source.fields().lookupField(field)
    if index < 0:
        return set()
    return {v for v in source.uniqueValues(index) if isinstance(v, (int, float, str))}


def study_of(source, layer):
    """Give the study that picks come from, out of the table ``runs`` beside them.

    Parameters
    ----------
    source : QgsFeatureSource
        The picks.
    layer : QgsMapLayer or None
        Their layer, which says in which file they are.

    Returns
    -------
    Study or None
        None where there is no such table, the picks are of several runs, or the
        document is of another version.
    """
    runs = _values(source, "run_id")
    table = _runs_beside(layer) if len(runs) == 1 else None
    if table is None:
        return None
    wanted = QgsExpression.createFieldEqualityExpression("run_id", runs.pop())
    for feature in table.getFeatures(QgsFeatureRequest(QgsExpression(wanted))):
        try:
            return Study.from_json(str(feature["study_json"]))
        except GeomcoreError:
            return None  # the datum and the names have to be said anew
    return None


def _runs_beside(layer):
    """Give the table ``runs`` of the file in which a layer is, or None."""
    if layer is None or layer.providerType() != "ogr":
        return None
    return _runs_table(layer.source().split("|")[0])


def _runs_table(path):
    """Give the table ``runs`` of a GeoPackage, or None."""
    if not Path(path).is_file():
        return None
    table = QgsVectorLayer(f"{path}|layername=runs", "runs", "ogr")
    has_study = table.isValid() and table.fields().lookupField("study_json") >= 0
    return table if has_study else None


def with_earlier_runs(table, path):
    """Add the rows of earlier runs that a file already holds.

    Parameters
    ----------
    table : Table
        ``runs`` with the row of the new run.
    path : pathlib.Path
        GeoPackage about to be written.

    Returns
    -------
    Table
        The new run first; a run made again replaces its earlier row.
    """
    old = _runs_table(path)
    if old is None:
        return table
    names = [name for name in table.spec.names if old.fields().lookupField(name) >= 0]
    made = {values["run_id"] for _, values in table.rows}
    kept = [
        (None, {name: _plain(f[name]) for name in names})
        for f in old.getFeatures()
        if f["run_id"] not in made
    ]
    return Table(table.name, [*table.rows, *kept])


def _plain(value):
    return None if QgsVariantUtils.isNull(value) else value


@dataclass(frozen=True)
class TraceName:
    """Name of a predicted trace and the kinematic model that made it."""

    trace_id: str
    method: str


def trace_names(source):
    """Give name and model of each section's best trace.

    Parameters
    ----------
    source : QgsFeatureSource
        Predicted fault traces.

    Returns
    -------
    dict of str to TraceName
        By section id.

    Raises
    ------
    StudyError
        If the layer lacks one of the fields.
    """
    wanted = ("section_id", "trace_id", "method", "band")
    names = source.fields().names()
    missing = [name for name in wanted if name not in names]
    if missing:
        raise StudyError(
            "no-field",
            f"there is no field '{missing[0]}'.",
            f"fault traces '{source.sourceName()}'",
            "Use the layer predicted_fault_traces.",
        )
    request = QgsFeatureRequest().setFlags(Qgis.FeatureRequestFlag.NoGeometry)
    return {
        str(f["section_id"]): TraceName(str(f["trace_id"]), str(f["method"]))
        for f in source.getFeatures(request)
        if f["band"] == "best"
    }
