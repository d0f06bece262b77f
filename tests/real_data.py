"""The open data as studies: the table of expected figures, cut-offs, ways to run."""

import csv
import json
import shutil
from dataclasses import dataclass
from pathlib import Path

import numpy as np

#: Plane metres are all that counts for layers whose source states no CRS: any
#: projected CRS in metres does (README of the open data).
ANY_METRES = "EPSG:32620"


@dataclass(frozen=True)
class Figure:
    """One row of the table.

    Parameters
    ----------
    value, unit, tolerance : str
        As they stand in the table.
    """

    value: str
    unit: str
    tolerance: str

    @property
    def number(self):
        """The value as a number."""
        return float(self.value)

    def check(self, got, what):
        """Fail unless a number lies within the table's own tolerance."""
        miss = abs(float(got) - self.number)
        assert miss <= float(self.tolerance), (
            f"{what}: {float(got):.5f} {self.unit}, the table says {self.value}; "
            f"it misses by {miss:.5f}, the tolerance is {self.tolerance}"
        )


#: What is read of the open data; the rest of a folder is not copied.
_READ = (
    "expected_figures.csv",
    "f3_fs4/f3_fs4.gpkg",
    "penobscot_south/penobscot_horB_south.gpkg",
    "penobscot_south/penobscot_horB_south.csv",
    "reek/reek_faults.gpkg",
    "reek/01_topreek_rota.tif",
    "reek/top_upper_reek_faultpoly_with_index.csv",
    "malawi_faults/mafd.gpkg",
)


def copied(data, folder):
    """Copy the open data to a temporary folder, and give that.

    QGIS opens a GeoPackage in write-ahead mode: that alone changes the file and leaves
    others beside it, and data that are not ours stay as they are.
    """
    for name in _READ:
        target = folder / name
        target.parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(data / name, target)
    return folder


def read_figures(folder, dataset):
    """Give the rows of a data set: figures by quantity, by item."""
    figures = {}
    with (folder / "expected_figures.csv").open(newline="", encoding="utf-8") as file:
        for row in csv.DictReader(file):
            if row["dataset"] == dataset:
                figure = Figure(row["value"], row["unit"], row["tolerance"])
                figures.setdefault(row["item"], {})[row["quantity"]] = figure
    return figures


# ---- layers -------------------------------------------------------------------------


def write_layer(path, name, geometries, crs=None):
    """Write a layer into a GeoPackage, without CRS unless one is given.

    Parameters
    ----------
    path : pathlib.Path
        Made if it is not there.
    name : str
    geometries : list of array_like
        A point (x, y, z), or the points (n, 3) of a line.
    crs : osr.SpatialReference, optional
    """
    from osgeo import gdal, ogr

    gdal.UseExceptions()
    driver = ogr.GetDriverByName("GPKG")
    open_or_make = driver.Open if path.exists() else driver.CreateDataSource
    source = open_or_make(str(path), *([1] if path.exists() else []))
    is_line = np.ndim(geometries[0]) == 2
    kind = ogr.wkbLineString25D if is_line else ogr.wkbPoint25D
    layer = source.CreateLayer(name, crs, kind)
    for place in geometries:
        feature = ogr.Feature(layer.GetLayerDefn())
        geometry = ogr.Geometry(kind)
        for point in np.atleast_2d(np.asarray(place, dtype=float)):
            geometry.AddPoint(*point)
        feature.SetGeometry(geometry)
        layer.CreateFeature(feature)
    del layer, source  # closes the file


def read_lines(path, layer, field, names):
    """Read straight section lines by name: end points (2, 2), without our reader."""
    from osgeo import gdal, ogr

    gdal.UseExceptions()
    source = ogr.Open(str(path))
    lines = {}
    for feature in source.GetLayerByName(layer):
        if feature.GetField(field) in names:
            points = feature.GetGeometryRef().GetPoints()
            lines[feature.GetField(field)] = np.array(points, dtype=float)[:, :2]
    return lines


def read_nodes(path, layer, fields):
    """Read points by the values of some fields, without our reader."""
    from osgeo import gdal, ogr

    gdal.UseExceptions()
    source = ogr.Open(str(path))
    return {
        tuple(f.GetField(name) for name in fields): f.GetGeometryRef().GetPoint()
        for f in source.GetLayerByName(layer)
    }


