"""Finished blocks: looked up to the bit, computed anew where damaged, never run as code, bounded on the disk."""

import errno
import json
import os
import pickle
import tempfile
from collections import UserList
from functools import partial

import attrs
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from geoves.domain.survey import Survey
from geoves.domain.units import Role
from geoves.inversion import InversionOptions, invert
from geoves.kernels.blocks import cut_blocks
from geoves.kernels.covariances import Covariance
from geoves.project import memory as remembering
from geoves.project.encoding import decode, encode, fingerprint
from geoves.project.memory import Memory, remembered
from tests.conftest import small_soundings

OPTIONS = InversionOptions(most_layers=3, draws=20, smooth_layers=5, block=2, random_seed=7)
NEW = 6  # the sounding that comes later: one that does not step the noise of so few


class Counter:
    """A map that counts what it is given."""

    def __init__(self):
        self.blocks = []

    def __call__(self, work, blocks):
        for block in blocks:
            self.blocks.append(block)
            yield work(block)

    @property
    def names(self):
        return [sorted(sounding.name for sounding in block) for block in self.blocks]


@pytest.fixture(scope="module")
def survey():
    """Eight soundings without typed errors, so that both passes are made."""
    return Survey(
        tuple(
            attrs.evolve(one, curve=attrs.evolve(one.curve, relative_error=np.full(one.curve.used.size, np.nan)))
            for one in small_soundings()
        )
    )


@pytest.fixture(scope="module")
def plain(survey):
    return invert(survey, OPTIONS)


def invert_with(folder, survey):
    counter = Counter()
    return invert(survey, OPTIONS, map=remembered(counter, Memory(folder))), counter


# Bytes


def test_what_is_encoded_comes_back_to_the_bit(plain):
    covariance = Covariance(*range(len(Covariance._fields)))
    things = (None, True, 3, -0.0, 0.1, "Ω", plain[0], (1, [2.0]), {Role.COVER: 1, 4: "x"}, covariance, np.float64(0.3))
    back = decode(encode(things))
    assert back == things
    assert [type(one) for one in back] == [type(one) for one in things]
    assert np.signbit(back[3])
    for name in ("predicted", "robust_weight"):
        first, second = getattr(plain[0], name), getattr(back[6], name)
        assert first.tobytes() == second.tobytes()
        assert not second.flags.writeable


PLAIN = st.none() | st.booleans() | st.integers() | st.floats() | st.text(st.characters(exclude_categories=["Cs"]))
THINGS = st.recursive(
    PLAIN, lambda one: st.lists(one) | st.dictionaries(st.text(max_size=3), one) | st.tuples(one, one)
)


@given(THINGS)
def test_any_tree_of_plain_things_comes_back(thing):
    assert repr(decode(encode(thing))) == repr(thing)


@pytest.mark.parametrize("thing", [{1, 2}, object(), np.ma.array([1.0]), np.array([object()]), attrs, OSError()])
def test_what_is_not_known_is_refused(thing):
    with pytest.raises((TypeError, ValueError)):
        encode(thing)


def test_fingerprints_tell_arrays_options_and_functions_apart():
    one = np.arange(3.0)
    names = [
        fingerprint(partial(invert, options=OPTIONS), one),
        fingerprint(partial(invert, options=attrs.evolve(OPTIONS, draws=21)), one),
        fingerprint(partial(cut_blocks, most=2), one),
        fingerprint(partial(invert, options=OPTIONS), one + 1e-300),
        fingerprint(partial(invert, options=OPTIONS), one.astype(np.float32)),
        fingerprint(partial(invert, options=OPTIONS), one.reshape(3, 1)),
    ]
    assert len(set(names)) == len(names)
    assert names[0] == fingerprint(partial(invert, options=attrs.evolve(OPTIONS)), one.copy())


@pytest.mark.parametrize("name", ["os:system", "subprocess:Popen", "geoves.cli.main:main", "geoves.project.memory:os"])
def test_no_entry_names_a_class_that_does_anything(name):
    tree = {"kind": "named", "class": name, "values": ["true"]}
    text = json.dumps(tree).encode()
    with pytest.raises(ValueError, match=r"is not (of geoves|a class of values)"):
        decode(len(text).to_bytes(8) + text)


def test_an_own_class_is_found_so():
    """The same form, with a name that is allowed: what the refusals above are held against."""
    text = json.dumps({"kind": "enum", "class": "geoves.domain.units:Role", "values": ["cover"]}).encode()
    assert decode(len(text).to_bytes(8) + text) is Role.COVER


# Blocks


def test_a_second_run_computes_nothing_and_gives_the_same(tmp_path, survey, plain):
    first, counted = invert_with(tmp_path / "memory", survey)
    blocks = len(cut_blocks([one.name for one in survey.soundings], OPTIONS.block))
    assert len(counted.blocks) == 2 * blocks
    second, again = invert_with(tmp_path / "memory", survey)
    assert again.blocks == []
    assert encode(first) == encode(second) == encode(plain)


def test_one_sounding_more_computes_its_own_block_alone(tmp_path, survey, plain):
    less = attrs.evolve(survey, soundings=survey.soundings[:NEW] + survey.soundings[NEW + 1 :])
    new = survey.soundings[NEW].name
    invert_with(tmp_path / "memory", less)
    found, counted = invert_with(tmp_path / "memory", survey)
    assert encode(found) == encode(plain)
    assert len({one.noise for one in (*found, *invert(less, OPTIONS))}) == 1, "the noise stepped: choose another survey"
    assert counted.names
    assert all(new in names for names in counted.names)


