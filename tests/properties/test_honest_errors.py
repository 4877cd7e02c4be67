"""Stated errors are at least the distance from a finer computation, and extreme beliefs do not break anything."""

import math
from collections.abc import Callable
from itertools import pairwise

import pytest
from hypothesis import assume, given, settings
from scipy import integrate, special, stats
from strategies import line_studies, one_proportion_studies, two_proportion_studies
from studies import answer, estimate_with, study, two_means, value

from bayesdesign.core.errors import Refused
from bayesdesign.design import OneProportion
from bayesdesign.joint.integration import LEVELS, set_up
from bayesdesign.joint.integration import integrate as table_of
from bayesdesign.joint.numbers import POWER_LEVELS
from bayesdesign.joint.power import power_quantiles
from bayesdesign.joint.table import cells
from bayesdesign.measures.ratios import readings
from bayesdesign.prior import (
    Beta,
    Cauchy,
    Distribution,
    Histogram,
    Lognormal,
    Mixture,
    Normal,
    Point,
    StudentT,
    Truncated,
)
from bayesdesign.rule import Significance
from bayesdesign.study.study import Study

few = settings(deadline=None, max_examples=15, derandomize=True)
many = settings(deadline=None, max_examples=150, derandomize=True)
DEEPEST = len(LEVELS) - 1
SLACK = 1e-12  # rounding of the reference itself, relative to the probability of the reading's condition


def check_ratios(made: Study) -> None:
    """Every ratio reading against the deepest level of refinement."""
    try:
        found = answer(made)
    except Refused:
        assume(False)
        raise
    deepest = readings(cells(table_of(made, [made.design.planned_n], DEEPEST)), made)
    for name, ratio in deepest.items():
        quantity = found.quantities[name]
        if quantity.value is None:
            continue
        reference, weight = float(ratio.value[0, 0]), float(ratio.denominator[0, 0])
        assert isinstance(quantity.value, float)
        assert isinstance(quantity.error, float)
        slack = SLACK * max(1.0, abs(reference)) / min(1.0, weight)
        assert abs(quantity.value - reference) <= quantity.error + slack, (name, quantity, reference)


@few
@given(line_studies())
def test_errors_of_normal_designs_cover_the_deepest_level(made: Study) -> None:
    check_ratios(made)


@few
@given(one_proportion_studies())
def test_errors_of_one_proportion_cover_the_deepest_level(made: Study) -> None:
    check_ratios(made)


@settings(deadline=None, max_examples=6, derandomize=True)
@given(two_proportion_studies())
def test_errors_of_two_proportions_cover_the_deepest_level(made: Study) -> None:
    check_ratios(made)


@pytest.mark.slow
@many
@given(line_studies())
def test_errors_of_normal_designs_cover_the_deepest_level_often(made: Study) -> None:
    check_ratios(made)


@pytest.mark.slow
@settings(deadline=None, max_examples=12, derandomize=True)
@given(line_studies(uncertain=True, welch=True))
def test_errors_of_uncertain_sds_cover_the_deepest_level(made: Study) -> None:
    check_ratios(made)


@pytest.mark.slow
@many
@given(one_proportion_studies(most=300))
def test_errors_of_one_proportion_cover_the_deepest_level_often(made: Study) -> None:
    check_ratios(made)


@pytest.mark.slow
@settings(deadline=None, max_examples=40, derandomize=True)
@given(two_proportion_studies(most=60))
def test_errors_of_two_proportions_cover_the_deepest_level_often(made: Study) -> None:
    check_ratios(made)


@few
@given(line_studies())
def test_errors_of_power_quantiles_cover_a_finer_grid(made: Study) -> None:
    try:
        stated = answer(made).quantities["power_quantiles"]
    except Refused:
        assume(False)
        raise
    assert isinstance(stated.value, dict)
    assert isinstance(stated.error, dict)
    fine = power_quantiles(set_up(made, [made.design.planned_n], DEEPEST), POWER_LEVELS)[0]
    for level, reference in zip(POWER_LEVELS, fine, strict=True):
        key = f"{level:g}"
        assert abs(stated.value[key] - reference) <= stated.error[key] + 1e-11, (key, stated, reference)


Z = special.ndtri(0.975)


def over(density: Callable[[float], float], points: list[float], se: float) -> float:
    """Two-sided power at 5% averaged over a density, by adaptive quadrature between these points."""

    def integrand(x: float) -> float:
        return float(special.ndtr(x / se - Z) + special.ndtr(-x / se - Z)) * density(x)

    ends = sorted({*points, *(k * se for k in (-12, -6, -Z, 0, Z, 6, 12) if points[0] < k * se < points[-1])})
    return float(sum(integrate.quad(integrand, a, b, epsabs=1e-13, limit=300)[0] for a, b in pairwise(ends)))