def place_on(line, distance):
    """Give the map place at a distance from the first point of a straight line."""
    way = line[-1] - line[0]
    return line[0] + np.asarray(distance)[..., None] * way / np.hypot(*way)


def azimuth(vector):
    """Give the grid azimuth of a map vector in degrees."""
    return float(np.degrees(np.arctan2(vector[0], vector[1])) % 360.0)


# ---- studies ------------------------------------------------------------------------


def in_time(key, role, name, uri, **more):
    """Declare a source whose Z is two-way time in ms, positive down."""
    declared = {
        "key": key,
        "role": role,
        "name": name,
        "unit": "ms",
        "sign": "depth",
        "datum": "seismic datum",
        "domain": "time",
        "time_way": "two",
        "uri": str(uri),
    }
    return {**declared, **more}


def in_depth(key, role, name, uri, **more):
    """Declare a source whose Z is a depth below mean sea level in metres."""
    declared = {
        "key": key,
        "role": role,
        "name": name,
        "unit": "m",
        "sign": "depth",
        "datum": "mean sea level",
        "uri": str(uri),
    }
    return {**declared, **more}


def study_document(name, crs, sources, sections, names, horizon, picks, **more):
    """Give the JSON object of a study over some sections of a layer."""
    listed = ", ".join(f"'{n}'" for n in names)
    return {
        "format": "heaveline-study",
        "version": 1,
        "name": name,
        "fault": "Fault",
        "crs": crs,
        "length_unit": "m",
        "vertical_datum": "mean sea level",
        "sources": sources,
        "sections": {
            "uri": f'{sections}|subset="name" IN ({listed})',
            "id_field": "name",
        },
        "construction": {"horizon": horizon, **more.pop("construction", {})},
        "picks": picks,
        **more,
    }


class Words:
    """Feedback that keeps what a user is told."""

    def __init__(self):
        self.warnings = []

    def pushWarning(self, text):
        self.warnings.append(text)

    def isCanceled(self):
        return False


def read_features(declared, crs, words=None):
    """Read one declared source by the plugin's own room; its `Features`."""
    from heaveline.geomcore.sources import SourceDeclaration
    from heaveline.plugin import layers
    from qgis.core import QgsCoordinateTransformContext

    source = SourceDeclaration.from_dict(declared)
    context = QgsCoordinateTransformContext()
    return layers.read_source(source, layers.study_crs(crs), None, context, words)


def run_study(document, folder, words=None):
    """Read a study's layers by the plugin's own room and run it; a `StudyRun`."""
    from heaveline.geomcore.recipe import Study
    from heaveline.geomcore.study import run
    from heaveline.plugin import layers
    from qgis.core import QgsCoordinateTransformContext

    study = Study.from_json(json.dumps(document))
    crs = layers.study_crs(study.crs)
    context = QgsCoordinateTransformContext()
    sources = {
        s.key: layers.read_source(s, crs, folder, context, words) for s in study.sources
    }
    if study.sections.parallel is not None:
        return run(study, sources)
    drawn = layers.open_layer(study.sections.uri, folder, "sections")
    field = study.sections.id_field
    lines = layers.read_section_lines(drawn, field, crs, context, words)
    return run(study, sources, lines)


def by_section(run):
    """Give the results of a run by section name."""
    return {s.frame.section_id: s for s in run.sections}


def only_separation(result):
    """Give the one measured separation of a section."""
    assert len(result.separations) == 1, result.separations
    return result.separations[0]


def along_line(frame, separation):
    """Give the heave along the drawn line, signed as the heave."""
    at = frame.distance_at([separation.footwall.x, separation.hanging_wall.x])
    return float(np.copysign(abs(at[1] - at[0]), separation.heave))


