"""Family `two_means`: the difference of the means of two groups of normal values."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, Literal, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.chi import sd_ratio_nodes
from bayesdesign.core.errors import Fault, Invalid
from bayesdesign.design.base import Accuracy, Design
from bayesdesign.design.decided import Decides, LogLikelihood, by_normal, tail_intervals
from bayesdesign.design.estimate import known_error
from bayesdesign.design.groups import check_sizes, group_sizes
from bayesdesign.design.means import drawn_variance, student_line, variance_ratio
from bayesdesign.design.normal_line import NormalAnalysis, NormalLine, critical_value
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.point import Point

PRUNED = 1e-13  # pairs of sample sds less likely than this are left out


@final
@dataclass(frozen=True, kw_only=True)
class TwoMeans(Design):
    """Treatment minus control; two-sample t (pooled variance), z (sds known) or Welch (1947) test.

    Groups may differ in size. `sd` is common to both; with `welch` and `z` each group may have its own.
    """

    family: ClassVar[str] = "two_means"
    example: ClassVar[str] = """
[effect]
null = 0.0
favourable = "higher"
# smallest_relevant = 1.0
planning_value = 2.5
unit = "kg"

[design]
family = "two_means"
n_per_group = 60 # number of values in each group
# n_treatment = 80 # number of treated values, with n_control instead of n_per_group
# n_control = 40 # number of control values, with n_treatment instead of n_per_group
sd = 5.0 # standard deviation within both groups: a number or a distribution
# sd_treatment = 6.0 # standard deviation of treated values, with sd_control instead of sd (analysis "welch" or "z")
# sd_control = 4.0 # standard deviation of control values, with sd_treatment instead of sd
# analysis = "t" # the test: "t" (one sd for both groups), "welch" (an sd for each) or "z" (sds known)

