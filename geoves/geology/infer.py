"""The step itself: first without the interpreter's picks, then with them, so that what they change can be told."""

from collections.abc import Callable, Sequence
from typing import Any, NamedTuple

import numpy as np

from geoves.domain.arrays import BoolArray, FloatArray
from geoves.domain.earth import Inverted
from geoves.domain.fields import Field, FieldEnsemble, JointColumn
from geoves.domain.survey import Survey
from geoves.domain.tops import Interpretation
from geoves.domain.units import Template
from geoves.errors import NotInferredError
from geoves.geology.columns import read_columns
from geoves.geology.evidence import PlaceList, gather_evidence, list_places, observe
from geoves.geology.flat_layers import list_spreads
from geoves.geology.inference import (
    Map,
    State,
    Task,
    all_priors,
    has_converged,
    infer,
    infer_again,
    listen,
    mind_flat_layers,
)
from geoves.geology.model import GeologyModel, build_model, plan_columns
from geoves.geology.options import GeologyOptions
from geoves.geology.remarks import MISLEADING, make_remarks
from geoves.kernels.field_windows import (
    NearbyPosterior,
    WindowSizes,
    choose_by_name,
    cut_windows,
    draw_windows,
    tell,
)
from geoves.kernels.joint_state import Places

# Fewer soundings than this, or basal contacts known by themselves, and there is no geology to infer.
FEWEST_SOUNDINGS, FEWEST_CONTACTS = 5, 3
# Fields are looked for within so many deviations of what is expected.
REACH = 6.0

# Calls a function of (argument, map=...), or knows from an earlier run what it gave.
Remember = Callable[[Callable[..., Any], Any], Any]


class Base(NamedTuple):
    """What the inference without picks is made from: nothing in it hangs on any pick."""

    task: Task
    model: GeologyModel
    options: GeologyOptions


def infer_geology(
    survey: Survey,
    inverted: Sequence[Inverted],
    interpretation: Interpretation,
    template: Template,
    options: GeologyOptions | None = None,
    *,
    map: Map = map,  # noqa: A002 - the seam is named for what it replaces
    remember: Remember | None = None,
) -> FieldEnsemble:
    """All places of a survey inferred together.

    `map` takes blocks of places; `remember` may know the inference without picks, so that a new pick costs little: for
    that the interpretation must hold what places say without them (`undecided`), else a pick changes its priors too.
    Raises NotInferredError where there is too little to infer from, with the reason.
    """
    options = options or GeologyOptions()
    listed, base = _set_up(survey, inverted, interpretation, template, options)
    try:
        state = infer_base(base, map=map) if remember is None else remember(infer_base, base)
        task, model = base.task, base.model
        columns = read_columns(task, listed, state, listen(task, state, options))
        heard = observe(listed, interpretation, model.plan, template, options, picks=True)
        picked = _places_with_picks(listed, interpretation)
        if picked.any():
            before = columns
            task = task._replace(places=_with_observations(task.places, heard), steadfast=task.steadfast | picked)
            state = infer_again(task, state, picked, options, map)
            columns = read_columns(task, listed, state, listen(task, state, options), before)
    except np.linalg.LinAlgError as error:
        raise NotInferredError(
            "the joint inference lost its footing in rounding; each place speaks for itself"
        ) from error
    remarks = make_remarks(columns, state, template, interpretation, options)
    return _pack(listed, Base(task, model, options), state, columns, remarks)


def _set_up(
    survey: Survey,
    inverted: Sequence[Inverted],
    interpretation: Interpretation,
    template: Template,
    options: GeologyOptions,
) -> tuple[PlaceList, Base]:
    plan = plan_columns(template)
    undecided = interpretation.undecided or interpretation
    contacts = sum(top.contact == "basal" and top.status == "at" for top in undecided.tops)
    if plan is None:
        raise NotInferredError("the template has no unit above gravel and rock for a curve to measure")
    if len(inverted) < FEWEST_SOUNDINGS or contacts < FEWEST_CONTACTS:
        raise NotInferredError(
            f"{len(inverted)} soundings with a curve and {contacts} known basal contacts are too few to infer one "
            f"geology from; at least {FEWEST_SOUNDINGS} and {FEWEST_CONTACTS} are needed"
        )
    listed = list_places(survey, inverted, interpretation)
    model = build_model(template, plan, undecided, listed.points)
    mean, deviation = all_priors(model.priors)
    bounds = (mean - REACH * deviation, mean + REACH * deviation)
    places = gather_evidence(survey, inverted, listed, model.ceiling, bounds)
    places = _with_observations(places, observe(listed, undecided, plan, template, options, picks=False))
    steadfast = np.array([kind != "sounding" for kind in listed.kinds])
    spreads = list_spreads(survey, listed)
    task = Task(listed.names, listed.points, places, model.order, model.ceiling, spreads, steadfast)
    if len(listed.names) > options.all_at_once:
        sizes = WindowSizes(options.window, options.halo, options.everywhere)
        task = task._replace(
            windows=cut_windows(listed.points, listed.names, sizes),
            sample=choose_by_name(listed.names, options.refit_places),
        )
    return listed, Base(task, model, options)


