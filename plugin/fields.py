"""Output layers and their fields, each declared once; knows no QGIS.

Names and geometries are a contract: styles, expressions, checks and other people's
projects rely on them. Add, never rename.
"""

from dataclasses import dataclass
from typing import Optional

__all__ = ["LAYERS", "ON_REQUEST", "FieldSpec", "LayerSpec", "Table"]


@dataclass(frozen=True)
class FieldSpec:
    """One field of an output layer.

    Parameters
    ----------
    name : str
    type : str
        ``text``, ``integer``, ``real`` or ``boolean``.
    alias : str
        What the attribute table shows.
    comment : str
        Meaning, unit and sign.
    """

    name: str
    type: str
    alias: str
    comment: str


@dataclass(frozen=True)
class LayerSpec:
    """One output layer.

    Parameters
    ----------
    name : str
        Table name in the GeoPackage.
    geometry : str or None
        ``Point``, ``PointZ``, ``LineString``, ``LineStringZ``, or None for a table.
    fields : tuple of FieldSpec
    title, abstract : str
        For the layer metadata.
    """

    name: str
    geometry: Optional[str]
    fields: tuple
    title: str
    abstract: str

    @property
    def names(self):
        """Names of the fields in order."""
        return tuple(f.name for f in self.fields)


def _text(name, alias, comment):
    return FieldSpec(name, "text", alias, comment)


def _real(name, alias, comment):
    return FieldSpec(name, "real", alias, comment)


def _integer(name, alias, comment):
    return FieldSpec(name, "integer", alias, comment)


_UNIT = "study's length unit"
_UP = f"elevation, up positive, {_UNIT}"
_AZIMUTH = "degrees clockwise from grid north, 0 to 360"

_STAMP = (
    _text(
        "run_id",
        "Run",
        "Name of the run that wrote this row; the same inputs give the same name.",
    ),
    _text("study", "Study", "Name of the study."),
    _text("fault", "Fault", "Name of the fault."),
)
_SECTION = _text("section_id", "Section", "Name of the section.")
_TRACE = _text(
    "trace_id",
    "Trace",
    "Fault, section, horizon, method and shear angle of the predicted trace.",
)
_HORIZON = _text("horizon", "Horizon", "Name of the horizon.")
_X = _real(
    "x",
    "x along transport",
    "Distance along the transport azimuth from the footwall end of the section, "
    f"growing into the hanging wall, {_UNIT}.",
)
_DISTANCE = _real(
    "distance",
    "Distance along line",
    f"Distance along the drawn section line from its first vertex, {_UNIT}.",
)
_HEAVE = _real(
    "heave",
    "Heave",
    "Horizontal separation of the cut-offs along transport, positive for a normal "
    f"fault, negative for reverse separation, {_UNIT}.",
)
_APPARENT_HEAVE = _real(
    "apparent_heave",
    "Apparent heave",
    f"Heave measured along the drawn section line, signed as heave, {_UNIT}.",
)
_THROW = _real(
    "throw",
    "Throw",
    "Vertical separation of the cut-offs, positive down to the hanging wall, "
    f"{_UNIT}; null in time.",
)
_OBLIQUITY = _real(
    "obliquity",
    "Obliquity",
    "Largest angle between a leg of the section and the transport azimuth, degrees.",
)
_HW_AZIMUTH = _real(
    "hw_azimuth",
    "Azimuth to hanging wall",
    f"Azimuth that points into the hanging wall, {_AZIMUTH}.",
)
_WARNINGS = _text("warnings", "Warnings", "What is doubtful, one sentence a line.")
_DIGEST = _text(
    "inputs_digest",
    "Inputs digest",
    "SHA-256 over every value read, declared and set.",
)
_TOOL = _text("tool_version", "Tool version", "Version of Heaveline.")
_MADE = _text("made_at", "Made at", "Time of the run, ISO 8601, UTC.")
_SHEAR = _real(
    "shear_angle",
    "Shear angle",
    "Degrees from the vertical, positive antithetic, negative synthetic, 0 = "
    "vertical shear.",
)
_REGIONAL_DIP = _real(
    "regional_dip",
    "Regional dip",
    "Dip of the regional in degrees, positive down towards the hanging wall.",
)

