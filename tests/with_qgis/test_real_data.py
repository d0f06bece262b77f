"""Openly licensed seismic, field and fault data against figures worked out apart.

Source of every figure: expected_figures.csv of the open data (plain numpy, its column
`how`), within its own tolerance. The data stay where they are; where they are absent
these tests are skipped and the summary of the run says so.
"""

import collections
import json
import sqlite3
from contextlib import closing

import numpy as np
import pytest
import real_data
from real_data import along_line, by_section, only_separation, run_study

pytestmark = [pytest.mark.published, pytest.mark.usefixtures("qgis_app")]

F3 = ["F3-IL110", "F3-IL134", "F3-IL278", "F3-IL302", "F3-IL326"]
PENOBSCOT = ["PEN-XL1139", "PEN-XL1159", "PEN-XL1179", "PEN-XL1199"]
TIME = [("f3", n) for n in F3] + [("penobscot", n) for n in PENOBSCOT]
REEK_CODES = ("0a", "0b", "1a", "1b", "2a", "2b", "3a", "3b", "4a", "5a", "5b")
REEK = [f"REEK-P{code}" for code in REEK_CODES]
MALAWI = ["Zomba", "Bilila-Mtakataka", "Usisya Main", "Thyolo"]
DEPTH_AT = "constant-heave vertical-shear fault depth at {} x heave from FW cutoff"
HEAVES = (1, 2, 5, 10, 15, 20)
LEVELS = "horizon level of the block on the start side / far side"


class Runs:
    """Runs of the data sets, each made once."""

    def __init__(self, data, folder):
        self.data, self.folder, self.made = data, folder, {}
        self.horizons = {}

    def horizon(self, key):
        """One of the two time horizons."""
        if key not in self.horizons:
            own = self.folder / key
            own.mkdir()
            self.horizons[key] = getattr(real_data, key)(self.data, own)
        return self.horizons[key]

    def of(self, key, document):
        """Run a study; the same document is run once."""
        name = key, json.dumps(document, sort_keys=True)
        if name not in self.made:
            words = real_data.Words()
            run = run_study(document, self.data, words)
            self.made[name] = run, words.warnings
        return self.made[name]

    def section(self, key, name, *args, **more):
        """Give one section of a time horizon's run."""
        run, _ = self.of(key, self.horizon(key).study(*args, **more))
        return by_section(run)[name]


@pytest.fixture(scope="module")
def data(open_data, tmp_path_factory):
    """A copy of the open data that QGIS may open."""
    return real_data.copied(open_data, tmp_path_factory.mktemp("open_data"))


@pytest.fixture(scope="module")
def runs(data, tmp_path_factory):
    return Runs(data, tmp_path_factory.mktemp("real"))


@pytest.fixture(scope="module")
def reek(data):
    return real_data.reek(data)


# ---- the table ---------------------------------------------------------------------


@pytest.mark.parametrize(
    ("dataset", "items"),
    [
        ("f3_fs4", ["file", *F3]),
        ("penobscot_south", ["file", *PENOBSCOT]),
        # OP_6 is a well: the paths of wells are no part of sections and picks
        ("reek", [*REEK, "OP_6"]),
        ("malawi_faults", [*MALAWI, "all"]),
    ],
)
def test_table_holds_no_item_that_is_not_looked_at(data, dataset, items):
    """A section added to the table is not passed over in silence."""
    assert sorted(real_data.read_figures(data, dataset)) == sorted(items)


# ---- horizons in two-way time ------------------------------------------------------


@pytest.mark.parametrize("key", ["f3"])
def test_every_node_of_the_survey_is_read_with_its_time(runs, key):
    """The input statement counts the nodes and tells their range as it was read."""
    horizon = runs.horizon(key)
    run, _ = runs.of(key, horizon.study(given=True))
    count = next(c for c in run.statement if c.key == "horizon")
    rows = horizon.figures["file"]
    assert (count.count_in, count.refused) == (int(rows["points"].value), {})
    rows["twt min"].check(count.raw_min, "smallest time")
    rows["twt max"].check(count.raw_max, "largest time")
    assert count.conversion.endswith("two-way time in ms")


