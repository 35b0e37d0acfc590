"""Blocks that one name more or less leaves alone."""

import math

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from geoves.kernels.blocks import cut_blocks, restore_order

NAMES = st.lists(st.text(max_size=8), unique=True, max_size=60)


def as_names(names, most):
    return {tuple(names[row] for row in block) for block in cut_blocks(names, most)}


@given(NAMES, st.integers(1, 9))
def test_every_name_is_in_one_block_and_no_block_is_too_large(names, most):
    blocks = cut_blocks(names, most)
    assert sorted(row for block in blocks for row in block) == list(range(len(names)))
    assert all(0 < len(block) <= most for block in blocks)
    results = [names[row] for block in blocks for row in block]
    assert [results[place] for place in restore_order(blocks)] == names


@given(NAMES, st.integers(1, 9), st.randoms(use_true_random=False))
def test_the_order_of_the_names_is_nothing_to_the_blocks(names, most, random):
    shuffled = random.sample(names, len(names))
    assert as_names(names, most) == as_names(shuffled, most)


@given(NAMES.filter(len), st.integers(1, 9), st.data())
def test_one_name_more_changes_its_own_block_alone(names, most, data):
    new = data.draw(st.text(max_size=8).filter(lambda name: name not in names))
    before, after = as_names(names, most), as_names([*names, new], most)
    gone = before - after
    assert len(gone) <= 1
    assert {name for block in after - before for name in block} == {new, *(name for block in gone for name in block)}


def test_blocks_are_filled_to_ln_2_on_average():
    """The mean fill of a trie's leaves is ln 2 for buckets of any size (Fagin et al. 1979, from memory)."""
    sizes = [len(block) for block in cut_blocks([f"S-{number}" for number in range(20_000)], 16)]
    assert np.isclose(np.mean(sizes) / 16, math.log(2), atol=0.06)
