"""What a motif family is, and what a survey of it holds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Final, Literal

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.mechanism.types import Fixed, LogUniform

Signs = NDArray[np.int8]
Style = Literal["enzyme", "gene"]
Method = Literal["sobol", "latin", "independent"]
Range = LogUniform | Fixed

DEFAULT_RANGES: Final[Mapping[Style, Mapping[str, Range]]] = {
    "enzyme": {
        "strength": LogUniform(0.1, 10.0),
        "target_half": LogUniform(1e-3, 100.0),
    },
    "gene": {
        "basal": LogUniform(0.01, 1.0),
        "loss_rate": Fixed(1.0),
        "strength": LogUniform(0.1, 100.0),
        "half": LogUniform(0.1, 10.0),
        "hill": LogUniform(1.0, 4.0),
    },
}
"""Ranges of parameters by their part of the name, where a family file gives none."""


@dataclass(frozen=True, slots=True)
class Family:
    """All wirings that share nodes, a style of rate laws and limits on their edges.

    Attributes
    ----------
    title : str
    style : {"enzyme", "gene"}
        ``enzyme``: nodes are switched and every edge is a saturable term of its own on the gain
        (stimulates) or the loss (inhibits) of its target; a node that is regulated on one side
        only is opposed by a constant enzyme, one that is not regulated has one on each side.
        ``gene``: nodes are expressed, stimulating edges add Hill terms to the gain and inhibiting
        ones divide it.
    nodes : tuple of str, length n
        The nodes that move, in file order: rows and columns of sign matrices.
    output : int
        Index of the output node.
    source : str
        Name of the input, empty if there is none.
    drives : tuple of (int, int)
        Target node and sign of each edge from the input; these are in every wiring.
    allowed : (n, n) nested tuples of tuple of int
        ``allowed[i][j]``: the signs that the edge from node i to node j may have, 0 for absent.
    fewest_edges, most_edges : int
        Limits on the number of edges between the nodes (those from the input not counted).
    must_reach : bool
        Whether a directed path must lead from the input to the output.
    connected : bool
        Whether the wiring must hang together, directions aside.
    relabelled : bool
        Whether wirings that differ only in the names of interchangeable nodes count as one.
    ranges : mapping of str to LogUniform or Fixed
        By part (``strength``) or by full name (``A_on_B.strength``), the latter first.
    constant : float
        Amount of each constant enzyme.
    starts : tuple of float, length n
        Where the flow to rest begins.
    """

    title: str
    style: Style
    nodes: tuple[str, ...]
    output: int
    source: str
    drives: tuple[tuple[int, int], ...]
    allowed: tuple[tuple[tuple[int, ...], ...], ...]
    fewest_edges: int = 0
    most_edges: int = 25
    must_reach: bool = True
    connected: bool = False
    relabelled: bool = False
    ranges: Mapping[str, Range] = field(default_factory=dict)
    constant: float = 0.5
    starts: tuple[float, ...] = ()

    def range_of(self, name: str) -> Range:
        """Return the range of the parameter ``name``, such as ``A_on_B.strength``."""
        if name in self.ranges:
            return self.ranges[name]
        part = name.rpartition(".")[2]
        return self.ranges.get(part, DEFAULT_RANGES[self.style][part])

    @property
    def output_name(self) -> str:
        """Name of the output node."""
        return self.nodes[self.output]

    def edge_name(self, source: int, target: int) -> str:
        """Return the name of the edge between two nodes."""
        return f"{self.nodes[source]}_on_{self.nodes[target]}"


@dataclass(frozen=True, slots=True)
class Settings:
    """How a survey is run.

    Attributes
    ----------
    seed : int
        Root of every random number.
    sets : int
        Parameter sets per topology.
    method : {"sobol", "latin", "independent"}
        How they are spread over the ranges.
    sample : int or None
        Survey a random subset of this many topologies; None surveys them all.
    workers : int
        Processes.
    level : float
        Confidence level of intervals and bounds.
    working : int
        Fewest sets that must show a behaviour for a topology to count as working.
    """

    seed: int = 1
    sets: int = 1024
    method: Method = "sobol"
    sample: int | None = None
    workers: int = 1
    level: float = 0.95
    working: int = 1


@dataclass(frozen=True, slots=True, eq=False)
class Survey:
    """What a family can do.

    Attributes
    ----------
    topologies : DataFrame
        One row per topology and behaviour: ``topology`` (signs row by row, ``+-0``), ``edges`` (in
        words), ``n_edges``, ``behaviour``, ``sets``, ``judged`` (sets whose solves succeeded),
        ``shown`` (sets that show the behaviour), ``robustness`` (shown / judged), ``low``, ``high``
        (exact binomial interval), ``works``, ``minimal``, ``class_size`` (wirings it stands for).
    features : DataFrame
        One row per behaviour and structural feature: ``behaviour``, ``feature``, ``in_working``,
        ``working``, ``share_working``, ``in_all``, ``all``, ``share_all``, ``enrichment``,
        ``share_robustness`` (share of all showing sets whose topology has the feature).
    principles : DataFrame
        One row per candidate principle: ``behaviour``, ``kind``, ``statement``, ``literals``,
        ``covered`` (topologies the statement speaks of), ``counterexamples``,
        ``counterexample_list`` (the most robust first), ``covered_sets``, ``showing_sets``,
        ``bound`` (upper bound on the share of the covered parameter space, pooled over
        topologies, in which an unseen counterexample could hide), ``bound_one`` (the same within
        the worst single topology, all held at once), ``status``.
    examples : DataFrame
        The best sets of each working topology: ``topology``, ``behaviour``, ``set``, one column
        per measure of any behaviour, ``parameters`` (``NAME=value;...``).
    traces : DataFrame
        What the best sets of the most robust topologies do: ``topology``, ``behaviour``, ``set``,
        ``line``, ``axis`` (time or input), ``x``, ``output``.
    links : DataFrame
        Pairs of working topologies that differ by one edge: ``behaviour``, ``topology``,
        ``other``.
    meta : mapping
        Title, settings, counts, version and what a sample could have missed.
    """

    topologies: pd.DataFrame
    features: pd.DataFrame
    principles: pd.DataFrame
    examples: pd.DataFrame
    traces: pd.DataFrame
    links: pd.DataFrame
    meta: Mapping[str, Any]
