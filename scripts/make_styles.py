"""Draw the styles of the output layers and save them as QML files.

They go to plugin/outputs/styles. Run it with the Python that sees QGIS, after a
change here or in plugin/fields.py:
    .venv/bin/python scripts/make_styles.py
The files it writes belong into the repository; the plugin loads those and never this.
What depends on the data (elevation range, names of horizons, sizes in 3D) is fitted
when a layer is dressed, see plugin/outputs/ranges.py.

Colours are the eight that Okabe and Ito proposed in 2008 to be told apart by people
with any kind of colour vision; kinds differ in shape as well as in colour.
"""

import os
import re
import sys
import uuid
from pathlib import Path

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
ROOT = Path(__file__).resolve().parents[1]
sys.path.insert(0, str(ROOT))

from qgis import _3d  # noqa: E402
from qgis.core import (  # noqa: E402
    Qgis,
    QgsApplication,
    QgsCategorizedSymbolRenderer,
    QgsClassificationRange,
    QgsGeometryGeneratorSymbolLayer,
    QgsGradientColorRamp,
    QgsGradientStop,
    QgsGraduatedSymbolRenderer,
    QgsLabelLineSettings,
    QgsLineSymbol,
    QgsMapLayer,
    QgsMarkerSymbol,
    QgsPalLayerSettings,
    QgsProperty,
    QgsPropertyCollection,
    QgsRendererCategory,
    QgsRendererRange,
    QgsRuleBasedLabeling,
    QgsSimpleLineSymbolLayer,
    QgsSimpleMarkerSymbolLayer,
    QgsSingleSymbolRenderer,
    QgsSymbolLayer,
    QgsTextBufferSettings,
    QgsTextFormat,
    QgsVectorLayer,
    QgsVectorLayerSimpleLabeling,
    QgsVectorSimplifyMethod,
)
from qgis.PyQt.QtCore import Qt  # noqa: E402
from qgis.PyQt.QtGui import QColor, QFont  # noqa: E402

from plugin.fields import LAYERS  # noqa: E402
from plugin.outputs.colours import (  # noqa: E402
    BLACK,
    BLUE,
    GREEN,
    GREY,
    ORANGE,
    PURPLE,
    RAMP,
    VERMILLION,
    WHITE,
)

STYLES = ROOT / "plugin" / "outputs" / "styles"
FIELD_TYPES = {"text": "string", "integer": "int8", "real": "double", "boolean": "bool"}
MM = Qgis.RenderUnit.Millimeters
#: Not the fields' aliases: dress() takes these from plugin/fields.py itself.
CATEGORIES = (
    QgsMapLayer.StyleCategory.Symbology
    | QgsMapLayer.StyleCategory.Symbology3D
    | QgsMapLayer.StyleCategory.Labeling
    | QgsMapLayer.StyleCategory.MapTips
    | QgsMapLayer.StyleCategory.Rendering
    | QgsMapLayer.StyleCategory.Elevation
)


# ---- small parts ---------------------------------------------------------------------


def line_layer(colour, width, dash=None):
    """Make a plain line of a width in millimetres."""
    layer = QgsSimpleLineSymbolLayer(QColor(colour), width)
    layer.setWidthUnit(MM)
    layer.setPenCapStyle(Qt.PenCapStyle.RoundCap)
    layer.setPenJoinStyle(Qt.PenJoinStyle.RoundJoin)
    if dash:
        layer.setUseCustomDashPattern(True)
        layer.setCustomDashVector(dash)
        layer.setCustomDashPatternUnit(MM)
        layer.setPenCapStyle(Qt.PenCapStyle.FlatCap)
    return layer


def line(colour, width, dash=None):
    """Make a line symbol."""
    symbol = QgsLineSymbol()
    symbol.changeSymbolLayer(0, line_layer(colour, width, dash))
    return symbol


