"""Dresses an output layer: our style, aliases, notes, metadata, kept in its file.

Everything is stored inside the GeoPackage, so that whoever opens the file, with or
without this plugin, sees the layer as it is meant.
"""

import sqlite3
from contextlib import closing
from pathlib import Path

from qgis.core import QgsProviderRegistry
from qgis.PyQt.QtXml import QDomDocument

from ...geomcore.errors import GeomcoreError
from ..fields import LAYERS
from .metadata import RunNote, layer_metadata, run_of, set_notes
from .ranges import fit_balls, fit_to_data

__all__ = ["STYLES", "STYLE_NAME", "RunNote", "dress", "dresser", "style_file"]

#: Folder of the styles that come with the plugin, one QML a layer.
STYLES = Path(__file__).resolve().parent / "styles"
#: Name of our style inside the file; a style of another name is the user's own.
STYLE_NAME = "Heaveline"
_STYLE_NOTE = "Drawn by Heaveline for this run"

#: The standard table of field descriptions, as the GeoPackage standard has it.
_DATA_COLUMNS = """
CREATE TABLE IF NOT EXISTS gpkg_data_columns (
    table_name TEXT NOT NULL,
    column_name TEXT NOT NULL,
    name TEXT,
    title TEXT,
    description TEXT,
    mime_type TEXT,
    constraint_name TEXT,
    CONSTRAINT pk_gdc PRIMARY KEY (table_name, column_name),
    CONSTRAINT gdc_tn UNIQUE (table_name, name)
)"""
_EXTENSIONS = """
CREATE TABLE IF NOT EXISTS gpkg_extensions (
    table_name TEXT,
    column_name TEXT,
    extension_name TEXT NOT NULL,
    definition TEXT NOT NULL,
    scope TEXT NOT NULL,
    CONSTRAINT ge_tce UNIQUE (table_name, column_name, extension_name)
)"""
_DECLARE_SCHEMA = """
INSERT INTO gpkg_extensions
    (table_name, column_name, extension_name, definition, scope)
SELECT 'gpkg_data_columns', NULL, 'gpkg_schema',
    'http://www.geopackage.org/spec/#extension_schema', 'read-write'
WHERE NOT EXISTS (
    SELECT 1 FROM gpkg_extensions
    WHERE extension_name = 'gpkg_schema' AND table_name = 'gpkg_data_columns'
)"""
_DESCRIBE = """
INSERT OR REPLACE INTO gpkg_data_columns
    (table_name, column_name, name, title, description)
VALUES (?, ?, NULL, ?, ?)"""
_OTHER_DEFAULT = """
SELECT 1 FROM layer_styles
WHERE f_table_name = ? AND useAsDefault AND styleName <> ?"""
_RECORDED = """
SELECT run_id, inputs_digest, tool_version, made_at FROM runs
WHERE run_id = ? ORDER BY made_at DESC"""
_HAS_TABLE = "SELECT 1 FROM sqlite_master WHERE type = 'table' AND name = ?"


def style_file(layer_name):
    """Give the QML file of an output layer; None for a plain table."""
    path = STYLES / f"{layer_name}.qml"
    return path if path.is_file() else None


def dresser(study, run=None):
    """Make the function that `write_geopackage` calls with each new layer.

    Parameters
    ----------
    study : Study
    run : RunNote, optional
        As in `dress`.

    Returns
    -------
    callable
        ``f(layer)``, where the layer's name is that of its table.
    """
    return lambda layer: dress(layer, layer.name(), study, run)


def dress(layer, layer_name, study, run=None):
    """Give a layer style, aliases, notes and metadata, and store them in its file.

    Parameters
    ----------
    layer : QgsVectorLayer
        Inside a GeoPackage, with all its features.
    layer_name : str
        A name of `fields.LAYERS`; a layer of another name is left as it is.
    study : Study
        For names, unit, datum and sources.
    run : RunNote, optional
        Which run made it; read from the layer and its file if not given.

    Raises
    ------
    GeomcoreError
        With code ``not-written`` if style or metadata cannot be stored.

    Notes
    -----
    A style that the user has saved in the file as default under a name of their own
    stays the default; ours is then stored beside it.
    """
    if layer_name not in LAYERS:
        return
    run = _merged(_recorded(layer, run_of(layer)), run)
    style(layer, layer_name, study)
    layer.setMetadata(layer_metadata(layer, layer_name, study, run))
    set_notes(layer, layer_name, study)
    _store_metadata(layer, layer_name)
    _store_style(layer, layer_name)
    _store_field_notes(layer, layer_name)


