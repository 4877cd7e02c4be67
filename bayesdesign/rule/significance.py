"""Rule `significance`: a one- or two-sided test at level alpha."""

from dataclasses import dataclass, replace
from typing import ClassVar, Literal, final

import numpy as np

from bayesdesign.core.arrays import FloatArray, IntArray
from bayesdesign.core.errors import check_values
from bayesdesign.core.region import Region
from bayesdesign.design.base import Analysis, Outcomes, Tails
from bayesdesign.rule.base import Rule
from bayesdesign.truth import Favourable


@final
@dataclass(frozen=True, kw_only=True)
class Significance(Rule):
    """Reject when the p-value is at most alpha, and claim the side on which the estimate lies (Neyman and Pearson
    1933).

    Two-sided: alpha / 2 in each tail. `tails` chooses between the two common two-sided p-values of exact tests.
    """

    kind: ClassVar[str] = "significance"

    alpha: float = 0.05
    sides: Literal["two", "higher", "lower"] = "two"
    tails: Tails = "central"

    def __post_init__(self) -> None:
        check_values((0 < self.alpha < 1, "alpha", self.alpha, "a number between 0 and 1"))

    @property
    def decisions(self) -> tuple[str, ...]:
        if self.sides == "two":
            return "reject_higher", "reject_lower", "not_reject"
        return f"reject_{self.sides}", "not_reject"

    @property
    def claims(self) -> dict[str, str]:
        return {name: name.removeprefix("reject_") for name in self.decisions[:-1]}

    def favourable(self, favourable: Favourable) -> tuple[str, ...]:
        return tuple(name for name, side in self.claims.items() if favourable in (side, "either"))

    @property
    def default_favourable(self) -> Favourable:
        return "either" if self.sides == "two" else self.sides

    @property
    def finest_level(self) -> float:
        return self.alpha / 2 if self.sides == "two" else self.alpha

    def regions(self, outcomes: Outcomes, null: float) -> list[Region]:
        if self.sides == "two":
            return list(outcomes.two_sided_test(null, self.alpha, self.tails))
        return [outcomes.test(null, self.alpha, self.sides)]

    def regions_at(self, outcomes: Outcomes, null: float, level: float) -> list[Region]:
        return replace(self, alpha=level).regions(outcomes, null)

    def limit(self, distance: FloatArray) -> FloatArray:
        # a consistent test rejects every effect on its side; at the null it keeps its level
        parts = [
            np.where(distance == 0, self.finest_level, (distance > 0) == (side == "higher"))
            for side in self.claims.values()
        ]
        return np.stack([*parts, 1 - sum(parts)], axis=-1)

    def decide(self, analysis: Analysis, null: float, working_null: float) -> IntArray:
        p = analysis.p_value(null, self.sides, self.tails)
        rejected = p <= self.alpha * (1 + 1e-10)
        if self.sides != "two":
            return np.where(rejected, 0, 1)
        return np.where(rejected, np.where(analysis.estimate > working_null, 0, 1), 2)