def marker(shape, size, fill, stroke, stroke_width=0.2):
    """Make a marker symbol; a fill of None leaves it hollow."""
    layer = QgsSimpleMarkerSymbolLayer(shape, size)
    layer.setSizeUnit(MM)
    layer.setColor(QColor(fill) if fill else QColor(255, 255, 255, 0))
    layer.setStrokeColor(QColor(stroke))
    layer.setStrokeWidth(stroke_width)
    layer.setStrokeWidthUnit(MM)
    symbol = QgsMarkerSymbol()
    symbol.changeSymbolLayer(0, layer)
    return symbol


Shape = Qgis.MarkerShape
#: Shape, size, fill, stroke and stroke width of each kind of pick.
MARKERS = {
    "horizon": (Shape.Circle, 1.5, BLUE, WHITE, 0.1),
    "fault": (Shape.Cross2, 2.2, None, BLACK, 0.4),
    "cutoff": (Shape.Square, 2.0, ORANGE, BLACK, 0.25),
    "dip": (Shape.Triangle, 2.2, PURPLE, BLACK, 0.2),
    "left out": (Shape.Circle, 1.3, None, GREY, 0.25),
}


#: From this scale denominator on a map is an overview: marks shrink, since all that
#: belongs to a section lies on one line there. A profile has no map scale.
OVERVIEW = 30000


def smaller_far_away(symbol, size, far):
    """Let a marker shrink on overview maps; keep its size in profiles."""
    symbol.symbolLayer(0).setDataDefinedProperty(
        QgsSymbolLayer.Property.Size,
        QgsProperty.fromExpression(by_place(far, size, size)),
    )
    return symbol


def by_place(overview, near, profile):
    """Write an expression for an overview map, a map seen from near, a profile."""
    return (
        f"CASE WHEN @map_scale IS NULL THEN {profile} "
        f"WHEN @map_scale > {OVERVIEW} THEN {overview} ELSE {near} END"
    )


def text_format(size, colour=BLACK, bold=False):
    """Make a label text with a thin white edge, so that it reads on any map."""
    form = QgsTextFormat()
    font = QFont("Open Sans")
    font.setBold(bold)
    form.setFont(font)
    form.setSize(size)
    form.setColor(QColor(colour))
    edge = QgsTextBufferSettings()
    edge.setEnabled(True)
    edge.setSize(0.8)
    edge.setSizeUnit(MM)
    edge.setColor(QColor(WHITE))
    form.setBuffer(edge)
    return form


def pick_marker(kind):
    """Make the mark of a kind of pick."""
    shape, size, *rest = MARKERS[kind]
    return smaller_far_away(marker(shape, size, *rest), size, round(size * 0.45, 2))


def pick_classes():
    """Make the renderer of picks: shape by kind, hollow grey where left out.

    By category, not by rule: QGIS 3.40 draws nothing in a profile by rules.
    """
    labels = {
        "horizon": "Horizon",
        "fault": "Fault",
        "cutoff": "Cut-off",
        "dip": "Dip",
        "left out": "Left out",
    }
    return QgsCategorizedSymbolRenderer(
        'CASE WHEN "used" THEN "kind" ELSE \'left out\' END',
        [
            QgsRendererCategory(kind, pick_marker(kind), label)
            for kind, label in labels.items()
        ],
    )


def elevation_of(layer, symbology=True):
    """Set what the elevation profile needs: Z as it is, feature by feature."""
    properties = layer.elevationProperties()
    properties.setClamping(Qgis.AltitudeClamping.Absolute)
    properties.setBinding(Qgis.AltitudeBinding.Vertex)
    properties.setType(Qgis.VectorProfileType.IndividualFeatures)
    properties.setZScale(1.0)
    properties.setZOffset(0.0)
    properties.setExtrusionEnabled(False)
    properties.setRespectLayerSymbology(symbology)
    return properties


def no_elevation(layer):
    """Keep a layer without Z out of the way: it lies on the terrain."""
    layer.elevationProperties().setClamping(Qgis.AltitudeClamping.Terrain)


# ---- 3D ------------------------------------------------------------------------------


