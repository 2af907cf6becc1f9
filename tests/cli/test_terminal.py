"""What the terminal shows of a judgement."""

from __future__ import annotations

import io
import json
from collections.abc import Callable

import pytest
from rich.console import Console

from ruleout.cli.progress import JsonLines, LiveBars, PlainLines, duration
from ruleout.cli.terminal import REASONS_SHOWN, print_judgement
from ruleout.verdicts.types import Judgement


def shown(judgement: Judgement, width: int) -> str:
    stream = io.StringIO()
    print_judgement(Console(file=stream, width=width, no_color=True), judgement)
    return stream.getvalue()


@pytest.mark.parametrize("width", [60, 80, 200])
def test_no_line_is_wider_than_the_terminal(width: int, frost_judgement: Judgement) -> None:
    assert max(map(len, shown(frost_judgement, width).splitlines())) <= width


def test_every_verdict_stands_in_full_beside_its_variant(frost_judgement: Judgement) -> None:
    lines = shown(frost_judgement, 80).splitlines()
    words = {"kept": "kept", "ruled_out": "ruled out"}
    for row in frost_judgement.variants.itertuples():
        assert any(
            line.startswith(f"{row.variant} ") and words[row.verdict] in line for line in lines
        )


def test_the_kept_come_first(frost_judgement: Judgement) -> None:
    text = shown(frost_judgement, 80)
    assert text.index("\nv3 ") < text.index("\nv1 ")


def test_reasons_are_told_in_full(frost_judgement: Judgement) -> None:
    text = " ".join(shown(frost_judgement, 80).split())
    assert frost_judgement.variants["reason"].iloc[0] in text


def test_without_colour_there_are_no_escape_codes(frost_judgement: Judgement) -> None:
    assert "\x1b" not in shown(frost_judgement, 80)


def test_hundreds_of_ruled_out_variants_are_counted_not_listed(
    judgement_with: Callable[..., Judgement], frost_judgement: Judgement
) -> None:
    table = frost_judgement.variants
    table = table[table["verdict"] == "ruled_out"]
    many = table.loc[table.index.repeat(100)].copy()
    many["variant"] = [f"v{i:03d}" for i in range(len(many))]
    text = shown(judgement_with(variants=many), 80)
    assert f"{len(many) - REASONS_SHOWN} more ruled out" in text
    assert text.count("ruled out  ") <= REASONS_SHOWN


@pytest.mark.parametrize(
    ("seconds", "said"),
    [(0.44, "0.4 s"), (12.2, "12 s"), (185, "3 min 5 s"), (7800, "2 h 10 min")],
)
def test_durations_read_as_people_say_them(seconds: float, said: str) -> None:
    assert duration(seconds) == said


def test_plain_progress_is_one_line_a_step() -> None:
    stream = io.StringIO()
    told = PlainLines(stream)
    told.start("v1", 3)
    told.advance("v1", note="searched")
    told.advance("v1")
    assert stream.getvalue() == ""
    told.finish("v1")
    assert stream.getvalue().startswith("v1: searched, ")
    assert stream.getvalue().count("\n") == 1


def test_json_progress_keeps_the_notes() -> None:
    stream = io.StringIO()
    told = JsonLines(stream)
    told.start("v1", 3)
    told.advance("v1", 2, "block 1")
    told.finish("v1")
    events = [json.loads(line) for line in stream.getvalue().splitlines()]
    assert [e["event"] for e in events] == ["start", "advance", "finish"]
    assert events[1]["note"] == "block 1"
    assert events[0]["total"] == 3


def test_live_bars_leave_a_line_for_each_finished_step() -> None:
    stream = io.StringIO()
    console = Console(file=stream, force_terminal=True, width=80)
    with LiveBars(console) as told:
        told.start("v1", 2)
        told.start("v2", 2)
        told.advance("v1", note="[searched]")
        told.advance("unknown")
        told.finish("v1")
        told.finish("never begun")
    assert "v1: [searched], " in stream.getvalue()