_SECTION_LINES = LayerSpec(
    "section_lines",
    "LineString",
    (
        *_STAMP,
        _SECTION,
        _real("azimuth", "Azimuth", f"From first to last vertex, {_AZIMUTH}."),
        _real(
            "transport_azimuth",
            "Transport azimuth",
            f"From the footwall into the hanging wall, {_AZIMUTH}.",
        ),
        _HW_AZIMUTH,
        _OBLIQUITY,
        _real("length", "Length", f"Length of the drawn line, {_UNIT}."),
        _text(
            "status",
            "Status",
            "'solved', 'not solved', or empty where nothing was constructed.",
        ),
        _text("reason", "Reason", "Why the section was not solved."),
        _WARNINGS,
    ),
    "Section lines",
    "Lines along which sections were drawn, and what became of each section.",
)


def _pick_fields(*vertical):
    return (
        *_STAMP,
        _SECTION,
        _X,
        _DISTANCE,
        _text("kind", "Kind", "'horizon', 'fault', 'cutoff' or 'dip'."),
        _text("name", "Name", "Name of the horizon or fault picked."),
        _text("wall", "Wall", "'footwall' or 'hanging wall'; empty where not told."),
        _real(
            "off_section",
            "Off section",
            "Distance along strike the pick was brought in from, positive to the "
            f"right of transport, {_UNIT}.",
        ),
        _real(
            "dip",
            "Apparent dip",
            "Degrees along transport, positive down towards the hanging wall; null "
            "where none was given.",
        ),
        *vertical,
        _real("sigma_x", "Sigma x", f"One standard deviation of x, {_UNIT}."),
        _real(
            "correlation",
            "Correlation length",
            "Length over which the errors of neighbouring picks of the source go "
            f"together, {_UNIT}; 0 where they are independent.",
        ),
        FieldSpec(
            "used", "boolean", "Used", "Whether the pick enters the construction."
        ),
        _text("reason", "Reason", "Why the pick is left out."),
        _text("source_layer", "Source layer", "Layer the pick came from."),
        _integer(
            "source_fid",
            "Source feature",
            "Feature the pick came from; null for a grid.",
        ),
        _text("source", "Source key", "Key of the source in the study."),
    )


_PICKS = LayerSpec(
    "picks",
    "PointZ",
    _pick_fields(
        _real("sigma_z", "Sigma z", f"One standard deviation of z, {_UNIT}."),
    ),
    "Picks in depth",
    f"Picks brought to the section lines; Z is {_UP}. A pick whose elevation is "
    "unknown has no geometry, and its reason says why.",
)

_PICKS_TIME = LayerSpec(
    "picks_time",
    "Point",
    _pick_fields(
        _real("twt_ms", "Two-way time", "Two-way time in ms, positive down."),
        _real("sigma_twt", "Sigma time", "One standard deviation of the time, ms."),
    ),
    "Picks in time",
    "Picks in two-way time on the section lines. They enter no construction before "
    "they are converted to depth.",
)

_SHARE = (
    "alone, as one standard deviation of z at the deepest point of the trace, "
    f"{_UNIT}; null where none was stated. What an assumed piece of the fault adds is "
    "in none of these shares."
)
_TRUST = (
    _real(
        "trusted_x",
        "Trusted to x",
        f"Last x along transport that is trusted, {_UNIT}; null where none is.",
    ),
    _real("trusted_z", "Trusted to z", f"The fault there; {_UP}."),
    _text(
        "trusted_until",
        "Trust ends because",
        "The 80 % band is wider than 15 % of the depth below the regional, or six "
        "strips without a deep tie; null where the whole trace is trusted.",
    ),
    _real("sigma_picks", "Sigma from picks", f"Noise of the bed's picks {_SHARE}"),
    _real(
        "sigma_known_fault",
        "Sigma from known fault",
        f"Error of the known piece of the fault {_SHARE}",
    ),
    _real(
        "sigma_regional",
        "Sigma from regional",
        f"Level and dip of the regional, which count in every strip, {_SHARE}",
    ),
    _real("sigma_cutoffs", "Sigma from cut-offs", f"Both cut-offs {_SHARE}"),
    _real("sigma_shear_angle", "Sigma from shear angle", f"Shear angle {_SHARE}"),
)

