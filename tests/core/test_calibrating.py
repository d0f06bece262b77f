"""The shear angle of whole sections from their picks, one by one and jointly."""

import numpy as np
import pytest

from geomcore.calibrating import calibrate
from geomcore.errors import StudyError
from geomcore.forward import forward_horizon
from geomcore.kinematics import ConstantHeave
from geomcore.picks import Picks
from geomcore.profile import line_through
from geomcore.study import Study

X = np.linspace(-3000.0, 30000.0, 16501)
SLOPE = np.tan(np.radians(60.0))
LISTRIC = np.where(
    X < 0.0, -SLOPE * X, -4000.0 + 4000.0 * np.exp(-np.maximum(X, 0.0) * SLOPE / 4000.0)
)
#: Growth horizons: oblique heave left to each, and the level of its regional.
GROWTH = {"young": (300.0, -400.0), "middle": (600.0, -900.0), "old": (900.0, -1400.0)}
ANGLE = 25.0


def section_picks(name, noise, seed):
    """Picks of one section: three growth horizons and the fault down past them."""
    rng = np.random.default_rng(seed)
    tables = []
    deepest = 0.0
    for horizon, (heave, level) in GROWTH.items():
        bed, foot, hang = forward_horizon(
            X, LISTRIC, line_through(0.0, level, 0.0), heave, ConstantHeave(ANGLE)
        )
        deepest = max(deepest, hang[0])
        before = np.arange(-2800.0, foot[0] - 40.0, 60.0)
        beyond = np.arange(hang[0] + 40.0, 9000.0, 50.0)
        x = np.r_[before, beyond]
        z = np.r_[np.full(len(before), level), bed(beyond)]
        wall = np.repeat(["footwall", "hanging wall"], [len(before), len(beyond)])
        z = z + noise * rng.normal(size=len(x))
        kind = {"name": horizon, "wall": wall, "sigma_z": max(noise, 0.05)}
        tables.append(Picks.build(name, x, z, kind="horizon", **kind))
    at = np.arange(0.0, deepest + 60.0, 40.0)
    z = np.interp(at, X, LISTRIC) + 0.5 * noise * rng.normal(size=len(at))
    fault = Picks.build(
        name, at, z, kind="fault", name="F", sigma_z=max(0.5 * noise, 0.05)
    )
    return fault.joined(tables)


def study(**calibration):
    """A study that calibrates on the growth horizons."""
    document = {
        "format": "heaveline-study",
        "version": 1,
        "name": "test",
        "fault": "F",
        "crs": "EPSG:32633",
        "length_unit": "m",
        "vertical_datum": "mean sea level",
        "sources": [],
        "construction": {"horizon": "old"},
        "calibration": {"horizons": list(GROWTH), **calibration},
    }
    return Study.from_dict(document)


def test_clean_section_gives_its_angle():
    """Growth horizons with cut-offs found from the picks, within half a degree."""
    result = calibrate(study(), [section_picks("S1", 0.0, 1)])
    assert result.best.resolved
    assert result.best.best == pytest.approx(ANGLE, abs=0.5)
    assert set(result.sections[0].horizons) == set(GROWTH)


def test_parallel_sections_are_surer_together():
    """One angle for the fault: the joint interval holds it and is narrower."""
    sections = [section_picks(f"S{i}", 5.0, i) for i in range(3)]
    result = calibrate(study(ways=["horizons"]), sections)
    singles = [s.by("horizons") for s in result.sections]
    assert all(e.resolved for e in singles)
    assert result.best.sd < min(e.sd for e in singles)
    assert result.best.best == pytest.approx(ANGLE, abs=3.0)


def test_calibration_stops_when_it_is_cancelled():
    """Nothing half done comes out."""
    with pytest.raises(StudyError) as error:
        calibrate(study(), [section_picks("S1", 0.0, 1)], cancelled=lambda: True)
    assert error.value.code == "cancelled"


def test_way_that_needs_a_detachment_asks_for_it():
    """Lost area tells the angle only with a known detachment."""
    with pytest.raises(StudyError, match="detachment"):
        study(ways=["area"])
