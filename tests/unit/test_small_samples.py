"""The second condition for ruling out where points are few."""

from __future__ import annotations

import math

import numpy as np
import pytest

from ruleout.verdicts import corrected_aic, separated


def test_oxygen_demand_is_not_separated_as_published():
    """Bates and Watts 1988 (BOD, n = 6): AICc 26.7 for the line, 26.8 for saturation.

    RSS 135.8 and 25.990, recomputed with SciPy; sd counts as a parameter; constants of n dropped,
    as in n log(RSS/n) + 2 k.
    """
    n = 6

    def criterion(rss, k):
        return corrected_aic(-0.5 * n * np.log(rss / n), k, n)

    found = {"line": criterion(135.8, 2), "saturation": criterion(25.990, 3)}
    assert found["line"] == pytest.approx(26.7, abs=0.05)
    assert found["saturation"] == pytest.approx(26.8, abs=0.05)
    assert not separated("line", found)


def test_a_wide_gap_separates_and_the_best_is_never_ruled_out():
    found = {"a": 40.0, "b": 20.0, "c": 19.0}
    assert separated("a", found)
    assert not separated("b", found)
    assert not separated("c", found)


def test_as_many_parameters_as_points_explain_nothing():
    assert corrected_aic(100.0, 5, 6) == math.inf
