"""The walls of the house: what may know what, and what shipped code never does.

Source of the rules: the project's own design. Each check is first shown to find a
planted fault, so that none of them can pass by finding nothing ever.
"""

import configparser
import re
import subprocess
import sys
import textwrap

import pytest
from house_rules import (
    QGIS,
    QT_BINDINGS,
    ROOT,
    absolute_core_imports,
    chatter,
    coordinate_arithmetic,
    dangers,
    heavy_imports_at_load,
    imports_of,
    machine_paths,
    missing_docstrings,
    modules,
    newer_python,
    old_qt,
    widgets,
)

SHIPPED = ("__init__.py", "geomcore", "plugin")
HAND_OVER = ("plugin/algorithms",)
WITHOUT_WIDGETS = ("plugin/algorithms", "plugin/layers", "plugin/outputs")


def knows_qgis(source):
    """Find imports of QGIS, Qt or GDAL."""
    return imports_of(source, QGIS)


def binds_qt_directly(source):
    """Find imports of a Qt binding that do not go through qgis.PyQt."""
    return imports_of(source, QT_BINDINGS)


# Rule, where it holds, planted faults that it must find, sound lines it must pass.
WALLS = {
    "core knows no QGIS": (
        knows_qgis,
        ("geomcore",),
        ["from qgis.core import Qgis", "import osgeo.gdal", "import PyQt5"],
        ["import numpy as np", "from .section import SectionFrame"],
    ),
    "Qt only through qgis.PyQt": (
        binds_qt_directly,
        ("plugin", "__init__.py"),
        ["from PyQt5.QtCore import Qt", "def f():\n    import PyQt6", "import sip"],
        ["from qgis.PyQt.QtCore import Qt", "from qgis.PyQt import sip"],
    ),
    "core and plugin are imported relatively": (
        absolute_core_imports,
        SHIPPED,
        ["from geomcore import picks", "import heaveline.geomcore"],
        ["from ..geomcore import picks", "from . import layers"],
    ),
    "nothing but numpy is needed to load": (
        heavy_imports_at_load,
        SHIPPED,
        ["import shapely", "class A:\n    from scipy.sparse import coo_matrix"],
        ["def f():\n    import shapely", "import numpy as np"],
    ),
    "no widgets where layers and algorithms are": (
        widgets,
        WITHOUT_WIDGETS,
        [
            "from qgis.PyQt.QtWidgets import QLabel",
            "from qgis.PyQt import QtWidgets",
            "from qgis.gui import QgsDockWidget",
            "from qgis.utils import iface",
        ],
        ["from qgis.core import QgsProcessing", "from qgis.PyQt.QtGui import QIcon"],
    ),
    "algorithms do no geometry": (
        coordinate_arithmetic,
        HAND_OVER,
        ["import numpy", "from math import hypot", "d = a.x() - b.x()"],
        ["n = 2 * len(rows)", "text = '%s %s' % (a, b)"],
    ),
    "public things of the core are documented": (
        missing_docstrings,
        ("geomcore",),
        [
            "def f(): pass",
            '"m"\nclass A: pass',
            '"m"\nclass A:\n    "a"\n    def f(self): pass',
        ],
        ['"m"\ndef f():\n    "f"', '"m"\ndef _f(): pass', '"m"\nclass _A: pass'],
    ),
    "modules of the plugin are documented": (
        missing_docstrings,
        ("plugin", "__init__.py"),
        ["x = 1", '"m"\nclass A: pass'],
        ['"m"\nclass A:\n    "a"'],
    ),
    "Python 3.9": (
        newer_python,
        SHIPPED,
        [
            "match x:\n    case 1: pass",
            "@dataclass(frozen=True, slots=True)\nclass A: pass",
            "def f(x: int | None): pass",
            "def f() -> int | None: pass",
            "isinstance(x, int | float)",
            "zip(a, b, strict=True)",
            "from itertools import pairwise",
            "import tomllib",
        ],
        [
            "from __future__ import annotations\ndef f(x: int | None): pass",
            "isinstance(x, (int, float))",
            "flags = A.b | A.c",
        ],
    ),
    "nothing dangerous": (
        dangers,
        SHIPPED,
        [
            "eval('1')",
            "exec(text)",
            "import pickle",
            "import subprocess",
            "from urllib import request",
            "assert x",
            "os.system('ls')",
            "sys.path.append('x')",
            "cursor.execute(f'select * from {table}')",
            "cursor.execute('SELECT * FROM %s' % table)",
            "cursor.execute('delete from ' + table)",
            "cursor.execute('drop table {}'.format(table))",
        ],
        [
            "cursor.execute('select a from b where c = ?', (d,))",
            "dialog.exec()",
            "re.compile('a')",
            "os.path.exists(p)",
        ],
    ),
    "no place of one machine": (
        machine_paths,
        SHIPPED,
        ["p = '/home/me/x'", "p = 'see /tmp/x'", r"p = 'C:\\data'", "p = '/usr/x'"],
        ["p = 'https://a.example/home/x'", "p = 'm/s'", "p = 'and/or'"],
    ),
    "the core is silent": (
        chatter,
        ("geomcore",),
        ["print(1)", "import logging", "from warnings import warn"],
        ["pretty(1)"],
    ),
    "Qt 6 understands it": (
        old_qt,
        ("plugin", "__init__.py"),
        [
            "from qgis.PyQt.QtCore import Qt\na = Qt.AlignLeft | Qt.AlignTop",
            "from qgis.core import Qgis\nq = Qgis.Critical",
            "from qgis.PyQt.QtCore import QVariant\nt = QVariant.Double",
            "from qgis.PyQt.QtWidgets import QAction",
            "dialog.exec_()",
        ],
        [
            "from qgis.PyQt.QtCore import Qt\na = Qt.AlignmentFlag.AlignLeft",
            "from qgis.core import Qgis\nv = Qgis.QGIS_VERSION_INT",
            "from qgis.core import QgsX\nx = QgsX.Inner(1)",
            "from qgis.PyQt.QtGui import QAction\ndialog.exec()",
        ],
    ),
}

