"""Engines give the same answers in the same order, whoever works."""

import math
import os
import signal
import subprocess
import sys
import time
from functools import partial
from pathlib import Path

import numpy as np
import pytest
from threadpoolctl import threadpool_info

from geoves.errors import EngineError
from geoves.inversion import InversionOptions, invert
from geoves.project.engines import open_engine, watched

UNEVEN = [150_000, 3, 40_000, 2, 20_000, 1, 0]  # the first blocks take longest


@pytest.mark.parametrize("workers", [1, 2])
def test_results_come_in_the_order_of_their_blocks(workers):
    with open_engine(workers) as engine:
        results = list(engine(math.factorial, UNEVEN))
    assert results == [math.factorial(one) for one in UNEVEN]


def test_one_and_two_workers_invert_alike_to_the_bit(computed):
    survey = computed[0].survey
    options = InversionOptions(block=5, most_layers=3, random_seed=7)
    found = []
    for workers in (1, 2):
        with open_engine(workers) as engine:
            found.append(invert(survey, options, map=engine))
    assert [one.sounding for one in found[0]] == [one.name for one in survey.soundings]
    assert found[0] == found[1]


def test_an_error_in_a_worker_reaches_the_caller():
    with open_engine(2) as engine, pytest.raises(ValueError, match="not defined for negative values"):
        list(engine(math.factorial, [1, -1]))


def test_linear_algebra_keeps_to_one_thread_and_is_let_go_afterwards():
    before = [pool["num_threads"] for pool in threadpool_info()]
    assert before, "no thread pool is known: numpy has none here"
    with open_engine(1):
        assert {pool["num_threads"] for pool in threadpool_info()} == {1}
    assert [pool["num_threads"] for pool in threadpool_info()] == before


def test_a_watched_map_tells_of_every_block_and_changes_nothing():
    told = []

    class Step:
        def advance(self, n=1):
            told.append(n)

    results = watched(map, Step())(np.sqrt, [1.0, 4.0, 9.0])
    assert told == []  # nothing is done before it is asked for
    assert list(results) == [1.0, 2.0, 3.0]
    assert told == [1, 1, 1]


# A lost worker


def work_once_killed(block, *, doomed, flag):
    """Give the block back and say who did it; the process that is first to take the doomed one is killed."""
    if block == doomed and not flag.exists():
        flag.write_text("taken")
        os.kill(os.getpid(), signal.SIGKILL)
    return block, os.getpid()


def die(_):
    os.kill(os.getpid(), signal.SIGKILL)


@pytest.mark.skipif(os.name == "nt", reason="SIGKILL is of POSIX")
def test_a_lost_process_is_replaced_and_its_block_worked_again(tmp_path):
    with open_engine(2) as engine:
        found = list(engine(partial(work_once_killed, doomed=5, flag=tmp_path / "flag"), range(12)))
        again = list(engine(math.factorial, range(3)))
    assert (tmp_path / "flag").exists()
    assert [block for block, _ in found] == list(range(12))
    assert len({process for _, process in found}) > 2
    assert again == [1, 1, 2]


@pytest.mark.skipif(os.name == "nt", reason="SIGKILL is of POSIX")
def test_a_block_that_kills_every_process_ends_in_words():
    with open_engine(2) as engine:
        assert list(engine(math.factorial, [3])) == [6]
        with pytest.raises(EngineError, match="a worker process ended before its work was done"):
            list(engine(die, [1]))


ORPHANS = """
import os, sys, time
from geoves.project.engines import open_engine
def tell(_):
    return os.getpid()
if __name__ == "__main__":
    with open_engine(2) as engine:
        print(*engine(tell, range(8)), flush=True)
        time.sleep(60)
"""


@pytest.mark.skipif(not Path("/proc/self").exists(), reason="processes are looked up in /proc")
def test_workers_end_with_a_run_that_is_killed(tmp_path):
    script = tmp_path / "orphans.py"
    script.write_text(ORPHANS, encoding="utf-8")
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])}
    with subprocess.Popen([sys.executable, str(script)], stdout=subprocess.PIPE, text=True, env=environment) as run:
        workers = {int(word) for word in run.stdout.readline().split()}
        run.kill()
    assert workers
    end = time.monotonic() + 30
    while any(Path(f"/proc/{worker}/stat").exists() and not is_dead(worker) for worker in workers):
        assert time.monotonic() < end, "workers outlive their run"
        time.sleep(0.05)


def is_dead(process):
    """Whether only the entry of a process is left: its state is Z (proc(5))."""
    try:
        return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] == "Z"
    except OSError:
        return True


def test_no_more_blocks_are_taken_up_than_the_workers_need():
    taken = []

    def blocks():
        for number in range(100):
            taken.append(number)
            yield number

    with open_engine(2) as engine:
        results = iter(engine(math.factorial, blocks()))
        next(results)
        assert len(taken) <= 5  # two for each worker
        assert sum(1 for _ in results) == 99
