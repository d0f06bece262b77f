"""Every parameter of the algorithms, declared once, and its Processing definition.

Labels, help, defaults and bounds stand here and nowhere else; algorithms, help pages
and later the forms take them from here. What an entry of a study means is said in
``geomcore.recipe`` and ``geomcore.sources``.
"""

from dataclasses import dataclass, replace
from typing import Any, Optional

from qgis.core import (
    Qgis,
    QgsProcessingParameterBoolean,
    QgsProcessingParameterCrs,
    QgsProcessingParameterEnum,
    QgsProcessingParameterExtent,
    QgsProcessingParameterFeatureSource,
    QgsProcessingParameterField,
    QgsProcessingParameterFile,
    QgsProcessingParameterFileDestination,
    QgsProcessingParameterFolderDestination,
    QgsProcessingParameterMapLayer,
    QgsProcessingParameterNumber,
    QgsProcessingParameterRasterLayer,
    QgsProcessingParameterString,
)
from qgis.PyQt.QtCore import QCoreApplication

__all__ = ["PARAMETERS", "Parameter", "declared", "make", "tr"]


def tr(text):
    """Translate a text that the user reads."""
    return QCoreApplication.translate("Heaveline", text)


@dataclass(frozen=True)
class Parameter:
    """What a parameter is, once for toolbox, forms, help and checks.

    Parameters
    ----------
    key : str
        Name in scripts and on the command line; never renamed.
    kind : str
        One of the keys of `FACTORIES`.
    label : str
        What the form shows, as a phrase.
    help : str
        What it means, its sign, and what happens without it.
    unit : str
        Unit of the value, added to the label.
    default : object, optional
    least, most : float, optional
        Bounds, both allowed themselves.
    choices : tuple of str
        Allowed values of a choice; the model list comes from the core.
    parent : str
        Key of the layer that a field belongs to.
    optional, advanced : bool
    """

    key: str
    kind: str
    label: str
    help: str
    unit: str = ""
    default: Any = None
    least: Optional[float] = None
    most: Optional[float] = None
    choices: tuple = ()
    parent: str = ""
    optional: bool = False
    advanced: bool = False

    @property
    def full_label(self):
        """Label with its unit."""
        return f"{tr(self.label)} ({tr(self.unit)})" if self.unit else tr(self.label)


_LENGTH = "units of the study CRS"
_DEGREES = "degrees"
_SIMPLE = " Leave it empty where SOURCES says it all."

