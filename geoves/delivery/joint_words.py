"""What one geology says of a place beside what the place says by itself, in sentences and in the region's unit."""

from collections.abc import Mapping

import attrs
import numpy as np

from geoves.delivery.markup import format_length, unit_label
from geoves.delivery.sentences import capital, name_contact, name_deep_aquifer
from geoves.domain.arrays import FloatArray
from geoves.domain.fields import MOVED, JointColumn
from geoves.domain.region import METRES, LengthUnit
from geoves.domain.results import Results
from geoves.domain.tops import Top, UnitColumn
from geoves.domain.units import Template
from geoves.kernels.covariances import Covariance, scaled_distances

# Central 90 % of a normal distribution, in its deviations.
BAND = 3.29
LISTED = 8


@attrs.frozen
class OwnSay:
    """What a place says of the basal contact by itself: 5, 50 and 95 % quantiles (3,) m, or only a bound (m).

    Both NaN where it says nothing; `source` names in words where it comes from.
    """

    depth: FloatArray
    bound: float
    source: str

    @property
    def is_known(self) -> bool:
        return bool(np.isfinite(self.depth).all())


def gather_joint(results: Results) -> dict[str, JointColumn]:
    """The joint columns by place; empty where every place spoke for itself."""
    return {} if results.geology is None else {column.place: column for column in results.geology.columns}


def hear_curve(column: UnitColumn) -> OwnSay:
    """What a sounding's curve says by itself, with the picks and the log beside it that condition it."""
    source = "this curve"
    if column.picks:
        source += " and the pick"
    elif column.beside is not None and column.beside.agrees:
        source += f" with the log of {column.beside.well}"
    bound = column.bedrock_depth if column.bedrock_status == "deeper_than" else np.nan
    depth = np.full(3, np.nan) if np.isfinite(bound) else column.basal_depth
    return OwnSay(np.asarray(depth), float(bound), source)


def hear_log(tops: list[Top]) -> OwnSay:
    """What a well's log, or a pick in its place, says of the basal contact; its tops are of one place."""
    basal = [top for top in tops if top.contact == "basal"]
    source = "the pick" if any(top.kind == "pick" for top in basal) else "the log"
    for top in basal:
        if top.status == "at":
            spread = 0.5 * BAND * np.nan_to_num(top.standard_error)
            return OwnSay(top.depth + np.array([-spread, 0.0, spread]), np.nan, source)
    bounds = [top.depth for top in basal if top.status == "below"]
    return OwnSay(np.full(3, np.nan), max(bounds, default=np.nan), source)


def tell_joint(column: UnitColumn, joint: JointColumn, template: Template, unit: LengthUnit) -> list[str]:
    """All that one geology says of a sounding beside what its curve says by itself."""
    own = hear_curve(column)
    alone = column.gravel_probability if own.is_known else np.nan
    said = (
        tell_three(own, joint, capital(name_contact(template)), unit),
        tell_gravel(alone, joint, name_deep_aquifer(template), unit),
        tell_moved(joint),
    )
    return [words for words in said if words]


def tell_others(joint: JointColumn, template: Template, unit: LengthUnit) -> str:
    """What all other places expect at a well."""
    expected = tell_range(joint.others_basal_depth, unit)
    return f"All other places, without this well, expect {name_contact(template)} at {expected}."


def name_voice(column: UnitColumn, joint: JointColumn | None) -> str:
    """What stands before the sentence on a sounding where all together may say otherwise."""
    return "By this curve alone: " if joint is not None and not column.picks else ""


def tell_three(own: OwnSay, column: JointColumn, contact: str, unit: LengthUnit) -> str:
    """The basal contact as a place says by itself, as all others expect it, and both together."""
    return (
        f"{contact}: {own.source} alone {tell_own(own, unit)}; the others expect "
        f"{tell_range(column.others_basal_depth, unit)}; together {tell_range(column.basal_depth, unit)}."
    )


def tell_own(own: OwnSay, unit: LengthUnit) -> str:
    """What a place says by itself, as a range, a bound or in words that it says nothing."""
    if own.is_known:
        return tell_range(own.depth, unit)
    return f"deeper than {format_length(own.bound, unit)}" if np.isfinite(own.bound) else "does not say"


