"""Log probability of a decision given the truth, in PyTensor: for posteriors that know the decision alone.

Independent of the regions of the integration route: where a decision begins and ends is found by asking the
analyst.
"""

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.design.base import Analysis
from bayesdesign.design.normal_line import NormalAnalysis

type Decides = Callable[[Analysis], BoolArray]  # for each analysed study, whether it led to the decision
type LogLikelihood = Callable[[Any], Any]  # from an effect to the log probability of the decision

GRID = 4001
FARTHEST = 1e7  # statistics searched for decisions; there a t test with 1 degree of freedom has p = 3e-8
STEPS = 4000  # of the table of t quantiles against 1 / df, which is interpolated linearly


def tail_intervals(decides: Decides, null: float) -> list[tuple[float, float]]:
    """Where a decision falls, as intervals (smaller, larger) of the one-sided p-value towards higher.

    Raises `NotOffered` when the decision depends on anything else than that p-value.
    """
    tried = [_intervals(decides, null, scale, df) for scale, df in ((1.0, np.inf), (2.5, np.inf), (1.0, 5.0))]
    first = np.array(tried[0])
    if any(len(other) != len(first) or not np.allclose(other, first, rtol=1e-6, atol=0) for other in tried[1:]):
        raise NotOffered(
            "NUTS knows the probability of a decision only where the p-value alone decides; use --route integration"
        )
    if not tried[0]:
        raise NotOffered("this decision never falls, so there is no posterior given it")
    return tried[0]


def _intervals(decides: Decides, null: float, scale: float, df: float) -> list[tuple[float, float]]:
    from scipy import stats

    law = stats.norm() if np.isinf(df) else stats.t(df)

    def falls(statistic: FloatArray) -> BoolArray:
        return decides(NormalAnalysis(null + scale * statistic, np.full_like(statistic, scale), df))

    grid = np.sinh(np.linspace(-np.arcsinh(FARTHEST), np.arcsinh(FARTHEST), GRID))
    inside = falls(grid)
    step = np.flatnonzero(np.diff(inside.astype(int)))
    low, high, before = grid[step], grid[step + 1], inside[step]
    for _ in range(80):
        middle = (low + high) / 2
        same = falls(middle) == before if len(step) else np.zeros(0, dtype=bool)
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    ends = [*([1.0] if inside[0] else []), *law.sf(low), *([0.0] if inside[-1] else [])]
    return [(float(last), float(first)) for first, last in zip(ends[::2], ends[1::2], strict=True)]


def by_normal(
    pm: Any,
    tails: Sequence[tuple[float, float]],
    df: float | tuple[Any, float, float],
    null: float,
    se: Any,
    reported: Any,
) -> LogLikelihood:
    """An estimate that is normal around the effect with standard error `se`, tested with the reported one.

    tails: from `tail_intervals`. df: degrees of freedom of the test, infinite for z; or an expression with
    the least and the largest value it can have.
    """
    bounds = [tuple(_quantile(pm, p, df) for p in (larger, smaller)) for smaller, larger in tails]

    def log_probability(effect: Any) -> Any:
        parts = [
            log_between(pm, *(None if c is None else (null + c * reported - effect) / se for c in pair))
            for pair in bounds
        ]
        total = parts[0]
        for part in parts[1:]:
            total = pm.math.logaddexp(total, part)
        return total

    return log_probability


def _quantile(pm: Any, p: float, df: float | tuple[Any, float, float]) -> Any:
    """Upper p point of the test statistic, None where it is infinite."""
    from scipy import stats

    if p in (0.0, 1.0):
        return None
    if not isinstance(df, tuple):
        return np.float64(stats.norm.isf(p) if np.isinf(df) else stats.t.isf(p, df))
    value, least, most = df
    ends = 1 / (most * 1.0001), 1 / (least * 0.9999)
    knots = np.linspace(*ends, STEPS + 1)
    table = stats.t.isf(p, 1 / knots)
    place = (1 / value - ends[0]) * np.float64(STEPS / (ends[1] - ends[0]))
    below = pm.math.clip(pm.math.floor(place), 0, STEPS - 1).astype("int64")
    at, slope = (pm.math.constant(values)[below] for values in (table, np.diff(table)))
    return at + (place - below) * slope


def log_between(pm: Any, low: Any, high: Any) -> Any:
    """Log probability that a standard normal variable lies between two bounds, None for an infinite one.

    Right far out in a tail.
    """

    def log_cdf(x: Any) -> Any:
        return pm.logcdf(pm.Normal.dist(np.float64(0), np.float64(1)), x)

    if low is None and high is None:
        return np.float64(0)
    if low is None or high is None:
        return log_cdf(high if low is None else -low)
    # mirrored into the lower half, where the two logarithms keep their digits
    upper = low + high > 0
    far, near = pm.math.switch(upper, -high, low), pm.math.switch(upper, -low, high)
    return log_cdf(near) + pm.math.log1mexp(log_cdf(far) - log_cdf(near))


def log_binomial(pm: Any, count: FloatArray, n: int, share: Any) -> Any:
    """Log probabilities of these counts among n; -inf for a share outside 0 to 1."""
    from scipy import special

    inside = pm.math.clip(share, np.float64(1e-300), np.float64(1 - 1e-16))
    choose = special.gammaln(n + 1) - special.gammaln(count + 1) - special.gammaln(n - count + 1)
    value = choose + count * pm.math.log(inside) + (n - count) * pm.math.log1p(-inside)
    possible = pm.math.and_(pm.math.ge(share, 0), pm.math.le(share, 1))
    return pm.math.switch(possible, value, np.float64(-np.inf))
