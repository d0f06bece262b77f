"""What was mapped in the sample area: samples of the truth, with noise.

Pure numpy. Every kind of observation draws its noise from a stream of its own, so
that changing one leaves the others as they are. `NOISE` states one standard
deviation of each; the study declares the same figures.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

try:
    from . import truth
except ImportError:  # run as a plain script from this folder
    import truth

#: One standard deviation: elevations in metres at fixed place, angles in degrees.
NOISE = {
    "trace": 8.0,
    "fault": 8.0,
    "contours": 6.0,
    "exposures": 3.0,
    "grid": 8.0,
    "fault dip": 3.0,
    "bed dip": 2.0,
    "azimuth": 2.0,
    "shear angle": 0.5,
}
#: Order fixes the stream of each kind; append only.
STREAMS = tuple(NOISE)

CONTOURED, GRIDDED = "Brelquith", "Sardunel"
INTERVAL = 50.0
CELL = 100.0
#: The map sheet in local coordinates.
T_RANGE = (-5300.0, 13600.0)
S_RANGE = (-8500.0, 8500.0)
#: Strike positions of the sections, and what is special about them.
SECTIONS = {
    "K1": -6000.0,
    "K2": -4000.0,
    "K3": -2000.0,
    "K4": 0.0,
    "K5": 2000.0,
    "K6": 4000.0,
    "K7": 6000.0,
}
BENT, REVERSED, TRACE_ONLY = "K4", "K5", "K2"
SECTION_ENDS = (-4700.0, 13100.0)
#: Core holes by every section, in t.
CORE_HOLES = (-4400.0, -3500.0, -2600.0, -1700.0, -800.0, 0.0)


@dataclass(frozen=True, eq=False)
class Survey:
    """Everything that was observed, in map coordinates.

    Parameters
    ----------
    trace : list of tuple (xyz (n, 3), dip, dip_azimuth)
        Pieces of the fault trace.
    fault_picks : list of tuple (section, xyz (3,))
    contours : list of tuple (level, xy (n, 2), wall)
    exposures : list of tuple (xyz (3,), dip, dip_azimuth, setting)
    depth_grid, ground_grid : tuple (west, north, values (rows, columns))
        North-up grids of cell `CELL`: depth of `GRIDDED` below sea level, positive
        down, NaN outside the sheet; elevation of the ground.
    sections : dict of str to ndarray (n, 2)
    wells : list of dict
    shear_angle : float
        Read from the small antithetic faults, degrees from the vertical.
    """

    trace: list
    fault_picks: list
    contours: list
    exposures: list
    depth_grid: tuple
    ground_grid: tuple
    sections: dict
    wells: list
    shear_angle: float


def observe(seed=0, noise=1.0):
    """Survey the truth.

    Parameters
    ----------
    seed : int
        Seed of all noise.
    noise : float
        Factor on every figure of `NOISE`; 0 gives clean observations.

    Returns
    -------
    Survey
    """
    dice = _Dice(seed, noise)
    return Survey(
        _trace(dice),
        _fault_picks(dice),
        _contours(dice),
        _exposures(dice),
        _depth_grid(dice),
        _ground_grid(),
        section_lines(),
        planned_wells(),
        float(truth.SHEAR_ANGLE + dice("shear angle", 1)[0]),
    )


class _Dice:
    """Normal noise of every kind from its own stream."""

    def __init__(self, seed, noise):
        self._noise = noise
        self._streams = {
            kind: np.random.default_rng([seed, i]) for i, kind in enumerate(STREAMS)
        }

    def __call__(self, kind, size):
        return self._noise * NOISE[kind] * self._streams[kind].standard_normal(size)

    def along_strike(self, kind, s, width):
        """Smooth noise along a line: errs alike over `width`, sigma everywhere."""
        knots = np.arange(S_RANGE[0] - 4 * width, S_RANGE[1] + 4 * width, width / 2)
        weight = np.exp(-0.5 * ((np.asarray(s)[:, None] - knots) / width) ** 2)
        weight /= np.sqrt((weight**2).sum(axis=1, keepdims=True))
        return weight @ self(kind, len(knots))


def section_lines():
    """Draw the section lines: one from its far end, one with a bend of 10 degrees."""
    lines = {}
    for name, s in SECTIONS.items():
        ends = np.array(SECTION_ENDS)
        lines[name] = truth.to_map(ends, s)
    t = np.array([SECTION_ENDS[0], 2500.0, SECTION_ENDS[1]])
    off = np.tan(np.radians(5.0)) * np.abs(t - t[1])
    lines[BENT] = truth.to_map(t, SECTIONS[BENT] - off + off.max() / 2)
    lines[REVERSED] = lines[REVERSED][::-1]
    return lines


def on_section(name, t):
    """Give the strike position of a section line at t."""
    line_t, line_s = truth.to_local(section_lines()[name])
    order = np.argsort(line_t)
    return np.interp(t, line_t[order], line_s[order])


def _ground_t(s):
    """Where the fault meets the ground."""
    low = np.full(np.shape(s), -2000.0)
    return truth.bisect(
        lambda t: truth.fault_z(t, s) - truth.ground_z(t, s), low, 3000.0
    )


def _dip_azimuth(dz_dt, dz_ds):
    """Dip and grid azimuth of a surface from its local slopes."""
    dip = np.degrees(np.arctan(np.hypot(dz_dt, dz_ds)))
    along, strike = truth.axes()
    down = -(np.multiply.outer(dz_dt, along) + np.multiply.outer(dz_ds, strike))
    return dip, np.degrees(np.arctan2(down[..., 0], down[..., 1])) % 360.0


def _slopes(surface, t, s, step=1.0):
    dt = (surface(t + step, s) - surface(t - step, s)) / (2 * step)
    ds = (surface(t, s + step) - surface(t, s - step)) / (2 * step)
    return dt, ds


def _trace(dice, piece=1000.0, spacing=50.0):
    """Map the trace: its place errs across strike, its elevation is the ground's."""
    s = np.arange(S_RANGE[0], S_RANGE[1] + 1, spacing)
    t = _ground_t(s)
    slope = np.tan(np.radians(truth.fault_dip(t, s)))
    t = t + dice.along_strike("trace", s, 200.0) / slope
    xyz = np.column_stack([truth.to_map(t, s), truth.ground_z(t, s)])
    pieces = []
    per = round(piece / spacing)
    for i in range(0, len(s) - 1, per):
        part = slice(i, min(i + per, len(s) - 1) + 1)
        middle = i + per // 2
        dip, azimuth = _dip_azimuth(*_slopes(truth.fault_z, t[middle], s[middle]))
        dip = dip + dice("fault dip", 1)[0]
        azimuth = azimuth + dice("azimuth", 1)[0]
        pieces.append((xyz[part], float(dip), float(azimuth) % 360))
    return pieces


