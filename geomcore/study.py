"""The study: the whole recipe for one fault, and the one function that runs it.

The way of the data from top to bottom is `run`: section frames, picks,
construction. Each stage can be called alone; the Processing algorithms do.
"""

import hashlib
import json
from dataclasses import dataclass, field, replace
from typing import Optional, Tuple

import numpy as np

from . import __version__
from .construction import MarchOptions, predict_fault, predict_horizon
from .cutoffs import (
    CutoffOptions,
    given_cutoffs,
    measure_separation,
    regional_and_separation,
    wall_guide,
)
from .documents import read_object, write_object
from .errors import Doubt, FrameError, GeomcoreError, StudyError, Unsolved
from .kinematics import MODELS, model_named
from .picks import Picks, PullOptions, SourceCount, prepare_source, pull_source
from .profile import (
    Profile,
    fit_line,
    known_fault,
    line_through,
    profile_from_picks,
    require_depth,
)
from .section import (
    OBLIQUITY_WARNING,
    SectionFrame,
    mean_strike,
    parallel_sections,
    parse_azimuth,
    transport_azimuth,
)
from .sources import Features, Grid, SourceDeclaration
from .units import LENGTH_UNITS
from .walls import assign_walls, leave_out_near_fault

__all__ = [
    "FORMAT",
    "GivenTrace",
    "SectionLine",
    "SectionPicks",
    "SectionSet",
    "SectionResult",
    "Study",
    "StudyRun",
    "construct",
    "horizon_from_trace",
    "lay_sections",
    "pull_picks",
    "run",
    "run_from_picks",
    "section_frames",
]

FORMAT = "heaveline-study"
VERSION = 1


@dataclass(frozen=True)
class ParallelSpec:
    """Parallel sections to be laid across the fault trace (see `parallel_sections`)."""

    spacing: Optional[float] = None
    count: Optional[int] = None
    footwall_length: float = 2000.0
    hanging_wall_length: float = 8000.0
    extent: Optional[tuple] = None


@dataclass(frozen=True)
class SectionsSpec:
    """Where the section lines come from: a layer, or laid parallel.

    Parameters
    ----------
    uri : str
        Line layer of hand-drawn or earlier sections.
    id_field : str
        Attribute that names them; the feature id if empty.
    parallel : ParallelSpec, optional
        Lay them across the fault trace instead.
    """

    uri: str = ""
    id_field: str = ""
    parallel: Optional[ParallelSpec] = None


@dataclass(frozen=True)
class TransportSpec:
    """Transport azimuth: given, or normal to the mean fault strike.

    Parameters
    ----------
    azimuth : float, optional
        Grid azimuth towards the hanging wall, degrees.
    hw_side : str
        Compass point or azimuth that points into the hanging wall.
    """

    azimuth: Optional[float] = None
    hw_side: str = ""


@dataclass(frozen=True)
class PicksSpec:
    """How picks are brought in (see `PullOptions`), and fit distances.

    Parameters
    ----------
    corridor, fault_buffer, grid_step
        As in `PullOptions`.
    separation_from, separation_to : float
        The vertical separation of a horizon is measured by straight lines fitted
        between these distances outside its cut-offs.
    tracked : tuple of str
        Keys of point sources that were tracked or gridded, so that values drawn
        across the fault gap are looked for as in grids.
    """

    corridor: float = 500.0
    fault_buffer: float = 50.0
    grid_step: Optional[float] = None
    separation_from: float = 50.0
    separation_to: float = 500.0
    tracked: Tuple[str, ...] = ()


@dataclass(frozen=True)
class RegionalSpec:
    """Regional of the horizon: given, or fitted.

    Parameters
    ----------
    z : float, optional
        Its elevation at the footwall cut-off.
    dip : float, optional
        Its dip in degrees, positive down towards the hanging wall.
    footwall_within : float, optional
        Only footwall picks within this distance of the fault are fitted.
    far_from : float, optional
        Hanging-wall picks farther than this beyond the fault are judged to be back
        at regional; they are moved back by the oblique heave and fitted too.
    """

    z: Optional[float] = None
    dip: Optional[float] = None
    footwall_within: Optional[float] = None
    far_from: Optional[float] = None


