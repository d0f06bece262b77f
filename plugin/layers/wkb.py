"""Well-known binary of many geometries to flat coordinate arrays, without a loop.

All geometries of a layer are walked at once, level by level: one pass over the parts
of multi-geometries, one over the rings of polygons. Layout of the bytes: ISO
19125-1 / OGC 06-103r4 section 8, with the ISO codes for Z (+1000) and M (+2000).
"""

import sys
from dataclasses import dataclass

import numpy as np

__all__ = [
    "Parts",
    "PartsCollector",
    "UnknownGeometry",
    "line_wkb",
    "parse_wkb",
    "point_wkb",
]

_POINT, _LINE, _POLYGON, _TRIANGLE = 1, 2, 3, 17
#: Multi-geometries, collection, polyhedral surface and TIN: a count and members.
_MANY = (4, 5, 6, 7, 15, 16)
#: Most vertices that room is made for ahead of their coming.
_ROOM = 8_000_000
#: Flag for Z in codes older than ISO's.
_OLD_Z = 1 << 31
_NATIVE = "<" if sys.byteorder == "little" else ">"


def _head(kind, width):
    code = kind + (1000 if width == 3 else 0)
    order = b"\x01" if _NATIVE == "<" else b"\x00"
    return order + np.array([code], _NATIVE + "u4").tobytes()


#: First bytes of single points and lines: their kind and doubles per vertex.
_SINGLE = {
    _head(kind, width): (kind, width) for kind in (_POINT, _LINE) for width in (2, 3)
}


class UnknownGeometry(Exception):
    """A geometry of another kind than point, line, polygon and their multiples.

    Parameters
    ----------
    owners : ndarray
        Numbers of the geometries that hold it (curves, for example).
    """

    def __init__(self, owners):
        self.owners = owners
        super().__init__(f"{len(owners)} geometries of another kind")


@dataclass(frozen=True, eq=False)
class Parts:
    """Coordinates of all parts of many geometries, in their order.

    Parameters
    ----------
    kind : ndarray (k,) of int
        1 point, 2 line, 3 ring of a polygon.
    owner : ndarray (k,) of int
        Geometry each part belongs to.
    count : ndarray (k,) of int
        Vertices of each part.
    rows : ndarray (n, 2) or (n, 3)
        Coordinates of all parts, one after the other; Z is NaN where some geometries
        have it and this one does not.
    """

    kind: np.ndarray
    owner: np.ndarray
    count: np.ndarray
    rows: np.ndarray

    @property
    def xy(self):
        """Map coordinates (n, 2)."""
        return self.rows[:, :2]

    @property
    def z(self):
        """Z coordinates (n,), NaN where there are none."""
        has = self.rows.shape[1] > 2
        return self.rows[:, 2] if has else np.full(len(self.rows), np.nan)

    @property
    def offsets(self):
        """Part i holds the vertices ``offsets[i]:offsets[i + 1]``, (k + 1,)."""
        return np.concatenate([[0], np.cumsum(self.count)]).astype(np.int64)

    def select(self, keep):
        """Give the parts under a mask (k,)."""
        rows = self.rows[np.repeat(keep, self.count)]
        return Parts(self.kind[keep], self.owner[keep], self.count[keep], rows)


