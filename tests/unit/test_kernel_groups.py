"""Rows in groups: perturbed copies under one shared step sequence."""

from __future__ import annotations

import numpy as np
import pytest

from ruleout.expressions import sym
from ruleout.kernel import Protocol, Status, System, compile_system

RELAY = System(
    ("a", "b"),
    ("gain", "loss", "fast"),
    (
        sym("gain") * (1.0 - sym("a")) - sym("loss") * sym("a"),
        sym("fast") * (sym("a") - sym("b")),
    ),
)
COUNT = 3
DELTA = 1e-6


def protocol(scale: float) -> Protocol:
    return Protocol(
        breaks=np.zeros(1),
        factor=np.array([[scale, 1.0, 1.0]]),
        shift=np.zeros((1, 3)),
        keep=np.ones((1, 2)),
        add=np.zeros((1, 2)),
        times=np.array([0.5, 1.0, 4.0, 20.0]),
    )


def exact(p: np.ndarray, scale: float, times: np.ndarray) -> np.ndarray:
    """a and b of the relay from zero: a = e (1 - exp(-k t)), b driven by it."""
    gain, loss, fast = p[:, 0] * scale, p[:, 1], p[:, 2]
    k = (gain + loss)[:, None]
    end, f = (gain / (gain + loss))[:, None], fast[:, None]
    a = end * (1 - np.exp(-k * times))
    b = end * (1 - (f * np.exp(-k * times) - k * np.exp(-f * times)) / (f - k))
    return np.stack([a, b], axis=2)


@pytest.mark.parametrize("group", [1, 2, 3, 5, 9, 16, 17])
@pytest.mark.parametrize("fast", [3.0, 300.0])
def test_every_row_of_every_group_follows_its_own_protocol(group: int, fast: float) -> None:
    """Groups longer than a vector, over several protocols, agree with the closed form."""
    rng = np.random.default_rng(group)
    base = np.exp(rng.uniform(-1, 1, size=(4, 3))) * np.array([1.0, 1.0, fast])
    p = np.repeat(base, group, axis=0)
    p[:, 0] *= np.exp(DELTA * np.tile(np.arange(group), 4))
    scales = (1.0, 0.3, 2.0)
    rows = np.tile(p, (len(scales), 1))
    which = np.repeat(np.arange(len(scales)), len(p))
    protocols = [protocol(scale) for scale in scales]
    found = compile_system(RELAY).solve(
        np.zeros((len(rows), 2)), rows, protocols, which, rtol=1e-6, atol=1e-9, group=group
    )
    assert (found.status == Status.OK).all()
    for k, scale in enumerate(scales):
        wanted = exact(p, scale, protocols[k].times)
        # Solver tolerance: local errors of 1e-6 add up over about a hundred steps at most.
        np.testing.assert_allclose(found.states[which == k], wanted, rtol=2e-5, atol=1e-8)


@pytest.mark.parametrize("fast", [30.0, 3000.0])
def test_a_copy_stays_near_a_leader_that_rests(fast: float) -> None:
    """At a fixed point the leader has no error; steps must still keep the copies stable."""
    base = np.array([1.0, 1.0, fast])
    p = np.tile(base, (10, 1))
    p[1:, 0] *= 1.0 + DELTA
    rest = np.tile([0.5, 0.5], (10, 1))
    times = np.array([1.0, 100.0, 1000.0])
    there = Protocol(
        breaks=np.zeros(1),
        factor=np.ones((1, 3)),
        shift=np.zeros((1, 3)),
        keep=np.ones((1, 2)),
        add=np.zeros((1, 2)),
        times=times,
    )
    found = compile_system(RELAY).solve(rest, p, [there], rtol=1e-6, atol=1e-9, group=10)
    assert (found.status == Status.OK).all()
    # The copies end DELTA / 4 away; the solver may add its tolerance to that.
    assert np.abs(found.states - 0.5).max() < DELTA / 4 + 2e-6
