"""`size` against working out every n."""

from typing import Any

import numpy as np
import pytest
from scipy import stats
from studies import study, two_means

from bayesdesign.design import Design, Estimate, OneMean, OneProportion, TwoProportions
from bayesdesign.prior import Beta, Normal, Point
from bayesdesign.rule import Significance
from bayesdesign.size import measured, size
from bayesdesign.study.study import Study, Target

HIGHER = Significance(sides="higher")
CLEAR = 1e-9


def every_n(made: Study, most: int) -> tuple[int | None, int | None]:
    """First n that meets the target, and the least from which all up to `most` do."""
    assert made.target is not None
    assert made.target.at_least is not None
    least, step = made.design.minimum_n, made.design.sizes_at_once
    blocks = [list(range(a, min(a + step, most + 1))) for a in range(least, most + 1, step)]
    values = np.concatenate([measured(made, block, made.target.measure, 1e-6) for block in blocks])
    return first_and_safe(values >= made.target.at_least - CLEAR, least)


def first_and_safe(meets: np.ndarray, least: int) -> tuple[int | None, int | None]:
    first = int(np.argmax(meets)) + least if meets.any() else None
    failing = np.flatnonzero(~meets)
    safe = None if not meets[-1] else (int(failing[-1]) + 1 + least if failing.size else least)
    return first, safe


@pytest.mark.parametrize("null", [0.05, 0.2, 0.5])
@pytest.mark.parametrize(("gap", "at_least"), [(0.2, 0.8), (0.12, 0.9), (0.25, 0.5)])
def test_single_arm_for_power_equals_the_binomial_law_at_every_n(null: float, gap: float, at_least: float) -> None:
    share, most = null + gap, 400
    made = study(
        OneProportion(n=20), Beta(a=1.0, b=1.0), HIGHER, null=null, planning_value=share,
        target=Target(measure="power_at_planning_value", at_least=at_least),
    )  # fmt: skip
    power = []
    for n in range(1, most + 1):
        critical = int(np.argmax(stats.binom.sf(np.arange(-1, n + 1), n, null) <= 0.05 * (1 + 1e-10)))
        power.append(float(stats.binom.sf(critical - 1, n, share)))
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == first_and_safe(np.array(power) >= at_least - CLEAR, 1)


@pytest.mark.parametrize(
    ("a", "b", "null", "at_least"), [(8.0, 12.0, 0.2, 0.7), (8.0, 12.0, 0.2, 0.85), (2.0, 2.0, 0.3, 0.6)]
)
def test_single_arm_for_assurance_equals_the_beta_binomial_law_at_every_n(
    a: float, b: float, null: float, at_least: float
) -> None:
    most, values = 600, []
    for n in range(1, most + 1):
        critical = int(np.argmax(stats.binom.sf(np.arange(-1, n + 1), n, null) <= 0.05 * (1 + 1e-10)))
        values.append(float(stats.betabinom.sf(critical - 1, n, a, b)))
    made = study(OneProportion(n=20), Beta(a=a, b=b), HIGHER, null=null, target=Target(at_least=at_least))
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == first_and_safe(np.array(values) >= at_least - CLEAR, 1)


@pytest.mark.slow
@pytest.mark.parametrize("analysis", ["z", "exact", "z_unpooled"])
@pytest.mark.parametrize("at_least", [0.5, 0.8])
def test_two_proportions_equal_every_n(analysis: Any, at_least: float) -> None:
    made = study(
        TwoProportions(n_per_group=50, control=Point(value=0.3), analysis=analysis), Normal(mean=0.3, sd=0.05),
        favourable="higher", target=Target(at_least=at_least),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == every_n(made, 150)


def test_two_proportions_equal_every_n_at_a_fixed_effect() -> None:
    made = study(
        TwoProportions(n_per_group=50, control=Point(value=0.3)), Point(value=0.4),
        favourable="higher", target=Target(at_least=0.8),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == every_n(made, 60)


@pytest.mark.parametrize(
    "design", [Estimate(n=10, unit_sd=Point(value=2.0)), OneMean(n=10, sd=Point(value=2.0)), two_means(10, 1.5)]
)
@pytest.mark.parametrize(
    ("measure", "at_least"), [("assurance", 0.6), ("expected_power", 0.8), ("power_at_planning_value", 0.9)]
)
def test_continuous_designs_equal_every_n(design: Design, measure: str, at_least: float) -> None:
    made = study(
        design, Normal(mean=0.8, sd=0.6), favourable="higher", null=0.0, planning_value=0.9,
        target=Target(measure=measure, at_least=at_least),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == every_n(made, 160)


def test_no_n_is_claimed_above_the_ceiling() -> None:
    made = study(
        two_means(10), Normal(mean=0.2, sd=0.2), favourable="higher", target=Target(at_least=0.9, max_n=20_000)
    )
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n, found.achieved) == (None, None, None)
    assert found.ceiling == pytest.approx(stats.norm.cdf(1.0), abs=1e-9)


def test_a_target_on_an_upper_bound_is_met_from_the_first_n() -> None:
    made = study(
        Estimate(n=10, unit_sd=Point(value=1.0)), Point(value=0.2), planning_value=0.2,
        target=Target(measure="exaggeration_at_planning_value", at_most=1.2),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert found.first_n is not None
    at = measured(made, [found.first_n - 1, found.first_n], "exaggeration_at_planning_value", 1e-6)
    assert at[0] > 1.2 >= at[1]
