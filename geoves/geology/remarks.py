"""What a person should know of a joint inference, in words."""

from collections.abc import Sequence

import numpy as np

from geoves.domain.fields import MOVED, JointColumn
from geoves.domain.survey import Pick
from geoves.domain.tops import Interpretation
from geoves.domain.units import Role, Template
from geoves.geology.inference import State, has_converged
from geoves.geology.options import GeologyOptions

# A pick this many deviations from what all others say is contradicted by them.
CONTRADICTED = 3.0
# A unit is off the template where the middle of what curves know of it lies so many deviations from its range's middle.
OFF_TEMPLATE, FEWEST_KNOWN, KNOWN_SHARE = 1.3, 5, 0.8
# Flat layers mislead where they misread the basal contact by more than this share of its depth.
MISLEADING = 0.05
# Names that a sentence lists before it counts the rest.
LISTED = 6


def make_remarks(
    columns: Sequence[JointColumn],
    state: State,
    template: Template,
    interpretation: Interpretation,
    options: GeologyOptions,
) -> tuple[str, ...]:
    """Sentences, most grave first."""
    remarks = []
    if not has_converged(state, options):
        remarks.append(
            f"the joint inference had not settled after {len(state.moved)} rounds (basal contacts still moved by "
            f"{state.moved[-1]:.2f} of their doubt): take its surfaces with care, "
            "or set [interpretation] method = 'each'"
        )
    aside = [column.place for column in columns if column.set_aside]
    if aside:
        remarks.append(
            f"set aside, for their curves contradict their neighbours and the template: {list_names(aside)}; "
            "the surfaces there rest on the others"
        )
    poor = [column.place for column in columns if column.state == "poor_fit"]
    if poor:
        remarks.append(
            f"fitted worse than their errors allow by the one geology: {list_names(poor)}; look at their curves"
        )
    remarks += tell_misreadings(columns)
    remarks += _compare_template(columns, template)
    remarks += _tell_picks(columns, interpretation, template)
    return tuple(remarks)


def list_names(names: Sequence[str]) -> str:
    """Some names, and how many more.

    >>> list_names(["S1", "S2"]), list_names([f"S{i}" for i in range(9)])
    ('S1, S2', 'S0, S1, S2, S3, S4, S5 and 3 more')
    """
    more = len(names) - LISTED
    return ", ".join(names[:LISTED]) + (f" and {more} more" if more > 0 else "")


def tell_misreadings(columns: Sequence[JointColumn]) -> list[str]:
    """Soundings at which flat layers mislead, worst first, each with its sign and size."""
    misled = sorted((one for one in columns if abs(one.flat_layer_bias) > MISLEADING), key=_by_misreading)
    remarks = []
    for sign, words in ((-1.0, "too shallow (inside a valley)"), (1.0, "too deep (outside a valley's edge)")):
        those = [one for one in misled if sign * one.flat_layer_bias > 0]
        if those:
            named = [f"{one.place} ({100.0 * one.flat_layer_bias:+.0f} %)" for one in those]
            remarks.append(
                f"layers are not flat under {len(those)} sounding{'s' * (len(those) != 1)}, where flat layers by "
                f"themselves would put the basal contact {words} by more than {MISLEADING:.0%} of its depth: "
                f"{list_names(named)}; this was taken into account, and their errors are wider"
            )
    return remarks


def _by_misreading(column: JointColumn) -> float:
    return -abs(column.flat_layer_bias)


def _compare_template(columns: Sequence[JointColumn], template: Template) -> list[str]:
    """Units whose resistivities, where curves know them, lie off the template's range on the whole."""
    mean = np.array([column.log_resistivity for column in columns if column.kind == "sounding"])
    deviation = np.array([column.log_resistivity_deviation for column in columns if column.kind == "sounding"])
    remarks = []
    for i, unit in enumerate(template.units):
        known = deviation[:, i] < KNOWN_SHARE * unit.log_resistivity_deviation
        if known.sum() < FEWEST_KNOWN:
            continue
        off = float(np.median(mean[known, i]) - unit.log_resistivity_mean) / unit.log_resistivity_deviation
        if abs(off) > OFF_TEMPLATE:
            middle = float(np.exp(np.median(mean[known, i])))
            remarks.append(
                f"the curves put {unit.name or unit.code} at {middle:.3g} ohm m on the whole, {abs(off):.1f} "
                f"deviations {'above' if off > 0 else 'below'} the middle of its range in the template "
                f"({unit.resistivity_p05:g} to {unit.resistivity_p95:g}): look at the template"
            )
    return remarks


def _tell_picks(columns: Sequence[JointColumn], interpretation: Interpretation, template: Template) -> list[str]:
    """What the picks moved elsewhere, and which of them all others contradict."""
    picks = [(column.sounding, pick) for column in interpretation.columns for pick in column.picks]
    by_name = {column.place: column for column in columns}
    decided = {name for name, _ in picks}
    moved = [c.place for c in columns if abs(c.moved_by_picks) > MOVED and c.place not in decided]
    remarks = []
    if moved:
        others = f"{len(moved)} other place{'s' * (len(moved) != 1)}"
        many = f"{len(decided)} decided place{'s' * (len(decided) != 1)}"
        remarks.append(f"the picks at {many} moved {others} by more than their doubt: {list_names(moved)}")
    for name, pick in picks:
        away = _away(by_name.get(name), pick, template)
        if abs(away) > CONTRADICTED:
            remarks.append(
                f"the pick at {name} by {pick.interpreter} lies {abs(away):.1f} deviations "
                f"{'below' if away > 0 else 'above'} where all others expect it; it stands as decided"
            )
    return remarks


def _away(column: JointColumn | None, pick: Pick, template: Template) -> float:
    """How far a decided basal contact or rock lies from what the others say, in deviations of both."""
    role = template.unit(pick.unit).role
    if column is None or pick.status != "at" or not pick.depth or role not in {Role.BEDROCK, Role.DEEP_AQUIFER}:
        return 0.0
    low, middle, high = np.log(np.maximum(column.others_basal_depth, 0.1))
    error = (pick.depth_error or 0.05 * pick.depth) / pick.depth
    deviation = np.hypot((high - low) / 3.29, error)
    if role is Role.BEDROCK:
        # Gravel may lie between: only the part that it cannot explain counts.
        depth = max(pick.depth - float(column.gravel_thickness[2]), min(pick.depth, float(np.exp(middle))))
        return float((np.log(depth) - middle) / deviation)
    return float((np.log(pick.depth) - middle) / deviation)