_DECLARED = (
    # ---- sections and their direction ---------------------------------------------
    Parameter(
        "SECTIONS",
        "lines",
        "Section lines",
        "One section per line, two or more vertices, drawn in either direction. Each "
        "has to cross the fault once and to go the same way throughout.",
    ),
    Parameter(
        "SECTION_ID",
        "field",
        "Field with the name of the section",
        "Without it the field section_id is taken where the layer has one, else the "
        "feature id.",
        parent="SECTIONS",
        optional=True,
    ),
    Parameter(
        "SPACING",
        "length",
        "Distance between sections",
        "Measured along strike. Give this or the number of sections, not both.",
        unit=_LENGTH,
        least=0.0,
        optional=True,
    ),
    Parameter(
        "COUNT",
        "count",
        "Number of sections",
        "They split the fault trace into equal pieces. Give this or the distance, not "
        "both.",
        least=1,
        most=1000,
        optional=True,
    ),
    Parameter(
        "LENGTH_FOOTWALL",
        "length",
        "Length into the footwall",
        "From the fault trace against transport. Long enough to see the horizon away "
        "from the fault, since the regional is fitted there.",
        unit=_LENGTH,
        default=2000.0,
        least=0.0,
    ),
    Parameter(
        "LENGTH_HANGING_WALL",
        "length",
        "Length into the hanging wall",
        "From the fault trace along transport. Long enough to see the horizon back at "
        "its regional level, else the detachment is not reached.",
        unit=_LENGTH,
        default=8000.0,
        least=0.0,
    ),
    Parameter(
        "EXTENT",
        "extent",
        "Clip the lines to this extent",
        "Lines are cut at its edges; a line outside is left out.",
        optional=True,
    ),
    Parameter(
        "TRANSPORT_AZIMUTH",
        "angle",
        "Transport azimuth",
        "Direction in which the hanging wall moved, clockwise from grid north, from "
        "the footwall into the hanging wall. Without it the normal to the mean strike "
        "of the fault trace is taken, on the side told below.",
        unit=_DEGREES,
        least=-360.0,
        most=360.0,
        optional=True,
    ),
    Parameter(
        "HW_SIDE",
        "text",
        "Side of the hanging wall",
        "A compass point such as SE, or an azimuth, that points from the fault into "
        "the hanging wall. Not needed where the transport azimuth is given or the "
        "fault has dip directions.",
        optional=True,
    ),
    Parameter(
        "CRS",
        "crs",
        "CRS of the study",
        "A projected CRS in metres or feet; all lengths, elevations and results are in "
        "its unit. Without it that of the first layer is taken. Geographic CRS and Web "
        "Mercator are refused, since lengths in them are not lengths on the ground.",
        optional=True,
    ),
    # ---- the fault ----------------------------------------------------------------
    Parameter(
        "FAULT",
        "text",
        "Name of the fault",
        "Written to every result.",
        default="fault",
    ),
    Parameter(
        "FAULT_TRACE",
        "lines",
        "Fault trace",
        "The fault at the surface as lines.",
    ),
    Parameter(
        "FAULT_TRACE_Z",
        "choice",
        "Elevation of the fault trace from",
        "geometry: Z of its vertices; field: an attribute; raster: an elevation "
        "model; constant: one value. It is an elevation, up positive, in the vertical "
        "unit and against the vertical datum given here.",
        default="geometry",
        choices=("geometry", "field", "raster", "constant"),
    ),
    Parameter(
        "FAULT_TRACE_Z_FIELD",
        "field",
        "Elevation field of the fault trace",
        "Needed where the elevation comes from a field.",
        parent="FAULT_TRACE",
        optional=True,
    ),
    Parameter(
        "FAULT_TRACE_Z_RASTER",
        "raster",
        "Elevation model under the fault trace",
        "Needed where the elevation comes from a raster; sampled where a section "
        "crosses the trace.",
        optional=True,
    ),
    Parameter(
        "FAULT_TRACE_Z_VALUE",
        "number",
        "Elevation of the fault trace",
        "Needed where the elevation is a constant.",
        optional=True,
    ),
    Parameter(
        "DIP_FIELD",
        "field",
        "Dip field of the fault trace",
        "True dip of the fault in degrees. Where the fault is known at the surface "
        "only, it is carried down at this dip and marked as assumed.",
        parent="FAULT_TRACE",
        optional=True,
    ),
    Parameter(
        "DIP_AZIMUTH_FIELD",
        "field",
        "Dip direction field of the fault trace",
        "Azimuth the fault dips to, in degrees.",
        parent="FAULT_TRACE",
        optional=True,
    ),
    Parameter(
        "AZIMUTH_NORTH",
        "choice",
        "Dip directions are measured from",
        "grid, true or magnetic north; turned into grid azimuths by the meridian "
        "convergence of the study CRS and the declination.",
        default="grid",
        choices=("grid", "true", "magnetic"),
    ),
    Parameter(
        "DECLINATION",
        "angle",
        "Magnetic declination",
        "East positive; used for magnetic dip directions only.",
        unit=_DEGREES,
        default=0.0,
        least=-180.0,
        most=180.0,
        advanced=True,
    ),
    Parameter(
        "FAULT_PICKS",
        "points or lines",
        "Fault picks at depth",
        "Points or lines on the fault below the surface, from seismic sections, wells "
        "or contours. The fault is honoured where it is known down to the "
        "hanging-wall cut-off.",
        optional=True,
    ),
    Parameter(
        "FAULT_PICKS_FIELD",
        "field",
        "Elevation field of the fault picks",
        "Without it the Z of the geometry is taken.",
        parent="FAULT_PICKS",
        optional=True,
    ),
    Parameter(
        "FAULT_SIGMA",
        "length",
        "Standard deviation of the fault picks",
        "One standard deviation of their elevation, in the vertical unit. Without it "
        "that of the horizon is taken.",
        unit="vertical unit",
        least=0.0,
        optional=True,
    ),
    # ---- the horizon --------------------------------------------------------------
    Parameter(
        "HORIZON_LAYER",
        "surface",
        "Horizon",
        "Structure contours, points, lines with Z, or a grid of one horizon that the "
        "fault cuts and that is older than the fault's movement." + _SIMPLE,
        optional=True,
    ),
    Parameter(
        "HORIZON_NAME",
        "text",
        "Name of the horizon",
        "Needed with a horizon layer. With SOURCES alone the first horizon is taken "
        "where levels have to tell the side of the hanging wall.",
        optional=True,
    ),
    Parameter(
        "ELEVATION_FIELD",
        "field",
        "Elevation field of the horizon",
        "Without it the Z of the geometry is taken; a grid needs none.",
        parent="HORIZON",
        optional=True,
    ),
    Parameter(
        "VERTICAL_UNIT",
        "choice",
        "Vertical unit of the layers",
        "Unit of the elevations or depths in the layers given above: metre, "
        "international foot or US survey foot. It has to be said; nothing is guessed.",
        choices=("m", "ft", "us-ft"),
        optional=True,
    ),
    Parameter(
        "VERTICAL_SIGN",
        "choice",
        "Vertical values count as",
        "elevation: up positive; depth: down positive. It has to be said for horizon "
        "and fault picks; nothing is guessed. Times need SOURCES.",
        choices=("elevation", "depth"),
        optional=True,
    ),
    Parameter(
        "VERTICAL_DATUM",
        "text",
        "Vertical datum",
        "Name of the level that elevations are counted from, for example mean sea "
        "level. It goes onto every result.",
        optional=True,
    ),
    Parameter(
        "SIGMA",
        "length",
        "Standard deviation of the horizon",
        "One standard deviation of its elevation, in the vertical unit.",
        unit="vertical unit",
        least=0.0,
        optional=True,
    ),
    # ---- any number of sources ----------------------------------------------------
    Parameter(
        "SOURCES",
        "long text",
        "Further sources (JSON)",
        "A list of source declarations as in a study's sources, or the path of a JSON "
        "file that holds such a list. Each says what the layer is (role, name), where "
        "it is (uri, relative to that file), its unit, sign, datum, domain, where z "
        "comes from, and its sigma.",
        optional=True,
    ),
    Parameter(
        "CORRIDOR",
        "length",
        "Half-width of the corridor",
        "Points are brought in along strike from this distance either side of a "
        "section.",
        unit=_LENGTH,
        default=500.0,
        least=0.0,
    ),
    Parameter(
        "FAULT_BUFFER",
        "length",
        "Leave out horizon picks this near to the fault",
        "They may be dragged or smeared; how many are left out is counted.",
        unit=_LENGTH,
        default=50.0,
        least=0.0,
    ),
    Parameter(
        "GRID_STEP",
        "length",
        "Distance between grid samples",
        "Along the section; the cell size of the grid if not given.",
        unit=_LENGTH,
        least=0.0,
        optional=True,
        advanced=True,
    ),
    # ---- construction -------------------------------------------------------------
    Parameter(
        "PICKS",
        "points",
        "Picks",
        "The layer picks as Pull Picks to Sections writes it, perhaps edited since: "
        "used = false leaves a pick out.",
    ),
    Parameter(
        "PICKS_TIME",
        "points",
        "Picks in time",
        "The layer picks_time, if separations in time are to be measured too. Times "
        "never enter the construction.",
        optional=True,
        advanced=True,
    ),
    Parameter(
        "HORIZON",
        "text",
        "Horizon whose rollover makes the fault",
        "Its name in the picks. It has to be older than the fault's movement.",
    ),
    Parameter(
        "MODEL",
        "model",
        "Kinematic model",
        "How the columns of the hanging wall moved.",
    ),
    Parameter(
        "SHEAR_ANGLE",
        "angle",
        "Shear angle",
        "From the vertical: positive antithetic, negative synthetic, 0 vertical "
        "shear. It often outweighs all errors of the picks: try a range. Of constant "
        "heave only; the other models take 0.",
        unit=_DEGREES,
        default=0.0,
        least=-45.0,
        most=60.0,
    ),
    Parameter(
        "SHEAR_ANGLE_SIGMA",
        "angle",
        "Standard deviation of the shear angle",
        "Goes into the stated sigma of the fault; 0 treats the angle as exact.",
        unit=_DEGREES,
        default=0.0,
        least=0.0,
        most=45.0,
    ),
    Parameter(
        "SOLVER",
        "solver",
        "Solver",
        "march: strip by strip outwards from the known piece of the fault, as one "
        "would by hand. fit: all picks of one or several horizons at once by least "
        "squares; needs scipy.",
    ),
    Parameter(
        "FIT_HORIZONS",
        "text",
        "Further horizons for the fit",
        "Names in the picks, separated by semicolons; each with its own cut-offs and "
        "regional. Of the fit only.",
        optional=True,
        advanced=True,
    ),
    Parameter(
        "ROBUST",
        "yes or no",
        "Give outlying picks less weight in the fit",
        "Picks that miss by more than twice their sigma count less. Of the fit only.",
        default=False,
        advanced=True,
    ),
    Parameter(
        "DETACHMENT_Z",
        "number",
        "Detachment level known from elsewhere",
        "Elevation, up positive; a soft constraint of the fit only.",
        unit=_LENGTH,
        optional=True,
        advanced=True,
    ),
    Parameter(
        "DETACHMENT_SIGMA",
        "length",
        "Standard deviation of the detachment level",
        "One standard deviation; used where a level is given.",
        unit=_LENGTH,
        default=50.0,
        least=0.0,
        advanced=True,
    ),
    Parameter(
        "REGIONAL_Z",
        "number",
        "Regional elevation at the footwall cut-off",
        "Elevation of the undisturbed horizon, up positive. Fitted to the footwall "
        "picks if not given.",
        unit=_LENGTH,
        optional=True,
    ),
    Parameter(
        "REGIONAL_DIP",
        "angle",
        "Regional dip",
        "Of the undisturbed horizon, positive down towards the hanging wall. Fitted "
        "if not given.",
        unit=_DEGREES,
        least=-60.0,
        most=60.0,
        optional=True,
    ),
    Parameter(
        "FOOTWALL_WITHIN",
        "length",
        "Fit the regional to footwall picks within",
        "Distance from the fault; all footwall picks if not given.",
        unit=_LENGTH,
        least=0.0,
        optional=True,
        advanced=True,
    ),
    Parameter(
        "FAR_FROM",
        "length",
        "Hanging wall is back at regional beyond",
        "Picks farther than this beyond the fault are judged undisturbed and are "
        "fitted too, moved back by the oblique heave. None if not given.",
        unit=_LENGTH,
        least=0.0,
        optional=True,
        advanced=True,
    ),
    Parameter(
        "SAMPLES_PER_STRIP",
        "count",
        "Samples in a strip",
        "How finely the march is sampled.",
        default=40,
        least=4,
        most=1000,
        advanced=True,
    ),
    Parameter(
        "SEPARATION_FROM",
        "length",
        "Measure the level difference from",
        "Straight lines are fitted on either side between this and the next distance "
        "from the cut-offs.",
        unit=_LENGTH,
        default=50.0,
        least=0.0,
        advanced=True,
    ),
    Parameter(
        "SEPARATION_TO",
        "length",
        "Measure the level difference to",
        "See the distance before.",
        unit=_LENGTH,
        default=500.0,
        least=0.0,
        advanced=True,
    ),
    Parameter(
        "COMPARE",
        "long text",
        "Compare with these constructions",
        "Each section is constructed by these too, and tested against a straight "
        "fault; the results go to the table method_comparison and a figure of their "
        "own. Kinematic model, shear angle and solver, separated by semicolons, such "
        "as: constant heave 0 march; constant heave 30 fit; constant slip. Without "
        "an angle 0 is taken, without a solver the march. Or a JSON list as a "
        "study's construction.compare.",
        optional=True,
        advanced=True,
    ),
    Parameter(
        "BALANCE",
        "yes or no",
        "Balance the sections",
        "Lost area of every horizon, the detachment it gives, and restored lengths go "
        "to the table balance. The area of one horizon is no independent test. Not "
        "for models that do not keep area; the table says so.",
        default=False,
        advanced=True,
    ),
    # ---- horizon from fault -------------------------------------------------------
    Parameter(
        "PREDICTED_TRACES",
        "lines",
        "Predicted fault traces",
        "The layer predicted_fault_traces as Predict Fault writes it.",
    ),
    Parameter(
        "HORIZONS",
        "text",
        "Horizons to predict",
        "Names, separated by semicolons.",
    ),
    Parameter(
        "OFFSET",
        "text",
        "Stratigraphic offsets",
        "Height of each horizon above the one that made the fault, negative below, in "
        "the study's unit, separated by semicolons. An empty place, or none at all, "
        "takes the horizon's own footwall picks.",
        optional=True,
    ),
    Parameter(
        "SLIP",
        "number",
        "Slip along lines parallel to the fault",
        "If given, the horizons are predicted by slip lines parallel to the fault with "
        "this slip, not by constant heave. Compare their misfits.",
        unit=_LENGTH,
        least=0.0,
        optional=True,
    ),
    # ---- calibration --------------------------------------------------------------
    Parameter(
        "CALIBRATION_HORIZONS",
        "text",
        "Horizons that tell the shear angle",
        "Names in the picks, separated by semicolons; growth horizons are meant too. "
        "Each has its own cut-offs and regional, and all have to belong to one fault.",
    ),
    Parameter(
        "PRE_GROWTH",
        "text",
        "Horizons older than the fault's movement",
        "Names, separated by semicolons. Their heave against throw tells the angle "
        "too; two at least are needed.",
        optional=True,
    ),
    # ---- study and outputs --------------------------------------------------------
    Parameter(
        "STUDY",
        "study file",
        "Study",
        "JSON document with the whole recipe: sources, sections, construction and "
        "outputs. Layers named in it are looked for relative to this file.",
    ),
    Parameter(
        "OUTPUT",
        "geopackage",
        "Results",
        "GeoPackage that takes the layers. It is written whole or not at all, and "
        "other layers in it are kept.",
    ),
    Parameter(
        "PLOTS",
        "folder",
        "Folder for section plots",
        "One figure per section as PNG, SVG and PDF, and one of its comparison where "
        "that is asked for. Needs matplotlib. None if not given.",
        optional=True,
    ),
    Parameter(
        "LOAD",
        "yes or no",
        "Add the result layers to the project",
        "Switch it off inside models.",
        default=True,
        advanced=True,
    ),
)

