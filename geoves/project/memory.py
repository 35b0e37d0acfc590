"""Finished blocks, remembered in a folder: a run that was stopped goes on, and one sounding more costs its own block.

An entry is a block's result under the fingerprint of all that it rests on: the function, its options, the block's
own content, the source of geoves, the versions of the numerical libraries and the kind of the processor. So an entry
never goes out of date; it is only no longer asked for. The folder keeps its own bounds and may be deleted at any time.

What is trusted: the numbers in a folder that belongs to the person who runs. Reading an entry runs no code (it is not
a pickle), a damaged one is computed anew, and a folder of somebody else is left alone.
"""

import contextlib
import hashlib
import logging
import os
import platform
import tempfile
import time
from collections.abc import Callable, Iterable, Iterator
from importlib import metadata, resources
from itertools import islice
from pathlib import Path
from typing import Any

from threadpoolctl import threadpool_info

from geoves.project.encoding import decode, encode, fingerprint
from geoves.project.provenance import LIBRARIES
from geoves.project.seam import Map

NAME = ".geoves_memory"
MOST_BYTES = 2 * 2**30
_HEADING = b"geoves block 1\n"
_SUFFIX, _UNFINISHED = ".block", ".tmp"
_STRETCH = 256  # blocks looked up at a time: bounds what is held
_STALE = 86_400.0  # s after which what a killed run had begun to write is litter
_ABOUT = "Blocks of work that geoves has finished, so that a next run need not repeat them. Delete this at any time.\n"
_log = logging.getLogger(__name__)


class Memory:
    """Entries in a folder, or nothing at all where the folder is somebody else's or cannot be written."""

    def __init__(self, folder: Path, most_bytes: int = MOST_BYTES) -> None:
        self.folder, self._most_bytes = folder, most_bytes
        self._base = describe_machine()
        self.asked, self.recalled = 0, 0  # of what earlier runs kept
        self._own: set[str] = set()

    def fingerprint(self, *things: Any) -> str | None:
        """The name of an entry, None where something in it has no bytes of its own, or the folder is not ours."""
        try:
            return fingerprint(self._base, *things) if self._is_ours() else None
        except TypeError as reason:
            _log.debug("not remembered: %s", reason)
            return None

    def recall(self, name: str) -> bytes | None:
        """The bytes of an entry, None where there is none that is whole."""
        earlier = name not in self._own
        self.asked += earlier
        path = self._place(name)
        try:
            content = path.read_bytes()
        except OSError:
            return None
        head = len(_HEADING) + hashlib.sha256().digest_size
        if content[:head] != _HEADING + _digest(name, content[head:]):
            _log.warning("%s is damaged; its block is computed anew", path)
            return None
        with contextlib.suppress(OSError):
            os.utime(path)  # what is asked for stays longest
        self.recalled += earlier
        return content[head:]

    def keep(self, name: str, content: bytes) -> None:
        """Write an entry whole or not at all; a disk that is full costs the memory, not the run."""
        path = self._place(name)
        self._own.add(name)
        try:
            self._make_folder(path.parent)
            handle, temporary = tempfile.mkstemp(dir=path.parent, suffix=_UNFINISHED)
            try:
                with os.fdopen(handle, "wb") as stream:
                    stream.write(_HEADING + _digest(name, content) + content)
                Path(temporary).replace(path)
            finally:
                Path(temporary).unlink(missing_ok=True)
        except OSError as error:
            _log.debug("%s is not remembered: %s", path, error)

    def tidy(self) -> None:
        """Remove what was asked for longest ago until nine tenths of the bound are left, and litter."""
        entries = []
        with contextlib.suppress(OSError):
            for path in self.folder.glob(f"*/*{_UNFINISHED}"):
                if time.time() - path.stat().st_mtime > _STALE:
                    path.unlink(missing_ok=True)
            entries = [(path.stat(), path) for path in self.folder.glob(f"*/*{_SUFFIX}")]
        size = sum(held.st_size for held, _ in entries)
        if size <= self._most_bytes:
            return
        for held, path in sorted(entries, key=lambda entry: entry[0].st_mtime):
            with contextlib.suppress(OSError):
                path.unlink()
                size -= held.st_size
            if size <= 0.9 * self._most_bytes:
                break

    def _place(self, name: str) -> Path:
        return self.folder / name[:2] / f"{name[2:]}{_SUFFIX}"

    def _is_ours(self) -> bool:
        """Whether the folder belongs to who runs, or is yet to be made."""
        if not hasattr(os, "geteuid"):
            return True
        try:
            held = self.folder.lstat()
        except FileNotFoundError:
            return True
        except OSError:
            return False
        return held.st_uid == os.geteuid() and not held.st_mode & 0o022 and self.folder.is_dir()

    def _make_folder(self, shelf: Path) -> None:
        if not self.folder.exists():
            self.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
            (self.folder / "about.txt").write_text(_ABOUT, encoding="utf-8")
        shelf.mkdir(exist_ok=True)


