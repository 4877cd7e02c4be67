"""Critical counts of Fisher's exact test for every total at once."""

from functools import lru_cache

import numpy as np

from bayesdesign.core.arrays import FloatArray, IntArray
from bayesdesign.core.binomial import log_choose
from bayesdesign.design.base import Tails

TIE = 1 + 1e-10  # a p-value equal to the level rejects, whatever the last bits say
BLOCK = 2_000_000  # table cells worked on at once


def conditional_bounds(
    n_treated: int, n_control: int, level: float, tails: Tails, y: FloatArray
) -> tuple[IntArray, IntArray]:
    """For each total of events 0..n_treated + n_control, (lower, upper): the test rejects when x < lower or x > upper.

    Given the total, the treated count x is hypergeometric under equal proportions (Fisher 1935). `central` holds
    each tail to `level`; `minimum_likelihood` holds the sum of all probabilities no larger than the count's own to
    `level`. Only totals that can occur with control counts `y` are filled in; for the others nothing rejects.
    """
    first, last = int(y.min()), int(min(y.max() + n_treated, n_treated + n_control))
    return _bounds(n_treated, n_control, level, tails, first, last)


@lru_cache(maxsize=8)
def _bounds(
    n_treated: int, n_control: int, level: float, tails: Tails, first: int, last: int
) -> tuple[IntArray, IntArray]:
    lower = np.full(n_treated + n_control + 1, -1)
    upper = np.full(n_treated + n_control + 1, n_treated + 1)
    sizes = float(n_treated), float(n_control)
    # beyond 11 sds of the hypergeometric law (sd <= sqrt(total share) / 2) no tail below 1e-20 matters to a level
    width = int(min(n_treated, 11 * np.sqrt(n_treated * n_control / (n_treated + n_control)) + 60)) + 1
    step = max(1, BLOCK // width)
    for start in range(first, last + 1, step):
        totals = np.arange(start, min(start + step, last + 1))[:, None].astype(float)
        centre = np.floor(totals * n_treated / (n_treated + n_control))
        left = np.clip(centre - width // 2, 0, n_treated + 1 - width)
        x = left + np.arange(width)
        possible = (x <= totals) & (totals - x <= n_control)
        log_pmf = (
            log_choose(np.asarray(sizes[0]), x)
            + log_choose(np.asarray(sizes[1]), np.clip(totals - x, 0, n_control))
            - log_choose(np.asarray(sizes[0] + sizes[1]), totals)
        )
        pmf = np.where(possible, np.exp(np.where(possible, log_pmf, 0.0)), 0.0)
        keeps = _kept(pmf, level, tails) & possible
        rows = totals[:, 0].astype(int)
        some = keeps.any(axis=1)
        first_kept = left[:, 0] + np.argmax(keeps, axis=1)
        last_kept = left[:, 0] + width - 1 - np.argmax(keeps[:, ::-1], axis=1)
        lower[rows[some]], upper[rows[some]] = first_kept[some], last_kept[some]
    return lower, upper


def _kept(pmf: FloatArray, level: float, tails: Tails) -> IntArray:
    """Which counts are not rejected, in either tail."""
    if tails == "central":
        above = np.cumsum(pmf[:, ::-1], axis=1)[:, ::-1]
        below = np.cumsum(pmf, axis=1)
        return np.asarray((above > level * TIE) & (below > level * TIE))
    order = np.argsort(pmf, axis=1)
    ranked = np.take_along_axis(pmf, order, axis=1)
    running = np.cumsum(ranked, axis=1)
    p = np.empty_like(pmf)
    for i in range(len(pmf)):
        p[i] = running[i][np.searchsorted(ranked[i], pmf[i] * (1 + 1e-7), side="right") - 1]
    return np.asarray(p > level * TIE)
