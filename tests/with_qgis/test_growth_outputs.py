"""Subsidiary faults and growth as rows of the output layers.

Source of the truth: `ground.py`, eq. 2 of methods.md with vertical shear; particles of
a hanging wall that a subsidiary fault cuts are moved one by one here (methods.md
section 4), nothing is marched.
"""

import json
import math
import sqlite3
from contextlib import closing

import ground
import numpy as np
import pytest
from heaveline.geomcore.growth import section_history
from heaveline.geomcore.sources import Features
from heaveline.geomcore.study import SectionLine, Study, run
from heaveline.plugin.fields import LAYERS
from heaveline.plugin.outputs.tables import run_tables
from heaveline.plugin.studies import result_tables

PLACE = ground.Map()
START = -2500.0
#: Name, elevation of the regional, and heave since it was laid down, oldest first.
BEDS = (("C", -1100.0, 800.0), ("B", -900.0, 800.0), ("A", -700.0, 500.0))
#: Heave of the master, what the block beyond the subsidiary fault moved more, and where
#: that fault branches off and the horizon meets it before they moved.
INBOARD, MORE, BRANCH, TOP = 700.0, 150.0, 2200.0, 2700.0


def on_map(x):
    """Map places of x along transport."""
    return np.array([PLACE.at(v) for v in np.atleast_1d(x)])


def points(x, z):
    return Features.points(on_map(x), np.asarray(z, dtype=float))


def cutoff(level):
    """X where a regional at that elevation meets the fault."""
    return ground.footwall_cutoff(level - ground.REGIONAL)


def footwall(level):
    x = np.arange(cutoff(level) - 2000.0, cutoff(level) - 15.0, 60.0)
    return x, np.full(len(x), level)


def rolled(level, heave):
    """Hanging wall of a bed by eq. 2 of methods.md, vertical shear."""
    x = np.arange(cutoff(level) + heave + 20.0, 8500.0, 25.0)
    return x, [level + ground.fault(v) - ground.fault(v - heave) for v in x]


def plane(u):
    """The subsidiary fault, which dips towards the master, before they moved."""
    deep = ground.fault(BRANCH)
    return deep + (u - BRANCH) / (TOP - BRANCH) * (ground.REGIONAL - deep)


def plane_now(x):
    """Its plane moved with the block below it, and beyond that the bare master."""
    u = x - INBOARD - MORE
    if u < BRANCH:
        return ground.fault(x)
    return plane(u) + ground.fault(x) - ground.fault(u)


def moved(u):
    """Where a particle of the horizon lies now."""
    x = u + INBOARD + (MORE if u > TOP else 0.0)
    if BRANCH < u <= TOP:
        return x, ground.REGIONAL + plane_now(x) - plane(u)
    return x, ground.REGIONAL + ground.fault(x) - ground.fault(u)


def cut_bed():
    """The horizon with a subsidiary fault in it."""
    start = ground.FOOTWALL_CUTOFF
    return np.array([moved(u) for u in np.arange(start + 20.0, 7800.0, 25.0)]).T


def both_walls(level, hanging):
    return points(*(np.r_[a, b] for a, b in zip(footwall(level), hanging)))


def study_of(sources, **construction):
    """A study of sources given as (key, role, name)."""
    common = {"unit": "m", "sign": "elevation", "datum": "mean sea level", "sigma": 3.0}
    return Study.from_dict(
        {
            "format": "heaveline-study",
            "version": 1,
            "name": "Invented ground",
            "fault": "F",
            "crs": "EPSG:32633",
            "length_unit": "m",
            "vertical_datum": "mean sea level",
            "sources": [
                {"key": key, "role": role, "name": name, **common}
                for key, role, name in sources
            ],
            "transport": {"azimuth": PLACE.azimuth},
            "picks": {"fault_buffer": 0.0, "corridor": 100.0},
            "construction": construction,
        }
    )


def made(declared, layers, **construction):
    """Run a study of one section."""
    x = np.arange(20.0, cutoff(-1100.0) + 800.0, 30.0)
    layers = {"deep": points(x, [ground.fault(v) for v in x]), **layers}
    study = study_of([("deep", "fault", "F"), *declared], **construction)
    return run(study, layers, [SectionLine("S1", on_map([START, 9000.0]))])


