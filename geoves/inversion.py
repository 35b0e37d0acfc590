"""Survey -> Inverted: what each curve says by itself, blind to the template.

Blocky models of two to six layers are fitted to every curve from several starts, each by damped least squares with a
robust misfit and a factor for each later segment. The layer count is chosen by the evidence (Laplace's approximation
under broad priors), which charges a layer for the freedom that the readings do not use.
"""

from collections.abc import Callable, Iterable, Sequence
from functools import partial, reduce
from itertools import chain
from typing import Any

import attrs
import numpy as np

from geoves.domain.arrays import FloatArray
from geoves.domain.earth import Inverted, LayeredModel, ModelEnsemble
from geoves.domain.survey import Sounding, Survey
from geoves.kernels import damped_steps, ensembles, layered_earth
from geoves.kernels.blocks import cut_blocks, restore_order
from geoves.kernels.damped_steps import Curves, Fit, Prior, Readings
from geoves.kernels.ensembles import Density, Effort
from geoves.kernels.error_correlation import Moments, find_correlation, lag_moments
from geoves.kernels.smooth_model import fit_smooth, smooth_thickness

Blocks = Iterable[Any]
Map = Callable[[Callable[[Any], Any], Blocks], Iterable[Any]]


@attrs.frozen
class InversionOptions:
    """least_layers, most_layers   the layer counts tried
    default_error           relative error of a reading that has none typed, before the survey's own is known
    segment_deviation       prior standard deviation of the log factor that a change of MN brings
    draws                   models of each sounding's ensemble
    smooth_layers           layers of the smooth model
    block                   soundings inverted at a time: bounds the memory
    """

    least_layers: int = attrs.field(default=2, validator=attrs.validators.ge(2))
    most_layers: int = attrs.field(default=6, validator=[attrs.validators.ge(2), attrs.validators.le(10)])
    default_error: float = attrs.field(default=0.03, validator=[attrs.validators.gt(0), attrs.validators.lt(1)])
    segment_deviation: float = attrs.field(default=0.05, validator=attrs.validators.gt(0))
    draws: int = attrs.field(default=200, validator=attrs.validators.ge(20))
    smooth_layers: int = attrs.field(default=30, validator=attrs.validators.ge(5))
    block: int = attrs.field(default=16, validator=attrs.validators.ge(1))
    random_seed: int = 0

    def __attrs_post_init__(self) -> None:
        if self.least_layers > self.most_layers:
            raise ValueError(f"least_layers ({self.least_layers}) is above most_layers ({self.most_layers})")


# Broad priors of the blind inversion, standard deviations in natural logs, and the bounds of its search.
RESISTIVITY_DEVIATION, THICKNESS_DEVIATION = 1.2, 2.2
LEAST_RESISTIVITY, MOST_RESISTIVITY = 0.5, 50_000.0
LEAST_THICKNESS, MOST_THICKNESS = 0.2, 500.0
# Members weighed for each that is kept.
SAMPLES_PER_DRAW = 5
# A layer trades off where neither part is known within this (natural logs) and a combination twice as well.
UNKNOWN, TWICE = 0.25, 2.0
# Depth of the first and the last interface that the prior expects, in shortest and longest AB/2.
FIRST_INTERFACE, LAST_INTERFACE = 0.8, 0.35
# A change is felt where halving or doubling all below alters the curve by this chi-square.
FELT_CHI_SQUARE = 4.0
# The survey's noise is not believed outside of these factors of the default.
LEAST_NOISE_FACTOR, MOST_NOISE_FACTOR = 0.5, 4.0
DEFAULT_STRENGTH = 20.0
# Readings of a robust weight above this are no outliers.
TRUSTED = 0.5
# Its natural log is rounded to this: finer than some hundred readings know it, and coarse enough that one sounding more
# seldom changes what all others were inverted with.
NOISE_STEP = 0.05


