"""Picks on a section: crossings, corridor projection and surfaces sampled."""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Callable, Optional

import numpy as np

from .cells import CellIndex, expanded
from .errors import PicksError
from .sources import Grid, conversion_text, to_vertical

__all__ = [
    "KINDS",
    "Picks",
    "PreparedSource",
    "PullOptions",
    "SourceCount",
    "apparent_dip",
    "corridor_boxes",
    "prepare_source",
    "pull_source",
]

#: What a pick can be (design, fixed output values).
KINDS = ("horizon", "fault", "cutoff", "dip")
_KIND_OF_ROLE = {
    "horizon": "horizon",
    "fault trace": "fault",
    "fault": "fault",
    "cut-off": "cutoff",
    "subsidiary fault": "fault",
}
#: A fault of the hanging wall says so in its wall; the study's own fault has none.
_WALL_OF_ROLE = {"fault trace": "", "fault": "", "subsidiary fault": "hanging wall"}
#: Vertices in one indexed run of a line: short enough to be selective.
_RUN = 10

_COLUMNS = {
    "x": float,
    "distance": float,
    "z": float,
    "off_section": float,
    "sigma_z": float,
    "sigma_x": float,
    "correlation": float,
    "dip": float,
    "kind": object,
    "name": object,
    "wall": object,
    "used": bool,
    "reason": object,
    "source": object,
    "source_fid": object,
}


@dataclass(frozen=True, eq=False)
class Picks:
    """Picks of one section as columns of equal length.

    Parameters
    ----------
    section_id : str
        Section the picks lie on.
    domain : str
        ``depth`` or ``time``. Time picks never enter a construction.
    x, distance : ndarray (n,)
        Along transport, and along the drawn line.
    z : ndarray (n,)
        Elevation in the study's unit; in the time domain minus the two-way time
        in ms (see `twt_ms`).
    off_section : ndarray (n,)
        Distance along strike the pick was brought in from, positive to the right
        of transport.
    sigma_z : ndarray (n,)
        One standard deviation of z.
    sigma_x : ndarray (n,)
        One standard deviation of x; used for given cut-offs.
    correlation : ndarray (n,)
        Length over which the errors of neighbouring picks of the source go
        together; 0 where they are independent.
    dip : ndarray (n,)
        Apparent dip along transport in degrees, positive down towards the hanging
        wall; NaN where none is given.
    kind, name, wall, reason, source : ndarray (n,) of str
        Kind (`KINDS`), horizon or fault name, wall ('' where not told; a fault pick
        with ``hanging wall`` is of a subsidiary fault, the study's own fault has
        none), reason a pick is left out, key of the source.
    source_fid : ndarray (n,)
        Feature the pick came from, None for a grid.
    used : ndarray (n,) of bool
        Whether it enters the construction.
    """

    section_id: str
    domain: str
    x: np.ndarray
    distance: np.ndarray
    z: np.ndarray
    off_section: np.ndarray
    sigma_z: np.ndarray
    sigma_x: np.ndarray
    correlation: np.ndarray
    dip: np.ndarray
    kind: np.ndarray
    name: np.ndarray
    wall: np.ndarray
    used: np.ndarray
    reason: np.ndarray
    source: np.ndarray
    source_fid: np.ndarray

    def __post_init__(self):
        n = len(self.x)
        for name, dtype in _COLUMNS.items():
            value = np.array(getattr(self, name), dtype=dtype)
            if value.shape != (n,):
                raise PicksError(
                    "bad-picks",
                    f"column {name} has {value.shape} values for {n} picks.",
                    f"section {self.section_id}",
                )
            value.flags.writeable = False
            object.__setattr__(self, name, value)

    def __len__(self):
        return len(self.x)

    def __repr__(self):
        return (
            f"Picks({self.section_id!r}, {self.domain}, n={len(self)}, "
            f"used={int(self.used.sum())})"
        )

    @property
    def twt_ms(self):
        """Two-way time in ms, positive down; only in the time domain."""
        if self.domain != "time":
            raise PicksError(
                "not-time", "these picks are depths.", f"section {self.section_id}"
            )
        return -self.z

    @classmethod
    def empty(cls, section_id, domain="depth"):
        """Make a table without picks."""
        return cls(
            section_id, domain, **{k: np.empty(0, d) for k, d in _COLUMNS.items()}
        )

    @classmethod
    def build(cls, section_id, x, z, domain="depth", **columns):
        """Make a table from x and z; other columns are broadcast from scalars."""
        n = len(x)
        values = {
            "distance": np.asarray(x, dtype=float),
            "off_section": 0.0,
            "sigma_z": 0.0,
            "sigma_x": 0.0,
            "correlation": 0.0,
            "dip": np.nan,
            "kind": "horizon",
            "name": "",
            "wall": "",
            "used": True,
            "reason": "",
            "source": "",
            "source_fid": None,
        }
        values.update(columns, x=x, z=z)
        filled = {}
        for name, dtype in _COLUMNS.items():
            column = np.empty(n, dtype=dtype)
            column[:] = values[name]
            filled[name] = column
        return cls(section_id, domain, **filled)

    def select(self, mask):
        """Give the picks under a mask or in an order."""
        return replace(self, **{k: getattr(self, k)[mask] for k in _COLUMNS})

    def joined(self, others):
        """Give one table of these picks and those of the same section and domain."""
        tables = [self, *others]
        if len({(t.section_id, t.domain) for t in tables}) > 1:
            raise PicksError(
                "mixed-picks",
                "picks of different sections or domains cannot be joined.",
                f"section {self.section_id}",
            )
        return replace(
            self,
            **{k: np.concatenate([getattr(t, k) for t in tables]) for k in _COLUMNS},
        )

    def left_out(self, mask, reason):
        """Give the table with the used picks under a mask left out for a reason."""
        mask = np.asarray(mask, dtype=bool) & self.used
        reasons = self.reason.copy()
        reasons[mask] = reason
        return replace(self, used=self.used & ~mask, reason=reasons)

    def of(self, kind, name=None, wall=None, used=True):
        """Give the picks of a kind, name and wall; only the used ones by default."""
        mask = self.kind == kind
        if name is not None:
            mask = mask & (self.name == name)
        if wall is not None:
            mask = mask & (self.wall == wall)
        return self.select(mask & self.used if used else mask)