_PREDICTED_FAULT_TRACES = LayerSpec(
    "predicted_fault_traces",
    "LineStringZ",
    (
        *_STAMP,
        _TRACE,
        _SECTION,
        _HORIZON,
        _text("method", "Method", "Kinematic model."),
        _text("solver", "Solver", "'march' or 'fit'."),
        _SHEAR,
        _HEAVE,
        _APPARENT_HEAVE,
        _THROW,
        _real(
            "displacement",
            "Displacement",
            f"Straight distance between the cut-offs in the section, {_UNIT}.",
        ),
        _real(
            "regional_z",
            "Regional z",
            f"Regional at the footwall cut-off; {_UP}.",
        ),
        _REGIONAL_DIP,
        _real(
            "detachment_z",
            "Detachment z",
            f"Level the fault flattens into, null where none is reached; {_UP}.",
        ),
        _OBLIQUITY,
        _HW_AZIMUTH,
        _real("z_top", "Top z", f"Highest point of the trace; {_UP}."),
        _real("z_base", "Base z", f"Lowest point of the trace; {_UP}."),
        _text("band", "Band", "'best', 'shallow', 'mid' or 'deep'."),
        _real(
            "location_confidence",
            "Location confidence",
            "Largest horizontal half-width of the shallow-deep band, "
            f"{_UNIT}; null without a band.",
        ),
        _text("fault_type_uri", "Fault type", "CGI vocabulary of fault types."),
        _text(
            "movement_type_uri",
            "Movement type",
            "CGI vocabulary of fault movement types.",
        ),
        *_TRUST,
        _text("length_unit", "Length unit", "Unit of lengths and z: m, ft or us-ft."),
        _text("vertical_datum", "Vertical datum", "What elevations are counted from."),
        _WARNINGS,
        _DIGEST,
        _TOOL,
        _MADE,
    ),
    "Predicted fault traces",
    f"The fault in each section, from the footwall end down dip; Z is {_UP}. Where "
    "the trace was known, assumed or predicted is told by the fault points.",
)

_FAULT_POINTS = LayerSpec(
    "fault_points",
    "PointZ",
    (
        *_STAMP,
        _TRACE,
        _SECTION,
        _X,
        _DISTANCE,
        _real("z", "z", f"Fault; {_UP}."),
        _real(
            "dip",
            "Dip",
            "Degrees in the section, positive down towards the hanging wall.",
        ),
        _integer(
            "strip",
            "Strip",
            "0 down to the hanging-wall cut-off, then the number of the strip.",
        ),
        _real("sigma_z", "Sigma z", f"One standard deviation of z, {_UNIT}."),
        _real("z_shallow", "z shallow", f"10 % chance of a shallower fault; {_UP}."),
        _real("z_mid", "z mid", f"Even odds; {_UP}."),
        _real("z_deep", "z deep", f"10 % chance of a deeper fault; {_UP}."),
        _text(
            "constrained",
            "Constrained",
            "'known', 'assumed', 'predicted' or 'out of reach'.",
        ),
    ),
    "Fault points",
    f"Points along each predicted fault trace with dip, strip and sigma; Z is {_UP}.",
)

_CUTOFFS = LayerSpec(
    "cutoffs",
    "PointZ",
    (
        *_STAMP,
        _TRACE,
        _SECTION,
        _HORIZON,
        _text("wall", "Wall", "'footwall' or 'hanging wall'."),
        _X,
        _DISTANCE,
        _HEAVE,
        _APPARENT_HEAVE,
        _THROW,
        _real(
            "throw_ms",
            "Throw in time",
            "Vertical separation in ms of two-way time, positive down to the hanging "
            "wall; null in depth.",
        ),
        _real(
            "twt_ms",
            "Two-way time",
            "Cut-off in two-way time, ms, positive down; null in depth.",
        ),
        _real(
            "level_difference",
            "Level difference",
            "Vertical separation at the middle of the gap from straight fits to both "
            f"blocks, positive down to the hanging wall; {_UNIT}, or ms in time.",
        ),
        _real("sigma_x", "Sigma x", f"One standard deviation of x, {_UNIT}."),
        _real(
            "sigma_z",
            "Sigma z",
            f"One standard deviation of z, {_UNIT}, or ms in time.",
        ),
        _text("how", "How", "'given', or how the horizon was carried to the fault."),
        _text("domain", "Domain", "'depth' or 'time'."),
        _WARNINGS,
    ),
    "Cut-offs",
    "Where each horizon meets the fault, with heave and throw on both walls' points; "
    f"Z is {_UP}. Cut-offs in two-way time have no geometry, since time is no Z.",
)

