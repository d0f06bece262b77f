"""Growth strata: expansion index, history of the fault, forward growth section."""

import math
from dataclasses import replace

import numpy as np
import oracles
import pytest
from worlds import EXPONENTIAL, World, joined, study_for, table

from geomcore.errors import ConstructionError
from geomcore.growth import (
    Expansion,
    GrowthHorizon,
    expansion,
    forward_growth,
    growth_doubts,
    history,
    section_history,
)
from geomcore.kinematics import ConstantHeave
from geomcore.profile import line_through
from geomcore.separation import CutOff, Separation
from geomcore.sources import Features
from geomcore.study import SectionLine, Study, run

#: Name, level and oblique heave since it was laid down, oldest first.
PRE_GROWTH = [("C", -1100.0, 800.0), ("B", -900.0, 800.0), ("A", -700.0, 800.0)]
GROWING = [("C", -1100.0, 800.0), ("B", -900.0, 800.0), ("A", -700.0, 500.0)]
ANGLES = (0.0, 25.0, -10.0)


def particles(horizons, angle, step=30.0, reach=7000.0, slope=0.0):
    """Beds of moved particles and true cut-offs, by name (oracles, no march)."""
    beds, separations = {}, []
    for name, level, heave in horizons:

        def regional(x, level=level):
            return level + slope * x

        bed = oracles.rolled_bed(EXPONENTIAL, regional, angle, heave, step, reach)
        beds[name] = np.array(bed)
        foot = oracles.footwall_cutoff(EXPONENTIAL, regional)
        cuts = CutOff("footwall", *foot), CutOff("hanging wall", *bed[0])
        separations.append(Separation(name, *cuts))
    return beds, separations


def picks_of(beds, separations, slope=0.0, sigma=0.0, rng=None):
    """Pick tables of both walls, with noise if asked for."""
    tables = []
    for one in separations:
        foot = one.footwall
        x = np.arange(foot.x - 2000.0, foot.x - 10.0, 40.0)
        walls = {
            "footwall": np.column_stack([x, foot.z + slope * (x - foot.x)]),
            "hanging wall": beds[one.horizon][1:],
        }
        for wall, rows in walls.items():
            z = rows[:, 1]
            z = z if rng is None else z + rng.normal(0.0, sigma, len(z))
            tables.append(
                table(rows[:, 0], z, name=one.horizon, wall=wall, sigma=sigma)
            )
    return joined(*tables)


# Constant heave keeps the length of columns along the shear lines ([D] methods.md
# section 2: the map keeps area), so an interval older than the fault does not expand.
@pytest.mark.parametrize("slope", [0.0, -0.03])
@pytest.mark.parametrize("angle", ANGLES)
def test_strata_older_than_the_fault_have_an_index_of_one(angle, slope):
    """No growth, whatever the shape of the fault: index 1."""
    beds, separations = particles(PRE_GROWTH, angle, slope=slope)
    found = section_history(picks_of(beds, separations, slope), separations, angle)
    assert [(i.upper, i.lower) for i in found.intervals] == [("B", "C"), ("A", "B")]
    assert [i.index for i in found.intervals] == pytest.approx([1.0, 1.0], abs=0.002)
    assert not any(i.is_growth for i in found.intervals)
    assert found.left_out == ()


# Closed form from eq. 3 of methods.md: on the shear line through the lower horizon's
# hanging-wall cut-off at u, thickness = R1 - R2 + [F(u - H2) - F(u - H1)], F in the
# frame found by bisection.
@pytest.mark.parametrize("angle", ANGLES)
def test_index_of_growth_strata_is_that_of_the_heaves(angle):
    """The interval above a pre-growth horizon thickens by what the fault dropped."""
    beds, separations = particles(GROWING, angle)
    found = section_history(picks_of(beds, separations), separations, angle)
    hang = separations[1].hanging_wall
    u = hang.x - hang.z * math.tan(math.radians(angle))
    drop = [
        oracles.foot_of_shear_line(EXPONENTIAL, u - heave, angle)
        for heave in (800.0, 500.0)
    ]
    expected = (200.0 + drop[0] - drop[1]) / 200.0
    pre, grown = found.intervals
    assert pre.index == pytest.approx(1.0, abs=0.002)
    assert expected > 1.5
    assert grown.index == pytest.approx(expected, rel=0.002)
    assert grown.is_growth


@pytest.mark.parametrize("angle", ANGLES)
def test_history_goes_from_the_oldest_to_the_youngest(angle):
    """What the fault moved between two horizons is the difference of their heaves."""
    _, separations = particles(GROWING, angle)
    rows = history(separations[::-1], angle)
    assert [r.horizon for r in rows] == ["C", "B", "A"]
    assert [r.oblique_heave for r in rows] == pytest.approx([800.0, 800.0, 500.0])
    assert rows[0].heave_before is None
    for older, younger in zip(rows, rows[1:]):
        assert younger.heave_before == pytest.approx(older.heave - younger.heave)
        assert younger.throw_before == pytest.approx(older.throw - younger.throw)


def test_errors_of_the_cutoffs_go_into_the_history():
    """Independent errors of both cut-offs: 3 and 4 make 5."""
    cuts = CutOff("footwall", 0, -500, 3, 6), CutOff("hanging wall", 400, -900, 4, 8)
    (row,) = history([Separation("A", *cuts)])
    assert (row.sigma_heave, row.sigma_throw) == pytest.approx((5.0, 10.0))


# 200 runs tell a standard deviation to 5 %; three times that either way.
def test_stated_sigma_of_the_index_is_its_scatter():
    """Pick noise explains how the index scatters."""
    beds, separations = particles(GROWING, 20.0)
    rng = np.random.default_rng(2)
    found = [
        expansion(
            picks_of(beds, separations, sigma=5.0, rng=rng),
            separations[2],
            separations[1],
            20.0,
        )
        for _ in range(200)
    ]
    stated = np.mean([f.sigma for f in found])
    assert 0.85 < stated / np.std([f.index for f in found]) < 1.15