def test_every_node_of_a_text_file_is_read_with_its_time(runs):
    """The published table of Penobscot, as delimited text by its line numbers."""
    path = runs.data / "penobscot_south" / "penobscot_horB_south.csv"
    uri = f"delimitedtext:{path.as_uri()}?xField=inline&yField=crossline"
    declared = real_data.in_time("csv", "horizon", "B", uri)
    declared["z"] = {"source": "field", "field": "twt_ms"}
    got = real_data.read_features(declared, real_data.ANY_METRES)
    rows = runs.horizon("penobscot").figures["file"]
    assert (len(got.value), got.refused) == (int(rows["points"].value), {})
    rows["twt min"].check(got.value.min(), "smallest time")
    rows["twt max"].check(got.value.max(), "largest time")


@pytest.mark.parametrize("name", F3)
def test_section_is_as_long_as_its_nodes_reach(runs, name):
    """Length of a drawn line in the study's CRS."""
    frame = runs.section("f3", name, given=True).frame
    runs.horizon("f3").figures[name]["section length"].check(frame.length, name)


@pytest.mark.parametrize(("key", "name"), TIME)
def test_given_cut_offs_give_heave_and_throw_in_time(runs, key, name):
    """With the table's cut-offs: their walls, heave in metres, throw in ms."""
    rows = runs.horizon(key).figures[name]
    result = runs.section(key, name, given=True)
    cut = only_separation(result).separation
    assert (cut.domain, cut.footwall.how) == ("time", "given")
    rows["FW cutoff twt"].check(-cut.footwall.z, name)
    rows["HW cutoff twt"].check(-cut.hanging_wall.z, name)
    rows["heave along section"].check(cut.heave, name)
    rows["heave along section"].check(along_line(result.frame, cut), name)
    rows["throw"].check(cut.throw, name)
    for wall, at in (("FW", cut.footwall.x), ("HW", cut.hanging_wall.x)):
        if f"{wall} cutoff distance" in rows:
            distance = result.frame.distance_at(at)
            rows[f"{wall} cutoff distance"].check(distance, name)


@pytest.mark.parametrize(("key", "name"), TIME)
def test_level_difference_beside_given_cut_offs(runs, key, name):
    """Straight lines outside the given cut-offs, read at the middle of the gap."""
    rows = runs.horizon(key).figures[name]
    measured = only_separation(runs.section(key, name, given=True))
    rows["vertical separation at mid gap"].check(measured.level_difference, name)


@pytest.mark.parametrize(("key", "name"), TIME)
@pytest.mark.parametrize("side", ["along the section", "from the levels"])
def test_gap_found_by_the_tool_gives_the_vertical_separation(runs, key, name, side):
    """The tracked horizon and a trace through the gap: the tool finds its edges."""
    rows = runs.horizon(key).figures[name]
    transport = None if side == "along the section" else {}
    result = runs.section(key, name, given=False, transport=transport)
    measured = only_separation(result)
    assert measured.separation.footwall.how == "edge of the fault gap"
    assert measured.doubts == ()
    left_out = result.picks_time.reason == "tracked across the fault gap"
    assert left_out.any()
    rows["vertical separation at mid gap"].check(measured.level_difference, name)


@pytest.mark.parametrize(("key", "name"), TIME)
@pytest.mark.parametrize("off", [-50.0, 50.0])
def test_trace_beside_the_gap_finds_the_same_separation(runs, key, name, off):
    """A trace fifty metres off the middle of the gap leads to the same gap."""
    rows = runs.horizon(key).figures[name]
    measured = only_separation(runs.section(key, name, given=False, off=off))
    rows["vertical separation at mid gap"].check(measured.level_difference, name)


