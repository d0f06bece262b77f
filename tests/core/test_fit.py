"""The fit: noise, intervals, correlated picks, outliers, ties and the march."""

import numpy as np
import pytest

from geomcore.construction import predict_fault
from geomcore.errors import ConstructionError
from geomcore.fault import KnownFault
from geomcore.fit import BedRows, assemble, solve_fit, straight_evidence, whitened
from geomcore.forward import forward_horizon
from geomcore.kinematics import ConstantHeave, ConstantSlip
from geomcore.problem import MarchOptions, OtherHorizon
from geomcore.profile import Profile, line_through
from geomcore.section import SectionFrame
from geomcore.separation import CutOff, Separation

# the case of methods.md section 8: heave 600 m, 60 degree exponential fault over a
# detachment at -3500 m, level regional, 25 picks a strip, 10 m noise
HEAVE, DETACHMENT, NOISE, PICKS = 600.0, -3500.0, 10.0, 25
REACH = -DETACHMENT / np.tan(np.radians(60.0))
STRIPS = 10


def fault(u):
    """Exponential fault through (0, 0), 60 degrees there."""
    return DETACHMENT - DETACHMENT * np.exp(-np.asarray(u) / REACH)


PICK_U = np.arange(HEAVE, (STRIPS + 1) * HEAVE + 1e-6, HEAVE / PICKS)
NODES = np.arange(0.0, (STRIPS + 1) * HEAVE + 1.0, HEAVE / 10)
START = np.linspace(0.0, HEAVE, 11)


def bed_rows(noise, correlation=0.0, sigma=NOISE):
    """Picks of the bed beyond the cut-off, which is exact."""
    z = fault(PICK_U) - fault(PICK_U - HEAVE) + noise
    n = len(PICK_U) - 1
    return BedRows(
        "A",
        PICK_U[1:],
        z[1:],
        np.full(n, sigma),
        np.full(n, correlation),
        np.zeros(n),
        HEAVE,
    )


def fitted(noise, correlation=0.0, sigma=NOISE, robust=False):
    """Solve one case with start and cut-offs exact."""
    points = (START, fault(START), np.full(len(START), 0.1))
    system = assemble(NODES, [bed_rows(noise, correlation, sigma)], points)
    return solve_fit(system, robust=robust), system


def marched(noise):
    """March the same picks strip by strip, at the picks."""
    z = fault(PICK_U) - fault(PICK_U - HEAVE) + noise
    z[0] = fault(HEAVE) - fault(0.0)
    out = np.empty((STRIPS + 1) * PICKS + 1)
    out[: PICKS + 1] = fault(np.arange(PICKS + 1) * HEAVE / PICKS)
    for i in range(PICKS + 1, len(out)):
        out[i] = out[i - PICKS] + z[i - PICKS]
    return out - fault(np.arange(len(out)) * HEAVE / PICKS)


def in_strip(number, per_strip):
    """Give the nodes of one strip; the first strip follows the start piece."""
    return slice(number * per_strip, (number + 1) * per_strip + 1)


def rms(values):
    """Root mean square."""
    return float(np.sqrt(np.mean(np.square(values))))


@pytest.fixture(scope="module")
def many():
    """Fit and march 200 noisy surveys."""
    rng = np.random.default_rng(20)
    fits, marches, sigmas = [], [], []
    for _ in range(200):
        noise = rng.normal(0.0, NOISE, len(PICK_U))
        result, _ = fitted(noise)
        fits.append(result.z - fault(NODES))
        sigmas.append(np.sqrt(np.diag(result.covariance)))
        marches.append(marched(noise))
    return np.array(fits), np.array(sigmas), np.array(marches)


def test_fit_beats_the_march_at_the_tenth_strip(many):
    """At most 0.35 of the march's error in the same runs (methods.md 8: 6 to 25 m)."""
    fits, _, marches = many
    ratio = rms(fits[:, in_strip(10, 10)]) / rms(marches[:, in_strip(10, PICKS)])
    assert ratio < 0.35


@pytest.mark.parametrize("strip", [5, 10])
def test_standard_error_of_the_fit_is_its_scatter(many, strip):
    """Stated within 25 % of what it is; 80 % intervals hold 72 to 88 %."""
    fits, sigmas, _ = many
    at = in_strip(strip, 10)
    assert rms(sigmas[:, at]) == pytest.approx(rms(fits[:, at]), rel=0.25)
    covered = (np.abs(fits[:, at]) < 1.2816 * sigmas[:, at]).mean()
    assert 0.72 < covered < 0.88


