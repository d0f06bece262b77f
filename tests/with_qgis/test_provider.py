"""The plugin's face: provider, parameters, help, packages, menu, sample."""

import doctest
import importlib
import json
import subprocess
import sys
import types
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
NAMES = (
    "parallelsections",
    "pullpicks",
    "calibrateshear",
    "predictfault",
    "predicthorizon",
    "runstudy",
)
#: Ids and parameter names that other people's scripts rely on (design, section 3).
FIXED = {
    "parallelsections": "FAULT_TRACE SPACING COUNT LENGTH_FOOTWALL "
    "LENGTH_HANGING_WALL TRANSPORT_AZIMUTH HW_SIDE EXTENT CRS OUTPUT",
    "pullpicks": "SECTIONS SECTION_ID HORIZON HORIZON_NAME ELEVATION_FIELD "
    "VERTICAL_UNIT VERTICAL_SIGN VERTICAL_DATUM SIGMA FAULT_TRACE FAULT_TRACE_Z "
    "FAULT_PICKS SOURCES TRANSPORT_AZIMUTH HW_SIDE CORRIDOR FAULT_BUFFER OUTPUT",
    "calibrateshear": "SECTIONS PICKS HORIZON PRE_GROWTH DETACHMENT_Z OUTPUT PLOTS",
    "predictfault": "SECTIONS PICKS HORIZON MODEL SHEAR_ANGLE SHEAR_ANGLE_SIGMA "
    "SOLVER REGIONAL_Z REGIONAL_DIP FAR_FROM FAULT OUTPUT PLOTS",
    "predicthorizon": "FAULT_TRACE SECTIONS PICKS HORIZON OFFSET OUTPUT",
    "runstudy": "STUDY OUTPUT PLOTS",
}


@pytest.fixture(scope="module")
def algorithms(qgis_app):
    """The registered algorithms by name."""
    provider = qgis_app.processingRegistry().providerById("heaveline")
    return {a.name(): a for a in provider.algorithms()}


# ---- provider and parameters -------------------------------------------------------


def test_provider_offers_the_fixed_algorithms(algorithms):
    """The ids are those of the design, no more and no fewer."""
    assert sorted(algorithms) == sorted(NAMES)
    assert {a.id() for a in algorithms.values()} == {f"heaveline:{n}" for n in NAMES}


@pytest.mark.parametrize("name", NAMES)
def test_algorithm_has_the_fixed_parameters(algorithms, name):
    """A script written against the design finds its parameter names."""
    own = {p.name() for p in algorithms[name].parameterDefinitions()}
    assert set(FIXED[name].split()) <= own


@pytest.mark.parametrize("name", NAMES)
def test_every_parameter_has_label_and_help(algorithms, name):
    """Nothing in a form is left to guessing."""
    for parameter in algorithms[name].parameterDefinitions():
        assert len(parameter.help()) > 20, parameter.name()
        assert parameter.description() != parameter.name()


@pytest.mark.parametrize("name", NAMES)
def test_algorithm_says_what_it_is(algorithms, name):
    """Title, group, tags, icon and one sentence are there."""
    algorithm = algorithms[name]
    assert algorithm.displayName() != name
    assert algorithm.group()
    assert algorithm.groupId()
    assert "fault" in algorithm.tags()
    assert not algorithm.icon().isNull()
    assert algorithm.shortDescription().endswith(".")


@pytest.mark.parametrize("name", NAMES)
def test_help_tells_of_every_output_and_field(algorithms, name):
    """Each output layer is explained with every field it has, each number too."""
    from heaveline.plugin.fields import LAYERS
    from heaveline.plugin.helptext import read_help

    algorithm = algorithms[name]
    document = read_help(name)
    told = {output.upper() for output in document["outputs"]}
    outputs = {o.name() for o in algorithm.outputDefinitions()} - {"OUTPUT", "PLOTS"}
    assert told == outputs
    text = algorithm.shortHelpString()
    assert document["assumptions"]
    for layer in algorithm.LAYERS:
        for field in LAYERS[layer].fields:
            assert f"<i>{field.name}</i>" in text


