"""Every model that has an inverse gives back the fault its own bed was made from."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geomcore.construction import predict_fault
from geomcore.errors import ConstructionError
from geomcore.fault import KnownFault
from geomcore.forward import forward_horizon
from geomcore.kinematics import ConstantBedLength, ConstantHeave, ConstantSlip
from geomcore.profile import Profile, line_through
from geomcore.section import SectionFrame
from geomcore.separation import CutOff, Separation

FRAME = SectionFrame("S1", [(0, 0), (60000, 0)], 90.0)
X = np.linspace(-1500.0, 30000.0, 6301)


def exponential(dip, depth):
    """Fault that flattens exponentially towards a detachment."""
    slope = np.tan(np.radians(dip))
    z = -depth + depth * np.exp(-np.maximum(X, 0.0) * slope / depth)
    return np.where(X < 0.0, -slope * X, z)


def circular(dip, depth):
    """Fault that turns on a circle into its detachment."""
    slope, radius = np.tan(np.radians(dip)), depth / (1.0 - np.cos(np.radians(dip)))
    end = radius * np.sin(np.radians(dip))
    at = np.clip(X, 0.0, end)
    z = radius - depth - np.sqrt(np.maximum(radius**2 - (end - at) ** 2, 0.0))
    return np.where(X < 0.0, -slope * X, z)


def ramp_flat(dip, depth):
    """Fault of straight pieces: ramp, flat, gentler ramp, detachment."""
    slope = np.tan(np.radians(dip))
    bends = np.array([0.0, 0.45 * depth / slope])
    bends = np.r_[bends, bends[-1] + 1500.0]
    z = np.r_[0.0, -0.45 * depth, -0.55 * depth]
    bends = np.r_[bends, bends[-1] + 0.45 * depth / np.tan(np.radians(0.6 * dip))]
    z = np.r_[z, -depth]
    inner = np.interp(X, bends, z)
    return np.where(X < 0.0, -slope * X, inner)


FAULTS = {"exponential": exponential, "circular": circular, "ramp-flat": ramp_flat}
MODELS = st.one_of(
    st.floats(-15.0, 45.0).map(ConstantHeave),
    st.just(ConstantSlip()),
    st.just(ConstantBedLength()),
)


def marched(model, fault, regional, displacement):
    """Make the bed by the forward model and march it back; trace and greatest depth."""
    bed, foot, hang = forward_horizon(X, fault, regional, displacement, model)
    heave = hang[0] - foot[0]
    end = min(bed.x[-1], hang[0] + 10.0 * heave, 20000.0)
    own = bed.x[(bed.x > hang[0] + 1.0) & (bed.x < end)]
    at = np.union1d(np.arange(hang[0] + 1.0, end, heave / 30.0), own)
    picks = Profile(at, bed(at), np.full(len(at), 0.01))
    known = hang[0] + heave >= X
    known_fault = KnownFault(X[known], fault[known], 0.0, -2.0, -0.5, "the test")
    separation = Separation(
        "A", CutOff("footwall", *foot), CutOff("hanging wall", *hang)
    )
    line = regional.moved_to(foot[0])
    return predict_fault(FRAME, separation, known_fault, picks, line, model).trace


@settings(max_examples=60, deadline=None)
@given(
    name=st.sampled_from(sorted(FAULTS)),
    dip=st.floats(40.0, 68.0),
    depth=st.floats(2000.0, 6000.0),
    level=st.floats(-700.0, -100.0),
    slope=st.floats(-3.0, 3.0),
    displacement=st.floats(250.0, 1400.0),
    model=MODELS,
)
def test_forward_then_inverse_gives_back_the_fault(
    name, dip, depth, level, slope, displacement, model
):
    """Within 0.2 % of the depth range, or a refusal in words; no noise."""
    fault = FAULTS[name](dip, depth)
    regional = line_through(0.0, level, np.tan(np.radians(slope)))
    try:
        trace = marched(model, fault, regional, displacement)
    except ConstructionError:
        return  # refused in words: every error of the core carries its reason
    inside = (trace.x > X[0]) & (trace.x < X[-1])
    miss = trace.z[inside] - np.interp(trace.x[inside], X, fault)
    assert np.abs(miss).max() < 0.002 * (depth + level)


@pytest.mark.parametrize(
    ("model", "dip"),
    [
        (ConstantHeave(0.0), 60.0),
        (ConstantHeave(30.0), 60.0),
        (ConstantSlip(), 60.0),
        (ConstantBedLength(), 45.0),  # a steeper one flattens too fast for it
    ],
    ids=lambda v: getattr(v, "label", None),
)
def test_round_trip_is_no_refusal_on_an_ordinary_fault(model, dip):
    """The property above would hold if everything were refused; this would not."""
    fault = exponential(dip, 4000.0)
    trace = marched(model, fault, line_through(0.0, -300.0, 0.0), 700.0)
    assert trace.strip.max() >= 5
    assert np.abs(trace.z - np.interp(trace.x, X, fault)).max() < 0.002 * 3700.0
