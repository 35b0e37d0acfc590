"""From the old delivery to the new one, so that a process killed at any instant leaves one of them.

Two ways, both over files that are already written, hashed and flushed to the disk:

- the whole folder is exchanged for the new one by a single call of the operating system, where it has one and nothing
  in the folder is a person's own: at every instant the folder is the old delivery or the new one;
- else file by file. A journal is written first: from then on the new delivery is decided. The old run.json goes first
  and the new one comes last, so that a folder amid its swap has none; what was cut short is completed from the
  journal at the next start, or undone where a file that it needs is gone.
"""

import contextlib
import ctypes
import errno
import hashlib
import json
import os
import shutil
import sys
from collections.abc import Iterable, Mapping
from pathlib import Path, PurePosixPath

import attrs

from geoves.errors import DeliveryError

RECORD = "run.json"
_JOURNAL, _STAGING, _REPLACED = "publishing.json", "staging", "replaced"
# What a system or a file system answers that cannot exchange two folders.
_CANNOT_EXCHANGE = (errno.ENOSYS, errno.EINVAL, errno.ENOTSUP, errno.EXDEV, errno.EBUSY, errno.EPERM, errno.EACCES)
_AT_FDCWD, _RENAME_EXCHANGE = -100, 2  # linux/fcntl.h, linux/fs.h; macOS has RENAME_SWAP = 2 (sys/stdio.h)


@attrs.frozen
class Workplace:
    """The hidden folder of a delivery: where it is written, and where what it replaces waits."""

    path: Path
    folder: Path

    @property
    def staging(self) -> Path:
        return self.path / _STAGING

    @property
    def replaced(self) -> Path:
        return self.path / _REPLACED

    @property
    def journal(self) -> Path:
        return self.path / _JOURNAL

    @property
    def unwritten(self) -> Path:
        """The journal until it is whole."""
        return self.path / f"{_JOURNAL}.tmp"

    def clear(self) -> None:
        """Remove what is left of an earlier delivery, but for a person's own files, which return to the folder."""
        _return_strangers(self.staging, self.folder)
        self.unwritten.unlink(missing_ok=True)
        for leftover in (self.staging, self.replaced):
            if leftover.exists():
                shutil.rmtree(leftover)


def swap(workplace: Workplace, hashes: Mapping[str, str], ours: Iterable[str]) -> None:
    """Put the staged files, run.json among them, in the place of `ours`, the names that the old delivery lists.

    hashes : of every staged file, run.json included
    Raises OSError where a file cannot be moved; the old delivery then still stands, or, if that fails too, the
    journal, which the next start follows.
    """
    _flush(workplace.staging)
    if _swap_whole(workplace, set(ours)):
        return
    names, old = set(hashes), {*ours, RECORD}
    _write_journal(workplace, {"files": dict(hashes), "old": sorted(old)})
    workplace.folder.mkdir(parents=True, exist_ok=True)
    try:
        _move_in(workplace, names, old)
    except OSError:
        _move_back(workplace, names, old)
        workplace.journal.unlink()
        raise
    _finish(workplace, old - names)


def finish_interrupted(workplace: Workplace) -> None:
    """Complete a swap of which the journal still stands, or undo it where a file that it needs is gone."""
    try:
        journal = json.loads(workplace.journal.read_text(encoding="utf-8"))
        hashes = {str(name): str(expected) for name, expected in journal["files"].items() if stays_inside(name)}
        old = {name for name in journal["old"] if stays_inside(name)}
    except FileNotFoundError:
        return
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        raise DeliveryError(
            f"{workplace.journal} cannot be read as the journal of an earlier run; move it away, then run again"
        ) from error
    names = set(hashes)
    if all(_hash_of(workplace, name) == expected for name, expected in hashes.items()):
        _refuse_newcomers(workplace, names, old)
        _move_in(workplace, names, old)
    else:
        _move_back(workplace, names, old)
    _finish(workplace, old - names)


