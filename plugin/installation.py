"""The report on the installation: versions, packages, what is off and what to do."""

import platform

from qgis.core import Qgis, QgsApplication

from .packages import how_to_install, package_states

__all__ = ["installation_report"]


def installation_report(provider=None):
    """Say what was found on this machine.

    Parameters
    ----------
    provider : QgsProcessingProvider, optional
        The plugin's provider, for the number of its algorithms.

    Returns
    -------
    str
        Plain text, one finding a line.
    """
    lines = [
        f"Heaveline {_version()}",
        f"QGIS {Qgis.version()}, Python {platform.python_version()}, "
        f"{platform.system()} {platform.machine()}",
        _algorithms(provider),
        "",
    ]
    states = package_states()
    for state in states:
        lines += _package_lines(state)
    lines += ["", _summary(states)]
    return "\n".join(lines)


def _version():
    """Version of the plugin from its metadata, which needs no package."""
    import configparser
    from pathlib import Path

    parser = configparser.ConfigParser()
    path = Path(__file__).resolve().parents[1] / "metadata.txt"
    parser.read(path, encoding="utf-8")
    return parser.get("general", "version", fallback="of unknown version")


def _algorithms(provider):
    if provider is None:
        return "The algorithms are not registered: switch the plugin off and on again."
    known = QgsApplication.processingRegistry().providerById(provider.id())
    count = len(known.algorithms()) if known else 0
    return f"{count} algorithms in the Processing toolbox, under {provider.name()}."


def _package_lines(state):
    """Lines on one package: ready, or what is wrong and what to do."""
    if state.is_ready:
        return [f"{state.package.name} {state.version}: ready"]
    return [
        f"{state.package.name}: {state.problem}",
        f"    Off without it: {state.package.needed_for}.",
        f"    {how_to_install(state.package)}",
    ]


def _summary(states):
    missing = [s.package.name for s in states if not s.is_ready]
    if not missing:
        return "Everything is there."
    if "numpy" in missing:
        return "Without numpy no algorithm can run."
    return f"The algorithms run; only what needs {', '.join(missing)} is off."
