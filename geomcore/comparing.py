"""The comparison that a study asks for of a section, from the section's picks."""

from dataclasses import replace

from .comparison import compare, problem_of, straight_fault_test
from .kinematics import ConstantHeave, model_named
from .problem import MarchOptions
from .profile import profile_from_picks
from .recipe import CandidateSpec

__all__ = ["candidates_of", "compare_section"]


def candidates_of(study):
    """Give the constructions to be compared: the study's own first, each once.

    Parameters
    ----------
    study : Study

    Returns
    -------
    tuple of CandidateSpec
        Empty where the study asks for no comparison.
    """
    spec = study.construction
    if not spec.compare:
        return ()
    own = CandidateSpec(spec.model, spec.shear_angle, spec.solver)
    return tuple(dict.fromkeys((own, *spec.compare)))


def compare_section(study, result, predict):
    """Compare the constructions that a study asks for on one section.

    Parameters
    ----------
    study : Study
    result : SectionResult
        With the study's own construction, solved or not.
    predict : callable
        ``predict(study)`` constructs the section by another recipe and gives its
        fault and its `Prediction`, or raises a `GeomcoreError`.

    Returns
    -------
    Comparison
        A candidate without a solution is in it with its reason.
    """
    candidates = candidates_of(study)

    def construction_by(candidate):
        if candidate == candidates[0]:
            return lambda: result.prediction
        return lambda: predict(_recipe_with(study, candidate))[1]

    rows = [(_model(c), c.solver, construction_by(c)) for c in candidates]
    section_id = result.frame.section_id
    return compare(section_id, rows, lambda: _straight(study, result, predict))


def _model(candidate):
    return model_named(candidate.model, shear_angle=candidate.shear_angle)


def _recipe_with(study, candidate):
    """Give the study with one candidate as its construction."""
    spec = study.construction
    # only constant heave has an angle that may be wrong
    has_angle = candidate.model == ConstantHeave.NAME
    spec = replace(
        spec,
        model=candidate.model,
        shear_angle=candidate.shear_angle,
        shear_angle_sigma=spec.shear_angle_sigma if has_angle else 0.0,
        solver=candidate.solver,
    )
    return replace(study, construction=spec)


def _straight(study, result, predict):
    """Test a straight fault, with the cut-offs and regional of vertical shear."""
    upright = CandidateSpec(ConstantHeave.NAME, 0.0, "march")
    fault, prediction = predict(_recipe_with(study, upright))
    horizon = study.construction.horizon
    bed = profile_from_picks(result.picks.of("horizon", horizon, "hanging wall"))
    options = MarchOptions(compaction=prediction.compaction)
    where = f"section {result.frame.section_id}"
    return straight_fault_test(problem_of(prediction, fault, bed, options, where))
