"""Cut-offs given or found, heave and throw, the regional of a construction."""

import math

import numpy as np
import pytest
from worlds import joined, table

from geomcore.cutoffs import (
    CutoffOptions,
    given_cutoffs,
    measure_separation,
    refuse_reverse,
    regional_and_separation,
    wall_guide,
)
from geomcore.errors import ConstructionError, PicksError
from geomcore.fault import KnownFault
from geomcore.kinematics import ConstantHeave
from geomcore.profile import Profile
from geomcore.recipe import RegionalSpec
from geomcore.separation import CutOff, Separation, extend_to_fault, level_separation

PLANE = KnownFault(
    np.array([0.0, 3000.0]), np.array([0.0, -3000.0]), 0.0, -1.0, -1.0, "a plane"
)
OPTIONS = CutoffOptions(50.0, 500.0)


def line_cut(level, slope):
    """Give x where z = level + slope x meets the plane z = -x."""
    return -level / (1.0 + slope)


def blocks(low=-500.0, high=-1100.0, slope=0.0, gap=60.0, sigma=5.0):
    """Footwall and hanging-wall picks that end `gap` before their cut-offs."""
    foot_at, hang_at = line_cut(low, 0.0), line_cut(high, slope)
    before = np.arange(foot_at - gap - 1500.0, foot_at - gap + 1.0, 50.0)
    beyond = np.arange(hang_at + gap, hang_at + gap + 1501.0, 50.0)
    return joined(
        table(before, np.full(len(before), low), wall="footwall", sigma=sigma),
        table(beyond, high + slope * beyond, wall="hanging wall", sigma=sigma),
    )


def mark(x, z, wall="", sigma=3.0):
    """Cut-off picks of horizon A."""
    return table(x, z, kind="cutoff", wall=wall, sigma=sigma)


# Groshong 2006 eq. 8.3 (read in a stored public page): tan(dip) = throw/heave.
def test_heave_and_throw_are_positive_for_a_normal_fault():
    """Heave along transport, throw down to the hanging wall, dip between cut-offs."""
    cut = Separation(
        "A", CutOff("footwall", 100.0, -50.0), CutOff("hanging wall", 125.6, -82.0)
    )
    assert (cut.heave, cut.throw) == (pytest.approx(25.6), pytest.approx(32.0))
    assert cut.cutoff_dip == pytest.approx(51.34, abs=0.005)
    assert cut.displacement == pytest.approx(math.hypot(25.6, 32.0))


def test_reverse_separation_has_negative_heave_and_keeps_its_throw():
    """An overlap is a negative heave."""
    cut = Separation(
        "A", CutOff("footwall", 134.0, -50.0), CutOff("hanging wall", 100.0, -53.6)
    )
    assert (cut.heave, cut.throw) == (pytest.approx(-34.0), pytest.approx(3.6))


def test_time_has_neither_displacement_nor_dip():
    """Between metres and milliseconds there is no distance and no angle."""
    cut = Separation(
        "A",
        CutOff("footwall", 0.0, -800.0),
        CutOff("hanging wall", 90.0, -850.0),
        "time",
    )
    assert cut.throw == 50.0
    assert math.isnan(cut.displacement)
    assert math.isnan(cut.cutoff_dip)


@pytest.mark.parametrize("slope", [-0.2, 0.0, 0.15])
@pytest.mark.parametrize("wall", ["footwall", "hanging wall"])
def test_straight_horizon_meets_the_fault_where_the_lines_cross(wall, slope):
    """A straight bed and a plane fault cross where algebra says."""
    at = line_cut(-900.0, slope)
    x = at + (-1 if wall == "footwall" else 1) * np.arange(80.0, 900.0, 45.0)
    x = np.sort(x)
    bed = Profile(x, -900.0 + slope * x, np.full(len(x), 2.0))
    cut, reach = extend_to_fault(bed, PLANE, wall, "section S1")
    assert cut.x == pytest.approx(at, abs=1e-3)
    assert cut.z == pytest.approx(-at, abs=1e-3)
    assert reach == pytest.approx(80.0, abs=1e-3)
    assert (cut.wall, cut.how) == (wall, "extended over 80")


