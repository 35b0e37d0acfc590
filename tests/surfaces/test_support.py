"""What a cell rests on, counted by hand on the invented county."""

import attrs
import numpy as np

from geoves.surfaces import SurfaceOptions
from geoves.surfaces.canvas import Canvas
from geoves.surfaces.support import NO_DATUM, ONE_DATUM, SOUNDINGS_ALONE, WITH_WELLS, map_support_together
from tests.delivery.joint_county import SET_ASIDE, join
from tests.surfaces.invented_county import GRID, make_county


def test_each_cell_says_what_it_rests_on():
    county = make_county()
    silent = [top for top in county.interpretation.tops if top.contact == "basal"][:12]
    tops = [top for top in county.interpretation.tops if top not in silent]
    stack = attrs.evolve(county, interpretation=attrs.evolve(county.interpretation, tops=tuple(tops))).build(
        SurfaceOptions(reach=450.0)
    )
    support = stack.surfaces["support"].estimate
    assert np.array_equal(np.isfinite(support), stack.covered)
    known = [top for top in tops if top.contact == "basal"]
    for row, column in np.argwhere(stack.covered)[::7]:
        east, north = GRID.easting[column], GRID.northing[row]
        near = [top.kind for top in known if np.hypot(top.easting - east, top.northing - north) <= 450.0]
        if len(near) < 2:
            expected = (NO_DATUM, ONE_DATUM)[len(near)]
        else:
            expected = WITH_WELLS if set(near) != {"sounding"} else SOUNDINGS_ALONE
        assert support[row, column] == expected
    assert set(np.unique(support[stack.covered])) == {NO_DATUM, ONE_DATUM, SOUNDINGS_ALONE, WITH_WELLS}


def test_thresholds_get_a_surface_each():
    stack = make_county().build(SurfaceOptions(reach=600.0, thicker_than=(5.0, 12.0)))
    names = ("deep_gravel_probability", "deep_gravel_thicker_than_5_m", "deep_gravel_thicker_than_12_m")
    present, thick, thicker = (stack.surfaces[name].estimate[stack.covered] for name in names)
    assert (thick <= present).all()
    assert (thicker <= thick).all()
    assert np.mean(thick - thicker) > 0.01
    thickness = stack.surfaces["deep_gravel_thickness"].estimate[stack.covered]
    assert (thick[thickness > 10.0] > 0.5).all()
    assert (thicker[thickness < 6.0] < 0.5).all()


def test_by_one_geology_every_place_that_was_heard_supports_and_no_other(small_results):
    geology, grid = join(small_results).geology, small_results.stack.grid
    everywhere = np.ones(grid.shape, dtype=bool)
    canvas = Canvas(grid, everywhere, np.full(everywhere.sum(), 400.0))
    support = map_support_together(geology, canvas, 500.0).estimate
    heard = [i for i, column in enumerate(geology.columns) if column.place != SET_ASIDE]
    assert len(heard) == len(geology.columns) - 1
    for row, column in np.argwhere(everywhere)[::11]:
        away = np.hypot(*(geology.points[heard] - (grid.easting[column], grid.northing[row])).T)
        near = [geology.columns[heard[i]].kind for i in np.flatnonzero(away <= 500.0)]
        if len(near) < 2:
            expected = (NO_DATUM, ONE_DATUM)[len(near)]
        else:
            expected = WITH_WELLS if set(near) != {"sounding"} else SOUNDINGS_ALONE
        assert support[row, column] == expected
    assert set(np.unique(support)) == {NO_DATUM, ONE_DATUM, SOUNDINGS_ALONE, WITH_WELLS}
