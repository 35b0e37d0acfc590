"""The step itself: from a finished job to the places where the next measurement would tell most."""

from typing import Any, NamedTuple, cast

import numpy as np
from scipy.spatial import cKDTree

from geoves.domain.arrays import FloatArray
from geoves.domain.plans import About, NextKind, NextPlace, Plan
from geoves.domain.results import Results
from geoves.domain.survey import Sounding, Well
from geoves.errors import EngineError
from geoves.kernels.next_places import (
    Carried,
    Choice,
    Doubt,
    KnownField,
    LengthDoubt,
    Possible,
    PresenceDoubt,
    carry,
    choose_greedily,
    covariance_between,
    presence_error,
    variance_at,
)
from geoves.planning.fields import Depths, depths_at, know_depth, know_gravel, relief_at
from geoves.planning.options import PlanOptions
from geoves.planning.places import find_cells, list_allowed, list_cells, list_permits, spread_evenly
from geoves.planning.track_record import Advice, advise_spreads, read_track_record, worth_for_gravel

KINDS: tuple[NextKind, NextKind] = ("sounding", "test_hole")
# A contact in a log is no better than this, m.
LEAST_CONTACT_ERROR = 0.3


class _Asked(NamedTuple):
    """What a plan is about: the field at the places that are allowed and at those where it is asked, the doubt there,
    and the error variance (c, 2) of a sounding and of a test hole at each allowed place, the nugget left out.
    `here` is the doubt at the allowed places themselves.
    """

    known: KnownField
    allowed: Carried
    targets: Carried
    doubt: Doubt
    here: Doubt
    error_variance: FloatArray


def plan_places(results: Results, options: PlanOptions, probability: str, allowed: Any = None) -> Plan:
    """Where the next measurements would most lower the doubt about what is asked, in the order of their worth.

    probability : name of the surface of the probability of gravel that is asked
    allowed : shapely lines and polygons to measure along or in, None for all of the mapped area
    Raises EngineError where nothing can be planned, with the reason.
    """
    stack = results.stack
    cell = stack.grid.cell_size
    places = spread_evenly(list_allowed(stack, allowed), options.most_allowed, cell)
    if options.at == "permits":
        targets = list_permits(stack, results.survey.permits)
    else:
        targets = spread_evenly(list_cells(stack), options.most_asked, cell)
    for found, words in ((places, "place where measuring is allowed"), (targets, "place that is asked about")):
        if not len(found):
            raise EngineError(f"no plan can be made: no {words} lies where bedrock is mapped; look at [plan]")
    depth_field = know_depth(results)
    depths, at_targets = (
        depths_at(depth_field, one, _sample(results, "ground", one), results.geology) for one in (places, targets)
    )
    advice = advise_spreads(read_track_record(results), depths.depth)
    if options.about == "gravel":
        asked = _ask_gravel(results, probability, depth_field, depths, at_targets)
    else:
        asked = _ask_bedrock(results, options, depth_field, depths, at_targets, advice)
    choices = choose_greedily(_list_possible(asked, options), asked.doubt, options.places)
    return _write_plan(results, options, asked, choices, depths, advice)


def _ask_bedrock(
    results: Results,
    options: PlanOptions,
    known: KnownField,
    depths: Depths,
    at_targets: Depths,
    advice: Advice,
) -> _Asked:
    test_hole = options.test_hole_error**2 + (LEAST_CONTACT_ERROR / depths.depth) ** 2
    in_field = (depths.depth / depths.slope) ** 2  # from the log of depth to the field's own unit
    error = np.column_stack([advice.variance * in_field, test_hole * in_field])
    doubt, here = (_length_doubt(results, known, one) for one in (at_targets, depths))
    return _Asked(known, depths.field, at_targets.field, doubt, here, error)


def _length_doubt(results: Results, known: KnownField, depths: Depths) -> LengthDoubt:
    """Of bedrock's elevation: the map's own, of which the basal contact explains no more than all."""
    total = _sample(results, "bedrock_elevation", depths.field.cells) ** 2
    variance = variance_at(known, depths.field)
    most = np.sqrt(total / (variance + known.prior.covariance.nugget))
    return LengthDoubt(total, np.minimum(depths.slope, most), variance)


