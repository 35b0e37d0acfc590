"""plan.html: where to measure next, and the reasons; one page, no network, no script."""

from importlib.resources import files
from pathlib import Path

import numpy as np

from geoves.delivery.cautions import CAUTIONS, SHORT_CAUTION
from geoves.delivery.check_page import CONTENT_POLICY
from geoves.delivery.markup import Markup, element, format_length, joined, place_name, table, unit_label
from geoves.delivery.ramps import embedded_image, ramp_colours, value_range
from geoves.delivery.sections import draw_scale_bar
from geoves.delivery.svg import Frame, Scale, drawing, label, rectangle, tick_text
from geoves.domain.arrays import FloatArray
from geoves.domain.plans import NextPlace, Plan
from geoves.domain.region import LengthUnit
from geoves.domain.results import Results

RAMP = "cividis"
_WIDTH, _HEIGHT = 640, 520
# Metres in a mile, exact (NIST SP 811, appendix B.6: 5280 ft of 0.3048 m).
_MILE = 1609.344
_KINDS = {"sounding": "sounding", "test_hole": "test hole"}
_CAUTIONS = (
    "field_safety", "reconnaissance", "test_drilling", "licensed_practice", "local_codes",
)  # fmt: skip
_PERMISSION = (
    "A place on this page is a place on a map and no more: ask whoever owns or keeps the land, and the road authority "
    "beside a road; have buried lines located before a stake or a drill goes down; look for fences, pipelines and "
    "power lines, which spoil a sounding, and for a straight stretch as long as the spread."
)


def write_plan_page(plan: Plan, results: Results, doubt: str, path: Path) -> Path:
    """The written page at `path`; `doubt` names the surface whose standard error, or whose probability, is drawn."""
    writer = _Writer(plan, results, doubt)
    body = joined([writer.summary(), writer.places(), writer.method(), writer.cautions()])
    path.write_text(_page(results.region.name, body), encoding="utf-8")
    return path


def _page(name: str, body: Markup) -> str:
    style = Markup((files("geoves.delivery") / "pages" / "report.css").read_text(encoding="utf-8"))
    head = joined(
        [
            Markup('<meta charset="utf-8">'),
            Markup('<meta name="viewport" content="width=device-width, initial-scale=1">'),
            Markup(f'<meta http-equiv="Content-Security-Policy" content="{CONTENT_POLICY}">'),
            Markup('<meta name="generator" content="geoves">'),
            element("title", {}, f"{name}: where to measure next"),
            element("style", {}, style),
        ],
        "\n",
    )
    top = element("header", {"class": "top"}, element("h1", {}, "Where to measure next in ", place_name(name)))
    caution = element("p", {"class": "caution", "role": "note"}, SHORT_CAUTION)
    whole = joined([caution, top, element("main", {}, body)])
    return f'<!DOCTYPE html>\n<html lang="en">\n<head>\n{head}\n</head>\n<body>\n{whole}\n</body>\n</html>\n'


