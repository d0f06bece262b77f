"""Comparison, balance and trust as they come out of the algorithms."""

import json
import math
import sqlite3
from contextlib import closing
from pathlib import Path

import ground
import pytest
from heaveline.plugin.fields import LAYERS, ON_REQUEST

KNOWN = ("trace", "top", "base", "deep")
EVERY_MODEL = [
    {"model": "constant heave", "solver": "fit"},
    {"model": "constant heave", "shear_angle": 25.0},
    {"model": "constant slip"},
    {"model": "constant bed length"},
]
#: Regional of the second horizon over that of the first.
OFFSET = -400.0
EAST, NORTH, STRIKES = 500000.0, 6200000.0, (-500.0, 500.0)


def save(path, kind, features):
    """Write features (WKT) into a GeoPackage of one layer."""
    from qgis.core import (
        QgsCoordinateTransformContext,
        QgsFeature,
        QgsGeometry,
        QgsVectorFileWriter,
        QgsVectorLayer,
    )

    layer = QgsVectorLayer(f"{kind}?crs=EPSG:32633", path.stem, "memory")
    rows = []
    for text in features:
        feature = QgsFeature(layer.fields())
        feature.setGeometry(QgsGeometry.fromWkt(text))
        rows.append(feature)
    assert layer.dataProvider().addFeatures(rows)[0]
    error, *_ = QgsVectorFileWriter.writeAsVectorFormatV3(
        layer,
        str(path),
        QgsCoordinateTransformContext(),
        QgsVectorFileWriter.SaveVectorOptions(),
    )
    assert error == QgsVectorFileWriter.WriterError.NoError


def points(z_of, x):
    """Points on both sections at x along transport, which is due east."""
    return [f"POINT Z ({EAST + v} {NORTH + s} {z_of(v)})" for s in STRIKES for v in x]


def horizon_x(offset):
    """Places of picks in both walls of a horizon, none in its gap."""
    foot = ground.footwall_cutoff(offset)
    before = [foot - 60.0 * i for i in range(1, 30)]
    beyond = [foot + ground.HEAVE + 30.0 * i for i in range(1, 240)]
    return before + beyond


@pytest.fixture(scope="module")
def folder(qgis_app, tmp_path_factory):
    """Two horizons and the fault, invented, as GeoPackages; two drawn sections."""
    folder = tmp_path_factory.mktemp("ground")
    ends = f"{EAST} {NORTH - 3000} 0, {EAST} {NORTH + 3000} 0"
    save(folder / "trace.gpkg", "LineStringZ", [f"LINESTRING Z ({ends})"])
    lines = [
        f"LINESTRING ({EAST - 1500} {NORTH + s}, {EAST + 9000} {NORTH + s})"
        for s in STRIKES
    ]
    save(folder / "sections.gpkg", "LineString", lines)
    for name, offset in (("top", 0.0), ("base", OFFSET)):
        texts = points(lambda x, o=offset: ground.horizon(x, o), horizon_x(offset))
        save(folder / f"{name}.gpkg", "PointZ", texts)
    deep = points(ground.fault, [30.0 * i for i in range(1, 60)])
    save(folder / "deep.gpkg", "PointZ", deep)
    return folder


def study_in(folder, path, construction, plots=""):
    """Write a study of the ground; the sigma of everything is 5 m."""
    roles = {"trace": "fault trace", "deep": "fault"}
    sources = [
        {
            "key": key,
            "role": roles.get(key, "horizon"),
            "name": key.capitalize() if key in ("top", "base") else "Invented fault",
            "uri": str(folder / f"{key}.gpkg"),
            "unit": "m",
            "sign": "elevation",
            "datum": "mean sea level",
            "sigma": 5.0,
        }
        for key in KNOWN
    ]
    document = {
        "format": "heaveline-study",
        "version": 1,
        "name": "Invented ground",
        "fault": "Invented fault",
        "crs": "EPSG:32633",
        "length_unit": "m",
        "vertical_datum": "mean sea level",
        "sources": sources,
        "sections": {"uri": str(folder / "sections.gpkg")},
        "transport": {"azimuth": 90.0},
        "picks": {"fault_buffer": 0.0, "corridor": 100.0},
        "construction": {"horizon": "Top", **construction},
        "outputs": {"geopackage": "out.gpkg", "plots": plots},
    }
    path.write_text(json.dumps(document), encoding="utf-8")
    return path


