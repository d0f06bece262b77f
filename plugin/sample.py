"""The sample project: a copy of its own for the user, never over an older one."""

import shutil
from pathlib import Path

__all__ = ["SAMPLE_FOLDER", "copy_sample", "new_folder"]

#: The sample as it comes with the plugin.
SAMPLE_FOLDER = Path(__file__).resolve().parents[1] / "sample_project"
#: Name of the copy, and of the project in it.
COPY_NAME = "heaveline_sample"
#: What only the makers of the sample need, or what a run leaves behind.
_LEFT_OUT = shutil.ignore_patterns(
    "*.py", "*.pyc", "__pycache__", "*.gpkg-wal", "*.gpkg-shm", "*.aux.xml", "*~"
)


def new_folder(parent, name=COPY_NAME):
    """Give a folder name inside a folder that is not taken, numbered if need be.

    Parameters
    ----------
    parent : pathlib.Path
    name : str

    Returns
    -------
    pathlib.Path
        ``parent/name``, else ``parent/name_2`` and so on; not yet made.
    """
    folder = parent / name
    number = 2
    while folder.exists():
        folder = parent / f"{name}_{number}"
        number += 1
    return folder


def copy_sample(parent, source=None):
    """Copy the sample into a new folder.

    Parameters
    ----------
    parent : pathlib.Path
        Folder of the user's choice; it stays as it is but for the new folder.
    source : pathlib.Path, optional
        `SAMPLE_FOLDER` if not given.

    Returns
    -------
    pathlib.Path
        The project file of the copy.

    Raises
    ------
    OSError
        If the sample is not there or the folder cannot be written; a copy begun is
        taken away.
    """
    source = Path(source or SAMPLE_FOLDER)
    projects = sorted(source.glob("*.qgz"))
    if not projects:
        raise FileNotFoundError(f"there is no sample project in {source}")
    target = new_folder(Path(parent))
    try:
        shutil.copytree(source, target, ignore=_LEFT_OUT)
    except (OSError, shutil.Error):
        shutil.rmtree(target, ignore_errors=True)
        raise
    return target / projects[0].name
