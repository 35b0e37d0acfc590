"""The delivery folder: written beside, verified, put in the place of the old one, run.json last."""

import contextlib
import json
import math
import os
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from geoves.delivery.lock import hold_lock, say
from geoves.delivery.swap import RECORD, Workplace, finish_interrupted, hash_file, stays_inside, swap
from geoves.errors import DeliveryError, GeovesError

_PROBE, _PROBE_SIZE = "probe", 4 * 2**20  # bytes: what a disk must still take that is not to blame


def name_workplace(folder: Path) -> Path:
    """The hidden folder beside `folder` where a run writes before it publishes; inside, where a disk begins there.

    >>> name_workplace(Path("county/delivery")).as_posix()
    'county/.geoves-delivery'
    """
    return (folder if folder.is_mount() else folder.parent) / f".geoves-{folder.name}"


@contextlib.contextmanager
def stage(folder: Path) -> Iterator[Path]:
    """A new, empty folder to write a delivery into; it is gone when the block ends, however it ends.

    What an earlier run that was killed left half done is completed or undone first. One run at a time: raises
    DeliveryError where another holds the folder, where it cannot be written, or where the block failed for want of
    room on the disk.
    """
    folder = folder.resolve()
    if folder.exists() and not folder.is_dir():
        raise DeliveryError(f"{folder} is a file; a delivery needs a folder")
    if folder.exists() and not os.access(folder, os.W_OK | os.X_OK):
        raise DeliveryError(f"{folder} cannot be written: it is read-only, or yours to read only")
    workplace = Workplace(name_workplace(folder), folder)
    with hold_lock(workplace.path, folder):
        try:
            finish_interrupted(workplace)
            workplace.clear()
            workplace.staging.mkdir()
        except OSError as error:
            if isinstance(error, GeovesError):
                raise
            raise DeliveryError(f"{workplace.path} cannot be written: {say(error)}") from error
        try:
            yield workplace.staging
        except Exception as error:
            elsewhere = isinstance(error, GeovesError) and not isinstance(error, DeliveryError)
            fault = None if elsewhere else _find_disk_fault(workplace.staging)
            if fault is None:
                raise
            raise DeliveryError(
                f"{workplace.path} cannot be written: {fault}; the old delivery still stands"
            ) from error
        finally:
            if not workplace.journal.exists():  # a swap that could be neither made nor undone waits for the next start
                with contextlib.suppress(OSError):
                    workplace.clear()


def publish(staging: Path, folder: Path, record: Mapping[str, Any]) -> None:
    """Put what is staged in the place of the old delivery, with run.json: `record` and a hash of each file.

    Before anything moves, every file is read and hashed and every name is free or ours: a file that stands there and
    that no earlier run wrote is the user's own and stops the delivery. What the earlier run wrote and this one does
    not is removed. Where a move fails, all moves are undone. Raises DeliveryError; the old delivery then still stands.
    """
    folder = folder.resolve()
    hashes = _hash_files(staging)
    ours = _list_own_files(folder)
    _refuse_collisions(folder, hashes, ours)
    text = json.dumps({**_plain(record), "files": hashes}, indent=2, ensure_ascii=False, allow_nan=False) + "\n"
    try:
        (staging / RECORD).write_text(text, encoding="utf-8")
        swap(Workplace(name_workplace(folder), folder), {**hashes, RECORD: hash_file(staging / RECORD)}, ours)
    except OSError as error:
        raise DeliveryError(f"the delivery could not be put into {folder}: {say(error)}") from error


def _find_disk_fault(staging: Path) -> str | None:
    """What the system says when a little more is written, None where the disk still takes it.

    The libraries that write rasters and layers each have words of their own for a full disk; the disk has one.
    """
    probe = staging / _PROBE
    try:
        probe.write_bytes(bytes(_PROBE_SIZE))
    except OSError as error:
        return error.strerror or str(error)
    finally:
        with contextlib.suppress(OSError):
            probe.unlink(missing_ok=True)
    return None


def _plain(value: Any) -> Any:
    """A value as JSON can hold it: arrays as lists, what is not finite as null, what is neither as words.

    >>> _plain({"noise": np.float32(0.5), "reach": float("nan"), "path": Path("a"), 3: (1, np.int64(2))})
    {'noise': 0.5, 'reach': None, 'path': 'a', '3': [1, 2]}
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
    """Names of the files that the earlier run wrote, as its run.json lists them."""
    listing = folder / RECORD
    try:
        files = json.loads(listing.read_text(encoding="utf-8"))["files"]
    except FileNotFoundError:
        return set()
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise DeliveryError(
            f"{listing} cannot be read as the record of an earlier run; move it away, then run again ({error})"
        ) from error
    if not isinstance(files, dict):
        raise DeliveryError(f"{listing} does not list its files; move it away, then run again")
    return {name for name in files if stays_inside(name)}


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
