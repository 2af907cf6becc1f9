"""Batches of solves: break points, groups, failures, and rows that do not notice each other."""

from __future__ import annotations

import pickle
import threading
from collections.abc import Iterator

import numpy as np
import pytest
from numpy.typing import ArrayLike, NDArray

from ruleout.expressions import apply, const, sym
from ruleout.kernel import Program, Protocol, Status, System, compile_system, set_threads
from ruleout.kernel.compiled import CompiledBackend
from ruleout.kernel.reference import ReferenceBackend

Array = NDArray[np.float64]

x, y, z, a, b = (sym(name) for name in ("x", "y", "z", "a", "b"))
DECAY = System(("x",), ("a", "b"), (a - b * x,))
OSCILLATOR = System(("x", "y"), ("a",), (a * y, -a * x))


def protocol(
    times: ArrayLike, n: int, m: int, breaks: ArrayLike = (0.0,), **changes: ArrayLike
) -> Protocol:
    """Return a protocol that changes nothing but what is given."""
    segments = len(np.asarray(breaks))
    arrays = {
        "factor": np.ones((segments, m)),
        "shift": np.zeros((segments, m)),
        "keep": np.ones((segments, n)),
        "add": np.zeros((segments, n)),
    }
    arrays |= {name: np.asarray(value, dtype=float) for name, value in changes.items()}
    return Protocol(np.asarray(breaks, float), **arrays, times=np.asarray(times, float))


