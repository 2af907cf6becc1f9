"""Rules against the plain product of all choices."""

from itertools import product

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ruleout.errors import InputError
from ruleout.experiments.types import Condition, Experiments, Readout
from ruleout.expressions import sym
from ruleout.mechanism.types import Edge, Mechanism, Node, Rule
from ruleout.variants import expand

EXPERIMENTS = Experiments({"y": Readout("y", sym("x"), "x")}, {"c": Condition("c")})
NODES = {"x": Node("x", "expressed"), "z": Node("z", "expressed")}
NAMES = "abcdef"


def holds(rule: Rule, present: dict[str, str]) -> bool:
    """Return whether a rule is kept, by counting."""
    truths = []
    for member in rule.members:
        name, _, option = member.partition("=")
        truths.append(present[name] != "absent" and option in ("", present[name]))
    if rule.kind == "at_most_one":
        return sum(truths) <= 1
    if rule.kind == "exactly_one":
        return sum(truths) == 1
    if rule.kind == "together":
        return len(set(truths)) == 1
    return not truths[0] or all(truths[1:])


@st.composite
def cases(draw):
    count = draw(st.integers(2, 6))
    edges, options = {}, {}
    for name in NAMES[:count]:
        signed = draw(st.booleans())
        effects = ("stimulates", "inhibits") if signed else ("stimulates",)
        edges[name] = Edge(name, (("z", 1.0),), (("x", 1.0),), effects, removable=True)
        options[name] = (*effects, "absent")
    members = [*edges, *(f"{n}={o}" for n in edges for o in edges[n].effects)]
    rules = []
    for i in range(draw(st.integers(0, 4))):
        kind = draw(st.sampled_from(["at_most_one", "exactly_one", "together", "implies"]))
        size = draw(st.integers(2, 4))
        chosen = draw(st.lists(st.sampled_from(members), min_size=size, max_size=size, unique=True))
        rules.append(Rule(f"r{i}", kind, tuple(chosen)))
    return Mechanism("t", "min", "uM", NODES, edges, tuple(rules)), options


@settings(max_examples=150, deadline=None)
@given(cases())
def test_rules_leave_what_brute_force_leaves(case):
    mechanism, options = case
    expected = set()
    for combination in product(*options.values()):
        present = dict(zip(options, combination, strict=True))
        if all(holds(rule, present) for rule in mechanism.rules):
            expected.add(combination)
    if not 0 < len(expected) <= 512:
        with pytest.raises(InputError) as raised:
            expand(mechanism, EXPERIMENTS)
        assert ("too many" in str(raised.value)) is bool(expected)
        return
    found = expand(mechanism, EXPERIMENTS)
    settled = [
        tuple(o.effect if o.present else "absent" for o in v.choices.values())
        for v in found.variants.values()
    ]
    assert len(settled) == len(expected)
    assert set(settled) == expected
    sizes = [sum(o != "absent" for o in combination) for combination in settled]
    assert sizes == sorted(sizes)
