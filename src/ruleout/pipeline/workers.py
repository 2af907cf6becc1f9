"""Local processes that tasks run in."""

from __future__ import annotations

import multiprocessing
import signal
from collections.abc import Iterator
from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from contextlib import contextmanager
from multiprocessing import get_context

from ruleout.kernel import set_threads


@contextmanager
def local_workers(count: int) -> Iterator[Executor]:
    """Give an executor of ``count`` processes, or of one thread of this one.

    On leaving, what is still running is given up: whatever is finished is on disk.
    """
    executor: Executor
    if count == 1:
        executor = ThreadPoolExecutor(1, thread_name_prefix="ruleout")
    else:
        executor = ProcessPoolExecutor(
            count, mp_context=get_context("spawn"), initializer=_begin_worker
        )
    try:
        yield executor
    finally:
        executor.shutdown(wait=False, cancel_futures=True)
        if isinstance(executor, ProcessPoolExecutor):
            for child in multiprocessing.active_children():
                child.terminate()


def _begin_worker() -> None:
    """Leave interrupts to the parent, and the other cores to the other workers."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    set_threads(1)
