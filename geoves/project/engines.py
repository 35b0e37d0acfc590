"""Where blocks are worked: in this process or in several, behind one map-like callable."""

import os
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from multiprocessing import get_context
from typing import Any

import numpy as np  # noqa: F401 - loaded before threads are limited, with scipy.linalg: each has a BLAS of its own
import scipy.linalg  # noqa: F401
from threadpoolctl import threadpool_limits

from geoves.errors import EngineError
from geoves.project.progress import Step

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]


@contextmanager
def open_engine(workers: int | None = None) -> Iterator[Map]:
    """A map over blocks that keeps their order: the builtin for one worker, processes for more.

    `workers` defaults to the cores this process may use, four at most. Linear algebra keeps to one thread
    everywhere: its matrices are small.
    """
    workers = workers or min(
        4, len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    )
    with threadpool_limits(limits=1):
        if workers == 1:
            yield map
            return
        try:
            with ProcessPoolExecutor(workers, mp_context=get_context("spawn"), initializer=_keep_to_one_thread) as pool:
                yield pool.map
        except BrokenProcessPool as error:
            raise EngineError(
                "a worker process ended before its work was done: the machine may lack memory, or a script that calls "
                'geoves lacks the line `if __name__ == "__main__":` before its work'
            ) from error


def _keep_to_one_thread() -> None:
    threadpool_limits(limits=1)


def watched(engine: Map, step: Step) -> Map:
    """The same map, which tells a step of every block that comes back."""

    def mapped(work: Callable[[Any], Any], blocks: Iterable[Any]) -> Iterator[Any]:
        for result in engine(work, blocks):
            step.advance()
            yield result

    return mapped
