"""Intervals from a few hundred weighed draws against those of a long chain: `python -m tests.benchmarks.intervals`.

For each of six telling soundings, of the best sequence of units (and of the best that reaches the basal contact, where
that is another): the 90 % interval of the natural log of the basal contact's depth, and of each unit's thickness and
resistivity, from columns as the interpretation draws them and from a long chain (tests/reference/long_chain.py) on
the same posterior. Printed are the ratio of widths for one set of draws, its mean and scatter over many sets (a mean
off 1 is a fault of the method, the scatter is what a finite number of draws costs), and how far the medians lie apart,
in standard deviations of the chain.
"""

import argparse
import time

import numpy as np
import pandas as pd
from threadpoolctl import threadpool_limits

from geoves.interpretation import InterpretationOptions
from tests.interpretation.telling_soundings import SOUNDINGS, find_best_sequences, interval_width, known_quantities
from tests.reference.long_chain import sample_posterior


def compare(best, chain, sets):
    """A row a quantity: the chain's width, and what columns drawn `sets` times give, the first set by itself."""
    true = known_quantities(best.columns_of(chain.members), best)
    options = InterpretationOptions()
    drawn = [known_quantities(best.draw(options, np.random.default_rng(seed)), best) for seed in range(sets)]
    rows = {}
    for name, values in true.items():
        width, deviation, median = interval_width(values), np.std(values), np.median(values)
        ratio = np.array([interval_width(one[name]) for one in drawn]) / width
        shift = (np.array([np.median(one[name]) for one in drawn]) - median) / deviation
        rows[name] = {
            "chain's width": width,
            "one set": ratio[0],
            "mean": ratio.mean(),
            "scatter": ratio.std(),
            "median, one set": shift[0],
            "median, mean": shift.mean(),
        }
    return pd.DataFrame(rows).T


def main():
    parser = argparse.ArgumentParser(description="Hold the intervals of weighed draws against a long chain.")
    parser.add_argument("--effective", type=int, default=4000, help="independent draws that a chain must be worth")
    parser.add_argument("--sets", type=int, default=40, help="sets of columns drawn for the mean and the scatter")
    arguments = parser.parse_args()
    tables = {}
    for sounding in SOUNDINGS:
        for best in find_best_sequences(sounding):
            started = time.perf_counter()
            chain = sample_posterior(
                best.fit, len(best.sequence.units), best.curves, best.prior, effective=arguments.effective
            )
            title = f"{sounding.name}: {', '.join(best.codes)}"
            tables[title] = table = compare(best, chain, arguments.sets)
            print(f"\n{title} (chain worth {chain.effective:.0f} draws, {time.perf_counter() - started:.0f} s)")
            print(table.to_string(float_format="{:.3f}".format), flush=True)
    print("\nWorst over all quantities: ratio of widths")
    joined = pd.concat(tables)
    for column in ("one set", "mean"):
        off = np.abs(np.log(joined[column]))
        sounding, quantity = off.idxmax()
        within = np.mean(np.abs(joined[column] - 1.0) < 0.15)
        print(f"  {column:<8} {joined[column][off.idxmax()]:.3f} ({sounding}, {quantity}); {within:.0%} within 15 %")
    print(f"  medians, one set: {joined['median, one set'].abs().max():.2f} deviations apart at most")


if __name__ == "__main__":
    with threadpool_limits(1):
        main()
