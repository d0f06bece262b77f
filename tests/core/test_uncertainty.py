"""Stated sigma against brute force: whole studies with noise drawn over and over."""

import numpy as np
import pytest
from worlds import (
    EXPONENTIAL,
    World,
    changed,
    direct_inputs,
    line_for,
    sources_for,
    study_for,
    truth_points,
)

from geomcore.construction import predict_fault
from geomcore.problem import MarchOptions
from geomcore.profile import Profile
from geomcore.study import Study, run


def noisy_traces(world, study, of_horizon, of_fault, draws, seed):
    """Run a study on as many draws of noise; one trace each."""
    rng = np.random.default_rng(seed)
    deep, tops = truth_points(world)
    for _ in range(draws):
        fault, bed = deep.copy(), tops.copy()
        fault[:, 1] += rng.normal(0.0, of_fault, len(fault))
        bed[:, 1] += rng.normal(0.0, of_horizon, len(bed))
        sources = sources_for(world, fault, bed)
        yield run(study, sources, [line_for(world)]).sections[0].prediction.trace


def study_with(world, of_horizon, of_fault):
    """The study of a world with the sigmas declared."""
    document = study_for(world).to_dict()
    document = changed(document, "sources", 1, "sigma", to=of_fault)
    document = changed(document, "sources", 2, "sigma", to=of_horizon)
    return Study.from_dict(changed(document, "picks", "fault_buffer", to=50.0))


def middles_of_strips(trace, strips=(1, 2, 3, 5, 8)):
    """x of the middle of some strips of a trace, as far as it goes."""
    wanted = [s for s in strips if s < trace.strip.max()]
    return np.array([np.median(trace.x[trace.strip == s]) for s in wanted])


# Brute force: horizon, footwall (hence regional and its dip), fault picks and both
# cut-offs move with the noise; 400 draws tell a sigma to 4 %. Bar: 25 %.
@pytest.mark.slow
@pytest.mark.parametrize("angle", [0.0, 20.0])
def test_stated_sigma_is_the_scatter_of_whole_studies(angle):
    """Noise on horizon and fault picks scatters the fault by the stated sigma."""
    world = World(EXPONENTIAL, angle)
    study = study_with(world, 5.0, 5.0)
    clean = run(study, sources_for(world), [line_for(world)]).sections[0].prediction
    x = middles_of_strips(clean.trace)
    drawn = [t.z_at(x) for t in noisy_traces(world, study, 5.0, 5.0, 400, 1)]
    stated = np.interp(x, clean.trace.x, clean.trace.sigma_z)
    assert len(x) >= 4
    assert stated == pytest.approx(np.std(drawn, axis=0, ddof=1), rel=0.25)


# 60 draws tell a sigma to 9 %. Bar: 30 %, at the first strip of synthetic shear
# 45 %: there the noise of the known piece is averaged between its picks, which the
# stated sigma leaves out on the safe side.
@pytest.mark.parametrize(
    ("angle", "of_horizon", "of_fault"),
    [
        (0.0, 4.0, 0.01),
        (0.0, 0.01, 4.0),
        (40.0, 0.01, 4.0),
        (-15.0, 0.01, 4.0),
        (-15.0, 3.0, 3.0),
    ],
)
def test_each_source_of_error_is_carried_by_itself(angle, of_horizon, of_fault):
    """Horizon noise alone, fault noise alone, both ways of shear."""
    world = World(EXPONENTIAL, angle)
    study = study_with(world, of_horizon, of_fault)
    clean = run(study, sources_for(world), [line_for(world)]).sections[0].prediction
    x = middles_of_strips(clean.trace)
    traces = noisy_traces(world, study, of_horizon, of_fault, 60, 2)
    scatter = np.std([t.z_at(x) for t in traces], axis=0, ddof=1)
    stated = np.interp(x, clean.trace.x, clean.trace.sigma_z)
    assert stated[1:] == pytest.approx(scatter[1:], rel=0.3)
    assert stated[0] == pytest.approx(scatter[0], rel=0.45)


def sigma_of(world, sigma=0.0, **changes):
    """Stated sigma of a direct prediction and its trace."""
    return predict_fault(**{**direct_inputs(world, sigma), **changes}).trace


