"""Area balance: lost areas, the detachment they give, and the restored section."""

import math
import sys
from dataclasses import replace

import numpy as np
import oracles
import pytest
from scipy.integrate import quad
from worlds import (
    DOCUMENT,
    EXPONENTIAL,
    KINKED,
    PLANAR,
    World,
    changed,
    direct_inputs,
    line_for,
    sources_for,
    truth_points,
)

from geomcore.balance import (
    area_convergence,
    area_depth,
    compare_detachment,
    detachment_from_area,
    lost_area,
    lost_areas,
)
from geomcore.balancing import balance_section, section_horizons
from geomcore.compaction import Compaction
from geomcore.construction import predict_fault
from geomcore.errors import ConstructionError, GeomcoreError
from geomcore.fault import KnownFault
from geomcore.kinematics import ConstantHeave, ConstantSlip
from geomcore.porosity import preset
from geomcore.problem import MarchOptions, Problem, bed_from
from geomcore.profile import Profile, Regional
from geomcore.regression import line_with_errors
from geomcore.restoration import restored_section
from geomcore.separation import CutOff, Separation
from geomcore.sources import Features
from geomcore.study import Study, run


def horizon_at(world, name="A", sigma=0.0, **cuts):
    """Write the world's horizon as a problem; the bed is moved point by point."""
    foot, hang = world.footwall, world.hanging_wall
    x = np.linspace(0.0, hang[0], 1500)
    points = world.fault_points(x)
    fault = KnownFault(points[:, 0], points[:, 1], 0.0, -1.7, -1.0, "the truth")
    bed = world.bed()
    profile = Profile(bed[:, 0], bed[:, 1], np.full(len(bed), sigma))
    separation = Separation(
        name, CutOff("footwall", *foot, **cuts), CutOff("hanging wall", *hang, **cuts)
    )
    return Problem(
        "section S1",
        separation,
        fault,
        bed_from(separation.hanging_wall, profile),
        Regional(*foot, world.slope),
        ConstantHeave(world.angle),
        MarchOptions(),
    )


def heave_for(world, oblique):
    """Give the heave of a world whose oblique heave is to be a round number."""
    t = math.tan(math.radians(world.angle))
    x, z = world.footwall
    u = x - z * t + oblique
    return u + oracles.foot_of_shear_line(world.fault, u, world.angle) * t - x


def mean_fault(world, u_low, u_high):
    """Mean elevation of the true fault between two shear lines, by quadrature."""
    whole = quad(
        lambda u: oracles.foot_of_shear_line(world.fault, u, world.angle), u_low, u_high
    )[0]
    return whole / (u_high - u_low)


# --- the area ------------------------------------------------------------------------


@pytest.mark.parametrize("slope", [0.0, 0.05, -math.tan(math.radians(2.0))])
@pytest.mark.parametrize("angle", [0.0, 30.0, -15.0])
def test_lost_area_is_the_fault_under_the_last_strip(angle, slope):
    """(8a): A up to any shear line = integral of R~ - F~ over one H, to 6 figures.

    [N] methods.md section 7; the bed is moved by root finding, the right side is a
    quadrature over the true fault.
    """
    world = World(EXPONENTIAL, angle, slope=slope, reach=5200.0, per_strip=250.0)
    problem = horizon_at(world)
    for end in (None, 3210.0 + 500.0 * math.tan(math.radians(angle))):
        lost = lost_area(problem, end)
        low = lost.end_u - world.oblique_heave
        fault = mean_fault(world, low, lost.end_u)
        t = math.tan(math.radians(angle))
        # R~(u) = (z0 + slope u)/(1 - slope tan a), a straight line
        regional = (world.z0 + slope * 0.5 * (low + lost.end_u)) / (1.0 - slope * t)
        expected = (regional - fault) * world.oblique_heave
        assert lost.total == pytest.approx(expected, rel=2e-6)
        assert lost.regional_z == pytest.approx(regional, abs=1e-6)
        assert lost.displacement == pytest.approx(world.oblique_heave)


