"""What the drawn styles share: symbols, labels, profiles, 3D, and a stable QML file."""

import os
import re
import sys
import uuid
from pathlib import Path

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
os.environ["QT_HASH_SEED"] = "0"  # else attributes stand in another order each time
ROOT = Path(__file__).resolve().parents[1]
sys.path.insert(0, str(ROOT))

from qgis import _3d  # noqa: E402
from qgis.core import (  # noqa: E402
    Qgis,
    QgsFillSymbol,
    QgsLineSymbol,
    QgsMapLayer,
    QgsMarkerSymbol,
    QgsProperty,
    QgsSimpleLineSymbolLayer,
    QgsSimpleMarkerSymbolLayer,
    QgsSymbolLayer,
    QgsTextBufferSettings,
    QgsTextFormat,
)
from qgis.PyQt import sip  # noqa: E402
from qgis.PyQt.QtCore import Qt  # noqa: E402
from qgis.PyQt.QtGui import QColor, QFont  # noqa: E402

from plugin.outputs.colours import (  # noqa: E402
    BLACK,
    GREY,
    VERMILLION,
    WHITE,
)

STYLES = ROOT / "plugin" / "outputs" / "styles"
MM = Qgis.RenderUnit.Millimeters
Shape = Qgis.MarkerShape
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


def elevation_of(layer, symbology=True, colour=VERMILLION, width=0.9):
    """Set what the elevation profile needs: Z as it is, feature by feature.

    Colour and width are those of the layer's own line in a profile, where it does not
    follow the map.
    """
    properties = layer.elevationProperties()
    properties.setClamping(Qgis.AltitudeClamping.Absolute)
    properties.setBinding(Qgis.AltitudeBinding.Vertex)
    properties.setType(Qgis.VectorProfileType.IndividualFeatures)
    properties.setZScale(1.0)
    properties.setZOffset(0.0)
    properties.setExtrusionEnabled(False)
    properties.setRespectLayerSymbology(symbology)
    set_profile_symbols(properties, colour, width)


def set_profile_symbols(properties, colour, width):
    """Set all three symbols of a profile: QGIS takes colours by chance otherwise."""
    properties.setProfileLineSymbol(line(colour, width))
    properties.setProfileMarkerSymbol(marker(Shape.Circle, 1.6, colour, WHITE))
    fill = QgsFillSymbol.createSimple({"color": colour, "outline_color": colour})
    properties.setProfileFillSymbol(fill)


def no_elevation(layer):
    """Keep a layer without Z out of the way: it lies on the terrain."""
    properties = layer.elevationProperties()
    properties.setClamping(Qgis.AltitudeClamping.Terrain)
    set_profile_symbols(properties, GREY, 0.3)


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
    # not drawn, but kept, and QGIS takes its colour by chance otherwise
    flat = marker(Shape.Circle, 2.0, colour, WHITE)
    sip.transferto(flat, None)  # QGIS takes it over without telling Python
    symbol.setBillboardSymbol(flat)
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


# ---- writing -------------------------------------------------------------------------


def settled(text, name):
    """Give the same identifiers each time, so that unchanged styles stay the same."""
    known = {}

    def same(match):
        new = str(uuid.uuid5(uuid.NAMESPACE_OID, f"{name} {len(known)}"))
        return "{" + known.setdefault(match.group(1), new) + "}"

    text = re.sub(r'(<renderer-3d[^>]* layer=)"[^"]*"', r'\1""', text)
    return re.sub(r"\{([0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12})\}", same, text)


def save_style(layer, name):
    """Save the style of a layer as a QML file under the styles folder."""
    path = STYLES / f"{name}.qml"
    path.parent.mkdir(parents=True, exist_ok=True)
    message, saved = layer.saveNamedStyle(str(path), CATEGORIES)
    if not saved:
        raise SystemExit(f"error: {path.name} was not written: {message}")
    text = settled(path.read_text(encoding="utf-8"), name)
    path.write_bytes(text.encode("utf-8"))
    return path
