"""Orders of columns of every kind that a template allows, and places that say something of them: made by hypothesis."""

import numpy as np
from hypothesis import strategies as st

from geoves.kernels import layered_earth
from geoves.kernels.damped_steps import Readings, stack_curves
from geoves.kernels.joint_state import ColumnOrder, Observations, Places

HALF_SPACING = np.array([1.5, 4.0, 10.0, 10.0, 25.0, 60.0, 150.0, 320.0])
POTENTIAL = np.array([0.5, 0.5, 0.5, 2.5, 2.5, 2.5, 15.0, 15.0])
SEGMENT = np.array([0, 0, 0, 1, 1, 1, 2, 2])
FACTORS = 2

# Those that the contract's roles allow, from the plainest to the fullest.
PLANS = {
    "cover only": ColumnOrder((0,), 0, (True,), (), 1, 2),
    "cover and clay": ColumnOrder((0, 1), 1, (True, False), (), 2, 3),
    "no deep aquifer": ColumnOrder((0, 1, 2), 2, (True, False, False), (), 3, 4),
    "no shallow aquifer": ColumnOrder((0, 1), 1, (True, False), (2,), 3, 4, (10.0, 150.0), (8.0, 160.0)),
    "five units": ColumnOrder((0, 1, 2), 2, (True, False, False), (3,), 4, 5, (15.0, 135.0), (14.0, 150.0)),
    "two confining units": ColumnOrder((0, 1, 2, 3), 3, (True, False, False, False), (4,), 5, 6),
    "gravel under the clay too": ColumnOrder((0, 1, 2), 1, (True, False, False), (3,), 4, 5),
    "two deep aquifers": ColumnOrder((0, 1, 2), 2, (True, False, False), (3, 4), 5, 6, (12.0, np.inf)),
    "a deep aquifer between": ColumnOrder((0, 2), 1, (True, False), (1, 3, 4), 5, 6, (0.0, 90.0), (0.0, 120.0)),
    "no cover": ColumnOrder((0, 1), 1, (False, False), (2,), 3, 4),
}
plans = st.sampled_from(sorted(PLANS)).map(PLANS.get)


def draw_fields(order, count, generator, *, deep=(3.0, 120.0)):
    """(count, q) fields of plausible columns; the basal contact `deep` m below a ceiling at the ground."""
    fields = np.empty((count, order.n_fields))
    fields[:, 0] = generator.uniform(*np.log(deep), count)
    for i, position in enumerate(order.thickness_fields, start=1):
        span = np.log((0.5, 15.0)) if order.always[position] else (-10.0, 20.0)
        fields[:, i] = generator.uniform(*span, count)
    d = len(order.deep)
    fields[:, order.first_presence : order.first_deep] = generator.uniform(-1.0, 1.0, (count, d))
    fields[:, order.first_deep : order.first_resistivity] = generator.uniform(*np.log((2.0, 30.0)), (count, d))
    fields[:, order.first_resistivity : order.grading] = generator.uniform(
        *np.log((8.0, 300.0)), (count, order.n_units)
    )
    fields[:, order.grading] = generator.uniform(-0.3, 0.3, count)
    return fields


def draw_observations(order, count, generator, width=3):
    """What logs might say: of any quantity, at, above, below, or nothing."""
    shape = (count, width)
    return Observations(
        generator.integers(0, 4, shape),
        generator.integers(0, 3 + 2 * len(order.upper), shape),
        generator.uniform(1.0, 60.0, shape),
        generator.uniform(0.5, 5.0, shape),
    )


def make_places(order, ceiling_depth, log_apparent_resistivity, observations, *, error=0.05):
    """Places with a curve each of HALF_SPACING; a row of NaN is a place without one."""
    wavenumber = layered_earth.shared_wavenumbers([(HALF_SPACING, POTENTIAL)])
    without = np.isnan(log_apparent_resistivity).any(axis=1)
    readings = [
        Readings(HALF_SPACING, POTENTIAL, np.exp(np.nan_to_num(row)), np.full(HALF_SPACING.size, error), SEGMENT)
        for row in log_apparent_resistivity
    ]
    curves = stack_curves(readings, wavenumber)
    curves = curves._replace(
        deviation=np.where(without[:, None], np.inf, curves.deviation),
        weights=np.where(without[:, None, None], 0.0, curves.weights),
        segments=np.where(without[:, None, None], 0.0, curves.segments),
    )
    p = order.n_fields + FACTORS
    return Places(np.asarray(ceiling_depth), curves, observations, np.full(p, -60.0), np.full(p, 60.0))


def respond(columns):
    """Log apparent resistivity (b, readings) of columns, without factors."""
    apparent = layered_earth.apparent_resistivity(
        HALF_SPACING, POTENTIAL, np.exp(columns.log_thickness), np.exp(columns.log_resistivity)
    )
    return np.log(apparent)