def _fault_picks(dice, spacing=110.0, past=120.0, scatter=15.0):
    """Pick the fault on the sections, to just below the hanging-wall cut-off."""
    picks = []
    for i, name in enumerate(SECTIONS):
        if name == TRACE_ONLY:
            continue
        s = float(on_section(name, 1000.0))
        deepest = float(truth.hanging_wall_cutoff(CONTOURED, s)[1]) - past
        z = np.arange(300.0, deepest - spacing / 2, -spacing)
        t = truth.fault_t(z, s)
        # a little off the line, left and right of it in turn
        where = on_section(name, t) + scatter * np.sin(2.4 * np.arange(len(z)) + i)
        z = truth.fault_z(t, where) + dice("fault", len(z))
        xyz = np.column_stack([truth.to_map(t, where), z])
        picks += [(name, p) for p in xyz]
    return picks


def outcrop_t(s):
    """Where the contoured horizon comes out at the ground, far in the hanging wall."""
    s = np.asarray(s, float)
    return truth.bisect(
        lambda t: truth.ground_z(t, s) - truth.hanging_wall_z(CONTOURED, t, s),
        np.full(s.shape, 10500.0),
        13500.0,
        steps=28,
    )


def _contours(dice):
    """Draw the structure contours of each wall, broken at the fault gap.

    Each line errs by its own smooth amount of elevation along strike, so that
    neighbouring lines err independently and never cross.
    """
    s, walls = _profiles()
    lines = []
    for wall, profiles in walls.items():
        ends = np.array([[z[0], z[-1]] for _, z in profiles])
        first = np.ceil((ends.min() - 30.0) / INTERVAL)
        last = np.floor((ends.max() + 30.0) / INTERVAL)
        for level in INTERVAL * np.arange(first, last + 1):
            aim = level - dice.along_strike("contours", s, 400.0)
            there = (aim > ends[:, 0]) & (aim < ends[:, 1])
            t = np.array([np.interp(a, z, t) for a, (t, z) in zip(aim, profiles)])
            lines += [(level, xy, wall) for xy in _runs(truth.to_map(t, s), there)]
    return lines


@lru_cache(maxsize=1)
def _profiles(spacing=200.0, step=10.0):
    """Dense profiles (t, z) of the contoured horizon in each wall, z growing."""
    s = np.arange(S_RANGE[0], S_RANGE[1] + 1, spacing)
    walls = {"footwall": [], "hanging wall": []}
    foot_t, _ = truth.footwall_cutoff(CONTOURED, s)
    for si, cut, end in zip(s, foot_t, outcrop_t(s)):
        t = np.append(np.arange(T_RANGE[0], cut, step), cut)
        walls["footwall"].append((t, truth.regional_z(CONTOURED, t)))
        t = np.arange(cut, end, step)  # where its particles started from
        t, z = truth.moved(t, truth.regional_z(CONTOURED, t), np.full(t.shape, si))
        walls["hanging wall"].append((t[t <= end], z[t <= end]))
    return s, walls


