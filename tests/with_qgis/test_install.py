"""The plugin as a user gets it: the ZIP in an empty profile, and packages missing."""

import importlib.util
import json
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
ALGORITHMS = (
    "parallelsections",
    "pullpicks",
    "predictfault",
    "predicthorizon",
    "runstudy",
)
# Put on the Python path as sitecustomize.py, which Python imports before all else.
HIDE = """
import importlib.abc
import sys

HIDDEN = {names!r}


class Hide(importlib.abc.MetaPathFinder):
    def find_spec(self, name, path=None, target=None):
        if name.split(".")[0] in HIDDEN:
            raise ModuleNotFoundError(f"No module named {{name!r}}", name=name)
        return None


sys.meta_path.insert(0, Hide())
"""


@pytest.fixture(scope="module")
def builder():
    """The script that builds the ZIP, as a module."""
    path = ROOT / "scripts" / "build_zip.py"
    spec = importlib.util.spec_from_file_location("build_zip", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def built_zip(builder, tmp_path_factory):
    """The plugin's ZIP, built from this checkout."""
    return builder.build(tmp_path_factory.mktemp("zip"))


@pytest.fixture
def installed(built_zip, fresh_qgis_process):
    """An empty profile into which the ZIP was unzipped, and enabled."""
    qgis = fresh_qgis_process()
    qgis.profile_plugins.mkdir(parents=True)
    with zipfile.ZipFile(built_zip) as file:
        file.extractall(qgis.profile_plugins)
    return qgis.enable()


@pytest.fixture
def qgis_without(fresh_qgis_process, checkout_plugins, tmp_path):
    """Make a QGIS in which these Python packages cannot be imported."""

    def make(*names):
        folder = tmp_path / "hidden"
        folder.mkdir()
        text = HIDE.format(names=set(names))
        (folder / "sitecustomize.py").write_text(text, encoding="utf-8")
        return fresh_qgis_process(checkout_plugins, [folder])

    return make


def listed_algorithms(qgis):
    """Names of the provider's algorithms that `qgis_process` lists."""
    done = qgis.call("list", "--json")
    assert done.returncode == 0, done.stderr
    providers = json.loads(done.stdout)["providers"]
    assert "heaveline" in providers, done.stderr
    return {name.split(":")[1] for name in providers["heaveline"]["algorithms"]}


def test_zip_holds_one_folder_and_nothing_stray(built_zip):
    """What the plugin repository asks of an upload; its limit is 25 MB."""
    with zipfile.ZipFile(built_zip) as file:
        names = file.namelist()
    assert {name.split("/")[0] for name in names} == {"heaveline"}
    for wanted in ("__init__.py", "metadata.txt", "LICENSE", "README.md"):
        assert f"heaveline/{wanted}" in names
    for part in ("plugin/provider.py", "geomcore/__init__.py"):
        assert f"heaveline/{part}" in names
    assert any(name.startswith("heaveline/sample_project/") for name in names)
    stray = (".pyc", "__pycache__", "/.", "..", "-wal", "-shm", "~")
    assert [name for name in names if any(mark in name for mark in stray)] == []
    assert built_zip.stat().st_size < 25e6


def test_zip_is_the_same_each_time(builder, built_zip, tmp_path):
    """The same files give the same bytes, whenever and wherever it is built."""
    assert builder.build(tmp_path).read_bytes() == built_zip.read_bytes()


def test_zip_installs_into_an_empty_profile(installed):
    """Unzipped and enabled, the plugin offers its algorithms."""
    assert listed_algorithms(installed) >= set(ALGORITHMS)


def test_main_job_runs_from_the_zip(installed, tmp_path):
    """The sample that came in the ZIP runs, and all its outputs are written."""
    sample = installed.profile_plugins / "heaveline" / "sample_project"
    output = tmp_path / "results.gpkg"
    plots = tmp_path / "plots"
    inputs = {"STUDY": sample / "study.json", "OUTPUT": output, "PLOTS": plots}
    code, _, _, errors = installed.run("heaveline:runstudy", inputs)
    assert code == 0, errors
    assert output.is_file()
    assert list(plots.glob("*.png"))


# QGIS itself imports shapely when it starts, and a shapely without its numpy would
# stop QGIS, not us: so numpy goes together with what is built on it.
NUMPY_AND_ALL_ON_IT = ("numpy", "scipy", "shapely", "matplotlib")


@pytest.mark.parametrize(
    "names",
    [NUMPY_AND_ALL_ON_IT, ("scipy",), ("shapely",), ("pyproj",), ("matplotlib",)],
    ids=lambda names: names[0],
)
def test_plugin_loads_without_a_package(qgis_without, names):
    """Whatever is missing in the user's QGIS, the plugin starts and lists its tools."""
    qgis = qgis_without(*names).enable()
    assert listed_algorithms(qgis) >= set(ALGORITHMS)


def test_plugin_loads_with_an_old_shapely(
    fresh_qgis_process, checkout_plugins, tmp_path
):
    """Debian 12 and older QGIS bring shapely 1.8, which imports but lacks functions."""
    fake = tmp_path / "old" / "shapely"
    fake.mkdir(parents=True)
    (fake / "__init__.py").write_text('__version__ = "1.8.5"\n', encoding="utf-8")
    qgis = fresh_qgis_process(checkout_plugins, [fake.parent]).enable()
    assert listed_algorithms(qgis) >= set(ALGORITHMS)


def test_main_job_runs_with_numpy_alone(qgis_without, tmp_path):
    """Sections, picks, march and layers need nothing but what QGIS itself brings."""
    qgis = qgis_without("scipy", "shapely", "pyproj", "matplotlib").enable()
    output = tmp_path / "results.gpkg"
    inputs = {"STUDY": ROOT / "sample_project" / "study.json", "OUTPUT": output}
    code, _, _, errors = qgis.run("heaveline:runstudy", inputs)
    assert code == 0, errors
    assert output.is_file()


@pytest.mark.parametrize(
    ("names", "extra"),
    [(NUMPY_AND_ALL_ON_IT, {}), (("matplotlib",), {"PLOTS": "plots"})],
    ids=["numpy", "matplotlib"],
)
def test_missing_package_is_named_by_the_algorithm_that_needs_it(
    qgis_without, tmp_path, names, extra
):
    """The user reads what to install, never a trace back, and nothing half-written."""
    qgis = qgis_without(*names).enable()
    output = tmp_path / "results.gpkg"
    inputs = {"STUDY": ROOT / "sample_project" / "study.json", "OUTPUT": output}
    inputs.update({key: tmp_path / value for key, value in extra.items()})
    code, _, _, errors = qgis.run("heaveline:runstudy", inputs)
    assert code == 1
    assert names[0] in errors
    assert "install" in errors.lower()
    # QGIS's own plugins may print a trace back without numpy; ours must not.
    assert "heaveline/plugin" not in errors.replace("\\", "/")
    assert "heaveline/geomcore" not in errors.replace("\\", "/")
    assert not output.exists()