@pytest.fixture(scope="module")
def growing():
    """Three horizons; the youngest was laid down while the fault moved."""
    layers = {n: both_walls(level, rolled(level, h)) for n, level, h in BEDS}
    declared = [(name, "horizon", name) for name in layers]
    return made(declared, layers, horizon="B")


@pytest.fixture(scope="module")
def cut():
    """One horizon, cut by a subsidiary fault."""
    u = np.linspace(BRANCH, TOP, 5) + INBOARD + MORE
    layers = {
        "A": both_walls(ground.REGIONAL, cut_bed()),
        "minor": points(u, [plane_now(v) for v in u]),
    }
    declared = [("A", "horizon", "A"), ("minor", "subsidiary fault", "M")]
    return made(declared, layers, horizon="A")


def rows(product, name):
    """Rows of one layer, each with its declared fields only."""
    tables = {t.name: t for t in run_tables(product, "2031-05-04T03:02:01Z", "0.0.0")}
    found = [values for _, values in tables[name].rows]
    for values in found:
        assert set(values) <= set(LAYERS[name].names)
    return found


def test_subsidiary_fault_has_a_row_with_the_numbers_of_the_core(cut):
    """What it adds, its share, where it branches off: as the prediction holds them."""
    (section,) = cut.sections
    (share,) = section.prediction.subsidiaries
    (row,) = rows(cut, "subsidiary_faults")
    assert (row["section_id"], row["name"], row["horizon"]) == ("S1", "M", "A")
    assert (row["study"], row["fault"]) == ("Invented ground", "F")
    assert row["sense"] == "antithetic"
    assert row["heave"] == share.fault.heave
    assert row["throw"] == share.fault.throw
    assert row["added_heave"] == share.added_heave
    assert row["sigma_added_heave"] == share.sigma > 0
    assert row["share"] == share.share
    assert (row["branch_x"], row["branch_z"]) == share.branch


def test_subsidiary_fault_is_that_of_the_moved_particles(cut):
    """Truth of the ground: 150 m more beyond it, [x_P + h1, x_t + h1 + h2] hidden."""
    (row,) = rows(cut, "subsidiary_faults")
    assert row["added_heave"] == pytest.approx(MORE, abs=2.0)
    assert row["share"] == pytest.approx(MORE / (INBOARD + MORE), abs=0.004)
    at = BRANCH + INBOARD + MORE
    assert row["branch_x"] + START == pytest.approx(at, abs=15.0)
    assert row["branch_z"] == pytest.approx(ground.fault(at), abs=15.0)
    assert row["shadow_from_x"] + START == pytest.approx(BRANCH + INBOARD, abs=15.0)
    assert row["shadow_to_x"] + START == pytest.approx(TOP + INBOARD + MORE, abs=15.0)
    low, high = (u + INBOARD + MORE for u in (BRANCH, TOP))
    slope = (plane_now(high) - plane_now(low)) / (high - low)
    # the plane bends a little where it moved, the line through its picks does not
    assert row["dip"] == pytest.approx(math.degrees(math.atan(slope)), abs=1.0)


# Shear lines meet the trace where x - z tan(a) = u (design: the frame's axis).
def test_shadow_is_told_on_the_trace_and_null_beyond_it(cut):
    """Under inclined shear the edges are shear lines: their x is that on the fault."""
    from dataclasses import replace

    from heaveline.geomcore.kinematics import ConstantHeave

    (section,) = cut.sections
    prediction = section.prediction
    (share,) = prediction.subsidiaries
    trace, tan = prediction.trace, math.tan(math.radians(20.0))
    i = len(trace) // 2
    edge = trace.x[i] - trace.z[i] * tan
    inclined = replace(
        prediction,
        model=ConstantHeave(20.0),
        subsidiaries=(replace(share, shadow=(edge, 1e6)),),
    )
    product = replace(cut, sections=(replace(section, prediction=inclined),))
    (row,) = rows(product, "subsidiary_faults")
    assert row["shadow_from_x"] == pytest.approx(trace.x[i], abs=1e-6)
    assert row["shadow_to_x"] is None


