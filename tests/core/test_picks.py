"""Picks on a section: lines crossed, points in a corridor, surfaces sampled."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oracles import lines_crossed

from geomcore.errors import PicksError
from geomcore.picks import (
    Picks,
    PullOptions,
    apparent_dip,
    line_crossings,
    points_in_corridor,
    prepare_source,
    pull_source,
)
from geomcore.section import SectionFrame
from geomcore.sources import Features, Grid, SourceDeclaration

EAST = SectionFrame("S1", [(0.0, 0.0), (10000.0, 0.0)], 90.0)


def declared(role="horizon", **changes):
    """A sound declaration in metres."""
    entries = {
        "key": "k",
        "role": role,
        "name": "A",
        "unit": "m",
        "sign": "elevation",
        "datum": "mean sea level",
    }
    return SourceDeclaration(**{**entries, **changes})


def pulled(data, frame=EAST, options=None, **declaration):
    """Bring data to a section."""
    prepared = prepare_source(declared(**declaration), data, "m")
    return pull_source(prepared, frame, options or PullOptions())


def test_contour_crossing_gives_its_elevation_on_the_line():
    """A structure contour becomes a pick where the section crosses it."""
    contours = Features.lines(
        [[(1000, -50), (1000, 50)], [(2500, 50), (2500, -50)]], values=[-500.0, -550.0]
    )
    picks = pulled(contours, sigma=5.0)
    assert picks.x == pytest.approx([1000.0, 2500.0])
    assert picks.z == pytest.approx([-500.0, -550.0])
    assert picks.off_section.tolist() == [0.0, 0.0]
    assert picks.source_fid.tolist() == [1, 2]
    assert picks.sigma_z.tolist() == [5.0, 5.0]


def test_elevation_is_interpolated_along_the_crossed_segment():
    """A line with Z is read at the crossing, not at its nearest vertex."""
    line = Features.lines([[(1000, -30, -500), (1100, 70, -600)]])
    picks = pulled(line)
    assert picks.x == pytest.approx([1030.0])
    assert picks.z == pytest.approx([-530.0])


def test_crossing_at_a_shared_vertex_counts_once():
    """A contour with a vertex exactly on the section gives one pick, not two."""
    through = Features.lines([[(100, -5, 1), (100, 0, 2), (100, 5, 3)]])
    assert pulled(through).z.tolist() == [2.0]
    touching = Features.lines([[(100, 5, 1), (200, 0, 2), (300, 5, 3)]])
    assert len(pulled(touching)) in (0, 2)  # from one side and back: none or both


def test_crossing_at_a_bend_of_the_section_counts_once():
    """Where a contour passes through a bend, one leg owns the crossing."""
    frame = SectionFrame("S", [(0, 0), (1000, 0), (2000, 200), (3000, 200)], 90.0)
    contour = Features.lines([[(1000, -500, -7), (1000, 500, -7)]])
    for line in (frame.vertices, frame.vertices[::-1]):
        picks = pulled(contour, SectionFrame("S", line, 90.0))
        assert picks.x == pytest.approx([1000.0])


def test_crossings_at_the_ends_of_the_section_are_kept():
    """A contour through either end of the drawn line is a pick."""
    ends = Features.lines([[(0, -5, 1), (0, 5, 1)], [(10000, -5, 2), (10000, 5, 2)]])
    assert pulled(ends).z.tolist() == [1.0, 2.0]


@settings(max_examples=60)
@given(
    st.lists(
        st.lists(
            st.tuples(st.integers(-9, 9), st.integers(-9, 9), st.integers(-5, 5)),
            min_size=2,
            max_size=30,
        ),
        min_size=1,
        max_size=4,
    ),
    st.floats(0.0, 360.0),
)
def test_crossings_equal_those_of_the_plain_search(parts, turn):
    """Indexed search finds what going through all segments one by one finds."""
    a = math.radians(turn)
    leg = [
        (-8.3 * math.sin(a), -8.3 * math.cos(a)),
        (8.1 * math.sin(a), 8.1 * math.cos(a)),
    ]
    parts = [
        [p for i, p in enumerate(part) if i == 0 or p[:2] != part[i - 1][:2]]
        for part in parts
    ]
    parts = [p for p in parts if len(p) > 1]
    expected = sorted(hit for part in parts for hit in lines_crossed(part, leg))
    frame = SectionFrame("S", leg, turn)
    prepared = prepare_source(declared(), Features.lines(parts), "m")
    distance, value, _, _ = line_crossings(prepared, frame)
    order = np.lexsort((value, distance))
    got = np.column_stack([distance, value])[order]
    inside = [e for e in expected if 1e-9 < e[0] < frame.length - 1e-9]
    got = got[(got[:, 0] > 1e-9) & (got[:, 0] < frame.length - 1e-9)]
    assert len(got) == len(inside)
    if inside:
        assert got[:, 0] == pytest.approx([e[0] for e in inside], abs=1e-6)
        assert sorted(got[:, 1]) == pytest.approx(
            sorted(e[1] for e in inside), abs=1e-6
        )


def test_parts_are_not_joined_across_their_gap():
    """The end of one part and the start of the next are no segment."""
    data = Features.lines([[(100, -9, 0), (100, -5, 0)], [(300, 5, 9), (300, 9, 9)]])
    assert len(pulled(data)) == 0


def test_polygon_ring_of_a_fault_gap_gives_both_cut_offs():
    """The section crosses the outline of a fault gap twice."""
    ring = [(1000, -50, -400), (1600, -50, -900), (1600, 50, -900), (1000, 50, -400)]
    gap = Features.lines([[*ring, ring[0]]], geometry="polygon")
    picks = pulled(gap, role="cut-off")
    assert picks.kind.tolist() == ["cutoff", "cutoff"]
    assert picks.z == pytest.approx([-400.0, -900.0])


def test_points_come_in_along_strike_from_the_corridor():
    """A point keeps its x; only those within the corridor along strike come in."""
    points = Features.points([(500, 240), (600, -260), (700, -250), (-1, 0)], -1.0)
    picks = pulled(points, options=PullOptions(corridor=250.0))
    assert picks.x == pytest.approx([500.0, 700.0])
    assert picks.off_section == pytest.approx([-240.0, 250.0])
    assert picks.distance == pytest.approx(picks.x)


def test_a_source_may_bring_its_own_corridor():
    """A well layer may be taken from farther away than the rest."""
    points = Features.points([(500, 900)], -1.0)
    assert len(pulled(points)) == 0
    assert len(pulled(points, corridor=1000.0)) == 1


@settings(max_examples=30)
@given(st.integers(0, 10_000), st.floats(10.0, 3000.0), st.floats(0.0, 360.0))
def test_corridor_finds_what_testing_every_point_finds(seed, corridor, turn):
    """The search by boxes finds the points that a look at every point finds."""
    rng = np.random.default_rng(seed)
    a = np.radians(turn + np.r_[0.0, 35.0, -40.0])
    steps = 3000.0 * np.column_stack([np.sin(a), np.cos(a)])
    frame = SectionFrame("S", np.vstack([[0, 0], np.cumsum(steps, axis=0)]), turn)
    xy = rng.uniform(-9000, 9000, (300, 2))
    prepared = prepare_source(declared(), Features.points(xy, 0.0), "m")
    index, x, off = points_in_corridor(prepared, frame, corridor)
    t = np.array([math.sin(math.radians(turn)), math.cos(math.radians(turn))])
    expected = []
    for i, p in enumerate(xy):
        along = p @ t
        if not 0 <= along <= frame.x_max:
            continue
        at = frame.to_map([along])[0]
        if np.hypot(*(p - at)) <= corridor:
            expected.append(i)
    assert index.tolist() == expected
    assert x == pytest.approx(xy[index] @ t)
    assert np.all(np.abs(off) <= corridor)


def test_grid_is_sampled_along_the_section_at_its_cell():
    """A surface is read at steps no finer than its cells; holes are counted."""

    def sample(xy):
        z = -1000.0 - 0.1 * xy[:, 0]
        return np.where((xy[:, 0] > 5000) & (xy[:, 0] < 5100), np.nan, z)

    picks = pulled(Grid(sample, cell=50.0))
    assert np.diff(picks.x) == pytest.approx(50.0)
    known = picks.used
    assert picks.z[known] == pytest.approx(-1000.0 - 0.1 * picks.x[known])
    assert picks.x[~known] == pytest.approx([5050.0])
    assert picks.reason[~known].tolist() == ["no data"]


def test_grid_step_can_be_set():
    """The step of the samples may be given instead of the cell size."""
    flat = Grid(lambda xy: np.zeros(len(xy)), cell=50.0)
    picks = pulled(flat, options=PullOptions(grid_step=500.0))
    assert len(picks) == 21


def test_null_codes_in_a_grid_are_no_elevations():
    """A cell that holds -9999 or 1e30 is unknown."""
    coded = Grid(lambda xy: np.where(xy[:, 0] < 100, 1e30, -9999.0), cell=5000.0)
    picks = pulled(coded)
    assert not picks.used.any()
    assert set(picks.reason) == {"null code"}


def test_surface_trace_takes_its_elevation_from_a_raster():
    """The fault's trace may be drawn flat and lifted onto the ground surface."""
    trace = Features.lines([[(2000, -50), (2000, 50)]])
    ground = Grid(lambda xy: 0.01 * xy[:, 0], cell=10.0)
    lifted = Features(
        trace.geometry, trace.xy, trace.value, trace.offsets, trace.fid, {}, ground
    )
    picks = pulled(lifted, role="fault trace")
    assert picks.z == pytest.approx([20.0])
    assert picks.kind.tolist() == ["fault"]
    hole = Features(
        "line",
        trace.xy,
        trace.value,
        trace.offsets,
        trace.fid,
        {},
        Grid(lambda xy: np.full(len(xy), np.nan), 10.0),
    )
    assert pulled(hole, role="fault trace").reason.tolist() == ["no data"]