def run(name, **parameters):
    """Run an algorithm as the toolbox does."""
    import processing

    return processing.run(f"heaveline:{name}", parameters)


def rows(path, layer):
    """All rows of a layer, by field name."""
    with closing(sqlite3.connect(path)) as connection:
        connection.row_factory = sqlite3.Row
        found = connection.execute(f'select * from "{layer}"').fetchall()
    return [dict(row) for row in found]


def layer_names(path):
    """Names of the layers in a GeoPackage."""
    with closing(sqlite3.connect(path)) as connection:
        found = connection.execute("select table_name from gpkg_contents").fetchall()
    return {name for (name,) in found}


@pytest.fixture(scope="module")
def judged(folder, tmp_path_factory):
    """A run with comparison and balance, figures drawn."""
    home = tmp_path_factory.mktemp("judged")
    asked = {"compare": EVERY_MODEL, "balance": True, "shear_angle_sigma": 3.0}
    study = study_in(folder, home / "study.json", asked, "plots")
    return run("runstudy", STUDY=str(study))


@pytest.fixture(scope="module")
def plain(folder, tmp_path_factory):
    """A run of the same study with neither."""
    home = tmp_path_factory.mktemp("plain")
    study = study_in(folder, home / "study.json", {}, "plots")
    return run("runstudy", STUDY=str(study))


def test_tables_are_written_only_where_asked_for(judged, plain):
    """An ordinary study has neither table, and says so by leaving the outputs out."""
    # two horizons were measured, with growth or without; no subsidiary fault is there
    asked = set(ON_REQUEST) - {"growth_history", "subsidiary_faults"}
    asked -= {"shear_angle", "shear_misfit"}  # of an algorithm of their own
    assert asked | {"growth_history"} <= layer_names(judged["OUTPUT"])
    assert set(ON_REQUEST) & layer_names(plain["OUTPUT"]) == {"growth_history"}
    assert "SUBSIDIARY_FAULTS" not in judged
    assert judged["METHOD_COMPARISON"].endswith("layername=method_comparison")
    assert "METHOD_COMPARISON" not in plain
    assert "BALANCE" not in plain


