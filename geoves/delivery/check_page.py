"""check.html: what the inputs show before anything is computed from them; one page, no network, no script."""

import math
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from importlib.resources import files
from pathlib import Path

import attrs
import numpy as np

from geoves.delivery.check_curves import draw_examined, write_overlaps, write_readings
from geoves.delivery.markup import Markup, element, joined, place_name, table
from geoves.domain.findings import Check, Examination, ExaminedCurve, Finding
from geoves.domain.region import Region
from geoves.domain.survey import Sounding, Survey

CONTENT_POLICY = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; form-action 'none'"
_CAUTION = (
    "A look at the inputs only: nothing was changed and nothing is mapped. A clean page is no proof of a right "
    "reading, and a doubt no proof of a wrong one."
)
# Rows of one table that are shown before the page says how many more check.csv has.
_MOST_ROWS = 400


@attrs.frozen
class CheckedInputs:
    """What the page is written from. `region` and `survey` are None where the inputs could not be read so far."""

    title: str
    examination: Examination
    checks: Mapping[str, Check]
    region: Region | None = None
    survey: Survey | None = None


def write_check_page(checked: CheckedInputs, path: Path) -> Path:
    """The written page at `path`."""
    by_place: dict[str, list[Finding]] = {}
    for finding in checked.examination.findings:
        if finding.place and _is_of_curve(finding, checked):
            by_place.setdefault(finding.place, []).append(finding)
    parts = [
        _write_summary(checked),
        _write_findings(checked, by_place),
        *_write_soundings(checked, by_place),
        _write_checks(checked),
    ]
    path.write_text(_page(checked.title, joined(parts)), encoding="utf-8")
    return path


def _page(title: str, body: Markup) -> str:
    pages = files("geoves.delivery") / "pages"
    style = Markup("".join((pages / name).read_text(encoding="utf-8") for name in ("report.css", "check.css")))
    head = joined(
        [
            Markup('<meta charset="utf-8">'),
            Markup('<meta name="viewport" content="width=device-width, initial-scale=1">'),
            Markup(f'<meta http-equiv="Content-Security-Policy" content="{CONTENT_POLICY}">'),
            Markup('<meta name="generator" content="geoves">'),
            element("title", {}, f"{title}: check of the inputs"),
            element("style", {}, style),
        ],
        "\n",
    )
    top = element("header", {"class": "top"}, element("h1", {}, "What the inputs of ", place_name(title), " show"))
    caution = element("p", {"class": "caution", "role": "note"}, _CAUTION)
    whole = joined([caution, top, element("main", {}, body)])
    return f'<!DOCTYPE html>\n<html lang="en">\n<head>\n{head}\n</head>\n<body>\n{whole}\n</body>\n</html>\n'


def _is_of_curve(finding: Finding, checked: CheckedInputs) -> bool:
    """Whether the finding is about readings, which the soundings' own sections tell."""
    readings = "readings" if checked.region is None else checked.region.typed_inputs.get("readings", "readings")
    return finding.file == readings


def _write_summary(checked: CheckedInputs) -> Markup:
    found = checked.examination.findings
    counts: Counter[str] = Counter(finding.severity for finding in found)
    numbers = [
        element("div", {}, element("dt", {}, words), element("dd", {}, element("strong", {}, counts[severity])))
        for severity, words in (
            ("fault", "faults: they stop a run until they are mended"),
            ("doubt", "doubts: told, and the run goes on"),
            ("note", "notes: nothing suspicious, but good to know"),
        )
    ]
    parts = [element("dl", {"class": "numbers"}, *numbers)]
    if math.isfinite(checked.examination.noise) and checked.examination.curves:
        words = (
            f"Readings of this survey scatter by {100.0 * checked.examination.noise:.1f} % about what flat layers can "
            "show. That is the measure for what is called a jump here; a typed error_percent comes before it."
        )
        parts.append(element("p", {}, words))
    kinds = Counter((finding.check, finding.severity) for finding in found)
    if kinds:
        rows = [
            (_check_link(check, checked), severity, count, _first_words(check, checked))
            for (check, severity), count in kinds.most_common()
        ]
        parts.append(table(("check", "kind", "how many", "what it looks at"), rows, "What was found, by check"))
    else:
        parts.append(element("p", {}, "Nothing was found."))
    return element("section", {"id": "summary"}, element("h2", {}, "In short"), *parts)


def _check_link(check: str, checked: CheckedInputs) -> Markup:
    if check not in checked.checks:
        return element("span", {}, "input")
    return element("a", {"href": f"#check-{check}"}, check.replace("_", " "))


def _first_words(check: str, checked: CheckedInputs) -> str:
    return (
        checked.checks[check].looks_at if check in checked.checks else "The tables, as docs and headings promise them"
    )