def test_help_files_belong_to_algorithms():
    """No help is left behind by an algorithm that is gone."""
    files = {path.stem for path in (ROOT / "plugin" / "help").glob("*.json")}
    assert files == set(NAMES)


def test_every_declared_parameter_is_used(algorithms):
    """A declaration that no algorithm takes would be dead text."""
    from heaveline.plugin.definitions import PARAMETERS

    taken = {p for a in algorithms.values() for p in a.PARAMETERS}
    labels = {p.label for p in taken}
    assert [n for n, p in PARAMETERS.items() if p.label not in labels] == []


def test_choices_come_from_the_core(algorithms):
    """Models and solvers have one list, that of the core."""
    from heaveline.geomcore.kinematics import MODELS
    from heaveline.geomcore.recipe import SOLVERS

    predict = algorithms["predictfault"]
    models = predict.parameterDefinition("MODEL").options()
    assert models == [model.NAME for model in MODELS]
    assert predict.parameterDefinition("SOLVER").options() == list(SOLVERS)


def test_shear_angle_has_the_bounds_of_the_core(algorithms):
    """The form lets in what the core lets in."""
    from heaveline.geomcore.kinematics import ConstantHeave

    angle = algorithms["predictfault"].parameterDefinition("SHEAR_ANGLE")
    assert (angle.minimum(), angle.maximum()) == ConstantHeave.ANGLE_BOUNDS


def test_defaults_are_those_of_the_study():
    """A parameter left alone means the same in a form and in a study document."""
    from heaveline.geomcore.recipe import ConstructionSpec, ParallelSpec, PicksSpec
    from heaveline.plugin.definitions import PARAMETERS

    picks, parallel = PicksSpec(), ParallelSpec()
    construction = ConstructionSpec("x")
    pairs = {
        "CORRIDOR": picks.corridor,
        "FAULT_BUFFER": picks.fault_buffer,
        "GRID_STEP": picks.grid_step,
        "SEPARATION_FROM": picks.separation_from,
        "SEPARATION_TO": picks.separation_to,
        "LENGTH_FOOTWALL": parallel.footwall_length,
        "LENGTH_HANGING_WALL": parallel.hanging_wall_length,
        "SHEAR_ANGLE": construction.shear_angle,
        "SHEAR_ANGLE_SIGMA": construction.shear_angle_sigma,
        "SAMPLES_PER_STRIP": construction.samples_per_strip,
        "ROBUST": construction.robust,
        "DETACHMENT_Z": construction.detachment_z,
        "DETACHMENT_SIGMA": construction.detachment_sigma,
    }
    assert {k: PARAMETERS[k].default for k in pairs} == pairs


def test_unit_and_sign_have_no_default():
    """What is not said about vertical values is asked, never guessed."""
    from heaveline.plugin.definitions import PARAMETERS

    for key in ("VERTICAL_UNIT", "VERTICAL_SIGN", "VERTICAL_DATUM", "SIGMA"):
        assert PARAMETERS[key].default is None


@pytest.mark.parametrize(
    "name", ["reporting", "recipes", "studies"], ids=lambda name: name
)
def test_examples_in_the_text_run(qgis_app, name):
    """The examples in the plugin's own documentation give what they say."""
    module = importlib.import_module(f"heaveline.plugin.{name}")
    found = doctest.testmod(module)
    assert found.attempted > 0
    assert found.failed == 0