def test_the_gap_above_the_fault_is_part_of_the_area():
    """Without the gap from cut-off to cut-off 5-15 % would be missing (section 7)."""
    world = World(EXPONENTIAL, reach=12000.0)
    lost = lost_area(horizon_at(world))
    foot, hang = world.footwall, world.hanging_wall
    triangle = 0.5 * (hang[0] - foot[0]) * (foot[1] - hang[1])
    # the fault sags below its chord, so that the gap is more than the triangle
    assert triangle < lost.gap < 1.15 * triangle
    assert 0.05 < lost.gap / lost.total < 0.2
    assert lost.total == lost.gap + lost.below


def test_bed_above_its_regional_counts_negative():
    """A bump above the regional is taken off, and reported by itself."""
    world = World(EXPONENTIAL, reach=9000.0)
    problem = horizon_at(world)
    bed = problem.bed
    bump = np.where((bed.x > 6000.0) & (bed.x < 7000.0), 400.0, 0.0)
    lifted = replace(problem, bed=Profile(bed.x, bed.z + bump, bed.sigma))
    plain, lost = lost_area(problem), lost_area(lifted)
    assert plain.above == 0.0 > lost.above
    weights = np.gradient(bed.x)
    assert plain.total - lost.total == pytest.approx((weights * bump).sum(), rel=1e-3)
    # a rising zigzag across the regional, by hand: two triangles of 50 x 10 / 2
    level = replace(
        problem,
        bed=Profile(
            np.r_[bed.x[0], bed.x[0] + 100.0, bed.x[0] + 200.0],
            np.r_[bed.z[0], -510.0, -490.0],
            np.zeros(3),
        ),
    )
    assert lost_area(level).above == pytest.approx(-250.0)


def test_lifted_footwall_counts_negative():
    """Footwall uplift above the regional belongs to the balance (Groshong 1994)."""
    world = World(EXPONENTIAL, reach=6000.0)
    problem, foot = horizon_at(world), World().footwall
    x = np.array([foot[0] - 1000.0, foot[0] - 500.0, foot[0] - 100.0])
    lifted = Profile(x, [-500.0, -480.0, -480.0], np.full(3, 2.0))
    lost = lost_area(problem, footwall=lifted)
    # trapezoids by hand, the last down to the cut-off
    assert lost.footwall == pytest.approx(-(5000.0 + 8000.0 + 1000.0))
    plain = lost_area(problem)
    assert lost.total == pytest.approx(plain.total + lost.footwall)
    assert lost.sigma > plain.sigma


def test_area_is_asked_for_within_the_bed_only():
    """Nothing is made up beyond the last pick."""
    problem = horizon_at(World(EXPONENTIAL, reach=5000.0))
    with pytest.raises(ConstructionError, match="up to u = 9000") as caught:
        lost_area(problem, 9000.0)
    assert caught.value.code == "area-end"


def test_stated_error_of_the_area_is_its_scatter():
    """Noise on picks, and a regional of unsure level and dip: 400 draws."""
    world = World(EXPONENTIAL, reach=6000.0, per_strip=10.0)
    problem = horizon_at(world, sigma=8.0)
    covariance = np.array([[9.0, -4e-3], [-4e-3, 9e-6]])
    line = replace(problem.regional, covariance=(9.0, -4e-3, 9e-6))
    stated = lost_area(replace(problem, regional=line))
    rng = np.random.default_rng(3)
    areas, levels = [], []
    for level, slope in rng.multivariate_normal([0.0, 0.0], covariance, 400):
        noise = rng.normal(0.0, 8.0, len(problem.bed))
        noise[0] = 0.0
        bed = Profile(problem.bed.x, problem.bed.z + noise, problem.bed.sigma)
        moved = replace(problem, bed=bed, regional=line.shifted(level, slope))
        one = lost_area(moved)
        areas.append(one.total)
        levels.append(one.regional_z)
    # 400 draws know a scatter to 3.5 %; the bar is three times that
    assert stated.sigma == pytest.approx(np.std(areas), rel=0.11)
    assert stated.regional_sigma == pytest.approx(np.std(levels), rel=0.11)
    assert stated.covariance == pytest.approx(np.cov(areas, levels)[0, 1], rel=0.25)


