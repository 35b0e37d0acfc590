"""Summaries of realisations against formulas and against the realisations themselves."""

import numpy as np
import pytest
from scipy.special import ndtr

from geoves.kernels.inequality import rectified_normal_moments
from geoves.surfaces import SurfaceOptions
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.stack import Columns, assemble_surfaces, cap_columns, name_threshold, summarise_columns
from tests.surfaces.invented_county import GRID

OPTIONS = SurfaceOptions(thicker_than=(5.0, 7.5))
GROUND = np.linspace(380.0, 420.0, 30)


def drawn(members=4000, cells=30, seed=5):
    """Columns that often do not fit: cover and shallow aquifer together may reach below the basal contact."""
    random = np.random.default_rng(seed)
    return Columns(
        basal_depth=random.normal(12.0, 8.0, (members, cells)),
        gravel=random.normal(3.0, 5.0, (members, cells)),
        cover=random.normal(4.0, 5.0, (members, cells)),
        shallow=random.normal(6.0, 5.0, (members, cells)),
        log_shallow_resistivity=random.normal(4.5, 0.3, (members, cells)),
    )


@pytest.fixture(scope="module")
def capped():
    return cap_columns(drawn(), confining=True)


def test_every_realisation_is_a_column(capped):
    """Parts above the contact are not negative and add up to it: surfaces cannot cross."""
    for thickness in capped[:5]:
        assert (thickness >= 0.0).all()
    total = capped.cover + capped.shallow + capped.confining
    np.testing.assert_allclose(total, capped.basal_depth, atol=1e-12)
    loose = drawn()
    fits = (loose.cover > 0) & (loose.shallow > 0) & (loose.cover + loose.shallow < loose.basal_depth)
    assert 0.2 < fits.mean() < 0.9
    np.testing.assert_array_equal(capped.shallow[fits], loose.shallow[fits])
    np.testing.assert_allclose(capped.confining[fits], (loose.basal_depth - loose.cover - loose.shallow)[fits])


def test_means_keep_the_sums_of_the_column(capped):
    found = summarise_columns(capped, GROUND, OPTIONS)
    parts = sum(
        found[name].estimate
        for name in (
            "cover_thickness",
            "shallow_aquifer_thickness",
            "confining_unit_thickness",
            "deep_gravel_thickness",
        )
    )
    np.testing.assert_allclose(parts, found["bedrock_depth"].estimate)
    np.testing.assert_allclose(GROUND - found["bedrock_depth"].p95, found["bedrock_elevation"].p05)
    np.testing.assert_allclose(GROUND - found["deep_gravel_top_depth"].p05, found["deep_gravel_top_elevation"].p95)
    assert (found["deep_gravel_top_depth"].estimate < found["bedrock_depth"].estimate).all()


def test_a_rectified_normal_is_summarised_as_its_formulas_say(capped):
    """Thickness max(0, N(3, 5)): moments in closed form, P(> t) by the normal law; errors of 4000 draws."""
    found = summarise_columns(capped, GROUND, OPTIONS)
    mean, deviation = rectified_normal_moments(np.array(3.0), np.array(5.0))
    thickness = found["deep_gravel_thickness"]
    assert thickness.estimate == pytest.approx(np.full(30, mean), abs=4 * deviation / np.sqrt(4000))
    assert thickness.standard_error == pytest.approx(np.full(30, deviation), rel=0.08)
    assert thickness.p95 == pytest.approx(np.full(30, 3.0 + 1.645 * 5.0), abs=0.8)
    assert (thickness.p05 == 0.0).all()
    for name, limit in (("deep_gravel_probability", 1.0), (name_threshold(5.0), 5.0), (name_threshold(7.5), 7.5)):
        assert found[name].estimate == pytest.approx(np.full(30, ndtr((3.0 - limit) / 5.0)), abs=0.035)


def test_the_shallow_resistivity_is_a_median_shown_where_probable(capped):
    columns = capped._replace(shallow=np.where(np.arange(30) < 10, 0.2, capped.shallow))
    found = summarise_columns(columns, GROUND, OPTIONS)
    shown = found["shallow_aquifer_probability"].estimate >= 0.5
    resistivity = found["shallow_aquifer_resistivity"]
    assert np.array_equal(np.isfinite(resistivity.estimate), shown)
    assert not shown[:10].any()
    assert shown[10:].all()
    assert resistivity.estimate[10:] == pytest.approx(np.full(20, np.exp(4.5)), rel=0.03)
    assert resistivity.p95[10:] == pytest.approx(np.full(20, np.exp(4.5 + 1.645 * 0.3)), rel=0.05)
    assert resistivity.standard_error is None


def test_what_is_not_known_gets_no_surface():
    columns = cap_columns(Columns(np.full((50, 30), 20.0)), confining=False)
    assert set(summarise_columns(columns, GROUND, OPTIONS)) == {"bedrock_depth", "bedrock_elevation"}
    clay = cap_columns(Columns(np.full((50, 30), 20.0)), confining=True)
    assert (summarise_columns(clay, GROUND, OPTIONS)["confining_unit_thickness"].estimate == 20.0).all()


def test_blocks_come_together_on_the_grid(capped):
    """Two blocks of cells give what one gives; cells that are not covered stay blank."""
    covered = np.zeros(GRID.shape, dtype=bool)
    covered[3:6, 5:15] = True
    canvas = Canvas(GRID, covered, GROUND)
    whole = assemble_surfaces([summarise_columns(capped, GROUND, OPTIONS)], canvas)
    halves = []
    for part in (slice(0, 13), slice(13, 30)):
        columns = Columns(*(None if one is None else one[:, part] for one in capped))
        halves.append(summarise_columns(columns, GROUND[part], OPTIONS))
    parts = assemble_surfaces(halves, canvas)
    assert whole == parts
    assert np.array_equal(np.isfinite(whole["bedrock_depth"].estimate), covered)
    surface = whole["deep_gravel_thicker_than_7.5_m"]
    assert (surface.title, surface.quantity) == (
        "Probability that the deep gravel is thicker than 7.5 m",
        "probability",
    )
