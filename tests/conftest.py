"""What every test shares: one name of the core per run, versions, and the open data."""

import importlib.metadata
import importlib.util
import os
import subprocess
import sys
from pathlib import Path

import hypothesis
import pytest

ROOT = Path(__file__).resolve().parents[1]
WITH_QGIS = ROOT / "tests" / "with_qgis"

# The same examples in every run: a red test must be red again at the next try.
hypothesis.settings.register_profile(
    "house", derandomize=True, deadline=None, database=None, print_blob=True
)
hypothesis.settings.load_profile("house")

_QGIS_VERSIONS = """
import sys
sys.path += ["/usr/share/qgis/python"]
from osgeo import gdal
from qgis.core import Qgis, QgsProjUtils
from qgis.PyQt.QtCore import qVersion
proj = f"{QgsProjUtils.projVersionMajor()}.{QgsProjUtils.projVersionMinor()}"
print(f"QGIS {Qgis.version()}, Qt {qVersion()}, GDAL {gdal.__version__},"
      f" GEOS {Qgis.geosVersion()}, PROJ {proj}")
"""


def open_data_folder():
    """Folder of the open data: HEAVELINE_DATA, or shared/data beside the checkout."""
    named = os.environ.get("HEAVELINE_DATA")
    return Path(named) if named else ROOT.parent / "shared" / "data"


def open_data_is_there():
    """Tell whether the table of expected figures of the open data can be read."""
    return (open_data_folder() / "expected_figures.csv").is_file()


@pytest.fixture(scope="session")
def open_data():
    """Folder of the open data; without it the test is skipped, and counted."""
    if not open_data_is_there():
        pytest.skip(f"open data not found in {open_data_folder()}; set HEAVELINE_DATA")
    return open_data_folder()


def _selected_paths(config):
    paths = (Path(str(arg).split("::")[0]) for arg in config.args)
    return [p if p.is_absolute() else config.invocation_params.dir / p for p in paths]


def _holds_qgis_tests(path):
    path = path.resolve()
    return path in (WITH_QGIS, *WITH_QGIS.parents) or WITH_QGIS in path.parents


def _holds_only_qgis_tests(path):
    path = path.resolve()
    return path == WITH_QGIS or WITH_QGIS in path.parents


def pytest_configure(config):
    """Refuse a run that would load the core under both of its names."""
    paths = _selected_paths(config)
    if any(map(_holds_qgis_tests, paths)) and not all(
        map(_holds_only_qgis_tests, paths)
    ):
        raise pytest.UsageError(
            "tests/with_qgis loads the core as heaveline.geomcore, the other tests as "
            "geomcore, and one process may load only one of them: run 'pytest' and "
            "'pytest tests/with_qgis' apart, or scripts/run_tests.sh"
        )


def _core_versions():
    parts = [f"Python {sys.version.split()[0]}"]
    for name in ("numpy", "scipy", "shapely", "pyproj", "matplotlib"):
        try:
            parts.append(f"{name} {importlib.metadata.version(name)}")
        except importlib.metadata.PackageNotFoundError:
            parts.append(f"{name} missing")
    if importlib.util.find_spec("shapely"):
        import shapely

        if hasattr(shapely, "geos_version_string"):
            parts.append(f"GEOS {shapely.geos_version_string} (shapely's)")
    if importlib.util.find_spec("pyproj"):
        import pyproj

        parts.append(f"PROJ {pyproj.proj_version_str} (pyproj's)")
    return ", ".join(parts)


def _qgis_versions():
    run = subprocess.run(
        [sys.executable, "-c", _QGIS_VERSIONS],
        env={**os.environ, "QT_QPA_PLATFORM": "offscreen"},
        capture_output=True,
        text=True,
        check=False,
    )
    return run.stdout.strip() or "QGIS cannot be imported"


def pytest_report_header(config):
    """Say in the first lines with which versions the tests run."""
    lines = [_core_versions()]
    if any(map(_holds_qgis_tests, _selected_paths(config))):
        lines.append(_qgis_versions())  # in a process of its own
    there = "found" if open_data_is_there() else "NOT FOUND"
    lines.append(f"open data: {there} in {open_data_folder()}")
    return lines


def pytest_terminal_summary(terminalreporter):
    """Say at the end what the absence of the open data left unchecked."""
    if open_data_is_there():
        return
    skipped = terminalreporter.stats.get("skipped", [])
    count = sum("open data not found" in str(report.longrepr) for report in skipped)
    terminalreporter.write_sep("=", "open data absent", yellow=True)
    terminalreporter.write_line(
        f"{count} tests against real data did not run: {open_data_folder()} holds no "
        "expected_figures.csv. Set HEAVELINE_DATA to the folder of the open data."
    )
