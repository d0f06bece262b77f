"""The section frame: between the map and a vertical section along transport."""

import re
from dataclasses import dataclass

import numpy as np

from .errors import FrameError

__all__ = [
    "OBLIQUITY_LIMIT",
    "OBLIQUITY_WARNING",
    "SectionFrame",
    "mean_strike",
    "parallel_sections",
    "parse_azimuth",
    "transport_azimuth",
    "unit_vector",
]

#: Degrees between a leg and the transport azimuth (common practice, no source).
OBLIQUITY_WARNING = 20.0
OBLIQUITY_LIMIT = 60.0

_COMPASS = {
    name: i * 22.5
    for i, name in enumerate(
        [
            "N",
            "NNE",
            "NE",
            "ENE",
            "E",
            "ESE",
            "SE",
            "SSE",
            "S",
            "SSW",
            "SW",
            "WSW",
            "W",
            "WNW",
            "NW",
            "NNW",
        ]
    )
}


def unit_vector(azimuth):
    """Give the map direction (east, north) of a grid azimuth in degrees."""
    a = np.radians(azimuth)
    return np.array([np.sin(a), np.cos(a)])


def azimuth_of(vector):
    """Give the grid azimuth, 0 to 360 degrees, of a map vector (east, north)."""
    return float(np.degrees(np.arctan2(vector[0], vector[1])) % 360.0)


def angle_between(azimuth_a, azimuth_b):
    """Give the angle between two azimuths, 0 to 180 degrees."""
    return abs((azimuth_a - azimuth_b + 180.0) % 360.0 - 180.0)


def parse_azimuth(text):
    """Read an azimuth given as a number of degrees or a compass point.

    Raises
    ------
    FrameError
        If it is neither.

    Examples
    --------
    >>> parse_azimuth("SE"), parse_azimuth(95), parse_azimuth("95.5")
    (135.0, 95.0, 95.5)
    """
    word = str(text).strip().upper()
    if word in _COMPASS:
        return _COMPASS[word]
    if re.fullmatch(r"[+-]?\d+(\.\d*)?", word):
        return float(word) % 360.0
    raise FrameError(
        "bad-azimuth",
        f"'{text}' is not an azimuth.",
        remedy="Give degrees clockwise from north or a compass point such as SE.",
    )


