"""Layers as they are handed over: style, notes, metadata, and projects of them.

The ground is invented: a listric fault in closed form, a horizon laid over it by hand
from the definition of vertical shear. Pictures are checked against that closed form.
"""

import contextlib
import math
import shutil
import sqlite3
import zipfile

import numpy as np
import pytest
from heaveline.geomcore.sources import Features
from heaveline.geomcore.study import SectionLine, Study, run
from heaveline.plugin import cautions
from heaveline.plugin.fields import LAYERS, ON_REQUEST, Table
from heaveline.plugin.layers import write_geopackage
from heaveline.plugin.outputs import colours, dress, project, ranges
from heaveline.plugin.outputs.tables import run_tables
from osgeo import gdal
from qgis.core import (
    Qgis,
    QgsCoordinateReferenceSystem,
    QgsCoordinateTransformContext,
    QgsExpressionContext,
    QgsExpressionContextUtils,
    QgsFlatTerrainProvider,
    QgsLayerNotesUtils,
    QgsLineString,
    QgsMapRendererSequentialJob,
    QgsMapSettings,
    QgsPoint,
    QgsProfilePlotRenderer,
    QgsProfileRequest,
    QgsProject,
    QgsRectangle,
    QgsVectorLayer,
)
from qgis.PyQt.QtCore import QSize
from qgis.PyQt.QtGui import QColor, QImage, QPainter

CRS = "EPSG:32633"
EAST, NORTH = 500000.0, 6200000.0
DEPTH, LENGTH, HEAVE, TOP = 3000.0, 2500.0, 800.0, 200.0
FOOT = 600.0
Z = ("picks", "predicted_fault_traces", "fault_points", "cutoffs", "predicted_horizons")
FLAT = ("section_lines", "picks_time")


# ---- invented ground, in closed form -------------------------------------------------


def fault(x):
    """Elevation of the fault: an exponential that flattens at TOP - DEPTH."""
    return TOP - DEPTH * (1.0 - np.exp(-np.asarray(x, dtype=float) / LENGTH))


def horizon(x):
    """The horizon in the hanging wall: every column slid down by one heave."""
    return fault(FOOT) + fault(x) - fault(x - HEAVE)


def on_map(x, strike=0.0):
    """Map coordinates of x along transport, here due east."""
    return np.column_stack([EAST + np.asarray(x), np.full(np.size(x), NORTH + strike)])


def source(key, role, name, sigma):
    return {
        "key": key,
        "role": role,
        "name": name,
        "unit": "m",
        "sign": "elevation",
        "datum": "mean sea level",
        "sigma": sigma,
        "layer": f"layer of {key}",
    }


STUDY = Study.from_dict(
    {
        "format": "heaveline-study",
        "version": 1,
        "name": "Invented study",
        "fault": "Invented <Fault>",
        "crs": CRS,
        "length_unit": "m",
        "vertical_datum": "mean sea level of nowhere",
        "note": "A note by its author.",
        "transport": {"azimuth": 90.0},
        "picks": {"fault_buffer": 0.0, "corridor": 200.0},
        "sources": [
            source("deep", "fault", "Invented <Fault>", 4.0),
            source("tops", "horizon", "A", 5.0),
        ],
        "construction": {"horizon": "A", "further_horizons": [{"name": "A"}]},
    }
)
SECTION_AT = {"S1": 0.0, "S2": 1500.0, "S3": 9000.0}  # no picks near S3


def invented_run():
    """The study over three sections, of which the last has nothing to work with."""
    known = np.linspace(0.0, FOOT + HEAVE, 40)
    west, east = (
        np.arange(-1900.0, FOOT - 25.0, 100.0),
        np.arange(FOOT + HEAVE + 25.0, 7900.0, 50.0),
    )
    x = np.r_[west, east]
    z = np.r_[np.full(len(west), fault(FOOT)), horizon(east)]
    points = {"deep": (known, fault(known)), "tops": (x, z)}
    strikes = [SECTION_AT["S1"], SECTION_AT["S2"]]
    sources = {
        key: Features.points(
            np.vstack([on_map(x, strike) for strike in strikes]), np.tile(z, 2)
        )
        for key, (x, z) in points.items()
    }
    lines = [SectionLine(n, on_map([-2000, 8000], s)) for n, s in SECTION_AT.items()]
    return run(STUDY, sources, lines)


@pytest.fixture(scope="module")
def product(qgis_app):
    """The run itself."""
    return invented_run()