@pytest.mark.parametrize("key", ["f3", "penobscot"])
def test_side_of_a_time_horizon_comes_from_its_levels(runs, key):
    """Times count down: the block with the greater time is the hanging wall."""
    horizon = runs.horizon(key)
    run, _ = runs.of(key, horizon.study(given=False, transport={}))
    assert "lower block" in run.transport_from
    assert "sections)" not in run.transport_from  # all of them agree
    turn = (run.transport_azimuth - horizon.along + 180.0) % 360.0 - 180.0
    assert abs(turn) < 45.0


@pytest.mark.parametrize("given", [True, False])
@pytest.mark.parametrize(("key", "name"), TIME)
def test_times_are_not_constructed_from(runs, key, name, given):
    """No fault is predicted from times; what to do is said."""
    result = runs.section(key, name, given=given)
    assert not result.prediction
    assert result.prediction.code == "time-domain"
    assert "two-way times" in result.prediction.reason
    assert "velocity" in result.prediction.reason
    cut = only_separation(result).separation
    assert np.isnan([cut.displacement, cut.cutoff_dip]).all()


def test_layer_without_crs_is_taken_as_it_stands_and_that_is_said(runs):
    """The source of Penobscot knows no datum; nothing is transformed in silence."""
    horizon = runs.horizon("penobscot")
    run, warnings = runs.of("penobscot", horizon.study(given=True))
    told = [w for w in warnings if "has no CRS" in w]
    assert len(told) == 3  # horizon, cut-offs, sections
    name = horizon.names[0]
    drawn = by_section(run)[name].frame.vertices
    np.testing.assert_array_equal(drawn, horizon.lines[name])


@pytest.mark.parametrize("name", PENOBSCOT)
@pytest.mark.parametrize("heaves", HEAVES)
def test_arithmetic_of_the_march_on_real_nodes(runs, name, heaves):
    """Times declared as metres on purpose (1 ms = 1 m): the march step by step.

    That checks arithmetic only; there is no fault at depth to compare with.
    """
    rows = runs.horizon("penobscot").figures[name]
    result = runs.section(
        "penobscot",
        name,
        given=True,
        declare=real_data.in_depth,
        construction={"regional": {"dip": 0.0}},
    )
    cut, trace = result.prediction.separation, result.prediction.trace
    depth = -trace.z_at(cut.footwall.x + heaves * cut.heave)
    rows[DEPTH_AT.format(heaves)].check(depth, name)


# ---- cut-off loops -----------------------------------------------------------------


@pytest.fixture(params=REEK)
def loop_section(request, runs, reek):
    """One section over a loop: its figures, across strike, and along the line."""
    name = request.param
    rows, loop = reek.figures[name], real_data.loop_of(name)
    normal, angle = reek.across_strike(name)
    along = rows["downthrown towards azimuth"].number
    made = {}
    for way, transport in (("across", normal), ("along", along)):
        run, _ = runs.of("reek", reek.study(loop, [name], transport, lines=True))
        made[way] = run.sections[0]
    return name, rows, made, angle


def is_overlap(rows):
    """Tell whether the table calls a section an overlap."""
    kind = rows["kind"].value
    assert kind.startswith(("gap: normal", "overlap: reverse")), kind
    return kind.startswith("overlap")


def test_cut_offs_of_a_loop_are_where_the_section_crosses_it(loop_section):
    """Both crossings with their elevation and their wall, in gaps and overlaps."""
    name, rows, made, _ = loop_section
    frame = made["across"].frame
    cut = only_separation(made["across"]).separation
    for short, own in (("FW", cut.footwall), ("HW", cut.hanging_wall)):
        rows[f"{short} cutoff distance"].check(frame.distance_at(own.x), name)
        rows[f"{short} cutoff z"].check(-own.z, name)


