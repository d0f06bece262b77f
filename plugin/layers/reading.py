"""Vector layers to flat arrays: declared sources, section lines."""

import re
from dataclasses import dataclass
from itertools import islice

import numpy as np
from qgis.core import (
    NULL,
    Qgis,
    QgsFeatureRequest,
    QgsGeometry,
    QgsRasterLayer,
    QgsRectangle,
    QgsWkbTypes,
)
from qgis.PyQt.QtCore import QMetaType

from ...geomcore.cells import expanded
from ...geomcore.errors import GeomcoreError, SourceError
from ...geomcore.picks import corridor_boxes
from ...geomcore.section import parse_azimuth
from ...geomcore.sources import Features
from ...geomcore.study import SectionLine
from .opening import is_undefined, open_layer, say
from .wkb import Parts, PartsCollector, UnknownGeometry, parse_wkb

__all__ = ["near_section", "read_section_lines", "read_source", "read_table"]

_KINDS = {1: "point", 2: "line", 3: "polygon"}
#: What a layer of each role may be; the core knows what to do with these.
_ALLOWED = {
    "horizon": ("point", "line", "raster"),
    "fault trace": ("line", "point"),
    "fault": ("point", "line", "raster"),
    "cut-off": ("line", "polygon", "point"),
    "subsidiary fault": ("point", "line"),
}
_NUMBER = re.compile(r"\s*[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?\s*")
_NUMERIC = (
    QMetaType.Type.Int,
    QMetaType.Type.UInt,
    QMetaType.Type.LongLong,
    QMetaType.Type.ULongLong,
    QMetaType.Type.Double,
    QMetaType.Type.Float,
    QMetaType.Type.Short,
)
#: Features held at once; geometries, or bytes of them, parsed at once.
_FEATURES, _PARSED, _BYTES = 100, 5000, 500_000


def read_source(
    declaration, crs, base, transform_context, feedback=None, layer=None, near=None
):
    """Read what a source declares, in the study's CRS.

    Parameters
    ----------
    declaration : SourceDeclaration
    crs : QgsCoordinateReferenceSystem
        Of the study.
    base : pathlib.Path or None
        Folder that relative sources are looked for from.
    transform_context : QgsCoordinateTransformContext
    feedback : QgsFeedback, optional
        Warned, and asked for cancellation.
    layer : QgsMapLayer or QgsProcessingFeatureSource, optional
        The layer itself, where it is at hand; else opened from ``declaration.uri``.
    near : list of (xmin, ymin, xmax, ymax), optional
        Read only features near these boxes of the study's CRS: quicker for one or
        few sections. Counts are then of what was read.

    Returns
    -------
    Features or Grid

    Raises
    ------
    SourceError
        If there is no such layer or field, or the layer's geometry does not suit
        its role.
    """
    if layer is None:
        layer = open_layer(declaration.uri, base, declaration.layer or declaration.key)
    if isinstance(layer, QgsRasterLayer):
        from .grids import read_grid

        _check_kind("raster", declaration, layer)
        return read_grid(layer, crs, transform_context, feedback)
    _check_geometry(declaration, layer)
    wanted = _wanted_fields(declaration, layer)
    table = read_table(
        layer, list(wanted.values()), crs, transform_context, feedback, near
    )
    surface = _surface(declaration, crs, base, transform_context, feedback)
    return _features(declaration, layer, wanted, table, surface, feedback)


def near_section(frame, corridor=0.0):
    """Give the boxes for `read_source` to read only what lies near a section.

    Worth it for about ten sections at most; beyond, one reading of all is quicker.

    Parameters
    ----------
    frame : SectionFrame
    corridor : float
        Half-width along strike; 0 for lines, which count where they are crossed.

    Returns
    -------
    list of (xmin, ymin, xmax, ymax)
    """
    low, high = corridor_boxes(frame, corridor, most=10)
    return np.column_stack([low, high]).tolist()


def layer_name(layer):
    """Give the name of a map layer or of a Processing source."""
    name = layer.sourceName if hasattr(layer, "sourceName") else layer.name
    return name()


def layer_crs(layer):
    """Give the CRS of a map layer or of a Processing source."""
    return (layer.sourceCrs if hasattr(layer, "sourceCrs") else layer.crs)()


def _where(declaration, layer):
    return f"source '{declaration.key}', layer '{layer_name(layer)}'"


def _check_kind(kind, declaration, layer):
    allowed = _ALLOWED[declaration.role]
    if kind not in allowed:
        raise SourceError(
            "wrong-geometry",
            f"a {declaration.role} cannot be a {kind} layer.",
            _where(declaration, layer),
            f"Use a layer of type: {', '.join(allowed)}.",
        )