def test_growth_history_has_the_numbers_of_the_core(growing):
    """One row a horizon, oldest first, with the interval below it."""
    (section,) = growing.sections
    measured = [s.separation for s in section.separations]
    found = section_history(section.picks, measured, 0.0)
    own = rows(growing, "growth_history")
    assert [r["horizon"] for r in own] == ["C", "B", "A"]
    assert {r["section_id"] for r in own} == {"S1"}
    fields = ("heave", "throw", "oblique_heave", "sigma_heave", "sigma_throw")
    for row, one in zip(own, found.rows):
        assert [row[f] for f in fields] == [getattr(one, f) for f in fields]
        assert row["heave_before"] == one.heave_before
        assert row["throw_before"] == one.throw_before
    for row, one in zip(own[1:], found.intervals):
        assert row["interval"] == f"{one.upper} to {one.lower}"
        assert row["expansion_index"] == one.index
        assert row["sigma_expansion"] == one.sigma
        assert row["is_growth"] is one.is_growth


# Closed form: on the vertical through the lower horizon's hanging-wall cut-off at x,
# thickness = R1 - R2 + F(x - H2) - F(x - H1) (eq. 2 of methods.md for both).
def test_growth_history_is_that_of_the_ground(growing):
    """300 m of heave between two horizons; only the interval above them grew."""
    oldest, before, grown = rows(growing, "growth_history")
    assert oldest["heave_before"] is None
    assert "interval" not in oldest
    assert "oldest horizon" in oldest["note"]
    assert before["heave_before"] == pytest.approx(0.0, abs=15.0)
    assert before["expansion_index"] == pytest.approx(1.0, abs=0.01)
    assert before["is_growth"] is False
    assert before["note"] is None
    assert grown["heave"] == pytest.approx(500.0, abs=15.0)
    assert grown["heave_before"] == pytest.approx(300.0, abs=20.0)
    x = cutoff(-900.0) + 800.0
    more = ground.fault(x - 800.0) - ground.fault(x - 500.0)
    assert grown["expansion_index"] == pytest.approx(1 + more / 200.0, rel=0.02)
    assert grown["is_growth"] is True
    assert "laid down while the fault moved" in grown["note"]


def test_interval_without_picks_says_why(growing):
    """A horizon with cut-offs but no picks left has no thickness, and says so."""
    from dataclasses import replace

    (section,) = growing.sections
    lost = section.picks.left_out(section.picks.name == "A", "taken away")
    product = replace(growing, sections=(replace(section, picks=lost),))
    _, before, grown = rows(product, "growth_history")
    assert before["is_growth"] is False
    assert grown["interval"] == "A to B"
    assert grown.get("expansion_index") is None
    assert grown.get("is_growth") is None
    assert grown["note"] == "'A' has 0 pick(s) in the hanging wall."


def test_tables_without_rows_are_not_written(cut, growing, qgis_app):
    """One horizon has no history, a hanging wall in one piece no subsidiary fault."""
    assert rows(cut, "growth_history") == []
    assert rows(growing, "subsidiary_faults") == []
    names = [{t.name for t in result_tables(product)} for product in (cut, growing)]
    both = {"growth_history", "subsidiary_faults"}
    assert names[0] & both == {"subsidiary_faults"}
    assert names[1] & both == {"growth_history"}


def test_both_tables_go_into_the_file(cut, growing, tmp_path, qgis_app):
    """What is read from the GeoPackage is what the rows said, and counted so."""
    from heaveline.plugin.layers import write_geopackage
    from qgis.core import (
        QgsCoordinateReferenceSystem,
        QgsCoordinateTransformContext,
    )

    crs = QgsCoordinateReferenceSystem("EPSG:32633")
    for product, name in ((cut, "subsidiary_faults"), (growing, "growth_history")):
        path = tmp_path / f"{name}.gpkg"
        tables = result_tables(product)
        write_geopackage(path, tables, crs, QgsCoordinateTransformContext())
        with closing(sqlite3.connect(path)) as file:
            file.row_factory = sqlite3.Row
            # the table's name is one of the two above
            found = [dict(r) for r in file.execute(f'select * from "{name}"')]
            (counts,) = file.execute("select counts from runs").fetchone()
        expected = rows(product, name)
        assert json.loads(counts)[name] == len(expected) == len(found)
        for row, wanted in zip(found, expected):
            # SQLite keeps truth as 0 and 1
            plain = {
                k: int(v) if v is True or v is False else v for k, v in wanted.items()
            }
            assert {k: row[k] for k in plain} == pytest.approx(plain)
