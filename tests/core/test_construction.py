"""The march: faults recovered, checked by hand, by area, by the growth of errors."""

import math
from dataclasses import replace

import numpy as np
import oracles
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from worlds import (
    CIRCULAR,
    EXPONENTIAL,
    FAULTS,
    PLANAR,
    World,
    direct_inputs,
)

from geomcore.construction import predict_fault
from geomcore.errors import ConstructionError
from geomcore.fault import KnownFault
from geomcore.forward import predict_horizon
from geomcore.kinematics import ConstantHeave
from geomcore.problem import MarchOptions
from geomcore.profile import Profile, line_through
from geomcore.separation import CutOff, Separation
from geomcore.stepping import hat_matrix, march

ANGLES = (0.0, 20.0, 30.0, 45.0, -10.0, -20.0)
SLOPES = {"level": 0.0, "2 down": -math.tan(math.radians(2.0)), "3 up": 0.05}


def truth_at(world, x):
    """The world's fault at many x."""
    return np.array([world.fault.z(v) for v in np.atleast_1d(x)])


def largest_miss(world, prediction):
    """Largest miss of a trace and the greatest depth below the regional."""
    truth = truth_at(world, prediction.trace.x)
    depth = (world.regional(prediction.trace.x) - truth).max()
    return np.abs(prediction.trace.z - truth).max(), depth


# Bar: 0.3 % of the greatest depth below the regional, 25 picks a strip, no noise;
# truth: particles moved one by one (oracles.moved_particle). The heave of 777.7
# divides nothing.
@pytest.mark.parametrize("slope", SLOPES.values(), ids=SLOPES)
@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("fault", FAULTS, ids=lambda f: f.name)
def test_known_fault_is_recovered_from_its_rollover(fault, angle, slope):
    """From the fault down to the hanging-wall cut-off the march finds the rest."""
    world = World(fault, angle, slope=slope, heave=777.7, per_strip=25.0)
    inputs = direct_inputs(world)
    prediction = predict_fault(**inputs)
    miss, depth = largest_miss(world, prediction)
    assert miss < 0.003 * depth
    assert prediction.oblique_heave == pytest.approx(world.oblique_heave)
    # down to where the shear line through the last pick meets the fault
    t, bed, trace = math.tan(math.radians(angle)), inputs["bed"], prediction.trace
    left = (bed.x[-1] - bed.z[-1] * t) - (trace.x[-1] - trace.z[-1] * t)
    assert 0.0 <= left + 1e-3 <= 1.01 * world.oblique_heave / 40


@pytest.mark.parametrize("heave", [301.0, 1500.0])
@pytest.mark.parametrize("angle", [0.0, 30.0, -10.0])
def test_small_and_large_heaves_are_recovered_alike(heave, angle):
    """Many strips of a small heave and few of a large one find the same fault."""
    world = World(EXPONENTIAL, angle, heave=heave, per_strip=25.0)
    miss, depth = largest_miss(world, predict_fault(**direct_inputs(world)))
    assert miss < 0.003 * depth


@pytest.mark.parametrize("angle", [-15.0, 0.0, 25.0])
@pytest.mark.parametrize("slope", [0.0, -0.04])
def test_march_equals_the_march_by_hand(angle, slope):
    """Strip by strip through plain lists gives the same fault to a millimetre."""
    world = World(EXPONENTIAL, angle, slope=slope, reach=7000.0, per_strip=8.0)
    inputs = direct_inputs(world)
    fault, cut = inputs["fault"], inputs["separation"]
    foot, hang = cut.footwall, cut.hanging_wall
    inner = (fault.x > foot.x) & (fault.x < hang.x)
    start = [(foot.x, foot.z), *zip(fault.x[inner], fault.z[inner]), (hang.x, hang.z)]
    bed = list(zip(inputs["bed"].x, inputs["bed"].z))
    by_hand = np.array(oracles.hand_march(start, bed, world.regional, angle, 40))
    prediction = predict_fault(**inputs)
    marched = prediction.trace.x >= foot.x - 1e-6
    x, z = prediction.trace.x[marched], prediction.trace.z[marched]
    assert len(x) == len(by_hand)
    assert x == pytest.approx(by_hand[:, 0], abs=1e-3)
    assert z == pytest.approx(by_hand[:, 1], abs=1e-3)


