"""Survey, Region -> Examination: every check, in one readable list."""

from collections.abc import Sequence

import attrs
import numpy as np

from geoves.checking.arithmetic import assign_repeat_errors, check_arithmetic, check_repeats
from geoves.checking.curve_shape import JudgedCurve, check_shape, examined, judge_curve
from geoves.checking.layered_ground import LayeredGround, draw_layered_ground, layouts_of
from geoves.checking.meter import check_meter
from geoves.checking.options import CurveOptions
from geoves.checking.overlaps import check_overlaps, check_season
from geoves.checking.places import check_places
from geoves.checking.spreads import check_spreads
from geoves.checking.template import check_template
from geoves.checking.wells import UnitOf, check_wells
from geoves.domain.findings import Examination, Finding
from geoves.domain.region import Region
from geoves.domain.survey import Sounding, Survey

# Relative error of a reading until the survey's own scatter is known; that is kept within these times of it.
DEFAULT_NOISE, NOISE_RANGE = 0.03, (0.5, 3.0)
# Fewer readings than this do not change the default.
_FEWEST_FOR_NOISE = 60


def examine_survey(survey: Survey, region: Region, unit_of: UnitOf, options: CurveOptions | None = None) -> Examination:
    """What every check finds beside the doubts that were met while reading, which come first.

    unit_of : the template's code for an interval of a log, None where nothing claims its words
    """
    curves = examine_curves(survey.soundings, options)
    findings = [
        *survey.doubts,
        *curves.findings,
        *check_places(survey, region),
        *check_spreads(survey, region),
        *check_wells(survey, region, unit_of),
        *check_template(region.template),
    ]
    return attrs.evolve(curves, findings=tuple(findings))


def examine_curves(soundings: Sequence[Sounding], options: CurveOptions | None = None) -> Examination:
    """What the readings say of themselves: arithmetic, meter, repeats, shape and overlaps."""
    options = options or CurveOptions()
    ground = draw_layered_ground(pair for sounding in soundings for pair in layouts_of(sounding.curve))
    noise = DEFAULT_NOISE if ground is None else find_noise(soundings, ground)
    findings: list[Finding] = check_arithmetic(soundings)
    judged_curves: list[JudgedCurve] = []
    for sounding in soundings:
        findings += [*check_meter(sounding), *check_repeats(sounding, noise)]
        judged = None if ground is None else judge_curve(sounding, ground, noise, options)
        if judged is not None and ground is not None:
            findings += [*check_shape(judged, ground, options), *check_overlaps(judged)]
            judged_curves.append(judged)
    findings += check_season(judged_curves)
    return Examination(tuple(findings), tuple(examined(judged) for judged in judged_curves), noise)


def find_noise(soundings: Sequence[Sounding], ground: LayeredGround) -> float:
    """Relative error of the readings that have none typed, from how they scatter about flat layers, robustly."""
    noise = DEFAULT_NOISE
    for _ in range(2):
        scores = []
        for sounding in soundings:
            judged = judge_curve(sounding, ground, noise, CurveOptions())
            if judged is not None:
                untyped = np.isnan(sounding.curve.relative_error[judged.reading])
                scores.append(judged.prediction.score[untyped])
        pooled = np.abs(np.concatenate(scores)) if scores else np.empty(0)
        if pooled.size < _FEWEST_FOR_NOISE:
            return DEFAULT_NOISE
        # The broader of middle and shoulder: a noise put too low makes jumps of what is none.
        middle, shoulder = np.median(pooled) / 0.6745, np.quantile(pooled, 0.9) / 1.6449
        noise *= float(np.clip(max(middle, shoulder), 0.5, 2.0))
        noise = float(np.clip(noise, NOISE_RANGE[0] * DEFAULT_NOISE, NOISE_RANGE[1] * DEFAULT_NOISE))
    return noise


def assign_errors(survey: Survey) -> Survey:
    """The survey with errors from repeats where readings were repeated and none is typed; else as it was."""
    return attrs.evolve(
        survey,
        soundings=tuple(
            attrs.evolve(one, curve=assign_repeat_errors(one.curve, DEFAULT_NOISE)) for one in survey.soundings
        ),
    )