def test_picks_that_err_together_make_the_area_less_sure():
    """Contour picks: the error of the area is that of their whole covariance."""
    problem = horizon_at(World(EXPONENTIAL, reach=6000.0, per_strip=10.0), sigma=8.0)
    length = np.full(len(problem.bed), 500.0)
    length[0] = 0.0  # the cut-off, which has no error here
    bed = Profile(problem.bed.x, problem.bed.z, problem.bed.sigma, length)
    together = lost_area(replace(problem, bed=bed))
    # trapezoid weights of every pick, errors tied by exp(-distance/length)
    width = np.diff(bed.x)
    weight = 0.5 * (np.r_[0.0, width] + np.r_[width, 0.0])
    apart = np.abs(np.subtract.outer(bed.x, bed.x))
    tied = np.exp(-apart / 500.0) * np.outer(bed.sigma, bed.sigma)
    variance = weight @ tied @ weight
    assert together.sigma == pytest.approx(math.sqrt(variance))
    assert together.sigma > 2.0 * lost_area(problem).sigma


# --- convergence, and the detachment from one horizon --------------------------------


def test_area_over_displacement_levels_off_where_the_detachment_is_reached():
    """A/H against the end: still growing at 4 km, level at 14 km."""
    short = area_convergence(horizon_at(World(EXPONENTIAL, reach=4000.0)))
    assert not short.levelled
    assert "has not levelled off" in short.text
    whole = area_convergence(horizon_at(World(EXPONENTIAL, reach=14000.0)))
    assert whole.levelled
    assert np.all(np.diff(whole.depth) > 0)
    assert whole.fault_z[-1] == pytest.approx(-4000.0, rel=0.005)
    assert np.diff(whole.u) == pytest.approx(np.full(len(whole.u) - 1, 225.0))
    tiny = area_convergence(horizon_at(World(EXPONENTIAL, reach=1900.0)))
    assert tiny.change is None
    assert "within two strips" in tiny.text
    assert "levelled=True" in repr(whole)


def test_one_horizon_is_said_to_be_no_test():
    """Its area over its own H is the construction's own equation, in these words."""
    world = World(EXPONENTIAL, 20.0, reach=9000.0)
    problem = horizon_at(world, sigma=3.0)
    made = detachment_from_area(lost_area(problem))
    low = problem.oblique_heave
    end = lost_area(problem).end_u
    assert made.z == pytest.approx(mean_fault(world, end - low, end), abs=0.5)
    assert not made.independent
    assert "No independent test" in made.statement
    assert made.sigma > 0


def test_measured_displacement_makes_it_a_test():
    """H measured otherwise, e.g. where a deep reflector is offset, is independent."""
    lost = lost_area(horizon_at(World(EXPONENTIAL, reach=14000.0)))
    made = detachment_from_area(lost, 1000.0, 50.0, "offset of a marker in the north")
    assert made.independent
    assert "offset of a marker" in made.statement
    assert made.z == pytest.approx(lost.regional_z - lost.total / 1000.0)
    # without pick errors only H is unsure: dz = A/H^2 dH
    assert made.sigma == pytest.approx(lost.total / 1000.0**2 * 50.0)
    with pytest.raises(ConstructionError, match="where it was measured") as caught:
        detachment_from_area(lost, 1000.0)
    assert caught.value.code == "displacement-source"


def test_error_of_the_displacement_follows_from_the_cut_offs():
    """Given cut-offs err in x and z; found ones slide, and cost less under shear."""
    given = horizon_at(World(EXPONENTIAL, 30.0), sigma_x=10.0, sigma_z=6.0)
    t = math.tan(math.radians(30.0))
    one = math.hypot(10.0, 6.0 * t)
    assert lost_area(given).displacement_sigma == pytest.approx(one * math.sqrt(2.0))
    slid = horizon_at(World(EXPONENTIAL, 30.0), sigma_x=10.0, sigma_z=6.0, slides=True)
    # down the fault x grows and z falls: H changes by dx - dz tan(a), dz negative
    both = (10.0 + 6.0 * t) * math.sqrt(2.0)
    assert lost_area(slid).displacement_sigma == pytest.approx(both)


# --- several horizons ----------------------------------------------------------------