# Two tools may have a parameter of one fixed key that means different things: the
# name under which it is declared tells them apart, `KEYS` gives the fixed key.
_KEYS = {
    "HORIZON_LAYER": "HORIZON",
    "HORIZONS": "HORIZON",
    "CALIBRATION_HORIZONS": "HORIZON",
    "PREDICTED_TRACES": "FAULT_TRACE",
}

#: Every parameter by the name it is declared under.
PARAMETERS = {p.key: replace(p, key=_KEYS.get(p.key, p.key)) for p in _DECLARED}


def declared(name, **changes):
    """Give a declared parameter, changed where one algorithm needs it otherwise.

    Parameters
    ----------
    name : str
        Key in `PARAMETERS`.
    **changes
        Entries of `Parameter` to replace, for example ``optional=True``.
    """
    return replace(PARAMETERS[name], **changes)


# ---- Processing definitions --------------------------------------------------------

_LINE = Qgis.ProcessingSourceType.VectorLine
_POINT = Qgis.ProcessingSourceType.VectorPoint
_ANY = Qgis.ProcessingSourceType.VectorAnyGeometry
_RASTER = Qgis.ProcessingSourceType.Raster


def _source(types):
    def build(p):
        return QgsProcessingParameterFeatureSource(
            p.key, p.full_label, types, p.default, p.optional
        )

    return build


