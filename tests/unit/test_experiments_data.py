"""What a data.csv may hold, and the place and remedy named for every bad cell."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from ruleout.errors import InputError
from ruleout.experiments import read_experiments

EXPERIMENTS = """
[readout.y]
of = "a"
[readout.given]
of = "a"
noise = "given"
[readout.ln]
of = "a"
family = "lognormal"
[readout.logcut]
of = "a"
family = "lognormal"
detection_limit = 0.1
[readout.rep]
of = "a"
noise = "replicates"
[readout.track]
of = "a"
replicates = "trajectory"
[condition.step]
[condition."S 0.02"]
[condition.later]
hold_out = true
"""
HEADER = "condition,time,readout,value"

Read = Callable[..., pd.DataFrame]


@pytest.fixture
def read(tmp_path: Path) -> Read:
    def make(rows: str | bytes, header: str = HEADER) -> pd.DataFrame:
        toml, csv = tmp_path / "experiments.toml", tmp_path / "data.csv"
        toml.write_text(EXPERIMENTS, encoding="utf-8")
        raw = rows if isinstance(rows, bytes) else f"{header}\n{rows}".encode()
        csv.write_bytes(raw)
        data = read_experiments(toml, csv).data
        assert data is not None
        return data

    return make


def test_columns_and_their_defaults(read: Read) -> None:
    data = read("step,0,y,1.5\nS 0.02,inf,y,-2e-3\n")
    assert list(data.columns) == ["condition", "time", "readout", "value", "sd", "replicate"]
    assert list(data["condition"]) == ["step", "S 0.02"]
    assert list(data["time"]) == [0.0, math.inf]
    assert list(data["value"]) == [1.5, -2e-3]
    assert data["sd"].isna().all()
    assert list(data["replicate"]) == ["", ""]


def test_sd_and_replicate_in_any_order_of_columns(read: Read) -> None:
    data = read(
        "rat 1,0.1,3,y,step,1\n,,3,y,step,2\n", header="replicate,sd,value,readout,condition,time"
    )
    assert list(data["replicate"]) == ["rat 1", ""]
    assert data["sd"][0] == 0.1
    assert math.isnan(data["sd"][1])


def test_blank_lines_spaces_quotes_and_byte_order_marks_are_taken(read: Read) -> None:
    text = '\ufeffcondition, time ,readout,value\r\n\r\n"step", 1 ,y, 2\r\n,,,\r\nstep,2,y,3\r\n'
    data = read(text.encode())
    assert list(data["value"]) == [2.0, 3.0]


def test_repeated_points_without_labels_are_numbered(read: Read) -> None:
    data = read("step,1,y,2\nstep,1,y,2\nstep,2,y,3\nstep,1,y,4\n")
    assert list(data["replicate"]) == ["1", "2", "", "3"]


def test_numbering_keeps_clear_of_labels_that_are_given(read: Read) -> None:
    data = read("step,1,y,2,1\nstep,1,y,3,\nstep,1,y,4,\n", header=f"{HEADER},replicate")
    assert list(data["replicate"]) == ["1", "2", "3"]


def test_lognormal_values_below_the_limit_may_be_zero(read: Read) -> None:
    assert list(read("step,1,logcut,0\nstep,2,logcut,1\n")["value"]) == [0.0, 1.0]


SLIPS = {
    "unknown condition": ("stp,1,y,2", 2, "condition", "did you mean 'step'"),
    "unknown readout": ("step,1,z,2", 2, "readout", "[readout.z]"),
    "negative time": ("step,0,y,2\nstep,-1,y,2", 3, "time", "0 or more"),
    "time that is text": ("step,one,y,2", 2, "time", "not a finite number"),
    "value that is text": ("step,1,y,high", 2, "value", "not a finite number"),
    "value that is not a number": ("step,1,y,NaN", 2, "value", "leave the row out"),
    "empty value": ("step,1,y,", 2, "value", "leave the row out"),
    "infinite value": ("step,1,y,inf", 2, "value", "not a finite number"),
    "decimal comma": ('step,1,y,"1,5"', 2, "value", "decimal point"),
    "thousands": ("step,1,y,1_000", 2, "value", "not a finite number"),
    "absurd value": ("step,1,y,1e200", 2, "value", "unit"),
    "absurd time": ("step,1e30,y,1", 2, "time", "time unit"),
    "value given but no sd": ("step,1,given,1", 2, "sd", 'noise = "free"'),
    "lognormal zero": ("step,1,ln,0", 2, "value", "above 0"),
    "lognormal negative": ("step,1,ln,-1", 2, "value", "above 0"),
    "trajectory without labels": ("step,1,track,1", 2, "replicate", "label"),
    "only time zero": ("step,0,y,1\nS 0.02,0,y,1", 2, "time", "every time is 0"),
}

PLACELESS = {
    "too few cells": ("step,1,y", 2, "3 cells, the header 4"),
    "too many cells": ("step,1,y,1,5", 2, "decimal point"),
    "broken quotes": ('step,1,y,"1', 2, "not valid CSV"),
}


def refusal(read: Read, rows: str | bytes, header: str = HEADER) -> str:
    with pytest.raises(InputError) as refused:
        read(rows, header)
    message = str(refused.value)
    assert "\n" not in message
    return message


@pytest.mark.parametrize("slip", SLIPS)
def test_bad_cell_is_named_with_line_and_column(read: Read, tmp_path: Path, slip: str) -> None:
    rows, line, field, said = SLIPS[slip]
    message = refusal(read, rows)
    assert message.startswith(f"{tmp_path / 'data.csv'}:{line}: {field}: ")
    assert said in message


@pytest.mark.parametrize("slip", PLACELESS)
def test_bad_row_is_named_with_its_line(read: Read, tmp_path: Path, slip: str) -> None:
    rows, line, said = PLACELESS[slip]
    message = refusal(read, rows)
    assert message.startswith(f"{tmp_path / 'data.csv'}:{line}: ")
    assert said in message


@pytest.mark.parametrize("sd", ["0", "-1"])
def test_sd_is_above_zero(read: Read, sd: str) -> None:
    message = refusal(read, f"step,1,y,2,{sd}", f"{HEADER},sd")
    assert "data.csv:2: sd: " in message
    assert "above 0" in message


def test_duplicates_under_one_label_name_both_lines(read: Read) -> None:
    message = refusal(read, "step,1,y,2,a\nstep,1,y,3,b\nstep,1.0,y,4,a", f"{HEADER},replicate")
    assert "data.csv:4: replicate: this row repeats line 2" in message


@pytest.mark.parametrize("label", ["a@b", "a;b", "x" * 65])
def test_labels_leave_out_what_other_files_use(read: Read, label: str) -> None:
    message = refusal(read, f"step,1,y,2,{label}", f"{HEADER},replicate")
    assert "data.csv:2: replicate: " in message


@pytest.mark.parametrize(
    ("header", "said"),
    [
        ("condition;time;readout;value", "semicolons"),
        ("condition\ttime\treadout\tvalue", "tabs"),
        ("condition,time,readout", "column 'value' is missing"),
        ("condition,time,readout,valu", "did you mean 'value'"),
        ("condition,time,readout,value,time", "occurs twice"),
        ("condition,time,readout,value,comment", "unknown column 'comment'"),
        ("step,1,y,2", "the first row names columns"),
    ],
)
def test_header_slips(read: Read, header: str, said: str) -> None:
    assert said in refusal(read, "step,1,y,2", header)


@pytest.mark.parametrize(
    ("raw", "said"),
    [
        (b"", "empty"),
        (b"\n\n", "empty"),
        (HEADER.encode(), "no measurement"),
        (HEADER.encode("utf-16"), "UTF-16"),
        (b"PK\x03\x04\0\0", "binary"),
        (f"{HEADER}\nstep,1,y,2\nst\xe9p,1,y,2".encode("latin-1"), ":3: this line is not in UTF-8"),
    ],
)
def test_files_that_are_no_table(read: Read, raw: bytes, said: str) -> None:
    assert said in refusal(read, raw)


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ("step,1,rep,2\nstep,2,rep,3", "no point is measured twice"),
        ("step,1,rep,2\nstep,1,rep,2", "all replicates are equal"),
        ("step,1,rep,2\nlater,1,rep,2\nlater,1,rep,3", "no point is measured twice"),
        ("later,1,y,2\nlater,2,y,2", "held out"),
    ],
)
def test_data_that_cannot_be_judged(read: Read, rows: str, said: str) -> None:
    assert said in refusal(read, rows)


def test_missing_data(tmp_path: Path) -> None:
    toml = tmp_path / "experiments.toml"
    toml.write_text(EXPERIMENTS, encoding="utf-8")
    with pytest.raises(InputError, match="there is no such file"):
        read_experiments(toml, tmp_path / "data.csv")
