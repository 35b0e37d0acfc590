"""The record of a run, and the figures of merit by hand."""

import hashlib
from datetime import UTC, datetime
from importlib import metadata

import numpy as np
import pytest

from geoves.domain.findings import Finding
from geoves.domain.grids import CrossValidation, Grid, SurfaceStack
from geoves.project import provenance
from geoves.project.findings import name_inputs
from geoves.project.settings import read_settings


def test_record_holds_versions_hashes_and_parameters(computed, small_county, fixed_day):
    results, record = computed
    assert record["date"] == fixed_day
    assert record["versions"]["geoves"] == metadata.version("geoves")
    assert record["versions"]["PyKrige"] == metadata.version("pykrige")
    named = {path.name: path for path in results.region.files.values()} | {"region.toml": small_county}
    assert set(named) == {
        "region.toml", "soundings.csv", "readings.csv", "wells.csv", "well_logs.csv", "permits.csv", "ground.tif",
        "boundary.gpkg", "picks.csv",
    }  # fmt: skip
    assert record["inputs"] == {name: hashlib.sha256(path.read_bytes()).hexdigest() for name, path in named.items()}
    assert record["parameters"]["inversion"]["most_layers"] == 4
    assert record["parameters"]["surfaces"]["fewest"] == 3
    assert record["parameters"]["interpretation"]["random_seed"] == record["random_seed"] == 7
    assert record["reach"] == results.stack.reach > 0
    assert sum(record["bedrock_status"].values()) == len(results.inverted) == len(results.survey.soundings)
    assert [one["title"] for one in record["covariances"]] == [one.title for one in results.stack.variograms]
    assert record["remarks"] == [*results.interpretation.remarks, *results.stack.remarks]
    assert record["doubts"] == len(results.doubts)


def test_a_run_is_dated_today_where_no_day_is_set(small_results, monkeypatch):
    settings = read_settings(small_results.region)
    monkeypatch.delenv("SOURCE_DATE_EPOCH", raising=False)
    before = datetime.now(UTC).date().isoformat()
    dated = provenance.make_record(small_results.region, settings, {})["date"]
    assert before <= dated <= datetime.now(UTC).date().isoformat()
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "0")
    assert provenance.make_record(small_results.region, settings, {})["date"] == "1970-01-01"


def stack_of(*crossed):
    grid = Grid(0.0, 1.0, 1.0, 1, 1)
    return SurfaceStack(grid, np.zeros((1, 1)), np.ones((1, 1), bool), cross_validations=crossed)


def test_figures_of_merit_are_root_mean_squares_and_shares():
    """Residuals 3 and 4 have a root mean square of sqrt(12.5); ±1.645 deviations hold 90 % of a normal variable.

    The first lies 1.5 deviations off, the second 1.82.
    """
    thickness = CrossValidation(
        "Thickness of the deep gravel", "m", ("a", "b"), ("well", "well"), [10.0, 10.0], [7.0, 14.0], [2.0, 2.2]
    )
    contact = CrossValidation(
        "Log depth of the basal contact", "ln m", ("a", "b"), ("well", "pick"),
        np.log([50.0, 20.0]), np.log([53.0, 24.0]), [1.0, 1.0],
    )  # fmt: skip
    merit = provenance.judge_surfaces(stack_of(thickness, contact))
    assert set(merit) == {"deep_gravel_thickness", "bedrock_elevation"}
    assert merit["deep_gravel_thickness"]["leave_one_out_rmse_m"] == pytest.approx(np.sqrt(12.5))
    assert merit["deep_gravel_thickness"]["leave_one_out_share_within_90_percent_band"] == 0.5
    assert merit["bedrock_elevation"]["leave_one_out_rmse_m"] == pytest.approx(np.sqrt(12.5))
    logs = np.log([53 / 50, 24 / 20])
    assert merit["bedrock_elevation"]["leave_one_out_rmse_ln"] == pytest.approx(np.sqrt(np.mean(logs**2)))
    assert merit["bedrock_elevation"]["places"] == 2


def test_figures_of_the_job_are_those_of_its_cross_validation(computed):
    results, record = computed
    contact = next(one for one in results.stack.cross_validations if one.title.startswith("Log depth"))
    error = np.exp(contact.measured) - np.exp(contact.predicted)
    figures = record["figures_of_merit"]["bedrock_elevation"]
    assert figures["leave_one_out_rmse_m"] == pytest.approx(float(np.sqrt(np.mean(error**2))))
    assert figures["places"] == len(contact.place)
    bounded = {top.place for top in results.interpretation.tops if top.contact == "basal" and top.status == "below"}
    assert not bounded & set(contact.place)


def test_statuses_are_counted_and_none_is_left_out():
    assert provenance.summarise(["seen", "deeper_than", "seen"]) == {"seen": 2, "not_distinct": 0, "deeper_than": 1}


def test_findings_of_steps_are_said_of_the_files_that_the_region_names(computed):
    region = computed[0].region
    of_step = Finding("doubt", "readings", 3, "ab2", "7", "odd")
    of_file = Finding("doubt", "region.toml", 0, "", "", "odd")
    assert [one.file for one in name_inputs([of_step, of_file], region)] == ["readings.csv", "region.toml"]