def tell_range(quantiles: FloatArray, unit: LengthUnit) -> str:
    """A median with its 90 % band.

    >>> tell_range(np.array([51.0, 62.0, 74.0]), "m")
    '62 m (51 to 74)'
    """
    low, middle, high = (f"{depth / METRES[unit]:,.0f}" for depth in quantiles)
    return f"{middle} {unit_label(unit)} ({low} to {high})"


def tell_gravel(own: float, column: JointColumn, name: str, unit: LengthUnit) -> str:
    """The chance of the deep aquifer by the place itself, by all others and by all, and where that puts rock.

    Empty where the template has none.
    """
    if not name or not np.isfinite(column.others_gravel_probability):
        return ""
    alone = f"alone {own:.2f}, " if np.isfinite(own) else ""
    return (
        f"Chance of at least 1 m of {name}: {alone}by the others {column.others_gravel_probability:.2f}, "
        f"together {column.gravel_probability:.2f}, which puts rock at {tell_range(column.rock_depth, unit)}."
    )


def tell_state(column: JointColumn) -> str:
    """Why a place was not heard, or how badly it fits; empty where it was heard and fits."""
    if column.state == "set_aside":
        return (
            f"Set aside by the one geology: its curve contradicts its neighbours and the template (the probability "
            f"that it is of this ground is {column.trust:.2f}). What is drawn here rests on the others."
        )
    if column.state == "poor_fit":
        return (
            f"Fitted worse than its errors allow by the one geology: residuals are {column.misfit:.1f} times their "
            "errors. Look at its curve before you believe what stands here."
        )
    return ""


def tell_moved(column: JointColumn) -> str:
    """That the picks elsewhere moved this place; empty where they hardly did."""
    if abs(column.moved_by_picks) <= MOVED:
        return ""
    way = "down" if column.moved_by_picks > 0 else "up"
    return f"The picks moved the contact here {way} by {abs(column.moved_by_picks):.1f} times its doubt before them."


def find_moved(results: Results) -> dict[str, tuple[str, ...]]:
    """For every decided place those others that the picks moved by more than their doubt, the most moved first.

    All picks are heard at once. Each moved place counts at the decided one that is nearest by the lengths and the
    direction of the basal contact's own field.
    """
    geology = results.geology
    if geology is None:
        return {}
    names = [column.place for column in geology.columns]
    decided = [name for name in dict.fromkeys(pick.place for pick in results.survey.picks) if name in names]
    found: dict[str, list[str]] = {name: [] for name in decided}
    if not decided:
        return {}
    field = geology.fields[0]
    covariance = Covariance(field.model, field.nugget, field.partial_sill, field.length, field.azimuth_deg, field.ratio)
    there = geology.points[[names.index(name) for name in decided]]
    nearest = np.argmin(scaled_distances(geology.points, there, covariance), axis=1)
    for column in sorted(geology.columns, key=lambda one: -abs(one.moved_by_picks)):
        if abs(column.moved_by_picks) > MOVED and column.place not in found:
            found[decided[nearest[names.index(column.place)]]].append(column.place)
    return {name: tuple(moved) for name, moved in found.items()}


def tell_found(place: str, moved: Mapping[str, tuple[str, ...]]) -> str:
    """What a decision moved elsewhere."""
    names = moved.get(place, ())
    if not names:
        return "moved no other place by more than its doubt"
    more = f" and {len(names) - LISTED} more" if len(names) > LISTED else ""
    return (
        f"moved {len(names)} other place{'s' * (len(names) != 1)} by more than {'their' if len(names) > 1 else 'its'} "
        f"doubt: {', '.join(names[:LISTED])}{more}"
    )


def measure_gap(own: OwnSay, column: JointColumn) -> float:
    """How far both together lie from what the place says by itself, in its own deviations of the log depth.

    Of a bound, how far together falls short of it in deviations of what all say; 0 where the place says nothing.
    """
    low, middle, high = np.log(np.maximum(column.basal_depth, 0.1))
    if own.is_known:
        own_low, own_middle, own_high = np.log(np.maximum(own.depth, 0.1))
        return float((middle - own_middle) / max((own_high - own_low) / BAND, 0.01))
    if np.isfinite(own.bound) and own.bound > 0:
        return float(min((middle - np.log(own.bound)) / max((high - low) / BAND, 0.01), 0.0))
    return 0.0