def line_3d(colour, width):
    """Make a 3D line at its own Z, of a width in pixels that holds at every scale."""
    symbol = _3d.QgsLine3DSymbol()
    symbol.setAltitudeClamping(Qgis.AltitudeClamping.Absolute)
    symbol.setAltitudeBinding(Qgis.AltitudeBinding.Vertex)
    symbol.setRenderAsSimpleLines(True)
    symbol.setWidth(width)
    material = _3d.QgsSimpleLineMaterialSettings()
    material.setAmbient(QColor(colour))
    symbol.setMaterialSettings(material)
    return symbol


def sphere_3d(colour, radius):
    """Make a ball at its own Z; the radius is fitted to the data by dress()."""
    symbol = _3d.QgsPoint3DSymbol()
    symbol.setAltitudeClamping(Qgis.AltitudeClamping.Absolute)
    symbol.setShape(Qgis.Point3DShape.Sphere)
    symbol.setShapeProperties({"radius": radius})
    material = _3d.QgsPhongMaterialSettings()
    material.setDiffuse(QColor(colour))
    material.setAmbient(QColor(colour).darker(160))
    symbol.setMaterialSettings(material)
    return symbol


def set_3d(layer, symbol):
    """Give a layer one 3D symbol."""
    renderer = _3d.QgsVectorLayer3DRenderer(symbol)
    renderer.setLayer(layer)
    layer.setRenderer3D(renderer)


def set_3d_rules(layer, entries):
    """Give a layer 3D symbols by rule, from (label, filter, symbol)."""
    root = _3d.QgsRuleBased3DRenderer.Rule(None)
    for label, expression, symbol in entries:
        rule = _3d.QgsRuleBased3DRenderer.Rule(symbol)
        rule.setDescription(label)
        rule.setFilterExpression(expression)
        root.appendChild(rule)
    renderer = _3d.QgsRuleBased3DRenderer(root)
    renderer.setLayer(layer)
    layer.setRenderer3D(renderer)


# ---- the layers ----------------------------------------------------------------------


def section_lines(layer):
    """Thin grey lines, A at the first vertex and A' at the last."""
    layer.setRenderer(
        QgsCategorizedSymbolRenderer(
            "status",
            [
                QgsRendererCategory("solved", line("#404040", 0.26), "Solved"),
                QgsRendererCategory(
                    "not solved",
                    line("#404040", 0.26, [1.6, 1.2]),
                    "Not solved (see reason)",
                ),
                QgsRendererCategory("", line("#404040", 0.26), "Laid"),
            ],
        )
    )
    root = QgsRuleBasedLabeling.Rule(None)
    root.appendChild(_end_label("first end", "start_point(@geometry)", "", 2, 1))
    last = "num_points(@geometry)"
    root.appendChild(
        _end_label("last end", "end_point(@geometry)", "\u2032", f"{last} - 1", last)
    )
    layer.setLabeling(QgsRuleBasedLabeling(root))
    layer.setLabelsEnabled(True)
    layer.setMapTipTemplate(
        '<b>Section [% "section_id" %]</b><br>azimuth [% round("azimuth") %]\u00b0, '
        'obliquity [% round("obliquity") %]\u00b0<br>[% coalesce("reason", \'\') %]'
    )
    no_elevation(layer)


def _end_label(name, point, mark, inner, end):
    """Make a label rule at one end of a line, on the side that points away from it."""
    settings = QgsPalLayerSettings()
    settings.isExpression = True
    settings.fieldName = f"\"section_id\" || '{mark}'"
    settings.geometryGeneratorEnabled = True
    settings.geometryGenerator = point
    settings.geometryGeneratorType = Qgis.GeometryType.Point
    settings.placement = Qgis.LabelPlacement.OverPoint
    settings.setFormat(text_format(8.5, bold=True))
    outward = (
        f"degrees(azimuth(point_n(@geometry, {inner}), point_n(@geometry, {end})))"
    )
    # quadrants clockwise from north, as QGIS numbers the places around a point
    quadrant = f"array_get(array(1,2,5,8,7,6,3,0), floor(({outward} + 22.5) / 45) % 8)"
    properties = QgsPropertyCollection()
    properties.setProperty(
        QgsPalLayerSettings.Property.OffsetQuad, QgsProperty.fromExpression(quadrant)
    )
    settings.setDataDefinedProperties(properties)
    settings.dist = 0.8
    settings.distUnits = MM
    rule = QgsRuleBasedLabeling.Rule(settings)
    rule.setDescription(name)
    return rule