LEVELS = {"A": -300.0, "B": -600.0, "C": -1000.0, "D": -1500.0}


def horizons_of(world, levels=LEVELS, oblique=900.0, sigma=0.0, **cuts):
    """Several pre-growth horizons over one fault, with one displacement."""
    made = []
    for name, z in levels.items():
        own = replace(world, z0=z)
        own = replace(own, heave=heave_for(own, oblique))
        made.append(horizon_at(own, name, sigma, **cuts))
    return made


@pytest.mark.parametrize("angle", [0.0, 25.0])
def test_area_depth_gives_displacement_and_detachment(angle):
    """Far out over a level detachment: slope = H, zero crossing = the detachment."""
    world = World(EXPONENTIAL, angle, reach=24000.0, per_strip=40.0)
    made = area_depth(lost_areas(horizons_of(world)))
    assert made.displacement == pytest.approx(900.0, rel=1e-4)
    assert made.detachment_z == pytest.approx(-4000.0, abs=1.0)
    assert made.horizons == tuple(LEVELS)
    low, high = made.detachment_interval
    assert low <= made.detachment_z <= high
    assert "4 pre-growth horizons" in made.text
    assert "detachment_z=-4000" in repr(made) or "detachment_z=-3999" in repr(made)


def test_before_the_detachment_is_reached_it_is_the_last_strip():
    """Picks that end early: the zero crossing is the mean fault of the last strip."""
    world = World(EXPONENTIAL, 15.0, reach=4500.0, per_strip=80.0)
    areas = lost_areas(horizons_of(world))
    assert np.ptp([a.end_u for a in areas]) == 0.0
    end = areas[0].end_u
    made = area_depth(areas)
    expected = mean_fault(world, end - 900.0, end)
    assert made.detachment_z == pytest.approx(expected, abs=0.5)
    assert expected > -3900.0


def test_growth_horizons_are_left_out():
    """A growth horizon moved less: it lies on a line of its own."""
    world = World(EXPONENTIAL, reach=12000.0)
    old = horizons_of(world)
    young = horizons_of(world, {"G": -100.0}, oblique=700.0)
    clean = area_depth(lost_areas(old))
    made = area_depth(lost_areas(old + young), growth=("G",))
    assert made.horizons == tuple(LEVELS)
    assert made.left_out[0][0] == "G"
    assert "line of its own" in made.left_out[0][1]
    assert made.detachment_z == pytest.approx(clean.detachment_z, abs=1.0)
    unmarked = area_depth(lost_areas(old + young))
    assert "unequal-displacement" in {d.code for d in unmarked.doubts}
    assert abs(unmarked.detachment_z - clean.detachment_z) > 100.0


def test_one_horizon_or_unlike_ends_are_named():
    """Fewer than two horizons are refused; ends that differ are doubted."""
    world = World(EXPONENTIAL, reach=9000.0)
    areas = [lost_area(p) for p in horizons_of(world)]
    with pytest.raises(ConstructionError, match="no independent test") as caught:
        area_depth(areas[:1])
    assert caught.value.code == "one-horizon"
    early = lost_area(horizons_of(replace(world, reach=6000.0))[0])
    codes = {d.code for d in area_depth([early, *areas[1:]]).doubts}
    assert "unequal-ends" in codes
    two = area_depth(areas[:2])
    assert "no test of it" in two.text


def test_areas_that_shrink_upwards_are_refused():
    """Deeper horizons with the larger areas share no detachment."""
    areas = lost_areas(horizons_of(World(EXPONENTIAL, reach=9000.0)))
    swapped = [
        replace(a, regional_z=b.regional_z) for a, b in zip(areas, reversed(areas))
    ]
    with pytest.raises(ConstructionError, match="do not grow upwards") as caught:
        area_depth(swapped)
    assert caught.value.code == "area-against-depth"


def test_unsure_areas_do_not_resolve_the_detachment():
    """Where the slope may be zero within its error there is no interval at all."""
    areas = lost_areas(horizons_of(World(EXPONENTIAL, reach=9000.0)))
    vague = [replace(a, sigma=0.8 * a.total) for a in areas]
    made = area_depth(vague)
    assert not made.resolved
    assert "not resolved" in made.text
    made_of = predict_fault(**direct_inputs(World(EXPONENTIAL, reach=9500.0)))
    assert compare_detachment(made, made_of).agree is None


