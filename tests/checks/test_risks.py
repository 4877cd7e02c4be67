"""What a decision or a p-value is worth: decision tables, false-positive risks, Bayes factors as posterior odds."""

import math

import pytest
from scipy import optimize, stats
from studies import ONE_SIDED, after_count, answer, cell, estimate_with, study, two_means

from bayesdesign.interpret import interpret
from bayesdesign.prior import Beta, Distribution, Mixture, Normal, Point
from bayesdesign.rule import Significance


def odds(p: float) -> float:
    return p / (1 - p)


def test_four_cells_of_a_test_with_a_margin() -> None:
    # Bivariate normal orthants
    given = answer(study(estimate_with(0.09), Normal(mean=0.15, sd=0.2), ONE_SIDED, smallest_relevant=0.1))
    rest = ("lower", "negligible")
    assert cell(given, ["higher"], "reject_higher") == pytest.approx(0.434533827, abs=2e-5)
    assert cell(given, rest, "reject_higher") == pytest.approx(0.01756561304, abs=2e-5)
    assert cell(given, ["higher"], "not_reject") == pytest.approx(0.1641724987, abs=2e-5)
    assert cell(given, rest, "not_reject") == pytest.approx(0.3837280613, abs=2e-5)
    column = [row[1] for row in given.table.given_decision]
    assert column[given.table.states.index("higher")] == pytest.approx(0.2996392242, abs=2e-5)


def test_four_cells_of_a_test_with_a_point_null() -> None:
    # Mixture of normal predictives
    given = answer(study(estimate_with(0.15), Normal(mean=0.4, sd=0.2), spike=0.7, favourable="higher"))
    effect = ("lower", "higher")
    rejected = [
        cell(given, states, "reject_higher") + cell(given, states, "reject_lower") for states in (effect, ["null"])
    ]
    assert rejected == pytest.approx([0.2000930299, 0.035], abs=1e-8)
    assert cell(given, effect, "not_reject") == pytest.approx(0.09990697009, abs=1e-8)
    assert cell(given, ["null"], "not_reject") == pytest.approx(0.665, abs=1e-8)
    assert given.quantities["false_negative_risk"].value == pytest.approx(0.1306132301, abs=1e-8)


def test_false_discoveries_of_the_tree_diagram() -> None:
    # Colquhoun, Royal Society Open Science 2014, tree diagram (45 of 125; the misses 20 of 875 follow from the same
    # counts)
    z = stats.norm.isf(0.025)
    effect = optimize.brentq(lambda t: stats.norm.sf(z - t) + stats.norm.cdf(-z - t) - 0.8, 2.0, 4.0, xtol=1e-14)
    given = answer(study(estimate_with(1.0), Point(value=effect), spike=0.9))
    assert given.quantities["average_power"].value == pytest.approx(0.8, abs=1e-12)
    assert given.quantities["false_positive_risk"].value == pytest.approx(0.36, abs=1e-9)
    assert given.quantities["false_negative_risk"].value == pytest.approx(0.022857142857142857, abs=1e-9)


@pytest.mark.parametrize(("alpha", "printed"), [(0.05, 0.33), (0.005, 0.05)])
def test_false_positive_share_at_prior_odds_of_one_to_ten(alpha: float, printed: float) -> None:
    # Benjamin et al., Redefine statistical significance, Nature Human Behaviour 2018, power 1 (from memory)
    given = answer(study(estimate_with(1.0), Point(value=40.0), Significance(alpha=alpha), spike=10 / 11))
    assert given.quantities["false_positive_risk"].value == pytest.approx(printed, abs=0.005)


def test_false_positive_risk_of_p_exactly_005() -> None:
    # Colquhoun, Royal Society Open Science 2017, 26-27% (from memory)
    after = interpret(study(two_means(16), Point(value=1.0), spike=0.5), p_value="0.05").posterior
    assert odds(after.above_null) == pytest.approx(2.76, abs=0.005)
    assert after.states["null"] == pytest.approx(0.27, abs=0.005)
    before = study(two_means(16), Point(value=1.0), spike=1 - 0.87)
    assert interpret(before, p_value="0.05").posterior.states["null"] == pytest.approx(0.05, abs=0.005)


def test_false_positive_risk_of_p_exactly_005_with_a_tenth_of_effects_real() -> None:
    # Bayes rule with the noncentral t density ratio (setting of Colquhoun 2017, who prints 76%). The ratio there is
    # the density at one sign over that at both, so the side known here needs half the prior odds.
    made = study(two_means(16), Point(value=1.0), spike=18 / 19)
    after = interpret(made, p_value="0.05", decision="reject_higher").posterior
    assert after.states["null"] == pytest.approx(0.7655365008, abs=1e-8)
    assert odds(after.above_null) * 9 == pytest.approx(2.75646098, abs=3e-8)


def after_z(z: float, alternative: Distribution, n: float = 1.0) -> float:
    """Posterior probability of the null after z, from an even start; `alternative` in units of one observation's sd."""
    se = 1 / math.sqrt(n)
    return interpret(study(estimate_with(se), alternative, spike=0.5), estimate=z * se, se=se).posterior.states["null"]


