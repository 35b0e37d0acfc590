"""The delivery folder under success, failure, interruption and a second run at once."""

import hashlib
import json
import os
from pathlib import Path

import numpy as np
import pytest

from geoves.delivery.folder import _list_own_files, name_workplace, publish, stage
from geoves.errors import DeliveryError


def deliver(folder, files, record=None):
    with stage(folder) as staging:
        for name, text in files.items():
            path = staging / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8")
        publish(staging, folder, record or {"software": "geoves"})


def contents(folder):
    return {p.relative_to(folder).as_posix(): p.read_text(encoding="utf-8") for p in folder.rglob("*") if p.is_file()}


@pytest.fixture
def folder(tmp_path):
    return tmp_path / "county" / "delivery"


def test_files_arrive_with_their_hashes_and_no_litter(folder):
    deliver(folder, {"map.html": "map", "surfaces/a.tif": "raster"}, {"seed": 7})
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert record["seed"] == 7
    # SHA-256 of "map", by the standard library's other entrance
    assert record["files"] == {
        "map.html": hashlib.new("sha256", b"map").hexdigest(),
        "surfaces/a.tif": hashlib.new("sha256", b"raster").hexdigest(),
    }
    assert [p.name for p in folder.parent.iterdir()] == ["delivery"]


def test_the_record_may_hold_what_json_cannot(folder):
    deliver(folder, {"map.html": "map"}, {"reach": np.float64("nan"), "counts": np.array([1, 2]), "at": Path("a")})
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert (record["reach"], record["counts"], record["at"]) == (None, [1, 2], "a")


def test_second_run_replaces_removes_its_own_and_keeps_the_users(folder):
    deliver(folder, {"map.html": "old", "surfaces/a.tif": "a", "styles/gone.sld": "s"})
    (folder / "notes.txt").write_text("mine", encoding="utf-8")
    (folder / "surfaces" / "mine.qgz").write_text("mine", encoding="utf-8")
    deliver(folder, {"map.html": "new", "surfaces/b.tif": "b"})
    found = contents(folder)
    record = json.loads(found.pop("run.json"))
    assert found == {"map.html": "new", "surfaces/b.tif": "b", "notes.txt": "mine", "surfaces/mine.qgz": "mine"}
    assert set(record["files"]) == {"map.html", "surfaces/b.tif"}
    assert not (folder / "styles").exists()


def test_failure_before_publishing_leaves_the_old_delivery(folder):
    deliver(folder, {"map.html": "old"})
    before = contents(folder)

    def fail():
        with stage(folder) as staging:
            (staging / "map.html").write_text("half", encoding="utf-8")
            raise RuntimeError("a step failed")

    with pytest.raises(RuntimeError):
        fail()
    assert contents(folder) == before
    assert not name_workplace(folder).exists()


def test_failure_of_a_move_is_undone(folder, monkeypatch):
    deliver(folder, {"a.txt": "old a", "b.txt": "old b", "c.txt": "old c"})
    (folder / "notes.txt").write_text("mine", encoding="utf-8")
    before = contents(folder)
    replace = Path.replace

    def refuse(self, target):
        if self.parent.name == "staging" and Path(target).name == "b.txt":
            raise PermissionError(13, "the file is open in another program", str(target))
        return replace(self, target)

    monkeypatch.setattr(Path, "replace", refuse)
    with pytest.raises(DeliveryError, match=r"open in another program.*b\.txt"):
        deliver(folder, {"a.txt": "new a", "b.txt": "new b", "d.txt": "new d"})
    monkeypatch.undo()
    assert contents(folder) == before
    deliver(folder, {"a.txt": "new a", "b.txt": "new b", "d.txt": "new d"})
    assert set(contents(folder)) == {"a.txt", "b.txt", "d.txt", "notes.txt", "run.json"}
    assert not name_workplace(folder).exists()


