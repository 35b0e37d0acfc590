"""Where to measure next: the job's results, made or remembered, and a plan from them, in a folder of its own."""

import json
from pathlib import Path
from typing import Any

import attrs

from geoves.delivery.folder import publish, stage
from geoves.delivery.markup import format_length
from geoves.delivery.plan_layer import write_plan_layer
from geoves.delivery.plan_page import write_plan_page
from geoves.delivery.swap import RECORD
from geoves.domain.plans import Plan
from geoves.domain.region import Region
from geoves.domain.results import Results
from geoves.errors import DeliveryError, InputError
from geoves.planning import PlanOptions, plan_places
from geoves.project import provenance
from geoves.project.engines import open_engine
from geoves.project.inputs import Inputs, read_inputs
from geoves.project.memory import open_memory
from geoves.project.progress import Progress, SilentProgress, Summary
from geoves.project.run import work_out
from geoves.reading.allowed import read_allowed
from geoves.surfaces.stack import name_threshold

_CAUTION = (
    "Expected, not promised, and no well is sited by it: ask for permission, have buried lines located, and keep "
    "people off the current electrodes."
)
GRAVEL, BEDROCK = "deep_gravel_probability", "bedrock_elevation"


def plan(
    region_path: Path | str, out: Path | str | None = None, places: int | None = None, progress: Progress | None = None
) -> Summary:
    """Write plan.gpkg and plan.html, and say the first of it in a few lines.

    out : a folder of its own, "plan" beside region.toml unless given; places : how many, in place of region.toml's
    Raises InputError where the inputs or the allowed places are wrong, EngineError where nothing can be planned,
    DeliveryError where the files cannot be written; what stood in the folder before stands then still.
    """
    progress = progress or SilentProgress()
    region_path = Path(region_path)
    folder = region_path.parent / "plan" if out is None else Path(out)
    _refuse_delivery(folder)
    with progress.step("Reading the tables", 1) as step:
        inputs, options, allowed = _read(region_path, places)
        step.advance()
    with stage(folder) as staging, open_engine() as engine, open_memory(folder) as memory:
        results, record = work_out(inputs, progress, engine, memory)
        with progress.step("Choosing places", 1) as step:
            found = plan_places(results, options, _name_probability(options), allowed)
            step.advance()
        with progress.step("Writing the plan", 1) as step:
            record = {**record, "plan": attrs.asdict(found)}
            drawn = BEDROCK if options.about == "bedrock" else _name_probability(options)
            write_plan_layer(found, results, staging / "plan.gpkg", provenance.make_tags(record))
            write_plan_page(found, results, drawn, staging / "plan.html")
            publish(staging, folder, record)
            step.advance()
    return Summary(tuple(_tell(found, results, folder)))


def _read(region_path: Path, places: int | None) -> tuple[Inputs, PlanOptions, Any]:
    """Inputs, among whose surfaces is the one that is asked about, what to plan, and where measuring is allowed."""
    inputs = read_inputs(region_path)
    options = inputs.settings.plan
    if places is not None:
        options = attrs.evolve(options, places=places)
    settings = inputs.settings
    if options.thicker_than and options.thicker_than not in settings.surfaces.thicker_than:
        limits = (*settings.surfaces.thicker_than, options.thicker_than)
        settings = attrs.evolve(settings, surfaces=attrs.evolve(settings.surfaces, thicker_than=limits))
    return (
        attrs.evolve(inputs, settings=attrs.evolve(settings, plan=options)),
        options,
        _find_allowed(inputs.region, options),
    )


def _find_allowed(region: Region, options: PlanOptions) -> Any:
    if not options.allowed:
        return None
    shapes, findings = read_allowed(options.allowed, region)
    faults = [one.line() for one in findings if one.severity == "fault"]
    if faults:
        raise InputError(faults)
    return shapes


def _name_probability(options: PlanOptions) -> str:
    return name_threshold(options.thicker_than) if options.thicker_than else GRAVEL


def _refuse_delivery(folder: Path) -> None:
    """A plan takes the place of an earlier plan, never of a delivery."""
    try:
        held = json.loads((folder / RECORD).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return
    if not (isinstance(held, dict) and "plan" in held):
        raise DeliveryError(f"{folder} holds a delivery; write the plan into another folder with --out")


def _tell(found: Plan, results: Results, folder: Path) -> list[str]:
    unit = results.region.length_unit

    def say(value: float) -> str:
        return f"{100.0 * value:.1f} %" if found.about == "gravel" else format_length(value, unit, 2)

    what = "bedrock" if found.about == "bedrock" else "deep gravel"
    where = "over the mapped area" if found.at == "grid" else "at the permits"
    first = (
        f"{results.region.name}: the standard error of {what} {where} is {say(found.before)} now (root mean square), "
        f"and is expected to be {say(found.after)} with all {len(found.places)} places measured."
    )
    lines = [first]
    for place in found.places[:3]:
        kind = "test hole"
        if place.kind == "sounding":
            kind = f"sounding with AB/2 of {format_length(place.spacing, unit)}"
        lines.append(
            f"{place.rank}: {kind} at {place.easting:.0f}, {place.northing:.0f}: lowers it by {say(place.lowering)}"
        )
    return [
        *lines,
        *found.remarks,
        f"All of them, with reasons: {folder / 'plan.html'} and {folder / 'plan.gpkg'}",
        _CAUTION,
    ]
