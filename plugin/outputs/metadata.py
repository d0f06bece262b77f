"""Layer metadata and notes: what a layer is, how it came about, what to beware of."""

from dataclasses import dataclass
from html import escape

from qgis.core import (
    Qgis,
    QgsBox3D,
    QgsLayerMetadata,
    QgsLayerNotesUtils,
)
from qgis.PyQt.QtCore import QDateTime, Qt

from ..cautions import SHORT, layer_cautions
from ..fields import LAYERS

__all__ = ["RunNote", "layer_metadata", "run_of", "set_notes"]

#: Words for the length units of a study.
UNITS = {"m": "metre", "ft": "international foot", "us-ft": "US survey foot"}


@dataclass(frozen=True)
class RunNote:
    """Which run made a layer.

    Parameters
    ----------
    run_id : str
    inputs_digest : str
        SHA-256 over everything read, declared and set; empty if not known.
    tool_version : str
    made_at : str
        ISO 8601; empty if not known.
    """

    run_id: str = ""
    inputs_digest: str = ""
    tool_version: str = ""
    made_at: str = ""


def run_of(layer):
    """Read from a layer which run made it.

    Parameters
    ----------
    layer : QgsVectorLayer

    Returns
    -------
    RunNote
        With empty texts for what the layer does not say.
    """
    return RunNote(
        *(
            _value(layer, name)
            for name in ("run_id", "inputs_digest", "tool_version", "made_at")
        )
    )


def _value(layer, name):
    """Read one value of a field.

    Not by a feature iterator: QGIS would keep its connection for a minute, and the
    file with it.
    """
    index = layer.fields().lookupField(name)
    values = layer.uniqueValues(index, 1) if index >= 0 else ()
    return next((str(value) for value in values if value), "")


def layer_metadata(layer, layer_name, study, run):
    """Describe an output layer.

    Parameters
    ----------
    layer : QgsVectorLayer
    layer_name : str
        A name of `fields.LAYERS`.
    study : Study
    run : RunNote

    Returns
    -------
    QgsLayerMetadata
    """
    spec = LAYERS[layer_name]
    metadata = QgsLayerMetadata()
    metadata.setIdentifier(f"{study.name}/{layer_name}/{run.run_id}")
    metadata.setType("dataset")
    metadata.setLanguage("en")
    metadata.setTitle(f"{spec.title}: {study.fault}")
    metadata.setAbstract(_abstract(spec, study))
    metadata.setKeywords(_keywords(study))
    metadata.setHistory(_history(study, run))
    metadata.setRights([SHORT])
    metadata.setConstraints(
        [
            QgsLayerMetadata.Constraint(text, "limitations of use")
            for text in layer_cautions(layer_name)
        ]
    )
    _set_place(metadata, layer)
    made = QDateTime.fromString(run.made_at, Qt.DateFormat.ISODate)
    if made.isValid():
        metadata.setDateTime(Qgis.MetadataDateType.Created, made)
    return metadata


def _vertical(study):
    unit = UNITS.get(study.length_unit, study.length_unit)
    return (
        f"Elevations are counted upwards from {study.vertical_datum}; lengths and "
        f"elevations are in {study.length_unit} ({unit})."
    )


def _abstract(spec, study):
    lines = [spec.abstract, f"Study: {study.name}. Fault: {study.fault}."]
    lines += [study.note] if study.note else []
    lines += [_vertical(study), f"CRS: {study.crs}.", "", "Fields:"]
    lines += [f"{f.name} ({f.alias}): {f.comment}" for f in spec.fields]
    return "\n".join(lines)


def _keywords(study):
    return {
        "gmd:topicCategory": ["Geoscientific Information"],
        "subject": ["fault", "cross section", "heave", "throw", study.fault],
        "vertical datum": [study.vertical_datum],
        "length unit": [study.length_unit],
    }


def _history(study, run):
    """Lineage, one step an entry: what went in, what was done, by which run."""
    spec = study.construction
    steps = [
        f"Source {s.key}: {s.layer or s.key}, {s.role} {s.name}, {s.domain} as "
        f"{s.sign} in {s.unit} from {s.datum}, sigma {s.sigma:g} {s.unit}."
        for s in study.sources
    ]
    steps.append(
        f"Construction from horizon {spec.horizon}: {spec.model}, shear angle "
        f"{spec.shear_angle:g} degrees from the vertical, solver {spec.solver}."
    )
    made = f" at {run.made_at}" if run.made_at else ""
    tool = f" with Heaveline {run.tool_version}" if run.tool_version else ""
    steps.append(f"Run {run.run_id or 'without a name'}{made}{tool}.")
    if run.inputs_digest:
        steps.append(f"SHA-256 of all inputs: {run.inputs_digest}.")
    return steps


def _set_place(metadata, layer):
    """State CRS and extent; a table has neither."""
    if not layer.isSpatial():
        return
    metadata.setCrs(layer.crs())
    if layer.featureCount() < 1 or layer.extent().isNull():
        return
    box = layer.extent3D() if hasattr(layer, "extent3D") else layer.extent()
    spatial = QgsLayerMetadata.SpatialExtent()
    spatial.extentCrs = layer.crs()
    spatial.bounds = box if isinstance(box, QgsBox3D) else QgsBox3D(box)
    extent = QgsLayerMetadata.Extent()
    extent.setSpatialExtents([spatial])
    metadata.setExtent(extent)


def set_notes(layer, layer_name, study):
    """Put the cautions into the layer's notes, which QGIS shows by an icon.

    Parameters
    ----------
    layer : QgsVectorLayer
    layer_name : str
    study : Study
    """
    title = escape(f"{LAYERS[layer_name].title}: {study.fault}")
    parts = [f"<h3>{title}</h3>", f"<p>{escape(_vertical(study))}</p>", "<ul>"]
    parts += [f"<li>{escape(text)}</li>" for text in layer_cautions(layer_name)]
    QgsLayerNotesUtils.setLayerNotes(layer, "\n".join([*parts, "</ul>"]))
