"""Raster layers as surfaces: values between pixel centres, holes, frames, readers.

Checks are against planes (bilinear sampling is exact on them), against scipy's linear
interpolation of random pixels, and against the raw pixels GDAL gives.
"""

import numpy as np
import pytest
from osgeo import gdal, osr

pytestmark = pytest.mark.usefixtures("qgis_app")

UTM = "EPSG:32633"
#: Corner (500000, 5200000), 20 m pixels, rotated by 30 degrees clockwise.
TURNED = (
    500000.0,
    20 * np.cos(np.radians(30)),
    -20 * np.sin(np.radians(30)),
    5200000.0,
    -20 * np.sin(np.radians(30)),
    -20 * np.cos(np.radians(30)),
)
UPRIGHT = (500000.0, 20.0, 0.0, 5200000.0, 0.0, -20.0)


def crs_of(text=UTM):
    from qgis.core import QgsCoordinateReferenceSystem

    return QgsCoordinateReferenceSystem(text)


def save(path, values, geotransform=UPRIGHT, crs=UTM, nodata=None, **options):
    """Write a raster by GDAL; options: kind, creation, scale, offset, mask."""
    rows, columns = values.shape
    dataset = gdal.GetDriverByName("GTiff").Create(
        str(path),
        columns,
        rows,
        1,
        options.get("kind", gdal.GDT_Float64),
        options.get("creation", []),
    )
    dataset.SetGeoTransform(geotransform)
    if crs:
        reference = osr.SpatialReference()
        reference.SetFromUserInput(crs)
        dataset.SetProjection(reference.ExportToWkt())
    band = dataset.GetRasterBand(1)
    if nodata is not None:
        band.SetNoDataValue(nodata)
    if "scale" in options:
        band.SetScale(options["scale"])
        band.SetOffset(options["offset"])
    band.WriteArray(values)
    if "mask" in options:
        dataset.CreateMaskBand(gdal.GMF_PER_DATASET)
        band.GetMaskBand().WriteArray(options["mask"])
    del band, dataset
    return path


def layer_of(path):
    from qgis.core import QgsRasterLayer

    layer = QgsRasterLayer(str(path), "top marl")
    assert layer.isValid()
    return layer


def grid_of(path_or_layer, crs=UTM, feedback=None):
    from heaveline.plugin import layers
    from qgis.core import QgsCoordinateTransformContext

    layer = path_or_layer if hasattr(path_or_layer, "crs") else layer_of(path_or_layer)
    return layers.read_grid(
        layer, crs_of(crs), QgsCoordinateTransformContext(), feedback
    )


def centres(geotransform, column, row):
    """Map coordinates of pixel centres, from GDAL's own definition."""
    g = geotransform
    c, r = np.asarray(column) + 0.5, np.asarray(row) + 0.5
    return np.column_stack([g[0] + c * g[1] + r * g[2], g[3] + c * g[4] + r * g[5]])


def plane(xy):
    """Elevation that falls to the south-east."""
    return -800 - 0.3 * (xy[..., 0] - 500000) + 0.2 * (xy[..., 1] - 5200000)


def plane_pixels(geotransform, rows=60, columns=80):
    row, column = np.mgrid[0:rows, 0:columns]
    return plane(centres(geotransform, column.ravel(), row.ravel())).reshape(
        rows, columns
    )


@pytest.mark.parametrize("geotransform", [UPRIGHT, TURNED], ids=["upright", "turned"])
def test_a_plane_is_sampled_exactly(tmp_path, geotransform):
    """Bilinear sampling keeps a plane, on a rotated raster too."""
    path = save(tmp_path / "g.tif", plane_pixels(geotransform), geotransform)
    rng = np.random.default_rng(3)
    xy = centres(geotransform, rng.uniform(0, 79, 500), rng.uniform(0, 59, 500))
    grid = grid_of(path)
    assert grid.sample(xy) == pytest.approx(plane(xy), abs=1e-6)
    assert grid.cell == pytest.approx(20.0)