@pytest.fixture(scope="module")
def tables(product):
    """The rows of all its layers, and those of a calibration, which has its own run."""
    made = run_tables(product, "2026-01-02T03:04:05Z", "9.9.9")
    of_calibration = [Table(n, []) for n in ("shear_angle", "shear_misfit")]
    return [*made, *of_calibration]


def write(path, tables):
    """Write and dress all layers."""
    crs = QgsCoordinateReferenceSystem(CRS)
    context = QgsCoordinateTransformContext()
    write_geopackage(path, tables, crs, context, dress=dress.dresser(STUDY))
    return path


@pytest.fixture(scope="module")
def results(tables, tmp_path_factory):
    """A file with all layers, dressed."""
    return write(tmp_path_factory.mktemp("dressed") / "results.gpkg", tables)


def opened(path, name):
    """A layer as a stranger opens it: from the file, with its default style."""
    layer = QgsVectorLayer(f"{path}|layername={name}", name, "ogr")
    assert layer.isValid()
    _, loaded = layer.loadDefaultStyle()
    assert loaded
    return layer


def near(colour, name, tolerance=24):
    """Tell whether a pixel has about the colour of that name."""
    wanted = QColor(name)
    return all(
        abs(a - b) <= tolerance
        for a, b in zip(colour.getRgb()[:3], wanted.getRgb()[:3])
    )


def around(image, x, y, name, reach=3, tolerance=24):
    """Tell whether that colour is found within a few pixels of a place."""
    return any(
        near(image.pixelColor(i, j), name, tolerance)
        for i in range(max(x - reach, 0), min(x + reach + 1, image.width()))
        for j in range(max(y - reach, 0), min(y + reach + 1, image.height()))
    )


# ---- what the file holds -------------------------------------------------------------


@pytest.mark.parametrize("name", list(LAYERS))
def test_fresh_layer_has_aliases_and_notes(results, name):
    """Whoever opens the file reads plain words and what to beware of."""
    layer = opened(results, name)
    for field in LAYERS[name].fields:
        index = layer.fields().lookupField(field.name)
        assert layer.attributeAlias(index) == field.alias
    notes = QgsLayerNotesUtils.layerNotes(layer)
    assert "Invented &lt;Fault&gt;" in notes
    assert "mean sea level of nowhere" in notes
    for caution in cautions.layer_cautions(name):
        assert caution in notes


@pytest.mark.parametrize("name", Z)
def test_z_is_drawn_where_it_is(results, name):
    """Absolute, to scale, vertex by vertex: else a buried fault is drawn too high.

    Source: the project's notes on QGIS, whose own default is relative to the terrain.
    """
    layer = opened(results, name)
    properties = layer.elevationProperties()
    assert properties.clamping() == Qgis.AltitudeClamping.Absolute
    assert properties.binding() == Qgis.AltitudeBinding.Vertex
    assert properties.type() == Qgis.VectorProfileType.IndividualFeatures
    assert (properties.zScale(), properties.zOffset()) == (1.0, 0.0)
    assert not properties.extrusionEnabled()


@pytest.mark.parametrize("name", Z)
def test_layers_with_z_have_3d_symbols(results, name):
    """The 3D view shows them without a further step."""
    assert opened(results, name).renderer3D() is not None


@pytest.mark.parametrize("name", FLAT)
def test_layers_without_z_claim_no_elevation(results, name):
    """Section lines lie on the ground, and times have no place among elevations."""
    layer = opened(results, name)
    assert layer.elevationProperties().clamping() == Qgis.AltitudeClamping.Terrain
    assert layer.renderer3D() is None


def test_traces_use_a_line_of_their_own_in_profiles(results):
    """A fault in section is one strong line, whatever colours the map has."""
    layer = opened(results, "predicted_fault_traces")
    properties = layer.elevationProperties()
    assert not properties.respectLayerSymbology()
    symbol = properties.profileLineSymbol()
    assert symbol.color().name() == colours.VERMILLION
    assert symbol.width() >= 0.8


def test_every_layer_with_geometry_has_a_style_file(qgis_app):
    """No output layer is left to chance colours."""
    spatial = {name for name, spec in LAYERS.items() if spec.geometry}
    assert {n for n in LAYERS if dress.style_file(n)} == spatial