@pytest.mark.parametrize("angle", [0.0, 30.0])
def test_table_can_be_checked_by_hand(angle):
    """On every row F = F one heave inwards + B - R one heave inwards."""
    world = World(EXPONENTIAL, angle, slope=-0.02)
    inputs = direct_inputs(world)
    prediction = predict_fault(**inputs)
    table, heave = prediction.table, prediction.oblique_heave
    t = math.tan(math.radians(angle))
    line = inputs["regional"]
    assert table.strip.tolist() == [*range(prediction.strips + 1)]
    assert np.diff(table.u)[:-1] == pytest.approx(heave)
    assert table.u == pytest.approx(table.x - table.fault * t)
    for i in range(1, len(table.strip)):
        z = table.regional[i]
        assert z == pytest.approx(float(line(table.u[i] - heave + z * t)), abs=1e-6)
        bed_x = table.u[i] + table.bed[i] * t
        bed = float(np.interp(bed_x, inputs["bed"].x, inputs["bed"].z))
        assert table.bed[i] == pytest.approx(bed, abs=1e-3)
        assert table.increment[i] == table.bed[i] - z
    before = table.fault[:-2] + table.increment[1:-1]
    assert table.fault[1:-1] == pytest.approx(before, abs=1e-9)


def area_below_regional(world, inputs, last):
    """Area between regional, fault, bed and the shear line through the last pick.

    The gap above the fault from cut-off to cut-off belongs to it (methods.md 7).
    """
    foot = inputs["separation"].footwall
    x = np.linspace(foot.x, world.hanging_wall[0], 400)
    fault = np.column_stack([x, truth_at(world, x)])
    bed = np.column_stack([inputs["bed"].x, inputs["bed"].z])
    bed = bed[bed[:, 0] <= last[0] + 1e-9]
    t = math.tan(math.radians(world.angle))
    u = last[0] - last[1] * t
    up_x = (u + t * (foot.z - world.slope * foot.x)) / (1.0 - t * world.slope)
    ring = np.vstack([fault, bed, [[up_x, foot.z + world.slope * (up_x - foot.x)]]])
    x, z = ring.T
    return 0.5 * abs(np.sum(x * np.roll(z, -1) - z * np.roll(x, -1)))


# [N] methods.md section 7, eq. 8a: A(U) = integral of (R~ - F~) du over [U - H, U].
@pytest.mark.parametrize("slope", [0.0, -math.tan(math.radians(2.0))])
@pytest.mark.parametrize("angle", [-15.0, 0.0, 20.0, 45.0])
@pytest.mark.parametrize("fault", FAULTS, ids=lambda f: f.name)
def test_area_per_heave_is_the_mean_depth_under_the_last_strip(fault, angle, slope):
    """Lost area over oblique heave equals the mean of R - F over the last strip."""
    world = World(fault, angle, slope=slope)
    inputs = direct_inputs(world)
    prediction = predict_fault(**inputs)
    trace, heave = prediction.trace, prediction.oblique_heave
    t = math.tan(math.radians(angle))
    u = trace.x - trace.z * t
    line = inputs["regional"]
    at_zero = line.z0 - line.slope * line.x0
    level = (at_zero + line.slope * u) / (1.0 - line.slope * t)
    samples = np.linspace(u[-1] - heave, u[-1], 2001)
    mean = np.mean(np.interp(samples, u, level - trace.z))
    bed = np.column_stack([inputs["bed"].x, inputs["bed"].z])
    end = bed[:, 0] - bed[:, 1] * t
    last = [np.interp(u[-1], end, bed[:, i]) for i in (0, 1)]
    area = area_below_regional(world, inputs, last)
    assert area / heave == pytest.approx(mean, rel=0.005)


@settings(max_examples=25)
@given(
    st.floats(-12.0, 40.0),
    st.floats(400.0, 1300.0),
    st.floats(-0.05, 0.05),
    st.sampled_from([EXPONENTIAL, CIRCULAR]),
)
def test_horizon_of_the_predicted_fault_is_the_one_that_made_it(
    angle, heave, slope, fault
):
    """March, then forward model: the picks come back (an identity of the march)."""
    world = World(fault, angle, slope=slope, heave=heave, reach=8000.0)
    inputs = direct_inputs(world)
    made = predict_fault(**inputs)
    bed, foot, hang = predict_horizon(
        made.trace.x, made.trace.z, inputs["regional"], made.oblique_heave, angle
    )
    assert foot == pytest.approx(world.footwall, abs=0.5)
    assert hang == pytest.approx(world.hanging_wall, abs=0.5)
    picks = inputs["bed"]
    inside = (picks.x > bed.x[0]) & (picks.x < bed.x[-1])
    scale = 1e-3 * world.heave
    assert bed(picks.x[inside]) == pytest.approx(picks.z[inside], abs=scale)


