"""A mechanism as the text of a ``mechanism.toml``."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from pathlib import Path
from tempfile import TemporaryDirectory

from ruleout.errors import InputError
from ruleout.mechanism import read_mechanism
from ruleout.mechanism.types import (
    REST,
    Edge,
    Fixed,
    LogNormal,
    LogUniform,
    Mechanism,
    Node,
    Normal,
    Prior,
    Tied,
    Uniform,
)


def mechanism_text(mechanism: Mechanism, remarks: Iterable[str] = ()) -> str:
    """Return a mechanism in the form that :func:`ruleout.mechanism.read_mechanism` reads.

    Parameters
    ----------
    mechanism : Mechanism
    remarks : iterable of str
        Comment lines at the top.
    """
    blocks = [[f"# {line}" for line in remarks]] if remarks else []
    blocks.append(
        [
            f"title = {_string(mechanism.title)}",
            f"time_unit = {_string(mechanism.time_unit)}",
            f"amount_unit = {_string(mechanism.amount_unit)}",
        ]
    )
    blocks += [list(_node(node)) for node in mechanism.nodes.values()]
    blocks += [list(_edge(edge)) for edge in mechanism.edges.values()]
    blocks += [
        [f"[rule.{rule.name}]", f"{rule.kind} = {_strings(rule.members)}"]
        for rule in mechanism.rules
    ]
    for claim in mechanism.claims:
        loop = claim.kind == "loop"
        members = _string(claim.members[0]) if loop else _strings(claim.members)
        lines = [f"[claim.{claim.name}]", f"text = {_string(claim.text)}"]
        blocks.append([*lines, f"{claim.kind} = {members}"])
    if mechanism.priors:
        priors = [f"{_key(name)} = {_prior(p)}" for name, p in mechanism.priors.items()]
        blocks.append(["[prior]", *priors])
    return "\n\n".join("\n".join(block) for block in blocks) + "\n"


def checked_text(mechanism: Mechanism, remarks: Iterable[str], *, where: str) -> str:
    """Return :func:`mechanism_text` once it has been read back.

    Raises
    ------
    InputError
        If what was imported from ``where`` cannot be read as a mechanism.
    """
    text = mechanism_text(mechanism, remarks)
    with TemporaryDirectory() as folder:
        path = Path(folder) / "mechanism.toml"
        path.write_text(text, encoding="utf-8")
        try:
            read_mechanism(path)
        except InputError as error:
            message = str(error).removeprefix(f"{path}:").removeprefix(f"{path.name}:")
            raise InputError(
                f"this cannot be told as a mechanism: {message.strip()}", where=where
            ) from error
    return text


def _string(text: str) -> str:
    # JSON's escapes are TOML's, but for the delete character, which TOML wants escaped.
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _strings(texts: Iterable[str]) -> str:
    return f"[{', '.join(map(_string, texts))}]"


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else _string(name)


def _table(entries: Iterable[tuple[str, str]]) -> str:
    return f"{{ {', '.join(f'{_key(name)} = {value}' for name, value in entries)} }}"


def _node(node: Node) -> Iterator[str]:
    yield f"[node.{node.name}]"
    yield f"kind = {_string(node.kind)}"
    if node.start != REST:
        given = node.start
        yield f"start = {_string(given) if isinstance(given, str) else repr(float(given))}"
    if node.resting:
        yield f"resting = {float(node.resting)!r}"
    if node.acts_on != "linear":
        yield f"acts_on = {_string(node.acts_on)}"
    if node.contested:
        yield "contested = true"


def _side(ends: tuple[tuple[str, float], ...]) -> str:
    if any(count != 1.0 for _, count in ends):
        return _table((name, repr(float(count))) for name, count in ends)
    return _string(ends[0][0]) if len(ends) == 1 else _strings(name for name, _ in ends)


def _edge(edge: Edge) -> Iterator[str]:
    yield f"[edge.{edge.name}]"
    if edge.sources:
        yield f"from = {_side(edge.sources)}"
    if edge.targets:
        yield f"to = {_side(edge.targets)}"
    if edge.onto:
        yield f"onto = {_string(edge.onto)}"
    if len(edge.effects) > 1:
        yield f"contested = {_strings([*edge.effects, *(['absent'] if edge.removable else [])])}"
    else:
        yield f"effect = {_string(edge.effects[0])}"
        if edge.removable:
            yield "contested = true"
    if edge.laws != ("linear",):
        yield f"law = {_string(edge.laws[0]) if len(edge.laws) == 1 else _strings(edge.laws)}"
    if edge.rates:
        single = edge.rates[0][0] == ""
        pairs = [(label, _string(text)) for label, text in edge.rates]
        yield f"rate = {pairs[0][1] if single else _table(pairs)}"
    for word in ("necessary", "reversible"):
        if getattr(edge, word):
            yield f"{word} = true"
    if edge.on != "gain":
        yield f"on = {_string(edge.on)}"
    if edge.acts_on is not None:
        yield f"acts_on = {_string(edge.acts_on)}"
    if edge.delay is not False:
        yield f"delay = {'true' if edge.delay is True else repr(float(edge.delay))}"
        yield f"stages = {edge.stages}"
    if edge.contains:
        yield f"contains = {_strings(f'{larger} > {smaller}' for larger, smaller in edge.contains)}"


def _prior(prior: Prior) -> str:
    match prior:
        case LogNormal(median, fold):
            return f"{{ median = {float(median)!r}, fold = {float(fold)!r} }}"
        case LogUniform(low, high):
            return f"{{ low = {float(low)!r}, high = {float(high)!r} }}"
        case Normal(mean, sd):
            return f"{{ mean = {float(mean)!r}, sd = {float(sd)!r} }}"
        case Uniform(low, high):
            return f'{{ low = {float(low)!r}, high = {float(high)!r}, scale = "linear" }}'
        case Fixed(value):
            return repr(float(value))
        case Tied(to):
            return _string(to)
