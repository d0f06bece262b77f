"""A run as rows: what each layer says of a ground whose fault is known.

Source of the truth: `ground.py`, eq. 2 of methods.md with vertical shear.
"""

import dataclasses
import json
import math

import ground
import numpy as np
import pytest

PLACE = ground.Map()
MADE = "2031-05-04T03:02:01Z"
BEND = 2500.0


def features(stations, elevation, step=None):
    """Contours along strike, one at each x."""
    from heaveline.geomcore.sources import Features

    return Features.lines([np.array(PLACE.line(x, elevation(x))) for x in stations])


def trace():
    """The surface trace with dip and dip direction."""
    from heaveline.geomcore.sources import Features

    line = np.array(PLACE.line(0.0, 0.0))
    return Features.lines(
        [line], dip=[ground.fault_dip(0.0)], dip_azimuth=[PLACE.azimuth]
    )


def declared(key, role, name, **more):
    from heaveline.geomcore.sources import SourceDeclaration

    common = {"unit": "m", "sign": "elevation", "datum": "mean sea level"}
    return SourceDeclaration(key, role, name, **{**common, "sigma": 1.0, **more})


def drawn(name, *places):
    """A section line through (x, along strike) places."""
    from heaveline.geomcore.study import SectionLine

    return SectionLine(name, np.array([PLACE.at(*p) for p in places]))


LINES = {
    "straight": ((-1600.0, -1000.0), (9100.0, -1000.0)),
    "backwards": ((9100.0, 500.0), (-1600.0, 500.0)),
    "bent": ((-1600.0, 0.0), (BEND, 0.0), (9100.0, 1500.0)),
    "short": ((-1600.0, 1500.0), (6000.0, 1500.0)),
}


def study_of(**construction):
    from heaveline.geomcore.recipe import (
        ConstructionSpec,
        HorizonSpec,
        PicksSpec,
        Study,
    )

    sources = (
        declared("top", "horizon", "Top", layer="top contours", sigma=0.5),
        declared("marl", "horizon", "Marl"),
        declared("trace", "fault trace", "F"),
        declared("faults", "fault", "F"),
        declared(
            "echo",
            "horizon",
            "Echo",
            unit="ms",
            sign="depth",
            domain="time",
            time_way="two",
            datum="sea level",
        ),
    )
    spec = ConstructionSpec(
        "Top", further_horizons=(HorizonSpec("Marl", -300.0),), **construction
    )
    return Study(
        "Demo",
        "Big fault",
        "EPSG:32633",
        "m",
        "mean sea level",
        sources,
        spec,
        picks=PicksSpec(corridor=500.0, fault_buffer=0.0),
    )


def marl(x):
    return ground.horizon(x, -300.0)


def echo(x):
    """Two-way time of a reflector that is cut at x from 500 to 700, 40 ms of throw."""
    return 1000.0 if x < 600 else 1040.0


@pytest.fixture(scope="module")
def run(qgis_app):
    """The whole study on drawn sections, some of which cannot be used."""
    from heaveline.geomcore import study as core

    stations = [-1500.0 + 25.0 * i for i in range(420)]
    sources = {
        "top": features(ground.horizon_stations(), ground.horizon),
        "marl": features(ground.horizon_stations(-300.0), marl),
        "trace": trace(),
        "faults": features(ground.fault_stations(), ground.fault),
        "echo": features([x for x in stations if not 500 < x < 700], echo),
    }
    lines = [drawn(name, *places) for name, places in LINES.items()]
    lines.append(drawn("again", *LINES["straight"]))
    lines.append(drawn("beside", (1000.0, -2000.0), (9000.0, -2000.0)))
    return core.run(study_of(), sources, lines)


@pytest.fixture(scope="module")
def tables(run):
    """All tables of the run by layer name."""
    from heaveline.plugin.outputs.tables import run_tables

    return {t.name: t for t in run_tables(run, MADE, "9.9.9", {"QGIS": "3.99"})}


def rows_of(table, **wanted):
    return [
        (place, values)
        for place, values in table.rows
        if all(values.get(k) == v for k, v in wanted.items())
    ]


def the_row(table, **wanted):
    (found,) = rows_of(table, **wanted)
    return found


#: Layers that every run has (design, fixed, and the construction's own tables).
ALWAYS = {
    "section_lines",
    "picks",
    "picks_time",
    "predicted_fault_traces",
    "fault_points",
    "cutoffs",
    "predicted_horizons",
    "march_table",
    "input_statement",
    "runs",
}


