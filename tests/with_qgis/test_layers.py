"""Layers to arrays: sources as a user declares them, section lines, bad input.

Checks are against QGIS's and shapely's own single-geometry functions, and against
coordinates written by hand.
"""

import hashlib
import pathlib

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

pytestmark = pytest.mark.usefixtures("qgis_app")

UTM = "EPSG:32633"


@pytest.fixture(scope="module")
def layers(qgis_app):
    """Give the room that reads and writes."""
    from heaveline.plugin import layers

    return layers


@pytest.fixture
def heard():
    """Give a feedback that keeps what it is told."""
    from qgis.core import QgsProcessingFeedback

    return QgsProcessingFeedback(False)


def crs_of(text=UTM):
    from qgis.core import QgsCoordinateReferenceSystem

    return QgsCoordinateReferenceSystem(text)


def no_shifts():
    from qgis.core import QgsCoordinateTransformContext

    return QgsCoordinateTransformContext()


def memory(kind, rows, fields=(), crs=UTM, name="beds"):
    """Make a layer of (WKT or None, attributes...) rows; fields are name:type."""
    from qgis.core import QgsFeature, QgsGeometry, QgsVectorLayer

    words = "&".join([f"crs={crs}" if crs else "", *(f"field={f}" for f in fields)])
    layer = QgsVectorLayer(f"{kind}?{words}", name, "memory")
    assert layer.isValid()
    features = []
    for wkt, *attributes in rows:
        feature = QgsFeature(layer.fields())
        if wkt is not None:
            feature.setGeometry(QgsGeometry.fromWkt(wkt))
        feature.setAttributes(attributes)
        features.append(feature)
    assert layer.dataProvider().addFeatures(features)[0]
    if not crs:
        layer.setCrs(crs_of(""))
    return layer


def declared(role="horizon", z=None, **more):
    from heaveline.geomcore.sources import SourceDeclaration, ZDeclaration

    return SourceDeclaration(
        key="h",
        role=role,
        name="Ash bed",
        unit="m",
        sign="elevation",
        datum="mean sea level",
        z=ZDeclaration(**(z or {})),
        **more,
    )


def read(layers, layer, feedback=None, near=None, **declaration):
    return layers.read_source(
        declared(**declaration), crs_of(), None, no_shifts(), feedback, layer, near
    )


FIELD = {"source": "field", "field": "z"}


# ---- geometries --------------------------------------------------------------------


def test_contours_with_z_keep_their_vertices_and_elevations(layers):
    """Each line is one part with its own vertices, Z and feature number."""
    layer = memory(
        "LineStringZ",
        [("LINESTRINGZ(0 1 -5, 2 3 -6)",), ("LINESTRINGZ(9 9 1, 8 8 2)",)],
    )
    found = read(layers, layer)
    assert found.geometry == "line"
    assert found.xy.tolist() == [[0, 1], [2, 3], [9, 9], [8, 8]]
    assert found.value.tolist() == [-5, -6, 1, 2]
    assert found.offsets.tolist() == [0, 2, 4]
    assert found.fid.tolist() == [1, 2]


def test_parts_of_a_multi_line_keep_the_feature_number(layers):
    """A contour in two pieces is two parts of one feature, with its one elevation."""
    wkt = "MULTILINESTRING((0 0, 1 1), (5 5, 6 6, 7 7))"
    layer = memory(
        "MultiLineString", [(wkt, -40.0), ("LINESTRING(0 3, 4 4)", -50.0)], ["z:double"]
    )
    found = read(layers, layer, z=FIELD)
    assert found.fid.tolist() == [1, 1, 2]
    assert found.offsets.tolist() == [0, 2, 5, 7]
    assert found.value.tolist() == [-40] * 5 + [-50] * 2


def test_points_with_m_do_not_take_m_for_z(layers):
    """M is a measure, never an elevation; ZM keeps its Z."""
    zm = memory("PointZM", [("POINT ZM(1 2 -30 7)",), ("POINT ZM(3 4 -31 8)",)])
    assert read(layers, zm).value.tolist() == [-30, -31]
    only_m = memory("PointM", [("POINT M(1 2 7)", -3.0)], ["z:double"])
    found = read(layers, only_m, z=FIELD)
    assert (found.xy.tolist(), found.value.tolist()) == ([[1, 2]], [-3])


