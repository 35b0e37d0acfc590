"""report.html: the whole job on one page that opens with no network and runs no script."""

from collections.abc import Callable, Iterable, Mapping
from functools import partial
from importlib.resources import files
from pathlib import Path
from typing import Any

from geoves.delivery.cautions import SHORT_CAUTION
from geoves.delivery.markup import Markup, element, joined, place_name
from geoves.delivery.report_answers import write_answers
from geoves.delivery.report_places import StripJob, draw_strip, gather_strips
from geoves.delivery.report_trust import write_decisions, write_doubts, write_making, write_trust
from geoves.delivery.report_wells import write_wells_and_template
from geoves.delivery.section_lines import lay_sections
from geoves.delivery.sections import draw_section
from geoves.delivery.svg import line, mark_path
from geoves.delivery.unit_look import pattern_definitions, unit_key
from geoves.domain.results import Results

CONTENT_POLICY = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; form-action 'none'"

HEADINGS = {
    "answers": "Asked and answered",
    "sections": "Along the valley and across it",
    "soundings": "Each sounding",
    "wells": "Wells and the resistivity template",
    "trust": "Why believe the surfaces",
    "doubts": "Faults and doubts",
    "decisions": "The interpreter’s decisions",
    "making": "How it was made",
}

Map = Callable[[Callable[[StripJob], str], Iterable[StripJob]], Iterable[str]]


def write_report_page(results: Results, path: Path, record: Mapping[str, Any], *, map: Map = map) -> Path:  # noqa: A002 - the seam's name throughout
    """The written page at `path`. `record` says how the job was made; `map` draws the soundings' strips."""
    template = results.region.template
    strips = [Markup(one) for one in map(partial(draw_strip, template=template), gather_strips(results))]
    bodies = {
        "answers": write_answers(results),
        "sections": _write_sections(results),
        "soundings": _write_soundings(results, strips),
        "wells": write_wells_and_template(results),
        "trust": write_trust(results),
        "doubts": write_doubts(results),
        "decisions": write_decisions(results),
        "making": write_making(results, record),
    }
    sections = [
        element("section", {"id": key}, element("h2", {}, f"{number}. {HEADINGS[key]}"), body)
        for number, (key, body) in enumerate(bodies.items(), start=1)
    ]
    page = _page(results, joined([pattern_definitions(template), _contents(), *sections]))
    path.write_text(page, encoding="utf-8")
    return path


def _page(results: Results, body: Markup) -> str:
    name = results.region.name
    style = Markup((files("geoves.delivery") / "pages" / "report.css").read_text(encoding="utf-8"))
    head = joined(
        [
            Markup('<meta charset="utf-8">'),
            Markup('<meta name="viewport" content="width=device-width, initial-scale=1">'),
            Markup(f'<meta http-equiv="Content-Security-Policy" content="{CONTENT_POLICY}">'),
            Markup('<meta name="generator" content="geoves">'),
            element("title", {}, f"{name}: report"),
            element("style", {}, style),
        ],
        "\n",
    )
    top = element(
        "header",
        {"class": "top"},
        element("h1", {}, "What lies under ", place_name(name)),
        element("p", {"class": "aside"}, _made_for(results)),
    )
    caution = element("p", {"class": "caution", "role": "note"}, SHORT_CAUTION)
    whole = joined([caution, top, element("main", {}, body)])
    return f'<!DOCTYPE html>\n<html lang="en">\n<head>\n{head}\n</head>\n<body>\n{whole}\n</body>\n</html>\n'


def _made_for(results: Results) -> str:
    delivery = results.region.delivery
    survey = results.survey
    things = {"sounding": len(survey.soundings), "well": len(survey.wells), "permit": len(survey.permits)}
    counted = ", ".join(f"{count:,} {thing}{'' if count == 1 else 's'}" for thing, count in things.items())
    said = [f"Report of a resistivity survey: {counted}"]
    said += [words for words in (delivery.organisation, delivery.contact, delivery.use_limits) if words]
    return ". ".join(words.rstrip(".") for words in said) + "."