def invert(survey: Survey, options: InversionOptions | None = None, *, map: Map = map) -> tuple[Inverted, ...]:  # noqa: A002 - the seam is named for what it replaces
    """The blocky model of each sounding, in the order of the survey; soundings with too few readings are left out.

    Two passes: the first finds the survey's noise from the residuals of the readings without a typed error, and whether
    neighbouring errors are alike; the second inverts with it, widened where they are.
    """
    options = options or InversionOptions()
    fitting = [s.measured for s in survey.soundings if s.curve.is_enough]
    if not fitting:
        return ()
    wavenumber = layered_earth.shared_wavenumbers(
        (s.curve.half_spacing, s.curve.potential_half_spacing) for s in fitting
    )
    rows = cut_blocks([s.name for s in fitting], options.block)
    blocks = [[fitting[row] for row in block] for block in rows]
    first = partial(_pooled_residuals, options=options, wavenumber=wavenumber)
    untyped = [block for block in blocks if any(np.isnan(s.curve.relative_error[s.curve.used]).any() for s in block)]
    pooled = list(chain.from_iterable(map(first, untyped)))
    correlation = find_correlation([moments for _, moments in pooled if moments is not None])
    noise = _survey_noise(np.concatenate([np.empty(0), *(one for one, _ in pooled)]), options)
    noise = min(noise * correlation.widening, MOST_NOISE_FACTOR * options.default_error)
    second = partial(invert_block, options=options, wavenumber=wavenumber, noise=noise)
    results = list(chain.from_iterable(map(second, blocks)))
    if correlation.lag_one:
        results = [attrs.evolve(one, error_correlation=correlation.lag_one) for one in results]
    return tuple(results[place] for place in restore_order(rows))


def invert_block(
    soundings: Sequence[Sounding], *, options: InversionOptions, wavenumber: FloatArray, noise: float
) -> list[Inverted]:
    """The blocky models of some soundings with a known noise."""
    curves = damped_steps.stack_curves([Readings(*s.curve.readings(noise)) for s in soundings], wavenumber)
    fits = _fit_all_counts(curves, soundings, options)
    results = []
    for i, (sounding, k) in enumerate(zip(soundings, _choose_counts(fits), strict=True)):
        row = np.array([i])
        fit, prior = fits[k]
        described = _describe(sounding, curves.take(row), (fit.take(i), prior.take(row)), noise, options)
        criterion = {count: -float(one.log_evidence[i]) for count, (one, _) in fits.items()}
        results.append(attrs.evolve(described, criterion=criterion))
    smooth = _fit_smooth(curves, soundings, results, options)
    return [attrs.evolve(one, smooth=model) for one, model in zip(results, smooth, strict=True)]


def _choose_counts(fits: dict[int, tuple[Fit, Prior]]) -> list[int]:
    """The layer count of the greatest evidence for each curve."""
    counts = list(fits)
    evidence = np.array([fit.log_evidence for fit, _ in fits.values()])
    return [counts[i] for i in np.argmax(evidence, axis=0)]


def _fit_smooth(
    curves: Curves, soundings: Sequence[Sounding], inverted: Sequence[Inverted], options: InversionOptions
) -> list[LayeredModel]:
    """The smoothest models of a block, the segments' factors taken out as the blocky models have them."""
    observed = curves.log_apparent_resistivity.copy()
    for i, (sounding, one) in enumerate(zip(soundings, inverted, strict=True)):
        segment = sounding.curve.readings(one.noise)[4]
        observed[i, : segment.size] -= np.log(one.segment_factor[segment])
    spacing = np.concatenate([sounding.curve.half_spacing for sounding in soundings])
    thickness = smooth_thickness(0.3 * float(spacing.min()), 0.7 * float(spacing.max()), options.smooth_layers)
    resistivity, _ = fit_smooth(curves._replace(log_apparent_resistivity=observed), thickness)
    return [LayeredModel(thickness, row) for row in resistivity]


def _pooled_residuals(
    soundings: Sequence[Sounding], *, options: InversionOptions, wavenumber: FloatArray
) -> list[tuple[FloatArray, Moments | None]]:
    """Of each curve the log residuals without a typed error, widened for the degrees of freedom that the fit took.

    With them the moments that tell whether neighbours' errors are alike, where no error is typed, none an outlier.
    """
    noise = options.default_error
    curves = damped_steps.stack_curves([Readings(*s.curve.readings(noise)) for s in soundings], wavenumber)
    fits = _fit_all_counts(curves, soundings, options)
    pooled = []
    for i, (sounding, k) in enumerate(zip(soundings, _choose_counts(fits), strict=True)):
        fit = fits[k][0]
        untyped = np.isnan(sounding.curve.relative_error[sounding.curve.used])
        shifts = curves.segments[i] @ fit.unknowns[i, 2 * k - 1 :]
        residual = (curves.log_apparent_resistivity[i] - fit.log_response[i] - shifts)[: untyped.size]
        taken = 2 * k - 1 + int(np.count_nonzero(curves.segments[i].any(axis=0)))
        moments = None
        if untyped.all() and np.all(fit.robust_weight[i, : untyped.size] > TRUSTED):
            moments = _lag_moments(sounding, curves.take(np.array([i])), fit.take(i), residual, k)
        pooled.append((residual[untyped] * np.sqrt(untyped.size / max(untyped.size - taken, 1)), moments))
    return pooled


