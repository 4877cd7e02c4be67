"""Family `one_proportion`: a count among n, to be compared with a stated proportion."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar, Literal, final

import numpy as np
from scipy import special

from bayesdesign.core import binomial
from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered, check_values
from bayesdesign.core.region import Region
from bayesdesign.core.search import least_count
from bayesdesign.design.base import Accuracy, Analysis, Design, Outcomes, Side, Tails
from bayesdesign.design.decided import Decides, LogLikelihood, log_binomial
from bayesdesign.prior.base import Distribution

STEPPED_TO = 200  # size up to which every jump of the median's search is given a panel of its own
TIE = 1 + 1e-10  # a p-value equal to the level rejects, whatever the last bits say


@final
@dataclass(frozen=True, kw_only=True)
class OneProportion(Design):
    """x of n show the property; the effect is the proportion itself, and the null is a proportion.

    `exact`: binomial test, two-sided by the central or the minimum-likelihood p-value (Clopper and Pearson 1934;
    Sterne 1954). `z`: score test, (x / n - null) / sqrt(null (1 - null) / n), on exactly enumerated counts.
    """

    family: ClassVar[str] = "one_proportion"
    example: ClassVar[str] = """
[effect]
null = 0.2
favourable = "higher"
# smallest_relevant = 0.05
planning_value = 0.4

[design]
family = "one_proportion"
n = 40 # number of units that are looked at
# analysis = "exact" # the test: "exact" (binomial) or "z" (score)

