"""Doubts of a march that runs: each one raised by its cause, and silent without it."""

import math
from dataclasses import replace

import numpy as np
import oracles
import pytest
from worlds import EXPONENTIAL, World, direct_inputs

from geomcore.construction import predict_fault
from geomcore.fault import KnownFault
from geomcore.profile import Profile

#: A section without any doubt: few strips, level detachment, dense picks.
SHALLOW = oracles.circular_fault(dip=50.0, radius=5000.0)
SOUND = World(SHALLOW, 0.0, z0=-300.0, heave=1200.0, reach=7500.0)


def doubts(world=SOUND, **changes):
    """Predict and give the doubts by code."""
    inputs = {**direct_inputs(world, sigma=1.0), **changes}
    return {d.code: d for d in predict_fault(**inputs).doubts}


def thinned(world, keep):
    """The world's bed with only the picks that pass a test of x."""
    bed = direct_inputs(world, sigma=1.0)["bed"]
    kept = keep(bed.x)
    return Profile(bed.x[kept], bed.z[kept], bed.sigma[kept])


@pytest.mark.parametrize("angle", [0.0, 20.0])
def test_sound_section_raises_no_doubt(angle):
    """Dense picks, few strips and a bed that is back leave nothing to doubt."""
    assert doubts(replace(SOUND, angle=angle)) == {}


def test_assumed_piece_is_doubted_and_says_how_it_was_assumed():
    """Trace and dip alone, or picks that end above the cut-off, are said."""
    slope = -math.tan(math.radians(50.0))
    lone = KnownFault(
        np.zeros(1), np.zeros(1), 1.0, slope, slope, "the dip of 50 degrees"
    )
    found = doubts(fault=lone)
    assert "the dip of 50 degrees" in found["assumed-piece"].text
    assert found["assumed-piece"].where == "section S1"
    fault = direct_inputs(SOUND)["fault"]
    short = replace(fault, x=fault.x[:40], z=fault.z[:40])
    assert "assumed-piece" in doubts(fault=short)


def test_assumed_piece_is_marked_on_the_trace():
    """What is not known between the cut-offs is assumed, point by point."""
    fault = direct_inputs(SOUND)["fault"]
    short = replace(fault, x=fault.x[:40], z=fault.z[:40])
    trace = predict_fault(**{**direct_inputs(SOUND, 1.0), "fault": short}).trace
    hang = SOUND.hanging_wall[0]
    assumed = (trace.x > short.x[-1]) & (trace.x <= hang + 1e-6)
    assert set(trace.constrained[assumed]) == {"assumed"}
    assert set(trace.constrained[trace.x < short.x[-1]]) == {"known"}
    assert set(trace.constrained[trace.x > hang + 1e-6]) == {"predicted"}


def test_gap_of_the_known_fault_between_the_cut_offs_is_assumed_straight():
    """Two cut-offs and nothing between them are no known piece of fault."""
    foot, hang = SOUND.footwall, SOUND.hanging_wall
    x = np.array([0.0, foot[0], hang[0]])
    ends = KnownFault(
        x, np.array([0.0, foot[1], hang[1]]), 1.0, -1.2, -0.9, "the last two points"
    )
    inputs = {**direct_inputs(SOUND, 1.0), "fault": ends}
    made = predict_fault(**inputs)
    assert "assumed-piece" in {d.code for d in made.doubts}
    between = (made.trace.x > foot[0] + 1) & (made.trace.x < hang[0] - 1)
    assert set(made.trace.constrained[between]) == {"assumed"}


def test_horizon_that_ends_before_the_fault_is_doubted():
    """Extended by more than half a heave the cut-off is no observation."""
    hang = SOUND.hanging_wall[0]
    far = thinned(SOUND, lambda x: x > hang + 700.0)
    assert "ends 7" in doubts(bed=far)["horizon-ends-before-fault"].text
    near = thinned(SOUND, lambda x: x > hang + 400.0)
    assert "horizon-ends-before-fault" not in doubts(bed=near)


def test_heave_small_against_the_pick_spacing_is_doubted():
    """Less than two picks a heave see no rollover within a strip."""
    hang = SOUND.hanging_wall[0]
    x = np.arange(hang + 100.0, 7500.0, 700.0)
    bed = direct_inputs(SOUND, sigma=1.0)["bed"]
    assert "small-heave" in doubts(bed=Profile(x, bed(x), np.ones(len(x))))
    x = np.arange(hang + 100.0, 7500.0, 500.0)
    assert "small-heave" not in doubts(bed=Profile(x, bed(x), np.ones(len(x))))


