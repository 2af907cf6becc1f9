"""Max-T and its sequential decision."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from ruleout.checks import Column, Tally, maximum, standardise, tally
from ruleout.checks.combination import boundaries

ALPHA = 0.05


def test_stopping_bounds_keep_the_resampling_risk():
    """A p-value exactly at alpha is decided wrongly, either way, once in a thousand paths."""
    rng = np.random.default_rng(7)
    lower, upper = boundaries(ALPHA, 2000)
    paths = np.cumsum(rng.random((4000, 2000)) < ALPHA, axis=1)
    n = np.arange(1, 2001)
    up = (paths >= upper[n]).argmax(axis=1) + 1e9 * ~(paths >= upper[n]).any(axis=1)
    down = (paths <= lower[n]).argmax(axis=1) + 1e9 * ~(paths <= lower[n]).any(axis=1)
    hit_up, hit_down = np.mean((up < down) & (up < 1e9)), np.mean((down < up) & (down < 1e9))
    # risk 1e-3 on each side plus 4 binomial standard errors of 4,000 paths
    limit = 1e-3 + 4 * np.sqrt(1e-3 / 4000)
    assert hit_up <= limit
    assert hit_down <= limit


@pytest.mark.parametrize(("p", "rejects"), [(0.5, False), (0.2, False), (0.01, True), (0.0, True)])
def test_clear_cases_are_decided_soon(p, rejects):
    exceeds = np.random.default_rng(3).random(9999) < p
    found = tally(exceeds, ALPHA, 199, 9999)
    assert found is not None
    assert found.decided
    assert (found.p_value <= ALPHA) is rejects
    assert found.replicates < 1500
    if rejects:
        assert found.replicates >= 199


def test_the_decision_does_not_depend_on_how_many_replicates_were_computed_ahead():
    exceeds = np.random.default_rng(5).random(2000) < 0.12
    whole = tally(exceeds, ALPHA, 199, 9999)
    step = next(
        t for k in range(40, 2001, 40) if (t := tally(exceeds[:k], ALPHA, 199, 9999)) is not None
    )
    assert whole == step


def test_a_run_at_the_cap_is_not_decided():
    exceeds = np.zeros(300, dtype=bool)
    exceeds[::20] = True
    found = tally(exceeds, ALPHA, 199, 300)
    assert found is not None
    assert not found.decided


def test_monte_carlo_interval_is_that_of_clopper_and_pearson():
    """Clopper and Pearson 1934: 5 of 100, 95 %: 0.0164 to 0.1128 (also scipy's binomtest)."""
    found = Tally(5, 100, decided=False)
    expected = stats.binomtest(5, 100).proportion_ci(0.95, method="exact")
    assert found.interval(0.95) == pytest.approx((expected.low, expected.high), rel=1e-9)
    assert found.interval(0.95) == pytest.approx((0.0164, 0.1128), abs=1e-4)


def test_max_t_is_uniform_under_the_null():
    """Data drawn as the replicates are give p <= 0.05 in 5 % of cases (Westfall and Young 1993)."""
    rng = np.random.default_rng(11)
    columns = (Column("misfit", counts=True, rooted=True), Column("serial", counts=True))

    def draw(n):
        return np.stack([rng.chisquare(20, n), rng.normal(0, 0.2, n)], axis=1)

    rejected = 0
    trials, replicates = 800, 199
    for _ in range(trials):
        standard = standardise(draw(40), columns)
        data, copies = draw(1), draw(replicates)
        exceed = np.sum(maximum(copies, columns, standard) >= maximum(data, columns, standard)[0])
        rejected += (exceed + 1) / (replicates + 1) <= ALPHA
    # 4 binomial standard errors
    assert abs(rejected / trials - ALPHA) < 4 * np.sqrt(ALPHA * (1 - ALPHA) / trials)
