"""Runs a job on eight soundings again and again, killed at seeded instants; prints what was left, a line a kill.

Called by test_interruption.py as a script: one plain thread, which loads the libraries once and then forks.
"""

import hashlib
import json
import os
import random
import shutil
import signal
import sys
import time
from pathlib import Path

from geoves.delivery.folder import publish, stage
from geoves.project import provenance
from geoves.project import run as job
from geoves.project.engines import open_engine
from geoves.project.progress import SilentProgress
from geoves.project.settings import read_settings
from tests.delivery.publish_and_die import OPERATIONS, die_at, in_child, only_start

WHOLE_RUNS, PUBLICATIONS, SEED = 6, 44, 20
OWN = "notes.txt"
DAYS = {"old": "1780000000", "new": "1780172800"}  # two days apart, so that every file that is dated differs


def read(folder):
    """The hash of each file of a folder."""
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in folder.rglob("*")
        if path.is_file()
    }


def run_on(day, region, folder, afresh=False):
    os.environ["SOURCE_DATE_EPOCH"] = DAYS[day]
    job.run(region, folder, SilentProgress(), workers=1, afresh=afresh)


def name_state(folder, states):
    """Old or new where the delivery is wholly that; none where no run.json stands; mixed where one does and lies."""
    found = read(folder)
    own = found.pop(OWN, None)
    found.pop(f"surfaces/{OWN}", None)
    for name, files in states.items():
        if found == files:
            return name, own is not None
    return "mixed" if "run.json" in found else "none", own is not None


def tell(kind, folder, states):
    """What stands now, and after the next start."""
    killed = name_state(folder, states)
    in_child(only_start, folder)
    line = {"kind": kind, "killed": killed, "mended": name_state(folder, states)}
    sys.stdout.write(json.dumps(line | {"litter": sorted(one.name for one in folder.parent.iterdir())}) + "\n")


def kill_later(seconds, work, *arguments):
    """Whether the work was killed before its end."""
    child = os.fork()
    if child == 0:
        work(*arguments)
        os._exit(0)
    time.sleep(seconds)
    os.kill(child, signal.SIGKILL)
    return os.WIFSIGNALED(os.waitpid(child, 0)[1])


def kill_whole_runs(region, folder, ready, states, chance):
    started = time.monotonic()
    in_child(run_on, "new", region, folder.parent / "timed", True)
    lasts = time.monotonic() - started
    for _ in range(WHOLE_RUNS):
        in_child(publish_copy, ready["old"], folder, -1)
        shutil.rmtree(folder.parent / ".geoves_memory", ignore_errors=True)
        kill_later(chance.uniform(0.0, lasts), run_on, "new", region, folder)
        tell("run", folder, states)


def publish_copy(prepared, folder, instant):
    with stage(folder) as staging:
        shutil.copytree(prepared["files"], staging, dirs_exist_ok=True)
        die_at(instant)
        publish(staging, folder, prepared["record"])


def count_operations(prepared, folder, into):
    """How many operations a publication takes, written into a file."""
    counted = []
    sys.addaudithook(lambda event, _: counted.append(event) if event in OPERATIONS else None)
    with stage(folder) as staging:
        shutil.copytree(prepared["files"], staging, dirs_exist_ok=True)
        counted.clear()
        publish(staging, folder, prepared["record"])
    into.write_text(str(len(counted)))


def prepare(region, where):
    """For each day all files of a delivery and its record, to be published many times. Nothing is remembered here."""
    results, record = job.compute(region, SilentProgress())
    ready = {}
    for day, epoch in DAYS.items():
        os.environ["SOURCE_DATE_EPOCH"] = epoch
        dated = record | {"date": provenance.make_record(results.region, read_settings(results.region), {})["date"]}
        ready[day] = {"files": where / f"prepared-{day}", "record": dated}
        ready[day]["files"].mkdir()
        with open_engine(1) as engine:
            job.write_all(results, dated, ready[day]["files"], SilentProgress(), engine)
    return ready


def set_up(ready, folder, own):
    """The old delivery, beside files of a person if told so."""
    in_child(publish_copy, ready["old"], folder, -1)
    for place in (folder / OWN, folder / "surfaces" / OWN) if own else ():
        place.write_text("mine")


def kill_publications(folder, ready, states, chance):
    count = folder.parent.parent / "count"
    for own in (False, True):
        set_up(ready, folder, own)
        in_child(count_operations, ready["new"], folder, count)
        for instant in sorted(chance.sample(range(1, int(count.read_text())), PUBLICATIONS // 2)):
            set_up(ready, folder, own)
            in_child(publish_copy, ready["new"], folder, instant)
            tell("own" if own else "publication", folder, states)


def main(region, where):
    os.fsync = lambda _: None  # a kill loses nothing that was written; only a power cut does
    chance, folder = random.Random(SEED), where / "county" / "delivery"  # noqa: S311 - instants, no secrets
    ready = prepare(region, where)
    states = {}
    for day in DAYS:
        in_child(publish_copy, ready[day], where / day / "delivery", -1)
        states[day] = read(where / day / "delivery")
    kill_whole_runs(region, folder, ready, states, chance)
    in_child(run_on, "new", region, folder)  # from whatever blocks the last killed run had finished
    tell("resumed", folder, states)
    kill_publications(folder, ready, states, chance)


if __name__ == "__main__":
    main(Path(sys.argv[1]), Path(sys.argv[2]))