def _ask_gravel(
    results: Results,
    probability: str,
    depth_field: KnownField,
    depths: Depths,
    at_targets: Depths,
) -> _Asked:
    if probability not in results.stack.surfaces:
        raise EngineError("[plan] about = 'gravel': too little is known of gravel here for a surface of it")
    known = know_gravel(results)
    carried = [
        carry(known, one.field.cells, relief_at(one, depth_field, results.geology)) for one in (depths, at_targets)
    ]
    nugget = known.prior.covariance.nugget
    chances = [_sample(results, probability, one.cells) for one in carried]
    first = [variance_at(known, one) for one in carried]
    here, doubt = (PresenceDoubt(p, v, nugget) for p, v in zip(chances, first, strict=True))
    worth = worth_for_gravel(results)
    error = np.column_stack([presence_error(chances[0], first[0] + nugget, one) for one in (worth, 1.0)])
    return _Asked(known, carried[0], carried[1], doubt, here, error)


def _sample(results: Results, name: str, points: FloatArray) -> FloatArray:
    """Of the cell of each point (c,): the ground, a probability, or a surface's standard error."""
    rows, columns = find_cells(results.stack.grid, points)
    if name == "ground":
        return results.stack.ground[rows, columns]
    surface = results.stack.surfaces[name]
    values = surface.estimate if surface.standard_error is None else surface.standard_error
    return values[rows, columns]


def _list_possible(asked: _Asked, options: PlanOptions) -> Possible:
    error = asked.error_variance + asked.known.prior.covariance.nugget
    for column, kind in enumerate(KINDS):
        if options.kind not in ("either", kind):
            error[:, column] = np.inf
    return Possible(
        covariance_between(asked.known, asked.allowed, asked.allowed),
        covariance_between(asked.known, asked.allowed, asked.targets),
        variance_at(asked.known, asked.targets),
        error,
        np.array([1.0, options.test_hole_costs]),
    )


def _write_plan(
    results: Results,
    options: PlanOptions,
    asked: _Asked,
    choices: list[Choice],
    depths: Depths,
    advice: Advice,
) -> Plan:
    places: list[Sounding | Well] = [*results.survey.soundings, *results.survey.wells]
    tree = cKDTree(np.array([[one.easting, one.northing] for one in places]))
    here = np.sqrt(asked.here(variance_at(asked.known, asked.allowed)))
    left = variance_at(asked.known, asked.allowed)
    chosen = []
    for rank, choice in enumerate(choices, start=1):
        i = choice.candidate
        distance, nearest = tree.query(asked.allowed.cells[i])
        left[i] = choice.variance
        before, (sounding, test_hole) = np.sqrt(choice.before), np.sqrt(np.maximum(choice.by_kind, 0.0))
        chosen.append(
            NextPlace(
                rank=rank,
                kind=KINDS[choice.kind],
                easting=float(asked.allowed.cells[i, 0]),
                northing=float(asked.allowed.cells[i, 1]),
                spacing=float(advice.spacing[i]),
                doubt_now=float(here[i]),
                doubt_then=float(np.sqrt(asked.here(left)[i])),
                lowering=float(before - np.sqrt(max(choice.after, 0.0))),
                by_sounding=float(before - sounding),
                by_test_hole=float(before - test_hole),
                depth=float(depths.depth[i]),
                sounding_error=float(np.sqrt(advice.variance[i])),
                nearest=places[int(nearest)].name,
                distance=float(distance) * results.region.crs_unit_metres,
            )
        )
    before = float(np.mean(asked.doubt(variance_at(asked.known, asked.targets))))
    after = choices[-1].after if choices else before
    return Plan(
        about=cast(About, options.about),
        at="permits" if options.at == "permits" else "grid",
        thicker_than=options.thicker_than,
        places=tuple(chosen),
        before=float(np.sqrt(before)),
        after=float(np.sqrt(max(after, 0.0))),
        n_allowed=len(asked.allowed.cells),
        n_asked=len(asked.targets.cells),
        remarks=_remark(options, len(choices)),
    )


def _remark(options: PlanOptions, found: int) -> tuple[str, ...]:
    if found < options.places:
        return (f"{found} of {options.places} places: no other that is allowed would lower the doubt any further",)
    return ()