def _write_findings(checked: CheckedInputs, by_place: Mapping[str, Sequence[Finding]]) -> Markup:
    """Everything that no sounding's own section tells."""
    own = {sounding.name for sounding in checked.survey.soundings} if checked.survey else set()
    told = {id(one) for place, ones in by_place.items() if place in own for one in ones}
    rest = [one for one in checked.examination.findings if id(one) not in told]
    if not rest:
        return element(
            "section", {"id": "places"}, element("h2", {}, "Places, wells, template"), element("p", {}, "Nothing.")
        )
    rows = [
        (
            one.severity, one.file, one.row or "–", one.column or "–", place_name(one.place), one.value[:80],
            one.expected, _check_link(one.check, checked),
        )
        for one in rest[:_MOST_ROWS]
    ]  # fmt: skip
    headings = ("kind", "file", "row", "column", "place", "value", "what is suspicious, or was expected", "check")
    parts = [table(headings, rows, f"Faults and doubts beside the curves: {len(rest)}")]
    if len(rest) > _MOST_ROWS:
        parts.append(element("p", {}, f"{len(rest) - _MOST_ROWS} more are in check.csv."))
    return element("section", {"id": "places"}, element("h2", {}, "Places, wells, template, whole tables"), *parts)


def _write_soundings(checked: CheckedInputs, by_place: Mapping[str, Sequence[Finding]]) -> Iterable[Markup]:
    """A section a sounding: those with doubts first and open, the others after and folded."""
    if checked.survey is None or checked.region is None:
        return []
    curves = {curve.sounding: curve for curve in checked.examination.curves}
    doubted = {place for place, ones in by_place.items() if any(one.severity != "note" for one in ones)}
    soundings = sorted(
        (sounding for sounding in checked.survey.soundings), key=lambda sounding: sounding.name not in doubted
    )
    number = len([one for one in soundings if one.name in doubted])
    words = (
        f"{number} of {len(soundings)} soundings have doubted readings; they come first. In each curve the line is "
        f"what "
        "the other readings let expect, the band two standard deviations about it. A hollow mark is a reading that is "
        "doubted or not used; its AB/2 stands beside it and its reason in the table."
    )
    return [
        element("section", {"id": "soundings"}, element("h2", {}, "Each sounding"), element("p", {}, words)),
        *(
            _write_sounding(checked, sounding, curves.get(sounding.name), by_place.get(sounding.name, ()))
            for sounding in soundings
        ),
    ]


def _write_sounding(
    checked: CheckedInputs, sounding: Sounding, curve: ExaminedCurve | None, found: Sequence[Finding]
) -> Markup:
    unit = checked.region.length_unit if checked.region else "m"
    doubts = [one for one in found if one.severity != "note"]
    heading = element("h3", {}, place_name(sounding.name))
    said: list[Markup] = []
    if found:
        rows = [
            (one.severity, one.row or "–", one.value, one.expected, _why(one, checked), _advice(one, checked))
            for one in found
        ]
        headings = ("kind", "row", "reading", "what is suspicious", "why", "what to do")
        said.append(table(headings, rows, f"Findings at {sounding.name}: {len(found)}"))
    drawn: list[Markup] = []
    if sounding.curve.half_spacing.size and np.isfinite(sounding.curve.apparent_resistivity).any():
        drawn = [element("div", {"class": "drawings"}, draw_examined(sounding, curve, found, unit))]
    parts = [write_readings(sounding, curve, found, unit)]
    if curve is not None and curve.overlaps:
        parts.append(write_overlaps(curve, unit))
    title = "Every reading: typed, recomputed, expected"
    folded = element("details", {}, element("summary", {}, title), *parts)
    body = [heading, *drawn, *said, folded]
    if doubts:
        return element("article", {"class": "strip"}, *body)
    summary = element("summary", {}, place_name(sounding.name), ": no doubts")
    return element("details", {"class": "strip quiet"}, summary, *body[1:])


def _why(finding: Finding, checked: CheckedInputs) -> str:
    return checked.checks[finding.check].why if finding.check in checked.checks else ""


def _advice(finding: Finding, checked: CheckedInputs) -> str:
    return checked.checks[finding.check].advice if finding.check in checked.checks else ""


def _write_checks(checked: CheckedInputs) -> Markup:
    """Every check with its threshold and reason, found or not: what was looked at is part of the answer."""
    rows = [
        (
            element("span", {"id": f"check-{check.name}"}, check.name.replace("_", " ")),
            check.looks_at,
            check.threshold,
            check.why,
            check.advice,
        )
        for check in checked.checks.values()
    ]
    headings = ("check", "what it looks at", "told from", "why", "what to do")
    return element(
        "section",
        {"id": "checks"},
        element("h2", {}, "All checks"),
        table(headings, rows, "What was looked at, and why"),
    )