def test_areas_off_one_line_widen_the_interval():
    """Scatter beyond the stated errors is seen and widens the interval."""
    areas = lost_areas(horizons_of(World(EXPONENTIAL, reach=14000.0)))
    sure = [replace(a, sigma=2e3) for a in areas]
    pushes = (1.0, -1.0, -1.0, 1.0)
    off = [replace(a, below=a.below + 6e4 * p) for a, p in zip(sure, pushes)]
    narrow, wide = area_depth(sure), area_depth(off)
    assert "area-scatter" in {d.code for d in wide.doubts}
    assert "area-scatter" not in {d.code for d in narrow.doubts}
    assert np.ptp(wide.detachment_interval) > 10 * np.ptp(narrow.detachment_interval)


def test_interval_of_the_detachment_covers_what_it_says():
    """Four horizons with tied errors of area and level, 2000 draws: 90 % within."""
    rng = np.random.default_rng(17)
    z = np.array([-300.0, -600.0, -1000.0, -1500.0])
    area = 900.0 * (z + 4000.0)
    sigma_z, of_area, length = 6.0, 5e4, 8000.0
    hit = {"zero": 0, "slope": 0}
    draws = 2000
    for _ in range(draws):
        lift = rng.normal(0.0, sigma_z, 4)
        seen = area + length * lift + rng.normal(0.0, of_area, 4)
        sigma = math.hypot(of_area, length * sigma_z)
        line = line_with_errors(
            z + lift, seen, sigma_z, sigma, length * sigma_z / sigma
        )
        low, high = line.zero_interval(0.9)
        hit["zero"] += low <= -4000.0 <= high
        low, high = line.slope_interval(0.9)
        hit["slope"] += low <= 900.0 <= high
    # 90 % of 2000 draws: 88.7-91.3 is two standard errors; the rare widening adds
    assert 0.88 * draws < hit["zero"] < 0.93 * draws
    assert 0.88 * draws < hit["slope"] < 0.93 * draws


def test_line_needs_two_points_apart():
    """Points at one place carry no line."""
    with pytest.raises(ConstructionError, match="carry no line") as caught:
        line_with_errors([1.0, 1.0], [0.0, 1.0], 0.1, 0.1)
    assert caught.value.code == "too-few-points"


def test_intervals_say_that_they_need_scipy(monkeypatch):
    """Without scipy the line is there, its intervals are off with a sentence."""
    line = line_with_errors([0.0, 1.0, 2.0], [0.0, 1.1, 1.9], 0.1, 0.1)
    monkeypatch.setitem(sys.modules, "scipy.special", None)
    with pytest.raises(ConstructionError, match="need the Python package") as caught:
        line.slope_interval()
    assert caught.value.code == "no-scipy"


# --- beside the construction ---------------------------------------------------------


def test_areas_agree_with_the_construction_of_the_same_fault():
    """Under the last strip the march and the areas of four horizons have one fault."""
    world = World(EXPONENTIAL, 20.0, reach=9000.0, per_strip=30.0)
    horizons = horizons_of(world)
    areas = [replace(a, sigma=3e3) for a in lost_areas(horizons)]
    own = replace(world, z0=-300.0)
    own = replace(own, heave=heave_for(own, 900.0))
    prediction = predict_fault(**direct_inputs(own))
    made = compare_detachment(area_depth(areas), prediction)
    assert made.agree
    assert abs(made.difference) < 10.0
    assert made.displacement == pytest.approx(made.construction_displacement, rel=2e-3)
    assert "agree within" in made.text
    wrong = replace(
        prediction, trace=replace(prediction.trace, z=prediction.trace.z - 400)
    )
    assert compare_detachment(area_depth(areas), wrong).agree is False
    short = predict_fault(**direct_inputs(replace(own, reach=6000.0)))
    with pytest.raises(ConstructionError, match="ends before") as caught:
        compare_detachment(area_depth(areas), short)
    assert caught.value.code == "fault-too-short"


