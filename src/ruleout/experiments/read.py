"""``experiments.toml`` and ``data.csv`` -> :class:`Experiments`."""

from __future__ import annotations

from pathlib import Path

from ruleout.experiments.conditions import read_condition
from ruleout.experiments.data import read_data
from ruleout.experiments.plan import read_plan
from ruleout.experiments.readouts import read_readout
from ruleout.experiments.types import Experiments
from ruleout.files import Section, check_label, check_name

MOST_READOUTS = 200
MOST_CONDITIONS = 2_000


def read_experiments(toml_path: Path, csv_path: Path | None = None) -> Experiments:
    """Return what was measured and how.

    Parameters
    ----------
    toml_path : Path
        An ``experiments.toml``.
    csv_path : Path, optional
        The data; without it the result holds none.

    Raises
    ------
    InputError
        At the first thing that cannot be used, with file, line and field.
    """
    top = Section.open(toml_path)
    top.only(("readout", "condition", "plan"))
    tables = {"readout": top.sections("readout"), "condition": top.sections("condition")}
    for kind, most in (("readout", MOST_READOUTS), ("condition", MOST_CONDITIONS)):
        if not tables[kind]:
            top.fail(kind, f"there is no {kind}; write [{kind}.NAME]")
        if len(tables[kind]) > most:
            top.fail(kind, f"there are {len(tables[kind])} {kind}s; at most {most} are read")
    for name, table in tables["condition"].items():
        check_label(name, "condition", table.where())
    for name, table in tables["readout"].items():
        check_name(name, "readout", table.where())
    conditions = {name: read_condition(name, table) for name, table in tables["condition"].items()}
    readouts = {
        name: read_readout(name, table, conditions) for name, table in tables["readout"].items()
    }
    plan = read_plan(top, readouts, conditions)
    data = read_data(csv_path, readouts, conditions) if csv_path else None
    return Experiments(readouts, conditions, data, plan, top.lines)