def picks(layer):
    """Dots for horizons, crosses for faults, squares for cut-offs."""
    layer.setRenderer(pick_classes())
    layer.setMapTipTemplate(
        '<b>[% "kind" %] [% "name" %]</b><br>z [% round(z(@geometry), 1) %], sigma '
        '[% round("sigma_z", 1) %]<br>from [% "source_layer" %]'
        "<br>[% coalesce(\"reason\", '') %]"
    )
    elevation_of(layer)
    set_3d_rules(
        layer,
        [
            ("Horizon", '"used" AND "kind" = \'horizon\'', sphere_3d(BLUE, 20)),
            ("Fault", '"used" AND "kind" = \'fault\'', sphere_3d(BLACK, 20)),
            ("Cut-off", '"used" AND "kind" = \'cutoff\'', sphere_3d(ORANGE, 20)),
        ],
    )


def picks_time(layer):
    """As picks; times have no place in a profile of elevations."""
    layer.setRenderer(pick_classes())
    layer.setMapTipTemplate(
        '<b>[% "kind" %] [% "name" %]</b><br>[% round("twt_ms", 1) %] ms two-way time'
        '<br>from [% "source_layer" %]<br>[% coalesce("reason", \'\') %]'
    )
    no_elevation(layer)


def predicted_fault_traces(layer):
    """Draw a thin line graded by elevation on maps, a strong plain one in profiles."""
    layer.setRenderer(QgsSingleSymbolRenderer(graded_line()))
    simplify = QgsVectorSimplifyMethod()
    # QGIS would drop vertices that lie on one line on the map, and their z with them.
    simplify.setSimplifyHints(QgsVectorSimplifyMethod.SimplifyHint.NoSimplification)
    layer.setSimplifyMethod(simplify)
    layer.setLabeling(QgsVectorLayerSimpleLabeling(heave_label()))
    layer.setLabelsEnabled(True)
    layer.setMapTipTemplate(
        '<b>[% "fault" %], section [% "section_id" %]</b><br>'
        'heave [% round("heave") %] [% "length_unit" %], '
        'throw [% round("throw") %] [% "length_unit" %]<br>from '
        '[% round("z_top") %] to [% round("z_base") %] [% "length_unit" %] '
        '([% "vertical_datum" %])<br>[% coalesce("warnings", \'\') %]'
    )
    properties = elevation_of(layer, symbology=False)
    properties.setProfileLineSymbol(line(VERMILLION, 0.9))
    properties.setProfileMarkerSymbol(marker(Shape.Circle, 1.6, VERMILLION, WHITE))
    set_3d(layer, line_3d(VERMILLION, 4))


def graded_line():
    """Make a line whose pieces are coloured by their elevation.

    QGIS's own interpolated line runs from one value at the start to one at the end,
    which would colour a listric fault wrongly between its ends.
    """
    piece = line_layer(VERMILLION, 1.1)
    z = "z(point_n(@geometry, @geometry_part_num))"
    stops = ", ".join(f"{at:g}, '{colour}'" for at, colour in RAMP)
    piece.setDataDefinedProperty(
        QgsSymbolLayer.Property.StrokeColor,
        QgsProperty.fromExpression(
            f"ramp_color(create_ramp(map({stops})), "
            f"scale_linear({z}, @heaveline_z_low, @heaveline_z_high, 0, 1))"
        ),
    )
    inner = QgsLineSymbol()
    inner.changeSymbolLayer(0, piece)
    generator = QgsGeometryGeneratorSymbolLayer.create(
        {"geometryModifier": "segments_to_lines(@geometry)", "SymbolType": "Line"}
    )
    generator.setSubSymbol(inner)
    symbol = QgsLineSymbol()
    symbol.changeSymbolLayer(0, generator)
    return symbol


