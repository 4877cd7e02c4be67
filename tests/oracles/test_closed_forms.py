"""Quantities against closed forms and adaptive quadrature by scipy."""

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, optimize, special, stats
from studies import TWO_SIDED, answer, cell, estimate_with, study, two_means, value

from bayesdesign.design import OneProportion, TwoProportions
from bayesdesign.interpret import interpret
from bayesdesign.joint.integration import set_up
from bayesdesign.joint.power import power_quantiles
from bayesdesign.prior import Beta, Normal, Point
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior

TIGHT = 1e-9
SETTINGS = [
    (0.3, 0.2, 0.14),
    (0.0, 1.0, 0.3),
    (-0.2, 0.05, 0.4),
    (5.0, 3.0, 0.01),
    (-0.1, 1e-3, 0.05),
    (0.2, 40.0, 0.5),
]


def integral(function: Callable[[float], float], points: list[float]) -> float:
    """Adaptive integral between the first and the last of these points, in pieces."""
    ends = sorted(points)
    return float(
        sum(integrate.quad(function, a, b, epsabs=1e-14, epsrel=1e-12, limit=200)[0] for a, b in pairwise(ends))
    )


def grid(mean: float, sd: float, *more: float) -> list[float]:
    return [*(mean + sd * k for k in (-12, -8, -5, -3, -1.5, 0, 1.5, 3, 5, 8, 12)), *more]


@pytest.mark.parametrize(("mean", "sd", "se"), SETTINGS)
@pytest.mark.parametrize("alpha", [0.2, 0.05, 1e-4])
def test_normal_prior_and_z_test(mean: float, sd: float, se: float, alpha: float) -> None:
    given = answer(study(estimate_with(se), Normal(mean=mean, sd=sd), Significance(alpha=alpha)))
    spread, z = math.hypot(sd, se), special.ndtri(1 - alpha / 2)
    both = ("lower", "higher")
    assert cell(given, both, "reject_higher") == pytest.approx(special.ndtr((mean - z * se) / spread), abs=TIGHT)
    assert cell(given, both, "reject_lower") == pytest.approx(special.ndtr((-mean - z * se) / spread), abs=TIGHT)
    one = value(
        study(estimate_with(se), Normal(mean=mean, sd=sd), Significance(alpha=alpha, sides="lower")), "assurance"
    )
    assert one == pytest.approx(special.ndtr((-mean - special.ndtri(1 - alpha) * se) / spread), abs=TIGHT)


@pytest.mark.parametrize(
    ("n", "d", "alpha", "spike"), [(5, 1.0, 0.05, 0.5), (64, 0.5, 0.01, 0.9), (200, -0.2, 0.1, 0.2)]
)
def test_point_null_or_point_effect_and_t_test(n: int, d: float, alpha: float, spike: float) -> None:
    given = answer(study(two_means(n), Point(value=d), Significance(alpha=alpha), spike=spike, favourable="either"))
    t, df, nc = stats.t.isf(alpha / 2, 2 * n - 2), 2 * n - 2, d * math.sqrt(n / 2)
    power = stats.nct.sf(t, df, nc) + stats.nct.cdf(-t, df, nc)
    claimed = spike * alpha + (1 - spike) * power
    expected = {
        "assurance": claimed,
        "type_1_rate": alpha,
        "average_power": power,
        "false_positive_risk": spike * alpha / claimed,
        "false_negative_risk": (1 - spike) * (1 - power) / (1 - claimed),
        "type_s_rate": min(stats.nct.sf(t, df, nc), stats.nct.cdf(-t, df, nc)) / power,
    }
    for name, figure in expected.items():
        assert given.quantities[name].value == pytest.approx(figure, abs=1e-8), name