@dataclass(frozen=True)
class HorizonSpec:
    """A further horizon to be predicted from the fault.

    Parameters
    ----------
    name : str
    offset : float, optional
        Elevation of its regional above that of the construction's horizon
        (negative below); its own footwall picks are used if not given.
    """

    name: str
    offset: Optional[float] = None


@dataclass(frozen=True)
class ConstructionSpec:
    """What is constructed and how.

    Parameters
    ----------
    horizon : str
        Horizon whose rollover makes the fault.
    model : str
        Name of a kinematic model.
    shear_angle : float
        Degrees from the vertical, positive antithetic.
    shear_angle_sigma : float
        One standard deviation of it, for the stated sigma.
    solver : str
        ``march``.
    samples_per_strip : int
    regional : RegionalSpec
    further_horizons : tuple of HorizonSpec
    """

    horizon: str
    model: str = MODELS[0].NAME
    shear_angle: float = 0.0
    shear_angle_sigma: float = 0.0
    solver: str = "march"
    samples_per_strip: int = 40
    regional: RegionalSpec = field(default_factory=RegionalSpec)
    further_horizons: Tuple[HorizonSpec, ...] = ()


@dataclass(frozen=True)
class OutputsSpec:
    """What the study writes, relative to the study file.

    Parameters
    ----------
    geopackage : str
        File for the layers.
    plots : str
        Folder for the section figures; none if empty.
    """

    geopackage: str = ""
    plots: str = ""


@dataclass(frozen=True)
class Study:
    """The recipe for one fault; a small JSON document.

    Parameters
    ----------
    name, fault : str
    crs : str
        Projected CRS of the study, as an authority code.
    length_unit : str
        Unit of that CRS and of elevations.
    vertical_datum : str
        Name of the datum elevations are counted from.
    sources : tuple of SourceDeclaration
    construction : ConstructionSpec
    sections : SectionsSpec
    transport : TransportSpec
    picks : PicksSpec
    outputs : OutputsSpec
    note : str
        Free text of the author.
    """

    name: str
    fault: str
    crs: str
    length_unit: str
    vertical_datum: str
    sources: Tuple[SourceDeclaration, ...]
    construction: ConstructionSpec
    sections: SectionsSpec = field(default_factory=SectionsSpec)
    transport: TransportSpec = field(default_factory=TransportSpec)
    picks: PicksSpec = field(default_factory=PicksSpec)
    outputs: OutputsSpec = field(default_factory=OutputsSpec)
    note: str = ""

    def __post_init__(self):
        if self.length_unit not in LENGTH_UNITS:
            raise StudyError(
                "bad-study",
                f"length_unit is '{self.length_unit}'.",
                "study",
                "Use one of: " + ", ".join(LENGTH_UNITS) + ".",
            )
        keys = [s.key for s in self.sources]
        twice = sorted({k for k in keys if keys.count(k) > 1})
        if twice:
            raise StudyError(
                "bad-study", f"source keys used twice: {', '.join(twice)}.", "study"
            )
        model_named(self.construction.model, shear_angle=self.construction.shear_angle)
        if self.construction.solver not in ("march",):
            raise StudyError(
                "bad-study",
                f"there is no solver '{self.construction.solver}'.",
                "construction",
                "Use: march.",
            )
        if self.construction.samples_per_strip < 4:
            raise StudyError(
                "bad-study", "samples_per_strip has to be 4 or more.", "construction"
            )

    @classmethod
    def from_dict(cls, document):
        """Read a study from its JSON object.

        Raises
        ------
        StudyError, SourceError
            If it is not a study of this version, or an entry is unknown, missing
            or of the wrong type.
        """
        if not isinstance(document, dict) or document.get("format") != FORMAT:
            raise StudyError(
                "bad-study", f"this is not a study: 'format' is not '{FORMAT}'.", "study"
            )
        if document.get("version") != VERSION:
            raise StudyError(
                "bad-study",
                f"the study has version {document.get('version')!r}, this program "
                f"reads version {VERSION}.",
                "study",
                "Update the plugin, or export the study anew.",
            )
        rest = {k: v for k, v in document.items() if k not in ("format", "version")}
        return read_object(cls, rest, "study", **_read_parts(rest))

    @classmethod
    def from_json(cls, text):
        """Read a study from JSON text (see `from_dict`)."""
        try:
            document = json.loads(text)
        except ValueError as error:
            raise StudyError("bad-study", f"the study is not valid JSON: {error}.") from None
        return cls.from_dict(document)

    def to_dict(self):
        """Give the study as a JSON object, entries at their default left out."""
        return {"format": FORMAT, "version": VERSION, **write_object(self)}

    def to_json(self):
        """Give the study as readable JSON text."""
        return json.dumps(self.to_dict(), indent=2, ensure_ascii=False) + "\n"