def test_metadata_says_what_it_is_and_from_when(results, product):
    """Title, unit, datum, lineage and cautions travel with the layer."""
    metadata = opened(results, "predicted_fault_traces").metadata()
    assert metadata.title() == "Predicted fault traces: Invented <Fault>"
    abstract = metadata.abstract()
    for words in ("mean sea level of nowhere", "metre", CRS, "A note by its author."):
        assert words in abstract
    for field in LAYERS["predicted_fault_traces"].fields:
        assert field.comment in abstract
    history = "\n".join(metadata.history())
    for words in ("layer of deep", "layer of tops", "sigma 5 m", "9.9.9"):
        assert words in history
    assert product.run_id in history
    assert product.digest in history
    assert [c.constraint for c in metadata.constraints()] == list(
        cautions.layer_cautions("predicted_fault_traces")
    )
    assert metadata.crs().authid() == CRS


def test_metadata_states_the_extent_with_depth(results):
    """Where the layer lies, from the top of the fault to its deepest point."""
    layer = opened(results, "predicted_fault_traces")
    box = layer.metadata().extent().spatialExtents()[0].bounds
    assert box.xMinimum() == pytest.approx(EAST, abs=1.0)
    assert box.yMaximum() == pytest.approx(NORTH + SECTION_AT["S2"], abs=1.0)
    assert box.zMaximum() == pytest.approx(fault(0.0), abs=1.0)
    assert box.zMinimum() > TOP - DEPTH


def test_run_is_read_from_the_layer_where_it_is_not_told(results, product):
    """Lineage names run, time, digest and tool although nobody handed them over."""
    history = "\n".join(opened(results, "cutoffs").metadata().history())
    for words in (product.run_id, product.digest, "9.9.9", "2026-01-02T03:04:05Z"):
        assert words in history


def test_foreign_table_of_runs_does_no_harm(tables, tmp_path):
    """Sections laid into somebody's file, which has runs of its own kind."""
    path = tmp_path / "theirs.gpkg"
    database = sqlite3.connect(write(path, [Table("runs", [])]))
    database.execute("ALTER TABLE runs RENAME COLUMN tool_version TO speed")
    database.commit()
    database.close()
    (lines,) = [table for table in tables if table.name == "section_lines"]
    write(path, [lines])
    assert opened(path, "section_lines").metadata().history()


def test_field_meanings_stand_in_the_standard_table(results):
    """Other programs read them too: GeoPackage standard, extension 'schema'."""
    with contextlib.closing(sqlite3.connect(results)) as database:
        rows = database.execute(
            "SELECT table_name, column_name, title, description FROM gpkg_data_columns"
        ).fetchall()
        declared = database.execute(
            "SELECT table_name FROM gpkg_extensions WHERE extension_name = ?",
            ("gpkg_schema",),
        ).fetchall()
        verdict = database.execute("PRAGMA integrity_check").fetchone()
    database.close()
    wanted = {
        (name, f.name, f.alias, f.comment)
        for name, spec in LAYERS.items()
        for f in spec.fields
    }
    assert set(rows) == wanted
    # newer GDAL declares the table of constraints as well
    assert ("gpkg_data_columns",) in declared
    assert verdict == ("ok",)


def test_stored_style_holds_no_place_of_this_machine(results):
    """Neither the file's own path nor a user's name goes out with it."""
    with contextlib.closing(sqlite3.connect(results)) as database:
        styles = database.execute("SELECT styleQML, owner FROM layer_styles").fetchall()
    database.close()
    assert len(styles) == len(LAYERS)
    for text, owner in styles:
        assert str(results.parent) not in text
        assert owner == ""


def test_style_files_hold_no_place_of_a_machine():
    """What lies in the repository names no folder."""
    files = list(dress.STYLES.rglob("*.qml"))
    assert len(files) > len(Z) + len(FLAT)
    for path in files:
        text = path.read_text(encoding="utf-8")
        for mark in ("/home/", "/tmp/", "/root/", "/Users/", ":\\"):
            assert mark not in text


def style_names(path, name):
    """Names of the styles that a file holds for a layer."""
    database = sqlite3.connect(path)
    rows = database.execute(
        "SELECT styleName FROM layer_styles WHERE f_table_name = ? ORDER BY 1", (name,)
    ).fetchall()
    database.close()
    return [row[0] for row in rows]


