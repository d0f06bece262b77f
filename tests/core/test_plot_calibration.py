"""The figure of the misfit curves of the shear angle."""

import numpy as np
import pytest
from worlds import DOCUMENT

from geomcore.anglecurve import estimate, joint_angle, unresolved
from geomcore.calibrating import CalibrationResult, SectionCalibration
from geomcore.errors import Doubt, GeomcoreError
from geomcore.plot_calibration import calibration_figure
from geomcore.plots import save_section_figure
from geomcore.study import Study

STUDY = Study.from_dict(DOCUMENT)
ANGLES = np.arange(-35.0, 50.1, 5.0)


def told(best, sd, way="horizons"):
    """An estimate of a parabola."""
    return estimate(way, ANGLES, ((ANGLES - best) / sd) ** 2, 0.0)


def result(*sections, more=(), doubts=()):
    """Sections with one way told, all of them joined."""
    parts = [
        SectionCalibration(f"S{i}", (e, *more), ("A", "B"), tuple(doubts))
        for i, e in enumerate(sections)
    ]
    joint = joint_angle(sections) if len(sections) > 1 else sections[0]
    return CalibrationResult(tuple(parts), (joint, *more), joint, ())


def artists(figure):
    """Artists by their group id."""
    return {a.get_gid(): a for a in figure.findobj() if a.get_gid()}


def words(figure):
    """All the text on the page."""
    from matplotlib.text import Text

    return " ".join(t.get_text() for t in figure.findobj(Text))


def test_figure_has_every_section_and_all_together():
    """One thin curve a section, one for the fault, and its interval."""
    drawn = artists(calibration_figure(STUDY, result(told(20.0, 4.0), told(24.0, 3.0))))
    assert {"section-S0-horizons", "section-S1-horizons"} <= set(drawn)
    x, z = drawn["joint-horizons"].get_data()
    # 20 of variance 16 and 24 of variance 9, weighted by hand: 22.56
    assert x[np.argmin(z)] == pytest.approx(22.56, abs=0.15)
    assert z.min() == 0.0
    assert "interval-horizons" in drawn


def test_single_section_is_drawn_once():
    """Its curve is that of the fault."""
    drawn = artists(calibration_figure(STUDY, result(told(20.0, 4.0))))
    assert "joint-horizons" in drawn
    assert not any(name.startswith("section-S") for name in drawn)


def test_figure_says_what_the_data_say():
    """Fault, best angle, reason of a way that tells nothing, doubts."""
    nothing = unresolved("area", "A/H has not levelled off.")
    doubt = Doubt("x", "horizon 'B' is not used.", "section S1")
    made = result(told(20.0, 4.0), told(24.0, 3.0), more=[nothing], doubts=[doubt])
    figure = calibration_figure(STUDY, made)
    text = words(figure)
    for part in ("Great Fault", "22.6 degrees", "not levelled off", "'B' is not used"):
        assert part in text
    assert "nothing-area" in artists(figure)


def test_figure_is_saved_in_every_format(tmp_path):
    """The same figure gives the same file."""
    made = result(told(20.0, 4.0), told(24.0, 3.0))
    paths = [
        save_section_figure(calibration_figure(STUDY, made), tmp_path / name)
        for name in ("one", "two")
    ]
    assert [p.suffix for p in paths[0]] == [".png", ".svg", ".pdf"]
    for one, two in zip(*paths):
        assert one.read_bytes() == two.read_bytes()


def test_nothing_tried_is_no_figure():
    """A calibration without a way has no curve to draw."""
    with pytest.raises(GeomcoreError) as caught:
        calibration_figure(STUDY, CalibrationResult((), (), None, ()))
    assert caught.value.code == "no-calibration"