_LOADED = """
import importlib.util, json, pathlib, sys
sys.path += ["/usr/share/qgis/python", "/usr/share/qgis/python/plugins"]
from qgis.core import QgsApplication
from processing.core.Processing import Processing
app = QgsApplication([], True, sys.argv[2]); app.initQgis(); Processing.initialize()
before = set(sys.modules)
root = pathlib.Path(sys.argv[1])
spec = importlib.util.spec_from_file_location(
    "heaveline", root / "__init__.py", submodule_search_locations=[str(root)])
module = importlib.util.module_from_spec(spec)
sys.modules["heaveline"] = module
spec.loader.exec_module(module)
plugin = module.classFactory(None)
plugin.initProcessing()
registry = QgsApplication.processingRegistry()
there = registry.providerById("heaveline") is not None
new = sorted(set(sys.modules) - before)
plugin.unload()
gone = registry.providerById("heaveline") is None
print(json.dumps({"new": new, "there": there, "gone": gone}))
"""


@pytest.fixture(scope="module")
def loaded(tmp_path_factory):
    """What a fresh process says of loading, registering and unloading the plugin."""
    profile = tmp_path_factory.mktemp("loaded")
    done = subprocess.run(
        [sys.executable, "-c", _LOADED, str(ROOT), str(profile)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout.strip().splitlines()[-1])


def test_loading_imports_nothing_heavy(loaded):
    """The start of QGIS does not wait for scipy, shapely, matplotlib or widgets."""
    tops = {name.split(".")[0] for name in loaded["new"]}
    assert tops & {"scipy", "shapely", "matplotlib", "pyproj", "numpy"} == set()
    assert "heaveline.plugin.layers" not in loaded["new"]
    assert "heaveline.geomcore.study" not in loaded["new"]


def test_plugin_registers_and_unregisters(loaded):
    """Switched off, the plugin leaves no algorithms behind."""
    assert loaded["there"]
    assert loaded["gone"]


# ---- packages ----------------------------------------------------------------------


def fake_package(monkeypatch, name, **attributes):
    """Put a module of this name where imports find it first."""
    module = types.ModuleType(name)
    for key, value in attributes.items():
        setattr(module, key, value)
    monkeypatch.setitem(sys.modules, name, module)


def test_old_shapely_is_told_apart_from_a_new_one(monkeypatch):
    """Shapely 1.8 imports without complaint; only its version tells."""
    from heaveline.plugin.packages import missing_sentence, package_state

    fake_package(monkeypatch, "shapely", __version__="1.8.5.post1")
    assert not package_state("shapely").is_ready
    assert "1.8.5.post1 is too old: 2.0 or newer" in missing_sentence("shapely")
    fake_package(monkeypatch, "shapely", __version__="2.1rc1")
    assert package_state("shapely").is_ready


def test_missing_package_says_what_to_install(monkeypatch):
    """The sentence names the package, what is off, and the way to get it."""
    from heaveline.plugin.packages import missing_sentence

    monkeypatch.setitem(sys.modules, "matplotlib", None)
    sentence = missing_sentence("matplotlib")
    assert "matplotlib is not installed" in sentence
    assert "section plots" in sentence
    assert "Install" in sentence


def test_broken_package_says_why(monkeypatch, tmp_path):
    """A package built for another numpy is there, does not start, and says so."""
    from heaveline.plugin.packages import package_state

    (tmp_path / "matplotlib.py").write_text(
        'raise RuntimeError("built for another numpy")\n', encoding="utf-8"
    )
    monkeypatch.syspath_prepend(tmp_path)
    for name in [n for n in sys.modules if n.split(".")[0] == "matplotlib"]:
        monkeypatch.delitem(sys.modules, name)
    problem = package_state("matplotlib").problem
    assert "does not start" in problem
    assert "built for another numpy" in problem


@pytest.mark.parametrize(
    ("platform", "words"),
    [
        ("win32", "OSGeo4W Shell"),
        ("darwin", "inside the QGIS application"),
        ("linux", "package manager"),
    ],
)
def test_installing_is_explained_for_each_system(platform, words):
    """Windows, macOS and Linux users each read their own way."""
    from heaveline.plugin.packages import PACKAGES, how_to_install

    for package in PACKAGES:
        text = how_to_install(package, platform)
        assert words in text
        assert f"{package.name}>={package.least_text}" in text


def test_packages_are_those_of_the_project_file():
    """The lowest versions stand in pyproject.toml too, and agree."""
    from heaveline.plugin.packages import PACKAGES

    text = (ROOT / "pyproject.toml").read_text(encoding="utf-8")
    for package in PACKAGES:
        assert f'"{package.name}>={package.least_text}' in text


# ---- true north --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("crs", "x", "y", "expected", "tolerance"),
    [
        # [M] methods.md section 16: GDA technical manual, Flinders Peak, 1 35'03.65"
        ("EPSG:32755", 273741.297, 5796489.777, 1 + 35 / 60 + 3.65 / 3600, 2e-6),
        # methods.md section 16: PROJ 9.x, computed; five decimals printed
        ("EPSG:32631", 512000.0, 6471000.0, 0.17473, 5e-6),
        ("EPSG:32631", 650000.0, 6471000.0, 2.18266, 5e-6),
    ],
    ids=["55S", "31N near the centre", "31N far off"],
)
def test_convergence_turns_grid_into_true_north(
    qgis_app, crs, x, y, expected, tolerance
):
    """True azimuth = grid azimuth + convergence, either side of the equator."""
    from heaveline.plugin.north import convergence_of
    from qgis.core import QgsCoordinateReferenceSystem, QgsCoordinateTransformContext

    of = convergence_of(
        QgsCoordinateReferenceSystem(crs), QgsCoordinateTransformContext()
    )
    assert of([[x, y]]) == pytest.approx([expected], abs=tolerance)
    assert len(of([[x, y], [x, y]])) == 2


