"""Fits a style to the data of its layer: elevation classes, horizons, sizes in 3D."""

import math

from qgis.core import (
    QgsCategorizedSymbolRenderer,
    QgsClassificationRange,
    QgsExpressionContextUtils,
    QgsGraduatedSymbolRenderer,
    QgsRendererCategory,
    QgsRendererRange,
    QgsSingleBandPseudoColorRenderer,
)
from qgis.PyQt.QtGui import QColor

from .colours import HORIZON_COLOURS, ramp_colour

__all__ = ["fit_balls", "fit_raster", "fit_to_data", "round_limits"]

#: Layer variables that the graded line of predicted fault traces is drawn between.
Z_LOW, Z_HIGH = "heaveline_z_low", "heaveline_z_high"
#: Fields that hold the lowest and the highest elevation of a layer's features.
_Z_FIELDS = {
    "predicted_fault_traces": ("z_base", "z_top"),
    "fault_points": ("z", "z"),
}
#: Radius of a ball in 3D as a part of the largest side of the layer.
_RADIUS = {"picks": 0.0025, "fault_points": 0.0025, "cutoffs": 0.005}


def round_limits(low, high, classes=6):
    """Give round class limits that hold a range.

    Parameters
    ----------
    low, high : float
    classes : int
        About as many classes as wanted; there may be a few more or less.

    Returns
    -------
    list of float
        Growing, at least two; the first is not above `low`, the last not below
        `high`.

    Examples
    --------
    >>> round_limits(-2730.0, 210.0)
    [-3000.0, -2500.0, -2000.0, -1500.0, -1000.0, -500.0, 0.0, 500.0]
    """
    span = max(high - low, 1e-9 * max(abs(low), abs(high)), 1e-9)
    power = 10.0 ** math.floor(math.log10(span / classes))
    step = next(s * power for s in (1, 2, 2.5, 5, 10) if s * power * classes >= span)
    first, last = math.floor(low / step), math.ceil(high / step)
    return [step * i for i in range(first, max(last, first + 1) + 1)]


def fit_to_data(layer, layer_name, study):
    """Fit the style of a layer to its data, once its features are there.

    Parameters
    ----------
    layer : QgsVectorLayer
        With the style loaded.
    layer_name : str
        A name of `fields.LAYERS`.
    study : Study
        For the length unit.
    """
    if layer_name in _Z_FIELDS:
        limits = _elevation_limits(layer, *_Z_FIELDS[layer_name])
        QgsExpressionContextUtils.setLayerVariable(layer, Z_LOW, limits[0])
        QgsExpressionContextUtils.setLayerVariable(layer, Z_HIGH, limits[-1])
        if isinstance(layer.renderer(), QgsGraduatedSymbolRenderer):
            layer.setRenderer(_classes(layer.renderer(), limits, study.length_unit))
    if layer_name == "predicted_horizons":
        layer.setRenderer(_horizons(layer))


def _elevation_limits(layer, low_field, high_field):
    low = _extreme(layer.minimumValue, layer, low_field)
    high = _extreme(layer.maximumValue, layer, high_field)
    if low is None or high is None:
        return [0.0, 1.0]  # an empty layer has no range to show
    return round_limits(low, high)


def _extreme(of, layer, field):
    value = of(layer.fields().lookupField(field))
    return float(value) if isinstance(value, (int, float)) else None


def _classes(old, limits, unit):
    """Give the renderer its classes, coloured from deep to shallow."""
    renderer = old.clone()
    renderer.deleteAllClasses()
    span = limits[-1] - limits[0]
    for low, high in zip(limits, limits[1:]):
        symbol = old.sourceSymbol().clone()
        colour = ramp_colour(((low + high) / 2 - limits[0]) / span)
        symbol.setColor(QColor(colour))
        symbol.symbolLayer(0).setStrokeColor(QColor(colour))
        label = f"{low:g} to {high:g} {unit}"
        renderer.addClassRange(
            QgsRendererRange(QgsClassificationRange(label, low, high), symbol)
        )
    return renderer


def _horizons(layer):
    """Give each horizon a colour of its own, in the order of their names."""
    field = layer.fields().lookupField("horizon")
    names = sorted(str(name) for name in layer.uniqueValues(field) if name)
    first = layer.renderer().categories()[0]  # owns its symbol: keep it alive
    base = first.symbol()
    categories = []
    for i, name in enumerate(names):
        symbol = base.clone()
        symbol.setColor(QColor(HORIZON_COLOURS[i % len(HORIZON_COLOURS)]))
        categories.append(QgsRendererCategory(name, symbol, name))
    if not categories:
        return layer.renderer().clone()
    return QgsCategorizedSymbolRenderer("horizon", categories)


def fit_raster(layer):
    """Stretch the colours of a raster between its lowest and its highest value.

    Parameters
    ----------
    layer : QgsRasterLayer
        Styled; what is not drawn as a colour ramp of one band is left as it is.
    """
    renderer = layer.renderer()
    if not isinstance(renderer, QgsSingleBandPseudoColorRenderer):
        return
    values = _seen(layer, renderer.inputBand())
    if not values.count():
        return
    limits = round_limits(float(values.min()), float(values.max()))
    renderer.setClassificationMin(limits[0])
    renderer.setClassificationMax(limits[-1])
    ramp = renderer.shader().rasterShaderFunction()
    ramp.setMinimumValue(limits[0])
    ramp.setMaximumValue(limits[-1])
    ramp.classifyColorRamp(len(limits), renderer.inputBand())


def _seen(layer, band):
    """Read a raster at no more than a thousand cells a side, cells without data masked.

    Its statistics would do, but their call differs between versions of QGIS.
    """
    columns, rows = min(layer.width(), 1000), min(layer.height(), 1000)
    return layer.dataProvider().block(band, layer.extent(), columns, rows).as_numpy()


def fit_balls(document, layer, layer_name):
    """Set the radius of the 3D balls of a style to the size of the data.

    Parameters
    ----------
    document : QDomDocument
        The style, changed in place; QGIS gives Python no way to a 3D renderer once
        it is on a layer.
    layer : QgsVectorLayer
    layer_name : str
    """
    radius = _RADIUS.get(layer_name, 0.0) * _size(layer)
    shapes = document.elementsByTagName("shape-properties")
    for i in range(shapes.count()):
        options = shapes.at(i).toElement().elementsByTagName("Option")
        for j in range(options.count()):
            option = options.at(j).toElement()
            if option.attribute("name") == "radius":
                option.setAttribute("type", "double")
                option.setAttribute("value", f"{radius:.6g}")


def _size(layer):
    extent = layer.extent()
    side = max(extent.width(), extent.height())
    return side if math.isfinite(side) and side > 0 else 1000.0
