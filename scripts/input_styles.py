"""Draw styles for common input layers; scripts/make_styles.py saves them.

Symbols of the fault trace and of the bed dips follow the public FGDC standard of
geologic map symbols (FGDC-STD-013-2006): ticks on the upper plate of a listric normal
fault, strike and dip as a T with the dip beside it. Drawn by us.
"""

import tempfile
from pathlib import Path

from osgeo import gdal
from qgis.core import (
    Qgis,
    QgsBilinearRasterResampler,
    QgsCategorizedSymbolRenderer,
    QgsColorRampShader,
    QgsFillSymbol,
    QgsGradientColorRamp,
    QgsHashedLineSymbolLayer,
    QgsLabelLineSettings,
    QgsMapLayerElevationProperties,
    QgsPalLayerSettings,
    QgsProperty,
    QgsPropertyCollection,
    QgsRasterShader,
    QgsRendererCategory,
    QgsSimpleMarkerSymbolLayer,
    QgsSingleBandPseudoColorRenderer,
    QgsSingleSymbolRenderer,
    QgsSymbolLayer,
    QgsVectorLayerSimpleLabeling,
)
from qgis.PyQt.QtCore import QPointF
from qgis.PyQt.QtGui import QColor
from style_parts import (
    MM,
    Shape,
    elevation_of,
    line,
    line_3d,
    line_layer,
    marker,
    no_elevation,
    set_3d,
    sphere_3d,
    text_format,
)

from plugin.outputs.colours import BLACK, BLUE, GREY, PURPLE, WHITE

CONTOUR = "#5f7f9c"
BROWN = "#7a6a4f"


def fault_trace(layer):
    """Draw a fault at the surface, ticks to its right, where the hanging wall is."""
    symbol = line(BLACK, 0.5)
    ticks = QgsHashedLineSymbolLayer(True, 6.0)
    ticks.setIntervalUnit(MM)
    ticks.setOffsetAlongLine(3.0)
    ticks.setOffsetAlongLineUnit(MM)
    ticks.setHashLength(1.6)
    ticks.setHashLengthUnit(MM)
    ticks.setOffset(0.8)
    ticks.setOffsetUnit(MM)
    ticks.setSubSymbol(line(BLACK, 0.4))
    symbol.appendSymbolLayer(ticks)
    layer.setRenderer(QgsSingleSymbolRenderer(symbol))
    elevation_of(layer, colour=BLACK)
    set_3d(layer, line_3d(BLACK, 3))


def structure_contours(layer):
    """Draw contours with their elevation, every fifth of them heavier."""
    thin = line_layer(CONTOUR, 0.2)
    thin.setDataDefinedProperty(
        QgsSymbolLayer.Property.StrokeWidth,
        QgsProperty.fromExpression(
            'CASE WHEN "elevation" % 500 = 0 THEN 0.4 ELSE 0.2 END'
        ),
    )
    symbol = line(CONTOUR, 0.2)
    symbol.changeSymbolLayer(0, thin)
    layer.setRenderer(QgsSingleSymbolRenderer(symbol))
    settings = QgsPalLayerSettings()
    settings.isExpression = True
    settings.fieldName = 'if("elevation" % 100 = 0, "elevation", NULL)'
    settings.placement = Qgis.LabelPlacement.Line
    where = settings.lineSettings()
    where.setPlacementFlags(Qgis.LabelLinePlacementFlag.OnLine)
    where.setAnchorType(QgsLabelLineSettings.AnchorType.HintOnly)
    settings.setLineSettings(where)
    settings.setFormat(text_format(6.5, CONTOUR))
    settings.priority = 2
    layer.setLabeling(QgsVectorLayerSimpleLabeling(settings))
    layer.setLabelsEnabled(True)
    elevation_of(layer)
    _lift(layer, '"elevation"')


def _lift(layer, expression):
    """Take the elevation of a profile from a field."""
    properties = QgsPropertyCollection()
    properties.setProperty(
        QgsMapLayerElevationProperties.Property.ZOffset,
        QgsProperty.fromExpression(expression),
    )
    layer.elevationProperties().setDataDefinedProperties(properties)


def fault_picks(layer):
    """Draw picks of the fault at depth: black crosses."""
    layer.setRenderer(
        QgsSingleSymbolRenderer(marker(Shape.Cross2, 1.6, None, BLACK, 0.35))
    )
    elevation_of(layer)
    set_3d(layer, sphere_3d(BLACK, 25))


def bed_dips(layer):
    """Draw strike and dip: a long bar along strike, a short one down dip."""
    strike = _bar(4.0, 0.0)
    dip = _bar(1.4, 0.7)
    symbol = marker(Shape.Circle, 0.3, BLACK, BLACK)
    symbol.changeSymbolLayer(0, dip)
    symbol.appendSymbolLayer(strike)
    for part, expression in (
        (dip, '"dip_azimuth"'),
        (strike, '"dip_azimuth" + 90'),
    ):
        part.setDataDefinedProperty(
            QgsSymbolLayer.Property.Angle, QgsProperty.fromExpression(expression)
        )
    layer.setRenderer(QgsSingleSymbolRenderer(symbol))
    layer.setLabeling(QgsVectorLayerSimpleLabeling(_dip_label()))
    layer.setLabelsEnabled(True)
    elevation_of(layer, symbology=False, colour=PURPLE)


