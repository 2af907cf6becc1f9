"""Why a variant fails, in words and numbers."""

from __future__ import annotations

import numpy as np

from ruleout.checks import Column
from ruleout.verdicts import reason, where_it_shows

COLUMNS = (
    Column("edge:brake", counts=True),
    Column("serial", counts=True),
    Column("above:step:kinase", "step", "kinase"),
    Column("below:step:kinase", "step", "kinase"),
)


def replicated():
    rng = np.random.default_rng(0)
    return np.stack(
        [
            rng.chisquare(1, 400),
            rng.normal(0, 0.1, 400),
            rng.uniform(0.07, 0.18, 400),
            rng.uniform(0.07, 0.18, 400),
        ],
        axis=1,
    )


def test_the_place_of_failure_is_named_with_what_replicates_reach():
    words = where_it_shows(COLUMNS, np.array([31.0, 0.0, 0.1, 0.31]), replicated())
    assert words.startswith("the fitted kinase in `step` overshoots by 0.31")
    assert "where replicates reach 0.07" in words


def test_a_gap_that_replicates_reach_too_is_not_blamed():
    assert where_it_shows(COLUMNS, np.array([31.0, 0.0, 0.1, 0.15]), replicated()) == ""


def test_an_edge_is_told_by_the_gain_of_letting_it_in():
    words = reason(COLUMNS[0], COLUMNS, np.array([31.0, 0.0, 0.1, 0.1]), replicated())
    assert "letting `brake` in improves the fit by 31" in words
    assert "at most in 95 % of replicates" in words


def test_serial_correlation_is_told_with_its_size():
    words = reason(COLUMNS[1], COLUMNS, np.array([1.0, 0.6, 0.1, 0.1]), replicated())
    assert "serial correlation 0.6" in words
