"""The shared systems with signs as parameters are the equations of the graph calculus."""

from __future__ import annotations

import numpy as np
import pytest

from ruleout.equations.assembly import Assembly, Bend
from ruleout.expressions import const, evaluate, sym
from ruleout.mechanism.types import Fixed, LogUniform
from ruleout.survey.enumeration import enumerate_family, from_label, in_words, label
from ruleout.survey.features import circuits, find_features
from ruleout.survey.sampling import parameter_sets
from ruleout.survey.systems import Member, shared_system, wiring
from ruleout.survey.types import Family
from ruleout.variants.graph import arcs
from ruleout.variants.loops import find_loops

NODES = ("A", "B", "C")


def family(style: str, **more) -> Family:
    return Family(
        title="",
        style=style,
        nodes=NODES,
        output=2,
        source="I",
        drives=((0, 1),),
        allowed=(((-1, 0, 1),) * 3,) * 3,
        starts=(0.1, 0.1, 0.1),
        **more,
    )


def some(of: Family, count: int, seed: int = 1) -> np.ndarray:
    signs = enumerate_family(of)
    return signs[np.random.default_rng(seed).choice(len(signs), count, replace=False)]


@pytest.mark.parametrize("style", ["enzyme", "gene"])
def test_shared_systems_equal_the_calculus_of_mechanisms(style):
    of = family(style)
    rng = np.random.default_rng(2)
    for signs in some(of, 60):
        member = Member(of, signs)
        values = parameter_sets(of, member.parameters, 4, "independent", 1, label(signs))
        made = member.subject(values)
        levels, dose = rng.random((4, 3)), rng.random(4)
        bend = Bend(levels={"I": sym("I"), "constant": const(of.constant)})
        basal_free = frozenset(NODES) if style == "enzyme" else frozenset()
        plain = Assembly(wiring(of, signs), basal_free, bend).equations()
        known = dict(zip(member.parameters, values.T, strict=True))
        known |= dict(zip(NODES, levels.T, strict=True)) | {"I": dose}
        if style == "enzyme":
            known |= {f"{n}.loss_rate": 0.0 for n in NODES}
        expected = [np.broadcast_to(v, 4) for v in evaluate(plain.values(), known)]
        system = shared_system(of, signs != 0)
        known = dict(zip(system.parameters, made.at_input(dose).T, strict=True))
        known |= dict(zip(NODES, levels.T, strict=True))
        got = [np.broadcast_to(v, 4) for v in evaluate(system.rhs, known)]
        # The same sums in another order: a few roundings.
        np.testing.assert_allclose(got, expected, rtol=1e-13, atol=1e-13)


def test_constant_enzymes_oppose_one_sided_regulation_only():
    of = family("enzyme")
    names = {
        name.partition(".")[0]
        for name in Member(of, from_label("0++|00-|000")).parameters
        if name.startswith(("raise", "lower"))
    }
    # A is raised by the input, B by A; C is raised and lowered.
    assert names == {"lower_A", "lower_B"}
    bare = Member(of, from_label("00+|000|000")).parameters
    assert {"raise_B.strength", "lower_B.strength"} <= set(bare)


def test_words_and_labels_go_both_ways():
    of = family("enzyme")
    for signs in some(of, 20):
        np.testing.assert_array_equal(from_label(label(signs)), signs)
    assert in_words(of, from_label("0+-|000|0-0")) == "A -> B; A -| C; C -| B"


def test_loops_agree_with_those_of_the_variants():
    of = family("gene")
    signs = some(of, 60, seed=3)
    features = find_features(of, signs)
    found = find_loops([arcs(wiring(of, s)) for s in signs])
    for sign, word in ((1, "positive"), (-1, "negative")):
        have = features.have[:, features.names.index(f"a {word} loop")]
        expected = [any(x.kind == "feedback" and x.sign == sign for x in loops) for loops in found]
        assert have.tolist() == expected
    for sign, word in ((1, "a coherent"), (-1, "an incoherent")):
        have = features.have[:, features.names.index(f"{word} feed-forward to the output")]
        expected = [
            any(x.kind == "feed-forward" and x.sign == sign and x.nodes[-1] == "C" and
                x.nodes[0] in ("A", "I") for x in loops)
            for loops in found
        ]  # fmt: skip
        assert have.tolist() == expected


def test_a_buffer_is_off_the_shortest_path_and_in_a_negative_loop_with_it():
    of = family("enzyme")
    labels = ["00+|00-|0+0", "0+0|00+|-00", "0+0|00+|000", "00+|00+|0+0"]
    signs = np.array([from_label(text) for text in (*labels, "0++|-+-|++0")])
    features = find_features(of, signs)
    have = features.have[:, features.names.index("a negative loop through a buffer node")]
    assert have[:4].tolist() == [True, False, False, False]


def test_every_cycle_is_listed_once():
    assert sorted(circuits(3)) == [(0,), (0, 1), (0, 1, 2), (0, 2), (0, 2, 1), (1,), (1, 2), (2,)]


class TestParameterSets:
    @pytest.mark.parametrize("method", ["sobol", "latin", "independent"])
    def test_they_fill_their_ranges_evenly_in_the_logarithm(self, method):
        of = family("enzyme", ranges={"A_on_B.strength": LogUniform(1.0, 16.0)})
        sets = parameter_sets(of, ["A_on_B.strength", "A_on_B.target_half"], 1024, method, 1, "key")
        assert sets.shape == (1024, 2)
        assert sets[:, 0].min() >= 1.0
        assert sets[:, 0].max() <= 16.0
        # A share of 1/4 of 1024 draws has sd 14; nets and hypercubes do better.
        quarters = np.histogram(np.log2(sets[:, 0]), bins=4, range=(0.0, 4.0))[0]
        assert np.abs(quarters - 256).max() <= (4 * 14 if method == "independent" else 1)
        assert np.log10(sets[:, 1]).min() >= -3.0
        assert np.log10(sets[:, 1]).max() <= 2.0

    def test_a_fixed_parameter_is_its_value(self):
        of = family("gene", ranges={"hill": Fixed(2.0)})
        sets = parameter_sets(of, ["A_on_B.hill", "A_on_B.half"], 8, "sobol", 1, "key")
        assert (sets[:, 0] == 2.0).all()

    def test_streams_belong_to_seed_and_topology(self):
        of = family("enzyme")
        names = ["A_on_B.strength"]
        first = parameter_sets(of, names, 16, "sobol", 1, "a")
        np.testing.assert_array_equal(first, parameter_sets(of, names, 16, "sobol", 1, "a"))
        assert not np.array_equal(first, parameter_sets(of, names, 16, "sobol", 1, "b"))
        assert not np.array_equal(first, parameter_sets(of, names, 16, "sobol", 2, "a"))
