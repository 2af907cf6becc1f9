"""Random mechanisms: structure found by the calculus against brute force and plain numbers."""

from dataclasses import replace
from itertools import combinations, permutations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from ruleout.equations import build, setups
from ruleout.experiments.types import Condition, Experiments, InputCourse, Readout
from ruleout.expressions import differentiate, evaluate, sym, symbols
from ruleout.mechanism import parameter_names
from ruleout.mechanism.types import Edge, Mechanism, Node, Rule
from ruleout.variants import expand
from ruleout.variants.contests import has_half
from ruleout.variants.graph import arcs
from ruleout.variants.nesting import strengths

QUICK = settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
EXPERIMENTS = Experiments(
    {"y": Readout("y", sym("x0"), "x0")},
    {"c": Condition("c", {"u": InputCourse((0.0,), (1.0,))})},
)


@st.composite
def mechanisms(draw, contested: int = 0, material: bool = True) -> Mechanism:
    """Return a mechanism of one input, two or three regulated nodes and two pools."""
    regulated = [f"x{i}" for i in range(draw(st.integers(2, 3)))]
    nodes = {"u": Node("u", "input")}
    for name in regulated:
        kind = draw(st.sampled_from(["switched", "expressed"]))
        acts_on = (
            draw(st.sampled_from(["linear", "saturating"])) if kind == "switched" else "linear"
        )
        nodes[name] = Node(name, kind, acts_on=acts_on)
    pools = ["a", "b"] if material else []
    nodes |= {name: Node(name, "pool", start=1.0) for name in pools}
    edges: dict[str, Edge] = {}
    laws = st.sampled_from(["linear", "saturating", "hill"])

    def regulating(name: str, **more: object) -> Edge:
        law = draw(laws)
        return Edge(
            name,
            ((draw(st.sampled_from([n for n in nodes if n not in pools])), 1.0),),
            () if "onto" in more else ((draw(st.sampled_from(regulated)), 1.0),),
            (draw(st.sampled_from(["stimulates", "inhibits"])),),
            (law,),
            on="gain" if "onto" in more else draw(st.sampled_from(["gain", "loss"])),
            **more,
        )

    for i in range(draw(st.integers(1, 4))):
        edges[f"r{i}"] = regulating(f"r{i}")
    for name in pools[: draw(st.integers(0, 2))]:
        other = pools[1 - pools.index(name)]
        law = draw(st.sampled_from(["linear", "saturating"]))
        back = law == "linear" and draw(st.booleans())
        edges[f"m_{name}"] = Edge(
            f"m_{name}", ((name, 1.0),), ((other, 1.0),), ("converts",), (law,), reversible=back
        )
    if material and draw(st.booleans()):
        edges["flow"] = Edge(
            "flow", (), (("a", 1.0),), ("converts",), rates=(("", "k * x0 / (m + b)"),)
        )
    if draw(st.booleans()):
        target = draw(st.sampled_from(list(edges)))
        half = has_half(edges[target]) and draw(st.booleans())
        edges["o"] = regulating("o", onto=f"{target}.half" if half else target)
    for i in range(contested):
        name = f"k{i}"
        edge = regulating(name)
        edges[name] = Edge(
            name, edge.sources, edge.targets, edge.effects, edge.laws, on=edge.on, removable=True
        )
    return Mechanism("t", "min", "uM", nodes, edges)


def first_model(mechanism: Mechanism):
    variant = next(iter(expand(mechanism, EXPERIMENTS).variants.values()))
    return build(variant, mechanism, EXPERIMENTS)


def random_point(names, rng) -> dict[str, float]:
    # Hill exponents are 1 or more, as under the default prior.
    return {name: rng.uniform(0.15, 0.95) + name.endswith(".hill") for name in sorted(names)}


