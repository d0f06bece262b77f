"""Draw the styles of the output layers; scripts/make_styles.py saves them."""

from qgis.core import (
    Qgis,
    QgsCategorizedSymbolRenderer,
    QgsClassificationRange,
    QgsGeometryGeneratorSymbolLayer,
    QgsGradientColorRamp,
    QgsGradientStop,
    QgsGraduatedSymbolRenderer,
    QgsLabelLineSettings,
    QgsLineSymbol,
    QgsPalLayerSettings,
    QgsProperty,
    QgsPropertyCollection,
    QgsRendererCategory,
    QgsRendererRange,
    QgsRuleBasedLabeling,
    QgsSingleSymbolRenderer,
    QgsSymbolLayer,
    QgsVectorLayerSimpleLabeling,
    QgsVectorSimplifyMethod,
)
from qgis.PyQt.QtGui import QColor
from style_parts import (
    MM,
    Shape,
    by_place,
    elevation_of,
    line,
    line_3d,
    line_layer,
    marker,
    no_elevation,
    set_3d,
    set_3d_rules,
    smaller_far_away,
    sphere_3d,
    text_format,
)

from plugin.outputs.colours import (
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

#: Shape, size, fill, stroke and stroke width of each kind of pick.
MARKERS = {
    "horizon": (Shape.Circle, 1.5, BLUE, WHITE, 0.1),
    "fault": (Shape.Cross2, 2.2, None, BLACK, 0.4),
    "cutoff": (Shape.Square, 2.0, ORANGE, BLACK, 0.25),
    "dip": (Shape.Triangle, 2.2, PURPLE, BLACK, 0.2),
    "left out": (Shape.Circle, 1.3, None, GREY, 0.25),
}


def pick_marker(kind):
    """Make the mark of a kind of pick."""
    shape, size, *rest = MARKERS[kind]
    return smaller_far_away(marker(shape, size, *rest), size, round(size * 0.35, 2))


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
    elevation_of(layer, symbology=False)
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
    symbol = marker(Shape.Circle, 1.8, VERMILLION, VERMILLION, 0.2)  # as in legends
    layer = symbol.symbolLayer(0)
    prop = QgsSymbolLayer.Property
    size = by_state(
        by_place(0.9, 1.5, 1.9),
        by_place(1.2, 1.8, 2.2),
        by_place(0.9, 1.4, 1.4),
        by_place(0.4, 0.7, 0.3),
        legend=1.8,
    )
    shape = by_state("'circle'", "'diamond'", "'cross2'", "'circle'", "'circle'")
    ink = (f"'{BLACK}'", f"'{BLACK}'", f"'{GREY}'", f"'{VERMILLION}'", "@value")
    paper = (ink[0], f"'{WHITE}'", *ink[2:])
    only_profile = "CASE WHEN @map_scale IS NULL THEN {} ELSE @value END"
    for which, expression in {
        prop.Size: size,
        prop.Name: shape,
        prop.FillColor: only_profile.format(by_state(*paper)),
        prop.StrokeColor: only_profile.format(by_state(*ink)),
    }.items():
        layer.setDataDefinedProperty(which, QgsProperty.fromExpression(expression))
    return symbol


def by_state(known, assumed, out_of_reach, predicted, legend):
    """Write an expression that depends on how a fault point is constrained.

    A legend has no point, and its mark no state.
    """
    return (
        f'CASE WHEN "constrained" IS NULL THEN {legend} '
        f"WHEN \"constrained\" = 'known' THEN {known} "
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
