import pytest

from ruleout.errors import InputError
from ruleout.variants import expand
from ruleout.variants.types import Option

RELAY = """
[node.u]
kind = "input"
[node.x]
kind = "switched"
[node.z]
kind = "expressed"
[edge.up]
from = "u"
to = "x"
effect = "stimulates"
[edge.xz]
from = "x"
to = "z"
effect = "stimulates"
"""


def contested(*names: str, source: str = "z", target: str = "x") -> str:
    return "".join(
        f'[edge.{name}]\nfrom = "{source}"\nto = "{target}"\neffect = "inhibits"\nlaw = "hill"\n'
        "contested = true\n"
        for name in names
    )


def variants_of(case):
    return expand(case.mechanism, case.experiments).variants


def labels(case) -> list[str]:
    return [variant.label for variant in variants_of(case).values()]


def test_nothing_in_dispute_gives_one_variant(case_of):
    found = expand((case := case_of(RELAY)).mechanism, case.experiments)
    assert list(found.variants) == ["v1"]
    assert found.variants["v1"].choices == {}
    assert found.contains == {"v1": frozenset()}
    assert found.neighbours == {"v1": {}}
    assert found.claims == ()


def test_presence_contests_multiply_and_are_ordered_from_the_smallest_up(case_of):
    case = case_of(RELAY + contested("a", "b"))
    found = variants_of(case)
    assert {name: variant.edges for name, variant in found.items()} == {
        "v1": (),
        "v2": ("a",),
        "v3": ("b",),
        "v4": ("a", "b"),
    }
    assert found["v2"].label == "a=inhibits/hill;b=absent"


def test_names_are_padded_to_equal_width(case_of):
    found = variants_of(case_of(RELAY + contested("a", "b", "c", "d")))
    assert next(iter(found)) == "v01"
    assert list(found)[-1] == "v16"


def test_sign_in_dispute(case_of):
    case = case_of(
        RELAY
        + """
[edge.e]
from = "z"
to = "x"
law = "hill"
contested = ["inhibits", "stimulates", "absent"]
"""
    )
    assert labels(case) == ["e=absent", "e=inhibits/hill", "e=stimulates/hill"]


def test_laws_in_dispute_come_from_the_lowest_up_whatever_their_order(case_of):
    case = case_of(
        RELAY.replace('to = "z"\n', 'to = "z"\nlaw = ["hill", "linear", "saturating"]\n')
    )
    assert labels(case) == [
        "xz=stimulates/linear",
        "xz=stimulates/saturating",
        "xz=stimulates/hill",
    ]


def test_rate_expressions_in_dispute(case_of):
    case = case_of(
        """
[node.s]
kind = "pool"
start = 1.0
[edge.decay]
from = "s"
effect = "converts"
rate = { first = "k * s", second = "k * s ** 2", again = "k * s" }
""",
        '[readout.y]\nof = "s"\n[condition.c]\n',
    )
    assert labels(case) == ["decay=converts/first", "decay=converts/second"]
    assert variants_of(case)["v2"].wiring.edges["decay"].rates == (("second", "k * s ** 2"),)


def test_a_contested_edge_with_one_unlabelled_rate_is_present_or_absent(case_of):
    case = case_of(
        """
[node.s]
kind = "pool"
start = 1.0
[edge.decay]
from = "s"
effect = "converts"
rate = "k * s"
contested = true
""",
        '[readout.y]\nof = "s"\n[condition.c]\n',
    )
    assert labels(case) == ["decay=absent", "decay=converts"]


def test_a_contested_node_goes_with_its_edges(case_of):
    case = case_of(
        RELAY
        + """
[node.w]
kind = "expressed"
contested = true
[edge.xw]
from = "x"
to = "w"
effect = "stimulates"
[edge.wx]
from = "w"
to = "x"
effect = "inhibits"
contested = true
[edge.w_on_xz]
from = "w"
onto = "xz"
effect = "inhibits"
"""
    )
    found = variants_of(case)
    assert labels(case) == [
        "w=absent;wx=absent",
        "w=present;wx=absent",
        "w=present;wx=inhibits/linear",
    ]
    assert set(found["v1"].wiring.nodes) == {"u", "x", "z"}
    assert set(found["v1"].wiring.edges) == {"up", "xz"}
    assert found["v1"].wiring.absent == {"w"}
    assert set(found["v2"].wiring.edges) == {"up", "xz", "xw", "w_on_xz"}


def test_an_edge_onto_an_absent_edge_is_absent(case_of):
    case = case_of(
        RELAY
        + contested("a")
        + """
[edge.onto_a]
from = "u"
onto = "a"
effect = "inhibits"
contested = true
"""
    )
    assert labels(case) == [
        "a=absent;onto_a=absent",
        "a=inhibits/hill;onto_a=absent",
        "a=inhibits/hill;onto_a=inhibits/linear",
    ]