def test_polygon_rings_are_cut_off_lines(layers):
    """Every ring of a fault polygon is one part, holes too."""
    ring = "(0 0 -1, 4 0 -2, 4 4 -3, 0 0 -1)"
    hole = "(1 1 -1, 2 1 -1, 2 2 -1, 1 1 -1)"
    layer = memory(
        "MultiPolygonZ",
        [(f"MULTIPOLYGONZ(({ring}, {hole}), ({ring}))",), (f"POLYGONZ({ring})",)],
    )
    found = read(layers, layer, role="cut-off")
    assert found.geometry == "polygon"
    assert found.fid.tolist() == [1, 1, 1, 2]
    assert np.diff(found.offsets).tolist() == [4, 4, 4, 4]
    assert found.value[:3].tolist() == [-1, -2, -3]


def test_curves_become_straight_pieces(layers):
    """An arc of 100 m radius is followed within a centimetre."""
    arc = "CIRCULARSTRING Z(-100 0 -50, 0 100 -50, 100 0 -50)"
    layer = memory("CompoundCurveZ", [(f"COMPOUNDCURVE Z({arc})",)])
    found = read(layers, layer)
    assert found.geometry == "line"
    assert len(found.xy) > 50
    assert np.hypot(*found.xy.T) == pytest.approx(100, abs=1e-6)
    assert found.value == pytest.approx(-50)


def test_curves_beside_lines_keep_their_order(layers):
    """One curve among straight lines does not shift the others."""
    layer = memory(
        "MultiCurve",
        [
            ("LINESTRING(0 0, 1 1)", 1.0),
            ("COMPOUNDCURVE(CIRCULARSTRING(0 0, 5 5, 10 0))", 2.0),
            ("LINESTRING(7 7, 8 8)", 3.0),
        ],
        ["z:double"],
    )
    found = read(layers, layer, z=FIELD)
    assert found.fid.tolist() == [1, 2, 3]
    assert found.xy[-2:].tolist() == [[7, 7], [8, 8]]
    assert found.value[found.offsets[:-1]].tolist() == [1, 2, 3]


def test_features_without_geometry_are_counted(layers):
    """Null and empty geometries are refused with their number, the others stay."""
    layer = memory(
        "PointZ", [(None,), ("POINT Z(1 2 3)",), ("POINT EMPTY",), ("POINT Z(4 5 6)",)]
    )
    found = read(layers, layer)
    assert found.refused == {"no geometry": 2}
    assert found.fid.tolist() == [2, 4]
    assert found.value.tolist() == [3, 6]


def test_empty_layer_gives_no_parts(layers):
    """A layer without features is read; the core refuses it by name."""
    found = read(layers, memory("LineStringZ", []))
    assert (found.geometry, len(found.fid), found.xy.shape) == ("line", 0, (0, 2))


def test_other_geometries_in_a_mixed_layer_are_counted(layers):
    """Of a layer of all kinds the most frequent is read, the others are counted."""
    from qgis.core import Qgis

    layer = memory(
        "GeometryCollection",
        [
            ("GEOMETRYCOLLECTION(POINT(1 2))", 1.0),
            ("GEOMETRYCOLLECTION(POINT(3 4))", 2.0),
            ("GEOMETRYCOLLECTION(LINESTRING(0 0, 1 1))", 3.0),
        ],
        ["z:double"],
    )
    assert layer.wkbType() == Qgis.WkbType.GeometryCollection
    found = read(layers, layer, z=FIELD)
    assert found.geometry == "point"
    assert found.refused == {"geometry of another type": 1}
    assert found.fid.tolist() == [1, 2]


COORDINATE = st.floats(-1e7, 1e7, allow_nan=False, width=64)


@st.composite
def geometries(draw):
    """Draw a geometry of any plain kind, with or without Z."""
    width = draw(st.sampled_from([2, 3]))
    point = st.tuples(*[COORDINATE] * width)
    line = st.lists(point, min_size=2, max_size=5)
    ring = st.lists(point, min_size=3, max_size=5)
    kind = draw(st.sampled_from(["point", "line", "polygon", "mp", "ml", "mpoly"]))
    if kind == "point":
        return shapely.Point(draw(point))
    if kind == "line":
        return shapely.LineString(draw(line))
    if kind == "polygon":
        return shapely.Polygon(draw(ring), draw(st.lists(ring, max_size=2)))
    if kind == "mp":
        return shapely.MultiPoint(draw(st.lists(point, min_size=1, max_size=4)))
    if kind == "ml":
        return shapely.MultiLineString(draw(st.lists(line, min_size=1, max_size=3)))
    polygons = [
        shapely.Polygon(r) for r in draw(st.lists(ring, min_size=1, max_size=3))
    ]
    return shapely.MultiPolygon(polygons)


