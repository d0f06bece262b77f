"""Constructions side by side, and whether the section asks for a curved fault."""

import sys
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import binom
from worlds import (
    DOCUMENT,
    EXPONENTIAL,
    PLANAR,
    World,
    changed,
    line_for,
    sources_for,
    study_for,
    truth_points,
)

from geomcore.comparing import candidates_of
from geomcore.comparison import straight_fault_test
from geomcore.errors import ConstructionError, GeomcoreError, StudyError
from geomcore.kinematics import MODELS, ConstantSlip
from geomcore.plot_comparison import comparison_figure
from geomcore.problem import MarchOptions, Problem, bed_from
from geomcore.profile import profile_from_picks
from geomcore.study import Study, run

EVERY_MODEL = [
    {"model": "constant heave", "solver": "fit"},
    {"model": "constant heave", "shear_angle": 20.0},
    {"model": "constant slip"},
    {"model": "constant bed length"},
]


def compared(world, sigma=5.0, compare=None, sources=None, **construction):
    """Run the study of a world with a comparison; give its one section."""
    compare = EVERY_MODEL if compare is None else compare
    study = study_for(world, sigma, compare=compare, **construction)
    data = sources or sources_for(world)
    return run(study, data, [line_for(world)]).sections[0]


def row_of(section, model, solver="march", angle=0.0):
    """Find one construction among those compared."""
    for row in section.comparison.rows:
        if (row.model.NAME, row.solver, row.model.shear_angle) == (
            model,
            solver,
            angle,
        ):
            return row
    raise KeyError(model)


@pytest.fixture(scope="module")
def listric():
    """A clean section over the 60 degree exponential fault, vertical shear."""
    return compared(World(EXPONENTIAL, reach=9000.0))


# --- the comparison ------------------------------------------------------------------


def test_every_construction_asked_for_is_compared(listric):
    """The section's own first, then those of the study, each with its fault."""
    rows = listric.comparison.rows
    assert rows[0].prediction is listric.prediction
    assert [r.label for r in rows] == [
        "constant heave (vertical shear)",
        "constant heave (vertical shear)",
        "constant heave (20 degrees antithetic shear)",
        "constant slip",
        "constant bed length",
    ]
    assert [r.solver for r in rows] == ["march", "fit", "march", "march", "march"]
    assert {r.model.NAME for r in rows} == {m.NAME for m in MODELS}


def test_each_construction_is_that_of_a_study_of_its_own(listric):
    """A candidate gives what the study gives with that model and solver set."""
    world = World(EXPONENTIAL, reach=9000.0)
    study = study_for(world, 5.0, model="constant slip")
    alone = run(study, sources_for(world), [line_for(world)]).sections[0].prediction
    beside = row_of(listric, "constant slip").prediction
    assert np.array_equal(beside.trace.z, alone.trace.z)
    assert alone.oblique_heave == beside.oblique_heave


def test_only_the_fit_has_a_misfit(listric):
    """The march reproduces its bed by definition: no misfit of it is reported."""
    misfit = {r.solver: r.misfit_rms for r in listric.comparison.rows}
    assert misfit["march"] is None
    assert 0.0 <= misfit["fit"] < 0.5  # clean picks


def test_spread_is_the_deepest_less_the_shallowest_fault(listric):
    """At every x of the common reach, by looking up each trace there."""
    made = listric.comparison
    x = made.x[100]
    z = [np.interp(x, r.prediction.trace.x, r.prediction.trace.z) for r in made.solved]
    assert made.spread[100] == pytest.approx(max(z) - min(z))
    assert made.spread_max == made.spread.max() > 100.0
    first = max(r.prediction.trace.x[0] for r in made.solved)
    last = min(r.prediction.trace.x[-1] for r in made.solved)
    assert made.x[[0, -1]] == pytest.approx([first, last])


def test_the_true_model_lies_on_the_true_fault_and_the_others_do_not(listric):
    """20 degrees too much brings the fault up; the truth is vertical shear.

    60 m/deg near 0 to 20 degrees (methods.md section 13: 82 at 0, 62 at 20).
    """
    x = 9000.0
    truth = EXPONENTIAL.z(x - 4000.0)
    march = row_of(listric, "constant heave").prediction.trace.z_at(x)
    fit = row_of(listric, "constant heave", "fit").prediction.trace.z_at(x)
    wrong = row_of(listric, "constant heave", "march", 20.0).prediction.trace.z_at(x)
    assert march == pytest.approx(truth, abs=8.0)
    assert fit == pytest.approx(truth, abs=8.0)
    assert wrong - truth > 500.0


