"""Rows to the layers of one GeoPackage, written whole or not at all."""

import errno
import hashlib
import os
import sqlite3
import time
from contextlib import closing, contextmanager, suppress
from dataclasses import dataclass, field
from math import isfinite
from pathlib import Path
from uuid import uuid4

import numpy as np
from osgeo import gdal
from qgis.core import (
    Qgis,
    QgsFeature,
    QgsFeatureSink,
    QgsField,
    QgsFields,
    QgsGeometry,
    QgsPoint,
    QgsProject,
    QgsProviderRegistry,
    QgsVectorFileWriter,
    QgsVectorLayer,
)
from qgis.PyQt.QtCore import QMetaObject, QMetaType, Qt

from ...geomcore.errors import GeomcoreError
from ..fields import Table
from .opening import say
from .wkb import line_wkb

__all__ = ["Table", "Written", "reload_layers", "write_geopackage"]

_TYPES = {
    "text": QMetaType.Type.QString,
    "integer": QMetaType.Type.LongLong,
    "real": QMetaType.Type.Double,
    "boolean": QMetaType.Type.Bool,
}
_GEOMETRIES = {
    None: Qgis.WkbType.NoGeometry,
    "Point": Qgis.WkbType.Point,
    "PointZ": Qgis.WkbType.PointZ,
    "LineString": Qgis.WkbType.LineString,
    "LineStringZ": Qgis.WkbType.LineStringZ,
}
#: Seconds that a file held open by another program is waited for.
PATIENCE = 20.0
#: What SQLite says while another connection has the file locked (BUSY, LOCKED).
_WAITING = (5, 6)
_LEFTOVERS = ("-wal", "-shm", "-journal")


@dataclass(frozen=True, eq=False)
class Written:
    """What was written.

    Parameters
    ----------
    path : pathlib.Path
    counts : dict of str to int
        Rows by layer.
    left_out : tuple of str
        Rows whose geometry could not be written, one sentence each.
    """

    path: Path
    counts: dict
    left_out: tuple = field(default=())


def write_geopackage(
    path, tables, crs, transform_context, dress=None, project=None, feedback=None
):
    """Write layers into a GeoPackage; other layers in it are kept.

    The new content is made beside the file and swapped in when complete, so that a
    failure leaves what was there byte for byte.

    Parameters
    ----------
    path : str or pathlib.Path
    tables : list of Table
        Layers of the same name are replaced.
    crs : QgsCoordinateReferenceSystem
    transform_context : QgsCoordinateTransformContext
    dress : callable, optional
        ``dress(layer)`` is called with each new layer (its name is the table's
        name) before the swap, to store style and metadata in the file.
    project : QgsProject, optional
        Project whose open layers are looked at; the current one if not given.
    feedback : QgsFeedback, optional
        Warned of rows that were left out.

    Returns
    -------
    Written

    Raises
    ------
    GeomcoreError
        With code ``output-in-use``, ``output-read-only`` or ``not-written``.
    """
    path = Path(path)
    project = project or QgsProject.instance()
    _check_target(path, project)
    state = _state(path)
    temporary = path.with_name(f".{path.stem}-{uuid4().hex[:8]}.gpkg")
    try:
        with _without_waiting_for_the_disk():
            _copy(path, temporary)
            counts, left_out = _write_tables(temporary, tables, crs, transform_context)
            _dress_and_check(temporary, counts, dress)
        _check_target(path, project)
        _check_unchanged(path, state)
        _swap(temporary, path)
    except (OSError, sqlite3.Error) as error:
        raise _cannot_write(path, error) from error
    finally:
        _remove(temporary)
    reload_layers(path, project)
    _report(left_out, feedback)
    return Written(path, counts, tuple(left_out))


@contextmanager
def _without_waiting_for_the_disk():
    """Let GDAL not wait for the disk at every step: the file is a draft until `_swap`.

    The setting is one of this thread, so that no other work is touched.
    """
    name = "OGR_SQLITE_SYNCHRONOUS"
    before = gdal.GetThreadLocalConfigOption(name)
    gdal.SetThreadLocalConfigOption(name, "OFF")
    try:
        yield
    finally:
        gdal.SetThreadLocalConfigOption(name, before)