def test_curved_horizon_is_extended_by_its_curvature():
    """A rollover whose curvature is plain to see is extended as a parabola."""

    def bed(x):
        return -1300.0 + 0.2 * (x - 1200.0) + 2e-4 * (x - 1200.0) ** 2

    x = np.arange(1300.0, 2500.0, 40.0)
    cut, _ = extend_to_fault(
        Profile(x, bed(x), np.full(len(x), 0.5)), PLANE, "hanging wall", "S1"
    )
    # bed(x) = -x in closed form
    a, b, c = 2e-4, 1.2, -1300.0
    exact = 1200.0 + (-b + math.sqrt(b * b - 4 * a * (1200.0 + c))) / (2 * a)
    assert cut.x == pytest.approx(exact, abs=0.05)


def test_steep_rollover_close_to_the_fault_is_extended_by_its_curvature():
    """A bed as steep as under synthetic shear is still extended as a parabola."""

    def bed(x):
        return -1300.0 + 2.5 * (x - 1300.0) - 0.004 * (x - 1300.0) ** 2

    x = 1306.0 + 6.0 * np.arange(12)
    cut, _ = extend_to_fault(
        Profile(x, bed(x), np.full(len(x), 1e-3)), PLANE, "hanging wall", "S1"
    )
    assert cut.x == pytest.approx(1300.0, abs=0.05)


def test_noise_is_not_taken_for_curvature():
    """A level bed with noise is extended straight, whatever eight picks may seem."""
    rng = np.random.default_rng(5)
    x = np.arange(1050.0, 1450.0, 50.0)
    straight = 0
    for _ in range(200):
        z = rng.normal(-900.0, 5.0, len(x))
        cut, _ = extend_to_fault(
            Profile(x, z, np.full(len(x), 5.0)), PLANE, "hanging wall", "S1"
        )
        line = np.polyfit(x, z, 1)
        straight += abs(cut.x - line_cut(line[1], line[0])) < 0.01
    assert straight > 190


def test_stated_error_of_a_cut_off_is_its_scatter():
    """Extended from noisy picks, the cut-off scatters along the fault as stated."""
    rng = np.random.default_rng(7)
    x = np.arange(1000.0, 1400.0, 50.0)
    sigma = np.full(len(x), 5.0)

    def cut(z):
        return extend_to_fault(Profile(x, z, sigma), PLANE, "hanging wall", "S1")[0]

    found = [cut(rng.normal(-900.0, 5.0, len(x))) for _ in range(600)]
    stated = cut(np.full(len(x), -900.0))
    assert np.std([c.x for c in found]) == pytest.approx(stated.sigma_x, rel=0.15)
    assert np.std([c.z for c in found]) == pytest.approx(stated.sigma_z, rel=0.15)


@pytest.mark.parametrize(
    ("x", "z"),
    [([], []), ([1500.0], [-900.0]), ([1500.0, 1600.0], [-900.0, -1000.5])],
    ids=["none", "one", "parallel to the fault"],
)
def test_horizon_that_cannot_reach_the_fault_is_refused(x, z):
    """No pick, one pick, or a bed along the fault give no cut-off."""
    bed = Profile(x, z, np.ones(len(x)))
    with pytest.raises(PicksError, match="hanging wall") as caught:
        extend_to_fault(bed, PLANE, "hanging wall", "section S1")
    assert caught.value.code == "no-cutoff"
    assert "section S1" in str(caught.value)


def straight(level, slope, low, high):
    """A straight profile with picks every 25 between two x."""
    x = np.arange(low, high, 25.0)
    return Profile(x, level + slope * x, np.ones(len(x)))


