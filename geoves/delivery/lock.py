"""One run at a time: a lock of the operating system, which dies with the process that holds it."""

import contextlib
import errno
import os
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import IO

from geoves.errors import DeliveryError

if sys.platform == "win32":
    import msvcrt
else:
    import fcntl

_LOCK = "lock"
# What the system answers where another process holds the lock; anything else means that it cannot be had at all.
_HELD = (errno.EACCES, errno.EAGAIN, errno.EDEADLK, 36)  # 36: EDEADLOCK, as Windows says it


@contextlib.contextmanager
def hold_lock(workplace: Path, folder: Path) -> Iterator[None]:
    """The folder `workplace`, made where it is missing and locked for this process; it is gone at the end if empty.

    Raises DeliveryError where another process holds it or `folder`, whose workplace it is, cannot be written.
    """
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
            raise DeliveryError(f"{folder} cannot be written: {say(error)}") from error
        try:
            _lock_file(stream)
        except OSError as error:
            stream.close()
            if error.errno not in _HELD:
                raise DeliveryError(f"{lock} cannot be locked: {say(error)}") from error
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


def say(error: OSError) -> str:
    """What the system says of an error, and of which file."""
    named = f"{error.strerror}: {error.filename}" if error.filename else error.strerror
    return named or str(error)
