"""One section by the march against a loop over its samples (performance row 4)."""

import math

import numpy as np
import pytest
from benchmarks.ratio import paired_ratio
from worlds import EXPONENTIAL, World, direct_inputs

from geomcore.construction import predict_fault
from geomcore.problem import MarchOptions, Problem, bed_from, solve_march

TARGET = 1 / 10
SAMPLES = 1000


def problem_of(angle):
    """One section of about a thousand samples, noise-free picks."""
    world = World(EXPONENTIAL, angle, heave=900.0, reach=11_600.0)
    inputs = direct_inputs(world)
    foot, bed = inputs["separation"].footwall, inputs["bed"]
    t = math.tan(math.radians(angle))
    length = (bed.x[-1] - bed.z[-1] * t) - (foot.x - foot.z * t)
    per_strip = round(SAMPLES * world.oblique_heave / length)
    return inputs, Problem(
        "section S1",
        inputs["separation"],
        inputs["fault"],
        bed_from(inputs["separation"].hanging_wall, bed),
        inputs["regional"],
        inputs["model"],
        MarchOptions(per_strip),
    )


def sample_by_sample(problem, count):
    """March one sample after the other, each value by a scalar np.interp."""
    t = problem.tan
    foot, hang = problem.separation.footwall, problem.separation.hanging_wall
    fault, bed, line = problem.fault, problem.bed, problem.regional
    heave, m = problem.oblique_heave, problem.options.samples_per_strip
    step, first = heave / m, foot.x - foot.z * t
    inner = (fault.x > foot.x) & (fault.x < hang.x)
    start_z = np.r_[foot.z, fault.z[inner], hang.z]
    start_u = np.r_[foot.x, fault.x[inner], hang.x] - start_z * t
    bed_u = bed.x - bed.z * t
    at_zero = line.z0 - line.slope * line.x0
    u, z = np.empty(count), np.empty(count)
    for i in range(count):
        u[i] = first + i * step
        if i <= m:
            z[i] = np.interp(u[i], start_u, start_z)
            continue
        origin = u[i] - heave
        regional = (at_zero + line.slope * origin) / (1.0 - line.slope * t)
        inboard = np.interp(origin, u[:i], z[:i])
        z[i] = inboard + np.interp(u[i], bed_u, bed.z) - regional
    return u, z


@pytest.mark.parametrize("angle", [0.0, 20.0])
def test_one_section_costs_a_tenth_of_the_loop(benchmark, angle):
    """The march of a section takes at most a tenth of a loop over its samples."""
    inputs, problem = problem_of(angle)
    solution = solve_march(problem)
    count = len(solution.u)
    assert abs(count - SAMPLES) < 20
    u, z = sample_by_sample(problem, count)
    assert solution.u == pytest.approx(u, abs=1e-6)
    assert solution.z == pytest.approx(z, abs=1e-6)
    paired_ratio(
        benchmark,
        4,
        TARGET,
        lambda: solve_march(problem),
        lambda: sample_by_sample(problem, count),
        calls=5,
    )
    # for the record: with sigma, dips, table and doubts, which the loop has not
    assert predict_fault(**inputs, options=problem.options).strips > 4