def test_users_own_default_style_stays(results, tables, tmp_path):
    """A run writes over its layers, not over what the user made of their look."""
    path = tmp_path / "again.gpkg"
    shutil.copy(results, path)
    layer = opened(path, "cutoffs")
    layer.setMapTipTemplate("the user's own words")
    assert layer.saveStyleToDatabase("mine", "", True, "") == ""
    del layer
    write(path, tables)
    assert opened(path, "cutoffs").mapTipTemplate() == "the user's own words"
    assert style_names(path, "cutoffs") == [dress.STYLE_NAME, "mine"]


def test_second_run_replaces_our_style(tables, results, tmp_path):
    """One style of ours a layer, fitted to the newest data."""
    path = tmp_path / "again.gpkg"
    shutil.copy(results, path)
    write(path, tables)
    assert style_names(path, "fault_points") == [dress.STYLE_NAME]


def test_empty_layers_are_dressed(qgis_app, tmp_path):
    """A study without a single pick still gives layers that open."""
    empty = [Table(name, []) for name in LAYERS]
    path = write(tmp_path / "empty.gpkg", empty)
    for name in LAYERS:
        assert opened(path, name).metadata().title()


def test_layer_of_another_name_is_left_alone(qgis_app):
    """What is not ours is not touched."""
    layer = QgsVectorLayer(f"Point?crs={CRS}", "somebody else's", "memory")
    dress.dress(layer, "somebody else's", STUDY)
    assert layer.metadata().title() == ""
    assert not QgsLayerNotesUtils.layerHasNotes(layer)


def test_broken_style_is_named(results, monkeypatch, tmp_path):
    """A damaged installation is told in words."""
    (tmp_path / "picks.qml").write_text("no style", encoding="utf-8")
    monkeypatch.setattr(dress, "STYLES", tmp_path)
    layer = QgsVectorLayer(f"{results}|layername=picks", "picks", "ogr")
    with pytest.raises(ValueError, match=r"picks\.qml.*Install the plugin anew") as why:
        dress.style(layer, "picks", STUDY)
    assert why.value.code == "bad-style"


# ---- fitted to the data --------------------------------------------------------------


@pytest.mark.parametrize(
    ("low", "high"),
    [(-2730.0, 210.0), (-1e-3, 1e-3), (5.0, 5.0), (0.0, 0.0), (-9e6, -8.9e6), (1, 2)],
)
def test_class_limits_are_round_and_hold_the_range(low, high):
    """Limits are whole multiples of 1, 2, 2.5 or 5 times a power of ten."""
    limits = ranges.round_limits(low, high)
    assert limits[0] <= low
    assert limits[-1] >= high
    assert limits[0] < limits[-1]
    assert len(limits) <= 9
    step = limits[1] - limits[0]
    mantissa = step / 10.0 ** math.floor(math.log10(step) + 1e-9)
    assert min(abs(mantissa - m) for m in (1, 2, 2.5, 5, 10)) < 1e-6


def test_fault_points_are_classed_over_the_whole_fault(results):
    """From the deepest to the highest point, without a gap between classes."""
    layer = opened(results, "fault_points")
    classes = layer.renderer().ranges()
    z = [f["z"] for f in layer.getFeatures()]
    assert classes[0].lowerValue() <= min(z)
    assert classes[-1].upperValue() >= max(z)
    for one, other in zip(classes, classes[1:]):
        assert one.upperValue() == other.lowerValue()
    assert classes[0].label().endswith(" m")


def test_each_horizon_has_its_own_colour(results):
    """Horizons can be told apart, and are not red like the fault."""
    layer = opened(results, "predicted_horizons")
    categories = layer.renderer().categories()
    assert [c.value() for c in categories] == ["A"]
    assert categories[0].symbol().color().name() == colours.HORIZON_COLOURS[0]
    assert colours.VERMILLION not in colours.HORIZON_COLOURS


def lightness(colour):
    """Relative luminance of a colour (value from memory: ITU-R BT.709 weights)."""
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [
        c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels
    ]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_elevation_ramp_reads_in_grey():
    """Deeper is darker all the way, so that it reads without any colour vision."""
    steps = [lightness(colours.ramp_colour(i / 40)) for i in range(41)]
    assert all(a < b for a, b in zip(steps, steps[1:]))
    assert steps[-1] - steps[0] > 0.35


# ---- pictures ------------------------------------------------------------------------


