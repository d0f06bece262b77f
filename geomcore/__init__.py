"""Geometry of listric normal faults from rollover; needs numpy, never QGIS."""

import sys as _sys

_TWIN = "heaveline.geomcore" if __name__ == "geomcore" else "geomcore"
if _TWIN in _sys.modules:
    # two copies of every class would make `isinstance` and `except` fail silently
    raise ImportError(
        f"'{_TWIN}' is already loaded in this process; the core cannot be loaded a "
        f"second time as '{__name__}'. Use one of the two names only."
    )

__version__ = "0.1.0"