def test_correlated_noise_keeps_intervals_honest():
    """Noise that goes together over 300 m, as digitised 50 m contours have it.

    A contour pick errs by about a quarter to half an interval and its neighbours
    with it (methods.md section 13). Declared, the interval still holds 80 %;
    undeclared it holds far less.
    """
    rng = np.random.default_rng(21)
    length, sigma = 300.0, 12.5
    rho = np.exp(-HEAVE / PICKS / length)
    covered = {0.0: [], length: []}
    for _ in range(100):
        noise = rng.normal(0.0, sigma, len(PICK_U))
        for i in range(1, len(noise)):
            noise[i] = rho * noise[i - 1] + np.sqrt(1 - rho**2) * noise[i]
        for declared, hits in covered.items():
            result, _ = fitted(noise, declared, sigma)
            at = in_strip(10, 10)
            se = np.sqrt(np.diag(result.covariance))[at]
            hits.append(np.abs(result.z - fault(NODES))[at] < 1.2816 * se)
    assert 0.70 < np.mean(covered[length]) < 0.90
    assert np.mean(covered[0.0]) < np.mean(covered[length]) - 0.15


def test_whitening_gives_independent_rows_of_unit_variance():
    """Closed form: the covariance of the whitened rows is the identity."""
    u = np.array([0.0, 40.0, 100.0, 130.0, 400.0])
    sigma, length = np.array([2.0, 3.0, 2.5, 4.0, 1.0]), np.full(5, 150.0)
    covariance = np.exp(-np.abs(np.subtract.outer(u, u)) / 150.0) * np.outer(
        sigma, sigma
    )
    operator = whitened(np.eye(5), u, sigma, length)
    np.testing.assert_allclose(
        operator @ covariance @ operator.T, np.eye(5), atol=1e-12
    )


def test_clean_data_are_met_from_the_two_cutoffs_alone():
    """Smoothness settles the null space: 0.3 m for vertical shear (methods.md 8)."""
    points = (START[[0, -1]], fault(START[[0, -1]]), np.full(2, 0.01))
    system = assemble(NODES, [bed_rows(0.0, sigma=0.05)], points)
    assert np.abs(solve_fit(system).z - fault(NODES)).max() < 0.5


def test_robust_fit_withstands_outliers():
    """Five picks off by 150 m; the robust fit stays nearer the truth and names them."""
    rng = np.random.default_rng(5)
    noise = rng.normal(0.0, NOISE, len(PICK_U))
    bad = np.array([40, 41, 90, 150, 200])
    noise[bad] += 150.0
    plain, _ = fitted(noise)
    robust, _ = fitted(noise, robust=True)
    truth = fault(NODES)
    assert rms(robust.z - truth) < 0.6 * rms(plain.z - truth)
    # rows are the picks beyond the cut-off
    assert np.all(robust.row_weight[bad - 1] < 0.6)


def test_straight_fault_is_the_limit_of_ever_more_smoothness():
    """The two evidences meet where the weight leaves nothing but a line."""
    from geomcore.fit import _evidence

    rng = np.random.default_rng(6)
    n = len(PICK_U) - 1
    z = -1.5 * HEAVE + rng.normal(0.0, NOISE, n)
    bed = BedRows(
        "A", PICK_U[1:], z, np.full(n, NOISE), np.zeros(n), np.zeros(n), HEAVE
    )
    points = (START, -1.5 * START, np.full(len(START), 5.0))
    system = assemble(NODES, [bed], points)
    penalty = system.curvature.T @ system.curvature
    a, b = system.matrix, system.right
    scale = np.log(np.trace(a.T @ a) / np.trace(penalty))
    args = a.T @ a, penalty, a.T @ b, b @ b, a.shape[1]
    gaps = [_evidence(scale + w, *args) - straight_evidence(system) for w in (8, 14)]
    # stiffer still, and rounding of the normal matrix takes over
    assert abs(gaps[1]) < 0.05
    assert abs(gaps[1]) < abs(gaps[0])


def section(angle=0.0, horizons=((-500.0, 900.0),), noise=0.0, seed=0, known=True):
    """Build a clean section with one or more pre-growth horizons of one fault."""
    x = np.linspace(0.0, 30000.0, 15001)
    z = -4000.0 + 4000.0 * np.exp(-x * np.tan(np.radians(60.0)) / 4000.0)
    rng = np.random.default_rng(seed)
    out = []
    for level, oblique in horizons:
        bed, foot, hang = forward_horizon(
            x, z, line_through(0.0, level, 0.0), oblique, ConstantHeave(angle)
        )
        at = np.arange(hang[0] + 20.0, 9500.0, 40.0)
        picked = bed(at) + noise * rng.normal(size=len(at))
        sep = Separation(
            f"h{level:g}", CutOff("footwall", *foot), CutOff("hanging wall", *hang)
        )
        profile = Profile(at, picked, np.full(len(at), max(noise, 0.1)))
        out.append((sep, profile, line_through(foot[0], foot[1], 0.0)))
    end = out[-1][0].hanging_wall.x + 100.0 if known else 0.0
    k = np.arange(0.0, end, 30.0)
    known_fault = KnownFault(k, np.interp(k, x, z), 0.1, -1.7, -0.6, "test")
    return out, known_fault, (x, z)


FRAME = SectionFrame("S1", [(0, 0), (30000, 0)], 90.0)