def test_every_declared_layer_is_filled_with_declared_fields_only(tables):
    """All layers are there; no row has a field that its layer has not."""
    from heaveline.plugin.fields import LAYERS

    assert ALWAYS <= set(tables) <= set(LAYERS)
    for name, table in tables.items():
        assert len(table) > 0 or name not in ALWAYS
        for _, values in table.rows:
            assert set(values) <= set(LAYERS[name].names)


def test_every_row_carries_run_study_and_fault(tables, run):
    """What came from where can be told in every layer."""
    for table in tables.values():
        for _, values in table.rows:
            stamp = [values[k] for k in ("run_id", "study", "fault")]
            assert stamp == [run.run_id, "Demo", "Big fault"]


def test_no_row_holds_a_nan_or_a_numpy_value(tables):
    """Unknown is None; all else is plain Python, coordinates are finite."""
    for table in tables.values():
        for place, values in table.rows:
            if place is not None:
                assert np.isfinite(np.asarray(place, dtype=float)).all()
            for key, value in values.items():
                assert type(value) in (str, int, float, bool, type(None)), key
                assert value == value, key


def test_section_lines_say_what_became_of_them(tables):
    """Solved, not solved with the reason, and lines that gave no section at all."""
    table = tables["section_lines"]
    for name in LINES:
        place, values = the_row(table, section_id=name)
        assert len(place) == len(LINES[name])
        assert (values["status"], values["reason"]) == ("solved", None)
        assert values["hw_azimuth"] == pytest.approx(PLACE.azimuth)
    place, values = the_row(table, section_id="again")
    assert place is None
    assert values["status"] == "not solved"
    assert "same as that of section straight" in values["reason"]
    place, values = the_row(table, section_id="beside")
    assert len(place) == 2
    assert values["status"] == "not solved"
    assert values["reason"]
    bent = the_row(table, section_id="bent")[1]
    assert bent["obliquity"] == pytest.approx(math.degrees(math.atan(1500 / 6600)))
    straight = the_row(table, section_id="straight")[1]
    assert straight["length"] == pytest.approx(10700.0)
    assert straight["azimuth"] == pytest.approx(110.0)
    backwards = the_row(table, section_id="backwards")[1]
    assert backwards["azimuth"] == pytest.approx(290.0)
    assert backwards["hw_azimuth"] == pytest.approx(110.0)


@pytest.mark.parametrize("name", ["straight", "backwards", "bent"])
def test_traces_lie_on_their_line_and_on_the_true_fault(tables, name):
    """Within 0.3 % of the greatest depth, from the footwall end down dip."""
    place, values = the_row(tables["predicted_fault_traces"], section_id=name)
    x = np.array([PLACE.x_of(e, n) for e, n, _ in place])
    assert (np.diff(x) > 0).all()
    error = place[:, 2] - np.array([ground.fault(v) for v in x])
    assert np.abs(error).max() < 0.003 * ground.DETACHMENT
    assert values["z_top"] == pytest.approx(place[:, 2].max())
    assert values["z_base"] == pytest.approx(place[:, 2].min())
    along = distance_to_line(place[:, :2], LINES[name])
    assert along.max() < 1e-6


def distance_to_line(xy, places):
    """Distance of map points to the drawn line, by shapely."""
    import shapely

    line = shapely.LineString([PLACE.at(*p) for p in places])
    return shapely.distance(line, shapely.points(xy))


def test_a_trace_has_a_vertex_at_every_bend(tables):
    """The bend of the line is a vertex, its z that of the fault there."""
    place, _ = the_row(tables["predicted_fault_traces"], section_id="bent")
    bend = np.array(PLACE.at(BEND, 0.0))
    off = np.hypot(*(place[:, :2] - bend).T)
    at = int(np.argmin(off))
    assert off[at] < 1e-6
    assert place[at, 2] == pytest.approx(ground.fault(BEND), abs=12.0)


