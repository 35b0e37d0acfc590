"""One record of a run: what is needed to say how a cell got its value."""

import os
import platform
from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from importlib import metadata
from typing import Any

import attrs
import numpy as np

from geoves.domain.grids import CrossValidation, SurfaceStack
from geoves.domain.region import Region
from geoves.errors import InputError
from geoves.project.settings import Settings

# Libraries whose versions can move a digit of the result.
LIBRARIES = (
    "numpy",
    "scipy",
    "libdlf",
    "PyKrige",
    "rasterio",
    "pyproj",
    "shapely",
    "contourpy",
    "geopandas",
    "pyogrio",
)


def make_record(region: Region, settings: Settings, fingerprints: Mapping[str, str]) -> dict[str, Any]:
    """Versions, hashes of the inputs and parameters, with the day that the products are dated with.

    SOURCE_DATE_EPOCH (reproducible-builds.org) sets the day, so that a run can be repeated to the byte on any other.
    """
    epoch = os.environ.get("SOURCE_DATE_EPOCH")
    if epoch and not epoch.isdecimal():
        raise InputError(f"SOURCE_DATE_EPOCH: {epoch!r}; expected a whole number of seconds since 1970")
    moment = datetime.fromtimestamp(int(epoch), UTC) if epoch else datetime.now(UTC)
    return {
        "region": region.name,
        "date": moment.date().isoformat(),
        "versions": {
            "geoves": metadata.version("geoves"),
            "python": platform.python_version(),
            **{name: metadata.version(name) for name in LIBRARIES},
        },
        "inputs": dict(fingerprints),
        "method": region.method,
        "crs": region.crs,
        "vertical_datum": region.vertical_datum,
        "length_unit": region.length_unit,
        "random_seed": region.random_seed,
        "parameters": attrs.asdict(settings),
    }


def make_tags(record: Mapping[str, Any]) -> dict[str, str]:
    """The few words of the record that every file carries."""
    return {
        "software": f"geoves {record['versions']['geoves']}",
        "region": str(record["region"]),
        "date": str(record["date"]),
        "method": str(record["method"]),
        "random_seed": str(record["random_seed"]),
    }


def judge_surfaces(stack: SurfaceStack) -> dict[str, Any]:
    """Figures of merit by surface, from leaving each datum out: errors in m, or in ln units for a resistivity."""
    surfaces = (
        "bedrock_elevation",
        "deep_gravel_thickness",
        "shallow_aquifer_thickness",
        "shallow_aquifer_resistivity",
        "cover_thickness",
    )
    titles = ("Log depth of the basal contact", "Thickness of the deep gravel",
              "Thickness of the shallow aquifer", "Log resistivity of the shallow aquifer",
              "Thickness of the cover")  # fmt: skip
    by_title = {crossed.title: crossed for crossed in stack.cross_validations}
    return {name: _judge(by_title[title]) for name, title in zip(surfaces, titles, strict=True) if title in by_title}


def _judge(crossed: CrossValidation) -> dict[str, Any]:
    residual = crossed.measured - crossed.predicted
    inside = np.abs(residual) <= 1.6449 * crossed.standard_error
    figures: dict[str, Any] = {"quantity": f"{crossed.title} ({crossed.unit})", "places": len(crossed.place)}
    if crossed.unit == "ln m":
        metres = np.exp(crossed.measured) - np.exp(crossed.predicted)
        figures["leave_one_out_rmse_m"] = float(np.sqrt(np.mean(metres**2)))
    suffix = "m" if crossed.unit == "m" else "ln"
    figures[f"leave_one_out_rmse_{suffix}"] = float(np.sqrt(np.mean(residual**2)))
    figures["leave_one_out_share_within_90_percent_band"] = float(np.mean(inside))
    wells = np.array([kind != "sounding" for kind in crossed.kind], dtype=bool)
    for name, rows in (("soundings", ~wells), ("wells_and_picks", wells)):
        if rows.any():
            standardised = residual[rows] / crossed.standard_error[rows]
            figures[f"{name}_places"] = int(rows.sum())
            figures[f"{name}_standardised_rms"] = float(np.sqrt(np.mean(standardised**2)))
            figures[f"{name}_share_within_90_percent_band"] = float(np.mean(inside[rows]))
    return figures


def summarise(statuses: Sequence[str]) -> dict[str, int]:
    """How many soundings see bedrock, see nothing distinct, or only bound it."""
    return {status: statuses.count(status) for status in ("seen", "not_distinct", "deeper_than")}
