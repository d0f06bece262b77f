"""The section frame: map to section and back, obliquity, parallel sections."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geomcore.errors import FrameError
from geomcore.section import (
    SectionFrame,
    angle_between,
    azimuth_of,
    mean_strike,
    parallel_sections,
    parse_azimuth,
    transport_azimuth,
)

MILLIMETRE = 1e-3


@st.composite
def drawn_lines(draw):
    """Lines of 1 to 6 legs, up to 100 km, each leg at most 59 degrees off transport."""
    azimuth = draw(st.floats(0.0, 360.0, exclude_max=True))
    legs = draw(
        st.lists(
            st.tuples(st.floats(-59.0, 59.0), st.floats(100.0, 16000.0)),
            min_size=1,
            max_size=6,
        )
    )
    vertices = [(draw(st.floats(1e5, 9e5)), draw(st.floats(0.0, 1e7)))]
    for off, length in legs:
        a = math.radians(azimuth + off)
        east, north = vertices[-1]
        vertices.append((east + length * math.sin(a), north + length * math.cos(a)))
    backwards = draw(st.booleans())
    return azimuth, legs, vertices[::-1] if backwards else vertices, backwards


@given(drawn_lines(), st.lists(st.floats(0.0, 1.0), min_size=1, max_size=20))
def test_frame_converts_both_ways_to_a_millimetre(drawn, fractions):
    """Distance, x and map position of a bent line convert one to one over 100 km."""
    azimuth, _, vertices, _ = drawn
    frame = SectionFrame("S", vertices, azimuth)
    distance = np.array(fractions) * frame.length
    x = frame.x_at(distance)
    assert np.abs(frame.distance_at(x) - distance).max() < MILLIMETRE
    there, off = frame.project(frame.to_map(x))
    assert np.abs(there - x).max() < MILLIMETRE
    assert np.abs(off).max() < MILLIMETRE


@given(drawn_lines())
def test_x_grows_by_the_cosine_of_each_legs_obliquity(drawn):
    """On a leg oblique by beta, x grows by the leg's length times cos beta."""
    azimuth, legs, vertices, backwards = drawn
    frame = SectionFrame("S", vertices, azimuth)
    steps = [length * math.cos(math.radians(off)) for off, length in legs]
    expected = [sum(steps[:i]) for i in range(len(steps) + 1)]
    lengths = [length for _, length in legs]
    at = [sum(lengths[:i]) for i in range(len(lengths) + 1)]
    if backwards:
        at = [sum(lengths) - d for d in at]
    got = frame.x_at(np.clip(at, 0.0, frame.length))
    assert np.abs(got - expected).max() < MILLIMETRE
    assert frame.obliquity == pytest.approx(max(abs(o) for o, _ in legs), abs=1e-4)


@given(drawn_lines())
def test_reversed_line_gives_the_same_x_everywhere(drawn):
    """x starts at the footwall end whichever way the line was drawn."""
    azimuth, _, vertices, _ = drawn
    one = SectionFrame("S", vertices, azimuth)
    other = SectionFrame("S", vertices[::-1], azimuth)
    x = np.linspace(0.0, one.x_max, 40)
    assert np.abs(one.to_map(x) - other.to_map(np.minimum(x, other.x_max))).max() < (
        MILLIMETRE
    )
    assert np.abs(one.distance_at(x) + other.distance_at(x) - one.length).max() < (
        MILLIMETRE
    )


def test_points_come_in_along_strike_with_the_right_hand_side_positive():
    """A point off the section keeps its component along transport as x."""
    frame = SectionFrame("S", [(1000.0, 2000.0), (5000.0, 2000.0)], 90.0)
    x, off = frame.project([(1500.0, 1700.0), (1500.0, 2300.0), (900.0, 2000.0)])
    assert x == pytest.approx([500.0, 500.0, -100.0])
    # facing east, south is to the right; before the line's end there is no section
    assert off[:2] == pytest.approx([300.0, -300.0])
    assert np.isnan(off[2])


def test_oblique_leg_projects_along_strike_not_along_its_normal():
    """Projection along strike onto an oblique leg does not change x."""
    frame = SectionFrame("S", [(0.0, 0.0), (3000.0, 3000.0)], 90.0)
    x, off = frame.project([(1000.0, 0.0)])
    assert x == pytest.approx([1000.0])
    assert off == pytest.approx([1000.0])


def test_nothing_is_told_beyond_the_ends():
    """Beyond its ends a section knows nothing, save a millimetre of rounding."""
    frame = SectionFrame("S", [(0.0, 0.0), (100.0, 0.0)], 90.0)
    assert np.isnan(frame.x_at([-0.1, 100.1])).all()
    assert np.isnan(frame.to_map([-0.1, 100.1])).all()
    assert frame.to_map([100.0 + 1e-4])[0] == pytest.approx([100.0, 0.0])


def test_bends_are_listed_between_two_places():
    """A predicted trace gets a vertex at every bend of the section."""
    vertices = [(0.0, 0.0), (1000.0, 0.0), (2000.0, 300.0), (4000.0, 300.0)]
    for line in (vertices, vertices[::-1]):
        frame = SectionFrame("S", line, 90.0)
        assert frame.bends_between(500.0, 4000.0) == pytest.approx([1000.0, 2000.0])
        assert len(frame.bends_between(1000.0, 2000.0)) == 0