def test_a_trace_ends_with_its_line(run):
    """A fault that goes on beyond the drawn line is cut exactly at its ends."""
    frame = run.sections[list(LINES).index("bent")].frame
    x = np.linspace(-700.0, frame.x_max + 900.0, 60)
    line = frame.curve_on_map(x, -0.4 * x)
    ends = np.array([PLACE.at(*LINES["bent"][0]), PLACE.at(*LINES["bent"][-1])])
    assert line[[0, -1], :2] == pytest.approx(ends, abs=1e-6)
    assert line[[0, -1], 2] == pytest.approx([0.0, -0.4 * frame.x_max])
    assert (distance_to_line(line[:, :2], LINES["bent"]) < 1e-6).all()
    assert len(frame.curve_on_map(x[:5] - 5000.0, x[:5])) == 0
    assert len(frame.curve_on_map([], [])) == 0


def test_fault_points_beyond_the_line_are_not_drawn(run):
    """Nodes before the footwall end have no place on the map."""
    from heaveline.plugin.outputs.tables import Stamp, fault_tables

    section = run.sections[0]
    trace = section.prediction.trace
    shifted = dataclasses.replace(trace, x=trace.x - 1700.0)
    prediction = dataclasses.replace(section.prediction, trace=shifted)
    moved = dataclasses.replace(section, prediction=prediction)
    _, points, _ = fault_tables(Stamp("r", "s", "f"), [moved])
    assert 0 < len(points) == int((shifted.x >= -1e-3).sum()) < len(trace)


def test_heave_and_throw_are_those_of_the_ground(tables):
    """Along transport on all lines; the oblique line's own heave is longer."""
    for name in LINES:
        _, values = the_row(tables["predicted_fault_traces"], section_id=name)
        assert values["heave"] == pytest.approx(ground.HEAVE, abs=3.0)
        assert values["throw"] == pytest.approx(ground.THROW, abs=3.0)
        assert values["displacement"] == pytest.approx(
            math.hypot(values["heave"], values["throw"])
        )
        assert values["regional_z"] == pytest.approx(ground.REGIONAL, abs=2.0)
        assert values["regional_dip"] == pytest.approx(0.0, abs=0.2)
        assert values["apparent_heave"] == pytest.approx(values["heave"])
    # the cut-offs lie before the bend, so the apparent heave is the true one there


def test_apparent_heave_is_measured_along_an_oblique_line(run):
    """On a line 20 degrees off transport it is longer by 1/cos 20 (methods.md 12)."""
    from heaveline.geomcore.section import SectionFrame
    from heaveline.plugin.outputs.tables import Stamp, fault_tables

    ends = [(-1600.0, 0.0), (9100.0, 10700.0 * math.tan(math.radians(20)))]
    frame = SectionFrame("oblique", [PLACE.at(*e) for e in ends], PLACE.azimuth)
    result = dataclasses.replace(run.sections[0], frame=frame)
    _, values = fault_tables(Stamp("r", "s", "f"), [result])[0].rows[0]
    expected = values["heave"] / math.cos(math.radians(20))
    assert values["apparent_heave"] == pytest.approx(expected)


def test_traces_say_how_they_were_made(tables, run):
    """Method, solver, vocabularies, units, datum, digest and time."""
    _, values = the_row(tables["predicted_fault_traces"], section_id="straight")
    assert values["trace_id"] == "Big fault/straight/Top/constant heave/0"
    expected = {
        "horizon": "Top",
        "method": "constant heave",
        "solver": "march",
        "shear_angle": 0.0,
        "band": "best",
        "location_confidence": None,
        "length_unit": "m",
        "vertical_datum": "mean sea level",
        "inputs_digest": run.digest,
        "tool_version": "9.9.9",
        "made_at": MADE,
        # CGI vocabularies, as listed in the project's notes on conventions
        "fault_type_uri": (
            "http://resource.geosciml.org/classifier/cgi/faulttype/normal_fault"
        ),
        "movement_type_uri": (
            "http://resource.geosciml.org/classifier/cgi/faultmovementtype/dip_slip"
        ),
    }
    assert {k: values[k] for k in expected} == expected


def test_fault_points_follow_the_trace(tables, run):
    """One point a node, with dip, strip, sigma and what it rests on; no band yet."""
    points = rows_of(tables["fault_points"], section_id="straight")
    result = next(s for s in run.sections if s.frame.section_id == "straight")
    assert len(points) == len(result.prediction.trace)
    for place, values in points:
        assert place[2] == values["z"]
        x = PLACE.x_of(*place[:2])
        assert values["distance"] == pytest.approx(x + 1600.0)
        assert values["x"] == pytest.approx(values["distance"])
        assert values["dip"] == pytest.approx(ground.fault_dip(x), abs=4.0)
        assert "z_mid" not in values
    states = {v["constrained"] for _, v in points}
    assert states == {"known", "predicted"}
    assert max(v["strip"] for _, v in points) == result.prediction.strips


