"""Interaction graphs as GraphML, out and in."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import networkx as nx
import pytest

from ruleout.case import Case, read_case
from ruleout.errors import InputError
from ruleout.exchange import read_graphml, write_graphml
from ruleout.exchange.text import mechanism_text
from ruleout.mechanism import read_mechanism
from ruleout.mechanism.types import Mechanism

DEMOS = Path(__file__).parents[2] / "mechanisms_demo"

MECHANISM = """
title = "All \\"kinds\\" of edges"
time_unit = "h"
amount_unit = "nM"
[node.signal]
kind = "input"
resting = 0.5
[node.switch]
kind = "switched"
acts_on = "saturating"
[node.gene]
kind = "expressed"
start = "free"
contested = true
[node.store]
kind = "pool"
start = 2.0
[node.pair]
kind = "pool"
start = "0.1 * make.rate"
[edge.on]
from = "signal"
to = "switch"
effect = "stimulates"
law = ["saturating", "hill"]
[edge.sign]
from = "gene"
to = "switch"
contested = ["stimulates", "inhibits", "absent"]
law = "hill"
on = "loss"
[edge.lift]
from = "gene"
onto = "on.half"
effect = "inhibits"
law = "saturating"
contested = true
[edge.express]
from = "switch"
to = "gene"
effect = "stimulates"
delay = true
stages = 5
[edge.make]
to = "store"
effect = "converts"
[edge.join]
from = { store = 2 }
to = "pair"
effect = "binds"
[edge.use]
from = "pair"
effect = "converts"
rate = { first = "k * pair", second = "k * pair ** 2" }
contains = "second > first"
[rule.some]
at_most_one = ["sign", "lift"]
[claim.mine]
text = "Sign or lift"
any_of = ["sign=inhibits", "lift"]
[claim.loop]
text = "A loop"
loop = "negative"
[prior]
"on.strength" = { low = 0.1, high = 10.0 }
"gene.loss_rate" = 0.1
"store_like" = 1.0
""".replace('"store_like" = 1.0\n', '"make.rate" = { median = 1.0, fold = 3.0 }\n')


@pytest.fixture
def case(tmp_path: Path) -> Case:
    (tmp_path / "mechanism.toml").write_text(MECHANISM)
    (tmp_path / "experiments.toml").write_text(
        "[readout.gene]\nof = 'gene'\n[condition.step]\ninput.signal = 1.0\n"
    )
    (tmp_path / "data.csv").write_text(
        "condition,time,readout,value\nstep,0,gene,1\nstep,1,gene,2\n"
    )
    return read_case(tmp_path)


def read_back(text: str, folder: Path) -> Mechanism:
    (folder / "back.toml").write_text(text)
    return read_mechanism(folder / "back.toml")


def plain(mechanism: Mechanism) -> dict[str, Any]:
    """Everything but line numbers, in no order."""
    bare = replace(mechanism, lines={})
    return {name: getattr(bare, name) for name in Mechanism.__dataclass_fields__}


def test_a_mechanism_survives_being_written_as_text(case: Case, tmp_path: Path) -> None:
    assert plain(read_back(mechanism_text(case.mechanism), tmp_path)) == plain(case.mechanism)


@pytest.mark.parametrize("demo", ["frost_relay", "lantern_gene", "salt_sense", "spore_wake"])
def test_demos_survive_being_written_as_text(demo: str, tmp_path: Path) -> None:
    mechanism = read_mechanism(DEMOS / demo / "mechanism.toml")
    assert plain(read_back(mechanism_text(mechanism), tmp_path)) == plain(mechanism)


def test_the_whole_graph_comes_back_with_everything_in_dispute(case: Case, tmp_path: Path) -> None:
    """Nodes and edges survive; rules, claims and priors are no part of a graph."""
    path = tmp_path / "graph.graphml"
    write_graphml(case, None, path)
    found = read_back(read_graphml(path), tmp_path)
    assert dict(found.nodes) == dict(case.mechanism.nodes)
    assert dict(found.edges) == dict(case.mechanism.edges)
    assert (found.title, found.time_unit, found.amount_unit) == ('All "kinds" of edges', "h", "nM")


def test_a_variant_has_its_own_edges_with_contested_ones_marked(tmp_path: Path) -> None:
    frost = read_case(DEMOS / "frost_relay")
    path = tmp_path / "graph.graphml"
    write_graphml(frost, "v2", path)
    graph = nx.read_graphml(path)
    edges = {d["edge"]: (s, t, d["effect"], d["contested"]) for s, t, d in graph.edges(data=True)}
    contested = {name for name, (*_, marked) in edges.items() if marked}
    assert edges["cold_on_sensor"] == ("cold", "sensor", "stimulates", False)
    assert len(contested) == 1
    assert contested < {"protectant_on_sensor", "protectant_on_kinase", "cold_on_protectant"}
    assert graph.nodes["cold"]["kind"] == "input"
    assert graph.graph["variant"] == "v2"


def test_a_graph_without_attributes_becomes_a_plain_mechanism(tmp_path: Path) -> None:
    path = tmp_path / "drawn.graphml"
    nx.write_graphml(nx.DiGraph([("stress", "gene one"), ("gene one", "protein")]), path)
    found = read_back(read_graphml(path), tmp_path)
    assert {name: node.kind for name, node in found.nodes.items()} == {
        "stress": "input",
        "gene_one": "expressed",
        "protein": "expressed",
    }
    assert set(found.edges) == {"stress_on_gene_one", "gene_one_on_protein"}
    assert {e.effects for e in found.edges.values()} == {("stimulates",)}


def test_words_of_other_drawings_are_understood(tmp_path: Path) -> None:
    graph = nx.DiGraph()
    graph.add_edge("a", "b", effect="activation", law="hill", contested=True)
    graph.add_edge("b", "a", effect="-1")
    path = tmp_path / "drawn.graphml"
    nx.write_graphml(graph, path)
    found = read_back(read_graphml(path), tmp_path)
    assert found.edges["a_on_b"].effects == ("stimulates",)
    assert found.edges["a_on_b"].laws == ("hill",)
    assert found.edges["a_on_b"].removable
    assert found.edges["b_on_a"].effects == ("inhibits",)


@pytest.mark.parametrize(
    ("make", "named"),
    [
        (lambda g: g.add_edge("a", "b", effect="stimulate"), "did you mean 'stimulates'"),
        (lambda g: g.add_edge("a", "b", law="cubic"), "cubic"),
        (lambda g: g.add_node("a", kind="protein"), "kind 'protein'"),
        (lambda g: g.add_node("a", kind="pool", resting="much"), "a number is expected"),
        (lambda g: g.add_edge("a", "b", rate="__import__('os')", effect="converts"), "told as"),
    ],
)
def test_attributes_that_mean_nothing_are_refused(make: Any, named: str, tmp_path: Path) -> None:
    graph = nx.DiGraph()
    make(graph)
    path = tmp_path / "drawn.graphml"
    nx.write_graphml(graph, path)
    with pytest.raises(InputError, match=named):
        read_graphml(path)


@pytest.mark.parametrize(
    ("text", "named"),
    [
        ("", "empty"),
        ("no xml", "no GraphML"),
        ("<graphml/>", "no GraphML"),
        ('<!DOCTYPE x [<!ENTITY a "aa">]><graphml/>', "document type"),
    ],
)
def test_other_files_are_refused(text: str, named: str, tmp_path: Path) -> None:
    path = tmp_path / "x.graphml"
    path.write_text(text)
    with pytest.raises(InputError, match=named):
        read_graphml(path)


def test_an_undirected_graph_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "x.graphml"
    nx.write_graphml(nx.Graph([("a", "b")]), path)
    with pytest.raises(InputError, match="undirected"):
        read_graphml(path)