def heave_label():
    """Make the label of a trace: heave and throw along it."""
    settings = QgsPalLayerSettings()
    settings.isExpression = True
    settings.fieldName = (
        "'heave ' || format_number(\"heave\", 0) || ' ' || \"length_unit\" || "
        "', throw ' || format_number(\"throw\", 0) || ' ' || \"length_unit\""
    )
    settings.placement = Qgis.LabelPlacement.Line
    where = settings.lineSettings()
    where.setPlacementFlags(Qgis.LabelLinePlacementFlag.AboveLine)
    where.setAnchorType(QgsLabelLineSettings.AnchorType.HintOnly)
    where.setLineAnchorPercent(0.5)
    settings.setLineSettings(where)
    settings.dist = 0.6
    settings.distUnits = MM
    settings.setFormat(text_format(7.5))
    return settings


def fault_points(layer):
    """Small marks coloured by elevation; their shape says how the place is known."""
    layer.setRenderer(elevation_classes())
    layer.setMapTipTemplate(
        '<b>Fault at z [% round("z", 1) %]</b>, [% "constrained" %]<br>dip '
        '[% round("dip", 1) %]\u00b0, strip [% "strip" %], sigma '
        "[% coalesce(round(\"sigma_z\", 1), 'not known') %]"
    )
    elevation_of(layer)
    set_3d_rules(
        layer,
        [
            ("Known", "\"constrained\" = 'known'", sphere_3d(BLACK, 15)),
            ("Assumed", "\"constrained\" = 'assumed'", sphere_3d(ORANGE, 15)),
        ],
    )


def elevation_classes():
    """Make the graduated renderer of fault points; dress() fits its limits."""
    source = constrained_marker()
    renderer = QgsGraduatedSymbolRenderer("z")
    renderer.setSourceSymbol(source)
    stops = [QgsGradientStop(at, QColor(colour)) for at, colour in RAMP[1:-1]]
    first, last = QColor(RAMP[0][1]), QColor(RAMP[-1][1])
    renderer.setSourceColorRamp(QgsGradientColorRamp(first, last, False, stops))
    renderer.addClassRange(
        QgsRendererRange(QgsClassificationRange("z", -1e9, 1e9), source.clone())
    )
    return renderer


def constrained_marker():
    """Make the mark of a fault point, which says how its place is known.

    On a map all are dots of their elevation's colour, larger where the fault is
    known or assumed. In a profile, where the elevation is plain to see, the known part
    is black, the assumed part open diamonds, and the predicted part next to nothing,
    since the fault's own line is drawn there.
    """
    symbol = marker(Shape.Circle, 1.0, VERMILLION, VERMILLION, 0.2)
    layer = symbol.symbolLayer(0)
    prop = QgsSymbolLayer.Property
    size = by_state(
        by_place(0.9, 1.5, 1.5),
        by_place(1.2, 1.8, 1.8),
        by_place(0.9, 1.4, 1.4),
        by_place(0.4, 0.7, 0.3),
    )
    shape = by_state("'circle'", "'diamond'", "'cross2'", "'circle'")
    fill = by_state(f"'{BLACK}'", f"'{WHITE}'", f"'{GREY}'", f"'{VERMILLION}'")
    edge = by_state(f"'{BLACK}'", f"'{BLACK}'", f"'{GREY}'", f"'{VERMILLION}'")
    for which, expression in {
        prop.Size: size,
        prop.Name: shape,
        prop.FillColor: f"CASE WHEN @map_scale IS NULL THEN {fill} ELSE @value END",
        prop.StrokeColor: f"CASE WHEN @map_scale IS NULL THEN {edge} ELSE @value END",
    }.items():
        layer.setDataDefinedProperty(which, QgsProperty.fromExpression(expression))
    return symbol


