"""Layers by their source, the study's CRS and unit, and the versions of the parts."""

import sys
from pathlib import Path

import numpy as np
from osgeo import gdal
from qgis.core import (
    Qgis,
    QgsCoordinateReferenceSystem,
    QgsCoordinateTransformContext,
    QgsDataSourceUri,
    QgsMessageLog,
    QgsProjUtils,
    QgsProviderRegistry,
    QgsProviderSublayerDetails,
    QgsRasterLayer,
    QgsVectorLayer,
)
from qgis.PyQt.QtCore import qVersion

from ...geomcore.errors import SourceError, StudyError

__all__ = [
    "is_undefined",
    "length_unit_of",
    "open_layer",
    "say",
    "study_crs",
    "versions",
]

_UNITS = {
    Qgis.DistanceUnit.Meters: "m",
    Qgis.DistanceUnit.Feet: "ft",
    Qgis.DistanceUnit.FeetUSSurvey: "us-ft",
}
#: Sources that name their provider: the key before the colon, as in Processing.
_WITH_PROVIDER = ("postgres", "delimitedtext", "memory", "spatialite", "mssql", "WFS")


def say(feedback, text):
    """Give a warning to the user: by the feedback, else in QGIS's message log."""
    if feedback is not None:
        feedback.pushWarning(text)
    else:
        QgsMessageLog.logMessage(text, "Heaveline", Qgis.MessageLevel.Warning)


def versions():
    """Give the versions of what computes, reads and writes, by name."""
    return {
        "Python": sys.version.split()[0],
        "QGIS": Qgis.version(),
        "Qt": qVersion(),
        "GDAL": gdal.__version__,
        "GEOS": Qgis.geosVersion(),
        "PROJ": f"{QgsProjUtils.projVersionMajor()}.{QgsProjUtils.projVersionMinor()}",
        "numpy": np.__version__,
    }


def is_undefined(crs):
    """Tell whether a layer's CRS says nothing of where its coordinates lie.

    A GeoPackage layer without CRS is given one of two stand-ins (srs_id -1 and 0 of
    the OGC GeoPackage standard, "Undefined Cartesian SRS" and "Undefined geographic
    SRS"), which QGIS takes for real ones; writers use either for plane metres too.
    """
    stand_in = not crs.authid() and crs.description().startswith("Undefined ")
    return not crs.isValid() or stand_in


def study_crs(crs):
    """Give the study's CRS, refusing what lengths and angles cannot be measured in.

    Parameters
    ----------
    crs : str or QgsCoordinateReferenceSystem
        Authority code (``EPSG:32633``), WKT, or a CRS object.

    Raises
    ------
    StudyError
        With code ``study-crs`` if it is unknown, not projected, or Web Mercator.
    """
    given = crs
    if not isinstance(crs, QgsCoordinateReferenceSystem):
        crs = QgsCoordinateReferenceSystem(str(crs or ""))
    if not crs.isValid():
        _refuse_crs(f"'{_name(crs) or given}' is not a CRS that QGIS knows.", crs)
    flat = crs.horizontalCrs() if crs.type() == Qgis.CrsType.Compound else crs
    if flat.isGeographic():
        _refuse_crs(f"{_name(crs)} is geographic: its coordinates are degrees.", flat)
    if _is_world_mercator(flat):
        _refuse_crs(
            f"{_name(crs)} is Web Mercator or another Mercator of the whole world: "
            "its lengths are too long, more so the farther from the equator.",
            flat,
        )
    if flat.type() not in (Qgis.CrsType.Projected, Qgis.CrsType.DerivedProjected):
        _refuse_crs(f"{_name(crs)} is not a projected CRS.", flat)
    length_unit_of(crs)
    return crs


def _name(crs):
    if not isinstance(crs, QgsCoordinateReferenceSystem):
        return str(crs)
    return crs.authid() or crs.description() or crs.userFriendlyIdentifier()


def _is_world_mercator(crs):
    """Tell EPSG:3857 under any of its names, and its sisters, by area of use."""
    box = crs.bounds()
    # an area across the date line has its east end west of its west end
    wide = box.isNull() or box.width() % 360.0 > 180.0 or box.width() == 360.0
    return crs.projectionAcronym() in ("merc", "webmerc") and wide


def _refuse_crs(reason, crs):
    raise StudyError(
        "study-crs",
        reason,
        "study CRS",
        f"Choose a projected CRS that suits the area{_utm_of(crs)}; layers in other "
        "CRSs are reprojected when they are read.",
    )


