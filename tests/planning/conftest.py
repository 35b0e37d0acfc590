"""A finished job with the variograms and the contacts that a plan by the method `each` needs."""

import attrs
import numpy as np
import pytest

from geoves.domain.tops import Thickness, Top


@pytest.fixture(scope="session")
def plannable(small_results):
    """The invented mini region, its basal contact and gravel known at every place by the variograms of `each`."""
    (variogram,) = small_results.stack.variograms
    of_depth = attrs.evolve(
        variogram, title="Log depth of the basal contact", unit="ln m", nugget=0.005, partial_sill=0.12
    )
    of_gravel = attrs.evolve(variogram, title="Thickness of the deep gravel", nugget=1.0, partial_sill=30.0)
    stack = attrs.evolve(small_results.stack, variograms=(of_depth, of_gravel))
    places = [(one.name, one.easting, one.northing) for one in small_results.survey.soundings]
    depths = np.linspace(30.0, 75.0, len(places))
    tops = tuple(
        Top(name, "sounding", x, y, "shale", "basal", "at", depth, 300.0, 0.1 * depth, "invented")
        for (name, x, y), depth in zip(places, depths, strict=True)
    )
    gravel = tuple(
        Thickness(name, "sounding", x, y, "deep_aquifer", thick, 3.0, False, "invented")
        for (name, x, y), thick in zip(places, np.linspace(0.0, 12.0, len(places)), strict=True)
    )
    columns = tuple(attrs.evolve(one, gravel_prior=0.4) for one in small_results.interpretation.columns)
    interpretation = attrs.evolve(small_results.interpretation, tops=tops, thicknesses=gravel, columns=columns)
    return attrs.evolve(small_results, stack=stack, interpretation=interpretation)
