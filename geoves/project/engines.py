"""Where blocks are worked: in this process, in several, or on a Dask cluster, behind one map-like callable."""

import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Future, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import AbstractContextManager, contextmanager
from multiprocessing import get_context, parent_process
from threading import Thread
from typing import Any

import numpy as np  # noqa: F401 - loaded before threads are limited, with scipy.linalg: each has a BLAS of its own
import scipy.linalg  # noqa: F401
from threadpoolctl import threadpool_limits

from geoves.errors import EngineError
from geoves.project.progress import Step
from geoves.project.seam import Map

MOST_WORKERS = 4  # where none are asked for
MOST_LOSSES = 3  # worker processes that may be lost in one run
_AHEAD = 2  # blocks that wait for each worker


def open_engine(workers: int | None = None, scheduler: str | None = None) -> AbstractContextManager[Map]:
    """A map over blocks that keeps their order: the builtin for one worker, processes for more, or a cluster's.

    `workers` defaults to the cores this process may use, four at most. Linear algebra keeps to one thread
    everywhere: its matrices are small, and results then do not depend on how many there are.
    """
    if scheduler is not None:
        from geoves.project.cluster import open_cluster  # noqa: PLC0415 - an extra that few install

        return open_cluster(scheduler)
    return _open_processes(workers or min(MOST_WORKERS, _count_cores()))


def _count_cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@contextmanager
def _open_processes(workers: int) -> Iterator[Map]:
    with threadpool_limits(limits=1):
        if workers == 1:
            yield map
            return
        processes = _Processes(workers)
        try:
            yield processes.map
        finally:
            processes.close()


class _Processes:
    """A pool of processes that survives the loss of a few: what they had in hand is worked again."""

    def __init__(self, workers: int) -> None:
        self._workers, self._losses, self._returned = workers, 0, 0
        self._pool: ProcessPoolExecutor | None = None

    def map(self, work: Callable[[Any], Any], blocks: Iterable[Any]) -> Iterator[Any]:
        """Results in the order of the blocks, a few of which are under way at a time."""
        waiting: deque[tuple[Any, Future[Any]]] = deque()
        coming = iter(blocks)
        try:
            while True:
                while len(waiting) < _AHEAD * self._workers:
                    try:
                        block = next(coming)
                    except StopIteration:
                        break
                    waiting.append((block, self._submit(work, block)))
                if not waiting:
                    return
                yield self._wait(work, waiting)
        finally:
            for _, future in waiting:
                future.cancel()

    def close(self) -> None:
        """End the processes."""
        if self._pool is not None:
            self._pool.shutdown(cancel_futures=True)
            self._pool = None

    def _wait(self, work: Callable[[Any], Any], waiting: deque[tuple[Any, Future[Any]]]) -> Any:
        """The first result; where its worker was lost, all that waits is handed to a new pool."""
        while True:
            try:
                result = waiting[0][1].result()
            except BrokenProcessPool as error:
                self._replace_pool(error)
                again = [(block, _done_or(future, work, block, self._submit)) for block, future in waiting]
                waiting.clear()
                waiting.extend(again)
                continue
            waiting.popleft()
            self._returned += 1
            return result

    def _submit(self, work: Callable[[Any], Any], block: Any) -> Future[Any]:
        while True:
            if self._pool is None:
                context = get_context("spawn")
                self._pool = ProcessPoolExecutor(self._workers, mp_context=context, initializer=_prepare_process)
            try:
                return self._pool.submit(work, block)
            except BrokenProcessPool as error:
                self._replace_pool(error)

    def _replace_pool(self, error: BrokenProcessPool) -> None:
        """Count the loss. One before anything came back is no accident: the next pool would fare the same."""
        self.close()
        self._losses += 1
        if self._losses > MOST_LOSSES or not self._returned:
            raise EngineError(
                "a worker process ended before its work was done: the machine may lack memory, or a script that calls "
                'geoves lacks the line `if __name__ == "__main__":` before its work'
            ) from error


def _done_or(
    future: Future[Any],
    work: Callable[[Any], Any],
    block: Any,
    submit: Callable[[Callable[[Any], Any], Any], Future[Any]],
) -> Future[Any]:
    """The future if it came to its end before the pool broke, else a new one."""
    came_back = future.done() and not future.cancelled() and not isinstance(future.exception(), BrokenProcessPool)
    return future if came_back else submit(work, block)


def _prepare_process() -> None:
    """One thread for linear algebra, and an end when the run that started the process has ended, however it did."""
    threadpool_limits(limits=1)
    Thread(target=_end_with_parent, daemon=True).start()


def _end_with_parent() -> None:
    parent = parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)  # nobody is left to give a result to


def watched(engine: Map, step: Step) -> Map:
    """The same map, which tells a step of every block that comes back."""

    def mapped(work: Callable[[Any], Any], blocks: Iterable[Any]) -> Iterator[Any]:
        for result in engine(work, blocks):
            step.advance()
            yield result

    return mapped