@pytest.mark.parametrize(
    ("n", "a", "b", "null", "alpha"),
    [(40, 8.0, 12.0, 0.2, 0.05), (7, 0.5, 0.5, 0.5, 0.2), (300, 2.0, 90.0, 0.01, 0.01), (1, 1.0, 3.0, 0.4, 0.45)],
)
def test_beta_prior_and_binomial_test(n: int, a: float, b: float, null: float, alpha: float) -> None:
    critical = next(x for x in range(n + 2) if stats.binom.sf(x - 1, n, null) <= alpha)
    made = study(OneProportion(n=n), Beta(a=a, b=b), Significance(alpha=alpha, sides="higher"), null=null)
    assert value(made, "assurance") == pytest.approx(stats.betabinom.sf(critical - 1, n, a, b), abs=TIGHT)
    x = np.arange(critical, n + 1)
    right = sum(
        stats.betabinom.pmf(k, n, a, b) * stats.beta.sf(null, a + k, b + n - k) for k in x
    )  # P(count, share above the null)
    assert value(made, "assurance_true_effect") == pytest.approx(float(right), abs=TIGHT)


@pytest.mark.parametrize("signal", [0.1, 0.5, 1.0, 2.0, 5.0])
@pytest.mark.parametrize("alpha", [0.1, 0.005])
def test_sign_and_size_at_a_point(signal: float, alpha: float) -> None:
    quantities = answer(study(estimate_with(2.0), Point(value=2 * signal), Significance(alpha=alpha))).quantities
    z = special.ndtri(1 - alpha / 2)
    high, low = stats.truncnorm(z - signal, np.inf, signal), stats.truncnorm(-np.inf, -z - signal, signal)
    up, down = special.ndtr(signal - z), special.ndtr(-signal - z)
    assert quantities["type_s_rate"].value == pytest.approx(down / (up + down), abs=TIGHT)
    ratio = (up * high.mean() - down * low.mean()) / (up + down) / signal
    assert quantities["exaggeration_ratio"].value == pytest.approx(ratio, rel=1e-8)
    half = (up + down) / 2

    def excess(c: float) -> float:
        if c < z:
            return -float(half)
        inside = special.ndtr(c - signal) - special.ndtr(z - signal)
        return float(inside + special.ndtr(-z - signal) - special.ndtr(-c - signal) - half)

    median = optimize.brentq(excess, z, z + signal + 40, xtol=1e-14)
    assert quantities["exaggeration_median"].value == pytest.approx(median / signal, rel=1e-8)


@pytest.mark.parametrize(("mean", "sd", "se"), SETTINGS[:3])
def test_median_exaggeration_over_a_normal_prior(mean: float, sd: float, se: float) -> None:
    found = answer(study(estimate_with(se), Normal(mean=mean, sd=sd))).quantities["exaggeration_median"].value
    bound = special.ndtri(0.975) * se

    def share(theta: float, reach: float) -> float:
        """P(bound < |estimate| <= reach given theta)."""
        if reach <= bound:
            return 0.0
        two = special.ndtr((reach - theta) / se) - special.ndtr((bound - theta) / se)
        two += special.ndtr((-bound - theta) / se) - special.ndtr((-reach - theta) / se)
        return float(two * stats.norm.pdf(theta, mean, sd))

    def claimed_within(c: float) -> float:
        kinks = (bound / c, -bound / c, 0.0, bound, -bound)
        return integral(lambda theta: share(theta, c * abs(theta)), grid(mean, sd, *kinks))

    half = integral(lambda theta: share(theta, np.inf), grid(mean, sd, bound, -bound, 0.0)) / 2
    median = optimize.brentq(lambda c: claimed_within(c) - half, 0.5, 400.0, xtol=1e-12)
    assert found == pytest.approx(median, rel=1e-8)


@pytest.mark.parametrize("level", [0.05, 0.25, 0.5, 0.75, 0.95])
def test_quantiles_of_monotone_power(level: float) -> None:
    made = study(estimate_with(0.3), Normal(mean=0.3, sd=0.5), TWO_SIDED, favourable="higher")
    quantiles = answer(made).quantities["power_quantiles"].value
    assert isinstance(quantiles, dict)
    expected = special.ndtr((0.3 + 0.5 * special.ndtri(level)) / 0.3 - special.ndtri(0.975))
    assert quantiles[f"{level:g}"] == pytest.approx(expected, abs=TIGHT)