def test_heave_and_throw_of_a_loop(loop_section):
    """Heave along the line and along transport, throw, dip between the cut-offs."""
    name, rows, made, _ = loop_section
    true = only_separation(made["across"]).separation
    seen = only_separation(made["along"]).separation
    rows["heave along section"].check(seen.heave, name)
    rows["heave along section"].check(along_line(made["across"].frame, true), name)
    rows["throw"].check(true.throw, name)
    dip = 180.0 - seen.cutoff_dip if seen.heave < 0 else seen.cutoff_dip
    rows["apparent dip"].check(dip, name)
    rows["true heave"].check(true.heave, name)


def test_obliquity_of_a_section_over_a_loop(loop_section):
    """The angle between the section and the normal to strike is its obliquity."""
    name, rows, made, angle = loop_section
    rows["angle section to strike normal"].check(angle, name)
    rows["angle section to strike normal"].check(made["across"].frame.obliquity, name)


@pytest.fixture(params=[True, False], ids=["raster and polygons", "nodes and lines"])
def loop_runs(request, runs, reek):
    """All loops without any word on the hanging-wall side; sections by name."""
    sections = {}
    for loop, names in reek.polygons.items():
        document = reek.study(
            loop, names, gridded=request.param, lines=not request.param
        )
        run, _ = runs.of("reek", document)
        assert not run.unsolved
        assert "lower block of Top" in run.transport_from
        sections.update(by_section(run))
    assert sorted(sections) == REEK
    return sections


@pytest.mark.parametrize("name", REEK)
def test_downthrown_side_needs_no_declaration(loop_runs, reek, name):
    """The lower block is found from the horizon: no side is declared, none guessed."""
    frame = loop_runs[name].frame
    along = frame.azimuth if frame.forward else (frame.azimuth + 180.0) % 360.0
    reek.figures[name]["downthrown towards azimuth"].check(along, name)


@pytest.mark.parametrize("name", REEK)
def test_overlaps_are_reverse_and_gaps_are_normal(loop_runs, reek, name):
    """Not every fault polygon is a gap: an overlap has a negative heave.

    Its throw is kept and its cut-offs are there; only the prediction is refused.
    """
    rows, result = reek.figures[name], loop_runs[name]
    cut = only_separation(result).separation
    rows["throw"].check(cut.throw, name)
    rows["heave along section"].check(along_line(result.frame, cut), name)
    # the horizon is folded: that its regional is not straight is a fair doubt
    assert {d.code for d in only_separation(result).doubts} <= {"regional-misfit"}
    if is_overlap(rows):
        assert cut.heave < 0 < cut.throw
        assert not result.prediction
        assert result.prediction.code == "reverse-separation"
        assert "reverse separation" in result.prediction.reason
    else:
        assert cut.heave > 0
        assert result.prediction, result.prediction.reason


@pytest.mark.parametrize("name", REEK)
def test_levels_of_both_blocks_are_those_of_the_surface(loop_runs, reek, name):
    """Picks from the rotated raster and from its nodes carry the table's levels."""
    result = loop_runs[name]
    bed, marks = result.picks.of("horizon"), result.picks.of("cutoff")
    d = result.frame.distance_at(bed.x)
    edges = np.sort(result.frame.distance_at(marks.x))
    expected = map(float, reek.figures[name][LEVELS].value.split("/"))
    tolerance = float(reek.figures[name][LEVELS].tolerance)
    for at, side, level in zip(edges, (-1, 1), expected):
        off = side * (d - at)
        near = (off >= 80.0) & (off <= 300.0)
        line = np.polyfit(off[near], -bed.z[near], 1)
        assert np.polyval(line, 0.0) == pytest.approx(level, abs=tolerance)


# ---- as a user runs it -------------------------------------------------------------