def test_sigma_of_exact_inputs_is_nought():
    """Without a stated error nothing is uncertain."""
    assert sigma_of(World(EXPONENTIAL, 20.0)).sigma_z == pytest.approx(0.0, abs=1e-6)


# [N] methods.md section 13: s sqrt(n) at the picks.
def test_pick_noise_grows_with_the_root_of_the_strips():
    """Independent pick noise adds up in squares, strip by strip."""
    world = World(EXPONENTIAL, heave=600.0, per_strip=20.0)
    inputs = direct_inputs(world)
    bed = inputs["bed"]
    noise = Profile(bed.x, bed.z, np.full(len(bed), 10.0))
    trace = sigma_of(world, bed=noise)
    for strip in (1, 5, 10):
        own = trace.strip == strip
        assert trace.sigma_z[own][:-1].max() == pytest.approx(
            10.0 * strip**0.5, rel=0.02
        )


# [N] methods.md section 13: 82 m per degree at a = 0 far out for H = 600, less before.
def test_error_of_the_shear_angle_is_that_of_another_run():
    """A stated sigma of one degree is the change that one degree makes."""
    world = World(EXPONENTIAL, 10.0)
    inputs = direct_inputs(world)
    stated = predict_fault(**inputs, options=MarchOptions(shear_angle_sigma=1.0)).trace
    one, other = (
        predict_fault(**{**inputs, "model": type(inputs["model"])(angle)}).trace
        for angle in (9.0, 11.0)
    )
    x = middles_of_strips(stated)
    change = 0.5 * np.abs(one.z_at(x) - other.z_at(x))
    assert np.interp(x, stated.x, stated.sigma_z) == pytest.approx(change, rel=0.05)


# [N] methods.md section 13: a constant regional error e gives n e.
def test_error_of_the_regional_level_grows_with_the_strips():
    """With the cut-offs given, a level known to 2 is worth 2 for every strip."""
    world = World(EXPONENTIAL, heave=600.0)
    line = direct_inputs(world)["regional"]
    trace = sigma_of(world, regional=type(line)(line.x0, line.z0, 0.0, (4.0, 0.0, 0.0)))
    for strip in (1, 5, 10):
        end = trace.sigma_z[trace.strip == strip][-1]
        assert end == pytest.approx(2.0 * strip, rel=0.01)


# [N] methods.md section 8: an error along the shear line is 1 + tan(dip) tan(a) times
# larger at fixed x; for the pick itself 1/(1 - B' tan a).
def test_error_along_the_shear_line_is_larger_at_fixed_x():
    """Under antithetic shear a band without the frame factor would be too thin."""
    world = World(EXPONENTIAL, 30.0)
    inputs = direct_inputs(world)
    bed = inputs["bed"]
    noise = Profile(bed.x, bed.z, np.full(len(bed), 10.0))
    trace = sigma_of(world, bed=noise)
    t = np.tan(np.radians(30.0))
    own = trace.strip == 1
    x = trace.x[own]
    # the pick over the node: where its shear line meets the bed
    u = x - trace.z[own] * t
    bed_u = bed.x - bed.z * t
    slope = np.interp(u, bed_u, np.gradient(bed.z, bed.x))
    fault_slope = np.tan(np.radians(trace.dip[own]))
    expected = 10.0 / (1.0 - slope * t) * (1.0 + fault_slope * t)
    # between picks straight lines average the noise to 0.71 at the least
    ratio = trace.sigma_z[own][:-1] / expected[:-1]
    assert ratio.max() == pytest.approx(1.0, abs=0.05)
    assert ratio.min() > 0.65


def test_models_without_a_shear_angle_ignore_its_sigma():
    """Constant slip has no shear angle to be unsure of."""
    from geomcore.kinematics import ConstantSlip

    inputs = direct_inputs(World(EXPONENTIAL, angle=0.0), sigma=1.0)
    inputs["model"] = ConstantSlip()
    inputs["options"] = MarchOptions(shear_angle_sigma=5.0)
    prediction = predict_fault(**inputs)
    assert "shear angle" not in prediction.error_shares
