"""Many places, window by window, against the same all at once: what is inferred, mapped and planned."""

from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context

import attrs
import numpy as np
import pytest

from geoves.geology import infer_geology
from geoves.planning.fields import know_depth
from geoves.surfaces import build_surfaces_together
from tests.geology.county import GRID, QUICK, make_county

SMALL = {"all_at_once": 10, "window": 12, "halo": 10, "everywhere": 5, "refit_places": 24}
WINDOWS = attrs.evolve(QUICK, **SMALL)


@pytest.fixture(scope="module")
def county():
    return make_county(n_soundings=25)


@pytest.fixture(scope="module")
def dense(county):
    return infer_geology(*county.arguments, QUICK)


@pytest.fixture(scope="module")
def windowed(county):
    return infer_geology(*county.arguments, WINDOWS)


def draw(county, ensemble, engine=map):
    return build_surfaces_together(ensemble, county.interpretation, county.survey, county.template, GRID, map=engine)


def test_windows_are_taken_beyond_so_many_places_only(dense, windowed):
    q, n = windowed.mean.shape
    assert (dense.is_by_windows, windowed.is_by_windows) == (False, True)
    assert dense.covariance.shape == (q * n, q * n)
    assert windowed.covariance.shape == (n, q, q)
    assert dense.site_shift.size == 0
    assert windowed.site_precision.shape == (n, q, q)


def test_contacts_are_those_of_all_at_once(dense, windowed):
    """Windows of 12 among 28 places: the contact moves by less than a third of its doubt even so."""
    found, expected = (np.log([column.basal_depth for column in one.columns]) for one in (windowed, dense))
    doubt = (expected[:, 2] - expected[:, 0]) / 3.29
    assert np.sqrt(np.mean(((found - expected)[:, 1] / doubt) ** 2)) < 0.33


def test_surfaces_are_those_of_all_at_once(county, dense, windowed):
    whole, tiled = (draw(county, one).surfaces for one in (dense, windowed))
    assert whole.keys() == tiled.keys()
    for name in ("bedrock_elevation", "cover_thickness"):
        np.testing.assert_array_equal(np.isnan(whole[name].estimate), np.isnan(tiled[name].estimate))
    off = (tiled["bedrock_elevation"].estimate - whole["bedrock_elevation"].estimate) / whole[
        "bedrock_elevation"
    ].standard_error
    assert np.sqrt(np.nanmean(off**2)) < 0.33


def test_members_agree_with_what_is_known(windowed):
    deviation = np.sqrt(np.diagonal(windowed.covariance, axis1=1, axis2=2)).T
    off = (windowed.members.mean(axis=0) - windowed.mean) / deviation
    # 20 members: a mean is off by 1/sqrt(20) = 0.22 of a deviation.
    assert np.sqrt(np.mean(off**2)) < 0.35


def test_processes_change_no_bit(county, windowed):
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        again = infer_geology(*county.arguments, WINDOWS, map=pool.map)
        tiled = draw(county, again, pool.map)
    np.testing.assert_array_equal(again.mean, windowed.mean)
    np.testing.assert_array_equal(again.members, windowed.members)
    here = draw(county, windowed)
    for name, surface in here.surfaces.items():
        np.testing.assert_array_equal(surface.estimate, tiled.surfaces[name].estimate)


def test_a_pick_is_heard_by_windows_too(county, windowed):
    picked = infer_geology(*county.with_pick("S13", 90.0).arguments, WINDOWS)
    before, after = (next(column for column in one.columns if column.place == "S13") for one in (windowed, picked))
    assert after.basal_depth[1] > before.basal_depth[1] + 5.0


def test_a_plan_knows_the_depth_nearly_as_from_all_at_once(dense, windowed):
    """One field from what each place adds: means within a third of the doubt."""

    @attrs.frozen
    class Job:
        geology: object

    whole, near = know_depth(Job(dense)), know_depth(Job(windowed))
    doubt = np.sqrt(np.diag(whole.covariance))
    rows = [int(np.argmin(np.hypot(*(whole.points - point).T))) for point in near.points]
    assert len(rows) > 20
    assert np.sqrt(np.mean(((near.mean - whole.mean[rows]) / doubt[rows]) ** 2)) < 0.4
