"""Family `estimate`: anything whose estimate is normal around the truth with a known standard error."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, Literal, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Fault, Invalid, check_values
from bayesdesign.design.base import Accuracy, Design
from bayesdesign.design.decided import Decides, LogLikelihood, by_normal, tail_intervals
from bayesdesign.design.normal_line import NormalAnalysis, NormalLine
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.point import Point


@final
@dataclass(frozen=True, kw_only=True)
class Estimate(Design):
    """An estimate with standard error unit_sd / sqrt(n), or with a given standard error.

    The mediator for every analysis that ends in an estimate and its standard error (normal approximation, common
    practice).
    """

    family: ClassVar[str] = "estimate"
    example: ClassVar[str] = """
[effect]
null = 0.0
favourable = "higher"
# smallest_relevant = 0.1
planning_value = 0.4
# unit = "points"

[design]
family = "estimate"
n = 100 # size of the study; the standard error is unit_sd / sqrt(n)
unit_sd = 1.5 # standard error of the estimate at n = 1: a number or a distribution
# standard_error = 0.15 # standard error of the estimate, instead of n and unit_sd: a number or a distribution
# analysis = "z" # the test: "z", which compares the estimate with its standard error

[prior]
effect = { distribution = "normal", mean = 0.4, sd = 0.3 }
# probability_null = 0.1
"""

    n: int | None = None
    unit_sd: Distribution | None = None
    standard_error: Distribution | None = None
    analysis: Literal["z"] = "z"

    def __post_init__(self) -> None:
        by_n, by_error = self.n is not None or self.unit_sd is not None, self.standard_error is not None
        if by_n == by_error or (by_n and (self.n is None or self.unit_sd is None)):
            raise Invalid(
                [Fault(where="n", problem="sizes do not fit", allowed="give n and unit_sd, or standard_error alone")]
            )
        check_values((self.n is None or self.n >= 1, "n", self.n, "a whole number of at least 1"))

    @property
    def planned_n(self) -> int | None:
        return self.n

    @property
    def n_label(self) -> str:
        return "n"

    @property
    def effect_words(self) -> str:
        return "the effect"

    @property
    def nuisance(self) -> dict[str, Distribution]:
        if self.unit_sd is not None:
            return {"unit_sd": self.unit_sd}
        return {"standard_error": self.standard_error or Point(value=1.0)}

    def _standard_error(self, n: Any, nuisance: Mapping[str, Any]) -> Any:
        return nuisance["unit_sd"] / np.sqrt(n) if self.unit_sd is not None else nuisance["standard_error"] + 0 * n

    def outcomes(
        self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy
    ) -> NormalLine:
        del accuracy  # a z test needs no auxiliary nodes
        return known_error(self._standard_error(n[:, None], nuisance), null)

    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        return {"estimate": pm.Normal("estimate", effect, self._standard_error(n, nuisance), shape=shape)}

    def analyse(self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int) -> NormalAnalysis:
        return NormalAnalysis(data["estimate"], self._standard_error(n, nuisance), np.inf)

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Decides
    ) -> LogLikelihood:
        se = self._standard_error(n, nuisance)
        return by_normal(pm, tail_intervals(decides, null), np.inf, null, se, se)


def known_error(se: FloatArray, null: float) -> NormalLine:
    """The z test: one auxiliary node, the standard error is what it is said to be. `se` is (N, M)."""
    return NormalLine(
        se=se, estimated_se=se[..., None], df=np.full((1, 1, 1), np.inf), weight=np.ones((len(se), 1)), null=null
    )