@settings(max_examples=150)
@given(st.lists(geometries(), max_size=8))
def test_any_mixture_of_geometries_gives_the_coordinates_shapely_gives(shapes):
    """Bytes of any kinds in any order come out with the right owner and vertices."""
    from heaveline.plugin.layers.wkb import parse_wkb

    parts = parse_wkb([shapely.to_wkb(s, flavor="iso") for s in shapes])
    has_z = any(shapely.has_z(shapes)) if shapes else False
    expected, owner = shapely.get_coordinates(
        shapes, include_z=has_z, return_index=True
    )
    assert np.repeat(parts.owner, parts.count).tolist() == owner.tolist()
    assert np.array_equal(parts.rows, expected, equal_nan=True)
    assert parts.offsets[-1] == len(expected)


@settings(max_examples=60)
@given(st.lists(geometries(), max_size=9), st.integers(1, 4), st.integers(-1, 20))
def test_blocks_are_joined_to_what_one_block_would_be(shapes, step, expected):
    """However the geometries come, with Z or without, nothing is shifted or lost."""
    from heaveline.plugin.layers.wkb import PartsCollector, parse_wkb

    wkb = [shapely.to_wkb(s, flavor="iso") for s in shapes]
    collected = PartsCollector(expected)
    for i in range(0, len(wkb), step):
        collected.add(parse_wkb(wkb[i : i + step]), len(wkb[i : i + step]))
    one, other = collected.parts(), parse_wkb(wkb)
    for name in ("kind", "owner", "count", "offsets", "xy", "z"):
        assert np.array_equal(getattr(one, name), getattr(other, name), equal_nan=True)


def test_old_codes_for_z_are_understood():
    """Geometries marked 2.5D in the old way keep their Z."""
    from heaveline.plugin.layers.wkb import parse_wkb

    old = shapely.to_wkb(shapely.LineString([(1, 2, 3), (4, 5, 6)]), flavor="extended")
    assert parse_wkb([old]).z.tolist() == [3, 6]


def test_written_bytes_are_what_qgis_reads():
    """Our bytes of a line and of a point are those of QGIS."""
    from heaveline.plugin.layers.wkb import line_wkb
    from qgis.core import QgsGeometry

    geometry = QgsGeometry()
    geometry.fromWkb(line_wkb([(1, 2, 3), (4, 5, 6)]))
    assert [(p.x(), p.y(), p.z()) for p in geometry.vertices()] == [
        (1, 2, 3),
        (4, 5, 6),
    ]
    geometry.fromWkb(line_wkb([(1, 2), (4, 5)]))
    assert geometry.asWkt() == "LineString (1 2, 4 5)"


# ---- values ------------------------------------------------------------------------


def test_numbers_of_every_field_type_are_read(layers):
    """Integers, long integers and decimals count alike."""
    for kind, value in (("integer", -12), ("int8", -12), ("double", -12.5)):
        layer = memory("Point", [("POINT(0 0)", value)], [f"z:{kind}"])
        assert read(layers, layer, z=FIELD).value.tolist() == [value]


def test_plain_numbers_in_a_text_field_are_read_and_others_counted(layers):
    """Only a plain number with a decimal point counts; the rest is refused by name."""
    texts = ["-12.5", " 7 ", "1e3", "+.5", "12,5", "1 000", "0x10", "nan", "deep"]
    layer = memory("Point", [("POINT(0 0)", t) for t in texts], ["z:string"])
    found = read(layers, layer, z=FIELD)
    assert found.value.tolist() == [-12.5, 7, 1000, 0.5]
    assert found.refused == {"text in a number field": 5}
    assert found.fid.tolist() == [1, 2, 3, 4]


