"""Published and derived check values of the construction (methods.md section 16)."""

import math

import numpy as np
import oracles
import pytest
from published import derived_values as derived
from published import groshong_2006
from worlds import World, direct_inputs

from geomcore.construction import predict_fault
from geomcore.forward import forward_horizon, predict_horizon
from geomcore.kinematics import (
    ConstantBedLength,
    ConstantHeave,
    ConstantSlip,
    to_shear_frame,
)
from geomcore.picks import apparent_dip
from geomcore.profile import line_through
from geomcore.separation import CutOff, Separation

pytestmark = pytest.mark.published

ANGLES = sorted(derived.EXPONENTIAL_CUTOFFS)


def exponential(dip=60.0, step=2.0, reach=32000.0):
    """The exponential fault as points."""
    fault = oracles.exponential_fault(dip)
    x = np.arange(-400.0, reach, step)
    return x, np.array([fault.z(v) for v in x])


EXPONENTIAL = exponential()


@pytest.mark.parametrize("angle", ANGLES)
def test_heave_and_throw_of_the_exponential_fault(angle):
    """[N] Oblique heave 900 gives these cut-offs for each shear angle."""
    x, z = EXPONENTIAL
    _, foot, hang = predict_horizon(x, z, line_through(0, -500.0, 0), 900.0, angle)
    heave, throw = derived.EXPONENTIAL_CUTOFFS[angle]
    # straight pieces of 2 m are off by 2^2 F''/8 = 0.001
    assert hang[0] - foot[0] == pytest.approx(heave, abs=0.005)
    assert foot[1] - hang[1] == pytest.approx(throw, abs=0.005)


def area_below(regional_z, bed, fault, foot, hang):
    """Area between a level regional, the fault from cut-off to cut-off, and the bed."""
    x, z = fault
    gap = (x > foot[0]) & (x < hang[0])
    ring_x = np.r_[foot[0], x[gap], bed.x, bed.x[-1]]
    ring_z = np.r_[foot[1], z[gap], bed.z, regional_z]
    crossed = ring_x * np.roll(ring_z, -1) - ring_z * np.roll(ring_x, -1)
    return 0.5 * abs(crossed.sum())


@pytest.mark.parametrize("angle", ANGLES)
def test_area_of_the_exponential_fault_is_heave_times_depth(angle):
    """[N] Lost area = H (z - det) = 3.15e6 whatever the shear angle (eq. 8)."""
    x, z = EXPONENTIAL
    bed, foot, hang = predict_horizon(x, z, line_through(0, -500.0, 0), 900.0, angle)
    area = area_below(-500.0, bed, (x, z), foot, hang)
    assert area == pytest.approx(derived.EXPONENTIAL_AREA, rel=1e-4)


@pytest.mark.parametrize("angle", ANGLES)
def test_predicted_fault_holds_the_area_it_was_made_from(angle):
    """[N] eq. 8a: H times the mean depth under the last strip is the lost area."""
    heave, _ = derived.EXPONENTIAL_CUTOFFS[angle]
    # far enough for the last strip to lie beyond 13 km, where the closed form holds
    world = World(oracles.exponential_fault(), angle, heave=heave, reach=19000.0)
    made = predict_fault(**direct_inputs(world))
    assert made.oblique_heave == pytest.approx(900.0, abs=0.01)
    u = made.trace.x - made.trace.z * math.tan(math.radians(angle))
    at = np.linspace(u[-1] - 900.0, u[-1], 501)
    mean_depth = np.mean(-500.0 - np.interp(at, u, made.trace.z))
    assert 900.0 * mean_depth == pytest.approx(derived.EXPONENTIAL_AREA, rel=0.005)


def kinked(step=5.0):
    """Dip 60 down to a bend at (1000, -1732), 30 below, as points with the bend."""
    fault = oracles.segmented_fault("kinked", [60.0, 30.0], [1000.0])
    x = np.arange(-400.0, 9000.0, step)
    return x, np.array([fault.z(v) for v in x])


def panel(angle, picks, heave=900.0):
    """Picks between the two axial surfaces of the bend, well inside."""
    bend = to_shear_frame(1000.0, -1000.0 * math.tan(math.radians(60.0)), angle)
    u = to_shear_frame(picks.x, picks.z, angle)
    return (u > bend + 0.05 * heave) & (u < bend + 0.95 * heave)


@pytest.mark.parametrize("angle", ANGLES)
def test_bed_panel_over_a_bend_has_the_dip_of_the_closed_form(angle):
    """[N] eq. 9: between the axial surfaces the bed dips towards the fault by this."""
    x, z = kinked()
    bed, _, _ = predict_horizon(x, z, line_through(0, -300.0, 0), 900.0, angle)
    inside = panel(angle, bed)
    assert inside.sum() > 50
    rise, run = np.diff(bed.z[inside]), np.diff(bed.x[inside])
    expected = derived.KINK_PANEL_60_30[angle]
    assert np.degrees(np.arctan2(rise, run)) == pytest.approx(expected, abs=0.1)


