"""Time the reading and writing of layers against QGIS's own ways, in turn.

A script: ``reading_rounds.py ROW ROUNDS SIZE`` prints one JSON object with the seconds
of each round. It stands here because it loads the core as `heaveline.geomcore`, and
runs in a process of its own for the benchmarks (tests/benchmarks/test_reading.py).
Rows and sizes are those of the table of performance targets. Each row first checks
that both ways give the same answer.
"""

import json
import struct
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

import conftest  # loads the checkout as the package `heaveline`
import numpy as np

sys.path.insert(0, str(Path(conftest.__file__).resolve().parents[1]))

from benchmarks.ratio import timed
from osgeo import gdal, ogr, osr

UTM = "EPSG:32633"
ORIGIN = np.array([400000.0, 5200000.0])
AZIMUTH = 25.0
CORRIDOR = 250.0
LENGTH = 40000.0


@dataclass(frozen=True)
class Size:
    """How much of everything: as in the table, or little, as a check."""

    lines: int
    vertices: int
    points: int
    sections: int
    pixels: int
    samples: int


SIZES = {
    "full": Size(20000, 50, 200_000, 200, 5000, 2000),
    "small": Size(300, 20, 2000, 8, 300, 50),
}


def way(azimuth):
    a = np.radians(azimuth)
    return np.array([np.sin(a), np.cos(a)])


def on_map(x, along):
    """Map place of distances along the sections and along strike."""
    x, along = np.broadcast_arrays(np.asarray(x, float), along)
    return ORIGIN + x[..., None] * way(AZIMUTH) + along[..., None] * way(AZIMUTH + 90)


