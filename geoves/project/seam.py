"""The one seam of engines, progress and memory: a map-like callable over blocks, in their order."""

from collections.abc import Callable, Iterable
from typing import Any

Map = Callable[[Callable[[Any], Any], Iterable[Any]], Iterable[Any]]