@QUICK
@given(mechanisms(), st.integers(0, 2**32 - 1))
def test_arcs_have_the_signs_of_the_jacobian(mechanism, seed):
    """Off the diagonal, the sum of the arcs' signs bounds the sign of d(dX/dt)/dY."""
    model = first_model(mechanism)
    rng = np.random.default_rng(seed)
    at = random_point(symbols(*model.rhs) | set(model.states) | {"u"}, rng)
    signs: dict[tuple[str, str], set[int]] = {}
    for arc in arcs(model.variant.wiring):
        signs.setdefault((arc.source, arc.target), set()).add(arc.sign)
    for source in (*model.states, "u"):
        slopes = evaluate(differentiate(model.rhs, source), at)
        for target, slope in zip(model.states, slopes, strict=True):
            found = signs.get((source, target), set())
            if source == target:
                continue
            if not found:
                assert slope == pytest.approx(0.0, abs=1e-14)
            elif found == {1}:
                assert slope > 0.0
            elif found == {-1}:
                assert slope < 0.0


@QUICK
@given(mechanisms())
def test_every_symbol_is_accounted_for(mechanism):
    """Parameters are just what the equations use, and all are known to the mechanism."""
    model = first_model(mechanism)
    used = symbols(*model.rhs) - set(model.states) - set(mechanism.nodes) - {"time"}
    assert set(model.parameters) == used
    assert list(model.parameters) == [n for n in parameter_names(mechanism) if n in used]


@QUICK
@given(mechanisms())
def test_feedback_loops_are_those_of_brute_force(mechanism):
    model = first_model(mechanism)
    found = arcs(model.variant.wiring)
    by_hand = set()
    names = sorted({arc.source for arc in found} | {arc.target for arc in found})
    for size in range(1, len(names) + 1):
        for chosen in combinations(names, size):
            for rest in permutations(chosen[1:]):
                nodes = (chosen[0], *rest)
                paths = [()]
                for pair in zip(nodes, (*nodes[1:], nodes[0]), strict=True):
                    steps = [arc for arc in found if (arc.source, arc.target) == pair]
                    paths = [(*path, arc) for path in paths for arc in steps]
                for path in paths:
                    edges = tuple(arc.edge for arc in path)
                    if len({arc.process for arc in path}) == len(edges):
                        sign = int(np.prod([arc.sign for arc in path]))
                        by_hand.add((nodes, edges, sign))
    loops = [loop for loop in model.variant.loops if loop.kind == "feedback"]
    assert {(loop.nodes, loop.edges, loop.sign) for loop in loops} == by_hand
    assert len(loops) == len(by_hand)


@QUICK
@given(mechanisms(contested=3), st.integers(0, 2**32 - 1))
def test_a_larger_variant_at_its_limit_is_the_smaller_one(mechanism, seed):
    """Strengths at zero, halves at infinity: the rates of both agree at a random point."""
    found = expand(mechanism, EXPERIMENTS)
    rng = np.random.default_rng(seed)
    names = list(found.variants)
    assert len(names) == 8
    assert sum(len(below) for below in found.contains.values()) == 3**3 - 2**3
    larger = names[int(rng.integers(1, len(names)))]
    big = build(found.variants[larger], mechanism, EXPERIMENTS)
    at = random_point(symbols(*big.rhs) | set(big.states), rng)
    for smaller in sorted(found.contains[larger]):
        small = build(found.variants[smaller], mechanism, EXPERIMENTS)
        gone = set(found.variants[larger].edges) - set(found.variants[smaller].edges)
        limit = dict(at)
        for name in gone:
            edge = found.variants[larger].wiring.edges[name]
            for parameter in strengths(edge, mechanism.nodes):
                limit[parameter] = 1e300 if parameter.endswith(".half") else 0.0
        assert evaluate(big.rhs, limit) == pytest.approx(evaluate(small.rhs, at), rel=1e-12)


