"""A real scheduler with two worker processes on loopback: the bits of one core, one worker killed in mid-run."""

import os
import signal
import subprocess
import sys
import time
from functools import partial
from pathlib import Path

import pytest

from geoves.errors import EngineError
from geoves.inversion import InversionOptions, invert
from geoves.project.encoding import encode
from geoves.project.engines import open_engine, watched
from tests.project.test_memory import survey  # noqa: F401 - a fixture

distributed = pytest.importorskip("distributed")
cluster = pytest.importorskip("geoves.project.cluster")

OPTIONS = InversionOptions(most_layers=3, draws=20, smooth_layers=5, block=1, random_seed=7)
ENVIRONMENT = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2]), "OPENBLAS_NUM_THREADS": "2"}


def start(folder, name, *arguments):
    """A process of Dask's own command, its words in a file."""
    with (folder / f"{name}.log").open("wb") as log:
        call = [sys.executable, "-m", "distributed.cli.dask_" + name.partition("-")[0], *arguments]
        return subprocess.Popen(call, stdout=log, stderr=log, env=ENVIRONMENT, cwd=folder)


def wait_for(condition, seconds=90):
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end, "the cluster did not start"
        time.sleep(0.1)


@pytest.fixture
def local(tmp_path):
    """The scheduler's address and its two workers; all of it is gone afterwards."""
    answer = tmp_path / "scheduler.json"
    arguments = ("--host", "127.0.0.1", "--port", "0", "--no-dashboard", "--scheduler-file", str(answer))
    started = [start(tmp_path, "scheduler", *arguments)]
    try:
        wait_for(answer.exists)
        wait_for(lambda: answer.read_text().rstrip().endswith("}"))
        own = (
            "--scheduler-file",
            str(answer),
            "--nthreads",
            "1",
            "--no-nanny",
            "--no-dashboard",
            "--host",
            "127.0.0.1",
        )
        started += [start(tmp_path, f"worker-{number}", *own) for number in (1, 2)]
        with distributed.Client(scheduler_file=str(answer), set_as_default=False) as client:
            client.wait_for_workers(2, timeout=90)
            address = client.scheduler.address
        yield address, started[1:]
    finally:
        for process in started:
            process.kill()
            process.wait()


def work_slowly(block, *, doomed, flag):
    """Say who took the block that is to be killed, and wait for it the first time; then give the block back."""
    if block == doomed and not flag.exists():
        flag.write_text(str(os.getpid()))
        time.sleep(60)
    return block, os.getpid()


def test_a_cluster_gives_the_bits_of_one_core(local, survey):  # noqa: F811
    told = []

    class Step:
        def advance(self, n=1):
            told.append(n)

    with open_engine(1) as engine:
        alone = invert(survey, OPTIONS, map=engine)
    with open_engine(scheduler=local[0]) as engine:
        together = invert(survey, OPTIONS, map=watched(engine, Step()))
        (threads,) = set(engine(_count_threads, range(4)))
    assert encode(alone) == encode(together)
    assert sum(told) == 2 * len(survey.soundings)
    assert threads == 1


def _count_threads(_):
    from threadpoolctl import threadpool_info

    return max(pool["num_threads"] for pool in threadpool_info())


def test_what_a_killed_worker_had_in_hand_is_worked_by_the_other(local, tmp_path):
    address, workers = local
    flag = tmp_path / "taken"
    killed = []
    with open_engine(scheduler=address) as engine:
        found = []
        for result in engine(partial(work_slowly, doomed=3, flag=flag), range(24)):
            found.append(result)
            if len(found) == 2:
                wait_for(flag.exists)
                killed.append(int(flag.read_text()))
                os.kill(killed[0], signal.SIGKILL)
    assert [block for block, _ in found] == list(range(24))
    assert killed[0] in {process.pid for process in workers}
    assert all(by != killed[0] for _, by in found[3:])


def test_an_error_of_the_work_reaches_the_caller(local):
    with open_engine(scheduler=local[0]) as engine, pytest.raises(ValueError, match="invalid literal"):
        list(engine(int, ["1", "one"]))


def test_a_worker_with_other_versions_is_refused(local, monkeypatch):
    here = cluster.describe_machine()
    strange = (*here[:-1], "another source of geoves")
    monkeypatch.setattr(cluster, "describe_machine", _Described(strange))
    with pytest.raises(EngineError, match="is not as this machine is"), open_engine(scheduler=local[0]):
        pytest.fail("the cluster must not be used")


class _Described:
    """Says one thing here and, sent to a worker, what is true there."""

    def __init__(self, here):
        self.here = here

    def __call__(self):
        return self.here

    def __reduce__(self):
        from geoves.project.memory import describe_machine

        return partial, (describe_machine,)


def test_nobody_at_the_address_is_said_in_words(monkeypatch):
    monkeypatch.setattr(cluster, "CONNECT_SECONDS", 1)
    with pytest.raises(EngineError, match=r"no Dask scheduler answers at tcp://127\.0\.0\.1:9"):
        open_engine(scheduler="tcp://127.0.0.1:9").__enter__()
