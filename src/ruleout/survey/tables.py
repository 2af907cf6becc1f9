"""The tables of a survey."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from ruleout.survey.behaviours import Behaviour
from ruleout.survey.counting import exact_interval, upper_bound
from ruleout.survey.features import Features
from ruleout.survey.principles import Principle, find_principles, statement
from ruleout.survey.reading import FamilyFile
from ruleout.survey.relations import find_links, find_minimal
from ruleout.survey.roster import Roster
from ruleout.survey.scoring import EXAMPLES, MOST_MEASURES, Arrays
from ruleout.survey.types import Settings, Survey

Flags = NDArray[np.bool_]
TRACED = 12
"""Topologies whose best set is drawn, for each behaviour."""
LISTED = 10
"""Counterexamples named in the table of principles; all are in the table of topologies."""


@dataclass(frozen=True, slots=True, eq=False)
class Counts:
    """What the blocks say, in order of the topologies.

    Attributes
    ----------
    roster : Roster
        T wirings.
    judged, shown : (T, H) int64 arrays
    example : (T, H, EXAMPLES) int64 array
    measures : (T, H, EXAMPLES, MOST_MEASURES) array
    values : list of (H, EXAMPLES, D) arrays, one per topology
    """

    roster: Roster
    judged: NDArray[np.int64]
    shown: NDArray[np.int64]
    example: NDArray[np.int64]
    measures: NDArray[np.float64]
    values: list[NDArray[np.float64]]

    @classmethod
    def empty(cls, roster: Roster, behaviours: int) -> Counts:
        """Return counts of nothing."""
        shape = (len(roster), behaviours)
        return cls(
            roster=roster,
            judged=np.zeros(shape, dtype=np.int64),
            shown=np.zeros(shape, dtype=np.int64),
            example=np.full((*shape, EXAMPLES), -1, dtype=np.int64),
            measures=np.full((*shape, EXAMPLES, MOST_MEASURES), np.nan),
            values=[np.empty((behaviours, EXAMPLES, 0))] * len(roster),
        )

    def take(self, rows: NDArray[np.intp], block: Arrays) -> None:
        """Put a block in its place."""
        self.judged[rows], self.shown[rows] = block["judged"], block["shown"]
        self.example[rows] = block["example"]
        self.measures[rows] = block["example_measures"]
        for row, values in zip(rows, block["example_values"], strict=True):
            self.values[row] = values


def tabulate(
    source: FamilyFile, counts: Counts, settings: Settings, meta: Mapping[str, Any]
) -> Survey:
    """Return the survey that the counts amount to."""
    roster = counts.roster
    names, words, choices = roster.labels(), roster.words(), roster.choices()
    features, sizes = roster.features(), roster.class_sizes()
    topologies, shares, principles, examples, traces, links = [], [], [], [], [], []
    summary = {}
    for h, behaviour in enumerate(source.behaviours):
        shown, judged = counts.shown[:, h], counts.judged[:, h]
        works = shown >= settings.working
        minimal = find_minimal(choices, works)
        low, high = exact_interval(shown, judged, settings.level)
        topologies.append(
            pd.DataFrame(
                {
                    "topology": names,
                    "edges": words,
                    "n_edges": np.count_nonzero(choices, axis=1),
                    "behaviour": behaviour.name,
                    "sets": settings.sets,
                    "judged": judged,
                    "shown": shown,
                    "robustness": _share(shown, judged),
                    "low": low,
                    "high": high,
                    "works": works,
                    "minimal": minimal,
                    "class_size": sizes,
                }
            )
        )
        shares.append(feature_table(behaviour.name, features, works, shown))
        principles.append(_principle_table(behaviour, features, works, counts, h, names, settings))
        examples.append(_example_table(source, counts, h, works, names))
        traces.append(_trace_table(source, counts, h, works, names))
        pairs = find_links(choices, works)
        links.append(
            pd.DataFrame(
                {
                    "behaviour": behaviour.name,
                    "topology": np.array(names)[pairs[:, 0]],
                    "other": np.array(names)[pairs[:, 1]],
                }
            )
        )
        summary[behaviour.name] = {
            "working": int(works.sum()),
            "minimal": int(minimal.sum()),
            "not_judged_sets": int((settings.sets - judged).sum()),
            "missed_at_most": _missed(works, meta, settings),
        }
    return Survey(
        topologies=pd.concat(topologies, ignore_index=True),
        features=pd.concat(shares, ignore_index=True),
        principles=pd.concat(principles, ignore_index=True),
        examples=pd.concat(examples, ignore_index=True),
        traces=pd.concat(traces, ignore_index=True),
        links=pd.concat(links, ignore_index=True),
        meta={**meta, "results": summary},
    )


def _share(part: NDArray[Any], whole: NDArray[Any]) -> NDArray[np.float64]:
    with np.errstate(invalid="ignore"):
        return np.asarray(np.where(whole > 0, part / np.maximum(whole, 1), np.nan))


def _missed(works: Flags, meta: Mapping[str, Any], settings: Settings) -> float | None:
    """Return the upper bound on the share of unsurveyed topologies of any kind not met at all."""
    if meta["surveyed"] == meta["family_size"]:
        return None
    return float(upper_bound(0, len(works), settings.level))


def feature_table(
    behaviour: str, features: Features, works: Flags, shown: NDArray[np.int64]
) -> pd.DataFrame:
    """Return how common each feature is among the working and among all topologies."""
    have = features.have
    in_working, in_all = have[works].sum(axis=0), have.sum(axis=0)
    share_working = _share(in_working, np.full(len(in_all), works.sum()))
    share_all = in_all / len(have)
    weighted = _share((have * shown[:, None]).sum(axis=0), np.full(len(in_all), shown.sum()))
    return pd.DataFrame(
        {
            "behaviour": behaviour,
            "feature": features.names,
            "in_working": in_working,
            "working": int(works.sum()),
            "share_working": share_working,
            "in_all": in_all,
            "all": len(have),
            "share_all": share_all,
            "enrichment": share_working / share_all,
            "share_robustness": weighted,
        }
    )


def _principle_table(
    behaviour: Behaviour,
    features: Features,
    works: Flags,
    counts: Counts,
    h: int,
    names: list[str],
    settings: Settings,
) -> pd.DataFrame:
    searched = features.for_statements()
    rows = [
        _principle_row(p, behaviour, searched, counts, h, names, settings)
        for p in find_principles(searched, works)
    ]
    columns = [
        "behaviour", "kind", "statement", "literals", "covered", "counterexamples",
        "counterexample_list", "covered_sets", "showing_sets", "bound", "bound_one", "status",
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=columns)


def _principle_row(
    principle: Principle,
    behaviour: Behaviour,
    features: Features,
    counts: Counts,
    h: int,
    names: list[str],
    settings: Settings,
) -> dict[str, Any]:
    shown, judged = counts.shown[:, h], counts.judged[:, h]
    covered, exceptions = principle.covered, principle.exceptions
    number = int(exceptions.sum())
    share = np.nan_to_num(_share(shown, judged))
    worst_first = [t for t in np.argsort(-share, kind="stable") if exceptions[t]]
    showing = int(shown[covered].sum())
    row: dict[str, Any] = {
        "behaviour": behaviour.name,
        "kind": principle.kind,
        "statement": statement(principle, features.names, behaviour.verb),
        "literals": "; ".join(
            ("" if there else "not ") + features.names[f] for f, there in principle.literals
        ),
        "covered": int(covered.sum()),
        "counterexamples": number,
        "counterexample_list": ";".join(names[t] for t in worst_first[:LISTED]),
        "covered_sets": int(judged[covered].sum()),
        "showing_sets": showing,
        "bound": np.nan,
        "bound_one": np.nan,
    }
    if principle.kind != "suffices":
        pooled = int(judged[covered].sum())
        row["bound"] = float(upper_bound(showing, pooled, settings.level))
        together = 1.0 - (1.0 - settings.level) / covered.sum()
        row["bound_one"] = float(
            upper_bound(shown[covered], judged[covered], together).max(initial=0.0)
        )
    scale = f"{int(covered.sum())} topologies x {settings.sets} parameter sets"
    row["status"] = (
        f"not ruled out by {scale}"
        if not number
        else f"ruled out as a rule by {number} counterexample{'s' if number > 1 else ''} in {scale}"
    )
    return row


def _example_table(
    source: FamilyFile, counts: Counts, h: int, works: Flags, names: list[str]
) -> pd.DataFrame:
    behaviour = source.behaviours[h]
    measures = behaviour.measured
    rows = []
    for t in np.flatnonzero(works):
        parameters = counts.roster.member(int(t)).parameters
        for e, number in enumerate(counts.example[t, h]):
            if number < 0:
                continue
            values = counts.values[t][h, e]
            rows.append(
                {"topology": names[t], "behaviour": behaviour.name, "set": int(number)}
                | {name: counts.measures[t, h, e, k] for k, name in enumerate(measures)}
                | {
                    "parameters": ";".join(
                        f"{n}={v:.10g}" for n, v in zip(parameters, values, strict=False)
                    )
                }
            )
    columns = ["topology", "behaviour", "set", *measures, "parameters"]
    return pd.DataFrame(rows, columns=columns)


def _trace_table(
    source: FamilyFile, counts: Counts, h: int, works: Flags, names: list[str]
) -> pd.DataFrame:
    """Return what the best set of each of the most robust topologies does."""
    behaviour = source.behaviours[h]
    share = np.nan_to_num(_share(counts.shown[:, h], counts.judged[:, h]))
    parts = [pd.DataFrame(columns=["topology", "behaviour", "set", "line", "axis", "x", "output"])]
    best_first = [t for t in np.argsort(-share, kind="stable") if works[t]]
    for t in best_first[:TRACED]:
        member = counts.roster.member(int(t))
        values = counts.values[t][h, :1, : len(member.parameters)]
        trace = behaviour.trace(member.subject(values))
        lines, points = trace.x.shape
        parts.append(
            pd.DataFrame(
                {
                    "topology": names[t],
                    "behaviour": behaviour.name,
                    "set": int(counts.example[t, h, 0]),
                    "line": np.repeat(np.arange(lines), points),
                    "axis": trace.axis,
                    "x": trace.x.ravel(),
                    "output": trace.output.ravel(),
                }
            )
        )
    return pd.concat(parts[1:] or parts, ignore_index=True)