# ---- time horizons ------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class TimeHorizon:
    """A seismic horizon in two-way time with the sections the table knows.

    Parameters
    ----------
    folder : pathlib.Path
        Of the marks below, written beside the open data.
    figures : dict
        Rows of the table by section and quantity.
    lines : dict of str to ndarray (2, 2)
        Section lines by name.
    cutoffs : dict of str to tuple
        Footwall and hanging-wall cut-off (x, y, ms) of the table by section.
    crs, points, sections : str
        Study CRS, and the layers as study sources.
    picks : dict
        Corridor and fit distances; the table's column `how` names them.
    """

    folder: Path
    figures: dict
    lines: dict
    cutoffs: dict
    crs: str
    points: str
    sections: str
    picks: dict

    @property
    def names(self):
        """Section names in order along strike."""
        return list(self.lines)

    @property
    def along(self):
        """Transport azimuth along the sections into the hanging wall."""
        foot, hang = next(iter(self.cutoffs.values()))
        return azimuth(np.subtract(hang, foot)[:2])

    def marks(self):
        """Write the table's cut-offs as a layer of points; its source."""
        path = self.folder / "cutoffs.gpkg"
        if not path.exists():
            points = [p for both in self.cutoffs.values() for p in both]
            write_layer(path, "cutoffs", points)
        return f"{path}|layername=cutoffs"

    def trace(self, off=0.0):
        """Write a fault trace through the middles of the gaps; its source.

        Parameters
        ----------
        off : float
            Metres by which it lies off the middles, into the hanging wall.
        """
        path = self.folder / f"trace_{off:g}.gpkg"
        if not path.exists():
            middles = np.array(
                [np.mean(both, axis=0) for both in self.cutoffs.values()]
            )
            ends = middles[[0, -1]] + 0.2 * (middles[[0, -1]] - middles[[1, -2]])
            line = np.vstack([ends[:1], middles, ends[1:]])
            turn = np.radians(self.along)
            line[:, :2] += off * np.array([np.sin(turn), np.cos(turn)])
            line[:, 2] = middles[:, 2].mean()  # one time: no more is known of it
            write_layer(path, "trace", [line])
        return f"{path}|layername=trace"

    def study(self, given, off=0.0, transport=None, declare=in_time, **more):
        """Give the study with the table's cut-offs, or with the trace alone."""
        if given:
            second = declare("cutoffs", "cut-off", "H", self.marks())
            picks = self.picks
        else:
            second = declare("trace", "fault trace", "Fault", self.trace(off))
            picks = {**self.picks, "tracked": ["horizon"]}
        return study_document(
            "Time horizon",
            self.crs,
            [declare("horizon", "horizon", "H", self.points), second],
            self.sections,
            self.names,
            "H",
            picks,
            transport={"azimuth": self.along} if transport is None else transport,
            **more,
        )


def f3(data, folder):
    """Horizon FS4 of block F3: the table's cut-offs are distances along the lines."""
    figures = read_figures(data, "f3_fs4")
    file = data / "f3_fs4" / "f3_fs4.gpkg"
    names = [name for name in figures if name != "file"]
    lines = read_lines(file, "sections", "name", names)

    def place(name, wall):
        rows = figures[name]
        xy = place_on(lines[name], rows[f"{wall} cutoff distance"].number)
        return (*xy, rows[f"{wall} cutoff twt"].number)

    return TimeHorizon(
        folder,
        figures,
        lines,
        {name: (place(name, "FW"), place(name, "HW")) for name in names},
        "EPSG:23031",
        f"{file}|layername=fs4_twt_points",
        f"{file}|layername=sections",
        # fits 50-500 m outside the cut-offs; lines lie 50 m apart: only its own nodes
        {
            "corridor": 10.0,
            "fault_buffer": 0.0,
            "separation_from": 50.0,
            "separation_to": 500.0,
        },
    )


def penobscot(data, folder):
    """Horizon B of Penobscot: the table's cut-offs are nodes named by their inline."""
    figures = read_figures(data, "penobscot_south")
    file = data / "penobscot_south" / "penobscot_horB_south.gpkg"
    names = [name for name in figures if name != "file"]
    nodes = read_nodes(file, "horB_twt_points", ("crossline", "inline"))

    def place(name, wall):
        rows = figures[name]
        line = int(rows[f"{wall} cutoff"].value[2:])
        xy = nodes[int(name[-4:]), line][:2]
        return (*xy, rows[f"{wall} cutoff twt"].number)

    return TimeHorizon(
        folder,
        figures,
        read_lines(file, "sections", "name", names),
        {name: (place(name, "FW"), place(name, "HW")) for name in names},
        ANY_METRES,
        f"{file}|layername=horB_twt_points",
        f"{file}|layername=sections",
        # fits 25-300 m outside the cut-offs; lines lie 250 m apart: only its own nodes
        {
            "corridor": 10.0,
            "fault_buffer": 0.0,
            "separation_from": 25.0,
            "separation_to": 300.0,
        },
    )