def test_a_candidate_without_solution_says_why():
    """Compaction goes with the march of vertical shear only; the others go on."""
    compaction = {"law": "shale", "surface_now_z": 0.0, "surface_then_z": 0.0}
    world = World(EXPONENTIAL, reach=9000.0)
    section = compared(world, compaction=compaction)
    assert section.prediction
    slip = row_of(section, "constant slip")
    fit = row_of(section, "constant heave", "fit")
    assert not slip.prediction
    assert "compaction" in slip.prediction.reason
    assert not fit.prediction
    assert fit.prediction.reason
    assert [bool(r.prediction) for r in section.comparison.rows].count(True) == 1
    assert section.comparison.spread_max is None


def test_a_section_without_solution_is_compared_all_the_same():
    """Nothing to construct from: every row and the straight fault say so."""
    document = changed(DOCUMENT, "construction", "compare", to=EVERY_MODEL)
    document = changed(document, "construction", "horizon", to="Z")
    world = World(EXPONENTIAL, reach=5000.0)
    section = run(Study.from_dict(document), sources_for(world), [line_for(world)])
    made = section.sections[0].comparison
    assert len(made.rows) == 5
    assert made.solved == ()
    assert all("horizon 'Z'" in r.prediction.reason for r in made.rows)
    assert not made.straight
    assert "horizon 'Z'" in made.straight.reason


def test_a_section_is_compared_where_only_its_own_model_fails():
    """A bed deeper than the slip is long: constant slip fails, constant heave not."""
    world = World(EXPONENTIAL, reach=9000.0)
    deep, tops = truth_points(world)
    tops[:, 1] -= np.where(tops[:, 0] > 3000.0, 1600.0, 0.0)
    sources = sources_for(world, deep, tops)
    section = compared(world, 5.0, None, sources, model="constant slip")
    assert section.prediction.code == "slip-too-small"
    assert not section.comparison.rows[0].prediction
    assert row_of(section, "constant heave", "march", 20.0).prediction
    assert section.comparison.straight


def test_nothing_is_compared_or_balanced_unless_asked_for():
    """An ordinary study has neither."""
    world = World(EXPONENTIAL, reach=5000.0)
    section = run(study_for(world), sources_for(world), [line_for(world)]).sections[0]
    assert not section.comparison
    assert section.balance is None


def test_the_same_construction_is_compared_once():
    """The study's own listed again, or one listed twice, is one row."""
    twice = [{"model": "constant heave"}, {"model": "constant slip"}] * 2
    study = study_for(World(), compare=twice)
    models = [c.model for c in candidates_of(study)]
    assert models == ["constant heave", "constant slip"]


def test_sigma_of_the_angle_goes_only_to_models_with_an_angle():
    """A stated angle error does not stop the models that have no angle."""
    section = compared(World(EXPONENTIAL, reach=6000.0), shear_angle_sigma=5.0)
    assert row_of(section, "constant slip").prediction
    assert "shear angle" in section.prediction.error_shares
    slip = row_of(section, "constant slip").prediction
    assert "shear angle" not in slip.error_shares


@pytest.mark.parametrize(
    ("entry", "words"),
    [
        ({"model": "shear"}, "no kinematic model 'shear'"),
        ({"model": "constant slip", "shear_angle": 10.0}, "has no shear angle"),
        ({"model": "constant heave", "solver": "guess"}, "no solver 'guess'"),
        ({"modell": "constant heave"}, "unknown entries: 'modell'"),
    ],
)
def test_a_candidate_that_cannot_be_is_refused_with_the_study(entry, words):
    """Said when the study is read, before anything runs."""
    document = changed(DOCUMENT, "construction", "compare", to=[entry])
    with pytest.raises((StudyError, ConstructionError), match=words):
        Study.from_dict(document)


def test_comparison_and_balance_are_kept_in_the_document():
    """Read, written and read again."""
    study = study_for(World(), compare=EVERY_MODEL, balance=True)
    again = Study.from_json(study.to_json())
    assert again.construction.compare == study.construction.compare
    assert again.construction.balance is True
    assert study.to_dict()["construction"]["compare"][2] == {"model": "constant slip"}


# --- the balance through the study ---------------------------------------------------


