"""Survey -> Examination: what a good geophysicist would catch in the field sheets, and why physically."""

from geoves.checking.examine import assign_errors, examine_curves, examine_survey

__all__ = ["assign_errors", "examine_curves", "examine_survey"]
