"""Only a look at the inputs: what is wrong and what is unlikely in them, why, and what to do; nothing is changed."""

import csv
import math
import tempfile
from collections import Counter
from collections.abc import Callable, Sequence
from pathlib import Path

import attrs
import numpy as np

from geoves.checking import examine_survey
from geoves.checking.catalogue import CHECKS
from geoves.delivery.check_page import CheckedInputs, write_check_page
from geoves.domain.findings import Examination, Finding
from geoves.domain.survey import Curve, Survey
from geoves.errors import DeliveryError
from geoves.project.findings import name_inputs
from geoves.project.progress import Progress, Summary
from geoves.project.setting_faults import find_curve_options, find_setting_faults
from geoves.project.units_of_logs import claim_unit
from geoves.reading import FaultyInputError, look_at_inputs
from geoves.reading.inputs import InputsSeen

_COLUMNS = ("severity", "file", "row", "column", "value", "expected", "place", "check", "why", "what_to_do")
# A spreadsheet takes a cell that begins so for a formula.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
_ORDER = {"fault": 0, "doubt": 1, "note": 2}


def check(region_path: Path, progress: Progress) -> Summary:
    """What was found, in a few lines; check/check.html and check/check.csv beside region.toml have all of it.

    Raises FaultyInputError where there are faults, after the files are written; DeliveryError where they cannot be.
    """
    with progress.step("Reading the inputs", 1) as step:
        seen = look_at_inputs(region_path)
        faults = () if seen.region is None else find_setting_faults(seen.region)
        step.advance()
    with progress.step("Checking what they say", 1) as step:
        examination = examine_inputs(seen, faults)
        step.advance()
    folder = region_path.parent / "check"
    if region_path.is_file():
        with progress.step("Writing the page", 1) as step:
            _write(folder, seen, region_path, examination)
            step.advance()
    if any(one.severity == "fault" for one in examination.findings):
        raise FaultyInputError(examination.findings, seen.region)
    return Summary(tuple(_tell(seen, examination, folder)))


def examine_inputs(seen: InputsSeen, faults: Sequence[Finding] = ()) -> Examination:
    """All findings in the files' own names: faults first, then doubts, then notes; `faults` are those of settings."""
    if seen.region is None or seen.survey is None:
        return Examination((*faults, *seen.findings))
    survey = attrs.evolve(seen.survey, doubts=())
    sound = attrs.evolve(
        survey, soundings=tuple(attrs.evolve(one, curve=_leave_out_faulty(one.curve)) for one in survey.soundings)
    )
    options = None if faults else find_curve_options(seen.region)
    examination = examine_survey(_located(sound), seen.region, claim_unit(seen.region.template), options)
    placed = [attrs.evolve(one, row=one.row or seen.rows.get((one.file, one.place), 0)) for one in examination.findings]
    found = name_inputs([*faults, *seen.findings, *placed], seen.region)
    return attrs.evolve(examination, findings=tuple(sorted(found, key=lambda one: _ORDER[one.severity])))


def _leave_out_faulty(curve: Curve) -> Curve:
    """The curve with readings out of use that hold faults, so that the others can be judged all the same."""
    with np.errstate(invalid="ignore"):
        sound = np.isfinite(curve.apparent_resistivity) & (curve.apparent_resistivity > 0)
        sound &= (curve.potential_half_spacing > 0) & (curve.half_spacing > curve.potential_half_spacing)
    faulty = curve.used & ~sound
    if not faulty.any():
        return curve
    reason = tuple("a fault stands here" if bad else one for bad, one in zip(faulty, curve.reason, strict=True))
    return attrs.evolve(curve, used=curve.used & sound, reason=reason)


def _located(survey: Survey) -> Survey:
    """The survey without places that have no coordinates: their faults are told already."""
    return attrs.evolve(
        survey,
        soundings=tuple(one for one in survey.soundings if math.isfinite(one.easting + one.northing)),
        wells=tuple(one for one in survey.wells if math.isfinite(one.easting + one.northing + one.total_depth)),
        permits=tuple(one for one in survey.permits if math.isfinite(one.easting + one.northing)),
    )


def _write(folder: Path, seen: InputsSeen, region_path: Path, examination: Examination) -> None:
    title = region_path.parent.resolve().name if seen.region is None else seen.region.name
    checked = CheckedInputs(title, examination, CHECKS, seen.region, seen.survey)
    _write_beside(folder / "check.csv", lambda path: _write_findings(path, examination.findings))
    _write_beside(folder / "check.html", lambda path: write_check_page(checked, path))


def _write_beside(path: Path, write: Callable[[Path], object]) -> None:
    """Write the file under a temporary name, then move it to its own."""
    try:
        path.parent.mkdir(exist_ok=True)
        with tempfile.TemporaryDirectory(dir=path.parent, prefix=".check-") as staging:
            temporary = Path(staging) / path.name
            write(temporary)
            temporary.replace(path)
    except OSError as error:
        raise DeliveryError(f"{path} cannot be written: {error.strerror}") from error


def _write_findings(path: Path, findings: Sequence[Finding]) -> None:
    with path.open("w", encoding="utf-8-sig", newline="") as stream:
        writer = csv.writer(stream)
        writer.writerow(_COLUMNS)
        for finding in findings:
            known = CHECKS.get(finding.check)
            told = [getattr(finding, column) for column in _COLUMNS[:8]]
            reasons = [known.why, known.advice] if known else ["", ""]
            writer.writerow([_cell(value) for value in (*told, *reasons)])


def _cell(value: object) -> str:
    text = str(value)
    return f"'{text}" if text.startswith(_FORMULA_STARTS) else text


def _tell(seen: InputsSeen, examination: Examination, folder: Path) -> list[str]:
    survey, grid = seen.survey, seen.grid
    if survey is None or grid is None or seen.region is None:
        raise AssertionError("inputs without faults were not read")
    doubts = [one for one in examination.findings if one.severity == "doubt"]
    counted = {"sounding": survey.soundings, "well": survey.wells, "permit": survey.permits, "pick": survey.picks}
    counts = ", ".join(_count(len(things), word) for word, things in counted.items())
    return [
        f"{seen.region.name}: {counts}; a grid of {grid.n_rows} rows and {grid.n_columns} columns.",
        f"No faults, {_count(len(doubts), 'doubt')}{':' if doubts else '.'}",
        *_count_kinds(doubts),
        f"All of them, with reasons: {folder / 'check.html'} and {folder / 'check.csv'}",
    ]


def _count(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def _count_kinds(doubts: Sequence[Finding]) -> list[str]:
    """A line for each file and check with doubts: how many, and the first of them."""
    kinds = Counter(_kind(doubt) for doubt in doubts)
    first = {_kind(doubt): doubt.line() for doubt in reversed(doubts)}
    return [
        f"  {first[kind]}" if count == 1 else f"  {kind[0]}, {kind[1]}: {count}, such as {first[kind]}"
        for kind, count in kinds.items()
    ]


def _kind(doubt: Finding) -> tuple[str, str]:
    return doubt.file, doubt.check.replace("_", " ") or doubt.column
