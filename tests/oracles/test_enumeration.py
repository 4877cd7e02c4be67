"""Count designs against plain enumeration of every outcome."""

from typing import Any

import numpy as np
import pytest
from scipy import stats
from studies import study

from bayesdesign.design import Design, OneProportion, TwoProportions
from bayesdesign.design.base import Accuracy
from bayesdesign.design.two_counts import TwoCounts
from bayesdesign.joint.integration import integrate
from bayesdesign.prior import Point
from bayesdesign.rule import Significance

from .enumerate_counts import Sums, binomial_test, one_sample, p_values, score_test, two_samples

EXACT = 1e-10
ROUGH = Accuracy(effect=8, nuisance=8, auxiliary=8, finest_level=0.001)


def by_program(design: Design, effect: float, rule: Significance, **question: Any) -> Sums:
    """The same sums from the joint table of a study whose effect is known."""
    table = integrate(study(design, Point(value=effect), rule, **question), [design.planned_n], 1)
    at = int(np.argmax(table.weight[0]))
    found = dict.fromkeys(("reject_higher", "reject_lower"), (0.0, 0.0))
    for d, name in enumerate(table.decisions):
        found[name] = float(table.probability[0, at, d]), float(table.absolute[0, at, d])
    (higher, size_higher), (lower, size_lower) = found["reject_higher"], found["reject_lower"]
    return Sums(higher, lower, size_higher, size_lower)


def same(found: Sums, expected: Sums) -> None:
    for name in ("higher", "lower", "size_higher", "size_lower"):
        assert getattr(found, name) == pytest.approx(getattr(expected, name), abs=EXACT), name


@pytest.mark.parametrize("n", [1, 2, 7, 25, 60])
@pytest.mark.parametrize(("null", "share"), [(0.2, 0.45), (0.5, 0.5), (0.07, 0.01), (0.9, 0.99)])
@pytest.mark.parametrize("alpha", [0.2, 0.05, 0.001])
def test_one_proportion_equals_enumeration(n: int, null: float, share: float, alpha: float) -> None:
    for sides in ("two", "higher", "lower"):
        rule = Significance(alpha=alpha, sides=sides)
        exact = by_program(OneProportion(n=n), share, rule, null=null)
        same(exact, one_sample(n, share, null, binomial_test(n, null, alpha, sides, "central")))
        by_z = by_program(OneProportion(n=n, analysis="z"), share, rule, null=null)
        same(by_z, one_sample(n, share, null, score_test(n, null, alpha, sides)))
    least_likely = Significance(alpha=alpha, tails="minimum_likelihood")
    found = by_program(OneProportion(n=n), share, least_likely, null=null)
    same(found, one_sample(n, share, null, binomial_test(n, null, alpha, "two", "minimum_likelihood")))


TABLES = [(1, 1, 0.4, 0.7), (5, 9, 0.2, 0.6), (12, 12, 0.5, 0.5), (20, 11, 0.05, 0.02), (16, 24, 0.95, 0.6)]


def effect_on(scale: str, p: float, q: float) -> float:
    return {"difference": p - q, "ratio": p / q, "odds_ratio": p / (1 - p) * (1 - q) / q}[scale]


@pytest.mark.parametrize(("n", "m", "p", "q"), TABLES)
@pytest.mark.parametrize("analysis", ["z", "z_unpooled", "exact"])
@pytest.mark.parametrize("scale", ["difference", "ratio", "odds_ratio"])
def test_two_proportions_equal_enumeration(n: int, m: int, p: float, q: float, analysis: Any, scale: Any) -> None:
    design = TwoProportions(n_treatment=n, n_control=m, control=Point(value=q), analysis=analysis, scale=scale)
    effect = effect_on(scale, p, q)
    for sides, alpha in (("two", 0.05), ("higher", 0.1), ("lower", 0.02)):
        found = by_program(design, effect, Significance(alpha=alpha, sides=sides))  # type: ignore[arg-type]
        same(found, two_samples(n, m, (p, q), alpha, sides, analysis, scale))
    if analysis == "exact" and scale == "difference":
        rule = Significance(alpha=0.05, tails="minimum_likelihood")
        same(
            by_program(design, effect, rule),
            two_samples(n, m, (p, q), 0.05, "two", analysis, scale, "minimum_likelihood"),
        )


def outcomes_of(n: int, m: int, analysis: Any) -> TwoCounts:
    design = TwoProportions(n_treatment=n, n_control=m, control=Point(value=0.5), analysis=analysis)
    return design.outcomes(np.array([float(n)]), {"control": np.array([0.5])}, 0.0, ROUGH)


def rejected_by_hand(n: int, m: int, analysis: str, level: float, *, higher: bool) -> np.ndarray:
    """Mask (n + 1, m + 1) of the one-sided test, every table on its own."""
    x, y = np.meshgrid(np.arange(n + 1), np.arange(m + 1), indexing="ij")
    if analysis == "exact":
        law = stats.hypergeom(n + m, n, x + y)
        p = law.sf(x - 1) if higher else law.cdf(x)
        return np.asarray(p <= level * (1 + 1e-10))
    gap, pooled = x / n - y / m, (x + y) / (n + m)
    variance = (
        pooled * (1 - pooled) * (1 / n + 1 / m)
        if analysis == "z"
        else x / n * (1 - x / n) / n + y / m * (1 - y / m) / m
    )
    with np.errstate(divide="ignore", invalid="ignore"):
        z = np.where(np.abs(gap) < 1e-15, 0.0, gap / np.sqrt(variance))
    critical = stats.norm.isf(level)
    return np.asarray((z if higher else -z) >= critical * (1 - 1e-10))


def region_equals_enumeration(n: int, m: int, analysis: str, level: float) -> None:
    x = np.arange(n + 1)[:, None]
    for side in ("higher", "lower"):
        region = outcomes_of(n, m, analysis).test(0.0, level, side)
        found = (region.lower[0, 0, 0] < x) & (x < region.upper[0, 0, 0])
        by_hand = rejected_by_hand(n, m, analysis, level, higher=side == "higher")
        assert np.array_equal(found, by_hand), (n, m, analysis, level, side)
        # rejection is monotone in the treated count, which the bisection relies on
        steps = np.diff(by_hand.astype(int), axis=0)
        assert (steps >= 0).all() if side == "higher" else (steps <= 0).all()


LEVELS = (0.2, 0.1, 0.05, 0.025, 0.01, 0.001)


@pytest.mark.parametrize("analysis", ["z", "z_unpooled", "exact"])
def test_regions_found_by_bisection_equal_full_enumeration(analysis: str) -> None:
    for n, m in ((1, 1), (1, 40), (40, 1), (3, 2), (8, 8), (13, 29), (29, 13), (40, 40)):
        for level in LEVELS:
            region_equals_enumeration(n, m, analysis, level)


@pytest.mark.slow
@pytest.mark.parametrize("analysis", ["z", "z_unpooled", "exact"])
def test_regions_found_by_bisection_equal_full_enumeration_at_every_size(analysis: str) -> None:
    for n in range(1, 41):
        for m in range(1, 41):
            for level in LEVELS:
                region_equals_enumeration(n, m, analysis, level)


def test_the_hand_written_p_values_agree_with_the_masks() -> None:
    mask = rejected_by_hand(9, 6, "exact", 0.1, higher=True)
    for x in range(10):
        for y in range(7):
            assert (p_values(x, 9, y, 6, "exact", "central")[0] <= 0.1) == mask[x, y]