@pytest.mark.parametrize("overlap", [False, True])
def test_level_difference_is_read_at_the_middle_of_the_gap(overlap):
    """Two straight blocks are compared where gap or overlap has its middle."""
    foot, hang = (1000.0, 1300.0) if not overlap else (1300.0, 1000.0)
    low = straight(-500.0, 0.02, -500.0, foot)
    high = straight(-700.0, -0.03, hang, 3000.0)
    got = level_separation(low, high, foot, hang, 50.0, 500.0)
    assert got == pytest.approx((-500.0 + 0.02 * 1150.0) - (-700.0 - 0.03 * 1150.0))


def test_level_difference_needs_two_picks_on_either_side():
    """Too few picks outside the cut-offs give no level."""
    low, high = straight(-500.0, 0.0, 960.0, 1000.0), straight(-7e2, 0.0, 1300.0, 2e3)
    with pytest.raises(PicksError, match="outside the cut-off") as caught:
        level_separation(low, high, 1000.0, 1300.0, 50.0, 500.0)
    assert caught.value.code == "no-separation"


def test_given_cut_offs_take_their_declared_walls():
    """A declared wall is kept even where the order along transport is reversed."""
    marks = joined(
        mark([900.0], [-520.0], "footwall"), mark([700.0], [-620.0], "hanging wall")
    )
    given = given_cutoffs(marks, "A", OPTIONS)
    assert (given.footwall.x, given.hanging_wall.x) == (900.0, 700.0)
    assert given.footwall.how == "given"
    assert given.footwall.sigma_z == 3.0
    assert given.cutoffs == ()  # crossed cut-offs are no points of one fault


def test_undeclared_cut_offs_of_a_gap_go_to_the_nearer_levels():
    """Each crossing belongs to the block whose level it lies nearer to."""
    picks = joined(blocks(), mark([500.0, 1100.0], [-500.0, -1100.0]))
    given = given_cutoffs(picks, "A", OPTIONS)
    assert (given.footwall.x, given.hanging_wall.x) == (500.0, 1100.0)
    assert given.doubts == ()
    assert given.cutoffs == (given.footwall, given.hanging_wall)


def test_undeclared_cut_offs_of_an_overlap_are_not_taken_for_a_gap():
    """Where the first crossing has the hanging wall's level the fault is reverse."""
    low, high = straight(-500.0, 0.0, 0.0, 900.0), straight(-600.0, 0.0, 700.0, 1600.0)
    picks = joined(
        table(low.x, low.z, wall="footwall"),
        table(high.x, high.z, wall="hanging wall"),
        mark([700.0, 900.0], [-600.0, -500.0]),
    )
    given = given_cutoffs(picks, "A", OPTIONS)
    assert (given.footwall.x, given.hanging_wall.x) == (900.0, 700.0)
    got = measure_separation(picks, None, "A", OPTIONS)
    assert (got.separation.heave, got.separation.throw) == (-200.0, 100.0)


def test_cut_offs_without_levels_are_taken_in_order_with_a_doubt():
    """Without levels on both sides their order decides, and that is said."""
    given = given_cutoffs(mark([700.0, 900.0], [-600.0, -500.0]), "A", OPTIONS)
    assert given.footwall.x == 700.0
    assert [d.code for d in given.doubts] == ["cutoff-walls-by-order"]
    assert "section S1" in str(given.doubts[0])


def test_single_cut_off_goes_to_the_wall_it_fits():
    """One crossing is judged by the levels, or takes the wall that is left."""
    near = blocks(high=-700.0)
    low = given_cutoffs(joined(near, mark([510.0], [-505.0])), "A", OPTIONS)
    assert low.footwall.x == 510.0
    assert low.hanging_wall is None
    high = given_cutoffs(joined(near, mark([690.0], [-690.0])), "A", OPTIONS)
    assert (high.footwall, high.hanging_wall.x) == (None, 690.0)
    left = joined(mark([500.0], [-5.0], "footwall"), mark([800.0], [-9.0]))
    assert given_cutoffs(left, "A", OPTIONS).hanging_wall.x == 800.0