def test_a_users_file_under_our_name_stops_the_delivery(folder):
    folder.mkdir(parents=True)
    (folder / "map.html").write_text("mine", encoding="utf-8")
    with pytest.raises(DeliveryError, match=r"map\.html; move"):
        deliver(folder, {"map.html": "ours", "report.html": "ours"})
    assert contents(folder) == {"map.html": "mine"}


def test_a_folder_or_file_in_the_way_stops_the_delivery(folder):
    (folder / "map.html").mkdir(parents=True)
    (folder / "surfaces").write_text("mine", encoding="utf-8")
    with pytest.raises(DeliveryError, match=r"map\.html is a folder, surfaces"):
        deliver(folder, {"map.html": "ours", "surfaces/a.tif": "ours"})


@pytest.mark.parametrize(
    ("files", "says"), [({}, "nothing"), ({"a.tif": ""}, "unfinished"), ({"a.tmp": "x"}, "unfinished")]
)
def test_what_is_unfinished_is_not_delivered(folder, files, says):
    with pytest.raises(DeliveryError, match=says):
        deliver(folder, files)
    assert not folder.exists()


def test_a_record_edited_by_hand_reaches_no_file_outside(folder):
    deliver(folder, {"map.html": "old"})
    outside = folder.parent.parent / "precious.txt"
    outside.write_text("keep", encoding="utf-8")
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    record["files"] |= {"../../precious.txt": "", str(outside): "", "": "", ".": ""}
    (folder / "run.json").write_text(json.dumps(record), encoding="utf-8")
    assert _list_own_files(folder) == {"map.html"}
    deliver(folder, {"map.html": "new"})
    assert outside.read_text(encoding="utf-8") == "keep"


def test_a_record_that_is_not_ours_is_said_in_words(folder):
    folder.mkdir(parents=True)
    (folder / "run.json").write_text("[1, 2", encoding="utf-8")
    with pytest.raises(DeliveryError, match=r"run\.json cannot be read as the record of an earlier run"):
        deliver(folder, {"map.html": "ours"})


def test_where_a_file_stands_no_folder_can(tmp_path):
    (tmp_path / "delivery").write_text("a file", encoding="utf-8")
    with pytest.raises(DeliveryError, match="is a file"):
        deliver(tmp_path / "delivery", {"map.html": "ours"})
    with pytest.raises(DeliveryError, match="cannot be written"):
        deliver(tmp_path / "delivery" / "deeper" / "out", {"map.html": "ours"})


@pytest.mark.skipif(os.name == "nt" or os.geteuid() == 0, reason="the superuser may write everywhere")
def test_a_folder_without_permission_is_said_in_words(tmp_path):
    tmp_path.chmod(0o500)
    with pytest.raises(DeliveryError, match="Permission denied"):
        deliver(tmp_path / "delivery", {"map.html": "ours"})


def test_a_folder_that_may_only_be_read_is_said_before_anything_is_written(folder, monkeypatch):
    deliver(folder, {"map.html": "old"})
    monkeypatch.setattr(os, "access", lambda *_: False)
    with pytest.raises(DeliveryError, match="read-only"), stage(folder):
        pytest.fail("nothing may be staged")
    assert [path.name for path in folder.parent.iterdir()] == ["delivery"]


def test_a_link_and_its_target_are_one_folder(folder):
    deliver(folder, {"map.html": "old"})
    link = folder.parent / "link"
    link.symlink_to(folder, target_is_directory=True)
    with stage(folder), pytest.raises(DeliveryError, match="another run"):
        deliver(link, {"map.html": "second"})
    deliver(link, {"map.html": "new"})
    assert link.is_symlink()
    assert contents(folder)["map.html"] == "new"


def test_a_second_run_at_once_is_refused_and_does_no_harm(folder):
    with stage(folder) as staging:
        (staging / "map.html").write_text("first", encoding="utf-8")
        with pytest.raises(DeliveryError, match="another run"):
            deliver(folder, {"map.html": "second"})
        publish(staging, folder, {})
    assert contents(folder)["map.html"] == "first"
    deliver(folder, {"map.html": "third"})
    assert contents(folder)["map.html"] == "third"