@pytest.mark.parametrize("angle", [a for a in ANGLES if a > -15.0])
def test_bend_is_found_again_from_its_panel(angle):
    """[N] From a bed with that panel the march draws both straight pieces."""
    fault = oracles.segmented_fault("kinked", [60.0, 30.0], [1000.0])
    world = World(fault, angle, z0=-300.0, heave=400.0, reach=6000.0, per_strip=60.0)
    made = predict_fault(**direct_inputs(world))
    trace, step = made.trace, 0.03 * made.oblique_heave
    predicted = trace.strip > 0
    above = predicted & (trace.x < 1000.0 - step)
    below = predicted & (trace.x > 1000.0 + 3 * step)
    assert above.sum() > 3
    assert trace.dip[above][1:-1] == pytest.approx(60.0, abs=0.1)
    # every strip repeats the corner that straight lines between picks cut off
    assert np.median(trace.dip[below]) == pytest.approx(30.0, abs=0.1)


@pytest.mark.parametrize("angle", ANGLES)
def test_slip_changes_at_a_bend_as_in_the_closed_form(angle):
    """[N] eq. 10: equal oblique heave is unequal slip on pieces of unequal dip."""

    def slip(dip, heave=900.0):
        along = 1.0  # one metre down a piece of that dip
        a = math.radians(dip)
        u = to_shear_frame(along * math.cos(a), -along * math.sin(a), angle)
        return heave * along / float(u)

    expected = derived.KINK_SLIP_60_30[angle]
    assert slip(30.0) / slip(60.0) == pytest.approx(expected, abs=5e-7)
    model = ConstantHeave(angle)
    down = math.radians(60.0)
    heave, throw = slip(60.0) * math.cos(down), slip(60.0) * math.sin(down)
    assert model.displacement(heave, throw) == pytest.approx(900.0)


def test_constant_slip_on_the_exponential_fault():
    """[N] Slip 1000: cut-offs, heave far out, and the area, which is not kept."""
    x, z = EXPONENTIAL
    heave, throw, far, area = derived.CONSTANT_SLIP
    model = ConstantSlip()
    bed, foot, hang = forward_horizon(
        x, z, line_through(0, -500.0, 0), 1000.0, model, samples=4000
    )
    assert hang[0] - foot[0] == pytest.approx(heave, abs=0.01)
    assert foot[1] - hang[1] == pytest.approx(throw, abs=0.01)
    out = np.array([29000.0])
    arrived = model.arrival(out, lambda at: np.interp(at, x, z), 0.0, 1000.0)
    assert float(arrived[0] - out[0]) == pytest.approx(far, abs=0.01)
    got = area_below(-500.0, bed, (x, z), foot, hang)
    assert got == pytest.approx(area, rel=1e-3)


def test_constant_bed_length_on_the_exponential_fault():
    """[N] Heave 700 at the cut-offs is 673.15 far out; the area is not kept."""
    fault = exponential(dip=45.0, step=20.0)
    far, area = derived.CONSTANT_BED_LENGTH
    bed, foot, hang = forward_horizon(
        *fault, line_through(0, 0.0, 0), 700.0, ConstantBedLength(), samples=2000
    )
    length = np.hypot(np.diff(bed.x), np.diff(bed.z)).sum()
    # the bed from its cut-off is as long as the regional from the footwall's
    shift = bed.x[-1] - foot[0] - length
    assert shift == pytest.approx(far, abs=0.3)
    got = area_below(0.0, bed, fault, foot, hang)
    assert got == pytest.approx(area, rel=1e-3)


def test_apparent_dip_of_an_oblique_section():
    """Computed: tan(apparent) = tan(dip) cos(angle off the dip direction)."""
    dip, off, seen = derived.APPARENT_DIP
    assert apparent_dip(dip, off, 0.0) == pytest.approx(seen, abs=5e-4)


def test_dip_between_the_cut_offs_of_a_normal_fault():
    """[P] Groshong 2006, Fig. 8.3 and eq. 8.3."""
    figure = groshong_2006.FIG_8_3
    cut = Separation(
        "bed",
        CutOff("footwall", 0.0, 0.0),
        CutOff("hanging wall", figure["heave"], -figure["throw"]),
    )
    assert cut.cutoff_dip == pytest.approx(figure["dip"], abs=0.005)
    assert (cut.heave, cut.throw) == (figure["heave"], figure["throw"])


def test_heave_of_a_reverse_fault_is_negative_here():
    """[P] Groshong 2006, Fig. 8.4: an overlap keeps its throw, heave is negative."""
    figure = groshong_2006.FIG_8_4
    cut = Separation(
        "bed",
        CutOff("footwall", figure["heave"], 0.0),
        CutOff("hanging wall", 0.0, -figure["throw"]),
    )
    assert (cut.heave, cut.throw) == (-figure["heave"], figure["throw"])
