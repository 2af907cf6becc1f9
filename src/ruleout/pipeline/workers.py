"""Where tasks run: in this process, in local ones, or on a cluster."""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections.abc import Iterator
from concurrent.futures import BrokenExecutor, Executor, ProcessPoolExecutor, ThreadPoolExecutor
from contextlib import contextmanager
from multiprocessing import get_context
from typing import Any

from ruleout.errors import InputError, RuleoutError
from ruleout.kernel import set_threads
from ruleout.store import software


@contextmanager
def local_workers(count: int) -> Iterator[Executor]:
    """Give an executor of ``count`` processes, or of one thread of this one.

    On leaving, what is still running is given up: whatever is finished is on disk.

    Raises
    ------
    RuleoutError
        If a process is lost.
    """
    if count == 1:
        with _given_up(ThreadPoolExecutor(1, thread_name_prefix="ruleout")) as thread:
            yield thread
        return
    pool = ProcessPoolExecutor(count, mp_context=get_context("spawn"), initializer=_begin_worker)
    try:
        with _given_up(pool):
            with _interrupts_held():
                # All processes start with the first task.
                pool.submit(os.getpid)
            yield pool
    except BrokenExecutor as error:
        raise RuleoutError(
            "a worker process was lost, perhaps for want of memory; what is finished is kept. "
            "Run the same command again to go on, with fewer --workers if this comes back"
        ) from error


@contextmanager
def cluster_workers(address: str) -> Iterator[Executor]:
    """Give an executor on the Dask cluster whose scheduler listens at ``address``.

    Tasks of workers that are lost run again on others.

    Raises
    ------
    InputError
        If Dask is not installed, nothing answers, or a worker has other versions of what the
        numbers depend on.
    """
    try:
        from distributed import Client, KilledWorker
    except ImportError as error:
        raise InputError(
            "this needs Dask, which is not installed; pip install 'ruleout[cluster]'",
            where="--scheduler",
        ) from error
    try:
        client = Client(address, timeout="10s", set_as_default=False)
    except (OSError, ValueError) as error:
        raise InputError(
            "no scheduler answers at this address; give one such as tcp://host:8786, as "
            "'dask scheduler' prints it",
            where=f"--scheduler {address}",
        ) from error
    try:
        with client:
            _prepare_cluster(client)
            executor = client.get_executor(pure=False, retries=3)
            try:
                yield executor
            finally:
                executor.shutdown(wait=False)
    except KilledWorker as error:
        raise RuleoutError(
            f"the cluster gave up on a task ({error}); what is finished is kept. Run the same "
            "command again to go on"
        ) from error


def _prepare_cluster(client: Any) -> None:
    """Leave a worker's other cores to the other workers, and hold their versions against ours."""
    from distributed import WorkerPlugin

    class OneThread(WorkerPlugin):  # type: ignore[misc]
        name = "ruleout: one thread a task"

        def setup(self, worker: Any) -> None:  # noqa: ARG002
            set_threads(1)

    ours = set(software())
    try:
        found = client.run(software)
        client.register_plugin(OneThread())
    except ImportError as error:
        raise InputError(
            f"a worker of this cluster cannot import this program ({error}); install the same "
            "version on every machine of the cluster",
            where="--scheduler",
        ) from error
    for worker, versions in found.items():
        if set(versions) != ours:
            raise InputError(
                f"worker {worker} has {', '.join(sorted(set(versions) - ours))} where this "
                f"machine has {', '.join(sorted(ours - set(versions)))}; install the same "
                "versions on every machine of the cluster",
                where="--scheduler",
            )


@contextmanager
def _given_up(executor: Executor) -> Iterator[Executor]:
    """Give ``executor``; on leaving, do not wait for what is under way."""
    try:
        yield executor
    finally:
        executor.shutdown(wait=False, cancel_futures=True)
        if isinstance(executor, ProcessPoolExecutor):
            for child in multiprocessing.active_children():
                child.terminate()


@contextmanager
def _interrupts_held() -> Iterator[None]:
    """Let processes started meanwhile ignore interrupts from their first moment."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _begin_worker() -> None:
    """Leave interrupts to the parent, and the other cores to the other workers."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    set_threads(1)
    threading.Thread(target=_end_with_parent, daemon=True).start()


def _end_with_parent() -> None:
    """End this process when its parent is gone, however that came about."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)
