"""How far a prediction can be trusted, and a robust regional."""

import numpy as np
import pytest

from geomcore.construction import FaultTrace
from geomcore.profile import fit_line, line_through
from geomcore.trust import error_shares, trusted_reach
from geomcore.uncertainty import ErrorColumns


class Given:
    """A prediction reduced to what trust looks at: level regional at 0."""

    regional = line_through(0.0, 0.0, 0.0)

    def __init__(self, sigma, strips):
        n = 101
        x = np.linspace(0.0, 10000.0, n)
        z = -1000.0 - 0.2 * x
        strip = 1 + np.minimum((x / 10000.0 * strips).astype(int), strips - 1)
        state = np.full(n, "predicted", dtype=object)
        self.trace = FaultTrace(x, z, np.zeros(n), strip, state, sigma(x))


def test_trust_ends_where_the_band_passes_fifteen_percent_of_depth():
    """Rule 2 of methods.md section 13: sigma 0.1 x against a depth of 1000 + 0.2 x."""
    trust = trusted_reach(Given(lambda x: 0.1 * x, 5))
    # 1.2816 * 0.1 x = 0.15 (1000 + 0.2 x)
    end = 150.0 / (0.12816 - 0.03)
    assert trust.x == pytest.approx(end, abs=100.0)
    assert trust.x <= end
    assert "15 %" in trust.reason


def test_trust_ends_after_six_strips_without_a_tie():
    """A long march without anything deep to hold it (rule 2)."""
    given = Given(lambda x: 0 * x, 10)
    trust = trusted_reach(given)
    assert trust.x == pytest.approx(5900.0)
    assert "6 strips" in trust.reason
    assert trusted_reach(given, has_deep_tie=True).reason == ""


def test_sure_short_march_is_trusted_to_its_end():
    """Nothing ends the trust."""
    trust = trusted_reach(Given(lambda x: 0 * x + 10.0, 4))
    assert trust.x == 10000.0
    assert trust.reason == ""


def test_error_shares_add_up_to_the_variance():
    """Independent sources: squares of the shares make the whole."""
    rng = np.random.default_rng(2)
    columns = ErrorColumns(
        np.arange(5.0),
        rng.normal(size=(5, 4)),
        np.array(["picks", "picks", "regional", "cut-offs"], dtype=object),
    )
    shares = error_shares(columns, 4.0)
    total = sum(v**2 for v in shares.values())
    assert total == pytest.approx(columns.sigma[-1] ** 2)
    assert list(shares) == ["picks", "regional", "cut-offs"]


def test_robust_line_shrugs_off_one_bad_pick():
    """One footwall pick from another horizon must not tilt the regional."""
    x = np.linspace(-4000.0, 0.0, 21)
    z = -500.0 + 0.02 * x
    z[2] += 400.0
    sigma = np.full(21, 5.0)
    plain = fit_line(x, z, sigma)
    robust = fit_line(x, z, sigma, robust=True)
    assert abs(robust.slope - 0.02) < 0.1 * abs(plain.slope - 0.02)
    assert "1 with less weight" in robust.how


def test_robust_line_of_good_picks_is_the_plain_one():
    """Nothing is down-weighted that lies within two sigma."""
    rng = np.random.default_rng(3)
    x = np.linspace(-4000.0, 0.0, 30)
    z = -500.0 + np.clip(rng.normal(0.0, 5.0, 30), -7.0, 7.0)
    plain, robust = (fit_line(x, z, np.full(30, 5.0), robust=r) for r in (False, True))
    assert robust.slope == pytest.approx(plain.slope, abs=1e-9)
    assert robust.how == plain.how
