"""The report's parts on the one geology: its fields, how it fits, what it changed, and wells against all others."""

from collections.abc import Iterator, Sequence

import attrs
import numpy as np

from geoves.delivery.joint_figures import DepthRow, draw_rows
from geoves.delivery.joint_words import (
    BAND,
    OwnSay,
    gather_joint,
    hear_curve,
    hear_log,
    measure_gap,
    tell_own,
    tell_range,
)
from geoves.delivery.markup import Markup, element, format_length, joined, place_name, table
from geoves.domain.fields import FieldEnsemble, JointColumn
from geoves.domain.results import Results
from geoves.domain.units import Role

STATES = {"heard": "heard", "set_aside": "set aside", "poor_fit": "fitted poorly"}
MOST_ROWS = 60  # of a table of soundings: the layer soundings has them all
WELLS_A_FIGURE = 30  # so that a figure fits a page
MODEL_WORDS = {"matern32": "Matérn 3/2"}


@attrs.frozen
class WellCheck:
    """A well's own say against what all others expect there; `away` in the doubt of both, NaN for a bound."""

    own: OwnSay
    column: JointColumn
    away: float

    @property
    def agrees(self) -> bool:
        """Whether both agree within 90 % of their doubts, or the others allow what lies beyond a bound."""
        if np.isnan(self.away):
            return bool(self.own.bound <= self.column.others_basal_depth[2])
        return abs(self.away) <= 0.5 * BAND


def write_one_geology(results: Results) -> list[Markup]:
    """How the one geology came about and how it fits; nothing where every place spoke for itself."""
    geology = results.geology
    if geology is None:
        return []
    parts = [element("h3", {}, "One geology of all places")]
    parts += [element("p", {}, words) for words in (*tell_convergence(geology), *tell_fit(geology))]
    return [*parts, _fields_table(geology, results.region.crs_unit_metres), *_differences(results), *_wells(results)]


def tell_convergence(geology: FieldEnsemble) -> Iterator[str]:
    """Whether the inference came to rest."""
    said = geology.diagnostics
    if "converged" not in said:
        return
    end = "The inference settled" if said["converged"] else "The inference had not settled: take its surfaces with care"
    moved = said.get("moved_in_the_last_round")
    last = "" if moved is None else f"; in its last round the basal contacts moved by {moved:.2f} of their doubt"
    yield f"{end}{last}."


def tell_fit(geology: FieldEnsemble) -> Iterator[str]:
    """How the one geology fits the curves, and how many it set aside."""
    curves = [column for column in geology.columns if np.isfinite(column.misfit)]
    if not curves:
        return
    middle, most = np.quantile([column.misfit for column in curves], [0.5, 0.9])
    worst = sorted(curves, key=lambda column: -column.misfit)[:3]
    named = ", ".join(f"{column.place} ({column.misfit:.1f})" for column in worst)
    yield (
        f"Residuals of the curves over their errors (root mean square; about 1 is as it should be): half of the "
        f"{len(curves)} soundings are below {middle:.2f}, nine in ten below {most:.2f}; the largest are {named}."
    )
    counts = {state: sum(column.state == state for column in geology.columns) for state in STATES}
    yield (
        f"{counts['set_aside']} set aside, for they contradict their neighbours and the template; "
        f"{counts['poor_fit']} heard but fitted worse than their errors allow."
    )


def _fields_table(geology: FieldEnsemble, crs_unit_metres: float) -> Markup:
    """Every field with the covariance that was inferred for it."""
    rows = []
    for field in geology.fields:
        directed = field.ratio != 1.0
        rows.append(
            (
                field.title,
                field.unit,
                f"{field.mean:.3g}",
                f"{np.sqrt(field.partial_sill + field.nugget):.2g}",
                f"{field.nugget / max(field.partial_sill + field.nugget, 1e-12):.2f}",
                f"{field.length * crs_unit_metres / 1000.0:.1f}",
                f"{field.azimuth_deg:.0f}° ({field.ratio:.2f} across)" if directed else "any",
                f"{np.sqrt(field.relief_variance):.2g}" if field.relief_variance else "–",
            )
        )
    headings = (
        "field", "unit", "mean before the data", "deviation over space", "share that is noise", "length (km)",
        "towards", "deviation that follows the relief",
    )  # fmt: skip
    models = ", ".join(dict.fromkeys(MODEL_WORDS.get(field.model, field.model) for field in geology.fields))
    return table(headings, rows, f"The fields and their covariances as inferred ({models})")