def power_at(effect: float, se: float) -> float:
    return float(special.ndtr(effect / se - Z) + special.ndtr(-effect / se - Z))


def normal_assurance(mean: float, sd: float, se: float) -> float:
    spread = math.hypot(sd, se)
    return float(special.ndtr((mean - Z * se) / spread) + special.ndtr((-mean - Z * se) / spread))


T = stats.t(2.2, 0.1, 0.5)
C = stats.cauchy(0.0, 0.7)
L = stats.lognorm(2.0, scale=0.05)
SE = 0.3
AROUND = [-1e3, -50.0, -5.0, 5.0, 50.0, 1e3]
EXTREME: dict[str, tuple[Distribution, float, float]] = {  # belief, standard error, assurance
    "narrow": (Normal(mean=0.4, sd=1e-7), 0.2, power_at(0.4, 0.2)),
    "wide": (Normal(mean=0.0, sd=1e6), 0.2, normal_assurance(0.0, 1e6, 0.2)),
    "far": (Normal(mean=1e5, sd=1.0), 0.2, 1.0),
    "precise study": (Normal(mean=0.1, sd=0.2), 1e-8, normal_assurance(0.1, 0.2, 1e-8)),
    "useless study": (Normal(mean=0.1, sd=0.2), 1e6, 0.05),
    "cauchy": (Cauchy(location=0.0, scale=0.7), SE, over(C.pdf, AROUND, SE) + 2 * C.sf(1e3)),
    "heavy t": (StudentT(df=2.2, location=0.1, scale=0.5), SE, over(T.pdf, AROUND, SE) + T.sf(1e3) + T.cdf(-1e3)),
    "histogram": (
        Histogram(edges=(-1.0, 0.1, 0.1001, 2.0), weights=(1.0, 5.0, 0.0)),
        SE,
        (over(lambda _: 1 / 1.1, [-1.0, 0.1], SE) + 5 * over(lambda _: 1e4, [0.1, 0.1001], SE)) / 6,
    ),
    "tail": (
        Truncated(base=Normal(mean=0.0, sd=0.1), low=0.6, high=math.inf),
        SE,
        over(lambda x: float(stats.norm.pdf(x, 0, 0.1) / stats.norm.sf(6)), [0.6, 0.7, 1.0, 2.0], SE),
    ),
    "points": (
        Mixture(components=(Point(value=-0.5), Point(value=0.0), Normal(mean=0.3, sd=0.1)), weights=(0.2, 0.3, 0.5)),
        SE,
        0.2 * power_at(-0.5, SE) + 0.3 * 0.05 + 0.5 * normal_assurance(0.3, 0.1, SE),
    ),
    "skewed": (
        Lognormal(median=0.05, log_sd=2.0),
        SE,
        over(L.pdf, [1e-9, 1e-4, 1e-2, 0.1, 1.0, 10.0, 1e3], SE) + L.sf(1e3) + 0.05 * L.cdf(1e-9),
    ),
}


@pytest.mark.parametrize(("belief", "se", "expected"), EXTREME.values(), ids=EXTREME)
def test_extreme_beliefs_keep_their_digits(belief: Distribution, se: float, expected: float) -> None:
    given_ = answer(study(estimate_with(se), belief, null=0.0))
    found = given_.quantities["assurance"]
    assert isinstance(found.error, float)
    assert found.error < 1e-7
    assert found.value == pytest.approx(expected, abs=found.error + 1e-9)


def test_a_belief_about_a_share_may_be_infinite_at_its_ends() -> None:
    made = study(OneProportion(n=30), Beta(a=0.05, b=0.05), Significance(sides="higher"), null=0.5)
    critical = next(x for x in range(32) if stats.binom.sf(x - 1, 30, 0.5) <= 0.05)
    assert value(made, "assurance") == pytest.approx(stats.betabinom.sf(critical - 1, 30, 0.05, 0.05), abs=1e-8)


def test_without_a_mean_the_ratio_of_means_is_withheld_and_the_median_given() -> None:
    quantities = answer(study(two_means(20), Cauchy(location=0.0, scale=0.7), null=0.0)).quantities
    assert quantities["exaggeration_ratio"].value is None
    median = quantities["exaggeration_median"].value
    assert isinstance(median, float)
    assert 1.0 < median < 2.0


@pytest.mark.parametrize(("mean", "spike", "relevant"), [(4.0, 0.0, 1.0), (2.0, 1e-8, None)])
def test_a_reading_under_a_rare_condition_does_not_refuse_the_study(
    mean: float, spike: float, relevant: float | None
) -> None:
    made = study(estimate_with(0.5), Normal(mean=mean, sd=0.1), spike=spike, null=0.0, smallest_relevant=relevant)
    expected = special.ndtr((mean - Z * 0.5) / math.hypot(0.5, 0.1))
    assert value(made, "assurance") == pytest.approx(expected, abs=1e-7)
