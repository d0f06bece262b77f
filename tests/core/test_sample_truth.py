"""The sample's truth is possible geology, and its survey states its noise."""

import importlib
from pathlib import Path

import numpy as np
import pytest

from sample_project import survey, truth

STRIKES = np.array([-9000.0, -6000.0, -2000.0, 0.0, 2500.0, 6000.0, 9000.0])
HORIZONS = sorted(truth.HORIZONS)


@pytest.fixture
def fresh_truth():
    """Give a copy of the truth whose figures may be changed."""
    yield truth
    importlib.reload(truth)


# ---- the truth ---------------------------------------------------------------------


def test_hanging_wall_map_keeps_area():
    """Plane strain by shear keeps area: the map of particles has Jacobian one."""
    # plain mechanics of incompressible plane strain; central differences
    rng = np.random.default_rng(1)
    s = rng.uniform(-9000, 9000, 200)
    t = rng.uniform(1500, 12000, 200)
    z = truth.fault_z(t, s) + rng.uniform(200, 2500, 200)
    h = 0.5
    right, left = truth.moved(t + h, z, s), truth.moved(t - h, z, s)
    up, down = truth.moved(t, z + h, s), truth.moved(t, z - h, s)
    jacobian = (right[0] - left[0]) * (up[1] - down[1])
    jacobian -= (up[0] - down[0]) * (right[1] - left[1])
    assert np.allclose(jacobian / (2 * h) ** 2, 1.0, atol=1e-6)


def test_particles_on_the_fault_stay_on_it():
    """Hanging-wall rock at the fault slides along the fault: no gap, no overlap."""
    t = np.linspace(0.0, 9000.0, 50)
    for s in STRIKES:
        z = truth.fault_z(t, s)
        new_t, new_z = truth.moved(t, z, np.full(t.shape, s))
        assert np.allclose(new_z, truth.fault_z(new_t, s), atol=1e-6)
        assert np.all(new_t > t)


def test_columns_keep_length_and_direction():
    """A line of rock inclined by the shear angle stays straight, as long, as steep."""
    base = np.array([3000.0, -2600.0])
    up = np.array([np.tan(np.radians(truth.SHEAR_ANGLE)), 1.0])
    heights = np.array([0.0, 400.0, 1500.0])
    t, z = (base + heights[:, None] * up).T
    new = np.array(truth.moved(t, z, np.full(3, 1000.0))).T
    assert np.allclose(np.diff(new, axis=0), np.diff(heights)[:, None] * up)


@pytest.mark.parametrize("name", HORIZONS)
@pytest.mark.parametrize("strike", [-6000.0, 0.0, 4000.0])
def test_lost_area_is_displacement_times_depth(name, strike):
    """Area below the regional per displacement is the mean fault depth out there."""
    # methods.md section 7, equation 8a [N]: A(up to shear line U) =
    # integral of (R~ - F~) du over [U - H, U], for any regional slope and any U
    heave = float(truth.displacement(strike))
    tan = truth.tan_shear()
    foot_t, foot_z = (float(v) for v in truth.footwall_cutoff(name, strike))
    start = np.linspace(foot_t, foot_t + 9000.0, 90001)
    bed_t, bed_z = truth.moved(
        start, truth.regional_z(name, start), np.full(start.shape, strike)
    )
    bed_u = bed_t - bed_z * tan
    gap_z = np.linspace(foot_z, bed_z[0], 20001)
    gap_u = truth.fault_t(gap_z, strike) - gap_z * tan
    u, z = np.r_[gap_u, bed_u], np.r_[gap_z, bed_z]
    for end in (foot_t + 3000.0, foot_t + 8000.0):
        inside = u <= end
        lost = _area(u[inside], _regional_in_columns(name, u[inside]) - z[inside])
        columns = np.linspace(u[inside][-1] - heave, u[inside][-1], 20001)
        depth = _regional_in_columns(name, columns) - truth.foot_z(columns, strike)
        assert lost == pytest.approx(_area(columns, depth), rel=2e-4)