def test_no_cut_off_came_in():
    """A horizon without cut-off picks has none given."""
    assert given_cutoffs(blocks(), "A", OPTIONS) is None
    assert given_cutoffs(joined(blocks(), mark([1.0], [0.0])), "B", OPTIONS) is None


@pytest.mark.parametrize(
    ("marks", "code", "says"),
    [
        (mark([1.0, 2.0], [0.0, 0.0], "footwall"), "too-many-cutoffs", "2 footwall"),
        (mark([1.0, 2.0, 3.0], [0.0, 0.0, 0.0]), "too-many-cutoffs", "crosses 3"),
        (mark([1.0], [0.0]), "cutoff-wall", "nothing tells which wall"),
    ],
    ids=["two of one wall", "three crossings", "no level"],
)
def test_cut_offs_that_fit_no_two_walls_are_refused(marks, code, says):
    """More crossings than walls, or one that fits neither, are refused with where."""
    with pytest.raises(PicksError, match=says) as caught:
        given_cutoffs(marks, "A", OPTIONS)
    assert caught.value.code == code
    assert "section S1" in str(caught.value)
    assert caught.value.remedy


def test_walls_are_told_by_the_known_fault_first():
    """With a fault in the section, its own line tells the walls."""
    fault = table([0.0, 1000.0], [0.0, -1000.0], kind="fault")
    guide = wall_guide(joined(blocks(), fault))
    assert guide.z_at([500.0]) == pytest.approx([-500.0])


def test_walls_are_told_by_an_upright_line_where_little_is_known():
    """One fault point without dip, or the cut-offs, make an upright line."""
    lone = wall_guide(joined(blocks(), table([700.0], [0.0], kind="fault")))
    marks = wall_guide(joined(blocks(), mark([500.0, 1100.0], [-500.0, -1100.0])))
    for guide, x in ((lone, 700.0), (marks, 800.0)):
        assert guide.x_at([-400.0, -1200.0]) == pytest.approx([x, x], abs=0.01)


def test_walls_of_times_are_told_by_the_fault_in_depth_and_back():
    """A section whose fault is known in the other domain only still has walls."""
    times = table([100.0, 900.0], [-500.0, -600.0], domain="time")
    fault = table([480.0, 520.0], [0.0, -40.0], kind="fault")
    guide = wall_guide(times, fault)
    assert guide.x_at([-550.0]) == pytest.approx([500.0], abs=0.01)
    assert wall_guide(times) is None


def test_fault_on_the_wrong_side_is_no_guide():
    """A fault that rises along transport tells no walls, nor is it made upright."""
    rising = table([0.0, 100.0], [-100.0, 0.0], kind="fault")
    assert wall_guide(joined(blocks(), rising)) is None


def test_separation_is_measured_with_the_fault_or_at_the_edges():
    """With a fault the beds are extended to it; without, the last picks count."""
    with_fault = measure_separation(blocks(), PLANE, "A", OPTIONS)
    assert with_fault.separation.heave == pytest.approx(600.0, abs=0.01)
    assert with_fault.separation.throw == pytest.approx(600.0, abs=0.01)
    assert with_fault.level_difference == pytest.approx(600.0)
    edges = measure_separation(blocks(), None, "A", OPTIONS)
    assert edges.separation.heave == pytest.approx(720.0)
    assert edges.separation.footwall.how == "edge of the fault gap"


def test_given_cut_offs_outrank_found_ones():
    """A cut-off that came in is used as it is."""
    picks = joined(blocks(), mark([480.0], [-490.0], "footwall"))
    got = measure_separation(picks, PLANE, "A", OPTIONS).separation
    assert (got.footwall.x, got.footwall.z) == (480.0, -490.0)
    assert got.hanging_wall.x == pytest.approx(1100.0, abs=0.01)