@contextlib.contextmanager
def open_memory(beside: Path) -> Iterator[Memory]:
    """The memory beside a delivery folder; put in order when the block ends, however it ends."""
    memory = Memory(beside.resolve().parent / NAME)
    try:
        yield memory
    finally:
        memory.tidy()


def remembered(engine: Map, memory: Memory) -> Map:
    """The same map, which hands the engine only the blocks whose results are not remembered, and keeps those.

    Results come in the order of the blocks. Each is kept as soon as it is there: a run that is killed loses only what
    was under way.
    """

    def mapped(work: Callable[[Any], Any], blocks: Iterable[Any]) -> Iterator[Any]:
        task = memory.fingerprint(work)
        if task is None:
            yield from engine(work, blocks)
            return
        waiting = iter(blocks)
        while stretch := list(islice(waiting, _STRETCH)):
            yield from _map_stretch(work, stretch, task)

    def _map_stretch(work: Callable[[Any], Any], blocks: list[Any], task: str) -> Iterator[Any]:
        names = [memory.fingerprint(task, block) for block in blocks]
        found = [None if name is None else _recall(memory, name) for name in names]
        fresh = iter(engine(work, [block for block, known in zip(blocks, found, strict=True) if known is None]))
        for name, known in zip(names, found, strict=True):
            if known is not None:
                yield known[0]
                continue
            result = next(fresh)
            if name is not None:
                _keep(memory, name, result)
            yield result

    return mapped


def remembering(engine: Map, memory: Memory | None) -> Callable[[Callable[..., Any], Any], Any]:
    """Calls of a function of one argument, with the engine as its map, whose results are remembered as blocks are."""

    def call(function: Callable[..., Any], argument: Any) -> Any:
        def work_here(work: Callable[..., Any], blocks: Iterable[Any]) -> Iterator[Any]:
            return (work(block, map=engine) for block in blocks)

        mapped = work_here if memory is None else remembered(work_here, memory)
        return next(iter(mapped(function, [argument])))

    return call


def _recall(memory: Memory, name: str) -> tuple[Any] | None:
    """The remembered result, in a tuple, None where there is none that can be read."""
    content = memory.recall(name)
    if content is None:
        return None
    try:
        return (decode(content),)
    except Exception as error:  # noqa: BLE001 - whatever is wrong with an entry, its block can be computed
        _log.warning("the remembered block %s cannot be read (%s); it is computed anew", name, error)
        return None


def _keep(memory: Memory, name: str, result: Any) -> None:
    try:
        content = encode(result)
    except TypeError as reason:
        _log.debug("not remembered: %s", reason)
        return
    memory.keep(name, content)


def _digest(name: str, content: bytes) -> bytes:
    return hashlib.sha256(name.encode() + content).digest()


def describe_machine() -> tuple[str, ...]:
    """Whatever beside a block's own content can move the last bit of its result, in words."""
    processors = sorted({str(one["architecture"]) for one in threadpool_info() if "architecture" in one})
    versions = (f"{name} {metadata.version(name)}" for name in LIBRARIES)
    return (platform.system(), platform.machine(), platform.python_version(), *processors, *versions, _hash_source())


def _hash_source() -> str:
    """SHA-256 over the modules of geoves as they are installed: a version does not tell a change that is under way."""
    digest = hashlib.sha256()
    waiting = [resources.files("geoves")]
    while waiting:
        here = waiting.pop()
        for entry in sorted(here.iterdir(), key=lambda one: one.name):
            if entry.is_dir():
                waiting.append(entry)
            elif entry.name.endswith(".py"):
                digest.update(entry.name.encode() + entry.read_bytes())
    return digest.hexdigest()