class _Writer:
    """The parts of one page."""

    def __init__(self, plan: Plan, results: Results, doubt: str) -> None:
        self.plan, self.results, self.surface = plan, results, doubt
        self.unit: LengthUnit = results.region.length_unit

    @property
    def about(self) -> str:
        if self.plan.about == "bedrock":
            return "bedrock’s elevation"
        if self.plan.thicker_than:
            thick = format_length(self.plan.thicker_than, self.unit, 1)
            return f"the presence of more than {thick} of deep gravel"
        return "the presence of deep gravel"

    @property
    def where(self) -> str:
        return "over the mapped area" if self.plan.at == "grid" else "at the permits"

    def amount(self, value: float) -> str:
        """A doubt, or what is taken from it, in the reader's unit."""
        if self.plan.about == "gravel":
            return f"{100.0 * value:.1f} %"
        return format_length(value, self.unit, 2 if value < 1.0 else 1)

    def far(self, metres: float) -> str:
        if self.unit == "m":
            return f"{metres / 1000.0:.1f} km"
        return f"{metres / _MILE:.1f} mi"

    def summary(self) -> Markup:
        plan = self.plan
        soundings = sum(place.kind == "sounding" for place in plan.places)
        holes = len(plan.places) - soundings
        shown = (
            ("Standard error now", self.amount(plan.before), f"of {self.about}, root mean square {self.where}"),
            ("With all of them measured", self.amount(plan.after), "expected, on average"),
            ("Places", str(len(plan.places)), f"{soundings} soundings, {holes} test holes"),
        )
        numbers = [
            element("div", {}, element("dt", {}, asked), element("dd", {}, element("strong", {}, number), words))
            for asked, number, words in shown
        ]
        caption = (
            "Numbered: the places in their order, circles soundings, squares test holes. Small marks: soundings (dots) "
            "and wells (squares) that are known. "
            + (
                "The lighter the ground, the less sure is its bedrock."
                if plan.about == "bedrock"
                else "The lighter the ground, the nearer are the odds of gravel to even."
            )
        )
        frame = {"class": "scroll", "tabindex": "0", "role": "region", "aria-label": "Map of the next places"}
        figure = element("div", frame, self.draw_map())
        return joined(
            [
                element("dl", {"class": "numbers"}, *numbers),
                *(element("p", {}, f"{words}.") for words in plan.remarks),
                element("figure", {}, figure, element("figcaption", {}, caption)),
            ]
        )

    def places(self) -> Markup:
        rows = [
            (
                place.rank, _KINDS[place.kind], format_length(place.spacing, self.unit),
                self.amount(place.lowering), self.amount(place.doubt_now), self.amount(place.doubt_then),
                f"{place.easting:.0f}, {place.northing:.0f}",
            )
            for place in self.plan.places
        ]  # fmt: skip
        headings = ("rank", "do", "AB/2", "lowers the doubt by", "doubt there now", "then", "x, y")
        reasons = [self.reason(place) for place in self.plan.places]
        return joined(
            [
                element("h2", {"id": "places"}, "The places"),
                table(headings, rows, f"Where to measure next, for {self.about} {self.where}"),
                element("h2", {"id": "reasons"}, "The reasons"),
                *reasons,
            ]
        )

    def reason(self, place: NextPlace) -> Markup:
        known = 100.0 * place.sounding_error
        told = (
            f"Soundings over such depths with such spreads knew the depth to {known:.0f} % in this survey."
            if np.isfinite(place.sounding_error) and known < 100.0
            else "Soundings over such depths hardly knew the depth in this survey."
        )
        then = self.amount(place.doubt_then)
        facts = element(
            "p",
            {},
            f"The standard error of {self.about} is {self.amount(place.doubt_now)} here now, and is expected to be "
            f"{then} once this place and those before it are measured. "
            f"The nearest known place is {self.far(place.distance)} away: ",
            place_name(place.nearest),
            f". Gravel or rock is expected to begin {format_length(place.depth, self.unit)} down.",
        )
        choice = (
            f"Wherever it is asked, {self.where}, a sounding here lowers the doubt by "
            f"{self.amount(place.by_sounding)}, a test hole by {self.amount(place.by_test_hole)}. "
            f"A sounding needs an AB/2 of {format_length(place.spacing, self.unit)}. {told}"
        )
        heading = element("h3", {}, f"{place.rank}: {_KINDS[place.kind]} at {place.easting:.0f}, {place.northing:.0f}")
        return joined([heading, facts, element("p", {}, choice)])

    def method(self) -> Markup:
        plan = self.plan
        words = (
            f"{plan.n_allowed:,} places were weighed, spread evenly over where measuring is allowed, and the doubt was "
            f"counted at {plan.n_asked:,} places {self.where}. What a measurement takes from the doubt of a field with "
            "normal errors does not hang on what it will show: only on where it is, on how well such measurements "
            "know, and on how far the ground is alike. The place that takes most for its cost comes first, and the "
            "next is chosen as if it had been measured. How well a sounding knows is taken from this survey’s own "
            "soundings of like depth and spread; a test hole knows the contact to about one per cent. The advised "
            "AB/2 is the shortest of the survey’s own that promises nearly as much as the best."
        )
        limits = (
            "Expected lowering is an average: what is found may also raise the doubt, where it shows that the ground "
            "is rougher than was thought. The map’s covariance is taken as known."
        )
        return joined(
            [element("h2", {"id": "method"}, "How it was found"), *(element("p", {}, w) for w in (words, limits))]
        )

    def cautions(self) -> Markup:
        said = [_PERMISSION, *(CAUTIONS[name] for name in _CAUTIONS)]
        items = [element("li", {}, words) for words in said]
        return joined(
            [element("h2", {"id": "cautions"}, "Before anybody goes out"), element("ul", {"class": "cautions"}, *items)]
        )

    def doubts(self) -> FloatArray:
        """On the grid, in m or as a probability's deviation."""
        surface = self.results.stack.surfaces[self.surface]
        if self.plan.about == "bedrock" and surface.standard_error is not None:
            return surface.standard_error
        return np.sqrt(surface.estimate * (1.0 - surface.estimate))

    def draw_map(self) -> Markup:
        """The doubt from above, what is known, and the places."""
        grid, region = self.results.stack.grid, self.results.region
        west, south, east, north = grid.bounds
        scale = min(_WIDTH / (east - west), _HEIGHT / (north - south))
        wide, high = (east - west) * scale, (north - south) * scale
        frame = Frame(Scale(west, east, 8, 8 + wide), Scale(south, north, 8 + high, 8))
        doubts = self.doubts()
        low, high_doubt = value_range(doubts)
        index = np.clip(np.nan_to_num((doubts - low) / (high_doubt - low)) * 255, 0, 255).astype(int)
        colours = np.dstack([ramp_colours(RAMP)[index], np.where(np.isfinite(doubts), 255, 0)]).astype(np.uint8)
        box = {"x": 8, "y": 8, "width": f"{wide:.1f}", "height": f"{high:.1f}"}
        parts = [rectangle(8, 8, wide, high, {"class": "frame nodata"}), embedded_image(colours, box)]
        parts += self._draw_known(frame)
        parts += [self._draw_place(frame, place) for place in reversed(self.plan.places)]
        parts += [
            draw_scale_bar(frame, region.crs_unit_metres, region.length_unit != "m"),
            self._draw_legend(8 + wide + 24, low, high_doubt),
        ]
        title = f"{region.name}: doubt now, and the next places"
        return drawing(int(wide + 170), int(max(high, 230) + 16), title, *parts)

    def _draw_known(self, frame: Frame) -> list[Markup]:
        marks = []
        for one in self.results.survey.soundings:
            x, y = float(frame.x.pixel(one.easting)), float(frame.y.pixel(one.northing))
            words = element("title", {}, one.name)
            marks.append(element("circle", {"cx": f"{x:.1f}", "cy": f"{y:.1f}", "r": 1.8, "class": "mark seen"}, words))
        for well in self.results.survey.wells:
            x, y = float(frame.x.pixel(well.easting)), float(frame.y.pixel(well.northing))
            words = element("title", {}, f"well {well.name}")
            square = {"d": f"M{x - 2.5:.1f} {y - 2.5:.1f}h5v5h-5Z", "class": "mark well"}
            marks.append(element("path", square, words))
        return marks

    def _draw_place(self, frame: Frame, place: NextPlace) -> Markup:
        x, y = float(frame.x.pixel(place.easting)), float(frame.y.pixel(place.northing))
        style = {"class": "mark next", "stroke": "#d55e00", "fill": "#ffffff", "stroke-width": 2}
        if place.kind == "sounding":
            outline = element("circle", {"cx": f"{x:.1f}", "cy": f"{y:.1f}", "r": 9, **style})
        else:
            outline = rectangle(x - 8.5, y - 8.5, 17, 17, style)
        number = {"x": f"{x:.1f}", "y": f"{y + 4:.1f}", "text-anchor": "middle", "fill": "#111111"}
        return joined([outline, element("text", {**number, "style": "fill:#111111"}, place.rank)])

    def _draw_legend(self, x: float, low: float, high: float) -> Markup:
        metres = self.results.region.metres_per_length_unit if self.plan.about == "bedrock" else 1.0
        words = f"standard error ({unit_label(self.unit)})" if self.plan.about == "bedrock" else "doubt (deviation)"
        scale = Scale(low / metres, high / metres, 200, 34)
        bar = ramp_colours(RAMP)[::-1, None, :]
        return joined(
            [
                label(x, 20, words, "axis"),
                embedded_image(bar, {"x": f"{x:.1f}", "y": 34, "width": 16, "height": 166}),
                *(label(x + 22, float(scale.pixel(tick)) + 4, tick_text(tick), "tick") for tick in scale.ticks(6)),
            ]
        )
