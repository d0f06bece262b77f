"""Sections of growth horizons over a known fault, with every stated error drawn.

Truth comes from `oracles` (particles moved by root finding); only the core's containers
are used here, none of its geometry.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
import oracles

from geomcore.fault import KnownFault
from geomcore.kinematics import ConstantHeave
from geomcore.problem import MarchOptions, Problem
from geomcore.profile import Profile, Regional
from geomcore.separation import CutOff, Separation

__all__ = ["Errors", "Ground", "drawn_section"]


@dataclass(frozen=True)
class Errors:
    """One standard deviation of everything that is drawn.

    Parameters
    ----------
    picks, fault : float
        z of picks of the horizons and of the fault.
    cutoff_x, cutoff_z : float
    regional_dip : float
        Slope of the regional about the footwall cut-off.
    ties : float
        z of deep points on the fault.
    """

    picks: float = 0.0
    fault: float = 0.0
    cutoff_x: float = 0.0
    cutoff_z: float = 0.0
    regional_dip: float = 0.0
    ties: float = 20.0


EXPONENTIAL = oracles.exponential_fault()


@dataclass(frozen=True)
class Ground:
    """What is true.

    Parameters
    ----------
    angle : float
        Shear angle, degrees.
    fault : AnalyticFault
    beds : tuple of (level, oblique heave)
        Elevation of each regional, and the oblique heave since it was laid down.
    spacing, reach : float
        Of the picks along x, and where they end.
    ties : tuple of float
        x of deep points on the fault.
    """

    angle: float = 25.0
    fault: oracles.AnalyticFault = EXPONENTIAL
    beds: tuple = ((-400.0, 300.0), (-900.0, 600.0), (-1400.0, 900.0))
    spacing: float = 50.0
    reach: float = 9000.0
    ties: tuple = ()


@cache
def _true_bed(fault, angle, level, heave, reach):
    """Footwall cut-off, and the bed from its hanging-wall cut-off on, as (n, 2)."""

    def regional(x):
        return level

    foot = oracles.footwall_cutoff(fault, regional)
    bed = oracles.rolled_bed(fault, regional, angle, heave, 40.0, reach)
    return foot, np.array(bed)


def drawn_section(ground, errors=None, rng=None):
    """Draw one section: its horizons as problems on one known fault.

    Parameters
    ----------
    ground : Ground
    errors : Errors, optional
        None at all if not given.
    rng : numpy.random.Generator, optional

    Returns
    -------
    list of Problem
        Of vertical shear; the angle is what is looked for.
    """
    errors, rng = errors or Errors(), rng or np.random.default_rng(0)
    true = [
        _true_bed(ground.fault, ground.angle, level, heave, ground.reach)
        for level, heave in ground.beds
    ]
    known = _known_fault(ground, true, errors, rng)
    return [_problem(ground, *bed, known, errors, rng) for bed in true]


def _known_fault(ground, true, errors, rng):
    """Fault picks from above the first footwall cut-off to the last hanging wall's."""
    top = min(foot[0] for foot, _ in true) - 100.0
    x = np.arange(top, max(bed[0, 0] for _, bed in true), 40.0)
    z = np.array([ground.fault.z(v) for v in x]) + errors.fault * rng.normal(
        size=len(x)
    )
    ties = np.array(ground.ties, dtype=float)
    tie_z = np.array([ground.fault.z(v) for v in ties])
    return KnownFault(
        x,
        np.minimum.accumulate(z),
        errors.fault,
        -1.7,
        -0.5,
        "the truth",
        tie_x=ties,
        tie_z=tie_z + errors.ties * rng.normal(size=len(ties)),
        tie_sigma=np.full(len(ties), errors.ties),
    )


def _problem(ground, foot, bed, known, errors, rng):
    """One horizon with its picks, cut-offs and regional drawn."""

    def cutoff(wall, place):
        x = place[0] + errors.cutoff_x * rng.normal()
        z = place[1] + errors.cutoff_z * rng.normal()
        return CutOff(wall, x, z, errors.cutoff_x, errors.cutoff_z)

    lower, upper = cutoff("hanging wall", bed[0]), cutoff("footwall", foot)
    x = np.arange(bed[0, 0] + 40.0, bed[-1, 0], ground.spacing)
    z = np.interp(x, bed[:, 0], bed[:, 1]) + errors.picks * rng.normal(size=len(x))
    keep = x > lower.x
    dip = errors.regional_dip
    return Problem(
        "section S1",
        Separation(f"bed at {foot[1]:.0f}", upper, lower),
        known,
        Profile(
            np.r_[lower.x, x[keep]],
            np.r_[lower.z, z[keep]],
            np.r_[errors.cutoff_z, np.full(keep.sum(), max(errors.picks, 0.05))],
        ),
        Regional(
            upper.x, upper.z, dip * rng.normal(), (errors.cutoff_z**2, 0.0, dip**2)
        ),
        ConstantHeave(0.0),
        MarchOptions(),
    )