_PREDICTED_HORIZONS = LayerSpec(
    "predicted_horizons",
    "LineStringZ",
    (
        *_STAMP,
        _TRACE,
        _SECTION,
        _HORIZON,
        _real(
            "regional_z",
            "Regional z",
            f"Regional at the footwall cut-off of this horizon; {_UP}.",
        ),
        _REGIONAL_DIP,
        _HEAVE,
        _THROW,
        _real(
            "misfit_rms",
            "Misfit rms",
            f"Of picks of this horizon that made no fault, {_UNIT}; null without.",
        ),
        _real(
            "misfit_max",
            "Misfit max",
            f"Largest misfit of such a pick, {_UNIT}; null without.",
        ),
        _integer("misfit_n", "Misfit picks", "Number of picks compared."),
        _text("misfit_note", "Misfit note", "What the misfit says and does not say."),
    ),
    "Predicted horizons",
    f"Hanging-wall horizons predicted from the fault; Z is {_UP}.",
)

_MARCH_TABLE = LayerSpec(
    "march_table",
    None,
    (
        *_STAMP,
        _TRACE,
        _SECTION,
        _integer("strip", "Strip", "Number of the strip."),
        _X,
        _real("u", "u", f"Place of the column along the shear planes, {_UNIT}."),
        _real("bed", "Bed B", f"Horizon at the column; {_UP}."),
        _real("regional", "Regional R", f"Regional one heave inwards; {_UP}."),
        _real("increment", "Increment B - R", f"Their difference, {_UNIT}."),
        _real(
            "fault_z",
            "Fault F",
            f"Fault one heave inwards plus the increment; {_UP}.",
        ),
    ),
    "March table",
    "The construction one row per strip, to be checked by hand.",
)

_INPUT_STATEMENT = LayerSpec(
    "input_statement",
    None,
    (
        *_STAMP,
        _text("source", "Source key", "Key of the source in the study."),
        _text("layer", "Layer", "Name of the layer."),
        _text("role", "Role", "What the layer was declared to be."),
        _text("name", "Name", "Name of the horizon or fault."),
        _text("conversion", "Conversion", "How its values became elevations."),
        _integer("count_in", "Came in", "Features read; for a grid, samples taken."),
        _integer("count_refused", "Refused", "Features or samples refused."),
        _text("refused", "Refused because", "Number refused, by reason."),
        _integer("picks", "Picks", "Picks made on the sections."),
        _integer("used", "Used", "Picks that enter the construction."),
        _integer("count_left_out", "Left out", "Picks left out."),
        _text("left_out", "Left out because", "Number left out, by reason."),
        _real("raw_min", "Least raw value", "Before conversion, in the layer's unit."),
        _real("raw_max", "Largest raw value", "Before conversion, as above."),
        _real(
            "z_min",
            "Least z",
            f"After conversion; {_UP}, or minus two-way time in ms.",
        ),
        _real("z_max", "Largest z", "After conversion, as above."),
    ),
    "Input statement",
    "What came in, how it was converted, and what became of it, one row a source.",
)

