"""The shear angle of a study's sections, from their picks: each way, then jointly."""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .anglecurve import (
    CUTOFFS,
    HORIZONS,
    TIES,
    WAYS,
    AngleEstimate,
    joint_angle,
    require_scipy,
    unresolved,
)
from .assumed import carry_on
from .calibration import (
    angle_from_detachment,
    angle_from_horizons,
    angle_from_separations,
    angle_from_ties,
)
from .cutoffs import CutoffOptions, given_cutoffs, regional_and_separation
from .errors import ConstructionError, Doubt, GeomcoreError, PicksError, StudyError
from .fault import ASSUMED_GAP, known_fault
from .kinematics import ConstantHeave
from .problem import MarchOptions, Problem, bed_from
from .profile import fit_line, profile_from_picks
from .recipe import CalibrationSpec
from .subsidiary import measure_subsidiaries

__all__ = [
    "CalibrationResult",
    "SectionCalibration",
    "calibrate",
    "calibrate_section",
    "horizons_for",
]

#: Picks a horizon needs beyond its cut-off (common practice, no source).
_LEAST_PICKS = 5
#: Standard deviations two ways may differ by (common practice, no source).
_APART = 3.0


@dataclass(frozen=True, eq=False)
class SectionCalibration:
    """The shear angle from one section.

    Parameters
    ----------
    section_id : str
    estimates : tuple of AngleEstimate
        One for each way that was tried.
    horizons : tuple of str
        Horizons that were used.
    doubts : tuple of Doubt
        Horizons that could not be used, and what is doubtful about the others.
    """

    section_id: str
    estimates: tuple
    horizons: tuple
    doubts: tuple

    def by(self, way):
        """Give the estimate of a way, or None."""
        return next((e for e in self.estimates if e.way == way), None)


@dataclass(frozen=True, eq=False)
class CalibrationResult:
    """The shear angle of a study.

    Parameters
    ----------
    sections : tuple of SectionCalibration
    joint : tuple of AngleEstimate
        For each way all sections together: one angle for the fault.
    best : AngleEstimate or None
        Of the joint ones that are resolved, the one with the smallest deviation.
    doubts : tuple of Doubt
        Of the study as a whole.
    """

    sections: tuple
    joint: tuple
    best: Optional[AngleEstimate]
    doubts: tuple

    @property
    def all_doubts(self):
        """Doubts of the study and of its sections."""
        return (*self.doubts, *(d for s in self.sections for d in s.doubts))


def _nothing(*_):
    return False


def calibrate(study, sections, progress=None, cancelled=None):
    """Find the shear angle from every section of a study, and jointly.

    Parameters
    ----------
    study : Study
        With `calibration`; without it all that the data of the construction's and
        the fit's horizons allow.
    sections : sequence of Picks
        Picks in depth of each section, with walls, as `study.run` and
        `study.pull_picks` give them.
    progress : callable, optional
        Called with a fraction from 0 to 1.
    cancelled : callable, optional
        Asked often; True ends the run with nothing done.

    Returns
    -------
    CalibrationResult
        A section or a way that tells no angle is in it with the reason.

    Raises
    ------
    ConstructionError
        If scipy is missing.
    StudyError
        If the study names no horizon, or the run was cancelled.
    """
    progress, cancelled = progress or _nothing, cancelled or _nothing
    require_scipy()
    horizons_for(study)
    found = []
    for i, picks in enumerate(sections):
        if cancelled():
            raise StudyError("cancelled", "the run was cancelled; nothing was written.")
        found.append(calibrate_section(study, picks))
        progress((i + 1) / len(sections))
    joint = tuple(_jointly(found))
    resolved = [e for e in joint if e.resolved]
    best = min(resolved, key=lambda e: e.sd, default=None)
    return CalibrationResult(
        tuple(found), joint, best, tuple(_study_doubts(study, joint))
    )


def _spec(study):
    return study.calibration or CalibrationSpec()


def horizons_for(study):
    """Give the names of the horizons a study's angle is found from.

    Raises
    ------
    StudyError
        If there is none.
    """
    spec, construction = _spec(study), study.construction
    main = (construction.horizon, *construction.fit_horizons)
    names = spec.horizons or main
    names = tuple(dict.fromkeys(n for n in (*names, *spec.pre_growth) if n))
    if names:
        return names
    raise StudyError(
        "no-horizon",
        "no horizon is named.",
        "calibration",
        "Name the horizons to find the shear angle from.",
    )


