"""Second implementations in plain Python: slow, naive, sharing no code with the core.

Faults are closed forms z(x); roots are found by bisection; the hand march goes point
by point through lists. Elevations up, x from the footwall into the hanging wall,
shear angle in degrees from the vertical, positive antithetic.
"""

import bisect
import math
from dataclasses import dataclass
from typing import Callable


@dataclass(frozen=True)
class AnalyticFault:
    """A fault z(x) that is known everywhere, with the x of its bends."""

    name: str
    z: Callable
    bends: tuple = ()


def exponential_fault(dip=60.0, detachment=-4000.0):
    """Give z = det + (z0 - det) exp(-x/L) below (0, 0), straight above it.

    L = (z0 - det)/tan(dip); methods.md section 16.
    """
    slope = math.tan(math.radians(dip))
    length = -detachment / slope

    def z(x):
        if x < 0:
            return -slope * x
        return detachment - detachment * math.exp(-x / length)

    return AnalyticFault("exponential", z)


def circular_fault(dip=60.0, radius=7000.0):
    """Give an arc that starts at (0, 0) with a dip, flattens to level and stays so."""
    start = math.radians(dip)
    x_centre, z_centre = radius * math.sin(start), radius * math.cos(start)

    def z(x):
        if x < 0:
            return -math.tan(start) * x
        if x > x_centre:
            return z_centre - radius
        return z_centre - math.sqrt(radius**2 - (x - x_centre) ** 2)

    return AnalyticFault("circular", z)


def segmented_fault(name, dips, lengths):
    """Give a fault of straight pieces from (0, 0); lengths are along x, last open."""
    slopes = [-math.tan(math.radians(d)) for d in dips]
    x_bend, z_bend = [0.0], [0.0]
    for slope, length in zip(slopes, lengths):
        z_bend.append(z_bend[-1] + slope * length)
        x_bend.append(x_bend[-1] + length)

    def z(x):
        i = max(bisect.bisect_right(x_bend, x) - 1, 0)
        return z_bend[i] + slopes[i] * (x - x_bend[i])

    return AnalyticFault(name, z, tuple(x_bend[1:]))


def bisected(function, low, high):
    """Give the root of a function that falls through zero between low and high."""
    if not function(low) >= 0 >= function(high):
        raise ValueError(f"no root between {low} and {high}")
    for _ in range(200):
        middle = 0.5 * (low + high)
        if middle in (low, high):
            break
        low, high = (middle, high) if function(middle) >= 0 else (low, middle)
    return 0.5 * (low + high)


def foot_of_shear_line(fault, u, angle, deep=-60000.0, high=30000.0):
    """Find the elevation where the shear line x = u + z tan(angle) meets a fault."""
    t = math.tan(math.radians(angle))
    return bisected(lambda z: fault.z(u + z * t) - z, deep, high)


def moved_particle(fault, angle, oblique_heave, x, z):
    """Move a hanging-wall particle with its column and give its new place.

    The column is the shear line through the particle. Its foot slides down the fault
    until the column stands one oblique heave farther out; every particle on it moves
    as the foot does. Nothing is marched: both feet are found as roots.
    """
    t = math.tan(math.radians(angle))
    u = x - z * t
    before = foot_of_shear_line(fault, u, angle)
    after = foot_of_shear_line(fault, u + oblique_heave, angle)
    dz = after - before
    return x + oblique_heave + dz * t, z + dz


def footwall_cutoff(fault, regional):
    """Find where the regional z(x) meets the fault."""
    x = bisected(lambda x: fault.z(x) - regional(x), -20000.0, 20000.0)
    return x, regional(x)


def oblique_heave_for_heave(fault, regional, angle, heave):
    """Find the oblique heave whose cut-offs lie a given heave apart."""
    x, z = footwall_cutoff(fault, regional)
    drop = z - fault.z(x + heave)
    return heave + drop * math.tan(math.radians(angle))


def _regional_on_shear_line(regional, u, t):
    """Find x where a regional meets the shear line x - z t = u."""
    return bisected(lambda x: u - (x - regional(x) * t), -80000.0, 200000.0)


def rolled_bed(fault, regional, angle, oblique_heave, step, reach):
    """Move particles of the regional and give the bed from its cut-off outwards.

    Particles start at the footwall cut-off and stand `step` apart along the frame's
    axis; the last one ends at x = reach or just before.
    """
    t = math.tan(math.radians(angle))
    x_foot, z_foot = footwall_cutoff(fault, regional)
    u = x_foot - z_foot * t
    bed = []
    while True:
        start = _regional_on_shear_line(regional, u, t)
        x, z = moved_particle(fault, angle, oblique_heave, start, regional(start))
        if x > reach:
            return bed
        bed.append((x, z))
        u += step


def between(points, x):
    """Read a polyline [(x, z), ...] at x by looking for the piece that holds it."""
    for (x0, z0), (x1, z1) in zip(points[:-1], points[1:]):
        if x0 <= x <= x1:
            return z0 + (z1 - z0) * (x - x0) / (x1 - x0)
    raise ValueError(f"x = {x} lies outside the line")


def hand_march(start, bed, regional, angle, per_strip):
    """March the fault with pencil and paper: one strip after the other.

    Parameters: the fault and the bed as lists of (x, z), the fault from the footwall
    to the hanging-wall cut-off, the bed from there on; the regional z(x), straight;
    points a strip. Gives a list of (x, z) from the footwall cut-off on.
    """
    t = math.tan(math.radians(angle))
    lean = [(x - z * t, z) for x, z in start]
    bed = [(x - z * t, z) for x, z in bed]
    heave = lean[-1][0] - lean[0][0]
    step = heave / per_strip
    z_zero, slope = regional(0.0), regional(1.0) - regional(0.0)
    row = [
        between(lean, min(lean[0][0] + i * step, lean[-1][0]))
        for i in range(per_strip + 1)
    ]
    while True:
        i = len(row)
        u = lean[0][0] + i * step
        if u > bed[-1][0] + 1e-6:
            break
        u = min(u, bed[-1][0])
        level = (z_zero + slope * (u - heave)) / (1.0 - slope * t)
        row.append(row[i - per_strip] + between(bed, u) - level)
    return [(lean[0][0] + i * step + z * t, z) for i, z in enumerate(row)]


def lines_crossed(line, leg):
    """Count and place crossings of a polyline with one straight leg, in plain steps.

    Half-open: a vertex on the leg belongs to the piece that starts there.
    """
    (ax, ay), (bx, by) = leg
    length = math.hypot(bx - ax, by - ay)
    tx, ty = (bx - ax) / length, (by - ay) / length
    found = []
    for p, q in zip(line[:-1], line[1:]):
        side_p = (p[1] - ay) * tx - (p[0] - ax) * ty
        side_q = (q[1] - ay) * tx - (q[0] - ax) * ty
        if (side_p < 0) == (side_q < 0):
            continue
        f = side_p / (side_p - side_q)
        x, y = p[0] + f * (q[0] - p[0]), p[1] + f * (q[1] - p[1])
        along = (x - ax) * tx + (y - ay) * ty
        if 0 <= along <= length:
            found.append((along, p[2] + f * (q[2] - p[2])))
    return sorted(found)
