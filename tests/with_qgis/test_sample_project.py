"""The sample project as it is shipped: complete, styled, relative, up to date."""

import contextlib
import shutil
import sqlite3
import zipfile
from pathlib import Path

import pytest

from sample_project import make_project, survey, truth

SHIPPED = Path(truth.__file__).parent
#: After a change of the tool's figures they have to be made again.
STALE = "the shipped results are old: run sample_project/make_project.py --pictures"


@pytest.fixture
def opened(qgis_app, tmp_path):
    """Open the project in a copy of the sample, as a user has it."""
    from qgis.core import QgsProject

    folder = tmp_path / "my copy"
    shutil.copytree(SHIPPED, folder)
    project = QgsProject()
    assert project.read(str(folder / make_project.PROJECT))
    yield project
    project.clear()


def test_every_layer_opens_from_the_copy(opened):
    """All layers are found beside the project, wherever it was copied to."""
    layers = list(opened.mapLayers().values())
    assert len(layers) > 15
    folder = Path(opened.fileName()).parent
    for layer in layers:
        assert layer.isValid(), layer.name()
        assert Path(layer.source().split("|")[0]).is_relative_to(folder), layer.name()


def test_paths_in_the_project_are_relative():
    """The project names its files relative to itself and no folder of a machine."""
    with zipfile.ZipFile(SHIPPED / make_project.PROJECT) as archive:
        text = archive.read("heaveline_sample.qgs").decode("utf-8")
    sources = [part.split("<")[0] for part in text.split("<datasource>")[1:]]
    named = [source for source in sources if source]  # QGIS's annotations have none
    assert len(named) == len(sources) - 1 > 15
    for source in named:
        assert source.startswith(("./results.gpkg|", "./data/")), source


def test_layers_are_styled(opened):
    """Traces are graded by elevation, contours and wells labelled, grids coloured."""
    names = {layer.name(): layer for layer in opened.mapLayers().values()}
    traces = names["Predicted fault traces"]
    # pieces between vertices, each in the colour of its elevation
    symbol = traces.renderer().symbol().symbolLayer(0)
    assert symbol.layerType() == "GeometryGenerator"
    assert traces.renderer3D() is not None
    for name in ("Top Brelquith, structure contours", "Planned wells"):
        assert names[name].labelsEnabled(), name
    for name in ("Ground", "Top Sardunel, depth below sea level"):
        assert names[name].renderer().type() == "singlebandpseudocolor", name


def test_elevations_are_absolute(opened):
    """Layers with Z are shown in profiles where their elevation says."""
    from qgis.core import Qgis, QgsWkbTypes

    for layer in opened.mapLayers().values():
        if layer.type() == Qgis.LayerType.Vector and QgsWkbTypes.hasZ(layer.wkbType()):
            clamping = layer.elevationProperties().clamping()
            assert clamping == Qgis.AltitudeClamping.Absolute, layer.name()


def test_project_uses_the_ground_as_terrain(opened):
    """Profiles and 3D views take the terrain from the ground's elevations."""
    terrain = opened.elevationProperties().terrainProvider()
    assert terrain.layer().name() == "Ground"
    assert opened.crs().authid() == truth.CRS


def test_results_shipped_are_those_of_the_study(qgis_app, tmp_path):
    """The study of the sample gives the results that lie beside it."""
    shutil.copytree(SHIPPED / "data", tmp_path / "data")
    shutil.copy(SHIPPED / "study.json", tmp_path)
    make_project.run_study(tmp_path)
    new, old = (_figures(f / "results.gpkg") for f in (tmp_path, SHIPPED))
    assert set(new) == set(old) == set(survey.SECTIONS), STALE
    for name, figures in new.items():
        assert figures == pytest.approx(old[name], abs=0.05), STALE


def _figures(path):
    """Give heave, throw and elevations of each predicted trace."""
    uri = path.as_uri() + "?mode=ro"
    with contextlib.closing(sqlite3.connect(uri, uri=True)) as connection:
        rows = connection.execute(
            "select section_id, heave, throw, regional_z, z_top, z_base "
            "from predicted_fault_traces where band = 'best'"
        ).fetchall()
    return {name: figures for name, *figures in rows}


def test_readme_tells_the_truth_of_the_script():
    """Heaves and throws in the sample's README are those of truth and results."""
    text = (SHIPPED / "README.md").read_text(encoding="utf-8")
    results = _figures(SHIPPED / "results.gpkg")
    for name in survey.SECTIONS:
        s = survey.on_section(name, 1250.0)
        own = [f(survey.CONTOURED, s) for f in (truth.heave, truth.throw)]
        row = next(r for r in text.splitlines() if r.startswith(f"| {name} "))
        cells = [c.strip() for c in row.strip("|").split("|")]
        assert cells[1] == f"{own[0]:.0f}, {own[1]:.0f}"
        assert cells[2] == f"{results[name][0]:.0f}, {results[name][1]:.0f}", STALE


def test_sample_is_small():
    """The sample is quick to download: well below ten megabytes."""
    total = sum(f.stat().st_size for f in SHIPPED.rglob("*") if f.is_file())
    assert total < 6e6