def _check_geometry(declaration, layer):
    """Refuse a layer whose geometry does not suit its role, or that has no Z."""
    wkb = layer.wkbType()
    if wkb == Qgis.WkbType.NoGeometry:
        raise SourceError(
            "wrong-geometry",
            f"a {declaration.role} needs geometries; the layer is a plain table.",
            _where(declaration, layer),
            f"Use a layer of type: {', '.join(_ALLOWED[declaration.role])}.",
        )
    kind = {
        Qgis.GeometryType.Point: "point",
        Qgis.GeometryType.Line: "line",
        Qgis.GeometryType.Polygon: "polygon",
    }.get(QgsWkbTypes.geometryType(wkb))
    if kind is not None:
        _check_kind(kind, declaration, layer)
    has_z = QgsWkbTypes.hasZ(wkb) or wkb in (
        Qgis.WkbType.Unknown,
        Qgis.WkbType.GeometryCollection,
    )
    if declaration.z.source == "geometry" and not has_z:
        raise SourceError(
            "no-z",
            "z is declared to come from the geometry, but the geometries have no Z.",
            _where(declaration, layer),
            "Name the field that holds it, a raster, or a constant value.",
        )


def _wanted_fields(declaration, layer):
    """Give the indices of the declared fields by what they are used for."""
    names = {
        "z": declaration.z.field if declaration.z.source == "field" else None,
        "name": declaration.name_field,
        "dip": declaration.dip_field,
        "dip_azimuth": declaration.dip_azimuth_field,
    }
    where = _where(declaration, layer)
    return {
        use: field_index(layer.fields(), name, where)
        for use, name in names.items()
        if name
    }


def field_index(fields, name, where):
    """Give the index of a field.

    Raises
    ------
    SourceError
        With code ``no-field``, listing the fields the layer has.
    """
    index = fields.lookupField(name)
    if index < 0:
        raise SourceError(
            "no-field",
            f"there is no field '{name}'.",
            where,
            f"It has: {', '.join(fields.names()) or 'no fields'}.",
        )
    return index


@dataclass(frozen=True, eq=False)
class FeatureTable:
    """Features as read, in the CRS asked for.

    Parameters
    ----------
    fid : ndarray (n,) of int
    parts : Parts
        Their geometries; ``parts.owner`` is the number of the feature.
    columns : list of list
        Attribute values by field, in the order asked for.
    lost : frozenset of int
        Ids of the features that could not be reprojected; they have no geometry.
    """

    fid: np.ndarray
    parts: Parts
    columns: list
    lost: frozenset = frozenset()

    def in_order(self):
        """Give the features in order of their id, each once.

        Whatever order a provider takes, the same features give the same arrays, and
        so the same digest.
        """
        if np.all(np.diff(self.fid) > 0):
            return self
        fid, first = np.unique(self.fid, return_index=True)
        number = np.full(len(self.fid), -1)
        number[first] = np.arange(len(first))
        parts = self.parts.select(number[self.parts.owner] >= 0)
        owner = number[parts.owner]
        order = np.argsort(owner, kind="stable")
        at, _ = expanded(parts.offsets[order], parts.count[order])
        return FeatureTable(
            fid,
            Parts(parts.kind[order], owner[order], parts.count[order], parts.rows[at]),
            [[c[i] for i in first.tolist()] for c in self.columns],
            self.lost,
        )


def read_table(layer, indices, crs, transform_context, feedback=None, near=None):
    """Read geometries, feature ids and some attributes.

    Parameters
    ----------
    layer : QgsVectorLayer or QgsProcessingFeatureSource
    indices : list of int
        Fields to read.
    crs : QgsCoordinateReferenceSystem
        CRS to reproject to.
    transform_context : QgsCoordinateTransformContext
    feedback, near
        As in `read_source`.

    Returns
    -------
    FeatureTable
    """
    lost = []

    def count_lost(feature):
        # QGIS keeps a bare pointer: it has to live until all features are read
        lost.append(feature.id())

    request = _request(layer, indices, crs, transform_context, feedback, count_lost)
    fid, columns = [], [[] for _ in indices]
    parts = PartsCollector(0 if near is not None else layer.featureCount())
    for features in _iterators(layer, request, near):
        _collect(features, indices, fid, parts, columns, feedback)
    table = FeatureTable(
        np.array(fid, dtype=np.int64), parts.parts(), columns, frozenset(lost)
    )
    return table.in_order()


def _request(layer, indices, crs, transform_context, feedback, count_lost):
    request = QgsFeatureRequest().setSubsetOfAttributes(list(set(indices)))
    own = layer_crs(layer)
    if is_undefined(own):
        say(
            feedback,
            f"Layer '{layer_name(layer)}' has no CRS; its coordinates are taken to be "
            f"in the study's CRS ({crs.authid() or crs.description()}).",
        )
    elif own != crs:
        request.setDestinationCrs(crs, transform_context)
        request.setTransformErrorCallback(count_lost)
    return request


