"""Reading ``[node.NAME]``."""

from __future__ import annotations

from typing import Final, Literal

from ruleout.files import Section
from ruleout.mechanism.types import REST, Fixed, Node, NodeKind, Prior

KINDS: Final[tuple[NodeKind, ...]] = ("input", "switched", "expressed", "pool")
KEYS = ("kind", "start", "resting", "acts_on", "contested", "basal")
_PARAMETER_HINT = 'this is a parameter: write it under [prior], as "{node}.{key}" = 0.1'
HINTS = ("loss_rate", "half_gain", "half_loss")


def read_node(name: str, table: Section) -> tuple[Node, dict[str, Prior]]:
    """Return a node and the priors that its table sets (``basal``).

    Raises
    ------
    InputError
        At the first field that cannot be used.
    """
    table.only(KEYS, {key: _PARAMETER_HINT.format(node=name, key=key) for key in HINTS})
    kind = table.word("kind", KINDS)
    node = Node(
        name=name,
        kind=kind,
        start=_read_start(table, kind),
        resting=_read_resting(table, kind),
        acts_on=_read_acts_on(table, kind),
        contested=_read_contested(table),
    )
    return node, _read_basal(name, table, kind)


def check_start(value: object, kind: str, table: Section, key: str) -> float | str:
    """Return a start: a number, ``"rest"``, ``"free"`` or the text of an expression."""
    if isinstance(value, str):
        if value == REST and kind == "pool":
            table.fail(key, "a pool has no rest of its own; give a number, 'free' or an expression")
        return value
    start = table.as_number(key, value, low=0.0)
    if kind == "switched" and start > 1:
        table.fail(key, f"{start:g} was given; a switched node is a fraction, from 0 to 1")
    return start


def _read_start(table: Section, kind: str) -> float | str:
    if kind == "input":
        if "start" in table:
            table.fail("start", "an input has no start; its level before time 0 is 'resting'")
        return REST
    default = 0.0 if kind == "pool" else REST
    return check_start(table.values.get("start", default), kind, table, "start")


def _read_resting(table: Section, kind: str) -> float:
    if kind != "input" and "resting" in table:
        table.fail("resting", f"only an input has a resting level; this node is {kind}")
    return table.number("resting", 0.0)


def _read_acts_on(table: Section, kind: str) -> Literal["linear", "saturating"]:
    if "acts_on" in table and kind != "switched":
        table.fail("acts_on", f"only a switched node has 'acts_on'; this node is {kind}")
    return table.word("acts_on", ("linear", "saturating"), "linear")


def _read_contested(table: Section) -> bool:
    if isinstance(table.values.get("contested"), list):
        table.fail("contested", "a node is present or absent: write contested = true")
    return table.flag("contested")


def _read_basal(name: str, table: Section, kind: str) -> dict[str, Prior]:
    if "basal" not in table:
        return {}
    if kind not in ("switched", "expressed"):
        table.fail("basal", f"only switched and expressed nodes have a basal gain, not {kind} ones")
    return {f"{name}.basal": Fixed(table.number("basal", low=0.0))}
