"""Which wall a pick lies in, and which picks are too near the fault."""

import math

import numpy as np
import pytest
from worlds import EXPONENTIAL, joined, table

from geomcore.fault import KnownFault, known_fault
from geomcore.walls import (
    assign_walls,
    is_upright,
    leave_out_near_fault,
    tracked_gap,
    upright_line,
)

PLANE = KnownFault(
    np.array([0.0, 1000.0]),
    np.array([0.0, -1000.0]),
    0.0,
    -1.0,
    -1.0,
    "a plane of 45 degrees",
)


def test_picks_beyond_the_fault_lie_in_the_hanging_wall():
    """At its own depth a pick before the fault is footwall, beyond it hanging wall."""
    picks = table([400.0, 600.0, -50.0, 1500.0], [-500.0, -500.0, 10.0, -1400.0])
    walls = assign_walls(picks, PLANE).wall.tolist()
    assert walls == ["footwall", "hanging wall", "footwall", "hanging wall"]


def test_declared_walls_and_other_kinds_are_left_alone():
    """A wall the source declares is kept; cut-offs and fault picks get none."""
    picks = joined(
        table([400.0], [-500.0], wall="hanging wall"),
        table([450.0], [-500.0], kind="fault"),
        table([480.0], [-500.0], kind="cutoff"),
        table([490.0], [-500.0], kind="dip"),
        table([495.0], [np.nan]),
    )
    assert assign_walls(picks, PLANE).wall.tolist() == [
        "hanging wall",
        "",
        "",
        "footwall",
        "",
    ]


def test_rollover_lies_above_the_straight_continuation_of_a_listric_fault():
    """Carried on straight below the picks, a listric fault still tells the walls."""
    x = np.linspace(0.0, 1500.0, 20)
    fault, _ = known_fault(
        table(x, [EXPONENTIAL.z(v) for v in x], kind="fault", name="F")
    )
    far = np.linspace(1600.0, 9000.0, 30)
    above = table(far, [EXPONENTIAL.z(v) + 50.0 for v in far])
    assert set(assign_walls(above, fault).wall) == {"hanging wall"}


def test_distance_to_the_fault_is_measured_in_the_section_plane():
    """On a 45-degree fault a pick 100 away along x lies 71 from it."""
    picks = table([600.0, 640.0, 350.0, 1300.0], [-500.0, -500.0, -500.0, -1250.0])
    near = leave_out_near_fault(picks, PLANE, 75.0)
    expected = [d / math.sqrt(2.0) < 75.0 for d in (100.0, 140.0, 150.0, 50.0)]
    assert (~near.used).tolist() == expected == [True, False, False, True]
    assert set(near.reason[~near.used]) == {"within 75 of the fault"}


def test_distance_to_a_bent_fault_is_that_to_its_nearest_piece():
    """The nearest point may lie on another piece than the one at the pick's depth."""
    bent = KnownFault(
        np.array([0.0, 100.0, 1000.0]),
        np.array([0.0, -1000.0, -1050.0]),
        0.0,
        -10.0,
        -0.05,
        "a bend",
    )
    picks = table([800.0], [-1000.0])
    piece = np.array([900.0, -50.0]) / math.hypot(900.0, 50.0)
    off = np.array([700.0, 0.0])
    distance = abs(off[0] * piece[1] - off[1] * piece[0])
    assert leave_out_near_fault(picks, bent, distance + 0.01).used.tolist() == [False]
    assert leave_out_near_fault(picks, bent, distance - 0.01).used.tolist() == [True]


def test_only_horizon_picks_are_left_out():
    """Fault picks and cut-offs belong on the fault."""
    picks = joined(
        table([500.0], [-500.0], kind="fault"), table([500.0], [-500.0], kind="cutoff")
    )
    assert leave_out_near_fault(picks, PLANE, 50.0).used.all()


def test_times_are_left_out_by_their_distance_along_x():
    """Between metres and milliseconds there is no distance: x alone counts."""
    picks = table([540.0, 560.0], [-500.0, -500.0], domain="time")
    assert leave_out_near_fault(picks, PLANE, 50.0).used.tolist() == [False, True]


