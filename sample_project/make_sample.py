"""Write the sample's data and study from the truth, with pick noise.

Needs the Python that QGIS runs in (osgeo). Usage::

    python make_sample.py [--seed 4] [--noise 1.0] [--out FOLDER]

writes ``study.json`` and ``data/`` into the folder; the same seed gives the same
values. ``--noise`` multiplies all noise; the study then declares the multiplied sigma
(with 0 it declares the usual one).
"""

import argparse
import json
from pathlib import Path

import numpy as np
from osgeo import gdal, ogr, osr

try:
    from . import survey, truth
except ImportError:  # run as a plain script
    import survey
    import truth

SEED = 20
FOLDER = Path(__file__).resolve().parent
VECTORS = "data/survey.gpkg"
GROUND = "data/ground.tif"
DEPTHS = "data/sardunel_depth.tif"
DATUM = "mean sea level"

gdal.UseExceptions()
ogr.UseExceptions()


def main(arguments=None):
    """Make the sample as the command line says."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--seed", type=int, default=SEED, help="seed of the noise")
    parser.add_argument("--noise", type=float, default=1.0, help="factor on all noise")
    parser.add_argument("--out", type=Path, default=FOLDER, help="folder to write into")
    given = parser.parse_args(arguments)
    make(given.out, given.seed, given.noise)


def make(folder, seed=SEED, noise=1.0):
    """Write data and study of one survey.

    Parameters
    ----------
    folder : pathlib.Path
        Made if it is not there; files of an earlier survey in it are replaced.
    seed : int
    noise : float

    Returns
    -------
    pathlib.Path
        The study file.
    """
    folder = Path(folder)
    (folder / "data").mkdir(parents=True, exist_ok=True)
    observed = survey.observe(seed, noise)
    write_vectors(folder / VECTORS, observed)
    write_grid(folder / GROUND, observed.ground_grid, "Elevation of the ground, metres")
    write_grid(
        folder / DEPTHS,
        observed.depth_grid,
        f"Depth of Top {survey.GRIDDED} below mean sea level, metres, positive down",
    )
    path = folder / "study.json"
    document = study_document(observed, noise)
    text = json.dumps(document, indent=2, ensure_ascii=False) + "\n"
    path.write_text(text, encoding="utf-8")
    return path


def _crs():
    crs = osr.SpatialReference()
    crs.ImportFromEPSG(int(truth.CRS.split(":")[1]))
    crs.SetAxisMappingStrategy(osr.OAMS_TRADITIONAL_GIS_ORDER)
    return crs


# ---- vector layers -----------------------------------------------------------------


def write_vectors(path, observed):
    """Write all vector layers into one GeoPackage."""
    # a fixed date, so that the same survey gives the same file
    gdal.SetConfigOption("OGR_CURRENT_DATE", "2020-01-01T00:00:00.000Z")
    driver = ogr.GetDriverByName("GPKG")
    if path.exists():
        driver.DeleteDataSource(str(path))
    source = driver.CreateDataSource(str(path))
    for name, kind, fields, rows in _layers(observed):
        _write_layer(source, name, kind, fields, rows)
    source = None  # closes the file
    gdal.SetConfigOption("OGR_CURRENT_DATE", None)


def _layers(observed):
    """List the layers: name, geometry, fields with an example each, rows."""
    top = f"Top {survey.CONTOURED}"
    yield (
        "fault_trace",
        ogr.wkbLineString25D,
        {"fault": "", "dip": 0.0, "dip_azimuth": 0.0},
        [
            (xyz, (truth.FAULT, round(dip, 1), round(azimuth, 1)))
            for xyz, dip, azimuth in observed.trace
        ],
    )
    yield (
        "fault_picks",
        ogr.wkbPoint25D,
        {"fault": "", "section": ""},
        [(xyz, (truth.FAULT, name)) for name, xyz in observed.fault_picks],
    )
    yield (
        "structure_contours",
        ogr.wkbLineString,
        {"horizon": "", "elevation": 0.0, "wall": ""},
        [(xy, (top, level, wall)) for level, xy, wall in observed.contours],
    )
    yield (
        "bed_dips",
        ogr.wkbPoint25D,
        {"horizon": "", "dip": 0.0, "dip_azimuth": 0.0, "setting": ""},
        [
            (xyz, (top, round(float(dip), 1), round(float(azimuth), 1), setting))
            for xyz, dip, azimuth, setting in observed.exposures
        ],
    )
    yield (
        "section_lines",
        ogr.wkbLineString,
        {"section_id": ""},
        [(xy, (name,)) for name, xy in observed.sections.items()],
    )
    yield (
        "planned_wells",
        ogr.wkbPoint25D,
        {"well": "", "point": "", "kb": 0.0},
        [(w["xyz"], (w["well"], w["point"], w["kb"])) for w in observed.wells],
    )


def _write_layer(source, name, kind, fields, rows):
    layer = source.CreateLayer(name, _crs(), kind, ["FID=fid", "GEOMETRY_NAME=geom"])
    for field, example in fields.items():
        real = isinstance(example, float)
        layer.CreateField(ogr.FieldDefn(field, ogr.OFTReal if real else ogr.OFTString))
    for coordinates, values in rows:
        feature = ogr.Feature(layer.GetLayerDefn())
        feature.SetGeometry(_geometry(kind, np.round(coordinates, 2)))
        for field, value in zip(fields, values):
            feature.SetField(field, value)
        layer.CreateFeature(feature)


def _geometry(kind, coordinates):
    geometry = ogr.Geometry(kind)
    coordinates = np.atleast_2d(coordinates)
    add = geometry.AddPoint if coordinates.shape[1] == 3 else geometry.AddPoint_2D
    for point in coordinates:
        add(*map(float, point))
    return geometry


# ---- grids -------------------------------------------------------------------------

_NO_DATA = -9999.0


def write_grid(path, grid, description):
    """Write a north-up grid as a GeoTIFF, rounded to a tenth."""
    west, north, values = grid
    rows, columns = values.shape
    driver = gdal.GetDriverByName("GTiff")
    options = ["COMPRESS=DEFLATE", "PREDICTOR=3", "TILED=YES"]
    options += ["BLOCKXSIZE=128", "BLOCKYSIZE=128"]
    raster = driver.Create(str(path), columns, rows, 1, gdal.GDT_Float32, options)
    raster.SetGeoTransform((west, survey.CELL, 0.0, north, 0.0, -survey.CELL))
    raster.SetProjection(_crs().ExportToWkt())
    band = raster.GetRasterBand(1)
    band.SetDescription(description)
    band.SetNoDataValue(_NO_DATA)
    clean = np.where(np.isnan(values), _NO_DATA, np.round(values, 1))
    band.WriteArray(clean.astype(np.float32))
    raster = band = None  # closes the file


# ---- study -------------------------------------------------------------------------


def study_document(observed, noise=1.0):
    """Write the study: every source declared, its sigma that of the noise applied."""
    return {
        "format": "heaveline-study",
        "version": 1,
        "name": f"{truth.VALLEY} sample",
        "fault": truth.FAULT,
        "crs": truth.CRS,
        "length_unit": "m",
        "vertical_datum": DATUM,
        "sources": _sources(noise or 1.0),
        "construction": {
            "horizon": survey.CONTOURED,
            "shear_angle": round(observed.shear_angle, 1),
            "shear_angle_sigma": survey.NOISE["shear angle"] * (noise or 1.0),
            "further_horizons": [{"name": survey.GRIDDED}],
        },
        "sections": {
            "uri": f"{VECTORS}|layername=section_lines",
            "id_field": "section_id",
        },
        "outputs": {"geopackage": "results.gpkg", "plots": "plots"},
        "note": "An invented area: made by make_sample.py from a stated truth plus "
        "noise. The shear angle is that of small antithetic faults in outcrop.",
    }


def _sources(noise):
    """Declare the five sources."""
    dips = {"dip_field": "dip", "dip_azimuth_field": "dip_azimuth"}
    return [
        _source(
            "trace",
            "fault trace",
            truth.FAULT,
            f"{VECTORS}|layername=fault_trace",
            noise * survey.NOISE["trace"],
            layer="fault_trace",
            z={"source": "raster", "uri": GROUND},
            **dips,
        ),
        _source(
            "fault_picks",
            "fault",
            truth.FAULT,
            f"{VECTORS}|layername=fault_picks",
            noise * survey.NOISE["fault"],
            layer="fault_picks",
            corridor=150.0,
        ),
        _source(
            "contours",
            "horizon",
            survey.CONTOURED,
            f"{VECTORS}|layername=structure_contours",
            noise * survey.NOISE["contours"],
            layer="structure_contours",
            z={"source": "field", "field": "elevation"},
        ),
        _source(
            "bed_dips",
            "horizon",
            survey.CONTOURED,
            f"{VECTORS}|layername=bed_dips",
            noise * survey.NOISE["exposures"],
            layer="bed_dips",
            corridor=150.0,
            **dips,
        ),
        _source(
            "depth_grid",
            "horizon",
            survey.GRIDDED,
            DEPTHS,
            noise * survey.NOISE["grid"],
            layer="sardunel_depth",
            sign="depth",
        ),
    ]


def _source(key, role, name, uri, sigma, sign="elevation", **entries):
    return {
        "key": key,
        "role": role,
        "name": name,
        "unit": "m",
        "sign": sign,
        "datum": DATUM,
        "sigma": sigma,
        "uri": uri,
        **entries,
    }


if __name__ == "__main__":
    main()