@dataclass(frozen=True, eq=False)
class SectionFrame:
    """A drawn section line and the transport azimuth it is read along.

    Parameters
    ----------
    section_id : str
        Name of the section.
    vertices : array_like (n, 2)
        Drawn line in map coordinates, two or more vertices, either direction.
    transport_azimuth : float
        Grid azimuth in degrees that points from the footwall into the hanging
        wall.

    Notes
    -----
    ``distance`` runs along the drawn line from its first vertex; ``x`` runs along
    the transport azimuth from 0 at the footwall end. Map points come in along
    strike, so x is their component along transport: on a leg oblique by beta,
    dx = ddistance cos(beta) (methods.md section 12).

    Raises
    ------
    FrameError
        If the line is degenerate, crosses itself, has a leg that runs back in x,
        or a leg more than `OBLIQUITY_LIMIT` degrees off transport.

    Examples
    --------
    >>> frame = SectionFrame("S1", [(1000, 0), (0, 0)], 90.0)
    >>> frame.length, float(frame.x_at(0)), float(frame.distance_at(250))
    (1000.0, 1000.0, 750.0)
    """

    section_id: str
    vertices: np.ndarray
    transport_azimuth: float

    def __post_init__(self):
        vertices = np.array(self.vertices, dtype=float).reshape(-1, 2)
        if not np.isfinite(vertices).all():
            self._refuse("bad-line", "the line has vertices without coordinates.")
        keep = np.r_[True, np.any(np.diff(vertices, axis=0) != 0, axis=1)]
        vertices = vertices[keep]
        if len(vertices) < 2:
            self._refuse("bad-line", "the line has no length.", "Draw it anew.")
        object.__setattr__(
            self, "transport_azimuth", float(self.transport_azimuth) % 360
        )
        legs = np.diff(vertices, axis=0)
        lengths = np.hypot(legs[:, 0], legs[:, 1])
        along = legs @ unit_vector(self.transport_azimuth)
        forward = along.sum() >= 0
        angles = np.degrees(
            np.arccos(np.clip((along if forward else -along) / lengths, -1, 1))
        )
        self._check_legs(angles)
        x = np.r_[0.0, np.cumsum(along)]
        for name, value in (
            ("vertices", vertices),
            ("_distance", np.r_[0.0, np.cumsum(lengths)]),
            ("_x", x - x.min()),
            ("obliquity", float(angles.max())),
            ("forward", bool(forward)),
        ):
            if isinstance(value, np.ndarray):
                value.flags.writeable = False
            object.__setattr__(self, name, value)

    def _refuse(self, code, reason, remedy=""):
        raise FrameError(code, reason, f"section {self.section_id}", remedy)

    def _check_legs(self, angles):
        worst = int(np.argmax(angles))
        if angles[worst] >= 90.0:
            self._refuse(
                "leg-runs-back",
                f"leg {worst + 1} runs back along the transport azimuth "
                f"{self.transport_azimuth:.1f}.",
                "Draw the section so that every leg crosses the fault the same way.",
            )
        if angles[worst] > OBLIQUITY_LIMIT:
            self._refuse(
                "too-oblique",
                f"leg {worst + 1} is {angles[worst]:.1f} degrees off the transport "
                f"azimuth {self.transport_azimuth:.1f}; the limit is "
                f"{OBLIQUITY_LIMIT:g}.",
                "Draw the section nearer to the slip direction.",
            )

    def __repr__(self):
        return (
            f"SectionFrame({self.section_id!r}, length={self.length:.1f}, "
            f"transport={self.transport_azimuth:.1f}, obliquity={self.obliquity:.1f})"
        )

    @property
    def length(self):
        """Length of the drawn line."""
        return float(self._distance[-1])

    @property
    def x_max(self):
        """X at the hanging-wall end of the line."""
        return float(self._x.max())

    @property
    def azimuth(self):
        """Grid azimuth from the first to the last vertex, degrees."""
        return azimuth_of(self.vertices[-1] - self.vertices[0])

    @property
    def hw_azimuth(self):
        """Grid azimuth towards the hanging wall: the transport azimuth."""
        return self.transport_azimuth

    @property
    def strike_vector(self):
        """Map direction along strike, to the right of transport."""
        t = unit_vector(self.transport_azimuth)
        return np.array([t[1], -t[0]])

    def _interp(self, value, xp, fp):
        """Linear interpolation that knows nothing beyond the ends."""
        order = slice(None) if xp[0] <= xp[-1] else slice(None, None, -1)
        # a millimetre of tolerance, so that rounding never loses an end point
        value = np.asarray(value, dtype=float)
        low, high = min(xp[0], xp[-1]), max(xp[0], xp[-1])
        near = np.where((value < low) & (value > low - 1e-3), low, value)
        near = np.where((near > high) & (near < high + 1e-3), high, near)
        return np.interp(near, xp[order], fp[order], left=np.nan, right=np.nan)

    def x_at(self, distance):
        """Give x at distances along the line, NaN beyond its ends."""
        return self._interp(distance, self._distance, self._x)

    def distance_at(self, x):
        """Give the distance along the line at x, NaN beyond its ends."""
        return self._interp(x, self._x, self._distance)

    def to_map(self, x):
        """Give the map coordinates (n, 2) on the line at x, NaN beyond its ends."""
        d = np.atleast_1d(self.distance_at(x))
        return np.column_stack(
            [self._interp(d, self._distance, self.vertices[:, i]) for i in (0, 1)]
        )

    def project(self, xy):
        """Bring map points to the section along strike.

        Parameters
        ----------
        xy : array_like (n, 2)
            Map coordinates.

        Returns
        -------
        x : ndarray (n,)
            Component along transport; may lie outside ``0 .. x_max``.
        off_section : ndarray (n,)
            Signed distance along strike from the line, positive to the right of
            transport, NaN where the line has no point at that x.
        """
        xy = np.asarray(xy, dtype=float).reshape(-1, 2)
        start = self.vertices[0 if self.forward else -1]
        x = (xy - start) @ unit_vector(self.transport_azimuth)
        off = np.full(len(x), np.nan)
        inside = (x > -1e-3) & (x < self.x_max + 1e-3)
        if inside.any():
            on_line = self.to_map(x[inside])
            off[inside] = (xy[inside] - on_line) @ self.strike_vector
        return x, off

    def curve_on_map(self, x, z):
        """Give a curve of the section in map coordinates, on the drawn line.

        Parameters
        ----------
        x, z : ndarray (n,)
            The curve, x strictly growing, straight between its points.

        Returns
        -------
        ndarray (m, 3)
            Its points and, between them, one at every bend of the line, with z
            interpolated; cut at the ends of the line, and empty where the curve
            lies beyond them.
        """
        x, z = np.asarray(x, dtype=float), np.asarray(z, dtype=float)
        if not len(x):
            return np.empty((0, 3))
        low, high = max(x[0], 0.0), min(x[-1], self.x_max)
        if low > high or (low == high and len(x) > 1):
            return np.empty((0, 3))
        own = x[(x >= low) & (x <= high)]
        at = np.unique(np.r_[low, own, self.bends_between(low, high), high])
        return np.column_stack([self.to_map(at), np.interp(at, x, z)])

    def bends_between(self, x0, x1):
        """Give x of the bends of the line strictly between x0 and x1, growing."""
        x = np.sort(self._x[1:-1])
        return x[(x > x0) & (x < x1)]


def mean_strike(parts):
    """Give the mean strike of a trace, in degrees from 0 to 180.

    Parameters
    ----------
    parts : list of array_like (m, 2)
        Parts of the trace; each counts by the chord between its ends, and the
        chords are averaged as axes (a chord and its reverse are the same).

    Raises
    ------
    FrameError
        If the trace has no length.

    Examples
    --------
    >>> mean_strike([[(0, 0), (1, 1000), (0, 2000)]])
    0.0
    """
    chords = [
        np.asarray(p, dtype=float)[-1, :2] - np.asarray(p, dtype=float)[0, :2]
        for p in parts
    ]
    double = sum(
        (complex(c[1], c[0]) ** 2 / max(abs(complex(*c)), 1e-300) for c in chords), 0j
    )
    if abs(double) == 0:
        raise FrameError("no-strike", "the fault trace has no length.", "fault trace")
    return float(np.degrees(np.angle(double)) / 2.0 % 180.0)