def draw_map(layers, extent, size):
    """Draw layers as the map canvas does."""
    settings = QgsMapSettings()
    settings.setLayers(layers)
    settings.setDestinationCrs(layers[0].crs())
    settings.setExtent(extent)
    settings.setOutputSize(QSize(*size))
    settings.setBackgroundColor(QColor("white"))
    context = QgsExpressionContext()  # a list of scopes crashes QGIS 3.40
    context.appendScope(QgsExpressionContextUtils.globalScope())
    context.appendScope(QgsExpressionContextUtils.mapSettingsScope(settings))
    settings.setExpressionContext(context)
    job = QgsMapRendererSequentialJob(settings)
    job.start()
    job.waitForFinished()
    assert job.errors() == []
    return job.renderedImage()


@pytest.mark.parametrize("x", [400.0, 1400.0, 3000.0, 5500.0])
def test_map_line_is_coloured_by_its_elevation(results, x):
    """Not by how far along it is: a listric fault flattens, and its colours with it."""
    layer = opened(results, "predicted_fault_traces")
    layer.setLabelsEnabled(False)
    scale = 10.0  # metres a pixel
    extent = QgsRectangle(EAST - 500, NORTH - 1000, EAST + 7500, NORTH + 1000)
    image = draw_map([layer], extent, (800, 200))
    points = opened(results, "fault_points")
    low = ranges.round_limits(
        points.minimumValue(points.fields().lookupField("z")),
        points.maximumValue(points.fields().lookupField("z")),
    )
    fraction = (float(fault(x)) - low[0]) / (low[-1] - low[0])
    place = round((x + 500) / scale), 100
    assert around(image, *place, colours.ramp_colour(fraction), reach=2, tolerance=14)
    wrong = colours.ramp_colour(1.0 - x / 6000.0)
    assert not near(QColor(wrong), colours.ramp_colour(fraction), 14)


def test_section_letters_stand_outside_both_ends(results):
    """The name at the first vertex, primed at the last, off the line itself."""
    layer = opened(results, "section_lines")
    extent = QgsRectangle(EAST - 3500, NORTH - 1000, EAST + 9500, NORTH + 1000)
    bare = layer.clone()
    bare.setLabelsEnabled(False)
    with_letters = draw_map([layer], extent, (1300, 200))
    without = draw_map([bare], extent, (1300, 200))
    changed = {
        x
        for x in range(1300)
        for y in range(70, 130)
        if with_letters.pixel(x, y) != without.pixel(x, y)
    }
    first, last = 150, 1150  # pixels of both ends
    assert any(first - 40 < x < first for x in changed)
    assert any(last < x < last + 40 for x in changed)
    assert not any(first + 5 < x < last - 5 for x in changed)


def draw_profile(layers, terrain, low, high, size):
    """Draw the elevation profile along section S1 as QGIS does."""
    line = QgsLineString([QgsPoint(EAST - 2000, NORTH), QgsPoint(EAST + 8000, NORTH)])
    request = QgsProfileRequest(line.clone())
    request.setCrs(layers[0].crs())
    request.setTolerance(1.0)
    request.setTerrainProvider(terrain)
    context = QgsExpressionContext()
    context.appendScope(QgsExpressionContextUtils.globalScope())
    request.setExpressionContext(context)
    renderer = QgsProfilePlotRenderer(layers, request)
    renderer.startGeneration()
    renderer.waitForFinished()
    drawn = renderer.renderToImage(*size, 0.0, line.length(), low, high)
    paper = QImage(drawn.size(), QImage.Format.Format_RGB32)
    paper.fill(QColor("white"))
    painter = QPainter(paper)
    painter.drawImage(0, 0, drawn)
    painter.end()
    return paper


@pytest.fixture(scope="module")
def profile_picture(results):
    """Fault and picks in QGIS's own profile, over ground at 500 m."""
    terrain = QgsFlatTerrainProvider()
    terrain.setOffset(500.0)
    names = ("predicted_fault_traces", "picks")
    layers = [opened(results, name) for name in names]
    return draw_profile(layers, terrain, -3000.0, 1000.0, (1000, 800))


def place(x, z):
    """Pixel of a place in the profile picture."""
    return round((x + 2000.0) / 10.0), round((1000.0 - z) / 5.0)


@pytest.mark.parametrize("x", [1700.0, 2500.0, 4000.0, 6000.0])
def test_profile_shows_the_fault_at_its_elevation(profile_picture, x):
    """Where the closed form has it, and not 500 m higher on top of the ground."""
    z = float(fault(x))
    assert around(profile_picture, *place(x, z), colours.VERMILLION)
    assert not around(profile_picture, *place(x, z + 500.0), colours.VERMILLION)


