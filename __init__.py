"""Heaveline, a QGIS plugin: the fault at depth from the shape of the rollover."""


def classFactory(iface):
    """Give QGIS the plugin; nothing of QGIS is imported before it asks."""
    from .plugin.main import HeavelinePlugin

    return HeavelinePlugin(iface)