@pytest.mark.parametrize(
    ("model", "compaction", "words"),
    [
        (ConstantSlip(), None, "does not keep area"),
        (ConstantHeave(0.0), Compaction(preset("shale"), 0.0, 0.0), "lose pore space"),
    ],
)
def test_models_that_keep_no_area_get_no_balance(model, compaction, words):
    """Neither depth, nor line, nor restored section, with the reason."""
    problem = replace(
        horizon_at(World(EXPONENTIAL, reach=6000.0)),
        model=model,
        options=MarchOptions(compaction=compaction),
    )
    lost = lost_area(problem)  # the area itself can be measured
    assert words in lost.why_no_depth
    prediction = replace(
        predict_fault(**direct_inputs(World(EXPONENTIAL, reach=6000.0))),
        model=model,
        compaction=compaction,
    )
    for refused in (
        lambda: detachment_from_area(lost),
        lambda: area_depth([lost, lost]),
        lambda: area_convergence(problem),
        lambda: restored_section(prediction, [problem]),
    ):
        with pytest.raises(ConstructionError, match=words) as caught:
            refused()
        assert caught.value.code == "area-not-kept"


# --- the restored section ------------------------------------------------------------


@pytest.mark.parametrize("slope", [0.0, -0.04])
@pytest.mark.parametrize("angle", [0.0, 25.0, -10.0])
def test_horizons_come_back_onto_their_regionals(angle, slope):
    """The one that made the fault, and a deeper one that did not."""
    world = World(EXPONENTIAL, angle, slope=slope, reach=9000.0, per_strip=40.0)
    prediction = predict_fault(**direct_inputs(world))
    deeper = replace(world, z0=-900.0)
    deeper = replace(deeper, heave=heave_for(deeper, world.oblique_heave))
    made = restored_section(
        prediction, [horizon_at(world), horizon_at(deeper, "B")], growth=("G",)
    )
    own, other = made.horizons
    assert own.misfit_max < 3.0
    assert other.misfit_max < 3.0
    assert "identity" in own.note
    assert "tests the construction" in other.note
    # the first point is the footwall cut-off again
    assert (own.x[0], own.z[0]) == pytest.approx(world.footwall, abs=0.5)
    assert made.displacement == pytest.approx(world.oblique_heave)
    assert own.length_before == pytest.approx(
        math.hypot(1.0, slope) * (own.x[-1] - world.footwall[0])
    )


def test_bed_over_a_straight_fault_keeps_its_length():
    """It moved without bending: no strain."""
    world = World(PLANAR, reach=6000.0)
    made = restored_section(predict_fault(**direct_inputs(world)), [horizon_at(world)])
    assert made.strain == pytest.approx(0.0, abs=1e-9)


def test_bed_over_a_kink_is_longer_by_its_panel():
    """Vertical shear: the panel of width H dips by tan th1 - tan th2 (section 11)."""
    world = World(KINKED, reach=7000.0, heave=900.0, per_strip=200.0)
    made = restored_section(predict_fault(**direct_inputs(world)), [horizon_at(world)])
    own = made.horizons[0]
    dip = math.tan(math.radians(50.0)) - math.tan(math.radians(25.0))
    longer = 900.0 * (math.hypot(1.0, dip) - 1.0)
    # two bends cut off between picks 4.5 m apart
    assert own.length_now - own.length_before == pytest.approx(longer, abs=1.0)
    assert own.strain == pytest.approx(longer / own.length_before, rel=0.01)
    assert "strain=" in repr(made)


def test_noise_does_not_lengthen_the_bed():
    """Picks 20 m apart with 5 m of noise would lengthen a bed by 6 %."""
    world = World(PLANAR, reach=6000.0, per_strip=45.0)
    problem = horizon_at(world, sigma=5.0)
    noise = np.random.default_rng(2).normal(0.0, 5.0, len(problem.bed))
    noise[0] = 0.0
    bed = Profile(problem.bed.x, problem.bed.z + noise, problem.bed.sigma)
    raw = np.hypot(np.diff(bed.x), np.diff(bed.z)).sum() / np.ptp(bed.x) - 1.0
    assert raw > 0.03
    made = restored_section(
        predict_fault(**direct_inputs(world)), [replace(problem, bed=bed)]
    )
    assert made.strain == pytest.approx(0.0, abs=2e-3)


