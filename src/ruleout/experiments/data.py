"""Reading ``data.csv``: tidy, one measurement a row."""

from __future__ import annotations

import csv
import io
import math
import re
from collections import Counter
from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Final, NoReturn

import pandas as pd

from ruleout.errors import InputError, did_you_mean
from ruleout.experiments.types import Condition, Readout
from ruleout.files import check_label, read_text

REQUIRED: Final = ("condition", "time", "readout", "value")
OPTIONAL: Final = ("sd", "replicate")
LARGEST_FILE = 50_000_000
MOST_ROWS = 200_000
LARGEST_NUMBER = 1e100
LONGEST_TIME, SHORTEST_TIME = 1e15, 1e-15
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)


@dataclass(frozen=True, slots=True)
class Row:
    """One measurement and the line it stands on; ``sd`` NaN and ``replicate`` "" if not given."""

    line: int
    condition: str
    time: float
    readout: str
    value: float
    sd: float
    replicate: str

    @property
    def point(self) -> tuple[str, float, str]:
        """What was measured, whichever replicate."""
        return self.condition, self.time, self.readout


def read_data(
    path: Path, readouts: Mapping[str, Readout], conditions: Mapping[str, Condition]
) -> pd.DataFrame:
    """Return the measurements as a table.

    Parameters
    ----------
    path : Path
        A CSV file with the columns ``condition,time,readout,value`` and, where known,
        ``sd,replicate``.
    readouts, conditions : mappings by name

    Returns
    -------
    DataFrame
        Columns ``condition, time, readout, value, sd, replicate``, in file order. Rows that repeat
        a point without a label are numbered 1, 2, ... as its replicates.

    Raises
    ------
    InputError
        At the first cell or combination of rows that cannot be used.
    """
    rows = list(_rows(path, readouts, conditions))
    if not rows:
        _refuse(path, 1, "", "there is a header but no measurement")
    _check_repeats(path, rows)
    rows = _numbered(rows)
    _check_times(path, rows)
    _check_held_out(path, rows, conditions)
    for readout in readouts.values():
        measured = [row for row in rows if row.readout == readout.name]
        _check_readout(path, readout, measured)
        if measured and readout.noise == "replicates":
            fitted = [row for row in measured if not conditions[row.condition].hold_out]
            _check_replicated(path, readout, fitted)
    columns = ("condition", "time", "readout", "value", "sd", "replicate")
    return pd.DataFrame({name: [getattr(row, name) for row in rows] for name in columns})


def _refuse(path: Path, line: int, field: str, message: str) -> NoReturn:
    raise InputError(message, where=f"{path}:{line}: {field}" if field else f"{path}:{line}")


def _rows(path: Path, readouts: Collection[str], conditions: Collection[str]) -> Iterator[Row]:
    reader = csv.reader(io.StringIO(read_text(path, limit=LARGEST_FILE)), strict=True)
    header: list[str] | None = None
    try:
        for count, cells in enumerate(reader):
            cells = [cell.strip() for cell in cells]
            if not any(cells):
                continue
            if header is None:
                header = _check_header(path, reader.line_num, cells)
                continue
            if len(cells) != len(header):
                _refuse(
                    path,
                    reader.line_num,
                    "",
                    f"this row has {len(cells)} cells, the header "
                    f"{len(header)}; write numbers with a decimal point and names with commas "
                    "in quotes",
                )
            if count > MOST_ROWS:
                _refuse(path, reader.line_num, "", f"at most {MOST_ROWS} rows are read")
            record = dict(zip(header, cells, strict=True))
            yield _read_row(path, reader.line_num, record, readouts, conditions)
    except csv.Error as error:
        raise InputError(
            f"this is not valid CSV: {error}", where=f"{path}:{reader.line_num}"
        ) from (error)


def _check_header(path: Path, line: int, cells: list[str]) -> list[str]:
    if len(cells) == 1:
        for separator, name in ((";", "semicolons"), ("\t", "tabs")):
            if separator in cells[0]:
                _refuse(
                    path,
                    line,
                    "",
                    f"the columns are separated by {name}; save the file with "
                    "commas between columns and decimal points in numbers",
                )
    allowed = (*REQUIRED, *OPTIONAL)
    for cell in cells:
        if cell not in allowed:
            _refuse(
                path,
                line,
                "",
                f"unknown column {cell!r}{did_you_mean(cell, allowed)}; the "
                f"first row names columns: {', '.join(REQUIRED)} and, where known, "
                f"{', '.join(OPTIONAL)}",
            )
    for name in allowed:
        if cells.count(name) > 1:
            _refuse(path, line, "", f"column '{name}' occurs twice")
        if name in REQUIRED and name not in cells:
            _refuse(path, line, "", f"column '{name}' is missing; needed are {', '.join(REQUIRED)}")
    return cells


def _read_row(
    path: Path,
    line: int,
    record: Mapping[str, str],
    readouts: Collection[str],
    conditions: Collection[str],
) -> Row:
    for field, known in (("condition", conditions), ("readout", readouts)):
        given = record[field]
        if given not in known:
            near = did_you_mean(given, known)
            _refuse(
                path,
                line,
                field,
                f"{given!r} is no {field} of experiments.toml{near}; write "
                f"[{field}.{given or 'NAME'}] there, or mend the name",
            )
    replicate = record.get("replicate", "")
    if replicate:
        check_label(replicate, "replicate", f"{path}:{line}: replicate")
    time = _time(path, line, record["time"])
    sd = record.get("sd", "")
    row = Row(
        line=line,
        condition=record["condition"],
        time=time,
        readout=record["readout"],
        value=_number(path, line, "value", record["value"]),
        sd=_number(path, line, "sd", sd) if sd else math.nan,
        replicate=replicate,
    )
    if row.sd <= 0:
        _refuse(path, line, "sd", f"{row.sd:g} was given; a standard deviation is above 0")
    return row


