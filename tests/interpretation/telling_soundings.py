"""Six soundings over known ground that tell how well a posterior is sampled; curves by quadrature, 3 % noise."""

import attrs
import numpy as np

from geoves.domain.survey import Curve
from geoves.domain.units import Template
from geoves.interpretation import sequences
from geoves.kernels.damped_steps import Readings, stack_curves
from geoves.kernels.layered_earth import shared_wavenumbers
from tests.interpretation.columns import CLAY, CLAYLIKE_ROCK, COVER, DEEP, ROCK, UPPER
from tests.reference.quadrature import response

NOISE = 0.03
SPACING = np.geomspace(1.5, 320.0, 18)
MN_SHARE = 0.1


def without_limits(*units):
    """A template whose posterior is that of the curve and its priors alone."""
    return Template(tuple(attrs.evolve(unit, depth_to_top=None) for unit in units))


FULL = without_limits(COVER, UPPER, CLAY, DEEP, ROCK)
ALIKE = without_limits(COVER, UPPER, CLAY, DEEP, CLAYLIKE_ROCK)
BARE = without_limits(COVER, UPPER, CLAY, ROCK)


@attrs.frozen
class TellingSounding:
    """Layers (m, ohm m) under a spread, and the factor on readings from the changes of MN on."""

    name: str
    thickness: tuple[float, ...]
    resistivity: tuple[float, ...]
    template: Template = FULL
    longest: float = 320.0
    shift: float | None = None

    def curve(self, seed=1):
        s = SPACING[self.longest >= SPACING]
        segment = (s > 30.0).astype(int) if self.shift else np.zeros(s.size, dtype=int)
        apparent = response(s, MN_SHARE * s, self.thickness, self.resistivity) * (self.shift or 1.0) ** segment
        apparent = apparent * np.exp(NOISE * np.random.default_rng(seed).standard_normal(s.size))
        return Curve(s, MN_SHARE * s, apparent, np.full(s.size, NOISE), segment, np.ones(s.size, dtype=bool))


SOUNDINGS = (
    TellingSounding("thin conductive layer", (4, 8, 6, 12), (40, 110, 15, 46, 70)),
    TellingSounding("thin resistive layer", (6, 3, 35), (40, 140, 17, 65)),
    TellingSounding("transparent rock", (4, 9, 40), (40, 110, 17, 18), ALIKE),
    TellingSounding("short spread", (4, 9, 45), (40, 110, 17, 65), longest=75.0),
    TellingSounding("shifted segment", (4, 9, 30, 10), (40, 110, 17, 46, 65), shift=1.08),
    TellingSounding("no gravel", (7, 30), (40, 17, 65), BARE),
)


@attrs.frozen
class BestSequence:
    """The sequence of greatest weight for one curve, with its fit; `curves` and `fit` are batches of one."""

    sequence: sequences.UnitSequence
    fit: object
    log_weight: np.ndarray
    curves: object
    template: Template

    @property
    def prior(self):
        return sequences.sequence_prior(self.sequence, self.template, self.curves)[0]

    @property
    def codes(self):
        return tuple(self.template.units[unit].code for unit in self.sequence.units)

    def columns_of(self, members):
        """Members (m, p) of this sequence as columns of units."""
        h, r = sequences._unit_columns(self.sequence, members, len(self.template.units))
        return sequences.ColumnDraws(h, r, np.full(len(h), self.sequence.reaches), 0.0)

    def draw(self, options, generator):
        """Columns as the interpretation draws them when no other sequence is within reach."""
        return sequences.draw_columns(
            [self.sequence], [self.fit], self.log_weight, self.curves, self.template, options, generator
        )


def find_best_sequences(sounding):
    """The `BestSequence` by the weights that the interpretation gives; the best that reaches the contact after it.

    Two where the best ends above the contact, else one.
    """
    template = sounding.template
    readings = Readings(*sounding.curve().readings(NOISE))
    wavenumber = shared_wavenumbers([(readings.half_spacing, readings.potential_half_spacing)])
    curves = stack_curves([readings], wavenumber)
    admissible = sequences.admissible_sequences(template, np.full(len(template.units), 0.5))
    fits = sequences.fit_sequences(admissible, template, curves)
    log_weight = sequences.weigh_sequences(admissible, fits, template)
    ranked = np.argsort(-log_weight[:, 0])
    reaching = next(q for q in ranked if admissible[q].reaches)
    return [
        BestSequence(admissible[q], fits[q], log_weight[[q], 0], curves, template)
        for q in dict.fromkeys((ranked[0], reaching))
    ]


def known_quantities(columns, best):
    """Natural logs (m,) of the basal contact's depth where there is one, and of each unit's thickness, resistivity."""
    codes = best.template.codes
    found = {}
    if best.sequence.reaches:
        deep = codes.index(DEEP.code) if DEEP.code in codes else len(codes) - 1
        found["basal depth"] = np.log(columns.thickness[:, :deep].sum(axis=1))
    units = sorted(set(best.sequence.units))
    found |= {f"thickness of {codes[unit]}": np.log(columns.thickness[:, unit]) for unit in units[:-1]}
    return found | {f"resistivity of {codes[unit]}": columns.log_resistivity[:, unit] for unit in units}


def interval_width(values):
    """Width of the central 90 %."""
    low, high = np.quantile(values, [0.05, 0.95])
    return high - low