_METHOD_COMPARISON = LayerSpec(
    "method_comparison",
    None,
    (
        *_STAMP,
        _SECTION,
        _text("method", "Method", "Kinematic model, or 'straight fault'."),
        _text("solver", "Solver", "'march' or 'fit'; null for the straight fault."),
        _SHEAR,
        _HEAVE,
        _THROW,
        _real(
            "detachment_z",
            "Detachment z",
            f"Level the fault flattens into, null where none is reached; {_UP}.",
        ),
        _real(
            "deepest_z",
            "Deepest z",
            f"Where the data end: the fault goes at least this deep; {_UP}.",
        ),
        _real("dip", "Dip", "Dip of the straight fault in degrees; null for others."),
        _real(
            "misfit_rms",
            "Misfit rms",
            "Of the bed's picks, in units of their standard deviation; for the "
            "straight fault that of regional and cut-offs is counted too. Null for "
            "the march, which reproduces its bed by definition.",
        ),
        _real(
            "spread_max",
            "Largest spread",
            "Deepest less shallowest fault of all constructions of the section, where "
            f"that is largest in their common reach, {_UNIT}; the same in all its "
            "rows, null with fewer than two.",
        ),
        _real(
            "log_ratio",
            "Log likelihood ratio",
            "Twice the log of the likelihood of a smooth curve over that of a "
            "straight fault; 10 and more is very strong evidence for a curve. Null "
            "without scipy.",
        ),
        _text("verdict", "Verdict", "'curved', 'straight' or 'not resolved'."),
        _text("text", "Evidence", "For and against a straight fault, in words."),
        _text("status", "Status", "'solved' or 'not solved'."),
        _text("reason", "Reason", "Why it was not solved."),
    ),
    "Comparison of methods",
    "Each section by several constructions, the study's own first, and by a straight "
    "fault through its cut-offs, one row each.",
)

_AREA = "square of the study's length unit"

_BALANCE = LayerSpec(
    "balance",
    None,
    (
        *_STAMP,
        _SECTION,
        _text(
            "horizon",
            "Horizon",
            "Name of the horizon, or 'all pre-growth horizons' for the line of area "
            "against regional through several of them.",
        ),
        _real(
            "lost_area",
            "Lost area",
            "Between regional and fault from cut-off to cut-off, and between regional "
            f"and bed beyond, to one shear line for all horizons, {_AREA}.",
        ),
        _real(
            "lost_area_sigma",
            "Sigma of lost area",
            f"One standard deviation of it, {_AREA}.",
        ),
        _real(
            "gap_area",
            "Gap above the fault",
            f"Part of it from cut-off to cut-off, {_AREA}.",
        ),
        _real(
            "oblique_heave",
            "Oblique heave",
            "Heave + throw tan(shear angle) of the horizon's own cut-offs; for all "
            f"horizons the slope of their line, {_UNIT}.",
        ),
        _real(
            "area_detachment_z",
            "Detachment z from area",
            "Regional less area over oblique heave: the fault's mean elevation under "
            "the last strip, and the detachment only where the area has levelled "
            f"off; {_UP}.",
        ),
        _real(
            "area_detachment_sigma",
            "Sigma of detachment from area",
            f"One standard deviation of it, {_UNIT}.",
        ),
        _real(
            "area_detachment_low",
            "Detachment from area, low",
            f"Lower end of the 90 % interval from several horizons; {_UP}.",
        ),
        _real(
            "area_detachment_high",
            "Detachment from area, high",
            f"Upper end of that interval; {_UP}.",
        ),
        _real(
            "construction_detachment_z",
            "Detachment z of the construction",
            "Level the construction flattens into, null where none is reached; for all "
            f"horizons its mean under the same last strip; {_UP}.",
        ),
        _text(
            "convergence",
            "Convergence",
            "Whether area over oblique heave has levelled off towards the end of the "
            "picks.",
        ),
        _real(
            "unfolded_length",
            "Unfolded length",
            f"Length of the bed now, between its first and last point, {_UNIT}.",
        ),
        _real(
            "length_before",
            "Length before",
            f"Length of the regional it came from, {_UNIT}.",
        ),
        _real(
            "strain",
            "Strain",
            "Change of length over the length before, positive where the bed "
            "lengthened.",
        ),
        _text("status", "Status", "'balanced' or 'not balanced'."),
        _text("reason", "Reason", "Why there is no balance, or no restored length."),
        _text("note", "Note", "What the numbers are worth as a test, in words."),
    ),
    "Balance",
    "Lost area, the detachment it gives beside that of the construction, and restored "
    "lengths, one row a horizon. The area of one horizon is no independent test.",
)