@dataclass(frozen=True)
class PullOptions:
    """How picks are brought to a section.

    Parameters
    ----------
    corridor : float
        Largest distance along strike from which points are brought in.
    fault_buffer : float
        Horizon picks nearer to the fault than this are left out (drag, smearing).
    grid_step : float, optional
        Spacing of grid samples along the section; the cell size if not given.
    convergence : callable, optional
        ``convergence(xy)`` gives the meridian convergence in degrees
        (true = grid + convergence); needed for azimuths against true or magnetic
        north.
    """

    corridor: float = 500.0
    fault_buffer: float = 50.0
    grid_step: Optional[float] = None
    convergence: Optional[Callable] = None


@dataclass(frozen=True)
class SourceCount:
    """One row of the input statement: what came in and what became of it.

    Parameters
    ----------
    key, layer, role, name : str
        The source and what it is declared to be.
    conversion : str
        How its values become the study's vertical, in words.
    count_in : int
        Features read (for a grid: samples taken on the sections).
    refused : mapping of str to int
        Features or samples refused at the door, by reason.
    picks, used : int
        Picks made on the sections, and picks that enter the construction.
    left_out : mapping of str to int
        Picks left out, by reason.
    raw_min, raw_max, z_min, z_max : float
        Range before and after conversion, NaN where there is none; z is
        elevation, or minus two-way time in ms.
    """

    key: str
    layer: str
    role: str
    name: str
    conversion: str
    count_in: int
    refused: Mapping[str, int]
    picks: int
    used: int
    left_out: Mapping[str, int]
    raw_min: float
    raw_max: float
    z_min: float
    z_max: float


@dataclass(frozen=True, eq=False)
class PreparedSource:
    """A source after the door: vertical values converted, ready to be searched.

    Made by `prepare_source`.
    """

    declaration: object
    data: object
    value: np.ndarray
    refused: Mapping[str, int]
    raw_range: tuple
    length_unit: str
    runs: object = None
    cells: Optional[CellIndex] = None
    conversion: str = field(default="")

    @property
    def count_in(self):
        """Features that came in, refused ones included; 0 for a grid."""
        if isinstance(self.data, Grid):
            return 0
        return len(np.unique(self.data.fid)) + sum(self.data.refused.values())


