"""The assumed piece of fault between its last known point and the cut-off."""

import numpy as np
import pytest

from geomcore.forward import predict_horizon
from geomcore.profile import line_through
from geomcore.sources import Features
from geomcore.study import SectionLine, Study, run

REACH = 4000.0 / np.tan(np.radians(60.0))


def fault(x):
    """Exponential fault: 60 degrees at the surface, detachment at -4000 m."""
    return -4000.0 + 4000.0 * np.exp(-np.asarray(x) / REACH)


def solved(angle, known_to=0.0, dip=60.0, curvature=True):
    """Run one clean section on which the fault is known down to a place."""
    x = np.linspace(0.0, 30000.0, 60001)
    bed, foot, hang = predict_horizon(
        x, fault(x), line_through(0.0, -500.0, 0.0), 900.0, angle
    )
    source = {"unit": "m", "sign": "elevation", "datum": "mean sea level", "sigma": 1.0}
    sources = [
        {"key": "trace", "role": "fault trace", "name": "F", **source},
        {"key": "bed", "role": "horizon", "name": "A", **source},
    ]
    at = np.r_[np.arange(-4000.0, foot[0], 100.0), np.arange(hang[0] + 5, 9000.0, 50.0)]
    z = np.where(at < foot[0], -500.0, bed(at))
    data = {
        "trace": Features.lines(
            [[(0.0, -9000.0, 0.0), (0.0, 9000.0, 0.0)]], dip=[dip], dip_azimuth=[90.0]
        ),
        "bed": Features.points(np.column_stack([at, 0 * at]), z),
    }
    if known_to:
        k = np.arange(60.0, known_to, 60.0)
        sources.append({"key": "picks", "role": "fault", "name": "F", **source})
        data["picks"] = Features.points(np.column_stack([k, 0 * k]), fault(k))
    study = Study.from_dict(
        {
            "format": "heaveline-study",
            "version": 1,
            "name": "test",
            "fault": "F",
            "crs": "EPSG:32633",
            "length_unit": "m",
            "vertical_datum": "mean sea level",
            "sources": sources,
            "transport": {"hw_side": "E"},
            "construction": {"horizon": "A", "shear_angle": angle},
        }
    )
    line = SectionLine("S1", np.array([(-5000.0, 0.0), (20000.0, 0.0)]))
    return run(study, data, [line]).sections[0], hang[0] - foot[0]


@pytest.mark.parametrize("angle", [0.0, 20.0, 30.0])
def test_arc_finds_the_heave_a_straight_piece_misses(angle):
    """From trace and dip alone the bed's dip tells how much the fault flattens.

    The straight continuation of 60 degrees would miss the heave by more than a
    quarter (closed form of its crossing with the bed below).
    """
    section, heave = solved(angle)
    assert section.prediction
    found = section.prediction.separation.heave
    assert found == pytest.approx(heave, rel=0.10)
    first = section.fault.x[0]
    straight = -np.tan(np.radians(60.0))
    hang = section.prediction.separation.hanging_wall
    # where the straight line reaches the bed's cut-off level it is far too near
    assert (hang.z - section.fault.z[0]) / straight < 0.85 * (hang.x - first)


def test_assumed_piece_is_marked_and_doubted():
    """Nothing assumed is passed off as known."""
    section, _ = solved(20.0)
    trace = section.prediction.trace
    assert set(trace.constrained[1:][trace.strip[1:] == 0]) == {"assumed"}
    codes = {d.code for d in section.all_doubts}
    assert "assumed-piece" in codes


def test_known_piece_down_to_the_cutoff_is_left_alone():
    """Where the fault is seen below the cut-off there is nothing to assume."""
    section, heave = solved(20.0, known_to=1100.0)
    assert section.fault.observed is None
    assert "assumed-piece" not in {d.code for d in section.all_doubts}
    assert section.prediction.separation.heave == pytest.approx(heave, rel=0.01)


def test_assumed_piece_widens_the_stated_error():
    """A piece nobody has seen makes the whole prediction less sure."""
    seen, _ = solved(20.0, known_to=1100.0)
    assumed, _ = solved(20.0)
    deep = 2000.0
    at = [
        np.interp(5000.0 + deep, s.prediction.trace.x, s.prediction.trace.sigma_z)
        for s in (seen, assumed)
    ]
    assert at[1] > 5.0 * at[0]
