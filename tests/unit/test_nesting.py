import pytest

from ruleout.errors import InputError
from ruleout.variants import expand

BASE = """
[node.u]
kind = "input"
[node.x]
kind = "expressed"
[node.z]
kind = "expressed"
[edge.up]
from = "u"
to = "x"
effect = "stimulates"
"""


def edge(name: str, **fields: str) -> str:
    lines = [f"[edge.{name}]"]
    fields = {"from": '"z"', "to": '"x"', "effect": '"stimulates"', "contested": "true"} | {
        key.rstrip("_"): value for key, value in fields.items()
    }
    return "\n".join([*lines, *(f"{k} = {v}" for k, v in fields.items() if v)]) + "\n"


def nesting(case) -> set[tuple[str, str]]:
    """Return pairs of labels (larger, smaller)."""
    found = expand(case.mechanism, case.experiments)
    label = {name: variant.label for name, variant in found.variants.items()}
    return {(label[a], label[b]) for a, below in found.contains.items() for b in below}


@pytest.mark.parametrize(
    "fields",
    [
        {},
        {"law": '"saturating"'},
        {"law": '"hill"'},
        {"effect": '"inhibits"'},
        {"effect": '"inhibits"', "law": '"hill"'},
        {"effect": '"inhibits"', "on": '"loss"'},
        {"on": '"loss"'},
        {"onto": '"up"', "to": ""},
        {"onto": '"up"', "to": "", "effect": '"inhibits"', "law": '"hill"'},
        {"effect": '"converts"'},
        {"effect": '"converts"', "reversible": "true"},
        {"effect": '"converts"', "law": '"saturating"'},
        {"effect": '"converts"', "rate": '"k * z / (half + z)"'},
        {"effect": '"converts"', "rate": '"a * z + b * z ** 2"'},
    ],
)
def test_an_edge_that_can_fade_contains_its_absence(case_of, fields):
    pairs = nesting(case_of(BASE + edge("e", **fields)))
    assert len(pairs) == 1
    ((_, smaller),) = pairs
    assert smaller == "e=absent"


@pytest.mark.parametrize(
    "fields",
    [
        {"law": '"hill"', "necessary": "true"},
        {"effect": '"converts"', "rate": '"exp(-k) * z"'},
        {"effect": '"converts"', "rate": '"0.1 * z"'},
    ],
)
def test_an_edge_that_cannot_fade_contains_nothing(case_of, fields):
    assert nesting(case_of(BASE + edge("e", **fields))) == set()


@pytest.mark.parametrize(
    ("fields", "prior"),
    [
        ({}, '"e.strength" = 0.1'),
        ({"effect": '"inhibits"'}, '"e.half" = 0.1'),
        ({"onto": '"up"', "to": ""}, '"e.strength" = 0.1'),
        ({"effect": '"converts"'}, '"e.rate" = 0.1'),
        ({"effect": '"converts"', "reversible": "true"}, '"e.rate_back" = 0.1'),
        ({"effect": '"converts"', "rate": '"k * z"'}, '"e.k" = 0.1'),
        ({}, '"e.strength" = "up.strength"'),
        ({}, '"up.strength" = "e.strength"'),
    ],
)
def test_a_fixed_or_tied_strength_prevents_nesting(case_of, fields, prior):
    assert nesting(case_of(BASE + edge("e", **fields) + f"[prior]\n{prior}\n")) == set()


def test_a_tie_between_edges_that_go_together_does_not_prevent_it(case_of):
    case = case_of(
        BASE
        + edge("a")
        + edge("b", to='"z"', from_='"x"')
        + '[rule.r]\ntogether = ["a", "b"]\n[prior]\n"a.strength" = "b.strength"\n'
    )
    assert nesting(case) == {
        ("a=stimulates/linear;b=stimulates/linear", "a=absent;b=absent"),
    }


def test_a_sign_contest_nests_nothing_but_absence(case_of):
    fields = {"effect": "", "contested": '["stimulates", "inhibits", "absent"]', "law": '"hill"'}
    assert nesting(case_of(BASE + edge("e", **fields))) == {
        ("e=stimulates/hill", "e=absent"),
        ("e=inhibits/hill", "e=absent"),
    }


def test_laws_contain_their_limits(case_of):
    fields = {"law": '["linear", "saturating", "hill"]', "contested": ""}
    assert nesting(case_of(BASE + edge("e", **fields))) == {
        ("e=stimulates/saturating", "e=stimulates/linear"),
        ("e=stimulates/hill", "e=stimulates/saturating"),
        ("e=stimulates/hill", "e=stimulates/linear"),
    }