def hash_file(path: Path) -> str:
    """SHA-256 of a file, in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def stays_inside(name: str) -> bool:
    """Whether a listed name lies within the folder: a record edited by hand must not reach beyond it.

    >>> stays_inside("surfaces/bedrock_depth.tif"), stays_inside("../notes.txt"), stays_inside("/etc/hosts")
    (True, False, False)
    """
    path = PurePosixPath(name)
    return (
        bool(path.parts) and not path.is_absolute() and ".." not in path.parts and ":" not in name and "\\" not in name
    )


def _swap_whole(workplace: Workplace, ours: set[str]) -> bool:
    """Whether the staged folder took the place of the delivery folder in one call."""
    staging, folder = workplace.staging, workplace.folder
    if not folder.exists():
        folder.parent.mkdir(parents=True, exist_ok=True)
        staging.rename(folder)
    elif _holds_nothing_else(folder, ours) and _is_alike(staging, folder):
        if not _exchange(staging, folder):
            return False
        _return_strangers(staging, folder)
    else:
        return False
    _flush_folder(folder.parent)
    return True


def _holds_nothing_else(folder: Path, ours: set[str]) -> bool:
    """Whether all that stands in the folder are files of earlier runs, and nobody is known to stand in it."""
    with contextlib.suppress(OSError):
        if Path.cwd().is_relative_to(folder):
            return False  # a shell that called from within would find itself in a folder that is gone
    known = {*ours, RECORD}
    above = {parent.as_posix() for name in known for parent in PurePosixPath(name).parents}
    return all(
        not path.is_symlink() and path.relative_to(folder).as_posix() in (above if path.is_dir() else known)
        for path in folder.rglob("*")
    )


def _is_alike(staging: Path, folder: Path) -> bool:
    """Whether the new folder would have the owner, the rights and the marks of the old one."""
    if folder.is_symlink() or folder.is_mount():
        return False
    new, old = staging.stat(), folder.stat()
    marks = os.listxattr(folder) != os.listxattr(staging) if hasattr(os, "listxattr") else False
    return not marks and (new.st_uid, new.st_gid, new.st_mode) == (old.st_uid, old.st_gid, old.st_mode)


def _exchange(one: Path, other: Path) -> bool:
    """Two folders change places in one call; False where the system or the file system has no such call."""
    names = os.fsencode(one), os.fsencode(other)
    try:
        library = ctypes.CDLL(None, use_errno=True)
        if sys.platform == "linux":
            failed = library.renameat2(_AT_FDCWD, names[0], _AT_FDCWD, names[1], ctypes.c_uint(_RENAME_EXCHANGE))
        elif sys.platform == "darwin":
            failed = library.renamex_np(*names, ctypes.c_uint(_RENAME_EXCHANGE))
        else:
            return False
    except (AttributeError, TypeError, OSError):
        return False  # an older library of the system, or none to open
    if failed and ctypes.get_errno() not in _CANNOT_EXCHANGE:
        raise OSError(ctypes.get_errno(), os.strerror(ctypes.get_errno()), str(other))
    return not failed


def _return_strangers(left: Path, folder: Path) -> None:
    """Files that a person put into the old folder at the last instant go into the new one, if their name is free.

    `left` is a folder with its run.json, of an exchange before or after its call; one without was never finished.
    """
    try:
        listed = {*json.loads((left / RECORD).read_text(encoding="utf-8"))["files"], RECORD}
    except (OSError, ValueError, KeyError, TypeError):
        return
    for path in [path for path in left.rglob("*") if path.is_symlink() or path.is_file()]:
        name = path.relative_to(left)
        place = folder / name
        if name.as_posix() not in listed and not place.exists() and not place.is_symlink():
            place.parent.mkdir(parents=True, exist_ok=True)
            path.rename(place)


def _write_journal(workplace: Workplace, journal: Mapping[str, object]) -> None:
    """Write it beside, flush it, and give it its name: from then on the swap is decided."""
    with workplace.unwritten.open("w", encoding="utf-8") as stream:
        json.dump(journal, stream)
        stream.flush()
        os.fsync(stream.fileno())
    workplace.unwritten.replace(workplace.journal)
    _flush_folder(workplace.path)


def _hash_of(workplace: Workplace, name: str) -> str | None:
    """The hash of a new file wherever the swap has it, None where it is gone."""
    for place in (workplace.staging / name, workplace.folder / name):
        if place.is_file():
            return hash_file(place)
    return None


def _refuse_newcomers(workplace: Workplace, names: set[str], old: set[str]) -> None:
    """Stop before a file that a person put, since the swap was cut short, where one of ours is still to go."""
    for name in sorted(names):
        place = workplace.folder / name
        stands = place.exists() or place.is_symlink()
        if stands and (workplace.staging / name).exists() and (name not in old or (workplace.replaced / name).exists()):
            raise DeliveryError(f"{place} stands where a delivery that was cut short has a file of its own; move it")


def _move_in(workplace: Workplace, names: set[str], old: set[str]) -> None:
    """Old files out of the way, new ones in, from wherever a swap stands: the old run.json first, the new one last."""
    if (workplace.staging / RECORD).exists():
        _set_aside(workplace, RECORD)
    for name in old - names:
        _set_aside(workplace, name)
    for name in (*sorted(names - {RECORD}), RECORD):
        new, place = workplace.staging / name, workplace.folder / name
        if new.is_file():
            _set_aside(workplace, name)
            place.parent.mkdir(parents=True, exist_ok=True)
            new.replace(place)
    _flush_folder(workplace.folder)


def _set_aside(workplace: Workplace, name: str) -> None:
    """Move the old file of that name out of the folder, unless that is done."""
    place, old = workplace.folder / name, workplace.replaced / name
    if not old.exists() and (place.is_file() or place.is_symlink()):
        old.parent.mkdir(parents=True, exist_ok=True)
        place.replace(old)


def _move_back(workplace: Workplace, names: set[str], old: set[str]) -> None:
    """The way back from wherever a swap stands: new files out, old ones in, the old run.json last."""
    others = sorted((names | old) - {RECORD})
    for name in (RECORD, *others):
        new, place = workplace.staging / name, workplace.folder / name
        has_moved = (workplace.replaced / name).exists() or name not in old
        if name in names and has_moved and place.is_file() and not new.exists():
            new.parent.mkdir(parents=True, exist_ok=True)
            place.replace(new)
    for name in (*others, RECORD):
        before, place = workplace.replaced / name, workplace.folder / name
        if before.exists() or before.is_symlink():
            place.parent.mkdir(parents=True, exist_ok=True)
            before.replace(place)


def _finish(workplace: Workplace, gone: set[str]) -> None:
    """The journal goes first: what it speaks of is done."""
    workplace.journal.unlink()
    _flush_folder(workplace.path)
    for name in gone:
        for above in (workplace.folder / name).parents:
            if above == workplace.folder or not above.is_dir() or any(above.iterdir()):
                break
            above.rmdir()


def _flush(folder: Path) -> None:
    """Files and folders are on the disk, not only on their way to it."""
    for path in folder.rglob("*"):
        if path.is_dir():
            _flush_folder(path)
        else:
            with path.open("r+b") as stream:
                os.fsync(stream.fileno())
    _flush_folder(folder)


def _flush_folder(folder: Path) -> None:
    if sys.platform == "win32":
        return  # a folder cannot be opened there; its file system keeps a journal of names
    handle = os.open(folder, os.O_RDONLY)
    try:
        with contextlib.suppress(OSError):  # some network file systems refuse
            os.fsync(handle)
    finally:
        os.close(handle)
