"""The study: the whole recipe for one fault, and the one function that runs it.

The way of the data from top to bottom is `run`: section frames, picks,
construction. Each stage can be called alone; the Processing algorithms do.
"""

from dataclasses import dataclass, replace
from typing import Optional

import numpy as np

from .assumed import ASSUMED_ERRORS, carry_on, with_assumed_errors
from .balancing import balance_section
from .calibrating import calibrate
from .compaction import compaction_from
from .comparing import compare_section
from .construction import MarchOptions, predict_fault
from .cutoffs import (
    CutoffOptions,
    given_cutoffs,
    measure_separation,
    refuse_reverse,
    regional_and_separation,
    wall_guide,
)
from .digest import digest
from .errors import Doubt, FrameError, GeomcoreError, StudyError, Unsolved
from .fault import known_fault
from .forward import forward_past_subsidiaries
from .growth import growth_doubts
from .kinematics import (
    ConstantBedLength,
    ConstantHeave,
    model_named,
    tan_of,
    to_shear_frame,
)
from .picks import Picks, PullOptions, SourceCount, prepare_source, pull_source
from .problem import OtherHorizon
from .profile import (
    Profile,
    fit_line,
    line_through,
    profile_from_picks,
    require_depth,
)
from .recipe import FORMAT, HorizonSpec, Study
from .section import OBLIQUITY_WARNING, SectionFrame, parallel_sections
from .sliplines import slip_line_horizon
from .sources import Features, Grid, vertical_factor
from .subsidiary import leave_out_near_subsidiaries, measure_subsidiaries
from .transport import resolve_transport, trace_parts
from .walls import assign_walls, leave_out_near_fault

__all__ = [
    "FORMAT",
    "GivenTrace",
    "HorizonSpec",
    "SectionLine",
    "SectionPicks",
    "SectionResult",
    "SectionSet",
    "Study",
    "StudyRun",
    "calibrate",
    "construct",
    "horizon_from_trace",
    "lay_sections",
    "pull_picks",
    "run",
    "run_from_picks",
    "section_frames",
]


@dataclass(frozen=True, eq=False)
class SectionLine:
    """A section line as read from a layer.

    Parameters
    ----------
    section_id : str
    vertices : ndarray (n, 2)
        In the study's CRS.
    problem : str
        Why the GIS side could not read it; such a line is reported and skipped.
    """

    section_id: str
    vertices: np.ndarray
    problem: str = ""


@dataclass(frozen=True, eq=False)
class SectionPicks:
    """Picks of one section by domain."""

    depth: Picks
    time: Picks

    @classmethod
    def empty(cls, section_id):
        """Make the picks of a section that has none."""
        return cls(Picks.empty(section_id), Picks.empty(section_id, "time"))


@dataclass(frozen=True, eq=False)
class SectionSet:
    """The sections of a study in one transport direction.

    Parameters
    ----------
    frames : tuple of SectionFrame
    unsolved : tuple of Unsolved
        Lines that gave no frame, with the reason.
    transport_azimuth : float
    transport_from : str
        What it comes from, in words.
    doubts : tuple of Doubt
    """

    frames: tuple
    unsolved: tuple
    transport_azimuth: float
    transport_from: str
    doubts: tuple = ()


@dataclass(frozen=True, eq=False)
class GivenTrace:
    """A fault from which further horizons are predicted.

    Parameters
    ----------
    x, z : ndarray (n,)
        The fault, x growing.
    horizon : str
        Horizon that made it ('' if none did).
    regional : Regional
        Of that horizon.
    oblique_heave, shear_angle : float
    compaction : Compaction or None
        That of the construction; further horizons compact with it.
    model : object, optional
        Kinematic model that made it; constant heave if not given.
    subsidiaries : tuple of SubsidiaryShare
        Subsidiary faults, which cut further horizons too.
    """

    x: np.ndarray
    z: np.ndarray
    horizon: str
    regional: object
    oblique_heave: float
    shear_angle: float
    compaction: object = None
    model: object = None
    subsidiaries: tuple = ()

    @classmethod
    def of(cls, prediction):
        """Take the fault of a prediction."""
        return cls(
            prediction.trace.x,
            prediction.trace.z,
            prediction.horizon,
            prediction.regional,
            prediction.oblique_heave,
            prediction.model.shear_angle,
            prediction.compaction,
            prediction.model,
            prediction.subsidiaries,
        )


