"""The whole job in the real QGIS desktop, from the ZIP, as a user does it.

The steps are in desktop_session.py; screenshots of each are kept in build/screenshots
for a person to look at.
"""

import importlib.util
import json
import shutil
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
SESSION = ROOT / "tests" / "with_qgis" / "desktop_session.py"
SCREENSHOTS = ROOT / "build" / "screenshots"
ALGORITHMS = {
    "Lay parallel sections",
    "Pull picks to sections",
    "Predict fault from rollover",
    "Predict horizons from fault",
    "Run study",
}
SHOWN = {
    "01_sample_project",
    "02_toolbox",
    "03_dialog",
    "04_dialog_done",
    "05_map",
    "06_map_near",
    "07_profile",
    "08_view_3d",
    "09_saved_view_3d",
}
WITH_Z = ("Picks in depth", "Predicted fault traces", "Fault points", "Cut-offs")

pytestmark = [
    pytest.mark.gui,
    pytest.mark.slow,
    pytest.mark.skipif(
        not (shutil.which("xvfb-run") and shutil.which("qgis")),
        reason="no QGIS desktop or no xvfb-run on this machine",
    ),
]


def built_zip(folder):
    """Build the plugin's ZIP from this checkout."""
    path = ROOT / "scripts" / "build_zip.py"
    spec = importlib.util.spec_from_file_location("build_zip", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.build(folder)


def empty_screenshots():
    """Make the folder for the screenshots, without those of an earlier run."""
    SCREENSHOTS.mkdir(parents=True, exist_ok=True)
    for old in SCREENSHOTS.glob("*.png"):
        old.unlink()
    return SCREENSHOTS


@pytest.fixture
def session(fresh_qgis_process, run_desktop, tmp_path):
    """Findings of one session of the desktop with the plugin from its ZIP."""
    qgis = fresh_qgis_process()
    qgis.profile_plugins.mkdir(parents=True)
    with zipfile.ZipFile(built_zip(tmp_path)) as file:
        file.extractall(qgis.profile_plugins)
    qgis.enable()
    work, findings = tmp_path / "a user's työ", tmp_path / "found.json"
    work.mkdir()
    shots = empty_screenshots()
    done = run_desktop(qgis, SESSION, work, shots, findings, timeout=900)
    assert findings.is_file(), f"the desktop ended early: {done.stderr[-3000:]}"
    found = json.loads(findings.read_text(encoding="utf-8"))
    assert "error" not in found, f"at {found['at']}: {found.get('error')}"
    return {**found, "plugins": str(qgis.profile_plugins), "work": work}


def test_user_does_the_whole_job_in_the_desktop(session):
    """From the menu to styled layers, profile and 3D view, with nothing by hand."""
    check_plugin(session)
    check_sample(session)
    check_run(session)
    check_layers(session)
    check_pictures(session)


def check_plugin(found):
    """The plugin runs from the ZIP, shows its tools, and goes without a trace."""
    assert found["plugin_path"].startswith(found["plugins"])
    assert found["has_icon"]
    assert set(found["toolbox"]) >= ALGORITHMS
    assert found["menu_before_unload"]
    assert found["unloaded"]
    assert not found["provider_after_unload"]
    assert not found["menu_after_unload"]
    assert found["started_again"]
    assert found["provider_again"]


def check_sample(found):
    """The sample opens as the user's own copy, in groups, all layers found."""
    sample = found["sample"]
    assert Path(sample["file"]).is_relative_to(found["work"])
    assert len(sample["groups"]) == 3
    assert sample["groups"][0] == "Results"
    assert sample["groups"][-1] == "Base"
    assert sample["valid"]
    assert all(sample["valid"].values())


def check_run(found):
    """The study ran from the dialog: every section solved, files where asked for."""
    assert found["finished"]
    assert found["numbers"]["SOLVED"] >= 5
    assert found["numbers"]["NOT_SOLVED"] == 0
    assert "Traceback" not in found["log"]
    assert (found["work"] / "desktop_results.gpkg").is_file()
    assert list((found["work"] / "plots").glob("*.png"))


def check_layers(found):
    """Each layer came with style, elevation, 3D symbol, CRS and title."""
    results = found["results"]
    for title in WITH_Z:
        layer = results[title]
        assert layer["rows"] > 0
        assert layer["absolute"], title
        assert layer["3d"], title
        assert layer["crs"] == results["Section lines"]["crs"]
        assert layer["title"].startswith(f"{title}: ")
    assert results["Fault points"]["renderer"] == "graduatedSymbol"
    assert results["Cut-offs"]["renderer"] == "categorizedSymbol"
    assert results["Predicted fault traces"]["labels"]
    assert results["Section lines"]["labels"]
    order = found["order"]
    for above, below in (
        ("Cut-offs", "Predicted fault traces"),
        ("Predicted fault traces", "Section lines"),
    ):
        assert order.index(above) < order.index(below)


def check_pictures(found):
    """Fault, picks and depths are to be seen on map, profile and in 3D."""
    assert set(found["steps"]) == SHOWN
    assert found["map"]["deep"] > 300
    assert "Predicted fault traces" in found["profile_layers"]
    assert found["profile"]["fault"] > 300
    assert found["profile"]["horizon picks"] > 100
    assert found["profile"]["black"] > 50
    assert found["view_3d"]["fault"] > 300
    assert found["saved_view_3d"]["fault"] > 300