def surface(step=25.0, throw=300.0, smear=200.0, noise=0.5, seed=1):
    """A gridded horizon drawn across the fault gap as a ramp, and where it is drawn."""
    x = np.arange(-2000.0, 3000.0, step)
    foot = 300.0  # the plane of 45 degrees at z = -300
    ramp = np.clip((x - foot) / smear, 0.0, 1.0)
    z = -300.0 - 0.02 * x - throw * ramp
    inside = (x > foot) & (x < foot + smear)
    return x, z + np.random.default_rng(seed).normal(0.0, noise, len(x)), inside


@pytest.mark.parametrize("smear", [100.0, 200.0, 450.0])
@pytest.mark.parametrize("throw", [100.0, 300.0])
def test_values_drawn_across_the_gap_are_found(throw, smear):
    """What a gridder drew down the fault is no horizon; the rest is kept."""
    x, z, inside = surface(throw=throw, smear=smear)
    found = tracked_gap(x, z, PLANE)
    assert found[inside].all()
    assert found[~inside].sum() <= 2  # the sample at either lip


def test_surface_without_a_step_keeps_all_values():
    """A horizon that bends gently across the fault is left alone."""
    x, z, _ = surface(throw=0.0, noise=1.0)
    assert not tracked_gap(x, z, PLANE).any()


def test_surface_on_one_side_or_of_a_few_samples_has_no_gap():
    """Without both sides, or with hardly a sample, nothing is called a gap."""
    x, z, _ = surface()
    beyond = x > 1500.0
    assert not tracked_gap(x[beyond], z[beyond], PLANE).any()
    assert not tracked_gap(x[90:97], z[90:97], PLANE).any()


def test_tracked_values_are_left_out_with_their_count_and_reason():
    """Grid values across the gap are left out by name of the reason."""
    x, z, inside = surface()
    picks = table(x, z, source="grid")
    kept = leave_out_near_fault(picks, PLANE, 0.0, gridded=["grid"])
    assert set(kept.reason[inside]) == {"tracked across the fault gap"}
    untouched = leave_out_near_fault(picks, PLANE, 0.0, gridded=["other"])
    assert untouched.used.all()


def ledges(quiet, step=25.0, throw=80.0):
    """A tracked time horizon that falls over its gap in two jumps with a ledge between.

    The gap begins at x = 0; `quiet` samples lie on the ledge.
    """
    x = np.arange(-1000.0, 1001.0, step)
    gap = (quiet + 1) * step
    z = -900.0 - np.select([x <= 0, x < gap], [0.0, 0.5 * throw], throw)
    z = z + 0.1 * np.sin(x)  # the tracker's own unrest
    return x, z, (x > 0) & (x < gap)


@pytest.mark.parametrize("quiet", [1, 3, 6])
def test_ledges_of_a_tracker_belong_to_the_gap(quiet):
    """Autotracked horizons come down a fault in jumps, with quiet samples between."""
    x, z, inside = ledges(quiet)
    guide = upright_line(0.5 * (quiet + 1) * 25.0, -900.0)
    assert tracked_gap(x, z, guide).tolist() == inside.tolist()


def test_next_fault_far_beyond_is_another_one():
    """A step that stands farther off than a ledge is long is not joined."""
    x, z, _ = ledges(12)
    found = tracked_gap(x, z, upright_line(12.5, -900.0))
    assert not found.any()  # one step between neighbouring samples has none inside


def test_gentle_drag_beside_a_steep_gap_is_kept():
    """A bend a fifth as steep as the gap is the horizon's own."""
    x = np.arange(-1000.0, 1001.0, 25.0)
    drag = -0.2 * np.clip(x + 150.0, 0.0, 150.0)
    z = -900.0 + drag - np.clip(x, 0.0, 100.0) + 0.1 * np.sin(x)
    found = tracked_gap(x, z, upright_line(50.0, -950.0))
    assert found.tolist() == ((x > 0) & (x < 100)).tolist()


