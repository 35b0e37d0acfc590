"""The whole job, in the order in which data flow."""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager, nullcontext
from math import ceil
from pathlib import Path
from typing import Any, NamedTuple

import attrs
import numpy as np

from geoves.checking import assign_errors, examine_survey
from geoves.delivery.fgdc import write_fgdc_records
from geoves.delivery.folder import publish, stage
from geoves.delivery.geopackage import write_geopackage
from geoves.delivery.map_page import write_map_page
from geoves.delivery.metadata import write_metadata
from geoves.delivery.permit_table import write_permit_table
from geoves.delivery.rasters import write_rasters
from geoves.delivery.report_page import write_report_page
from geoves.delivery.styles import write_styles
from geoves.domain.earth import Inverted
from geoves.domain.fields import FieldEnsemble
from geoves.domain.findings import Finding
from geoves.domain.grids import SurfaceStack
from geoves.domain.results import Results
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation
from geoves.errors import NotInferredError
from geoves.geology import infer_geology
from geoves.interpretation import interpret
from geoves.inversion import invert
from geoves.kernels.blocks import cut_blocks
from geoves.layers import derive_layers
from geoves.project import provenance
from geoves.project.engines import open_engine, watched
from geoves.project.findings import name_inputs
from geoves.project.inputs import Inputs, read_inputs
from geoves.project.memory import Memory, open_memory, remembered, remembering
from geoves.project.progress import Progress, SilentProgress, Summary
from geoves.project.seam import Map
from geoves.project.settings import Settings
from geoves.project.units_of_logs import claim_unit
from geoves.reading import fingerprint_files
from geoves.surfaces import build_surfaces, build_surfaces_together


def run(
    region_path: Path | str,
    out: Path | str | None = None,
    progress: Progress | None = None,
    *,
    workers: int | None = None,
    scheduler: str | None = None,
    afresh: bool = False,
) -> Summary:
    """Do the whole job and say in a few lines what was found, what was not, and where the files are.

    workers : processes on this machine, as many as it has cores and four at most unless given; scheduler : address of
    a Dask cluster in their place; afresh : every block is computed, none is looked up or remembered
    Raises InputError where the inputs are wrong, EngineError where a step cannot be computed, DeliveryError where the
    delivery cannot be written; what stood in the folder before stands then still.
    """
    progress = progress or SilentProgress()
    region_path = Path(region_path)
    folder = region_path.parent / "delivery" if out is None else Path(out)
    inputs = _read(region_path, progress)
    with (
        stage(folder) as staging,  # a folder in use is said before the work, not after it
        open_engine(workers, scheduler) as engine,
        nullcontext() if afresh else open_memory(folder) as memory,
    ):
        results, record = work_out(inputs, progress, engine, memory)
        write_all(results, record, staging, progress, engine)
        with _step(progress, "Moving the delivery into place"):
            publish(staging, folder, record)
    return Summary((*_tell_recalled(memory), *_tell(results, folder)))


def compute(region_path: Path, progress: Progress) -> tuple[Results, dict[str, Any]]:
    """Everything that the delivery is written from, and the record of how it came about."""
    inputs = _read(region_path, progress)
    with open_engine() as engine:
        return work_out(inputs, progress, engine)


def _read(region_path: Path, progress: Progress) -> Inputs:
    with _step(progress, "Reading the tables"):
        return read_inputs(region_path)


