"""Protocols laid end to end, so that one batch can follow many of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from ruleout.kernel.types import Array, Protocol

Integers = NDArray[np.int64]


class Plan(NamedTuple):
    """The numbers of all protocols of a call.

    Attributes
    ----------
    segment_at, time_at : (K + 1,) int64 arrays
        Protocol k owns segments ``segment_at[k]:segment_at[k + 1]`` and the finite output times
        ``time_at[k]:time_at[k + 1]``.
    breaks : (S,) array
    factor, shift : (S, P) arrays
    keep, add : (S, N) arrays
        N counts time as a state where the system is forced.
    times : (M,) array
        Finite output times.
    endless : (K,) int64 array
        1 where the protocol ends in a steady state, and so passes all its breaks; else 0.
    """

    segment_at: Integers
    time_at: Integers
    breaks: Array
    factor: Array
    shift: Array
    keep: Array
    add: Array
    times: Array
    endless: Integers


@dataclass(frozen=True, slots=True, eq=False)
class Schedule:
    """All protocols of a call, packed.

    Attributes
    ----------
    plan : Plan
    outputs : int
        Largest number of output times of a protocol, the steady state included.
    ends_at_rest : bool
        Whether any protocol ends in a steady state.
    directory : tuple of int
        Addresses of the plan's arrays.
    """

    plan: Plan
    outputs: int
    ends_at_rest: bool
    directory: tuple[int, ...]


def addresses(*arrays: NDArray[Any]) -> tuple[int, ...]:
    """Return where the arrays begin in memory."""
    return tuple(array.__array_interface__["data"][0] for array in arrays)


def pack(protocols: Sequence[Protocol], n_states: int, n_parameters: int, forced: bool) -> Schedule:
    """Return the schedule of ``protocols`` for a system of ``n_states`` (time not counted).

    Raises
    ------
    ValueError
        If a protocol's arrays do not fit the system, or its times are not in order.
    """
    for k, protocol in enumerate(protocols):
        _check_protocol(k, protocol, n_states, n_parameters)
    keep = np.concatenate([p.keep for p in protocols])
    add = np.concatenate([p.add for p in protocols])
    if forced:
        starts = np.concatenate([p.breaks for p in protocols])[:, None]
        keep = np.hstack([keep, np.zeros_like(starts)])
        add = np.hstack([add, starts])
    finite = [p.times[np.isfinite(p.times)] for p in protocols]
    endless = [len(f) < len(p.times) for f, p in zip(finite, protocols, strict=True)]
    plan = Plan(
        segment_at=_offsets([len(p.breaks) for p in protocols]),
        time_at=_offsets([len(times) for times in finite]),
        breaks=_packed([p.breaks for p in protocols]),
        factor=_packed([p.factor for p in protocols]),
        shift=_packed([p.shift for p in protocols]),
        keep=np.ascontiguousarray(keep, dtype=float),
        add=np.ascontiguousarray(add, dtype=float),
        times=_packed(finite),
        endless=np.array(endless, dtype=np.int64),
    )
    outputs = max(len(p.times) for p in protocols)
    return Schedule(plan, outputs, any(endless), addresses(*plan))


def _offsets(counts: list[int]) -> Integers:
    return np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)


def _packed(arrays: list[Array]) -> Array:
    return np.ascontiguousarray(np.concatenate(arrays), dtype=float)


def _check_protocol(k: int, protocol: Protocol, n_states: int, n_parameters: int) -> None:
    segments = len(protocol.breaks)
    expected: dict[str, tuple[Any, ...]] = {
        "factor": (segments, n_parameters),
        "shift": (segments, n_parameters),
        "keep": (segments, n_states),
        "add": (segments, n_states),
    }
    for name, shape in expected.items():
        given = getattr(protocol, name).shape
        if given != shape:
            raise ValueError(f"protocol {k}: {name} has shape {given}, not {shape}")
    if segments == 0 or not np.all(np.isfinite(protocol.breaks)):
        raise ValueError(f"protocol {k}: breaks must be finite and at least one")
    if np.any(np.diff(protocol.breaks) <= 0):
        raise ValueError(f"protocol {k}: breaks must increase")
    times = protocol.times
    if len(times) == 0 or np.isnan(times).any() or times[0] < protocol.breaks[0]:
        raise ValueError(f"protocol {k}: needs output times, none before {protocol.breaks[0]:g}")
    if np.any(times[1:] < times[:-1]) or np.isinf(times[:-1]).any():
        raise ValueError(f"protocol {k}: output times must be in order, infinity only as the last")
