"""Intervals from the interpretation's few hundred draws against a long chain, on three of six telling soundings.

`python -m tests.benchmarks.intervals` prints all six.
"""

import numpy as np
import pytest

from geoves.interpretation import InterpretationOptions
from tests.interpretation.telling_soundings import SOUNDINGS, find_best_sequences, interval_width, known_quantities
from tests.reference.long_chain import sample_posterior

SETS = 24
QUICK = [one for one in SOUNDINGS if one.name in {"thin conductive layer", "transparent rock", "short spread"}]


@pytest.mark.parametrize("sounding", QUICK, ids=lambda one: one.name)
def test_widths_and_medians_are_those_of_a_long_chain(sounding):
    """Of basal depth, thicknesses and resistivities, on average over sets of draws; one set may scatter about that.

    The mean ratio over 24 sets is known to 2 %, a chain worth 2000 draws gives a width to 3 %: three times both
    together stay within 12 %. One set of 400 columns scatters by 5 to 7 %, where independent ones would by 4 %: the
    width between two quantiles of a normal sample (David and Nagaraja 2003, Order Statistics, section 2.5, from
    memory). Medians agree on average within 0.1 deviations, four times the standard error of both.
    """
    best = find_best_sequences(sounding)[0]
    chain = sample_posterior(best.fit, len(best.sequence.units), best.curves, best.prior, effective=2000)
    options = InterpretationOptions()
    drawn = [known_quantities(best.draw(options, np.random.default_rng(seed)), best) for seed in range(SETS)]
    for name, values in known_quantities(best.columns_of(chain.members), best).items():
        ratio = np.array([interval_width(one[name]) for one in drawn]) / interval_width(values)
        shift = (np.array([np.median(one[name]) for one in drawn]) - np.median(values)) / np.std(values)
        assert 0.88 < ratio.mean() < 1.12, name
        assert ratio.std() < 0.1, name
        assert abs(shift.mean()) < 0.1, name