def _runs(xy, there):
    """Cut a line into the runs of vertices that are there."""
    edges = np.flatnonzero(np.diff(np.r_[False, there, False].astype(int)))
    return [xy[a:b] for a, b in zip(edges[::2], edges[1::2]) if b - a > 1]


@lru_cache(maxsize=1)
def _dip_points():
    """Where dips are measured, and the true t, s, z, dip, azimuth, setting there.

    Outcrops lie in the far hanging wall, by the sections and in between; core holes
    in the footwall stand by the sections.
    """
    near = (-120.0, -70.0, -25.0, 30.0, 80.0, 125.0)
    own = [float(on_section(name, 12500.0)) + d for name in SECTIONS for d in near]
    s = np.array(sorted({*own, *np.arange(-7800.0, 7801.0, 1200.0)}))
    t = outcrop_t(s) + 12.0 * np.sin(3.1 * np.arange(len(s)))
    bed = truth.hanging_wall_z
    slopes = _slopes(lambda t, s: bed(CONTOURED, t, s), t, s, step=20.0)
    outcrops = (t, s, bed(CONTOURED, t, s), *_dip_azimuth(*slopes))
    t = np.tile(CORE_HOLES, len(SECTIONS))
    s = np.concatenate([on_section(name, np.array(CORE_HOLES)) for name in SECTIONS])
    s = s + 60.0 * np.sin(2.0 * np.arange(len(s)))
    flat = _dip_azimuth(np.full(len(t), truth.REGIONAL_SLOPE), np.zeros(len(t)))
    holes = (t, s, truth.regional_z(CONTOURED, t), *flat)
    setting = ["outcrop"] * len(outcrops[0]) + ["core hole"] * len(t)
    return (*(np.concatenate(pair) for pair in zip(outcrops, holes)), setting)


def _exposures(dice):
    """Measure elevation, dip and dip direction of the contoured horizon."""
    t, s, z, dip, azimuth, setting = _dip_points()
    n = len(t)
    xyz = np.column_stack([truth.to_map(t, s), z + dice("exposures", n)])
    dip = np.abs(dip + dice("bed dip", n))
    azimuth = (azimuth + dice("azimuth", n)) % 360
    return list(zip(xyz, dip, azimuth, setting))


def _grid_frame():
    """North-up cells that cover the sheet: west, north, t and s of their centres."""
    corners = truth.to_map(*np.meshgrid(T_RANGE, S_RANGE)).reshape(-1, 2)
    west, south = np.floor(corners.min(axis=0) / CELL) * CELL
    east, north = np.ceil(corners.max(axis=0) / CELL) * CELL
    e = np.arange(west + CELL / 2, east, CELL)
    n = np.arange(north - CELL / 2, south, -CELL)
    t, s = truth.to_local(np.stack(np.meshgrid(e, n), axis=-1))
    return west, north, t, s


def _ground_grid():
    west, north, t, s = _grid_frame()
    return west, north, truth.ground_z(t, s)


@lru_cache(maxsize=1)
def _clean_depth():
    """Depth of the gridded horizon with the ramp a gridder draws across the gap."""
    west, north, t, s = _grid_frame()
    inside = (T_RANGE[0] <= t) & (t <= T_RANGE[1])
    inside &= (S_RANGE[0] <= s) & (s <= S_RANGE[1])
    depth = np.full(t.shape, np.nan)
    depth[inside] = -_with_ramp(t[inside], s[inside])
    return west, north, depth


def _depth_grid(dice):
    west, north, depth = _clean_depth()
    return west, north, depth + dice("grid", depth.shape)


def _with_ramp(t, s):
    z = truth.horizon_z(GRIDDED, t, s)
    foot, hang = (
        truth.footwall_cutoff(GRIDDED, s),
        truth.hanging_wall_cutoff(GRIDDED, s),
    )
    across = (t - foot[0]) / (hang[0] - foot[0])
    return np.where(np.isnan(z), foot[1] + across * (hang[1] - foot[1]), z)


def planned_wells():
    """Plan two straight wells: one meets the fault, one stays above it."""
    plans = (
        ("Tessomarn 1", (2600.0, -900.0), (3300.0, -700.0, -3100.0)),
        ("Tessomarn 2", (5200.0, 3000.0), (5900.0, 3300.0, -2400.0)),
    )
    wells = []
    for name, (t, s), (target_t, target_s, target_z) in plans:
        ground = float(truth.ground_z(t, s))
        collar = np.r_[truth.to_map(t, s), ground]
        target = np.r_[truth.to_map(target_t, target_s), target_z]
        for kind, point in (("collar", collar), ("target", target)):
            wells.append(
                {"well": name, "point": kind, "xyz": point, "kb": ground + 6.0}
            )
    return wells