def _read_parts(document):
    """Read the nested objects of a study."""
    parts = {}
    simple = {"transport": TransportSpec, "outputs": OutputsSpec}
    for name, cls in simple.items():
        if name in document:
            parts[name] = read_object(cls, document[name], name)
    if "picks" in document:
        spec = read_object(PicksSpec, document["picks"], "picks")
        parts["picks"] = replace(spec, tracked=tuple(spec.tracked))
    if "sections" in document:
        parts["sections"] = _read_sections(document["sections"])
    if "construction" in document:
        parts["construction"] = _read_construction(document["construction"])
    if not isinstance(document.get("sources", []), list):
        raise StudyError("bad-study", "sources has to be a list.", "study")
    parts["sources"] = tuple(
        SourceDeclaration.from_dict(s) for s in document.get("sources", [])
    )
    return parts


def _read_sections(document):
    given = {}
    if isinstance(document, dict) and document.get("parallel") is not None:
        given["parallel"] = read_object(
            ParallelSpec, document["parallel"], "sections.parallel"
        )
    return read_object(SectionsSpec, document, "sections", **given)


def _read_construction(document):
    given = {}
    if isinstance(document, dict):
        if "regional" in document:
            given["regional"] = read_object(
                RegionalSpec, document["regional"], "construction.regional"
            )
        given["further_horizons"] = tuple(
            read_object(HorizonSpec, h, "construction.further_horizons")
            for h in document.get("further_horizons", ())
        )
    return read_object(ConstructionSpec, document, "construction", **given)


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
    """

    x: np.ndarray
    z: np.ndarray
    horizon: str
    regional: object
    oblique_heave: float
    shear_angle: float

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
    """

    frame: SectionFrame
    picks: Picks
    picks_time: Picks
    separations: tuple
    fault: object
    prediction: object
    horizons: tuple
    doubts: Tuple[Doubt, ...]

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
    doubts: Tuple[Doubt, ...]
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
                "the layer has no usable feature" + (f" ({refused})." if refused else "."),
                declaration.label,
                "Check the layer and its filter.",
            )
        prepared[declaration.key] = prepare_source(declaration, data, study.length_unit)
    return prepared


def _parts(prepared, *roles):
    """Parts of all line and polygon sources of some roles."""
    parts = []
    for p in prepared.values():
        if p.declaration.role in roles and isinstance(p.data, Features):
            if p.data.geometry != "point":
                o = p.data.offsets
                parts += [p.data.xy[a:b] for a, b in zip(o[:-1], o[1:]) if b - a > 1]
    return parts


def _strike_of(prepared):
    parts = _parts(prepared, "fault trace")
    if not parts:
        parts = [_long_axis(p) for p in _parts(prepared, "cut-off")]
    if not parts:
        raise FrameError(
            "no-strike",
            "there is no fault trace or cut-off line to take the strike from.",
            remedy="Declare one, or give the transport azimuth.",
        )
    return mean_strike(parts)


def _long_axis(part):
    """Two points along the long axis of a ring or line (its principal direction)."""
    centred = part - part.mean(axis=0)
    axis = np.linalg.svd(centred, full_matrices=False)[2][0]
    reach = np.ptp(centred @ axis)
    return np.array([np.zeros(2), axis * reach])