@pytest.mark.parametrize("off", [-120.0, 0.0, 120.0])
def test_walls_of_a_tracked_time_horizon_follow_its_gap_not_the_trace(off):
    """A trace some samples off the gap does not put picks into the wrong wall."""
    x, z, inside = ledges(3)
    guide = upright_line(50.0 + off, -900.0)
    assert is_upright(guide)
    picks = assign_walls(table(x, z, domain="time", source="tracked"), guide)
    picks = leave_out_near_fault(picks, guide, 0.0, ["tracked"])
    assert picks.used.tolist() == (~inside).tolist()
    expected = np.where(x <= 0, "footwall", "hanging wall")[~inside]
    assert picks.wall[~inside].tolist() == expected.tolist()


def test_footwall_pick_beyond_the_straight_continuation_stays_in_the_footwall():
    """From trace and dip alone, a pick at the footwall's level is footwall.

    The trace stands at z = 600; the straight line from it passes the footwall level
    at x = 600, the listric fault itself only at x = 750.
    """
    trace = KnownFault(np.array([0.0]), np.array([600.0]), 5.0, -1.0, -1.0, "the dip")
    x = [-900.0, -100.0, 700.0, 1300.0, 1500.0, 1750.0, 2000.0]
    z = [-50.0, -20.0, 5.0, -500.0, -450.0, -400.0, -355.0]
    walls = assign_walls(table(x, z, sigma=6.0), trace).wall.tolist()
    assert walls == ["footwall"] * 3 + ["hanging wall"] * 4
    # without that pick, or with picks down to there, the fault alone tells the walls
    others = [i for i in range(7) if i != 2]
    fewer = table(np.take(x, others), np.take(z, others), sigma=6.0)
    assert assign_walls(fewer, trace).wall.tolist() == walls[:2] + walls[3:]
    known = KnownFault(
        np.array([0.0, 1300.0]), np.array([600.0, -700.0]), 5.0, -1.0, -1.0, "picks"
    )
    assert assign_walls(table(x, z, sigma=6.0), known).wall[2] == "hanging wall"


def test_gap_below_the_known_fault_tells_the_walls():
    """A footwall grid value over the straight continuation of a listric fault stays so.

    Only the trace at z = 600 and its dip are known; the fault flattens, so that it
    meets the horizon 150 farther out than the straight line from the trace.
    """
    x = np.arange(0.0, 3000.0, 50.0)
    foot, hang = 750.0, 1250.0  # straight continuation: x = 600 at the footwall level
    z = np.interp(x, [foot, hang], [0.0, -500.0]) + 0.1 * np.sin(x)
    trace = KnownFault(np.array([0.0]), np.array([600.0]), 5.0, -1.0, -1.0, "the dip")
    picks = assign_walls(table(x, z, source="grid"), trace)
    assert "hanging wall" in picks.wall[x <= foot]
    picks = leave_out_near_fault(picks, trace, 0.0, ["grid"])
    assert set(picks.wall[picks.used & (x <= foot)]) == {"footwall"}
    assert set(picks.wall[picks.used & (x >= hang)]) == {"hanging wall"}


def test_known_fault_outranks_the_gap_for_the_walls():
    """Where the fault is known, its dip tells the walls at every depth."""
    x, z, _ = surface()
    assert not is_upright(PLANE)
    picks = assign_walls(table(x, z, source="grid"), PLANE)
    kept = leave_out_near_fault(picks, PLANE, 0.0, ["grid"])
    assert kept.wall.tolist() == picks.wall.tolist()


def test_samples_at_one_place_hide_no_gap():
    """Two tracked points at one x are no step; the gap is found all the same."""
    x, z, inside = surface()
    twice = np.sort(np.r_[np.arange(len(x)), np.arange(0, len(x), 7)])
    found = tracked_gap(x[twice], z[twice], PLANE)
    assert found[inside[twice]].all()
    assert found[~inside[twice]].sum() <= 4
