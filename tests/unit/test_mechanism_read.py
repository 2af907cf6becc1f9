"""Everything a mechanism.toml may say, and what becomes of it."""

from __future__ import annotations

from pathlib import Path

import pytest

from ruleout.mechanism import parameter_names, read_mechanism
from ruleout.mechanism.types import (
    Edge,
    Fixed,
    LogNormal,
    LogUniform,
    Mechanism,
    Normal,
    Tied,
    Uniform,
)

RELAY = """
title = "Frost response relay"
time_unit = "min"
amount_unit = "fraction"
[node.cold]
kind = "input"
resting = 0.1
[node.sensor]
kind = "switched"
[node.protectant]
kind = "expressed"
start = "free"
[node.store]
kind = "pool"
"""


@pytest.fixture
def read(tmp_path: Path):
    def make(text: str, head: str = RELAY) -> Mechanism:
        path = tmp_path / "mechanism.toml"
        path.write_text(head + text, encoding="utf-8")
        return read_mechanism(path)

    return make


def edge(mechanism: Mechanism, name: str = "e") -> Edge:
    return mechanism.edges[name]


def test_nodes_get_the_defaults_of_their_kind(read) -> None:
    nodes = read("").nodes
    assert list(nodes) == ["cold", "sensor", "protectant", "store"]
    assert nodes["cold"].resting == 0.1
    assert nodes["sensor"].start == "rest"
    assert nodes["protectant"].start == "free"
    assert nodes["store"].start == 0.0


def test_node_keys(read) -> None:
    mechanism = read(
        """
        [node.x]
        kind = "switched"
        acts_on = "saturating"
        contested = true
        basal = 0
        start = 0.25
        """
    )
    x = mechanism.nodes["x"]
    assert (x.acts_on, x.contested, x.start) == ("saturating", True, 0.25)
    assert mechanism.priors == {"x.basal": Fixed(0.0)}


def test_title_and_units(read) -> None:
    mechanism = read("")
    assert mechanism.title == "Frost response relay"
    assert (mechanism.time_unit, mechanism.amount_unit) == ("min", "fraction")
    assert mechanism.lines["node.sensor.kind"] == 9


def test_regulating_edge_has_defaults(read) -> None:
    e = edge(read('[edge.e]\nfrom = "cold"\nto = "sensor"\neffect = "stimulates"'))
    assert e == Edge("e", (("cold", 1.0),), (("sensor", 1.0),), ("stimulates",))


def test_disputes_over_presence_sign_law_and_rate(read) -> None:
    mechanism = read(
        """
        [edge.presence]
        from = "cold"
        to = "sensor"
        effect = "inhibits"
        contested = true
        [edge.sign]
        from = "protectant"
        to = "sensor"
        contested = ["stimulates", "inhibits"]
        law = ["saturating", "hill"]
        contains = ["hill > saturating"]
        [edge.sign_and_presence]
        from = "protectant"
        to = "sensor"
        contested = ["stimulates", "inhibits", "absent"]
        [edge.rates]
        from = "store"
        effect = "converts"
        rate = { first = "k * store", second = "k * store ** 2" }
        contains = "second > first"
        """
    )
    assert edge(mechanism, "presence").removable
    sign = edge(mechanism, "sign")
    assert sign.effects == ("stimulates", "inhibits")
    assert sign.laws == ("saturating", "hill")
    assert sign.contains == (("hill", "saturating"),)
    assert not sign.removable
    assert edge(mechanism, "sign_and_presence").removable
    rates = edge(mechanism, "rates")
    assert rates.rates == (("first", "k * store"), ("second", "k * store ** 2"))
    assert rates.contains == (("second", "first"),)
    assert not rates.targets


@pytest.mark.parametrize(
    ("given", "expected"),
    [
        ('"store"', (("store", 1.0),)),
        ('["store", "protectant"]', (("store", 1.0), ("protectant", 1.0))),
        ("{ store = 2, protectant = 0.5 }", (("store", 2.0), ("protectant", 0.5))),
    ],
)
def test_sources_are_a_name_a_list_or_stoichiometry(read, given, expected) -> None:
    e = edge(read(f'[edge.e]\nfrom = {given}\neffect = "converts"'))
    assert e.sources == expected