@pytest.mark.parametrize("level", [0.05, 0.25, 0.5, 0.75, 0.95])
def test_quantiles_of_power_that_falls_and_rises(level: float) -> None:
    # about a null in the middle of the prior, power depends on |effect|, whose quantiles are those of the half-normal
    # law
    made = study(estimate_with(0.3), Normal(mean=0.0, sd=0.5), TWO_SIDED, favourable="either")
    stated = answer(made).quantities["power_quantiles"]
    assert isinstance(stated.value, dict)
    assert isinstance(stated.error, dict)
    size = 0.5 * special.ndtri((1 + level) / 2) / 0.3
    z = special.ndtri(0.975)
    expected = special.ndtr(size - z) + special.ndtr(-size - z)
    key = f"{level:g}"
    assert abs(stated.value[key] - expected) <= stated.error[key] + 1e-11
    assert stated.value[key] == pytest.approx(expected, abs=1e-5)
    fine = power_quantiles(set_up(made, [None], 5), (level,))[0, 0]
    assert fine == pytest.approx(expected, abs=1e-7)


@pytest.mark.parametrize("decision", ["reject_higher", "reject_lower", "not_reject"])
@pytest.mark.parametrize("spike", [0.0, 0.4])
def test_posterior_after_a_decision(decision: str, spike: float) -> None:
    mean, sd, se = 0.3, 0.4, 0.25
    z = special.ndtri(0.975)

    def likelihood(theta: float) -> float:
        up, down = special.ndtr(theta / se - z), special.ndtr(-theta / se - z)
        return float({"reject_higher": up, "reject_lower": down, "not_reject": 1 - up - down}[decision])

    def over(function: Callable[[float], float], low: float = -9.0) -> float:
        ends = [max(low, p) for p in grid(mean, sd, 0.0, z * se, -z * se, 6.0)]
        return (1 - spike) * integral(lambda t: function(t) * likelihood(t) * stats.norm.pdf(t, mean, sd), ends)

    made = study(estimate_with(se), Normal(mean=mean, sd=sd), spike=spike, favourable="higher")
    after = interpret(made, decision=decision).posterior
    total = over(lambda _: 1.0) + spike * likelihood(0.0)
    first, second = over(lambda t: t) / total, over(lambda t: t * t) / total
    assert after.evidence == pytest.approx(total, abs=TIGHT)
    assert after.mean == pytest.approx(first, abs=1e-8)
    assert after.sd == pytest.approx(math.sqrt(second - first**2), abs=1e-8)
    assert after.above_null == pytest.approx(over(lambda _: 1.0, 0.0) / total, abs=1e-8)
    for rank, point in ((0.025, after.low), (0.5, after.median), (0.975, after.high)):
        beyond = over(lambda _: 1.0, point) / total + (spike * likelihood(0.0) / total if point < 0 else 0.0)
        if spike and abs(point) < 1e-9:  # the quantile lies in the point mass
            assert 1 - beyond - spike * likelihood(0.0) / total <= rank + 1e-9
            assert 1 - beyond >= rank - 1e-9
        else:
            assert 1 - beyond == pytest.approx(rank, abs=1e-8)


@pytest.mark.parametrize(("estimate", "error"), [(0.5, 0.1), (-0.4, 0.3), (0.0, 2.0), (2.0, 0.05)])
def test_posterior_after_an_estimate_is_conjugate(estimate: float, error: float) -> None:
    after = interpret(
        study(estimate_with(0.2), Normal(mean=0.3, sd=0.4)), estimate=estimate, se=error, mass=0.9
    ).posterior
    precision = 1 / 0.4**2 + 1 / error**2
    law = stats.norm((0.3 / 0.4**2 + estimate / error**2) / precision, precision**-0.5)
    assert [after.mean, after.sd] == pytest.approx([law.mean(), law.std()], abs=1e-8)
    assert [after.low, after.median, after.high] == pytest.approx(list(law.ppf([0.05, 0.5, 0.95])), abs=1e-8)
    assert after.above_null == pytest.approx(law.sf(0.0), abs=1e-8)
    assert after.evidence == pytest.approx(stats.norm.pdf(estimate, 0.3, math.hypot(0.4, error)), rel=1e-8)