def test_further_horizon_shares_the_oblique_heave():
    """A deeper pre-growth horizon of the fault is where its particles went."""
    world = World(EXPONENTIAL, 20.0)
    made = predict_fault(**direct_inputs(world))
    deeper = line_through(made.regional.x0, made.regional.z0 - 400.0, 0.0)
    bed, _, _ = predict_horizon(
        made.trace.x, made.trace.z, deeper, made.oblique_heave, 20.0
    )
    particles = np.array(
        oracles.rolled_bed(
            EXPONENTIAL, lambda x: -900.0, 20.0, world.oblique_heave, 100.0, 11000.0
        )
    )
    assert bed(particles[1:, 0]) == pytest.approx(particles[1:, 1], abs=1.0)


@pytest.mark.parametrize("angle", [0.0, 30.0])
def test_wiggle_of_the_start_is_copied_unchanged_into_every_strip(angle):
    """F plus anything of period H gives the same bed (methods.md 1, null space)."""
    world = World(EXPONENTIAL, angle)
    inputs = direct_inputs(world)
    fault = inputs["fault"]
    t = math.tan(math.radians(angle))
    foot, heave = inputs["separation"].footwall, world.oblique_heave
    phase = (fault.x - fault.z * t - foot.x + foot.z * t) / heave
    wiggle = np.where(phase > 0, 20.0 * np.sin(2 * np.pi * phase), 0.0)
    # along the shear lines: x moves with z
    moved = replace(fault, x=fault.x + wiggle * t, z=fault.z + wiggle)
    one, other = predict_fault(**inputs), predict_fault(**{**inputs, "fault": moved})
    strips = [
        [(p.trace.z[p.trace.strip == k])[:39] for k in (1, 2, 5)] for p in (one, other)
    ]
    differences = [b - a for a, b in zip(*strips)]
    assert np.abs(differences[0]).max() > 15.0
    for later in differences[1:]:
        assert later == pytest.approx(differences[0], abs=1e-6)


def test_straight_start_is_too_high_by_its_sagitta_in_every_strip():
    """A chord for the start errs by 0 to H^2 F''/8, the same in every strip [N]."""
    world = World(EXPONENTIAL, heave=600.0)
    inputs = direct_inputs(world)
    foot, hang = world.footwall, world.hanging_wall
    chord = KnownFault(
        np.array([foot[0], hang[0]]), np.array([foot[1], hang[1]]), 0.0, -2.0, -1.0, "-"
    )
    made = predict_fault(**{**inputs, "fault": chord})
    for strip in (1, 3, 6):
        own = made.trace.strip == strip
        miss = made.trace.z[own] - truth_at(world, made.trace.x[own])
        # methods.md section 13 gives 0 to 26, mean 17, for this fault and heave
        assert miss.min() > -0.5
        assert miss.max() == pytest.approx(26.0, abs=2.0)
        assert miss.mean() == pytest.approx(17.0, abs=2.0)


def marched_with(world, **changes):
    """Predict with some inputs changed and give the trace."""
    return predict_fault(**{**direct_inputs(world), **changes}).trace


def at_strip_ends(world, trace, strips):
    """Fault elevation at the ends of strips of a vertical-shear world."""
    x = world.hanging_wall[0] + world.heave * np.array(strips)
    return trace.z_at(x)


# Rows of the error table of methods.md section 13 [N].
def test_error_of_the_regional_level_grows_by_itself_every_strip():
    """A regional 10 too high makes the fault 10 too deep for every strip."""
    world = World(EXPONENTIAL, heave=600.0)
    line = direct_inputs(world)["regional"]
    wrong = marched_with(world, regional=line.shifted(10.0, 0.0))
    miss = at_strip_ends(world, wrong, [1, 5, 10]) - at_strip_ends(
        world, marched_with(world), [1, 5, 10]
    )
    assert miss == pytest.approx([-10.0, -50.0, -100.0], abs=1e-6)


