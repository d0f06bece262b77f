"""Invented ground over a curved fault, in closed form; knows neither QGIS nor the core.

The fault flattens exponentially to a detachment, F(x) = -D (1 - exp(-x/L)), from the
surface at x = 0. The hanging wall moved by one heave H with vertical shear, so the
horizon lies at B(x) = R(x - H) + F(x) - F(x - H) (eq. 2 of methods.md turned round),
and in the footwall at its regional R. All is the same along strike.
"""

import math
from dataclasses import dataclass

DETACHMENT = 4000.0
REACH = 3000.0
HEAVE = 800.0
REGIONAL = -500.0


def fault(x):
    """Elevation of the fault at x."""
    return -DETACHMENT * (1.0 - math.exp(-x / REACH))


def fault_dip(x):
    """Dip of the fault in degrees at x."""
    return math.degrees(math.atan(DETACHMENT / REACH * math.exp(-x / REACH)))


def footwall_cutoff(offset=0.0):
    """X where a regional `offset` above the first horizon's meets the fault."""
    return -REACH * math.log(1.0 + (REGIONAL + offset) / DETACHMENT)


FOOTWALL_CUTOFF = footwall_cutoff()
HANGING_WALL_CUTOFF = FOOTWALL_CUTOFF + HEAVE


def horizon(x, offset=0.0):
    """Elevation of a horizon at x, outside its cut-offs.

    `offset` is the height of its regional above that of the first horizon.
    """
    if x <= footwall_cutoff(offset):
        return REGIONAL + offset
    return REGIONAL + offset + fault(x) - fault(x - HEAVE)


THROW = REGIONAL - horizon(HANGING_WALL_CUTOFF)


@dataclass(frozen=True)
class Map:
    """Where the ground lies on the map.

    Parameters
    ----------
    east, north : float
        Map place of x = 0 in the middle of the fault.
    azimuth : float
        Grid azimuth of transport, degrees.
    """

    east: float = 500000.0
    north: float = 5800000.0
    azimuth: float = 110.0

    def at(self, x, along=0.0):
        """Give map coordinates of x and a distance along strike, right of transport."""
        a = math.radians(self.azimuth)
        return (
            self.east + x * math.sin(a) + along * math.cos(a),
            self.north + x * math.cos(a) - along * math.sin(a),
        )

    def line(self, x, z, half=3000.0):
        """Give a line along strike at one x and z, as (east, north, z) vertices."""
        return [(*self.at(x, -half), z), (*self.at(x, half), z)]

    def x_of(self, east, north):
        """Give x of a map point."""
        a = math.radians(self.azimuth)
        return (east - self.east) * math.sin(a) + (north - self.north) * math.cos(a)


def horizon_stations(offset=0.0, step=25.0, first=-1500.0, last=9000.0):
    """Give x of a horizon's picks: both walls, not the gap between the cut-offs."""
    foot = footwall_cutoff(offset)
    count = int((last - first) / step) + 1
    stations = (first + i * step for i in range(count))
    return [x for x in stations if x < foot or x > foot + HEAVE]


def fault_stations(step=50.0):
    """Give x of the fault picks, from below the surface to the hanging-wall cut-off."""
    count = int(HANGING_WALL_CUTOFF / step)
    return [i * step for i in range(1, count + 1)] + [HANGING_WALL_CUTOFF]