class PartsCollector:
    """Joins blocks of `Parts` in one array that is made once where that is possible.

    Memory that is touched for the first time costs more than the parsing itself.

    Parameters
    ----------
    expected : int
        Geometries that will come, 0 or less if unknown; with the first block's
        vertices per geometry it tells how much room is needed.
    """

    def __init__(self, expected=0):
        self.expected = expected
        self.geometries = self.used = 0
        self.columns = []
        self.rows = np.empty((0, 2))

    def add(self, parts, geometries):
        """Add the parts of a block and say how many geometries it was parsed from."""
        self.columns.append((parts.kind, parts.owner + self.geometries, parts.count))
        self.geometries += geometries
        n, width = parts.rows.shape
        self._make_room(n, max(width, self.rows.shape[1]))
        self.rows[self.used : self.used + n, :width] = parts.rows
        self.rows[self.used : self.used + n, width:] = np.nan
        self.used += n

    def _make_room(self, n, width):
        if self.used + n <= len(self.rows) and width == self.rows.shape[1]:
            return
        needed = self.used + n
        guess = 1.02 * self.expected * needed / max(self.geometries, 1)
        room = max(min(guess, needed + _ROOM), 1.5 * len(self.rows), needed)
        rows = np.empty((int(room) + 1, width))
        rows[: self.used, : self.rows.shape[1]] = self.rows[: self.used]
        rows[: self.used, self.rows.shape[1] :] = np.nan
        self.rows = rows

    def parts(self):
        """Give everything that was added as one `Parts`."""
        none = np.empty(0, dtype=np.int64)
        columns = [np.concatenate([none, *c]) for c in zip(*self.columns)]
        return Parts(*(columns or [none] * 3), self.rows[: self.used])


def parse_wkb(geometries):
    """Turn a list of WKB byte strings into `Parts`.

    Parameters
    ----------
    geometries : list of bytes
        In the byte order of this machine, as QGIS gives them. Empty ones have no
        part in the result.

    Raises
    ------
    UnknownGeometry
        If one is a curve or another kind that has no plain coordinates.
    """
    simple = _all_single(geometries)
    if simple is not None:
        return simple
    sizes = np.fromiter(map(len, geometries), dtype=np.int64, count=len(geometries))
    data = b"".join(geometries)
    at = np.concatenate([[0], np.cumsum(sizes)])[:-1]
    owner = np.flatnonzero(sizes)
    found = _Found([], [], [], [], [], [])
    _walk(np.frombuffer(data, dtype=np.uint8), at[owner], owner, found)
    if found.unknown:
        raise UnknownGeometry(np.unique(np.concatenate(found.unknown)))
    kind, owner, start, count, width = found.in_order()
    return _gather(data, kind, owner, start, count, width)


def _all_single(geometries):
    """Parse the common case of points only or lines only, all of one type.

    None where the geometries are of another kind or of several.
    """
    head = geometries[0][:5] if geometries else b""
    kind, width = _SINGLE.get(head, (0, 0))
    if not kind or sum([g.startswith(head) for g in geometries]) < len(geometries):
        return None
    n = len(geometries)
    if kind == _POINT:
        raw = np.frombuffer(b"".join(geometries), dtype=np.uint8).reshape(n, -1)
        body = np.ascontiguousarray(raw[:, 5:])
        count = np.ones(n, dtype=np.int64)
    else:
        body = np.frombuffer(b"".join([g[9:] for g in geometries]), np.uint8)
        sizes = np.fromiter(map(len, geometries), dtype=np.int64, count=n)
        count = (sizes - 9) // (8 * width)
    rows = body.view(_NATIVE + "f8").reshape(-1, width)
    return _with_coordinates(Parts(np.full(n, kind), np.arange(n), count, rows))


@dataclass(frozen=True, eq=False)
class _Found:
    """Where the coordinates of parts lie in the bytes; lists of arrays."""

    kind: list
    owner: list
    start: list
    count: list
    width: list  # doubles per vertex; 3 stands for XYZ, -3 for XYM
    unknown: list

    def add(self, kind, owner, start, count, width):
        """Note parts of one kind that have coordinates."""
        self.kind.append(np.full(len(owner), kind))
        self.owner.append(owner)
        self.start.append(start)
        self.count.append(count)
        self.width.append(width)

    def in_order(self):
        """Give all parts in the order in which they stand in the bytes."""
        if not self.kind:
            return [np.empty(0, dtype=np.int64)] * 5
        columns = (self.kind, self.owner, self.start, self.count, self.width)
        columns = [np.concatenate(c) for c in columns]
        if np.any(np.diff(columns[2]) < 0):
            order = np.argsort(columns[2], kind="stable")
            columns = [c[order] for c in columns]
        return columns


