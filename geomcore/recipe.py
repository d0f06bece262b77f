"""The study document: what it says, how it is read and written."""

import json
from dataclasses import dataclass, field, replace
from typing import Optional

from .anglecurve import WAYS
from .compaction import compaction_from
from .documents import read_list, read_object, require, write_object
from .errors import StudyError
from .kinematics import MODELS, model_named
from .sources import SourceDeclaration
from .units import LENGTH_UNITS

__all__ = [
    "FORMAT",
    "SOLVERS",
    "VERSION",
    "CalibrationSpec",
    "CandidateSpec",
    "CompactionSpec",
    "ConstructionSpec",
    "HorizonSpec",
    "OutputsSpec",
    "ParallelSpec",
    "PicksSpec",
    "RegionalSpec",
    "SectionsSpec",
    "Study",
    "TransportSpec",
]

FORMAT = "heaveline-study"
VERSION = 1
SOLVERS = ("march", "fit")


def _more_than(least, where, or_equal=False, **values):
    """Refuse numbers that are not beyond a bound; those not given pass."""
    for name, value in values.items():
        if value is None or value > least or (or_equal and value == least):
            continue
        limit = f"{least:g} or more" if or_equal else f"more than {least:g}"
        require(False, f"{name} is {value:g}.", where, f"Give {limit}.")