def infer_base(base: Base, *, map: Map = map) -> State:  # noqa: A002
    """The inference without picks, first as if layers were flat."""
    state = infer(base.task, base.model.priors, base.options, map)
    return mind_flat_layers(base.task, state, base.options, map)


def _with_observations(places: Places, observations: Any) -> Places:
    return places._replace(observations=observations)


def _places_with_picks(listed: PlaceList, interpretation: Interpretation) -> BoolArray:
    """Which places (n,) an interpreter decided something about."""
    decided = {top.place for top in interpretation.tops if top.kind == "pick"}
    decided |= {row.place for row in interpretation.thicknesses if row.kind == "pick"}
    return np.array([name in decided for name in listed.names])


def _pack(
    listed: PlaceList,
    base: Base,
    state: State,
    columns: tuple[JointColumn, ...],
    remarks: tuple[str, ...],
) -> FieldEnsemble:
    task, model, options = base
    fields = tuple(
        Field(
            name.name, name.title, name.unit, prior.mean, prior.covariance.model, prior.covariance.nugget,
            prior.covariance.partial_sill, prior.covariance.length, prior.covariance.azimuth_deg,
            prior.covariance.ratio, prior.drift_variance, prior.relief_variance,
        )
        for name, prior in zip(model.names, state.priors, strict=True)
    )  # fmt: skip
    misfits = np.array([column.misfit for column in columns])
    return FieldEnsemble(
        plan=model.plan,
        ceiling=model.ceiling,
        fields=fields,
        columns=columns,
        points=listed.points,
        ground=listed.ground,
        relief=state.relief,
        mean=state.posterior.mean,
        covariance=state.posterior.covariance,
        members=_draw_members(task, state, options),
        diagnostics={
            "rounds": len(state.moved),
            "moved_in_the_last_round": state.moved[-1],
            "converged": has_converged(state, options),
            "curves_tell_gravel": options.curves_tell_gravel,
            "median_misfit": float(np.nanmedian(misfits)),
            "misread_by_flat_layers": {
                column.place: round(column.flat_layer_bias, 3)
                for column in columns
                if abs(column.flat_layer_bias) > MISLEADING
            },
            "set_aside": [column.place for column in columns if column.set_aside],
        },
        remarks=remarks,
        **_keep_sites(task, state, options),
    )


def _keep_sites(task: Task, state: State, options: GeologyOptions) -> dict[str, Any]:
    """What the surfaces need of places that were solved window by window."""
    if not task.windows:
        return {}
    return {
        "site_precision": state.sites.precision,
        "site_shift": state.sites.shift,
        "everywhere": choose_by_name(task.names, options.everywhere),
        "near": options.window + options.halo,
    }


def _draw_members(task: Task, state: State, options: GeologyOptions) -> FloatArray:
    """Realisations (m, q, n) of all fields at all places."""
    if isinstance(state.posterior, NearbyPosterior):
        told = (tell(one.heard, task.points, state.relief, state.sites, len(one.own)) for one in task.windows)
        return draw_windows(task.windows, told, state.priors, options.members, (options.random_seed, 1))
    q, n = state.posterior.mean.shape
    covariance = state.posterior.covariance
    scale = 1e-10 * np.mean(np.diag(covariance))
    factor = np.linalg.cholesky(covariance + scale * np.eye(q * n))
    normal = np.random.default_rng([options.random_seed, 1]).standard_normal((options.members, q * n))
    return np.asarray(state.posterior.mean + (normal @ factor.T).reshape(-1, q, n))
