"""QGIS without a screen for the tests of the plugin, in this process and beside it."""

import importlib.util
import json
import os
import shutil
import subprocess
import sys
import sysconfig
from pathlib import Path

import pytest

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
# Tests write some hundred small GeoPackages; none of them has to survive a power cut.
os.environ.setdefault("OGR_SQLITE_SYNCHRONOUS", "OFF")
# QGIS's own Python and its core plugin "processing" on Debian.
sys.path += ["/usr/share/qgis/python", "/usr/share/qgis/python/plugins"]

ROOT = Path(__file__).resolve().parents[2]


def _load_root_as_heaveline():
    """Make the repository root importable as the package that QGIS sees."""
    spec = importlib.util.spec_from_file_location(
        "heaveline", ROOT / "__init__.py", submodule_search_locations=[str(ROOT)]
    )
    module = importlib.util.module_from_spec(spec)
    sys.modules["heaveline"] = module
    spec.loader.exec_module(module)


_load_root_as_heaveline()


@pytest.fixture(scope="session")
def qgis_app(tmp_path_factory):
    """Start QGIS once, with the 3D library, Processing and our provider registered."""
    from qgis import _3d
    from qgis.core import QgsApplication

    app = QgsApplication([], True, str(tmp_path_factory.mktemp("qgis_profile")))
    app.initQgis()
    _3d.Qgs3D.initialize()  # else 3D renderers are lost on style and project load
    from processing.core.Processing import Processing

    Processing.initialize()
    from heaveline.plugin.provider import HeavelineProvider

    provider = HeavelineProvider()
    QgsApplication.processingRegistry().addProvider(provider)
    yield app
    QgsApplication.processingRegistry().removeProvider(provider)


class QgisProcess:
    """`qgis_process` with a profile of its own and the plugin enabled in it.

    Parameters
    ----------
    home : pathlib.Path
        Empty folder for the profile and the runtime files.
    plugins_dir : pathlib.Path, optional
        Folder that holds the plugin folder ``heaveline``; without it the plugin is
        looked for inside the profile only.
    extra_path : list of pathlib.Path
        Folders put first on the Python path of QGIS.
    """

    def __init__(self, home, plugins_dir=None, extra_path=()):
        self.home = Path(home)
        runtime = self.home / "run"
        runtime.mkdir(mode=0o700, parents=True, exist_ok=True)
        site = sysconfig.get_path("purelib")
        self.env = {
            **os.environ,
            "QT_QPA_PLATFORM": "offscreen",
            "QGIS_CUSTOM_CONFIG_PATH": str(self.home / "profile"),
            "PYTHONPATH": os.pathsep.join([*map(str, extra_path), site]),
            "PYTHONDONTWRITEBYTECODE": "1",
            "XDG_RUNTIME_DIR": str(runtime),
        }
        self.env.pop("QGIS_PLUGINPATH", None)
        if plugins_dir is not None:
            self.env["QGIS_PLUGINPATH"] = str(plugins_dir)

    @property
    def profile_plugins(self):
        """Folder of this profile into which the plugin manager unzips plugins."""
        return self.home / "profile" / "profiles" / "default" / "python" / "plugins"

    def call(self, *args, stdin=None, timeout=300):
        """Run `qgis_process` with these arguments; give the finished process."""
        return subprocess.run(
            [shutil.which("qgis_process") or "qgis_process", *args],
            input=stdin,
            env=self.env,
            capture_output=True,
            text=True,
            timeout=timeout,
            check=False,
        )

    def enable(self):
        """Enable the plugin in the profile; fails if the plugin does not start."""
        done = self.call("plugins", "enable", "heaveline")
        assert done.returncode == 0, done.stdout + done.stderr
        return self

    def run(self, algorithm_id, inputs, timeout=300):
        """Run one algorithm; give return code, results, stdout and stderr."""
        done = self.call(
            "run",
            algorithm_id,
            "-",
            stdin=json.dumps({"inputs": inputs}, default=str),
            timeout=timeout,
        )
        try:
            results = json.loads(done.stdout).get("results", {})
        except json.JSONDecodeError:
            results = {}  # it failed: the return code and stderr say why
        return done.returncode, results, done.stdout, done.stderr


@pytest.fixture(scope="session")
def checkout_plugins(tmp_path_factory):
    """Plugins folder in which the checkout itself stands as ``heaveline``."""
    folder = tmp_path_factory.mktemp("plugins")
    (folder / "heaveline").symlink_to(ROOT, target_is_directory=True)
    return folder


@pytest.fixture(scope="session")
def run_qgis_process(tmp_path_factory, checkout_plugins):
    """Run an algorithm by `qgis_process`, by default with the plugin of the checkout.

    ``run_qgis_process(algorithm_id, inputs, plugins_dir=None)`` gives return code,
    results, stdout and stderr. One profile is made per plugins folder and kept for
    the session.
    """
    ready = {}

    def run(algorithm_id, inputs, plugins_dir=None, timeout=300):
        folder = Path(plugins_dir) if plugins_dir is not None else checkout_plugins
        if folder not in ready:
            home = tmp_path_factory.mktemp("qgis_process")
            ready[folder] = QgisProcess(home, folder).enable()
        return ready[folder].run(algorithm_id, inputs, timeout)

    return run


@pytest.fixture
def fresh_qgis_process(tmp_path):
    """Make a `QgisProcess` with an empty profile of its own; see the class."""

    def make(plugins_dir=None, extra_path=(), name="qgis"):
        return QgisProcess(tmp_path / name, plugins_dir, extra_path)

    return make


@pytest.fixture(scope="session")
def artefacts():
    """Folder, kept after the run, for screenshots that a person looks at."""
    folder = ROOT / "build" / "artefacts"
    folder.mkdir(parents=True, exist_ok=True)
    return folder


@pytest.fixture
def run_desktop():
    """Run a script inside the real QGIS desktop under a virtual screen.

    ``run_desktop(qgis, script, *args)`` takes a `QgisProcess` with the plugin enabled,
    whose profile the desktop uses too. The script has to end with ``os._exit(code)``;
    its code and output are given back.
    """

    def run(qgis, script, *args, timeout=120):
        env = {key: qgis.env[key] for key in qgis.env if key != "QT_QPA_PLATFORM"}
        command = ["xvfb-run", "-a", "-s", "-screen 0 1600x1000x24", "qgis"]
        command += ["--nologo", "--noversioncheck", "--code", str(script)]
        command += ["--py-args", *map(str, args), "--"]
        return subprocess.run(
            command,
            env=env,
            capture_output=True,
            text=True,
            timeout=timeout,
            check=False,
        )

    return run
