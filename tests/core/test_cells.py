"""The index by cells: whatever lies near a box is found, by comparison with all."""

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from geomcore.cells import CellIndex, expanded
from geomcore.picks import corridor_boxes, line_crossings, prepare_source
from geomcore.section import SectionFrame
from geomcore.sources import Features, SourceDeclaration

COORDINATE = st.one_of(
    st.floats(-1e4, 1e4, allow_nan=False), st.sampled_from([0.0, 1e-9, 500.0, 7e6])
)
CORNERS = st.lists(st.tuples(*[COORDINATE] * 4), max_size=40)


def boxes(corners):
    """Boxes from any two opposite corners."""
    a = np.array(corners, dtype=float).reshape(-1, 2, 2)
    return a.min(axis=1), a.max(axis=1)


@settings(max_examples=200)
@given(CORNERS, CORNERS)
def test_every_box_that_touches_another_is_found(items, asked):
    """Boxes of any size and place, single points and lines among them."""
    low, high = boxes(items)
    index = CellIndex.build(low, high)
    a, b = boxes(asked)
    found = index.near(a, b)
    touching = np.flatnonzero(
        [((low[i] <= b) & (high[i] >= a)).all(axis=1).any() for i in range(len(low))]
    )
    assert set(touching) <= set(found)
    assert found.tolist() == sorted(set(found.tolist()))


@settings(max_examples=100)
@given(st.lists(st.tuples(COORDINATE, COORDINATE), max_size=60), CORNERS)
def test_every_point_in_a_box_is_found(points, asked):
    """Points heaped up, in a row or far apart."""
    xy = np.array(points, dtype=float).reshape(-1, 2)
    a, b = boxes(asked)
    found = CellIndex.build(xy).near(a, b)
    inside = [((p >= a) & (p <= b)).all(axis=1).any() for p in xy]
    assert set(np.flatnonzero(inside)) <= set(found)


def test_a_map_smaller_than_rounding_has_cells_too():
    """Two boxes 1e-84 apart, and a question from far away."""
    low = np.zeros((2, 2))
    index = CellIndex.build(low, np.array([[0.0, 0.0], [0.0, 2e-84]]))
    assert index.near(np.array([[0.0, 1.0]]), np.array([[0.0, 1.0]])).tolist() == []
    assert index.near(low[:1], low[:1]).tolist() == [0, 1]


def test_few_of_many_are_looked_at():
    """A small box among evenly spread points brings little more than its own."""
    xy = np.random.default_rng(1).uniform(0, 1000, (50000, 2))
    found = CellIndex.build(xy).near(
        np.array([[500.0, 500.0]]), np.array([[510, 510.0]])
    )
    assert len(found) < 60


def test_long_lines_do_not_fill_every_cell():
    """Boxes as large as the map are kept in few cells."""
    low = np.zeros((2000, 2))
    index = CellIndex.build(low, low + np.linspace(9e4, 1e5, 2000)[:, None])
    assert len(index.item) <= 4 * 2000


def test_runs_of_numbers_are_written_out():
    """Counts of nought give nothing, and each number knows its run."""
    numbers, owner = expanded(np.array([5, 0, 9]), np.array([2, 0, 3]))
    assert numbers.tolist() == [5, 6, 9, 10, 11]
    assert owner.tolist() == [0, 0, 2, 2, 2]


@pytest.mark.parametrize("seed", range(4))
def test_crossings_are_those_shapely_finds(seed):
    """Long and short lines, parts of one vertex, a bent section."""
    rng = np.random.default_rng(seed)
    lines = [
        rng.uniform(0, 5000, 2) + np.cumsum(rng.normal(0, step, (n, 2)), axis=0)
        for n, step in zip(rng.integers(1, 60, 150), rng.choice([5, 80, 900], 150))
    ]
    source = SourceDeclaration("h", "horizon", "H", "m", "elevation", "sea level")
    parts = [np.column_stack([line, np.full(len(line), -9.0)]) for line in lines]
    prepared = prepare_source(source, Features.lines(parts), "m")
    frame = SectionFrame("S", [(0, 2000), (2500, 2600), (5000, 2400)], 90.0)
    distance, value, part, xy = line_crossings(prepared, frame)
    drawn = shapely.LineString(frame.vertices)
    expected = []
    for number, line in enumerate(lines):
        if len(line) > 1:
            cut = shapely.intersection(shapely.LineString(line), drawn)
            expected += [
                (number, shapely.line_locate_point(drawn, p))
                for p in shapely.get_parts(cut)
                if not p.is_empty
            ]
    assert len(part) == len(expected) > 20
    ours = sorted(zip(part.tolist(), distance.tolist()))
    for (a, x), (b, y) in zip(ours, sorted(expected)):
        assert a == b
        assert x == pytest.approx(y, abs=1e-6)
    assert (value == -9.0).all()
    assert shapely.distance(drawn, shapely.points(xy)).max() < 1e-6


@pytest.mark.parametrize("corridor", [0.0, 250.0])
def test_boxes_along_a_section_hold_its_corridor(corridor):
    """Every point within the corridor lies in one of the boxes."""
    frame = SectionFrame("S", [(0, 0), (3000, 400), (9000, 0)], 80.0)
    rng = np.random.default_rng(3)
    on_line = frame.to_map(rng.uniform(0, frame.x_max, 500))
    aside = rng.uniform(-corridor, corridor, (500, 1)) * frame.strike_vector
    points = on_line + aside
    low, high = corridor_boxes(frame, corridor, most=10)
    inside = (points[:, None] >= low) & (points[:, None] <= high)
    assert inside.all(axis=2).any(axis=1).all()