@dataclass(frozen=True, eq=False)
class HorizonPrediction:
    """A horizon predicted from the fault, and how it fits picks not used for it.

    Parameters
    ----------
    name : str
    regional : Regional
    profile : Profile
    footwall, hanging_wall : tuple (x, z)
        Cut-offs.
    misfit_rms, misfit_max : float or None
        Of the hanging-wall picks of that horizon against the prediction; None
        where there are none, or where the horizon made the fault (an identity).
    misfit_n : int
    misfit_note : str
    """

    name: str
    regional: object
    profile: Profile
    footwall: tuple
    hanging_wall: tuple
    misfit_rms: Optional[float]
    misfit_max: Optional[float]
    misfit_n: int
    misfit_note: str


@dataclass(frozen=True, eq=False)
class SectionResult:
    """Everything of one section.

    Parameters
    ----------
    frame : SectionFrame
    picks, picks_time : Picks
    separations : tuple of SeparationResult
        Cut-offs of every horizon that could be measured.
    fault : KnownFault or None
    prediction : Prediction or Unsolved
        Falsy where the section could not be solved, with the reason.
    horizons : tuple of HorizonPrediction or Unsolved
    doubts : tuple of Doubt
        Of the section as a whole; the prediction carries its own.
    comparison : Comparison or None
        Other constructions beside this one; None where not asked for.
    balance : SectionBalance or Unsolved or None
        None where not asked for; falsy with the reason where there is none.
    """

    frame: SectionFrame
    picks: Picks
    picks_time: Picks
    separations: tuple
    fault: object
    prediction: object
    horizons: tuple
    doubts: tuple
    comparison: object = None
    balance: object = None

    @property
    def all_doubts(self):
        """Doubts of the section and of its prediction."""
        own = self.prediction.doubts if self.prediction else ()
        return (*self.doubts, *own)


@dataclass(frozen=True, eq=False)
class StudyRun:
    """The product of a study.

    Parameters
    ----------
    study : Study
    sections : tuple of SectionResult
    unsolved : tuple of Unsolved
        Lines that gave no frame.
    statement : tuple of SourceCount
        The input statement.
    transport_azimuth : float
    transport_from : str
        What it comes from, in words.
    doubts : tuple of Doubt
        Of the study as a whole.
    digest : str
        SHA-256 of everything read, declared and set.
    """

    study: Study
    sections: tuple
    unsolved: tuple
    statement: tuple
    transport_azimuth: float
    transport_from: str
    doubts: tuple
    digest: str

    @property
    def run_id(self):
        """Name of the run: the same inputs give the same name."""
        return self.digest[:12]


def _nothing(*_):
    return False


def _check(cancelled):
    if cancelled():
        raise StudyError("cancelled", "the run was cancelled; nothing was written.")


