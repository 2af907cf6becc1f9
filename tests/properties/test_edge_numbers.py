"""Cases with numbers at the edge: inspected, or refused in plain words, and never for long."""

from __future__ import annotations

import re
import tempfile
import time
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from typer.testing import CliRunner

from ruleout.cli.app import app

FILES = {
    "mechanism.toml": """\
title = "Relay"
time_unit = "min"
amount_unit = "nM"
[node.cold]
kind = "input"
resting = 0.0
[node.sensor]
kind = "switched"
[node.gene]
kind = "expressed"
start = 0.5
[node.store]
kind = "pool"
start = 3.0
[edge.on]
from = "cold"
to = "sensor"
effect = "stimulates"
law = "saturating"
[edge.make]
from = "sensor"
to = "gene"
effect = "stimulates"
delay = 2.0
stages = 2
[edge.brake]
from = "gene"
to = "sensor"
effect = "inhibits"
law = "hill"
contested = true
[edge.use]
from = "store"
effect = "converts"
rate = "k * store * gene / (1.5 + store)"
[prior]
"on.strength" = { median = 0.4, fold = 10 }
"gene.loss_rate" = { low = 0.02, high = 5.0 }
"use.k" = { median = 0.3, fold = 5 }
"seen.offset" = { mean = 0.0, sd = 1.0 }
""",
    "experiments.toml": """\
[readout.seen]
of = "gene + 0.5 * sensor"
scale = "free"
offset = "free"
[readout.rest]
of = "store"
noise = "given"
[condition.step]
input.cold = [[0, 1.0], [7, 0.0]]
change = { "gene.loss_rate" = 2.0 }
[condition.dose]
input.cold = { table = [[0, 0.0], [5, 1.0]] }
add.store = [[0, 1.5], [6, 2.5]]
clamp = { gene = 0.7 }
""",
    "data.csv": "condition,time,readout,value,sd\n"
    + "".join(
        f"{c},{t},{r},{0.1 * t},0.1\n"
        for c in ("step", "dose")
        for r in ("seen", "rest")
        for t in (0, 2, 5, 9, 14)
    ),
}
NUMBER = re.compile(r"(?<![A-Za-z_.\d])\d+(?:\.\d+)?(?![A-Za-z_\d.])")
PLACES = [
    (name, found.start(), found.end())
    for name, text in FILES.items()
    for found in NUMBER.finditer(text)
]
EDGES = st.sampled_from(
    ["0", "1e-300", "1e-30", "1e-9", "1e9", "1e30", "1e300", "1e308", "-1", "-1e300", "inf", "0.1"]
)
CHANGES = st.lists(st.tuples(st.sampled_from(PLACES), EDGES), min_size=1, max_size=3)
LONGEST = 60.0
"""Seconds; a case takes about one where nothing is stiff."""


def inspect_with(changes: list[tuple[tuple[str, int, int], str]]) -> None:
    texts = dict(FILES)
    places = sorted(dict(changes).items(), reverse=True)
    for (name, start, end), edge in places:
        texts[name] = texts[name][:start] + edge + texts[name][end:]
    with tempfile.TemporaryDirectory() as folder:
        case = Path(folder) / "case"
        case.mkdir()
        for name, text in texts.items():
            (case / name).write_text(text)
        begin = time.monotonic()
        result = CliRunner().invoke(app, ["inspect", str(case)])
        assert time.monotonic() - begin < LONGEST
        assert {path.name for path in Path(folder).rglob("*")} == {"case", *FILES}
    assert result.exit_code in (0, 2), result.output
    assert "Traceback" not in result.output
    if result.exit_code == 2:
        assert len(result.output.strip().splitlines()) <= 2, result.output


@settings(max_examples=25, deadline=None, suppress_health_check=list(HealthCheck))
@given(CHANGES)
def test_numbers_at_the_edge_are_inspected_or_refused(
    changes: list[tuple[tuple[str, int, int], str]],
) -> None:
    inspect_with(changes)


@pytest.mark.slow
@settings(max_examples=2_000, deadline=None, suppress_health_check=list(HealthCheck))
@given(CHANGES)
def test_many_numbers_at_the_edge_are_inspected_or_refused(
    changes: list[tuple[tuple[str, int, int], str]],
) -> None:
    inspect_with(changes)
