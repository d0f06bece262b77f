"""Kinematic models: the shear frame, one shared check of every model, their limits."""

import math

import numpy as np
import oracles
import pytest
from hypothesis import given
from hypothesis import strategies as st
from worlds import EXPONENTIAL, World, direct_inputs

from geomcore.construction import predict_fault
from geomcore.errors import ConstructionError
from geomcore.forward import forward_horizon
from geomcore.kinematics import (
    MODELS,
    ConstantBedLength,
    ConstantHeave,
    ConstantSlip,
    from_shear_frame,
    model_named,
    to_shear_frame,
)
from geomcore.profile import Profile, line_through

#: Gentle enough for a bed to keep its length over it.
GENTLE = oracles.circular_fault(dip=40.0, radius=10000.0)

POINTS = st.lists(
    st.tuples(st.floats(-5000, 5000), st.floats(-5000, 500)), min_size=3, max_size=8
)


@given(POINTS, st.floats(-45, 60))
def test_shear_frame_keeps_area_and_inverts(points, angle):
    """Sliding along parallel lines keeps every area and can be undone."""
    x, z = np.array(points).T
    u = to_shear_frame(x, z, angle)
    assert from_shear_frame(u, z, angle) == pytest.approx(x, abs=1e-6)
    assert shoelace(u, z) == pytest.approx(shoelace(x, z), abs=1e-3)


def shoelace(x, z):
    """Area of a polygon."""
    return 0.5 * abs(np.sum(x * np.roll(z, -1) - z * np.roll(x, -1)))


@given(st.floats(-45, 60), st.floats(100, 2000), st.floats(100, 2000))
def test_oblique_heave_is_cut_on_the_regional_by_the_shear_line(angle, heave, throw):
    """H is the length a level regional has up to the shear line of the cut-off."""
    # up the shear line from the hanging-wall cut-off back to the regional
    reached = heave + throw * math.tan(math.radians(angle))
    assert ConstantHeave(angle).displacement(heave, throw) == pytest.approx(reached)
    ends = to_shear_frame([0.0, heave], [0.0, -throw], angle)
    assert ends[1] - ends[0] == pytest.approx(reached)


@pytest.mark.parametrize(
    ("angle", "words"),
    [
        (0.0, "constant heave (vertical shear)"),
        (25.0, "constant heave (25 degrees antithetic shear)"),
        (-12.5, "constant heave (12.5 degrees synthetic shear)"),
    ],
)
def test_method_is_named_in_the_trades_words(angle, words):
    """The label says which way the planes lean."""
    assert ConstantHeave(angle).label == words


@pytest.mark.parametrize("angle", [-45.1, 60.1, 90.0, float("nan")])
def test_shear_angle_out_of_bounds_is_refused(angle):
    """Angles near the horizontal are no shear of a hanging wall."""
    with pytest.raises(ConstructionError, match="shear angle is") as caught:
        ConstantHeave(angle)
    assert caught.value.code == "bad-shear-angle"
    assert "from the vertical" in caught.value.remedy


