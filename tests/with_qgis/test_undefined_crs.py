"""Layers whose CRS is not known, and features that cannot be reprojected."""

import pytest
import real_data

pytestmark = pytest.mark.usefixtures("qgis_app")

PLACES = [(732386.6, 4890362.1, 922.4), (732380.8, 4890373.2, 922.5)]


def set_srs(path, layer, number):
    """Give a layer another of the stand-ins of the GeoPackage standard (-1 or 0)."""
    import sqlite3
    from contextlib import closing

    with closing(sqlite3.connect(path)) as file, file:
        for table in ("gpkg_contents", "gpkg_geometry_columns"):
            file.execute(
                f"UPDATE {table} SET srs_id = ? WHERE table_name = ?", (number, layer)
            )


def nodes(path):
    """Declare the layer as nodes of a horizon."""
    return real_data.in_time("nodes", "horizon", "H", f"{path}|layername=nodes")


@pytest.mark.parametrize("stand_in", [-1, 0])
def test_undefined_crs_is_no_crs(tmp_path, stand_in):
    """Undefined Cartesian and undefined geographic both mean: the source does not say.

    QGIS takes either for a CRS; metres read as degrees would be lost as unplaceable.
    """
    path = tmp_path / "nodes.gpkg"
    real_data.write_layer(path, "nodes", PLACES)
    set_srs(path, "nodes", stand_in)
    words = real_data.Words()
    got = real_data.read_features(nodes(path), real_data.ANY_METRES, words)
    assert got.xy.tolist() == [[x, y] for x, y, _ in PLACES]
    assert got.refused == {}
    assert [w for w in words.warnings if "has no CRS" in w and "study's CRS" in w]


def test_features_that_cannot_be_reprojected_are_counted(tmp_path):
    """A latitude beyond the pole has no place on the map; the others are read."""
    from osgeo import osr

    path = tmp_path / "nodes.gpkg"
    degrees = osr.SpatialReference()
    degrees.ImportFromEPSG(4326)
    places = [(-60.0, 44.0, 900.0), *[(-60.0, 95.0 + i, 900.0) for i in range(40)]]
    real_data.write_layer(path, "nodes", places, crs=degrees)
    got = real_data.read_features(nodes(path), "EPSG:32620")
    assert got.refused == {"cannot be reprojected": 40}
    assert len(got.fid) == 1