def test_error_of_the_regional_dip_grows_with_the_square_of_the_strips():
    """A dip error de about the cut-off gives -tan(de) h n(n-1)/2 at the cut-offs."""
    world = World(EXPONENTIAL, heave=600.0)
    line = direct_inputs(world)["regional"]
    de = math.tan(math.radians(0.5))
    wrong = marched_with(world, regional=line.shifted(0.0, de))
    strips = np.array([1, 5, 10])
    miss = at_strip_ends(world, wrong, strips) - at_strip_ends(
        world, marched_with(world), strips
    )
    # n strips below the footwall cut-off: the hanging-wall cut-off ends the first
    n = strips + 1
    assert miss == pytest.approx(-de * 600.0 * n * (n - 1) / 2, rel=1e-6)


def test_error_of_the_shear_angle_is_as_the_table_says():
    """Five degrees too much antithetic shear: 213 too shallow in strip 5 [N]."""
    world = World(EXPONENTIAL, heave=600.0)
    wrong = marched_with(world, model=ConstantHeave(5.0))
    for strip, mean in ((5, 213.0), (10, 326.0)):
        x = world.footwall[0] + 600.0 * (strip + np.linspace(0.0, 1.0, 60))
        miss = wrong.z_at(x) - truth_at(world, x)
        assert miss.mean() == pytest.approx(mean, rel=0.1)


def test_trace_tells_known_from_predicted_piece_by_piece():
    """Above and between the cut-offs the fault is known, below it is predicted."""
    world = World(EXPONENTIAL, 20.0)
    trace = predict_fault(**direct_inputs(world)).trace
    hang = world.hanging_wall[0]
    assert np.all(np.diff(trace.x) > 0)
    known = trace.constrained == "known"
    assert np.array_equal(known, trace.x <= hang + 1e-6)
    assert np.array_equal(trace.strip == 0, known)
    assert set(trace.constrained) == {"known", "predicted"}
    assert trace.x[0] == 0.0
    assert trace.length > trace.x[-1] - trace.x[0]
    assert np.isnan(trace.z_at(trace.x[-1] + 1.0))


def test_strips_are_numbered_one_heave_wide():
    """A node n heaves beyond the hanging-wall cut-off lies in strip n."""
    world = World(EXPONENTIAL, 20.0)
    made = predict_fault(**direct_inputs(world))
    t = math.tan(math.radians(20.0))
    u = made.trace.x - made.trace.z * t
    foot = made.separation.footwall
    strips = (u - (foot.x - foot.z * t)) / made.oblique_heave
    expected = np.maximum(np.ceil(strips - 1e-6) - 1, 0)
    assert made.trace.strip.tolist() == expected.tolist()
    assert made.strips == made.trace.strip.max()


def test_dip_at_each_point_is_that_of_the_fault():
    """The dip is positive down towards the hanging wall and that of the closed form."""
    world = World(EXPONENTIAL, 0.0, per_strip=60.0)
    trace = predict_fault(**direct_inputs(world)).trace
    length = 4000.0 / math.tan(math.radians(60.0))
    slope = 4000.0 / length * np.exp(-trace.x / length)
    inside = slice(3, -3)
    assert trace.dip[inside] == pytest.approx(
        np.degrees(np.arctan(slope))[inside], abs=0.5
    )


@pytest.mark.parametrize("angle", [0.0, 20.0])
@pytest.mark.parametrize("slope", [0.0, -0.02])
def test_detachment_is_given_where_the_bed_is_back(angle, slope):
    """Over a level detachment the bed returns to R one heave back, also if R dips."""
    world = World(CIRCULAR, angle, slope=slope)
    made = predict_fault(**direct_inputs(world, sigma=1.0))
    assert made.detachment_z == pytest.approx(-3500.0, abs=1.0)
    assert made.deepest_z == pytest.approx(-3500.0, abs=1.0)


def test_detachment_is_not_claimed_before_the_bed_is_back():
    """Where the bed is still below its far position only a least depth is said."""
    world = World(CIRCULAR, 0.0, reach=5500.0)
    made = predict_fault(**direct_inputs(world, sigma=1.0))
    assert made.detachment_z is None
    assert made.deepest_z == pytest.approx(truth_at(world, made.trace.x[-1])[0], abs=2)
    planar = predict_fault(**direct_inputs(World(PLANAR), sigma=1.0))
    assert planar.detachment_z is None