def test_level_difference_is_left_open_without_picks_for_it():
    """Too few picks near the cut-offs leave the level difference unknown."""
    far = CutoffOptions(5000.0, 6000.0)
    assert measure_separation(blocks(), PLANE, "A", far).level_difference is None


def test_horizon_of_one_block_has_no_separation():
    """A horizon that is there on one side only is refused, naming the side."""
    foot = blocks().of("horizon", wall="footwall")
    for fault in (PLANE, None):
        with pytest.raises(PicksError, match="hanging wall") as caught:
            measure_separation(foot, fault, "A", OPTIONS)
        assert caught.value.code == "no-cutoff"
        assert "horizon A" in str(caught.value)


def regional(picks, spec=None, model=None, options=OPTIONS, fault=PLANE):
    """Find regional and separation of horizon A."""
    given = given_cutoffs(picks, "A", options)
    return regional_and_separation(
        picks,
        fault,
        "A",
        model or ConstantHeave(),
        spec or RegionalSpec(),
        given,
        options,
    )


def test_footwall_cut_off_lies_on_the_fitted_regional():
    """Regional and footwall cut-off are one statement."""
    found = regional(blocks(low=-600.0))
    assert found.regional.z0 == pytest.approx(-600.0)
    assert found.regional.x0 == pytest.approx(600.0)
    assert found.separation.footwall.z == pytest.approx(found.regional.z0)
    assert found.separation.heave == pytest.approx(500.0, abs=0.01)
    assert found.doubts == ()
    assert found.result.separation is found.separation


def test_given_footwall_cut_off_fixes_the_regional_there():
    """The line goes through a given cut-off; its dip is fitted."""
    found = regional(joined(blocks(), mark([520.0], [-530.0], "footwall")))
    assert (found.regional.x0, found.regional.z0) == (520.0, -530.0)
    assert found.regional.covariance[0] == 9.0


def test_given_level_and_dip_need_no_footwall_picks():
    """A regional that is given stands without a single footwall pick."""
    picks = blocks().of("horizon", wall="hanging wall")
    found = regional(picks, RegionalSpec(z=-480.0, dip=2.0))
    assert found.separation.footwall.x == pytest.approx(480.0)
    assert found.regional.dip == pytest.approx(2.0)
    assert found.doubts == ()


def test_given_level_alone_is_taken_as_level_with_a_doubt():
    """Without footwall picks and dip the regional is level, and that is said."""
    picks = blocks().of("horizon", wall="hanging wall")
    found = regional(picks, RegionalSpec(z=-480.0))
    assert found.regional.dip == 0.0
    assert [d.code for d in found.doubts] == ["regional-level"]
    assert regional(blocks(), RegionalSpec(z=-480.0)).doubts == ()


def test_given_level_that_contradicts_a_given_cut_off_is_named():
    """Level and footwall cut-off cannot both fix the regional: the cut-off does."""
    picks = joined(blocks(), mark([520.0], [-520.0], "footwall"))
    found = regional(picks, RegionalSpec(z=-480.0))
    assert found.regional.z0 == -520.0
    assert [d.code for d in found.doubts] == ["regional-z-unused"]
    assert regional(picks).doubts == ()


def test_only_near_footwall_picks_make_the_regional_if_asked():
    """Footwall picks far from the fault can be left to others."""
    x = np.arange(-3000.0, 450.0, 50.0)
    bent = np.where(x < -1000.0, -500.0 + 0.2 * (x + 1000.0), -500.0)
    picks = joined(
        table(x, bent, wall="footwall"), blocks().of("horizon", wall="hanging wall")
    )
    near = regional(picks, RegionalSpec(footwall_within=900.0))
    assert near.regional.z0 == pytest.approx(-500.0)
    whole = regional(picks)
    assert "regional-misfit" in [d.code for d in whole.doubts]
    assert "section S1" in str(whole.doubts[0])