def _iterators(layer, request, near):
    if near is None:
        yield layer.getFeatures(request)
        return
    for box in near:
        yield layer.getFeatures(
            QgsFeatureRequest(request).setFilterRect(QgsRectangle(*map(float, box)))
        )


def _collect(features, indices, fid, parts, columns, feedback):
    """Take what is needed of each feature; the hot loop of reading.

    Features are held few at a time and parsed in larger blocks, so that neither they
    nor their bytes leave the processor's cache before they are arrays.
    """
    wkb, size = [], 0
    while True:
        block = list(islice(features, _FEATURES))
        own = [f.geometry().asWkb().data() for f in block]
        fid += [f.id() for f in block]
        for i, column in zip(indices, columns):
            column += [f[i] for f in block]
        wkb += own
        size += sum(map(len, own))
        done = len(block) < _FEATURES
        if size >= _BYTES or len(wkb) >= _PARSED or done:
            parts.add(_parse(wkb), len(wkb))
            wkb, size = [], 0
            check_cancelled(feedback)
        if done:
            return


def check_cancelled(feedback):
    """End the reading where the user has cancelled."""
    if feedback is not None and feedback.isCanceled():
        raise SourceError("cancelled", "the run was cancelled; nothing was written.")


def _surface(declaration, crs, base, transform_context, feedback):
    if declaration.z.source != "raster":
        return None
    from .grids import read_grid

    layer = open_layer(declaration.z.uri, base, f"{declaration.key}, z raster")
    if not isinstance(layer, QgsRasterLayer):
        raise SourceError(
            "wrong-geometry",
            f"z is declared to come from a raster, but '{declaration.z.uri}' is a "
            "vector layer.",
            declaration.label,
            "Name a raster.",
        )
    return read_grid(layer, crs, transform_context, feedback)


def numbers(values):
    """Turn attribute values into numbers.

    Parameters
    ----------
    values : list
        As QGIS gives them: numbers, text, None or NULL.

    Returns
    -------
    number : ndarray (n,)
        NaN where there is none.
    text : ndarray (n,) of bool
        True where a text is not a plain number (a point for the decimals, no
        thousands separators).
    """
    n = len(values)
    if all(v.__class__ is float for v in values):
        return np.array(values, dtype=float), np.zeros(n, dtype=bool)
    number, text = np.full(n, np.nan), np.zeros(n, dtype=bool)
    for i, value in enumerate(values):
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            number[i] = value
        elif value is None or value == NULL or value == "":
            continue
        elif isinstance(value, str) and _NUMBER.fullmatch(value):
            number[i] = float(value)
        else:
            text[i] = True
    return number, text


def texts(values):
    """Turn attribute values into texts, '' where there is none."""
    out = np.empty(len(values), dtype=object)
    out[:] = [v if v.__class__ is str else _text(v) for v in values]
    return out


def _text(value):
    if value is None or value == NULL:
        return ""
    if isinstance(value, float) and value.is_integer():
        return str(int(value))
    return str(value)


def _azimuths(values):
    """Azimuths in degrees from numbers or compass points, and which are neither."""
    number, text = numbers(values)
    for i in np.flatnonzero(text):
        try:
            number[i], text[i] = parse_azimuth(values[i]), False
        except GeomcoreError:
            continue
    return number, text


def _features(declaration, layer, wanted, table, surface, feedback):
    """Make flat arrays of what was read; refuse and count what cannot be used."""
    values = dict(zip(wanted, table.columns))
    refused = {"cannot be reprojected": len(table.lost)} if table.lost else {}
    parts, z = table.parts, None
    placed = np.bincount(parts.owner, minlength=len(table.fid)) > 0
    lost = np.isin(table.fid, list(table.lost)) if table.lost else False
    _count(refused, "no geometry", ~placed & ~np.asarray(lost))
    parts = _on_the_map(parts, refused)
    if "z" in values:
        z, text = numbers(values["z"])
        _count(refused, "text in a number field", text & placed)
        if text.any():
            parts = parts.select(~text[parts.owner])
    parts, kind = _of_one_kind(parts, declaration, layer, refused)
    return Features(
        kind,
        parts.xy,
        _values(declaration, parts, z),
        parts.offsets,
        table.fid[parts.owner],
        _part_columns(declaration, layer, values, parts.owner, feedback),
        surface,
        refused,
    )


def _on_the_map(parts, refused):
    """Refuse features with coordinates that are no numbers."""
    if np.isfinite(parts.rows).all():
        return parts
    vertex = ~np.isfinite(parts.xy).all(axis=1)
    if not vertex.any():
        return parts  # an unknown Z is no fault of the place
    lost = np.unique(np.repeat(parts.owner, parts.count)[vertex])
    _count(refused, "coordinates that are no numbers", np.ones(len(lost)))
    return parts.select(~np.isin(parts.owner, lost))


