"""Readings that are ratios of sums over the joint table; every definition stands here once, for both routes.

R is any claim of an effect, F the favourable decisions. Definitions: type S and exaggeration (type M) after Gelman
and Carlin (2014), averaged over the prior as a ratio of expectations; assurance after Spiegelhalter and Freedman
(1986) and O'Hagan, Stevens and Campbell (2005); false-positive risk after Wacholder et al. (2004).
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.joint.table import Cells
from bayesdesign.study.study import Study

LEAST = 1e-12  # a condition less likely than this is none: its sums are rounding


@final
@dataclass(frozen=True, slots=True)
class Ratio:
    """A reading numerator / denominator on the leading axes of the cells; `why_null` says what a zero denominator
    means.
    """

    numerator: FloatArray
    denominator: FloatArray
    why_null: str = ""

    @property
    def value(self) -> FloatArray:
        """The ratio, NaN where the condition has practically no probability."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(self.denominator > LEAST, self.numerator / self.denominator, np.nan)


@final
@dataclass(frozen=True, slots=True)
class Frame:
    """Which decisions and states play which part, as 0/1 vectors."""

    favourable: FloatArray
    claims: FloatArray
    higher: FloatArray  # claims that point above the null
    lower: FloatArray
    right_states: FloatArray
    null_state: FloatArray | None

    @classmethod
    def of(cls, study: Study) -> "Frame":
        rule, states = study.rule, study.states
        favourable = rule.favourable(study.favourable)

        def marks(test: Callable[[str], bool]) -> FloatArray:
            return np.array([float(test(name)) for name in rule.decisions])

        return cls(
            favourable=marks(lambda d: d in favourable),
            claims=marks(lambda d: d in rule.claims),
            higher=marks(lambda d: rule.claims.get(d) == "higher"),
            lower=marks(lambda d: rule.claims.get(d) == "lower"),
            right_states=np.array([float(i in states.favourable) for i in range(len(states.names))]),
            null_state=None if states.null is None else np.eye(len(states.names))[states.null],
        )


NO_NULL = "no state is the null: the prior puts no weight exactly on it and [effect] smallest_relevant is not given"
NO_WEIGHT = "no weight on the null state"


def readings(cells: Cells, study: Study) -> dict[str, Ratio]:
    """All ratio readings of the main table, by name, in the order in which they are shown."""
    frame = Frame.of(study)
    one = cells.weight.sum(axis=-1)
    return {
        "assurance": Ratio(cells.by_state.sum(axis=-2) @ frame.favourable, one),
        "assurance_true_effect": Ratio(_right(cells, frame), one),
        "expected_power": Ratio(
            _right(cells, frame), cells.weight @ frame.right_states, "no prior weight on the favourable state"
        ),
        "assurance_ceiling": Ratio(cells.limit @ frame.favourable, one),
        **_error_rates(cells, frame, one),
        **_sign_and_size(cells, frame),
    }


def planning_readings(cells: Cells, study: Study) -> dict[str, Ratio]:
    """Readings of the table whose effect is fixed at the planning value."""
    frame = Frame.of(study)
    sign_and_size = _sign_and_size(cells, frame)
    return {
        "power_at_planning_value": Ratio(cells.by_state.sum(axis=-2) @ frame.favourable, cells.weight.sum(axis=-1)),
        "type_s_at_planning_value": sign_and_size["type_s_rate"],
        "exaggeration_at_planning_value": sign_and_size["exaggeration_ratio"],
    }


def _right(cells: Cells, frame: Frame) -> FloatArray:
    return np.asarray(frame.right_states @ cells.by_state @ frame.favourable)


def _error_rates(cells: Cells, frame: Frame, one: FloatArray) -> dict[str, Ratio]:
    names = (
        "type_1_rate", "specificity", "type_2_rate", "average_power", "false_positive_risk", "false_negative_risk",
    )  # fmt: skip
    claimed = cells.by_state @ frame.claims  # (..., S)
    if frame.null_state is None:
        nothing = np.zeros_like(one)
        power = claimed.sum(axis=-1)
        answers = {"type_2_rate": Ratio(one - power, one), "average_power": Ratio(power, one)}
        return {name: answers.get(name, Ratio(nothing, nothing, NO_NULL)) for name in names}
    null = cells.weight @ frame.null_state
    # summed over the other states, not subtracted from 1, so that a small weight keeps its digits
    real = cells.weight @ (1 - frame.null_state)
    false, true = claimed @ frame.null_state, claimed @ (1 - frame.null_state)
    claims, silent = false + true, (null - false) + (real - true)
    no_real = "no weight outside the null state"
    return dict(
        zip(
            names,
            (
                Ratio(false, null, NO_WEIGHT),
                Ratio(null - false, null, NO_WEIGHT),
                Ratio(real - true, real, no_real),
                Ratio(true, real, no_real),
                Ratio(false, claims, "the rule never claims an effect"),
                Ratio(real - true, silent, "the rule always claims an effect"),
            ),
            strict=True,
        )
    )


def _sign_and_size(cells: Cells, frame: Frame) -> dict[str, Ratio]:
    below, above = cells.by_side[..., 0, :], cells.by_side[..., 1, :]
    wrong = below @ frame.higher + above @ frame.lower
    never = "the rule never claims an effect that is not exactly null"
    return {
        "type_s_rate": Ratio(wrong, (below + above) @ frame.claims, never),
        "exaggeration_ratio": Ratio(cells.absolute @ frame.claims, cells.distance @ frame.claims, never),
    }
