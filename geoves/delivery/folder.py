"""The delivery folder: written beside, verified, moved into place, run.json last."""

import contextlib
import hashlib
import json
import math
import os
import shutil
import sys
from collections.abc import Iterator, Mapping
from pathlib import Path, PurePosixPath
from typing import IO, Any

import numpy as np

from geoves.errors import DeliveryError

if sys.platform == "win32":
    import msvcrt
else:
    import fcntl

RECORD = "run.json"
_JOURNAL = "publishing.json"  # what a publication that was cut short had begun to write
_STAGING, _REPLACED, _LOCK = "staging", "replaced", "lock"


def name_workplace(folder: Path) -> Path:
    """The hidden folder beside `folder` where a run writes before it publishes.

    >>> name_workplace(Path("county/delivery")).as_posix()
    'county/.geoves-delivery'
    """
    return folder.parent / f".geoves-{folder.name}"


@contextlib.contextmanager
def stage(folder: Path) -> Iterator[Path]:
    """A new, empty folder beside `folder` to write a delivery into; it is gone when the block ends, however it ends.

    One run at a time: raises DeliveryError where another holds the folder, or where it cannot be written.
    """
    folder = folder.absolute()
    if folder.exists() and not folder.is_dir():
        raise DeliveryError(f"{folder} is a file; a delivery needs a folder")
    workplace = name_workplace(folder)
    with _hold_lock(workplace, folder):
        try:
            for leftover in (_STAGING, _REPLACED):
                if (workplace / leftover).exists():
                    shutil.rmtree(workplace / leftover)
            staging = workplace / _STAGING
            staging.mkdir()
        except OSError as error:
            raise DeliveryError(f"{workplace} cannot be written: {_say(error)}") from error
        try:
            yield staging
        finally:
            shutil.rmtree(staging, ignore_errors=True)
            shutil.rmtree(workplace / _REPLACED, ignore_errors=True)