def _lag_moments(sounding: Sounding, curves: Curves, fit: Fit, residual: FloatArray, k: int) -> Moments:
    """Moments of one curve's residuals (n,) in the order of its spacings, `curves` and `fit` batches of one."""
    curve = sounding.curve
    order = np.lexsort((curve.half_spacing[curve.used], curve.segment[curve.used]))
    deviation = curves.deviation[0, : residual.size]
    jacobian = damped_steps.log_sensitivity(fit.unknowns, k, curves)[0, : residual.size] / deviation[:, None]
    covariance = np.linalg.inv(fit.hessian[0])
    return lag_moments((residual / deviation)[order], jacobian[order], covariance, curve.segment[curve.used][order])


def _survey_noise(residual: FloatArray, options: InversionOptions) -> float:
    """Relative error of a reading: the normal-consistent median absolute residual, which outliers do not move.

    The default speaks like DEFAULT_STRENGTH readings more, so that a few residuals cannot make a curve too sure.
    Rounded to steps of NOISE_STEP in its log.
    """
    if not residual.size:
        return options.default_error
    spread = float(np.median(np.abs(residual))) / 0.6745
    n = residual.size
    spread = np.sqrt((n * spread**2 + DEFAULT_STRENGTH * options.default_error**2) / (n + DEFAULT_STRENGTH))
    spread = np.exp(NOISE_STEP * np.round(np.log(spread) / NOISE_STEP))
    return float(np.clip(spread, LEAST_NOISE_FACTOR * options.default_error, MOST_NOISE_FACTOR * options.default_error))


def _fit_all_counts(
    curves: Curves, soundings: Sequence[Sounding], options: InversionOptions
) -> dict[int, tuple[Fit, Prior]]:
    """The best fit of each layer count, with its prior.

    Upward from two schedules of depths and from one layer less, split; then downward from one layer more, every pair
    of neighbours merged: a search caught in a local minimum with few layers is seldom caught with more.
    """
    fits: dict[int, tuple[Fit, Prior]] = {}
    for k in range(options.least_layers, options.most_layers + 1):
        prior, starts = _prior_and_starts(curves, soundings, k, options)
        if k - 1 in fits:
            starts.append(_split_thickest(fits[k - 1][0].unknowns, k - 1))
        fits[k] = _fit_best(starts, k, curves, prior), prior
    for k in range(options.most_layers - 1, options.least_layers - 1, -1):
        fit, prior = fits[k]
        merged = [_merge_layers(fits[k + 1][0].unknowns, k + 1, upper) for upper in range(k)]
        fits[k] = damped_steps.keep_better(fit, _fit_best(merged, k, curves, prior)), prior
    return fits


def _fit_best(starts: Sequence[FloatArray], k: int, curves: Curves, prior: Prior) -> Fit:
    """For each curve the best of the fits from several starts."""
    return reduce(damped_steps.keep_better, (damped_steps.fit_from_afar(start, k, curves, prior) for start in starts))


def _merge_layers(unknowns: FloatArray, k: int, upper: int) -> FloatArray:
    """Unknowns with k - 1 layers: layer `upper` and the next become one, of their mean log resistivity by thickness.

    The last layer before the half-space gives way to it.
    """
    thickness, resistivity, shifts = np.split(unknowns, [k - 1, 2 * k - 1], axis=1)
    pair, mean = thickness[:, upper : upper + 2], resistivity[:, upper + 1 : upper + 2]
    total = np.logaddexp.reduce(pair, axis=1, keepdims=True)[:, : pair.shape[1] - 1]
    if pair.shape[1] == 2:
        share = np.exp(pair - total)
        mean = np.sum(share * resistivity[:, upper : upper + 2], axis=1, keepdims=True)
    return np.hstack(
        [
            thickness[:, :upper], total, thickness[:, upper + 2 :],
            resistivity[:, :upper], mean, resistivity[:, upper + 2 :], shifts,
        ]
    )  # fmt: skip


