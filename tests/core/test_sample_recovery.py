"""The sample's fault comes back from its survey, as near as the stated sigma says.

The survey goes straight from arrays into the core here, so that many surveys with
their own noise can be run; the way through layers is tested with QGIS.

Errors of one section go together along x (heave, regional and shear angle move the
whole fault), so one section of one survey counts as little more than one value. The
bounds below come from that: the rms of n normal values scatters by 1/sqrt(2 n).
"""

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from geomcore.recipe import Study
from geomcore.sources import Features, Grid
from geomcore.study import SectionLine, run
from sample_project import survey, truth

SURVEYS = 16
HORIZON = survey.CONTOURED
STUDY = Path(truth.__file__).with_name("study.json")
OBSERVED = [name for name in survey.SECTIONS if name != survey.TRACE_ONLY]


def grid_of(grid):
    """Give a north-up grid as the core takes it, bilinear between cell centres."""
    west, north, values = grid

    def sample(xy):
        xy = np.asarray(xy, dtype=float)
        column = (xy[:, 0] - west) / survey.CELL - 0.5
        row = (north - xy[:, 1]) / survey.CELL - 0.5
        i = np.clip(np.floor(row).astype(int), 0, values.shape[0] - 2)
        j = np.clip(np.floor(column).astype(int), 0, values.shape[1] - 2)
        a, b = row - i, column - j
        upper = (1 - b) * values[i, j] + b * values[i, j + 1]
        lower = (1 - b) * values[i + 1, j] + b * values[i + 1, j + 1]
        return (1 - a) * upper + a * lower

    return Grid(sample, survey.CELL)


def sources_of(observed):
    """Give the survey as the study's sources."""
    parts, dip, azimuth = zip(*observed.trace)
    trace = Features.lines(list(parts), dip=np.array(dip), dip_azimuth=azimuth)
    levels, lines, _ = zip(*observed.contours)
    picks = np.array([xyz for _, xyz in observed.fault_picks])
    dips = np.array([xyz for xyz, *_ in observed.exposures])
    return {
        "trace": replace(trace, surface=grid_of(observed.ground_grid)),
        "fault_picks": Features.points(picks[:, :2], picks[:, 2]),
        "contours": Features.lines(list(lines), values=list(levels)),
        "bed_dips": Features.points(dips[:, :2], dips[:, 2]),
        "depth_grid": grid_of(observed.depth_grid),
    }


def run_survey(seed, noise=1.0):
    """Run the sample's study on another survey of the same truth."""
    observed = survey.observe(seed, noise)
    study = Study.from_json(STUDY.read_text(encoding="utf-8"))
    angle = round(observed.shear_angle, 1)
    study = replace(study, construction=replace(study.construction, shear_angle=angle))
    lines = [SectionLine(name, xy) for name, xy in observed.sections.items()]
    return run(study, sources_of(observed), lines)


@dataclass(frozen=True, eq=False)
class Misfit:
    """A prediction against the truth, at fixed x below the hanging-wall cut-off."""

    result: object
    strip: np.ndarray
    error: np.ndarray
    sigma: np.ndarray
    truth: np.ndarray

    @property
    def normalised(self):
        """Error over stated sigma."""
        return self.error / self.sigma

    def cutoff_errors(self):
        """Errors of both cut-offs over their sigma: x and z, footwall first."""
        found = []
        for wall, place in (
            ("footwall", truth.footwall_cutoff),
            ("hanging_wall", truth.hanging_wall_cutoff),
        ):
            cut = getattr(self.result.prediction.separation, wall)
            t, s = truth.to_local(self.result.frame.to_map(cut.x))
            true_t, true_z = place(HORIZON, s)
            found += [(t - true_t)[0] / cut.sigma_x, (cut.z - true_z)[0] / cut.sigma_z]
        return found

    def separation_errors(self):
        """Errors of heave and throw over the sigma of the two cut-offs together."""
        own = self.result.prediction.separation
        foot, hang = own.footwall, own.hanging_wall
        s = truth.to_local(self.result.frame.to_map(hang.x))[1]
        heave, throw = truth.heave(HORIZON, s)[0], truth.throw(HORIZON, s)[0]
        return (
            (own.heave - heave) / np.hypot(foot.sigma_x, hang.sigma_x),
            (own.throw - throw) / np.hypot(foot.sigma_z, hang.sigma_z),
        )


def misfit_of(result):
    """Compare one section with the truth."""
    trace = result.prediction.trace
    below = trace.strip >= 1
    t, s = truth.to_local(result.frame.to_map(trace.x[below]))
    true_z = truth.fault_z(t, s)
    return Misfit(
        result,
        trace.strip[below],
        trace.z[below] - true_z,
        trace.sigma_z[below],
        true_z,
    )


@pytest.fixture(scope="module")
def misfits():
    """Give, by section, the misfits of many surveys."""
    found = {name: [] for name in survey.SECTIONS}
    for seed in range(SURVEYS):
        product = run_survey(1000 + seed)
        assert not product.unsolved
        for result in product.sections:
            assert result.prediction, result.prediction
            found[result.frame.section_id].append(misfit_of(result))
    return found


