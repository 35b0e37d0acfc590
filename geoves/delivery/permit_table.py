"""The layer of permits once more as a CSV table that a spreadsheet opens without running any of it."""

import csv
from pathlib import Path

import pandas as pd

from geoves.delivery.geopackage import GEOMETRY, build_frame
from geoves.domain.results import Results
from geoves.errors import DeliveryError

NAME = "permit_answers.csv"
# What makes a spreadsheet take text for a formula, at a cell's beginning (OWASP, CSV Injection).
_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\n")


def write_permit_table(results: Results, folder: Path) -> Path:
    """The path of the table: the columns of the layer `permits` behind the coordinates, in the region's length unit.

    Text that a spreadsheet would take for a formula stands behind an apostrophe; numbers are numbers. UTF-8 with a BOM,
    without which spreadsheets misread letters beyond ASCII. Raises DeliveryError.
    """
    frame = build_frame("permits", results)[0]
    places = {"x": frame[GEOMETRY].x.round(3), "y": frame[GEOMETRY].y.round(3)}
    table = pd.DataFrame({**places, **frame.drop(columns=GEOMETRY)})
    columns = ["permit", *(name for name in table if name != "permit")]
    told = pd.DataFrame({disarm(str(name)): _write_column(table[name]) for name in columns})
    path = folder / NAME
    try:
        told.to_csv(path, index=False, encoding="utf-8-sig", lineterminator="\r\n", quoting=csv.QUOTE_MINIMAL)
    except OSError as error:
        raise DeliveryError(f"{NAME} could not be written: {error.strerror}") from error
    return path


def disarm(text: str) -> str:
    """Text that no spreadsheet takes for a formula: an apostrophe before what begins like one, blanks aside.

    >>> disarm("=1+1"), disarm(" @SUM(A1)"), disarm("24-0001")
    ("'=1+1", "' @SUM(A1)", '24-0001')
    """
    return f"'{text}" if text.startswith(_FORMULA) or text.lstrip().startswith(_FORMULA) else text


def _write_column(values: pd.Series) -> pd.Series:
    if values.dtype == object:
        return values.map(disarm, na_action="ignore")
    if values.dtype == "boolean":
        return values.map({True: "yes", False: "no"})
    return values.round(4) if values.dtype.kind == "f" else values