def test_null_is_unknown_and_never_nought(layers):
    """NULL and an empty text have no value; the input statement counts them."""
    from heaveline.geomcore.picks import prepare_source

    rows = [("POINT(0 0)", None), ("POINT(1 1)", "")]
    layer = memory("Point", [*rows, ("POINT(2 2)", "5")], ["z:string"])
    found = read(layers, layer, z=FIELD)
    assert np.isnan(found.value[:2]).all()
    assert found.value[2] == 5
    source = declared(z=FIELD)
    prepared = prepare_source(source, found, "m")
    assert (prepared.count_in, prepared.refused) == (3, {"no value": 2})


def test_features_in_several_parts_are_counted_once(layers):
    """The input statement counts features, not their parts; one part in use is use."""
    from heaveline.geomcore.picks import prepare_source

    layer = memory(
        "MultiPointZ",
        [
            ("MULTIPOINTZ(0 0 -1, 1 1 -2, 2 2 -3)",),
            ("MULTIPOINTZ(3 3 1e30, 4 4 -9999)",),
            ("MULTIPOINTZ(5 5 -9999, 6 6 -6)",),
        ],
    )
    found = read(layers, layer)
    assert len(found.fid) == 7
    prepared = prepare_source(declared(), found, "m")
    assert prepared.count_in == 3
    assert prepared.refused == {"null code": 1}


def test_a_constant_holds_for_all_vertices(layers):
    """A fault trace at sea level has elevation nought everywhere."""
    layer = memory("LineString", [("LINESTRING(0 0, 1 1, 2 2)",)])
    found = read(
        layers, layer, role="fault trace", z={"source": "constant", "value": 3}
    )
    assert found.value.tolist() == [3, 3, 3]


def test_names_of_several_horizons_come_from_their_field(layers):
    """A point without a name has the name the source declares."""
    layer = memory(
        "PointZ",
        [("POINT Z(0 0 1)", "Marl"), ("POINT Z(1 1 1)", None), ("POINT Z(2 2 2)", "")],
        ["bed:string"],
    )
    found = read(layers, layer, name_field="bed")
    assert found.columns["name"].tolist() == ["Marl", "Ash bed", "Ash bed"]


def test_dips_and_dip_azimuths_are_read(layers, heard):
    """Azimuths may be compass points; what is neither is unknown and told."""
    layer = memory(
        "PointZ",
        [
            ("POINT Z(0 0 1)", 60.0, "SE"),
            ("POINT Z(1 1 1)", None, "95.5"),
            ("POINT Z(2 2 2)", 30.0, "seawards"),
        ],
        ["dip:double", "to:string"],
    )
    found = read(
        layers, layer, heard, role="fault", dip_field="dip", dip_azimuth_field="to"
    )
    dip, azimuth = found.columns["dip"], found.columns["dip_azimuth"]
    assert dip[[0, 2]].tolist() == [60, 30]
    assert np.isnan(dip[1])
    assert azimuth[:2].tolist() == [135, 95.5]
    assert np.isnan(azimuth[2])
    assert "1 values of the dip azimuth field are not numbers" in heard.textLog()
    assert "'beds'" in heard.textLog()


def test_what_was_read_does_not_depend_on_block_sizes(layers, monkeypatch):
    """Reading a few features at a time gives the same arrays."""
    rows = [(f"MULTIPOINTZ({i} {i} {-i}, {i} 0 1)",) for i in range(1, 30)]
    layer = memory("MultiPointZ", [*rows, (None,)])
    whole = read(layers, layer)
    monkeypatch.setattr(layers.reading, "_FEATURES", 3)
    monkeypatch.setattr(layers.reading, "_PARSED", 7)
    parts = read(layers, layer)
    for name in ("xy", "value", "offsets", "fid"):
        assert np.array_equal(getattr(whole, name), getattr(parts, name))
    assert whole.refused == parts.refused == {"no geometry": 1}


# ---- where -------------------------------------------------------------------------


def test_another_crs_is_transformed_as_qgis_transforms_single_points(layers):
    """Layers in degrees come out in the study's CRS."""
    from qgis.core import QgsCoordinateTransform, QgsPointXY

    places = [(14.2, 47.1), (15.9, 48.3)]
    layer = memory(
        "PointZ", [(f"POINT Z({x} {y} -7)",) for x, y in places], crs="EPSG:4326"
    )
    found = read(layers, layer)
    way = QgsCoordinateTransform(crs_of("EPSG:4326"), crs_of(), no_shifts())
    expected = [way.transform(QgsPointXY(*p)) for p in places]
    assert found.xy == pytest.approx(np.array([[p.x(), p.y()] for p in expected]))
    assert found.value.tolist() == [-7, -7]


