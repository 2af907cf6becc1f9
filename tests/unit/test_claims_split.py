import pytest

from ruleout.errors import InputError
from ruleout.mechanism.types import Claim
from ruleout.variants import expand

BASE = """
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
BRAKE = """
[edge.brake]
from = "z"
to = "x"
effect = "inhibits"
law = "hill"
contested = true
"""
SHORTCUT = """
[edge.shortcut]
from = "u"
to = "z"
effect = "stimulates"
contested = true
"""


def split(case):
    return {claim.name: claim for claim in expand(case.mechanism, case.experiments).claims}


def test_a_contested_edge_is_a_claim_under_its_own_name(case_of):
    found = split(case_of(BASE + SHORTCUT))
    assert list(found) == ["shortcut"]
    assert found["shortcut"].text == "u stimulates z"
    assert found["shortcut"].holds_in == {"v2"}
    assert found["shortcut"].settled is None


def test_a_loop_that_an_edge_closes_is_merged_with_the_edge(case_of):
    found = split(case_of(BASE + BRAKE))
    assert list(found) == ["brake"]
    assert found["brake"].also == ("loop:x>z",)


def test_a_loop_that_needs_two_contested_edges_is_a_claim_of_its_own(case_of):
    text = BASE.replace('to = "z"\n', 'to = "z"\ncontested = true\n') + BRAKE
    found = split(case_of(text))
    assert set(found) == {"xz", "brake", "loop:x>z"}
    assert found["loop:x>z"].holds_in == {"v4"}
    assert found["loop:x>z"].text == "the negative feedback loop x -> z -| x is closed"


def test_signs_in_dispute_are_claims_and_so_are_the_loops_they_make(case_of):
    text = BASE + BRAKE.replace('effect = "inhibits"\n', "").replace(
        "contested = true", 'contested = ["inhibits", "stimulates"]'
    )
    found = split(case_of(text))
    assert set(found) == {"brake=inhibits", "brake=stimulates"}
    assert found["brake=inhibits"].holds_in == {"v1"}
    assert found["brake=inhibits"].also == ("loop:x>z[negative:xz+brake]",)
    assert found["brake=stimulates"].also == ("loop:x>z[positive:xz+brake]",)


def test_laws_and_rates_in_dispute_are_claims(case_of):
    text = BASE.replace('to = "z"\n', 'to = "z"\nlaw = ["linear", "hill"]\n')
    found = split(case_of(text))
    assert {name: claim.holds_in for name, claim in found.items()} == {
        "xz=linear": {"v1"},
        "xz=hill": {"v2"},
    }
    assert found["xz=hill"].text == "x stimulates z with the Hill law"


def test_edges_that_rules_tie_together_are_one_claim(case_of):
    rule = '[rule.r]\ntogether = ["brake", "shortcut"]\n'
    found = split(case_of(BASE + BRAKE + SHORTCUT + rule))
    assert list(found) == ["brake"]
    assert found["brake"].also == ("shortcut", "loop:x>z")


def test_the_users_claim_lends_its_words_to_the_edge_it_agrees_with(case_of):
    claim = '[claim.feedback]\ntext = "It brakes itself"\nloop = "negative"\n'
    found = split(case_of(BASE + BRAKE + SHORTCUT + claim))
    assert set(found) == {"brake", "shortcut"}
    assert found["brake"].text == "It brakes itself"
    assert "feedback" in found["brake"].also


@pytest.mark.parametrize(
    ("kind", "expected"),
    [
        ("any_of", {"v2", "v3", "v4"}),
        ("all_of", {"v4"}),
        ("none_of", {"v1"}),
    ],
)
def test_claims_over_members(case_of, kind, expected):
    claim = f'[claim.mine]\n{kind} = ["brake", "shortcut"]\n'
    assert split(case_of(BASE + BRAKE + SHORTCUT + claim))["mine"].holds_in == expected


def test_claims_may_speak_of_options_and_of_what_is_not_in_dispute(case_of):
    claim = '[claim.mine]\nall_of = ["brake=inhibits", "up", "x"]\n'
    found = split(case_of(BASE + BRAKE + claim))
    assert "mine" in found["brake"].also


def test_what_holds_everywhere_or_nowhere_is_settled_by_the_rules(case_of):
    more = """
[rule.r]
at_most_one = ["brake", "shortcut"]
[claim.both]
all_of = ["brake", "shortcut"]
[claim.not_both]
none_of = ["xz=absent"]
"""
    text = BASE + BRAKE + SHORTCUT + more.replace("xz=absent", "brake=absent")
    found = split(case_of(text))
    assert found["both"].settled is False
    assert found["both"].holds_in == frozenset()
    every = split(case_of(BASE + BRAKE + SHORTCUT + '[claim.c]\nany_of = ["up"]\n'))
    assert every["c"].settled is True


def test_settled_claims_are_not_merged_with_each_other(case_of):
    claims = '[claim.c]\nany_of = ["up"]\n[claim.d]\nany_of = ["xz"]\n'
    found = split(case_of(BASE + BRAKE + claims))
    assert found["c"].settled is True
    assert found["d"].settled is True


def test_an_unknown_member_is_refused(case_of):
    case = case_of(BASE + BRAKE)
    wrong = (Claim("mine", "", "any_of", ("brakes",)),)
    mechanism = case.mechanism.__class__(
        **{f: getattr(case.mechanism, f) for f in case.mechanism.__slots__ if f != "claims"},
        claims=wrong,
    )
    with pytest.raises(InputError, match="did you mean 'brake'"):
        expand(mechanism, case.experiments)


def test_a_contested_node_is_a_claim(case_of):
    node = """
[node.w]
kind = "expressed"
contested = true
[edge.wz]
from = "w"
to = "z"
effect = "stimulates"
"""
    found = split(case_of(BASE + node))
    assert found["w"].text == "w takes part"
    assert found["w"].holds_in == {"v2"}


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ('from = "u"\nonto = "xz"\neffect = "stimulates"', "u strengthens xz"),
        ('from = "u"\nonto = "xz"\neffect = "inhibits"', "u weakens xz"),
        ('from = "u"\nonto = "xz.half"\neffect = "stimulates"', "u raises xz.half"),
        ('from = "z"\nto = "p"\neffect = "converts"', "z is converted to p"),
        ('from = { z = 2 }\nto = "p"\neffect = "converts"', "2 z is converted to p"),
        ('from = "p"\neffect = "converts"', "p is lost"),
        ('to = "p"\neffect = "converts"', "p flows in"),
        ('from = ["z", "q"]\nto = "p"\neffect = "binds"', "z + q bind to p"),
    ],
)
def test_edges_are_said_in_plain_words(case_of, fields, text):
    base = BASE.replace('to = "z"\n', 'to = "z"\nlaw = "hill"\n')
    base += '[node.p]\nkind = "pool"\n[node.q]\nkind = "pool"\n'
    found = split(case_of(base + f"[edge.e]\n{fields}\ncontested = true\n"))
    assert found["e"].text == text
