"""Design principles: short conjunctions of features that rule a behaviour out or bring it about.

A conjunction of up to three literals (a feature, or its absence) speaks of the topologies in which
it holds. If none of them works, the behaviour is not possible there, as far as the survey can see:
lacking both of two features and never working means that every working topology has one of them.
If all of them work, the conjunction suffices.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.features import Features

Flags = NDArray[np.bool_]
Kind = Literal["requires", "excludes", "suffices"]

MOST: Final = 12
"""Statements of each kind."""
EXPECTED: Final = 5.0
"""A statement is worth making where this many topologies would behave otherwise by chance."""
TOLERATED: Final = 0.02
"""Largest share of exceptions that a statement may have and still be listed."""


@dataclass(frozen=True, slots=True, eq=False)
class Principle:
    """A candidate principle.

    Attributes
    ----------
    kind : {"requires", "excludes", "suffices"}
    literals : tuple of (feature number, present)
        For ``requires`` the absences of what is required.
    covered : (T,) bool array
        Topologies it speaks of.
    exceptions : (T,) bool array
        Those of them that behave otherwise.
    """

    kind: Kind
    literals: tuple[tuple[int, bool], ...]
    covered: Flags
    exceptions: Flags


def find_principles(features: Features, works: Flags) -> list[Principle]:
    """Return candidate principles, for each kind the most telling first.

    Parameters
    ----------
    features : Features
        Of T topologies.
    works : (T,) bool array
    """
    have = features.have
    if not works.any() or works.all() or not have.shape[1]:
        return []
    holds = np.concatenate([have, ~have], axis=1)
    negative = _short_conjunctions(holds, works)
    positive = _short_conjunctions(holds, ~works)
    half = have.shape[1]
    requires = [c for c in negative if min(c) >= half]
    excludes = [c for c in negative if min(c) < half]
    found: list[Principle] = []
    for kind, candidates, wrong in (
        ("requires", requires, works),
        ("excludes", excludes, works),
        ("suffices", positive, ~works),
    ):
        found += _choose(kind, candidates, holds, wrong, half)  # type: ignore[arg-type]
    return found


def _counts(holds: Flags, i: int) -> NDArray[np.float32]:
    """Return how many rows hold literals i, j and k, for all j and k."""
    rows = holds[holds[:, i]].astype(np.float32)
    return np.asarray(rows.T @ rows)


def _short_conjunctions(holds: Flags, wrong: Flags) -> list[tuple[int, ...]]:
    """Return conjunctions of one to three literals with next to no row of ``wrong`` among many.

    Only those are given that gain by every one of their literals.
    """
    expected = wrong.mean()
    tolerated = TOLERATED * expected
    count = holds.shape[1]
    half = count // 2
    bad = holds[wrong]
    total = holds.sum(axis=0)
    bad_total = bad.sum(axis=0)
    pair = (holds.T.astype(np.float32) @ holds.astype(np.float32)).astype(float)
    bad_pair = (bad.T.astype(np.float32) @ bad.astype(np.float32)).astype(float)
    with np.errstate(all="ignore"):
        share_one = np.where(total > 0, bad_total / total, 1.0)
        share_two = np.where(pair > 0, bad_pair / pair, 1.0)
    found: list[tuple[int, ...]] = [
        (i,) for i in range(count) if total[i] * expected >= EXPECTED and share_one[i] <= tolerated
    ]
    for i in range(count):
        three, bad_three = _counts(holds, i), _counts(bad, i)
        for j in range(i + 1, count):
            if j - i == half or pair[i, j] * expected < EXPECTED:
                continue
            least = min(share_one[i], share_one[j])
            if share_two[i, j] <= tolerated:
                if _gains(share_two[i, j], least, tolerated):
                    found.append((i, j))
                continue
            k = np.arange(j + 1, count)
            many = three[j, k] * expected >= EXPECTED
            share = bad_three[j, k] / np.maximum(three[j, k], 1.0)
            least_two = np.minimum(np.minimum(share_two[i, k], share_two[j, k]), share_two[i, j])
            good = many & (share <= tolerated) & (least_two > tolerated)
            good &= (k - i != half) & (k - j != half)
            found += [(i, j, int(m)) for m in k[good]]
    return found


def _gains(share: float, least: float, tolerated: float) -> bool:
    return least > tolerated or share < least


def _choose(
    kind: Kind,
    candidates: list[tuple[int, ...]],
    holds: Flags,
    wrong: Flags,
    half: int,
) -> Iterator[Principle]:
    """Yield the statements that between them cover the most, each adding to what went before.

    Statements without exceptions come before those with some, and short ones before long ones
    that cover no more.
    """
    if not candidates:
        return
    cover = np.stack([holds[:, list(c)].all(axis=1) for c in candidates])
    exceptions = (cover & wrong).sum(axis=1)
    size = cover.sum(axis=1).astype(float)
    length = np.array([len(c) for c in candidates])
    left = np.ones(holds.shape[0], dtype=bool)
    for _ in range(MOST):
        new = (cover & left).sum(axis=1)
        score = np.where(new >= np.maximum(0.05 * size, 1.0), new, 0.0)
        score = score * np.where(exceptions == 0, 1.0, 0.5) / (1.0 + 0.1 * (length - 1))
        best = int(np.argmax(score))
        if score[best] <= 0.0:
            return
        left &= ~cover[best]
        literals = tuple((c % half, c < half) for c in candidates[best])
        yield Principle(kind, literals, cover[best], cover[best] & wrong)


def _listed(parts: list[str], word: str) -> str:
    if len(parts) == 1:
        return parts[0]
    return f"{', '.join(parts[:-1])} {word} {parts[-1]}"


def statement(principle: Principle, names: tuple[str, ...], verb: str) -> str:
    """Return a principle as a sentence.

    Parameters
    ----------
    principle : Principle
    names : tuple of str
        Of the features, as they stand after 'has'.
    verb : str
        What a working topology does, such as ``adapts``.
    """
    present = [names[f] for f, there in principle.literals if there]
    absent = [names[f] for f, there in principle.literals if not there]
    if principle.kind == "requires":
        return f"Every network that {verb} has {_listed(absent, 'or')}."
    conditions = []
    if present:
        conditions.append(f"with {_listed(present, 'and')}")
    if absent:
        conditions.append(f"without {_listed(absent, 'and')}")
    those = " and ".join(conditions)
    if principle.kind == "excludes":
        return f"No network {those} {verb}."
    return f"Every network {those} {verb} somewhere in its parameter space."