_SUBSIDIARY_FAULTS = LayerSpec(
    "subsidiary_faults",
    None,
    (
        *_STAMP,
        _SECTION,
        _text("name", "Subsidiary fault", "Name of the subsidiary fault."),
        _text("horizon", "Horizon", "Name of the horizon that it cuts."),
        _text(
            "sense",
            "Sense",
            "'antithetic' where it dips towards the master fault, else 'synthetic'.",
        ),
        _real("dip", "Dip", "Of the line through its picks, degrees from level."),
        _real(
            "heave",
            "Heave",
            "Horizontal separation of the horizon on it along transport, positive for "
            f"a normal fault, {_UNIT}.",
        ),
        _real(
            "throw",
            "Throw",
            "Vertical separation of the horizon on it, positive for a normal fault, "
            f"{_UNIT}.",
        ),
        _real(
            "added_heave",
            "Added oblique heave",
            "What the block beyond it moved more than the block on the master's side, "
            f"heave - throw tan(shear angle) where antithetic, else +, {_UNIT}.",
        ),
        _real(
            "sigma_added_heave",
            "Sigma of added heave",
            f"One standard deviation of it, {_UNIT}.",
        ),
        _real(
            "share",
            "Share of extension",
            "Added oblique heave over the oblique heave of the outermost block, as a "
            "fraction.",
        ),
        _real(
            "branch_x",
            "x of branch point",
            "Where it meets the predicted master fault, distance along transport from "
            f"the footwall end of the section, {_UNIT}; null where it does not.",
        ),
        _real("branch_z", "z of branch point", f"Elevation there; {_UP}."),
        _real(
            "shadow_from_x",
            "Shadow from x",
            "The horizon says nothing of the master fault from here, where the shear "
            f"line at the shadow's edge meets it, x along transport, {_UNIT}; null "
            "where that lies beyond the predicted trace.",
        ),
        _real(
            "shadow_to_x",
            "Shadow to x",
            f"To here, on the master fault as before, {_UNIT}.",
        ),
    ),
    "Subsidiary faults",
    "Faults of the hanging wall that cut the horizon, what each adds to the heave and "
    "where it hides the master fault, one row a section and fault.",
)

_GROWTH_HISTORY = LayerSpec(
    "growth_history",
    None,
    (
        *_STAMP,
        _SECTION,
        _HORIZON,
        _real(
            "heave",
            "Heave since",
            "Horizontal separation of its cut-offs along transport: all the fault "
            f"moved since it was laid down, {_UNIT}.",
        ),
        _real(
            "throw",
            "Throw since",
            "Vertical separation of its cut-offs, positive down to the hanging wall, "
            f"{_UNIT}.",
        ),
        _real(
            "oblique_heave",
            "Oblique heave since",
            "Heave + throw tan(shear angle); horizons older than the fault share it, "
            f"{_UNIT}.",
        ),
        _real(
            "sigma_heave",
            "Sigma of heave",
            f"One standard deviation, from those of the cut-offs, {_UNIT}.",
        ),
        _real(
            "sigma_throw",
            "Sigma of throw",
            f"One standard deviation, from those of the cut-offs, {_UNIT}.",
        ),
        _real(
            "heave_before",
            "Heave before",
            "What the fault moved between the next older horizon and this one; null "
            f"for the oldest, {_UNIT}.",
        ),
        _real(
            "throw_before",
            "Throw before",
            f"As the heave before; null for the oldest, {_UNIT}.",
        ),
        _text(
            "interval",
            "Interval",
            "From this horizon to the next older one; null for the oldest.",
        ),
        _real(
            "expansion_index",
            "Expansion index",
            "Thickness of the interval along the shear lines in the hanging wall over "
            "that in the footwall, at the fault; 1 for strata older than the fault, "
            "more for growth strata. A wrong shear angle changes it.",
        ),
        _real(
            "sigma_expansion",
            "Sigma of expansion index",
            "One standard deviation of the index, from the picks only.",
        ),
        FieldSpec(
            "is_growth",
            "boolean",
            "Growth",
            "Whether the interval thickens by more than its error; null where it "
            "could not be measured.",
        ),
        _text("note", "Note", "Why there is no index, or what growth means here."),
    ),
    "Growth history",
    "What the fault moved since each horizon was laid down, and how much thicker the "
    "interval below it is in the hanging wall, from the oldest horizon to the "
    "youngest; where two horizons or more were measured in depth.",
)

_WAY = _text(
    "way",
    "Way",
    "'horizons': several horizons, one fault; 'ties': deep points on the fault; "
    "'cut-offs': heave against throw of pre-growth horizons; 'area': known detachment "
    "and lost area.",
)
_SECTION_OR_ALL = _text(
    "section_id", "Section", "Name of the section; null for all sections together."
)