def style(layer, layer_name, study):
    """Give a layer its style and aliases, without storing them.

    Parameters
    ----------
    layer : QgsVectorLayer
        Any layer with the fields of `layer_name`, in a file or not.
    layer_name : str
    study : Study

    Raises
    ------
    GeomcoreError
        With code ``bad-style`` if a style of the plugin cannot be read.
    """
    path = style_file(layer_name)
    if path is not None:
        _load(layer, layer_name, path)
        fit_to_data(layer, layer_name, study)
    for field in LAYERS[layer_name].fields:
        index = layer.fields().lookupField(field.name)
        if index >= 0:
            layer.setFieldAlias(index, field.alias)


def _load(layer, layer_name, path):
    """Load a QML file, its 3D symbols sized to the layer."""
    document = QDomDocument()
    document.setContent(path.read_text(encoding="utf-8"))
    fit_balls(document, layer, layer_name)
    loaded, message = layer.importNamedStyle(document)
    if document.documentElement().isNull() or not loaded:
        raise GeomcoreError(
            "bad-style",
            f"the style {path.name} cannot be read{message and ': '}{message}.",
            f"layer '{layer_name}'",
            "Install the plugin anew.",
        )


def _merged(found, given):
    """Take what was given about the run, and the rest from the layer."""
    if given is None:
        return found
    names = RunNote.__dataclass_fields__
    return RunNote(*(getattr(given, n) or getattr(found, n) for n in names))


def _recorded(layer, run):
    """Fill in from the file's own table of runs what the layer does not say."""
    path, _ = _file_and_table(layer)
    with closing(sqlite3.connect(path)) as database:
        try:
            row = database.execute(_RECORDED, (run.run_id,)).fetchone()
        except sqlite3.OperationalError:
            return run  # no such table, or somebody else's of the same name
    return run if row is None else _merged(RunNote(*(v or "" for v in row)), run)


def _file_and_table(layer):
    """Give the file and the table of a layer."""
    parts = QgsProviderRegistry.instance().decodeUri(
        layer.providerType(), layer.source()
    )
    return Path(parts["path"]), parts.get("layerName") or layer.name()


def _refuse(layer_name, what, message):
    raise GeomcoreError(
        "not-written",
        f"its {what} could not be stored: {message}.",
        f"layer '{layer_name}'",
        "Check that the disk is not full and the file not in use.",
    )


def _store_metadata(layer, layer_name):
    stored, message = QgsProviderRegistry.instance().saveLayerMetadata(
        layer.providerType(), layer.source(), layer.metadata()
    )
    if not stored:
        _refuse(layer_name, "metadata", message)


def _store_style(layer, layer_name):
    path, table = _file_and_table(layer)
    is_default = not _has_other_default(path, table)
    message = layer.saveStyleToDatabase(STYLE_NAME, _STYLE_NOTE, is_default, "")
    if message:
        _refuse(layer_name, "style", message)


def _has_other_default(path, table):
    """Tell whether the user made a style of their own the default of this layer."""
    with closing(sqlite3.connect(path)) as database:
        if not database.execute(_HAS_TABLE, ("layer_styles",)).fetchone():
            return False
        return bool(database.execute(_OTHER_DEFAULT, (table, STYLE_NAME)).fetchone())


def _store_field_notes(layer, layer_name):
    """Write the meaning of each field where the GeoPackage standard wants it.

    QGIS shows them as comments where its GDAL is 3.7 or newer.
    """
    path, table = _file_and_table(layer)
    rows = [(table, f.name, f.alias, f.comment) for f in LAYERS[layer_name].fields]
    with closing(sqlite3.connect(path)) as database, database:
        for statement in (_DATA_COLUMNS, _EXTENSIONS, _DECLARE_SCHEMA):
            database.execute(statement)
        database.executemany(_DESCRIBE, rows)