def run(study, sources, lines=None, progress=None, cancelled=None, convergence=None):
    """Run a study: sections, picks, construction.

    Parameters
    ----------
    study : Study
    sources : mapping of str to Features or Grid
        What was read, by source key, in the study's CRS.
    lines : sequence of SectionLine, optional
        Section lines, unless the study lays them.
    progress : callable, optional
        Called with a fraction from 0 to 1.
    cancelled : callable, optional
        Asked often; True ends the run with nothing done.
    convergence : callable, optional
        ``convergence(xy)`` in degrees (true = grid + convergence).

    Returns
    -------
    StudyRun

    Raises
    ------
    GeomcoreError
        If the study as a whole cannot run; a section that cannot is in the result
        with its reason, and the others go on.
    """
    progress, cancelled = progress or _nothing, cancelled or _nothing
    prepared = prepare(study, sources)
    section_set = section_frames(study, prepared, lines)
    picks, statement = pull_picks(
        study,
        prepared,
        section_set.frames,
        lambda f: progress(0.6 * f),
        cancelled,
        convergence,
    )
    return run_from_picks(
        study,
        section_set,
        picks,
        statement,
        digest(study, section_set.frames, picks, sources),
        lambda f: progress(0.6 + 0.4 * f),
        cancelled,
    )


def run_from_picks(
    study, section_set, picks, statement=(), sha256=None, progress=None, cancelled=None
):
    """Construct every section of a study whose picks are already pulled.

    Parameters
    ----------
    study : Study
    section_set : SectionSet
    picks : mapping of str to SectionPicks
        By section id; a section without picks is reported as unsolved.
    statement : tuple of SourceCount
    sha256 : str, optional
        Digest of what was read; taken over the picks if not given.
    progress, cancelled : callable, optional
        As in `run`.

    Returns
    -------
    StudyRun
    """
    progress, cancelled = progress or _nothing, cancelled or _nothing
    sections = []
    for i, frame in enumerate(section_set.frames):
        _check(cancelled)
        own = picks.get(frame.section_id) or SectionPicks.empty(frame.section_id)
        sections.append(construct(study, frame, own))
        progress((i + 1) / len(section_set.frames))
    return StudyRun(
        study,
        tuple(sections),
        section_set.unsolved,
        tuple(statement),
        section_set.transport_azimuth,
        section_set.transport_from,
        section_set.doubts,
        sha256 or digest(study, section_set.frames, picks),
    )


def prepare(study, sources):
    """Convert every declared source once; missing or empty ones are refused."""
    prepared = {}
    for declaration in study.sources:
        data = sources.get(declaration.key)
        if data is None:
            raise StudyError(
                "no-source", "no data were read.", declaration.label, "Check its uri."
            )
        if isinstance(data, Features) and len(data.fid) == 0:
            refused = "; ".join(f"{n} {why}" for why, n in data.refused.items())
            raise StudyError(
                "empty-source",
                "the layer has no usable feature"
                + (f" ({refused})." if refused else "."),
                declaration.label,
                "Check the layer and its filter.",
            )
        prepared[declaration.key] = prepare_source(declaration, data, study.length_unit)
    return prepared


def lay_sections(study, prepared, transport):
    """Lay the study's parallel sections across its fault trace.

    Returns
    -------
    list of SectionLine
        Named S01, S02, ... along strike, hanging wall on the right.
    """
    spec = study.sections.parallel
    trace = trace_parts(prepared, "fault trace") or trace_parts(prepared, "cut-off")
    if not trace:
        raise FrameError("no-trace", "parallel sections need a fault trace as a line.")
    lines = parallel_sections(
        trace,
        transport,
        spec.spacing,
        spec.count,
        spec.footwall_length,
        spec.hanging_wall_length,
        None if spec.extent is None else tuple(spec.extent),
    )
    width = max(2, len(str(len(lines))))
    return [SectionLine(f"S{i + 1:0{width}d}", v) for i, v in enumerate(lines)]