def test_points_may_be_lifted_onto_a_raster_too():
    """Points without a height take it from a raster where they stand."""
    flat = Features.points([(2000, 100)], np.nan)
    ground = Grid(lambda xy: xy[:, 0] + xy[:, 1], cell=10.0)
    lifted = Features("point", flat.xy, flat.value, flat.offsets, flat.fid, {}, ground)
    assert pulled(lifted).z == pytest.approx([2100.0])


# Dip 60, section 35 degrees off the dip direction: 54.823 ("computed", methods.md 16).
def test_apparent_dip_is_that_of_the_closed_form():
    """tan(apparent) = tan(dip) cos(angle); against the dip it counts negative."""
    assert apparent_dip(60.0, 125.0, 90.0) == pytest.approx(54.823, abs=5e-4)
    assert apparent_dip(60.0, 270.0, 90.0) == pytest.approx(-60.0)
    assert apparent_dip(60.0, 0.0, 90.0) == pytest.approx(0.0, abs=1e-9)


def trace_with_dip(dip_azimuth):
    """A fault trace with dip 60 and a dip azimuth."""
    return Features.lines(
        [[(2000, -50, 0), (2000, 50, 0)]], dip=[60.0], dip_azimuth=[dip_azimuth]
    )


@pytest.mark.parametrize(
    ("north", "declination", "measured"),
    [("grid", 0.0, 125.0), ("true", 0.0, 127.0), ("magnetic", 3.0, 124.0)],
)
def test_measured_azimuths_are_brought_to_grid_north(north, declination, measured):
    """True = grid + convergence; true = magnetic + declination (methods.md 12)."""
    options = PullOptions(convergence=lambda xy: np.full(len(xy), 2.0))
    picks = pulled(
        trace_with_dip(measured),
        role="fault trace",
        options=options,
        azimuth_north=north,
        declination=declination,
    )
    assert picks.dip == pytest.approx([54.823], abs=5e-4)


