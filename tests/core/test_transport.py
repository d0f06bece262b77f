"""The transport azimuth: given, or from the strike and what tells the side."""

import numpy as np
import pytest
from worlds import DOCUMENT, changed

from geomcore.errors import FrameError
from geomcore.picks import prepare_source
from geomcore.sources import Features, Grid
from geomcore.study import SectionLine, Study
from geomcore.transport import resolve_transport

NORTH_SOUTH = Features.lines([[(0, -5000, 0), (0, 5000, 0)]])
LOWER_EAST = Grid(lambda xy: np.where(xy[:, 0] < 0, -500.0, -900.0), cell=100.0)
ACROSS = SectionLine("S1", np.array([(-4000.0, 0.0), (4000.0, 0.0)]))


def resolved(document, lines=(), **data):
    """Resolve the transport azimuth of a study with a trace and what else is given."""
    data = {"trace": NORTH_SOUTH, **data}
    document = changed(
        document,
        "sources",
        to=[s for s in document["sources"] if s["key"] in data],
    )
    study = Study.from_dict(document)
    prepared = {
        s.key: prepare_source(s, data[s.key], study.length_unit) for s in study.sources
    }
    return resolve_transport(study, prepared, lines)


UNTOLD = changed(DOCUMENT, "transport", to={})


def test_given_azimuth_is_used_as_it_is():
    """A given azimuth needs no strike; it is reduced to one turn."""
    document = changed(DOCUMENT, "transport", "azimuth", to=-15.0)
    assert resolved(document) == (345.0, "given")


@pytest.mark.parametrize(("side", "azimuth"), [("E", 90.0), ("WNW", 270.0), ("80", 90)])
def test_declared_side_chooses_between_the_two_normals(side, azimuth):
    """The azimuth is normal to the mean strike, on the declared side."""
    got, how = resolved(changed(UNTOLD, "transport", to={"hw_side": side}))
    assert got == pytest.approx(azimuth)
    assert f"side declared {side}" in how


def test_side_along_strike_tells_nothing():
    """A declared side that runs along the fault is refused."""
    with pytest.raises(FrameError) as caught:
        resolved(changed(UNTOLD, "transport", to={"hw_side": "N"}))
    assert caught.value.code == "no-side"


def test_dip_direction_of_the_fault_tells_the_side():
    """Measured dip directions point into the hanging wall, round north too."""
    for directions, azimuth in (([250.0, 300.0], 270.0), ([10.0, 340.0, 80.0], 90.0)):
        parts = [[(0, -5000, 0), (0, 5000, 0)]] * len(directions)
        trace = Features.lines(parts, dip_azimuth=np.array(directions))
        got, how = resolved(UNTOLD, trace=trace)
        assert got == pytest.approx(azimuth)
        assert "dip direction" in how


@pytest.mark.parametrize("ends", [1, -1])
def test_lower_block_of_the_horizon_tells_the_side(ends):
    """Without other word the side where the horizon lies lower is the hanging wall."""
    line = SectionLine("S1", ACROSS.vertices[::ends])
    got, how = resolved(UNTOLD, [line], tops=LOWER_EAST)
    assert got == pytest.approx(90.0)
    assert "lower block of A" in how
    west = Grid(lambda xy: LOWER_EAST.sample(-xy), cell=100.0)
    assert resolved(UNTOLD, [line], tops=west)[0] == pytest.approx(270.0)


def test_lower_block_tells_the_side_of_parallel_sections_too():
    """Sections that are still to be laid need no drawn line to find their side."""
    document = changed(UNTOLD, "sections", to={"parallel": {"count": 3}})
    got, _ = resolved(document, tops=LOWER_EAST)
    assert got == pytest.approx(90.0)


def test_nothing_that_tells_the_side_is_refused_with_the_ways_out():
    """Nothing is guessed: without side, dip or levels the study is refused."""
    level = Grid(lambda xy: np.full(len(xy), -500.0), cell=100.0)
    for data in ({}, {"tops": level}):
        with pytest.raises(FrameError, match="hanging wall") as caught:
            resolved(UNTOLD, [ACROSS], **data)
        assert caught.value.code == "no-side"
        assert "hw_side" in caught.value.remedy


def test_strike_of_a_fault_polygon_is_its_long_axis():
    """Without a trace the outline of the fault gap tells the strike."""
    ring = np.array([(0, -3000, -5), (300, -3000, -9), (300, 3000, -9), (0, 3000, -5)])
    gap = Features.lines([np.vstack([ring, ring[:1]])], geometry="polygon")
    document = changed(UNTOLD, "sources", 1, "role", to="cut-off")
    document = changed(document, "sources", 1, "name", to="A")
    document = changed(document, "transport", to={"hw_side": "E"})
    document["sources"] = document["sources"][1:]
    study = Study.from_dict(document)
    prepared = {"deep": prepare_source(study.sources[0], gap, "m")}
    azimuth, _ = resolve_transport(study, prepared, ())
    assert azimuth == pytest.approx(90.0, abs=0.5)


def test_trace_drawn_as_a_closed_ring_has_the_strike_of_its_long_axis():
    """A fault outlined on the map is not a fault without length."""
    ring = [(0, -3000, 0), (200, -3000, 0), (200, 3000, 0), (0, 3000, 0), (0, -3000, 0)]
    document = changed(UNTOLD, "transport", to={"hw_side": "E"})
    azimuth, _ = resolved(document, trace=Features.lines([ring]))
    assert azimuth == pytest.approx(90.0, abs=0.5)


def test_points_alone_have_no_strike():
    """Fault points tell no strike; a trace or the azimuth is asked for."""
    document = changed(UNTOLD, "transport", to={"hw_side": "E"})
    with pytest.raises(FrameError, match="strike") as caught:
        resolved(document, trace=Features.points([(0, 0)], 0.0))
    assert caught.value.code == "no-strike"


@pytest.mark.parametrize("dip", [-0.1, 0.1])
def test_regional_dip_is_not_taken_for_a_throw(dip):
    """Levels are carried to the fault: over kilometres a dip outweighs a throw."""

    def level(xy):
        return -500.0 + dip * xy[:, 0] - np.where(xy[:, 0] < 0, 0.0, 60.0)

    got, _ = resolved(UNTOLD, [ACROSS], tops=Grid(level, cell=50.0))
    assert got == pytest.approx(90.0)


def test_sections_that_disagree_are_counted():
    """The majority decides, and the count is told; an even split is refused."""

    def level(xy):
        lower_east = np.where(xy[:, 0] < 0, -500.0, -900.0)
        return np.where(xy[:, 1] > 1000.0, -1400.0 - lower_east, lower_east)

    tops = Grid(level, cell=50.0)
    lines = [
        SectionLine(f"S{y}", np.array([(-4000.0, y), (4000.0, y)]))
        for y in (-1000.0, 0.0, 2000.0)
    ]
    got, how = resolved(UNTOLD, lines, tops=tops)
    assert got == pytest.approx(90.0)
    assert "in 2 of 3 sections" in how
    with pytest.raises(FrameError, match="do not agree") as caught:
        resolved(UNTOLD, lines[1:], tops=tops)
    assert caught.value.code == "no-side"


def test_few_picks_far_from_the_fault_still_tell_the_side():
    """Crossings with widely spaced contours lie outside the fit distances."""
    x = np.array([-3000.0, -2000.0, -900.0, 900.0, 2000.0, 3000.0])
    points = Features.points(
        np.column_stack([x, 0 * x]), np.where(x < 0, -500.0, -900.0)
    )
    assert resolved(UNTOLD, [ACROSS], tops=points)[0] == pytest.approx(90.0)
