"""Simulation-based calibration of the sampler on a small case (Talts and others 2018).

The ranks of true parameters among posterior draws are uniform if priors, likelihood and sampler
agree. The committed figures come from ``reports/operating_characteristics/calibration.py``, of
which this is a shorter run.
"""

from __future__ import annotations

import importlib
from pathlib import Path
from types import ModuleType

import numpy as np
import pandas as pd
import pytest

SETS = 80
CHANCE = 1e-3
"""Chance that a correct sampler fails one of these assertions on another seed."""


@pytest.fixture
def calibration(monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    monkeypatch.syspath_prepend(Path(__file__).resolve().parents[2])
    return importlib.import_module("reports.operating_characteristics.calibration")


def test_the_test_of_uniformity_finds_what_it_should(calibration: ModuleType) -> None:
    """Uniform ranks pass; ranks of a posterior too narrow, or shifted, do not."""
    rng = np.random.default_rng(1)
    even = rng.integers(0, calibration.DRAWS + 1, 200)
    assert calibration.uniformity(even) > CHANCE
    narrow = np.where(rng.uniform(size=200) < 0.5, even // 4, calibration.DRAWS - even // 4)
    assert calibration.uniformity(narrow) < CHANCE
    assert calibration.uniformity(even // 2) < CHANCE


@pytest.mark.slow
def test_ranks_of_true_parameters_are_uniform_and_bands_cover(calibration: ModuleType) -> None:
    found: pd.DataFrame = calibration.calibrate(SETS)
    names = calibration.parameters(found)
    for name in names:
        assert calibration.uniformity(found[name].to_numpy()) > CHANCE / len(names), name
    # Points of one curve go together: the error of the coverage is taken over data sets.
    covered = found["band_coverage"]
    error = max(covered.std() / np.sqrt(SETS), 1e-9)
    assert abs(covered.mean() - 0.9) < 3.3 * error
