"""The rules of the house as checks on source text; tests/core/test_house.py runs them.

Each check takes the text of one module and gives its findings as ``line: words``;
an empty list means that the module keeps the rule.
"""

import ast
import re
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]

QT_BINDINGS = {"PyQt4", "PyQt5", "PyQt6", "PySide2", "PySide6", "sip"}
QGIS = QT_BINDINGS | {"qgis", "osgeo", "processing", "console"}
HEAVY = {"scipy", "shapely", "pyproj", "matplotlib"}
COORDINATE_TOOLS = HEAVY | {"numpy", "math", "cmath", "statistics"}
WIDGETS = ("qgis.PyQt.QtWidgets", "qgis.gui")
NETWORK = {"ftplib", "http", "requests", "smtplib", "socket", "ssl", "urllib"}
DANGEROUS = NETWORK | {"ctypes", "dill", "marshal", "pickle", "shelve", "subprocess"}
DANGEROUS_CALLS = {"eval", "exec", "compile", "__import__", "breakpoint"}
DANGEROUS_OS = re.compile(r"(system|popen|fork|kill|startfile|exec\w+|spawn\w+)$")
MOVED_TO_QTGUI = {"QAction", "QActionGroup", "QShortcut", "QFileSystemModel"}
MOVED_TO_QTGUI |= {"QUndoCommand", "QUndoGroup", "QUndoStack"}
NEWER_THAN_39 = {
    "datetime": {"UTC"},
    "enum": {"StrEnum"},
    "itertools": {"batched", "pairwise"},
    "math": {"cbrt", "exp2"},
    "typing": {"Never", "ParamSpec", "Self", "TypeAlias", "TypeGuard", "assert_never"},
}
SQL = re.compile(
    r"\s*(select|insert|update|delete|drop|create|alter|pragma|attach)\s", re.I
)
MACHINE_PATH = re.compile(
    r"(?<![\w.:/])/(?:home|root|tmp|usr|opt|etc|var|mnt|work|Users)(?:/|$)"
    r"|\b[A-Za-z]:\\"
)


def modules(*names):
    """Python files under these folders of the repository; a file counts as itself."""
    found = []
    for name in names:
        path = ROOT / name
        found += [path] if path.is_file() else sorted(path.rglob("*.py"))
    return [path for path in found if "__pycache__" not in path.parts]


def imports(source):
    """Give (line, module, names) of each import; a relative one starts with dots."""
    found = []
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            found += [(node.lineno, alias.name, []) for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            module = "." * node.level + (node.module or "")
            found.append((node.lineno, module, [alias.name for alias in node.names]))
    return found


def _top(module):
    return module.split(".")[0]


def imports_of(source, roots):
    """Find imports whose top package is one of these."""
    return [
        f"{line}: imports {module}"
        for line, module, _ in imports(source)
        if _top(module) in roots
    ]


def both_core_names(source, forbidden):
    """Find imports of the core under the name that this test folder must not use."""
    return imports_of(source, {forbidden})


def absolute_core_imports(source):
    """Find shipped imports of the core or the plugin that are not relative."""
    return imports_of(source, {"geomcore", "heaveline", "plugin"})


def heavy_imports_at_load(source):
    """Find imports of scipy, shapely, pyproj, matplotlib made when a module loads."""
    return [
        f"{node.lineno}: imports {root} when the module is loaded"
        for node in _outside_functions(ast.parse(source))
        for root in sorted(_imported_roots(node) & HEAVY)
    ]


def _outside_functions(node):
    for child in ast.iter_child_nodes(node):
        if isinstance(child, (ast.FunctionDef, ast.AsyncFunctionDef, ast.Lambda)):
            continue
        yield child
        yield from _outside_functions(child)


def _imported_roots(node):
    if isinstance(node, ast.Import):
        return {_top(alias.name) for alias in node.names}
    if isinstance(node, ast.ImportFrom) and not node.level:
        return {_top(node.module)}
    return set()


def widgets(source):
    """Find imports of widgets, and uses of the desktop's `iface`."""
    found = []
    for line, module, names in imports(source):
        wholes = [module, *(f"{module}.{name}" for name in names)]
        if any(_is_within(whole, part) for whole in wholes for part in WIDGETS):
            found.append(f"{line}: imports widgets from {module}")
        if "iface" in names:
            found.append(f"{line}: uses the desktop's iface")
    return found


def _is_within(module, package):
    return module == package or module.startswith(package + ".")


def coordinate_arithmetic(source):
    """Find geometry done in a hand-over module: its tools, and sums of coordinates."""
    found = imports_of(source, COORDINATE_TOOLS)
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.BinOp) and (
            _is_coordinate(node.left) or _is_coordinate(node.right)
        ):
            found.append(f"{node.lineno}: arithmetic on a coordinate")
    return found