def _range(values, unknown):
    """Least and largest of the known values."""
    known = values[~unknown] if unknown.any() else values
    return (float(known.min()), float(known.max())) if known.size else (np.nan, np.nan)


def prepare_source(declaration, data, length_unit):
    """Convert a source's vertical values once and index it for many sections.

    Parameters
    ----------
    declaration : SourceDeclaration
        What the layer is.
    data : Features or Grid
        What was read from it, in the study's CRS.
    length_unit : str
        The study's length unit.

    Returns
    -------
    PreparedSource
    """
    text = conversion_text(declaration, length_unit)
    if isinstance(data, Grid):
        return PreparedSource(
            declaration,
            data,
            np.empty(0),
            {},
            (np.nan, np.nan),
            length_unit,
            conversion=text,
        )
    is_point = data.geometry == "point"
    converted = to_vertical(declaration, data.value, length_unit)
    refused = dict(data.refused)
    if data.surface is None:
        _count_refused(data, converted, refused)
    return PreparedSource(
        declaration,
        data,
        converted.value,
        refused,
        _range(data.value, converted.unknown),
        length_unit,
        runs=None if is_point else _runs(data),
        cells=CellIndex.build(data.xy) if is_point else None,
        conversion=text,
    )


def _count_refused(data, converted, refused):
    """Count features none of whose vertices has a value, by the first reason."""
    bad = converted.unknown
    if not bad.any():
        return
    of_vertex = data.fid[data.part_of_vertex]
    features, first = np.unique(of_vertex, return_index=True)
    lost = first[~np.isin(features, of_vertex[~bad])]
    for why in converted.reasons_of(lost).tolist():
        refused[why] = refused.get(why, 0) + 1


@dataclass(frozen=True, eq=False)
class _Runs:
    """Short runs of line segments, their boxes, and the cells these lie in."""

    first: np.ndarray  # first and last vertex of each run
    last: np.ndarray
    centre: np.ndarray
    half: np.ndarray
    cells: CellIndex


