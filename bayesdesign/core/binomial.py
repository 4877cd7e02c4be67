"""Binomial probabilities for arrays of counts, by the incomplete beta function; right at the ends, quiet outside
them.
"""

from functools import lru_cache

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray


def cdf(k: FloatArray, n: FloatArray, p: FloatArray) -> FloatArray:
    """P(X <= k); k may be -1 or n."""
    inside = special.betainc(np.maximum(n - k, 0.5), np.maximum(k + 1, 0.5), 1 - p)
    return np.where(k < 0, 0.0, np.where(k >= n, 1.0, inside))


def sf(k: FloatArray, n: FloatArray, p: FloatArray) -> FloatArray:
    """P(X > k), accurate in the upper tail."""
    inside = special.betainc(np.maximum(k + 1, 0.5), np.maximum(n - k, 0.5), p)
    return np.where(k < 0, 1.0, np.where(k >= n, 0.0, inside))


def between(first: FloatArray, last: FloatArray, n: FloatArray, p: FloatArray) -> FloatArray:
    """P(first <= X <= last) from whichever tail is shorter; 0 when first > last."""
    upper = first > n * p
    mass = np.where(upper, sf(first - 1, n, p) - sf(last, n, p), cdf(last, n, p) - cdf(first - 1, n, p))
    return np.where(first > last, 0.0, np.maximum(mass, 0.0))


def log_choose(n: FloatArray, k: FloatArray) -> FloatArray:
    """log of n over k."""
    return np.asarray(special.gammaln(n + 1) - special.gammaln(k + 1) - special.gammaln(n - k + 1))


@lru_cache(maxsize=64)
def log_choose_row(n: int) -> FloatArray:
    """log of n over k for every k from 0 to n."""
    return log_choose(np.asarray(float(n)), np.arange(n + 1.0))