def _jointly(sections):
    """Join the sections, one way after the other."""
    for way in WAYS:
        own = [e for e in (s.by(way) for s in sections) if e is not None]
        if not own:
            continue
        if all(e.best is None for e in own):
            yield own[0]  # with its reason, as a rule that of all of them
            continue
        try:
            yield own[0] if len(own) == 1 else joint_angle(own)
        except ConstructionError as error:
            yield unresolved(way, error.reason)


def _study_doubts(study, joint):
    """Doubt ways that contradict each other, and what the ways leave out."""
    resolved = [e for e in joint if e.resolved]
    for i, one in enumerate(resolved):
        for other in resolved[i + 1 :]:
            apart = abs(one.mean - other.mean)
            if apart > _APART * np.hypot(one.sd, other.sd):
                text = (
                    f"'{one.way}' gives {one.best:.1f} degrees and '{other.way}' gives "
                    f"{other.best:.1f}: they contradict each other."
                )
                yield Doubt("ways-disagree", text, "calibration")
    if study.construction.compaction is not None:
        text = (
            "compaction is left out of the calibration, which takes columns as rigid: "
            "the angle makes up for it."
        )
        yield Doubt("no-compaction", text, "calibration")


def calibrate_section(study, picks):
    """Find the shear angle from one section.

    Parameters
    ----------
    study : Study
    picks : Picks
        Of the section, in depth, with walls.

    Returns
    -------
    SectionCalibration
    """
    spec = _spec(study)
    problems, doubts = _problems(study, picks)
    estimates = []
    for way in WAYS:
        if way in spec.ways or (not spec.ways and _is_there(way, spec, problems)):
            estimates.append(_estimate(way, study, spec, problems))
    names = tuple(p.separation.horizon for p in problems)
    return SectionCalibration(picks.section_id, tuple(estimates), names, tuple(doubts))


def _is_there(way, spec, problems):
    """Tell whether a way has anything to go by."""
    if way == TIES:
        return any(len(p.fault.tie_x) for p in problems)
    if way == CUTOFFS:
        return bool(spec.pre_growth)
    return way == HORIZONS or spec.detachment_z is not None


def _estimate(way, study, spec, problems):
    """Go one way; what has no solution is an estimate that is not resolved."""
    if not problems:
        return unresolved(way, "no horizon of the section can be used.")
    main = _main(study, problems)
    try:
        if way == HORIZONS:
            return angle_from_horizons(problems)
        if way == TIES:
            return angle_from_ties(main)
        if way == CUTOFFS:
            separations = [p.separation for p in problems]
            own = [s for s in separations if s.horizon in spec.pre_growth]
            return angle_from_separations(own)
        return angle_from_detachment(main, spec.detachment_z, spec.detachment_sigma)
    except GeomcoreError as error:
        return unresolved(way, error.reason)


def _main(study, problems):
    """Give the construction's horizon, else the one with the largest heave."""
    wanted = study.construction.horizon
    own = [p for p in problems if p.separation.horizon == wanted]
    return own[0] if own else max(problems, key=lambda p: p.separation.heave)


# ---- from picks to problems --------------------------------------------------------


def _problems(study, picks):
    """Write every usable horizon of a section as a problem; doubts about the others."""
    where = f"section {picks.section_id}"
    options = CutoffOptions(study.picks.separation_from, study.picks.separation_to)
    names = horizons_for(study)
    try:
        fault = _fault(picks, names, options)
    except GeomcoreError as error:
        return [], [Doubt("no-calibration", error.reason, where)]
    problems, doubts = [], []
    for name in names:
        try:
            problem, more = _problem(study, picks, fault, name, options)
        except GeomcoreError as error:
            text = f"horizon '{name}' is not used for the shear angle: {error.reason}"
            doubts.append(Doubt("horizon-not-used", text, where))
            continue
        problems.append(problem)
        doubts += more
    return problems, doubts