# ---- sample ------------------------------------------------------------------------


@pytest.fixture
def sample(tmp_path):
    """Make a stand-in for the sample folder: project, study, data, and scripts."""
    folder = tmp_path / "source"
    (folder / "data").mkdir(parents=True)
    for name in ("sample.qgz", "study.json", "make_sample.py", "data/a.gpkg"):
        (folder / name).write_text(name, encoding="utf-8")
    return folder


def test_sample_is_copied_without_scripts(sample, tmp_path):
    """The user gets project, study and data, not the scripts that made them."""
    from heaveline.plugin.sample import copy_sample

    project = copy_sample(tmp_path / "mine", sample)
    files = {p.relative_to(project.parent).as_posix() for p in _files(project.parent)}
    assert files == {"sample.qgz", "study.json", "data/a.gpkg"}


def _files(folder):
    return [path for path in folder.rglob("*") if path.is_file()]


def test_sample_is_never_copied_over_an_older_one(sample, tmp_path):
    """What the user changed in an earlier copy stays as it is."""
    from heaveline.plugin.sample import copy_sample

    first = copy_sample(tmp_path, sample)
    first.write_text("changed", encoding="utf-8")
    second, third = copy_sample(tmp_path, sample), copy_sample(tmp_path, sample)
    assert first.read_text(encoding="utf-8") == "changed"
    assert [p.parent.name for p in (first, second, third)] == [
        "heaveline_sample",
        "heaveline_sample_2",
        "heaveline_sample_3",
    ]


def test_sample_that_is_not_there_is_told(tmp_path):
    """A plugin zipped without its sample says so."""
    from heaveline.plugin.sample import copy_sample

    with pytest.raises(FileNotFoundError, match="no sample project"):
        copy_sample(tmp_path, tmp_path / "nothing")


# ---- menu --------------------------------------------------------------------------


class Bar:
    """A message bar that keeps what it is told."""

    def __init__(self):
        self.texts = []

    def pushMessage(self, title, text, level):
        self.texts.append(text)


class Desktop:
    """As much of the desktop as the menu touches."""

    def __init__(self, may_close=True, opens=True):
        self.menu, self.bar, self.opened = {}, Bar(), []
        self.may_close, self.opens = may_close, opens

    def mainWindow(self):
        return None

    def messageBar(self):
        return self.bar

    def addPluginToMenu(self, name, action):
        self.menu.setdefault(name, []).append(action)

    def removePluginMenu(self, name, action):
        self.menu[name].remove(action)

    def newProject(self, ask):
        assert ask, "the user has to be asked before the project is closed"
        return self.may_close

    def addProject(self, path):
        self.opened.append(Path(path))
        return self.opens