def section_frames(study, prepared, lines=None):
    """Make the section frames of a study.

    Returns
    -------
    SectionSet
    """
    lines = list(lines or ())
    transport, how = resolve_transport(study, prepared, lines)
    if study.sections.parallel is not None:
        lines = lay_sections(study, prepared, transport)
    frames, unsolved, doubts = [], [], []
    for line in lines:
        try:
            frames.append(_frame_of(line, transport, frames))
        except GeomcoreError as error:
            unsolved.append(Unsolved(line.section_id, error.code, str(error)))
            continue
        if frames[-1].obliquity > OBLIQUITY_WARNING:
            doubts.append(
                Doubt(
                    "oblique-section",
                    f"up to {frames[-1].obliquity:.0f} degrees off transport.",
                    f"section {line.section_id}",
                )
            )
    if not frames:
        reasons = " ".join(u.reason for u in unsolved[:3])
        raise FrameError(
            "no-sections",
            f"no section line can be used. {reasons}",
            remedy="Draw others.",
        )
    return SectionSet(tuple(frames), tuple(unsolved), transport, how, tuple(doubts))


def _frame_of(line, transport, frames):
    where = f"section {line.section_id}"
    if line.problem:
        raise FrameError("bad-line", line.problem, where, "Draw it anew.")
    if any(f.section_id == line.section_id for f in frames):
        raise FrameError(
            "duplicate-section",
            "another section has the same name.",
            where,
            "Give each section its own name.",
        )
    frame = SectionFrame(line.section_id, line.vertices, transport)
    for other in frames:
        if _same_line(other.vertices, frame.vertices):
            raise FrameError(
                "duplicate-section",
                f"the line is the same as that of section {other.section_id}.",
                where,
                "Remove one of them.",
            )
    return frame


def _same_line(one, other):
    """Tell whether two lines agree to a thousandth, drawn either way."""
    if one.shape != other.shape:
        return False
    # no relative part: at a northing of 6,000,000 it would be tens of metres
    apart = (np.abs(one - way).max() for way in (other, other[::-1]))
    return min(apart) < 1e-3


def _pull_one(study, prepared, frame, options):
    """Pull every source to one section, tell walls, leave out what is too near."""
    by_domain = {}
    for source in prepared.values():
        picks = pull_source(source, frame, options)
        by_domain.setdefault(picks.domain, []).append(picks)
    tables = {
        domain: Picks.empty(frame.section_id, domain).joined(by_domain.get(domain, []))
        for domain in ("depth", "time")
    }
    grids = {k for k, p in prepared.items() if isinstance(p.data, Grid)}
    gridded = sorted(grids | set(study.picks.tracked))
    return SectionPicks(
        **{
            domain: _with_walls(table, tables, gridded, options.fault_buffer)
            for domain, table in tables.items()
        }
    )


def _with_walls(picks, tables, gridded, buffer):
    if not len(picks):
        return picks
    other = tables["time" if picks.domain == "depth" else "depth"]
    guide = wall_guide(picks, other)
    if guide is None:
        return picks
    picks = leave_out_near_fault(assign_walls(picks, guide), guide, buffer, gridded)
    return leave_out_near_subsidiaries(picks, buffer, gridded)


def pull_picks(
    study, prepared, frames, progress=None, cancelled=None, convergence=None
):
    """Pull all declared sources to all sections.

    Returns
    -------
    picks : dict of str to SectionPicks
        By section id.
    statement : tuple of SourceCount
        The input statement, one row a source.
    """
    progress, cancelled = progress or _nothing, cancelled or _nothing
    spec = study.picks
    options = PullOptions(spec.corridor, spec.fault_buffer, spec.grid_step, convergence)
    picks = {}
    for i, frame in enumerate(frames):
        _check(cancelled)
        picks[frame.section_id] = _pull_one(study, prepared, frame, options)
        progress((i + 1) / len(frames))
    statement = tuple(_count(p, picks.values()) for p in prepared.values())
    return picks, statement