_SHEAR_ANGLE = LayerSpec(
    "shear_angle",
    None,
    (
        *_STAMP,
        _SECTION_OR_ALL,
        _WAY,
        _real(
            "best",
            "Best angle",
            "Shear angle of least misfit, degrees from the vertical, positive "
            "antithetic; null where no angle can be told at all.",
        ),
        _real("low", "Low", "Lower end of the 90 % interval, degrees."),
        _real("high", "High", "Upper end of the 90 % interval, degrees."),
        _real("sigma", "Sigma", "One standard deviation of the angle, degrees."),
        FieldSpec(
            "resolved",
            "boolean",
            "Resolved",
            "Whether the data tell the angle; where not, the text says why.",
        ),
        _real("chi2", "Chi-square", "Least misfit of the data, in units of errors."),
        _real("freedom", "Degrees of freedom", "Of chi-square."),
        _text("horizons", "Horizons", "Horizons used, separated by semicolons."),
        _text("text", "Text", "What the data say, in words."),
        _WARNINGS,
    ),
    "Shear angle",
    "The shear angle told by the data, one row a section and way, with its interval; "
    "rows without a section are those of all sections together.",
)

_SHEAR_MISFIT = LayerSpec(
    "shear_misfit",
    None,
    (
        *_STAMP,
        _SECTION_OR_ALL,
        _WAY,
        _real("angle", "Angle", "Shear angle tried, degrees."),
        _real(
            "chi2",
            "Chi-square",
            "Misfit at that angle; null where the construction has no solution. Twice "
            "the log likelihood ratio of two angles is its difference.",
        ),
    ),
    "Misfit of shear angles",
    "The misfit curves behind the table of shear angles, one row an angle tried.",
)

_RUNS = LayerSpec(
    "runs",
    None,
    (
        *_STAMP,
        _text("study_json", "Study document", "The whole recipe as JSON."),
        _text("parameters", "Parameters", "Construction settings as JSON."),
        _text("versions", "Versions", "Versions of the programs used, as JSON."),
        _DIGEST,
        _TOOL,
        _MADE,
        _real(
            "transport_azimuth",
            "Transport azimuth",
            f"From the footwall into the hanging wall, {_AZIMUTH}.",
        ),
        _text("transport_from", "Transport from", "What the azimuth comes from."),
        _integer("sections", "Sections", "Section lines that came in."),
        _integer("solved", "Solved", "Sections whose fault was predicted."),
        _text("counts", "Counts", "Rows written to each layer, as JSON."),
        _WARNINGS,
    ),
    "Runs",
    "One row per run: recipe, versions, digest, time and counts.",
)

#: Every output layer by its name, in the order in which they are written.
LAYERS = {
    spec.name: spec
    for spec in (
        _SECTION_LINES,
        _PICKS,
        _PICKS_TIME,
        _PREDICTED_FAULT_TRACES,
        _FAULT_POINTS,
        _CUTOFFS,
        _PREDICTED_HORIZONS,
        _MARCH_TABLE,
        _METHOD_COMPARISON,
        _BALANCE,
        _SUBSIDIARY_FAULTS,
        _GROWTH_HISTORY,
        _SHEAR_ANGLE,
        _SHEAR_MISFIT,
        _INPUT_STATEMENT,
        _RUNS,
    )
}

#: Tables that are written only where the study asks for what they hold, where its
#: sections have subsidiary faults or several horizons, or by a calibration.
ON_REQUEST = (
    _METHOD_COMPARISON.name,
    _BALANCE.name,
    _SUBSIDIARY_FAULTS.name,
    _GROWTH_HISTORY.name,
    _SHEAR_ANGLE.name,
    _SHEAR_MISFIT.name,
)


@dataclass(frozen=True, eq=False)
class Table:
    """Rows of one output layer.

    Parameters
    ----------
    name : str
        Key of `LAYERS`.
    rows : list of tuple (coordinates, values)
        Coordinates are None, (2,) or (3,) for a point, (n, 2) or (n, 3) for a line;
        values a dict by field name. What is not given, None or NaN is written null.
    """

    name: str
    rows: list

    @property
    def spec(self):
        """The layer's declaration."""
        return LAYERS[self.name]

    def __len__(self):
        return len(self.rows)