def _write_tables(path, tables, crs, transform_context):
    counts, left_out = {}, []
    for table in tables:
        count, lost = _write_table(path, table, crs, transform_context)
        counts[table.name] = count
        left_out += lost
    return counts, left_out


def _refuse(code, reason, path, remedy):
    raise GeomcoreError(code, reason, f"output file '{path}'", remedy)


def _check_target(path, project):
    """Refuse a target that cannot or must not be replaced now."""
    if path.suffix.lower() != ".gpkg":
        _refuse("not-written", "it is no GeoPackage.", path, "End its name in .gpkg.")
    if not path.parent.is_dir():
        _refuse("not-written", "its folder does not exist.", path, "Make the folder.")
    if path.is_dir():
        _refuse("not-written", "it is a folder.", path, "Give a file name.")
    if not path.exists():
        return
    if not path.stat().st_mode & 0o222 or not os.access(path, os.W_OK):
        _refuse(
            "output-read-only",
            "it is read-only.",
            path,
            "Make it writable, or give another file.",
        )
    _check_unused(path, project)


def _check_unused(path, project):
    """Refuse a file that is being edited: swapping it would lose edits silently."""
    editing = [n.name() for n in _layers_at(path, project) if n.isEditable()]
    if editing:
        _refuse(
            "output-in-use",
            f"its layer '{editing[0]}' is being edited.",
            path,
            "Save or discard the edits, then run again.",
        )
    wal, journal = (Path(f"{path}{end}") for end in ("-wal", "-journal"))
    if wal.exists() or (journal.exists() and journal.stat().st_size):
        _refuse(
            "output-in-use",
            "it is open for editing in another program (there is a file "
            f"'{wal.name if wal.exists() else journal.name}' beside it).",
            path,
            "End the editing there, or give another file.",
        )


def _layers_at(path, project):
    """Layers of a project that lie in a file."""
    registry = QgsProviderRegistry.instance()
    for layer in project.mapLayers().values():
        parts = registry.decodeUri(layer.providerType(), layer.source())
        own = parts.get("path")
        if own and isinstance(layer, QgsVectorLayer) and _same_file(Path(own), path):
            yield layer


def _same_file(a, b):
    try:
        return a.samefile(b)
    except OSError:
        return False


def reload_layers(path, project=None):
    """Let the open layers of a file show its new content, from whatever thread.

    Parameters
    ----------
    path : str or pathlib.Path
    project : QgsProject, optional
        The current one if not given.
    """
    for layer in _layers_at(Path(path), project or QgsProject.instance()):
        for slot in ("reload", "triggerRepaint"):
            # at once in the layer's own thread, else when that thread gets to it
            QMetaObject.invokeMethod(layer, slot, Qt.ConnectionType.AutoConnection)


def _state(path):
    """Give what tells that a file's content has changed; None where there is none.

    Not its time: QGIS switches a file it only opens for reading out of write-ahead
    mode, which touches the bytes of the header that are left out here (SQLite file
    format, section 1.3: format versions, change counter, version-valid-for).
    """
    if not path.exists():
        return None
    total = hashlib.blake2b()
    with path.open("rb") as stream:
        head = bytearray(stream.read(100))
        for start, stop in ((18, 20), (24, 28), (92, 96)):
            head[start:stop] = bytes(stop - start)
        total.update(head)
        while block := stream.read(1 << 20):
            total.update(block)
    return total.digest()


def _check_unchanged(path, state):
    if _state(path) != state:
        _refuse(
            "output-in-use",
            "another program changed it while the results were being written.",
            path,
            "Run again when the other program is done.",
        )


def _copy(path, temporary):
    """Copy the file as it stands, so that its other layers are kept."""
    if not path.exists() or not path.stat().st_size:
        return
    with closing(sqlite3.connect(path, timeout=PATIENCE)) as source:
        if not _is_geopackage(source, path):
            _refuse(
                "not-written",
                "there is a file of that name that is no GeoPackage.",
                path,
                "Give another name, or remove it.",
            )
        with closing(sqlite3.connect(temporary)) as target:
            target.execute("pragma synchronous = off")
            _backup(source, target, path)