PLANTED = [
    pytest.param(check, fault, id=f"{name}-{number}")
    for name, (check, _, faults, _) in WALLS.items()
    for number, fault in enumerate(faults)
]
SOUND = [
    pytest.param(check, text, id=f"{name}-{number}")
    for name, (check, _, _, sound) in WALLS.items()
    for number, text in enumerate(sound)
]


@pytest.mark.parametrize(("check", "fault"), PLANTED)
def test_each_wall_finds_a_planted_fault(check, fault):
    """A check that finds nothing in a fault would guard nothing."""
    assert check(fault), f"not found: {fault}"


@pytest.mark.parametrize(("check", "text"), SOUND)
def test_no_wall_stands_in_the_way_of_sound_code(check, text):
    """A check that cries at sound code would soon be switched off."""
    assert check(text) == []


@pytest.mark.parametrize("name", WALLS)
def test_shipped_code_keeps_the_rule(name):
    """Each module in the places where the rule holds keeps it."""
    check, places, _, _ = WALLS[name]
    paths = modules(*places)
    assert paths, f"nothing to check in {places}"
    absent = [place for place in places if not (ROOT / place).exists()]
    assert absent == [], "the rule is for places that do not exist"
    found = [
        f"{path.relative_to(ROOT)}:{words}"
        for path in paths
        for words in check(path.read_text(encoding="utf-8"))
    ]
    assert not found, "\n".join(found)


@pytest.mark.parametrize(
    ("folder", "other_name"),
    [
        ("tests/core", "heaveline"),
        ("tests/published", "heaveline"),
        ("tests/benchmarks", "heaveline"),
        ("tests/with_qgis", "geomcore"),
    ],
)
def test_each_test_folder_uses_one_name_of_the_core(folder, other_name):
    """The core under two names gives two copies of each class: never in one folder."""
    found = [
        f"{path.relative_to(ROOT)}:{words}"
        for path in modules(folder)
        for words in imports_of(path.read_text(encoding="utf-8"), {other_name})
    ]
    assert not found, "\n".join(found)


def test_the_name_rule_finds_a_planted_fault():
    """Both ways of importing the other name are seen."""
    assert imports_of("from geomcore.picks import Picks", {"geomcore"})
    assert imports_of("def f():\n    import heaveline.geomcore", {"heaveline"})
    assert not imports_of("from heaveline.geomcore import picks", {"geomcore"})


def _python(code):
    return subprocess.run(
        [sys.executable, "-c", textwrap.dedent(code)],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )


_WALK = """
    import importlib, pkgutil, sys
    hidden = {hidden!r}
    sys.modules.update(dict.fromkeys(hidden))     # None: importing it fails
    sys.path.insert(0, ".")
    import geomcore
    found = pkgutil.walk_packages(geomcore.__path__, "geomcore.")
    names = [module.name for module in found]
    for name in names:
        importlib.import_module(name)
    print(len(names), *(r for r in {roots!r} if sys.modules.get(r)))
"""


def test_core_loads_without_qgis():
    """Every module of the core is imported, and nothing of QGIS comes with it."""
    done = _python(_WALK.format(hidden=[], roots=sorted(QGIS)))
    assert done.returncode == 0, done.stderr
    count, *loaded = done.stdout.split()
    assert int(count) > 3
    assert loaded == []


def test_core_loads_with_numpy_alone():
    """Without scipy, shapely, pyproj and matplotlib the core still loads."""
    hidden = ["scipy", "shapely", "pyproj", "matplotlib"]
    done = _python(_WALK.format(hidden=hidden, roots=hidden))
    assert done.returncode == 0, done.stderr


