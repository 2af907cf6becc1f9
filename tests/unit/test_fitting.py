"""Predictions, descent, search and sampling of one variant."""

from __future__ import annotations

import numpy as np
import pytest

from ruleout.equations import build
from ruleout.fitting import Posterior, SearchEffort, descend, search
from ruleout.fitting.sampler import run_block, start_walkers
from ruleout.seeds import sequence
from ruleout.variants import expand

MECHANISM = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.y]
kind = "pool"
start = "free"
[edge.u_on_x]
from = "u"
to = "x"
effect = "stimulates"
law = "saturating"
[edge.x_to_y]
from = "x"
to = "y"
effect = "converts"
rate = "k * x"
[edge.drain]
from = "y"
effect = "converts"
[prior]
"u_on_x.half" = { median = 1, fold = 5 }
"x_to_y.k" = { median = 0.2, fold = 5 }
"y.start" = { median = 1, fold = 5 }
"""
EXPERIMENTS = """
[readout.y]
of = "y"
scale = "free"
[readout.ratio]
of = "x / (x + y)"
offset = "free"
[condition.low]
input.u = 0.3
[condition.high]
input.u = [[0, 2.0], [4, 0.5]]
change = { "drain.rate" = 2.0 }
[condition.own]
input.u = 1.0
start.y = 0.4
free = ["drain.rate"]
"""


@pytest.fixture
def posterior(case_of):
    rng = np.random.default_rng(3)
    rows = ["condition,time,readout,value"]
    for c in ("low", "high", "own"):
        for t in (0, 1, 2, 4, 6, 9):
            rows.append(f"{c},{t},y,{1 + 0.1 * t + 0.1 * rng.normal():.4f}")
            rows.append(f"{c},{t},ratio,{0.4 + 0.02 * rng.normal():.4f}")
    case = case_of(MECHANISM, EXPERIMENTS, data="\n".join(rows))
    variants = expand(case.mechanism, case.experiments)
    model = build(variants.variants["v1"], case.mechanism, case.experiments)
    return Posterior(model, case.mechanism, case.experiments, {})


def middle(posterior, rows=1):
    u = np.random.default_rng(1).uniform(0.3, 0.7, size=(rows, posterior.space.dimension))
    return posterior.space.quantile(u)


def test_derivatives_are_those_of_the_predictions(posterior):
    """Against central differences of predictions at rtol 1e-10: 1e-4 of each parameter's largest.

    Forward differences at rtol 1e-6 under shared steps are good to about 1e-5.
    """
    q = middle(posterior, 3)
    mu, jacobian, status = posterior.predict.derivatives(q)
    assert (status == 0).all()
    h = 1e-4
    for j in range(posterior.space.dimension):
        up, down = q.copy(), q.copy()
        up[:, j] += h
        down[:, j] -= h
        expected = (posterior.predict(up, 1e-10)[0] - posterior.predict(down, 1e-10)[0]) / (2 * h)
        np.testing.assert_allclose(
            jacobian[:, :, j], expected, atol=1e-4 * max(1.0, np.abs(expected).max())
        )
    np.testing.assert_allclose(mu, posterior.predict(q)[0], rtol=1e-12)


def test_own_values_and_changes_reach_only_their_condition(posterior):
    q = middle(posterior)
    moved = q.copy()
    moved[0, posterior.space.names.index("drain.rate@own")] += 0.3
    change = np.abs(posterior.predict(moved)[0] - posterior.predict(q)[0])[0]
    condition = posterior.observations.points.condition
    assert change[condition == "own"].max() > 1e-3
    assert change[condition != "own"].max() == 0.0


def test_a_row_does_not_depend_on_its_batch(posterior):
    q = middle(posterior, 7)
    together, _ = posterior.predict(q)
    alone = np.concatenate([posterior.predict(row[None])[0] for row in q])
    np.testing.assert_array_equal(together, alone)


def test_descent_ends_where_no_direction_leads_down(posterior):
    """At the end the score is small against the curvature: Newton's promise below 1e-3."""
    end = descend(posterior, middle(posterior, 4), posterior.observed, tolerance=1e-5)
    assert end.converged.all()
    best = end.objective.min()
    q = end.q[np.argmin(end.objective)]
    for j in range(posterior.space.dimension):
        for move in (-1e-2, 1e-2):
            other = q[None].copy()
            other[0, j] += move
            other = np.clip(other, posterior.space.low, posterior.space.high)
            zeta, _ = posterior.zeta(other)
            assert posterior.objective(other, zeta, posterior.observed)[0] > best - 1e-3


def test_search_is_repeatable_and_needs_two_that_agree(posterior):
    effort = SearchEffort(screened=64, starts=8, rounds=3)
    one = search(posterior, effort, sequence(4, "v1", "search"))
    two = search(posterior, effort, sequence(4, "v1", "search"))
    np.testing.assert_array_equal(one.q, two.q)
    assert one.trusted
    assert (np.diff(one.objective) >= 0).all()


def test_chains_go_on_bit_for_bit_whatever_the_global_generator_does(posterior):
    """Two blocks equal one of twice the length; numpy's global seed changes nothing."""
    found = search(posterior, SearchEffort(screened=64, starts=8), sequence(4, "s"))
    start = start_walkers(posterior, found, sequence(4, "v1", "chain", 0))
    np.random.seed(1)  # noqa: NPY002 - the legacy generator is what must not matter
    whole = run_block(posterior, start, stored=6, thin=2)
    np.random.seed(2)  # noqa: NPY002
    first = run_block(posterior, start, stored=3, thin=2)
    second = run_block(posterior, first.walkers, stored=3, thin=2)
    np.testing.assert_array_equal(whole.chain, np.concatenate([first.chain, second.chain]))
    np.testing.assert_array_equal(whole.walkers.key, second.walkers.key)


def test_ensembles_start_apart_but_within_the_posterior(posterior):
    found = search(posterior, SearchEffort(screened=64, starts=8), sequence(4, "s"))
    starts = [start_walkers(posterior, found, sequence(4, "v1", "chain", e)) for e in range(2)]
    assert not np.array_equal(starts[0].q, starts[1].q)
    for start in starts:
        assert np.isfinite(start.log_density).all()
        assert posterior.space.inside(start.q).all()
