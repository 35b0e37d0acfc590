"""One geology over the small region: joint columns made of plain numbers, so that every figure is known by hand."""

import attrs
import numpy as np

from geoves.domain.fields import Ceiling, ColumnPlan, Field, FieldEnsemble, JointColumn
from geoves.domain.grids import CrossValidation
from geoves.domain.tops import Top

SET_ASIDE, POOR, MOVED = "Larch 2", "Larch 4", "Larch 6"


def joint_column(place, kind, together, others):
    """A column whose medians and bands (low, middle, high, m) are given."""
    together, others = np.array(together, float), np.array(others, float)
    return JointColumn(
        place=place, kind=kind, basal_depth=together, rock_depth=together + 7.0,
        gravel_thickness=np.array([0.0, 6.0, 11.0]), others_basal_depth=others,
        gravel_probability=0.58, others_gravel_probability=0.66,
        log_resistivity=np.log([30.0, 100.0, 18.0, 45.0, 70.0]), log_resistivity_deviation=np.full(5, 0.2),
        shift=-0.8, misfit=1.02 if kind == "sounding" else np.nan, trust=0.97,
    )  # fmt: skip


def join(results):
    """The job with one geology: each sounding at 66 m, 59 to 72, where the others expect 71 m, 60 to 83."""
    columns = [
        joint_column(one.name, "sounding", (59.0, 66.0, 72.0), (60.0, 71.0, 83.0)) for one in results.survey.soundings
    ]
    changes = {
        SET_ASIDE: {"trust": 0.07},
        POOR: {"misfit": 2.34},
        MOVED: {"moved_by_picks": 1.43},
        "Larch 1": {"flat_layer_bias": -0.08},
    }
    columns = [attrs.evolve(one, **changes.get(one.place, {})) for one in columns]
    columns += [joint_column(one.name, "well", (69.0, 70.0, 71.0), (58.0, 68.0, 80.0)) for one in results.survey.wells]
    places = [*results.survey.soundings, *results.survey.wells]
    points = np.array([[one.easting, one.northing] for one in places])
    n = len(points)
    # mean, model, nugget, partial sill, length, azimuth, ratio, variance of the drift and of the relief
    presence = (0.1, "matern32", 0.05, 0.95, 900.0, 0.0, 1.0, 1.0, 0.7)
    fields = (
        Field(
            "basal_contact", "Log depth below the ceiling", "ln m", 3.4, "matern32", 0.01, 0.3, 2000.0, 90.0, 0.5, 1.0
        ),
        Field("deep_gravel_presence", "Presence of Basal gravel", "-", *presence),
    )
    pick = results.survey.picks[0].place
    remarks = (
        f"set aside, for their curves contradict their neighbours and the template: {SET_ASIDE}; the rest stands",
        f"the pick at {pick} by A. Reader lies 3.4 deviations below where all others expect it; it stands as decided",
    )
    geology = FieldEnsemble(
        plan=ColumnPlan((0, 1, 2), 2, (True, False, False), (3,), 4, 5),
        ceiling=Ceiling((500_000.0, 4_600_000.0), 390.0, (0.0, 0.0), 5.0),
        fields=fields,
        columns=tuple(columns),
        points=points,
        ground=np.full(n, 400.0),
        relief=np.full(n, 20.0),
        mean=np.zeros((2, n)),
        covariance=np.eye(2 * n),
        members=np.zeros((1, 2, n)),
        diagnostics={
            "rounds": 14, "moved_in_the_last_round": 0.021, "converged": True, "median_misfit": 1.02,
            "set_aside": [SET_ASIDE],
        },
        remarks=remarks,
    )  # fmt: skip
    stack = attrs.evolve(
        results.stack,
        remarks=(*remarks, *results.stack.remarks),
        cross_validations=(
            CrossValidation(
                "Log depth of the basal contact", "ln m", ("Larch 1", "Larch 6", "W-1"),
                ("sounding", "sounding", "well"), np.log([62.0, 64.0, 70.0]), np.log([71.0, 71.0, 68.0]),
                np.full(3, 0.1),
            ),
        ),
    )  # fmt: skip
    interpretation = attrs.evolve(
        results.interpretation, tops=(*results.interpretation.tops, *_basal_tops(results.survey.wells))
    )
    return attrs.evolve(results, geology=geology, stack=stack, interpretation=interpretation)


def _basal_tops(wells):
    """The first well meets the contact at 70 m, give or take 0.5 m; the others end above it, at their total depth."""
    for number, well in enumerate(wells):
        status, depth, error = ("at", 70.0, 0.5) if number == 0 else ("below", well.total_depth, np.nan)
        level = well.ground_elevation - depth
        yield Top(well.name, "well", well.easting, well.northing, "shale", "basal", status, depth, level, error, "log")