@pytest.mark.parametrize("north", ["true", "magnetic"])
def test_measured_azimuths_without_convergence_are_refused(north):
    """Without the meridian convergence a true or magnetic azimuth is no use."""
    with pytest.raises(PicksError, match="convergence") as caught:
        pulled(
            trace_with_dip(125.0),
            role="fault trace",
            azimuth_north=north,
            layer="Traces",
        )
    assert caught.value.code == "no-convergence"
    assert "source 'Traces'" in str(caught.value)


def test_dip_without_azimuth_is_taken_along_transport():
    """A trace with a dip alone dips that much in the section."""
    data = Features.lines([[(2000, -50, 0), (2000, 50, 0)]], dip=[55.0])
    assert pulled(data, role="fault trace").dip.tolist() == [55.0]


def test_units_and_sigma_go_through_the_door_together():
    """A depth in feet with a sigma in feet becomes metres with a sigma in metres."""
    points = Features.points([(500, 0)], 1000.0)
    picks = pulled(points, unit="ft", sign="depth", sigma=10.0)
    assert picks.z == pytest.approx([-304.8])
    assert picks.sigma_z == pytest.approx([3.048])


def test_time_picks_stay_in_time():
    """Two-way times are read back in ms, positive down; depths are not."""
    points = Features.points([(500, 0)], 850.0)
    picks = pulled(points, unit="ms", sign="depth", domain="time", time_way="two")
    assert picks.domain == "time"
    assert picks.twt_ms.tolist() == [850.0]
    with pytest.raises(PicksError, match="depths") as caught:
        _ = Picks.empty("S1").twt_ms
    assert caught.value.code == "not-time"