def _prior_and_starts(
    curves: Curves, soundings: Sequence[Sounding], k: int, options: InversionOptions
) -> tuple[Prior, list[FloatArray]]:
    n_segments = curves.segments.shape[2]
    shape = (len(soundings), 2 * k - 1 + n_segments)
    mean, deviation = np.zeros(shape), np.empty(shape)
    deep, shallow = np.zeros(shape), np.zeros(shape)
    for i, sounding in enumerate(soundings):
        used = sounding.curve.used
        spacing = np.log(sounding.curve.half_spacing[used])
        value = np.log(sounding.curve.apparent_resistivity[used])
        order = np.argsort(spacing, kind="stable")
        spacing, value = spacing[order], value[order]
        for start, reach in ((deep, LAST_INTERFACE), (shallow, 0.4 * LAST_INTERFACE)):
            interface = np.linspace(
                spacing[0] + np.log(FIRST_INTERFACE), np.maximum(spacing[-1] + np.log(reach), spacing[0] + 0.1), k - 1
            )
            depth = np.exp(interface)
            start[i, : k - 1] = np.log(np.diff(depth, prepend=0.0))
            # A layer shows itself at a spacing of some two to three times its depth.
            felt = np.log(2.5) + np.append(interface - 0.3, interface[-1] + 0.5)
            start[i, k - 1 : 2 * k - 1] = np.interp(felt, spacing, value)
        mean[i, : k - 1] = deep[i, : k - 1]
        mean[i, k - 1 : 2 * k - 1] = np.median(value)
    deviation[:, : k - 1] = THICKNESS_DEVIATION
    deviation[:, k - 1 : 2 * k - 1] = RESISTIVITY_DEVIATION
    deviation[:, 2 * k - 1 :] = options.segment_deviation
    lowest, highest = np.full(shape, -0.7), np.full(shape, 0.7)
    lowest[:, : k - 1], highest[:, : k - 1] = np.log(LEAST_THICKNESS), np.log(MOST_THICKNESS)
    lowest[:, k - 1 : 2 * k - 1], highest[:, k - 1 : 2 * k - 1] = np.log([LEAST_RESISTIVITY, MOST_RESISTIVITY])
    return Prior(mean, deviation, lowest, highest), [deep, shallow]


def _split_thickest(unknowns: FloatArray, k: int) -> FloatArray:
    """A start with k + 1 layers: the layer that spans most of the log depth is cut in two, unlike a little."""
    top = np.cumsum(np.exp(unknowns[:, : k - 1]), axis=1)
    span = np.diff(np.log(top), axis=1, prepend=np.log(top[:, :1]) - 1.0)
    start = np.empty((unknowns.shape[0], unknowns.shape[1] + 2))
    for i, cut in enumerate(np.argmax(span, axis=1)):
        thickness, rest = unknowns[i, : k - 1], unknowns[i, k - 1 :]
        half = thickness[cut] - np.log(2.0)
        start[i] = np.concatenate(
            [thickness[:cut], [half, half], thickness[cut + 1 :], rest[:cut], rest[cut] + [0.3, -0.3], rest[cut + 1 :]]
        )
    return start


def _describe(
    sounding: Sounding, curves: Curves, fitted: tuple[Fit, Prior], noise: float, options: InversionOptions
) -> Inverted:
    """What one sounding says, from its curve, its chosen fit and that fit's prior, each a batch of one."""
    curve, fit = sounding.curve, fitted[0]
    unknowns = fit.unknowns[0]
    k = (unknowns.size - curves.segments.shape[2] + 1) // 2
    n_model = 2 * k - 1
    model = LayeredModel(np.exp(unknowns[: k - 1]), np.exp(unknowns[k - 1 : n_model]))
    n_segments = np.unique(curve.segment[curve.used]).size
    n_used = int(np.sum(curve.used))
    trusted = fit.robust_weight[0, :n_used]
    robust = np.zeros(curve.half_spacing.size)
    robust[curve.used] = trusted
    residual = (curves.log_apparent_resistivity[0] - fit.log_response[0] - curves.segments[0] @ unknowns[n_model:])[
        :n_used
    ]
    rms = float(np.sqrt(np.sum(trusted * residual**2) / np.sum(trusted)))
    ensemble, log_covariance = _sample_models(sounding, curves, fitted, k, options)
    return Inverted(
        sounding=sounding.name,
        model=model,
        ensemble=ensemble,
        log_covariance=log_covariance,
        segment_factor=np.concatenate([[1.0], np.exp(np.cumsum(unknowns[n_model : n_model + n_segments - 1]))]),
        predicted=layered_earth.response(
            layered_earth.response_weights(curve.half_spacing, curve.potential_half_spacing, curves.wavenumber),
            curves.wavenumber,
            model.thickness[None],
            model.resistivity[None],
        )[0],
        robust_weight=robust,
        rms_percent=100.0 * rms,
        noise=noise,
        criterion={},
        investigated_depth=_investigated_depth(model, curves),
        remarks=_remarks(rms, noise),
        trade_offs=name_trade_offs(ensemble),
    )


