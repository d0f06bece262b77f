"""The shear angle by the algorithm, from layers of picks over a known fault.

Source of the truth: `ground.py`, eq. 2 of methods.md with vertical shear, so that the
angle is 0; growth horizons with their own heave and regional.
"""

import json
import sqlite3
from contextlib import closing

import ground
import numpy as np
import pytest

PLACE = ground.Map()
#: Name, elevation of the regional, and heave since it was laid down, oldest first.
BEDS = (("C", -1100.0, 800.0), ("B", -900.0, 500.0), ("A", -700.0, 250.0))
SIGMA = 2.0


def rolled(level, heave, x):
    """Hanging wall of a bed by eq. 2 of methods.md, vertical shear."""
    return np.array([level + ground.fault(v) - ground.fault(v - heave) for v in x])


def bed_picks(name, level, heave, rng):
    """Picks of one horizon on both walls: x, z, name."""
    foot = ground.footwall_cutoff(level - ground.REGIONAL)
    before = np.arange(foot - 2300.0, foot - 30.0, 60.0)
    beyond = np.arange(foot + heave + 30.0, 8000.0, 50.0)
    x = np.r_[before, beyond]
    z = np.r_[np.full(len(before), level), rolled(level, heave, beyond)]
    return x, z + SIGMA * rng.normal(size=len(x)), name


def on_map(x, along):
    """Map places of x on a section that lies aside along strike."""
    return np.array([PLACE.at(v, along) for v in x])


def study(names):
    """The study that pulls the picks."""
    from heaveline.geomcore.study import Study

    common = {"unit": "m", "sign": "elevation", "datum": "mean sea level"}
    sources = [(n, "horizon", n) for n in names] + [("deep", "fault", "F")]
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
                {"key": k, "role": role, "name": n, "sigma": SIGMA, **common}
                for k, role, n in sources
            ],
            "transport": {"azimuth": PLACE.azimuth},
            "picks": {"fault_buffer": 0.0, "corridor": 100.0},
            "construction": {"horizon": "C"},
        }
    )


def pulled(path, sections=("S1", "S2")):
    """Write sections and picks of the ground as Pull Picks does; the file."""
    from heaveline.geomcore.sources import Features
    from heaveline.geomcore.study import SectionLine
    from heaveline.plugin.algorithms.base import Steps
    from heaveline.plugin.studies import Place, picks_tables, pull, write
    from qgis.core import QgsProcessingContext, QgsProcessingFeedback

    rng = np.random.default_rng(5)
    aside = {name: 3000.0 * i for i, name in enumerate(sections)}
    tables = {}
    for along in aside.values():
        x = np.arange(20.0, ground.footwall_cutoff(-600.0) + 800.0, 40.0)
        deep = [ground.fault(v) + SIGMA * rng.normal() for v in x]
        tables.setdefault("deep", []).append((on_map(x, along), deep))
        for bed in BEDS:
            x, z, key = bed_picks(*bed, rng)
            tables.setdefault(key, []).append((on_map(x, along), z))
    sources = {
        key: Features.points(
            np.vstack([xy for xy, _ in parts]), np.concatenate([z for _, z in parts])
        )
        for key, parts in tables.items()
    }
    lines = [
        SectionLine(name, on_map([-2500.0, 9000.0], along))
        for name, along in aside.items()
    ]
    # steps do not keep the feedback they are given
    context, feedback = QgsProcessingContext(), QgsProcessingFeedback()
    steps = Steps(feedback, 2)
    place = Place.of("EPSG:32633", context)
    product = pull(study([n for n, *_ in BEDS]), sources, lines, place, steps)
    write(picks_tables(product), product.study, path, place, steps)
    return path


@pytest.fixture(scope="module")
def picked(qgis_app, tmp_path_factory):
    """Two parallel sections with three growth horizons."""
    return pulled(tmp_path_factory.mktemp("picked") / "picks.gpkg")


def parameters(picked, output, **more):
    """What the algorithm is given."""
    return {
        "SECTIONS": f"{picked}|layername=section_lines",
        "PICKS": f"{picked}|layername=picks",
        "HORIZON": "A; B; C",
        "OUTPUT": str(output),
        **more,
    }


def run(given):
    """Run the algorithm as the toolbox does."""
    import processing

    return processing.run("heaveline:calibrateshear", given)


def rows(path, layer):
    """All rows of a layer, by field name."""
    with closing(sqlite3.connect(path)) as connection:
        connection.row_factory = sqlite3.Row
        found = connection.execute(f'select * from "{layer}"').fetchall()
    return [dict(row) for row in found]


def refused(given):
    """What the algorithm says before it would run."""
    from qgis.core import QgsApplication, QgsProcessingContext, QgsProject

    registry = QgsApplication.processingRegistry()
    algorithm = registry.createAlgorithmById("heaveline:calibrateshear")
    context = QgsProcessingContext()
    context.setProject(QgsProject.instance())
    ready, sentence = algorithm.checkParameterValues(given, context)
    assert not ready
    return sentence


@pytest.fixture(scope="module")
def calibrated(picked, tmp_path_factory):
    """The results from growth horizons, figures included."""
    folder = tmp_path_factory.mktemp("calibrated")
    plots = folder / "plots"
    given = parameters(picked, folder / "angle.gpkg", PLOTS=str(plots))
    return run(given)


