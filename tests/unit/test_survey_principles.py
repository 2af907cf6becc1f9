"""Statements are found where they were planted, with their exceptions."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binom

from ruleout.survey.counting import exact_interval, upper_bound
from ruleout.survey.enumeration import enumerate_family
from ruleout.survey.features import Features
from ruleout.survey.principles import find_principles, statement
from ruleout.survey.relations import find_links, find_minimal
from ruleout.survey.types import Family

NAMES = ("f", "g", "h", "i", "j")


def every_combination(rows: int = 4) -> np.ndarray:
    grid = np.indices((2,) * len(NAMES)).reshape(len(NAMES), -1).T.astype(bool)
    return np.tile(grid, (rows, 1))


def found(works, have) -> dict[str, list[str]]:
    said: dict[str, list[str]] = {"requires": [], "excludes": [], "suffices": []}
    for p in find_principles(Features(NAMES, have), works):
        said[p.kind].append(statement(p, NAMES, "works"))
    return said


def test_a_need_for_one_of_two_features_is_found():
    have = every_combination()
    said = found(have[:, 0] | have[:, 1], have)
    assert said["requires"] == ["Every network that works has f or g."]
    assert set(said["suffices"]) == {
        "Every network with f works somewhere in its parameter space.",
        "Every network with g works somewhere in its parameter space.",
    }


def test_an_exclusion_with_a_condition_is_found():
    have = every_combination()
    said = found(~(have[:, 2] & ~have[:, 3]), have)
    assert said["excludes"] == ["No network with h and without i works."]


def test_exceptions_are_counted_and_few_are_tolerated():
    have = every_combination(64)
    works = have[:, 0].copy()
    strange = np.flatnonzero(~have[:, 0])[:3]
    works[strange] = True
    (required,) = [p for p in find_principles(Features(NAMES, have), works) if p.kind == "requires"]
    assert statement(required, NAMES, "works") == "Every network that works has f."
    assert np.flatnonzero(required.exceptions).tolist() == strange.tolist()


def test_no_statement_is_made_of_noise():
    rng = np.random.default_rng(1)
    have = rng.random((4000, 5)) < 0.5
    assert find_principles(Features(NAMES, have), rng.random(4000) < 0.3) == []


def test_nothing_is_said_where_all_or_none_work():
    have = every_combination()
    assert find_principles(Features(NAMES, have), np.zeros(len(have), bool)) == []
    assert find_principles(Features(NAMES, have), np.ones(len(have), bool)) == []


def test_minimal_and_linked_wirings_against_plain_loops():
    of = Family("", "enzyme", ("A", "B"), 1, "", (), (((-1, 0, 1),) * 2,) * 2,
                must_reach=False, starts=(0.1, 0.1))  # fmt: skip
    signs = enumerate_family(of)
    works = np.random.default_rng(3).random(len(signs)) < 0.3
    choices = signs.reshape(len(signs), -1)
    minimal, links = find_minimal(choices, works), find_links(choices, works)
    at = np.flatnonzero(works)
    for t in at:
        smaller = [u for u in at if u != t and ((signs[u] == 0) | (signs[u] == signs[t])).all()]
        assert minimal[t] == (not smaller)
    assert not minimal[~works].any()
    expected = [
        (a, b) for a in at for b in at if a < b and np.count_nonzero(signs[a] != signs[b]) == 1
    ]
    assert links.tolist() == [list(pair) for pair in expected]


@pytest.mark.parametrize(("k", "n"), [(0, 20), (3, 20), (20, 20)])
def test_exact_intervals_leave_the_stated_tails(k, n):
    low, high = exact_interval(k, n, 0.95)
    if k:
        assert binom.sf(k - 1, n, low) == pytest.approx(0.025)
    else:
        assert low == 0.0
    if k < n:
        assert binom.cdf(k, n, high) == pytest.approx(0.025)
    else:
        assert high == 1.0


def test_the_bound_of_nothing_seen_and_of_nothing_judged():
    assert upper_bound(0, 100, 0.95) == pytest.approx(1 - 0.05**0.01)
    assert upper_bound(0, 0, 0.95) == 1.0
