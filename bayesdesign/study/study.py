"""`Study`: a validated study, and everything about it that needs no computation."""

import dataclasses
from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.core.errors import Fault, StudyError
from bayesdesign.design.base import Design
from bayesdesign.prior.base import Distribution
from bayesdesign.rule.base import Rule
from bayesdesign.truth import EDGE, Favourable, States


@final
@dataclass(frozen=True, kw_only=True)
class Effect:
    """`[effect]`: the question on its scale. `smallest_relevant` is a distance from the null (a ratio above 1 on
    ratio scales).
    """

    null: float | None = None
    favourable: Favourable | None = None
    smallest_relevant: float | None = None
    planning_value: float | None = None
    unit: str = ""


@final
@dataclass(frozen=True, kw_only=True)
class Prior:
    """`[prior]`: `probability_null` exactly at the null; otherwise the effect, or the treated arm, follows a
    distribution.
    """

    effect: Distribution | None = None
    treatment: Distribution | None = None
    probability_null: float = 0.0

    @property
    def variable(self) -> Distribution:
        """The distribution given, whichever it is on."""
        chosen = self.effect if self.effect is not None else self.treatment
        if chosen is None:  # Study refuses this; here only for the type checker
            raise ValueError("a prior needs a distribution")
        return chosen


@final
@dataclass(frozen=True, kw_only=True)
class Target:
    """`[target]`: the measure that `size` must bring to `at_least` (or `at_most`), and where to stop looking."""

    measure: str = "assurance"
    at_least: float | None = None
    at_most: float | None = None
    max_n: int = 100_000


@final
@dataclass(frozen=True, kw_only=True)
class Study:
    """A study: question, belief, design, rule. Raises `StudyError` with every fault when the parts do not fit."""

    title: str
    design: Design
    prior: Prior
    rule: Rule
    effect: Effect = dataclasses.field(default_factory=Effect)
    target: Target | None = None
    question: str = ""
    field: str = ""
    file: str = ""
    sha256: str = ""

    def __post_init__(self) -> None:
        from bayesdesign.study.faults import study_faults

        faults = study_faults(self)
        if faults:
            raise StudyError(faults, self.file)

    @property
    def null(self) -> float:
        """The null value in natural units."""
        null = self.effect.null if self.effect.null is not None else self.design.default_null
        if null is None:
            raise StudyError(
                [Fault(where="[effect] null", problem="missing", allowed="this family needs a null value")], self.file
            )
        return null

    @property
    def favourable(self) -> Favourable:
        """Which direction is good news; what the rule looks for when the study does not say."""
        return self.effect.favourable or self.rule.default_favourable

    @property
    def working_null(self) -> float:
        return float(self.design.working(np.asarray(self.null)))

    @property
    def relevant_distance(self) -> float | None:
        """`smallest_relevant` on the working scale."""
        if self.effect.smallest_relevant is None:
            return None
        return float(self.design.working(np.asarray(self.effect.smallest_relevant)))

    def is_null(self, effect: float) -> bool:
        return abs(effect - self.null) <= EDGE * max(1.0, abs(self.null))

    @property
    def exact_null_weight(self) -> float:
        """Prior weight exactly at the null: `probability_null` and any atom of the effect's distribution there."""
        atom = 0.0
        if self.prior.effect is not None:
            values, masses = self.prior.effect.atoms()
            atom = float(sum(m for v, m in zip(values, masses, strict=True) if self.is_null(float(v))))
        return self.prior.probability_null + (1 - self.prior.probability_null) * atom

    @property
    def states(self) -> States:
        return States.about_null(
            smallest_relevant=self.relevant_distance,
            exact_null=self.exact_null_weight > 0,
            favourable=self.favourable,
        )

    @property
    def cautious(self) -> bool:
        """Whether the result can hurt someone, so that cautions are shown."""
        return self.field in ("clinical", "safety")