def test_repeated_vertices_are_taken_once():
    """A vertex drawn twice is no leg of its own."""
    frame = SectionFrame("S", [(0, 0), (0, 0), (10, 0), (10, 0)], 90.0)
    assert len(frame.vertices) == 2
    assert frame.azimuth == 90.0
    assert frame.hw_azimuth == 90.0


def test_frame_is_read_only_and_tells_what_it_is():
    """A frame cannot change after it was made."""
    frame = SectionFrame("S7", [(0, 0), (10, 0)], 450.0)
    assert frame.transport_azimuth == 90.0
    assert "S7" in repr(frame)
    with pytest.raises(ValueError, match="read-only"):
        frame.vertices[0, 0] = 1.0


LEG = 1000.0


def bent(*offs):
    """Vertices of legs that run off the azimuth 90 by these angles."""
    vertices = [(0.0, 0.0)]
    for off in offs:
        a = math.radians(90.0 + off)
        east, north = vertices[-1]
        vertices.append((east + LEG * math.sin(a), north + LEG * math.cos(a)))
    return vertices


@pytest.mark.parametrize(
    ("vertices", "code", "says"),
    [
        ([(0, 0)], "bad-line", "no length"),
        ([(5, 5), (5, 5)], "bad-line", "no length"),
        ([(0, 0), (np.nan, 5)], "bad-line", "without coordinates"),
        (bent(0, 130, 0), "leg-runs-back", "leg 2"),
        (bent(0, 90), "leg-runs-back", "leg 2"),
        (bent(10, 61, 10), "too-oblique", "leg 2 is 61.0 degrees"),
        ([(0, 0), (1000, 0), (500, 500), (500, -500)], "leg-runs-back", "leg 2"),
    ],
    ids=[
        "one vertex",
        "no length",
        "no coordinates",
        "leg runs back",
        "leg along strike",
        "too oblique",
        "crosses itself",
    ],
)
def test_unusable_line_is_refused_and_names_section_and_leg(vertices, code, says):
    """A line that cannot be a section is refused with its name and the leg."""
    for line in (vertices, vertices[::-1]):
        with pytest.raises(FrameError) as caught:
            SectionFrame("S9", line, 90.0)
        assert caught.value.code == code
        assert "section S9" in str(caught.value)
    with pytest.raises(FrameError, match=says):
        SectionFrame("S9", vertices, 90.0)


def test_obliquity_just_within_the_limit_runs():
    """Sixty degrees is the limit itself: a hair less runs, a hair more is refused."""
    assert SectionFrame("S", bent(59.99), 90.0).obliquity == pytest.approx(59.99)
    with pytest.raises(FrameError):
        SectionFrame("S", bent(60.01), 90.0)


@pytest.mark.parametrize(
    ("given_as", "degrees"),
    [("N", 0.0), ("sse", 157.5), (" WNW ", 292.5), (-10, 350.0), ("+370.5", 10.5)],
)
def test_azimuth_reads_numbers_and_compass_points(given_as, degrees):
    """An azimuth may be a number or one of the sixteen compass points."""
    assert parse_azimuth(given_as) == degrees


@pytest.mark.parametrize("text", ["", "NORTH", "12 E", "nan", "1e2", None])
def test_anything_else_is_no_azimuth(text):
    """What is neither number nor compass point is refused with what came."""
    with pytest.raises(FrameError, match="is not an azimuth") as caught:
        parse_azimuth(text)
    assert caught.value.code == "bad-azimuth"
    assert repr(str(text)) in str(caught.value)


@given(st.floats(0, 360), st.floats(0, 360))
def test_angle_between_azimuths_is_that_of_their_vectors(a, b):
    """The angle between two azimuths is that between the map directions."""
    dot = math.cos(math.radians(a - b))
    assert math.cos(math.radians(angle_between(a, b))) == pytest.approx(dot, abs=1e-9)
    assert 0.0 <= angle_between(a, b) <= 180.0


def test_azimuth_of_a_vector_turns_clockwise_from_north():
    """North, east, south, west are 0, 90, 180, 270."""
    ways = [(0, 1), (1, 0), (0, -1), (-1, 0)]
    assert [azimuth_of(v) for v in ways] == [0.0, 90.0, 180.0, 270.0]


@given(
    st.floats(0.0, 179.9),
    st.floats(-8.0, 8.0),
    st.lists(st.booleans(), min_size=3, max_size=3),
)
def test_strike_does_not_mind_how_the_trace_was_drawn(strike, wiggle, flips):
    """Parts of a trace drawn either way give one mean strike."""
    parts = []
    for flip, off in zip(flips, (-wiggle, 0.0, wiggle)):
        a = math.radians(strike + off)
        part = np.array([(0, 0), (1000 * math.sin(a), 1000 * math.cos(a))])
        parts.append(part[::-1] if flip else part)
    off = (mean_strike(parts) - strike + 90.0) % 180.0 - 90.0
    assert abs(off) < 1e-6