def _is_geopackage(database, path):
    """Tell a GeoPackage from another database or file."""
    query = "select count(*) from sqlite_master where name = 'gpkg_contents'"
    try:
        return database.execute(query).fetchone()[0] == 1
    except sqlite3.OperationalError:
        _refuse_locked(path)
    except sqlite3.DatabaseError:
        return False


def _refuse_locked(path):
    _refuse(
        "output-in-use",
        f"another program has had it locked for {PATIENCE:.0f} seconds.",
        path,
        "Close it there, or give another file.",
    )


def _backup(source, target, path):
    """Copy a database into another, all or nothing, waiting for locks so long."""
    end = time.monotonic() + PATIENCE

    def look(status, *_):
        if status in _WAITING and time.monotonic() > end:
            _refuse_locked(path)

    source.backup(target, pages=-1, progress=look, sleep=0.1)


def _qgs_fields(spec):
    fields = QgsFields()
    for own in spec.fields:
        made = QgsField(own.name, _TYPES[own.type])
        made.setAlias(own.alias)
        made.setComment(own.comment)
        fields.append(made)
    return fields


def _options(path, spec):
    options = QgsVectorFileWriter.SaveVectorOptions()
    options.driverName = "GPKG"
    options.layerName = spec.name
    options.layerOptions = [
        "FID=fid",
        "GEOMETRY_NAME=geom",
        f"DESCRIPTION={spec.title}",
    ]
    options.actionOnExistingFile = (
        QgsVectorFileWriter.ActionOnExistingFile.CreateOrOverwriteLayer
        if path.exists()
        else QgsVectorFileWriter.ActionOnExistingFile.CreateOrOverwriteFile
    )
    return options


def _write_table(path, table, crs, transform_context):
    """Write one layer; give the number of rows and what had to be left out."""
    spec = table.spec
    fields = _qgs_fields(spec)
    features, left_out = _features(table, fields)
    writer = QgsVectorFileWriter.create(
        str(path),
        fields,
        _GEOMETRIES[spec.geometry],
        crs,
        transform_context,
        _options(path, spec),
    )
    good = writer.hasError() == QgsVectorFileWriter.WriterError.NoError
    good = good and writer.addFeatures(features, QgsFeatureSink.Flag.FastInsert)
    good = good and writer.flushBuffer()
    message = writer.errorMessage()
    del writer  # closes the file
    if not good:
        raise OSError(message or f"layer '{spec.name}' could not be written")
    if spec.geometry:
        bare = [i + 1 for i, f in enumerate(features) if not f.hasGeometry()]
        _take_geometry(path, spec.name, bare)
    return len(features), left_out


def _take_geometry(path, name, fids):
    """Make the geometry of some features null.

    QGIS's writer gives them an empty one, whose bytes hold coordinates of NaN.
    """
    if not fids:
        return
    dataset = gdal.OpenEx(str(path), gdal.OF_VECTOR | gdal.OF_UPDATE)
    layer = dataset.GetLayerByName(name)
    layer.StartTransaction()
    for fid in fids:
        feature = layer.GetFeature(fid)
        feature.SetGeometry(None)
        layer.SetFeature(feature)
    layer.CommitTransaction()


def _features(table, fields):
    """Make the features of a table, and say which rows cannot be written."""
    spec = table.spec
    known = set(spec.names)
    plain = [(f.name, _PLAIN[f.type]) for f in spec.fields]
    make = _maker(spec.geometry)
    features, left_out = [], []
    for coordinates, values in table.rows:
        if not values.keys() <= known:
            extra = ", ".join(sorted(values.keys() - known))
            raise GeomcoreError(
                "bad-row", f"layer '{spec.name}' has no fields {extra}."
            )
        feature = QgsFeature(fields)
        if coordinates is not None:
            geometry, problem = make(coordinates)
            if problem:
                left_out.append(_left_out_text(spec.name, values, problem))
                continue
            feature.setGeometry(geometry)
        get = values.get
        feature.setAttributes(
            [None if (v := get(n)) is None or v != v else kind(v) for n, kind in plain]
        )
        features.append(feature)
    return features, left_out