def work_out(
    inputs: Inputs, progress: Progress, engine: Map, memory: Memory | None = None
) -> tuple[Results, dict[str, Any]]:
    """From the inputs to everything that the delivery is written from, and the record of how it came about.

    engine : the map that blocks go through; memory : of blocks of curves, and of the geology without picks
    """
    recalling = engine if memory is None else remembered(engine, memory)
    region, settings = inputs.region, inputs.settings
    survey = assign_errors(inputs.survey)
    examination = examine_survey(survey, region, claim_unit(region.template), settings.curves)
    record = provenance.make_record(region, settings, fingerprint_files(region))
    template = region.template
    names = [sounding.name for sounding in survey.soundings if sounding.curve.is_enough]
    n_curves, n_places = (len(cut_blocks(names, one.block)) for one in (settings.inversion, settings.interpretation))
    with progress.step("Inverting the curves", 2 * n_curves) as step:
        inverted = invert(survey, settings.inversion, map=watched(recalling, step))
    with progress.step("Reading columns from them", (1 + settings.interpretation.calibrate) * n_places) as step:
        interpretation = interpret(survey, inverted, template, settings.interpretation, map=watched(recalling, step))
    if survey.picks and region.method == "together":
        with _step(progress, "Reading columns without the picks"):
            undecided = interpret(
                attrs.evolve(survey, picks=()), inverted, template, settings.interpretation, map=recalling
            )
        interpretation = attrs.evolve(interpretation, undecided=undecided)
    work = Worked(inputs, survey, inverted, interpretation)
    geology, stack = _map_surfaces(work, progress, engine, memory)
    with _step(progress, "Drawing contours, valley and permits"):
        layers = derive_layers(stack, survey, region, settings.layers)
    found = [one for one in examination.findings if one.severity == "doubt"]
    doubts = name_inputs([*found, *_doubt_words(interpretation)], region)
    merit = provenance.judge_surfaces(stack)
    results = Results(region, survey, inverted, interpretation, stack, layers, doubts, merit, geology)
    statuses = [column.bedrock_status for column in interpretation.columns]
    record |= {
        "method": "each" if geology is None else "together",
        "reach": stack.reach,
        "remarks": [*interpretation.remarks, *stack.remarks],
        "geology": None if geology is None else dict(geology.diagnostics),
        "bedrock_status": provenance.summarise(statuses),
        "noise": inverted[0].noise if inverted else None,
        "error_correlation": inverted[0].error_correlation if inverted else None,
        "template_calibration": _record_calibration(interpretation),
        "covariances": [attrs.asdict(one, filter=_scalars) for one in stack.variograms],
        "figures_of_merit": merit,
        "doubts": len(doubts),
    }
    return results, record


class Worked(NamedTuple):
    """How far a job has come when every place has spoken for itself."""

    inputs: Inputs
    survey: Survey
    inverted: tuple[Inverted, ...]
    interpretation: Interpretation


def _map_surfaces(
    work: Worked, progress: Progress, engine: Map, memory: Memory | None
) -> tuple[FieldEnsemble | None, SurfaceStack]:
    """The surfaces by the region's method; where one geology cannot be inferred, each place's own, and it is said."""
    region, settings, grid = work.inputs.region, work.inputs.settings, work.inputs.grid
    _, survey, inverted, interpretation = work
    geology, reason = None, ""
    if region.method == "together":
        with _step(progress, "Inferring one geology"):
            try:
                geology = infer_geology(
                    survey, inverted, interpretation, region.template, settings.geology,
                    map=engine, remember=remembering(engine, memory),
                )  # fmt: skip
            except NotInferredError as error:
                reason = str(error)
    title, n_blocks = "Drawing the surfaces", _count_blocks(grid.shape, settings)
    with progress.step(title, n_blocks) as step:
        if geology is not None:
            return geology, build_surfaces_together(
                geology, interpretation, survey, region.template, grid, settings.surfaces, map=watched(engine, step)
            )
        stack = build_surfaces(
            interpretation, survey, region.template, grid, settings.surfaces, map=watched(engine, step)
        )
    if reason:
        said = f"the method is 'each', not 'together': {reason}"
        stack = attrs.evolve(stack, remarks=(said, *stack.remarks))
    return None, stack


def deliver(results: Results, record: Mapping[str, Any], folder: Path, progress: Progress, engine: Map) -> None:
    """Write everything beside the delivery folder, verify it, and move it in; run.json last."""
    with stage(folder) as staging:
        write_all(results, record, staging, progress, engine)
        with _step(progress, "Moving the delivery into place"):
            publish(staging, folder, record)


