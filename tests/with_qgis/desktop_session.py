"""What a user does in the real desktop, step by step; test_desktop.py runs it in QGIS.

Arguments: folder of the user's work, folder for screenshots, file for the findings.
Each step leaves a screenshot for a person to look at and facts for the test to check.
"""

import json
import os
import sys
import traceback
from pathlib import Path

import processing
import qgis.utils
from qgis import _3d  # noqa: F401 - else the 3D canvas has no Python type and crashes
from qgis.core import Qgis, QgsApplication, QgsProject, QgsVector3D
from qgis.gui import QgsElevationProfileCanvas
from qgis.PyQt.QtCore import QEventLoop, QModelIndex, QRect, Qt, QTimer
from qgis.PyQt.QtGui import QAction, QColor
from qgis.PyQt.QtWidgets import (
    QApplication,
    QDockWidget,
    QLineEdit,
    QTextEdit,
    QTreeView,
)
from qgis.utils import iface

WORK, SHOTS, FINDINGS = (Path(argument) for argument in sys.argv[-3:])
OUTPUT = "desktop_results.gpkg"
PATIENCE = 180_000  # milliseconds; a slow machine is no failure
WINDOW_3D = QRect(40, 80, 1380, 820)
#: Colours looked for in pictures, as the styles have them.
INKS = {
    "fault": "#d55e00",
    "horizon picks": "#0072b2",
    "deep": "#27408b",
    "black": "#000000",
}
found = {"steps": [], "at": "start"}


# ---- waiting and looking -------------------------------------------------------------


def pause(milliseconds):
    """Let the desktop work."""
    loop = QEventLoop()
    QTimer.singleShot(milliseconds, loop.quit)
    loop.exec()