def test_a_layer_without_crs_is_taken_as_the_study_and_told(layers, heard):
    """Coordinates stay as they are and the warning names the layer."""
    layer = memory("PointZ", [("POINT Z(500000 5200000 1)",)], crs="", name="tops")
    found = read(layers, layer, heard)
    assert found.xy.tolist() == [[500000, 5200000]]
    assert "Layer 'tops' has no CRS" in heard.textLog()
    assert UTM in heard.textLog()


def test_features_that_cannot_be_reprojected_are_counted(layers):
    """A point off the world is refused with a count, the others stay."""
    layer = memory(
        "PointZ",
        [("POINT Z(15 47 1)",), ("POINT Z(1e30 1e30 1)",)],
        crs="EPSG:4326",
    )
    found = read(layers, layer)
    assert found.refused == {"cannot be reprojected": 1}
    assert found.fid.tolist() == [1]


def test_coordinates_that_are_no_numbers_are_counted(layers):
    """A line into infinity is refused whole, the others stay."""
    from qgis.core import QgsFeature, QgsGeometry, QgsLineString, QgsPoint

    layer = memory("LineStringZ", [("LINESTRINGZ(0 0 1, 1 1 1)",)])
    line = QgsLineString([QgsPoint(0, 0, 0), QgsPoint(float("inf"), 1, 0)])
    feature = QgsFeature()
    feature.setGeometry(QgsGeometry(line))
    assert layer.dataProvider().addFeatures([feature])[0]
    found = read(layers, layer)
    assert found.refused == {"coordinates that are no numbers": 1}
    assert found.fid.tolist() == [1]


def test_reading_near_boxes_gives_the_same_features_once(layers):
    """Few sections read only what lies near; a feature in two boxes comes once."""
    rows = [(f"LINESTRINGZ({x} 0 -1, {x + 15} 10 -2)",) for x in range(0, 200, 10)]
    layer = memory("LineStringZ", rows)
    whole = read(layers, layer)
    near = read(layers, layer, near=[(52, 0, 61, 10), (58, 0, 70, 10)])
    assert 0 < len(near.fid) < len(whole.fid)
    assert near.fid.tolist() == sorted(set(near.fid.tolist()))
    at = np.flatnonzero(np.isin(whole.fid, near.fid))
    assert at.tolist() == (near.fid - 1).tolist()
    assert near.xy.tolist() == whole.xy.reshape(-1, 2, 2)[at].reshape(-1, 2).tolist()


def test_a_processing_source_is_read_like_its_layer(layers):
    """What an algorithm is given, a selection for example, is read the same way."""
    from qgis.core import (
        QgsProcessingContext,
        QgsProcessingFeatureSourceDefinition,
        QgsProcessingParameterFeatureSource,
        QgsProcessingParameters,
        QgsProject,
    )

    layer = memory("PointZ", [(f"POINT Z({i} 0 -{i})",) for i in range(5)])
    layer.selectByIds([2, 4])
    project = QgsProject()
    project.addMapLayer(layer)
    context = QgsProcessingContext()
    context.setProject(project)
    source = QgsProcessingParameters.parameterAsSource(
        QgsProcessingParameterFeatureSource("IN"),
        {"IN": QgsProcessingFeatureSourceDefinition(layer.id(), True)},
        context,
    )
    assert read(layers, source).fid.tolist() == [2, 4]


def test_cancelling_ends_the_reading(layers, heard):
    """The user's cancel is heeded while a layer is read."""
    heard.cancel()
    with pytest.raises(ValueError, match="cancelled") as caught:
        read(layers, memory("PointZ", [("POINT Z(0 0 0)",)]), heard)
    assert caught.value.code == "cancelled"


# ---- refusals ----------------------------------------------------------------------


def refused(layers, code, layer, **declaration):
    with pytest.raises(ValueError, match="source 'h', layer '") as caught:
        read(layers, layer, **declaration)
    assert caught.value.code == code
    return str(caught.value)


