"""Invented ground with a known fault, laid on a map: what the tests put into the core.

Truth comes from `oracles` (closed-form faults, particles moved by root finding). Only
the core's containers are used here, none of its geometry.
"""

import copy
import math
from dataclasses import dataclass, field, replace

import numpy as np
import oracles

from geomcore.fault import KnownFault
from geomcore.kinematics import ConstantHeave
from geomcore.picks import Picks
from geomcore.profile import Profile, Regional
from geomcore.section import SectionFrame
from geomcore.separation import CutOff, Separation
from geomcore.sources import Features
from geomcore.study import SectionLine, Study

EXPONENTIAL = oracles.exponential_fault()
CIRCULAR = oracles.circular_fault()
PLANAR = oracles.segmented_fault("planar", [50.0], [])
KINKED = oracles.segmented_fault("kinked", [50.0, 25.0], [2600.0])
RAMP_FLAT = oracles.segmented_fault(
    "ramp-flat", [45.0, 15.0, 35.0, 0.0], [2100.0, 2500.0, 1800.0]
)
FAULTS = (EXPONENTIAL, CIRCULAR, PLANAR, KINKED, RAMP_FLAT)


@dataclass(frozen=True)
class Place:
    """Where the section's x = 0 lies on the map, and the way of transport."""

    east: float = 500000.0
    north: float = 6200000.0
    azimuth: float = 90.0

    def at(self, x, along_strike=0.0):
        """Give map coordinates (n, 2) of x and of a distance right of transport."""
        a = math.radians(self.azimuth)
        x, s = np.broadcast_arrays(np.asarray(x, float), along_strike)
        return np.column_stack(
            [
                self.east + x * math.sin(a) + s * math.cos(a),
                self.north + x * math.cos(a) - s * math.sin(a),
            ]
        )


@dataclass(frozen=True)
class World:
    """One section's truth: a fault, a straight regional, a shear angle, a heave."""

    fault: oracles.AnalyticFault = EXPONENTIAL
    angle: float = 0.0
    z0: float = -500.0
    slope: float = 0.0
    heave: float = 900.0
    reach: float = 12000.0
    per_strip: float = 30.0
    place: Place = field(default_factory=Place)

    def regional(self, x):
        """Give the regional's elevation at x."""
        return self.z0 + self.slope * x

    @property
    def oblique_heave(self):
        """Displacement of the columns; `heave` is the true one at the cut-offs."""
        return oracles.oblique_heave_for_heave(
            self.fault, self.regional, self.angle, self.heave
        )

    @property
    def footwall(self):
        """Footwall cut-off (x, z)."""
        return oracles.footwall_cutoff(self.fault, self.regional)

    @property
    def hanging_wall(self):
        """Hanging-wall cut-off (x, z)."""
        x = self.footwall[0] + self.heave
        return x, self.fault.z(x)

    def bed(self):
        """Give the horizon from its hanging-wall cut-off on as (n, 2)."""
        big = self.oblique_heave
        bed = oracles.rolled_bed(
            self.fault, self.regional, self.angle, big, big / self.per_strip, self.reach
        )
        return np.array(bed)

    def fault_points(self, x):
        """Give the fault at x as (n, 2)."""
        return np.array([(v, self.fault.z(v)) for v in x])


def frame_for(world):
    """A section straight along transport from x = -4000 of the world on."""
    return SectionFrame(
        "S1", world.place.at([-4000.0, world.reach + 4000.0]), world.place.azimuth
    )


def direct_inputs(world, sigma=0.0):
    """Give predict_fault's arguments, in the world's x, with the exact cut-offs."""
    foot, hang = world.footwall, world.hanging_wall
    known = world.fault_points(np.linspace(0.0, hang[0], 80))
    known = known[(known[:, 0] == 0) | (np.abs(known[:, 0] - foot[0]) > 1e-6)]
    bed = world.bed()
    return {
        "section": frame_for(world),
        "separation": Separation(
            "A",
            CutOff("footwall", *foot),
            CutOff("hanging wall", *hang),
        ),
        "fault": KnownFault(
            known[:, 0],
            known[:, 1],
            sigma,
            world.fault.z(0.0) - world.fault.z(-1.0),
            world.fault.z(hang[0] + 1.0) - hang[1],
            "the truth",
        ),
        "bed": Profile(bed[:, 0], bed[:, 1], np.full(len(bed), sigma)),
        "regional": Regional(foot[0], foot[1], world.slope),
        "model": ConstantHeave(world.angle),
    }


