"""What a curve says of its place, in sentences and in the region's unit: one wording for the pages and the layers."""

from collections.abc import Mapping
from types import MappingProxyType

import numpy as np

from geoves.delivery.markup import format_length, unit_label
from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.results import Results
from geoves.domain.survey import Curve, Pick
from geoves.domain.tops import PickOpinion, UnitColumn
from geoves.domain.units import Role, Template

# From this probability on, a thing is called by its word; the map's script has the same words from here.
LIKELIHOODS = (
    (0.9, "very likely"),
    (0.66, "likely"),
    (0.33, "about as likely as not"),
    (0.1, "unlikely"),
    (0.0, "very unlikely"),
)
# A ratio of resistivities from this on is called by its word; common practice with noise of a few percent.
CONTRASTS = ((4.0, "a strong contrast"), (2.0, "a clear contrast"), (1.3, "a weak contrast"))
# What a curve says of the base: basal gravel or rock, whichever comes first, for it seldom tells them apart.
STATUS_WORDS: Mapping[str, str] = MappingProxyType(
    {
        "seen": "base seen (gravel or rock)",
        "not_distinct": "base not distinct",
        "deeper_than": "base deeper than the curve reached",
    }
)
UNDECIDED = 0.15  # a curve that moves the chance of gravel by less than this has not decided it
SET_ASIDE = 0.5  # a reading with less robust weight than this counts as set aside by the fit


def name_likelihood(probability: float) -> str:
    """Plain words for a probability; the number always stands beside them.

    >>> name_likelihood(0.7), name_likelihood(0.05)
    ('likely', 'very unlikely')
    """
    return next(words for least, words in LIKELIHOODS if probability >= least)


def tell_sounding(column: UnitColumn, template: Template, unit: LengthUnit) -> str:
    """What is resolved under a sounding: the interpreter's decision where there is one, else what the curve knows."""
    if column.picks:
        return " ".join(tell_pick(pick, template, unit) for pick in column.picks)
    contact = name_contact(template)
    if column.bedrock_status == "deeper_than":
        bound = format_length(column.bedrock_depth, unit)
        return f"No {contact} above {bound}, where the curve would have shown it; what lies deeper is not known."
    known = bool(np.isfinite(column.basal_depth).all())
    if column.bedrock_status == "not_distinct":
        guess = f"; if anything it lies {_range(column.basal_depth, unit)}" if known else ""
        return f"The curve does not show where {contact} begins{guess}."
    if not known:
        return f"Bedrock begins at about {format_length(column.bedrock_depth, unit)}."
    begins = f"{capital(contact)} begins at {format_length(column.basal_depth[1], unit)}"
    return (
        f"{begins}, {_range(column.basal_depth, unit)} with 90 % probability{_gravel_on_rock(column, template, unit)}."
    )


def _gravel_on_rock(column: UnitColumn, template: Template, unit: LengthUnit) -> str:
    deep = name_deep_aquifer(template)
    if not deep or not np.isfinite(column.gravel_probability):
        return ""
    chance, before = column.gravel_probability, column.gravel_prior
    rock = format_length(column.bedrock_depth, unit)
    # A prior that is not known leaves the comparison false: the chance is then told as it is.
    if abs(chance - before) < UNDECIDED:
        opened = f"; whether {deep} lies on the rock this curve does not decide (assumed beforehand: {before:.2f})"
        return f"{opened}; rock is put at {rock} on average"
    return f"; {deep} on the rock is {name_likelihood(chance)} ({chance:.2f}), which puts rock at {rock} on average"


def tell_hidden(column: UnitColumn, template: Template, unit: LengthUnit) -> str:
    """How much of the deep aquifer could lie on this rock and not show; empty where unknown or decided to be none."""
    deep, limit = name_deep_aquifer(template), column.gravel_limit
    if not deep or not np.isfinite(limit) or any(pick.status == "absent" for pick in column.picks):
        return ""
    if limit < 1.0:
        return f"Hardly any {deep} could hide on the rock: less than {format_length(1.0, unit)}."
    return f"Up to {format_length(limit, unit)} of {deep} could lie on the rock without this curve showing it."


def tell_contrast(column: UnitColumn) -> str:
    """How well rock stands out from what lies on it, in plain words; empty where the curve did not see the base."""
    if column.bedrock_status != "seen" or not np.isfinite(column.base_contrast):
        return ""
    ratio = float(np.exp(abs(column.base_contrast)))
    strength = next((words for least, words in CONTRASTS if ratio >= least), "")
    if not strength:
        return "Rock and what lies on it have much the same resistivity: no curve tells them apart."
    way = "resistive" if column.base_contrast > 0 else "conductive"
    return f"Rock is {ratio:.1f} times as {way} as what lies on it: {strength}."


def tell_all(column: UnitColumn, template: Template, unit: LengthUnit) -> str:
    """What is resolved, what could hide and how rock stands out, as one text."""
    return " ".join(filter(None, (tell_sounding(column, template, unit), *tell_doubt(column, template, unit))))


def tell_doubt(column: UnitColumn, template: Template, unit: LengthUnit) -> list[str]:
    """What could hide and how rock stands out, each where it is known."""
    return [words for words in (tell_hidden(column, template, unit), tell_contrast(column)) if words]


def tell_water_level(column: UnitColumn, unit: LengthUnit) -> str:
    """Where the water level was taken to lie and what that means here; empty where no well shows it."""
    depth, error = column.water_level / METRES[unit]
    if not np.isfinite(depth):
        return ""
    level = f"The wells around put the water level at {depth:.1f} ± {error:.1f} {unit_label(unit)} here"
    return f"{level}: coarse ground above it counts as drained, and does not speak for the aquifer's resistivity."