def test_a_missing_field_is_named_with_those_there_are(layers):
    """The message names layer and field and lists the layer's own fields."""
    layer = memory("Point", [], ["depth_m:double", "name:string"], name="tops")
    words = refused(layers, "no-field", layer, z=FIELD)
    assert all(w in words for w in ("'tops'", "'z'", "depth_m, name"))
    for use in ("name_field", "dip_field", "dip_azimuth_field"):
        assert "'bed'" in refused(
            layers, "no-field", memory("PointZ", []), role="fault", **{use: "bed"}
        )


def test_a_wrong_geometry_type_is_refused_naming_both(layers):
    """Polygons are no fault trace, and a table is nothing that lies anywhere."""
    words = refused(
        layers,
        "wrong-geometry",
        memory("PolygonZ", [], name="basins"),
        role="fault trace",
    )
    assert all(w in words for w in ("fault trace", "polygon", "'basins'", "line"))
    words = refused(layers, "wrong-geometry", memory("None", [], ["z:double"]))
    assert "plain table" in words


def test_declared_z_that_is_not_there_is_refused(layers):
    """Lines without Z need a field, a raster or a constant."""
    assert "no Z" in refused(layers, "no-z", memory("LineString", []))


# ---- opening -----------------------------------------------------------------------


@pytest.fixture(scope="module")
def folder(qgis_app, tmp_path_factory):
    """Folder with a GeoPackage of two layers, a raster and a text file."""
    from osgeo import gdal
    from qgis.core import QgsVectorFileWriter

    home = tmp_path_factory.mktemp("study")
    (home / "data").mkdir()
    for number, name in enumerate(("beds", "traces")):
        options = QgsVectorFileWriter.SaveVectorOptions()
        options.layerName = name
        options.actionOnExistingFile = (
            QgsVectorFileWriter.ActionOnExistingFile.CreateOrOverwriteLayer
            if number
            else QgsVectorFileWriter.ActionOnExistingFile.CreateOrOverwriteFile
        )
        rows = [("POINT Z(0 0 1)", "a|b"), ("POINT Z(1 1 2)", "c")]
        layer = memory("PointZ", rows, ["bed:string"])
        path = str(home / "data" / "map.gpkg")
        done = QgsVectorFileWriter.writeAsVectorFormatV3(
            layer, path, no_shifts(), options
        )
        assert done[0] == 0, done
    raster = gdal.GetDriverByName("GTiff").Create(str(home / "g.tif"), 3, 3, 1)
    raster.SetGeoTransform((0, 10, 0, 0, 0, -10))
    del raster
    (home / "notes.txt").write_text("nothing to see", encoding="utf-8")
    return home


def test_sources_are_found_from_the_study_file(layers, folder):
    """A relative source is looked for from the study's folder; one layer by name."""
    layer = layers.open_layer("data/map.gpkg|layername=beds", folder, "top ash")
    assert layer.isValid()
    assert layer.name() == "top ash"
    assert layer.featureCount() == 2
    absolute = folder / "data" / "map.gpkg"
    assert layers.open_layer(f"{absolute}|layername=traces", None).name() == "traces"


def test_a_filter_in_the_source_holds(layers, folder):
    """A subset may hold bars and equal signs."""
    uri = "data/map.gpkg|layername=beds|subset=\"bed\" = 'a|b'"
    assert layers.open_layer(uri, folder).featureCount() == 1


def test_a_filter_that_is_not_understood_leaves_nothing_to_read(layers, folder):
    """QGIS takes any filter; the core then refuses the empty source by name."""
    layer = layers.open_layer("data/map.gpkg|layername=beds|subset=depth = 3", folder)
    assert len(read(layers, layer).fid) == 0


def test_a_raster_is_opened_as_one(layers, folder):
    """A file that holds a raster gives a raster layer."""
    from qgis.core import QgsRasterLayer

    assert isinstance(layers.open_layer("g.tif", folder), QgsRasterLayer)


@pytest.mark.parametrize(
    ("uri", "words"),
    [
        ("", "no layer is named"),
        ("data/nothing.gpkg", "there is no file"),
        ("data/map.gpkg", "several layers: beds, traces"),
        ("data/map.gpkg|layername=faults", "no layer 'faults'. It has: beds, traces"),
        ("g.tif|subset=a = 1", "filter"),
        ("notes.txt", "notes.txt"),
        ("memory:nonsense", "cannot be opened"),
    ],
)
def test_layers_that_cannot_be_opened_are_refused_by_name(layers, folder, uri, words):
    """The message names the source and says what there is instead."""
    with pytest.raises(ValueError, match="source 'tops'") as caught:
        layers.open_layer(uri, folder, "tops")
    assert caught.value.code == "no-layer"
    assert words in str(caught.value)