def _regional_in_columns(name, u):
    """R~(u): where the column meets the regional, by its straight line."""
    level, slope = truth.HORIZONS[name], truth.REGIONAL_SLOPE
    return (level + slope * u) / (1 - slope * truth.tan_shear())


def _area(x, y):
    return float(np.sum(np.diff(x) * 0.5 * (y[1:] + y[:-1])))


@pytest.mark.parametrize("name", HORIZONS)
def test_displacement_is_heave_and_throw_along_the_shear(name):
    """Oblique heave is heave plus throw times the tangent of the shear angle."""
    # methods.md section 2, equation 4 [N]
    oblique = truth.heave(name, STRIKES) + truth.throw(name, STRIKES) * np.tan(
        np.radians(truth.SHEAR_ANGLE)
    )
    assert np.allclose(oblique, truth.displacement(STRIKES), atol=1e-6)


@pytest.mark.parametrize(
    ("angle", "heave", "throw"),
    [(0.0, 900.0, 1129.617), (20.0, 605.988, 807.790), (45.0, 375.181, 524.819)],
)
def test_cutoffs_agree_with_the_worked_example(fresh_truth, angle, heave, throw):
    """The published figures of an exponential fault come out of the same code."""
    # methods.md section 16, row 'exponential fault, dip 60 at (0,0)' [N]
    values = {
        "REFERENCE_Z": 0.0,
        "SURFACE_DIP": 60.0,
        "DETACHMENT_Z": -4000.0,
        "LARGEST_DISPLACEMENT": 900.0,
        "SHEAR_ANGLE": angle,
        "REGIONAL_SLOPE": 0.0,
        "HORIZONS": {"bed": -500.0},
    }
    for key, value in values.items():
        setattr(fresh_truth, key, value)
    assert float(fresh_truth.heave("bed", 0.0)) == pytest.approx(heave, abs=6e-4)
    assert float(fresh_truth.throw("bed", 0.0)) == pytest.approx(throw, abs=6e-4)


def test_fault_is_listric():
    """The fault flattens all the way down and never goes below its detachment."""
    t = np.linspace(-500.0, 14000.0, 200)
    for s in STRIKES:
        dip = truth.fault_dip(t, s)
        assert np.all(np.diff(dip) < 0)
        assert dip[0] < 75.0
        assert np.all(truth.fault_z(t, s) > truth.DETACHMENT_Z)
        # the stated dip against the slope of the surface itself
        slope = (truth.fault_z(t + 1, s) - truth.fault_z(t - 1, s)) / 2
        assert np.allclose(dip, np.degrees(np.arctan(-slope)), atol=1e-3)


@pytest.mark.parametrize("name", HORIZONS)
def test_heave_and_throw_taper_to_the_tips(name):
    """Heave and throw are largest in the middle and vanish at both tips."""
    s = np.linspace(-truth.HALF_LENGTH, truth.HALF_LENGTH, 201)
    for measure in (truth.heave, truth.throw):
        value = measure(name, s)
        assert value[0] == pytest.approx(0.0, abs=1e-6)
        assert value[-1] == pytest.approx(0.0, abs=1e-6)
        assert np.all(np.diff(value[:101]) > 0)
        assert np.all(np.diff(value[100:]) < 0)


def test_fault_is_in_proportion():
    """Displacement against length and the throw's fall along strike are usual ones."""
    # methods.md section 15: D/L 0.001 to 0.1 (Barnett et al. 1987 [P]); lateral
    # throw gradient usually below 0.1 [M], here on the part that is mapped
    throw = truth.throw("Brelquith", np.array([0.0]))
    heave = truth.heave("Brelquith", np.array([0.0]))
    ratio = float(np.hypot(heave, throw)[0]) / (2 * truth.HALF_LENGTH)
    assert 0.001 < ratio < 0.1
    s = np.linspace(-6000.0, 6000.0, 121)
    gradient = np.gradient(truth.throw("Brelquith", s), s)
    assert np.abs(gradient).max() < 0.1


