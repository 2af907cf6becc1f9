"""Claims: which variants each structural hypothesis holds in."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from ruleout.errors import InputError, did_you_mean
from ruleout.mechanism.types import Claim, Edge, Mechanism
from ruleout.variants.contests import ABSENT, matches, onto_half
from ruleout.variants.expansion import where
from ruleout.variants.loops import say_feedback
from ruleout.variants.types import ClaimSplit, Contest, Loop, Option, Variant


@dataclass(frozen=True, slots=True)
class _Draft:
    """A claim before merging; ``rank`` decides whose name a merged claim bears."""

    name: str
    text: str
    holds_in: frozenset[str]
    rank: int


def _species(ends: Iterable[tuple[str, float]]) -> str:
    return " + ".join(name if n == 1 else f"{n:g} {name}" for name, n in ends)


def say_edge(edge: Edge, option: Option) -> str:
    """Return an edge as a plain clause, such as ``protectant inhibits sensor``."""
    effect = option.effect or edge.effects[0]
    sources, targets = _species(edge.sources), _species(edge.targets)
    if effect == "binds":
        clause = f"{sources} bind to {targets}"
    elif effect == "converts":
        if not sources:
            clause = f"{targets} flows in"
        elif not targets:
            clause = f"{sources} is lost"
        else:
            clause = f"{sources} is converted to {targets}"
    elif edge.onto is None:
        clause = f"{sources} {effect} {targets}"
    else:
        up, down = ("raises", "lowers") if onto_half(edge) else ("strengthens", "weakens")
        clause = f"{sources} {up if effect == 'stimulates' else down} {edge.onto}"
    return clause


def _say_effects(edge: Edge, options: Sequence[Option]) -> str:
    effects = dict.fromkeys(option.effect for option in options)
    return " or ".join(say_edge(edge, Option(True, effect)) for effect in effects)


def _law_phrase(option: Option) -> str:
    if option.rate:
        return f" with the rate '{option.rate}'"
    law = "Hill" if option.law == "hill" else option.law
    return f" with the {law} law" if law else ""


def _choice_claims(
    mechanism: Mechanism, contest: Contest, variants: Sequence[Variant]
) -> list[_Draft]:
    """Return the claims of one contest: presence, then each effect, law or rate in dispute."""
    edge = mechanism.edges.get(contest.name)
    present = [o for o in contest.options if o.present]

    def holds(label: str) -> frozenset[str]:
        return frozenset(v.name for v in variants if matches(edge, v.choices[contest.name], label))

    if edge is None:
        return [_Draft(contest.name, f"{contest.name} takes part", holds("present"), 0)]
    drafts: list[_Draft] = []
    everywhere = len(holds("present")) == len(variants)
    if ABSENT in contest.options or not everywhere:
        drafts.append(_Draft(contest.name, _say_effects(edge, present), holds("present"), 0))
    for part in ("effect", "law", "rate"):
        values = list(dict.fromkeys(getattr(o, part) for o in present))
        if len(values) < 2:
            continue
        for value in values:
            alike = [o for o in present if getattr(o, part) == value]
            clause = _say_effects(edge, alike)
            if part != "effect":
                clause += _law_phrase(alike[0])
            drafts.append(_Draft(f"{contest.name}={value}", clause, holds(value), 0))
    return drafts


def _loop_claims(variants: Sequence[Variant]) -> list[_Draft]:
    """Return a claim for each feedback loop that some but not all variants have."""
    closed: dict[Loop, list[Variant]] = {}
    for variant in variants:
        for loop in variant.loops:
            if loop.kind == "feedback":
                closed.setdefault(loop, []).append(variant)
    alike = Counter(loop.nodes for loop in closed)
    drafts: list[_Draft] = []
    for loop, having in closed.items():
        if len(having) == len(variants):
            continue
        word = {1: "positive", -1: "negative", 0: "sign-changing"}[loop.sign]
        name = "loop:" + ">".join(loop.nodes)
        if alike[loop.nodes] > 1:
            name += f"[{word}:{'+'.join(loop.edges)}]"
        text = f"the {word} feedback loop {say_feedback(loop, having[0].wiring.edges)} is closed"
        drafts.append(_Draft(name, text, frozenset(v.name for v in having), 2))
    return drafts


def _truth(mechanism: Mechanism, claim: Claim, variant: Variant) -> bool:
    if claim.kind == "loop":
        sign = 1 if claim.members[0] == "positive" else -1
        return any(loop.kind == "feedback" and loop.sign == sign for loop in variant.loops)

    def member(text: str) -> bool:
        name, _, label = text.partition("=")
        if name not in mechanism.nodes and name not in mechanism.edges:
            known = [*mechanism.nodes, *mechanism.edges]
            raise InputError(
                f"'{name}' is neither a node nor an edge{did_you_mean(name, known)}",
                where=where(mechanism, f"claim.{claim.name}"),
            )
        settled = variant.wiring.edges.get(name)
        option = variant.choices.get(name)
        if option is None:
            if settled is None:
                option = Option(name in variant.wiring.nodes)
            else:
                rate = settled.rates[0][0] if settled.rates else ""
                law = None if settled.rates else settled.laws[0]
                option = Option(True, settled.effects[0], law, rate)
        return matches(mechanism.edges.get(name), option, label)

    held = [member(text) for text in claim.members]
    return {"any_of": any(held), "all_of": all(held), "none_of": not any(held)}[claim.kind]


def _merge(drafts: Sequence[_Draft], count: int) -> tuple[ClaimSplit, ...]:
    """Merge claims that hold in the same variants; those settled by the rules stay apart."""
    groups: dict[object, list[_Draft]] = {}
    for draft in drafts:
        settled = len(draft.holds_in) in (0, count)
        groups.setdefault(draft.name if settled else draft.holds_in, []).append(draft)
    merged = []
    for group in groups.values():
        first = min(group, key=lambda d: d.rank)
        # A sentence of the user's own says it best, whatever the claim is called.
        text = next((d.text for d in group if d.rank == 1 and d.text), first.text)
        holds = first.holds_in
        merged.append(
            ClaimSplit(
                first.name,
                text,
                holds,
                bool(holds) if len(holds) in (0, count) else None,
                tuple(d.name for d in group if d is not first),
            )
        )
    return tuple(merged)


def find_claims(
    mechanism: Mechanism, contests: Sequence[Contest], variants: Sequence[Variant]
) -> tuple[ClaimSplit, ...]:
    """Return the user's claims and those of every contested choice and feedback loop.

    Claims that hold in the same variants are merged: a choice's name goes before the user's, the
    user's before a loop's.
    """
    own = [
        _Draft(
            claim.name,
            claim.text,
            frozenset(v.name for v in variants if _truth(mechanism, claim, v)),
            1,
        )
        for claim in mechanism.claims
    ]
    choices = [d for c in contests for d in _choice_claims(mechanism, c, variants)]
    return _merge([*own, *choices, *_loop_claims(variants)], len(variants))
