"""The balance of a solved section: all its horizons, from its picks."""

from dataclasses import dataclass, replace

from .balance import (
    area_convergence,
    area_depth,
    compare_detachment,
    detachment_from_area,
    lost_area,
    lost_areas,
    require_area,
    why_no_area,
)
from .cutoffs import CutoffOptions, given_cutoffs, regional_and_separation
from .errors import GeomcoreError, Unsolved
from .problem import MarchOptions, Problem, bed_from
from .profile import profile_from_picks
from .restoration import restored_section

__all__ = ["SectionBalance", "SectionHorizons", "balance_section", "section_horizons"]


@dataclass(frozen=True, eq=False)
class SectionHorizons:
    """The horizons of a section, each as a problem on the same fault.

    Parameters
    ----------
    problems : tuple of Problem
        That of the construction first.
    footwalls : tuple of Profile
        The same horizons in the footwall.
    left_out : tuple of (str, str)
        Horizons that could not be used, and why.
    """

    problems: tuple
    footwalls: tuple
    left_out: tuple


@dataclass(frozen=True, eq=False)
class SectionBalance:
    """The balance of one section.

    Parameters
    ----------
    section_id : str
    length_unit : str
        Of lengths and elevations; areas are in its square.
    areas : tuple of LostArea
        One a horizon, that of the construction first, up to one shear line.
    convergence : AreaConvergence
        Of the construction's horizon, up to its own last pick.
    one_horizon : OneHorizonDetachment
        From the construction's horizon alone, up to its own last pick.
    area_depth : AreaDepth or Unsolved
        Falsy with the reason where fewer than two pre-growth horizons are there.
    comparison : DetachmentComparison or Unsolved
    restored : RestoredSection or Unsolved
    left_out : tuple of (str, str)
        Horizons not used anywhere, and why.
    """

    section_id: str
    length_unit: str
    areas: tuple
    convergence: object
    one_horizon: object
    area_depth: object
    comparison: object
    restored: object
    left_out: tuple


def section_horizons(study, result):
    """Write every horizon of a solved section as a problem.

    Parameters
    ----------
    study : Study
    result : SectionResult
        With a prediction.

    Returns
    -------
    SectionHorizons

    Raises
    ------
    GeomcoreError
        If the section is not solved.
    """
    prediction, picks = result.prediction, result.picks
    _require_solved(result)
    options = CutoffOptions(study.picks.separation_from, study.picks.separation_to)
    own = prediction.horizon
    problems = [_problem(result, prediction.separation, prediction.regional, own)]
    names, left_out = [own], []
    known = set(picks.name[picks.kind == "horizon"].astype(str)) - {own, ""}
    for name in sorted(known):
        # the given level is that of the construction's horizon
        spec = replace(study.construction.regional, z=None)
        try:
            found = regional_and_separation(
                picks,
                result.fault,
                name,
                prediction.model,
                spec,
                given_cutoffs(picks, name, options),
                options,
            )
        except GeomcoreError as error:
            left_out.append((name, error.reason))
            continue
        problems.append(_problem(result, found.separation, found.regional, name))
        names.append(name)
    walls = tuple(_profile(picks, name, "footwall") for name in names)
    return SectionHorizons(tuple(problems), walls, tuple(left_out))


def _require_solved(result):
    if not result.prediction:
        raise GeomcoreError(result.prediction.code, result.prediction.reason)


def _require_one_block(prediction, where):
    """Refuse a hanging wall whose blocks moved by different heaves."""
    if prediction.subsidiaries:
        names = ", ".join(f"'{s.fault.plane.name}'" for s in prediction.subsidiaries)
        raise GeomcoreError(
            "subsidiary-balance",
            f"the subsidiary fault {names} parts the hanging wall into blocks of "
            "different heave; lost area over one heave gives no depth there.",
            where,
            "Use the construction, or balance sections without such a fault.",
        )


def _profile(picks, name, wall):
    return profile_from_picks(picks.of("horizon", name, wall))


def _problem(result, separation, regional, name):
    return Problem(
        f"section {result.frame.section_id}",
        separation,
        result.fault,
        bed_from(separation.hanging_wall, _profile(result.picks, name, "hanging wall")),
        regional,
        result.prediction.model,
        MarchOptions(compaction=result.prediction.compaction),
    )


def balance_section(study, result, growth=(), level=0.9):
    """Balance a solved section.

    Parameters
    ----------
    study : Study
    result : SectionResult
    growth : sequence of str
        Horizons laid down while the fault moved: out of area-depth and restoration.
    level : float
        Of the confidence intervals.

    Returns
    -------
    SectionBalance

    Raises
    ------
    GeomcoreError
        If the section is not solved, its model does not keep area, or subsidiary
        faults part its hanging wall; with the reason.
    """
    _require_solved(result)
    prediction, where = result.prediction, f"section {result.frame.section_id}"
    require_area(why_no_area(prediction.model, prediction.compaction), where)
    _require_one_block(prediction, where)
    horizons = section_horizons(study, result)
    own = horizons.problems[0]
    areas = tuple(lost_areas(horizons.problems, horizons.footwalls))
    depth = _or_reason(result, area_depth, areas, growth, level)
    return SectionBalance(
        result.frame.section_id,
        study.length_unit,
        areas,
        area_convergence(own, horizons.footwalls[0]),
        detachment_from_area(lost_area(own, footwall=horizons.footwalls[0])),
        depth,
        _or_reason(result, compare_detachment, depth, prediction) if depth else depth,
        _or_reason(result, restored_section, prediction, horizons.problems, growth),
        horizons.left_out,
    )


def _or_reason(result, make, *arguments):
    """Make a part of the balance, or say why there is none."""
    try:
        return make(*arguments)
    except GeomcoreError as error:
        return Unsolved(result.frame.section_id, error.code, str(error))