@pytest.fixture(scope="module")
def clean():
    """Give, by section, the misfit of a survey without noise."""
    product = run_survey(0, noise=0.0)
    return {r.frame.section_id: misfit_of(r) for r in product.sections}


def _rms(values):
    return float(np.sqrt(np.mean(np.square(values))))


def _rms_of_sections(misfits):
    """Rms along each section first, so that each survey counts once."""
    return _rms([_rms(m.normalised) for m in misfits])


@pytest.mark.parametrize("name", OBSERVED)
def test_clean_survey_gives_the_fault(clean, name):
    """Without noise the fault comes back within one per cent of its depth."""
    # what is left: contours 50 m apart in elevation, so few picks, extended to the
    # fault by a line or parabola; displacement that varies along strike
    depth = truth.regional_z(HORIZON, 0.0) - truth.DETACHMENT_Z
    assert np.abs(clean[name].error).max() < 0.01 * depth
    assert np.abs(clean[name].normalised).max() < 0.5


def test_clean_survey_with_trace_and_dip_only(clean):
    """From trace and dip alone the clean fault is within five per cent of its depth."""
    # the assumed arc turns evenly, the true fault more near its top
    depth = truth.regional_z(HORIZON, 0.0) - truth.DETACHMENT_Z
    only = clean[survey.TRACE_ONLY]
    assert np.abs(only.error).max() < 0.05 * depth
    assert "assumed-piece" in {d.code for d in only.result.all_doubts}


@pytest.mark.parametrize("name", OBSERVED)
def test_misfit_is_the_stated_sigma_on_every_section(misfits, name):
    """On each section the error over its stated sigma is near one, over surveys."""
    # 16 surveys: 1 +- 0.18; 0.6 to 1.6 is 2 to 3 standard errors about it
    assert 0.6 < _rms_of_sections(misfits[name]) < 1.6


def test_misfit_with_trace_and_dip_only_stays_within_sigma(misfits):
    """Where the start piece is assumed the stated sigma covers the error made."""
    # Its sigma allows for any listric shape: a curvature 30 per cent off. The sample's
    # fault is off by a few per cent only, its measured dip by 3 degrees as the core
    # allows for; so the misfit is below one, but of the same size.
    assert 0.3 < _rms_of_sections(misfits[survey.TRACE_ONLY]) < 1.6


def test_misfit_over_all_sections_is_one(misfits):
    """Over all sections and surveys the error over stated sigma is near one."""
    # 96 values that share only the shear angle: 1 +- 0.07; the sigma of a cut-off
    # counts the picks of the fault a little too much, hence more room below
    pooled = _rms([_rms(m.normalised) for n in OBSERVED for m in misfits[n]])
    assert 0.75 < pooled < 1.25


@pytest.mark.parametrize("name", list(survey.SECTIONS))
def test_prediction_is_not_biased(misfits, name):
    """Over surveys the fault comes out neither too deep nor too shallow."""
    # mean of 16 unit values: 0 +- 0.25, 4 standard errors
    assert abs(np.mean([m.normalised.mean() for m in misfits[name]])) < 1.0


@pytest.mark.parametrize("strip", [1, 3, 6, 9])
def test_sigma_grows_with_the_error(misfits, strip):
    """The stated sigma is right in the first strip and still in the ninth."""
    rows = [m.normalised[m.strip == strip] for n in OBSERVED for m in misfits[n]]
    assert 0.7 < _rms([_rms(r) for r in rows if len(r)]) < 1.3


def test_cutoffs_heave_and_throw_within_their_sigma(misfits):
    """Cut-offs, heave and throw miss the truth by about their stated sigma."""
    for name in survey.SECTIONS:
        own = misfits[name]
        places = np.array([m.cutoff_errors() for m in own])
        separations = np.array([m.separation_errors() for m in own])
        values = np.hstack([places, separations])
        scatter = np.sqrt((values**2).mean(axis=0))
        # 16 values: 1 +- 0.18. Below one where errors are shared by both cut-offs
        # (heave where the fault is assumed) or counted twice (elevations of cut-offs)
        assert np.all(scatter < 1.6), (name, scatter)
        assert np.all(scatter > 0.2), (name, scatter)


def test_detachment_is_given_only_where_it_is(misfits):
    """A detachment that is given lies where the fault is, within three sigma."""
    given = [
        m
        for own in misfits.values()
        for m in own
        if m.result.prediction.detachment_z is not None
    ]
    assert given
    for m in given:
        last = m.strip >= m.strip.max() - 1
        level = m.result.prediction.detachment_z
        assert abs(level - m.truth[last].mean()) < 3.5 * m.sigma[last].max()


def test_horizon_not_used_is_predicted_to_its_noise(misfits):
    """The gridded horizon, not used for the fault, is predicted to about its noise."""
    # its picks scatter by 8 m (less between cells), the prediction adds a few metres
    for name, own in misfits.items():
        for m in own:
            (predicted,) = m.result.horizons
            assert predicted.misfit_n > 80, name
            assert 4.0 < predicted.misfit_rms < 30.0, name