def tell_beside(column: UnitColumn, unit: LengthUnit) -> str:
    """What a log beside the sounding did to what is shown; empty where none is near enough."""
    if column.beside is None:
        return ""
    away = f"{column.beside.well}, {format_length(column.beside.distance, unit)} away"
    if not column.beside.agrees:
        return f"Hardly any column that fits this curve meets the log of {away}: what is shown is the curve's own."
    return (
        f"Of the columns that fit this curve, those count for more that meet the log of {away}. What counts in "
        "the surfaces is the curve's own: the well counts beside it."
    )


def tell_trade_offs(inverted: Inverted) -> str:
    """Which combinations the curve knows although it does not know their parts; empty where there are none."""
    return " ".join(f"{capital(words).rstrip('.')}." for words in inverted.trade_offs)


def tell_pick(pick: Pick, template: Template, unit: LengthUnit) -> str:
    """The interpreter's decision with its error and its reason."""
    reason = f" ({pick.reason.rstrip('.')})" if pick.reason else ""
    return f"Decided by {pick.interpreter}: {_name_decision(pick, template, unit)}{reason}."


def _name_decision(pick: Pick, template: Template, unit: LengthUnit) -> str:
    name = next((one.name for one in template.units if one.code == pick.unit), pick.unit)
    if pick.status == "absent" or pick.depth is None:
        return f"{name} is absent"
    depth = format_length(pick.depth, unit)
    if pick.status == "below":
        return f"{name} lies deeper than {depth}"
    return f"{name} at {depth}" + (f" ± {pick.depth_error / METRES[unit]:.0f}" if pick.depth_error else "")


def tell_opinion(opinion: PickOpinion, unit: LengthUnit) -> str:
    """What the curve by itself says of a pick, which stands whatever the curve says, and what it pays for it."""
    return f"{_say_opinion(opinion, unit)}{_say_payment(opinion)}"


def _say_payment(opinion: PickOpinion) -> str:
    if np.isnan(opinion.rms_percent):
        return ""
    held, free = f"{opinion.rms_percent:.1f}", f"{opinion.free_rms_percent:.1f}"
    if held == free:
        return f" With the pick the curve is fitted as well as without: within {free} %."
    return f" With the pick the curve is fitted within {held} %, without within {free} %."


def _say_opinion(opinion: PickOpinion, unit: LengthUnit) -> str:
    bound = f"; it excludes any above {_depth(opinion.bound, unit)}" if opinion.bound > 0 else ""
    if opinion.against:
        own = "" if np.isnan(opinion.inferred_depth) else f": by itself it says {_depth(opinion.inferred_depth, unit)}"
        return f"The curve speaks against this pick{own}{bound}. The pick stands."
    if np.isnan(opinion.probability):
        return f"The curve neither confirms nor contradicts this pick{bound}."
    if opinion.pick.status == "at":
        own, cases = _depth(opinion.inferred_depth, unit), f"{100 * opinion.probability:.0f} of 100 cases"
        return f"The curve by itself says {own}; a difference like this or larger would be chance in {cases}."
    return f"The curve does not contradict this pick: it gives it a probability of {opinion.probability:.2f}."


def tell_readings_aside(curve: Curve, inverted: Inverted, unit: LengthUnit) -> list[str]:
    """Each reading that is drawn hollow, and why."""
    shown = []
    for i in np.flatnonzero(readings_aside(curve, inverted)):
        spacing = f"AB/2 {curve.half_spacing[i] / METRES[unit]:.4g} {unit_label(unit)}"
        if not curve.used[i]:
            shown.append(f"{spacing}: {(curve.reason[i] if i < len(curve.reason) else '') or 'not used'}")
        else:
            shown.append(f"{spacing}: far from the curve of every layered model")
    return shown


def readings_aside(curve: Curve, inverted: Inverted) -> np.ndarray:
    """Which readings (n,) were not used or were set aside by the fit."""
    return np.asarray(~curve.used | (inverted.robust_weight < SET_ASIDE))


def name_contact(template: Template) -> str:
    """The contact that a curve can see, by the names of what may begin there."""
    deep = name_deep_aquifer(template)
    return f"{deep} or rock" if deep else "rock"


def name_deep_aquifer(template: Template) -> str:
    """The deep aquifer's name within a sentence; empty where the template has none."""
    units = template.with_role(Role.DEEP_AQUIFER)
    return _small(units[0].name) if units else ""


def _range(quantiles: FloatArray, unit: LengthUnit) -> str:
    low, high = (quantiles[i] / METRES[unit] for i in (0, 2))
    return f"between {low:,.0f} and {high:,.0f} {unit_label(unit)}"


def _depth(metres: float, unit: LengthUnit) -> str:
    return format_length(metres, unit)


def capital(words: str) -> str:
    return words[:1].upper() + words[1:]


def _small(name: str) -> str:
    """A name within a sentence: its capital goes unless more of the word is in capitals."""
    return name[:1].lower() + name[1:] if name[1:2].islower() else name


def doubted_rows(results: Results) -> dict[tuple[str, int], str]:
    """The checks that doubt a reading, by its sounding and its row, in words."""
    readings = results.region.typed_inputs.get("readings", "readings")
    found: dict[tuple[str, int], list[str]] = {}
    for doubt in results.doubts:
        if doubt.file == readings and doubt.row and doubt.check:
            found.setdefault((doubt.place, doubt.row), []).append(doubt.check.replace("_", " "))
    return {key: ", ".join(dict.fromkeys(checks)) for key, checks in found.items()}
