from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from ruleout.case import Case
from ruleout.errors import InputError
from ruleout.rehearsal import Rehearsal, Spending, rehearse, run, save_rehearsal
from ruleout.rehearsal.chances import pairs
from ruleout.rehearsal.outcomes import binomial_interval, hold_truth, wrong_statements
from ruleout.rehearsal.types import COLUMNS
from ruleout.store import Store
from ruleout.variants import expand
from ruleout.verdicts import CLAIM_VERDICTS

MECHANISM = """
[node.dose]
kind = "pool"
start = 1.0
[node.depot]
kind = "pool"
start = 0
[edge.loss]
from = "dose"
effect = "converts"
[edge.exchange]
from = "dose"
to = "depot"
effect = "converts"
reversible = true
contested = true
[prior]
"loss.rate" = { median = 0.5, fold = 10 }
"exchange.rate" = { low = 1e-3, high = 10 }
"exchange.rate_back" = { median = 0.5, fold = 10 }
"""
EXPERIMENTS = """
[readout.level]
of = "dose"
[condition.given]
[plan]
times = [0.25, 0.5, 0.75, 1, 1.5, 2, 2.5, 3, 4, 5, 6, 8]
sd = 0.03
[plan.truth]
"loss.rate" = 0.9
"exchange.rate" = 0.8
"exchange.rate_back" = 0.25
"""
SETS = 4


@pytest.fixture
def decay(case_of) -> Case:  # type: ignore[no-untyped-def]
    return case_of(MECHANISM, EXPERIMENTS)


def same(a: Rehearsal, b: Rehearsal) -> None:
    for name in COLUMNS:
        pd.testing.assert_frame_equal(getattr(a, name), getattr(b, name))


