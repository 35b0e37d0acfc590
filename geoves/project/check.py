"""Only a look at the inputs: what is wrong and what is unlikely in them, said and written down."""

import csv
import os
import tempfile
from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from geoves.curves import prepare_curves
from geoves.domain.findings import Finding
from geoves.errors import DeliveryError
from geoves.project.findings import name_inputs
from geoves.project.inputs import read_inputs
from geoves.project.progress import Progress, Summary
from geoves.reading import FaultyInputError

_COLUMNS = ("severity", "file", "row", "column", "value", "expected", "place")
# A spreadsheet takes a cell that begins so for a formula.
_FORMULA_STARTS = ("=", "+", "-", "@")


def check(region_path: Path, progress: Progress) -> Summary:
    """What was found, in a few lines; every finding is a row of check/check.csv beside region.toml.

    Raises FaultyInputError where there are faults, after the file is written; DeliveryError where it cannot be.
    """
    report = region_path.parent / "check" / "check.csv"
    try:
        with progress.step("Reading the inputs", 1) as step:
            inputs = read_inputs(region_path)
            region, survey, grid = inputs.region, inputs.survey, inputs.grid
            step.advance()
        with progress.step("Checking the curves", 1) as step:
            doubts = name_inputs(prepare_curves(survey, inputs.settings.curves).doubts, region)
            step.advance()
    except FaultyInputError as error:
        if region_path.is_file():
            _write_findings(report, error.findings)
        raise
    _write_findings(report, doubts)
    counted = {"sounding": survey.soundings, "well": survey.wells, "permit": survey.permits, "pick": survey.picks}
    counts = ", ".join(_count(len(things), word) for word, things in counted.items())
    return Summary(
        (
            f"{region.name}: {counts}; a grid of {grid.n_rows} rows and {grid.n_columns} columns.",
            f"No faults, {_count(len(doubts), 'doubt')}{':' if doubts else '.'}",
            *_count_kinds(doubts),
            f"All of them: {report}",
        )
    )


def _count(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def _count_kinds(doubts: Sequence[Finding]) -> list[str]:
    """A line for each file and column with doubts: how many, and the first of them."""
    kinds = Counter((doubt.file, doubt.column) for doubt in doubts)
    first = {(doubt.file, doubt.column): doubt.line() for doubt in reversed(doubts)}
    return [
        f"  {first[file, column]}" if count == 1 else f"  {file}, {column}: {count}, such as {first[file, column]}"
        for (file, column), count in kinds.items()
    ]


def _write_findings(path: Path, findings: Sequence[Finding]) -> None:
    """Write the table under a temporary name, then move it to its own."""
    try:
        path.parent.mkdir(exist_ok=True)
        handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=".check-", suffix=".csv")
        try:
            with os.fdopen(handle, "w", encoding="utf-8-sig", newline="") as stream:
                writer = csv.writer(stream)
                writer.writerow(_COLUMNS)
                writer.writerows([_cell(getattr(finding, column)) for column in _COLUMNS] for finding in findings)
            Path(temporary).chmod(0o644)
            Path(temporary).replace(path)
        finally:
            Path(temporary).unlink(missing_ok=True)
    except OSError as error:
        raise DeliveryError(f"{path} cannot be written: {error.strerror}") from error


def _cell(value: object) -> str:
    text = str(value)
    return f"'{text}" if text.startswith(_FORMULA_STARTS) else text
