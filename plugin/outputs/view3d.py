"""A saved 3D view for a project: results under the ground, seen from along strike.

A new 3D view of QGIS draws the terrain, and everything under it is out of sight. This
one leaves the terrain out, so that buried faults show at once. QGIS offers Python no
way to make such a view, so it is written as the XML that QGIS itself reads.
"""

from qgis.PyQt.QtXml import QDomDocument

__all__ = ["VIEW_NAME", "add_3d_view"]

#: Name under View, 3D Map Views.
VIEW_NAME = "Faults in 3D"
#: Camera: degrees from straight down, and its distance as a part of the largest side.
_PITCH, _DISTANCE = 66.0, 1.15
_WINDOW = {"d_x": "80", "d_y": "80", "d_width": "1100", "d_height": "720"}


def add_3d_view(project, layers, extent, z_middle, azimuth):
    """Add the view to a project.

    Parameters
    ----------
    project : QgsProject
    layers : sequence of QgsMapLayer
        Drawn in the view, uppermost first.
    extent : QgsRectangle
        In the project's CRS.
    z_middle : float
        Elevation that the camera looks at.
    azimuth : float
        Grid azimuth the camera looks to, degrees.
    """
    document = QDomDocument("qgis")
    root = _add(document, document, "qgis")
    views = _add(document, root, "mapViewDocks3D")
    view = _add(
        document, views, "view", name=VIEW_NAME, isOpen="0", isDocked="0", **_WINDOW
    )
    _scene(document, view, project, layers, extent)
    side = max(extent.width(), extent.height())
    _add(
        document,
        view,
        "camera",
        x="0",
        y=f"{z_middle:.10g}",
        elev="0",
        dist=f"{_DISTANCE * side:.10g}",
        pitch=f"{_PITCH:g}",
        yaw=f"{-azimuth % 360.0:g}",  # QGIS turns the camera counter-clockwise
    )
    project.viewsManager().readXml(root, document)


def _add(document, parent, tag, **attributes):
    """Add an element; an underscore in a name that needs a hyphen is written so."""
    element = document.createElement(tag)
    for name, value in attributes.items():
        element.setAttribute(name.replace("__", "-"), value)
    parent.appendChild(element)
    return element


def _scene(document, view, project, layers, extent):
    """Describe what is drawn: extent, layers, no terrain."""
    scene = _add(document, view, "qgis3d")
    centre = extent.center()
    _add(
        document,
        scene,
        "origin",
        x=f"{centre.x():.10g}",
        y=f"{centre.y():.10g}",
        z="0",
    )
    _add(
        document,
        scene,
        "extent",
        xMin=f"{extent.xMinimum():.10g}",
        yMin=f"{extent.yMinimum():.10g}",
        xMax=f"{extent.xMaximum():.10g}",
        yMax=f"{extent.yMaximum():.10g}",
        showIn2dView="0",
    )
    _add(document, scene, "camera", field__of__view="45", projection__type="1")
    _add(document, scene, "color", background="255,255,255,255")
    crs = _add(document, scene, "crs")
    project.crs().writeXml(crs, document)
    terrain = _add(
        document, scene, "terrain", exaggeration="1", terrain__rendering__enabled="0"
    )
    listed = _add(document, terrain, "layers")
    for layer in layers:
        _add(document, listed, "layer", id=layer.id())
    _add(document, terrain, "generator", type="flat")
