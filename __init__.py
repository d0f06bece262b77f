"""Heaveline, a QGIS plugin: the fault at depth from the shape of the rollover."""


def classFactory(iface):  # noqa: N802 - the name is QGIS's
    """Give QGIS the plugin; nothing of QGIS is imported before it asks."""
    from .plugin.main import HeavelinePlugin

    return HeavelinePlugin(iface)