def test_strike_weighs_parts_by_their_length():
    """A long part counts for more: two axes add as vectors of doubled angle."""
    parts = [[(0, 0), (0, 3000)], [(0, 0), (1000, 1000)]]
    expected = math.degrees(0.5 * math.atan2(math.sqrt(2) * 1000, 3000))
    assert mean_strike(parts) == pytest.approx(expected)


def test_trace_without_length_has_no_strike():
    """A trace that is a point tells no strike."""
    with pytest.raises(FrameError) as caught:
        mean_strike([[(3, 3), (3, 3)]])
    assert caught.value.code == "no-strike"
    assert "fault trace" in str(caught.value)


@given(st.floats(0.0, 180.0, exclude_max=True), st.floats(0.0, 360.0))
def test_transport_is_normal_to_strike_on_the_told_side(strike, towards):
    """The transport azimuth is across strike, within 90 degrees of what tells it."""
    if abs(angle_between(strike + 90.0, towards) - 90.0) < 1.0:
        with pytest.raises(FrameError) as caught:
            transport_azimuth(strike, towards)
        assert caught.value.code == "no-side"
        assert "hw_side" in str(caught.value)
        return
    azimuth = transport_azimuth(strike, towards)
    assert angle_between(azimuth, strike) == pytest.approx(90.0)
    assert angle_between(azimuth, towards) < 90.0


TRACE = [[(0.0, 0.0), (200.0, 3000.0)], [(200.0, 3000.0), (0.0, 6000.0)]]


@settings(max_examples=40)
@given(st.floats(0.0, 360.0), st.sampled_from([1, 2, 5, 12]))
def test_sections_by_count_split_the_trace_equally(turn, count):
    """Lines stand half a piece off the tips, cross the trace, run along transport."""
    a = math.radians(turn)
    east = np.array([math.cos(a), -math.sin(a)])
    north = np.array([math.sin(a), math.cos(a)])
    trace = [[e * east + n * north for e, n in part] for part in TRACE]
    lines = parallel_sections(
        trace, 90.0 + turn, count=count, footwall_length=500, hanging_wall_length=900
    )
    assert len(lines) == count
    for i, line in enumerate(lines):
        start, end = (np.array([p @ east, p @ north]) for p in line)
        station = 6000.0 * (i + 0.5) / count
        across = 200.0 * (1.0 - abs(station - 3000.0) / 3000.0)
        assert start == pytest.approx([across - 500.0, station], abs=MILLIMETRE)
        assert end == pytest.approx([across + 900.0, station], abs=MILLIMETRE)


def test_sections_by_spacing_are_centred_on_the_trace():
    """As many lines as the spacing allows, the rest shared between both tips."""
    lines = parallel_sections(TRACE, 90.0, spacing=2500.0)
    assert [line[0][1] for line in lines] == pytest.approx([1750.0, 4250.0])
    one = parallel_sections(TRACE, 90.0, spacing=9000.0)
    assert [line[0][1] for line in one] == pytest.approx([3000.0])


def test_sections_are_numbered_with_the_hanging_wall_on_the_right():
    """Walking from the first to the last line the hanging wall is to the right."""
    east = parallel_sections(TRACE, 90.0, count=3)
    west = parallel_sections(TRACE, 270.0, count=3)
    assert np.all(np.diff([line[0][1] for line in east]) > 0)
    assert np.all(np.diff([line[0][1] for line in west]) < 0)


def test_sections_are_clipped_to_the_extent():
    """A line is cut at the extent; one outside it is left out."""
    lines = parallel_sections(TRACE, 90.0, count=3, extent=(-100, 900, 700, 3500))
    assert [line[0][1] for line in lines] == pytest.approx([1000.0, 3000.0])
    for line in lines:
        assert line[:, 0] == pytest.approx([-100.0, 700.0])


def test_a_gap_between_the_parts_of_a_trace_has_no_section():
    """Where the trace is interrupted no line is laid."""
    trace = [[(0, 0), (0, 1000)], [(0, 5000), (0, 6000)]]
    lines = parallel_sections(trace, 90.0, count=6)
    assert [line[0][1] for line in lines] == pytest.approx([500.0, 5500.0])


@pytest.mark.parametrize(
    ("options", "code"),
    [
        ({}, "bad-spacing"),
        ({"spacing": 10.0, "count": 2}, "bad-spacing"),
        ({"spacing": 0.0}, "bad-spacing"),
        ({"spacing": float("nan")}, "bad-spacing"),
        ({"count": 0}, "bad-spacing"),
        ({"count": 2, "footwall_length": 0.0}, "bad-length"),
        ({"count": 2, "hanging_wall_length": -5.0}, "bad-length"),
        ({"count": 2, "extent": (9e5, 9e5, 9.1e5, 9.1e5)}, "no-sections"),
    ],
)
def test_unusable_parallel_options_are_refused(options, code):
    """Parallel sections without one clear spacing, length or extent are refused."""
    with pytest.raises(FrameError) as caught:
        parallel_sections(TRACE, 90.0, **options)
    assert caught.value.code == code
