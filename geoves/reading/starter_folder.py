"""A region folder to begin with: the tables' headings, one invented row each, and a commented region.toml."""

from importlib.resources import files
from pathlib import Path

from geoves.errors import DeliveryError, InputError


def write_starter(folder: Path) -> list[str]:
    """What was written, in words. Nothing that stands is overwritten.

    Raises InputError where the folder has a file of one of the names, DeliveryError where it cannot be written.
    """
    starters = sorted(
        (entry for entry in files("geoves.reading").joinpath("starter").iterdir() if entry.is_file()),
        key=lambda entry: entry.name,
    )
    if folder.exists() and not folder.is_dir():
        raise InputError(f"{folder}: this is a file; expected a folder, or a name for a new one")
    standing = [entry.name for entry in starters if (folder / entry.name).exists()]
    if standing:
        raise InputError([f"{folder / name}: stands there already; give another folder" for name in standing])
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for entry in starters:
            with (folder / entry.name).open("xb") as stream:
                stream.write(entry.read_bytes())
    except OSError as error:
        raise DeliveryError(f"{folder} cannot be written: {error.strerror}") from error
    return [
        f"{folder} now holds {', '.join(entry.name for entry in starters)}.",
        "Each table has its headings and an invented example: put your own rows in their place,",
        f"describe your units in region.toml, and try `geoves check {folder / 'region.toml'}`.",
    ]