def test_rows_put_in_above_and_corrected_notes_compute_nothing(tmp_path, survey):
    invert_with(tmp_path / "memory", survey)
    noted = [
        attrs.evolve(one, note="read twice", extra={"crew": "B"}, curve=attrs.evolve(one.curve, row=one.curve.row + 7))
        for one in reversed(survey.soundings)
    ]
    found, counted = invert_with(tmp_path / "memory", attrs.evolve(survey, soundings=tuple(noted)))
    assert counted.blocks == []
    assert [one.sounding for one in found] == [one.name for one in noted]


def test_a_run_that_is_stopped_goes_on_where_it_was(tmp_path, survey):
    class StopError(Exception):
        pass

    def stopping(work, blocks):
        for number, block in enumerate(blocks):
            if number == 2:
                raise StopError
            yield work(block)

    with pytest.raises(StopError):
        invert(survey, OPTIONS, map=remembered(stopping, Memory(tmp_path / "memory")))
    _, all_of_them = invert_with(tmp_path / "other", survey)
    _, counted = invert_with(tmp_path / "memory", survey)
    assert counted.names == all_of_them.names[2:]


def entries(folder):
    return sorted(folder.glob("*/*.block"))


def cut(content):
    return content[:-9]


def flip(content):
    return content[:70] + bytes([content[70] ^ 1]) + content[71:]


class Bomb:
    def __reduce__(self):
        return os.mkdir, ("exploded",)


def pickled(content):
    return content[:47] + pickle.dumps(Bomb())


@pytest.mark.parametrize("damage", [cut, flip, lambda _: b"", lambda _: pickle.dumps(Bomb()), pickled])
def test_a_damaged_entry_is_computed_anew(tmp_path, survey, plain, damage, monkeypatch):
    monkeypatch.chdir(tmp_path)
    invert_with(tmp_path / "memory", survey)
    damaged = entries(tmp_path / "memory")[0]
    damaged.write_bytes(damage(damaged.read_bytes()))
    found, counted = invert_with(tmp_path / "memory", survey)
    assert len(counted.blocks) == 1
    assert encode(found) == encode(plain)
    assert invert_with(tmp_path / "memory", survey)[1].blocks == []
    assert not (tmp_path / "exploded").exists()


def test_an_entry_that_is_whole_but_no_result_is_computed_anew(tmp_path, survey):
    """Written by somebody who knows the format: its digest is right, its content a pickle."""
    invert_with(tmp_path / "memory", survey)
    memory = Memory(tmp_path / "memory")
    path = entries(tmp_path / "memory")[0]
    memory.keep(path.parent.name + path.stem, pickle.dumps(Bomb()))
    assert len(invert_with(tmp_path / "memory", survey)[1].blocks) == 1


def test_another_version_of_anything_computes_all(tmp_path, survey, monkeypatch):
    invert_with(tmp_path / "memory", survey)
    before = remembering.describe_machine()
    monkeypatch.setattr(remembering, "describe_machine", lambda: (*before[:-1], "another source"))
    assert invert_with(tmp_path / "memory", survey)[1].blocks


# The folder


def test_the_oldest_go_first_when_the_folder_is_full(tmp_path):
    memory = Memory(tmp_path / "memory", most_bytes=5000)
    names = [fingerprint(number) for number in range(10)]
    for number, name in enumerate(names):
        memory.keep(name, bytes(900))
        os.utime(memory._place(name), (number, number))
    memory.recall(names[0])  # the oldest is asked for, and is the youngest now
    memory.tidy()
    kept = [name for name in names if memory._place(name).exists()]
    assert kept == [names[0], *names[-3:]]


def test_what_a_killed_run_had_begun_is_removed_after_a_day(tmp_path):
    memory = Memory(tmp_path / "memory")
    memory.keep(fingerprint(1), b"whole")
    fresh, stale = (memory._place(fingerprint(1)).with_name(f"{name}.tmp") for name in ("fresh", "stale"))
    for path in (fresh, stale):
        path.write_bytes(b"half")
    os.utime(stale, (0, 0))
    memory.tidy()
    assert (fresh.exists(), stale.exists()) == (True, False)


def test_a_full_disk_costs_the_memory_and_not_the_run(tmp_path, survey, plain, monkeypatch):
    def refuse(**_):
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(tempfile, "mkstemp", refuse)
    found, _ = invert_with(tmp_path / "memory", survey)
    assert encode(found) == encode(plain)
    assert entries(tmp_path / "memory") == []


@pytest.mark.skipif(os.name == "nt", reason="rights are told otherwise there")
def test_a_folder_that_others_may_write_is_left_alone(tmp_path, survey, plain):
    invert_with(tmp_path / "memory", survey)
    assert (tmp_path / "memory").stat().st_mode & 0o777 == 0o700
    (tmp_path / "memory").chmod(0o777)
    found, counted = invert_with(tmp_path / "memory", survey)
    assert counted.blocks
    assert encode(found) == encode(plain)


def test_work_that_has_no_bytes_of_its_own_is_done_all_the_same(tmp_path):
    memory = Memory(tmp_path / "memory")
    assert list(remembered(map, memory)(lambda one: one + 1, [1, 2])) == [2, 3]
    assert list(remembered(map, memory)(partial(cut_blocks, most=1), [UserList("a"), ["b"]])) == [[[0]], [[0]]]
    assert len(entries(tmp_path / "memory")) == 1  # a list of another kind is not encoded


def test_results_keep_their_order_over_many_stretches(tmp_path, monkeypatch):
    monkeypatch.setattr(remembering, "_STRETCH", 3)
    memory, work = Memory(tmp_path / "memory"), partial(cut_blocks, most=5)
    blocks = [["x"] * length for length in range(10)]
    list(remembered(map, memory)(work, blocks[::2]))
    counter = Counter()
    assert list(remembered(counter, memory)(work, iter(blocks))) == [work(block) for block in blocks]
    assert counter.blocks == blocks[1::2]
