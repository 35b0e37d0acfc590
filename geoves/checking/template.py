"""What the resistivity template can and cannot tell apart, before any curve is read through it."""

from itertools import combinations, pairwise

import numpy as np

from geoves.domain.findings import Finding
from geoves.domain.units import Template, Unit

# Two units that resistivity alone confuses at least this often are named; 0.5 is a coin.
CONFUSED = 0.25
# Resistivities between two units that no unit shows, upper over lower end of the gap.
GAP = 1.3
_POINTS = 4001


def check_template(template: Template) -> list[Finding]:
    """Pairs of units that resistivity cannot tell apart, and resistivities that no unit claims."""
    findings = []
    for first, second in combinations(template.units, 2):
        chance = confusion(first, second)
        if chance >= CONFUSED:
            words = (
                f"{first.code} ({_range(first)}) and {second.code} ({_range(second)}) cannot be told apart by "
                f"resistivity alone: it decides wrongly with a probability of {chance:.2f} where both are as likely"
            )
            findings.append(_doubt("template_confusion", f"{first.code}, {second.code}", words))
    words = "no unit shows these resistivities; widen a range or add the unit"
    gaps = find_gaps(template)
    findings += [_doubt("template_gap", f"{low:g} to {high:g} ohm m", words) for low, high in gaps]
    return findings


def confusion(first: Unit, second: Unit) -> float:
    """The Bayes error of telling two units apart by resistivity, both as likely beforehand: 0 never wrong, 0.5 a coin.

    Half of what two densities share: 0.5 ∫ min(p, q) d ln rho, each unit log-normal with its range as the central 90 %.
    """
    means = np.array([first.log_resistivity_mean, second.log_resistivity_mean])
    deviations = np.array([first.log_resistivity_deviation, second.log_resistivity_deviation])
    span = 8.0 * deviations.max()
    x = np.linspace(means.min() - span, means.max() + span, _POINTS)
    density = np.exp(-0.5 * ((x[:, None] - means) / deviations) ** 2) / (deviations * np.sqrt(2.0 * np.pi))
    return float(0.5 * np.trapezoid(density.min(axis=1), x))


def find_gaps(template: Template) -> list[tuple[float, float]]:
    """Stretches of resistivity (ohm m) between the units' ranges that lie in none of them."""
    ranges = sorted((unit.resistivity_p05, unit.resistivity_p95) for unit in template.units)
    reached = np.maximum.accumulate([high for _, high in ranges])
    return [
        (float(high), low)
        for high, (_, (low, _)) in zip(reached[:-1], pairwise(ranges), strict=True)
        if low > GAP * high
    ]


def _range(unit: Unit) -> str:
    return f"{unit.resistivity_p05:g} to {unit.resistivity_p95:g} ohm m"


def _doubt(check: str, value: str, words: str) -> Finding:
    return Finding("doubt", "region.toml", 0, "unit.resistivity", value, words, "", check)
