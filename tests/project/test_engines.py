"""Engines give the same answers in the same order, whoever works."""

import math

import numpy as np
import pytest
from threadpoolctl import threadpool_info

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
