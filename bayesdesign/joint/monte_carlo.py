"""Monte Carlo standard errors: of ratios of sums, medians, and quantiles of a probability only estimated."""

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.joint.table import Cells
from bayesdesign.measures.ratios import Ratio

BATCHES = 100
# With k of n events seen the variance is about (k + 4) / n^2, so that no count, however small, is taken for
# certain (after Agresti and Coull 1998). Without the 4, seeing none where 5.1 are expected, which happens in
# 0.6 % of all runs, would count as more than 5 standard errors; with it the chance is less than 0.01 %.
UNSEEN = 2.0


def jackknife(whole: Ratio, without: Ratio, count: FloatArray, scale: FloatArray | float) -> FloatArray:
    """Standard error of a ratio of sums, leading axis N.

    whole: (N, 1), from all draws; without: (N, B), each without one batch (delete-a-group jackknife,
    Quenouille 1956; Tukey 1958). count (N,): draws under the ratio's condition; scale: the size of what one
    draw contributes, 1 for a rate.
    """
    left = without.value
    centre = np.where(np.isfinite(left), left - whole.value, 0.0)
    batches = left.shape[-1]
    variance = (batches - 1) / batches * ((centre - centre.mean(axis=-1, keepdims=True)) ** 2).sum(axis=-1)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(count > 0, np.sqrt(variance + (UNSEEN * scale / count) ** 2), np.nan)


def cells_error(batches: Cells, draws: int) -> FloatArray:
    """Standard errors (N, S, D) of the cell probabilities, from cells (N, B, S, D) with weights 1 / draws."""
    by_state = batches.by_state
    number = by_state.shape[1]
    variance = by_state.var(axis=1, ddof=1) * number
    return np.asarray(np.sqrt(variance + (UNSEEN / draws) ** 2))


def quantile(ordered: FloatArray, level: float) -> float:
    """Least value that at least this share of the sorted sample does not exceed."""
    return float(ordered[max(0, int(np.ceil(level * len(ordered) - 1e-9)) - 1)])


def quantile_error(ordered: FloatArray, level: float) -> float:
    """Standard error of a quantile of a sorted sample, by the order statistics around it (Woodruff 1952).

    The larger of the half-widths at 2 and at 5 binomial standard errors, each divided by that number: where
    the sample has atoms or a gap near the quantile, the narrow one alone can be 0 though the wide one is not.
    """
    count = len(ordered)
    step = np.sqrt(count * level * (1 - level))
    widths = []
    for reach in (2.0, 5.0):
        low = int(np.clip(np.floor(level * count - reach * step), 0, count - 1))
        high = int(np.clip(np.ceil(level * count + reach * step), 0, count - 1))
        widths.append((ordered[high] - ordered[low]) / (2 * reach))
    return float(max(widths))


def power_quantile(successes: BoolArray, level: float) -> tuple[float, float]:
    """Quantile of the probability p over truths and its standard error; successes (truths, 2, studies / 2).

    The share of successes is p plus binomial noise, which spreads the quantiles outwards: by c / studies
    where p has a smooth density, by c / sqrt(studies) where it has an atom. The quantile from all studies
    and the mean of those from either half give an estimate of that bias (Richardson extrapolation); it is
    subtracted once, which leaves nothing to first order in the smooth case and 0.6 of the bias at an atom.
    The error holds the order statistics of the truths, 1.5 times the subtracted bias (so that it covers an
    atom), and the resolution of the shares.
    """
    inner = successes.shape[1] * successes.shape[2]
    halves = np.sort(successes.mean(axis=2), axis=0)
    whole = np.sort(successes.mean(axis=(1, 2)))
    coarse = float(np.mean([quantile(halves[:, i], level) for i in range(2)]))
    fine = quantile(whole, level)
    bias = coarse - fine
    resolution = UNSEEN / inner
    error = np.sqrt(quantile_error(whole, level) ** 2 + (1.5 * bias) ** 2 + resolution**2)
    return float(np.clip(fine - bias, 0.0, 1.0)), float(error)
