from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from ruleout.case import Case, read_case

EXPERIMENTS = """
[readout.y]
of = "{readout}"
scale = "free"
[condition.step]
input.u = 1.0
"""

ReadCase = Callable[..., Case]


@pytest.fixture
def case_of(tmp_path: Path) -> ReadCase:
    """Read a case from the text of its mechanism and, else with one step, its experiments."""

    def read(
        mechanism: str,
        experiments: str | None = None,
        readout: str = "x",
        data: str | None = None,
    ) -> Case:
        text = 'title = "test"\ntime_unit = "min"\namount_unit = "uM"\n' + mechanism
        (tmp_path / "mechanism.toml").write_text(text)
        experiments = experiments or EXPERIMENTS.format(readout=readout)
        (tmp_path / "experiments.toml").write_text(experiments)
        if data is not None:
            (tmp_path / "data.csv").write_text(data)
        return read_case(tmp_path, require_data=data is not None)

    return read