def _differences(results: Results) -> Iterator[Markup]:
    """Soundings where together says otherwise than each alone, the largest differences first."""
    unit, joint = results.region.length_unit, gather_joint(results)
    numbers = {sounding.name: number for number, sounding in enumerate(results.survey.soundings)}
    own = {column.sounding: hear_curve(column) for column in results.interpretation.columns}
    shared = [name for name in own if name in joint]
    gaps = {name: measure_gap(own[name], joint[name]) for name in shared}
    told = [name for name in shared if abs(gaps[name]) > 1.0 or joint[name].state != "heard"]
    told.sort(key=lambda name: -abs(gaps[name]))
    silent = sum(not own[name].is_known for name in shared)
    yield element("h3", {}, "Where all together say otherwise than a curve alone")
    rest = len(told) - MOST_ROWS
    more = f" The first {MOST_ROWS} are listed; the layer soundings has all." if rest > 0 else ""
    yield element(
        "p",
        {},
        f"At {len(told)} of {len(shared)} soundings the depth of the basal contact was moved by more than the curve’s "
        f"own doubt, or the curve was set aside or is fitted poorly. {silent} curves gave a bound alone, or nothing."
        f"{more}",
    )
    if not told:
        return
    rows = [
        (
            element("a", {"href": f"#sounding-{numbers[name]}"}, place_name(name)),
            tell_own(own[name], unit),
            tell_range(joint[name].others_basal_depth, unit),
            tell_range(joint[name].basal_depth, unit),
            f"{gaps[name]:+.1f}",
            f"{joint[name].misfit:.1f}",
            STATES[joint[name].state],
        )
        for name in told[:MOST_ROWS]
    ]
    headings = ("sounding", "alone", "the others", "together", "moved by (own doubt)", "misfit", "state")
    yield table(headings, rows, "Depth of basal gravel or rock, alone and together")


def check_wells(results: Results) -> list[WellCheck]:
    """Every well that says something of the basal contact, against what all others expect there."""
    checks = []
    for column in gather_joint(results).values():
        own = hear_log([top for top in results.interpretation.tops if top.place == column.place])
        if column.kind == "sounding" or not (own.is_known or np.isfinite(own.bound)):
            continue
        away = np.nan
        if own.is_known:
            low, middle, high = np.log(np.maximum(column.others_basal_depth, 0.1))
            own_low, own_middle, own_high = np.log(np.maximum(own.depth, 0.1))
            away = float((own_middle - middle) / np.hypot((high - low) / BAND, (own_high - own_low) / BAND))
        checks.append(WellCheck(own, column, away))
    return checks


def _wells(results: Results) -> Iterator[Markup]:
    """What all others expected at each well: figures and a table."""
    checks = check_wells(results)
    if not checks:
        return
    yield element("h3", {}, "Each well against what all others expect there")
    yield element("p", {}, tell_wells(checks))
    unit = results.region.length_unit
    for start in range(0, len(checks), WELLS_A_FIGURE):
        shown = checks[start : start + WELLS_A_FIGURE]
        rows = [DepthRow(c.column.place, "others", c.column.others_basal_depth, mark=c.own) for c in shown]
        caption = (
            "Bar: what all others expect, 90 % with its median. Diamond: what the log or the pick says; an arrow: "
            "deeper than there."
        )
        drawn = draw_rows(rows, "Depth of the basal contact at the wells: by all others, and by each log", unit)
        yield element("figure", {}, drawn, element("figcaption", {}, caption))
    yield _wells_table(results, checks)


def tell_wells(checks: Sequence[WellCheck]) -> str:
    """How many wells the others' bands held, in words."""
    met = [check for check in checks if np.isfinite(check.away)]
    ended = [check for check in checks if np.isnan(check.away)]
    how = (
        "Each well’s own log and picks were taken out, and the basal contact there told from all other places; the "
        "covariances of the fields were not inferred anew for it."
    )
    said = [how]
    if met:
        held = sum(check.agrees for check in met)
        said.append(
            f"Wells that know the contact: {len(met)}; {held} of them agree with the others within 90 % of both doubts."
        )
    if ended:
        held = sum(check.agrees for check in ended)
        said.append(f"Wells that ended above it: {len(ended)}; {held} of them end within what the others allow.")
    return " ".join(said)


def _wells_table(results: Results, checks: Sequence[WellCheck]) -> Markup:
    unit, gravel = results.region.length_unit, tell_gravel_of_logs(results)
    rows = [
        (
            place_name(check.column.place),
            f"{check.own.source}: {tell_own(check.own, unit)}",
            tell_range(check.column.others_basal_depth, unit),
            "–" if np.isnan(check.away) else f"{check.away:+.1f}",
            "yes" if check.agrees else "no",
            gravel.get(check.column.place, "–"),
            f"{check.column.others_gravel_probability:.2f}" if gravel else "–",
        )
        for check in checks
    ]
    headings = (
        "well", "it says", "the others expect", "deeper by (doubts of both)", "within 90 %",
        "deep gravel in it", "chance of gravel by the others",
    )  # fmt: skip
    return table(headings, rows, "Wells, each against all others")


def tell_gravel_of_logs(results: Results) -> dict[str, str]:
    """How much of the deep aquifer each well shows, in words."""
    unit = results.region.length_unit
    said = {}
    for row in results.interpretation.thicknesses:
        if row.role == Role.DEEP_AQUIFER and row.kind != "sounding":
            shown = format_length(row.thickness, unit, 1) if row.thickness > 0 else "none"
            said[row.place] = f"at least {shown}" if row.at_least and row.thickness > 0 else shown
    return said


def write_pick_remarks(results: Results) -> list[Markup]:
    """Which decisions all others contradict, and what the decisions moved on the whole."""
    if results.geology is None:
        return []
    told = [words for words in results.geology.remarks if words.startswith(("the pick at", "the picks at"))]
    if not told:
        return [element("p", {}, "No decision is contradicted by the other places, by three deviations or more.")]
    items = (element("li", {}, f"{words[:1].upper()}{words[1:].rstrip('.')}.") for words in told)
    return [joined([element("ul", {}, *items)])]