def test_a_database_that_does_not_answer_is_refused_without_its_password(layers):
    """The table is named in the message, what opens the door to it is not."""
    uri = (
        "postgres://dbname='maps' host=127.0.0.1 port=1 user='ann' password='s3cret' "
        'table="geo"."beds" (geom)'
    )
    with pytest.raises(ValueError, match="cannot be opened") as caught:
        layers.open_layer(uri, None, "tops")
    assert caught.value.code == "no-layer"
    assert '"geo"."beds"' in str(caught.value)
    assert "s3cret" not in str(caught.value)


def test_reading_leaves_the_file_as_it_is(layers, folder):
    """A source file is byte for byte the same after it was read."""
    path = folder / "data" / "map.gpkg"
    before = hashlib.sha256(path.read_bytes()).hexdigest()
    layer = layers.open_layer("data/map.gpkg|layername=beds", folder)
    assert len(read(layers, layer).fid) == 2
    del layer
    assert hashlib.sha256(path.read_bytes()).hexdigest() == before
    assert [p.name for p in path.parent.iterdir()] == ["map.gpkg"]


def test_a_declared_uri_is_opened(layers, folder):
    """Without a layer at hand the declaration's own source is read."""
    found = layers.read_source(
        declared(uri="data/map.gpkg|layername=beds"), crs_of(), folder, no_shifts()
    )
    assert found.value.tolist() == [1, 2]


# ---- study CRS ---------------------------------------------------------------------


@pytest.mark.parametrize("crs", ["EPSG:4326", "EPSG:4937", "EPSG:4978"])
def test_degrees_are_no_study_crs(layers, crs):
    """Geographic and geocentric systems are refused with what to do instead."""
    with pytest.raises(ValueError, match="projected CRS") as caught:
        layers.study_crs(crs)
    assert caught.value.code == "study-crs"


@pytest.mark.parametrize(
    "crs", ["EPSG:3857", "EPSG:900913", "ESRI:102100", "EPSG:3785", "EPSG:3395"]
)
def test_web_mercator_is_no_study_crs_under_any_name(layers, crs):
    """Its lengths are wrong by the secant of the latitude."""
    with pytest.raises(ValueError, match="Mercator") as caught:
        layers.study_crs(crs)
    assert caught.value.code == "study-crs"


@pytest.mark.parametrize("crs", ["", None, "EPSG:999999", "somewhere", "EPSG:5773"])
def test_what_is_no_map_projection_is_no_study_crs(layers, crs):
    """Unknown names and vertical systems are refused."""
    with pytest.raises(ValueError, match="study CRS") as caught:
        layers.study_crs(crs)
    assert caught.value.code == "study-crs"


def test_the_utm_zone_of_a_small_area_is_suggested(layers):
    """EPSG:4149 is used in Switzerland, in UTM zone 32 (EPSG registry)."""
    with pytest.raises(ValueError, match="EPSG:32632"):
        layers.study_crs("EPSG:4149")


def test_a_local_mercator_is_allowed(layers):
    """Makassar / NEIEZ (EPSG:3002) and Mercator 41, which crosses the date line."""
    assert layers.study_crs("EPSG:3002").isValid()
    assert layers.study_crs("EPSG:3994").isValid()


@pytest.mark.parametrize(
    ("crs", "unit"),
    [
        ("EPSG:32633", "m"),
        ("EPSG:2225", "us-ft"),  # California zone 1, US survey foot (EPSG registry)
        ("EPSG:2222", "ft"),  # Arizona East, international foot (EPSG registry)
        ("EPSG:9518+5773", None),
        ("EPSG:7405", "m"),  # OSGB36 with height: projected part in metres
    ],
)
def test_the_study_counts_in_the_unit_of_its_crs(layers, crs, unit):
    """Metre, international and US survey foot; compound systems by their plane part."""
    if unit is None:
        with pytest.raises(ValueError, match="study CRS"):
            layers.study_crs(crs)
    else:
        assert layers.length_unit_of(layers.study_crs(crs)) == unit


