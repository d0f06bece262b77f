"""Draw all styles and save them as QML files under plugin/outputs/styles.

Run it with the Python that sees QGIS, after a change of a style or of plugin/fields.py:
    .venv/bin/python scripts/make_styles.py
The files it writes belong into the repository; the plugin loads those and never this.
What depends on the data (elevation range, names of horizons, sizes in 3D) is fitted
when a layer is dressed, see plugin/outputs/ranges.py.

Colours are the eight that Okabe and Ito proposed in 2008 to be told apart by people
with any kind of colour vision; kinds differ in shape as well as in colour.
"""

from style_parts import ROOT, save_style  # first: it sets up the search path

# isort: split
import input_styles
import result_styles
from qgis import _3d
from qgis.core import QgsApplication, QgsRasterLayer, QgsVectorLayer

from plugin.fields import LAYERS

FIELD_TYPES = {"text": "string", "integer": "int8", "real": "double", "boolean": "bool"}


def empty_layer(spec):
    """Make an empty layer with the fields of an output layer."""
    fields = "&".join(f"field={f.name}:{FIELD_TYPES[f.type]}" for f in spec.fields)
    return QgsVectorLayer(f"{spec.geometry}?{fields}", spec.name, "memory")


def draw_results():
    """Draw the styles of the output layers."""
    for name, draw in result_styles.DRAWN.items():
        layer = empty_layer(LAYERS[name])
        draw(layer)
        yield save_style(layer, name)


def draw_inputs():
    """Draw the styles of common input layers."""
    for name, (uri, draw) in input_styles.DRAWN.items():
        layer = QgsVectorLayer(uri, name, "memory")
        draw(layer)
        yield save_style(layer, f"inputs/{name}")
    for name, draw in input_styles.DRAWN_RASTERS.items():
        layer = QgsRasterLayer(input_styles.small_raster(), name)
        draw(layer)
        yield save_style(layer, f"inputs/{name}")


def main():
    """Write every style."""
    app = QgsApplication([], True)
    app.initQgis()
    _3d.Qgs3D.initialize()
    for path in (*draw_results(), *draw_inputs()):
        print(path.relative_to(ROOT))


if __name__ == "__main__":
    main()
