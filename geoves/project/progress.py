"""How long work tells where it stands, without knowing who watches."""

from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager
from typing import Protocol

import attrs


class Step(Protocol):
    """A step under way."""

    def advance(self, n: int = 1) -> None:
        """Say that n more parts are done."""


class Progress(Protocol):
    """Whoever watches a job."""

    def step(self, title: str, total: int) -> AbstractContextManager[Step]:
        """A step of `total` parts, which lasts as long as the context."""


class _UnseenStep:
    """A step that nobody watches."""

    def advance(self, n: int = 1) -> None:
        """Do nothing."""


class SilentProgress:
    """A job that nobody watches."""

    @contextmanager
    def step(self, title: str, total: int) -> Iterator[Step]:  # noqa: ARG002 - nobody asks
        """A step that nobody watches."""
        yield _UnseenStep()


@attrs.frozen
class Summary:
    """What a finished job says to a person, line by line."""

    lines: tuple[str, ...]