def _number(path: Path, line: int, field: str, cell: str) -> float:
    if not cell or cell.lower() in ("nan", "na", "n/a", "null", "none", "-"):
        shown = repr(cell) if cell else "an empty cell"
        _refuse(
            path, line, field, f"{shown} was given; leave the row out where nothing was measured"
        )
    if not _NUMBER.fullmatch(cell):
        hint = "; write a decimal point, not a comma" if re.fullmatch(r"[\d.,+-]+", cell) else ""
        _refuse(path, line, field, f"{cell[:40]!r} is not a finite number{hint}")
    number = float(cell)
    if abs(number) > LARGEST_NUMBER:
        _refuse(
            path, line, field, f"{cell[:40]} is too large to be a measurement; choose another unit"
        )
    return number


def _time(path: Path, line: int, cell: str) -> float:
    if cell.lower() in ("inf", "+inf"):
        return math.inf
    time = _number(path, line, "time", cell)
    if time < 0:
        _refuse(
            path,
            line,
            "time",
            f"{cell} was given; times are 0 or more, where 0 is when a "
            "condition begins, or inf for a steady state",
        )
    if time > LONGEST_TIME or 0 < time < SHORTEST_TIME:
        _refuse(
            path,
            line,
            "time",
            f"{cell} is beyond {SHORTEST_TIME:g} to {LONGEST_TIME:g}; choose another time unit",
        )
    return time


def _check_repeats(path: Path, rows: Sequence[Row]) -> None:
    seen: dict[tuple[tuple[str, float, str], str], int] = {}
    for row in rows:
        key = (row.point, row.replicate)
        if row.replicate and key in seen:
            _refuse(
                path,
                row.line,
                "replicate",
                f"this row repeats line {seen[key]}: same "
                f"condition, time, readout and replicate '{row.replicate}'; remove one, or "
                "label them apart",
            )
        seen[key] = row.line


def _numbered(rows: Sequence[Row]) -> list[Row]:
    """Number the rows that repeat a point without a label."""
    repeated = Counter(row.point for row in rows if not row.replicate)
    labels = {(row.point, row.replicate) for row in rows}
    used: Counter[tuple[str, float, str]] = Counter()
    result = []
    for row in rows:
        if not row.replicate and repeated[row.point] > 1:
            used[row.point] += 1
            while (row.point, str(used[row.point])) in labels:
                used[row.point] += 1
            row = replace(row, replicate=str(used[row.point]))
        result.append(row)
    return result


def _check_times(path: Path, rows: Sequence[Row]) -> None:
    if all(row.time == 0 for row in rows):
        _refuse(
            path,
            rows[0].line,
            "time",
            "every time is 0, so nothing can have happened; give "
            "later times, or inf for steady states",
        )


def _check_held_out(path: Path, rows: Sequence[Row], conditions: Mapping[str, Condition]) -> None:
    if all(conditions[row.condition].hold_out for row in rows):
        raise InputError(
            "every measured condition is held out, so nothing is left to fit; remove hold_out = "
            "true from one of them in experiments.toml",
            where=str(path),
        )


def _check_readout(path: Path, readout: Readout, rows: Sequence[Row]) -> None:
    if readout.noise == "given":
        for row in rows:
            if math.isnan(row.sd):
                _refuse(
                    path,
                    row.line,
                    "sd",
                    f"readout '{readout.name}' has noise = \"given\", but "
                    'this row has no sd; fill it in, or choose noise = "free"',
                )
    if readout.replicates != "independent" or readout.scale_by == "replicate":
        for row in rows:
            if not row.replicate:
                _refuse(
                    path,
                    row.line,
                    "replicate",
                    f"readout '{readout.name}' treats replicates "
                    "as series or batches, so every row needs its replicate's label",
                )
    if readout.family == "lognormal":
        limit = -math.inf if readout.detection_limit is None else readout.detection_limit
        for row in rows:
            if limit < row.value <= 0:
                _refuse(
                    path,
                    row.line,
                    "value",
                    f"{row.value:g} was given; readout '{readout.name}' is lognormal, so values "
                    "are above 0 (or at or below a detection_limit)",
                )


def _check_replicated(path: Path, readout: Readout, rows: Sequence[Row]) -> None:
    """Raise InputError where uncensored, fitted replicates say nothing about the noise."""
    low = -math.inf if readout.detection_limit is None else readout.detection_limit
    high = math.inf if readout.detection_ceiling is None else readout.detection_ceiling
    points: dict[tuple[str, float, str], list[float]] = {}
    for row in rows:
        if low < row.value < high:
            points.setdefault(row.point, []).append(row.value)
    repeated = [values for values in points.values() if len(values) > 1]
    trouble = ""
    if not repeated:
        trouble = "no point is measured twice"
    elif all(len(set(values)) == 1 for values in repeated):
        trouble = "all replicates are equal"
    if trouble:
        raise InputError(
            f"readout '{readout.name}' takes its noise from replicates, but {trouble} (held-out "
            'and censored values aside); choose noise = "free" or "given"',
            where=str(path),
        )