def _fault(picks, names, options):
    """Give the known fault of the section.

    Where no pick shows it, given cut-offs stand in to guide the search. They are no
    further data then: each horizon brings its own cut-offs with their errors.
    """
    try:
        return known_fault(picks)[0]
    except PicksError as error:
        if error.code not in ("no-fault", "no-dip"):
            raise
    given = [given_cutoffs(picks, name, options) for name in names]
    cutoffs = [c for g in given if g for c in g.cutoffs]
    fault = known_fault(picks, cutoffs)[0]
    none = np.empty(0)
    x, z = np.r_[fault.x, fault.tie_x], np.r_[fault.z, fault.tie_z]
    return replace(fault, x=x, z=z, observed=0, tie_x=none, tie_z=none, tie_sigma=none)


def _problem(study, picks, fault, name, options):
    """Write one horizon as a problem of vertical shear, and its doubts."""
    where = f"section {picks.section_id}"
    given = given_cutoffs(picks, name, options)
    own = study.construction.regional
    # a given level is that of the construction's horizon; far picks would move back
    # by a heave that depends on the angle
    level = own.z if name == study.construction.horizon else None
    spec = replace(own, z=level, far_from=None)
    model = ConstantHeave(0.0)
    if given is None or given.hanging_wall is None:
        fault = carry_on(fault, picks, name, model)
    found = regional_and_separation(picks, fault, name, model, spec, given, options)
    regional = found.regional
    if given is not None and given.footwall is not None:
        regional = _regional_with(given.footwall, regional, picks, name, spec)
    bed = profile_from_picks(picks.of("horizon", name, "hanging wall"))
    bed, doubts = _within_first_block(bed, picks, name, where)
    bed = bed_from(found.separation.hanging_wall, bed)
    _require_usable(found.separation, bed, fault, where)
    problem = Problem(
        where, found.separation, fault, bed, regional, model, MarchOptions()
    )
    return problem, [*found.doubts, *doubts]


def _regional_with(foot, regional, picks, name, spec):
    """Fit the regional to a given footwall cut-off as to a pick with its own error.

    A line forced through it would tilt by its error, and not state that.
    """
    wall = profile_from_picks(picks.of("horizon", name, "footwall"))
    if spec.footwall_within is not None:
        near = wall.x > foot.x - spec.footwall_within
        wall = type(wall)(wall.x[near], wall.z[near], wall.sigma[near])
    if spec.dip is not None or spec.parallel_to or len(wall) < 2:
        return regional
    line = fit_line(
        np.r_[wall.x, foot.x],
        np.r_[wall.z, foot.z],
        np.r_[wall.sigma, foot.sigma_z],
        robust=spec.robust,
    )
    return line.moved_to(foot.x)


def _require_usable(separation, bed, fault, where):
    """Refuse a horizon that is not displaced, has no known start, or few picks."""
    if separation.heave <= 0 or separation.throw <= 0:
        raise ConstructionError(
            "reverse-separation",
            f"heave {separation.heave:.0f} and throw {separation.throw:.0f} are not "
            "those of a normal fault.",
            where,
        )
    _require_start(separation, fault, where)
    if len(bed) - 1 < _LEAST_PICKS:
        raise PicksError(
            "few-picks",
            f"{len(bed) - 1} picks lie beyond its hanging-wall cut-off, "
            f"{_LEAST_PICKS} are needed.",
            where,
        )


def _require_start(separation, fault, where):
    """Refuse cut-offs found on a fault that is mostly assumed between them."""
    foot, hang = separation.footwall, separation.hanging_wall
    needed = []
    if foot.slides:
        needed.append(foot.x)
    if hang.slides:
        needed.append(hang.x - ASSUMED_GAP * separation.heave)
    if not all(fault.is_known(x) for x in needed):
        raise ConstructionError(
            "start-not-known",
            "the fault is assumed over more than half the heave between its cut-offs, "
            "and they are not given.",
            where,
            "Give fault picks down to there, or the cut-offs.",
        )


def _within_first_block(bed, picks, name, where):
    """Leave out picks beyond the first subsidiary fault, which moved farther."""
    faults, _ = measure_subsidiaries(picks, name)
    if not faults:
        return bed, []
    first = min(faults, key=lambda f: f.inboard.x)
    text = (
        f"picks of '{name}' beyond the subsidiary fault '{first.plane.name}' are not "
        "used for the shear angle."
    )
    keep = bed.x < first.inboard.x
    columns = (getattr(bed, c)[keep] for c in ("x", "z", "sigma", "correlation"))
    return type(bed)(*columns), [Doubt("beyond-subsidiary", text, where)]