def test_material_edges(read) -> None:
    mechanism = read(
        """
        [node.complex]
        kind = "pool"
        [edge.inflow]
        to = "store"
        effect = "converts"
        [edge.exchange]
        from = "store"
        to = "protectant"
        effect = "converts"
        reversible = true
        [edge.joins]
        from = ["store", "protectant"]
        to = "complex"
        effect = "binds"
        [edge.catalysed]
        from = ["store", "sensor"]
        to = ["protectant", "sensor"]
        effect = "converts"
        law = "saturating"
        [edge.fed]
        from = "cold"
        to = "store"
        effect = "converts"
        """
    )
    assert edge(mechanism, "exchange").reversible
    assert edge(mechanism, "joins").effects == ("binds",)
    assert all(e.material for e in mechanism.edges.values())


@pytest.mark.parametrize(("given", "delay"), [("true", True), ("2.5", 2.5), ("false", False)])
def test_delay_is_free_given_or_none(read, given: str, delay: bool | float) -> None:
    head = '[edge.e]\nfrom = "cold"\nto = "sensor"\neffect = "stimulates"\n'
    e = edge(read(f"{head}delay = {given}"))
    assert (e.delay, e.stages) == (delay, 3)


def test_edges_onto_edges(read) -> None:
    mechanism = read(
        """
        [edge.e]
        from = "store"
        effect = "converts"
        law = "saturating"
        [edge.on_rate]
        from = "cold"
        onto = "e"
        effect = "stimulates"
        [edge.on_half]
        from = "cold"
        onto = "e.half"
        effect = "inhibits"
        """
    )
    assert edge(mechanism, "on_rate").onto == "e"
    assert edge(mechanism, "on_half").onto == "e.half"
    assert not edge(mechanism, "on_half").targets


def test_rules_and_claims(read) -> None:
    mechanism = read(
        """
        [edge.a]
        from = "cold"
        to = "sensor"
        effect = "stimulates"
        contested = true
        [edge.b]
        from = "cold"
        to = "protectant"
        contested = ["stimulates", "inhibits", "absent"]
        [rule.one]
        at_most_one = ["a", "b=inhibits"]
        [rule.then]
        implies = ["a", "b"]
        [claim.both]
        text = "Both"
        all_of = ["a", "b=stimulates"]
        [claim.looped]
        loop = "negative"
        """
    )
    assert [(r.kind, r.members) for r in mechanism.rules] == [
        ("at_most_one", ("a", "b=inhibits")),
        ("implies", ("a", "b")),
    ]
    assert [(c.name, c.kind, c.members) for c in mechanism.claims] == [
        ("both", "all_of", ("a", "b=stimulates")),
        ("looped", "loop", ("negative",)),
    ]
    assert mechanism.claims[0].text == "Both"
    assert mechanism.claims[1].text


def test_an_edge_of_a_contested_node_may_stand_in_a_rule(read) -> None:
    mechanism = read(
        """
        [node.x]
        kind = "switched"
        contested = true
        [edge.a]
        from = "x"
        to = "sensor"
        effect = "stimulates"
        [edge.b]
        from = "cold"
        to = "sensor"
        effect = "stimulates"
        contested = true
        [rule.r]
        together = ["a", "b", "x"]
        """
    )
    assert mechanism.rules[0].members == ("a", "b", "x")


def test_all_forms_of_priors_quoted_or_not(read) -> None:
    priors = read(
        """
        [prior]
        "sensor.loss_rate" = { median = 0.2, fold = 10 }
        "a.hill" = { low = 1, high = 4 }
        sensor.basal = { low = 0, high = 1, scale = "linear" }
        "y.offset" = { mean = 0, sd = 1 }
        "kinase.loss_rate" = 0.1
        "a.loss_rate" = "b.loss_rate"
        "a.rate@S 0.02" = 3
        """
    ).priors
    assert priors == {
        "sensor.loss_rate": LogNormal(0.2, 10.0),
        "a.hill": LogUniform(1.0, 4.0),
        "sensor.basal": Uniform(0.0, 1.0),
        "y.offset": Normal(0.0, 1.0),
        "kinase.loss_rate": Fixed(0.1),
        "a.loss_rate": Tied("b.loss_rate"),
        "a.rate@S 0.02": Fixed(3.0),
    }


