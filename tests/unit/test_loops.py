from ruleout.variants import expand
from ruleout.variants.graph import arcs
from ruleout.variants.loops import MAX_LOOPS, find_loops, say_feedback

NODES = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.y]
kind = "expressed"
[node.z]
kind = "expressed"
[edge.up]
from = "u"
to = "x"
effect = "stimulates"
"""


def edge(name: str, source: str, target: str, effect: str = "stimulates", more: str = "") -> str:
    to = f'to = "{target}"' if target else ""
    return f'[edge.{name}]\nfrom = "{source}"\n{to}\neffect = "{effect}"\n{more}\n'


def only(case):
    (variant,) = expand(case.mechanism, case.experiments).variants.values()
    return variant


def loops(case, kind: str = "feedback") -> list[tuple[tuple[str, ...], int]]:
    return [(loop.nodes, loop.sign) for loop in only(case).loops if loop.kind == kind]


def test_a_negative_loop(case_of):
    text = NODES + edge("xy", "x", "y") + edge("yz", "y", "z") + edge("zx", "z", "x", "inhibits")
    variant = only(case_of(text))
    (loop,) = [loop for loop in variant.loops if loop.kind == "feedback"]
    assert (loop.nodes, loop.edges, loop.sign) == (("x", "y", "z"), ("xy", "yz", "zx"), -1)
    assert say_feedback(loop, variant.wiring.edges) == "x -> y -> z -| x"


def test_two_inhibitions_make_a_positive_loop(case_of):
    text = NODES + edge("xy", "x", "y", "inhibits") + edge("yx", "y", "x", "inhibits")
    assert loops(case_of(text)) == [(("x", "y"), 1)]


def test_effects_are_net_effects_through_the_loss_as_well(case_of):
    text = NODES + edge("xy", "x", "y", "inhibits", 'on = "loss"') + edge("yx", "y", "x")
    assert loops(case_of(text)) == [(("x", "y"), -1)]


def test_autoregulation_is_a_loop(case_of):
    assert loops(case_of(NODES + edge("xx", "x", "x", "inhibits"))) == [(("x",), -1)]


def test_parallel_edges_make_loops_of_their_own(case_of):
    text = NODES + edge("a", "x", "y") + edge("b", "x", "y", "inhibits") + edge("yx", "y", "x")
    found = [loop for loop in only(case_of(text)).loops if loop.kind == "feedback"]
    assert [(loop.edges, loop.sign) for loop in found] == [(("a", "yx"), 1), (("b", "yx"), -1)]


def test_an_onto_edge_takes_the_sign_of_its_target(case_of):
    """z inhibits the inhibition of y by x, so it raises y: with y -> z the loop is positive."""
    text = (
        NODES
        + edge("xy", "x", "y", "inhibits")
        + edge("yz", "y", "z")
        + edge("brake", "z", "", "inhibits", 'onto = "xy"')
    )
    variant = only(case_of(text))
    found = [loop for loop in variant.loops if loop.kind == "feedback"]
    assert [(loop.nodes, loop.sign) for loop in found] == [(("y", "z"), 1)]
    assert say_feedback(found[0], variant.wiring.edges) == "y -> z -o y"


def test_raising_a_half_reverses_the_sign(case_of):
    text = (
        NODES
        + edge("xy", "x", "y", "stimulates", 'law = "hill"')
        + edge("yz", "y", "z")
        + edge("shift", "z", "", "stimulates", 'onto = "xy.half"')
    )
    assert loops(case_of(text)) == [(("y", "z"), -1)]


MATERIAL = """
[node.a]
kind = "pool"
start = 1.0
[node.b]
kind = "pool"
[node.c]
kind = "pool"
"""
READ_A = '[readout.y]\nof = "a"\n[condition.k]\n'


def material(name: str, fields: str) -> str:
    return f"[edge.{name}]\n{fields}\n"


def test_a_conversion_lowers_its_source_and_raises_its_target(case_of):
    text = MATERIAL + material("ab", 'from = "a"\nto = "b"\neffect = "converts"')
    found = {(arc.source, arc.target, arc.sign) for arc in arcs(only(case_of(text, READ_A)).wiring)}
    assert found == {("a", "b", 1)}


def test_a_reversible_conversion_or_a_binding_is_no_loop_by_itself(case_of):
    text = (
        MATERIAL
        + material("ab", 'from = "a"\nto = "b"\neffect = "converts"\nreversible = true')
        + material("join", 'from = ["a", "b"]\nto = "c"\neffect = "binds"')
    )
    variant = only(case_of(text, READ_A))
    assert all(len(set(loop.edges)) == len(loop.edges) for loop in variant.loops)
    assert all(set(loop.edges) == {"ab", "join"} for loop in variant.loops)


def test_a_conversion_cycle_is_positive_and_product_inhibition_negative(case_of):
    """That b slows the use of a, from which it is made, is the same process and no second loop."""
    text = (
        MATERIAL
        + material("ab", 'from = "a"\nto = "b"\neffect = "converts"')
        + material("ba", 'from = "b"\nto = "a"\neffect = "converts"')
        + material("brake", 'from = "b"\nonto = "ab"\neffect = "inhibits"')
    )
    found = [loop for loop in only(case_of(text, READ_A)).loops if loop.kind == "feedback"]
    assert {(loop.edges, loop.sign) for loop in found} == {
        (("ab", "ba"), 1),  # a -> b -> a
        (("brake",), -1),  # b slows its own making
    }


def test_autocatalysis_in_a_rate_expression_is_a_loop(case_of):
    text = MATERIAL + material("grow", 'to = "b"\neffect = "converts"\nrate = "k * b"')
    assert loops(case_of(text, READ_A)) == [(("b",), 1)]


def test_a_rate_whose_slope_changes_sign_makes_a_loop_of_no_fixed_sign(case_of):
    text = MATERIAL + material("grow", 'to = "b"\neffect = "converts"\nrate = "k * b * (1 - b)"')
    assert loops(case_of(text, READ_A)) == [(("b",), 0)]


def test_a_rate_that_falls_with_its_product_makes_a_negative_loop(case_of):
    rate = 'rate = "k / (1 + b / m)"'
    text = MATERIAL + material("make", f'to = "b"\neffect = "converts"\n{rate}')
    # Own depletion is no feedback, and neither can be told from it by sign alone.
    assert loops(case_of(text, READ_A)) == []


def test_feed_forward_pairs_are_coherent_or_not(case_of):
    text = NODES + edge("xy", "x", "y") + edge("yz", "y", "z", "inhibits") + edge("xz", "x", "z")
    assert loops(case_of(text), "feed-forward") == [(("x", "z"), -1)]
    text = text.replace('effect = "inhibits"', 'effect = "stimulates"')
    assert loops(case_of(text), "feed-forward") == [(("x", "z"), 1)]


def test_an_edge_onto_the_direct_path_makes_a_feed_forward(case_of):
    text = NODES + edge("xy", "x", "y") + edge("xz", "x", "z")
    text += edge("brake", "z", "", "inhibits", 'onto = "xy"')
    assert loops(case_of(text), "feed-forward") == [(("x", "y"), -1)]


def test_a_modifier_and_the_reaction_it_modifies_are_no_two_routes(case_of):
    text = MATERIAL + '[node.u]\nkind = "input"\n'
    text += material("ab", 'from = "a"\nto = "b"\neffect = "converts"')
    text += material("speed", 'from = "u"\nonto = "ab"\neffect = "stimulates"')
    assert loops(case_of(text, READ_A), "feed-forward") == []


def test_parallel_edges_are_no_feed_forward(case_of):
    text = NODES + edge("a", "x", "y") + edge("b", "x", "y", "inhibits")
    assert loops(case_of(text), "feed-forward") == []


def test_a_variant_has_the_loops_its_edges_close(case_of):
    text = NODES + edge("xy", "x", "y") + edge("yx", "y", "x", "inhibits", "contested = true")
    found = expand((case := case_of(text)).mechanism, case.experiments).variants
    assert [len(variant.loops) for variant in found.values()] == [0, 1]


def test_a_dense_graph_does_not_hang(case_of):
    names = [f"n{i}" for i in range(12)]
    text = "".join(f'[node.{n}]\nkind = "expressed"\n' for n in names)
    text += "".join(edge(f"{a}_{b}", a, b) for a in names for b in names if a != b)
    variant = only(case_of(text, '[readout.y]\nof = "n0"\n[condition.k]\n'))
    assert 0 < len(variant.loops) <= 2 * MAX_LOOPS


def test_no_arcs_no_loops():
    assert find_loops([(), ()]) == [(), ()]
