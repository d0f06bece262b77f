"""The known fault: observed points, straight beyond, deep ties apart."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from worlds import EXPONENTIAL, joined, table

from geomcore.errors import PicksError
from geomcore.fault import known_fault
from geomcore.profile import line_through
from geomcore.separation import CutOff

X = np.linspace(0.0, 1800.0, 25)
Z = np.array([EXPONENTIAL.z(x) for x in X])


def fault_picks(x=X, z=Z, **columns):
    """Fault picks of section S1."""
    return table(x, z, kind="fault", name="F", **columns)


def test_fault_is_straight_between_its_points_and_beyond_them():
    """Between picks straight, beyond them carried on with the last slope."""
    fault, doubts = known_fault(fault_picks())
    assert doubts == []
    assert fault.z_at(X) == pytest.approx(Z)
    middle = 0.5 * (X[3] + X[4])
    assert fault.z_at(middle) == pytest.approx(0.5 * (Z[3] + Z[4]))
    first, last = np.diff(Z)[[0, -1]] / np.diff(X)[[0, -1]]
    assert fault.z_at(-100.0) == pytest.approx(Z[0] - 100.0 * first)
    assert fault.z_at(2000.0) == pytest.approx(Z[-1] + 200.0 * last)
    assert "last two known points" in fault.below_from


@given(st.floats(-3000.0, 6000.0))
def test_x_and_z_of_the_fault_invert_each_other(x):
    """Above, on and below the known piece x_at undoes z_at."""
    fault, _ = known_fault(fault_picks())
    assert fault.x_at(fault.z_at(x)) == pytest.approx(x, abs=1e-6)


@given(st.floats(-1500.0, 4000.0))
def test_slope_is_the_fall_of_the_elevation(x):
    """dz/dx equals the difference of elevations over a short way off the bends."""
    fault, _ = known_fault(fault_picks())
    if np.abs(X - x).min() < 1e-3:
        return
    d = 1e-4
    rise = (fault.z_at(x + d) - fault.z_at(x - d)) / (2 * d)
    assert fault.slope_at(x) == pytest.approx(float(rise), abs=1e-5)


def test_known_piece_is_told_from_its_continuation():
    """Known is what lies between the first and the last pick."""
    fault, _ = known_fault(fault_picks())
    assert fault.is_known([-1.0, 0.0, 900.0, 1800.0, 1801.0]).tolist() == [
        False,
        True,
        True,
        True,
        False,
    ]
    lone, _ = known_fault(fault_picks([0.0], [0.0], dip=60.0))
    assert not lone.is_known([0.0]).any()


def test_trace_with_dip_alone_is_carried_on_by_that_dip():
    """One point and a dip make a straight fault both ways, and say so."""
    fault, _ = known_fault(fault_picks([100.0], [20.0], dip=60.0))
    slope = -math.tan(math.radians(60.0))
    assert fault.z_at([0.0, 300.0]) == pytest.approx(
        [20.0 - 100.0 * slope, 20.0 + 200.0 * slope]
    )
    assert "dip of 60 degrees" in fault.below_from


def test_dip_at_the_trace_is_used_above_it_and_the_picks_below():
    """A measured dip counts where it was measured, picks count below."""
    dips = np.r_[70.0, np.full(len(X) - 1, np.nan)]
    fault, _ = known_fault(fault_picks(dip=dips))
    assert fault.slope_above == pytest.approx(-math.tan(math.radians(70.0)))
    assert fault.slope_below == pytest.approx((Z[-1] - Z[-2]) / (X[-1] - X[-2]))


def test_given_cut_offs_lie_on_the_fault():
    """Cut-offs that were given are points of the fault too."""
    marks = [CutOff("footwall", 400.0, -500.0), CutOff("hanging wall", 900.0, -1300.0)]
    fault, _ = known_fault(fault_picks([0.0], [0.0], dip=60.0), marks)
    assert fault.z_at([400.0, 900.0]) == pytest.approx([-500.0, -1300.0])


def test_deep_picks_far_beyond_the_piece_are_ties():
    """A gap far beyond the usual spacing parts the known piece from deep ties."""
    deep = [6000.0, 6500.0]
    fault, _ = known_fault(fault_picks(np.r_[X, deep], np.r_[Z, -3500.0, -3600.0]))
    assert fault.tie_x.tolist() == deep
    assert fault.tie_z.tolist() == [-3500.0, -3600.0]
    assert fault.x[-1] == X[-1]
    close, _ = known_fault(fault_picks(np.r_[X, 2000.0], np.r_[Z, -2600.0]))
    assert len(close.tie_x) == 0


def test_picks_that_do_not_deepen_are_averaged_with_a_doubt():
    """Noise that lets the fault rise is evened out, and said."""
    z = Z.copy()
    z[[10, 11]] = z[[11, 10]]
    fault, doubts = known_fault(fault_picks(z=z))
    assert [d.code for d in doubts] == ["fault-picks-uneven"]
    assert "section S1" in str(doubts[0])
    assert np.all(np.diff(fault.z) < 0)
    assert np.all(np.diff(fault.x) > 0)
    assert fault.z_at(0.5 * (X[10] + X[11])) == pytest.approx(z[10:12].mean())


def test_left_out_fault_picks_do_not_count():
    """Only used picks make the fault."""
    picks = joined(fault_picks(), fault_picks([500.0], [-50.0], used=False))
    fault, doubts = known_fault(picks)
    assert doubts == []
    assert fault.z_at(X) == pytest.approx(Z)


def test_first_crossing_with_a_curve_is_found():
    """The regional meets the fault where the closed form says."""
    fine = np.linspace(0.0, 3000.0, 3001)
    fault, _ = known_fault(fault_picks(fine, [EXPONENTIAL.z(x) for x in fine]))
    level = line_through(0.0, -500.0, 0.0)
    length = 4000.0 / math.tan(math.radians(60.0))
    # -4000 + 4000 exp(-x/L) = -500
    exact = -length * math.log(3500.0 / 4000.0)
    assert fault.crossing(level, -2000.0, 5000.0) == pytest.approx(exact, abs=0.01)
    assert fault.crossing(line_through(0.0, 900.0, 0.0), 0.0, 3000.0) is None


@pytest.mark.parametrize(
    ("picks", "code", "says"),
    [
        (fault_picks([], []), "no-fault", "does not meet the fault"),
        (fault_picks([5.0], [0.0]), "no-dip", "only one point"),
        (fault_picks([5.0], [0.0], dip=0.0), "no-dip", "only one point"),
        (fault_picks([0.0, 10.0, 20.0], [-20.0, -10.0, 0.0]), "wrong-side", "rise"),
    ],
    ids=["none", "one point", "level dip", "wrong side"],
)
def test_fault_that_cannot_be_known_is_refused_with_its_section(picks, code, says):
    """Without a point, a way down, or on the wrong side, the section says why."""
    with pytest.raises(PicksError, match=says) as caught:
        known_fault(picks)
    assert caught.value.code == code
    assert "section S1" in str(caught.value)
    assert caught.value.remedy


def test_dip_away_from_the_hanging_wall_is_named():
    """A dip direction that points into the footwall is not taken for no dip at all."""
    with pytest.raises(PicksError, match="dips away") as caught:
        known_fault(fault_picks([5.0], [0.0], dip=-60.0))
    assert caught.value.code == "wrong-side"


def test_dip_away_from_the_hanging_wall_is_doubted_where_picks_tell_the_way():
    """With picks that deepen the right way, a dip the other way is said, not used."""
    dips = np.r_[-60.0, np.full(len(X) - 1, np.nan)]
    fault, doubts = known_fault(fault_picks(dip=dips))
    assert [d.code for d in doubts] == ["fault-dip-away"]
    assert fault.slope_above == pytest.approx((Z[1] - Z[0]) / (X[1] - X[0]))