@dataclass(frozen=True)
class ParallelSpec:
    """Parallel sections to be laid across the fault trace (see `parallel_sections`)."""

    spacing: Optional[float] = None
    count: Optional[int] = None
    footwall_length: float = 2000.0
    hanging_wall_length: float = 8000.0
    extent: Optional[tuple] = None

    def __post_init__(self):
        extent = () if self.extent is None else self.extent
        numbers = all(isinstance(v, (int, float)) for v in extent)
        require(
            self.extent is None or (len(extent) == 4 and numbers),
            f"extent is {self.extent!r}, not four numbers.",
            "sections.parallel",
            "Give xmin, ymin, xmax, ymax.",
        )


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
    tracked: tuple = ()

    def __post_init__(self):
        _more_than(0, "picks", corridor=self.corridor, grid_step=self.grid_step)
        at_least = {
            "fault_buffer": self.fault_buffer,
            "separation_from": self.separation_from,
        }
        _more_than(0, "picks", or_equal=True, **at_least)
        _more_than(self.separation_from, "picks", separation_to=self.separation_to)


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
    robust : bool
        Picks that miss by more than twice their sigma get less weight.
    parallel_to : str
        Horizon whose footwall picks give the dip; only the level is fitted to the
        horizon's own.
    """

    z: Optional[float] = None
    dip: Optional[float] = None
    footwall_within: Optional[float] = None
    far_from: Optional[float] = None
    robust: bool = False
    parallel_to: str = ""

    def __post_init__(self):
        where = "construction.regional"
        require(
            not (self.parallel_to and self.dip is not None),
            "both dip and parallel_to are given.",
            where,
            "Give one of them.",
        )
        distances = {"footwall_within": self.footwall_within, "far_from": self.far_from}
        _more_than(0, where, **distances)
        require(
            self.dip is None or abs(self.dip) < 90,
            f"dip is {self.dip}.",
            where,
            "Give a dip between -90 and 90 degrees, positive down to the hanging wall.",
        )


@dataclass(frozen=True)
class HorizonSpec:
    """A further horizon to be predicted from the fault.

    Parameters
    ----------
    name : str
    offset : float, optional
        Elevation of its regional above that of the construction's horizon
        (negative below); its own footwall picks are used if not given.
    slip : float, optional
        Predict it by slip lines parallel to the fault with this slip, not by the
        model that made the fault.
    """

    name: str
    offset: Optional[float] = None
    slip: Optional[float] = None

    def __post_init__(self):
        _more_than(0, f"further horizon {self.name}", slip=self.slip)


@dataclass(frozen=True)
class CompactionSpec:
    """Compaction of the hanging wall; either a known law or own numbers.

    Parameters
    ----------
    surface_now_z, surface_then_z : float
        Elevation of the sediment surface now, and when the fault moved.
    law : str
        Name of a published porosity law (`compaction.PRESETS`).
    surface_porosity, decay : float, optional
        Own law instead: phi0 (a fraction) and c (per length unit of the study) of
        phi0 exp(-c depth).
    approximate : bool
        Run with inclined shear too, along the shear lines; marked by a doubt.
    """

    surface_now_z: float
    surface_then_z: float
    law: str = ""
    surface_porosity: Optional[float] = None
    decay: Optional[float] = None
    approximate: bool = False


@dataclass(frozen=True)
class CandidateSpec:
    """A construction to be compared with the study's own.

    Parameters
    ----------
    model : str
        Name of a kinematic model.
    shear_angle : float
        Degrees from the vertical, positive antithetic.
    solver : str
        One of `SOLVERS`.
    """

    model: str = MODELS[0].NAME
    shear_angle: float = 0.0
    solver: str = "march"

    def __post_init__(self):
        _known_solver(self.solver, "construction.compare")
        model_named(self.model, shear_angle=self.shear_angle)


def _known_solver(solver, where):
    remedy = "Use one of: " + ", ".join(SOLVERS) + "."
    require(solver in SOLVERS, f"there is no solver '{solver}'.", where, remedy)


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
        One of `SOLVERS`.
    samples_per_strip : int
    fit_horizons : tuple of str
        Further horizons the fit uses besides, each with its own cut-offs and
        regional.
    robust : bool
        The fit gives picks that miss by more than twice their sigma less weight.
    detachment_z, detachment_sigma : float, optional
        Detachment level known from elsewhere; a soft constraint of the fit.
    regional : RegionalSpec
    further_horizons : tuple of HorizonSpec
    compaction : CompactionSpec, optional
        Columns keep their solid thickness; the march with vertical shear only.
    compare : tuple of CandidateSpec
        Further constructions of every section, set beside the study's own and a
        straight fault; none if empty.
    balance : bool
        Whether the area of every section is balanced.
    """

    horizon: str
    model: str = MODELS[0].NAME
    shear_angle: float = 0.0
    shear_angle_sigma: float = 0.0
    solver: str = "march"
    samples_per_strip: int = 40
    fit_horizons: tuple = ()
    robust: bool = False
    detachment_z: Optional[float] = None
    detachment_sigma: float = 50.0
    regional: RegionalSpec = field(default_factory=RegionalSpec)
    further_horizons: tuple = ()
    compaction: Optional[CompactionSpec] = None
    compare: tuple = ()
    balance: bool = False

    def __post_init__(self):
        where = "construction"
        _more_than(0, where, detachment_sigma=self.detachment_sigma)
        sigma = self.shear_angle_sigma
        _more_than(0, where, or_equal=True, shear_angle_sigma=sigma)
        require(
            self.samples_per_strip >= 4, "samples_per_strip has to be 4 or more.", where
        )
        _known_solver(self.solver, where)
        require(
            self.compaction is None or self.regional.far_from is None,
            "with compaction far hanging-wall picks have sagged below the regional and "
            "cannot be fitted with it.",
            "construction",
            "Leave regional.far_from out.",
        )


