"""Builds a QGIS project of styled layers with relative paths, and no widgets.

A project opens with its results on top, its inputs under them and the base map at the
bottom; inside a group points lie over lines, lines over areas and rasters, and tables
stand last.
"""

import math
import re
import zipfile
from dataclasses import dataclass
from pathlib import Path
from typing import Optional
from uuid import uuid4

from qgis.core import (
    Qgis,
    QgsCoordinateTransform,
    QgsProject,
    QgsProjectMetadata,
    QgsRasterDemTerrainProvider,
    QgsRectangle,
    QgsReferencedRectangle,
)

from ...geomcore.errors import GeomcoreError
from ..fields import LAYERS, ON_REQUEST
from ..layers import open_layer
from .ranges import fit_raster
from .view3d import add_3d_view

__all__ = [
    "INPUT_STYLES",
    "ProjectGroup",
    "ProjectLayer",
    "make_project",
    "result_layers",
]

#: Styles for common inputs: fault_trace, structure_contours, fault_picks, bed_dips,
#: planned_wells, section_lines, and the rasters ground and depth_grid, each as QML.
INPUT_STYLES = Path(__file__).resolve().parent / "styles" / "inputs"

#: Order inside a group.
_RANK = {
    Qgis.GeometryType.Point: 0,
    Qgis.GeometryType.Line: 1,
    Qgis.GeometryType.Polygon: 2,
}
_RASTER_RANK, _TABLE_RANK = 3, 4
#: Opening tag of a project file, and what in it tells of user and time.
_HEAD = re.compile(r"<qgis\b[^>]*>")
_MAKER = re.compile(r' save(?:User|UserFull|DateTime)="[^"]*"')
#: QGIS writes the terrain's path in full; it finds the layer by its name inside.
_TERRAIN_PATH = re.compile(r'(<TerrainProvider\b[^>]*?)layerSource="[^"]*"')
#: Result layers that are there but not drawn at first: what they hold can be seen on
#: others, or has no place on a map.
_HIDDEN = ("picks_time",)


@dataclass(frozen=True)
class ProjectLayer:
    """One layer of a project.

    Parameters
    ----------
    uri : str
        Source as `layers.open_layer` takes it; a file relative to the project.
    name : str
        What the layer tree shows.
    style : pathlib.Path, optional
        QML file; the default style stored with the data if not given.
    visible : bool
    expanded : bool
        Whether the legend of the layer is unfolded.
    """

    uri: str
    name: str
    style: Optional[Path] = None
    visible: bool = True
    expanded: bool = True


@dataclass(frozen=True)
class ProjectGroup:
    """A group of layers in the layer tree.

    Parameters
    ----------
    name : str
        Such as ``Results``, ``Inputs`` or ``Base``.
    layers : tuple of ProjectLayer
        Sorted by kind when the project is made; in their own order inside a kind.
    """

    name: str
    layers: tuple[ProjectLayer, ...]


def result_layers(geopackage, names=None):
    """List the layers of a result file for a project.

    Parameters
    ----------
    geopackage : str
        Path as the project should name it, relative to the project.
    names : collection of str, optional
        Only these of `fields.LAYERS`; those that every run writes if not given.

    Returns
    -------
    tuple of ProjectLayer
        Uppermost first.
    """
    names = set(LAYERS) - set(ON_REQUEST) if names is None else names
    order = ("cutoffs", "fault_points", "picks", "picks_time")
    order += ("predicted_fault_traces", "predicted_horizons", "section_lines")
    order += tuple(name for name in LAYERS if name not in order)
    return tuple(
        ProjectLayer(
            f"{geopackage}|layername={name}",
            LAYERS[name].title,
            visible=name not in _HIDDEN,
            expanded=name not in ("section_lines", *_HIDDEN),
        )
        for name in order
        if name in names
    )


def make_project(
    path,
    groups,
    crs,
    title,
    abstract="",
    extent=None,
    terrain="",
    look_along=None,
    context=None,
):
    """Write a project file; it appears whole or not at all.

    Parameters
    ----------
    path : pathlib.Path
        Ends in ``.qgz``.
    groups : sequence of ProjectGroup
        Uppermost first.
    crs : QgsCoordinateReferenceSystem
    title, abstract : str
    extent : QgsRectangle, optional
        What the map shows at first, in `crs`; all visible layers of the first group
        if not given.
    terrain : str
        Name of the raster layer whose elevations are the terrain of profiles and 3D
        views; none if empty.
    look_along : float, optional
        Grid azimuth in degrees, best along strike, of a saved 3D view without the
        terrain; no such view if not given.
    context : QgsCoordinateTransformContext, optional

    Returns
    -------
    pathlib.Path

    Raises
    ------
    GeomcoreError
        With code ``no-layer`` or ``bad-style`` for a layer that cannot be shown, or
        ``not-written``.
    """
    path = Path(path)
    if path.suffix.lower() != ".qgz":
        _refuse("it is no project file.", path, "End its name in .qgz.")
    project = QgsProject()
    project.setFilePathStorage(Qgis.FilePathType.Relative)
    project.setCrs(crs)
    project.setTransformContext(context or project.transformContext())
    project.setTitle(title)
    project.setMetadata(_metadata(title, abstract))
    shown = [_add_group(project, group, path.parent) for group in groups]
    _set_extent(project, crs, extent or _extent_of(project, shown[0] if shown else ()))
    if terrain:
        _set_terrain(project, terrain, path)
    if look_along is not None:
        _add_view(project, [layer for layers in shown for layer in layers], look_along)
    _write(project, path)
    return path