class Ground:
    """The layers of one run, made with fixed seeds in a temporary folder."""

    def __init__(self, home, size):
        from heaveline.geomcore.section import SectionFrame

        self.home, self.size = Path(home), size
        self.strike = 2 * CORRIDOR * size.sections
        stations = CORRIDOR * (1 + 2 * np.arange(size.sections))
        self.ends = on_map(np.array([[0.0, LENGTH]]), stations[:, None])
        self.frames = [
            SectionFrame(f"S{i}", v, AZIMUTH) for i, v in enumerate(self.ends)
        ]
        self.rng = np.random.default_rng(20)

    def contours(self):
        """Contours that wander along strike, elevation and name as fields."""
        n, m = self.size.lines, self.size.vertices
        x = self.rng.uniform(500, LENGTH - 500, (n, 1))
        x = x + np.cumsum(self.rng.normal(0, 8, (n, m)), axis=1)
        s = self.rng.uniform(-2000, self.strike, (n, 1)) + 60.0 * np.arange(m)
        z = np.full((n, m, 1), -500.0) - np.round(x[:, :1, None] / 50.0)
        self._save("contours", np.concatenate([on_map(x, s), z], axis=2), z[:, 0, 0])

    def points(self):
        """Points everywhere between the first and the last section's corridor."""
        n = self.size.points
        x = self.rng.uniform(500, LENGTH - 500, n)
        s = self.rng.uniform(0.0, self.strike, n)
        z = -500.0 - 0.01 * x
        xyz = np.column_stack([on_map(x, s), z])
        self._save("points", xyz[:, None], z)

    def _save(self, name, parts, z):
        path = self.home / f"{name}.gpkg"
        dataset = ogr.GetDriverByName("GPKG").CreateDataSource(str(path))
        reference = osr.SpatialReference()
        reference.SetFromUserInput(UTM)
        single = parts.shape[1] == 1
        kind = ogr.wkbPoint25D if single else ogr.wkbLineString25D
        layer = dataset.CreateLayer(name, reference, kind)
        for field, what in (("bed", ogr.OFTString), ("z", ogr.OFTReal)):
            layer.CreateField(ogr.FieldDefn(field, what))
        layer.StartTransaction()
        head = struct.pack("<BI", 1, 1001 if single else 1002)
        head += b"" if single else struct.pack("<I", parts.shape[1])
        for part, value in zip(np.ascontiguousarray(parts, "<f8"), z.tolist()):
            feature = ogr.Feature(layer.GetLayerDefn())
            feature["bed"], feature["z"] = "Top", value
            geometry = ogr.CreateGeometryFromWkb(head + part.tobytes())
            feature.SetGeometryDirectly(geometry)
            layer.CreateFeature(feature)
        layer.CommitTransaction()

    def raster(self, creation):
        """Random hills on a plane, with a hole."""
        n = self.size.pixels
        row, column = np.mgrid[0:n, 0:n].astype(np.float32)
        values = -800 - 0.2 * column + 40 * np.sin(column / 90) * np.cos(row / 120)
        values += self.rng.normal(0, 0.3, (n, n))
        values[n // 3 : n // 3 + n // 50, n // 2 : n // 2 + n // 50] = -9999
        dataset = gdal.GetDriverByName("GTiff").Create(
            str(self.home / "grid.tif"), n, n, 1, gdal.GDT_Float32, creation
        )
        self.pixel = 20.0
        top = ORIGIN[1] + n * self.pixel
        dataset.SetGeoTransform((ORIGIN[0], self.pixel, 0, top, 0, -self.pixel))
        reference = osr.SpatialReference()
        reference.SetFromUserInput(UTM)
        dataset.SetProjection(reference.ExportToWkt())
        dataset.GetRasterBand(1).SetNoDataValue(-9999)
        dataset.GetRasterBand(1).WriteArray(values.astype(np.float32))

    def sampled_sections(self):
        """Oblique lines of points over the raster, all within it."""
        n, half = self.size.pixels * self.pixel, 0.27 * self.size.pixels * self.pixel
        middle = ORIGIN + n / 2 + self.rng.uniform(-0.15, 0.15, (200, 2)) * n
        t = np.linspace(-1, 1, self.size.samples)[:, None]
        return [m + t * np.array([half, 0.5 * half]) for m in middle]

    def sections_layer(self):
        from qgis.core import QgsFeature, QgsGeometry, QgsPointXY, QgsVectorLayer

        layer = QgsVectorLayer(f"LineString?crs={UTM}", "sections", "memory")
        made = []
        for ends in self.ends.tolist():
            feature = QgsFeature()
            vertices = [QgsPointXY(*p) for p in ends]
            feature.setGeometry(QgsGeometry.fromPolylineXY(vertices))
            made.append(feature)
        layer.dataProvider().addFeatures(made)
        layer.updateExtents()
        return layer

    def opened(self, name):
        from qgis.core import QgsVectorLayer

        path = self.home / f"{name}.gpkg"
        return QgsVectorLayer(f"{path}|layername={name}", name, "ogr")

    def place(self):
        from qgis.core import (
            QgsCoordinateReferenceSystem,
            QgsCoordinateTransformContext,
        )

        return QgsCoordinateReferenceSystem(UTM), QgsCoordinateTransformContext()

    def read(self, name, near=None, **declared):
        from heaveline.geomcore.sources import SourceDeclaration, ZDeclaration
        from heaveline.plugin import layers

        source = SourceDeclaration(
            "h",
            "horizon",
            "Top",
            "m",
            "elevation",
            "mean sea level",
            z=ZDeclaration("field", "z"),
            corridor=CORRIDOR,
            **declared,
        )
        crs, context = self.place()
        layer = self.opened(name)
        data = layers.read_source(source, crs, None, context, None, layer, near)
        return source, data

    def pull(self, name, frames, near=None):
        """Read a layer and bring it to some sections."""
        from heaveline.geomcore.picks import PullOptions, prepare_source, pull_source

        prepared = prepare_source(*self.read(name, near), "m")
        options = PullOptions(CORRIDOR, 0.0)
        return [pull_source(prepared, frame, options) for frame in frames]


def bare_loop(ground, name):
    """Touch every geometry and nothing else."""
    for feature in ground.opened(name).getFeatures():
        feature.geometry().isNull()


def reading(ground, name):
    """Row 7: read a layer with two attributes."""
    getattr(ground, name)()
    _, found = ground.read(name, name_field="bed")
    layer = ground.opened(name)
    assert len(found.fid) == layer.featureCount()
    for i in range(0, len(found.fid), max(len(found.fid) // 50, 1)):
        feature = layer.getFeature(int(found.fid[i]))
        a, b = found.offsets[i], found.offsets[i + 1]
        vertices = [(p.x(), p.y()) for p in feature.geometry().vertices()]
        assert found.xy[a:b].tolist() == [list(v) for v in vertices]
        assert (found.value[a:b] == feature["z"]).all()
        assert found.columns["name"][i] == feature["bed"]
    product = lambda: ground.read(name, name_field="bed")  # noqa: E731
    return product, lambda: bare_loop(ground, name)


def processing_run(name, parameters):
    import processing

    return processing.run(f"native:{name}", {**parameters, "OUTPUT": "memory:"})[
        "OUTPUT"
    ]


def crossings(ground):
    """Row 8: where contours cross the sections, reading included."""
    ground.contours()
    sections = ground.sections_layer()
    product = lambda: ground.pull("contours", ground.frames)  # noqa: E731

    def baseline():
        return processing_run(
            "lineintersections",
            {"INPUT": ground.opened("contours"), "INTERSECT": sections},
        )

    ours = np.vstack(
        [f.to_map(p.x) for f, p in zip(ground.frames, product()) if len(p)]
    )
    theirs = np.array(
        [
            (f.geometry().asPoint().x(), f.geometry().asPoint().y())
            for f in baseline().getFeatures()
        ]
    )
    assert len(ours) == len(theirs) > 0
    ours, theirs = (a[np.lexsort(np.round(a, 3).T)] for a in (ours, theirs))
    assert np.abs(ours - theirs).max() < 0.01
    return product, baseline


def corridors(ground):
    """Row 9: points within 250 m of the sections, reading included."""
    ground.points()
    sections = ground.sections_layer()
    product = lambda: ground.pull("points", ground.frames)  # noqa: E731

    def baseline():
        return processing_run(
            "extractwithindistance",
            {
                "INPUT": ground.opened("points"),
                "REFERENCE": sections,
                "DISTANCE": CORRIDOR,
            },
        )

    ours = np.concatenate([p.source_fid for p in product()])
    theirs = [f["fid"] for f in baseline().getFeatures()]
    # a point half-way between two sections belongs to both, or within rounding to none
    assert len(set(ours) ^ set(theirs)) <= 2
    assert len(theirs) > 0
    return product, baseline


def by_hand(ground, name):
    """Row 10: one section, reading what lies near it, against reading all."""
    from heaveline.plugin.layers import near_section

    getattr(ground, name)()
    frame = ground.frames[len(ground.frames) // 2]
    near = near_section(frame, CORRIDOR if name == "points" else 0.0)
    product = lambda: ground.pull(name, [frame], near)  # noqa: E731
    baseline = lambda: ground.pull(name, [frame])  # noqa: E731
    (ours,), (theirs,) = product(), baseline()
    assert len(theirs) > 0
    for column in ("x", "z", "off_section", "source_fid"):
        assert getattr(ours, column).tolist() == getattr(theirs, column).tolist()
    return product, baseline


def sampling(ground, creation):
    """Rows 11 and 12: bilinear samples of a raster along sections."""
    from heaveline.plugin.layers import read_grid
    from qgis.core import QgsPointXY, QgsRasterLayer

    ground.raster(creation)
    lines = ground.sampled_sections()
    as_lists = [line.tolist() for line in lines]
    path = str(ground.home / "grid.tif")

    def product():
        grid = read_grid(QgsRasterLayer(path, "grid"), *ground.place())
        return [grid.sample(line) for line in lines]

    def baseline():
        layer = QgsRasterLayer(path, "grid")
        provider = layer.dataProvider()
        sample = provider.sample
        return [[sample(QgsPointXY(x, y), 1)[0] for x, y in p] for p in as_lists]

    # the baseline takes the nearest pixel: on the pixels' centres both are the same
    grid = read_grid(QgsRasterLayer(path, "grid"), *ground.place())
    provider_layer = QgsRasterLayer(path, "grid")
    top = ORIGIN[1] + ground.size.pixels * ground.pixel
    at = np.vstack(lines)[:: max(len(lines) * len(lines[0]) // 5000, 1)]
    column = np.floor((at[:, 0] - ORIGIN[0]) / ground.pixel) + 0.5
    row = np.floor((top - at[:, 1]) / ground.pixel) + 0.5
    at = np.column_stack([ORIGIN[0] + column * ground.pixel, top - row * ground.pixel])
    nearest = [
        provider_layer.dataProvider().sample(QgsPointXY(*p), 1)[0] for p in at.tolist()
    ]
    assert np.array_equal(grid.sample(at), nearest, equal_nan=True)
    assert np.isfinite(nearest).any()
    return product, baseline


def writing(ground):
    """Row 15: 50 traces and 10,000 points to one GeoPackage."""
    from heaveline.plugin.fields import Table
    from heaveline.plugin.layers import write_geopackage
    from qgis.core import QgsProject

    scale = ground.size.points / 200_000
    traces = [
        (ground.rng.normal(5e5, 1e3, (200, 3)), {"section_id": f"S{i}", "heave": 1.5})
        for i in range(50)
    ]
    places = ground.rng.normal(5e5, 1e3, (int(10_000 * scale), 3)).tolist()
    values = {"section_id": "S1", "trace_id": "a", "x": 1.0, "z": 3.0, "strip": 3}
    values.update(constrained="known", run_id="r", study="s", fault="f", dip=4.0)
    tables = [
        Table("predicted_fault_traces", traces),
        Table("fault_points", [(p, values) for p in places]),
    ]
    ours, theirs = ground.home / "ours.gpkg", ground.home / "theirs.gpkg"

    def product():
        ours.unlink(missing_ok=True)
        crs, context = ground.place()
        write_geopackage(ours, tables, crs, context, project=QgsProject())

    def baseline():
        theirs.unlink(missing_ok=True)
        for table in tables:
            plain_write(theirs, table, *ground.place())

    product()
    baseline()
    for name in ("predicted_fault_traces", "fault_points"):
        assert contents(ours, name) == contents(theirs, name)
    return product, baseline


def plain_write(path, table, crs, context):
    """Write a table by QGIS's writer, feature by feature, straight into the file."""
    from qgis.core import (
        QgsFeature,
        QgsField,
        QgsFields,
        QgsGeometry,
        QgsPoint,
        QgsVectorFileWriter,
        QgsWkbTypes,
    )
    from qgis.PyQt.QtCore import QMetaType

    types = {"text": "QString", "integer": "LongLong", "real": "Double"}
    fields = QgsFields()
    for own in table.spec.fields:
        fields.append(QgsField(own.name, getattr(QMetaType.Type, types[own.type])))
    options = QgsVectorFileWriter.SaveVectorOptions()
    options.layerName = table.name
    actions = QgsVectorFileWriter.ActionOnExistingFile
    options.actionOnExistingFile = (
        actions.CreateOrOverwriteLayer
        if path.exists()
        else actions.CreateOrOverwriteFile
    )
    kind = QgsWkbTypes.parseType(table.spec.geometry)
    writer = QgsVectorFileWriter.create(str(path), fields, kind, crs, context, options)
    names = table.spec.names
    for place, values in table.rows:
        feature = QgsFeature(fields)
        if table.spec.geometry == "PointZ":
            feature.setGeometry(QgsGeometry(QgsPoint(*place)))
        else:
            vertices = [QgsPoint(*p) for p in place.tolist()]
            feature.setGeometry(QgsGeometry.fromPolyline(vertices))
        feature.setAttributes([values.get(n) for n in names])
        writer.addFeature(feature)
    del writer


def contents(path, name):
    from qgis.core import QgsVectorLayer

    layer = QgsVectorLayer(f"{path}|layername={name}", name, "ogr")
    return [
        (f.geometry().asWkb().data(), [str(v) for v in f.attributes()])
        for f in layer.getFeatures()
    ]


#: Rows of the table: how to make product and baseline, checked to agree.
ROWS = {
    "7 lines": lambda g: reading(g, "contours"),
    "7 points": lambda g: reading(g, "points"),
    "8": crossings,
    "9": corridors,
    "10 lines": lambda g: by_hand(g, "contours"),
    "10 points": lambda g: by_hand(g, "points"),
    "11": lambda g: sampling(g, []),
    "12": lambda g: sampling(g, ["TILED=YES", "COMPRESS=DEFLATE"]),
    "15": writing,
}


def start_qgis():
    """Start QGIS without a screen, with its own algorithms."""
    from qgis.core import QgsApplication

    application = QgsApplication([], False)
    application.initQgis()
    from processing.core.Processing import Processing

    Processing.initialize()
    return application


def main(row, rounds, size):
    """Check one row, time its rounds and print them."""
    application = start_qgis()
    seconds = {"product": [], "baseline": []}
    with tempfile.TemporaryDirectory() as home:
        product, baseline = ROWS[row](Ground(home, SIZES[size]))
        for _ in range(int(rounds)):
            seconds["baseline"].append(timed(baseline, time.process_time, 1))
            seconds["product"].append(timed(product, time.process_time, 1))
    print(json.dumps(seconds))
    application.exitQgis()


if __name__ == "__main__":
    main(*sys.argv[1:])