def test_far_bed_lies_on_the_regional_moved_out():
    """Over the detachment the bed is back at the regional moved by the heave."""
    # methods.md section 1 [N]: the far position is R(x - H), not R(x)
    t = np.array([25000.0, 30000.0])
    bed = truth.hanging_wall_z("Brelquith", t, 0.0)
    far = truth.regional_z("Brelquith", t - truth.displacement(0.0))
    assert np.allclose(bed, far, atol=0.3)


def test_section_ends_near_the_detachment():
    """Where the sections end the fault is within two per cent of its depth."""
    end = truth.fault_z(survey.SECTION_ENDS[1], 0.0) - truth.DETACHMENT_Z
    depth = truth.regional_z("Brelquith", 500.0) - truth.DETACHMENT_Z
    assert 3500.0 < depth < 4500.0
    assert end < 0.02 * depth


def test_map_and_local_coordinates_convert_both_ways():
    """A map point turned into local coordinates and back is the same point."""
    t, s = np.array([-3000.0, 12000.0]), np.array([7000.0, -100.0])
    xy = truth.to_map(t, s)
    assert np.allclose(truth.to_local(xy), (t, s))
    # transport points south-east, the hanging wall is on the right along strike
    along, strike = truth.axes()
    assert np.degrees(np.arctan2(*along)) == pytest.approx(truth.TRANSPORT_AZIMUTH)
    across = strike[0] * along[1] - strike[1] * along[0]
    assert across == pytest.approx(-1.0)


# ---- the survey --------------------------------------------------------------------


@pytest.fixture(scope="module")
def clean():
    """Give a survey without noise."""
    return survey.observe(0, 0.0)


def test_clean_survey_lies_on_the_truth(clean):
    """Without noise every observation lies on fault, horizon and ground."""
    for _, xyz in clean.fault_picks:
        t, s = truth.to_local(xyz[:2])
        assert xyz[2] == pytest.approx(float(truth.fault_z(t, s)), abs=1e-6)
    trace = np.vstack([xyz for xyz, _, _ in clean.trace])
    t, s = truth.to_local(trace[:, :2])
    assert np.allclose(trace[:, 2], truth.fault_z(t, s), atol=1e-6)
    assert np.allclose(trace[:, 2], truth.ground_z(t, s), atol=1e-6)
    for level, xy, _ in clean.contours:
        t, s = truth.to_local(xy)
        assert np.allclose(truth.horizon_z("Brelquith", t, s), level, atol=0.05)
    dips = np.vstack([xyz for xyz, *_ in clean.exposures])
    t, s = truth.to_local(dips[:, :2])
    assert np.allclose(truth.horizon_z("Brelquith", t, s), dips[:, 2], atol=1e-6)


def test_horizon_stays_below_ground_up_to_its_outcrop(clean):
    """The contoured horizon lies under the ground on every section."""
    lines = [np.linspace(x[0], x[-1], 40) for x in clean.sections.values()]
    t, s = truth.to_local(np.vstack(lines))
    t, s = t[t > 1500.0], s[t > 1500.0]
    beyond = t - survey.outcrop_t(s)
    cover = truth.ground_z(t, s) - truth.horizon_z("Brelquith", t, s)
    assert np.all(cover[beyond < -50.0] > 0)
    assert np.all(cover[beyond > 50.0] < 0)


def test_stated_noise_is_the_noise_applied(clean):
    """Contours, grid, picks and dips scatter by the sigma that the study declares."""
    misses = {"contours": [], "grid": [], "fault": [], "exposures": []}
    for seed in range(10):
        noisy = survey.observe(seed)
        misses["grid"].append((noisy.depth_grid[2] - clean.depth_grid[2])[::9, ::9])
        misses["fault"] += _vertical(noisy.fault_picks, clean.fault_picks, 1)
        misses["exposures"] += _vertical(noisy.exposures, clean.exposures, 0)
        misses["contours"].append(_contour_misses(noisy))
    for kind, values in misses.items():
        values = np.concatenate([np.ravel(v) for v in values])
        values = values[np.isfinite(values)] / survey.NOISE[kind]
        # 5 standard errors of a mean and of a standard deviation from n values
        n = len(values)
        assert n > 250
        assert abs(values.mean()) < 5 / np.sqrt(n), kind
        assert abs(values.std() - 1) < 5 / np.sqrt(2 * n), kind


