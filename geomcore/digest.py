"""The fingerprint of a run: everything read, declared and set."""

import hashlib
import json

import numpy as np

from . import __version__
from .sources import Features, Grid

__all__ = ["digest"]


def digest(study, frames, picks, sources=None):
    """SHA-256 over everything read, declared and set, in a fixed order.

    Arrays enter as little-endian float64; a grid enters by its samples on the
    sections; without sources all columns of the picks enter. The study enters
    without its outputs and without the places of its layers, so that moving a file
    does not change the name.
    """
    total = hashlib.sha256()
    document = _without_places(study.to_dict())
    text = json.dumps(document, sort_keys=True, ensure_ascii=True)
    total.update(f"{__version__}\n{text}\n".encode())
    for frame in frames:
        total.update(frame.section_id.encode())
        _update(total, frame.vertices)
    for key in sorted(sources or ()):
        total.update(key.encode())
        if isinstance(sources[key], Features):
            _update_features(total, sources[key])
    sampled = None if sources is None else _sampled_sources(sources)
    for section_id in sorted(picks):
        for table in (picks[section_id].depth, picks[section_id].time):
            _update_picks(total, table, sampled)
    return total.hexdigest()


def _without_places(document):
    """Leave out where layers and outputs are: what they hold enters by itself."""
    document.pop("outputs", None)
    for thing in (document.get("sections", {}), *document.get("sources", ())):
        thing.pop("uri", None)
        thing.get("z", {}).pop("uri", None)
    return document


def _sampled_sources(sources):
    """Keys of the sources whose values are samples of a surface."""
    return sorted(
        k for k, d in sources.items() if isinstance(d, Grid) or d.surface is not None
    )


def _update_features(total, data):
    for column in (data.xy, data.value, data.offsets, data.fid):
        _update(total, column)
    for name in sorted(data.columns):
        _update(total, data.columns[name])


def _update_picks(total, table, sampled):
    names = (
        "x",
        "z",
        "sigma_z",
        "sigma_x",
        "correlation",
        "dip",
        "kind",
        "name",
        "wall",
        "used",
    )
    if sampled is not None:
        table = table.select(np.isin(table.source.astype(str), sampled))
        names = ("x", "z")
    for name in names:
        _update(total, getattr(table, name))


def _update(total, column):
    column = np.asarray(column)
    if column.dtype.kind in "OUS":
        total.update("\x1f".join(map(str, column.ravel())).encode())
    else:
        total.update(np.ascontiguousarray(column, dtype="<f8").tobytes())