def test_every_construction_has_a_row_and_the_straight_fault_one(judged):
    """The study's own first, in each section, with its numbers."""
    found = rows(judged["OUTPUT"], "method_comparison")
    own = found[: len(found) // 2]
    assert [r["method"] for r in own] == [
        "constant heave",
        "constant heave",
        "constant heave",
        "constant slip",
        "constant bed length",
        "straight fault",
    ]
    assert [r["solver"] for r in own] == ["march", "fit", *["march"] * 3, None]
    assert [r["shear_angle"] for r in own] == [0.0, 0.0, 25.0, 0.0, 0.0, None]
    assert {r["status"] for r in own} == {"solved"}
    assert {r["reason"] for r in own} == {None}
    march, fit, inclined, *_ = own
    assert march["heave"] == pytest.approx(ground.HEAVE, abs=15.0)
    assert march["throw"] == pytest.approx(ground.THROW, abs=15.0)
    assert march["misfit_rms"] is None
    assert 0.0 <= fit["misfit_rms"] < 0.5
    # antithetic shear brings the fault up by some 60-80 m a degree (methods.md 13)
    assert 1000.0 < inclined["deepest_z"] - march["deepest_z"] < 2500.0
    assert len({r["spread_max"] for r in own[:-1]}) == 1
    assert march["spread_max"] > 500.0


def test_the_straight_fault_has_its_evidence(judged):
    """Dip of the cut-offs, misfit, likelihood and verdict in words."""
    straight = rows(judged["OUTPUT"], "method_comparison")[5]
    dip = math.degrees(math.atan2(ground.THROW, ground.HEAVE))
    assert straight["dip"] == pytest.approx(dip, abs=1.0)
    assert straight["verdict"] == "curved"
    assert straight["misfit_rms"] > 2.0
    assert straight["log_ratio"] > 10.0
    assert "asks for a curved fault" in straight["text"]
    assert straight["detachment_z"] is None


def test_balance_has_a_row_a_horizon_and_one_for_all(judged):
    """Area = H times depth to the detachment (Groshong 1994; methods.md eq. 8)."""
    found = rows(judged["OUTPUT"], "balance")
    top, base, both = found[: len(found) // 2]
    assert [r["horizon"] for r in (top, base, both)] == [
        "Top",
        "Base",
        "all pre-growth horizons",
    ]
    depth = ground.REGIONAL + ground.DETACHMENT
    assert top["lost_area"] == pytest.approx(ground.HEAVE * depth, rel=0.12)
    assert 0 < top["gap_area"] < top["lost_area"]
    assert top["oblique_heave"] == pytest.approx(ground.HEAVE, abs=15.0)
    # the last strip lies where the exponential fault has not levelled off yet
    end = ground.footwall_cutoff() + ground.HEAVE + 30.0 * 239
    under = ground.fault(end - 0.5 * ground.HEAVE)
    assert top["area_detachment_z"] == pytest.approx(under, abs=40.0)
    assert both["area_detachment_z"] == pytest.approx(under, abs=120.0)
    low, high = both["area_detachment_low"], both["area_detachment_high"]
    assert low < both["area_detachment_z"] < high
    assert "A/H" in top["convergence"]


def test_balance_says_that_one_horizon_is_no_test(judged):
    """In plain words, in the row itself, in its field and in the layer's abstract."""
    top, base, both = rows(judged["OUTPUT"], "balance")[:3]
    for row in (top, base):
        assert "no independent test" in row["note"]
    assert "Two horizons" in both["note"]
    assert "no independent test" in LAYERS["balance"].abstract


def test_restored_lengths_are_those_of_the_bed(judged):
    """Length along the bed now, by adding up its pieces here; strain from both.

    The last pick lies beyond the end of the fault, so the bed ends one pick before.
    """
    top = rows(judged["OUTPUT"], "balance")[0]
    assert top["length_before"] == pytest.approx(30.0 * 238, abs=15.0)
    pieces = round(2.0 * top["length_before"])
    x = [ground.HANGING_WALL_CUTOFF + 0.5 * i for i in range(pieces + 1)]
    z = [ground.horizon(v) for v in x]
    length = sum(
        math.hypot(x[i + 1] - x[i], z[i + 1] - z[i]) for i in range(len(x) - 1)
    )
    assert top["unfolded_length"] == pytest.approx(length, rel=2e-3)
    strain = top["unfolded_length"] / top["length_before"] - 1.0
    assert top["strain"] == pytest.approx(strain)


def test_a_model_that_keeps_no_area_is_not_balanced(folder, tmp_path):
    """A row with the reason instead of numbers."""
    asked = {"model": "constant slip", "balance": True}
    study = study_in(folder, tmp_path / "study.json", asked)
    found = rows(run("runstudy", STUDY=str(study))["OUTPUT"], "balance")
    assert [r["status"] for r in found] == ["not balanced"] * 2
    assert all("does not keep area" in r["reason"] for r in found)
    assert all(r["lost_area"] is None for r in found)


def test_a_candidate_without_solution_has_its_reason(folder, tmp_path):
    """Compaction goes with vertical shear and the march only."""
    law = {"law": "shale", "surface_now_z": 0.0, "surface_then_z": 0.0}
    asked = {"compaction": law, "compare": EVERY_MODEL}
    study = study_in(folder, tmp_path / "study.json", asked)
    found = rows(run("runstudy", STUDY=str(study))["OUTPUT"], "method_comparison")
    lost = [r for r in found if r["status"] == "not solved"]
    assert {r["method"] for r in lost} >= {"constant slip", "constant bed length"}
    assert all(r["reason"] and r["deepest_z"] is None for r in lost)


def test_traces_say_how_far_and_why_they_are_trusted(judged, plain):
    """Last point trusted, what ends it, and the share of each source of error."""
    for trace in rows(judged["OUTPUT"], "predicted_fault_traces"):
        reached = trace["trusted_x"]
        marks = rows(judged["OUTPUT"], "fault_points")
        own = [p for p in marks if p["trace_id"] == trace["trace_id"]]
        at = [p["z"] for p in own if p["x"] == pytest.approx(reached)]
        assert at == pytest.approx([trace["trusted_z"]])
        assert reached < own[-1]["x"]
        assert "strips" in trace["trusted_until"] or "15 %" in trace["trusted_until"]
        shares = [v for k, v in trace.items() if k.startswith("sigma_")]
        assert len(shares) == 5
        known = [v for v in shares if v is not None]
        whole = math.sqrt(sum(v * v for v in known))
        assert whole == pytest.approx(own[-1]["sigma_z"], rel=1e-6)
        assert trace["sigma_shear_angle"] > trace["sigma_picks"] > 0
    (trace, _) = rows(plain["OUTPUT"], "predicted_fault_traces")
    assert trace["sigma_shear_angle"] is None  # nothing was stated of the angle


def test_figures_of_the_comparison_stand_beside_those_of_the_sections(judged, plain):
    """One more for each section where a comparison was asked for, in every format."""
    found = sorted(path.stem for path in Path(judged["PLOTS"]).glob("*.png"))
    sections = [name for name in found if name.startswith("section_")]
    assert len(sections) == 2
    compared = [name.replace("section_", "comparison_", 1) for name in sections]
    assert found == sorted(sections + compared)
    for kind in ("svg", "pdf"):
        assert len(list(Path(judged["PLOTS"]).glob(f"comparison_*.{kind}"))) == 2
    assert not list(Path(plain["PLOTS"]).glob("comparison_*"))


# ---- the single tool ---------------------------------------------------------------


def predicted(plain, output, **more):
    """Predict the fault from the picks of an earlier run."""
    sections, picks = plain["SECTION_LINES"], plain["PICKS"]
    return run(
        "predictfault",
        SECTIONS=sections,
        PICKS=picks,
        HORIZON="Top",
        OUTPUT=str(output),
        **more,
    )


def test_tool_compares_and_balances_as_the_study_does(plain, judged, tmp_path):
    """In words or as JSON, the numbers are those of the study."""
    words = "constant heave fit; constant heave 25; constant slip\nconstant bed length"
    one = predicted(plain, tmp_path / "a.gpkg", COMPARE=words, BALANCE=True)
    text = json.dumps(EVERY_MODEL)
    two = predicted(plain, tmp_path / "b.gpkg", COMPARE=text, BALANCE=True)

    def numbers(result, layer, field):
        found = rows(result["OUTPUT"], layer)
        return [row[field] for row in found]

    whole = numbers(judged, "method_comparison", "deepest_z")
    for result in (one, two):
        found = numbers(result, "method_comparison", "deepest_z")
        assert found == pytest.approx(whole, abs=1e-6)
        areas = numbers(result, "balance", "gap_area")
        wanted = numbers(judged, "balance", "gap_area")
        assert areas[2] is wanted[2] is None
        assert areas[:2] == pytest.approx(wanted[:2], rel=1e-9)
    record = json.loads(rows(one["OUTPUT"], "runs")[0]["study_json"])
    kept = record["construction"]["compare"]  # without what is at its default
    assert [{"model": "constant heave", **entry} for entry in kept] == EVERY_MODEL
    assert record["construction"]["balance"] is True


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("constant heave 80", "shear angle is 80"),
        ("constant slip 20", "has no shear angle"),
        ("magic", "no kinematic model 'magic'"),
        ('[{"model": "constant heave", "angle": 3}]', "unknown entries: 'angle'"),
        ('{"model": "constant heave"}', "a list is expected"),
        ("[oops", "not valid JSON"),
    ],
)
def test_a_comparison_that_cannot_be_is_refused_in_words(plain, tmp_path, text, words):
    """Said before anything runs."""
    from qgis.core import QgsApplication, QgsProcessingContext

    registry = QgsApplication.processingRegistry()
    algorithm = registry.createAlgorithmById("heaveline:predictfault")
    parameters = {
        "SECTIONS": plain["SECTION_LINES"],
        "PICKS": plain["PICKS"],
        "HORIZON": "Top",
        "OUTPUT": str(tmp_path / "f.gpkg"),
        "COMPARE": text,
    }
    ready, sentence = algorithm.checkParameterValues(parameters, QgsProcessingContext())
    assert not ready
    assert words in sentence