@pytest.fixture(params=["compiled", "reference"])
def compiled_or_reference(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> str:
    """Run a test with either implementation."""
    monkeypatch.setenv("RULEOUT_KERNEL", request.param)
    return str(request.param)


@pytest.fixture
def _restore_threads() -> Iterator[None]:
    yield
    set_threads(1)


pytestmark = pytest.mark.usefixtures("_restore_threads")


def test_environment_selects_the_implementation(compiled_or_reference: str) -> None:
    kind = ReferenceBackend if compiled_or_reference == "reference" else CompiledBackend
    assert isinstance(Program(DECAY)._backend, kind)


def test_changes_at_break_points_are_exact(compiled_or_reference: str) -> None:  # noqa: ARG001
    """Inflow from 1 to 3, a dose of 2 at 3 and a halving at 4, against the closed solution."""
    plan = protocol(
        [0, 0.5, 1, 2, 3, 4, 5],
        1,
        2,
        breaks=[0, 1, 3, 4],
        factor=[[0, 1]] * 4,
        shift=[[0, 0], [1.5, 0], [0, 0], [0, 0]],
        keep=[[1], [1], [1], [0.5]],
        add=[[0.25], [0], [2], [0]],
    )
    rate, start = 0.8, 1.25
    solution = Program(DECAY).solve([[1.0]], [[9.0, rate]], [plan], rtol=1e-9, atol=1e-12)
    decay = lambda t: np.exp(-rate * t)  # noqa: E731
    at_1 = start * decay(1)
    inflow = lambda t: at_1 * decay(t) + 1.5 / rate * (1 - decay(t))  # noqa: E731
    at_3 = inflow(2) + 2
    at_4 = at_3 * decay(1) / 2
    expected = [start, start * decay(0.5), at_1, inflow(1), at_3, at_4, at_4 * decay(1)]
    np.testing.assert_allclose(solution.states[0, :, 0], expected, rtol=1e-8)
    assert solution.status[0] == Status.OK


def test_each_row_follows_its_own_protocol(compiled_or_reference: str) -> None:  # noqa: ARG001
    plans = [
        protocol([1.0], 1, 2),
        protocol([0.5, 1.0, 1.0, 4.0], 1, 2, add=[[1.0]]),
        protocol([2.0, np.inf], 1, 2, breaks=[1.0, 3.0], shift=[[0, 0], [1.0, 0]]),
    ]
    p = np.array([[0.0, 1.0], [0.0, 2.0], [2.0, 1.0]])
    solution = Program(DECAY).solve([[1.0]] * 3, p, plans, [0, 1, 2], rtol=1e-9, atol=1e-12)
    expected = np.full((3, 4), np.nan)
    expected[0, 0] = np.exp(-1.0)
    expected[1] = 2.0 * np.exp(-2.0 * np.array([0.5, 1.0, 1.0, 4.0]))
    expected[2, :2] = 2.0 - np.exp(-1.0), 3.0
    np.testing.assert_allclose(solution.states[:, :, 0], expected, rtol=1e-8)


def test_forced_systems_see_the_time(compiled_or_reference: str) -> None:  # noqa: ARG001
    time = sym("time")
    system = System(("x",), ("a",), (a * apply("cos", a * time) + time,))
    times = np.array([1.0, 2.5, 3.0, 10.0])
    plan = protocol(times, 1, 1, breaks=[0.5, 2.0], add=[[0], [1]])
    solution = Program(system).solve([[0.0]], [[2.0]], [plan], rtol=1e-9, atol=1e-12)
    expected = np.sin(2 * times) - np.sin(1.0) + (times**2 - 0.25) / 2 + (times >= 2.0)
    np.testing.assert_allclose(solution.states[0, :, 0], expected, rtol=1e-8)
    rest = Program(system).solve([[0.0]], [[2.0]], [protocol([1.0, np.inf], 1, 1)])
    assert rest.status[0] == Status.NO_STEADY_STATE


def test_a_failure_is_a_status_and_leaves_the_others_alone(compiled_or_reference: str) -> None:  # noqa: ARG001
    """Blow-up in finite time, an undefined start, a root of a negative number, and good rows."""
    system = System(("x",), ("a", "b"), (a * x * x - b * apply("sqrt", x),))
    program = Program(system)
    p = np.array([[1.0, 0.0], [0.0, 1.0], [0.0, 0.0], [np.nan, 0.0], [0.0, 0.5]])
    starts = np.array([[1.0], [-1.0], [3.0], [1.0], [1.0]])
    solution = program.solve(starts, p, [protocol([0.5, 1.5, 3.0], 1, 2)])
    blown, undefined, good, unknown, rooted = solution.status
    assert blown == Status.BLOW_UP
    assert undefined == unknown == Status.BAD_START
    assert good == Status.OK
    # sqrt(x) reaches zero at t = 4 only.
    assert rooted == Status.OK
    assert np.isfinite(solution.states[0, 0, 0])
    assert np.isnan(solution.states[0, 1:]).all()
    assert np.isnan(solution.states[1]).all()
    np.testing.assert_array_equal(solution.states[2], 3.0)


def test_a_step_that_underflows_is_told_from_a_blow_up(compiled_or_reference: str) -> None:  # noqa: ARG001
    """x' = -1/x reaches zero at t = 1/2 with infinite slope, and no solution beyond."""
    system = System(("x",), (), (const(-1.0) / x,))
    solution = Program(system).solve([[1.0]], np.empty((1, 0)), [protocol([0.25, 1.0], 1, 0)])
    assert solution.status[0] == Status.STEP_TOO_SMALL
    assert solution.states[0, 0, 0] == pytest.approx(np.sqrt(0.5), rel=1e-5)


def test_the_step_budget_is_a_status(compiled_or_reference: str) -> None:  # noqa: ARG001
    plan = protocol([1.0, 1000.0], 2, 1)
    solution = Program(OSCILLATOR).solve([[1.0, 0.0]], [[1.0]], [plan], max_steps=200)
    assert solution.status[0] == Status.TOO_MANY_STEPS
    assert solution.steps[0] <= 201
    assert np.isfinite(solution.states[0, 0]).all()
    assert np.isnan(solution.states[0, 1]).all()


def test_a_healthy_oscillator_is_not_punished() -> None:
    """Five hundred periods at a tight tolerance take thousands of steps, and get them."""
    end = 1000.0 * np.pi
    plan = protocol([end], 2, 1)
    solution = Program(OSCILLATOR).solve([[1.0, 0.0]], [[1.0]], [plan], rtol=1e-9, atol=1e-9)
    assert solution.status[0] == Status.OK
    assert solution.steps[0] > 5000
    np.testing.assert_allclose(solution.states[0, 0], [1.0, 0.0], atol=1e-5)


def stiff_relay() -> System:
    """Return a three-state chain whose rates the tests spread over decades."""
    names = ("k1", "k2", "k3", "h")
    k1, k2, k3, h = (sym(name) for name in names)
    brake = 1.0 + apply("max", z, const(1e-12)) ** h
    rhs = (k1 / brake - k1 * x, k2 * (x - y), k3 * (y - z))
    return System(("x", "y", "z"), names, rhs)


def wide_batch(rows: int) -> tuple[Array, Array]:
    rng = np.random.default_rng(11)
    p = np.exp(rng.uniform(np.log(1e-2), np.log(1e3), (rows, 4)))
    p[:, 3] = rng.uniform(1.0, 4.0, rows)
    return np.zeros((rows, 3)), p


def test_lanes_do_not_notice_each_other() -> None:
    """Rows alone, in any order, in other batches and in threads agree to the last bit."""
    program = compile_system(stiff_relay())
    plans = [
        protocol([1, 5, 20], 3, 4),
        protocol([0.1, 7, np.inf], 3, 4, breaks=[0, 2], add=[[0] * 3, [1, 0, 0]]),
    ]
    y0, p = wide_batch(1500)
    which = np.arange(1500) % 2
    set_threads(1)
    whole = program.solve(y0, p, plans, which)
    assert (whole.status == Status.OK).all()
    set_threads(2)
    threaded = program.solve(y0, p, plans, which)
    order = np.random.default_rng(12).permutation(1500)[:333]
    shuffled = program.solve(y0[order], p[order], plans, which[order])
    np.testing.assert_array_equal(threaded.states, whole.states)
    np.testing.assert_array_equal(threaded.steps, whole.steps)
    np.testing.assert_array_equal(shuffled.states, whole.states[order])
    for row in range(0, 40, 3):
        alone = program.solve(y0[[row]], p[[row]], [plans[which[row]]])
        np.testing.assert_array_equal(alone.states[0], whole.states[row])


def test_lanes_do_not_notice_failing_neighbours() -> None:
    program = compile_system(stiff_relay())
    y0, p = wide_batch(64)
    plans = [protocol([1, 5, 20], 3, 4)]
    clean = program.solve(y0, p, plans)
    spoilt = p.copy()
    spoilt[::3] = np.nan
    mixed = program.solve(y0, spoilt, plans)
    assert (mixed.status[::3] == Status.BAD_START).all()
    keep = np.arange(64) % 3 > 0
    np.testing.assert_array_equal(mixed.states[keep], clean.states[keep])


@pytest.mark.parametrize("group", [2, 5, 11])
def test_differences_within_a_group_are_derivatives(group: int) -> None:
    """Forward differences of 1e-6 in the logarithm, against tight central differences."""
    program = compile_system(stiff_relay())
    plans = [protocol([0.3, 1, 4, np.inf], 3, 4)]
    rng = np.random.default_rng(3)
    base = np.exp(rng.uniform(np.log(0.1), np.log(10.0), (30, 4)))
    base[:, 3] = rng.uniform(1.0, 3.0, 30)
    copies = np.repeat(base, group, axis=0)
    for j in range(1, group):
        copies[j::group, (j - 1) % 4] *= np.exp(1e-6)
    solution = program.solve(np.zeros((30 * group, 3)), copies, plans, group=group)
    assert (solution.status == Status.OK).all()
    states = solution.states.reshape(30, group, 4, 3)
    for j in range(1, min(group, 5)):
        ends = []
        for sign in (1.0, -1.0):
            moved = base.copy()
            moved[:, j - 1] *= np.exp(sign * 1e-4)
            tight = program.solve(np.zeros((30, 3)), moved, plans, rtol=1e-11, atol=1e-13)
            ends.append(tight.states)
        exact = (ends[0] - ends[1]) / 2e-4
        found = (states[:, j] - states[:, 0]) / 1e-6
        # Error of the integration at rtol 1e-6, seen through a derivative of order one.
        np.testing.assert_allclose(found, exact, atol=5e-5)


def test_a_failing_copy_fails_alone() -> None:
    """A NaN row in a group changes nothing for the others, unless it leads."""
    program = compile_system(stiff_relay())
    _, p = wide_batch(24)
    plans = [protocol([1, 5], 3, 4)]
    copies = np.repeat(p, 3, axis=0)
    copies[2::3] *= 1.0 + 1e-6
    clean = program.solve(np.zeros((72, 3)), copies, plans, group=3)
    spoilt = copies.copy()
    spoilt[1::3] = np.nan
    mixed = program.solve(np.zeros((72, 3)), spoilt, plans, group=3)
    leads = np.arange(0, 72, 3)
    assert (mixed.status[leads] == Status.OK).all()
    assert (mixed.status[leads + 1] == Status.BAD_START).all()
    assert (mixed.status[leads + 2] == Status.OK).all()
    np.testing.assert_allclose(mixed.states[leads], clean.states[leads], rtol=1e-5, atol=1e-8)
    spoilt[leads] = np.nan
    assert (program.solve(np.zeros((72, 3)), spoilt, plans, group=3).status != Status.OK).all()


def test_wide_priors_do_not_break_on_negative_states() -> None:
    """40,000 solves with saturating and Hill terms guarded below zero: none fails.

    A step may carry a state slightly below zero; y / (K + max(y, 0)) with its numerator left
    linear and Hill terms on max(y, 1e-12) keep such a state harmless.
    """
    names = tuple(f"p{i}" for i in range(9))
    p = [sym(name) for name in names]
    states = tuple(sym(name) for name in ("u", "v", "w"))
    u, v, w = states
    zero, tiny = const(0.0), const(1e-12)

    def saturating(s: object, k: object) -> object:
        return s / (k + apply("max", s, zero))  # type: ignore[operator, arg-type]

    hill = apply("max", w, tiny) ** p[8]
    rhs = (
        p[0] / (1.0 + hill / p[7] ** p[8]) - p[1] * saturating(u, p[2]),
        p[3] * saturating(u, p[2]) - p[4] * saturating(v, p[2]),
        p[5] * v - p[6] * saturating(w, p[7]),
    )
    system = System(("u", "v", "w"), names, rhs)  # type: ignore[arg-type]
    rng = np.random.default_rng(13)
    rows = 40_000
    values = np.exp(rng.uniform(np.log(1e-3), np.log(1e3), (rows, 9)))
    values[:, 8] = rng.uniform(1.0, 4.0, rows)
    set_threads(2)
    plan = protocol(np.linspace(1.0, 12.0, 12), 3, 9)
    solution = compile_system(system).solve(np.zeros((rows, 3)), values, [plan], rtol=1e-4)
    assert np.bincount(solution.status, minlength=6).tolist() == [rows, 0, 0, 0, 0, 0]
    assert solution.states.min() > -1e-3 * solution.states.max()


def test_equal_systems_share_a_program_also_between_threads() -> None:
    found: list[Program] = []
    threads = [
        threading.Thread(target=lambda: found.append(compile_system(stiff_relay())))
        for _ in range(4)
    ]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert all(program is found[0] for program in found)


def test_systems_survive_pickling() -> None:
    copy = pickle.loads(pickle.dumps(stiff_relay()))
    assert compile_system(copy) is compile_system(stiff_relay())


def test_misfits_are_named() -> None:
    program = compile_system(DECAY)
    plan = protocol([1.0], 1, 2)
    with pytest.raises(ValueError, match=r"y0 has shape \(1, 2\)"):
        program.solve([[1.0, 2.0]], [[1.0, 1.0]], [plan])
    with pytest.raises(ValueError, match=r"p has shape \(1, 1\)"):
        program.solve([[1.0]], [[1.0]], [plan])
    with pytest.raises(ValueError, match="groups of 2"):
        program.solve([[1.0]], [[1.0, 1.0]], [plan], group=2)
    with pytest.raises(ValueError, match="which must lie in"):
        program.solve([[1.0]], [[1.0, 1.0]], [plan], [1])
    with pytest.raises(ValueError, match="factor has shape"):
        program.solve([[1.0]], [[1.0, 1.0]], [protocol([1.0], 1, 3)])
    with pytest.raises(ValueError, match="breaks must increase"):
        program.solve([[1.0]], [[1.0, 1.0]], [protocol([1.0], 1, 2, breaks=[0, 0])])
    with pytest.raises(ValueError, match="none before 0"):
        program.solve([[1.0]], [[1.0, 1.0]], [protocol([-1.0], 1, 2)])
    with pytest.raises(ValueError, match="undeclared symbols: y"):
        Program(System(("x",), (), (y,)))


def test_an_empty_batch_gives_an_empty_solution(compiled_or_reference: str) -> None:  # noqa: ARG001
    plans = [protocol([1.0, np.inf], 1, 2)]
    solution = Program(DECAY).solve(np.empty((0, 1)), np.empty((0, 2)), plans)
    assert solution.states.shape == (0, 2, 1)
    assert Program(DECAY).steady(np.empty((0, 1)), np.empty((0, 2))).states.shape == (0, 1)


def test_a_system_without_states_is_solved_at_once(compiled_or_reference: str) -> None:  # noqa: ARG001
    """A condition may remove or clamp every node."""
    program = Program(System((), ("a",), ()))
    solution = program.solve(np.empty((2, 0)), np.ones((2, 1)), [protocol([1.0, np.inf], 0, 1)])
    assert solution.states.shape == (2, 2, 0)
    assert (solution.status == Status.OK).all()
    assert program.steady(np.empty((2, 0)), np.ones((2, 1))).stable.all()


def test_tolerances_must_be_positive() -> None:
    program, plan = compile_system(DECAY), protocol([1.0], 1, 2)
    for wrong in ({"rtol": 0.0}, {"atol": 0.0}, {"atol": [np.nan]}, {"rtol": -1e-6}):
        with pytest.raises(ValueError, match="tolerances must be positive"):
            program.solve([[1.0]], [[1.0, 1.0]], [plan], **wrong)  # type: ignore[arg-type]


def test_where_no_code_can_be_made_the_kernel_is_interpreted(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    def refuse(*_: object, **__: object) -> None:
        raise OSError("cannot allocate executable memory")

    monkeypatch.setattr("ruleout.kernel.engine.MachineCode", refuse)
    monkeypatch.setattr("ruleout.kernel.engine._shared_code", refuse)
    with pytest.warns(RuntimeWarning, match="executable memory"):
        program = Program(DECAY)
    solution = program.solve([[1.0]], [[0.0, 1.0]], [protocol([1.0], 1, 2)])
    assert solution.states[0, 0, 0] == pytest.approx(np.exp(-1.0), rel=1e-5)