def test_names_of_a_layer_with_several_horizons_are_kept():
    """Each feature may name its own horizon."""
    points = Features.points([(500, 0), (700, 0)], -1.0, name=["A", "B"])
    assert pulled(points).name.tolist() == ["A", "B"]


def test_unknown_values_are_kept_with_their_reason():
    """A point without a value is there, unused, and says why."""
    points = Features.points([(500, 0), (700, 0)], [np.nan, -5.0])
    picks = pulled(points)
    assert picks.used.tolist() == [False, True]
    assert picks.reason.tolist() == ["no value", ""]


def test_features_without_any_value_are_counted_at_the_door():
    """Lines none of whose vertices has a value are counted by reason."""
    data = Features.lines(
        [
            [(0, 0, np.nan), (1, 0, np.nan)],
            [(0, 0, -9999), (1, 0, -9999)],
            [(0, 0, np.nan), (1, 0, -5)],
        ]
    )
    prepared = prepare_source(declared(), data, "m")
    assert dict(prepared.refused) == {"no value": 1, "null code": 1}
    assert prepared.count_in == 3


def test_a_segment_with_one_unknown_end_gives_no_elevation():
    """Between a known and an unknown vertex nothing is interpolated."""
    data = Features.lines([[(500, -5, np.nan), (500, 5, -7)]])
    assert pulled(data).used.tolist() == [False]


def test_wall_of_a_source_is_kept():
    """A layer declared to lie in one wall says so on its picks."""
    picks = pulled(Features.points([(500, 0)], -5.0), wall="footwall")
    assert picks.wall.tolist() == ["footwall"]


def test_table_refuses_columns_of_another_length():
    """A column that does not fit the others is named."""
    good = Picks.build("S1", [1.0, 2.0], [3.0, 4.0])
    columns = {k: getattr(good, k) for k in good.__dataclass_fields__}
    with pytest.raises(PicksError, match="column z") as caught:
        Picks(**{**columns, "z": np.zeros(3)})
    assert caught.value.code == "bad-picks"


def test_tables_of_two_sections_or_domains_are_not_joined():
    """Picks of another section, or times among depths, are refused."""
    one = Picks.empty("S1")
    for other in (Picks.empty("S2"), Picks.empty("S1", "time")):
        with pytest.raises(PicksError) as caught:
            one.joined([other])
        assert caught.value.code == "mixed-picks"


def test_table_is_read_only_and_picks_are_left_out_in_words():
    """Leaving a pick out keeps it in the table, with the first reason given."""
    picks = Picks.build("S1", [1.0, 2.0], [3.0, 4.0], name="A", wall="footwall")
    less = picks.left_out([True, False], "drag").left_out([True, True], "far")
    assert less.reason.tolist() == ["drag", "far"]
    assert picks.used.all()
    assert len(less.of("horizon", "A", "footwall")) == 0
    assert len(less.of("horizon", used=False)) == 2
    assert len(picks.of("horizon", "B")) == 0
    assert "n=2, used=2" in repr(picks)
    with pytest.raises(ValueError, match="read-only"):
        picks.z[0] = 1.0


def test_reversed_section_gives_the_same_picks():
    """Picks do not mind which way the section was drawn."""
    rng = np.random.default_rng(3)
    vertices = [(0, 0), (3000, 900), (6000, 0), (10000, -500)]
    contours = [
        np.column_stack(
            [np.full(40, x), np.linspace(-2000, 2000, 40), rng.normal(-500, 50, 40)]
        )
        for x in np.linspace(200, 9700, 30)
    ]
    points = Features.points(rng.uniform([0, -2000], [10000, 2000], (200, 2)), -1.0)
    for data in (Features.lines(contours), points):
        one, other = (
            pulled(data, SectionFrame("S", v, 90.0)) for v in (vertices, vertices[::-1])
        )
        for column in ("x", "z", "off_section"):
            assert getattr(one, column) == pytest.approx(
                getattr(other, column), abs=1e-6
            )
        assert one.source_fid.tolist() == other.source_fid.tolist()
