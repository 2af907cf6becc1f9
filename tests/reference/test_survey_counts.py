"""Counts of small signed networks.

Recomputed independently by Burnside's lemma and by brute force; 16,038 = 3^9 * 22/27 is the number
of three-node networks with a path from input to output that Ma et al. 2009 (Cell 138:760,
doi:10.1016/j.cell.2009.06.013) survey.
"""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest

from ruleout.survey.enumeration import class_sizes, enumerate_family, is_connected, symmetries
from ruleout.survey.features import circuit_signs
from ruleout.survey.types import Family


def family(n: int, loops: bool, *, path: bool = False, **more) -> Family:
    allowed = tuple(
        tuple((-1, 0, 1) if loops or i != j else (0,) for j in range(n)) for i in range(n)
    )
    return Family(
        title="",
        style="enzyme",
        nodes=tuple("ABCD"[:n]),
        output=n - 1,
        source="I" if path else "",
        drives=((0, 1),) if path else (),
        allowed=allowed,
        starts=(0.1,) * n,
        must_reach=path,
        **more,
    )


# nodes, self-edges: labelled, unlabelled, weakly connected unlabelled, without positive circuit,
# without negative circuit, acyclic, with a path from first to last
COUNTS = [
    (2, True, 81, 45, 39, 28, 28, 5, 54),
    (2, False, 9, 6, 5, 7, 7, 5, 6),
    (3, True, 19683, 3411, 3284, 2232, 2264, 109, 16038),
    (3, False, 729, 138, 132, 279, 283, 109, 594),
]


@pytest.mark.parametrize(
    ("n", "loops", "labelled", "unlabelled", "connected", "no_plus", "no_minus", "acyclic", "path"),
    COUNTS,
)
def test_counts_of_networks_are_exact(
    n, loops, labelled, unlabelled, connected, no_plus, no_minus, acyclic, path
):
    signs = enumerate_family(family(n, loops))
    classes = enumerate_family(family(n, loops, relabelled=True))
    plus, minus = circuit_signs(signs)
    assert len(signs) == labelled
    assert len(classes) == unlabelled
    assert int(is_connected(classes).sum()) == connected
    assert int((~plus).sum()) == no_plus
    assert int((~minus).sum()) == no_minus
    assert int((~plus & ~minus).sum()) == acyclic
    assert len(enumerate_family(family(n, loops, path=True))) == path


def test_a_family_that_must_connect_counts_connected_classes_only():
    assert len(enumerate_family(family(3, False, relabelled=True, connected=True))) == 132


@pytest.mark.parametrize(("n", "loops"), [(2, True), (3, False), (3, True)])
def test_classes_cover_the_labelled_set(n, loops):
    of = family(n, loops, relabelled=True)
    classes = enumerate_family(of)
    assert class_sizes(classes, symmetries(of)).sum() == len(enumerate_family(family(n, loops)))


def graph(signs: np.ndarray) -> nx.DiGraph:
    made = nx.DiGraph()
    made.add_nodes_from(range(len(signs)))
    made.add_edges_from((i, j, {"sign": int(signs[i, j])}) for i, j in np.argwhere(signs))
    return made


@pytest.mark.parametrize(("n", "loops", "pick"), [(2, True, 45), (3, False, 138)])
def test_no_two_classes_are_isomorphic(n, loops, pick):
    """networkx, told to match signs, finds the representatives pairwise different."""
    classes = [graph(s) for s in enumerate_family(family(n, loops, relabelled=True))]
    assert len(classes) == pick
    match = nx.isomorphism.categorical_edge_match("sign", 0)
    for a in range(len(classes)):
        for b in range(a):
            assert not nx.is_isomorphic(classes[a], classes[b], edge_match=match)


def test_relabelling_keeps_input_and_output_in_place():
    """With four nodes, input to the first and output from the last, the middle two may change."""
    of = family(4, False, path=True, most_edges=3)
    assert symmetries(of) == [(0, 1, 2, 3), (0, 2, 1, 3)]
    labelled = [graph(s) for s in enumerate_family(of)]
    roles = {0: "input", 1: "", 2: "", 3: "output"}
    for g in labelled:
        nx.set_node_attributes(g, roles, "role")
    edges = nx.isomorphism.categorical_edge_match("sign", 0)
    nodes = nx.isomorphism.categorical_node_match("role", "")
    buckets: dict[str, list[nx.DiGraph]] = {}
    for g in labelled:
        key = str(sorted((roles[a], roles[b], s) for a, b, s in g.edges(data="sign")))
        known = buckets.setdefault(key, [])
        if not any(nx.is_isomorphic(g, k, node_match=nodes, edge_match=edges) for k in known):
            known.append(g)
    classes = enumerate_family(family(4, False, path=True, most_edges=3, relabelled=True))
    assert len(classes) == sum(map(len, buckets.values()))