def resolve_transport(study, prepared, lines):
    """Find the transport azimuth and say what it comes from.

    The order is: given; else normal to the mean strike, on the side that is
    declared, else towards the dip direction of the fault, else towards the lower
    block of the horizon.

    Returns
    -------
    azimuth : float
    how : str

    Raises
    ------
    FrameError
        If nothing tells the side.
    """
    spec = study.transport
    if spec.azimuth is not None:
        return float(spec.azimuth) % 360.0, "given"
    strike = _strike_of(prepared)
    if spec.hw_side:
        return (
            transport_azimuth(strike, parse_azimuth(spec.hw_side)),
            f"normal to the mean strike {strike:.1f}, side declared {spec.hw_side}",
        )
    dips = [
        np.asarray(p.data.columns["dip_azimuth"], dtype=float)
        for p in prepared.values()
        if p.declaration.role in ("fault trace", "fault")
        and isinstance(p.data, Features)
        and "dip_azimuth" in p.data.columns
    ]
    dips = np.concatenate(dips) if dips else np.empty(0)
    dips = np.radians(dips[np.isfinite(dips)])
    if len(dips):
        mean = np.degrees(np.arctan2(np.sin(dips).mean(), np.cos(dips).mean()))
        return (
            transport_azimuth(strike, mean % 360.0),
            f"normal to the mean strike {strike:.1f}, towards the dip direction",
        )
    return _transport_from_levels(study, prepared, lines, strike)


def _transport_from_levels(study, prepared, lines, strike):
    """Take the lower block of the horizon as the hanging wall."""
    right = (strike + 90.0) % 360.0
    votes = 0.0
    for line in lines or ():
        try:
            frame = SectionFrame(line.section_id, line.vertices, right)
            picks = _pull_one(study, prepared, frame, PullOptions())
        except GeomcoreError:
            continue
        for table in (picks.depth, picks.time):
            votes += _lower_side(table, study.construction.horizon)
    if votes == 0:
        raise FrameError(
            "no-side",
            "nothing tells which side of the fault is the hanging wall.",
            remedy="Declare hw_side, dip directions on the fault, or the transport azimuth.",
        )
    azimuth = right if votes > 0 else (right + 180.0) % 360.0
    return (
        azimuth,
        f"normal to the mean strike {strike:.1f}, towards the lower block of "
        f"{study.construction.horizon}",
    )


def _lower_side(picks, horizon):
    """+1 if the horizon is lower beyond the fault (in x), -1 if before it, else 0."""
    marks = np.r_[picks.of("fault").x, picks.of("cutoff").x]
    bed = picks.of("horizon", horizon)
    if not len(marks) or not len(bed):
        return 0.0
    near = np.abs(bed.x - marks.mean()) < 0.25 * max(np.ptp(bed.x), 1e-9)
    before, beyond = bed.z[near & (bed.x < marks.min())], bed.z[near & (bed.x > marks.max())]
    if not len(before) or not len(beyond):
        return 0.0
    return float(np.sign(np.median(before) - np.median(beyond)))


def lay_sections(study, prepared, transport):
    """Lay the study's parallel sections across its fault trace.

    Returns
    -------
    list of SectionLine
        Named S01, S02, ... along strike, hanging wall on the right.
    """
    spec = study.sections.parallel
    trace = _parts(prepared, "fault trace") or _parts(prepared, "cut-off")
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
            "no-sections", f"no section line can be used. {reasons}", remedy="Draw others."
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
        if other.vertices.shape == frame.vertices.shape and (
            np.allclose(other.vertices, frame.vertices)
            or np.allclose(other.vertices, frame.vertices[::-1])
        ):
            raise FrameError(
                "duplicate-section",
                f"the line is the same as that of section {other.section_id}.",
                where,
                "Remove one of them.",
            )
    return frame


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
    return leave_out_near_fault(assign_walls(picks, guide), guide, buffer, gridded)


