"""Slip lines parallel to the fault."""

import numpy as np
import pytest

from geomcore.errors import ConstructionError
from geomcore.profile import line_through
from geomcore.sliplines import slide_along, slip_line_horizon


def circle(radius=5000.0, n=2001):
    """Concave fault: lower left quarter of a circle about (0, 0)."""
    angle = np.linspace(np.radians(190.0), np.radians(268.0), n)
    return radius * np.cos(angle), radius * np.sin(angle)


@pytest.mark.parametrize("depth", [1.0, 800.0, 2500.0])
def test_particle_on_a_circular_fault_turns_by_slip_over_radius(depth):
    """Lines are concentric, a particle at radius r turns by D/r (methods.md 5 [N])."""
    x, z = circle()
    radius = 5000.0 - depth
    start = np.radians(205.0)
    point = radius * np.array([np.cos(start), np.sin(start)])
    moved = slide_along(x, z, [point], 900.0)[0]
    assert np.hypot(*moved) == pytest.approx(radius, abs=0.05)
    turned = np.arctan2(moved[1], moved[0]) % (2 * np.pi) - start
    # the polyline's chords stand for the arc: relative error angle^2/24 a chord
    assert turned == pytest.approx(900.0 / radius, rel=1e-4)


def area(points):
    """Area of a ring (shoelace)."""
    x, z = points.T
    return 0.5 * abs(x @ np.roll(z, -1) - z @ np.roll(x, -1))


def test_slip_lines_keep_area():
    """A patch of the hanging wall keeps its area as it slides (Jacobian 1 [N])."""
    x, z = circle()
    side = np.linspace(0.0, 1.0, 60)[:-1]
    low, high = np.radians(200.0), np.radians(206.0)
    r0, r1 = 3000.0, 4500.0
    ring = np.concatenate(
        [
            np.column_stack([low + side * (high - low), np.full(59, r0)]),
            np.column_stack([np.full(59, high), r0 + side * (r1 - r0)]),
            np.column_stack([high - side * (high - low), np.full(59, r1)]),
            np.column_stack([np.full(59, low), r1 - side * (r1 - r0)]),
        ]
    )
    patch = np.column_stack(
        [ring[:, 1] * np.cos(ring[:, 0]), ring[:, 1] * np.sin(ring[:, 0])]
    )
    moved = slide_along(x, z, patch, 1200.0)
    # straight edges between the ring's points cut arcs: 1e-3 of the area here
    assert area(moved) == pytest.approx(area(patch), rel=1e-3)


def test_planar_fault_moves_everything_straight_down_dip():
    """No bend, no rollover: the horizon stays straight."""
    slope = np.tan(np.radians(60.0))
    x = np.array([-2000.0, 0.0, 6000.0])
    horizon, foot = slip_line_horizon(
        x, -slope * x, line_through(0.0, -500.0, 0.0), 800.0, 5000.0
    )
    assert foot == pytest.approx((500.0 / slope, -500.0))
    drop = 800.0 * np.sin(np.radians(60.0))
    np.testing.assert_allclose(horizon.z, -500.0 - drop, atol=1e-6)
    first = 500.0 / slope + 800.0 * np.cos(np.radians(60.0))
    assert horizon.x[0] == pytest.approx(first, abs=1e-6)


def test_bend_turns_the_lines_on_its_bisector():
    """Over a 60-30 bend the distance to the fault is kept on both sides."""
    x = np.array([-3000.0, 0.0, 9000.0])
    z = np.array(
        [3000.0 * np.tan(np.radians(60.0)), 0.0, -9000.0 * np.tan(np.radians(30.0))]
    )
    up = np.array([np.sin(np.radians(60.0)), np.cos(np.radians(60.0))])
    start = np.array([-500.0, 500.0 * np.tan(np.radians(60.0))]) + 300.0 * up
    moved = slide_along(x, z, [start], 3000.0)[0]
    low = np.array([np.sin(np.radians(30.0)), np.cos(np.radians(30.0))])
    assert moved @ low == pytest.approx(300.0, abs=1e-6)


def test_horizon_beyond_the_radius_is_refused():
    """Where a concave fault's parallel lines cross, the model breaks down."""
    x, z = circle(radius=600.0, n=60)
    slope = (z[1] - z[0]) / (x[1] - x[0])
    x, z = np.r_[x[0] - 800.0, x], np.r_[z[0] - 800.0 * slope, z]
    leg = np.array([x[1] - x[0], z[1] - z[0]]) / np.hypot(x[1] - x[0], z[1] - z[0])
    over = np.array([x[0], z[0]]) + 200.0 * leg + 900.0 * np.array([-leg[1], leg[0]])
    with pytest.raises(ConstructionError) as error:
        slide_along(x, z, [over], 5000.0)
    assert error.value.code == "beyond-radius"


def test_point_under_the_fault_has_no_way():
    """The footwall does not move."""
    x, z = circle()
    assert np.isnan(slide_along(x, z, [(-5500.0, -1000.0)], 100.0)).all()