def _surface(p):
    return QgsProcessingParameterMapLayer(
        p.key, p.full_label, p.default, p.optional, [_ANY, _RASTER]
    )


def _raster(p):
    return QgsProcessingParameterRasterLayer(p.key, p.full_label, p.default, p.optional)


def _field(p):
    # of any type: numbers kept as text are read too, and counted where they are none
    any_type = Qgis.ProcessingFieldParameterDataType.Any
    return QgsProcessingParameterField(
        p.key, p.full_label, p.default, p.parent, any_type, False, p.optional
    )


def _text(multi_line):
    def build(p):
        return QgsProcessingParameterString(
            p.key, p.full_label, p.default, multi_line, p.optional
        )

    return build


def _number(number_type):
    def build(p):
        return QgsProcessingParameterNumber(
            p.key,
            p.full_label,
            number_type,
            p.default,
            p.optional,
            -1e12 if p.least is None else p.least,
            1e12 if p.most is None else p.most,
        )

    return build


def _choice(p):
    # the words themselves are the values, so that scripts can be read
    return QgsProcessingParameterEnum(
        p.key, p.full_label, list(p.choices), False, p.default, p.optional, True
    )


def _model(p):
    names = tuple(model.NAME for model in _models())
    return _choice(replace(p, choices=names, default=names[0] if names else None))