[prior]
effect = { distribution = "normal", mean = 2.5, sd = 1.5 }
# probability_null = 0.1
"""
    minimum_n: ClassVar[int] = 2

    n_per_group: int | None = None
    n_treatment: int | None = None
    n_control: int | None = None
    sd: Distribution | None = None
    sd_treatment: Distribution | None = None
    sd_control: Distribution | None = None
    analysis: Literal["t", "z", "welch"] = "t"

    def __post_init__(self) -> None:
        check_sizes(self.n_per_group, self.n_treatment, self.n_control, 2)
        own = (self.sd_treatment is not None, self.sd_control is not None)
        if (self.sd is not None) == any(own) or (any(own) and not all(own)):
            raise Invalid(
                [Fault(where="sd", problem="sds do not fit", allowed="give sd, or sd_treatment and sd_control")]
            )
        if any(own) and self.analysis == "t":
            raise Invalid(
                [
                    Fault(
                        where="analysis",
                        problem="the pooled t test assumes one sd",
                        got="'t'",
                        allowed="use 'welch' or 'z', or give sd",
                    )
                ]
            )

    @property
    def planned_n(self) -> int | None:
        return self.n_per_group if self.n_per_group is not None else self.n_treatment

    @property
    def n_label(self) -> str:
        return "n_per_group" if self.n_per_group is not None else "n_treatment"

    @property
    def effect_words(self) -> str:
        return "the difference of means, treatment minus control"

    def group_sizes(self, n: int) -> dict[str, int]:
        if self.n_per_group is not None:
            return {"n_per_group": n}
        return dict(zip(("n_treatment", "n_control"), map(int, self._sizes(np.asarray(float(n)))), strict=True))

    @property
    def nuisance(self) -> dict[str, Distribution]:
        if self.sd is not None:
            return {"sd": self.sd}
        absent = Point(value=1.0)
        return {"sd_treatment": self.sd_treatment or absent, "sd_control": self.sd_control or absent}

    def _sizes(self, n: FloatArray) -> tuple[FloatArray, FloatArray]:
        return group_sizes(n, self.n_treatment, self.n_control, 2)

    def _sds(self, nuisance: Mapping[str, Any]) -> tuple[Any, Any]:
        if self.sd is not None:
            return nuisance["sd"], nuisance["sd"]
        return nuisance["sd_treatment"], nuisance["sd_control"]

    def outcomes(
        self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy
    ) -> NormalLine:
        treated, control = (size[:, None] for size in self._sizes(n))
        sd_treated, sd_control = self._sds(nuisance)
        variances = sd_treated**2 / treated, sd_control**2 / control
        se = np.sqrt(variances[0] + variances[1])
        if self.analysis == "z":
            return known_error(se, null)
        if self.analysis == "t":
            return student_line(se, (treated + control - 2)[:, 0], null, accuracy)
        return _welch_line(se, variances, (treated - 1, control - 1), null, accuracy)

    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        treated, control = (float(size) for size in self._sizes(np.asarray(float(n))))
        sds = self._sds(nuisance)
        se = (sds[0] ** 2 / treated + sds[1] ** 2 / control) ** 0.5
        data = {"difference": pm.Normal("difference", effect, se, shape=shape)}
        if self.analysis != "z":
            for arm, sd, size in (("treatment", sds[0], treated), ("control", sds[1], control)):
                data[f"variance_{arm}"] = drawn_variance(pm, f"variance_{arm}", sd, size - 1, shape)
        return data

    def analyse(self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int) -> NormalAnalysis:
        treated, control = (float(size) for size in self._sizes(np.asarray(float(n))))
        estimate = data["difference"]
        if self.analysis == "z":
            sds = self._sds(nuisance)
            return NormalAnalysis(estimate, np.sqrt(sds[0] ** 2 / treated + sds[1] ** 2 / control), np.inf)
        variances = data["variance_treatment"], data["variance_control"]
        if self.analysis == "t":
            df = treated + control - 2
            pooled = ((treated - 1) * variances[0] + (control - 1) * variances[1]) / df
            return NormalAnalysis(estimate, np.sqrt(pooled * (1 / treated + 1 / control)), df)
        a, b = variances[0] / treated, variances[1] / control
        return NormalAnalysis(estimate, np.sqrt(a + b), _satterthwaite(a, b, treated - 1, control - 1))

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Decides
    ) -> LogLikelihood:
        treated, control = (float(size) for size in self._sizes(np.asarray(float(n))))
        tails = tail_intervals(decides, null)
        a, b = (sd**2 / np.float64(size) for sd, size in zip(self._sds(nuisance), (treated, control), strict=True))
        se = (a + b) ** 0.5
        if self.analysis == "z":
            return by_normal(pm, tails, np.inf, null, se, se)
        if self.analysis == "t":
            df = treated + control - 2
            return by_normal(pm, tails, df, null, se, se * variance_ratio(pm, "variance_ratio", df) ** 0.5)
        a = a * variance_ratio(pm, "variance_ratio_treatment", treated - 1)
        b = b * variance_ratio(pm, "variance_ratio_control", control - 1)
        df_a, df_b = np.float64(treated - 1), np.float64(control - 1)
        approximate = (_satterthwaite(a, b, df_a, df_b), min(df_a, df_b), df_a + df_b)
        return by_normal(pm, tails, approximate, null, se, (a + b) ** 0.5)


def _satterthwaite(a: Any, b: Any, df_a: FloatArray | float, df_b: FloatArray | float) -> Any:
    """Approximate degrees of freedom of a + b, each a variance of a mean (Satterthwaite 1946, Welch 1947)."""
    return (a + b) ** 2 / (a * a / df_a + b * b / df_b)


def _welch_line(
    se: FloatArray,
    variances: tuple[FloatArray, FloatArray],
    df: tuple[FloatArray, FloatArray],
    null: float,
    accuracy: Accuracy,
) -> NormalLine:
    """Both sample sds are auxiliary: every pair of their nodes has its own standard error and degrees of freedom."""
    smallest = np.minimum(*df)[:, 0]
    critical = critical_value(smallest, accuracy.finest_level)
    sides = [sd_ratio_nodes(d[:, 0], critical, accuracy.auxiliary, rough=True) for d in df]
    pairs = [np.broadcast_arrays(a[:, :, None], b[:, None, :]) for a, b in zip(*sides, strict=True)]
    (u, v), (weight_u, weight_v) = ([x.reshape(len(x), -1) for x in pair] for pair in pairs)
    keep = (weight_u * weight_v > PRUNED).any(axis=0)
    u, v, weight_u, weight_v = (x[:, keep] for x in (u, v, weight_u, weight_v))
    a, b = variances[0][..., None] * u[:, None, :] ** 2, variances[1][..., None] * v[:, None, :] ** 2
    return NormalLine(
        se=se,
        estimated_se=np.sqrt(a + b),
        df=_satterthwaite(a, b, df[0][..., None], df[1][..., None]),
        weight=weight_u * weight_v,
        null=null,
    )