def test_growth_horizons_tell_the_angle_of_the_ground(calibrated):
    """Vertical shear comes out as 0 within its error, which is below a degree."""
    assert calibrated["ANGLE_SIGMA"] < 1.0
    assert abs(calibrated["ANGLE"]) < 3.0 * calibrated["ANGLE_SIGMA"]
    assert calibrated["RESOLVED"] == 2


def test_table_has_every_section_and_all_together(calibrated):
    """One row a section and way, and one for the fault, surer than each."""
    table = rows(calibrated["OUTPUT"], "shear_angle")
    joint = [r for r in table if r["section_id"] is None]
    single = {r["section_id"]: r for r in table if r["section_id"]}
    assert [r["way"] for r in joint] == ["horizons"]
    assert set(single) == {"S1", "S2"}
    assert all(r["horizons"] == "A; B; C" for r in single.values())
    assert joint[0]["resolved"]
    assert joint[0]["sigma"] < min(r["sigma"] for r in single.values())
    assert joint[0]["low"] < joint[0]["best"] < joint[0]["high"]
    assert joint[0]["best"] == pytest.approx(calibrated["ANGLE"])


def test_misfit_curves_are_lowest_at_the_best_angle(calibrated):
    """The curve of each section can be drawn from the table, its least at the best."""
    table = rows(calibrated["OUTPUT"], "shear_angle")
    misfit = rows(calibrated["OUTPUT"], "shear_misfit")
    for row in table:
        own = [m for m in misfit if m["section_id"] == row["section_id"]]
        curve = {m["angle"]: m["chi2"] for m in own if m["chi2"] is not None}
        assert len(curve) > 5
        least = min(curve, key=curve.get)
        assert least == pytest.approx(row["best"], abs=1.0)
        assert min(curve.values()) == pytest.approx(row["chi2"])


def test_run_is_on_record_with_its_recipe(calibrated):
    """The study in the table of runs says what the angle was found from."""
    (record,) = rows(calibrated["OUTPUT"], "runs")
    document = json.loads(record["study_json"])
    assert document["calibration"]["horizons"] == ["A", "B", "C"]
    (run_id,) = {r["run_id"] for r in rows(calibrated["OUTPUT"], "shear_angle")}
    assert record["run_id"] == run_id


def test_misfit_curves_are_drawn(calibrated, tmp_path):
    """One figure in every format."""
    from pathlib import Path

    names = {p.name for p in Path(calibrated["PLOTS"]).iterdir()}
    assert names == {f"shear_angle.{kind}" for kind in ("png", "svg", "pdf")}


def test_known_detachment_tells_the_angle_too_or_says_why_not(picked, tmp_path):
    """Picks that end before the fault is level give no depth, and that is said."""
    given = parameters(picked, tmp_path / "a.gpkg", DETACHMENT_Z=-ground.DETACHMENT)
    result = run(given)
    area = [r for r in rows(result["OUTPUT"], "shear_angle") if r["way"] == "area"]
    assert len(area) == 3
    for row in area:
        assert not row["resolved"]
        assert "not levelled off" in row["text"]


def test_one_horizon_tells_nothing_and_says_so(picked, tmp_path):
    """A single horizon gives no angle, no error, and a sentence."""
    result = run(parameters(picked, tmp_path / "a.gpkg", HORIZON="C"))
    assert result["ANGLE"] is None
    assert result["RESOLVED"] == 0
    table = rows(result["OUTPUT"], "shear_angle")
    assert not any(r["resolved"] for r in table)
    assert all("Not resolved" in r["text"] for r in table)


def test_horizon_without_picks_is_left_out_and_named(picked, tmp_path):
    """What cannot be used is said on the row."""
    result = run(parameters(picked, tmp_path / "a.gpkg", HORIZON="A; C; Ghost"))
    table = rows(result["OUTPUT"], "shear_angle")
    own = [r for r in table if r["section_id"] == "S1"]
    assert "Ghost" in own[0]["warnings"]
    assert own[0]["horizons"] == "A; C"


def test_names_of_horizons_are_asked_for(picked, tmp_path):
    """Semicolons alone name nothing."""
    sentence = refused(parameters(picked, tmp_path / "a.gpkg", HORIZON=" ; "))
    assert "no horizon is named" in sentence


def test_cancelled_calibration_writes_nothing(picked, tmp_path):
    """A run that is stopped leaves no file."""
    from qgis.core import (
        QgsApplication,
        QgsProcessingContext,
        QgsProcessingException,
        QgsProcessingFeedback,
        QgsProject,
    )

    registry = QgsApplication.processingRegistry()
    algorithm = registry.createAlgorithmById("heaveline:calibrateshear")
    context, feedback = QgsProcessingContext(), QgsProcessingFeedback()
    context.setProject(QgsProject.instance())
    feedback.cancel()
    output = tmp_path / "a.gpkg"
    with pytest.raises(QgsProcessingException, match="cancelled"):
        algorithm.run(parameters(picked, output), context, feedback, {}, False)
    assert not output.exists()


@pytest.mark.slow
def test_angle_is_found_without_a_desktop(picked, tmp_path, run_qgis_process):
    """Through qgis_process, an unresolved angle included."""
    output = tmp_path / "a.gpkg"
    code, results, out, error = run_qgis_process(
        "heaveline:calibrateshear", parameters(picked, output, HORIZON="C")
    )
    assert code == 0, out + error
    assert results["ANGLE"] is None
    assert len(rows(output, "shear_angle")) == 3
