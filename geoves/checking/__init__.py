"""Survey -> Examination: what a good geophysicist would catch in the field sheets, and why physically."""

from geoves.checking.examine import assign_errors, examine_curves, examine_survey
from geoves.checking.options import CurveOptions

__all__ = ["CurveOptions", "assign_errors", "examine_curves", "examine_survey"]
