"""Count designs by plain loops over every outcome, with tests by scipy or by hand; shares nothing with the program."""

import math
from collections.abc import Callable
from dataclasses import dataclass

from scipy import stats

type Decide = Callable[[float, int, int, int, int, str], bool]

TIE = 1e-10  # a p-value this close to the level (relatively) counts as equal to it, and rejects


@dataclass(frozen=True)
class Sums:
    """Probability of rejecting towards each side, and E[|estimate - null|; the same]."""

    higher: float
    lower: float
    size_higher: float
    size_lower: float


def one_sample(n: int, share: float, null: float, rejects: Callable[[int], str]) -> Sums:
    """`rejects` says "higher", "lower" or "" for each count."""
    total = dict.fromkeys(("higher", "lower", ""), 0.0)
    distance = dict.fromkeys(("higher", "lower", ""), 0.0)
    for x in range(n + 1):
        p, side = float(stats.binom.pmf(x, n, share)), rejects(x)
        total[side] += p
        distance[side] += p * abs(x / n - null)
    return Sums(total["higher"], total["lower"], distance["higher"], distance["lower"])


def binomial_test(n: int, null: float, alpha: float, sides: str, tails: str) -> Callable[[int], str]:
    """Exact test by scipy.stats.binomtest; central: twice the smaller one-sided p-value."""

    def decide(x: int) -> str:
        greater, less = (stats.binomtest(x, n, null, alternative=a).pvalue for a in ("greater", "less"))
        if sides != "two":
            return sides if {"higher": greater, "lower": less}[sides] <= alpha * (1 + TIE) else ""
        p = stats.binomtest(x, n, null).pvalue if tails == "minimum_likelihood" else 2 * min(greater, less)
        if p > alpha * (1 + TIE):
            return ""
        return "higher" if x / n > null else "lower"

    return decide


def score_test(n: int, null: float, alpha: float, sides: str) -> Callable[[int], str]:
    """z = (x / n - null) / sqrt(null (1 - null) / n)."""

    def decide(x: int) -> str:
        z = (x / n - null) / math.sqrt(null * (1 - null) / n)
        critical = stats.norm.isf(alpha / 2 if sides == "two" else alpha)
        if sides in ("two", "higher") and z >= critical * (1 - TIE):
            return "higher"
        return "lower" if sides in ("two", "lower") and -z >= critical * (1 - TIE) else ""

    return decide


def transformed(x: int, n: int, scale: str) -> float:
    """Share, log share or log odds; empty (and for odds full) counts take half an event more, out of one more unit."""
    if scale == "difference":
        return x / n
    if scale == "ratio":
        return math.log(x / n if x else 0.5 / (n + 1))
    share = x / n if 0 < x < n else (x + 0.5) / (n + 1)
    return math.log(share / (1 - share))


def p_values(x: int, n: int, y: int, m: int, analysis: str, tails: str) -> tuple[float, float, float]:
    """p-values towards higher, towards lower, and two-sided."""
    if analysis == "exact":
        table = [[x, n - x], [y, m - y]]
        greater, less = (float(stats.fisher_exact(table, alternative=a).pvalue) for a in ("greater", "less"))
        return (
            greater,
            less,
            float(stats.fisher_exact(table).pvalue) if tails == "minimum_likelihood" else 2 * min(greater, less),
        )
    p, q = x / n, y / m
    pooled = (x + y) / (n + m)
    variance = (
        p * (1 - p) / n + q * (1 - q) / m if analysis == "z_unpooled" else pooled * (1 - pooled) * (1 / n + 1 / m)
    )
    z = 0.0
    if abs(p - q) >= 1e-15:
        z = (p - q) / math.sqrt(variance) if variance > 0 else math.copysign(math.inf, p - q)
    greater, less = float(stats.norm.sf(z)), float(stats.norm.cdf(z))
    return greater, less, 2 * min(greater, less)


def two_samples(
    n: int,
    m: int,
    shares: tuple[float, float],
    alpha: float,
    sides: str,
    analysis: str,
    scale: str,
    tails: str = "central",
) -> Sums:
    """Two binomial counts by a double loop; the null is equality."""
    total = dict.fromkeys(("higher", "lower", ""), 0.0)
    distance = dict.fromkeys(("higher", "lower", ""), 0.0)
    for x in range(n + 1):
        for y in range(m + 1):
            weight = float(stats.binom.pmf(x, n, shares[0]) * stats.binom.pmf(y, m, shares[1]))
            greater, less, two = p_values(x, n, y, m, analysis, tails)
            side = ""
            if sides == "two" and two <= alpha * (1 + TIE):
                side = "higher" if x / n > y / m else "lower"
            elif sides != "two" and {"higher": greater, "lower": less}[sides] <= alpha * (1 + TIE):
                side = sides
            total[side] += weight
            distance[side] += weight * abs(transformed(x, n, scale) - transformed(y, m, scale))
    return Sums(total["higher"], total["lower"], distance["higher"], distance["lower"])