def test_straight_footwall_within_its_sigma_raises_no_doubt():
    """Noise of the stated sigma is no misfit."""
    rng = np.random.default_rng(2)
    picks = blocks()
    noisy = joined(
        table(picks.x, picks.z + rng.normal(0, 5.0, len(picks)), wall=picks.wall)
    )
    assert regional(noisy).doubts == ()


def far_world(angle, heave=600.0, throw=600.0, slope=-0.03):
    """Footwall picks on a sloping regional, and far picks moved out by H."""
    level = -500.0 / (1.0 + slope) * (1.0 + slope)
    big = heave + throw * math.tan(math.radians(angle))
    near = table(
        [350.0, 380.0],
        [level + slope * (v - 500.0) for v in (350.0, 380.0)],
        wall="footwall",
    )
    cut = mark([1100.0], [-1100.0], "hanging wall")
    x = np.arange(6000.0, 9000.0, 100.0)
    far = table(x, level + slope * (x - big - 500.0), wall="hanging wall")
    return joined(near, cut, far)


@pytest.mark.parametrize("angle", [0.0, 25.0, -15.0])
def test_far_picks_are_moved_back_by_the_oblique_heave(angle):
    """Over a level detachment the far bed lies one H out: it tells the regional dip."""
    picks = far_world(angle)
    found = regional(picks, RegionalSpec(far_from=5000.0), ConstantHeave(angle))
    assert found.regional.slope == pytest.approx(-0.03, abs=1e-6)
    assert found.regional.z0 == pytest.approx(-500.0, abs=0.05)
    assert found.regional.n_picks == 32


def test_far_picks_alone_carry_the_regional_without_a_false_doubt():
    """A given level and far picks need no footwall picks, nor is the dip doubted."""
    picks = far_world(0.0)
    picks = picks.select(picks.wall == "hanging wall")
    found = regional(picks, RegionalSpec(z=-500.0, far_from=5000.0))
    assert found.regional.slope == pytest.approx(-0.03, abs=1e-6)
    assert found.doubts == ()


def test_far_picks_that_are_not_there_are_named():
    """Asked to use far picks where none lie so far, the section says so."""
    found = regional(blocks(), RegionalSpec(far_from=50000.0))
    assert [d.code for d in found.doubts] == ["no-far-picks"]


def test_crossed_given_cut_offs_refuse_the_prediction_in_words():
    """Reverse separation: the construction holds for normal faults only."""
    picks = joined(
        blocks(),
        mark([900.0], [-520.0], "footwall"),
        mark([700.0], [-620.0], "hanging wall"),
    )
    with pytest.raises(ConstructionError, match=r"200\.0 behind") as caught:
        regional(picks)
    assert caught.value.code == "reverse-separation"
    assert "section S1" in str(caught.value)


@pytest.mark.parametrize(
    ("picks", "spec", "code"),
    [
        (blocks().of("horizon", wall="hanging wall"), RegionalSpec(), "regional-picks"),
        (blocks().of("horizon", wall="footwall"), RegionalSpec(), "no-cutoff"),
        (blocks(low=5000.0), RegionalSpec(dip=-45.5), "no-cutoff"),
    ],
    ids=["no footwall", "no hanging wall", "regional misses the fault"],
)
def test_regional_that_cannot_be_found_is_refused_with_its_section(picks, spec, code):
    """What is missing is named, with the section."""
    with pytest.raises(PicksError) as caught:
        regional(picks, spec)
    assert caught.value.code == code
    assert "section S1" in str(caught.value)


