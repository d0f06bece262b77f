"""Build the plugin's ZIP, the same bytes from the same files, for any platform.

Usage: python scripts/build_zip.py [folder]        (default folder: build)
"""

import configparser
import sys
import zipfile
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = "heaveline"
CONTENT = (
    "__init__.py",
    "metadata.txt",
    "LICENSE",
    "README.md",
    "plugin",
    "geomcore",
    "sample_project",
)
LEFT_OUT_FOLDERS = {"__pycache__", ".pytest_cache", ".ruff_cache"}
LEFT_OUT_ENDINGS = {".pyc", ".pyo", ".gpkg-wal", ".gpkg-shm", ".gpkg-journal", ".qgz~"}
ONE_DATE = (2020, 1, 1, 0, 0, 0)  # a date in the files would change the bytes
PLAIN_FILE = 0o100644 << 16  # mode rw-r--r--, as the plugin repository wants it


def version():
    """Read the version that metadata.txt states."""
    parser = configparser.ConfigParser()
    parser.read(ROOT / "metadata.txt", encoding="utf-8")
    return parser["general"]["version"]


def is_wanted(path):
    """Tell whether a file belongs into the ZIP: no caches, no hidden files."""
    inside = path.relative_to(ROOT)
    if LEFT_OUT_FOLDERS & set(inside.parts):
        return False
    if any(part.startswith(".") for part in inside.parts):
        return False
    # QGIS leaves statistics beside every raster it opens
    is_left_over = path.name.endswith(("~", ".aux.xml"))
    return path.suffix not in LEFT_OUT_ENDINGS and not is_left_over


def content():
    """List the files of the ZIP in a fixed order; refuse if a part is missing."""
    missing = [name for name in CONTENT if not (ROOT / name).exists()]
    if missing:
        words = f"error: cannot build the ZIP without {', '.join(missing)}"
        raise SystemExit(words)
    found = []
    for name in CONTENT:
        path = ROOT / name
        found += [path] if path.is_file() else path.rglob("*")
    wanted = (path for path in found if path.is_file() and is_wanted(path))
    return sorted(wanted, key=lambda path: path.relative_to(ROOT).as_posix())


def build(folder):
    """Write the ZIP into this folder and give its path."""
    folder.mkdir(parents=True, exist_ok=True)
    target = folder / f"{PACKAGE}-{version()}.zip"
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED, compresslevel=9) as file:
        for path in content():
            name = f"{PACKAGE}/{path.relative_to(ROOT).as_posix()}"
            entry = zipfile.ZipInfo(name, ONE_DATE)
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.create_system = 3  # "made on Unix", on every system
            entry.external_attr = PLAIN_FILE
            file.writestr(entry, path.read_bytes(), compresslevel=9)
    return target


def main(arguments):
    """Build, and print where the ZIP is and how large."""
    folder = Path(arguments[0]) if arguments else ROOT / "build"
    target = build(folder)
    print(f"{target}  {target.stat().st_size / 1e6:.2f} MB")


if __name__ == "__main__":
    main(sys.argv[1:])
