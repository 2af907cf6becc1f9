"""Runs that are killed or interrupted: nothing is corrupt, and going on gives the same bytes."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

ReadFiles = Callable[[Path], dict[str, bytes]]
# The reference run is made once, and its duration measured on a machine as busy as for the rest.
together = pytest.mark.xdist_group("interruption")
PATIENCE = 300.0
"""Seconds after which a run is taken to hang."""


def start(case: Path, out: Path, *words: str) -> subprocess.Popen[str]:
    """Start judging in a process group of its own."""
    options = ["--out", str(out), "--effort", "quick", "--seed", "2", *words]
    return subprocess.Popen(
        [sys.executable, "-m", "ruleout", "judge", str(case), *options],
        env={**os.environ, "COLUMNS": "80", "NO_COLOR": "1"},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def finish(process: subprocess.Popen[str]) -> tuple[int, str]:
    """Wait for the end; return the exit status and what was said on standard error."""
    try:
        _, errors = process.communicate(timeout=PATIENCE)
    finally:
        end(process)
    return process.returncode, errors


def end(process: subprocess.Popen[str]) -> None:
    """Kill what is left of the process group."""
    with contextlib.suppress(ProcessLookupError):
        os.killpg(process.pid, signal.SIGKILL)


def pieces(out: Path) -> int:
    return len(list((out / "stages").rglob("[!.]*.npz")))


def wait_for_pieces(process: subprocess.Popen[str], out: Path, count: int) -> None:
    begun = time.monotonic()
    while pieces(out) < count:
        assert process.poll() is None, process.communicate()
        assert time.monotonic() - begun < PATIENCE
        time.sleep(0.01)


def members(group: int) -> list[int]:
    """Return the living processes of a process group."""
    found = []
    for entry in Path("/proc").iterdir():
        with contextlib.suppress(OSError, ValueError):
            state, _, own = (entry / "stat").read_text().rpartition(")")[2].split()[:3]
            if int(own) == group and state != "Z":
                found.append(int(entry.name))
    return found


def wait_until_gone(group: int, seconds: float) -> list[int]:
    """Return what still lives of the process group after waiting for its end."""
    begun = time.monotonic()
    while (left := members(group)) and time.monotonic() - begun < seconds:
        time.sleep(0.05)
    return left


@pytest.fixture(scope="module")
def whole(
    tiny_case: Path, finished_files: ReadFiles, tmp_path_factory: pytest.TempPathFactory
) -> tuple[dict[str, bytes], float]:
    """Files of an uninterrupted run, and how long it took."""
    out = tmp_path_factory.mktemp("whole") / "run"
    begun = time.monotonic()
    status, errors = finish(start(tiny_case, out, "--workers", "1"))
    assert status == 0, errors
    return finished_files(out), time.monotonic() - begun


def kill_and_resume(
    case: Path, out: Path, seconds: float, read: ReadFiles, workers: str
) -> tuple[dict[str, bytes], int]:
    """Kill a run after some time, go on with it; return its files and how many pieces were kept."""
    process = start(case, out, "--workers", workers)
    with contextlib.suppress(subprocess.TimeoutExpired):
        process.wait(seconds)
    end(process)
    process.communicate()
    kept = pieces(out) if out.exists() else 0
    status, errors = finish(start(case, out, "--workers", workers))
    assert status == 0, errors
    assert "damaged" not in errors
    assert "out of date" not in errors
    return read(out), kept


@together
@pytest.mark.parametrize(
    ("share", "workers"), [(0.5, "1"), pytest.param(0.75, "2", marks=pytest.mark.slow)]
)
def test_a_killed_run_goes_on_to_the_same_bytes(
    share: float,
    workers: str,
    tiny_case: Path,
    whole: tuple[dict[str, bytes], float],
    finished_files: ReadFiles,
    tmp_path: Path,
) -> None:
    expected, duration = whole
    found, _ = kill_and_resume(
        tiny_case, tmp_path / "run", share * duration, finished_files, workers
    )
    assert found == expected


@pytest.mark.slow
@together
def test_fifty_killed_runs_go_on_to_the_same_bytes(
    tiny_case: Path,
    whole: tuple[dict[str, bytes], float],
    finished_files: ReadFiles,
    tmp_path: Path,
) -> None:
    expected, duration = whole
    rng = np.random.default_rng(2026)
    kept = []
    for number in range(50):
        out = tmp_path / f"run{number}"
        workers = "2" if number % 5 == 4 else "1"
        moment = rng.uniform(0.1, 1.0) * duration
        found, count = kill_and_resume(tiny_case, out, moment, finished_files, workers)
        assert found == expected, (number, moment)
        kept.append(count)
    # The moments must have hit runs that were really under way.
    most = max(kept)
    assert sum(0 < count < most for count in kept) >= 10


@together
@pytest.mark.parametrize("workers", ["1", "2"])
def test_an_interrupt_ends_soon_says_what_is_kept_and_leaves_nobody_behind(
    workers: str,
    tiny_case: Path,
    whole: tuple[dict[str, bytes], float],
    finished_files: ReadFiles,
    tmp_path: Path,
) -> None:
    expected, _ = whole
    out = tmp_path / "run"
    process = start(tiny_case, out, "--workers", workers)
    wait_for_pieces(process, out, 8)
    begun = time.monotonic()
    # A terminal sends Ctrl-C to the whole group.
    os.killpg(process.pid, signal.SIGINT)
    status = process.wait(PATIENCE)
    took = time.monotonic() - begun
    left = wait_until_gone(process.pid, 10)
    end(process)
    errors = process.communicate()[1]
    assert status == 130
    # Under a second on an idle machine; tests run on busy ones.
    assert took < 10
    assert not left
    assert "Traceback" not in errors, errors
    assert "leaked" not in errors, errors
    assert f"ruleout: stopped. Finished stages are kept in {out}" in " ".join(errors.split())
    assert "same command again" in errors
    assert not (out / "verdict.json").exists()
    status, errors = finish(start(tiny_case, out, "--workers", workers))
    assert status == 0, errors
    assert finished_files(out) == expected


@together
def test_workers_end_when_their_parent_is_killed(tiny_case: Path, tmp_path: Path) -> None:
    out = tmp_path / "run"
    process = start(tiny_case, out, "--workers", "2")
    wait_for_pieces(process, out, 3)
    assert len(members(process.pid)) >= 3
    process.kill()
    process.wait()
    left = wait_until_gone(process.pid, 30)
    end(process)
    process.communicate()
    assert not left


FULL = """
import resource, sys
limit = int(sys.argv[1])
resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))
from ruleout.cli import main
sys.exit(main(sys.argv[2:]))
"""


@together
@pytest.mark.parametrize(
    ("limit", "reached"),
    [
        pytest.param(1_000, 0, id="first piece", marks=pytest.mark.slow),
        pytest.param(60_000, 8, id="chains or fits"),
    ],
)
def test_without_room_the_run_stops_plainly_and_goes_on_later(
    limit: int,
    reached: int,
    tiny_case: Path,
    whole: tuple[dict[str, bytes], float],
    finished_files: ReadFiles,
    tmp_path: Path,
) -> None:
    expected, _ = whole
    out = tmp_path / "run"
    words = ["judge", str(tiny_case), "--out", str(out), "--effort", "quick", "--seed", "2"]
    stopped = subprocess.run(
        [sys.executable, "-c", FULL, str(limit), *words, "--workers", "1"],
        capture_output=True,
        text=True,
        check=False,
        timeout=PATIENCE,
    )
    assert stopped.returncode == 1, stopped.stderr
    assert "no room left to write" in stopped.stderr
    assert "Traceback" not in stopped.stderr
    assert pieces(out) >= reached
    status, errors = finish(start(tiny_case, out, "--workers", "1"))
    assert status == 0, errors
    assert finished_files(out) == expected


@together
def test_a_second_run_on_the_folder_is_refused(tiny_case: Path, tmp_path: Path) -> None:
    out = tmp_path / "run"
    first = start(tiny_case, out, "--workers", "1")
    try:
        wait_for_pieces(first, out, 1)
        status, errors = finish(start(tiny_case, out, "--workers", "1"))
    finally:
        end(first)
        first.communicate()
    assert status == 2
    assert "another run is writing to this folder" in errors
    assert len(errors.strip().splitlines()) <= 2