def _uint32(data, at):
    """Read an unsigned 32-bit integer at each byte position."""
    rows = data[at[:, None] + np.arange(4)]
    return np.ascontiguousarray(rows).view(_NATIVE + "u4")[:, 0].astype(np.int64)


def _walk(data, at, owner, found):
    """Note the parts of the geometries at byte positions; give where each ends."""
    end = at.copy()
    if not len(at):
        return end
    code = _uint32(data, at + 1)
    code = np.where(code >= _OLD_Z, code - _OLD_Z + 1000, code)
    flat, flavour = code % 1000, code // 1000
    width = np.array([2, 3, -3, 4])[np.minimum(flavour, 3)]
    for kind in np.unique(flat):
        here = np.flatnonzero((flat == kind) & (flavour < 4))
        visit = _visitor(kind)
        if visit is None:
            found.unknown.append(owner[flat == kind])
            continue
        end[here] = visit(data, at[here] + 5, owner[here], width[here], found)
    return end


def _visitor(kind):
    if kind in _MANY:
        return _members
    return {
        _POINT: _points,
        _LINE: _lines,
        _POLYGON: _rings,
        _TRIANGLE: _rings,
    }.get(int(kind))


def _points(_, at, owner, width, found):
    found.add(_POINT, owner, at, np.ones(len(at), dtype=np.int64), width)
    return at + 8 * np.abs(width)


def _lines(data, at, owner, width, found, kind=_LINE):
    count = _uint32(data, at)
    found.add(kind, owner, at + 4, count, width)
    return at + 4 + 8 * np.abs(width) * count


def _rings(data, at, owner, width, found):
    return _each(
        data,
        at,
        lambda here, own: _lines(data, here, owner[own], width[own], found, _POLYGON),
    )


def _members(data, at, owner, _, found):
    return _each(data, at, lambda here, own: _walk(data, here, owner[own], found))


def _each(data, at, visit):
    """Visit the first, second, ... member of every geometry that has so many."""
    count = _uint32(data, at)
    cursor = at + 4
    for number in range(int(count.max())):
        own = np.flatnonzero(count > number)
        cursor[own] = visit(cursor[own], own)
    return cursor


def _gather(data, kind, owner, start, count, width):
    """Copy the coordinates of the parts out of the bytes."""
    has_z = np.isin(width, (3, 4))
    out = np.full((int(count.sum()), 3 if has_z.any() else 2), np.nan)
    for w in np.unique(width):
        mine = width == w
        rows = _doubles(data, start[mine], 8 * abs(w) * count[mine])
        take = 3 if w in (3, 4) else 2
        at = slice(None) if mine.all() else np.repeat(mine, count)
        out[at, :take] = rows.reshape(-1, abs(w))[:, :take]
    return _with_coordinates(Parts(kind, owner, count, out))


def _doubles(data, start, size):
    """Give the doubles of byte runs, one run after the other."""
    runs = [data[a:b] for a, b in zip(start.tolist(), (start + size).tolist())]
    return np.frombuffer(b"".join(runs), dtype=_NATIVE + "f8")


def _with_coordinates(parts):
    """Leave out empty parts; an empty point is written as NaN."""
    keep = parts.count > 0
    point = np.flatnonzero((parts.kind == _POINT) & keep)
    keep[point] = np.isfinite(parts.xy[parts.offsets[point]]).all(axis=1)
    return parts if keep.all() else parts.select(keep)


def line_wkb(coordinates):
    """Give the WKB of one line from (n, 2) or (n, 3) coordinates."""
    coordinates = np.ascontiguousarray(coordinates, dtype=_NATIVE + "f8")
    n, width = coordinates.shape
    return (
        _head(_LINE, width)
        + np.array([n], _NATIVE + "u4").tobytes()
        + (coordinates.tobytes())
    )


def point_wkb(coordinates):
    """Give the WKB of one point from 2 or 3 coordinates."""
    coordinates = np.asarray(coordinates, dtype=_NATIVE + "f8")
    return _head(_POINT, len(coordinates)) + coordinates.tobytes()