# ---- Reek ---------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class FaultLoops:
    """The horizon Top with its loops of cut-offs, one fault a loop."""

    data: Path
    figures: dict
    lines: dict

    @property
    def names(self):
        """Section names in the order of the table."""
        return list(self.lines)

    @property
    def polygons(self):
        """Section names by the number of the loop they cross."""
        return {
            loop: [n for n in self.names if loop_of(n) == loop]
            for loop in sorted(set(map(loop_of, self.names)))
        }

    def study(self, loop, names, transport=None, gridded=False, lines=False):
        """Give the study of one loop: nodes or raster, a line or a polygon."""
        folder = self.data / "reek"
        file = folder / "reek_faults.gpkg"
        nodes = (
            f"{file}|layername=horizon_points|subset=\"horizon\" = '01_topreek_rota'"
        )
        top = folder / "01_topreek_rota.tif" if gridded else nodes
        kind = "cutoff_loops" if lines else "fault_polygons"
        cut = f'{file}|layername={kind}|subset="poly_id" = {loop}'
        return study_document(
            f"Loop {loop}",
            ANY_METRES,
            [
                in_depth("horizon", "horizon", "Top", top, sigma=5.0),
                in_depth("cutoffs", "cut-off", "Top", cut),
            ],
            f"{file}|layername=sections",
            names,
            "Top",
            # fits 80-300 m outside the loop; nodes within 60 m of the sections
            {
                "corridor": 60.0,
                "fault_buffer": 0.0,
                "separation_from": 80.0,
                "separation_to": 300.0,
            },
            transport={} if transport is None else {"azimuth": transport},
        )

    def across_strike(self, name):
        """Give the azimuth across strike, down to the hanging wall, and the angle.

        Strike is the bisector of the two loop edges the section crosses, worked out
        here from the source's own file, not by the code under test.
        """
        start, end = self.lines[name]
        way = (end - start) / np.hypot(*(end - start))
        edges = np.array(crossed_edges(self.loop(loop_of(name)), start, end))
        edges /= np.hypot(edges[:, 0], edges[:, 1])[:, None]
        edges *= np.sign(edges @ [-way[1], way[0]])[:, None]
        strike = edges.sum(axis=0)
        down = self.figures[name]["downthrown towards azimuth"].number
        normal = azimuth([strike[1], -strike[0]])
        if abs((normal - down + 180.0) % 360.0 - 180.0) > 90.0:
            normal = (normal + 180.0) % 360.0
        return normal, abs((normal - down + 180.0) % 360.0 - 180.0)

    def loop(self, number):
        """Read one closed loop (n, 2) from the source's own file."""
        path = self.data / "reek" / "top_upper_reek_faultpoly_with_index.csv"
        with path.open(newline="", encoding="utf-8") as file:
            rows = [r for r in csv.DictReader(file) if int(r["POLY_ID"]) == number]
        return np.array([[float(r["X_UTME"]), float(r["Y_UTMN"])] for r in rows])


def reek(data):
    """The loops of horizon Top with the table's eleven sections."""
    figures = read_figures(data, "reek")
    names = [name for name in figures if name.startswith("REEK")]
    file = data / "reek" / "reek_faults.gpkg"
    return FaultLoops(data, figures, read_lines(file, "sections", "name", names))


def loop_of(name):
    """Give the number of the loop a section crosses: the digit of its name."""
    return int(name[len("REEK-P")])


def crossed_edges(loop, start, end):
    """Give the two edges of a closed loop that a straight line crosses."""
    way = end - start
    normal = np.array([-way[1], way[0]])
    ring = loop if np.array_equal(loop[0], loop[-1]) else np.vstack([loop, loop[:1]])
    across, found = (ring - start) @ normal, []
    for i in np.flatnonzero(across[:-1] * across[1:] < 0):
        f = across[i] / (across[i] - across[i + 1])
        at = ring[i] + f * (ring[i + 1] - ring[i])
        if 0.0 <= (at - start) @ way <= way @ way:
            found.append(ring[i + 1] - ring[i])
    assert len(found) == 2, f"{len(found)} crossings"
    return found