@pytest.fixture
def make_plugin(qgis_app, monkeypatch, sample):
    """Make the plugin on a stand-in desktop, the user choosing this folder."""
    from heaveline.plugin import sample as module
    from heaveline.plugin.main import HeavelinePlugin

    monkeypatch.setattr(module, "SAMPLE_FOLDER", sample)

    def make(folder, **desktop):
        plugin = HeavelinePlugin(Desktop(**desktop))
        # the provider of the test session is registered already
        plugin.initProcessing = lambda: None
        plugin.ask_folder = lambda: str(folder)
        plugin.show_report = lambda report: None
        return plugin

    return make


def test_menu_is_added_and_taken_away(make_plugin, tmp_path):
    """Under Plugins stand the sample and the check, and nothing after unloading."""
    plugin = make_plugin(tmp_path)
    plugin.initGui()
    texts = [action.text() for action in plugin.iface.menu["Heaveline"]]
    assert texts == ["Open Sample Project…", "Check Installation"]
    plugin.unload()
    assert plugin.iface.menu["Heaveline"] == []
    assert plugin.actions == []


def test_menu_opens_the_copy_of_the_sample(make_plugin, tmp_path):
    """The project opened is the user's copy, and the bar says where it is."""
    plugin = make_plugin(tmp_path)
    plugin.initGui()
    plugin.iface.menu["Heaveline"][0].trigger()
    copy = tmp_path / "heaveline_sample"
    assert plugin.iface.opened == [copy / "sample.qgz"]
    assert str(copy) in plugin.iface.bar.texts[0]


def test_turning_back_copies_nothing(make_plugin, tmp_path):
    """Closing the folder question leaves the disk as it was."""
    plugin = make_plugin("")
    before = sorted(tmp_path.rglob("*"))
    assert plugin.open_sample() is None
    assert sorted(tmp_path.rglob("*")) == before


def test_sample_waits_for_unsaved_work(make_plugin, tmp_path):
    """Where the user does not let go of the open project it stays open."""
    plugin = make_plugin(tmp_path, may_close=False)
    assert plugin.open_sample() is None
    assert plugin.iface.opened == []
    assert "open it from there" in plugin.iface.bar.texts[0]


@pytest.mark.parametrize(
    ("folder", "desktop", "words"),
    [
        ("source/sample.qgz", {}, "could not be copied"),
        (".", {"opens": False}, "could not open"),
    ],
    ids=["a file for a folder", "project not read"],
)
def test_sample_that_fails_is_told(make_plugin, tmp_path, folder, desktop, words):
    """A copy or a project that fails is said in the message bar."""
    plugin = make_plugin(tmp_path / folder, **desktop)
    assert plugin.open_sample() is None
    assert words in plugin.iface.bar.texts[0]


def test_installation_report_names_every_package(make_plugin, tmp_path, monkeypatch):
    """The report says versions, what is missing, and what is off."""
    from heaveline.plugin.packages import PACKAGES

    plugin = make_plugin(tmp_path)
    report = plugin.check_installation()
    for package in PACKAGES:
        assert f"{package.name} " in report
    assert "QGIS 3." in report or "QGIS 4." in report
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    report = plugin.check_installation()
    assert "matplotlib: matplotlib is not installed." in report
    assert "Off without it: section plots." in report
    assert "only what needs matplotlib is off" in report


def test_installation_report_counts_the_algorithms(qgis_app):
    """The report tells whether the toolbox has the algorithms."""
    from heaveline.plugin.installation import installation_report

    provider = qgis_app.processingRegistry().providerById("heaveline")
    assert f"{len(NAMES)} algorithms" in installation_report(provider)
    assert "not registered" in installation_report(None)
