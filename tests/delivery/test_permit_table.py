"""The table of permits, read back by the standard library, by pandas and by the program's own reader."""

import csv

import attrs
import geopandas
import numpy as np
import pandas as pd
import pytest

from geoves.delivery.geopackage import write_geopackage
from geoves.delivery.permit_table import NAME, write_permit_table
from geoves.domain.survey import Permit

# Beginnings that spreadsheets take for formulas, after OWASP's page "CSV Injection".
FORMULAS = ("=1+1", "+1", "-2+3", "@SUM(A1)", "\t=1", "\r=1", " =1", '=HYPERLINK("x")', "=1\n2", "'=1")


@pytest.fixture
def with_permits(small_results):
    """A job with these permits, its layer told as for the first of the mini region."""

    def build(permits):
        rows = small_results.layers["permits"].iloc[[0] * len(permits)].reset_index(drop=True)
        rows = rows.assign(permit=[one.name for one in permits], use=[one.use for one in permits])
        survey = attrs.evolve(small_results.survey, permits=tuple(permits))
        return attrs.evolve(small_results, survey=survey, layers={**small_results.layers, "permits": rows})

    return build


def test_it_holds_what_the_layer_holds(small_results, tmp_path):
    path = write_permit_table(small_results, tmp_path)
    assert path.name == NAME
    table = pd.read_csv(path, encoding="utf-8-sig")
    write_geopackage(small_results, tmp_path / "layers.gpkg", {"date": "2026-06-01"})
    layer = geopandas.read_file(tmp_path / "layers.gpkg", layer="permits")
    assert table.permit.tolist() == layer.permit.tolist()
    assert np.allclose(table.x, layer.geometry.x)
    assert np.allclose(table.y, layer.geometry.y)
    assert set(layer.columns) - {"geometry"} == set(table.columns) - {"x", "y"}
    for name in ("bedrock_depth", "gravel_thickness_p95", "gravel_probability", "requested_depth", "year"):
        assert np.allclose(table[name], layer[name], equal_nan=True, atol=1e-3), name
    assert table.covered.tolist() == ["yes" if covered else "no" for covered in layer.covered]


def test_text_is_no_formula_and_stays_readable(with_permits, tmp_path):
    permits = [Permit(f"P{i}", 0.0, 0.0, use=words, extra={"=cmd": words}) for i, words in enumerate(FORMULAS)]
    path = write_permit_table(with_permits(permits), tmp_path)
    assert path.read_bytes().startswith("\ufeff".encode())
    with path.open(encoding="utf-8-sig", newline="") as stream:
        rows = list(csv.reader(stream))
    assert len(rows) == 1 + len(FORMULAS)
    for row in rows:
        for cell in row:
            number = cell.replace(".", "", 1).replace("-", "", 1).isdigit()
            assert number or not cell.lstrip().startswith(("=", "+", "-", "@")), cell
    use = rows[0].index("use")
    for row, words in zip(rows[1:], FORMULAS, strict=True):
        assert row[use].removeprefix("'") == words.removeprefix("'")


def test_numbers_below_zero_stay_numbers(with_permits, tmp_path):
    path = write_permit_table(with_permits([Permit("P", 0.0, 0.0, extra={"shift": -3.5})]), tmp_path)
    assert pd.read_csv(path, encoding="utf-8-sig")["shift"].tolist() == [-3.5]


def test_withheld_columns_stay_at_home(with_permits, tmp_path):
    results = with_permits([Permit("P", 0.0, 0.0, extra={"Owner": "B. Lark"})])
    delivery = attrs.evolve(results.region.delivery, withhold=("owner",))
    results = attrs.evolve(results, region=attrs.evolve(results.region, delivery=attrs.evolve(delivery, withhold=())))
    kept = attrs.evolve(results, region=attrs.evolve(results.region, delivery=delivery))
    assert "Lark" in write_permit_table(results, tmp_path).read_text("utf-8")
    assert "Lark" not in write_permit_table(kept, tmp_path).read_text("utf-8")