@pytest.mark.parametrize("crossed", [False, True])
def test_dip_of_the_horizon_is_not_taken_for_its_change_of_level(crossed):
    """Each block is carried to the cut-off along its own dip before levels count.

    Both blocks dip by 0.3 towards the hanging wall: over the 425 between the picks'
    middles and the fault that is more than the throw of 60.
    """
    x = np.r_[np.arange(-700.0, -49.0, 50.0), np.arange(150.0, 801.0, 50.0)]
    z = -1000.0 - 0.3 * x - np.where(x > 0, 60.0, 0.0)
    # the footwall's cut-off and the hanging wall's; an overlap has them crossed
    foot, hang = (100.0, 0.0) if crossed else (0.0, 100.0)
    cut = {foot: -1000.0 - 0.3 * foot, hang: -1060.0 - 0.3 * hang}
    marks = mark(sorted(cut), [cut[v] for v in sorted(cut)])
    given = given_cutoffs(joined(table(x, z), marks), "A", OPTIONS)
    assert (given.footwall.x, given.hanging_wall.x) == (foot, hang)


def test_overlap_is_refused_before_a_fault_is_asked_for():
    """Crossed cut-offs are named as such even where nothing else is known."""
    low, high = straight(-500.0, 0.0, 0.0, 900.0), straight(-600.0, 0.0, 700.0, 1600.0)
    beds = joined(table(low.x, low.z), table(high.x, high.z))
    overlap = joined(beds, mark([700.0, 900.0], [-600.0, -500.0]))
    with pytest.raises(ConstructionError, match="reverse separation") as caught:
        refuse_reverse(given_cutoffs(overlap, "A", OPTIONS), "section S1")
    assert caught.value.code == "reverse-separation"
    gap = joined(
        beds, mark([700.0, 900.0], [-500.0, -600.0], ["footwall", "hanging wall"])
    )
    refuse_reverse(given_cutoffs(gap, "A", OPTIONS), "section S1")
    refuse_reverse(None, "section S1")


def test_horizon_without_a_gap_gives_no_heave_without_a_doubt():
    """Picks that run through the fault tell a level difference, not a heave."""
    x = np.arange(-1000.0, 1001.0, 50.0)
    z = np.where(x < 0, -900.0, -960.0)
    wall = np.where(x < 0, "footwall", "hanging wall")
    whole = table(x, z, wall=wall, domain="time")
    doubts = measure_separation(whole, None, "A", OPTIONS).doubts
    assert [d.code for d in doubts] == ["no-gap"]
    apart = whole.select(np.abs(x) > 110.0)
    assert not measure_separation(apart, None, "A", OPTIONS).doubts


@pytest.mark.parametrize("miss", [0.0, 8.0])
def test_regional_misfit_of_picks_without_sigma_is_said_in_length(miss):
    """Without a stated sigma there is no ratio to it; the misfit itself is told."""
    picks = blocks(sigma=0.0)
    foot = picks.wall == "footwall"
    bent = np.where(foot, picks.z + miss * np.sign(np.sin(picks.x / 110.0)), picks.z)
    picks = table(picks.x, bent, wall=picks.wall, sigma=0.0)
    doubts = [d for d in regional(picks).doubts if d.code == "regional-misfit"]
    if miss:
        assert "no sigma is stated" in doubts[0].text
        assert "by 7." in doubts[0].text or "by 8." in doubts[0].text
    else:
        assert not doubts


def test_sigma_of_a_crossing_is_that_of_many_drawn_ones():
    """Two lines with errors of level, drawn often: where they cross scatters so."""
    from geomcore.separation import crossing_sigma

    rng = np.random.default_rng(12)
    bed, fault = 0.25, -1.4
    of_bed, of_fault = rng.normal(0.0, 4.0, 40000), rng.normal(0.0, 9.0, 40000)
    x = (of_bed - of_fault) / (fault - bed)
    z = fault * x + of_fault
    sigma_x, sigma_z = crossing_sigma(4.0, 9.0, bed, fault)
    # 40000 draws tell a standard deviation to 0.4 %
    assert np.std(x) == pytest.approx(sigma_x, rel=0.015)
    assert np.std(z) == pytest.approx(sigma_z, rel=0.015)