def _count(prepared, picks):
    """One row of the input statement."""
    declaration = prepared.declaration
    own = []
    for section in picks:
        table = section.time if declaration.domain == "time" else section.depth
        own.append(table.select(table.source == declaration.key))
    z = np.concatenate([t.z for t in own]) if own else np.empty(0)
    used = np.concatenate([t.used for t in own]) if own else np.empty(0, dtype=bool)
    reasons = (
        np.concatenate([t.reason for t in own]) if own else np.empty(0, dtype=object)
    )
    left_out = {r: int((reasons == r).sum()) for r in sorted(set(reasons) - {""})}
    refused = dict(prepared.refused)
    raw = prepared.raw_range
    if prepared.count_in == 0:
        refused = {
            r: left_out.pop(r) for r in ("no data", "null code") if r in left_out
        }
        raw = _raw_range(prepared, z)
    known = z[np.isfinite(z)]
    return SourceCount(
        declaration.key,
        declaration.layer or declaration.key,
        declaration.role,
        declaration.name,
        prepared.conversion,
        prepared.count_in or len(z),
        refused,
        len(z) - sum(refused.values()) * (prepared.count_in == 0),
        int(used.sum()),
        left_out,
        *raw,
        *((float(known.min()), float(known.max())) if known.size else (np.nan, np.nan)),
    )


def _raw_range(prepared, z):
    """Range of a grid's raw values, back from its elevations."""
    known = z[np.isfinite(z)]
    if not known.size:
        return (np.nan, np.nan)
    factor = vertical_factor(prepared.declaration, prepared.length_unit)
    raw = known / factor - np.sign(factor) * prepared.declaration.datum_elevation
    return (float(raw.min()), float(raw.max()))


def construct(study, frame, picks):
    """Construct one section from its picks.

    Parameters
    ----------
    study : Study
    frame : SectionFrame
    picks : SectionPicks

    Returns
    -------
    SectionResult
        With an `Unsolved` prediction where the section has no solution.
    """
    doubts, separations = [], []
    options = CutoffOptions(study.picks.separation_from, study.picks.separation_to)
    fault = prediction = None
    try:
        fault, more, given = _known_from(study, frame, picks, options)
        doubts += more
        fault, prediction, separation = _predict_from(
            study, frame, picks.depth, fault, given, options
        )
        separations.append(separation)
    except GeomcoreError as error:
        prediction = Unsolved(frame.section_id, error.code, str(error))
    separations += _other_separations(picks, fault, options, separations)
    doubts += _growth(study, picks.depth, separations) if prediction else []
    horizons = _further(study, frame, picks.depth, prediction) if prediction else ()
    result = SectionResult(
        frame,
        picks.depth,
        picks.time,
        tuple(separations),
        fault,
        prediction,
        tuple(horizons),
        tuple(doubts),
    )
    return _with_what_was_asked(study, frame, picks, options, result)


def _known_from(study, frame, picks, options):
    """Give the known fault, its doubts, and the cut-offs that were given."""
    horizon = study.construction.horizon
    require_depth_of(horizon, picks, frame)
    given = given_cutoffs(picks.depth, horizon, options)
    refuse_reverse(given, f"section {frame.section_id}")
    return (*known_fault(picks.depth, given.cutoffs if given else ()), given)


def _with_what_was_asked(study, frame, picks, options, result):
    """Add the comparison and the balance, where the study asks for them."""
    spec = study.construction

    def predict(recipe):
        known, _, given = _known_from(recipe, frame, picks, options)
        return _predict_from(recipe, frame, picks.depth, known, given, options)[:2]

    if spec.compare:
        result = replace(result, comparison=compare_section(study, result, predict))
    if spec.balance:
        result = replace(result, balance=_balanced(study, result))
    return result


def _balanced(study, result):
    try:
        return balance_section(study, result)
    except GeomcoreError as error:
        return Unsolved(result.frame.section_id, error.code, str(error))


def require_depth_of(horizon, picks, frame):
    """Refuse a section whose horizon is there in time only."""
    where = f"section {frame.section_id}"
    if not len(picks.depth.of("horizon", horizon)):
        if len(picks.time.of("horizon", horizon)):
            require_depth(picks.time, where)
        raise StudyError(
            "no-horizon",
            f"there are no usable picks of horizon '{horizon}'.",
            where,
            "Check the section, the corridor and the horizon's name.",
        )


