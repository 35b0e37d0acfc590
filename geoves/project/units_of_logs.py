"""Drillers' words to units of the template, for the checks, which know neither words nor their interpretation."""

from collections.abc import Callable

from geoves.domain.survey import LogInterval
from geoves.domain.units import Template


def claim_unit(template: Template) -> Callable[[LogInterval], str | None]:
    """A function that gives an interval's unit: the one that was typed, or the one whose terms are most alike."""

    def unit_of(interval: LogInterval) -> str | None:
        if interval.unit is not None:
            return interval.unit
        from geoves.interpretation.options import InterpretationOptions  # noqa: PLC0415 - only where a well stands
        from geoves.interpretation.words import claim_words  # noqa: PLC0415 - beside a sounding

        likeness = claim_words(interval.description, template, InterpretationOptions().least_match).likeness
        return max(likeness, key=lambda code: likeness[code]) if likeness else None

    return unit_of
