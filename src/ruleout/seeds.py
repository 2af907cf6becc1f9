"""Random streams keyed by what they are for, never by when they are asked for."""

from __future__ import annotations

import hashlib

import numpy as np


def sequence(root: int, *key: str | int) -> np.random.SeedSequence:
    """Return the seed sequence that belongs to ``key`` under the root seed.

    The same key gives the same stream whatever else runs, in whatever order and on however many
    workers; different keys give independent streams.

    Parameters
    ----------
    root : int
        The run's seed.
    *key : str or int
        Identity of the consumer, such as ``("v03", "replicates", 12)``.
    """
    digest = hashlib.sha256("\x1f".join(map(str, key)).encode()).digest()
    words = [int.from_bytes(digest[i : i + 4], "little") for i in range(0, 16, 4)]
    return np.random.SeedSequence([root, *words])


def generator(root: int, *key: str | int) -> np.random.Generator:
    """Return a PCG64 generator on the stream of :func:`sequence`."""
    return np.random.default_rng(sequence(root, *key))
