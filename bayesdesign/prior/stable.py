"""Pieces of densities written so that large parameters do not cost digits.

log-gamma differences lose about 1e-16 * k log k, which is 1e-9 at k = 1e6. The deviance form of C. Loader,
"Fast and accurate computation of binomial probabilities" (2000), splits off the large terms exactly.
"""

import math

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray

LOG_SQRT_2PI = 0.5 * math.log(2 * math.pi)


def gauss(z: FloatArray) -> FloatArray:
    """Standard normal density."""
    with np.errstate(over="ignore", under="ignore"):  # z**2 beyond 1e308 means density 0
        return np.exp(-0.5 * z * z - LOG_SQRT_2PI)


def stirling_error(k: float) -> float:
    """log Gamma(k + 1) minus Stirling's sqrt(2 pi k) (k/e)^k, for k > 0."""
    if k < 16:
        return float(special.gammaln(k + 1)) - (k + 0.5) * math.log(k) + k - LOG_SQRT_2PI
    s = 1 / (k * k)  # asymptotic series; next term below 1e-16 at k = 16
    return (1 / 12 - s * (1 / 360 - s * (1 / 1260 - s * (1 / 1680 - s * (1 / 1188 - s * 691 / 360360))))) / k


def deviance(k: float, x: FloatArray) -> FloatArray:
    """k log(k / x) + x - k for k, x > 0, without cancellation near x = k."""
    u = (x - k) / k
    v = u / (2 + u)
    near = np.abs(v) < 0.05
    w = np.where(near, v, 0.0)
    w2 = w * w
    series = 1 / 3 + w2 * (1 / 5 + w2 * (1 / 7 + w2 * (1 / 9 + w2 * (1 / 11 + w2 / 13))))
    return k * np.where(near, u * w - 2 * w * w2 * series, u - np.log(x / k))
