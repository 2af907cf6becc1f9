"""Convergence diagnostics against published definitions as ArviZ computes them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from ruleout.fitting.convergence import diagnose, leave_one_out

DATA = Path(__file__).parent / "data"


def chains(name):
    """Chains as ensembles of one walker each: (chain, draw, 1, 1)."""
    table = pd.read_csv(DATA / f"{name}.csv")
    return table.pivot(index="chain", columns="draw", values="value").to_numpy()[:, :, None, None]


@pytest.mark.parametrize(
    ("name", "rhat", "bulk", "tail"),
    [("chains_A", 1.00190, 1065.6, 1579.1), ("chains_B", 1.05734, 127.0, 319.8)],
)
def test_single_walker_chains_give_the_published_values(name, rhat, bulk, tail):
    """arviz-stats 0.8.0 on the same chains (Vehtari et al. 2021, doi:10.1214/20-BA1221).

    R-hat to 1e-4, effective sizes to 1 %.
    """
    found = diagnose(chains(name))
    assert found.rhat[0] == pytest.approx(rhat, abs=1e-4)
    assert found.ess_bulk[0] == pytest.approx(bulk, rel=0.01)
    assert found.ess_tail[0] == pytest.approx(tail, rel=0.01)


def test_copies_of_a_walker_add_no_effective_samples():
    """Ensembles whose walkers move as one hold as many samples as a single walker."""
    one = chains("chains_A")
    many = np.repeat(one, 8, axis=2)
    assert diagnose(many).ess_bulk[0] == pytest.approx(diagnose(one).ess_bulk[0], rel=0.02)


def test_independent_walkers_add_up():
    """64 independent walkers of white noise: effective size near the number of draws."""
    draws = np.random.default_rng(2).normal(size=(4, 200, 64, 1))
    # Relative error of an estimated variance of 800 averages: sqrt(2/800) = 5 %, times 4.
    assert diagnose(draws).ess_bulk[0] == pytest.approx(draws.size, rel=0.2)


def test_a_stuck_parameter_has_not_converged():
    found = diagnose(np.zeros((4, 50, 8, 1)))
    assert not found.reached(1.01, 400)


def test_leave_one_out_of_a_conjugate_normal_mean():
    """y_i ~ N(m, 1), flat prior: elpd_loo = sum of log N(y_i; mean of the others, 1 + 1/(n-1)).

    The exact predictive density of the conjugate model (textbook result); PSIS error at 4,000
    draws is far below 0.05.
    """
    rng = np.random.default_rng(5)
    y = rng.normal(size=20)
    n = len(y)
    m = rng.normal(y.mean(), 1 / np.sqrt(n), size=(4, 1000, 1))
    loglik = -0.5 * (y - m) ** 2 - 0.5 * np.log(2 * np.pi)
    others = (y.sum() - y) / (n - 1)
    variance = 1 + 1 / (n - 1)
    exact = np.sum(-0.5 * (y - others) ** 2 / variance - 0.5 * np.log(2 * np.pi * variance))
    elpd, error, pointwise, k = leave_one_out(loglik)
    assert elpd == pytest.approx(exact, abs=0.05)
    assert pointwise.sum() == pytest.approx(elpd)
    assert error > 0
    assert (k < 0.7).all()