def test_the_march_can_be_checked_by_hand(tables):
    """Each strip's fault is the last one's plus B - R (eq. 2 of methods.md)."""
    found = [v for _, v in rows_of(tables["march_table"], section_id="straight")]
    assert [v["strip"] for v in found][:3] == [0, 1, 2]
    for row in found:
        assert row["increment"] == pytest.approx(row["bed"] - row["regional"])
    for before, row in zip(found[:-2], found[1:-1]):
        assert row["fault_z"] == pytest.approx(before["fault_z"] + row["increment"])


def test_cutoffs_of_every_horizon_stand_on_both_walls(tables):
    """Depth horizons with geometry and throw; the measured ones, not just the used."""
    for name in ("Top", "Marl"):
        found = rows_of(tables["cutoffs"], section_id="straight", horizon=name)
        assert [v["wall"] for _, v in found] == ["footwall", "hanging wall"]
        (foot, f), (hang, h) = found
        assert h["x"] - f["x"] == pytest.approx(f["heave"])
        assert foot[2] - hang[2] == pytest.approx(f["throw"])
        assert f["heave"] == h["heave"]
        # the bed is carried to the fault along a straight line, which it is not
        assert f["heave"] == pytest.approx(ground.HEAVE, abs=15.0)
        assert (f["domain"], f["throw_ms"], f["twt_ms"]) == ("depth", None, None)
        assert f["how"]
    used = rows_of(tables["cutoffs"], section_id="straight", horizon="Top")
    other = rows_of(tables["cutoffs"], section_id="straight", horizon="Marl")
    assert {v["trace_id"] for _, v in used} == {
        "Big fault/straight/Top/constant heave/0"
    }
    assert {v["trace_id"] for _, v in other} == {None}


def test_cutoffs_in_time_have_no_geometry_and_no_throw(tables):
    """Time is never a Z: the throw in ms has a field of its own."""
    found = rows_of(tables["cutoffs"], section_id="straight", horizon="Echo")
    assert len(found) == 2
    for place, values in found:
        assert place is None
        assert values["domain"] == "time"
        assert values["throw"] is None
        assert values["throw_ms"] == pytest.approx(40.0)
        assert values["heave"] == pytest.approx(200.0)
        assert values["trace_id"] is None
    assert [v["twt_ms"] for _, v in found] == pytest.approx([1000.0, 1040.0])


def test_reverse_separation_is_written_though_not_predicted(run):
    """Heave negative, throw kept, both cut-offs on the map."""
    from heaveline.geomcore.cutoffs import SeparationResult
    from heaveline.geomcore.errors import Unsolved
    from heaveline.geomcore.separation import CutOff, Separation
    from heaveline.plugin.outputs.tables import Stamp, cutoffs_table, fault_tables

    overlap = Separation(
        "Top", CutOff("footwall", 900.0, -500.0), CutOff("hanging wall", 750.0, -620.0)
    )
    refused = dataclasses.replace(
        run.sections[0],
        prediction=Unsolved("straight", "reverse-separation", "reverse"),
        separations=(SeparationResult(overlap, 118.0),),
        horizons=(),
    )
    stamp = Stamp("r", "s", "f")
    assert [len(t) for t in fault_tables(stamp, [refused])] == [0, 0, 0]
    found = cutoffs_table(stamp, [refused]).rows
    assert [place[2] for place, _ in found] == [-500.0, -620.0]
    for _, values in found:
        assert values["heave"] == values["apparent_heave"] == -150.0
        assert values["throw"] == 120.0
        assert values["level_difference"] == 118.0
        assert values["trace_id"] is None


def test_cutoffs_beyond_the_line_have_no_place(run):
    """A cut-off found beyond the drawn line keeps its numbers, not a map place."""
    from heaveline.geomcore.cutoffs import SeparationResult
    from heaveline.geomcore.separation import CutOff, Separation
    from heaveline.plugin.outputs.tables import Stamp, cutoffs_table

    far = Separation(
        "Top", CutOff("footwall", -50.0, -500.0), CutOff("hanging wall", 750.0, -620.0)
    )
    result = dataclasses.replace(
        run.sections[0], separations=(SeparationResult(far, None),)
    )
    (foot, values), (hang, _) = cutoffs_table(Stamp("r", "s", "f"), [result]).rows
    assert foot is None
    assert hang is not None
    assert (values["distance"], values["apparent_heave"]) == (None, None)
    assert values["heave"] == 800.0