def _is_coordinate(node):
    """Tell `p.x()` and `line.pointN(0).z()` by the name of the method."""
    return (
        isinstance(node, ast.Call)
        and isinstance(node.func, ast.Attribute)
        and node.func.attr in {"x", "y", "z", "m", "xAt", "yAt", "zAt", "azimuth"}
    )


def missing_docstrings(source):
    """Find public functions, classes and methods, and modules, without a docstring."""
    tree = ast.parse(source)
    found = [] if ast.get_docstring(tree) else ["1: the module has no docstring"]
    return found + list(_undocumented(tree))


def _undocumented(node):
    for child in ast.iter_child_nodes(node):
        is_class = isinstance(child, ast.ClassDef)
        if not is_class and not isinstance(child, ast.FunctionDef):
            continue
        if child.name.startswith("_"):
            continue
        if not ast.get_docstring(child) and not _is_setter(child):
            yield f"{child.lineno}: {child.name} has no docstring"
        if is_class:
            yield from _undocumented(child)


def _is_setter(node):
    return any(
        isinstance(mark, ast.Attribute) and mark.attr in {"setter", "deleter"}
        for mark in node.decorator_list
    )


def newer_python(source):
    """Find syntax and library names that Python 3.9 does not know."""
    try:
        tree = ast.parse(source, feature_version=(3, 9))
    except SyntaxError as error:
        return [f"{error.lineno}: not Python 3.9: {error.msg}"]
    found = []
    for node in ast.walk(tree):
        found += [f"{node.lineno}: {words}" for words in _newer_in(node, tree)]
    return found


def _newer_in(node, tree):
    if isinstance(node, ast.Call):
        yield from _newer_call(node)
    if isinstance(node, (ast.Import, ast.ImportFrom)):
        yield from _newer_import(node)
    if not _annotations_are_text(tree):
        for note in _annotations(node):
            if any(_is_union(part) for part in ast.walk(note)):
                yield "a union of types written with |"


def _newer_call(node):
    name = getattr(node.func, "id", getattr(node.func, "attr", ""))
    words = {keyword.arg for keyword in node.keywords}
    if name == "zip" and "strict" in words:
        yield "zip(strict=)"
    if name == "dataclass" and words & {"slots", "kw_only"}:
        yield "dataclass(slots=) or dataclass(kw_only=)"
    if name in {"isinstance", "issubclass"} and _is_union(node.args[-1]):
        yield f"{name} with a union written with |"


def _newer_import(node):
    if _imported_roots(node) & {"tomllib"}:
        yield "tomllib"
    if isinstance(node, ast.ImportFrom):
        newer = NEWER_THAN_39.get(node.module, set())
        for alias in node.names:
            if alias.name in newer:
                yield f"{node.module}.{alias.name}"


def _annotations_are_text(tree):
    return any(
        isinstance(node, ast.ImportFrom)
        and node.module == "__future__"
        and any(alias.name == "annotations" for alias in node.names)
        for node in tree.body
    )


def _annotations(node):
    if isinstance(node, (ast.AnnAssign, ast.arg)) and node.annotation:
        yield node.annotation
    if isinstance(node, ast.FunctionDef) and node.returns:
        yield node.returns