def _bar(length, towards):
    """Make an upright bar, moved up by a distance."""
    bar = QgsSimpleMarkerSymbolLayer(Shape.Line, length)
    bar.setSizeUnit(MM)
    bar.setStrokeColor(QColor(BLACK))
    bar.setStrokeWidth(0.3)
    bar.setStrokeWidthUnit(MM)
    bar.setOffset(QPointF(0.0, -towards))
    bar.setOffsetUnit(MM)
    return bar


def _dip_label():
    settings = QgsPalLayerSettings()
    settings.isExpression = True
    settings.fieldName = 'round("dip")'
    settings.placement = Qgis.LabelPlacement.OrderedPositionsAroundPoint
    settings.dist = 1.2
    settings.distUnits = MM
    settings.priority = 1
    settings.setFormat(text_format(6.0))
    return settings


def planned_wells(layer):
    """Draw planned wells: a ring at the collar, a dot at the target."""
    layer.setRenderer(
        QgsCategorizedSymbolRenderer(
            "point",
            [
                QgsRendererCategory(
                    "collar", marker(Shape.Circle, 2.8, WHITE, BLUE, 0.5), "Collar"
                ),
                QgsRendererCategory(
                    "target", marker(Shape.Star, 3.2, BLUE, WHITE, 0.15), "Target"
                ),
            ],
        )
    )
    settings = QgsPalLayerSettings()
    settings.isExpression = True
    settings.fieldName = 'CASE WHEN "point" = \'collar\' THEN "well" END'
    settings.placement = Qgis.LabelPlacement.OrderedPositionsAroundPoint
    settings.dist = 1.6
    settings.distUnits = MM
    settings.priority = 9
    settings.setFormat(text_format(8.0, BLUE, bold=True))
    layer.setLabeling(QgsVectorLayerSimpleLabeling(settings))
    layer.setLabelsEnabled(True)
    elevation_of(layer)
    set_3d(layer, sphere_3d(BLUE, 40))


def drawn_sections(layer):
    """Draw section lines as they came in: thin and dashed."""
    layer.setRenderer(QgsSingleSymbolRenderer(line(GREY, 0.26, [1.2, 1.0])))
    no_elevation(layer)


# ---- rasters -------------------------------------------------------------------------


def ground(layer):
    """Draw the ground in light tan, darker where higher; a line in a profile."""
    _ramp(layer, "#fbf8f1", "#cdbb98")
    _surface(layer, 1.0, BROWN, 0.5)


def depth_grid(layer):
    """Draw a grid of depths, light where shallow; turned up in a profile."""
    _ramp(layer, "#eef4f9", "#5b86ab")
    layer.renderer().setOpacity(0.75)
    _surface(layer, -1.0, "#5b86ab", 0.4)  # depths count down, elevations up


def _ramp(layer, low, high):
    """Colour one band between two colours; the range is fitted to the data later."""
    colours = QgsColorRampShader(
        0.0, 1.0, QgsGradientColorRamp(QColor(low), QColor(high))
    )
    colours.classifyColorRamp(5)
    shader = QgsRasterShader()
    shader.setRasterShaderFunction(colours)
    renderer = QgsSingleBandPseudoColorRenderer(layer.dataProvider(), 1, shader)
    renderer.setClassificationMin(0.0)
    renderer.setClassificationMax(1.0)
    layer.setRenderer(renderer)
    layer.resampleFilter().setZoomedInResampler(QgsBilinearRasterResampler())


def _surface(layer, scale, colour, width):
    """Make the cells elevations of a surface in profiles."""
    properties = layer.elevationProperties()
    properties.setEnabled(True)
    properties.setZScale(scale)
    properties.setZOffset(0.0)
    properties.setProfileSymbology(Qgis.ProfileSurfaceSymbology.Line)
    properties.setProfileLineSymbol(line(colour, width))
    fill = QgsFillSymbol.createSimple({"color": colour, "outline_style": "no"})
    properties.setProfileFillSymbol(fill)


def small_raster():
    """Write a raster of a few cells to draw a style on; give its path."""
    path = Path(tempfile.mkdtemp()) / "small.tif"
    raster = gdal.GetDriverByName("GTiff").Create(str(path), 2, 2, 1, gdal.GDT_Float32)
    raster.SetGeoTransform((0.0, 1.0, 0.0, 2.0, 0.0, -1.0))
    raster = None  # closes the file
    return str(path)


_DIPS = "field=dip:double&field=dip_azimuth:double"
#: Memory layer to draw on, and how, by the name of the style.
DRAWN = {
    "fault_trace": (f"LineStringZ?{_DIPS}", fault_trace),
    "structure_contours": ("LineString?field=elevation:double", structure_contours),
    "fault_picks": ("PointZ?field=fault:string", fault_picks),
    "bed_dips": (f"PointZ?{_DIPS}", bed_dips),
    "planned_wells": ("PointZ?field=well:string&field=point:string", planned_wells),
    "section_lines": ("LineString?field=section_id:string", drawn_sections),
}
DRAWN_RASTERS = {"ground": ground, "depth_grid": depth_grid}