def test_picks_keep_source_feature_and_wall(tables):
    """Each pick on its line, with layer, feature number, wall and sigma."""
    found = rows_of(tables["picks"], section_id="straight", name="Top")
    assert len(found) == len(ground.horizon_stations())
    for place, values in found:
        x = PLACE.x_of(*place[:2])
        assert place[2] == pytest.approx(ground.horizon(x))
        assert values["source_layer"] == "top contours"
        assert values["source"] == "top"
        assert values["sigma_z"] == 0.5
        beyond = x > ground.FOOTWALL_CUTOFF
        assert values["wall"] == ("hanging wall" if beyond else "footwall")
        station = ground.horizon_stations()[values["source_fid"] - 1]
        assert x == pytest.approx(station, abs=1e-6)
    assert {v["kind"] for _, v in rows_of(tables["picks"], name="F")} == {"fault"}


def test_time_picks_stand_apart_and_flat(tables):
    """Two-way time is an attribute of a plain point."""
    assert rows_of(tables["picks"], name="Echo") == []
    found = rows_of(tables["picks_time"], section_id="straight")
    assert {v["name"] for _, v in found} == {"Echo"}
    assert {len(place) for place, _ in found} == {2}
    assert {v["twt_ms"] for _, v in found} == {1000.0, 1040.0}
    assert {v["sigma_twt"] for _, v in found} == {1.0}


def test_picks_of_unknown_elevation_have_no_geometry(run):
    """They stay as rows with the reason."""
    from heaveline.plugin.outputs.tables import Stamp, picks_tables

    section = run.sections[0]
    z = section.picks.z.copy()
    z[3] = np.nan
    picks = dataclasses.replace(section.picks, z=z)
    pulled = [(section.frame, picks, section.picks_time)]
    depth, _ = picks_tables(Stamp("r", "s", "f"), pulled)
    assert [i for i, (place, _) in enumerate(depth.rows) if place is None] == [3]


def test_further_horizons_are_drawn_and_judged(tables):
    """The horizon not used for the fault lies where it is, with its misfit."""
    place, values = the_row(tables["predicted_horizons"], section_id="straight")
    assert values["horizon"] == "Marl"
    assert values["heave"] == pytest.approx(ground.HEAVE, abs=5.0)
    assert values["misfit_n"] > 100
    assert values["misfit_rms"] < values["misfit_max"] < 15.0
    assert values["regional_z"] == pytest.approx(ground.REGIONAL - 300.0, abs=2.0)
    x = np.array([PLACE.x_of(e, n) for e, n, _ in place])
    error = place[:, 2] - np.array([marl(v) for v in x])
    assert np.abs(error[1:]).max() < 15.0


def test_a_horizon_that_cannot_be_predicted_says_why(run):
    """A row without geometry with the reason; nothing is dropped silently."""
    from heaveline.geomcore.errors import Unsolved
    from heaveline.plugin.outputs.tables import Stamp, predicted_horizons_table

    lost = Unsolved("straight", "no-cutoff", "Coal: its regional misses the fault.")
    table = predicted_horizons_table(
        Stamp("r", "s", "f"), [(run.sections[0].frame, "t", lost)]
    )
    (place, values) = table.rows[0]
    assert place is None
    assert values["misfit_note"] == "Coal: its regional misses the fault."


def test_the_input_statement_has_one_row_a_source(tables, run):
    """Counts in, refused and used, with ranges before and after conversion."""
    table = tables["input_statement"]
    assert [v["source"] for _, v in table.rows] == [s.key for s in run.study.sources]
    _, top = the_row(table, source="top")
    assert top["count_in"] == len(ground.horizon_stations())
    assert (top["count_refused"], top["refused"]) == (0, None)
    assert top["used"] + top["count_left_out"] == top["picks"]
    assert top["z_max"] == pytest.approx(ground.REGIONAL)
    _, echoes = the_row(table, source="echo")
    assert (echoes["raw_min"], echoes["z_max"]) == (1000.0, -1000.0)


