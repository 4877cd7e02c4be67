"""Atoms, moments and words of mixtures, histograms and truncations."""

import math

import mpmath
import numpy as np
import pytest
from scipy import stats

from bayesdesign.prior import (
    Beta,
    Cauchy,
    Exponential,
    Histogram,
    Lognormal,
    Mixture,
    Normal,
    Point,
    StudentT,
    Truncated,
    Uniform,
)

from .examples import SPIKE


def test_atoms_of_nested_mixtures_are_merged() -> None:
    values, masses = SPIKE.atoms()
    assert values.tolist() == [0.0]
    assert masses == pytest.approx([0.2 + 0.3 * 0.5], abs=1e-15)
    assert float(SPIKE.cdf(np.asarray(0.0)) - SPIKE.cdf(np.asarray(-1e-300))) == pytest.approx(
        0.35, abs=1e-15
    )


def test_truncation_keeps_atoms_inside_and_on_its_ends() -> None:
    three = Mixture(
        components=(Point(value=-1.0), Point(value=0.0), Point(value=1.0), Uniform(low=-2.0, high=2.0)),
        weights=(0.2, 0.2, 0.2, 0.4),
    )
    cut = Truncated(base=three, low=0.0, high=1.0)  # keeps 0.2 + 0.2 + 0.4 / 4
    assert cut.atoms()[0].tolist() == [0.0, 1.0]
    assert cut.atoms()[1] == pytest.approx([0.4, 0.4], abs=1e-15)
    assert cut.mass() == pytest.approx(0.5, abs=1e-15)
    assert cut.cdf(np.array([-1e-9, 0.0, 0.5, 0.999999999, 1.0])) == pytest.approx(
        [0, 0.4, 0.5, 0.6, 1], abs=1e-9
    )
    assert cut.expectation() == pytest.approx(0.4 + 0.2 * 0.5, abs=1e-14)


def test_mixture_moments() -> None:
    """Law of total variance."""
    mixed = Mixture(components=(Normal(mean=-1.0, sd=2.0), Exponential(rate=0.5)), weights=(0.25, 0.75))
    assert mixed.expectation() == pytest.approx(-0.25 + 1.5, abs=1e-15)
    assert mixed.deviation() ** 2 == pytest.approx(4 + 0.25 * 0.75 * 9, abs=1e-13)
    assert math.isnan(SPIKE.expectation())


def test_histogram_moments() -> None:
    """By hand: masses 0.2 on 0..1 and 0.8 on 1..3, so E x = 1.7 and E x^2 = 0.2 / 3 + 0.8 * 13 / 3."""
    table = Histogram(edges=(-1.0, 0.0, 1.0, 3.0, 4.0), weights=(0.0, 10.0, 40.0, 0.0))
    assert table.support == (0.0, 3.0)
    assert table.expectation() == pytest.approx(1.7, abs=1e-15)
    assert table.deviation() ** 2 == pytest.approx(10.6 / 3 - 1.7**2, abs=1e-14)


def test_histogram_with_an_empty_bin_skips_it() -> None:
    table = Histogram(edges=(0.0, 1.0, 2.0, 3.0), weights=(1.0, 0.0, 1.0))
    assert table.ppf(np.array([0.25, 0.5, 0.75])).tolist() == [0.5, 1.0, 2.5]
    assert table.pdf(np.array([0.5, 1.5, 2.5])).tolist() == [0.5, 0.0, 0.5]


@pytest.mark.parametrize(
    ("low", "high"), [(-1.0, 0.5), (2.0, math.inf), (-6.9, -6.0), (6.5, 9.0), (0.1, 0.1001)]
)
def test_truncated_normal_moments(low: float, high: float) -> None:
    """Oracle: adaptive quadrature in 40-digit arithmetic (mpmath)."""
    with mpmath.workdps(40):
        top = mpmath.mpf(min(high, 15.0))  # beyond lies less than 1e-45
        mass, first, second = (
            mpmath.quad(lambda x, k=k: x**k * mpmath.npdf(x), [low, top]) for k in (0, 1, 2)
        )
        mean = first / mass
        sd = mpmath.sqrt(second / mass - mean**2)
    cut = Truncated(base=Normal(mean=0.0, sd=1.0), low=low, high=high)
    assert cut.expectation() == pytest.approx(float(mean), rel=1e-12)
    assert cut.deviation() == pytest.approx(float(sd), rel=1e-11)


def test_truncated_power_tails_have_exact_moments() -> None:
    """Half of a t with n = 2.5: E|t| = 2 sqrt(n) / ((n - 1) B(n / 2, 1 / 2)), E t^2 = n / (n - 2)."""
    n = 2.5
    half = Truncated(base=StudentT(df=n, location=3.0, scale=1.0), low=3.0, high=math.inf)
    first = 2 * math.sqrt(n) / (n - 1) * math.gamma((n + 1) / 2) / (math.gamma(n / 2) * math.sqrt(math.pi))
    assert half.expectation() == pytest.approx(3 + first, rel=1e-12)
    assert half.deviation() == pytest.approx(math.sqrt(n / (n - 2) - first**2), rel=1e-10)
    assert math.isnan(Truncated(base=Cauchy(location=0.0, scale=1.0), low=0.0, high=math.inf).expectation())
    heavy = Truncated(base=StudentT(df=1.5, location=0.0, scale=1.0), low=0.0, high=math.inf)
    assert heavy.deviation() == math.inf


def test_truncated_cauchy_mean() -> None:
    """E(x | 0 <= x <= c) = log(1 + c^2) / (2 arctan c)."""
    cut = Truncated(base=Cauchy(location=0.0, scale=1.0), low=0.0, high=100.0)
    assert cut.expectation() == pytest.approx(math.log1p(1e4) / (2 * math.atan(100)), rel=1e-12)


def test_far_windows_keep_their_tails() -> None:
    """Oracle: the ratio of normal tail areas, each accurate by itself (scipy.special.ndtr of minus x)."""
    cut = Truncated(base=Normal(mean=0.0, sd=1.0), low=6.0, high=math.inf)
    assert float(cut.sf(np.asarray(9.0))) == pytest.approx(stats.norm.sf(9) / stats.norm.sf(6), rel=1e-12)
    assert float(cut.ppf(np.asarray(0.5))) == pytest.approx(stats.norm.isf(stats.norm.sf(6) / 2), rel=1e-12)


def test_beta_by_mean_and_size_is_the_same_beta() -> None:
    x = np.linspace(0, 1, 11)
    assert Beta(mean=0.25, size=8.0).pdf(x) == pytest.approx(Beta(a=2.0, b=6.0).pdf(x), rel=1e-15)


@pytest.mark.parametrize(
    ("own", "words"),
    [
        (Normal(mean=1.8, sd=1.5), "normal, mean 1.8, sd 1.5"),
        (Beta(mean=0.25, size=8.0), "beta, mean 0.25, size 8"),
        (Lognormal(median=2.0, log_sd=0.5), "lognormal, median 2, sd of the logarithm 0.5"),
        (Truncated(base=Normal(mean=0.0, sd=1.0), low=0.0, high=5.0), "normal, mean 0, sd 1, cut to 0 to 5"),
        (Mixture(components=(Point(value=0.0), Exponential(rate=2.0)), weights=(0.3, 0.7)),
         "mixture: 30 % exactly 0; 70 % exponential, rate 2"),
    ],
)  # fmt: skip
def test_words(own: Normal, words: str) -> None:
    assert own.describe() == words