def test_a_start_may_be_an_expression_of_parameters(read) -> None:
    mechanism = read(
        """
        [node.x]
        kind = "pool"
        start = "sensor.basal / sensor.loss_rate"
        """
    )
    assert mechanism.nodes["x"].start == "sensor.basal / sensor.loss_rate"


@pytest.mark.parametrize(
    ("body", "parts"),
    [
        ('to = "sensor"\neffect = "stimulates"', {"strength"}),
        ('to = "sensor"\neffect = "stimulates"\nlaw = "saturating"', {"strength", "half"}),
        ('to = "sensor"\neffect = "stimulates"\nlaw = "hill"', {"strength", "half", "hill"}),
        ('to = "sensor"\neffect = "inhibits"', {"half"}),
        ('to = "sensor"\neffect = "inhibits"\nlaw = "hill"', {"half", "hill"}),
        ('to = "sensor"\neffect = "inhibits"\non = "loss"', {"strength"}),
        ('to = "sensor"\neffect = "stimulates"\non = "loss"', {"half"}),
        (
            'to = "sensor"\neffect = "stimulates"\nlaw = "hill"\nnecessary = true',
            {"half", "hill"},
        ),
        ('to = "sensor"\ncontested = ["stimulates", "inhibits"]', {"strength", "half"}),
        (
            'to = "sensor"\neffect = "stimulates"\nlaw = ["linear", "hill"]',
            {"strength", "half", "hill"},
        ),
        (
            'to = "sensor"\neffect = "stimulates"\nacts_on = "saturating"',
            {"strength", "target_half"},
        ),
        ('to = "sensor"\neffect = "stimulates"\ndelay = true', {"strength", "delay"}),
        ('to = "sensor"\neffect = "stimulates"\ndelay = 3', {"strength"}),
        ('onto = "base"\neffect = "stimulates"', {"strength"}),
        ('onto = "base"\neffect = "inhibits"', {"half"}),
    ],
)
def test_parameters_of_regulating_edges(read, body: str, parts: set[str]) -> None:
    base = '[edge.base]\nfrom = "store"\neffect = "converts"\n'
    names = parameter_names(read(f'{base}[edge.e]\nfrom = "cold"\n{body}'))
    assert {n for n in names if n.startswith("e.")} == {f"e.{part}" for part in parts}


@pytest.mark.parametrize(
    ("body", "parts"),
    [
        ('from = "store"\neffect = "converts"', {"rate"}),
        ('from = "store"\neffect = "converts"\nlaw = "saturating"', {"rate", "half"}),
        ('from = "store"\neffect = "converts"\nlaw = "hill"', {"rate", "half", "hill"}),
        (
            'from = "store"\nto = "protectant"\neffect = "converts"\nreversible = true',
            {"rate", "rate_back"},
        ),
        ('from = ["store", "protectant"]\nto = "x"\neffect = "binds"', {"rate", "release"}),
        (
            'from = "store"\neffect = "converts"\nrate = "k * store * time / (m + protectant)"',
            {"k", "m"},
        ),
        ('from = "store"\neffect = "converts"\nrate = { a = "k", b = "q" }', {"k", "q"}),
    ],
)
def test_parameters_of_material_edges(read, body: str, parts: set[str]) -> None:
    names = parameter_names(read(f'[node.x]\nkind = "pool"\n[edge.e]\n{body}'))
    assert {n for n in names if n.startswith("e.")} == {f"e.{part}" for part in parts}


def test_parameters_of_nodes(read) -> None:
    names = parameter_names(read('[node.x]\nkind = "switched"\nacts_on = "saturating"'))
    assert list(names) == [
        "sensor.basal",
        "sensor.loss_rate",
        "protectant.basal",
        "protectant.loss_rate",
        "protectant.start",
        "x.basal",
        "x.loss_rate",
        "x.half_gain",
        "x.half_loss",
    ]
    assert names["x.half_gain"].positive
    assert not names["x.basal"].positive
