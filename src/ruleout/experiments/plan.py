"""Reading ``[plan]``: measurements that are still to be made."""

from __future__ import annotations

from collections.abc import Collection, Mapping

from ruleout.experiments.types import Plan, Readout
from ruleout.files import Section, describe

KEYS = ("readouts", "times", "replicates", "sd")
TRUTH = "truth"
MOST_REPLICATES = 1_000
MOST_TIMES = 10_000


def read_plan(
    top: Section, readouts: Mapping[str, Readout], conditions: Collection[str]
) -> Plan | None:
    """Return the planned experiment, None where the file has none.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    if "plan" not in top:
        return None
    table = top.section("plan")
    table.only((*KEYS, TRUTH, *conditions))
    if "times" not in table:
        table.fail("times", "'times' is missing; list the times to measure at")
    general = _read_one(table, Plan(tuple(readouts), ()), readouts)
    own = {}
    for name in conditions:
        if name in table and name not in (*KEYS, TRUTH):
            inner = table.section(name)
            inner.only(KEYS)
            own[name] = _read_one(inner, general, readouts)
    return Plan(
        general.readouts, general.times, general.replicates, general.sd, own, _read_truth(table)
    )


def _read_one(table: Section, default: Plan, readouts: Mapping[str, Readout]) -> Plan:
    chosen = table.names("readouts") if "readouts" in table else default.readouts
    for name in chosen:
        table.one_of("readouts", name, tuple(readouts))
    sd = {**default.sd, **_read_sd(table, readouts)}
    for name in chosen:
        if readouts[name].noise == "given" and name not in sd:
            table.fail("sd", f"readout '{name}' has noise = \"given\"; plan its sd as well")
    replicates = table.integer("replicates", default.replicates, low=1, high=MOST_REPLICATES)
    return Plan(chosen, _read_times(table, default.times), replicates, sd)


def _read_truth(table: Section) -> dict[str, float]:
    """Return stated values of parameters; whether they exist depends on the variant."""
    if TRUTH not in table:
        return {}
    inner = table.section(TRUTH)
    return {name: inner.as_number(name, value) for name, value in table.parameters(TRUTH).items()}


def _read_times(table: Section, default: tuple[float, ...]) -> tuple[float, ...]:
    if "times" not in table:
        return default
    value = table.values["times"]
    if not isinstance(value, list) or not 1 <= len(value) <= MOST_TIMES:
        table.fail(
            "times", f"{describe(value)} was given; a list of 1 to {MOST_TIMES} times is expected"
        )
    times = [table.as_time("times", time) for time in value]
    if sorted(set(times)) != times:
        table.fail("times", "times must increase, each named once")
    return tuple(times)


def _read_sd(table: Section, readouts: Mapping[str, Readout]) -> dict[str, float]:
    if "sd" not in table:
        return {}
    if isinstance(table.values["sd"], Mapping):
        inner = table.section("sd")
        inner.only(tuple(readouts))
        return {name: inner.number(name, above=0.0) for name in inner.values}
    return dict.fromkeys(readouts, table.number("sd", above=0.0))
