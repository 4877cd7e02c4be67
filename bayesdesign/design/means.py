"""Families `one_mean` and `paired_means`: the mean of normal values, or of within-pair differences."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, Literal, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.chi import sd_ratio_nodes
from bayesdesign.core.errors import check_values
from bayesdesign.design.base import Accuracy, Design
from bayesdesign.design.decided import Decides, LogLikelihood, by_normal, tail_intervals
from bayesdesign.design.estimate import known_error
from bayesdesign.design.normal_line import NormalAnalysis, NormalLine, critical_value
from bayesdesign.prior.base import Distribution


def student_line(se: FloatArray, df: FloatArray, null: float, accuracy: Accuracy) -> NormalLine:
    """The t test: the estimated standard error is se * u, u the ratio of sample to true sd. se (N, M), df (N,)."""
    critical = critical_value(df, accuracy.finest_level)
    u, weight = sd_ratio_nodes(df, critical, accuracy.auxiliary)
    return NormalLine(se=se, estimated_se=se[..., None] * u[:, None, :], df=df[:, None, None], weight=weight, null=null)


def variance_ratio(pm: Any, name: str, df: float) -> Any:
    """Ratio of sample to true variance, chi-square(df) / df, as a variable of a model that is to be fitted."""
    return pm.Gamma(name, alpha=np.float64(df / 2), beta=np.float64(df / 2))


def drawn_variance(pm: Any, name: str, sd: Any, df: float, shape: tuple[int, ...]) -> Any:
    """Sample variance of normal values with this sd: sd^2 chi-square(df) / df, as a gamma variable of the model."""
    return pm.Gamma(name, alpha=df / 2, beta=df / (2 * sd**2), shape=shape)


class _MeanOfDifferences(Design):
    """What the two families share: one sample of n values, their mean and sd."""

    sd_key: ClassVar[str]
    analysis: Literal["t", "z"]

    def _size(self) -> int:
        raise NotImplementedError

    @property
    def planned_n(self) -> int:
        return self._size()

    @property
    def nuisance(self) -> dict[str, Distribution]:
        return {self.sd_key: getattr(self, self.sd_key)}

    def outcomes(
        self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy
    ) -> NormalLine:
        se = nuisance[self.sd_key] / np.sqrt(n[:, None])
        return known_error(se, null) if self.analysis == "z" else student_line(se, n - 1, null, accuracy)

    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        sd = nuisance[self.sd_key]
        data = {"mean": pm.Normal("mean", effect, sd / np.sqrt(n), shape=shape)}
        if self.analysis == "t":
            data["variance"] = drawn_variance(pm, "variance", sd, n - 1, shape)
        return data

    def analyse(self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int) -> NormalAnalysis:
        if self.analysis == "z":
            return NormalAnalysis(data["mean"], nuisance[self.sd_key] / np.sqrt(n), np.inf)
        return NormalAnalysis(data["mean"], np.sqrt(data["variance"] / n), float(n - 1))

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Decides
    ) -> LogLikelihood:
        se, tails = nuisance[self.sd_key] / np.sqrt(n), tail_intervals(decides, null)
        if self.analysis == "z":
            return by_normal(pm, tails, np.inf, null, se, se)
        return by_normal(pm, tails, n - 1, null, se, se * variance_ratio(pm, "variance_ratio", n - 1) ** 0.5)


@final
@dataclass(frozen=True, kw_only=True)
class OneMean(_MeanOfDifferences):
    """One sample of n normal values; the effect is their mean, to be compared with the null value.

    One-sample t test (Student 1908), or z test when the sd is known.
    """

    family: ClassVar[str] = "one_mean"
    example: ClassVar[str] = """
[effect]
null = 100.0
favourable = "higher"
# smallest_relevant = 1.0
planning_value = 102.0
unit = "g"

[design]
family = "one_mean"
n = 30 # number of values
sd = 5.0 # standard deviation of the values: a number or a distribution
# analysis = "t" # the test: "t", or "z" when the sd is known

[prior]
effect = { distribution = "normal", mean = 102.0, sd = 1.5 }
# probability_null = 0.1
"""
    minimum_n: ClassVar[int] = 2
    sd_key: ClassVar[str] = "sd"

    n: int
    sd: Distribution
    analysis: Literal["t", "z"] = "t"

    def __post_init__(self) -> None:
        check_values((self.n >= 2, "n", self.n, "a whole number of at least 2"))

    def _size(self) -> int:
        return self.n

    @property
    def n_label(self) -> str:
        return "n"

    @property
    def effect_words(self) -> str:
        return "the mean"


@final
@dataclass(frozen=True, kw_only=True)
class PairedMeans(_MeanOfDifferences):
    """n pairs; the effect is the mean within-pair difference, treatment minus control.

    `sd_difference` is the sd of the differences: sd * sqrt(2 (1 - correlation)) when both members have the same sd.
    Paired t test, or z test when that sd is known.
    """

    family: ClassVar[str] = "paired_means"
    example: ClassVar[str] = """
[effect]
null = 0.0
favourable = "lower"
# smallest_relevant = 1.0
planning_value = -2.0
unit = "mmol/L"

[design]
family = "paired_means"
n_pairs = 30 # number of pairs
sd_difference = 4.0 # standard deviation of the differences within pairs: a number or a distribution
# analysis = "t" # the test: "t", or "z" when the sd is known

[prior]
effect = { distribution = "normal", mean = -2.0, sd = 1.5 }
# probability_null = 0.1
"""
    minimum_n: ClassVar[int] = 2
    sd_key: ClassVar[str] = "sd_difference"

    n_pairs: int
    sd_difference: Distribution
    analysis: Literal["t", "z"] = "t"

    def __post_init__(self) -> None:
        check_values((self.n_pairs >= 2, "n_pairs", self.n_pairs, "a whole number of at least 2"))

    def _size(self) -> int:
        return self.n_pairs

    @property
    def n_label(self) -> str:
        return "n_pairs"

    @property
    def effect_words(self) -> str:
        return "the mean difference within pairs"