@pytest.mark.parametrize(
    ("prior", "lost"),
    [
        ('"e.half" = 0.5', {("saturating", "linear"), ("hill", "linear")}),
        ('"e.strength" = 0.5', {("saturating", "linear"), ("hill", "linear")}),
        ('"e.hill" = 2', {("hill", "saturating"), ("hill", "linear")}),
        ('"e.hill" = 1', set()),
        ('"e.half" = "x.basal"', {("saturating", "linear"), ("hill", "linear")}),
        ('"e.hill" = "x.basal"', {("hill", "saturating"), ("hill", "linear")}),
    ],
)
def test_fixed_parameters_prevent_law_limits(case_of, prior, lost):
    fields = {"law": '["linear", "saturating", "hill"]', "contested": ""}
    every = {("saturating", "linear"), ("hill", "saturating"), ("hill", "linear")}
    pairs = nesting(case_of(BASE + edge("e", **fields) + f"[prior]\n{prior}\n"))
    short = {tuple(label.rpartition("/")[2] for label in pair) for pair in pairs}
    assert short == every - lost


def test_rate_contests_nest_only_what_is_declared(case_of):
    fields = {
        "effect": '"converts"',
        "rate": '{ first = "k * z", mixed = "k * z + m * z ** 2", other = "k" }',
        "contested": "",
        "contains": '"mixed > first"',
    }
    assert nesting(case_of(BASE + edge("e", **fields))) == {
        ("e=converts/mixed", "e=converts/first")
    }


def test_declared_nesting_goes_on_to_what_the_smaller_one_contains(case_of):
    """Necessary to absent is declared; hill to saturating at hill = 1 is a law's limit."""
    fields = {
        "law": '["saturating", "hill"]',
        "necessary": "true",
        "contains": '"saturating > absent"',
    }
    assert nesting(case_of(BASE + edge("e", **fields))) == {
        ("e=stimulates/saturating", "e=absent"),
        ("e=stimulates/hill", "e=stimulates/saturating"),
        ("e=stimulates/hill", "e=absent"),
    }


def test_declarations_in_a_circle_are_refused(case_of):
    fields = {
        "effect": '"converts"',
        "rate": '{ first = "k * z", other = "k" }',
        "contested": "",
        "contains": '["first > other", "other > first"]',
    }
    with pytest.raises(InputError, match="would contain each other"):
        nesting(case_of(BASE + edge("e", **fields)))


def test_nesting_is_transitive_over_several_contests(case_of):
    case = case_of(BASE + edge("a") + edge("b", law='["linear", "saturating"]'))
    found = expand(case.mechanism, case.experiments)
    largest = list(found.variants)[-1]
    assert found.contains[largest] == set(found.variants) - {largest}
    for name, below in found.contains.items():
        assert name not in below
        assert all(found.contains[b] <= below for b in below)


def test_what_is_contained_comes_first(case_of):
    case = case_of(BASE + edge("b", law='["hill", "saturating"]') + edge("a"))
    found = expand(case.mechanism, case.experiments)
    order = list(found.variants)
    for name, below in found.contains.items():
        assert all(order.index(b) < order.index(name) for b in below)


NODE = """
[node.w]
kind = "expressed"
contested = true
[edge.xw]
from = "x"
to = "w"
effect = "stimulates"
law = "hill"
necessary = true
[edge.wz]
from = "w"
to = "z"
effect = "stimulates"
"""


def test_a_node_fades_with_the_edges_that_leave_it(case_of):
    """What acts on the node alone need not fade: a necessary edge to it is no obstacle."""
    assert nesting(case_of(BASE + NODE)) == {("w=present", "w=absent")}


def test_a_node_cannot_fade_behind_a_fixed_edge(case_of):
    assert nesting(case_of(BASE + NODE + '[prior]\n"wz.strength" = 1.0\n')) == set()


def test_a_node_that_is_read_cannot_fade(case_of):
    assert nesting(case_of(BASE + NODE, readout="x + w")) == set()


def test_edges_onto_what_goes_need_not_fade(case_of):
    case = case_of(
        BASE
        + edge("e")
        + edge("modifier", onto='"e"', to="", from_='"u"')
        + '[prior]\n"modifier.strength" = 2.0\n'
    )
    assert nesting(case) == {
        ("e=stimulates/linear;modifier=absent", "e=absent;modifier=absent"),
        ("e=stimulates/linear;modifier=stimulates/linear", "e=absent;modifier=absent"),
    }