def _utm_of(crs):
    """Name the UTM zone in which a CRS's area of use lies, where it is small."""
    box = crs.bounds() if crs.isValid() else None
    if box is None or box.isEmpty() or not 0.0 < box.width() <= 12.0:
        return ", for example its UTM zone"
    middle = box.center()
    zone = int((middle.x() + 180.0) // 6.0) % 60 + 1
    base = 32600 if middle.y() >= 0 else 32700
    return f", for example EPSG:{base + zone} (UTM zone {zone})"


def length_unit_of(crs):
    """Give the length unit of a projected CRS: ``m``, ``ft`` or ``us-ft``.

    Raises
    ------
    StudyError
        With code ``study-crs`` if its unit is another one.
    """
    unit = _UNITS.get(crs.mapUnits())
    if unit is None:
        _refuse_crs(
            f"{_name(crs)} does not count in metres, international feet or US survey "
            "feet.",
            crs,
        )
    return unit


def open_layer(uri, base, label=""):
    """Open a layer by its source.

    Parameters
    ----------
    uri : str
        ``file.gpkg|layername=x|subset=...``, a raster or vector file, a database
        table as ``postgres://...``; files are looked for from `base`.
    base : pathlib.Path or None
        Folder of the study file.
    label : str
        Name of the source, for messages and as the layer's name.

    Raises
    ------
    SourceError
        With code ``no-layer`` if there is no such layer, or more than one fits.
    """
    uri = str(uri or "").strip()
    if not uri:
        _no_layer("no layer is named.", label, "Give its source (uri).")
    provider = uri.split(":", 1)[0]
    if "|" not in provider and provider in _WITH_PROVIDER:
        return _checked(_of_provider(provider, uri, label), uri, label)
    path, options = _split(uri)
    path = _from_base(path, base)
    return _sublayer(path, options, label)


def _of_provider(provider, uri, label):
    rest = uri.split(":", 1)[1]
    if provider == "memory":
        return QgsVectorLayer(rest, label, provider)
    return QgsVectorLayer(rest[2:] if rest.startswith("//") else rest, label, provider)


def _split(uri):
    """Split a source into its path and its options; a subset may hold bars."""
    head, _, subset = uri.partition("|subset=")
    path, *rest = head.split("|")
    options = dict(part.split("=", 1) for part in rest if "=" in part)
    if subset:
        options["subset"] = subset
    return path, options


def _from_base(path, base):
    """Resolve a relative file name against the study's folder."""
    if "://" in path or path.startswith(("/vsi", "GPKG:", "NETCDF:", "HDF5:")):
        return path
    path = Path(path)
    if not path.is_absolute() and base is not None:
        path = Path(base) / path
    return str(path)


def _sublayer(path, options, label):
    plain = "://" not in path and ":" not in path[2:] and not path.startswith("/vsi")
    if plain and not Path(path).exists():
        _no_layer(f"there is no file '{path}'.", label, "Check the path.")
    found = QgsProviderRegistry.instance().querySublayers(path)
    found = [
        s for s in found if s.type() in (Qgis.LayerType.Vector, Qgis.LayerType.Raster)
    ]
    name = options.get("layername")
    names = sorted({s.name() for s in found})
    if name is not None:
        found = [s for s in found if s.name() == name]
    if len(found) > 1 and len({s.name() for s in found}) == 1:
        found = [s for s in found if s.providerKey() in ("ogr", "gdal")][:1] or found[
            :1
        ]
    if not found:
        what = f"no layer '{name}'" if name else "no map layer"
        has = f" It has: {', '.join(names)}." if names else ""
        _no_layer(f"'{path}' has {what}.{has}", label, "Check the source.")
    if len(found) > 1:
        _no_layer(
            f"'{path}' has several layers: {', '.join(names)}.",
            label,
            "Name one with |layername=...",
        )
    layer = found[0].toLayer(
        QgsProviderSublayerDetails.LayerOptions(QgsCoordinateTransformContext())
    )
    layer.setName(label or found[0].name())
    _checked(layer, path, label)
    if "subset" in options:
        _set_subset(layer, options["subset"], label)
    return layer


def _set_subset(layer, subset, label):
    if isinstance(layer, QgsRasterLayer) or not layer.setSubsetString(subset):
        _no_layer(
            f"its filter '{subset}' is not understood.", label, "Check field names."
        )


def _checked(layer, uri, label):
    if layer is None or not layer.isValid():
        why = "" if layer is None else layer.error().summary()
        shown = QgsDataSourceUri.removePassword(uri)
        _no_layer(
            f"'{shown}' cannot be opened. {why}".strip(), label, "Check the source."
        )
    return layer


def _no_layer(reason, label, remedy):
    where = f"source '{label}'" if label else "source"
    raise SourceError("no-layer", reason, where, remedy)