def test_correlated_picks_do_not_average_out():
    """Contours err together: the level is no surer than one of their picks."""
    beds, separations = particles(GROWING, 0.0)
    picks = picks_of(beds, separations, sigma=10.0)
    tied = replace(picks, correlation=np.full(len(picks), 2000.0))
    alone, together = (
        expansion(p, separations[2], separations[1]) for p in (picks, tied)
    )
    assert together.index == alone.index
    assert together.sigma_footwall >= math.hypot(10.0, 10.0) - 1e-9
    assert together.sigma >= alone.sigma


def test_index_and_its_error_by_hand():
    """300 (+/- 6) over 200 (+/- 4) m: 1.5 +/- 0.0424; growth beyond twice that."""
    found = Expansion("A", "B", 300.0, 200.0, 6.0, 4.0)
    assert found.index == 1.5
    assert found.sigma == pytest.approx(math.hypot(0.03, 0.03))
    assert found.is_growth
    assert not Expansion("A", "B", 208.0, 200.0, 6.0, 4.0).is_growth


@pytest.mark.parametrize("angle", ANGLES)
def test_forward_growth_section_is_that_of_the_particles(angle):
    """Each horizon from its own regional by its own remaining heave."""
    beds, separations = particles(GROWING, angle)
    x = np.arange(-1500.0, 12000.0, 5.0)
    z = np.array([EXPONENTIAL.z(v) for v in x])
    layers = [GrowthHorizon(n, line_through(0.0, v, 0.0), h) for n, v, h in GROWING]
    layers.append(GrowthHorizon("seal", line_through(0.0, -300.0, 0.0), 0.0))
    found = forward_growth(x, z, layers, ConstantHeave(angle))
    assert [f.name for f in found] == ["C", "B", "A", "seal"]
    assert found[3].profile is None
    for one, own in zip(found, separations):
        bed = beds[own.horizon]
        assert one.profile(bed[1:-1, 0]) == pytest.approx(bed[1:-1, 1], abs=0.2)
        assert one.hanging_wall == pytest.approx(tuple(bed[0]), abs=0.2)
        assert one.footwall == pytest.approx((own.footwall.x, own.footwall.z), abs=0.2)


def test_younger_horizon_cannot_have_moved_farther():
    """Heaves that grow with youth are refused with the horizon's name."""
    line = line_through(0.0, -500.0, 0.0)
    layers = [GrowthHorizon("old", line, 300.0), GrowthHorizon("young", line, 400.0)]
    x = np.array([0.0, 5000.0])
    with pytest.raises(ConstructionError, match="'young'") as caught:
        forward_growth(x, -x, layers, ConstantHeave(0.0))
    assert caught.value.code == "growth-order"


def test_intervals_that_cannot_be_measured_are_named():
    """Too few picks, or horizons that coincide in the footwall."""
    beds, separations = particles(GROWING, 0.0)
    picks = picks_of(beds, separations)
    few = picks.left_out((picks.name == "A") & (picks.wall == "footwall"), "test")
    found = section_history(few, separations)
    assert len(found.intervals) == 1
    assert found.left_out == ("A to B: 'A' has 0 pick(s) in the footwall.",)
    with pytest.raises(ConstructionError) as caught:
        expansion(few, separations[2], separations[1])
    assert caught.value.code == "too-few-picks"
    with pytest.raises(ConstructionError) as caught:
        expansion(picks, separations[1], separations[1])
    assert caught.value.code == "no-thickness"


def test_horizon_used_as_pre_growth_is_doubted_where_it_grew():
    """Only against older horizons, or where another is given its heave."""
    for horizons, count in ((PRE_GROWTH, 0), (GROWING, 2)):
        beds, separations = particles(horizons, 0.0)
        picks = picks_of(beds, separations, sigma=3.0, rng=np.random.default_rng(4))
        doubts = growth_doubts(picks, separations, "A")
        assert [d.code for d in doubts] == ["growth-horizon"] * count
        assert growth_doubts(picks, separations, "B") == []
        assert len(growth_doubts(picks, separations, "B", shared=["A"])) == count // 2
    assert "'A' was laid down while the fault moved" in doubts[0].text
    assert growth_doubts(picks, separations, "absent") == []


@pytest.mark.parametrize("horizons", [PRE_GROWTH, GROWING], ids=["before", "growth"])
def test_study_doubts_a_growth_horizon(horizons):
    """A second horizon in the section is enough to tell."""
    beds, separations = particles(horizons, 0.0)
    picks = picks_of(beds, separations)
    place, world = World().place, World()
    document = study_for(world).to_dict()
    tops = document["sources"][2]
    document["sources"].append({**tops, "key": "b", "name": "B"})

    def layer(name):
        own = picks.of("horizon", name)
        return Features.points(place.at(own.x), own.z)

    x = np.arange(20.0, 1600.0, 30.0)
    trace = place.at(np.zeros(2), np.array([5000.0, -5000.0]))
    layers = {
        "trace": Features.lines([np.column_stack([trace, np.zeros(2)])]),
        "deep": Features.points(place.at(x), [EXPONENTIAL.z(v) for v in x]),
        "tops": layer("A"),
        "b": layer("B"),
    }
    line = SectionLine("S1", place.at([-2500.0, 7000.0]))
    (section,) = run(Study.from_dict(document), layers, [line]).sections
    assert section.prediction
    codes = [d.code for d in section.all_doubts]
    assert codes.count("growth-horizon") == (1 if horizons is GROWING else 0)
