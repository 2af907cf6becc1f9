"""Judging on a real Dask scheduler with workers of its own, one of which is lost on the way."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

pytest.importorskip("distributed", reason="Dask is not installed: pip install 'ruleout[cluster]'")

SCHEDULER = """
import asyncio, sys
from distributed import Scheduler

async def main():
    async with Scheduler(host="127.0.0.1", port=0, dashboard=False) as scheduler:
        print(scheduler.address, flush=True)
        await scheduler.finished()

asyncio.run(main())
"""
WORKER = """
import asyncio, sys
from distributed import Worker

async def main():
    async with Worker(sys.argv[1], nthreads=1, dashboard=False, name=sys.argv[2]) as worker:
        await worker.finished()

asyncio.run(main())
"""
PATIENCE = 300.0
ReadFiles = Callable[[Path], dict[str, bytes]]


def run(*words: str) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, *words],
        env={**os.environ, "COLUMNS": "80", "NO_COLOR": "1"},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def end(process: subprocess.Popen[str]) -> None:
    with contextlib.suppress(ProcessLookupError):
        os.killpg(process.pid, signal.SIGKILL)
    process.communicate()


def judge(case: Path, out: Path, *words: str) -> subprocess.Popen[str]:
    options = ["--out", str(out), "--effort", "quick", "--seed", "2", *words]
    return run("-m", "ruleout", "judge", str(case), *options)


@pytest.fixture
def cluster() -> Iterator[tuple[str, list[subprocess.Popen[str]]]]:
    """Start a scheduler and two workers on the loopback; give its address and them."""
    processes = [run("-c", SCHEDULER)]
    try:
        assert processes[0].stdout is not None
        address = processes[0].stdout.readline().strip()
        assert address.startswith("tcp://127.0.0.1:"), address
        processes += [run("-c", WORKER, address, f"worker{i}") for i in range(2)]
        yield address, processes[1:]
    finally:
        for process in processes:
            end(process)


def test_a_cluster_that_loses_a_worker_gives_the_same_files(
    cluster: tuple[str, list[subprocess.Popen[str]]],
    tiny_case: Path,
    finished_files: ReadFiles,
    tmp_path: Path,
) -> None:
    address, workers = cluster
    out = tmp_path / "cluster"
    judging = judge(tiny_case, out, "--scheduler", address)
    try:
        begun = time.monotonic()
        while len(list((out / "stages").rglob("[!.]*.npz"))) < 12:
            assert judging.poll() is None, judging.communicate()
            assert time.monotonic() - begun < PATIENCE
            time.sleep(0.01)
        assert not (out / "verdict.json").exists()
        workers[0].kill()
        _, errors = judging.communicate(timeout=PATIENCE)
    finally:
        end(judging)
    assert judging.returncode == 0, errors
    assert workers[1].poll() is None
    alone = judge(tiny_case, tmp_path / "alone", "--workers", "1")
    _, errors = alone.communicate(timeout=PATIENCE)
    assert alone.returncode == 0, errors
    assert finished_files(out) == finished_files(tmp_path / "alone")


def test_a_scheduler_that_does_not_answer_is_bad_input(tiny_case: Path, tmp_path: Path) -> None:
    asking = judge(tiny_case, tmp_path / "run", "--scheduler", "tcp://127.0.0.1:9")
    _, errors = asking.communicate(timeout=PATIENCE)
    assert asking.returncode == 2
    assert "no scheduler answers at this address" in errors
    assert "Traceback" not in errors
