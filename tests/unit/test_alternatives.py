"""What a variant is checked against."""

from __future__ import annotations

from ruleout.variants import alternatives, expand

CHAIN = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.y]
kind = "pool"
[edge.u_on_x]
from = "u"
to = "x"
effect = "stimulates"
[edge.x_to_y]
from = "x"
to = "y"
effect = "converts"
rate = "k * x"
contested = true
[edge.y_on_x]
from = "y"
to = "x"
effect = "inhibits"
contested = true
[rule.way_back]
implies = ["y_on_x", "x_to_y"]
"""


def named(variants, name):
    return {v.edges: n for n, v in variants.variants.items()}[name]


def test_the_largest_variant_is_let_in_beside_the_neighbours(case_of):
    """An edge that needs another is out of reach of single steps; the largest variant has both."""
    case = case_of(CHAIN)
    variants = expand(case.mechanism, case.experiments)
    plain, both = named(variants, ()), named(variants, ("x_to_y", "y_on_x"))
    found = alternatives(variants, plain)
    assert found["x_to_y+y_on_x"] == (both,)
    assert variants.neighbours[plain].keys() <= found.keys()


def test_the_largest_variant_itself_meets_no_smaller_one(case_of):
    case = case_of(CHAIN)
    variants = expand(case.mechanism, case.experiments)
    assert alternatives(variants, named(variants, ("x_to_y", "y_on_x"))) == {}


def test_rivals_meet_the_largest_of_the_other_side(case_of):
    rivals = CHAIN.replace(
        '[rule.way_back]\nimplies = ["y_on_x", "x_to_y"]',
        '[rule.one]\nat_most_one = ["y_on_x", "x_to_y"]',
    )
    case = case_of(rivals)
    variants = expand(case.mechanism, case.experiments)
    one, other = named(variants, ("x_to_y",)), named(variants, ("y_on_x",))
    met = {name for group in alternatives(variants, one).values() for name in group}
    assert other in met