@pytest.mark.parametrize("samples", [4, 7, 40, 333])
def test_number_of_samples_changes_nothing_at_the_strip_ends(samples):
    """The step is the heave over the samples, so strip ends never move."""
    world = World(EXPONENTIAL, 0.0)
    made = predict_fault(**direct_inputs(world), options=MarchOptions(samples))
    fine = predict_fault(**direct_inputs(world), options=MarchOptions(500))
    strips = [1, 4, 9]
    assert at_strip_ends(world, made.trace, strips) == pytest.approx(
        at_strip_ends(world, fine.trace, strips), abs=1e-6
    )


def test_vertical_exaggeration_may_stay_under_vertical_shear():
    """A section drawn three times too high gives the answer three times too high."""
    world = World(EXPONENTIAL, 0.0, slope=-0.02)
    inputs = direct_inputs(world)
    cut, fault, line, bed = (
        inputs[k] for k in ("separation", "fault", "regional", "bed")
    )
    tall = predict_fault(
        **{
            **inputs,
            "separation": Separation(
                "A",
                replace(cut.footwall, z=3 * cut.footwall.z),
                replace(cut.hanging_wall, z=3 * cut.hanging_wall.z),
            ),
            "fault": replace(
                fault,
                z=3 * fault.z,
                slope_above=3 * fault.slope_above,
                slope_below=3 * fault.slope_below,
            ),
            "regional": replace(line, z0=3 * line.z0, slope=3 * line.slope),
            "bed": Profile(bed.x, 3 * bed.z, bed.sigma),
        }
    )
    assert tall.trace.z == pytest.approx(3 * predict_fault(**inputs).trace.z)


def refusal(**changes):
    """Predict with changed inputs; the error that comes."""
    inputs = {**direct_inputs(World(EXPONENTIAL)), **changes}
    with pytest.raises(ConstructionError) as caught:
        predict_fault(**inputs)
    assert "section S1" in str(caught.value)
    assert caught.value.remedy
    return caught.value


def cut(foot, hang):
    """A separation of horizon A."""
    return Separation("A", CutOff("footwall", *foot), CutOff("hanging wall", *hang))


def test_reverse_separation_is_refused():
    """Cut-offs that overlap give no construction."""
    error = refusal(separation=cut((900.0, -500.0), (700.0, -600.0)))
    assert error.code == "reverse-separation"
    assert "200.0 behind" in str(error)


def test_hanging_wall_above_the_footwall_is_refused():
    """A throw up means sides, signs or names are wrong."""
    error = refusal(separation=cut((300.0, -500.0), (900.0, -400.0)))
    assert error.code == "wrong-side"
    assert "100.0 above" in str(error)


def test_synthetic_shear_along_the_fault_is_refused():
    """Where the oblique heave nearly vanishes no strip is left (methods.md 2)."""
    error = refusal(model=ConstantHeave(-35.0))
    assert error.code == "shear-parallel-to-fault"
    assert "-35" in str(error)
    gentle = World(PLANAR, -20.0)
    assert predict_fault(**direct_inputs(gentle)).oblique_heave > 0.15 * gentle.heave


def test_known_piece_steeper_than_the_shear_planes_is_refused():
    """A steep step of the known fault has two elevations on one shear line."""
    inputs = direct_inputs(World(EXPONENTIAL))
    fault = inputs["fault"]
    z = fault.z.copy()
    i = np.searchsorted(fault.x, 700.0)
    x = np.insert(fault.x, i, fault.x[i] - 0.5)
    z = np.insert(z, i, z[i - 1] - 0.1)
    error = refusal(fault=replace(fault, x=x, z=z), model=ConstantHeave(-20.0))
    assert error.code == "shear-parallel-to-fault"
    assert "fault dips" in str(error)


def test_heave_that_needs_more_strips_than_anybody_trusts_is_refused():
    """A heave of metres against kilometres of picks ends in words, not in memory."""
    hang = World(EXPONENTIAL).hanging_wall
    error = refusal(separation=cut((hang[0] - 2.0, hang[1] + 2.0), hang))
    assert error.code == "too-many-strips"
    assert "strips to the end" in str(error)