def test_a_rehearsal_depends_on_its_seed_only_and_goes_on_where_it_stopped(
    decay: Case, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whole at once, or half first and the rest later: the same tables to the last bit."""
    np.random.seed(1)  # noqa: NPY002 - the global generator must not matter
    whole = rehearse(decay, Spending(seed=3, effort="quick"), out=tmp_path / "a", data_sets=SETS)
    np.random.seed(2)  # noqa: NPY002
    rehearse(decay, Spending(seed=3, effort="quick"), out=tmp_path / "b", data_sets=SETS // 2)
    judged: list[int] = []
    original = run.judge_one

    def counted(task: run.Task) -> dict[str, np.ndarray]:
        judged.append(task.number)
        return original(task)

    monkeypatch.setattr(run, "judge_one", counted)
    later = rehearse(decay, Spending(seed=3, effort="quick"), out=tmp_path / "b", data_sets=SETS)
    assert sorted(set(judged)) == list(range(SETS // 2, SETS))
    same(whole, later)
    piece = Store(tmp_path / "b").path("as given/v1-00000")
    piece.write_bytes(piece.read_bytes()[:50])
    judged.clear()
    same(
        whole,
        rehearse(decay, Spending(seed=3, effort="quick"), out=tmp_path / "b", data_sets=SETS),
    )
    assert judged == [0]


@pytest.mark.slow
def test_the_number_of_workers_changes_nothing(decay: Case, tmp_path: Path) -> None:
    one, two = (
        rehearse(decay, Spending(workers=w, effort="quick"), out=tmp_path / str(w), data_sets=2)
        for w in (1, 2)
    )
    same(one, two)


def test_tables_count_what_was_judged(decay: Case, tmp_path: Path) -> None:
    found = rehearse(decay, Spending(effort="quick"), out=tmp_path, truths=["v2"], data_sets=SETS)
    assert tuple(found.size.columns) == COLUMNS["size"]
    assert list(found.power["rival"]) == ["v1", "v2"]
    assert list(found.power["holds_truth"]) == [False, True]
    row = found.power.iloc[0]
    assert row["rate"] == row["ruled_out"] / SETS
    assert (row["low"], row["high"]) == binomial_interval(int(row["ruled_out"]), SETS)
    np.testing.assert_allclose(found.claims[list(CLAIM_VERDICTS)].sum(axis=1), 1.0)
    assert found.meta["truths_from"] == "plan and priors"
    save_rehearsal(found, tmp_path)
    assert pd.read_csv(tmp_path / "power.csv")["rival"].tolist() == ["v1", "v2"]


@pytest.mark.parametrize(("alpha", "replicates"), [(0.05, 39), (0.1, 39), (0.01, 199), (0.03, 66)])
def test_replicates_are_enough_to_reject_at_alpha(alpha: float, replicates: int) -> None:
    """Two of B + 1 may be as extreme: the size is alpha, or as close below as two allow."""
    spent = Spending(alpha=alpha, effort="quick").spent
    assert spent.most_replicates == replicates
    assert 2 / (replicates + 1) <= alpha


def test_unknown_truths_and_no_data_sets_are_refused(decay: Case, tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no variant"):
        rehearse(decay, out=tmp_path, truths=["v9"], data_sets=1)
    with pytest.raises(InputError, match="0 data sets"):
        rehearse(decay, out=tmp_path, data_sets=0)


def test_a_truth_that_cannot_be_solved_is_not_judged(
    decay: Case, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Never counted as ruled out, nor as a wrong statement."""
    values = {"loss.rate": np.nan}
    monkeypatch.setattr(run, "draw_truth", lambda *_: values)
    found = rehearse(decay, out=tmp_path, truths=["v1"], data_sets=2)
    assert found.size["not_judged"].item() == 2
    assert found.size["ruled_out"].item() == 0
    assert found.size["wrong"].item() == 0
    assert found.claims["undecided"].item() == 1.0


def test_wrong_statements_are_those_the_design_names(decay: Case) -> None:
    variants = expand(decay.mechanism, decay.experiments)
    kept, out = 0, 1
    word = CLAIM_VERDICTS.index
    verdict = np.array([[kept, kept], [out, kept], [kept, kept], [out, out], [kept, out]], np.int8)
    claim = np.array(
        [[word(w)] for w in ("not_needed", "needed", "excluded", "nothing_fits", "undecided")],
        np.int8,
    )
    contains = np.zeros((5, 2, 2), dtype=bool)
    contains[:, 1, 0] = True
    np.testing.assert_array_equal(hold_truth(variants, "v1"), [True, True])
    np.testing.assert_array_equal(
        wrong_statements(variants, "v1", verdict, claim, contains), [False, True, False, True, True]
    )
    np.testing.assert_array_equal(hold_truth(variants, "v2"), [False, True])
    np.testing.assert_array_equal(
        wrong_statements(variants, "v2", verdict, claim, contains), [False, False, True, True, True]
    )
    # Where no effect is out of the larger one's reach it is a rival, and v2 may be ruled out.
    contains[:] = False
    np.testing.assert_array_equal(
        wrong_statements(variants, "v1", verdict, claim, contains),
        [False, True, False, True, False],
    )


@pytest.mark.parametrize(
    ("count", "total", "low", "high"),
    # Exact binomial limits: 0 of n has (alpha/2)^(1/n); 8 of 20 as tabled by Clopper and Pearson
    # (1934) to three digits.
    [(0, 10, 0.0, 1 - 0.025**0.1), (10, 10, 0.025**0.1, 1.0), (8, 20, 0.191, 0.639)],
)
def test_binomial_intervals_are_exact(count: int, total: int, low: float, high: float) -> None:
    np.testing.assert_allclose(binomial_interval(count, total), (low, high), atol=6e-4)


def test_not_needed_is_asked_of_the_smallest_pair(frost_like) -> None:  # type: ignore[no-untyped-def]
    assert pairs(frost_like) == {"extra": ("v1", "v3")}


@pytest.fixture
def frost_like() -> object:
    class Tables:
        variants = pd.DataFrame(
            {"variant": ["v1", "v2", "v3", "v4"], "contains": ["", "", "v1", "v1;v2;v3"]}
        )
        claims = pd.DataFrame(
            {
                "claim": ["extra", "other"],
                "verdict": ["not_needed", "needed"],
                "variants_without_kept": ["v1;v2", "v1"],
                "variants_with": ["v3;v4", "v2"],
            }
        )

    return Tables()