def test_growth_horizons_were_not_there_before():
    """They are left out; with nothing left the restoration is refused."""
    world = World(EXPONENTIAL, reach=6000.0)
    prediction = predict_fault(**direct_inputs(world))
    with pytest.raises(ConstructionError, match="growth horizon was not there") as c:
        restored_section(prediction, [horizon_at(world)], growth=("A",))
    assert c.value.code == "nothing-restored"


def test_picks_beyond_the_fault_stay():
    """Where the fault is not known nothing can slide back along it."""
    world = World(EXPONENTIAL, reach=6000.0)
    far = horizon_at(replace(world, reach=8000.0))
    own = restored_section(predict_fault(**direct_inputs(world)), [far]).horizons[0]
    assert own.beyond > 0
    assert own.now_x[-1] <= 6000.0


# --- a whole section -----------------------------------------------------------------


def run_of_three(world, model="constant heave"):
    """Run a study of three horizons over one fault."""
    tops = {"A": -500.0, "B": -800.0, "C": -1200.0}
    document = changed(DOCUMENT, "construction", "model", to=model)
    document["construction"]["shear_angle"] = world.angle
    sources = sources_for(world)
    for name, z in tops.items():
        own = replace(world, z0=z)
        own = replace(own, heave=heave_for(own, world.oblique_heave))
        _, points = truth_points(own)
        key = f"tops {name}"
        document["sources"].append({**document["sources"][2], "key": key, "name": name})
        sources[key] = Features.points(world.place.at(points[:, 0]), points[:, 1])
    # fault picks have to reach the cut-offs of the deepest horizon
    deep = world.fault_points(np.arange(30.0, 2600.0, 30.0))
    sources["deep"] = Features.points(world.place.at(deep[:, 0]), deep[:, 1])
    del document["sources"][2]
    study = Study.from_dict(document)
    return study, run(study, sources, [line_for(world)]).sections[0]


def test_section_is_balanced_from_its_picks():
    """Areas, convergence, area-depth, comparison, restored section, in one product."""
    world = World(EXPONENTIAL, 20.0, reach=9000.0, per_strip=40.0)
    study, section = run_of_three(world)
    made = balance_section(study, section)
    assert made.length_unit == "m"
    assert [a.horizon for a in made.areas] == ["A", "B", "C"]
    assert made.left_out == ()
    end = made.areas[0].end_u
    start = 4000.0  # the section's x is the world's plus 4000
    fault = mean_fault(world, end - start - world.oblique_heave, end - start)
    assert made.area_depth.detachment_z == pytest.approx(fault, abs=40.0)
    low, high = made.area_depth.detachment_interval
    assert low < fault < high
    assert made.comparison.agree
    assert made.restored.horizons[1].misfit_rms < 10.0
    assert not made.one_horizon.independent
    assert made.convergence.fault_z[-1] == pytest.approx(made.one_horizon.z)


def test_section_without_further_horizons_says_what_is_missing():
    """One horizon: the parts that need several are falsy, with the reason."""
    study, section = run_of_three(World(EXPONENTIAL, reach=7000.0))
    made = balance_section(study, section, growth=("B", "C"))
    assert not made.area_depth
    assert "older than the fault" in made.area_depth.reason
    assert made.comparison == made.area_depth
    assert [n for n, _ in made.restored.left_out] == ["B", "C"]


def test_sections_that_cannot_be_balanced_are_refused():
    """No solution, or a model that keeps no area: said, not shown."""
    world = World(EXPONENTIAL, reach=7000.0)
    study, section = run_of_three(world, "constant slip")
    assert section.prediction
    with pytest.raises(ConstructionError, match="does not keep area"):
        balance_section(study, section)
    assert len(section_horizons(study, section).problems) == 3
    bare = Study.from_dict(changed(DOCUMENT, "construction", "horizon", to="Z"))
    unsolved = run(bare, sources_for(world), [line_for(world)]).sections[0]
    with pytest.raises(GeomcoreError, match="no usable picks of horizon 'Z'"):
        balance_section(bare, unsolved)
