"""A corner of the small county that runs in a second or two: eight soundings, coarse cells."""

from tests.project.small_county import read_table, write_small_county, write_table

QUICKEST = "\n[inversion]\nmost_layers = 3\ndraws = 20\nsmooth_layers = 5\n\n[surfaces]\nfewest = 3\n"
COUNT = 8


def write_eight_soundings(folder):
    """The path of the region.toml of the first eight soundings and of all wells, without permits and picks."""
    region = write_small_county(folder, without=("permits", "picks"), extra=QUICKEST)
    soundings = read_table(folder / "soundings.csv")[:COUNT]
    names = {row["sounding"] for row in soundings}
    write_table(folder / "soundings.csv", soundings)
    readings = read_table(folder / "readings.csv")
    write_table(folder / "readings.csv", [row for row in readings if row["sounding"] in names])
    text = region.read_text(encoding="utf-8").replace("cell_size = 400.0", "cell_size = 900.0")
    region.write_text(text.replace('method = "together"', 'method = "each"\ndraws = 100'), encoding="utf-8")
    return region