@pytest.mark.parametrize(
    "creation",
    [[], ["TILED=YES", "BLOCKXSIZE=64", "BLOCKYSIZE=64", "COMPRESS=DEFLATE"]],
)
def test_random_pixels_are_sampled_as_scipy_does(tmp_path, creation):
    """Values between random pixels, across the borders of what is read at once."""
    from scipy.ndimage import map_coordinates

    rng = np.random.default_rng(4)
    pixels = rng.normal(-1000, 100, (300, 420))
    path = save(tmp_path / "g.tif", pixels, creation=creation)
    column, row = rng.uniform(0, 419, 4000), rng.uniform(0, 299, 4000)
    column[:20], row[20:40] = 128.0, 256.0
    found = grid_of(path).sample(centres(UPRIGHT, column, row))
    expected = map_coordinates(pixels, [row, column], order=1, mode="nearest")
    assert found == pytest.approx(expected, abs=1e-5)


def test_all_pixel_centres_give_their_pixels(tmp_path):
    """The outermost centres count, and half a pixel farther out nothing is known."""
    rng = np.random.default_rng(5)
    pixels = rng.normal(0, 1, (7, 9))
    grid = grid_of(save(tmp_path / "g.tif", pixels, TURNED))
    row, column = np.mgrid[0:7, 0:9]
    at = centres(TURNED, column.ravel(), row.ravel())
    assert grid.sample(at) == pytest.approx(pixels.ravel(), abs=1e-6)
    beyond = centres(TURNED, [-0.5, 8.5, 4.0, 4.0], [3.0, 3.0, -0.5, 6.5])
    assert np.isnan(grid.sample(beyond)).all()
    far = np.array([[0.0, 0.0], [np.nan, 0.0], [np.inf, 1.0]])
    assert np.isnan(grid.sample(far)).all()


def test_no_points_give_no_values(tmp_path):
    """A section beside the raster asks for nothing and gets nothing."""
    grid = grid_of(save(tmp_path / "g.tif", np.zeros((4, 4))))
    assert grid.sample(np.empty((0, 2))).shape == (0,)


HOLE = (slice(10, 14), slice(20, 25))


def with_hole(value):
    pixels = plane_pixels(UPRIGHT)
    pixels[HOLE] = value
    return pixels


def check_hole(grid):
    """Points with a corner in the hole are unknown, all others as before."""
    rng = np.random.default_rng(6)
    column, row = rng.uniform(15, 30, 3000), rng.uniform(5, 20, 3000)
    xy = centres(UPRIGHT, column, row)
    found = grid.sample(xy)
    touched = (column > 19) & (column < 25) & (row > 9) & (row < 14)
    assert np.array_equal(np.isnan(found), touched)
    assert found[~touched] == pytest.approx(plane(xy[~touched]), abs=2e-3)


@pytest.mark.parametrize(
    ("kind", "nodata"),
    [
        (gdal.GDT_Float64, -9999.0),
        (gdal.GDT_Float32, -3.4028234663852886e38),
        (gdal.GDT_Float32, 1e30),
        (gdal.GDT_Float32, -999.25),
        (gdal.GDT_Float32, float("nan")),
    ],
)
def test_cells_without_data_leave_a_hole(tmp_path, kind, nodata):
    """A point is unknown where one of its four pixels is, whatever marks it."""
    path = tmp_path / "g.tif"
    check_hole(grid_of(save(path, with_hole(nodata), nodata=nodata, kind=kind)))


def test_nan_is_no_data_without_being_declared(tmp_path):
    """NaN pixels are unknown even where the file declares no value for them."""
    check_hole(grid_of(save(tmp_path / "g.tif", with_hole(np.nan))))


def test_a_mask_leaves_a_hole(tmp_path):
    """A mask band hides pixels that have values."""
    mask = np.full((60, 80), 255, dtype=np.uint8)
    mask[HOLE] = 0
    path = save(tmp_path / "g.tif", plane_pixels(UPRIGHT), mask=mask)
    check_hole(grid_of(path))