def _predict_from(study, frame, picks, known, given, options):
    """Predict from the known fault, carried on where it ends above the cut-off.

    Returns
    -------
    fault : KnownFault
        With the assumed piece, if there is one.
    prediction : Prediction
    separation : SeparationResult
    """
    spec = study.construction
    model = model_named(spec.model, shear_angle=spec.shear_angle)
    compaction = compaction_from(spec.compaction, study.length_unit)
    hang_given = given is not None and given.hanging_wall is not None

    def predicted(**errors):
        fault = known
        if not hang_given:
            fault = carry_on(
                known, picks, spec.horizon, model, compaction=compaction, **errors
            )
        return (fault, *_predict(study, frame, picks, fault, given, options))

    fault, prediction, result = predicted()
    if hang_given or fault.is_known(prediction.separation.hanging_wall.x):
        return fault, prediction, result
    variants = []
    for name, size in ASSUMED_ERRORS.items():
        change = size if name == "dip_change" else 1.0 - size
        try:
            variants.append(predicted(**{name: change})[1])
        except GeomcoreError:
            continue  # that far off there is no solution at all
    prediction = with_assumed_errors(prediction, variants)
    return fault, prediction, replace(result, separation=prediction.separation)


def _predict(study, frame, picks, fault, given, options):
    spec = study.construction
    model = model_named(spec.model, shear_angle=spec.shear_angle)
    subsidiaries, doubts = measure_subsidiaries(picks, spec.horizon)
    added = sum(f.added_heave(tan_of(model)) for f in subsidiaries)
    found = regional_and_separation(
        picks, fault, spec.horizon, model, spec.regional, given, options, added
    )
    march_options = MarchOptions(
        spec.samples_per_strip,
        spec.shear_angle_sigma,
        spec.robust,
        spec.detachment_z,
        spec.detachment_sigma,
        compaction_from(spec.compaction, study.length_unit),
    )
    others, more = _fit_horizons(spec, picks, fault, model, options)
    prediction = predict_fault(
        frame,
        found.separation,
        fault,
        _hanging_wall(picks, spec.horizon),
        found.regional,
        model,
        march_options,
        spec.solver,
        others,
        subsidiaries,
    )
    doubts = (*found.doubts, *doubts, *more, *prediction.doubts)
    return replace(prediction, doubts=doubts), found.result


def _hanging_wall(picks, horizon):
    return profile_from_picks(picks.of("horizon", horizon, "hanging wall"))


def _fit_horizons(spec, picks, fault, model, options):
    """Further horizons for the fit; one that cannot be used is left out, with a doubt.

    The march uses one horizon only.
    """
    others, doubts = [], []
    for name in spec.fit_horizons if spec.solver == "fit" else ():
        try:
            given = given_cutoffs(picks, name, options)
            own = replace(spec.regional, z=None)  # its level is that of another horizon
            subsidiaries, _ = measure_subsidiaries(picks, name)
            added = sum(f.added_heave(tan_of(model)) for f in subsidiaries)
            found = regional_and_separation(
                picks, fault, name, model, own, given, options, added
            )
        except GeomcoreError as error:
            text = f"horizon '{name}' is not in the fit: {error.reason}"
            doubts.append(
                Doubt("horizon-not-fitted", text, f"section {picks.section_id}")
            )
            continue
        bed = _hanging_wall(picks, name)
        others.append(
            OtherHorizon(name, found.separation, bed, found.regional, subsidiaries)
        )
    return tuple(others), doubts


