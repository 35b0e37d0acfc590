"""Survey, Inverted -> Interpretation: each place by itself, read through the resistivity template.

The curve's readings are weighed against every admissible sequence of units; wells are read through the drillers'
words; the interpreter's picks stand above both. What a place cannot say is a bound or nothing, never a guess.
"""

from geoves.interpretation.infer import interpret
from geoves.interpretation.options import InterpretationOptions

__all__ = ["InterpretationOptions", "interpret"]