def _is_union(node):
    return isinstance(node, ast.BinOp) and isinstance(node.op, ast.BitOr)


def dangers(source):
    """Find what shipped code never does: run text, shell out, open the network."""
    found = imports_of(source, DANGEROUS)
    for node in ast.walk(ast.parse(source)):
        found += [f"{node.lineno}: {words}" for words in _danger_in(node)]
    return found


def _danger_in(node):
    if isinstance(node, ast.Assert):
        yield "assert (gone under python -O): raise an error"
    if isinstance(node, ast.Call):
        if isinstance(node.func, ast.Name) and node.func.id in DANGEROUS_CALLS:
            yield f"calls {node.func.id}"
        if _is_attribute_of(node.func, "os") and DANGEROUS_OS.match(node.func.attr):
            yield f"calls os.{node.func.attr}"
    if _is_attribute_of(node, "sys") and node.attr == "path":
        yield "touches sys.path"
    if _formatted_sql(node):
        yield "SQL built by string formatting"


def _is_attribute_of(node, name):
    return (
        isinstance(node, ast.Attribute)
        and isinstance(node.value, ast.Name)
        and node.value.id == name
    )


def _formatted_sql(node):
    if isinstance(node, ast.JoinedStr):
        return any(map(_is_field, node.values)) and _starts_sql(node.values[0])
    if isinstance(node, ast.BinOp) and isinstance(node.op, (ast.Mod, ast.Add)):
        return _starts_sql(node.left)
    if isinstance(node, ast.Call) and isinstance(node.func, ast.Attribute):
        return node.func.attr == "format" and _starts_sql(node.func.value)
    return False


def _is_field(node):
    return isinstance(node, ast.FormattedValue)


def _starts_sql(node):
    return (
        isinstance(node, ast.Constant)
        and isinstance(node.value, str)
        and bool(SQL.match(node.value))
    )


def machine_paths(source):
    """Find text that names a place on one machine."""
    return [
        f"{node.lineno}: names a machine's path: {node.value[:60]!r}"
        for node in ast.walk(ast.parse(source))
        if isinstance(node, ast.Constant)
        and isinstance(node.value, str)
        and MACHINE_PATH.search(node.value)
    ]


def chatter(source):
    """Find prints and logging: the core speaks through results and errors only."""
    found = imports_of(source, {"logging", "warnings"})
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call) and getattr(node.func, "id", "") == "print":
            found.append(f"{node.lineno}: prints")
    return found


def old_qt(source):
    """Find what PyQt 6 no longer knows: unscoped enums, exec_, moved classes.

    An enum value is told by its shape: ``Class.Value`` with a capital, neither
    followed by a further name nor called. Constants in capitals are no enums.
    """
    tree = ast.parse(source)
    inner = {id(n.value) for n in ast.walk(tree) if isinstance(n, ast.Attribute)}
    inner |= {id(n.func) for n in ast.walk(tree) if isinstance(n, ast.Call)}
    classes = _qt_classes(source)
    found = _moved_classes(source)
    for node in ast.walk(tree):
        if not isinstance(node, ast.Attribute):
            continue
        if node.attr == "exec_":
            found.append(f"{node.lineno}: exec_() is exec() in PyQt 6")
        if id(node) not in inner and _looks_unscoped(node, classes):
            found.append(f"{node.lineno}: unscoped {node.value.id}.{node.attr}")
    return found


def _qt_classes(source):
    return {
        name
        for _, module, names in imports(source)
        if _top(module) == "qgis"
        for name in names
    }


def _looks_unscoped(node, classes):
    return (
        isinstance(node.value, ast.Name)
        and node.value.id in classes
        and node.attr[0].isupper()
        and not node.attr.isupper()
    )


def _moved_classes(source):
    return [
        f"{line}: {name} is in qgis.PyQt.QtGui in PyQt 6"
        for line, module, names in imports(source)
        if module == "qgis.PyQt.QtWidgets"
        for name in names
        if name in MOVED_TO_QTGUI
    ]
