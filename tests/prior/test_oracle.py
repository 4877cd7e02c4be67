"""Density, distribution function, survival function and quantile against scipy.stats and mpmath."""

from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bayesdesign.prior import Beta, Cauchy, Distribution, Gamma, StudentT

from .examples import EVERY, PLAIN, describe

PROBABILITIES = np.array([1e-14, 1e-9, 1e-4, 0.01, 0.2, 0.5, 0.77, 0.99, 1 - 1e-4, 1 - 1e-9])


@pytest.mark.parametrize(("own", "oracle"), PLAIN, ids=describe)
@settings(deadline=None, max_examples=40, derandomize=True)
@given(z=st.floats(-30, 30))
def test_functions_match_scipy(own: Distribution, oracle: Any, z: float) -> None:
    middle, spread = oracle.ppf(0.5), oracle.ppf(0.75) - oracle.ppf(0.25)
    x = np.array([middle + z * spread])
    assert own.pdf(x) == pytest.approx(oracle.pdf(x), rel=1e-10, abs=1e-300)
    assert own.cdf(x) == pytest.approx(oracle.cdf(x), rel=1e-12, abs=1e-300)
    assert own.sf(x) == pytest.approx(oracle.sf(x), rel=1e-12, abs=1e-300)


@pytest.mark.parametrize(("own", "oracle"), PLAIN, ids=describe)
def test_quantiles_match_scipy(own: Distribution, oracle: Any) -> None:
    p = PROBABILITIES[:-1]  # scipy's half-normal forms (1 + p) / 2, which costs it digits at 1 - 1e-9
    assert own.ppf(p) == pytest.approx(oracle.ppf(p), rel=1e-10)


@pytest.mark.parametrize(("own", "oracle"), PLAIN, ids=describe)
def test_moments_match_scipy(own: Distribution, oracle: Any) -> None:
    if isinstance(own, Cauchy) or (isinstance(own, StudentT) and own.df <= 1):
        assert np.isnan([own.expectation(), own.deviation()]).all()
    else:
        assert own.expectation() == pytest.approx(oracle.mean(), rel=1e-13)
        assert own.deviation() == pytest.approx(oracle.std(), rel=1e-13)


@pytest.mark.parametrize("own", EVERY, ids=describe)
def test_laws_of_a_distribution(own: Distribution) -> None:
    low, high = own.support
    x = np.sort(np.append(own.ppf(np.linspace(0.001, 0.999, 101)), own.atoms()[0])).reshape(-1, 1)
    cdf, sf = own.cdf(x), own.sf(x)
    assert cdf.shape == sf.shape == own.pdf(x).shape == x.shape
    assert (np.diff(cdf.ravel()) >= 0).all()
    assert cdf + sf == pytest.approx(1, abs=1e-12)  # windows of mass near 1e-10 keep fewer digits of it
    assert own.ppf(np.array([0.0, 1.0])).tolist() == [low, high]
    beyond = np.array([np.nextafter(low, -np.inf), np.nextafter(high, np.inf), -np.inf, np.inf])
    assert own.pdf(beyond) == pytest.approx(0, abs=0)
    assert own.cdf(beyond[[0, 2]]).tolist() == [0, 0]
    assert own.sf(beyond[[1, 3]]).tolist() == [0, 0]


@pytest.mark.parametrize("own", EVERY, ids=describe)
def test_quantile_is_where_the_cdf_passes_p(own: Distribution) -> None:
    """To within one float on either side: floats near 1 are coarse where the density is infinite."""
    x = own.ppf(PROBABILITIES)
    assert (own.cdf(np.nextafter(x, -np.inf)) <= PROBABILITIES * (1 + 1e-11)).all()
    assert (own.cdf(np.nextafter(x, np.inf)) >= PROBABILITIES * (1 - 1e-11)).all()


def test_densities_keep_their_digits_at_large_parameters() -> None:
    """Oracle: the textbook formulas in 50-digit arithmetic (mpmath)."""
    with mpmath.workdps(50):
        x, k = mpmath.mpf(1_000_500), mpmath.mpf(1_000_000)
        gamma = mpmath.exp((k - 1) * mpmath.log(x) - x - mpmath.loggamma(k))
        y, a, b = mpmath.mpf(0.3005), mpmath.mpf(300_000), mpmath.mpf(700_000)
        beta = y ** (a - 1) * (1 - y) ** (b - 1) / mpmath.beta(a, b)
        n, t = mpmath.mpf(10) ** 9, mpmath.mpf(2)
        student = (1 + t * t / n) ** (-(n + 1) / 2) / (mpmath.sqrt(n) * mpmath.beta(n / 2, 0.5))
    pairs = [
        (Gamma(shape=1e6, rate=1.0).pdf(np.asarray(1_000_500.0)), gamma),
        (Beta(a=3e5, b=7e5).pdf(np.asarray(0.3005)), beta),
        (StudentT(df=1e9, location=0.0, scale=1.0).pdf(np.asarray(2.0)), student),
    ]
    for own, exact in pairs:
        assert float(own) == pytest.approx(float(exact), rel=1e-12)