def test_balance_comes_with_the_section_where_asked_for():
    """The area of the section, or the reason why there is none."""
    world = World(EXPONENTIAL, reach=9000.0)
    study = study_for(world, 5.0, balance=True)
    section = run(study, sources_for(world), [line_for(world)]).sections[0]
    assert section.balance.section_id == "S1"
    # (8) of methods.md: A = H (z - z_det), met within 2.5 % this far out
    lost = section.balance.areas[0].total
    assert lost == pytest.approx(world.oblique_heave * 3500.0, rel=0.05)
    slip = study_for(world, 5.0, balance=True, model="constant slip")
    section = run(slip, sources_for(world), [line_for(world)]).sections[0]
    assert section.prediction
    assert not section.balance
    assert section.balance.code == "area-not-kept"


# --- is it listric at all? -----------------------------------------------------------


def test_a_clean_listric_fault_is_called_curved(listric):
    """The bed rolls over by hundreds of metres: both misfit and likelihood say so."""
    straight = listric.comparison.straight
    assert straight.verdict == "curved"
    assert straight.log_ratio > 10.0
    assert straight.misfit_rms > 2.0
    assert "asks for a curved fault" in straight.text


def test_the_straight_fault_goes_through_both_cutoffs(listric):
    """Its dip is that of the cut-offs; it is drawn through both."""
    straight, separation = listric.comparison.straight, listric.prediction.separation
    assert straight.dip == pytest.approx(separation.cutoff_dip)
    foot, hang = separation.footwall, separation.hanging_wall
    assert straight.z_at([foot.x, hang.x]) == pytest.approx([foot.z, hang.z])


def test_a_clean_planar_fault_is_called_straight():
    """The bed stays parallel to the regional: nothing asks for a curve."""
    section = compared(World(PLANAR, reach=7000.0))
    straight = section.comparison.straight
    assert straight.verdict == "straight"
    assert straight.dip == pytest.approx(50.0, abs=0.1)
    assert straight.worst < 1e-6
    # a straight line is the limit of a smooth curve: nothing to choose between them
    assert straight.log_ratio == pytest.approx(0.0, abs=0.01)
    assert "a planar fault explains them" in straight.text


def verdicts_of_planar_faults(draws, sigma, seed):
    """Noise on bed, footwall and fault picks, hence on cut-offs and regional too."""
    world = World(PLANAR, reach=6000.0, per_strip=12.0)
    deep, tops = truth_points(world, 100.0, 120.0)
    rng = np.random.default_rng(seed)
    study = study_for(world, sigma, compare=[{"model": "constant heave"}])
    for _ in range(draws):
        noisy = []
        for points in (deep, tops):
            points = points.copy()
            points[:, 1] += rng.normal(0.0, sigma, len(points))
            noisy.append(points)
        section = run(study, sources_for(world, *noisy), [line_for(world)]).sections[0]
        yield section.comparison.straight.verdict


@pytest.mark.parametrize("sigma", [5.0, 10.0])
def test_noise_hardly_ever_makes_a_planar_fault_curved(sigma):
    """Cut-offs and regional come from the noisy picks; at most 5 % false alarms.

    60 seeded draws; with a true rate of 5 % more than 7 come by chance once in a
    hundred times (binomial).
    """
    draws = 60
    verdicts = list(verdicts_of_planar_faults(draws, sigma, 11))
    most = int(binom.ppf(0.99, draws, 0.05))
    assert most == 7
    assert verdicts.count("curved") <= most
    assert verdicts.count("straight") > draws // 2


def test_evidence_is_left_out_without_scipy(listric, monkeypatch):
    """No fit without scipy: the ratio is unknown, and the misfit has to be large."""
    world = World(EXPONENTIAL, reach=9000.0)
    for name in [m for m in sys.modules if m.split(".")[0] == "scipy"]:
        monkeypatch.setitem(sys.modules, name, None)
    for name in ("scipy", "scipy.linalg", "scipy.optimize", "scipy.sparse"):
        monkeypatch.setitem(sys.modules, name, None)
    section = compared(world)
    straight = section.comparison.straight
    assert straight.log_ratio is None
    assert straight.verdict == "curved"
    assert "likelihood" not in straight.text
    fit = row_of(section, "constant heave", "fit")
    assert not fit.prediction
    assert "scipy" in fit.prediction.reason
    assert listric.comparison.straight.log_ratio is not None


def test_the_straight_fault_test_is_for_constant_heave_only(listric):
    """Other models bend a bed over a straight fault too."""
    made = listric.prediction
    bed = profile_from_picks(listric.picks.of("horizon", "A", "hanging wall"))
    problem = Problem(
        "section S1",
        made.separation,
        listric.fault,
        bed_from(made.separation.hanging_wall, bed),
        made.regional,
        made.model,
        MarchOptions(),
    )
    assert straight_fault_test(problem).verdict == "curved"
    with pytest.raises(ConstructionError) as caught:
        straight_fault_test(replace(problem, model=ConstantSlip()))
    assert caught.value.code == "straight-model"