#: Plain Python types of the field types: NumPy's own are unknown to QGIS.
_PLAIN = {"text": str, "integer": int, "real": float, "boolean": bool}


def _left_out_text(name, values, problem):
    who = values.get("trace_id") or values.get("section_id") or "a row"
    return f"{name}: {who} was not written: {problem}"


def _maker(geometry):
    """Give the function that makes a geometry of coordinates, or says why not."""
    width = 3 if geometry and geometry.endswith("Z") else 2

    def point(coordinates):
        try:
            if len(coordinates) != width:
                return None, f"its coordinates are no {geometry}."
            if not isfinite(sum(coordinates)):
                return None, "a coordinate is unknown."
            return QgsGeometry(QgsPoint(*map(float, coordinates))), ""
        except TypeError:
            return None, f"its coordinates are no {geometry}."

    def line(coordinates):
        array = np.asarray(coordinates, dtype=float)
        if array.ndim != 2 or array.shape[1] != width:
            return None, f"its coordinates are no {geometry}."
        if not np.isfinite(array).all():
            return None, "a coordinate is unknown."
        if len(array) < 2:
            return None, "a line needs two points."
        made = QgsGeometry()
        made.fromWkb(line_wkb(array))
        return made, ""

    def nothing(_):
        return None, "a plain table has no geometries."

    if geometry is None:
        return nothing
    return point if geometry in ("Point", "PointZ") else line


def _dress_and_check(path, counts, dress):
    """Style each new layer, and make sure that the file holds what it should.

    Errors of a full disk may show only when the file is closed, without a word from
    the writer; so the file is opened again and counted.
    """
    for name in counts if dress is not None else ():
        layer = QgsVectorLayer(f"{path}|layername={name}", name, "ogr")
        if not layer.isValid():
            raise OSError(f"layer '{name}' is not in the new file")
        dress(layer)
        del layer  # closes the file
    with closing(sqlite3.connect(path)) as database:
        database.execute("pragma journal_mode = delete").fetchone()
        verdict = database.execute("pragma quick_check").fetchone()[0]
        query = "select table_name, feature_count from gpkg_ogr_contents"
        found = dict(database.execute(query).fetchall())
    if verdict != "ok":
        raise OSError(f"the file is damaged: {verdict}")
    for name, count in counts.items():
        rows = (found[name] or 0) if name in found else -1  # null where there is none
        if rows != count:
            raise OSError(f"layer '{name}' has {max(rows, 0)} of {count} rows")


def _swap(temporary, path):
    """Put the new file in the place of the old one."""
    with temporary.open("rb+") as stream:
        os.fsync(stream.fileno())
    try:
        temporary.replace(path)
    except PermissionError:
        _copy_content(temporary, path)


def _copy_content(temporary, path):
    """Replace a file's content in one transaction, where the file itself cannot be.

    Windows neither replaces nor moves a file that is open, be it by QGIS itself.
    """
    is_new = not path.exists()
    try:
        with (
            closing(sqlite3.connect(temporary)) as source,
            closing(sqlite3.connect(path, timeout=PATIENCE)) as target,
        ):
            _backup(source, target, path)
    except BaseException:
        if is_new:
            with suppress(OSError):
                path.unlink()
        raise


def _cannot_write(path, error):
    """Say why a file could not be written, and what to do."""
    number = getattr(error, "errno", None)
    text = f"output file '{path}'"
    if number in (errno.EACCES, errno.EPERM, errno.EROFS):
        return GeomcoreError(
            "output-read-only",
            "it cannot be written: the folder or the file is read-only.",
            text,
            "Give another folder, or make this one writable.",
        )
    reason = getattr(error, "strerror", None) or str(error)
    full = number in (errno.ENOSPC, errno.EFBIG) or "full" in reason
    return GeomcoreError(
        "not-written",
        f"it could not be written ({reason}); what was there before is unchanged.",
        text,
        "Free disk space." if full else "Check the disk and the folder.",
    )


def _remove(temporary):
    for end in ("", *_LEFTOVERS):
        with suppress(OSError):
            Path(f"{temporary}{end}").unlink()


def _report(left_out, feedback):
    for text in left_out:
        say(feedback, text)
