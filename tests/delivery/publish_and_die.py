"""Publishes a delivery again and again, killed at each of its operations on files in turn; prints what was left.

Called by test_interruption.py as a script: it is one plain thread, so that it may fork.
"""

import json
import os
import shutil
import signal
import sys
from pathlib import Path

from geoves.delivery.folder import publish, stage

OLD = {"a.txt": "old a", "surfaces/b.tif": "old b", "surfaces/c.tif": "old c", "styles/gone.sld": "old"}
NEW = {"a.txt": "new a", "surfaces/b.tif": "new b", "surfaces/c.tif": "new c", "metadata/d.xml": "new d"}
LATEST = {"a.txt": "latest a"}
OPERATIONS = {"open", "os.rename", "os.remove", "os.rmdir", "os.mkdir", "os.listdir", "os.scandir", "shutil.rmtree"}


def deliver(folder, files):
    with stage(folder) as staging:
        for name, text in files.items():
            (staging / name).parent.mkdir(parents=True, exist_ok=True)
            (staging / name).write_text(text, encoding="utf-8")
        publish(staging, folder, {})


def contents(folder):
    return {
        path.relative_to(folder).as_posix(): path.read_text("utf-8") for path in folder.rglob("*") if path.is_file()
    }


def die_at(instant):
    """From here on, this process kills itself before its operation number `instant`."""
    left = [instant]

    def count(event, _):
        if event in OPERATIONS:
            left[0] -= 1
            if left[0] == 0:
                os.kill(os.getpid(), signal.SIGKILL)

    sys.addaudithook(count)


def in_child(work, *arguments):
    """Whether the work came to its end in a process of its own."""
    child = os.fork()
    if child == 0:
        work(*arguments)
        os._exit(0)
    _, status = os.waitpid(child, 0)
    return not os.WIFSIGNALED(status)


def deliver_until(instant, folder, files):
    die_at(instant)
    deliver(folder, files)


def only_start(folder):
    with stage(folder):
        pass


def start_until(instant, folder):
    die_at(instant)
    only_start(folder)


def kill_everywhere(where, own):
    """A row for each instant: what stood after the kill, after the next start, and after one more delivery."""
    instant, done = 0, False
    while not done:
        instant += 1
        folder = where / "county" / "delivery"
        shutil.rmtree(where, ignore_errors=True)
        deliver(folder, OLD)
        for name, text in own.items():
            (folder / name).write_text(text, encoding="utf-8")
        done = in_child(deliver_until, instant, folder, NEW)
        killed = contents(folder)
        in_child(start_until, 1 + instant * 7 % 40, folder)  # the mending is killed too, somewhere
        in_child(only_start, folder)
        mended = contents(folder)
        litter = sorted(path.name for path in folder.parent.iterdir())
        in_child(deliver, folder, LATEST)
        sys.stdout.write(json.dumps([done, killed, mended, litter, contents(folder)]) + "\n")


if __name__ == "__main__":
    os.fsync = lambda _: None  # a kill loses nothing that was written; only a power cut does
    kill_everywhere(Path(sys.argv[1]), json.loads(sys.argv[2]))
