"""Reading ``[readout.NAME]``."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Final, Literal

from ruleout.experiments.types import Family, Noise, Readout, Reference
from ruleout.expressions import ZERO, Expr, parse, sym, symbols, to_text
from ruleout.files import Section, describe

KEYS = (
    "of", "scale", "scale_by", "relative_to", "offset", "noise", "family", "detection_limit",
    "detection_ceiling", "replicates",
)  # fmt: skip
NOISES: Final[tuple[Noise, ...]] = ("given", "free", "free+proportional", "replicates")
FAMILIES: Final[tuple[Family, ...]] = ("normal", "lognormal", "student")
REPLICATES: Final[tuple[Literal["independent", "trajectory", "batch"], ...]] = (
    "independent",
    "trajectory",
    "batch",
)
SCALED_BY: Final[tuple[Literal["condition", "replicate"], ...]] = ("condition", "replicate")
HINTS = {
    "node": 'write of = "NODE"',
    "sd": 'a known sd stands in the data\'s sd column (noise = "given"); a free one gets its prior '
    "under [prior] in mechanism.toml",
}


def read_readout(name: str, table: Section, conditions: Collection[str]) -> Readout:
    """Return a readout; that its expression names nodes is checked against the mechanism.

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(KEYS, HINTS)
    of, text = _read_of(table)
    readout = Readout(
        name=name,
        of=of,
        of_text=text,
        scale=_number_or_free(table, "scale", 1.0),
        scale_by=table.word("scale_by", SCALED_BY) if "scale_by" in table else None,
        relative_to=_read_reference(table, conditions),
        offset=_number_or_free(table, "offset", 0.0),
        noise=table.word("noise", NOISES, "free"),
        family=table.word("family", FAMILIES, "normal"),
        detection_limit=table.number("detection_limit") if "detection_limit" in table else None,
        detection_ceiling=(
            table.number("detection_ceiling") if "detection_ceiling" in table else None
        ),
        replicates=table.word("replicates", REPLICATES, "independent"),
    )
    _check(readout, table)
    return readout


def readout_parameters(readout: Readout) -> tuple[str, ...]:
    """Return the names of the parameters that a readout brings, without conditions' own ones."""
    parts = []
    if readout.scale == "free":
        parts.append("scale")
    if readout.offset == "free":
        parts.append("offset")
    if readout.noise in ("free", "free+proportional"):
        parts.append("sd")
    if readout.noise == "free+proportional":
        parts.append("sd_rel")
    if readout.family == "student":
        parts.append("nu")
    if readout.replicates == "batch":
        parts.append("batch_sd")
    return tuple(f"{readout.name}.{part}" for part in parts)


def _number_or_free(table: Section, key: str, default: float) -> float | Literal["free"]:
    value = table.values.get(key, default)
    if isinstance(value, str):
        table.one_of(key, value, ("free",))
        return "free"
    return table.as_number(key, value)


def _read_of(table: Section) -> tuple[Expr, str]:
    value = table.values.get("of")
    if value is None:
        table.fail("of", "'of' is missing; name the node, weights or expression that is measured")
    if isinstance(value, str):
        of, text = parse(value, where=table.where("of")), value
    elif isinstance(value, Mapping):
        inner = table.section("of")
        of = ZERO
        for node in value:
            of = of + inner.number(node) * sym(node)
        text = to_text(of)
    else:
        table.fail(
            "of",
            f"{describe(value)} was given; a node, weights such as "
            "{ kinase = 1.0, complex = 1.0 } or an expression in quotes is expected",
        )
    if not symbols(of):
        table.fail("of", f"{text!r} names no node, so it would measure nothing")
    return of, text


def _read_reference(table: Section, conditions: Collection[str]) -> Reference | None:
    if "relative_to" not in table:
        return None
    inner = table.section("relative_to")
    inner.only(("condition", "time"))
    condition = inner.text("condition") or None
    if condition is not None:
        inner.one_of("condition", condition, tuple(conditions))
    return Reference(condition, inner.time("time"))


def _check(readout: Readout, table: Section) -> None:
    if readout.scale_by is not None and readout.scale != "free":
        table.fail("scale_by", 'own scales need scale = "free"')
    if readout.scale == 0:
        table.fail("scale", "a scale of 0 would hide every node; give another number or 'free'")
    low, high = readout.detection_limit, readout.detection_ceiling
    if low is not None and high is not None and low >= high:
        table.fail("detection_ceiling", f"{high:g} is not above the detection limit, {low:g}")
    if readout.family == "lognormal":
        for key, limit in (("detection_limit", low), ("detection_ceiling", high)):
            if limit is not None and limit <= 0:
                table.fail(
                    key, f'{limit:g} was given; with family = "lognormal" it must be above 0'
                )
        if readout.noise == "free+proportional":
            table.fail("noise", 'lognormal noise is proportional already; use "free"')
