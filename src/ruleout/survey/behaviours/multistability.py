"""Several stable states at one input.

A network is multistable if flows from different starts settle at different stable steady states
(the genetic toggle switch: Gardner, Cantor and Collins, Nature 403 (2000) 339-342,
doi:10.1038/35002131). That this needs a positive circuit is Thomas's first rule (proof: Soule,
ComPlexUs 1 (2003) 123-133, doi:10.1159/000076100).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from ruleout.survey.behaviours.base import Array, Score, Subject, rest
from ruleout.survey.behaviours.traces import Trace, flow_trace


@dataclass(frozen=True, slots=True)
class Multistability:
    """Settles at more than one stable state.

    Attributes
    ----------
    starts : int
        Scattered starts for each parameter set.
    apart : float
        Least difference, as a share of the larger value, in some node between two states that
        count as different.
    level : float
        Of the input, where there is one.
    """

    starts: int = 16
    apart: float = 0.01
    level: float = 0.5
    name: ClassVar[str] = "multistability"
    verb: ClassVar[str] = "has several stable states"
    needs_input: ClassVar[bool] = False
    needs_expressed: ClassVar[bool] = False
    rank: ClassVar[str] = "fold"
    measured: ClassVar[tuple[str, ...]] = ("states", "fold")

    def score(self, subject: Subject) -> Score:
        """Return how each parameter set fares.

        Measures are ``states`` (number of stable states met) and ``fold`` (highest over lowest
        output among them). A set with a flow that did not settle is judged only if others have
        shown several states.
        """
        p = subject.p if subject.source is None else subject.at_input(self.level)
        count, n = len(p), len(subject.start)
        y0 = (scattered(self.starts, n)[None] * subject.ceiling[:, None]).reshape(-1, n)
        states, settled, stable = rest(subject, np.repeat(p, self.starts, axis=0), y0)
        states = states.reshape(count, self.starts, n)
        good = (settled & stable).reshape(count, self.starts)
        states = np.where(good[:, :, None], states, np.nan)
        larger = np.maximum(np.abs(states[:, :, None]), np.abs(states[:, None]))
        with np.errstate(invalid="ignore"):
            gap = np.abs(states[:, :, None] - states[:, None]) / np.maximum(larger, 1e-9)
            alike = (gap <= self.apart).all(axis=3)
        earlier = np.tril(np.ones((self.starts, self.starts), dtype=bool), -1)
        new = good & ~(alike & earlier).any(axis=2)
        number = new.sum(axis=1)
        shown = number > 1
        judged = shown | settled.reshape(count, self.starts).all(axis=1)
        output = states[:, :, subject.output]
        high = np.where(good, output, -np.inf).max(axis=1)
        low = np.where(good, output, np.inf).min(axis=1)
        with np.errstate(all="ignore"):
            fold = np.where(shown, high / np.maximum(low, 1e-9), np.nan)
        return Score(judged, shown, {"states": number.astype(float), "fold": fold})

    def trace(self, subject: Subject) -> Trace:
        """Return flows from scattered starts, for a subject of one parameter set."""
        p = subject.p if subject.source is None else subject.at_input(self.level)
        starts = scattered(8, len(subject.start)) * subject.ceiling
        return flow_trace(subject, p, starts, 50.0)


def scattered(count: int, dimension: int) -> Array:
    """Return ``count`` points in the unit cube, dense towards its lower faces: (count, dimension).

    The first two are the lower and the upper corner, then come the corners that favour one
    coordinate, then points of a Sobol sequence, cubed.
    """
    from scipy.stats import qmc

    corners = [np.full(dimension, 1e-3), np.ones(dimension)]
    corners += [np.where(np.arange(dimension) == k, 1.0, 1e-3) for k in range(dimension)]
    more = max(count - len(corners), 0)
    points = qmc.Sobol(dimension, scramble=False).random_base2(more.bit_length())[1 : more + 1]
    return np.concatenate([np.array(corners), points**3])[:count]