DOCUMENT = {
    "format": "heaveline-study",
    "version": 1,
    "name": "test",
    "fault": "Great Fault",
    "crs": "EPSG:32633",
    "length_unit": "m",
    "vertical_datum": "mean sea level",
    "sources": [
        {
            "key": "trace",
            "role": "fault trace",
            "name": "Great Fault",
            "unit": "m",
            "sign": "elevation",
            "datum": "mean sea level",
        },
        {
            "key": "deep",
            "role": "fault",
            "name": "Great Fault",
            "unit": "m",
            "sign": "elevation",
            "datum": "mean sea level",
            "sigma": 5.0,
        },
        {
            "key": "tops",
            "role": "horizon",
            "name": "A",
            "unit": "m",
            "sign": "elevation",
            "datum": "mean sea level",
            "sigma": 5.0,
        },
    ],
    "transport": {"azimuth": 90.0},
    "picks": {"fault_buffer": 0.0},
    "construction": {"horizon": "A"},
}


def changed(document, *path, to):
    """Give a copy of a document with one entry set; a path may hold list numbers."""
    document = copy.deepcopy(document)
    inner = document
    for step in path[:-1]:
        inner = inner.setdefault(step, {}) if isinstance(inner, dict) else inner[step]
    inner[path[-1]] = to
    return document


def study_for(world, sigma=0.0, **construction):
    """Give the study of a world; sigma goes on horizon and fault picks."""
    document = changed(DOCUMENT, "transport", "azimuth", to=world.place.azimuth)
    for i in (1, 2):
        document["sources"][i]["sigma"] = sigma
    document["construction"].update(shear_angle=world.angle, **construction)
    return Study.from_dict(document)


def truth_points(world, fault_spacing=30.0, footwall_spacing=60.0):
    """Give (x, z) of the fault picks and of the horizon picks of a world."""
    foot, hang = world.footwall, world.hanging_wall
    count = max(round(hang[0] / fault_spacing), 4)
    deep = world.fault_points(np.linspace(0.0, hang[0], count)[1:])
    x = np.arange(foot[0] - 10.0, foot[0] - 3500.0, -footwall_spacing)[::-1]
    before = np.column_stack([x, world.regional(x)])
    return deep, np.vstack([before, world.bed()[1:]])


def sources_for(world, deep=None, tops=None):
    """Lay a world's points on the map; the trace is a line along strike."""
    if deep is None or tops is None:
        true_deep, true_tops = truth_points(world)
        deep = true_deep if deep is None else deep
        tops = true_tops if tops is None else tops
    trace = world.place.at(np.zeros(3), np.array([9000.0, 0.0, -9000.0]))
    return {
        "trace": Features.lines([np.column_stack([trace, np.zeros(3)])]),
        "deep": Features.points(world.place.at(deep[:, 0]), deep[:, 1]),
        "tops": Features.points(world.place.at(tops[:, 0]), tops[:, 1]),
    }


def line_for(world, name="S1", start=-4000.0, along_strike=0.0):
    """Draw the world's section line; its x is the world's x minus start."""
    ends = world.place.at([start, world.reach + 500.0], along_strike)
    return SectionLine(name, ends)


def table(x, z, kind="horizon", name="A", wall="", sigma=5.0, **columns):
    """Make a pick table of section S1 from plain numbers."""
    return Picks.build(
        "S1",
        np.asarray(x, float),
        np.asarray(z, float),
        kind=kind,
        name=name,
        wall=wall,
        sigma_z=sigma,
        **columns,
    )


def joined(*tables):
    """Put pick tables of section S1 into one, in order of x."""
    whole = tables[0].joined(tables[1:])
    return whole.select(np.argsort(whole.x, kind="stable"))


__all__ = [
    "CIRCULAR",
    "DOCUMENT",
    "EXPONENTIAL",
    "FAULTS",
    "KINKED",
    "PLANAR",
    "RAMP_FLAT",
    "Place",
    "World",
    "changed",
    "direct_inputs",
    "frame_for",
    "joined",
    "line_for",
    "replace",
    "sources_for",
    "study_for",
    "table",
    "truth_points",
]