@pytest.mark.parametrize("angle", [0.0, 20.0, 35.0, -10.0])
def test_march_and_fit_agree_on_clean_data(angle):
    """Both solvers are one kernel: within 0.1 % of the depth range (4000 m)."""
    [(sep, bed, regional)], known, _ = section(angle)
    results = [
        predict_fault(FRAME, sep, known, bed, regional, ConstantHeave(angle), solver=s)
        for s in ("march", "fit")
    ]
    at = np.linspace(sep.footwall.x, results[0].trace.x[-1] - 50.0, 200)
    apart = results[0].trace.z_at(at) - results[1].trace.z_at(at)
    assert np.nanmax(np.abs(apart)) < 4.0


def test_second_horizon_narrows_the_fit():
    """More picks of another horizon on the same fault make it surer."""
    (first, second), known, _ = section(20.0, ((-500.0, 900.0), (-900.0, 900.0)), 10.0)
    sep, bed, regional = first
    other = OtherHorizon("B", *(second[0], second[1], second[2]))
    alone = predict_fault(
        FRAME, sep, known, bed, regional, ConstantHeave(20.0), solver="fit"
    )
    both = predict_fault(
        FRAME,
        sep,
        known,
        bed,
        regional,
        ConstantHeave(20.0),
        solver="fit",
        others=[other],
    )
    assert set(both.detail.residuals.horizon) == {sep.horizon, "B"}
    at = 7000.0
    sigma = [np.interp(at, p.trace.x, p.trace.sigma_z) for p in (alone, both)]
    assert sigma[1] < 0.85 * sigma[0]


def test_deep_tie_holds_the_fit():
    """A seismic pick on the fault at depth pulls a noisy fit to it."""
    [(sep, bed, regional)], known, (x, z) = section(0.0, noise=15.0, seed=3)
    from dataclasses import replace

    tied = replace(
        known,
        tie_x=np.array([7000.0]),
        tie_z=np.array([float(np.interp(7000.0, x, z))]),
        tie_sigma=np.array([2.0]),
    )
    free, held = (
        predict_fault(FRAME, sep, k, bed, regional, ConstantHeave(0.0), solver="fit")
        for k in (known, tied)
    )
    truth = float(np.interp(7000.0, x, z))
    assert abs(held.trace.z_at(7000.0) - truth) < 3.0
    sigma = [np.interp(7000.0, p.trace.x, p.trace.sigma_z) for p in (free, held)]
    assert sigma[1] < 0.5 * sigma[0]


def test_detachment_level_is_a_soft_constraint():
    """A level known to 20 m pulls the last strip to it."""
    [(sep, bed, regional)], known, _ = section(0.0, noise=15.0, seed=4)
    bed = Profile(bed.x, bed.z + 8.0, bed.sigma)  # a bias the level can correct
    free = predict_fault(
        FRAME, sep, known, bed, regional, ConstantHeave(0.0), solver="fit"
    )
    options = MarchOptions(detachment_z=-3900.0, detachment_sigma=20.0)
    held = predict_fault(
        FRAME, sep, known, bed, regional, ConstantHeave(0.0), options, "fit"
    )
    end = free.trace.x[-1]
    assert abs(held.trace.z_at(end) + 3900.0) < abs(free.trace.z_at(end) + 3900.0)


def test_nodes_without_picks_are_marked():
    """A hole of two strips in the bed is no data: it is not drawn as predicted."""
    [(sep, bed, regional)], known, _ = section(0.0)
    hole = (bed.x > 4500.0) & (bed.x < 6600.0)
    gappy = Profile(bed.x[~hole], bed.z[~hole], bed.sigma[~hole])
    trace = predict_fault(
        FRAME, sep, known, gappy, regional, ConstantHeave(0.0), solver="fit"
    ).trace
    inside = (trace.x > 5200.0) & (trace.x < 5900.0)
    assert set(trace.constrained[inside]) == {"out of reach"}
    assert "out of reach" not in set(trace.constrained[trace.x < 4300.0])


def test_fit_refuses_models_that_are_not_linear():
    """Constant slip goes by the march only."""
    [(sep, bed, regional)], known, _ = section(0.0)
    with pytest.raises(ConstructionError) as error:
        predict_fault(FRAME, sep, known, bed, regional, ConstantSlip(), solver="fit")
    assert error.value.code == "fit-not-linear"


def test_outliers_of_a_fit_are_named_with_their_place():
    """Two bad picks are pointed out; clean noise points at none."""
    [(sep, bed, regional)], known, _ = section(20.0, noise=8.0, seed=7)
    z = bed.z.copy()
    z[[30, 90]] += [70.0, -70.0]
    bad = Profile(bed.x, z, bed.sigma)
    model = ConstantHeave(20.0)
    clean = predict_fault(FRAME, sep, known, bed, regional, model, solver="fit")
    spoiled = predict_fault(FRAME, sep, known, bad, regional, model, solver="fit")
    assert "fit-outliers" not in {d.code for d in clean.doubts}
    [said] = [d.text for d in spoiled.doubts if d.code == "fit-outliers"]
    assert said.startswith("2 pick(s)")
    for i in (30, 90):
        assert f"at x = {bed.x[i]:.0f} " in said
