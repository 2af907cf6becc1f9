"""Parameter sets spread over their ranges, one stream for each topology."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ruleout.mechanism.types import Fixed
from ruleout.seeds import generator
from ruleout.survey.types import Method, Range

Array = NDArray[np.float64]


class Ranged(Protocol):
    """What knows the ranges of parameters."""

    def range_of(self, name: str) -> Range:
        """Return the range of a parameter."""
        ...


_BITS = 30


def parameter_sets(
    ranged: Ranged, names: Sequence[str], count: int, method: Method, seed: int, key: str
) -> Array:
    """Return ``count`` parameter sets of one topology, as (count, len(names)).

    Every topology has a stream of its own, so that errors of different topologies are independent
    and their counts can be pooled.

    Parameters
    ----------
    ranged : Family, MechanismFamily or Roster
        Gives the range of each name; uniform in the logarithm.
    names : sequence of str
    count : int
    method : {"sobol", "latin", "independent"}
        Sobol points under a random digital shift (Owen, 'Randomly permuted (t,m,s)-nets and
        (t,s)-sequences', 1995, doi:10.1007/978-1-4612-2552-2_19), a Latin hypercube, or
        independent draws.
    seed : int
    key : str
        Identity of the topology.
    """
    ranges = [ranged.range_of(name) for name in names]
    free = [k for k, r in enumerate(ranges) if not isinstance(r, Fixed)]
    unit = _unit_points(count, len(free), method, generator(seed, "survey", key, method))
    sets = np.empty((count, len(names)))
    for k, r in enumerate(ranges):
        if isinstance(r, Fixed):
            sets[:, k] = r.value
    for column, k in enumerate(free):
        r = ranges[k]
        assert not isinstance(r, Fixed)
        sets[:, k] = r.low * (r.high / r.low) ** unit[:, column]
    return sets


def _unit_points(count: int, dimension: int, method: Method, rng: np.random.Generator) -> Array:
    if method == "sobol" and dimension:
        shift = rng.integers(0, 1 << _BITS, size=dimension, dtype=np.int64)
        inside = rng.random((count, dimension))
        points = _sobol(count, dimension) ^ shift
        return np.asarray((points + inside) / (1 << _BITS))
    if method == "latin":
        ranks = rng.permuted(np.tile(np.arange(count)[:, None], dimension), axis=0)
        return np.asarray((ranks + rng.random((count, dimension))) / max(count, 1))
    return rng.random((count, dimension))


@lru_cache(maxsize=64)
def _sobol(count: int, dimension: int) -> NDArray[np.int64]:
    from scipy.stats import qmc

    points = qmc.Sobol(dimension, scramble=False, bits=_BITS).random_base2(
        max(count - 1, 0).bit_length()
    )
    return np.asarray(np.round(points[:count] * (1 << _BITS)), dtype=np.int64)
