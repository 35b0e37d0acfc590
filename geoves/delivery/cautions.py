"""The cautions: one wording for the map, the report, the metadata records and the README."""

from types import MappingProxyType

# One line that stays in sight wherever a surface is shown.
SHORT_CAUTION = (
    "Reconnaissance only. Not a basis for siting a well, nor for yield, potability or setback decisions: "
    "test drilling first."
)

# Keyed by what each speaks of, in the order in which they are shown.
CAUTIONS = MappingProxyType(
    {
        "reconnaissance": (
            "This is a reconnaissance. It says where an aquifer is likely and how deep, from measurements at the "
            "surface and a few wells; it is no decision on siting, yield, potability or setback."
        ),
        "test_drilling": (
            "Resistivity does not replace the drill. Confirm by test drilling, logging and pumping before money or "
            "health depends on it."
        ),
        "licensed_practice": (
            "The interpretation needs a licensed professional's judgement. The practice of geology, geophysics and "
            "well drilling is regulated: the one who signs answers for it."
        ),
        "local_codes": (
            "State and local codes on well construction, setbacks, permits and abandoned wells come before anything "
            "shown here."
        ),
        "water_quality": (
            "Nothing here says that water is fit to drink. Resistivity answers to salt and clay and is blind to most "
            "contaminants, nitrate, arsenic and bacteria among them: have the water tested."
        ),
        "doubt": (
            "Every surface is an estimate, delivered with its error. Between measurements the ground may differ, thin "
            "gravel may hide, and rock that conducts like gravel or till cannot be told from it."
        ),
        "positions": (
            "A permit or a well is only as well placed as its location; ranges at a poorly located place are widened "
            "only as far as its stated radius."
        ),
        "field_safety": (
            "Soundings put hundreds of volts on the current electrodes: a watcher at each electrode, no one touches "
            "cable or stake while current flows, stop at lightning, keep clear of fences, power lines, pipelines, "
            "livestock and roads."
        ),
    }
)


def list_cautions() -> tuple[str, ...]:
    """All cautions as sentences, in the order in which they are shown."""
    return tuple(CAUTIONS.values())