def _sample_models(
    sounding: Sounding, curves: Curves, fitted: tuple[Fit, Prior], k: int, options: InversionOptions
) -> tuple[ModelEnsemble, FloatArray]:
    """Equally probable models about the fit, and the covariance of their logs."""
    fit, prior = fitted
    generator = np.random.default_rng([options.random_seed, *sounding.name.encode()])
    effort = Effort(SAMPLES_PER_DRAW * options.draws, 1, 1, 1, 0, 0.0)
    (members,) = ensembles.sample_densities([Density(fit, k, prior)], curves, effort, generator)
    rows = ensembles.resample(members.log_weight, options.draws, generator)
    logs = members.unknowns[rows, : 2 * k - 1]
    models = np.exp(logs)
    even = np.full(options.draws, 1.0 / options.draws)
    return ModelEnsemble(models[:, : k - 1], models[:, k - 1 :], even), np.atleast_2d(np.cov(logs, rowvar=False))


def name_trade_offs(ensemble: ModelEnsemble) -> tuple[str, ...]:
    """Which layers trade thickness for resistivity: S-equivalence where h/ρ is known, T-equivalence where h ρ is.

    A layer trades off where neither its thickness nor its resistivity is known within UNKNOWN (standard deviation in
    natural logs) and one of the two combinations is known at least TWICE as well as either.
    """
    said = []
    for layer in range(ensemble.thickness.shape[1]):
        thickness, resistivity = np.log(ensemble.thickness[:, layer]), np.log(ensemble.resistivity[:, layer])
        apart = min(float(np.std(thickness)), float(np.std(resistivity)))
        if apart < UNKNOWN:
            continue
        for sign, name, words in ((-1.0, "S", "conductance h/ρ"), (1.0, "T", "transverse resistance hρ")):
            together = float(np.std(thickness + sign * resistivity))
            if TWICE * together < apart:
                said.append(
                    f"layer {layer + 1}: {name}-equivalence, its {words} is known within {np.expm1(together):.0%}, "
                    f"its thickness within {np.expm1(np.std(thickness)):.0%} only"
                )
    return tuple(said)


def _remarks(rms: float, noise: float) -> tuple[str, ...]:
    return ("no layered model fits within the errors",) if rms > 2.5 * noise else ()


def _investigated_depth(model: LayeredModel, curves: Curves) -> float:
    """Depth (m) below which halving or doubling the resistivity of all that lies there goes unnoticed."""
    known = np.isfinite(curves.deviation[0])
    depth = np.geomspace(0.5, 1000.0, 67)
    top = np.append(model.top_depth, np.inf)
    # The model cut at each depth: layers above keep their thickness, the cut layer is split.
    upper = np.clip(depth[:, None] - top[:-1], 1e-3, np.diff(top))
    changed = []
    for factor in (0.5, 2.0):
        thickness, resistivity = [], []
        for i in range(model.resistivity.size):
            thickness.append(upper[:, i])
            resistivity.append(np.full(depth.size, model.resistivity[i]))
            rest = np.maximum(top[i + 1] - np.maximum(top[i], depth), 1e-3)
            thickness.append(rest)
            resistivity.append(np.where(top[i + 1] > depth, factor * model.resistivity[i], model.resistivity[i]))
        changed.append((np.stack(thickness, axis=1)[:, :-1], np.stack(resistivity, axis=1)))
    plain = layered_earth.response(curves.weights, curves.wavenumber, model.thickness[None], model.resistivity[None])
    chi_square = [
        np.sum(
            (
                np.log(layered_earth.response(curves.weights, curves.wavenumber, h, r) / plain)[:, known]
                / curves.deviation[0, known]
            )
            ** 2,
            axis=1,
        )
        for h, r in changed
    ]
    felt = np.min(chi_square, axis=0) >= FELT_CHI_SQUARE
    return float(depth[np.flatnonzero(felt)[-1]]) if np.any(felt) else 0.0