[prior]
effect = { distribution = "beta", mean = 0.38, size = 25 }
# probability_null = 0.1
"""
    saw_tooth: ClassVar[bool] = True

    n: int
    analysis: Literal["exact", "z"] = "exact"

    def __post_init__(self) -> None:
        check_values((self.n >= 1, "n", self.n, "a whole number of at least 1"))

    @property
    def planned_n(self) -> int:
        return self.n

    @property
    def n_label(self) -> str:
        return "n"

    def tooth(self, n: int, null: float) -> int:
        # the critical count rises by one about every 1 / null sizes
        del n
        return max(32, int(4 / min(null, 1 - null)))

    @property
    def default_null(self) -> None:
        return None

    @property
    def effect_words(self) -> str:
        return "the proportion"

    @property
    def nuisance(self) -> dict[str, Distribution]:
        return {}

    def effect_bounds(self, nuisance: Mapping[str, FloatArray]) -> tuple[FloatArray, FloatArray]:
        return np.zeros(1), np.ones(1)

    def outcomes(
        self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy
    ) -> "BinomialCount":
        return BinomialCount(n=n, null=null, exact=self.analysis == "exact")

    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        return {"count": pm.Binomial("count", n=n, p=effect, shape=shape)}

    def analyse(self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int) -> "BinomialAnalysis":
        return BinomialAnalysis(data["count"], n, self.analysis == "exact")

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Decides
    ) -> LogLikelihood:
        every = np.arange(n + 1.0)
        count = every[decides(self.analyse({"count": every}, nuisance, n))]
        if not count.size:
            raise NotOffered("this decision never falls, so there is no posterior given it")
        return lambda effect: pm.math.logsumexp(log_binomial(pm, count, n, effect), keepdims=False)


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class BinomialCount(Outcomes):
    """The outcome is the count x among n (N,); the estimate is x / n."""

    n: FloatArray
    null: float
    exact: bool

    def test(self, value: float, level: float, side: Side) -> Region:
        if side == "higher":
            least = least_count(lambda x: self._rejects(x, value, level, side), np.zeros_like(self.n), self.n)
            return Region.above((least - 0.5)[:, None, None])
        least = least_count(lambda x: ~self._rejects(x, value, level, side), np.zeros_like(self.n), self.n)
        return Region.below((least - 0.5)[:, None, None])

    def _rejects(self, x: FloatArray, value: float, level: float, side: Side) -> Any:
        if self.exact:
            p = binomial.sf(x - 1, self.n, value) if side == "higher" else binomial.cdf(x, self.n, value)  # type: ignore[arg-type]
            return p <= level * TIE
        z = (x / self.n - value) / np.sqrt(value * (1 - value) / self.n)
        return (z if side == "higher" else -z) * TIE >= -special.ndtri(level)

    def two_sided_test(self, value: float, level: float, tails: Tails) -> tuple[Region, Region]:
        if tails == "central":
            return self.test(value, level / 2, "higher"), self.test(value, level / 2, "lower")
        if not self.exact:
            raise NotOffered("tails = 'minimum_likelihood' is a definition for exact tests; this analysis is 'z'")
        bounds = np.array([self._least_likely(int(n), value, level) for n in self.n])
        return Region.above(bounds[:, 1, None, None]), Region.below(bounds[:, 0, None, None])

    @staticmethod
    def _least_likely(n: int, value: float, level: float) -> tuple[float, float]:
        """Bounds below and above which the sum of all probabilities no larger than the count's own is within the
        level.
        """
        x = np.arange(n + 1.0)
        pmf = np.exp(
            binomial.log_choose(np.asarray(float(n)), x) + special.xlogy(x, value) + special.xlog1py(n - x, -value)
        )
        order = np.argsort(pmf)
        running = np.concatenate([[0.0], np.cumsum(pmf[order])])
        p = running[np.searchsorted(pmf[order], pmf * (1 + 1e-7), side="right")]
        kept = np.flatnonzero(p > level * TIE)  # the mode is always kept: its p-value is 1
        return kept[0] - 0.5, kept[-1] + 0.5

    @property
    def stepped(self) -> bool:
        return bool(self.n.max() <= STEPPED_TO)

    @property
    def rough_error(self) -> float:
        return 0.0 if self.stepped else 0.03 / float(self.n.min())

    def null_outcome(self) -> FloatArray:
        return (self.n * self.null)[:, None, None]

    def outcomes_within(self, reach: FloatArray) -> tuple[FloatArray, FloatArray]:
        n = self.n[:, None, None]
        slack = 1e-9  # counts at exactly this distance are within it
        return (n * (self.null - reach) - slack)[..., None], (n * (self.null + reach) + slack)[..., None]

    def probabilities_within(self, effect: FloatArray, regions: Sequence[Region], reach: FloatArray) -> FloatArray:
        if self.stepped:
            return Outcomes.probabilities_within(self, effect, regions, reach)
        # without a panel for every jump, each is spread over the unit around it by the beta function at real counts
        n = self.n[:, None, None]
        low, high = n * (self.null - reach), n * (self.null + reach)
        total = np.zeros(effect.shape)
        for region in regions:
            for lower, upper in zip(region.lower, region.upper, strict=True):
                first, last = np.maximum(lower, low), np.minimum(upper, high)
                total += np.where(
                    first < last, binomial.cdf(last - 0.5, n, effect) - binomial.cdf(first - 0.5, n, effect), 0.0
                )
        return total

    def measure(self, effect: FloatArray, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        n = self.n[:, None, None]
        first, last = np.floor(lower[..., 0]) + 1, np.ceil(upper[..., 0]) - 1
        first, last = np.clip(first, 0, n + 1), np.clip(last, -1, n)
        mass = binomial.between(first, last, n, effect)
        # E[X; first <= X <= last] = n p P(first - 1 <= X' <= last - 1), X' among n - 1
        fewer = np.where(
            n > 1,
            binomial.between(np.maximum(first - 1, 0), last - 1, np.maximum(n - 1, 1), effect),
            (first <= 1) & (last >= 1),
        )
        return mass, effect * fewer - self.null * mass

    def landmarks(self, regions: Sequence[Region], multiple: FloatArray | None = None) -> FloatArray:
        n = self.n[:, None, None]
        points = [np.full((len(self.n), 1, 1), self.null)]
        for bound in (bound for region in regions for side in (region.lower, region.upper) for bound in side):
            share = np.clip(np.where(np.isinf(bound), np.nan, bound) / n, 0.0, 1.0)
            se = np.sqrt(np.maximum(share * (1 - share), 1 / n) / n)
            points.append(share + se * np.array([-7.0, -3.5, -1.2, 0.0, 1.2, 3.5, 7.0]))
        if multiple is not None and not self.stepped:
            near = [(p - self.null) / multiple[:, None, None] for p in points]
            points += [self.null + x for x in near] + [self.null - x for x in near]
        if multiple is not None and self.stepped:
            counts = np.arange(self.n.max() + 1) / n
            steps = (np.where(counts <= 1, counts, self.null) - self.null) / multiple[:, None, None]
            points += [self.null + steps, self.null - steps]
        return np.asarray(np.clip(np.nan_to_num(np.concatenate(points, axis=2), nan=self.null), 0.0, 1.0))


@final
@dataclass(frozen=True, slots=True)
class BinomialAnalysis(Analysis):
    """Binomial or score test of each simulated count, by the distributions of scipy.stats."""

    count: FloatArray
    n: int
    exact: bool

    @property
    def estimate(self) -> FloatArray:
        return np.asarray(self.count / self.n)

    def p_value(self, value: float, side: Literal["higher", "lower", "two"], tails: Tails) -> FloatArray:
        from scipy import stats

        if not self.exact:
            z = (self.estimate - value) / np.sqrt(value * (1 - value) / self.n)
            return np.asarray(
                2 * stats.norm.sf(np.abs(z)) if side == "two" else stats.norm.sf(z if side == "higher" else -z)
            )
        if side == "two" and tails == "minimum_likelihood":
            seen, back = np.unique(self.count, return_inverse=True)
            return np.array([stats.binomtest(int(x), self.n, value).pvalue for x in seen])[back]
        higher, lower = stats.binom.sf(self.count - 1, self.n, value), stats.binom.cdf(self.count, self.n, value)
        if side == "two":
            return np.asarray(np.minimum(1.0, 2 * np.minimum(higher, lower)))
        return np.asarray(higher if side == "higher" else lower)
