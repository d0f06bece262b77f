"""One fault under several horizons: splines, derivatives, the fault at the angle."""

import numpy as np
import oracles
import pytest
from growth_sections import Errors, Ground, drawn_section
from scipy.interpolate import BSpline

from geomcore.jointfit import JointSystem
from geomcore.jointrows import LeaningFault
from geomcore.splines import EvenSplines

ALL = Errors(picks=5.0, fault=5.0, cutoff_x=10.0, cutoff_z=5.0, regional_dip=0.002)


# ---- the curve -----------------------------------------------------------------------


@pytest.fixture
def curve():
    """Splines and random coefficients, and the same curve by scipy."""
    splines = EvenSplines.over(-3.0, 17.0, 1.3)
    c = np.random.default_rng(0).normal(size=splines.count)
    knots = splines.low + splines.step * np.arange(-3, splines.pieces + 4)
    return splines, c, BSpline(knots, c, 3)


def test_curve_and_slope_are_those_of_scipy(curve):
    """Value and slope everywhere within the knots."""
    splines, c, other = curve
    x = np.linspace(-3.0, 17.0, 500)
    value, slope = splines.values(c, x)
    assert value == pytest.approx(other(x), abs=1e-12)
    assert slope == pytest.approx(other.derivative()(x), abs=1e-12)
    assert splines.rows(x) @ c == pytest.approx(value, abs=1e-12)


def test_curve_goes_on_straight_beyond_its_ends(curve):
    """Nothing is known there; the last slope is kept."""
    splines, c, other = curve
    value, slope = splines.values(c, np.array([-5.0, 20.0]))
    ends = other.derivative()(np.array([-3.0, 17.0]))
    assert slope == pytest.approx(ends)
    assert value == pytest.approx(other([-3.0, 17.0]) + ends * np.array([-2.0, 3.0]))


def test_roughness_is_the_integral_of_the_squared_curvature(curve):
    """Against a sum over close points."""
    splines, c, other = curve
    x = np.linspace(-3.0, 17.0, 200001)
    by_sum = (other.derivative(2)(x)[:-1] ** 2).sum() * (x[1] - x[0])
    assert c @ splines.roughness() @ c == pytest.approx(by_sum, rel=1e-4)


def test_straight_line_is_followed_exactly_and_is_not_rough():
    """A line is its own approximation."""
    splines = EvenSplines.over(0.0, 10.0, 1.0)
    c = splines.following(lambda x: 3.0 - 2.0 * x)
    value, slope = splines.values(c, np.array([0.3, 7.7]))
    assert value == pytest.approx([2.4, -12.4])
    assert slope == pytest.approx([-2.0, -2.0])
    assert c @ splines.roughness() @ c == pytest.approx(0.0, abs=1e-12)


# ---- the system ----------------------------------------------------------------------


def test_derivatives_are_those_of_small_changes():
    """Of every residual with the fault and with the horizon's own unknowns."""
    system = JointSystem(drawn_section(Ground(20.0), ALL, np.random.default_rng(1)))
    fit = None
    for angle in (0.0, 10.0, 20.0):
        fit = system.solve(angle, fit)
    coefficients, own, beds = fit.state
    tan = np.tan(np.radians(fit.angle))

    def compared(k, c, unknowns):
        fault = LeaningFault(system.splines, c, tan)
        return system.horizons[k].evaluate(fault, unknowns, beds[k])

    for k in range(len(system.horizons)):
        _, by_fault, by_own, _ = compared(k, coefficients, own[k])
        for j in range(3, len(coefficients), 17):
            step = np.zeros(len(coefficients))
            step[j] = 0.5
            up = compared(k, coefficients + step, own[k])[0]
            down = compared(k, coefficients - step, own[k])[0]
            assert by_fault[:, j] == pytest.approx(up - down, abs=1e-5)
        for j, size in enumerate((0.1, 0.1, 0.5)):
            step = size * np.eye(3)[j]
            up = compared(k, coefficients, own[k] + step)[0]
            down = compared(k, coefficients, own[k] - step)[0]
            assert by_own[:, j] == pytest.approx((up - down) / (2 * size), abs=1e-4)


@pytest.mark.parametrize("angle", [25.0, -12.0])
def test_fault_at_the_true_angle_is_the_true_one(angle):
    """Clean picks: within 3 m of the exponential fault under the picks."""
    system = JointSystem(drawn_section(Ground(angle)))
    fit = None
    for trial in np.linspace(0.0, angle, 6):
        fit = system.solve(trial, fit)
    x = np.linspace(300.0, 7000.0, 40)
    true = [oracles.exponential_fault().z(v) for v in x]
    found, _ = system.splines.values(fit.state[0], x)
    assert found == pytest.approx(true, abs=3.0)
    assert fit.chi2 < fit.freedom


def test_chi_square_is_as_large_as_its_degrees_of_freedom():
    """With all errors drawn as stated the misfit is what chance makes it."""
    system = JointSystem(drawn_section(Ground(0.0), ALL, np.random.default_rng(3)))
    fit = system.solve(0.0)
    assert fit.freedom > 300
    # the standard deviation of chi-square over its freedom is sqrt(2/freedom)
    assert fit.chi2 / fit.freedom == pytest.approx(
        1.0, abs=3 * (2 / fit.freedom) ** 0.5
    )


def test_angle_beyond_the_fault_has_no_solution():
    """Synthetic shear planes steeper than the fault meet it nowhere or twice."""
    system = JointSystem(drawn_section(Ground(0.0)))
    assert system.solve(-40.0, system.solve(0.0)) is None


def dense_rows(system, fit, angle):
    """Derivatives of all data, pulls of the regionals among them, as one matrix."""
    coefficients, own, beds = fit.state
    n, size = len(coefficients), len(coefficients) + own.size
    tan = np.tan(np.radians(angle))
    fault = LeaningFault(system.splines, coefficients, tan)
    blocks = [np.hstack([system.known, np.zeros((len(system.known), own.size))])]
    for k, horizon in enumerate(system.horizons):
        _, by_fault, by_own, _ = horizon.evaluate(fault, own[k], beds[k])
        block = np.zeros((len(by_fault) + 2, size))
        block[:-2, :n], block[:-2, n + 3 * k : n + 3 * k + 3] = by_fault, by_own
        block[-2, n + 3 * k] = block[-1, n + 3 * k + 1] = 1.0
        blocks.append(block)
    return np.vstack(blocks)


def test_noise_of_the_fitted_fault_is_that_of_its_quadratic_form():
    """Variance of e'Me for unit normal errors e, M written out and drawn."""
    system = JointSystem(drawn_section(Ground(0.0), ALL, np.random.default_rng(3)))
    fit = system.solve(0.0)
    rows = dense_rows(system, fit, 0.0)
    up, down = (dense_rows(system, fit, a) for a in (0.25, -0.25))
    full = rows.T @ rows
    n = len(fit.state[0])
    full[:n, :n] += np.exp(fit.log_weight) * system.bent
    solve = np.linalg.solve(full, rows.T)
    form = (np.eye(len(rows)) - rows @ solve) @ ((up - down) / 0.5) @ solve
    drawn = np.random.default_rng(4).normal(size=(20000, len(rows)))
    scatter = np.einsum("ij,jk,ik->i", drawn, form, drawn, optimize=True).var()
    # 20000 draws tell a variance to 1 or 2 %
    assert system.slope_noise(fit) == pytest.approx(scatter, rel=0.06)
