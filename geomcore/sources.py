"""What one layer is declared to be, its arrays, and the way to elevation."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Callable, Optional

import numpy as np

from .documents import read_object, require, write_object
from .errors import SourceError
from .units import LENGTH_UNITS, length_factor

__all__ = [
    "DOMAINS",
    "NULL_CODES",
    "ROLES",
    "SIGNS",
    "WALLS",
    "Z_FROM",
    "Converted",
    "Features",
    "Grid",
    "SourceDeclaration",
    "ZDeclaration",
    "to_vertical",
]

#: What a layer can be. ``fault trace`` is the fault at the surface, ``fault`` the
#: fault at depth (points or lines), ``cut-off`` the lines or gap polygons where a
#: horizon meets the fault, ``subsidiary fault`` another fault in the hanging wall.
ROLES = ("horizon", "fault trace", "fault", "cut-off", "subsidiary fault")
Z_FROM = ("geometry", "field", "raster", "constant")
SIGNS = ("elevation", "depth")
DOMAINS = ("depth", "time")
WALLS = ("footwall", "hanging wall")
TIME_UNITS = {"ms": 1.0, "s": 1000.0}
TIME_WAYS = {"two": 1.0, "one": 2.0}

#: Values that stand for 'unknown' in common exchange files (common practice, no
#: source). A declaration may give its own list. Magnitudes of 1e20 and more are
#: always unknown.
NULL_CODES = (-999.0, -999.25, -9999.0, -99999.0, -32768.0, 9999.0, 99999.0)


@dataclass(frozen=True)
class ZDeclaration:
    """Where the vertical value of a layer comes from.

    Parameters
    ----------
    source : str
        One of `Z_FROM`.
    field : str, optional
        Attribute that holds the value (``source="field"``).
    uri : str, optional
        Raster to sample (``source="raster"``), as a layer source.
    value : float, optional
        The value itself (``source="constant"``).
    """

    source: str = "geometry"
    field: Optional[str] = None
    uri: Optional[str] = None
    value: Optional[float] = None


@dataclass(frozen=True)
class SourceDeclaration:
    """What one layer is, as its user declares it. Nothing in it is guessed.

    Parameters
    ----------
    key : str
        Name of the source within the study.
    role : str
        One of `ROLES`.
    name : str
        Name of the horizon or the fault.
    unit : str
        Unit of the vertical value: a length unit in depth, ``ms`` or ``s`` in time.
    sign : str
        ``elevation`` (up positive) or ``depth`` (down positive); times count down.
    datum : str
        Name of the vertical datum the value is counted from.
    datum_elevation : float
        Elevation of that datum above the study's datum, in `unit`.
    domain : str
        ``depth`` or ``time``.
    time_way : str
        ``two`` or ``one`` (way time), in the time domain.
    z : ZDeclaration
        Where the value comes from.
    sigma : float
        One standard deviation of the value, in `unit`.
    sigma_x : float
        One standard deviation of the position across strike, in the study's length
        unit; used for given cut-offs.
    correlation_length : float
        Distance along the section, in the study's length unit, over which errors of
        neighbouring picks go together (contours, gridded surfaces); 0 if independent.
    wall : str, optional
        ``footwall`` or ``hanging wall`` if the whole layer lies in one of them.
    uri : str
        Layer source, for the GIS side; the core does not open it.
    layer : str
        Layer name for messages; `key` if empty.
    name_field : str, optional
        Attribute that names the horizon, where one layer holds several.
    dip_field, dip_azimuth_field : str, optional
        Attributes with the true dip and the azimuth it dips to, in degrees.
    azimuth_north : str
        ``grid``, ``true`` or ``magnetic``: what the azimuths are measured from.
    declination : float
        Magnetic declination in degrees, east positive.
    corridor : float, optional
        Own half-width of the corridor, in the study's length unit.
    null_values : tuple of float
        Values that mean 'unknown'.

    Raises
    ------
    SourceError
        If a declared value is not one of the allowed ones or is missing.
    """

    key: str
    role: str
    name: str
    unit: str
    sign: str
    datum: str
    domain: str = "depth"
    z: ZDeclaration = field(default_factory=ZDeclaration)
    sigma: float = 0.0
    sigma_x: float = 0.0
    correlation_length: float = 0.0
    datum_elevation: float = 0.0
    time_way: Optional[str] = None
    wall: Optional[str] = None
    uri: str = ""
    layer: str = ""
    name_field: Optional[str] = None
    dip_field: Optional[str] = None
    dip_azimuth_field: Optional[str] = None
    azimuth_north: str = "grid"
    declination: float = 0.0
    corridor: Optional[float] = None
    null_values: tuple = NULL_CODES

    def __post_init__(self):
        self._one_of("role", ROLES)
        self._one_of("domain", DOMAINS)
        self._one_of("sign", SIGNS)
        self._one_of("unit", TIME_UNITS if self.domain == "time" else LENGTH_UNITS)
        self._one_of("azimuth_north", ("grid", "true", "magnetic"))
        if self.wall is not None:
            self._one_of("wall", WALLS)
        if self.domain == "time":
            self._one_of("time_way", TIME_WAYS)
            if self.sign != "depth":
                self._refuse("Times count downwards.", "Declare sign 'depth'.")
        if self.z.source not in Z_FROM:
            self._refuse(
                f"z cannot come from '{self.z.source}'.",
                "Use one of: " + ", ".join(Z_FROM) + ".",
            )
        needed = {"field": "field", "raster": "uri", "constant": "value"}.get(
            self.z.source
        )
        if needed and getattr(self.z, needed) in (None, ""):
            self._refuse(
                f"z comes from a {self.z.source}, but no {needed} is given.",
                f"Give z.{needed}.",
            )
        for name in ("sigma", "sigma_x", "correlation_length"):
            value = getattr(self, name)
            if not np.isfinite(value) or value < 0:
                self._refuse(f"{name} is {value}.", "Give a number of 0 or more.")
        if self.corridor is not None and not self.corridor > 0:
            self._refuse(f"corridor is {self.corridor:g}.", "Give more than 0.")
        if not all(isinstance(v, (int, float)) for v in self.null_values):
            self._refuse(
                f"null_values is {list(self.null_values)!r}, not a list of numbers.",
                "Give the numbers that mean 'unknown'.",
            )
        object.__setattr__(self, "null_values", tuple(self.null_values))

    def _one_of(self, what, allowed):
        if getattr(self, what) not in allowed:
            self._refuse(
                f"{what} is '{getattr(self, what)}'.",
                "Use one of: " + ", ".join(allowed) + ".",
            )

    def _refuse(self, reason, remedy):
        raise SourceError("bad-declaration", reason, self.label, remedy)

    @property
    def label(self):
        """Name of the source for messages."""
        return f"source '{self.layer or self.key}'"

    @classmethod
    def from_dict(cls, document):
        """Build a declaration from one entry of the study's ``sources``.

        Raises
        ------
        StudyError
            If a required entry is missing or an unknown one is given.
        SourceError
            If a declared value is not one of the allowed ones.
        """
        require(
            isinstance(document, dict),
            f"{document!r} is no source: an object with named entries is expected.",
            "sources",
        )
        label = f"source '{document.get('layer') or document.get('key', '?')}'"
        z = read_object(ZDeclaration, document.get("z", {}), f"{label}, z")
        rest = {k: v for k, v in document.items() if k != "z"}
        return read_object(cls, rest, label, z=z)

    def to_dict(self):
        """Give the declaration as plain JSON types, defaults left out."""
        return write_object(self)


@dataclass(frozen=True, eq=False)
class Grid:
    """A surface that can be asked for its value at map points.

    Parameters
    ----------
    sample : callable
        ``sample(xy)`` takes map coordinates (n, 2) in the study's CRS and gives
        raw values (n,), NaN outside the grid and where a cell has no data.
    cell : float
        Size of a cell in the study's length unit; samples closer than this carry
        no more information.
    """

    sample: Callable[[np.ndarray], np.ndarray]
    cell: float


@dataclass(frozen=True, eq=False)
class Features:
    """Points, lines or polygon rings read from a layer, as flat arrays.

    Parameters
    ----------
    geometry : str
        ``point``, ``line`` or ``polygon``.
    xy : ndarray (n, 2)
        Map coordinates in the study's CRS, all parts one after the other.
    value : ndarray (n,)
        Raw vertical value at each vertex, NaN where unknown.
    offsets : ndarray (k + 1,)
        Part i holds the vertices ``offsets[i]:offsets[i + 1]``.
    fid : ndarray (k,)
        Feature id of each part.
    columns : mapping of str to ndarray (k,)
        Declared attributes of each part (``name``, ``dip``, ``dip_azimuth``).
    surface : Grid, optional
        Where the value is to be sampled instead (``z`` from a raster).
    refused : mapping of str to int
        Features already refused at the door, by reason.
    """

    geometry: str
    xy: np.ndarray
    value: np.ndarray
    offsets: np.ndarray
    fid: np.ndarray
    columns: Mapping[str, Any] = field(default_factory=dict)
    surface: Optional[Grid] = None
    refused: Mapping[str, int] = field(default_factory=dict)

    @classmethod
    def points(cls, xy, value, fid=None, **columns):
        """Make point features from (n, 2) coordinates and (n,) raw values."""
        xy = np.asarray(xy, dtype=float).reshape(-1, 2)
        n = len(xy)
        return cls(
            "point",
            xy,
            np.broadcast_to(np.asarray(value, dtype=float), (n,)),
            np.arange(n + 1),
            np.arange(1, n + 1) if fid is None else np.asarray(fid),
            columns,
        )

    @classmethod
    def lines(cls, parts, values=None, fid=None, geometry="line", **columns):
        """Make line features from a list of (m, 2) or (m, 3) coordinate arrays."""
        parts = [np.asarray(p, dtype=float) for p in parts]
        offsets = np.concatenate([[0], np.cumsum([len(p) for p in parts])]).astype(int)
        stacked = np.vstack(parts) if parts else np.empty((0, 3))
        if values is None:
            value = (
                stacked[:, 2] if stacked.shape[1] > 2 else np.full(len(stacked), np.nan)
            )
        else:
            value = np.repeat(np.asarray(values, dtype=float), np.diff(offsets))
        k = len(parts)
        return cls(
            geometry,
            np.ascontiguousarray(stacked[:, :2]),
            value,
            offsets,
            np.arange(1, k + 1) if fid is None else np.asarray(fid),
            columns,
        )

    @property
    def part_of_vertex(self):
        """Part number of each vertex, (n,)."""
        return np.repeat(np.arange(len(self.fid)), np.diff(self.offsets))


_REASONS = ("", "no value", "null code")


@dataclass(frozen=True, eq=False)
class Converted:
    """Vertical values after the door.

    Parameters
    ----------
    value : ndarray (n,)
        Elevation in the study's length unit or, in time, minus the two-way time
        in ms; NaN where unknown.
    code : ndarray (n,) of int
        Why a value is unknown, as a number; 0 where it is known.
    """

    value: np.ndarray
    code: np.ndarray

    @property
    def unknown(self):
        """True where a value is unknown, (n,)."""
        return self.code > 0

    @property
    def reason(self):
        """Why a value is unknown, (n,) of str; empty where it is known."""
        return self.reasons_of(slice(None))

    def reasons_of(self, at):
        """Give the reasons of some values only."""
        return np.array(_REASONS)[self.code[at]]


def to_vertical(declaration, raw, length_unit):
    """Turn raw vertical values of a source into the study's vertical.

    Parameters
    ----------
    declaration : SourceDeclaration
        Says unit, sign, datum, domain and null values.
    raw : array_like (n,)
        Values as read.
    length_unit : str
        The study's length unit.

    Returns
    -------
    Converted
        ``value`` counts upwards: elevation in `length_unit`, or minus two-way
        time in ms, so that one code serves both domains until depth is needed.

    Examples
    --------
    >>> tops = SourceDeclaration("w", "fault", "F", "ft", "depth", "KB",
    ...                          datum_elevation=30.0)
    >>> to_vertical(tops, [1030.0, -9999.0], "m").value
    array([-304.8,    nan])
    """
    raw = np.asarray(raw, dtype=float)
    code = _unknown_codes(raw, declaration.null_values)
    up = vertical_factor(declaration, length_unit)
    value = up * raw + declaration.datum_elevation * abs(up)
    return Converted(np.where(code > 0, np.nan, value) if code.any() else value, code)


def _unknown_codes(raw, nulls):
    """Why values are unknown, as places in `_REASONS`."""
    code = np.zeros(raw.shape, dtype=np.int8)
    low, high = (
        np.fmin.reduce(raw, None, initial=0),
        np.fmax.reduce(raw, None, initial=0),
    )
    # most null codes lie outside the range of the values and need no comparison
    for null in nulls:
        if low <= null <= high:
            code[raw == null] = 2
    if low <= -1e20 or high >= 1e20:
        code[np.abs(raw) >= 1e20] = 2
    code[~np.isfinite(raw)] = 1
    return code


def vertical_factor(declaration, length_unit):
    """Give the signed factor from a raw value to the study's upward vertical."""
    if declaration.domain == "time":
        return -TIME_UNITS[declaration.unit] * TIME_WAYS[declaration.time_way]
    factor = length_factor(declaration.unit, length_unit)
    return factor if declaration.sign == "elevation" else -factor


def conversion_text(declaration, length_unit):
    """Say in words how raw values become the study's vertical."""
    if declaration.domain == "time":
        return (
            f"{declaration.time_way}-way time in {declaration.unit} below "
            f"{declaration.datum} -> two-way time in ms"
        )
    text = f"{declaration.sign} in {declaration.unit} against {declaration.datum}"
    if declaration.datum_elevation:
        text += f" (datum at {declaration.datum_elevation:g} {declaration.unit})"
    return f"{text} -> elevation in {length_unit}"