def write_all(results: Results, record: Mapping[str, Any], staging: Path, progress: Progress, engine: Map) -> None:
    """Every file of the delivery but run.json, into an empty folder."""
    tags = provenance.make_tags(record)
    with _step(progress, "Writing rasters"):
        files = [*write_rasters(results.stack, results.region, staging, tags)]
    with _step(progress, "Writing layers.gpkg"):
        files.append(write_geopackage(results, staging / "layers.gpkg", tags))
        if results.survey.permits:
            write_permit_table(results, staging)
    with _step(progress, "Writing metadata and styles"):
        write_metadata(results, staging, record, files)
        if results.region.delivery.fgdc:
            write_fgdc_records(results, staging, record, files)
        write_styles(results, staging)
    with _step(progress, "Writing map.html"):
        write_map_page(results, staging / "map.html")
    with progress.step("Writing report.html", len(results.inverted)) as step:
        write_report_page(results, staging / "report.html", record, map=watched(engine, step))


@contextmanager
def _step(progress: Progress, title: str) -> Iterator[None]:
    """A step of one part."""
    with progress.step(title, 1) as step:
        yield
        step.advance()


def _count_blocks(shape: tuple[int, int], settings: Settings) -> int:
    """Blocks of cells at most: five quantities, how far the first rests on soundings, and the column's realisations."""
    return 7 * ceil(shape[0] * shape[1] / settings.surfaces.block)


def _record_calibration(interpretation: Interpretation) -> dict[str, Any]:
    """What moved the template's ranges, in the order in which it did: soundings beside wells, then all curves."""
    paired = interpretation.pair_calibration
    return {
        "pairs": None if paired is None else attrs.asdict(paired),
        "curves": [attrs.asdict(one) for one in interpretation.calibration],
    }


def _scalars(_: Any, value: Any) -> bool:
    """Whether a value belongs into the record: arrays stay in the report."""
    return not isinstance(value, np.ndarray)


def _doubt_words(interpretation: Interpretation) -> Sequence[Finding]:
    """Drillers' words that no unit of the template claims."""
    expected = "no unit claims these words; add them to a unit's log_terms, or type the unit in the log"
    return [Finding("doubt", "well_logs", 0, "description", words, expected) for words in interpretation.unmapped_words]


def _tell_recalled(memory: Memory | None) -> Iterator[str]:
    if memory is not None and memory.recalled:
        yield f"{memory.recalled} of {memory.asked} blocks of curves were known from earlier runs ({memory.folder})."


def _tell(results: Results, folder: Path) -> Iterator[str]:
    """The job in a few lines."""
    survey, stack = results.survey, results.stack
    status = provenance.summarise([column.bedrock_status for column in results.interpretation.columns])
    silent = len(survey.soundings) - len(results.inverted)
    yield (
        f"{results.region.name}: {len(survey.soundings)} soundings, {len(survey.wells)} wells, "
        f"{len(survey.permits)} permits."
    )
    yield (
        f"Basal contact seen at {status['seen']} soundings; not distinct at {status['not_distinct']}; "
        f"deeper than the curve reaches at {status['deeper_than']}"
        + (f"; {silent} soundings had too few readings, or none in the middle." if silent else ".")
    )
    depth = stack.surfaces["bedrock_depth"].estimate
    unit = results.region.metres_per_length_unit
    name = {"m": "m", "ft": "ft", "us-ft": "ft (US survey)"}[results.region.length_unit]
    yield (
        f"Bedrock lies {np.nanmin(depth) / unit:.0f} to {np.nanmax(depth) / unit:.0f} {name} deep where it is mapped "
        f"({np.mean(stack.covered):.0%} of the grid)."
    )
    crossed = results.figures_of_merit["bedrock_elevation"]["leave_one_out_rmse_m"]
    yield f"Left out one at a time, the basal contact is met within {crossed / unit:.1f} {name} (root mean square)."
    yield from stack.remarks
    if results.doubts:
        yield f"{len(results.doubts)} doubts about the inputs are in report.html, the first: {results.doubts[0].line()}"
    yield f"Everything is in {folder}: open map.html and report.html in a browser, the rest in any GIS."
    yield "Reconnaissance only: no well is sited, and no water judged, without test drilling and licensed practice."