def test_gap_in_the_bed_longer_than_a_strip_is_doubted_with_its_place():
    """Straight across more than a strip is an assumption."""
    gap = thinned(SOUND, lambda x: (x < 3000.0) | (x > 4400.0))
    said = doubts(bed=gap)["gap-in-bed"].text
    at = gap.x[gap.x < 3000.0][-1]
    assert f"x = {at:.0f}" in said
    small = thinned(SOUND, lambda x: (x < 3000.0) | (x > 4000.0))
    assert "gap-in-bed" not in doubts(bed=small)


@pytest.mark.parametrize(
    ("angle", "raised"), [(-38.0, True), (-20.0, False), (60.0, False)]
)
def test_shear_planes_close_to_the_fault_are_doubted(angle, raised):
    """Within ten degrees of the cut-off dip synthetic shear runs along the fault."""
    world = replace(SOUND, angle=angle, fault=oracles.segmented_fault("p", [43.0], []))
    assert ("shear-near-parallel" in doubts(world)) == raised


@pytest.mark.parametrize(("dip", "raised"), [(48.0, True), (20.0, False)])
def test_shear_planes_close_to_the_bed_are_doubted(dip, raised):
    """Antithetic planes and a bed rising nearly as steeply leave no clear column."""
    inputs = direct_inputs(replace(SOUND, angle=35.0), sigma=1.0)
    hang = inputs["separation"].hanging_wall
    x = np.linspace(hang.x, hang.x + 3000.0, 60)
    z = hang.z + math.tan(math.radians(dip)) * (x - hang.x)
    inputs["bed"] = Profile(x, z, np.ones(60))
    codes = {d.code for d in predict_fault(**inputs).doubts}
    assert ("shear-near-parallel" in codes) == raised


def test_fault_that_rises_outwards_is_doubted_with_its_place():
    """A bed above its far position lifts the fault."""
    bed = direct_inputs(SOUND, sigma=1.0)["bed"]
    hump = np.where((bed.x > 5500.0), 0.2 * (bed.x - 5500.0), 0.0)
    found = doubts(bed=Profile(bed.x, bed.z + hump, bed.sigma))
    assert "x =" in found["fault-rises"].text
    assert "bed-above-regional" in found
    assert "x =" in found["bed-above-regional"].text


def test_noise_of_the_stated_sigma_is_no_bed_above_regional():
    """Picks that scatter about the regional are not above it."""
    rng = np.random.default_rng(4)
    bed = direct_inputs(SOUND, sigma=10.0)["bed"]
    noisy = Profile(bed.x, bed.z + rng.normal(0.0, 10.0, len(bed)), bed.sigma)
    assert "bed-above-regional" not in doubts(bed=noisy)


def test_fault_steeper_than_eighty_degrees_is_doubted():
    """A sudden drop of the bed makes a fault nobody would draw."""
    bed = direct_inputs(SOUND, sigma=1.0)["bed"]
    drop = np.where(bed.x > 3000.0, -300.0, 0.0)
    said = doubts(bed=Profile(bed.x, bed.z + drop, bed.sigma))["fault-steep"].text
    assert "degrees near x = 3" in said


def test_regional_not_reached_says_how_deep_the_fault_goes_at_least():
    """Where the picks end too early there is no detachment."""
    short = thinned(SOUND, lambda x: x < 4500.0)
    made = predict_fault(**{**direct_inputs(SOUND, 1.0), "bed": short})
    said = {d.code: d.text for d in made.doubts}["regional-not-reached"]
    assert f"{made.deepest_z:.0f} at least" in said
    assert made.detachment_z is None


def test_many_strips_are_doubted_with_their_number():
    """After six strips without a deep tie the march should not be trusted."""
    six = replace(SOUND, heave=900.0, reach=6400.0)
    made = predict_fault(**direct_inputs(six, sigma=1.0))
    assert made.strips == 6
    assert "many-strips" not in {d.code for d in made.doubts}
    seven = replace(SOUND, heave=900.0, reach=7300.0)
    assert doubts(seven)["many-strips"].text.startswith("7 strips")


def test_prediction_of_a_deep_exponential_fault_is_doubted_for_its_reach():
    """The textbook fault never quite reaches its detachment."""
    assert {"regional-not-reached", "many-strips"} <= set(doubts(World(EXPONENTIAL)))