def _runs(data):
    """Cut lines into runs of `_RUN` segments, each within one part."""
    ends = data.offsets[1:] - 1
    count = -(-np.maximum(ends - data.offsets[:-1], 0) // _RUN)
    number, part = expanded(np.zeros(len(count), dtype=np.int64), count)
    first = data.offsets[:-1][part] + number * _RUN
    last = np.minimum(first + _RUN, ends[part])
    if not len(first):
        none = np.empty((0, 2))
        return _Runs(first, last, none, none, CellIndex.build(none))
    low, high = _boxes(data.xy, first, last)
    cells = CellIndex.build(low, high)
    return _Runs(first, last, 0.5 * (low + high), 0.5 * (high - low), cells)


def _boxes(xy, first, last):
    """Boxes round runs of vertices; one may take in a point beyond its run's end."""
    low, high = np.empty((2, len(first), 2))
    for k in (0, 1):
        column = np.ascontiguousarray(xy[:, k])
        end = column[last]
        low[:, k] = np.minimum(np.minimum.reduceat(column, first), end)
        high[:, k] = np.maximum(np.maximum.reduceat(column, first), end)
    return low, high


def _leg_crossings(runs, xy, a, b):
    """Find where segments cross the leg a-b: first vertex, fractions on both."""
    leg = b - a
    length = np.hypot(*leg)
    t = leg / length
    n = np.array([-t[1], t[0]])
    found = runs.cells.near(*_boxes_along(a, b, runs.cells.size))
    c, h = runs.centre[found] - a, runs.half[found]
    near = np.abs(c @ n) <= h @ np.abs(n) + 1e-9
    near &= np.abs(c @ t - 0.5 * length) <= 0.5 * length + h @ np.abs(t) + 1e-9
    found = found[near]
    vertex = runs.first[found][:, None] + np.arange(_RUN + 1)
    # a run with fewer segments stays on its last vertex, where nothing is crossed
    vertex = np.minimum(vertex, runs.last[found][:, None])
    side = (xy[vertex] - a) @ n
    # half-open side test: a crossing at a shared vertex counts once
    row, k = np.nonzero((side[:, :-1] < 0) != (side[:, 1:] < 0))
    start, sp, sq = vertex[row, k], side[row, k], side[row, k + 1]
    on_segment = sp / (sp - sq)
    p, q = xy[start] - a, xy[start + 1] - a
    along = (p + on_segment[:, None] * (q - p)) @ t
    return start, on_segment, along


def _boxes_along(a, b, size):
    """Cut a leg into pieces about as long as a cell and give their boxes."""
    n = int(np.clip(np.ceil(np.hypot(*(b - a)) / size), 1, 1000))
    at = a + np.linspace(0.0, 1.0, n + 1)[:, None] * (b - a)
    slack = 1e-9 * max(np.abs(at).max(), 1.0)
    low, high = np.minimum(at[:-1], at[1:]), np.maximum(at[:-1], at[1:])
    return low - slack, high + slack


def line_crossings(prepared, frame):
    """Find where a source's lines cross the drawn section line.

    Returns
    -------
    distance, value : ndarray (m,)
        Distance along the line and vertical value there (interpolated along the
        crossed segment).
    part : ndarray (m,)
        Part that was crossed.
    xy : ndarray (m, 2)
        Map position.
    """
    runs, xy = prepared.runs, prepared.data.xy
    pieces = []
    last = len(frame.vertices) - 2
    for i, (a, b) in enumerate(zip(frame.vertices[:-1], frame.vertices[1:])):
        start, f, along = _leg_crossings(runs, xy, a, b)
        length = np.hypot(*(b - a))
        # the end of a leg belongs to the next one, the last end to the last leg
        inside = (along >= -1e-9) & (
            (along <= length + 1e-9) if i == last else (along < length - 1e-9)
        )
        pieces.append((start[inside], f[inside], along[inside] + frame._distance[i]))
    start, f, distance = (np.concatenate(v) for v in zip(*pieces))
    value = prepared.value
    value = value[start] + f * (value[start + 1] - value[start])
    at = xy[start] + f[:, None] * (xy[start + 1] - xy[start])
    return distance, value, _part_of(prepared.data, start), at


def _part_of(data, vertex):
    """Part number of some vertices."""
    return np.searchsorted(data.offsets, vertex, side="right") - 1


def points_in_corridor(prepared, frame, corridor):
    """Find the points within a distance along strike of the section.

    Returns
    -------
    index : ndarray (m,)
        Points found.
    x, off_section : ndarray (m,)
        Their place in the section and how far along strike they come from.
    """
    xy = prepared.data.xy
    index = prepared.cells.near(*corridor_boxes(frame, corridor))
    x, off = frame.project(xy[index])
    near = np.abs(off) <= corridor  # NaN where the section has no such x
    return index[near], x[near], off[near]


def corridor_boxes(frame, corridor, most=64):
    """Give boxes round pieces of a section that hold its whole corridor.

    Parameters
    ----------
    frame : SectionFrame
    corridor : float
        Half-width along strike.
    most : int
        Pieces between two bends at most; more follow an oblique line closer.

    Returns
    -------
    low, high : ndarray (n, 2)
        Opposite corners.
    """
    n = int(np.clip(np.ceil(frame.x_max / max(2.0 * corridor, 1e-9)), 1, most))
    x = np.union1d(np.linspace(0.0, frame.x_max, n + 1), frame._x)
    at = frame.to_map(x)
    reach = np.abs(frame.strike_vector) * corridor + 2e-3  # and the frame's millimetre
    return np.minimum(at[:-1], at[1:]) - reach, np.maximum(at[:-1], at[1:]) + reach


def apparent_dip(dip, dip_azimuth, transport_azimuth):
    """Give the dip seen along transport, positive down towards the hanging wall.

    Notes
    -----
    tan(apparent) = tan(dip) cos(dip azimuth - transport) (methods.md section 12).

    Examples
    --------
    >>> round(float(apparent_dip(60.0, 35.0, 0.0)), 3)
    54.823
    """
    angle = np.radians(np.asarray(dip_azimuth) - transport_azimuth)
    return np.degrees(np.arctan(np.tan(np.radians(dip)) * np.cos(angle)))


def _grid_azimuth(declaration, azimuth, xy, options):
    """Turn declared azimuths into grid azimuths."""
    if declaration.azimuth_north == "grid":
        return azimuth
    if options.convergence is None:
        raise PicksError(
            "no-convergence",
            f"azimuths are against {declaration.azimuth_north} north, but the "
            "meridian convergence of the study CRS is not known.",
            declaration.label,
            "Install pyproj, or convert the azimuths to grid north.",
        )
    true = azimuth + (
        declaration.declination if declaration.azimuth_north == "magnetic" else 0.0
    )
    return true - options.convergence(xy)


def _part_dips(prepared, frame, part, xy, options):
    """Apparent dips of parts, NaN where the source gives none."""
    columns = prepared.data.columns
    if "dip" not in columns:
        return np.full(len(part), np.nan)
    dip = np.asarray(columns["dip"], dtype=float)[part]
    if "dip_azimuth" in columns:
        azimuth = np.asarray(columns["dip_azimuth"], dtype=float)[part]
        azimuth = _grid_azimuth(prepared.declaration, azimuth, xy, options)
        return apparent_dip(dip, azimuth, frame.transport_azimuth)
    return dip


def pull_source(prepared, frame, options):
    """Bring one source to one section.

    Parameters
    ----------
    prepared : PreparedSource
    frame : SectionFrame
    options : PullOptions

    Returns
    -------
    Picks
        In the domain of the source, ordered by x; picks whose value is unknown
        are there with ``used`` False and the reason.
    """
    declaration, data = prepared.declaration, prepared.data
    if isinstance(data, Grid):
        x, z, off, part, xy, refused = _from_grid(prepared, frame, options)
    elif data.geometry == "point":
        x, z, off, part, xy, refused = _from_points(prepared, frame, options)
    else:
        x, z, off, part, xy, refused = _from_lines(prepared, frame)
    no_part = part is None
    names = declaration.name if no_part else _names(prepared, part)
    picks = Picks.build(
        frame.section_id,
        x,
        z,
        domain=declaration.domain,
        distance=frame.distance_at(x),
        off_section=off,
        sigma_z=_sigma(prepared),
        sigma_x=declaration.sigma_x,
        correlation=declaration.correlation_length,
        dip=np.nan if no_part else _part_dips(prepared, frame, part, xy, options),
        kind=_KIND_OF_ROLE[declaration.role],
        name=names,
        wall=_WALL_OF_ROLE.get(declaration.role, declaration.wall or ""),
        source=declaration.key,
        source_fid=None if no_part else data.fid[part],
        used=refused == "",
        reason=refused,
    )
    return picks.select(np.argsort(picks.x, kind="stable"))


def _names(prepared, part):
    columns = prepared.data.columns
    if "name" not in columns:
        return prepared.declaration.name
    return np.asarray(columns["name"], dtype=object)[part]


def _sigma(prepared):
    """One standard deviation in the study's vertical unit."""
    from .sources import vertical_factor

    factor = vertical_factor(prepared.declaration, prepared.length_unit)
    return prepared.declaration.sigma * abs(factor)


def _sampled(prepared, grid, xy):
    """Sample a grid at map points and convert; values and refusals."""
    converted = to_vertical(prepared.declaration, grid.sample(xy), prepared.length_unit)
    reason = np.where(converted.reason == "no value", "no data", converted.reason)
    return converted.value, reason.astype(object)


def _from_grid(prepared, frame, options):
    step = options.grid_step or prepared.data.cell
    n = max(2, int(np.floor(frame.x_max / step)) + 1)
    x = np.linspace(0.0, frame.x_max, n)
    xy = frame.to_map(x)
    z, refused = _sampled(prepared, prepared.data, xy)
    return x, z, 0.0, None, xy, refused


def _from_points(prepared, frame, options):
    corridor = prepared.declaration.corridor or options.corridor
    index, x, off = points_in_corridor(prepared, frame, corridor)
    xy = prepared.data.xy[index]
    x = np.clip(x, 0.0, frame.x_max)
    if prepared.data.surface is not None:
        z, refused = _sampled(prepared, prepared.data.surface, xy)
    else:
        z = prepared.value[index]
        refused = np.where(np.isfinite(z), "", "no value").astype(object)
    return x, z, off, _part_of(prepared.data, index), xy, refused


def _from_lines(prepared, frame):
    distance, z, part, xy = line_crossings(prepared, frame)
    if prepared.data.surface is not None:
        z, refused = _sampled(prepared, prepared.data.surface, xy)
    else:
        refused = np.where(np.isfinite(z), "", "no value").astype(object)
    return frame.x_at(distance), z, 0.0, part, xy, refused