def _refuse(reason, path, remedy):
    raise GeomcoreError("not-written", reason, f"project '{path}'", remedy)


def _metadata(title, abstract):
    """Describe the project; its author is left to whoever saves it next."""
    metadata = QgsProjectMetadata()
    metadata.setTitle(title)
    metadata.setAbstract(abstract)
    metadata.setAuthor("")
    return metadata


# ---- layers --------------------------------------------------------------------------


def _add_group(project, group, folder):
    """Add one group; give the layers that are drawn."""
    node = project.layerTreeRoot().addGroup(group.name)
    opened = [(own, _open(own, folder)) for own in group.layers]
    shown = []
    for own, layer in sorted(opened, key=lambda pair: _rank(pair[1])):
        layer.setId(_free_id(project, group.name, own.name))
        project.addMapLayer(layer, False)
        entry = node.addLayer(layer)
        entry.setItemVisibilityChecked(own.visible)
        entry.setExpanded(own.expanded)
        if own.visible and layer.isSpatial():
            shown.append(layer)
    return shown


def _open(own, folder):
    """Open one layer with its style."""
    layer = open_layer(own.uri, folder, own.name)
    layer.setName(own.name)
    if own.style is None:
        layer.loadDefaultStyle()
        return layer
    message, loaded = layer.loadNamedStyle(str(own.style))
    if not loaded:
        raise GeomcoreError(
            "bad-style",
            f"the style {own.style.name} cannot be read: {message}.",
            f"layer '{own.name}'",
            "Check the style file.",
        )
    if layer.type() == Qgis.LayerType.Raster:
        fit_raster(layer)
    return layer


def _rank(layer):
    if layer.type() != Qgis.LayerType.Vector:
        return _RASTER_RANK
    return _RANK.get(layer.geometryType(), _TABLE_RANK)


def _free_id(project, group, name):
    """Name a layer inside the project the same each time it is made."""
    base = re.sub(r"\W+", "_", f"{group}_{name}".lower()).strip("_")
    number, found = 2, base
    while project.mapLayer(found) is not None:
        found, number = f"{base}_{number}", number + 1
    return found


# ---- what the map shows --------------------------------------------------------------


def _extent_of(project, layers):
    """Give the extent of layers in the project's CRS."""
    whole = QgsRectangle()
    for layer in layers:
        if layer.extent().isNull() or layer.extent().isEmpty():
            continue
        transform = QgsCoordinateTransform(layer.crs(), project.crs(), project)
        whole.combineExtentWith(transform.transformBoundingBox(layer.extent()))
    return whole


def _set_extent(project, crs, extent):
    if extent.isNull() or extent.isEmpty():
        return
    whole = QgsRectangle(extent)
    whole.scale(1.1)
    project.viewSettings().setDefaultViewExtent(QgsReferencedRectangle(whole, crs))


def _add_view(project, layers, azimuth):
    """Add a 3D view of all layers that have a 3D symbol."""
    layers = [layer for layer in layers if layer.renderer3D() is not None]
    extent = _extent_of(project, layers)
    if extent.isEmpty():
        return
    depths = [z for layer in layers for z in _z_range(layer)]
    middle = (min(depths) + max(depths)) / 2 if depths else 0.0
    add_3d_view(project, layers, extent, middle, azimuth)


def _z_range(layer):
    """Give the lowest and the highest elevation of a layer, where it has any."""
    box = layer.extent3D()
    return [z for z in (box.zMinimum(), box.zMaximum()) if math.isfinite(z)]


def _set_terrain(project, name, path):
    layers = project.mapLayersByName(name)
    if not layers or _rank(layers[0]) != _RASTER_RANK:
        _refuse(f"it has no raster layer '{name}' for the terrain.", path, "Add it.")
    provider = QgsRasterDemTerrainProvider()
    provider.setLayer(layers[0])
    project.elevationProperties().setTerrainProvider(provider)


# ---- writing -------------------------------------------------------------------------


def _write(project, path):
    """Write beside the target and swap in; who made it, and when, is left out."""
    temporary = path.with_name(f".{path.stem}-{uuid4().hex[:8]}.qgz")
    clean = temporary.with_suffix(".tmp")
    try:
        if not project.write(str(temporary)):
            words = project.error() or "QGIS could not write it"
            _refuse(f"{words}.", path, "Check the disk and the folder.")
        _without_traces(temporary, clean, path.stem)
        clean.replace(path)
    except OSError as error:
        _refuse(f"it could not be written ({error.strerror}).", path, "Check the disk.")
    finally:
        for file in (temporary, clean):
            file.unlink(missing_ok=True)


def _without_traces(source, target, stem):
    """Copy a project file without user, time and the temporary name."""
    with (
        zipfile.ZipFile(source) as old,
        zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as new,
    ):
        for name in old.namelist():
            content, inner = old.read(name), name
            if name.endswith(".qgs"):
                text = content.decode("utf-8")
                text = _TERRAIN_PATH.sub(r'\1layerSource=""', text)
                text = _HEAD.sub(lambda head: _MAKER.sub("", head.group()), text, 1)
                content, inner = text.encode("utf-8"), f"{stem}.qgs"
            new.writestr(inner, content)