def _solver(p):
    try:
        from ..geomcore.recipe import SOLVERS
    except ImportError:  # as below
        SOLVERS = ()
    return _choice(replace(p, choices=SOLVERS, default=SOLVERS[0] if SOLVERS else None))


def _models():
    """Give the core's kinematic models; none where numpy is missing."""
    try:
        from ..geomcore.kinematics import MODELS
    except ImportError:  # the algorithm says so itself before it runs
        return ()
    return MODELS


def _help(p):
    """Help of a parameter; that of the model is completed from the core."""
    if p.kind != "model":
        return tr(p.help)
    each = (
        f"{tr(m.NAME)}: {tr(m.USE_WHEN)} {tr('Not where')}: {tr(m.NOT_WHEN)}"
        for m in _models()
    )
    return "\n".join([tr(p.help), *each])


def _crs(p):
    return QgsProcessingParameterCrs(p.key, p.full_label, p.default, p.optional)


def _extent(p):
    return QgsProcessingParameterExtent(p.key, p.full_label, p.default, p.optional)


def _yes_or_no(p):
    return QgsProcessingParameterBoolean(p.key, p.full_label, p.default, p.optional)


def _study_file(p):
    return QgsProcessingParameterFile(
        p.key,
        p.full_label,
        Qgis.ProcessingFileParameterBehavior.File,
        "json",
        p.default,
        p.optional,
    )