def test_bed_that_ends_within_one_heave_is_refused():
    """A bed shorter than a strip says nothing of the fault at depth."""
    bed = direct_inputs(World(EXPONENTIAL))["bed"]
    short = bed.x < bed.x[0] + 20.0
    error = refusal(bed=Profile(bed.x[short], bed.z[short], bed.sigma[short]))
    assert error.code == "bed-too-short"


def bed_in_two_dips(slope, width):
    """A bed that rises steeply from the cut-off and lies level from there on."""
    hang = World(EXPONENTIAL).hanging_wall
    x = hang[0] + np.linspace(0.0, width, 30)
    far = np.linspace(x[-1] + 50.0, 9000.0, 60)
    top = hang[1] + slope * width
    z = np.r_[hang[1] + slope * (x - hang[0]), np.full(60, top)]
    return Profile(np.r_[x, far], z, np.ones(90))


def test_bed_steeper_than_the_shear_planes_is_refused():
    """A bed dipping more than the planes has no single place on a shear line."""
    wide = bed_in_two_dips(1.2, 2500.0)
    error = refusal(bed=wide, model=ConstantHeave(45.0))
    assert error.code == "shear-parallel-to-bed"
    assert "near x =" in str(error)


def test_fault_that_turns_back_is_refused_with_its_place():
    """A bed that goes down steeply for strips would fold the fault back."""
    inputs = direct_inputs(World(EXPONENTIAL, 30.0))
    hang, t = inputs["separation"].hanging_wall, math.tan(math.radians(30.0))
    along = np.linspace(0.0, 2.5 * World(EXPONENTIAL, 30.0).oblique_heave, 80)
    z = hang.z - 1.2 * along
    x = hang.x - hang.z * t + along + z * t
    error = refusal(**{**inputs, "bed": Profile(x, z, np.ones(80))})
    assert error.code == "fault-not-single-valued"
    assert "near x =" in str(error)


def horizon_refusal(x, z, regional, heave, angle=0.0):
    """Predict a horizon; the error that comes."""
    with pytest.raises(ConstructionError) as caught:
        predict_horizon(np.array(x), np.array(z), regional, heave, angle)
    return caught.value.code


def test_horizon_cannot_be_predicted_without_a_footwall_cut_off():
    """The regional has to meet the fault, and the fault to go on from there."""
    x, z = [0.0, 1000.0, 3000.0], [0.0, -1000.0, -2000.0]
    level = line_through(0.0, 500.0, 0.0)
    assert horizon_refusal(x, z, level, 500.0) == "no-cutoff"
    level = line_through(0.0, -1900.0, 0.0)
    assert horizon_refusal(x, z, level, 500.0) == "fault-too-short"
    steep = [0.0, -4000.0, -4500.0]
    level = line_through(0.0, -500.0, 0.0)
    assert horizon_refusal(x, steep, level, 500.0, -30.0) == "shear-parallel-to-fault"


@given(
    st.lists(st.integers(-50, 50), min_size=3, max_size=8),
    st.lists(st.integers(-50, 50), min_size=0, max_size=30),
)
def test_stepping_equals_a_loop_over_the_nodes(start, more):
    """The march in strips equals going from node to node."""
    m = len(start) - 1
    increment = np.array([0.0] * len(start) + more, dtype=float)
    origin = np.maximum(np.arange(len(increment)) - m, 0)
    got = march(origin, np.zeros(len(increment)), np.array(start, float), increment)
    expected = list(map(float, start))
    for i in range(len(start), len(increment)):
        expected.append(expected[i - m] + increment[i])
    assert got.tolist() == expected


def test_column_that_has_not_moved_is_refused():
    """A column whose origin is itself would be its own support."""
    with pytest.raises(ConstructionError, match="has not moved") as caught:
        march(np.array([0, 1, 2]), np.zeros(3), np.zeros(2), np.zeros(3))
    assert caught.value.code == "no-progress"


@given(st.lists(st.floats(-5, 25), min_size=1, max_size=10))
def test_interpolation_weights_give_linear_interpolation(at):
    """Weights times values equals numpy's interpolation, ends held."""
    points = np.array([0.0, 3.0, 4.5, 20.0])
    values = np.array([1.0, -2.0, 7.0, 0.5])
    got = hat_matrix(np.array(at), points) @ values
    assert got == pytest.approx(np.interp(at, points, values))