_TWO_NAMES = """
    import importlib, importlib.util, pathlib, sys
    root = pathlib.Path.cwd()
    spec = importlib.util.spec_from_file_location(
        "heaveline", root / "__init__.py", submodule_search_locations=[str(root)])
    package = importlib.util.module_from_spec(spec)
    sys.modules["heaveline"] = package
    spec.loader.exec_module(package)
    sys.path.insert(0, str(root))
    importlib.import_module({first!r})
    try:
        importlib.import_module({second!r})
    except ImportError as error:
        print("refused:", error)
"""


@pytest.mark.parametrize(
    ("first", "second"),
    [("geomcore", "heaveline.geomcore"), ("heaveline.geomcore", "geomcore")],
)
def test_second_name_of_the_core_is_refused(first, second):
    """A process that has the core under one name cannot load it under the other."""
    done = _python(_TWO_NAMES.format(first=first, second=second))
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith("refused:")
    assert first in done.stdout
    assert second in done.stdout


def test_each_name_of_the_core_loads_by_itself():
    """The guard against two names does not refuse one."""
    for name in ("geomcore", "heaveline.geomcore"):
        done = _python(_TWO_NAMES.format(first=name, second=name))
        assert (done.returncode, done.stdout) == (0, ""), done.stderr


def _metadata():
    parser = configparser.ConfigParser()
    parser.read(ROOT / "metadata.txt", encoding="utf-8")
    return parser["general"]


def test_metadata_holds_what_the_plugin_repository_requires():
    """The keys that the repository's validator asks for, and Processing's own."""
    general = _metadata()
    required = "name description version qgisMinimumVersion author email about"
    required += " tracker repository license"
    assert [key for key in required.split() if not general.get(key)] == []
    assert general["hasProcessingProvider"] == "yes"
    assert general["qgisMinimumVersion"] == "3.40"
    assert general["qgisMaximumVersion"] == "4.99"


def test_version_is_the_same_everywhere():
    """Plugin manager, Python package and the core's own word agree."""
    pyproject = (ROOT / "pyproject.toml").read_text(encoding="utf-8")
    core = (ROOT / "geomcore" / "__init__.py").read_text(encoding="utf-8")
    version = re.compile(r'^(?:__version__|version) = "(.+)"$', re.M)
    expected = _metadata()["version"]
    assert version.findall(pyproject) == [expected]
    assert version.findall(core) == [expected]


_HOST = re.compile(r"https?://|\b(?:deb|pypi|files)\.[a-z-]+\.(?:org|com)\b")
# Spelled with a gap, so that this file does not find itself.
_MACHINE = re.compile(r"(?<![\w./~$}])/" + r"(?:home|root|work)/\w")


def _text_files(*folders):
    endings = {"", ".sh", ".py", ".md", ".toml", ".txt", ".json", ".yml"}
    for folder in folders:
        for path in sorted((ROOT / folder).rglob("*")):
            if path.is_file() and path.suffix in endings:
                yield path, path.read_text(encoding="utf-8")


def test_scripts_name_no_host():
    """The mirror and the package index are those of the machine that runs them."""
    assert _HOST.search("deb http://mirror.example/debian suite main")
    files = list(_text_files("scripts", ".ci"))
    assert len(files) > 2
    assert [path.name for path, text in files if _HOST.search(text)] == []


def test_nothing_names_a_place_of_one_machine():
    """Nothing in scripts, tests, papers and sample lives at one person's machine."""
    assert _MACHINE.search("cd /home" + "/me/heaveline")
    assert not _MACHINE.search("docs/work/x and $ROOT/work/x")
    folders = ("scripts", ".ci", "tests", "sample_project", "plugin", "geomcore")
    files = [*_text_files(*folders), *((p, p.read_text("utf-8")) for p in _papers())]
    assert len(files) > 5
    found = [
        f"{path.relative_to(ROOT)}: {match.group()}"
        for path, text in files
        for match in _MACHINE.finditer(text)
        if path.name != "test_house.py"
    ]
    assert found == []


def _papers():
    return [*ROOT.glob("*.md"), *ROOT.glob("*.toml"), ROOT / "metadata.txt"]


def test_bandit_finds_nothing_in_shipped_code():
    """The plugin repository refuses an upload in which this scanner finds something."""
    places = [str(ROOT / name) for name in SHIPPED]
    done = subprocess.run(
        [sys.executable, "-m", "bandit", "-q", "-r", *places],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr


def test_bandit_finds_a_planted_fault(tmp_path):
    """The scanner does run, and its return code does tell."""
    (tmp_path / "planted.py").write_text("import pickle\npickle.loads(x)\n", "utf-8")
    done = subprocess.run(
        [sys.executable, "-m", "bandit", "-q", "-r", str(tmp_path)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 1