def run_algorithm(document, folder):
    """Run a study by its algorithm; give the rows of the GeoPackage by layer."""
    import processing

    study, output = folder / "study.json", folder / "results.gpkg"
    study.write_text(json.dumps(document), encoding="utf-8")
    parameters = {"STUDY": str(study), "OUTPUT": str(output)}
    processing.run("heaveline:runstudy", parameters)
    with closing(sqlite3.connect(f"{output.as_uri()}?mode=ro", uri=True)) as file:
        file.row_factory = sqlite3.Row
        tables = [r[0] for r in file.execute("SELECT table_name FROM gpkg_contents")]
        known = {"cutoffs", "section_lines", "picks", "picks_time", "fault_points"}
        known |= {"predicted_fault_traces", "march_table", "input_statement"}
        rows = {}
        for name in sorted(known & set(tables)):
            found = file.execute(f'SELECT * FROM "{name}"')  # names from the set above
            rows[name] = [dict(row) for row in found]
    return rows


def has_no_place(geometry):
    """Tell whether a GeoPackage geometry is null or empty (its flag of value 16)."""
    return geometry is None or bool(geometry[3] & 16)


def walls(rows, name):
    """Give the footwall's and the hanging wall's row of a section."""
    own = {r["wall"]: r for r in rows["cutoffs"] if r["section_id"] == name}
    return own["footwall"], own["hanging wall"]


@pytest.mark.parametrize("given", [True, False], ids=["cut-offs given", "gap found"])
@pytest.mark.parametrize("key", ["f3", "penobscot"])
def test_time_stays_time_in_the_written_layers(runs, tmp_path, key, given):
    """Through the algorithm into a GeoPackage: ms where there are ms, no metre of z."""
    horizon = runs.horizon(key)
    rows = run_algorithm(horizon.study(given), tmp_path)
    assert len(rows["cutoffs"]) == 2 * len(horizon.names)
    for name in horizon.names:
        figures = horizon.figures[name]
        for row in walls(rows, name):
            assert row["domain"] == "time"
            assert row["throw"] is None
            assert has_no_place(row["geom"])
            figures["vertical separation at mid gap"].check(
                row["level_difference"], name
            )
            if given:
                figures["throw"].check(row["throw_ms"], name)
                figures["heave along section"].check(row["apparent_heave"], name)
        foot, hang = walls(rows, name)
        assert hang["twt_ms"] - foot["twt_ms"] == pytest.approx(foot["throw_ms"])
    for empty in ("picks", "predicted_fault_traces", "fault_points", "march_table"):
        assert not rows.get(empty), empty
    assert {r["status"] for r in rows["section_lines"]} == {"not solved"}
    assert all("two-way times" in r["reason"] for r in rows["section_lines"])
    assert rows["picks_time"]


@pytest.mark.parametrize("loop", [0, 1, 3])
def test_overlaps_in_the_written_layers(reek, tmp_path, loop):
    """Loop 1 overlaps, loop 3 does in part, loop 0 is a gap: the file says which."""
    names = reek.polygons[loop]
    rows = run_algorithm(reek.study(loop, names), tmp_path)
    lines = {r["section_id"]: r for r in rows["section_lines"]}
    for name in names:
        figures = reek.figures[name]
        foot, hang = walls(rows, name)
        for row in (foot, hang):
            figures["throw"].check(row["throw"], name)
            figures["heave along section"].check(row["apparent_heave"], name)
            assert (row["domain"], row["throw_ms"]) == ("depth", None)
            assert not has_no_place(row["geom"])
        figures["FW cutoff distance"].check(foot["distance"], name)
        figures["HW cutoff distance"].check(hang["distance"], name)
        if is_overlap(figures):
            assert foot["heave"] < 0
            assert "reverse separation" in lines[name]["reason"]
        else:
            assert foot["heave"] > 0
            assert lines[name]["status"] == "solved"


# ---- fault traces in degrees -------------------------------------------------------


