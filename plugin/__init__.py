"""The QGIS side of Heaveline: layers in, layers out; the geometry is in geomcore."""
