"""The truth of the sample area: a listric fault and two horizons it has deformed.

An independent statement: it shares no code with the geometry core. The footwall is
rigid. The hanging wall moves column by column; a column is a line of material
inclined against the fault (antithetic shear), it keeps its length and its direction
and its foot slides on the fault. Where a particle comes to lie is found by root
finding, particle by particle.

Local coordinates: ``t`` along transport, from the footwall into the hanging wall;
``s`` along strike, the hanging wall on the right. All lengths in metres, z is
elevation. Displacement varies along strike, so each strike position is a plane
strain section of its own.

The area, its names and its rocks are invented.
"""

import numpy as np

CRS = "EPSG:32633"
FAULT = "Kelvastre Fault"
VALLEY = "Tessomarn valley"
#: Map place of t = 0, s = 0, and the grid azimuth of transport in degrees.
ORIGIN = (512000.0, 2616000.0)
TRANSPORT_AZIMUTH = 118.0

# --- fault: flattens exponentially from its dip at REFERENCE_Z to the detachment
REFERENCE_Z = 450.0
SURFACE_DIP = 62.0
DETACHMENT_Z = -3900.0
#: The trace is bowed: at the tips it lies this far towards the hanging wall.
BOW = 500.0
#: Half-length of the fault, and the column displacement in its middle.
HALF_LENGTH = 12000.0
LARGEST_DISPLACEMENT = 1100.0

# --- hanging-wall deformation: degrees from the vertical, positive antithetic
SHEAR_ANGLE = 20.0

# --- horizons: straight regionals that rise into the hanging wall
REGIONAL_SLOPE = 0.06
#: Elevation of each regional at t = 0.
HORIZONS = {"Brelquith": -390.0, "Sardunel": -810.0}


def tan_shear():
    """Give the tangent of the shear angle: a column is t - z tan = constant."""
    return np.tan(np.radians(SHEAR_ANGLE))


def reach():
    """Give the length over which the height above the detachment falls to 1/e."""
    return (REFERENCE_Z - DETACHMENT_Z) / np.tan(np.radians(SURFACE_DIP))


def axes():
    """Give the map directions (east, north) of t and of s."""
    a = np.radians(TRANSPORT_AZIMUTH)
    along = np.array([np.sin(a), np.cos(a)])
    return along, np.array([-along[1], along[0]])


def to_map(t, s):
    """Give the map coordinates, (..., 2), of local ones."""
    along, strike = axes()
    t, s = np.broadcast_arrays(np.asarray(t, float), np.asarray(s, float))
    return np.array(ORIGIN) + t[..., None] * along + s[..., None] * strike


def to_local(xy):
    """Give t and s of map coordinates (..., 2)."""
    along, strike = axes()
    offset = np.asarray(xy, float) - np.array(ORIGIN)
    return offset @ along, offset @ strike


def bisect(function, low, high, steps=46):
    """Find where a function that falls from + to - between two bounds is zero."""
    low, high = np.broadcast_arrays(np.asarray(low, float), np.asarray(high, float))
    for _ in range(steps):
        middle = 0.5 * (low + high)
        above = function(middle) > 0
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return 0.5 * (low + high)


def displacement(s):
    """Give the displacement of the columns (oblique heave) at strike positions s."""
    return LARGEST_DISPLACEMENT * np.maximum(1 - (np.asarray(s) / HALF_LENGTH) ** 2, 0)


def fault_z(t, s):
    """Give the elevation of the fault."""
    start = BOW * (np.asarray(s) / HALF_LENGTH) ** 2
    fall = np.exp(-(np.asarray(t) - start) / reach())
    return DETACHMENT_Z + (REFERENCE_Z - DETACHMENT_Z) * fall


def fault_dip(t, s):
    """Give the dip of the fault along transport in degrees."""
    slope = (fault_z(t, s) - DETACHMENT_Z) / reach()
    return np.degrees(np.arctan(slope))


def fault_t(z, s):
    """Give t of the fault at an elevation, by root finding."""
    z, s = np.broadcast_arrays(np.asarray(z, float), np.asarray(s, float))
    return bisect(lambda t: fault_z(t, s) - z, np.full(z.shape, -4e3), 4e4)


def regional_z(name, t):
    """Give the elevation a horizon had before the fault moved."""
    return HORIZONS[name] + REGIONAL_SLOPE * np.asarray(t)


def foot_z(column, s):
    """Give the elevation at which a column stands on the fault.

    A column is named by where its line meets z = 0.
    """
    return bisect(
        lambda z: fault_z(column + z * tan_shear(), s) - z,
        np.full(np.shape(column), DETACHMENT_Z - 1.0),
        6000.0,
    )


def moved(t, z, s):
    """Give where a particle of the hanging wall comes to lie: new t and z."""
    column = t - z * tan_shear()
    target = column + displacement(s)
    new_z = z + foot_z(target, s) - foot_z(column, s)
    return target + new_z * tan_shear(), new_z


def footwall_cutoff(name, s):
    """Give t and z of the footwall cut-off of a horizon."""
    s = np.asarray(s, float)
    low = np.full(s.shape, -4e3)
    t = bisect(lambda t: fault_z(t, s) - regional_z(name, t), low, 4e4)
    return t, regional_z(name, t)


def hanging_wall_cutoff(name, s):
    """Give t and z of the hanging-wall cut-off: where the footwall's has moved to."""
    return moved(*footwall_cutoff(name, s), np.asarray(s, float))


def heave(name, s):
    """Give the horizontal separation of the cut-offs."""
    return hanging_wall_cutoff(name, s)[0] - footwall_cutoff(name, s)[0]


def throw(name, s):
    """Give the vertical separation of the cut-offs."""
    return footwall_cutoff(name, s)[1] - hanging_wall_cutoff(name, s)[1]


def hanging_wall_z(name, t, s):
    """Give the deformed horizon; only meant beyond its hanging-wall cut-off."""
    t, s = np.broadcast_arrays(np.asarray(t, float), np.asarray(s, float))

    def short_of(origin):
        return t - moved(origin, regional_z(name, origin), s)[0]

    origin = bisect(short_of, t - displacement(s) - 1.0, t + 1.0, steps=44)
    return moved(origin, regional_z(name, origin), s)[1]


def horizon_z(name, t, s):
    """Give a horizon in both walls, NaN in the gap between its cut-offs."""
    t, s = np.broadcast_arrays(np.asarray(t, float), np.asarray(s, float))
    z = np.where(t <= footwall_cutoff(name, s)[0], regional_z(name, t), np.nan)
    beyond = t >= hanging_wall_cutoff(name, s)[0]
    z[beyond] = hanging_wall_z(name, t[beyond], s[beyond])
    return z


def ground_z(t, s):
    """Give the elevation of the ground: gentle hills and a valley along strike."""
    t, s = np.asarray(t, float), np.asarray(s, float)
    hills = (
        60.0 * np.sin(t / 1900.0 + 0.4) * np.cos(s / 2600.0)
        + 35.0 * np.sin(t / 870.0 - s / 1150.0)
        + 30.0 * np.cos(s / 1700.0 + 1.0)
    )
    valley = 0.5 * (1 + np.tanh((t - 10900.0 - 250.0 * np.sin(s / 2300.0)) / 500.0))
    return 440.0 + (1 - 0.8 * valley) * hills - 165.0 * valley