def wait_until(condition, what):
    """Wait for something; fail in words if it does not come."""
    for _ in range(PATIENCE // 100):
        if condition():
            return
        pause(100)
    raise TimeoutError(f"waited {PATIENCE / 1000:.0f} s for {what}")


def settle():
    """Wait until the map is drawn."""
    canvas = iface.mapCanvas()
    canvas.refresh()
    pause(300)
    wait_until(lambda: not canvas.isDrawing(), "the map")
    pause(300)


def shoot(name):
    """Take a picture of the whole screen, as a user sees it; give it."""
    pause(300)
    picture = QApplication.primaryScreen().grabWindow(0)
    picture.save(str(SHOTS / f"{name}.png"))
    found["steps"].append(name)
    return picture


def inked(image):
    """Count the pixels, every second in both ways, that have about each ink."""
    inks = {name: QColor(value).getRgb()[:3] for name, value in INKS.items()}
    counts = dict.fromkeys(inks, 0)
    for y in range(0, image.height(), 2):
        for x in range(0, image.width(), 2):
            colour = QColor(image.pixel(x, y)).getRgb()[:3]
            for name, ink in inks.items():
                if max(abs(a - b) for a, b in zip(colour, ink)) < 32:
                    counts[name] += 1
    return counts


def wait_for_ink(grab, ink, least):
    """Wait until a picture shows something; a slow machine draws late."""
    wait_until(lambda: inked(grab())[ink] > least or pause(1500), f"{ink} in a picture")


def screen_inside():
    """Give what the screen shows of a 3D view now."""
    return inside(QApplication.primaryScreen().grabWindow(0))


def dock(part):
    """Find a dock by a part of its object name or title."""
    for one in iface.mainWindow().findChildren(QDockWidget):
        if part in one.objectName() or part in one.windowTitle():
            return one
    raise LookupError(f"there is no dock '{part}'")


def action(part):
    """Find a menu entry of the main window by a part of its text."""
    for one in iface.mainWindow().findChildren(QAction):
        if part in one.text().replace("&", ""):
            return one
    raise LookupError(f"there is no menu entry '{part}'")


def new_results():
    """Give the layers that the run of this session made, by title."""
    layers = QgsProject.instance().mapLayers().values()
    return {layer.name(): layer for layer in layers if OUTPUT in layer.source()}


def texts(model, parent=None):
    """List the texts of a tree, depth first."""
    parent = parent or QModelIndex()
    listed = []
    for row in range(model.rowCount(parent)):
        index = model.index(row, 0, parent)
        listed += [index.data(), *texts(model, index)]
    return listed


# ---- the steps -----------------------------------------------------------------------


def prepare():
    """Make the window as large as the screen and put away what is in the way."""
    dock("Browser").hide()
    window = iface.mainWindow()
    window.showNormal()
    window.setGeometry(QApplication.primaryScreen().availableGeometry())
    pause(500)


def plugin_is_there():
    """Tell where the plugin was started from."""
    provider = QgsApplication.processingRegistry().providerById("heaveline")
    found["plugin_path"] = sys.modules["heaveline"].__file__
    found["has_icon"] = not provider.icon().isNull()


def open_sample():
    """Open the sample from the plugin's own menu, into a folder of the user's."""
    qgis.utils.plugins["heaveline"].ask_folder = lambda: str(WORK)
    action("Open Sample Project").trigger()
    project = QgsProject.instance()
    wait_until(lambda: project.count() > 0, "the sample project")
    settle()
    found["sample"] = {
        "file": project.fileName(),
        "title": project.title(),
        "groups": [node.name() for node in project.layerTreeRoot().children()],
        "valid": {n.name(): n.isValid() for n in project.mapLayers().values()},
    }
    shoot("01_sample_project")


def search_toolbox():
    """Search the toolbox for the plugin's algorithms."""
    toolbox = dock("ProcessingToolbox")
    toolbox.show()
    iface.mainWindow().resizeDocks([toolbox], [380], Qt.Orientation.Horizontal)
    search = toolbox.findChildren(QLineEdit)[0]
    search.setText("heaveline")
    pause(800)
    tree = toolbox.findChildren(QTreeView)[0]
    tree.expandAll()
    found["toolbox"] = texts(tree.model())
    shoot("02_toolbox")
    search.clear()
    toolbox.hide()


def put_away_shipped_results():
    """Fold and hide the results that the sample came with, to see one's own."""
    root = QgsProject.instance().layerTreeRoot()
    for node in root.children():
        node.setExpanded(False)
    shipped = root.findGroup("Results")
    if shipped is not None:
        shipped.setItemVisibilityChecked(False)
    iface.layerTreeView().setCurrentIndex(QModelIndex())


def run_from_dialog():
    """Run the study of the sample from the algorithm's own dialog."""
    put_away_shipped_results()
    inputs = {
        "STUDY": str(Path(QgsProject.instance().homePath()) / "study.json"),
        "OUTPUT": str(WORK / OUTPUT),
        "PLOTS": str(WORK / "plots"),
    }
    dialog = processing.createAlgorithmDialog("heaveline:runstudy", inputs)
    done = []
    dialog.algorithmFinished.connect(lambda good, results: done.append((good, results)))
    dialog.show()
    dialog.setGeometry(230, 100, 1120, 740)
    shoot("03_dialog")
    dialog.runButton().click()
    wait_until(lambda: done, "the run")
    pause(1500)
    found["finished"], found["numbers"] = done[0][0], numbers(done[0][1])
    logs = [edit.toPlainText() for edit in dialog.findChildren(QTextEdit)]
    found["log"] = next((text for text in logs if "Execution completed" in text), "")
    shoot("04_dialog_done")
    dialog.close()
    iface.messageBar().clearWidgets()
    settle()


def numbers(results):
    """Keep of the results what can be written as JSON."""
    return {k: v for k, v in results.items() if isinstance(v, (int, float, str))}


def look_at_map():
    """See the results on the map, styled, over the inputs."""
    found["results"] = {title: facts(layer) for title, layer in new_results().items()}
    found["order"] = [
        layer.name()
        for layer in QgsProject.instance().layerTreeRoot().layerOrder()
        if OUTPUT in layer.source()
    ]
    iface.setActiveLayer(new_results()["Predicted fault traces"])
    iface.zoomToActiveLayer()
    settle()
    found["map"] = inked(iface.mapCanvas().grab().toImage())
    shoot("05_map")
    look_near()
    shoot("06_map_near")
    iface.zoomToActiveLayer()
    settle()


def look_near():
    """Zoom to the cut-offs of the section in the middle."""
    canvas = iface.mapCanvas()
    near = middle_section().buffer(10.0, 4)
    cutoffs = new_results()["Cut-offs"].getFeatures()
    places = [f.geometry().asPoint() for f in cutoffs if near.contains(f.geometry())]
    canvas.setCenter(places[0])
    canvas.zoomScale(15000)
    settle()


def facts(layer):
    """What the test wants to know of a layer."""
    properties = layer.elevationProperties()
    return {
        "rows": layer.featureCount(),
        "renderer": layer.renderer().type() if layer.renderer() else "",
        "labels": layer.labelsEnabled(),
        "absolute": properties.clamping() == Qgis.AltitudeClamping.Absolute,
        "3d": layer.renderer3D() is not None,
        "title": layer.metadata().title(),
        "crs": layer.crs().authid(),
    }


def middle_section():
    """Give the line of the section in the middle of the area."""
    lines = new_results()["Section lines"].getFeatures()
    lines = sorted(lines, key=lambda f: f["section_id"])
    return lines[len(lines) // 2].geometry()


def look_at_profile():
    """Open QGIS's own elevation profile along one section."""
    window = iface.mainWindow()
    action("Elevation Profile").trigger()
    wait_until(
        lambda: window.findChildren(QgsElevationProfileCanvas), "the elevation profile"
    )
    canvas = window.findChildren(QgsElevationProfileCanvas)[0]
    holder = canvas
    while not isinstance(holder, QDockWidget):
        holder = holder.parentWidget()
    pause(500)
    window.resizeDocks([holder], [430], Qt.Orientation.Vertical)
    canvas.setTolerance(5.0)  # at 0, QGIS loses features of an oblique section
    line = middle_section()  # owns the curve: has to outlive the call
    canvas.setProfileCurve(line.constGet().clone())
    canvas.refresh()
    pause(3000)
    canvas.zoomFull()
    wait_for_ink(lambda: canvas.grab().toImage(), "fault", 300)
    pause(2000)
    found["profile_layers"] = [layer.name() for layer in canvas.layers()]
    found["profile"] = inked(canvas.grab().toImage())
    shoot("07_profile")
    holder.close()
    pause(500)


def look_at_3d():
    """See the new results in a 3D view, from along strike and without the terrain."""
    canvas = iface.createNewMapCanvas3D("New results in 3D")
    widen("New results in 3D")
    extent = new_results()["Predicted fault traces"].extent()
    canvas.mapSettings().setTerrainRenderingEnabled(False)
    size = max(extent.width(), extent.height())
    canvas.cameraController().setLookingAtPoint(
        QgsVector3D(0, -1500, 0), 1.15 * size, 66.0, 340.0
    )
    pause(500)
    wait_until(lambda: canvas.scene().totalPendingJobsCount() == 0, "the 3D view")
    wait_for_ink(screen_inside, "fault", 300)
    pause(1500)  # the last tiles
    found["view_3d"] = inked(inside(shoot("08_view_3d")))


def look_at_saved_3d():
    """Open the 3D view that comes with the sample project."""
    root = QgsProject.instance().layerTreeRoot()
    root.findGroup("Results").setItemVisibilityChecked(True)
    action("Faults in 3D").trigger()
    widen("Faults in 3D")
    wait_for_ink(screen_inside, "fault", 300)
    pause(4000)  # the last tiles
    found["saved_view_3d"] = inked(inside(shoot("09_saved_view_3d")))


def widen(title):
    """Make the window of a 3D view nearly as large as the screen."""
    pause(800)
    for window in QApplication.topLevelWidgets():
        if window.windowTitle() == title:
            window.setGeometry(WINDOW_3D)
            window.raise_()
    pause(1000)


def inside(picture):
    """Cut the 3D scene out of a picture of the screen."""
    ratio = picture.width() / QApplication.primaryScreen().geometry().width()
    rect = WINDOW_3D.adjusted(10, 50, -10, -10)
    corner, size = rect.topLeft() * ratio, rect.size() * ratio
    return picture.copy(QRect(corner, size)).toImage()


def menu_texts():
    """List the entries of the menu Plugins."""
    return [one.text() for one in iface.pluginMenu().actions()]


def unload_and_start_again():
    """Take the plugin away, and start it again."""
    registry = QgsApplication.processingRegistry()
    found["menu_before_unload"] = "Heaveline" in menu_texts()
    found["unloaded"] = qgis.utils.unloadPlugin("heaveline")
    found["provider_after_unload"] = registry.providerById("heaveline") is not None
    found["menu_after_unload"] = "Heaveline" in menu_texts()
    qgis.utils.loadPlugin("heaveline")
    found["started_again"] = qgis.utils.startPlugin("heaveline")
    found["provider_again"] = registry.providerById("heaveline") is not None


STEPS = (
    prepare,
    plugin_is_there,
    open_sample,
    search_toolbox,
    run_from_dialog,
    look_at_map,
    look_at_profile,
    look_at_3d,
    look_at_saved_3d,
    unload_and_start_again,
)


def main():
    """Do the steps; whatever fails is told in the findings."""
    code = 0
    try:
        for step in STEPS:
            found["at"] = step.__name__
            step()
        found["at"] = "end"
    except BaseException:
        code = 1
        found["error"] = traceback.format_exc()
        shoot("99_where_it_failed")
    FINDINGS.write_text(json.dumps(found, indent=1), encoding="utf-8")
    sys.stdout.flush()
    os._exit(code)  # the menu's way out asks about unsaved layers


QTimer.singleShot(0, main)
