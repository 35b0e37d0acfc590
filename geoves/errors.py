"""What geoves raises.

::

    GeovesError
    ├── InputError(ValueError)    the tables, rasters or region.toml are wrong: one line a fault, all at once
    ├── FormatError(ValueError)   a file is not what its name says
    ├── EngineError(RuntimeError) a step could not be computed from inputs that are right
    │   └── NotInferredError      the places together say too little; each still speaks for itself
    └── DeliveryError(OSError)    the delivery could not be written
"""

from collections.abc import Sequence


class GeovesError(Exception):
    """Root of all errors that geoves raises on purpose."""


class InputError(GeovesError, ValueError):
    """The inputs are wrong. ``lines`` holds one sentence for each fault: where, what, what was expected."""

    def __init__(self, lines: Sequence[str] | str) -> None:
        self.lines: tuple[str, ...] = (lines,) if isinstance(lines, str) else tuple(lines)
        super().__init__("\n".join(self.lines))


class FormatError(GeovesError, ValueError):
    """A file cannot be read as what its name says it is."""


class EngineError(GeovesError, RuntimeError):
    """A step could not be computed although its inputs are right."""


class NotInferredError(EngineError):
    """No one geology could be inferred from all places; what each says by itself is not touched by that."""


class DeliveryError(GeovesError, OSError):
    """The delivery could not be written; what stood before still stands."""