@pytest.mark.parametrize(
    ("p", "bound", "bound_tolerance", "posterior", "posterior_tolerance"),
    [(0.05, 0.15, 0.005, 0.13, 0.005), (0.01, 0.036, 0.0005, 0.035, 0.0005)],
)
def test_minimum_bayes_factor(
    p: float, bound: float, bound_tolerance: float, posterior: float, posterior_tolerance: float
) -> None:
    # Goodman, Annals of Internal Medicine 1999, table 2: all of the alternative at the estimate (from memory)
    z = stats.norm.isf(p / 2)
    null = after_z(z, Point(value=z))
    assert null == pytest.approx(posterior, abs=posterior_tolerance)
    assert odds(null) == pytest.approx(bound, abs=bound_tolerance)


@pytest.mark.parametrize(("p", "printed", "tolerance"), [(0.05, 3.4, 0.05), (0.005, 25.7, 0.06)])
def test_bayes_factor_of_two_points_at_the_observed_z(p: float, printed: float, tolerance: float) -> None:
    # Benjamin et al. 2018, upper ends of the ranges 2.5 to 3.4 and 13.9 to 25.7 (from memory)
    z = float(stats.norm.isf(p / 2))
    points = Mixture(components=(Point(value=z), Point(value=-z)), weights=(0.5, 0.5))
    assert 1 / odds(after_z(z, points)) == pytest.approx(printed, abs=tolerance)


@pytest.mark.parametrize(
    ("n", "printed"), [(1, 0.35), (5, 0.33), (10, 0.37), (20, 0.42), (50, 0.52), (100, 0.6), (1000, 0.82)]
)
def test_a_point_null_gains_from_n_at_fixed_p(n: int, printed: float) -> None:
    # Berger & Sellke, JASA 1987, table 1, p = 0.05 (from memory)
    assert after_z(stats.norm.isf(0.025), Normal(mean=0.0, sd=1.0), n) == pytest.approx(printed, abs=0.005)


def test_bayes_factor_of_a_unit_information_prior() -> None:
    # sqrt(1 + n) exp(-z^2 n / (2 (n + 1)))
    assert odds(after_z(2.5, Normal(mean=0.0, sd=1.0), 100)) == pytest.approx(0.4554364234, abs=1e-9)


FLAT = Beta(a=1.0, b=1.0)


@pytest.mark.parametrize(
    ("x", "n", "printed", "tolerance"),
    [
        (9, 10, 0.107, 0.0005),  # Wagenmakers, Lodewyckx, Kuriyal & Grasman, Cognitive Psychology 2010 (from memory)
        (115, 200, 1.197, 0.0006),  # Standard encyclopedia example of a Bayes factor, about 1.2 (from memory)
    ],
)
def test_bayes_factor_for_a_fair_coin(x: int, n: int, printed: float, tolerance: float) -> None:
    after = after_count(x, n, 0.5, FLAT, spike=0.5)
    assert odds(after.states["null"]) == pytest.approx(printed, abs=tolerance)


def test_marginal_likelihoods_of_115_of_200() -> None:
    # Standard encyclopedia example of a Bayes factor (from memory)
    fair = after_count(115, 200, 0.5, FLAT, spike=1.0).evidence
    biased = after_count(115, 200, 0.5, FLAT).evidence
    assert [fair, biased] == pytest.approx([0.005956, 0.004975], abs=5e-7)


def test_bayes_factor_for_bias_of_the_euro() -> None:
    # MacKay, Information Theory, Inference and Learning Algorithms 2003 (data seen, ratio from memory)
    after = after_count(140, 250, 0.5, FLAT, spike=0.5)
    assert 1 / odds(after.states["null"]) == pytest.approx(0.48, abs=0.005)


def test_lindley_paradox_of_births() -> None:
    # Standard illustration of Lindley's paradox (values seen: 1.951e-4, 1.0157e-5, 0.9505)
    assert after_count(49581, 98451, 0.5, FLAT, spike=0.5).states["null"] == pytest.approx(0.95, abs=0.005)
    assert after_count(49581, 98451, 0.5, FLAT, spike=1.0).evidence == pytest.approx(0.000195, abs=6e-7)
    assert after_count(49581, 98451, 0.5, FLAT).evidence == pytest.approx(1.02e-5, abs=6e-8)


def test_posterior_of_the_share_of_sleepers() -> None:
    # Albert, Bayesian Computation with R, 2nd ed. 2009, section 2.4 (from memory)
    after = after_count(11, 27, 0.5, Beta(a=3.26, b=7.19), mass=0.9)
    assert [after.low, after.high] == pytest.approx([0.2555267, 0.5133608], abs=0.0001)
    assert after.below_null == pytest.approx(0.931, abs=0.0002)


def test_posterior_of_girls_after_placenta_praevia() -> None:
    # Gelman et al., Bayesian Data Analysis 3rd ed. 2013, section 2.4 (from memory)
    after = after_count(437, 980, 0.485, FLAT)
    figures = [after.mean, after.sd, after.low, after.high]
    assert figures == pytest.approx([0.446, 0.016, 0.415, 0.477], abs=0.0005)


def test_rule_of_succession() -> None:
    # (s + 1) / (n + 2)
    assert after_count(9, 10, 0.5, FLAT).mean == pytest.approx(0.8333333333, abs=1e-9)


def test_update_of_a_robust_mixture() -> None:
    # Conjugate mixture update (Schmidli et al., Biometrics 2014)
    mixture = Mixture(components=(Beta(a=11.0, b=32.0), FLAT), weights=(0.8, 0.2))
    assert after_count(9, 12, 0.5, mixture).mean == pytest.approx(0.68717236, abs=1e-8)