def _contents() -> Markup:
    items = [element("li", {}, element("a", {"href": f"#{key}"}, words)) for key, words in HEADINGS.items()]
    return element("nav", {"aria-label": "Contents"}, element("ol", {}, *items))


def _write_sections(results: Results) -> Markup:
    drawn = [(one.title, draw_section(results, one.title, one.line)) for one in lay_sections(results)]
    figures = [
        element(
            "figure",
            {},
            element("div", {"class": "scroll", "tabindex": "0", "role": "region", "aria-label": title}, svg),
        )
        for title, svg in drawn
        if svg
    ]
    if not figures:
        return element("p", {}, "No section is named, and no valley axis was found along which one could be laid.")
    words = (
        "Ground in green, bedrock as a bold line within its 90 % band, gravel where it is likely (0.66 or more). "
        "Soundings near the section stand as broad columns of the unit that is most probable at each depth, paler the "
        "less probable it is. A column with an arrow at its foot ends at the depth that the base, gravel or rock, must "
        "exceed; a dashed one on a diamond does not show the base by itself. Wells stand as narrow columns with how "
        "far off the section they are: another depth there is no contradiction. An orange bar is an interpreter’s "
        "pick. Each section is dashed on the map above and marked where it begins."
    )
    if results.geology is not None:
        words += (
            " A column is what its curve says alone: where the bedrock line leaves it, all others outweighed it, "
            "and its strip says how."
        )
    return joined([element("p", {}, words), unit_key(results.region.template), *figures])


def _write_soundings(results: Results, strips: list[Markup]) -> Markup:
    words = (
        "Left, the curve: readings with one standard deviation, a mark of its own for each potential spacing, and the "
        "curve of the chosen model; the grey ones behind it belong to models that fit as well. Middle, those models "
        "against depth, and above them the template’s ranges. Right, what the ground may be: each unit’s "
        "probability at each depth, stacked to one, paler for coarse ground above a known water level; the bracket is "
        "the 90 % band of the depth to bedrock, an arrow a depth that the base exceeds. Beside it the nearest well’s "
        "log on the same depths, where one is within 3 km. "
        "In the table S is a layer’s thickness over its resistivity, T their product, lengths in metres: a curve often "
        "knows one of them better than it knows either part."
    )
    if results.geology is not None:
        words += (
            " Under the drawings the basal contact on one depth axis: as this curve alone has it, as all others "
            "(neighbours, wells, template) expect it without this curve, and as both together have it, which is what "
            "the surfaces are drawn from; a bar holds 90 %, its line is the median."
        )
    names = [
        element("a", {"href": f"#sounding-{number}"}, place_name(sounding.name))
        for number, sounding in enumerate(results.survey.soundings)
    ]
    keys = [_line_key(), unit_key(results.region.template)]
    return joined([element("p", {}, words), *keys, element("p", {}, joined(names, ", ")), *strips])


def _line_key() -> Markup:
    """The key of the strips' lines and marks."""
    shown = (
        (line(0, 8, 30, 8, "model"), "chosen model, as few layers as the curve needs"),
        (line(0, 8, 30, 8, "smooth"), "smoothest model that fits"),
        (joined(line(0, y, 30, y, "fan") for y in (4, 8, 12)), "some of the models that fit as well"),
        (line(0, 8, 30, 8, "fit"), "curve of the chosen model"),
        (element("path", {"d": mark_path(0, 15, 8), "class": "reading aside"}), "reading set aside, or doubted"),
        (line(0, 8, 30, 8, "pick"), "interpreter’s pick"),
    )
    size = {"width": 30, "height": 16, "viewBox": "0 0 30 16", "aria-hidden": "true"}
    items = [element("li", {}, element("svg", size, mark), " ", words) for mark, words in shown]
    return element("ul", {"class": "key"}, *items)
