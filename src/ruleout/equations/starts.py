"""Where states begin: by the mechanism's word, or a condition's own."""

from __future__ import annotations

from ruleout.equations.types import Start
from ruleout.experiments.types import ALWAYS, Condition
from ruleout.expressions import ZERO, Expr, const, parse, substitute, sym, symbols
from ruleout.mechanism.types import FREE, REST, Edge, Node
from ruleout.variants import Wiring


def resting_level(node: Node, condition: Condition | None = None) -> float:
    """Return the level of an input at rest: zero where a condition removes it for good."""
    gone = condition is not None and condition.remove.get(node.name) == ALWAYS
    return 0.0 if gone else node.resting


def node_start(node: Node, condition: Condition | None = None) -> Start:
    """Return where a node begins.

    A start that a condition calls free is that condition's own, ``NODE.start@CONDITION``, and so
    is every parameter in a start expression that the condition frees.
    """
    given = node.start if condition is None else condition.start.get(node.name, node.start)
    if given == REST:
        return Start(True)
    if given == FREE:
        own = condition is not None and node.name in condition.start
        value: Expr = sym(f"{node.name}.start")
        if own and condition is not None:
            return Start(False, sym(f"{node.name}.start@{condition.name}"))
    else:
        value = parse(given) if isinstance(given, str) else const(float(given))
    return Start(False, value if condition is None else owned(value, condition))


def owned(value: Expr, condition: Condition) -> Expr:
    """Return an expression with the parameters that a condition frees under their own names."""
    free = symbols(value) & set(condition.free)
    (renamed,) = substitute([value], {name: sym(f"{name}@{condition.name}") for name in free})
    return renamed


def _stage_start(edge: Edge, wiring: Wiring, condition: Condition | None) -> Start:
    """Return where the delay stages of an edge begin.

    Those of a regulating edge have settled at their source's level. Those of a material edge hold
    what is under way at rest, and nothing if a source has a start of its own.
    """
    sources = [wiring.nodes[name] for name, _ in edge.sources]
    starts = [node_start(node, condition) for node in sources if node.kind != "input"]
    if edge.material:
        return Start(True) if all(start.rest for start in starts) else Start(False, ZERO)
    return starts[0] if starts else Start(False, const(resting_level(sources[0], condition)))


def state_start(state: str, wiring: Wiring, condition: Condition | None = None) -> Start:
    """Return where a state, a node or a delay stage ``EDGE:i``, begins."""
    name, stage, _ = state.partition(":")
    if stage:
        return _stage_start(wiring.edges[name], wiring, condition)
    return node_start(wiring.nodes[name], condition)