def _geopackage(p):
    definition = QgsProcessingParameterFileDestination(
        p.key,
        p.full_label,
        tr("GeoPackage files") + " (*.gpkg)",
        p.default,
        p.optional,
        not p.optional,
    )
    # other layers in the file are kept: "overwrite?" would be the wrong question
    definition.setMetadata({"widget_wrapper": {"dontconfirmoverwrite": True}})
    return definition


def _folder(p):
    return QgsProcessingParameterFolderDestination(
        p.key, p.full_label, p.default, p.optional, not p.optional
    )


_REAL = Qgis.ProcessingNumberParameterType.Double
_WHOLE = Qgis.ProcessingNumberParameterType.Integer

#: How each kind of parameter is made.
FACTORIES = {
    "lines": _source([_LINE]),
    "points": _source([_POINT]),
    "points or lines": _source([_POINT, _LINE]),
    "surface": _surface,
    "raster": _raster,
    "field": _field,
    "text": _text(False),
    "long text": _text(True),
    "number": _number(_REAL),
    "length": _number(_REAL),
    "angle": _number(_REAL),
    "count": _number(_WHOLE),
    "choice": _choice,
    "model": _model,
    "solver": _solver,
    "crs": _crs,
    "extent": _extent,
    "yes or no": _yes_or_no,
    "study file": _study_file,
    "geopackage": _geopackage,
    "folder": _folder,
}


def make(parameter):
    """Make the Processing definition of a parameter, help and flags included.

    Parameters
    ----------
    parameter : Parameter

    Returns
    -------
    QgsProcessingParameterDefinition
    """
    definition = FACTORIES[parameter.kind](parameter)
    definition.setHelp(_help(parameter))
    if parameter.advanced:
        advanced = Qgis.ProcessingParameterFlag.Advanced
        definition.setFlags(definition.flags() | advanced)
    return definition