def publish(staging: Path, folder: Path, record: Mapping[str, Any]) -> None:
    """Move every staged file to its place in `folder` and write run.json: `record` with a hash of each file.

    Before anything moves, every file is read and hashed and every name is free or ours: a file that stands there and
    that no earlier run wrote is the user's own and stops the delivery. What the earlier run wrote and this one does
    not is removed. Where a move fails, all moves are undone. Raises DeliveryError; the old delivery then still stands.
    """
    folder = folder.absolute()
    hashes = _hash_files(staging)
    ours = _list_own_files(folder)
    _refuse_collisions(folder, hashes, ours)
    text = json.dumps({**_plain(record), "files": hashes}, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    workplace = name_workplace(folder)
    journal = workplace / _JOURNAL
    try:
        folder.mkdir(parents=True, exist_ok=True)
        workplace.mkdir(exist_ok=True)
        journal.write_text(json.dumps({"files": dict.fromkeys(sorted({*ours, *hashes}), "")}), encoding="utf-8")
        (workplace / RECORD).write_text(text, encoding="utf-8")
        _move_all(staging, folder, workplace, sorted(ours | set(hashes)))
        (workplace / RECORD).replace(folder / RECORD)
        journal.unlink()
        _remove_empty_folders(folder, ours - set(hashes))
    except OSError as error:
        raise DeliveryError(f"the delivery could not be put into {folder}: {_say(error)}") from error


def _plain(value: Any) -> Any:
    """A value as JSON can hold it: arrays as lists, what is not finite as null, what is neither as words.

    >>> _plain({"noise": np.float32(0.5), "reach": float("nan"), "path": PurePosixPath("a/b"), 3: (1, np.int64(2))})
    {'noise': 0.5, 'reach': None, 'path': 'a/b', '3': [1, 2]}
    """
    if isinstance(value, np.ndarray | np.generic):
        value = value.tolist()
    if isinstance(value, Mapping):
        return {str(key): _plain(held) for key, held in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(held) for held in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value if value is None or isinstance(value, bool | int | float | str) else str(value)


def hash_file(path: Path) -> str:
    """SHA-256 of a file, in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def _hash_files(staging: Path) -> dict[str, str]:
    """The hash of each staged file by its name relative to the folder, all of them whole."""
    hashes = {}
    for path in sorted(staging.rglob("*")):
        if path.is_dir():
            continue
        name = path.relative_to(staging).as_posix()
        if path.is_symlink() or not path.is_file():
            raise DeliveryError(f"{name} is not an ordinary file")
        if path.suffix == ".tmp" or path.stat().st_size == 0:
            raise DeliveryError(f"{name} is unfinished; nothing was delivered")
        hashes[name] = hash_file(path)
    if not hashes:
        raise DeliveryError("there is nothing to deliver")
    if RECORD in hashes:
        raise DeliveryError(f"{RECORD} is written by the publication itself")
    return hashes


def _list_own_files(folder: Path) -> set[str]:
    """Names of the files that earlier runs wrote: of run.json, and of a publication that was cut short."""
    own: set[str] = set()
    for listing in (folder / RECORD, name_workplace(folder) / _JOURNAL):
        try:
            files = json.loads(listing.read_text(encoding="utf-8"))["files"]
        except FileNotFoundError:
            continue
        except (OSError, ValueError, KeyError, TypeError) as error:
            raise DeliveryError(
                f"{listing} cannot be read as the record of an earlier run; move it away, then run again ({error})"
            ) from error
        if not isinstance(files, dict):
            raise DeliveryError(f"{listing} does not list its files; move it away, then run again")
        own |= {name for name in files if _stays_inside(name)}
    return own


def _stays_inside(name: str) -> bool:
    """Whether a listed name lies within the folder: a record edited by hand must not reach beyond it.

    >>> _stays_inside("surfaces/bedrock_depth.tif"), _stays_inside("../notes.txt"), _stays_inside("/etc/hosts")
    (True, False, False)
    """
    path = PurePosixPath(name)
    return (
        bool(path.parts) and not path.is_absolute() and ".." not in path.parts and ":" not in name and "\\" not in name
    )


def _refuse_collisions(folder: Path, hashes: Mapping[str, str], ours: set[str]) -> None:
    foreign = []
    for name in hashes:
        place = folder / name
        if place.is_dir():
            foreign.append(f"{name} is a folder")
        elif (place.exists() or place.is_symlink()) and name not in ours:
            foreign.append(name)
        foreign += [
            above.relative_to(folder).as_posix()
            for above in place.parents
            if above.is_relative_to(folder) and above.exists() and not above.is_dir()
        ]
    if foreign:
        listed = ", ".join(dict.fromkeys(foreign))
        raise DeliveryError(f"{folder} holds files that geoves did not write under its own names: {listed}; move them")


def _move_all(staging: Path, folder: Path, workplace: Path, names: list[str]) -> None:
    """Old files out of the way, new ones in; all undone where one fails. The old run.json goes first."""
    replaced = workplace / _REPLACED
    undo: list[tuple[Path, Path]] = []
    try:
        for name in (RECORD, *names):
            place, old = folder / name, replaced / name
            if place.is_file() or place.is_symlink():
                old.parent.mkdir(parents=True, exist_ok=True)
                place.replace(old)
                undo.append((old, place))
            if (staging / name).is_file():
                place.parent.mkdir(parents=True, exist_ok=True)
                (staging / name).replace(place)
                undo.append((place, staging / name))
    except OSError:
        for now, before in reversed(undo):
            now.replace(before)
        raise


def _remove_empty_folders(folder: Path, gone: set[str]) -> None:
    for name in gone:
        for above in (folder / name).parents:
            if above == folder or not above.is_dir() or any(above.iterdir()):
                break
            above.rmdir()


@contextlib.contextmanager
def _hold_lock(workplace: Path, folder: Path) -> Iterator[None]:
    """The lock of the operating system on a file in `workplace`, so that a run that was killed leaves none behind."""
    stream = _open_locked(workplace, folder)
    try:
        yield
    finally:
        lock = workplace / _LOCK
        if sys.platform == "win32":
            stream.close()  # an open file cannot be removed there
            with contextlib.suppress(OSError):
                lock.unlink()
        else:
            lock.unlink(missing_ok=True)
            stream.close()
        with contextlib.suppress(OSError):  # stays where a journal does
            workplace.rmdir()


def _open_locked(workplace: Path, folder: Path) -> IO[bytes]:
    lock = workplace / _LOCK
    while True:
        try:
            workplace.mkdir(parents=True, exist_ok=True)
            stream = lock.open("ab")
        except FileNotFoundError:
            continue  # a run that ended just now took its folder away
        except OSError as error:
            raise DeliveryError(f"{folder} cannot be written: {_say(error)}") from error
        try:
            _lock_file(stream)
        except OSError as error:
            stream.close()
            raise DeliveryError(f"another run is writing {folder}; wait until it has ended") from error
        if lock.exists() and os.path.samestat(lock.stat(), os.fstat(stream.fileno())):
            return stream
        stream.close()  # locked a file that its owner had just removed


def _lock_file(stream: IO[bytes]) -> None:
    """Lock an open file for this process alone; raises OSError at once where another holds it."""
    if sys.platform == "win32":
        msvcrt.locking(stream.fileno(), msvcrt.LK_NBLCK, 1)
    else:
        fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)


def _say(error: OSError) -> str:
    named = f"{error.strerror}: {error.filename}" if error.filename else error.strerror
    return named or str(error)