@pytest.mark.parametrize("x", [-1500.0, 3000.0, 6000.0])
def test_profile_shows_horizon_picks(profile_picture, x):
    """Dots of the horizon in both walls."""
    z = float(fault(FOOT)) if x < 0 else float(horizon(x))
    assert around(profile_picture, *place(x, z), colours.BLUE, reach=5, tolerance=40)


def test_profile_tells_known_from_predicted(results):
    """Down to the hanging-wall cut-off black, beyond it only the fault's own line."""
    layers = [opened(results, n) for n in ("predicted_fault_traces", "fault_points")]
    size = (1000, 800)
    image = draw_profile(layers, QgsFlatTerrainProvider(), -3000.0, 1000.0, size)
    for x in (800.0, 1000.0, 1200.0):
        assert around(image, *place(x, float(fault(x))), colours.BLACK)
    for x in (2000.0, 4000.0):
        assert not around(image, *place(x, float(fault(x))), colours.BLACK)


# ---- projects ------------------------------------------------------------------------

CONTENT = (
    project.ProjectGroup("Results", project.result_layers("results.gpkg")),
    project.ProjectGroup(
        "Base",
        (
            project.ProjectLayer("results.gpkg|layername=section_lines", "Lines"),
            project.ProjectLayer("results.gpkg|layername=cutoffs", "Points"),
        ),
    ),
)


@pytest.fixture
def project_file(results, tmp_path):
    """A project beside its results."""
    folder = tmp_path / "made here"
    folder.mkdir()
    shutil.copy(results, folder)
    crs = QgsCoordinateReferenceSystem(CRS)
    return project.make_project(
        folder / "job.qgz", CONTENT, crs, "A title", "An abstract", look_along=27.0
    )


def read_project(path):
    """Open a project as the desktop does."""
    read = QgsProject()
    assert read.read(str(path))
    return read


def project_text(path):
    """The project document inside its container."""
    with zipfile.ZipFile(path) as file:
        (name,) = [n for n in file.namelist() if n.endswith(".qgs")]
        return file.read(name).decode("utf-8")


def test_project_opens_from_another_place(project_file, tmp_path):
    """Moved as a folder, it finds its layers, styled as they were."""
    moved = tmp_path / "moved"
    shutil.move(str(project_file.parent), moved)
    read = read_project(moved / "job.qgz")
    layers = read.mapLayers().values()
    assert len(layers) == len(LAYERS) - len(ON_REQUEST) + 2
    assert all(layer.isValid() for layer in layers)
    (traces,) = read.mapLayersByName("Predicted fault traces")
    properties = traces.elevationProperties()
    assert properties.clamping() == Qgis.AltitudeClamping.Absolute
    assert traces.renderer3D() is not None
    assert traces.labelsEnabled()
    assert QgsLayerNotesUtils.layerHasNotes(traces)
    assert traces.metadata().history()
    scope = QgsExpressionContextUtils.layerScope(traces)
    assert float(scope.variable("heaveline_z_low")) < -2000


def test_project_has_title_crs_and_extent(project_file):
    """What the user sees at first is the job, in the study's CRS."""
    read = read_project(project_file)
    assert read.title() == "A title"
    assert read.metadata().abstract() == "An abstract"
    assert read.crs().authid() == CRS
    extent = read.viewSettings().defaultViewExtent()
    assert extent.contains(QgsRectangle(EAST - 2000, NORTH, EAST + 8000, NORTH + 9000))


def test_project_orders_points_over_lines_over_tables(project_file):
    """Nothing hides what lies under it, in each group by itself."""
    read = read_project(project_file)
    root = read.layerTreeRoot()
    groups = root.children()
    assert [group.name() for group in groups] == ["Results", "Base"]
    rank = {"Point": 0, "LineString": 1, None: 2}
    by_title = {spec.title: spec.geometry for spec in LAYERS.values()}
    kinds = [by_title[node.name()] for node in groups[0].children()]
    ranks = [rank[kind.replace("Z", "") if kind else None] for kind in kinds]
    assert ranks == sorted(ranks)
    assert [node.name() for node in groups[1].children()] == ["Points", "Lines"]
    assert not root.findGroup("Results").findLayer("results_picks_in_time").isVisible()