def pull_picks(study, prepared, frames, progress=None, cancelled=None, convergence=None):
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
    reasons = np.concatenate([t.reason for t in own]) if own else np.empty(0, dtype=object)
    left_out = {r: int((reasons == r).sum()) for r in sorted(set(reasons) - {""})}
    refused = dict(prepared.refused)
    raw = prepared.raw_range
    if prepared.count_in == 0:
        refused = {r: left_out.pop(r) for r in ("no data", "null code") if r in left_out}
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
    from .sources import vertical_factor

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
    horizon = study.construction.horizon
    options = CutoffOptions(study.picks.separation_from, study.picks.separation_to)
    fault = prediction = None
    try:
        require_depth_of(horizon, picks, frame)
        given = given_cutoffs(picks.depth, horizon, options)
        fault, more = known_fault(picks.depth, given.cutoffs if given else ())
        doubts += more
        prediction, separation = _predict(study, frame, picks.depth, fault, given, options)
        separations.append(separation)
    except GeomcoreError as error:
        prediction = Unsolved(frame.section_id, error.code, str(error))
    separations += _other_separations(picks, fault, options, separations)
    horizons = _further(study, frame, picks.depth, prediction) if prediction else ()
    return SectionResult(
        frame,
        picks.depth,
        picks.time,
        tuple(separations),
        fault,
        prediction,
        tuple(horizons),
        tuple(doubts),
    )


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


def _predict(study, frame, picks, fault, given, options):
    spec = study.construction
    model = model_named(spec.model, shear_angle=spec.shear_angle)
    found = regional_and_separation(
        picks, fault, spec.horizon, model, spec.regional, given, options
    )
    bed = profile_from_picks(picks.of("horizon", spec.horizon, "hanging wall"))
    march_options = MarchOptions(spec.samples_per_strip, spec.shear_angle_sigma)
    prediction = predict_fault(
        frame, found.separation, fault, bed, found.regional, model, march_options
    )
    return (
        replace(prediction, doubts=(*found.doubts, *prediction.doubts)),
        found.result,
    )


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
    profile, foot, hang = predict_horizon(
        given.x, given.z, regional, given.oblique_heave, given.shear_angle
    )
    bed = profile_from_picks(picks.of("horizon", spec.name, "hanging wall"))
    miss = bed.z - profile(bed.x)
    miss = miss[np.isfinite(miss)]
    if spec.name == given.horizon:
        note, miss = "the horizon made the fault: its misfit is an identity", miss[:0]
    elif not len(miss):
        note = "no picks of this horizon in the hanging wall"
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
    return fit_line(own.x, own.z, own.sigma, slope=base.slope if len(own) == 1 else None)


def digest(study, frames, picks, sources=None):
    """SHA-256 over everything read, declared and set, in a fixed order.

    Arrays enter as little-endian float64; a grid enters by its samples on the
    sections; without sources all columns of the picks enter. The study enters without its outputs, so that the place of a file
    does not change the result's name.
    """
    total = hashlib.sha256()
    document = study.to_dict()
    document.pop("outputs", None)
    text = json.dumps(document, sort_keys=True, ensure_ascii=True)
    total.update(f"{__version__}\n{text}\n".encode())
    for frame in frames:
        total.update(frame.section_id.encode())
        _update(total, frame.vertices)
    for key in sorted(sources or ()):
        total.update(key.encode())
        if isinstance(sources[key], Features):
            _update_features(total, sources[key])
    sampled = None if sources is None else _sampled_sources(sources)
    for section_id in sorted(picks):
        for table in (picks[section_id].depth, picks[section_id].time):
            _update_picks(total, table, sampled)
    return total.hexdigest()


def _sampled_sources(sources):
    """Keys of the sources whose values are samples of a surface."""
    return sorted(
        k for k, d in sources.items() if isinstance(d, Grid) or d.surface is not None
    )


def _update_features(total, data):
    for column in (data.xy, data.value, data.offsets, data.fid):
        _update(total, column)
    for name in sorted(data.columns):
        _update(total, data.columns[name])


def _update_picks(total, table, sampled):
    names = ("x", "z", "sigma_z", "dip", "kind", "name", "wall", "used")
    if sampled is not None:
        table = table.select(np.isin(table.source.astype(str), sampled))
        names = ("x", "z")
    for name in names:
        _update(total, getattr(table, name))


def _update(total, column):
    column = np.asarray(column)
    if column.dtype.kind in "OUS":
        total.update("\x1f".join(map(str, column.ravel())).encode())
    else:
        total.update(np.ascontiguousarray(column, dtype="<f8").tobytes())