def test_another_unit_is_refused(layers):
    """A projection that counts in kilometres suits no study."""
    crs = crs_of("PROJ:+proj=utm +zone=33 +ellps=WGS84 +units=km")
    with pytest.raises(ValueError, match="metres, international feet") as caught:
        layers.study_crs(crs)
    assert caught.value.code == "study-crs"


def test_versions_name_every_part(layers):
    """What goes into the record of a run."""
    named = layers.versions()
    assert {"QGIS", "Qt", "GDAL", "GEOS", "PROJ", "numpy", "Python"} <= set(named)
    assert all(named.values())


# ---- section lines -----------------------------------------------------------------


def lines(layers, layer, field="id", feedback=None):
    return layers.read_section_lines(layer, field, crs_of(), no_shifts(), feedback)


def test_section_lines_are_named_by_their_field(layers):
    """Text and number fields both name; without a field the feature number does."""
    layer = memory(
        "LineString",
        [("LINESTRING(0 0, 9 0)", "A", 7), ("LINESTRING(0 5, 4 5, 9 6)", " B ", 8)],
        ["id:string", "n:integer"],
    )
    found = lines(layers, layer)
    assert [line.section_id for line in found] == ["A", "B"]
    assert found[1].vertices.tolist() == [[0, 5], [4, 5], [9, 6]]
    assert [line.problem for line in found] == ["", ""]
    assert [line.section_id for line in lines(layers, layer, "n")] == ["7", "8"]
    assert [line.section_id for line in lines(layers, layer, "")] == ["1", "2"]


def test_section_lines_that_cannot_be_used_say_why(layers):
    """No geometry, several parts, no name: reported, and the others go on."""
    layer = memory(
        "MultiLineString",
        [
            (None, "A"),
            ("MULTILINESTRING((0 0, 1 0), (5 0, 6 0))", "B"),
            ("MULTILINESTRING((0 0, 1 0))", None),
            ("MULTILINESTRING((0 0, 1 0))", "D"),
        ],
        ["id:string"],
    )
    found = {line.section_id: line.problem for line in lines(layers, layer)}
    assert found == {
        "A": "the feature has no geometry.",
        "B": "the line has 2 parts.",
        "feature 3": "the field 'id' is empty.",
        "D": "",
    }


def test_points_are_no_sections(layers):
    """The message names what the layer holds."""
    with pytest.raises(ValueError, match="Point") as caught:
        lines(layers, memory("Point", [], ["id:string"]))
    assert caught.value.code == "wrong-geometry"


def test_section_lines_that_cannot_be_reprojected_say_so(layers):
    """Such a line is reported like every other that cannot be used."""
    layer = memory(
        "LineString",
        [
            ("LINESTRING(15 47, 16 47)", "A"),
            ("LINESTRING(0 1e30, 1 1e30)", "B"),
            ("LINESTRING(1e30 1e30, 0 0)", "C"),
        ],
        ["id:string"],
        crs="EPSG:4326",
    )
    found = lines(layers, layer)
    assert [line.section_id for line in found] == ["A", "B", "C"]
    assert found[0].problem == ""
    assert "study's CRS" in found[1].problem
    assert "study's CRS" in found[2].problem


# ---- real data ---------------------------------------------------------------------


def test_real_fault_polygons_and_points_are_read(layers, open_data, heard):
    """Counts of the open field's layers as their own description gives them."""
    base = pathlib.Path(open_data)
    depth = {
        "key": "h",
        "role": "horizon",
        "name": "Top",
        "unit": "m",
        "sign": "depth",
        "datum": "mean sea level",
    }
    from heaveline.geomcore.sources import SourceDeclaration, ZDeclaration

    points = SourceDeclaration(
        **depth,
        uri="reek/reek_faults.gpkg|layername=horizon_points",
        z=ZDeclaration("field", "z_tvdss_m"),
        name_field="horizon",
    )
    found = layers.read_source(points, crs_of(), base, no_shifts(), heard)
    assert len(set(found.columns["name"])) > 1
    assert np.isfinite(found.value).all()
    polygons = SourceDeclaration(
        **{**depth, "role": "cut-off"},
        uri="reek/reek_faults.gpkg|layername=fault_polygons",
    )
    found = layers.read_source(polygons, crs_of(), base, no_shifts(), heard)
    assert found.geometry == "polygon"
    assert len(found.fid) == 7  # POLY_ID 0 to 6, stated in the data's description
    assert "has no CRS" in heard.textLog()