def test_no_data_values_set_in_qgis_hold(tmp_path):
    """What the user sets as 'additional no data value' is unknown too."""
    from qgis.core import QgsRasterRange

    layer = layer_of(save(tmp_path / "g.tif", with_hole(-777.0)))
    layer.dataProvider().setUserNoDataValue(1, [QgsRasterRange(-778, -776)])
    grid = grid_of(layer)
    assert np.isnan(grid.sample(centres(UPRIGHT, [22], [12]))).all()
    assert np.isfinite(grid.sample(centres(UPRIGHT, [40], [40]))).all()


def test_no_data_value_of_the_file_can_be_switched_off_in_qgis(tmp_path):
    """A layer that shows its no-data value as a value has it sampled as one."""
    layer = layer_of(save(tmp_path / "g.tif", with_hole(-9999.0), nodata=-9999.0))
    layer.dataProvider().setUseSourceNoDataValue(1, False)
    assert grid_of(layer).sample(centres(UPRIGHT, [22], [12])).tolist() == [-9999]


def test_a_point_on_a_pixel_needs_only_that_pixel(tmp_path):
    """On a pixel's centre the neighbours have no weight; a hole there does no harm."""
    grid = grid_of(save(tmp_path / "g.tif", with_hole(-9999.0), nodata=-9999.0))
    at = centres(UPRIGHT, [25, 19], [12, 12])
    assert grid.sample(at) == pytest.approx(plane(at), abs=1e-6)


def test_scaled_integers_give_their_true_values(tmp_path):
    """Decimetres in whole numbers with scale and offset come out in metres."""
    tenths = np.round(plane_pixels(UPRIGHT) * 10 + 20000).astype(np.int16)
    tenths[HOLE] = -32768
    path = save(
        tmp_path / "g.tif",
        tenths,
        kind=gdal.GDT_Int16,
        nodata=-32768,
        scale=0.1,
        offset=-2000.0,
    )
    grid = grid_of(path)
    at = centres(UPRIGHT, [40, 41], [40, 41])
    assert grid.sample(at) == pytest.approx(plane(at), abs=0.051)
    assert np.isnan(grid.sample(centres(UPRIGHT, [22], [12]))).all()


def test_another_crs_is_sampled_at_the_same_places(tmp_path):
    """A raster of the neighbouring zone gives the elevations of its own pixels."""
    from pyproj import Transformer

    geotransform = (20000.0, 30.0, 0.0, 5300000.0, 0.0, -30.0)
    rng = np.random.default_rng(8)
    pixels = rng.normal(-500, 10, (40, 50))
    path = save(tmp_path / "g.tif", pixels, geotransform, crs="EPSG:32634")
    grid = grid_of(path)
    own = centres(geotransform, np.arange(5, 30), np.arange(5, 30))
    way = Transformer.from_crs("EPSG:32634", UTM, always_xy=True)
    xy = np.column_stack(way.transform(*own.T))
    assert grid.sample(xy) == pytest.approx(pixels[np.arange(5, 30), np.arange(5, 30)])
    assert grid.sample(xy[:1]) == pytest.approx(pixels[5, 5])
    # so far from its meridian the raster's own zone is stretched by about 0.25 %
    middle = centres(geotransform, [25, 26], [20, 20])
    x, y = way.transform(*middle.T)
    assert grid.cell == pytest.approx(np.hypot(x[1] - x[0], y[1] - y[0]), rel=1e-4)


def test_a_raster_without_crs_is_taken_as_the_study_and_told(tmp_path):
    """The warning names the raster."""
    from qgis.core import QgsProcessingFeedback

    heard = QgsProcessingFeedback(False)
    layer = layer_of(save(tmp_path / "g.tif", plane_pixels(UPRIGHT), crs=None))
    layer.setCrs(crs_of(""))
    at = centres(UPRIGHT, [4], [4])
    assert grid_of(layer, feedback=heard).sample(at) == pytest.approx(plane(at))
    assert "Raster 'top marl' has no CRS" in heard.textLog()