# --- the figure ----------------------------------------------------------------------


def texts_of(figure):
    """Every text of a figure by its group id."""
    return {t.get_gid(): t.get_text() for a in figure.axes for t in a.texts}


def lines_of(figure):
    """Lines of a figure by their group id."""
    return {line.get_gid(): line for a in figure.axes for line in a.lines}


def test_figure_shows_every_fault_and_numbers_it(listric):
    """Each lies where it was constructed, the straight one through the cut-offs."""
    study = study_for(World(EXPONENTIAL), 5.0, compare=EVERY_MODEL)
    figure = comparison_figure(study, listric)
    lines, texts = lines_of(figure), texts_of(figure)
    for i, row in enumerate(listric.comparison.rows):
        drawn = lines[f"construction-{i + 1}"]
        assert np.array_equal(drawn.get_xdata(), row.prediction.trace.x)
        assert np.array_equal(drawn.get_ydata(), row.prediction.trace.z)
        assert texts[f"construction-{i + 1}-label"] == str(i + 1)
        sample = lines[f"comparison-sample-{i + 1}"]
        assert sample.get_color() == drawn.get_color()
    straight = lines["straight-fault"]
    z = listric.comparison.straight.z_at(straight.get_xdata())
    assert straight.get_ydata() == pytest.approx(z)
    assert len({lines[f"construction-{i}"].get_color() for i in range(1, 6)}) == 5
    assert "fault-predicted" not in lines


def test_figure_has_the_table_under_it(listric):
    """Method, solver, heave, throw, detachment and misfit, as in the results."""
    study = study_for(World(EXPONENTIAL), 5.0, compare=EVERY_MODEL)
    texts = texts_of(comparison_figure(study, listric))
    table = [
        [texts.get(f"comparison-{i}-{j}-1", "") for j in range(8)] for i in range(7)
    ]
    assert table[0][1:] == [
        "Method",
        "Solver",
        "Heave",
        "Throw",
        "Detachment",
        "Misfit",
        "Remark",
    ]
    own = listric.prediction
    assert table[1][:3] == ["1", "constant heave (vertical shear)", "march"]
    assert table[1][3] == f"{own.separation.heave:.0f}\N{NO-BREAK SPACE}m"
    assert table[1][5].endswith("or deeper")
    assert f"{-own.deepest_z:.0f}" in table[1][5]
    assert table[1][7] == "the section's own"
    misfit = listric.comparison.rows[1].misfit_rms
    assert table[2][6] == f"{misfit:.1f} sigma rms"
    assert table[6][:2] == ["S", "straight fault, 51°"]
    assert table[6][7] == "verdict: curved"
    assert texts["caution-1"].startswith("A model, not an observation")
    assert texts["title-1"].endswith("constructions compared")


def test_figure_gives_the_reason_of_what_has_no_solution():
    """In the table, without a line; the frame shows what there is."""
    compaction = {"law": "shale", "surface_now_z": 0.0, "surface_then_z": 0.0}
    world = World(EXPONENTIAL, reach=9000.0)
    section = compared(world, compaction=compaction)
    study = study_for(world, 5.0, compare=EVERY_MODEL, compaction=compaction)
    figure = comparison_figure(study, section)
    assert "construction-4" not in lines_of(figure)
    texts = texts_of(figure)
    assert texts["comparison-4-3-1"].startswith("not solved: compaction goes with")
    assert "section S1" not in texts["comparison-4-3-1"]


def test_figure_of_a_section_without_any_solution_is_drawn():
    """Nothing to draw but the picks: every row has its reason."""
    document = changed(DOCUMENT, "construction", "compare", to=EVERY_MODEL)
    document = changed(document, "construction", "horizon", to="Z")
    study = Study.from_dict(document)
    world = World(EXPONENTIAL, reach=5000.0)
    section = run(study, sources_for(world), [line_for(world)]).sections[0]
    texts = texts_of(comparison_figure(study, section))
    assert texts["comparison-6-3-1"].startswith("not tested: there are no usable")
    assert texts["status-1"].startswith("Not solved")


def test_no_figure_without_a_comparison():
    """Said in words, with what to do."""
    world = World(EXPONENTIAL, reach=5000.0)
    study = study_for(world)
    section = run(study, sources_for(world), [line_for(world)]).sections[0]
    with pytest.raises(GeomcoreError, match=r"construction\.compare") as caught:
        comparison_figure(study, section)
    assert caught.value.code == "no-comparison"