def by_state(known, assumed, out_of_reach, predicted):
    """Write an expression that depends on how a fault point is constrained."""
    return (
        f"CASE WHEN \"constrained\" = 'known' THEN {known} "
        f"WHEN \"constrained\" = 'assumed' THEN {assumed} "
        f"WHEN \"constrained\" = 'out of reach' THEN {out_of_reach} "
        f"ELSE {predicted} END"
    )


def cutoffs(layer):
    """Squares: filled in the footwall, open in the hanging wall."""
    layer.setRenderer(
        QgsCategorizedSymbolRenderer(
            "wall",
            [
                QgsRendererCategory(
                    "footwall",
                    marker(Shape.Square, 2.2, BLACK, WHITE, 0.2),
                    "Footwall",
                ),
                QgsRendererCategory(
                    "hanging wall",
                    marker(Shape.Square, 2.2, WHITE, BLACK, 0.35),
                    "Hanging wall",
                ),
            ],
        )
    )
    layer.setMapTipTemplate(
        '<b>[% "horizon" %], [% "wall" %] cut-off</b><br>z [% round(z(@geometry), 1) %]'
        '<br>heave [% round("heave", 1) %], throw [% round("throw", 1) %]<br>'
        '[% "how" %]'
    )
    elevation_of(layer)
    set_3d(layer, sphere_3d(BLACK, 25))


def predicted_horizons(layer):
    """One colour per horizon; dress() makes a class of each name."""
    layer.setRenderer(
        QgsCategorizedSymbolRenderer(
            "horizon", [QgsRendererCategory(None, line(GREEN, 0.5), "Horizon")]
        )
    )
    layer.setMapTipTemplate(
        '<b>[% "horizon" %], section [% "section_id" %]</b><br>misfit rms '
        '[% coalesce(round("misfit_rms", 1), \'none\') %]<br>[% "misfit_note" %]'
    )
    elevation_of(layer)
    set_3d(layer, line_3d(GREEN, 2))


DRAWN = {
    "section_lines": section_lines,
    "picks": picks,
    "picks_time": picks_time,
    "predicted_fault_traces": predicted_fault_traces,
    "fault_points": fault_points,
    "cutoffs": cutoffs,
    "predicted_horizons": predicted_horizons,
}


# ---- writing -------------------------------------------------------------------------


def empty_layer(spec):
    """Make an empty layer with the fields of an output layer."""
    fields = "&".join(f"field={f.name}:{FIELD_TYPES[f.type]}" for f in spec.fields)
    return QgsVectorLayer(f"{spec.geometry}?{fields}", spec.name, "memory")


def settled(text, name):
    """Give the same identifiers each time, so that unchanged styles stay the same."""
    known = {}

    def same(match):
        new = str(uuid.uuid5(uuid.NAMESPACE_OID, f"{name} {len(known)}"))
        return "{" + known.setdefault(match.group(1), new) + "}"

    return re.sub(r"\{([0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12})\}", same, text)


def write_style(name):
    """Draw one layer and save its style."""
    layer = empty_layer(LAYERS[name])
    DRAWN[name](layer)
    path = STYLES / f"{name}.qml"
    message, saved = layer.saveNamedStyle(str(path), CATEGORIES)
    if not saved:
        raise SystemExit(f"error: {path.name} was not written: {message}")
    text = settled(path.read_text(encoding="utf-8"), name)
    path.write_bytes(text.encode("utf-8"))
    return path


def main():
    """Write every style."""
    app = QgsApplication([], True)
    app.initQgis()
    _3d.Qgs3D.initialize()
    STYLES.mkdir(parents=True, exist_ok=True)
    for name in DRAWN:
        print(write_style(name).relative_to(ROOT))


if __name__ == "__main__":
    main()