@QUICK
@given(mechanisms(material=False), st.data())
def test_a_law_at_its_limit_is_the_lower_law(mechanism, data):
    """Saturating and linear agree far below the half, Hill and saturating at hill = 1.

    Terms of order one deviate by source / half, 1e-10.
    """
    chosen = data.draw(
        st.sampled_from([e.name for e in mechanism.edges.values() if e.onto is None])
    )
    edge = replace(mechanism.edges[chosen], laws=("linear", "saturating", "hill"))
    edges = {name: e for name, e in mechanism.edges.items() if e.onto is None} | {chosen: edge}
    case = replace(mechanism, edges=edges)
    found = expand(case, EXPERIMENTS)
    models = {v.choices[chosen].law: build(v, case, EXPERIMENTS) for v in found.variants.values()}
    name_of = {law: model.variant.name for law, model in models.items()}
    largest = models["hill"]
    at = random_point(symbols(*largest.rhs) | set(largest.states), np.random.default_rng(1))
    far = {f"{chosen}.hill": 1.0}
    lowest = models["linear"]
    if "saturating" in models:
        middle = evaluate(models["saturating"].rhs, at)
        assert evaluate(largest.rhs, at | far) == pytest.approx(middle, rel=1e-9, abs=1e-9)
        far |= {f"{chosen}.half": 1e10, f"{chosen}.strength": 1e10 * at[f"{chosen}.strength"]}
        assert name_of["linear"] in found.contains[name_of["saturating"]]
    assert evaluate(largest.rhs, at | far) == pytest.approx(
        evaluate(lowest.rhs, at), rel=1e-6, abs=1e-9
    )
    assert name_of["linear"] in found.contains[name_of["hill"]]


@QUICK
@given(mechanisms(contested=3), st.data())
def test_neighbours_are_those_of_the_definition(mechanism, data):
    """N neighbours V if it is not in V and no other such variant is a part of the way to N."""
    names = [name for name in mechanism.edges if name.startswith("k")]
    kind = data.draw(st.sampled_from(["at_most_one", "together", "implies"]))
    case = replace(mechanism, rules=(Rule("r", kind, tuple(names[:2])),))
    # Everything is read, so that every choice can make a difference.
    nodes = [n for n, node in case.nodes.items() if node.kind != "input"]
    readouts = {n: Readout(n, sym(n), n) for n in nodes}
    found = expand(case, Experiments(readouts, EXPERIMENTS.conditions))
    chosen = {n: frozenset(v.edges) for n, v in found.variants.items()}
    for v, mine in chosen.items():
        rivals = {n: mine ^ theirs for n, theirs in chosen.items() if n not in found.contains[v]}
        del rivals[v]
        expected = {
            n for n, way in rivals.items() if not any(other < way for other in rivals.values())
        }
        near = found.neighbours[v]
        assert {n for group in near.values() for n in group} == expected
        for choice, group in near.items():
            assert all(set(choice.split("+")) == chosen[n] - mine for n in group)


@QUICK
@given(mechanisms(contested=2))
def test_neighbours_and_claims_are_well_formed(mechanism):
    """No variant neighbours itself or what it contains; only split claims are open."""
    found = expand(mechanism, EXPERIMENTS)
    for name in found.variants:
        near = {n for names in found.neighbours[name].values() for n in names}
        assert name not in near
        assert near.isdisjoint(found.contains[name])
    for claim in found.claims:
        assert claim.holds_in <= set(found.variants)
        assert (claim.settled is None) == (0 < len(claim.holds_in) < len(found.variants))


@QUICK
@given(mechanisms(), st.data())
def test_removed_and_clamped_nodes_cost_nothing(mechanism, data):
    """No state, no parameter of their own, and the other rates are those at zero or the clamp."""
    model = first_model(mechanism)
    node = data.draw(st.sampled_from(model.states))
    rng = np.random.default_rng(0)
    at = random_point(symbols(*model.rhs) | set(model.states) | {"u"}, rng)
    for condition, level in (
        (Condition("c", remove={node: float("-inf")}), 0.0),
        (Condition("c", clamp={node: 0.4}), 0.4),
    ):
        experiments = Experiments(EXPERIMENTS.readouts, {"c": condition})
        (setup,) = setups(model, experiments, {"c": [0.0, 1.0]})
        assert node not in setup.system.states
        assert not any(name.startswith(f"{node}.") for name in setup.system.parameters)
        here = at | {"input:u": at["u"], f"clamp:{node}": level, node: level}
        got = dict(zip(setup.system.states, evaluate(setup.system.rhs, here), strict=True))
        full = dict(zip(model.states, evaluate(model.rhs, here), strict=True))
        for name, value in got.items():
            # Hill laws see at least 1e-12 in place of zero.
            assert value == pytest.approx(full[name], rel=1e-9, abs=1e-9)
