"""A run killed at any instant of its publication leaves the old delivery or the new one."""

import hashlib
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from geoves.delivery import swap
from geoves.delivery.folder import name_workplace, stage
from geoves.errors import DeliveryError
from tests.delivery.publish_and_die import LATEST, NEW, OLD
from tests.delivery.test_folder import contents, deliver

SCRIPT = Path(__file__).parent / "publish_and_die.py"
pytestmark = pytest.mark.skipif(os.name == "nt", reason="SIGKILL and fork are of POSIX")


def kill_everywhere(where, own):
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2]), "OPENBLAS_NUM_THREADS": "1"}
    call = [sys.executable, str(SCRIPT), str(where), json.dumps(own)]
    done = subprocess.run(call, env=environment, capture_output=True, text=True, check=True, timeout=240)
    return [json.loads(line) for line in done.stdout.splitlines()]


def delivered(found, own):
    """The delivery in a folder, as its run.json vouches for it: "old", "new", or None where none does."""
    files = {name: text for name, text in found.items() if name not in own}
    record = files.pop("run.json", None)
    if record is None:
        return None
    # SHA-256 by the standard library's other entrance
    assert json.loads(record)["files"] == {
        name: hashlib.new("sha256", text.encode()).hexdigest() for name, text in files.items()
    }
    return {str(OLD): "old", str(NEW): "new"}[
        str(dict(sorted(files.items(), key=lambda one: [*OLD, *NEW].index(one[0]))))
    ]


def test_at_every_instant_the_folder_is_the_old_delivery_or_the_new(tmp_path):
    """Nothing in the folder is a person's own: the folders change places in one call of the system."""
    rows = kill_everywhere(tmp_path / "job", {})
    stood = [delivered(killed, {}) for _, killed, _, _, _ in rows]
    assert len(rows) > 40
    assert set(stood) == {"old", "new"}  # and never None: there is no instant between
    for (_, _, mended, litter, latest), before in zip(rows, stood, strict=True):
        assert delivered(mended, {}) == before
        assert litter == ["delivery"]
        assert latest.keys() == {*LATEST, "run.json"}
    assert [done for done, *_ in rows].count(True) == 1


def test_beside_a_persons_own_files_an_unfinished_swap_shows_no_record_and_is_mended(tmp_path):
    own = {"notes.txt": "mine", "surfaces/mine.qgz": "mine too"}
    rows = kill_everywhere(tmp_path / "job", own)
    stood = [delivered(killed, own) for _, killed, _, _, _ in rows]
    assert set(stood) == {"old", "new", None}
    assert len(rows) > 50
    for (_, killed, mended, litter, latest), before in zip(rows, stood, strict=True):
        for found in (killed, mended, latest):
            assert own.items() <= found.items()
        # decided, from the journal on, even where nothing has moved yet
        assert delivered(mended, own) in {"old": ("old", "new"), None: ("new",), "new": ("new",)}[before]
        assert litter == ["delivery"]
        assert latest.keys() - own.keys() == {*LATEST, "run.json"}


def interrupt(folder, monkeypatch):
    """A swap beside a person's file, stopped half way as by a kill: its journal stands."""
    deliver(folder, OLD)
    (folder / "notes.txt").write_text("mine", encoding="utf-8")

    class Killed(BaseException):
        pass

    def stop(*_):
        raise Killed

    with monkeypatch.context() as patch:
        patch.setattr(swap, "_finish", stop)
        patch.setattr(swap.Workplace, "clear", lambda _: None)
        patch.setattr(Path, "replace", fail_at(Path.replace, "surfaces/b.tif", Killed))
        with pytest.raises(Killed):
            deliver(folder, NEW)
    assert (name_workplace(folder) / "publishing.json").exists()
    assert not (folder / "run.json").exists()


def fail_at(replace, name, error):
    def stumble(self, target):
        if "staging" in self.parts and Path(target).as_posix().endswith(name):
            raise error
        return replace(self, target)

    return stumble


@pytest.fixture
def folder(tmp_path):
    return tmp_path / "county" / "delivery"


def test_a_swap_that_lost_a_file_is_undone(folder, monkeypatch):
    interrupt(folder, monkeypatch)
    (name_workplace(folder) / "staging" / "surfaces" / "c.tif").unlink()
    with stage(folder):
        pass
    assert delivered(contents(folder), {"notes.txt"}) == "old"
    assert not name_workplace(folder).exists()


def test_a_file_put_in_the_way_since_is_not_overwritten(folder, monkeypatch):
    interrupt(folder, monkeypatch)
    (folder / "surfaces" / "c.tif").unlink()
    mine = folder / "surfaces" / "b.tif"
    mine.write_text("mine, and precious", encoding="utf-8")
    with (
        pytest.raises(DeliveryError, match=r"b\.tif stands where a delivery that was cut short has a file"),
        stage(folder),
    ):
        pytest.fail("the swap is not done")
    assert mine.read_text("utf-8") == "mine, and precious"
    mine.rename(folder / "mine.tif")
    with stage(folder):
        pass
    assert delivered(contents(folder), {"notes.txt", "mine.tif"}) == "new"


def test_a_file_put_into_the_old_folder_at_the_last_instant_comes_along(folder, monkeypatch):
    deliver(folder, OLD)
    exchange = swap._exchange

    def write_then_exchange(one, other):
        (other / "surfaces" / "late.txt").write_text("mine", encoding="utf-8")
        return exchange(one, other)

    monkeypatch.setattr(swap, "_exchange", write_then_exchange)
    deliver(folder, NEW)
    found = contents(folder)
    assert found.pop("surfaces/late.txt") == "mine"
    assert delivered(found, {}) == "new"


def test_a_folder_that_somebody_stands_in_keeps_its_identity(folder, monkeypatch):
    """A shell that called the run from within the folder would else be left in one that is gone."""
    deliver(folder, OLD)
    before = folder.stat().st_ino
    monkeypatch.chdir(folder / "surfaces")
    deliver(folder, NEW)
    assert folder.stat().st_ino == before
    monkeypatch.chdir(folder.parent)
    deliver(folder, OLD)
    assert sys.platform != "linux" or folder.stat().st_ino != before


def test_where_the_system_cannot_exchange_files_move_one_by_one(folder, monkeypatch):
    deliver(folder, OLD)
    monkeypatch.setattr(swap, "_exchange", lambda *_: False)
    before = folder.stat().st_ino
    deliver(folder, NEW)
    assert folder.stat().st_ino == before
    assert delivered(contents(folder), {}) == "new"


def test_a_move_that_can_be_neither_made_nor_undone_waits_for_the_next_start(folder, monkeypatch):
    deliver(folder, OLD)
    (folder / "notes.txt").write_text("mine", encoding="utf-8")
    with monkeypatch.context() as patch:
        patch.setattr(swap, "_move_back", fail_at_once)
        patch.setattr(Path, "replace", fail_at(Path.replace, "b.tif", PermissionError(13, "open elsewhere")))
        with pytest.raises(DeliveryError, match="open elsewhere"):
            deliver(folder, NEW)
    with stage(folder):
        pass
    assert delivered(contents(folder), {"notes.txt"}) == "new"


def fail_at_once(*_):
    raise PermissionError(13, "open elsewhere")