def through_provider(path):
    """Make a layer that says it comes from another provider than GDAL."""
    from qgis.core import QgsRasterLayer

    class Coverage(QgsRasterLayer):
        def providerType(self):
            return "wcs"

    return Coverage(str(path), "top marl")


@pytest.mark.parametrize("nodata", [-9999.0, float("nan")])
def test_other_providers_give_what_gdal_gives(tmp_path, nodata):
    """Blocks of a data provider and GDAL's windows hold the same values."""
    pixels = np.random.default_rng(9).normal(-900, 50, (200, 310))
    pixels[HOLE] = nodata
    path = save(
        tmp_path / "g.tif",
        pixels,
        nodata=nodata,
        kind=gdal.GDT_Float32,
        scale=2.0,
        offset=3.0,
    )
    rng = np.random.default_rng(10)
    at = centres(UPRIGHT, rng.uniform(-2, 312, 3000), rng.uniform(-2, 202, 3000))
    at = np.vstack([at, centres(UPRIGHT, [22.5], [12.5])])
    one, other = grid_of(path), grid_of(through_provider(path))
    assert np.isnan(one.sample(at)).sum() > 1
    assert other.sample(at) == pytest.approx(one.sample(at), nan_ok=True, abs=1e-3)
    assert other.cell == pytest.approx(one.cell)


def test_values_do_not_depend_on_how_many_pixels_are_kept(tmp_path, monkeypatch):
    """Reading afresh when too many tiles are kept changes no value."""
    from heaveline.plugin.layers import grids

    pixels = np.random.default_rng(11).normal(0, 1, (400, 400))
    path = save(tmp_path / "g.tif", pixels)
    rng = np.random.default_rng(12)
    at = centres(UPRIGHT, rng.uniform(0, 399, 900), rng.uniform(0, 399, 900))
    whole = grid_of(path).sample(at)
    monkeypatch.setattr(grids, "_TILE", 16)
    monkeypatch.setattr(grids, "_KEEP", 5)
    few = grid_of(path)
    assert np.array_equal(few.sample(at), whole)
    assert np.array_equal(few.sample(at[::-1]), whole[::-1])


def test_sections_of_sampled_points_do_not_read_the_whole_raster(tmp_path):
    """A section over a large raster holds only what lies along it."""
    from heaveline.plugin.layers import grids

    path = save(
        tmp_path / "g.tif",
        np.zeros((2000, 2000), dtype=np.float32),
        kind=gdal.GDT_Float32,
    )
    raster = grids._open_raster(layer_of(path))
    tiles = grids._Tiles(raster)
    t = np.linspace(10, 1990, 500)
    grids._sample(tiles, centres(UPRIGHT, t, t))
    assert tiles.store.nbytes < 0.2 * 4 * 2000 * 2000


@pytest.mark.parametrize("shape", [(1, 5), (5, 1)])
def test_a_single_row_of_pixels_is_refused(tmp_path, shape):
    """Nothing can be interpolated there; the message names the raster."""
    path = save(tmp_path / "g.tif", np.zeros(shape))
    with pytest.raises(ValueError, match="'top marl'") as caught:
        grid_of(path)
    assert caught.value.code == "bad-raster"


def test_complex_numbers_are_refused(tmp_path):
    """A radar image is no surface."""
    path = tmp_path / "g.tif"
    gdal.GetDriverByName("GTiff").Create(str(path), 4, 4, 1, gdal.GDT_CFloat32)
    with pytest.raises(ValueError, match="complex") as caught:
        grid_of(path)
    assert caught.value.code == "bad-raster"


