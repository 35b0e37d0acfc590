"""Blocks on an existing Dask cluster: the extra `cluster` (`pip install geoves[cluster]`).

A cluster runs what it is sent, and sends back what is then taken for a result: use one that you trust, over a network
that you trust or by TLS (`tls://` and Dask's own configuration).
"""

import contextlib
import time
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from typing import Any

from threadpoolctl import threadpool_limits

from geoves.errors import EngineError
from geoves.project.memory import describe_machine
from geoves.project.seam import Map

try:
    from distributed import Client, WorkerPlugin
    from distributed.client import FutureCancelledError
    from distributed.scheduler import KilledWorker
except ImportError as error:
    raise EngineError("a cluster needs the library distributed: pip install 'geoves[cluster]'") from error

CONNECT_SECONDS, PATIENCE_SECONDS, LOOK_SECONDS = 15, 60.0, 5.0
_AHEAD = 3  # blocks that wait for each thread of the cluster
_PLUGIN = "geoves-one-thread"


class _OneThread(WorkerPlugin):
    """Linear algebra on one thread, as long as a run uses the worker; on workers too that come later."""

    def setup(self, worker: Any) -> None:  # noqa: ARG002 - Dask's own signature
        self.limits = threadpool_limits(limits=1)

    def teardown(self, worker: Any) -> None:  # noqa: ARG002
        self.limits.restore_original_limits()


@contextlib.contextmanager
def open_cluster(address: str) -> Iterator[Map]:
    """A map over blocks that are worked by the cluster whose scheduler is at `address`, in their order.

    What a lost worker had in hand is worked again by another; that is Dask's own doing. Raises EngineError where
    nobody answers, no worker is there, or one has other versions: the same bits need the same libraries.
    """
    try:
        client = Client(address, timeout=CONNECT_SECONDS, set_as_default=False)
    except (OSError, ValueError, TimeoutError) as error:
        raise EngineError(f"no Dask scheduler answers at {address}: {error}") from error
    try:
        with threadpool_limits(limits=1):
            _refuse_strange_workers(client)
            client.register_plugin(_OneThread(), name=_PLUGIN)
            yield _Cluster(client).map
    finally:
        _leave(client)


class _Cluster:
    """The map of a connected client."""

    def __init__(self, client: Any) -> None:
        self._client = client

    def map(self, work: Callable[[Any], Any], blocks: Iterable[Any]) -> Iterator[Any]:
        """Results in the order of the blocks, a few of which are under way for each thread of the cluster."""
        waiting: deque[Any] = deque()
        coming = iter(blocks)
        most = _AHEAD * max(sum(self._client.nthreads().values()), 1)
        while True:
            for block in coming:
                waiting.append(self._client.submit(work, block, pure=False))
                if len(waiting) == most:
                    break
            if not waiting:
                return
            yield self._wait(waiting.popleft())

    def _wait(self, future: Any) -> Any:
        """The result of a block, or EngineError once no worker has been there for a minute."""
        last_seen = time.monotonic()
        while True:
            try:
                return future.result(timeout=LOOK_SECONDS)
            except KilledWorker as error:
                raise EngineError(f"the cluster lost every worker that took up a block: {error}") from error
            except FutureCancelledError as error:
                raise EngineError(f"the connection to the cluster was lost: {error}") from error
            except TimeoutError as error:
                if future.status == "error":
                    raise  # the work's own
                if self._client.nthreads():
                    last_seen = time.monotonic()
                elif time.monotonic() - last_seen > PATIENCE_SECONDS:
                    raise EngineError(f"the cluster has had no worker for {PATIENCE_SECONDS:.0f} s") from error


def _refuse_strange_workers(client: Any) -> None:
    """Raise EngineError where a worker is not as this machine is, in whatever can move the last bit."""
    try:
        described = client.run(describe_machine)
    except Exception as error:
        raise EngineError(
            f"a worker of the cluster cannot run geoves; install the same version there: {error}"
        ) from error
    if not described:
        raise EngineError("the cluster has no workers; start some, then run again")
    here = describe_machine()
    for worker, there in described.items():
        if apart := sorted(set(there) ^ set(here)):
            raise EngineError(
                f"the worker {worker} is not as this machine is, so that its results would differ in their last "
                f"digits: {', '.join(one[:60] for one in apart)}; install the same versions there"
            )


def _leave(client: Any) -> None:
    with contextlib.suppress(Exception):  # the cluster may be gone; nothing of ours is left there then
        client.unregister_worker_plugin(_PLUGIN)
    client.close()