def test_project_tells_nothing_of_who_made_it_where(project_file):
    """Neither user nor time nor folder is in the document."""
    text = project_text(project_file)
    assert str(project_file.parent) not in text
    for mark in ("saveUser", "saveDateTime", "made here"):
        assert mark not in text
    assert "./results.gpkg|layername=" in text


def test_project_keeps_a_3d_view_without_the_ground(project_file):
    """A buried fault is in sight at once, and the view survives being saved again."""
    again = project_file.with_name("again.qgz")
    read = read_project(project_file)
    assert read.write(str(again))
    for path in (project_file, again):
        text = project_text(path)
        view = text[text.index("<mapViewDocks3D>") : text.index("</mapViewDocks3D>")]
        assert 'name="Faults in 3D"' in view
        assert 'terrain-rendering-enabled="0"' in view
        assert 'id="results_predicted_fault_traces"' in view
        assert 'yaw="333"' in view  # seen in the desktop: it counts counter-clockwise


@pytest.fixture
def ground_file(tmp_path):
    """A raster that rises from 120 m in the west to 480 m in the east, with a hole."""
    values = np.tile(np.linspace(120.0, 480.0, 40), (30, 1)).astype(np.float32)
    values[3, 5] = -9999.0
    path = tmp_path / "ground.tif"
    raster = gdal.GetDriverByName("GTiff").Create(
        str(path), 40, 30, 1, gdal.GDT_Float32
    )
    raster.SetGeoTransform((EAST, 100.0, 0.0, NORTH, 0.0, -100.0))
    raster.SetProjection(crs_of_tests().toWkt())
    raster.GetRasterBand(1).SetNoDataValue(-9999.0)
    raster.GetRasterBand(1).WriteArray(values)
    raster = None  # closes the file
    return path


def ground_project(path):
    """A project with the raster as its terrain."""
    style = project.INPUT_STYLES / "ground.qml"
    layers = (project.ProjectLayer(path.name, "Ground", style),)
    return project.make_project(
        path.with_name("ground.qgz"),
        (project.ProjectGroup("Base", layers),),
        crs_of_tests(),
        "T",
        terrain="Ground",
    )


def test_raster_is_coloured_over_its_own_range(qgis_app, ground_file):
    """Colours run over the elevations that are there, holes left out."""
    read = read_project(ground_project(ground_file))
    (layer,) = read.mapLayersByName("Ground")
    renderer = layer.renderer()
    assert (renderer.classificationMin(), renderer.classificationMax()) == (100, 500)
    items = renderer.shader().rasterShaderFunction().colorRampItemList()
    assert (items[0].value, items[-1].value) == (100, 500)
    assert layer.elevationProperties().isEnabled()


def test_terrain_of_a_project_is_found_anywhere(qgis_app, ground_file, tmp_path):
    """Profiles and 3D views stand on the raster, and its path stays out of the file."""
    made = ground_project(ground_file)
    assert str(tmp_path) not in project_text(made)
    moved = tmp_path / "moved"
    moved.mkdir()
    for path in (made, ground_file):
        shutil.move(str(path), moved)
    read = read_project(moved / made.name)
    terrain = read.elevationProperties().terrainProvider()
    assert terrain.layer().name() == "Ground"
    assert terrain.heightAt(EAST + 50.0, NORTH - 1550.0) == pytest.approx(120.0)


def crs_of_tests():
    return QgsCoordinateReferenceSystem(CRS)


@pytest.mark.parametrize(
    ("name", "groups", "more", "words"),
    [
        ("job.txt", CONTENT, {}, r"End its name in \.qgz"),
        ("none/job.qgz", (), {}, "could not|cannot|unable|Unable|write"),
        ("job.qgz", CONTENT[:1], {"terrain": "Ground"}, "no raster layer 'Ground'"),
        (
            "job.qgz",
            (project.ProjectGroup("R", project.result_layers("absent.gpkg")),),
            {},
            "absent",
        ),
    ],
    ids=["suffix", "folder", "terrain", "layer"],
)
def test_project_is_refused_in_words_and_leaves_nothing(
    results, tmp_path, name, groups, more, words
):
    """A project that cannot be made is not made by half."""
    shutil.copy(results, tmp_path)
    before = sorted(path.name for path in tmp_path.rglob("*"))
    with pytest.raises(ValueError, match=words):
        project.make_project(tmp_path / name, groups, crs_of_tests(), "T", **more)
    after = sorted(path.name for path in tmp_path.rglob("*"))
    assert after == before