def test_refused_features_are_counted_by_reason(run):
    """Number and reason, several of them in one field."""
    from heaveline.plugin.outputs.tables import Stamp, input_statement_table

    counted = dataclasses.replace(
        run.statement[0],
        refused={"no geometry": 2, "null code": 1},
        left_out={"within 50 of the fault": 7},
    )
    (_, values) = input_statement_table(Stamp("r", "s", "f"), [counted]).rows[0]
    assert values["refused"] == "2 no geometry; 1 null code"
    assert values["count_refused"] == 3
    assert values["left_out"] == "7 within 50 of the fault"


def test_the_run_can_be_repeated_from_its_row(tables, run):
    """The recipe in the row reads back to the same study; counts and versions too."""
    from heaveline.geomcore.recipe import Study

    place, values = tables["runs"].rows[0]
    assert place is None
    assert Study.from_json(values["study_json"]) == run.study
    assert json.loads(values["parameters"])["horizon"] == "Top"
    versions = json.loads(values["versions"])
    assert versions["QGIS"] == "3.99"
    assert versions["Heaveline"] == "9.9.9"
    assert (values["sections"], values["solved"]) == (6, 4)
    counts = json.loads(values["counts"])
    assert counts["picks"] == len(tables["picks"])
    assert values["transport_azimuth"] == pytest.approx(110.0)
    assert "dip direction" in values["transport_from"]


def test_warnings_stand_one_a_line(run):
    """Doubts of section and prediction, each once; null where there are none."""
    from heaveline.geomcore.errors import Doubt
    from heaveline.plugin.outputs.tables import Stamp, section_lines_table

    doubts = (
        Doubt("oblique-section", "oblique.", "section straight"),
        Doubt("oblique-section", "oblique.", "section straight"),
        Doubt("x", "of another.", "section bent"),
    )
    result = dataclasses.replace(
        run.sections[0], doubts=(Doubt("a", "thin.", "here"),), prediction=None
    )
    result = dataclasses.replace(result, prediction=run.sections[0].prediction)
    table = section_lines_table(
        Stamp("r", "s", "f"), [result.frame], (), [result], doubts
    )
    words = table.rows[0][1]["warnings"].split("\n")
    assert words[:2] == ["section straight: oblique.", "here: thin."]
    assert len(words) == len(set(words))
    bare = section_lines_table(Stamp("r", "s", "f"), [result.frame])
    assert bare.rows[0][1]["warnings"] is None


# ---- and back ----------------------------------------------------------------------


@pytest.fixture(scope="module")
def written(tables, tmp_path_factory):
    """The tables of the run in a GeoPackage."""
    from heaveline.plugin.layers import write_geopackage
    from qgis.core import (
        QgsCoordinateReferenceSystem,
        QgsCoordinateTransformContext,
        QgsProject,
    )

    path = tmp_path_factory.mktemp("run") / "r.gpkg"
    write_geopackage(
        path,
        list(tables.values()),
        QgsCoordinateReferenceSystem("EPSG:32633"),
        QgsCoordinateTransformContext(),
        project=QgsProject(),
    )
    return path


def opened(path, name):
    from qgis.core import QgsVectorLayer

    layer = QgsVectorLayer(f"{path}|layername={name}", name, "ogr")
    assert layer.isValid()
    return layer


def place_of_study():
    from qgis.core import QgsCoordinateReferenceSystem, QgsCoordinateTransformContext

    return QgsCoordinateReferenceSystem("EPSG:32633"), QgsCoordinateTransformContext()


def test_picks_come_back_as_they_went(written, run):
    """Every column of every section, in depth and time, to the last bit."""
    from heaveline.plugin.layers import read_picks

    found = read_picks(
        opened(written, "picks"), opened(written, "picks_time"), *place_of_study()
    )
    for section in run.sections:
        back = found[section.frame.section_id]
        for one, other in (
            (back.depth, section.picks),
            (back.time, section.picks_time),
        ):
            assert (one.section_id, one.domain) == (other.section_id, other.domain)
            for name in ("x", "distance", "z", "off_section", "sigma_z", "dip"):
                assert np.array_equal(
                    getattr(one, name), getattr(other, name), equal_nan=True
                ), name
            for name in ("kind", "name", "wall", "used", "reason", "source"):
                assert getattr(one, name).tolist() == getattr(other, name).tolist()
            assert one.source_fid.tolist() == other.source_fid.tolist()


