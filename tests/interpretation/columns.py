"""Invented ground read through a template of the outwash kind: columns, curves, wells."""

import numpy as np

from geoves.domain.survey import Curve, LogInterval, Sounding, Survey, Well
from geoves.domain.units import Role, Template, Unit
from geoves.interpretation import InterpretationOptions, interpret
from geoves.inversion import InversionOptions, invert_block
from geoves.kernels.layered_earth import apparent_resistivity, shared_wavenumbers

SPACING = np.array([1.5, 2.5, 4, 6, 10, 15, 25, 40, 60, 100, 150, 200, 320.0])
NOISE = 0.03
COVER = Unit("till", "Till", Role.COVER, 26, 62, None, ("topsoil", "loam", "till", "yellow clay", "brown clay"))
UPPER = Unit(
    "upper", "Upper gravel", Role.SHALLOW_AQUIFER, 70, 180, (1, 8), ("gravel", "sand", "sand and gravel")
)  # fmt: skip
CLAY = Unit("clay", "Blue clay", Role.CONFINING, 13, 24, None, ("blue clay", "gray clay", "silty clay", "clay"))
SILT = Unit("silt", "Lake silt", Role.CONFINING, 20, 32, None, ("silt",))
DEEP = Unit("deep", "Basal gravel", Role.DEEP_AQUIFER, 38, 55, (15, 135), ("gravel", "coarse sand and gravel"))
ROCK = Unit("lime", "Limestone", Role.BEDROCK, 45, 90, (10, 150), ("limestone", "broken lime"))
CLAYLIKE_ROCK = Unit("shale", "Clay shale", Role.BEDROCK, 12, 25, (10, 150), ("shale",))
FULL = Template((COVER, UPPER, CLAY, DEEP, ROCK))
PLAIN = Template((COVER, CLAY, ROCK))


def sounding_over(name, thickness, resistivity, *, longest=320.0, seed=1, noise=NOISE):
    spacing = SPACING[longest >= SPACING]
    n = spacing.size
    layers = np.array([thickness], dtype=float), np.array([resistivity], dtype=float)
    apparent = apparent_resistivity(spacing, spacing / 20.0, *layers)[0]
    apparent = apparent * np.exp(noise * np.random.default_rng(seed).standard_normal(n))
    curve = Curve(
        spacing, spacing / 20.0, apparent, np.full(n, NOISE), np.zeros(n, dtype=int), np.ones(n, dtype=bool)
    )  # fmt: skip
    return Sounding(name, 500_000.0, 4_600_000.0, 400.0, curve)


def read_places(soundings, template, *, wells=(), picks=(), options=None):
    """The interpretation of soundings inverted at the noise that was put in."""
    inverted = []
    if soundings:
        wavenumber = shared_wavenumbers((s.curve.half_spacing, s.curve.potential_half_spacing) for s in soundings)
        quick = InversionOptions(draws=50, smooth_layers=6, most_layers=4)
        inverted = invert_block(soundings, options=quick, wavenumber=wavenumber, noise=NOISE)
    survey = Survey(tuple(soundings), wells=tuple(wells), picks=tuple(picks))
    return interpret(survey, inverted, template, options or InterpretationOptions())


def well_of(name, *intervals, total=None):
    """Intervals of (top, bottom, words) or (top, bottom, words, code)."""
    logs = tuple(LogInterval(*one) for one in intervals)
    return Well(name, 501_000.0, 4_601_000.0, 402.0, total or intervals[-1][1], logs)


def tops_by(found, place, contact):
    return [top for top in found.tops if (top.place, top.contact) == (place, contact)]
