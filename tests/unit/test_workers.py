"""Results depend on the seed alone, whoever computes them; a lost worker is a plain error."""

from __future__ import annotations

import multiprocessing
import threading
import warnings
from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from ruleout.case import read_case
from ruleout.errors import InputError, RuleoutError
from ruleout.pipeline import Settings, judge
from ruleout.pipeline.tasks import run_task
from ruleout.pipeline.workers import _prepare_cluster, local_workers
from ruleout.progress import Silent
from ruleout.store import software

ReadFiles = Callable[[Path], dict[str, bytes]]
# One process computes the reference and compares the others with it.
together = pytest.mark.xdist_group("workers")


def settings(workers: int = 1) -> Settings:
    return Settings(seed=5, effort="quick", workers=workers)


@pytest.fixture(scope="module")
def expected(
    tiny_case: Path, finished_files: ReadFiles, tmp_path_factory: pytest.TempPathFactory
) -> dict[str, bytes]:
    """Files of a run with one worker, before which numpy's global generator was seeded."""
    out = tmp_path_factory.mktemp("alone")
    np.random.seed(1)  # noqa: NPY002 - the global generator is what must not matter
    judge(read_case(tiny_case), settings(), out=out)
    found = finished_files(out)
    assert {"variants.csv", "claims.csv", "checks.csv", "verdict.json"} <= set(found)
    assert len([name for name in found if name.startswith("stages")]) > 40
    return found


@together
def test_two_processes_give_the_same_bytes(
    tiny_case: Path, finished_files: ReadFiles, expected: dict[str, bytes], tmp_path: Path
) -> None:
    np.random.seed(99)  # noqa: NPY002
    judge(read_case(tiny_case), settings(workers=2), out=tmp_path)
    assert finished_files(tmp_path) == expected
    assert not multiprocessing.active_children()


@together
def test_an_executor_handed_in_gives_the_same_bytes_and_stays_open(
    tiny_case: Path, finished_files: ReadFiles, expected: dict[str, bytes], tmp_path: Path
) -> None:
    np.random.seed(7)  # noqa: NPY002
    before = warnings.filters[:]
    with ThreadPoolExecutor(3) as executor:
        judge(read_case(tiny_case), settings(), out=tmp_path, executor=executor)
        assert executor.submit(int, "3").result() == 3
    assert finished_files(tmp_path) == expected
    assert warnings.filters[:] == before


@together
def test_the_global_generator_is_left_alone(
    tiny_case: Path, expected: dict[str, bytes], tmp_path: Path
) -> None:
    assert expected
    np.random.seed(11)  # noqa: NPY002
    before = np.random.get_state(legacy=False)["state"]  # noqa: NPY002
    with ThreadPoolExecutor(1) as executor:
        judge(read_case(tiny_case), settings(), out=tmp_path, executor=executor)
    after = np.random.get_state(legacy=False)["state"]  # noqa: NPY002
    assert np.array_equal(before["key"], after["key"])
    assert before["pos"] == after["pos"]


class _Kill(Silent):
    """Kills one worker at the first sign of progress."""

    done = False

    def advance(self, step: str, done: int = 1, note: str = "") -> None:  # noqa: ARG002
        if not self.done:
            self.done = True
            multiprocessing.active_children()[0].kill()


@together
def test_a_lost_worker_is_a_plain_error_and_the_run_goes_on_from_there(
    tiny_case: Path, finished_files: ReadFiles, expected: dict[str, bytes], tmp_path: Path
) -> None:
    case = read_case(tiny_case)
    with pytest.raises(RuleoutError, match=r"a worker process was lost.*same command again"):
        judge(case, settings(workers=2), out=tmp_path, progress=_Kill())
    assert any((tmp_path / "stages").rglob("*.npz"))
    judge(case, settings(), out=tmp_path)
    assert finished_files(tmp_path) == expected


def _warn(bench: Any, entered: threading.Barrier, leave: threading.Event) -> dict[str, Any]:
    del bench
    entered.wait(20)
    leave.wait(20)
    warnings.warn("from a task", RuntimeWarning, stacklevel=1)
    return {}


def test_tasks_side_by_side_stay_silent_and_leave_warnings_as_they_were(tiny_case: Path) -> None:
    case = read_case(tiny_case)
    before = warnings.filters[:]
    entered, first, second = threading.Barrier(3), threading.Event(), threading.Event()
    with ThreadPoolExecutor(2) as pool:
        one = pool.submit(run_task, _warn, case, entered, first)
        two = pool.submit(run_task, _warn, case, entered, second)
        entered.wait(20)
        first.set()
        assert one.result(20) == {}
        second.set()
        assert two.result(20) == {}
    assert warnings.filters[:] == before


def test_leaving_gives_up_what_is_under_way() -> None:
    started, stop = threading.Event(), threading.Event()

    def wait(executor: Executor) -> None:
        executor.submit(lambda: (started.set(), stop.wait(20)))
        started.wait(20)

    with local_workers(1) as executor:
        wait(executor)
        queued = executor.submit(int)
    assert queued.cancelled()
    stop.set()


class _Client:
    """Stands for a cluster whose workers answer with ``versions``."""

    def __init__(self, *versions: tuple[str, ...]) -> None:
        self.versions = versions

    def run(self, _: Any) -> dict[str, tuple[str, ...]]:
        return {f"tcp://node{i}": v for i, v in enumerate(self.versions)}

    def register_plugin(self, _: Any) -> None:
        pass


def test_a_cluster_with_other_versions_is_refused() -> None:
    pytest.importorskip("distributed", reason="Dask is not installed")
    _prepare_cluster(_Client(software(), software()))
    other = (software()[0], "numpy 1.0", *software()[2:])
    with pytest.raises(InputError, match=r"node1 has numpy 1.0 where this machine has numpy"):
        _prepare_cluster(_Client(software(), other))
