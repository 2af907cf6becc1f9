"""A larger variant that fits worse than what it contains was not searched well enough."""

from __future__ import annotations

from types import SimpleNamespace

from ruleout.pipeline.variants import _missed

DIMENSIONS = {"v1": 4, "v2": 5}


def flow():
    def posterior(name):
        return SimpleNamespace(space=SimpleNamespace(dimension=DIMENSIONS[name]))

    return SimpleNamespace(bench=SimpleNamespace(posterior=posterior))


def found(smaller, larger):
    fits = {"v1": SimpleNamespace(objective=smaller), "v2": SimpleNamespace(objective=larger)}
    return _missed(flow(), fits, {"v1": frozenset(), "v2": frozenset({"v1"})})


def test_a_fit_that_falls_short_of_a_nested_one_is_named():
    assert found(10.0, 40.0) == {"v2": "v1"}


def test_what_the_further_prior_can_cost_is_not_held_against_the_search():
    assert found(10.0, 14.0) == {}
    assert found(10.0, 2.0) == {}
