"""Horizons as curves, averaging of what breaks their order, the straight regional."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from worlds import table

from geomcore.errors import ConstructionError, PicksError
from geomcore.picks import Picks
from geomcore.profile import (
    Profile,
    Regional,
    fit_line,
    line_through,
    pool_to_increasing,
    profile_from_picks,
    require_depth,
)


@given(st.lists(st.integers(-20, 20), min_size=1, max_size=30))
def test_pooling_gives_the_nearest_growing_row(keys):
    """Averaging keeps order, totals and the least squared change (isotonic rule)."""
    keys = np.array(keys, dtype=float)
    pooled, places, counts = pool_to_increasing(keys, np.arange(len(keys)))
    assert np.all(np.diff(pooled) > 0)
    assert counts.sum() == len(keys)
    assert (pooled * counts).sum() == pytest.approx(keys.sum())
    assert (places * counts).sum() == pytest.approx(np.arange(len(keys)).sum())
    # max-min formula of isotonic regression, in plain loops
    n = len(keys)
    expected = [
        max(min(keys[i : j + 1].mean() for j in range(k, n)) for i in range(k + 1))
        for k in range(n)
    ]
    assert np.repeat(pooled, counts.astype(int)) == pytest.approx(expected)


def test_growing_row_is_left_as_it_is():
    """Nothing is averaged where the order is sound."""
    key, z, counts = pool_to_increasing([1.0, 2.0, 4.0], [9.0, 8.0, 7.0])
    assert (key.tolist(), z.tolist()) == ([1.0, 2.0, 4.0], [9.0, 8.0, 7.0])
    assert counts.tolist() == [1.0, 1.0, 1.0]


def test_profile_is_straight_between_its_points_and_ends_there():
    """A horizon is known between its first and last pick only."""
    bed = Profile([0.0, 10.0, 30.0], [-5.0, -10.0, 0.0], [1.0, 1.0, 1.0])
    assert bed([5.0, 20.0]).tolist() == [-7.5, -5.0]
    assert np.isnan(bed([-0.1, 30.1])).all()
    assert len(bed) == 3
    with pytest.raises(ValueError, match="read-only"):
        bed.z[0] = 0.0


def test_picks_at_one_place_are_averaged_by_their_weight():
    """Two picks at one x count by 1/sigma^2; the mean keeps the smaller sigma."""
    picks = table([5.0, 0.0, 5.0], [-10.0, -1.0, -40.0], sigma=[1.0, 2.0, 2.0])
    bed = profile_from_picks(picks)
    assert bed.x.tolist() == [0.0, 5.0]
    assert bed.z == pytest.approx([-1.0, (-10.0 + -40.0 / 4) / (1 + 1 / 4)])
    assert bed.sigma.tolist() == [2.0, 1.0]


def test_left_out_picks_make_no_profile():
    """Only used picks count; without any the profile is empty."""
    picks = table([0.0, 1.0], [0.0, 0.0]).left_out([True, True], "drag")
    assert len(profile_from_picks(picks)) == 0


def test_regional_dips_down_to_the_hanging_wall_when_positive():
    """Dip is positive where the regional deepens along transport."""
    line = line_through(1000.0, -500.0, -np.tan(np.radians(3.0)))
    assert line.dip == pytest.approx(3.0)
    assert line(2000.0) == pytest.approx(-500.0 - 1000.0 * np.tan(np.radians(3.0)))
    assert line.how == "given"


X = np.array([0.0, 300.0, 450.0, 900.0, 1500.0])
SIGMA = np.array([2.0, 1.0, 4.0, 2.0, 1.0])


def test_fitted_regional_is_the_weighted_least_squares_line():
    """Level and slope are those of numpy's weighted line, noise or not."""
    z = -500.0 - 0.03 * X + np.array([1.0, -2.0, 3.0, 0.5, -0.5])
    slope, level = np.polyfit(X, z, 1, w=1.0 / SIGMA)
    line = fit_line(X, z, SIGMA)
    assert line.slope == pytest.approx(slope)
    assert line(0.0) == pytest.approx(level)
    assert line.n_picks == 5
    assert "5 picks" in line.how