@pytest.mark.parametrize("p", [0.3, 0.04, 0.001])
@pytest.mark.parametrize("side", ["higher", "lower"])
def test_posterior_after_a_one_sided_p_value_is_that_of_its_statistic(p: float, side: str) -> None:
    rule = Significance(alpha=0.05, sides=side)  # type: ignore[arg-type]
    made = study(estimate_with(0.2), Normal(mean=0.3, sd=0.4), rule)
    by_p = interpret(made, p_value=p).posterior
    sign = 1 if side == "higher" else -1
    by_estimate = interpret(made, estimate=sign * 0.2 * float(stats.norm.isf(p)), se=0.2).posterior
    for name in ("mean", "sd", "median", "low", "high", "above_null"):
        assert getattr(by_p, name) == pytest.approx(getattr(by_estimate, name), abs=2e-8), name


def test_posterior_after_a_two_sided_p_value_weighs_both_signs() -> None:
    made = study(estimate_with(0.2), Normal(mean=0.05, sd=0.1))
    after = interpret(made, p_value=0.2).posterior
    x = 0.2 * float(stats.norm.isf(0.1))
    spread, precision = math.hypot(0.1, 0.2), 1 / 0.1**2 + 1 / 0.2**2
    weights = stats.norm.pdf([x, -x], 0.05, spread)
    means = (0.05 / 0.1**2 + np.array([x, -x]) / 0.2**2) / precision
    above = stats.norm.sf(0.0, means, precision**-0.5)
    assert after.mean == pytest.approx(float(weights @ means / weights.sum()), abs=1e-8)
    assert after.above_null == pytest.approx(float(weights @ above / weights.sum()), abs=1e-8)


def test_two_sided_ceiling_with_a_spike() -> None:
    made = study(estimate_with(0.2), Normal(mean=0.05, sd=0.1), spike=0.3, favourable="higher")
    expected = 0.7 * stats.norm.sf(0, 0.05, 0.1) + 0.3 * 0.025
    assert value(made, "assurance_ceiling") == pytest.approx(expected, abs=TIGHT)
    assert made.effect == Effect(favourable="higher")


@pytest.mark.parametrize(
    ("treatment", "control", "n"),
    [
        ((12.0, 8.0), (8.0, 12.0), 20),
        ((2.0, 2.0), (8.0, 12.0), 100),
        ((2.0, 2.0), (2.0, 2.0), 20),
        ((2.0, 2.0), (2.0, 2.0), 100),
        ((1.0, 1.0), (1.0, 1.0), 50),
    ],
)
def test_beta_beliefs_about_both_arms_equal_beta_binomial_sums(
    treatment: tuple[float, float], control: tuple[float, float], n: int
) -> None:
    made = study(
        TwoProportions(n_per_group=n, control=Beta(a=control[0], b=control[1])),
        Prior(treatment=Beta(a=treatment[0], b=treatment[1])),
        Significance(alpha=0.025, sides="higher"),
    )
    x, y = np.meshgrid(np.arange(n + 1), np.arange(n + 1), indexing="ij")
    pooled = (x + y) / (2 * n)
    with np.errstate(divide="ignore", invalid="ignore"):
        z = np.where(x == y, 0.0, (x - y) / n / np.sqrt(pooled * (1 - pooled) * 2 / n))
    weight = stats.betabinom.pmf(x, n, *treatment) * stats.betabinom.pmf(y, n, *control)
    assert value(made, "assurance") == pytest.approx(float(weight[z >= special.ndtri(0.975)].sum()), abs=1e-7)
