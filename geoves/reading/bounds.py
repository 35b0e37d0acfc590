"""What a file may be before it is read: of a size that memory holds, and of the kind that its name says.

Libraries follow what a file's content says it is, wherever that leads: a "raster" that is a list of addresses, a
"layer" that is an endless question. Here the first bytes decide.
"""

import sqlite3
import zipfile
from contextlib import closing
from pathlib import Path

MOST_TEXT, MOST_UNPACKED = 256 * 2**20, 512 * 2**20  # bytes; 20 000 soundings take some 30 MB
MOST_REGION_FILE = 2**20
_STARTS = {".gpkg": (b"SQLite format 3\0",), ".shp": (b"\0\0\x27\x0a",), ".geojson": (b"{",), ".json": (b"{",)}


def find_excess(path: Path, most: int = MOST_TEXT) -> str:
    """Why a file is too large to be a table, in words; empty where it is not."""
    size = path.stat().st_size
    return f"{size / 2**20:.0f} MB; expected a table of at most {most / 2**20:.0f} MB" if size > most else ""


def find_archive_excess(path: Path) -> str:
    """Why a workbook is too large once it is unpacked, in words; empty where it is not, or is no archive."""
    try:
        with zipfile.ZipFile(path) as archive:
            size = sum(member.file_size for member in archive.infolist())
    except (zipfile.BadZipFile, OSError, ValueError, NotImplementedError):
        return ""
    words = f"{size / 2**20:.0f} MB when unpacked; expected a workbook of at most {MOST_UNPACKED / 2**20:.0f} MB"
    return words if size > MOST_UNPACKED else ""


def starts_as(path: Path, suffix: str) -> bool:
    """Whether a vector file begins as files of that kind do."""
    with path.open("rb") as stream:
        head = stream.read(64)
    return head.removeprefix(b"\xef\xbb\xbf").lstrip().startswith(_STARTS[suffix]) or head.startswith(_STARTS[suffix])


def list_views(path: Path) -> set[str]:
    """Names of the views in a GeoPackage: questions to a database, which may have no end. Empty where it has none.

    The table that tells of them is SQLite's own and cannot be a view.
    """
    try:
        with closing(sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro&immutable=1", uri=True)) as connection:
            return {str(name) for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'view'")}
    except sqlite3.Error:
        return set()  # no database: whoever reads it next says so
