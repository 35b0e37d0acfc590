"""Tables in files: CSV of any separator, sheets of a workbook. Cells come back as text on one line."""

import csv
import datetime as dt
import io
import logging
import warnings
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import attrs
import openpyxl

from geoves.domain.findings import Finding
from geoves.reading.bounds import find_archive_excess, find_excess
from geoves.reading.faults import in_words, printable
from geoves.reading.sources import Source
from geoves.reading.tables import Columns, Table, build_table

_log = logging.getLogger(__name__)

TEXT_SUFFIXES = (".csv", ".txt", ".tsv")
SHEET_SUFFIXES = (".xlsx", ".xlsm")
_SEPARATORS = "\t;,"
_ZIP_START = b"PK\x03\x04"


def read_delimited(source: Source, columns: Columns, findings: list[Finding]) -> Table | None:
    """The table, None with a fault where the file is not one."""
    if source.suffix in TEXT_SUFFIXES and (excess := find_excess(source.path)):
        refuse_file(source, excess, findings)
        return None
    if source.suffix in TEXT_SUFFIXES:
        return _read_text(source, columns, findings)
    if source.suffix in SHEET_SUFFIXES:
        return _read_sheet(source, columns, findings)
    known = in_words([*TEXT_SUFFIXES, *SHEET_SUFFIXES])
    hint = "; save the old workbook as .xlsx" if source.suffix == ".xls" else ""
    refuse_file(source, f"expected a file that ends in {known}{hint}", findings)
    return None


def refuse_file(source: Source, expected: str, findings: list[Finding], row: int = 0) -> None:
    """Note a fault about the file as a whole."""
    findings.append(Finding("fault", source.typed, row, "", "", expected))


def _read_text(source: Source, columns: Columns, findings: list[Finding]) -> Table | None:
    raw = source.path.read_bytes()
    if raw.startswith(_ZIP_START):
        refuse_file(source, "a workbook or an archive, not CSV; save it as CSV or name it .xlsx", findings)
        return None
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        row = raw.count(b"\n", 0, error.start) + 1
        refuse_file(source, "not text in UTF-8; save the table as 'CSV UTF-8'", findings, row)
        return None
    if "\0" in text:
        refuse_file(source, "not text but bytes of another kind; expected a table as CSV in UTF-8", findings)
        return None
    separator = _find_separator(text)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True, skipinitialspace=True)
    try:
        records = [[printable(cell) for cell in record] for record in reader]
    except csv.Error as error:
        refuse_file(source, f"quotation marks do not match or a cell is too long ({error})", findings, reader.line_num)
        return None
    table = build_table(source.typed, records, columns, findings)
    if table is None or separator == ",":
        return table
    return attrs.evolve(table, rows=tuple(attrs.evolve(row, decimal_comma=True) for row in table.rows))


def _find_separator(text: str) -> str:
    """The separator that the headings hold most of; a comma where they hold none."""
    headings = next((line for line in text.splitlines() if line.strip()), "")
    return max(_SEPARATORS, key=lambda separator: (headings.count(separator), separator == ","))


def _read_sheet(source: Source, columns: Columns, findings: list[Finding]) -> Table | None:
    if excess := find_archive_excess(source.path):
        refuse_file(source, excess, findings)
        return None
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of styles and validations that geoves does not need
        try:
            records = _sheet_records(source.path, source.part)
        except _SheetError as error:
            refuse_file(source, str(error), findings)
            return None
        except Exception as error:  # noqa: BLE001 - a broken workbook makes zip, zlib and XML parsers raise what they will
            _log.debug("%s: %s", source.typed, error)
            refuse_file(source, "not a workbook that can be read; expected a whole .xlsx", findings)
            return None
    return build_table(source.typed, records, columns, findings)


class _SheetError(Exception):
    """The workbook has not the sheet that is meant."""


def _sheet_records(path: Path, sheet: str | None) -> list[list[str]]:
    workbook = openpyxl.load_workbook(path, read_only=True, data_only=True)
    try:
        names = workbook.sheetnames
        if sheet is None and len(names) != 1:
            raise _SheetError(f"several sheets ({', '.join(names)}); name one after #, as in {path.name}#{names[0]}")
        if sheet is not None and sheet not in names:
            raise _SheetError(f"no sheet {sheet!r}; expected one of {', '.join(names)}")
        worksheet = workbook[sheet or names[0]]
        if not hasattr(worksheet, "reset_dimensions"):
            raise _SheetError(f"{worksheet.title!r} is a chart; expected a sheet with a table")
        worksheet.reset_dimensions()  # some writers declare too few columns
        return _without_blank_end(worksheet.iter_rows(values_only=True))
    finally:
        workbook.close()


def _without_blank_end(rows: Iterator[tuple[Any, ...]]) -> list[list[str]]:
    records = [[cell_text(cell) for cell in row] for row in rows]
    while records and not any(records[-1]):
        records.pop()
    return records


def cell_text(value: Any) -> str:
    """A typed cell as a person would type it: whole numbers without a point, days without an hour.

    >>> cell_text(12.0), cell_text(0.5), cell_text(dt.datetime(2024, 5, 1)), cell_text(None)
    ('12', '0.5', '2024-05-01', '')
    """
    if value is None or value != value:  # noqa: PLR0124 - NaN is not itself, and stands for an empty cell
        return ""
    if isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
        return str(int(value))
    if isinstance(value, dt.datetime) and value.time() == dt.time():
        return value.date().isoformat()
    return printable(str(value))