def test_an_edge_onto_a_half_goes_where_the_law_has_none(case_of):
    case = case_of(
        RELAY.replace('to = "z"\n', 'to = "z"\nlaw = ["linear", "saturating"]\n')
        + """
[edge.shift]
from = "u"
onto = "xz.half"
effect = "stimulates"
contested = true
"""
    )
    assert labels(case) == [
        "xz=stimulates/linear;shift=absent",
        "xz=stimulates/saturating;shift=absent",
        "xz=stimulates/saturating;shift=stimulates/linear",
    ]


def test_laws_under_which_a_dividing_edge_is_alike_are_one(case_of):
    case = case_of(
        RELAY
        + """
[edge.e]
from = "z"
to = "x"
law = ["linear", "saturating", "hill"]
contested = ["stimulates", "inhibits"]
"""
    )
    assert sorted(labels(case)) == [
        "e=inhibits/hill",
        "e=inhibits/linear",
        "e=stimulates/hill",
        "e=stimulates/linear",
        "e=stimulates/saturating",
    ]


@pytest.mark.parametrize(
    ("rule", "expected"),
    [
        ('at_most_one = ["a", "b", "c"]', [(), ("a",), ("b",), ("c",)]),
        ('exactly_one = ["a", "b", "c"]', [("a",), ("b",), ("c",)]),
        ('together = ["a", "c"]', [(), ("b",), ("a", "c"), ("a", "b", "c")]),
        (
            'implies = ["a", "b"]',
            [(), ("b",), ("c",), ("a", "b"), ("b", "c"), ("a", "b", "c")],
        ),
    ],
)
def test_rules(case_of, rule, expected):
    case = case_of(RELAY + contested("a", "b", "c") + f"[rule.r]\n{rule}\n")
    assert [variant.edges for variant in variants_of(case).values()] == expected


def test_rules_speak_of_options_and_of_what_stands(case_of):
    """A rule may name a law or a sign; an edge whose node is gone does not stand."""
    case = case_of(
        RELAY
        + """
[node.w]
kind = "expressed"
contested = true
[edge.wx]
from = "w"
to = "x"
law = ["saturating", "hill"]
contested = ["stimulates", "absent"]
[rule.r]
implies = ["w", "wx=hill"]
"""
    )
    assert labels(case) == ["w=absent;wx=absent", "w=present;wx=stimulates/hill"]


def test_contradictory_rules_are_named_without_the_innocent_ones(case_of):
    case = case_of(
        RELAY
        + contested("a", "b", "c")
        + """
[rule.fine]
at_most_one = ["b", "c"]
[rule.one]
exactly_one = ["a", "b"]
[rule.both]
together = ["a", "b"]
"""
    )
    with pytest.raises(InputError, match="'one' and 'both' contradict each other") as raised:
        variants_of(case)
    assert "fine" not in str(raised.value)
    assert raised.value.exit_status == 2


def test_exactly_512_variants_are_allowed(case_of):
    assert len(variants_of(case_of(RELAY + contested(*"abcdefghi")))) == 512


def test_more_than_512_are_refused_with_the_product_and_a_way_out(case_of):
    case = case_of(RELAY + contested(*"abcdefghij"))
    with pytest.raises(InputError, match="1,024 combinations") as raised:
        variants_of(case)
    assert "a (2) x b (2) x" in str(raised.value)
    # Two of ten leave 3 * 2^8 = 768, three leave 4 * 2^7 = 512.
    assert 'at_most_one = ["a", "b", "c"]' in str(raised.value)
    assert "at most 512" in str(raised.value)


def test_the_suggested_rule_is_enough(case_of):
    rule = '[rule.r]\nat_most_one = ["a", "b", "c"]\n'
    assert len(variants_of(case_of(RELAY + contested(*"abcdefghij") + rule))) == 512


def test_a_large_product_is_fine_where_rules_cut_it(case_of):
    names = [f"e{i}" for i in range(40)]
    rule = f"[rule.r]\nat_most_one = {names}\n".replace("'", '"')
    assert len(variants_of(case_of(RELAY + contested(*names) + rule))) == 41


def test_a_huge_product_is_refused_without_being_enumerated(case_of):
    case = case_of(RELAY + contested(*(f"e{i}" for i in range(60))))
    with pytest.raises(InputError, match="too many variants"):
        variants_of(case)


def test_a_contradiction_among_many_contests_is_found_at_once(case_of):
    names = [f"e{i}" for i in range(40)]
    rules = """
[rule.one]
exactly_one = ["e0", "last"]
[rule.both]
together = ["e0", "last"]
"""
    with pytest.raises(InputError, match="'one' and 'both' contradict"):
        variants_of(case_of(RELAY + contested(*names, "last") + rules))


def test_rules_too_tangled_to_walk_through_are_refused(case_of, monkeypatch):
    """The walk is bounded, so that no file can make it hang."""
    monkeypatch.setattr("ruleout.variants.expansion.MAX_STEPS", 50)
    with pytest.raises(InputError, match="too many variants"):
        variants_of(case_of(RELAY + contested(*"abcdefgh")))


def test_options_read_as_written():
    assert str(Option(False)) == "absent"
    assert str(Option(True)) == "present"
    assert str(Option(True, "stimulates", "hill")) == "stimulates/hill"
    assert str(Option(True, "converts", None, "first")) == "converts/first"