def test_models_are_found_by_their_name():
    """The list of models is the only one; an unknown name lists it."""
    for model in MODELS:
        assert type(model_named(model.NAME)) is model
    with pytest.raises(ConstructionError, match="no kinematic model 'magic'") as caught:
        model_named("magic")
    assert caught.value.code == "unknown-model"
    assert all(model.NAME in caught.value.remedy for model in MODELS)


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.NAME)
class TestEveryModel:
    """What holds for every model of columns; methods.md sections 1 to 3."""

    def horizon(self, model, slope=0.0, displacement=700.0, fault=GENTLE, scale=1.0):
        """The forward model on a fault drawn with points every 20."""
        x = np.arange(-500.0, 14000.0, 20.0)
        z = np.array([fault.z(v) for v in x])
        regional = line_through(0.0, -400.0 * scale, slope)
        return forward_horizon(
            x * scale, z * scale, regional, displacement * scale, model()
        )

    def test_it_says_what_it_is_and_when_to_use_it(self, model):
        """Name, source, when to use it and when not, and whether it keeps area."""
        for text in (model.NAME, model.REFERENCE, model.USE_WHEN, model.NOT_WHEN):
            assert len(text) > 5
        assert isinstance(model.KEEPS_AREA, bool)
        assert model().label.startswith(model.NAME)

    def test_bed_starts_at_the_hanging_wall_cut_off_on_the_fault(self, model):
        """Both cut-offs lie on the fault; the displacement is that of the model."""
        bed, foot, hang = self.horizon(model)
        assert foot[1] == pytest.approx(-400.0)
        for x, z in (foot, hang):
            assert z == pytest.approx(GENTLE.z(x), abs=0.2)
        assert (bed.x[0], bed.z[0]) == (pytest.approx(hang[0]), pytest.approx(hang[1]))
        got = model().displacement(hang[0] - foot[0], foot[1] - hang[1])
        assert got == pytest.approx(700.0, rel=1e-4)

    def test_far_bed_over_a_level_detachment_is_back_at_regional(self, model):
        """Where the fault is level the bed has moved sideways only."""
        bed, _, _ = self.horizon(model)
        assert bed(12000.0) == pytest.approx(-400.0, abs=1e-3)

    def test_bigger_ground_gives_the_same_picture(self, model):
        """All lengths times three give a bed times three."""
        small, _, _ = self.horizon(model, slope=-0.02)
        big, _, _ = self.horizon(model, slope=-0.02, scale=3.0)
        at = np.linspace(small.x[0] + 1.0, 12000.0, 50)
        assert big(3.0 * at) == pytest.approx(3.0 * small(at), abs=0.01)

    def test_small_displacement_moves_the_bed_little(self, model):
        """With hardly any displacement the bed is the regional."""
        bed, foot, _ = self.horizon(model, displacement=2.0)
        assert np.abs(bed.z + 400.0).max() < 4.0
        assert bed.x[0] - foot[0] <= 2.0

    def test_only_constant_heave_takes_a_shear_angle(self, model):
        """Models of upright columns refuse an angle instead of ignoring it."""
        if model is ConstantHeave:
            assert model(20.0).shear_angle == 20.0
            return
        with pytest.raises(ConstructionError, match="no shear angle") as caught:
            model(20.0)
        assert caught.value.code == "bad-shear-angle"


@pytest.mark.parametrize("angle", [-15.0, 0.0, 20.0, 45.0])
@pytest.mark.parametrize("slope", [0.0, -0.05, 0.03])
def test_forward_bed_is_where_its_particles_went(angle, slope):
    """The bed by constant heave equals particles moved one by one by root finding."""
    x = np.arange(-500.0, 16000.0, 5.0)
    z = np.array([EXPONENTIAL.z(v) for v in x])

    def regional(at):
        return -500.0 + slope * at

    bed, foot, _ = forward_horizon(
        x, z, line_through(0.0, -500.0, slope), 900.0, ConstantHeave(angle)
    )
    true_foot = oracles.footwall_cutoff(EXPONENTIAL, regional)
    assert foot == pytest.approx(true_foot, abs=0.01)
    # straight pieces of 5 under a fault of curvature F'' are off by up to
    # 25 F''/8 = 0.004; the steep bed of synthetic shear magnifies that
    particles = np.array(
        oracles.rolled_bed(EXPONENTIAL, regional, angle, 900.0, 90.0, 12000.0)
    )
    assert bed(particles[1:, 0]) == pytest.approx(particles[1:, 1], abs=0.05)


def test_bed_cannot_keep_its_length_over_a_fault_that_flattens_too_fast():
    """Where the equation has no solution the model is refused with the place."""
    steep = oracles.circular_fault(dip=60.0, radius=7000.0)
    x = np.arange(-500.0, 14000.0, 20.0)
    z = np.array([steep.z(v) for v in x])
    with pytest.raises(ConstructionError, match="flattens too fast") as caught:
        forward_horizon(
            x, z, line_through(0.0, -400.0, 0.0), 700.0, ConstantBedLength()
        )
    assert caught.value.code == "bed-too-long"
    assert "near x =" in str(caught.value)


def test_bed_farther_from_its_regional_than_the_slip_is_refused():
    """A straight slip of D cannot lower a bed by more than D."""
    world = World(EXPONENTIAL, heave=600.0)
    inputs = direct_inputs(world)
    bed, slip = inputs["bed"], ConstantSlip().displacement(600.0, 800.0)
    deep = np.where(bed.x > 3000.0, -500.0 - 1.1 * slip, bed.z)
    inputs.update(model=ConstantSlip(), bed=Profile(bed.x, deep, bed.sigma))
    with pytest.raises(ConstructionError, match="slip of") as caught:
        predict_fault(**inputs)
    assert caught.value.code == "slip-too-small"
    assert "section S1" in str(caught.value)
