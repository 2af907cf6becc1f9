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
[edge.xz]
from = "x"
to = "z"
effect = "stimulates"
"""


def brake(name: str, more: str = "contested = true") -> str:
    return f'[edge.{name}]\nfrom = "z"\nto = "x"\neffect = "inhibits"\nlaw = "hill"\n{more}\n'


def neighbours(case) -> dict[str, dict[str, list[str]]]:
    found = expand(case.mechanism, case.experiments)
    label = {
        name: "+".join(n for n, o in variant.choices.items() if o.present) or "-"
        for name, variant in found.variants.items()
    }
    return {
        label[name]: {choice: [label[n] for n in names] for choice, names in near.items()}
        for name, near in found.neighbours.items()
    }


def test_single_choices_enter_one_by_one(case_of):
    assert neighbours(case_of(BASE + brake("a") + brake("b"))) == {
        "-": {"a": ["a"], "b": ["b"]},
        "a": {"b": ["a+b"]},
        "b": {"a": ["a+b"]},
        "a+b": {},
    }


def test_choices_that_rules_tie_enter_together(case_of):
    rule = '[rule.r]\ntogether = ["a", "b"]\n'
    assert neighbours(case_of(BASE + brake("a") + brake("b") + rule)) == {
        "-": {"a+b": ["a+b"]},
        "a+b": {},
    }


def test_rivals_that_exclude_each_other_are_neighbours(case_of):
    """Leaving a out first is no step on the way: what a variant contains is no challenge to it."""
    rule = '[rule.r]\nat_most_one = ["a", "b"]\n'
    assert neighbours(case_of(BASE + brake("a") + brake("b") + rule)) == {
        "-": {"a": ["a"], "b": ["b"]},
        "a": {"b": ["b"]},
        "b": {"a": ["a"]},
    }


def test_other_signs_and_higher_laws_are_neighbours_lower_laws_are_not(case_of):
    edge = brake("a", 'contested = ["inhibits", "stimulates"]').replace(
        'effect = "inhibits"\nlaw = "hill"', 'law = ["saturating", "hill"]'
    )
    found = expand((case := case_of(BASE + edge)).mechanism, case.experiments)
    named = {v.label: v.name for v in found.variants.values()}
    near = {label: found.neighbours[name] for label, name in named.items()}
    assert near["a=inhibits/hill"] == {
        "a=stimulates/saturating": (named["a=stimulates/saturating"],),
        "a=stimulates/hill": (named["a=stimulates/hill"],),
    }
    assert "a=inhibits/hill" in near["a=inhibits/saturating"]


def test_a_factor_that_cannot_fade_is_challenged_by_its_absence(case_of):
    edge = brake("a", "contested = true\nnecessary = true").replace("inhibits", "stimulates")
    assert neighbours(case_of(BASE + edge)) == {"-": {"a": ["a"]}, "a": {"a=absent": ["-"]}}


NODE = """
[node.w]
kind = "expressed"
contested = true
[edge.xw]
from = "x"
to = "w"
effect = "stimulates"
[edge.wz]
from = "w"
to = "z"
effect = "stimulates"
contested = true
"""


def test_a_node_without_influence_is_no_step_on_the_way(case_of):
    """A node whose only way out is contested enters together with that edge."""
    found = neighbours(case_of(BASE + NODE, readout="z"))
    assert found["-"] == {"w+wz": ["w+wz"]}
    assert found["w"] == {"wz": ["w+wz"]}


def test_what_cannot_reach_a_readout_is_no_challenge(case_of):
    edge = '[edge.down]\nfrom = "u"\nto = "z"\neffect = "stimulates"\ncontested = true\n'
    case = case_of(BASE + edge)
    assert neighbours(case) == {"-": {}, "down": {}}
    assert expand(case.mechanism, case.experiments).out_of_reach == ("down",)
    assert neighbours(case_of(BASE + edge, readout="z"))["-"] == {"down": ["down"]}