@dataclass(frozen=True)
class CalibrationSpec:
    """What the shear angle is found from.

    Parameters
    ----------
    horizons : tuple of str
        Horizons that have to belong to one fault, growth horizons among them; that of
        the construction and its fit horizons if empty.
    pre_growth : tuple of str
        Those older than the fault's movement, whose heave against throw tells the
        angle too.
    ways : tuple of str
        Of `anglecurve.WAYS`; all that the data allow if empty.
    detachment_z, detachment_sigma : float, optional
        Level detachment known from elsewhere, for the lost area.
    """

    horizons: tuple = ()
    pre_growth: tuple = ()
    ways: tuple = ()
    detachment_z: Optional[float] = None
    detachment_sigma: float = 50.0

    def __post_init__(self):
        where = "calibration"
        _more_than(0, where, detachment_sigma=self.detachment_sigma)
        for way in self.ways:
            require(
                way in WAYS,
                f"there is no way '{way}'.",
                where,
                "Use of: " + ", ".join(WAYS) + ".",
            )
        require(
            "area" not in self.ways or self.detachment_z is not None,
            "the way 'area' needs a known detachment.",
            where,
            "Give detachment_z.",
        )


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
    calibration : CalibrationSpec, optional
        What the shear angle is to be found from; `calibrating.calibrate` does it.
    """

    name: str
    fault: str
    crs: str
    length_unit: str
    vertical_datum: str
    sources: tuple
    construction: ConstructionSpec
    sections: SectionsSpec = field(default_factory=SectionsSpec)
    transport: TransportSpec = field(default_factory=TransportSpec)
    picks: PicksSpec = field(default_factory=PicksSpec)
    outputs: OutputsSpec = field(default_factory=OutputsSpec)
    note: str = ""
    calibration: Optional[CalibrationSpec] = None

    def __post_init__(self):
        require(
            self.length_unit in LENGTH_UNITS,
            f"length_unit is '{self.length_unit}'.",
            "study",
            "Use one of: " + ", ".join(LENGTH_UNITS) + ".",
        )
        keys = [s.key for s in self.sources]
        twice = sorted({k for k in keys if keys.count(k) > 1})
        require(not twice, f"source keys used twice: {', '.join(twice)}.", "study")
        for key in self.picks.tracked:
            require(
                key in keys,
                f"tracked names {key!r}, which is no source.",
                "picks",
                "Sources: " + ", ".join(keys) + ".",
            )
        model_named(self.construction.model, shear_angle=self.construction.shear_angle)
        compaction_from(self.construction.compaction, self.length_unit)

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
                "bad-study",
                f"this is not a study: 'format' is not '{FORMAT}'.",
                "study",
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
            raise StudyError(
                "bad-study", f"the study is not valid JSON: {error}."
            ) from None
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
    if document.get("calibration") is not None:
        parts["calibration"] = _read_calibration(document["calibration"])
    if "construction" in document:
        parts["construction"] = _read_construction(document["construction"])
    sources = document.get("sources", [])
    require(isinstance(sources, list), "sources has to be a list.", "study")
    parts["sources"] = tuple(SourceDeclaration.from_dict(s) for s in sources)
    return parts


def _read_sections(document):
    given = {}
    if isinstance(document, dict) and document.get("parallel") is not None:
        given["parallel"] = read_object(
            ParallelSpec, document["parallel"], "sections.parallel"
        )
    return read_object(SectionsSpec, document, "sections", **given)


def _read_calibration(document):
    given = {}
    if isinstance(document, dict):
        for name in ("horizons", "pre_growth", "ways"):
            given[name] = tuple(read_list(document, name, "calibration"))
    return read_object(CalibrationSpec, document, "calibration", **given)


def _read_construction(document):
    where, given = "construction", {}
    if isinstance(document, dict):
        if "regional" in document:
            given["regional"] = read_object(
                RegionalSpec, document["regional"], "construction.regional"
            )
        if document.get("compaction") is not None:
            given["compaction"] = read_object(
                CompactionSpec, document["compaction"], "construction.compaction"
            )
        given["fit_horizons"] = tuple(read_list(document, "fit_horizons", where))
        given["further_horizons"] = tuple(
            read_object(HorizonSpec, h, "construction.further_horizons")
            for h in read_list(document, "further_horizons", where)
        )
        given["compare"] = tuple(
            read_object(CandidateSpec, c, "construction.compare")
            for c in read_list(document, "compare", where)
        )
    return read_object(ConstructionSpec, document, where, **given)
