"""Run the sample's study and build its QGIS project, styled, with relative paths.

Needs the Python that QGIS runs in. Usage, after ``make_sample.py``::

    python make_project.py [--folder FOLDER] [--pictures]

writes ``results.gpkg`` and ``heaveline_sample.qgz`` into the folder (this one if not
given), and with ``--pictures`` what README.md shows, into ``pictures/``.
"""

import argparse
import importlib.util
import os
import shutil
import sys
import tempfile
from dataclasses import replace
from pathlib import Path

try:
    from . import survey, truth
    from .make_sample import DEPTHS, GROUND, VECTORS
except ImportError:  # run as a plain script
    import survey
    import truth
    from make_sample import DEPTHS, GROUND, VECTORS

FOLDER = Path(__file__).resolve().parent
PROJECT = "heaveline_sample.qgz"
RESULTS = "results.gpkg"
TITLE = f"{truth.FAULT}, {truth.VALLEY} (invented)"
ABSTRACT = (
    "Sample of the plugin: an invented listric normal fault, mapped with stated noise "
    "from a stated truth, and what the plugin predicts of it at depth. No real place. "
    "Elevations in metres above mean sea level."
)
#: Input layers from the top: table, name in the project, drawn at first.
INPUTS = (
    ("planned_wells", "Planned wells", True),
    ("bed_dips", f"Dips of Top {survey.CONTOURED}", True),
    ("fault_picks", "Fault picks at depth", True),
    ("fault_trace", truth.FAULT, True),
    ("structure_contours", f"Top {survey.CONTOURED}, structure contours", True),
    ("section_lines", "Section lines as drawn", False),
)


def main(arguments=None):
    """Run the study and build the project as the command line says."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--folder", type=Path, default=FOLDER)
    parser.add_argument("--pictures", action="store_true", help="of README.md too")
    given = parser.parse_args(arguments)
    with tempfile.TemporaryDirectory() as profile:
        app = start_qgis(profile)
        plots = Path(profile) / "plots" if given.pictures else None
        run_study(given.folder, plots)
        print(build_project(given.folder))
        if plots:
            draw_pictures(given.folder, plots)
        app.exitQgis()


def start_qgis(profile):
    """Start QGIS without a screen, with Processing and the plugin's algorithms."""
    os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
    from qgis.core import QgsApplication

    app = QgsApplication([], True, profile)
    app.initQgis()
    sys.path.append(str(Path(QgsApplication.pkgDataPath()) / "python" / "plugins"))
    from qgis import _3d

    _3d.Qgs3D.initialize()  # else 3D styles are lost
    load_plugin()
    from heaveline.plugin.provider import HeavelineProvider
    from processing.core.Processing import Processing

    Processing.initialize()
    app.heaveline_provider = HeavelineProvider()  # QGIS keeps no reference of its own
    app.processingRegistry().addProvider(app.heaveline_provider)
    return app


def load_plugin():
    """Make this repository importable as the package ``heaveline``."""
    root = FOLDER.parent
    if "heaveline" in sys.modules:
        return
    spec = importlib.util.spec_from_file_location(
        "heaveline", root / "__init__.py", submodule_search_locations=[str(root)]
    )
    module = importlib.util.module_from_spec(spec)
    sys.modules["heaveline"] = module
    spec.loader.exec_module(module)


def run_study(folder, plots=None):
    """Run the study beside its data; old results are replaced."""
    import processing

    results = folder / RESULTS
    results.unlink(missing_ok=True)
    inputs = {"STUDY": str(folder / "study.json"), "OUTPUT": str(results)}
    if plots:
        inputs["PLOTS"] = str(plots)
    return processing.run("heaveline:runstudy", inputs)


def build_project(folder):
    """Build the project of a folder that holds data and results.

    Parameters
    ----------
    folder : pathlib.Path

    Returns
    -------
    pathlib.Path
        The project file.
    """
    from heaveline.plugin.outputs.project import make_project
    from qgis.core import QgsCoordinateReferenceSystem

    return make_project(
        folder / PROJECT,
        project_groups(),
        QgsCoordinateReferenceSystem(truth.CRS),
        TITLE,
        ABSTRACT,
        terrain="Ground",
        # along strike, so that the fault dips to the right
        look_along=(truth.TRANSPORT_AZIMUTH - 90.0) % 360.0,
    )


def project_groups():
    """List the layers: results on top, what was mapped under them, the ground."""
    from heaveline.plugin.outputs.project import (
        INPUT_STYLES,
        ProjectGroup,
        ProjectLayer,
        result_layers,
    )

    def styled(uri, name, style, visible=True):
        return ProjectLayer(uri, name, INPUT_STYLES / f"{style}.qml", visible)

    mapped = tuple(
        styled(f"{VECTORS}|layername={table}", name, table, visible)
        for table, name, visible in INPUTS
    )
    depths = f"Top {survey.GRIDDED}, depth below sea level"
    base = (
        styled(DEPTHS, depths, "depth_grid", visible=False),
        styled(GROUND, "Ground", "ground"),
    )
    # picks of a grid stand so close that they hide the traces under them
    results = tuple(
        replace(own, visible=own.visible and own.uri.split("=")[1] != "picks")
        for own in result_layers(RESULTS)
    )
    return (
        ProjectGroup("Results", results),
        ProjectGroup("Mapped", mapped),
        ProjectGroup("Base", base),
    )


def draw_pictures(folder, plots):
    """Draw the map of the project, and take two of the section figures."""
    pictures = folder / "pictures"
    pictures.mkdir(exist_ok=True)
    draw_map(folder / PROJECT, pictures / "map.png")
    for name in (survey.BENT, survey.TRACE_ONLY):
        shutil.copy(plots / f"section_{name}.png", pictures)


def draw_map(path, picture, width=1200, height=950):
    """Draw the map of a project as it opens."""
    from qgis.core import QgsMapRendererSequentialJob, QgsMapSettings, QgsProject
    from qgis.PyQt.QtCore import QSize

    project = QgsProject.instance()
    project.read(str(path))
    tree = project.layerTreeRoot()
    settings = QgsMapSettings()
    settings.setLayers([n for n in tree.layerOrder() if n in tree.checkedLayers()])
    settings.setDestinationCrs(project.crs())
    settings.setExtent(project.viewSettings().defaultViewExtent())
    settings.setOutputSize(QSize(width, height))
    job = QgsMapRendererSequentialJob(settings)
    job.start()
    job.waitForFinished()
    job.renderedImage().save(str(picture))
    project.clear()


if __name__ == "__main__":
    main()
