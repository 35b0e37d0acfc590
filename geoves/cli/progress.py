"""Progress on the screen: a bar on a terminal, a line a finished step elsewhere."""

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager

from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn
from rich.progress import Progress as RichProgress

from geoves.project.progress import Progress, SilentProgress, Step


class _RichStep:
    """A step as a bar."""

    def __init__(self, bars: RichProgress, title: str, total: int) -> None:
        self._bars = bars
        self._bar = bars.add_task(title, total=total)

    def advance(self, n: int = 1) -> None:
        """Move the bar."""
        self._bars.advance(self._bar, n)


class TerminalProgress:
    """A bar for each step, which stays when it is done."""

    @contextmanager
    def step(self, title: str, total: int) -> Iterator[Step]:
        """A step with a bar."""
        titles = TextColumn("{task.description:<34}", markup=False)
        with RichProgress(titles, BarColumn(), MofNCompleteColumn(), TimeElapsedColumn()) as bars:
            yield _RichStep(bars, title, total)


class _CountedStep:
    """A step of which only the parts are counted."""

    def __init__(self) -> None:
        self.done = 0

    def advance(self, n: int = 1) -> None:
        """Count."""
        self.done += n


class LineProgress:
    """One plain line for each finished step, with its seconds."""

    @contextmanager
    def step(self, title: str, total: int) -> Iterator[Step]:
        """A step that says so when it is done."""
        started = time.monotonic()
        counted = _CountedStep()
        yield counted
        parts = f", {counted.done} of {total}" if total > 1 else ""
        print(f"{title}{parts}: {time.monotonic() - started:.1f} s", flush=True)


def choose_progress(*, quiet: bool) -> Progress:
    """Who watches: nobody, a person at a terminal, or a log."""
    if quiet:
        return SilentProgress()
    return TerminalProgress() if sys.stdout.isatty() else LineProgress()
