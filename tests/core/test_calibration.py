"""The shear angle from data: clean cases, closed forms, and what tells nothing."""

import numpy as np
import pytest

from geomcore.calibration import (
    angle_from_area,
    angle_from_cutoffs,
    angle_from_horizons,
    joint_angle,
)
from geomcore.fault import KnownFault
from geomcore.forward import forward_horizon
from geomcore.kinematics import ConstantHeave
from geomcore.problem import MarchOptions, Problem, bed_from
from geomcore.profile import Profile, Regional, line_through
from geomcore.separation import CutOff, Separation

X = np.linspace(-3000.0, 30000.0, 16501)
LISTRIC = np.where(
    X < 0.0,
    -np.tan(np.radians(60.0)) * X,
    -4000.0 + 4000.0 * np.exp(-np.maximum(X, 0.0) * np.tan(np.radians(60.0)) / 4000.0),
)
#: Growth horizons: oblique heave left to each, and the level of its regional.
GROWTH = ((300.0, -400.0), (600.0, -900.0), (900.0, -1400.0))


def horizon(angle, heave, level, fault=LISTRIC, noise=0.0, rng=None, beyond=400.0):
    """Make one horizon of a fault that moved by constant heave at an angle."""
    bed, foot, hang = forward_horizon(
        X, fault, line_through(0.0, level, 0.0), heave, ConstantHeave(angle)
    )
    at = np.linspace(hang[0] + 30.0, 9000.0, 180)
    z = bed(at) + (noise * rng.normal(size=len(at)) if rng is not None else 0.0)
    known = np.linspace(-300.0, hang[0] + beyond, 30)
    cut = CutOff("hanging wall", *hang)
    return Problem(
        "section S1",
        Separation(f"h{level:g}", CutOff("footwall", *foot), cut),
        KnownFault(known, np.interp(known, X, fault), 0.0, -1.7, -0.5, "the test"),
        bed_from(cut, Profile(at, z, np.full(len(at), max(noise, 0.01)))),
        Regional(foot[0], foot[1], 0.0),
        ConstantHeave(0.0),
        MarchOptions(20),
    )


@pytest.mark.parametrize("angle", [25.0, -12.0])
def test_growth_horizons_give_the_angle_of_clean_ground(angle):
    """Within half a degree (methods.md section 6: 25.00 and -11.98 [N])."""
    found = angle_from_horizons([horizon(angle, *g) for g in GROWTH])
    assert found.resolved
    assert found.best == pytest.approx(angle, abs=0.5)


def test_growth_horizons_with_pick_noise_stay_within_three_degrees():
    """5 m pick noise only; methods.md section 6 has a scatter of half a degree."""
    rng = np.random.default_rng(9)
    for _ in range(3):
        noisy = [horizon(25.0, *g, noise=5.0, rng=rng) for g in GROWTH]
        assert angle_from_horizons(noisy).best == pytest.approx(25.0, abs=3.0)


def test_one_horizon_cannot_tell_the_angle():
    """Any angle makes some fault of one bed, if nothing is known beyond its cut-off."""
    alone = horizon(25.0, *GROWTH[1], beyond=0.0)
    found = angle_from_horizons([alone])
    assert not found.resolved
    assert "one horizon" in found.text


def test_known_fault_beyond_the_cutoff_tells_the_angle_to_one_horizon():
    """Points on the fault under the rollover are what the prediction has to meet."""
    rng = np.random.default_rng(3)
    seen = horizon(25.0, *GROWTH[1], noise=5.0, rng=rng, beyond=400.0)
    found = angle_from_horizons([seen])
    assert found.resolved
    assert found.low < 25.0 < found.high


def test_planar_fault_does_not_resolve_the_angle():
    """Over a straight fault beds stay parallel to the regional for every angle."""
    planar = -1.2 * X
    rng = np.random.default_rng(4)
    both = [horizon(20.0, *g, fault=planar, noise=5.0, rng=rng) for g in GROWTH[:2]]
    assert not angle_from_horizons(both).resolved


def test_heave_against_throw_gives_the_angle():
    """H = heave + throw tan(a) is one for pre-growth horizons: 30.000 of 30 [N]."""
    throw = np.array([300.0, 520.0, 700.0, 810.0])
    heave = 1000.0 - throw * np.tan(np.radians(30.0))
    found = angle_from_cutoffs(heave, throw, 1.0, 1.0)
    assert found.best == pytest.approx(30.0, abs=0.26)  # the step of the curve is 0.5


def test_equal_heaves_and_throws_do_not_resolve_the_angle():
    """Cut-offs of one size lie on every line."""
    same = np.full(4, 500.0)
    assert not angle_from_cutoffs(same, same, 10.0, 10.0).resolved


def test_known_detachment_and_lost_area_give_the_angle():
    """tan(a) = (A/d - heave)/throw: the exponential fault at 20 degrees [N]."""
    heave, throw = 605.988, 807.790  # methods.md section 16
    found = angle_from_area(3.15e6, 3500.0, heave, throw, 1e4, 20.0, 5.0)
    assert found.best == pytest.approx(20.0, abs=0.3)


def test_sections_joined_are_surer_than_each():
    """One angle for the fault from sections with independent errors."""
    throw = np.array([300.0, 520.0, 700.0, 810.0])
    heave = 1000.0 - throw * np.tan(np.radians(30.0))
    one = angle_from_cutoffs(heave, throw, 10.0, 10.0)
    four = joint_angle([one] * 4)
    assert four.sd == pytest.approx(one.sd / 2.0, rel=0.1)
