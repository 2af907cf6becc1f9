"""Scoring a block of topologies: a pure function of its wirings, the settings and the block."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from ruleout.survey.behaviours import Behaviour, Score
from ruleout.survey.roster import Roster, Scorable
from ruleout.survey.sampling import parameter_sets
from ruleout.survey.types import Method

Arrays = dict[str, NDArray[Any]]

EXAMPLES: Final = 3
"""Best sets kept with their values, for each topology and behaviour."""
MOST_MEASURES: Final = 4
_ROWS: Final = 2**15
"""Parameter sets scored at once, so that memory stays bounded."""


def score_block(
    roster: Roster,
    behaviours: Sequence[Behaviour],
    sets: int,
    method: Method,
    seed: int,
) -> Arrays:
    """Score every topology of a block.

    Parameters
    ----------
    roster : Roster
        B wirings.
    behaviours : sequence of Behaviour, length H
    sets : int
        Parameter sets for each, M.
    method, seed
        See :func:`parameter_sets`.

    Returns
    -------
    dict of arrays
        ``judged``, ``shown``: (B, H) counts; ``showing``: (B, H, ceil(M / 8)) the showing sets,
        as packed bits; ``example``: (B, H, EXAMPLES) the best sets, -1 for none;
        ``example_measures``: (B, H, EXAMPLES, MOST_MEASURES); ``example_values``:
        (B, H, EXAMPLES, most parameters); NaN where there is none.
    """
    shape = (len(roster), len(behaviours))
    members = [roster.member(t) for t in range(len(roster))]
    widest = max((len(m.parameters) for m in members), default=0)
    block: Arrays = {
        "judged": np.zeros(shape, dtype=np.int64),
        "shown": np.zeros(shape, dtype=np.int64),
        "showing": np.zeros((*shape, -(-sets // 8)), dtype=np.uint8),
        "example": np.full((*shape, EXAMPLES), -1, dtype=np.int64),
        "example_measures": np.full((*shape, EXAMPLES, MOST_MEASURES), np.nan),
        "example_values": np.full((*shape, EXAMPLES, widest), np.nan),
    }
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        for b, (key, member) in enumerate(zip(roster.labels(), members, strict=True)):
            values = parameter_sets(roster, member.parameters, sets, method, seed, key)
            for h, behaviour in enumerate(behaviours):
                score = _score(behaviour, member, values)
                _note(block, (b, h), behaviour, score, values)
    return block


def _score(behaviour: Behaviour, member: Scorable, values: NDArray[np.float64]) -> Score:
    parts = [
        behaviour.score(member.subject(values[first : first + _ROWS]))
        for first in range(0, len(values), _ROWS)
    ]
    return Score(
        judged=np.concatenate([part.judged for part in parts]),
        shown=np.concatenate([part.shown for part in parts]),
        measures={
            name: np.concatenate([part.measures[name] for part in parts])
            for name in parts[0].measures
        },
    )


def _note(
    block: Arrays,
    at: tuple[int, int],
    behaviour: Behaviour,
    score: Score,
    values: NDArray[np.float64],
) -> None:
    block["judged"][at] = np.count_nonzero(score.judged)
    block["shown"][at] = np.count_nonzero(score.shown)
    block["showing"][at] = np.packbits(score.shown)
    best = ranked(behaviour, score)[:EXAMPLES]
    block["example"][at][: len(best)] = best
    for k, name in enumerate(list(score.measures)[:MOST_MEASURES]):
        block["example_measures"][at][: len(best), k] = score.measures[name][best]
    block["example_values"][at][: len(best), : values.shape[1]] = values[best]


def ranked(behaviour: Behaviour, score: Score) -> NDArray[np.int64]:
    """Return the numbers of the showing sets, best first; ties in order of their number."""
    showing = np.flatnonzero(score.shown)
    name = behaviour.rank.removeprefix("-")
    worth = score.measures[name][showing]
    if behaviour.rank == name:
        worth = -worth
    return np.asarray(showing[np.argsort(worth, kind="stable")])
