"""Share blocks of work among threads, watched by a progress meter and stoppable between blocks.

The kernels release the interpreter lock, so threads are enough and nothing is copied.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ThreadPoolExecutor, wait
from contextlib import AbstractContextManager
from types import TracebackType
from typing import Protocol


class Meter(Protocol):
    """What long work reports to: `start(task, total)`, then `step(n)` as blocks are done, then `stop()`."""

    def start(self, task: str, total: int) -> None: ...
    def step(self, n: int = 1) -> None: ...
    def stop(self) -> None: ...


class Silent:
    """A meter that shows nothing, so that nobody needs to ask whether there is one."""

    def start(self, task: str, total: int) -> None:
        """Nothing."""

    def step(self, n: int = 1) -> None:
        """Nothing."""

    def stop(self) -> None:
        """Nothing."""


SILENT = Silent()


def thread_count() -> int:
    """Threads to use: SMALLBODY_THREADS if set to a whole number above zero, else the cores this process may run on."""
    asked = os.environ.get("SMALLBODY_THREADS", "")
    if asked.isdigit() and int(asked) > 0:
        return int(asked)
    if hasattr(os, "sched_getaffinity"):
        return max(1, len(os.sched_getaffinity(0)))
    return max(1, os.cpu_count() or 1)


class _Task(AbstractContextManager["_Task"]):
    def __init__(self, meter: Meter, name: str, total: int) -> None:
        self.meter = meter
        meter.start(name, total)

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, tb: TracebackType | None) -> None:
        self.meter.stop()


def blocks(count: int, size: int) -> Iterator[tuple[int, int]]:
    """Start and end of consecutive blocks of at most `size` that cover range(count)."""
    for start in range(0, count, size):
        yield start, min(start + size, count)


def share(
    work: Callable[[int, int], None], count: int, size: int, *, meter: Meter = SILENT, task: str = "", threads: int = 0
) -> None:
    """Call work(start, end) for every block of range(count), on as many threads as there are cores.

    Results go where `work` puts them. An exception (Ctrl-C among them) lets running blocks end, drops the rest,
    and is raised again.
    """
    threads = threads or thread_count()
    todo = list(blocks(count, size))
    with _Task(meter, task, count):
        if threads == 1 or len(todo) <= 1:
            for start, end in todo:
                work(start, end)
                meter.step(end - start)
            return
        pool = ThreadPoolExecutor(threads)
        try:
            pending: dict[Future[None], int] = {pool.submit(work, s, e): e - s for s, e in todo}
            while pending:
                for future in wait(pending, return_when=FIRST_COMPLETED).done:
                    future.result()
                    meter.step(pending.pop(future))
        finally:
            pool.shutdown(wait=True, cancel_futures=True)