def _other_separations(picks, fault, options, done):
    """Cut-offs of every other horizon of the section, in depth and in time."""
    results = []
    have = {s.separation.horizon for s in done}
    for table in (picks.depth, picks.time):
        names = sorted(set(table.name[np.isin(table.kind, ("horizon", "cutoff"))]))
        for name in names:
            if name in have and table.domain == "depth":
                continue
            try:
                own = fault if table.domain == "depth" else None
                results.append(measure_separation(table, own, name, options))
            except GeomcoreError:
                # a horizon that is not cut here has no separation to report
                continue
    return results


def _growth(study, picks, separations):
    """Doubt horizons used as older than the fault that thicken towards it."""
    spec = study.construction
    shared = [h.name for h in spec.further_horizons]
    measured = [s.separation for s in separations]
    return growth_doubts(picks, measured, spec.horizon, spec.shear_angle, shared)


def _further(study, frame, picks, prediction):
    given = GivenTrace.of(prediction)
    results = []
    for spec in study.construction.further_horizons:
        try:
            results.append(horizon_from_trace(spec, picks, given))
        except GeomcoreError as error:
            results.append(
                Unsolved(frame.section_id, error.code, f"{spec.name}: {error}")
            )
    return results


def horizon_from_trace(spec, picks, given):
    """Predict one further horizon from a fault and report its misfit.

    Parameters
    ----------
    spec : HorizonSpec
    picks : Picks
        Of the section, in depth.
    given : GivenTrace

    Returns
    -------
    HorizonPrediction

    Raises
    ------
    GeomcoreError
        If its regional is not known or does not meet the fault.
    """
    regional = _regional_of(spec, picks, given)
    model = given.model or ConstantHeave(given.shear_angle)
    profile, foot, hang, hidden = _forward(spec, given, regional, model)
    bed = profile_from_picks(picks.of("horizon", spec.name, "hanging wall"))
    miss = bed.z - profile(bed.x)
    u = to_shear_frame(bed.x, bed.z, model.shear_angle)
    for start, end in hidden:
        miss[(u > start) & (u < end)] = np.nan
    miss = miss[np.isfinite(miss)]
    if spec.name == given.horizon and spec.slip is None:
        note, miss = "the horizon made the fault: its misfit is an identity", miss[:0]
    elif not len(miss):
        note = "no picks of this horizon in the hanging wall"
    elif spec.slip is not None:
        note = f"{len(miss)} picks against slip lines with a slip of {spec.slip:g}"
    else:
        note = f"{len(miss)} picks not used for the fault"
    return HorizonPrediction(
        spec.name,
        regional,
        profile,
        foot,
        hang,
        float(np.sqrt((miss**2).mean())) if len(miss) else None,
        float(np.abs(miss).max()) if len(miss) else None,
        len(miss),
        note,
    )


def _forward(spec, given, regional, model):
    """Predict by the model that made the fault, or by slip lines where asked for."""
    if spec.slip is not None:
        profile, foot = slip_line_horizon(
            given.x, given.z, regional, spec.slip, float(given.x[-1])
        )
        return profile, foot, (float(profile.x[0]), float(profile.z[0])), ()
    if isinstance(model, ConstantBedLength) and spec.name != given.horizon:
        raise StudyError(
            "further-horizon-model",
            f"{model.label} gives each horizon a displacement of its own, so further "
            "horizons do not follow from the fault.",
            f"horizon {spec.name}",
            "Use constant heave or constant slip.",
        )
    return forward_past_subsidiaries(
        given.x,
        given.z,
        regional,
        given.oblique_heave,
        model,
        given.subsidiaries,
        given.compaction,
    )


def _regional_of(spec, picks, given):
    """Regional of a further horizon: offset, the same, or its own footwall picks."""
    base = given.regional
    if spec.offset is not None:
        return line_through(
            base.x0, base.z0 + spec.offset, base.slope, "offset from the horizon used"
        )
    if spec.name == given.horizon:
        return base
    own = profile_from_picks(picks.of("horizon", spec.name, "footwall"))
    return fit_line(
        own.x, own.z, own.sigma, slope=base.slope if len(own) == 1 else None
    )