def transport_azimuth(strike, towards):
    """Give the azimuth normal to a strike on the side of a direction.

    Parameters
    ----------
    strike : float
        Strike of the fault in degrees.
    towards : float
        Any azimuth that points into the hanging wall.

    Raises
    ------
    FrameError
        If that azimuth lies along strike (within 1 degree) and tells no side.

    Examples
    --------
    >>> transport_azimuth(10.0, 120.0)
    100.0
    """
    right = (strike + 90.0) % 360.0
    angle = angle_between(right, towards)
    if abs(angle - 90.0) < 1.0:
        raise FrameError(
            "no-side",
            f"the direction {towards:.1f} runs along the strike {strike:.1f} and "
            "does not tell the hanging-wall side.",
            remedy="Declare the side, for example hw_side = SE.",
        )
    return right if angle < 90.0 else (right + 180.0) % 360.0


def parallel_sections(
    trace,
    transport,
    spacing=None,
    count=None,
    footwall_length=2000.0,
    hanging_wall_length=8000.0,
    extent=None,
):
    """Lay parallel section lines across a fault trace.

    Parameters
    ----------
    trace : list of array_like (m, 2)
        Parts of the fault trace.
    transport : float
        Grid azimuth towards the hanging wall, degrees.
    spacing : float, optional
        Distance between lines along strike.
    count : int, optional
        Number of lines instead; they split the trace into equal pieces and stay
        half a piece off its ends.
    footwall_length, hanging_wall_length : float
        Length of each line on either side of the trace.
    extent : tuple (xmin, ymin, xmax, ymax), optional
        Lines are clipped to it.

    Returns
    -------
    list of ndarray (2, 2)
        Lines from the footwall end to the hanging-wall end, in order along strike
        with the hanging wall on the right. Lines that miss the trace or the extent
        are left out.

    Raises
    ------
    FrameError
        If neither or both of spacing and count are given, a length is not
        positive, or no line results.
    """
    if (spacing is None) == (count is None):
        raise FrameError("bad-spacing", "give either a spacing or a count.")
    if (spacing is not None and not spacing > 0) or (count is not None and count < 1):
        raise FrameError("bad-spacing", "spacing and count have to be positive.")
    if not (footwall_length > 0 and hanging_wall_length > 0):
        raise FrameError("bad-length", "both lengths have to be positive.")
    t = unit_vector(transport)
    along = np.array([-t[1], t[0]])  # strike direction with the hanging wall right
    origin = np.asarray(trace[0], dtype=float)[0, :2]
    parts = [(np.asarray(p, dtype=float)[:, :2] - origin) for p in trace]
    s = [p @ along for p in parts]
    low, high = min(a.min() for a in s), max(a.max() for a in s)
    lines = []
    for station in _stations(low, high, spacing, count):
        across = _crossing_across(parts, s, t, station)
        if across is None:
            continue
        foot = origin + station * along + across * t
        line = np.array([foot - footwall_length * t, foot + hanging_wall_length * t])
        line = line if extent is None else _clip(line, extent)
        if line is not None:
            lines.append(line)
    if not lines:
        raise FrameError(
            "no-sections",
            "no section line meets the fault trace inside the extent.",
            remedy="Check the transport azimuth, the spacing and the extent.",
        )
    return lines


def _stations(low, high, spacing, count):
    """Positions along strike: centred, half a step or less off the ends."""
    if count is None:
        count = max(1, int(np.floor((high - low) / spacing + 1e-9)))
        middle = 0.5 * (low + high)
        return middle + (np.arange(count) - 0.5 * (count - 1)) * spacing
    return low + (np.arange(count) + 0.5) * (high - low) / count


def _crossing_across(parts, s, t, station):
    """Component across strike of the first crossing of the trace at a station."""
    for part, along in zip(parts, s):
        across = part @ t
        for i in range(len(along) - 1):
            a, b = along[i] - station, along[i + 1] - station
            if a * b <= 0 and a != b:
                return across[i] + (across[i + 1] - across[i]) * a / (a - b)
    return None


def _clip(line, extent):
    """Clip a straight line to a box; None where it lies outside (Liang-Barsky)."""
    xmin, ymin, xmax, ymax = extent
    start, step = line[0], line[1] - line[0]
    low, high = 0.0, 1.0
    for p, q in (
        (-step[0], start[0] - xmin),
        (step[0], xmax - start[0]),
        (-step[1], start[1] - ymin),
        (step[1], ymax - start[1]),
    ):
        if p == 0:
            if q < 0:
                return None
        elif p < 0:
            low = max(low, q / p)
        else:
            high = min(high, q / p)
    return line[0] + np.outer([low, high], step) if low < high else None