def test_stated_error_of_the_regional_is_its_scatter_under_noise():
    """Many fits to noisy picks scatter by the stated sigma, at and beyond the picks."""
    rng = np.random.default_rng(11)
    at = np.array([-500.0, 600.0, 4000.0])
    fits = [fit_line(X, rng.normal(-500.0, SIGMA), SIGMA) for _ in range(3000)]
    scatter = np.std([f(at) for f in fits], axis=0)
    clean = fit_line(X, np.full(5, -500.0), SIGMA)
    assert clean.sigma_at(at) == pytest.approx(scatter, rel=0.06)
    moved = clean.moved_to(3000.0)
    assert moved.sigma_at(at) == pytest.approx(clean.sigma_at(at))
    assert moved(at) == pytest.approx(clean(at))
    assert moved.x0 == 3000.0


def test_regional_that_misses_its_picks_is_less_sure():
    """Picks off the line by ten times their sigma widen its error about tenfold."""
    away = 20.0 * np.array([1.0, -1.0, 1.0, -1.0, 1.0, -1.0, 1.0, -1.0])
    x = np.linspace(0.0, 700.0, 8)
    sure = fit_line(x, np.zeros(8), np.full(8, 2.0))
    unsure = fit_line(x, away, np.full(8, 2.0))
    ratio = float(unsure.sigma_at(350.0) / sure.sigma_at(350.0))
    assert ratio == pytest.approx(10.0 * np.sqrt(8 / 6), rel=0.1)


def test_regional_of_given_dip_fits_the_level_only():
    """With the dip given, the level is the weighted mean."""
    z = np.array([-10.0, -12.0, -8.0, -9.0, -11.0])
    line = fit_line(X, z, SIGMA, slope=0.0)
    assert line.slope == 0.0
    assert line.z0 == pytest.approx(np.average(z, weights=SIGMA**-2.0))
    assert line.covariance[0] == pytest.approx(1.0 / (SIGMA**-2.0).sum())
    assert line.covariance[2] == 0.0


def test_regional_through_a_cut_off_fits_the_dip_only():
    """With the footwall cut-off given, the line goes through it."""
    z = -500.0 - 0.02 * (X - 2000.0)
    line = fit_line(X, z, SIGMA, through=(2000.0, -500.0))
    assert line.slope == pytest.approx(-0.02)
    assert (line.x0, line.z0) == (2000.0, -500.0)
    both = fit_line(X, z, SIGMA, slope=0.1, through=(2000.0, -500.0))
    assert (both.slope, both.n_picks) == (0.1, 0)


def test_line_shifted_for_a_trial_keeps_its_point():
    """A trial line moves in level and slope about its own point."""
    line = Regional(100.0, -50.0, -0.1).shifted(2.0, 0.05)
    assert line(100.0) == pytest.approx(-48.0)
    assert line(300.0) == pytest.approx(-48.0 - 0.05 * 200.0)


@pytest.mark.parametrize(
    ("x", "options"),
    [
        ([], {}),
        ([5.0], {}),
        ([5.0, 5.0], {}),
        ([], {"slope": 0.0}),
        ([], {"through": (0.0, 0.0)}),
    ],
    ids=["none", "one", "one place", "level alone", "dip alone"],
)
def test_too_few_picks_carry_no_regional(x, options):
    """One pick tells no dip: the regional has to be given then."""
    with pytest.raises(PicksError, match="cannot carry a regional") as caught:
        fit_line(x, np.zeros(len(x)), np.ones(len(x)), **options)
    assert caught.value.code == "regional-picks"
    assert "Give" in caught.value.remedy


def test_times_are_refused_where_depths_are_needed():
    """The construction holds in depth only; times have to be converted first."""
    require_depth(Picks.empty("S4"), "section S4")
    with pytest.raises(ConstructionError, match=r"section S4.*two-way times") as caught:
        require_depth(Picks.empty("S4", "time"), "section S4")
    assert caught.value.code == "time-domain"
    assert "velocity" in caught.value.remedy
