"""Coherence and claims."""

from __future__ import annotations

import math

import pytest

from ruleout.variants.types import ClaimSplit
from ruleout.verdicts import Own, judge_claim, settle

# Two contested edges a and b: v1 has none, v2 has a, v3 has b, v4 has both.
ORDER = ("v1", "v2", "v3", "v4")
CONTAINS = {
    "v1": frozenset(),
    "v2": frozenset({"v1"}),
    "v3": frozenset({"v1"}),
    "v4": frozenset({"v1", "v2", "v3"}),
}
A = ClaimSplit("a", "edge a", frozenset({"v2", "v4"}))
FAILS = Own(True, 0.005, rejected=True)
PASSES = Own(True, 0.4)
BROKEN = Own(judged=False)
UNCHECKED = Own(judged=True)


def verdicts(*own, alike=()):
    found = settle(ORDER, CONTAINS, dict(zip(ORDER, own, strict=True)), alike)
    return {name: v.verdict for name, v in found.items()}, found


def test_what_contains_a_kept_variant_is_kept_even_if_its_own_check_fails():
    plain, found = verdicts(FAILS, PASSES, FAILS, FAILS)
    assert plain == {"v1": "ruled_out", "v2": "kept", "v3": "ruled_out", "v4": "kept"}
    assert found["v4"].by_coherence == "v2"
    assert found["v4"].p_coherent == 0.4
    assert found["v2"].by_coherence == ""


def test_an_unchecked_variant_above_a_kept_one_is_kept_by_coherence():
    plain, found = verdicts(PASSES, UNCHECKED, UNCHECKED, UNCHECKED)
    assert set(plain.values()) == {"kept"}
    assert found["v2"].by_coherence == "v1"
    assert math.isnan(found["v2"].p_value)


def test_a_failed_fit_is_never_evidence_and_blocks_what_contains_it():
    plain, _ = verdicts(FAILS, BROKEN, FAILS, FAILS)
    assert plain == {
        "v1": "ruled_out",
        "v2": "not_judged",
        "v3": "ruled_out",
        "v4": "not_judged",
    }


def test_variants_that_cannot_be_told_apart_share_the_largest_p():
    plain, found = verdicts(FAILS, FAILS, PASSES, FAILS, alike=[("v2", "v3")])
    assert plain["v2"] == "kept"
    assert found["v2"].p_coherent == 0.4
    assert found["v2"].alike == ("v3",)


@pytest.mark.parametrize(
    ("own", "expected"),
    [
        ((FAILS, PASSES, FAILS, FAILS), "needed"),
        ((FAILS, FAILS, PASSES, PASSES), "not_needed"),
        ((PASSES, UNCHECKED, UNCHECKED, UNCHECKED), "not_needed"),
        ((FAILS, FAILS, FAILS, FAILS), "nothing_fits"),
        ((FAILS, FAILS, FAILS, PASSES), "needed"),
        ((FAILS, PASSES, BROKEN, FAILS), "undecided"),
        ((BROKEN, BROKEN, BROKEN, BROKEN), "undecided"),
    ],
)
def test_claim_of_one_edge(own, expected):
    plain, _ = verdicts(*own)
    assert judge_claim(A, ORDER, plain, CONTAINS).verdict == expected


def test_a_claim_is_excluded_when_only_variants_without_it_survive():
    flat = {name: frozenset() for name in ORDER}
    own = dict(zip(ORDER, (PASSES, FAILS, FAILS, FAILS), strict=True))
    plain = {name: v.verdict for name, v in settle(ORDER, flat, own).items()}
    assert judge_claim(A, ORDER, plain, flat).verdict == "excluded"


def test_rival_choices_that_nest_nothing_are_undecided_when_both_are_kept():
    flat = {name: frozenset() for name in ORDER}
    own = dict(zip(ORDER, (FAILS, PASSES, PASSES, FAILS), strict=True))
    plain = {name: v.verdict for name, v in settle(ORDER, flat, own).items()}
    found = judge_claim(A, ORDER, plain, flat)
    assert found.verdict == "undecided"
    assert (found.with_kept, found.without_kept) == (("v2",), ("v3",))


def test_kept_is_never_worded_as_proven():
    plain, _ = verdicts(FAILS, PASSES, FAILS, FAILS)
    words = judge_claim(A, ORDER, plain, CONTAINS).statement.lower()
    assert "prove" not in words
    assert "true" not in words
