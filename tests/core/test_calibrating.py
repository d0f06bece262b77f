"""The shear angle of whole sections from their picks, one by one and jointly."""

from dataclasses import replace

import numpy as np
import pytest

from geomcore.calibrating import calibrate, horizons_for
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


def section_picks(name, noise, seed, reach=9000.0):
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
        beyond = np.arange(hang[0] + 40.0, reach, 50.0)
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


# ---- what a section brings, and what it leaves out -----------------------------------


def without(picks, **entries):
    """Picks without those that have all the given entries."""
    gone = np.ones(len(picks), dtype=bool)
    for name, value in entries.items():
        gone &= getattr(picks, name) == value
    return picks.select(~gone)


def test_horizon_without_a_known_start_is_left_out():
    """Fault picks that end above the old horizon leave it nothing to count from."""
    picks = section_picks("S1", 2.0, 1)
    deep = (picks.kind == "fault") & (picks.x > 800.0)
    (section,) = calibrate(study(), [picks.select(~deep)]).sections
    assert set(section.horizons) == {"young", "middle"}
    (doubt,) = [d for d in section.doubts if d.code == "horizon-not-used"]
    assert "'old'" in doubt.text
    assert "assumed over more than half the heave" in doubt.text


def test_horizon_missing_in_one_wall_is_left_out_and_named():
    """The others still tell the angle."""
    picks = without(section_picks("S1", 2.0, 1), name="middle", wall="footwall")
    result = calibrate(study(), [picks])
    assert set(result.sections[0].horizons) == {"young", "old"}
    assert "'middle'" in result.sections[0].doubts[0].text
    assert result.best.best == pytest.approx(ANGLE, abs=5.0)


def test_section_without_a_fault_says_so():
    """No fault pick and no cut-off: not resolved, with the reason."""
    result = calibrate(study(), [without(section_picks("S1", 2.0, 1), kind="fault")])
    assert result.best is None
    assert not result.joint[0].resolved
    assert "does not meet the fault" in result.sections[0].doubts[0].text


def test_given_cutoffs_stand_in_for_fault_picks():
    """Six cut-offs with their errors are the fault, where no pick shows it."""
    rng = np.random.default_rng(3)
    picks = without(section_picks("S1", 2.0, 1), kind="fault")
    marks = []
    for horizon, (heave, level) in GROWTH.items():
        _, foot, hang = forward_horizon(
            X, LISTRIC, line_through(0.0, level, 0.0), heave, ConstantHeave(ANGLE)
        )
        x, z = np.array([foot, hang]).T + [4.0, 2.0] * rng.normal(size=(2, 2))
        marks.append(
            Picks.build(
                "S1",
                x,
                z,
                kind="cutoff",
                name=horizon,
                wall=np.array(["footwall", "hanging wall"]),
                sigma_x=4.0,
                sigma_z=2.0,
            )
        )
    result = calibrate(study(), [picks.joined(marks)])
    assert set(result.sections[0].horizons) == set(GROWTH)
    assert result.best.best == pytest.approx(ANGLE, abs=3.0 * result.best.sd)


def test_picks_beyond_a_subsidiary_fault_are_left_out():
    """They moved by more than the master's heave; the doubt names the fault."""
    picks = section_picks("S1", 0.0, 1)
    cut = (picks.name == "old") & (picks.wall == "hanging wall") & (picks.x > 4000.0)
    z = np.where(cut, picks.z - 80.0, picks.z)
    # an antithetic fault under the offset, in the gap of the picks
    gap = (picks.name == "old") & (picks.x > 3960.0) & (picks.x < 4100.0)
    at = np.array([3980.0, 4060.0])
    plane = Picks.build(
        "S1", at, np.array([-1500.0, -1300.0]), kind="fault", name="M", sigma_z=1.0
    )
    plane = replace(plane, wall=np.full(2, "hanging wall", dtype=object))
    picks = replace(picks, z=z).select(~gap).joined([plane])
    (section,) = calibrate(study(), [picks]).sections
    told = [d.text for d in section.doubts if d.code == "beyond-subsidiary"]
    assert told == [t for t in told if "'M'" in t]
    assert any("'old'" in t for t in told)


# ---- the other ways, and what they say together --------------------------------------


def test_growth_horizons_called_older_than_the_fault_contradict_the_others():
    """Their heave against throw runs out of the angles; it joins no other way."""
    asked = study(pre_growth=["young", "middle", "old"])
    result = calibrate(asked, [section_picks("S1", 2.0, 1)])
    by = {e.way: e for e in result.joint}
    assert set(by) == {"horizons", "cut-offs"}
    assert not by["cut-offs"].resolved
    assert result.best is by["horizons"]


def test_ways_that_contradict_each_other_are_doubted():
    """A detachment said 600 m too high asks for another angle than the horizons."""
    sections = [section_picks("S1", 2.0, 1, reach=20000.0)]
    right = calibrate(study(detachment_z=-4000.0, detachment_sigma=40.0), sections)
    wrong = calibrate(study(detachment_z=-3400.0, detachment_sigma=40.0), sections)
    assert [e.way for e in right.joint if e.resolved] == ["horizons", "area"]
    assert right.doubts == ()
    assert [d.code for d in wrong.doubts] == ["ways-disagree"]


def test_compaction_is_said_to_be_left_out():
    """The calibration takes columns as rigid."""
    document = study().to_dict()
    document["construction"]["compaction"] = {
        "law": "shale",
        "surface_now_z": 0.0,
        "surface_then_z": 0.0,
    }
    result = calibrate(Study.from_dict(document), [section_picks("S1", 2.0, 1)])
    assert "no-compaction" in [d.code for d in result.doubts]


def test_study_without_a_calibration_takes_its_own_horizons():
    """Those of construction and fit, unless the study says otherwise."""
    document = study().to_dict()
    del document["calibration"]
    document["construction"]["fit_horizons"] = ["young"]
    assert horizons_for(Study.from_dict(document)) == ("old", "young")
    document["construction"] = {"horizon": ""}
    with pytest.raises(StudyError):
        Study.from_dict(document)


def test_recipe_of_a_calibration_survives_its_document():
    """What is written reads back the same; unknown ways are refused."""
    asked = study(pre_growth=["old"], ways=["horizons", "area"], detachment_z=-4000.0)
    assert Study.from_json(asked.to_json()) == asked
    with pytest.raises(StudyError, match="no way 'guess'"):
        study(ways=["guess"])
    with pytest.raises(StudyError, match="detachment_sigma"):
        study(detachment_sigma=0.0)
    with pytest.raises(StudyError, match="not a list"):
        study(pre_growth="old")