def _count(refused, reason, mask):
    n = int(np.count_nonzero(mask))
    if n:
        refused[reason] = refused.get(reason, 0) + n


def _parse(wkb):
    """Parse geometries; curves are first turned into straight pieces."""
    try:
        return parse_wkb(wkb)
    except UnknownGeometry as unknown:
        for i in unknown.owners.tolist():
            wkb[i] = _straight(wkb[i])
        return parse_wkb(wkb)


def _straight(wkb):
    """Turn a curve into straight pieces, as finely as QGIS does by itself."""
    geometry = QgsGeometry()
    geometry.fromWkb(wkb)
    return geometry.constGet().segmentize().asWkb().data()


def _of_one_kind(parts, declaration, layer, refused):
    """Keep the parts of the one kind the layer is about; count the others."""
    count = np.bincount(parts.kind, minlength=2)
    if not len(parts.kind):
        return parts, _KINDS[_declared_kind(layer)]
    kind = int(np.argmax(count))
    _check_kind(_KINDS[kind], declaration, layer)
    other = parts.kind != kind
    if other.any():
        lost = np.setdiff1d(parts.owner[other], parts.owner[~other])
        _count(refused, "geometry of another type", np.ones(len(lost)))
        parts = parts.select(~other)
    return parts, _KINDS[kind]


def _declared_kind(layer):
    kind = QgsWkbTypes.geometryType(layer.wkbType())
    return {Qgis.GeometryType.Line: 2, Qgis.GeometryType.Polygon: 3}.get(kind, 1)


def _values(declaration, parts, z):
    """Raw vertical value of each vertex."""
    if declaration.z.source == "geometry":
        return parts.z
    if declaration.z.source == "field":
        return np.repeat(z[parts.owner], parts.count)
    value = declaration.z.value if declaration.z.source == "constant" else np.nan
    return np.full(len(parts.rows), value, dtype=float)


def _part_columns(declaration, layer, values, owner, feedback):
    """Give the declared attributes of each part."""
    own = {}
    if "name" in values:
        name = texts(values["name"])
        name[name == ""] = declaration.name
        own["name"] = name[owner]
    for use, convert in (("dip", numbers), ("dip_azimuth", _azimuths)):
        if use not in values:
            continue
        number, text = convert(values[use])
        if text.any():
            say(
                feedback,
                f"Layer '{layer_name(layer)}': {int(text.sum())} values of the "
                f"{use.replace('_', ' ')} field are not numbers and count as unknown.",
            )
        own[use] = number[owner]
    return own


def read_section_lines(layer, id_field, crs, transform_context, feedback=None):
    """Read hand-drawn section lines.

    Parameters
    ----------
    layer : QgsVectorLayer or QgsProcessingFeatureSource
        Lines.
    id_field : str
        Field that names the sections; the feature id where it is empty.
    crs : QgsCoordinateReferenceSystem
        Of the study.
    transform_context : QgsCoordinateTransformContext
    feedback : QgsFeedback, optional

    Returns
    -------
    list of SectionLine
        One a feature; one that cannot be used says why in ``problem``.

    Raises
    ------
    SourceError
        If the layer holds no lines or lacks the field.
    """
    where = f"section layer '{layer_name(layer)}'"
    if QgsWkbTypes.geometryType(layer.wkbType()) != Qgis.GeometryType.Line:
        raise SourceError(
            "wrong-geometry",
            f"sections are lines; the layer holds {_type_name(layer)}.",
            where,
            "Use a line layer.",
        )
    indices = [field_index(layer.fields(), id_field, where)] if id_field else []
    table = read_table(layer, indices, crs, transform_context, feedback)
    names = texts(table.columns[0]) if indices else [str(i) for i in table.fid]
    return [_section_line(i, names[i], table, id_field) for i in range(len(names))]


def _type_name(layer):
    return QgsWkbTypes.displayString(layer.wkbType())


def _section_line(i, name, table, id_field):
    own = np.flatnonzero(table.parts.owner == i)
    problem, vertices = "", np.empty((0, 2))
    name = str(name).strip()
    if not name:
        name, problem = f"feature {table.fid[i]}", f"the field '{id_field}' is empty."
    if table.fid[i] in table.lost:
        problem = "the line cannot be reprojected to the study's CRS."
    elif len(own) == 0:
        problem = "the feature has no geometry."
    elif len(own) > 1:
        problem = f"the line has {len(own)} parts."
    if len(own):
        first = table.parts.offsets[own[0]]
        vertices = table.parts.xy[first : first + table.parts.count[own[0]]]
    if not np.isfinite(vertices).all():
        problem = "the line lies where the study's CRS has no coordinates."
    return SectionLine(name, vertices, problem)