def malawi(data, where="1 = 1", **more):
    """Declare traces of the active fault database as fault traces of a study."""
    file = data / "malawi_faults" / "mafd.gpkg"
    uri = f"{file}|layername=malawi_active_fault_database|subset={where}"
    declared = {
        "key": "trace",
        "role": "fault trace",
        "name": "Fault",
        "unit": "m",
        "sign": "elevation",
        "datum": "mean sea level",
        "z": {"source": "constant", "value": 0.0},
        "dip_azimuth_field": "dip_dir",
        "uri": uri,
    }
    return {**declared, **more}


def malawi_trace(data, name):
    return malawi(data, f"\"fault_name\" = '{name}'")


@pytest.mark.parametrize("name", MALAWI)
def test_trace_in_degrees_has_its_length_in_the_study_crs(data, name):
    """Multi-part traces in degrees are measured after they are projected."""
    got = real_data.read_features(malawi_trace(data, name), "EPSG:32736")
    figures = real_data.read_figures(data, "malawi_faults")[name]
    step = np.hypot(*np.diff(got.xy, axis=0).T)
    within = np.diff(got.part_of_vertex) == 0  # not from one part to the next
    figures["plane length in EPSG:32736"].check(step[within].sum(), name)
    assert len(set(got.fid)) == 1
    parts = {"Zomba": 1, "Bilila-Mtakataka": 2, "Usisya Main": 1, "Thyolo": 3}
    assert len(got.fid) == parts[name]  # the column `how` of the table


def test_dip_directions_as_compass_points_are_read(data):
    """The quadrants of the database become azimuths, one a fault."""
    got = real_data.read_features(malawi(data), "EPSG:32736")
    rows = real_data.read_figures(data, "malawi_faults")["all"]
    azimuths = dict(zip(got.fid.tolist(), got.columns["dip_azimuth"].tolist()))
    points = {0.0: "N", 45.0: "NE", 90.0: "E", 135.0: "SE"}
    points.update({180.0: "S", 225.0: "SW", 270.0: "W", 315.0: "NW"})
    counts = collections.Counter(points[a] for a in azimuths.values())
    told = " ".join(f"{point}:{counts[point]}" for point in sorted(counts))
    assert told == rows["faults by dip_dir"].value
    assert got.refused == {}


def malawi_study(data, name, crs):
    """A study that lays three sections across a trace; it knows no horizon."""
    return {
        "format": "heaveline-study",
        "version": 1,
        "name": "Trace in degrees",
        "fault": "Fault",
        "crs": crs,
        "length_unit": "m",
        "vertical_datum": "mean sea level",
        "sources": [malawi_trace(data, name)],
        "sections": {"parallel": {"count": 3}},
        "construction": {"horizon": "none"},
    }


@pytest.mark.parametrize(
    ("name", "towards"),
    # dip_dir of the database
    [("Zomba", 315.0), ("Bilila-Mtakataka", 90.0), ("Thyolo", 225.0)],
)
def test_sections_across_a_trace_in_degrees(data, name, towards):
    """Sections are laid in metres, into the hanging wall of the declared quadrant."""
    run = run_study(malawi_study(data, name, "EPSG:32736"), data)
    turn = (run.transport_azimuth - towards + 180.0) % 360.0 - 180.0
    assert abs(turn) < 67.5  # within a quadrant's neighbour of the quadrant
    assert "dip direction" in run.transport_from
    assert len(run.sections) == 3
    for result in run.sections:
        assert result.frame.length == pytest.approx(10000.0, abs=0.01)
        assert (result.picks.kind == "fault").any()
        assert result.prediction.code == "no-horizon"


@pytest.mark.parametrize("crs", ["EPSG:4326", "EPSG:3857"])
def test_degrees_and_web_mercator_are_refused_for_the_study(data, crs):
    """Lengths are not measured in degrees nor in Web Mercator; the zone is named."""
    with pytest.raises(ValueError, match="projected CRS") as caught:
        run_study(malawi_study(data, "Zomba", crs), data)
    assert caught.value.code == "study-crs"
