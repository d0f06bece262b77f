"""Which Python packages are there, what is off without them, and how to get them."""

import importlib
import re
import sys
from dataclasses import dataclass

__all__ = [
    "PACKAGES",
    "Package",
    "PackageState",
    "how_to_install",
    "missing_sentence",
    "package_state",
    "package_states",
]


@dataclass(frozen=True)
class Package:
    """A Python package that a part of the tool needs.

    Parameters
    ----------
    name : str
        Name to import and to install it by.
    least : tuple of int
        Lowest version that works.
    needed_for : str
        What is off without it, as the end of a sentence.
    """

    name: str
    least: tuple
    needed_for: str

    @property
    def least_text(self):
        """Lowest version as text, for example ``2.0``."""
        return ".".join(map(str, self.least))


#: Every package the tool can use; numpy is the only one it cannot do without.
PACKAGES = (
    Package("numpy", (1, 22), "everything: sections, picks and construction"),
    Package("scipy", (1, 8), "the solver fit"),
    Package("shapely", (2, 0), "nothing yet (fault gaps as polygons will need it)"),
    Package("pyproj", (3, 3), "true north in scripts that run without QGIS"),
    Package("matplotlib", (3, 5), "section plots"),
)


@dataclass(frozen=True)
class PackageState:
    """What was found of a package.

    Parameters
    ----------
    package : Package
    version : str
        Version found; empty where it cannot be imported.
    problem : str
        What is wrong with it, as a sentence; empty where it is fit for use.
    """

    package: Package
    version: str = ""
    problem: str = ""

    @property
    def is_ready(self):
        """Tell whether the package can be used."""
        return not self.problem


def package_state(name):
    """Look for a package by importing it.

    Parameters
    ----------
    name : str
        Name of one of `PACKAGES`.

    Returns
    -------
    PackageState

    Notes
    -----
    Only an import tells: a package built for another numpy is there and does not
    work, and shapely 1.8 imports but lacks the functions that are used.
    """
    package = next(p for p in PACKAGES if p.name == name)
    try:
        module = importlib.import_module(name)
    except ModuleNotFoundError as error:
        if error.name == name:
            return PackageState(package, problem=f"{name} is not installed.")
        words = f"{name} does not start: {error}."
        return PackageState(package, problem=words)
    except Exception as error:  # a broken installation may raise anything
        words = f"{name} does not start: {type(error).__name__}: {error}."
        return PackageState(package, problem=words)
    version = str(getattr(module, "__version__", ""))
    return PackageState(package, version, _too_old(package, version))


def _too_old(package, version):
    """Say that a version is too old; empty where it will do."""
    if _numbers(version) >= package.least:
        return ""
    return (
        f"{package.name} {version or 'of unknown version'} is too old: "
        f"{package.least_text} or newer is needed."
    )


def _numbers(version):
    """Give the leading numbers of a version text: '2.1rc1' gives (2, 1)."""
    found = re.match(r"\d+(\.\d+)*", version)
    return tuple(map(int, found.group().split("."))) if found else ()


def package_states():
    """Look for every package of `PACKAGES`, in their order."""
    return tuple(package_state(p.name) for p in PACKAGES)


def how_to_install(package, platform=None):
    """Say how to get a package into the Python that QGIS uses.

    Parameters
    ----------
    package : Package
    platform : str, optional
        As `sys.platform`; that of this machine if not given.

    Returns
    -------
    str
        One sentence.
    """
    name, pip = package.name, f"{package.name}>={package.least_text}"
    platform = sys.platform if platform is None else platform
    if platform.startswith("win"):
        return (
            f"Install it in the OSGeo4W Shell of this QGIS with: python -m pip "
            f'install --user "{pip}", and start QGIS anew.'
        )
    if platform == "darwin":
        return (
            f"Install it in the Terminal with the python3 that lies inside the QGIS "
            f"application (Contents, MacOS, bin): python3 -m pip install --user "
            f'"{pip}", '
            "and start QGIS anew."
        )
    return (
        f"Install python3-{name} ({package.least_text} or newer) with the package "
        f'manager of your system, or run: python3 -m pip install --user "{pip}", and '
        "start QGIS anew."
    )


def missing_sentence(name):
    """Say what is wrong with a package and what to do; empty where it is ready.

    Parameters
    ----------
    name : str
        Name of one of `PACKAGES`.

    Returns
    -------
    str
        Problem, what is off without it, and how to install it on this machine.
    """
    state = package_state(name)
    if state.is_ready:
        return ""
    package = state.package
    return (
        f"{state.problem} It is needed for {package.needed_for}. "
        f"{how_to_install(package)}"
    )
