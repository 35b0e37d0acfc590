"""Survey, Inverted, Interpretation -> FieldEnsemble: one geology that fits every curve, well, bound and decision.

docs/explanation/one-geology.md has the mathematics.
"""

from geoves.geology.infer import infer_geology
from geoves.geology.options import GeologyOptions

__all__ = ["GeologyOptions", "infer_geology"]