def _vertical(rows, clean_rows, place):
    return [row[place][2] - own[place][2] for row, own in zip(rows, clean_rows)]


def _contour_misses(noisy):
    """Elevation error of contours every 2.4 km along them, where they err freely."""
    xy = np.vstack([xy[3::12] for _, xy, _ in noisy.contours])
    level = np.concatenate([np.full(len(xy[3::12]), z) for z, xy, _ in noisy.contours])
    t, s = truth.to_local(xy)
    return level - truth.horizon_z("Brelquith", t, s)


def test_contours_are_broken_at_the_fault_gap():
    """No contour runs across the gap between the two cut-off lines."""
    noisy = survey.observe(3)
    for _, xy, wall in noisy.contours:
        t, s = truth.to_local(xy)
        if wall == "footwall":
            assert np.all(t <= truth.footwall_cutoff("Brelquith", s)[0] + 1e-6)
        else:
            assert np.all(t >= truth.hanging_wall_cutoff("Brelquith", s)[0] - 1.0)


def test_grid_is_smeared_across_the_gap(clean):
    """The depth grid goes on through the fault gap as a gridder draws it."""
    west, north, depth = clean.depth_grid
    foot_t, foot_z = truth.footwall_cutoff("Sardunel", 0.0)
    hang_t, hang_z = truth.hanging_wall_cutoff("Sardunel", 0.0)
    e, n = truth.to_map(0.5 * (foot_t + hang_t), 0.0)
    row, column = int((north - n) / survey.CELL), int((e - west) / survey.CELL)
    half = -0.5 * (foot_z + hang_z)
    assert depth[row, column] == pytest.approx(half, abs=0.15 * (foot_z - hang_z))


def test_fault_picks_reach_below_the_cutoffs_but_for_one_section(clean):
    """Every section has picks to below its hanging-wall cut-off, one has none."""
    for name in survey.SECTIONS:
        z = [xyz[2] for section, xyz in clean.fault_picks if section == name]
        if name == survey.TRACE_ONLY:
            assert z == []
            continue
        s = survey.on_section(name, 1200.0)
        cut = float(truth.hanging_wall_cutoff("Brelquith", s)[1])
        assert min(z) < cut < max(z)


def test_same_seed_gives_the_same_survey():
    """A survey is repeated exactly by its seed, and another seed gives another."""
    one, same, other = survey.observe(5), survey.observe(5), survey.observe(6)
    assert one.shear_angle == same.shear_angle != other.shear_angle
    for (_, a), (_, b) in zip(one.fault_picks, same.fault_picks):
        assert np.array_equal(a, b)
    assert np.array_equal(one.depth_grid[2], same.depth_grid[2], equal_nan=True)


def test_lines_are_drawn_as_the_readme_says(clean):
    """One line is drawn from its far end, one has a bend of ten degrees."""
    lengths = []
    for name, line in clean.sections.items():
        legs = np.diff(line, axis=0)
        lengths.append(np.hypot(*legs.T).sum())
        along = legs @ truth.axes()[0]
        assert np.all(along < 0 if name == survey.REVERSED else along > 0)
        if name == survey.BENT:
            azimuth = np.degrees(np.arctan2(legs[:, 0], legs[:, 1]))
            assert abs(np.diff(azimuth)[0]) == pytest.approx(10.0)
    assert 14000.0 < min(lengths) <= max(lengths) < 18000.0


def test_study_of_the_sample_declares_the_noise():
    """The study shipped with the sample is valid and states the survey's noise."""
    from geomcore.recipe import Study

    path = Path(truth.__file__).with_name("study.json")
    study = Study.from_json(path.read_text(encoding="utf-8"))
    sigma = {s.key: s.sigma for s in study.sources}
    noise = survey.NOISE
    assert sigma == {
        "trace": noise["trace"],
        "fault_picks": noise["fault"],
        "contours": noise["contours"],
        "bed_dips": noise["exposures"],
        "depth_grid": noise["grid"],
    }
    assert study.construction.shear_angle_sigma == noise["shear angle"]
    assert study.fault == truth.FAULT