def test_damaged_pixels_are_refused(tmp_path, monkeypatch):
    """A file that ends too early gives an error that names the raster, no values."""
    path = save(
        tmp_path / "g.tif",
        np.random.default_rng(1).normal(0, 1, (300, 300)),
        creation=["COMPRESS=DEFLATE", "TILED=YES"],
    )
    layer = layer_of(path)
    with path.open("rb+") as stream:
        stream.truncate(path.stat().st_size // 2)
    grid = grid_of(layer)
    at = centres(UPRIGHT, np.linspace(1, 298, 500), np.linspace(1, 298, 500))
    for error in (None, RuntimeError("as GDAL raises it where it is told to")):
        if error is not None:
            monkeypatch.setattr(gdal.Band, "ReadAsArray", raiser(error))
        with pytest.raises(ValueError, match="'top marl'") as caught:
            grid.sample(at)
        assert caught.value.code == "bad-raster"


def raiser(error):
    """Give a function that raises an error whatever it is called with."""

    def fail(*_, **__):
        raise error

    return fail


def test_a_raster_source_is_a_surface(tmp_path):
    """A declared horizon grid is read as one; a fault trace cannot be a raster."""
    from heaveline.geomcore.sources import Grid, SourceDeclaration
    from heaveline.plugin import layers
    from qgis.core import QgsCoordinateTransformContext

    path = save(tmp_path / "g.tif", plane_pixels(UPRIGHT))
    rest = {
        "key": "h",
        "name": "Top marl",
        "unit": "m",
        "sign": "elevation",
        "datum": "mean sea level",
        "uri": path.name,
    }
    context = QgsCoordinateTransformContext()
    source = SourceDeclaration(role="horizon", **rest)
    found = layers.read_source(source, crs_of(), tmp_path, context)
    assert isinstance(found, Grid)
    trace = SourceDeclaration(role="fault trace", **rest)
    with pytest.raises(ValueError, match="fault trace cannot be a raster") as caught:
        layers.read_source(trace, crs_of(), tmp_path, context)
    assert caught.value.code == "wrong-geometry"


def test_elevations_of_a_trace_come_from_a_raster(tmp_path):
    """The trace itself has no value; the surface has it, and must be a raster."""
    from heaveline.geomcore.sources import SourceDeclaration, ZDeclaration
    from heaveline.plugin import layers
    from qgis.core import QgsCoordinateTransformContext, QgsVectorLayer

    save(tmp_path / "g.tif", plane_pixels(UPRIGHT))
    trace = QgsVectorLayer(f"LineString?crs={UTM}", "trace", "memory")
    common = ("f", "fault trace", "F", "m", "elevation", "mean sea level")
    context = QgsCoordinateTransformContext()
    source = SourceDeclaration(*common, z=ZDeclaration("raster", uri="g.tif"))
    found = layers.read_source(source, crs_of(), tmp_path, context, None, trace)
    at = centres(UPRIGHT, [3.3], [4.4])
    assert found.surface.sample(at) == pytest.approx(plane(at))
    (tmp_path / "p.csv").write_text("a,b\n1,2\n", encoding="utf-8")
    source = SourceDeclaration(*common, z=ZDeclaration("raster", uri="p.csv"))
    with pytest.raises(ValueError, match="raster") as caught:
        layers.read_source(source, crs_of(), tmp_path, context, None, trace)
    assert caught.value.code == "wrong-geometry"


def test_nodes_of_a_real_rotated_grid_are_its_values(open_data):
    """The open field's surfaces are rotated by 140 degrees; nodes give raw pixels."""
    path = open_data / "reek" / "01_topreek_rota.tif"
    dataset = gdal.Open(str(path))
    geotransform, raw = dataset.GetGeoTransform(), dataset.ReadAsArray()
    assert geotransform[2] != 0
    assert geotransform[4] != 0
    rng = np.random.default_rng(2)
    row, column = rng.integers(0, raw.shape[0], 400), rng.integers(0, raw.shape[1], 400)
    found = grid_of(path).sample(centres(geotransform, column, row))
    known = raw[row, column] != -9999
    assert 0 < known.sum() < 400
    assert found[known] == pytest.approx(raw[row, column][known], abs=1e-3)
    assert np.isnan(found[~known]).all()