def test_picks_without_elevation_come_back_unused(tmp_path, run):
    """A row without geometry is a pick whose z is unknown and which is not used."""
    from heaveline.plugin.layers import read_picks, write_geopackage
    from heaveline.plugin.outputs.tables import Stamp, picks_tables
    from qgis.core import QgsProject

    section = run.sections[0]
    z, used = section.picks.z.copy(), section.picks.used.copy()
    z[3], used[3] = np.nan, False
    picks = dataclasses.replace(section.picks, z=z, used=used)
    pulled = [(section.frame, picks, section.picks_time)]
    path = tmp_path / "p.gpkg"
    crs, context = place_of_study()
    tables = picks_tables(Stamp("r", "s", "f"), pulled)
    write_geopackage(path, tables, crs, context, project=QgsProject())
    back = read_picks(opened(path, "picks"), None, crs, context)["straight"].depth
    assert np.array_equal(back.z, z, equal_nan=True)
    assert not back.used[3]
    assert len(back) == len(picks)


def test_the_same_run_comes_from_the_picks_of_the_layer(written, run):
    """Construction from the layers gives the fault of the run in one go."""
    from heaveline.geomcore import study as core
    from heaveline.plugin.layers import read_picks

    picks = read_picks(opened(written, "picks"), None, *place_of_study())
    for section in run.sections:
        if not section.prediction:
            continue
        own = picks[section.frame.section_id]
        again = core.construct(run.study, section.frame, own)
        assert np.array_equal(again.prediction.trace.z, section.prediction.trace.z)


def test_faults_come_back_into_their_sections(written, run):
    """X and z, regional and oblique heave as they were when the fault was made."""
    from heaveline.geomcore.study import GivenTrace
    from heaveline.plugin.layers import read_traces

    frames = [s.frame for s in run.sections]
    found = read_traces(
        opened(written, "predicted_fault_traces"), frames, *place_of_study()
    )
    assert set(found) == set(LINES)
    for section in run.sections:
        if section.frame.section_id not in ("straight", "backwards"):
            continue
        back, own = found[section.frame.section_id], GivenTrace.of(section.prediction)
        assert back.x == pytest.approx(own.x, abs=1e-6)
        assert np.array_equal(back.z, own.z)
        assert (back.horizon, back.shear_angle) == (own.horizon, own.shear_angle)
        assert back.oblique_heave == pytest.approx(own.oblique_heave)
        at = np.array([0.0, 4000.0])
        assert back.regional(at) == pytest.approx(own.regional(at), abs=1e-6)


def edited(path, name, change):
    """Copy a layer into memory and change its features."""
    from qgis.core import QgsFeatureRequest

    layer = opened(path, name).materialize(QgsFeatureRequest())
    layer.startEditing()
    change(layer)
    assert layer.commitChanges()
    return layer


@pytest.mark.parametrize(
    ("code", "words"),
    [
        ("several-traces", "more than one trace"),
        ("bad-trace", "has no heave"),
        ("no-field", "'throw'"),
    ],
)
def test_traces_that_cannot_be_used_are_refused(written, run, code, words):
    """Two traces in one section, a missing value, a missing field."""
    from heaveline.plugin.layers import read_traces
    from qgis.core import QgsFeature

    def change(layer):
        first = next(layer.getFeatures())
        if code == "several-traces":
            layer.addFeature(QgsFeature(first))
        elif code == "bad-trace":
            layer.changeAttributeValue(
                first.id(), layer.fields().indexOf("heave"), None
            )
        else:
            layer.deleteAttribute(layer.fields().indexOf("throw"))

    layer = edited(written, "predicted_fault_traces", change)
    frames = [s.frame for s in run.sections]
    with pytest.raises(ValueError, match=words) as caught:
        read_traces(layer, frames, *place_of_study())
    assert caught.value.code == code
    assert layer.name() in str(caught.value)


def test_picks_layers_of_others_are_refused(written):
    """A layer without our fields, and one whose x is missing."""
    from heaveline.plugin.layers import read_picks

    with pytest.raises(ValueError, match="'x'") as caught:
        read_picks(opened(written, "section_lines"), None, *place_of_study())
    assert caught.value.code == "no-field"

    def change(layer):
        first = next(layer.getFeatures())
        layer.changeAttributeValue(first.id(), layer.fields().indexOf("x"), None)

    with pytest.raises(ValueError, match="no section_id or no x") as caught:
        read_picks(edited(written, "picks", change), None, *place_of_study())
    assert caught.value.code == "bad-picks-layer"
