"""Composite 12-node Gauss rules on the breaks, against closed forms and adaptive quadrature."""

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.prior import (
    Beta,
    Cauchy,
    Distribution,
    Exponential,
    Gamma,
    HalfNormal,
    Lognormal,
    Mixture,
    Normal,
    Point,
    StudentT,
    Truncated,
    Uniform,
)

from .examples import EVERY, describe

CONTINUOUS = [d for d in EVERY if d.breaks().size]


def expect(own: Distribution, g: Callable[[FloatArray], FloatArray]) -> float:
    """Expectation of g by the panels, mass outside lumped on the outermost breaks, atoms added."""
    points, (values, masses) = own.breaks(), own.atoms()
    x, w = np.polynomial.legendre.leggauss(12)
    half = np.diff(points)[:, None] / 2
    nodes = (points[:-1, None] + half * (x + 1)).ravel()
    inside = float(((half * w).ravel() * own.pdf(nodes)) @ g(nodes))
    left = own.cdf(points[0]) - masses[values <= points[0]].sum()
    right = own.sf(points[-1]) - masses[values > points[-1]].sum()
    lumps = np.array([left, right])
    return inside + float(lumps @ g(points[[0, -1]])) + float(masses @ g(values))


@pytest.mark.parametrize("own", CONTINUOUS, ids=describe)
def test_mass_is_one(own: Distribution) -> None:
    assert expect(own, np.ones_like) == pytest.approx(1, abs=1e-12)


@pytest.mark.parametrize("own", CONTINUOUS, ids=describe)
def test_mass_outside_is_negligible_or_close(own: Distribution) -> None:
    points, (values, masses) = own.breaks(), own.atoms()
    assert (np.diff(points) > 0).all()
    left = float(own.cdf(points[0])) - masses[values <= points[0]].sum()
    right = float(own.sf(points[-1])) - masses[values > points[-1]].sum()
    assert left < 1e-16
    assert right < 1e-16 or 0 < own.support[1] - points[-1] < 1.01e-9  # infinite density at 1


@pytest.mark.parametrize("own", CONTINUOUS, ids=describe)
def test_every_panel_agrees_with_its_thirds(own: Distribution) -> None:
    """g is a bell around the median; the same rule on three times as many panels is the oracle."""
    middle, spread = own.ppf(np.asarray(0.5)), own.ppf(np.asarray(0.8)) - own.ppf(np.asarray(0.2))
    points = own.breaks()
    x, w = np.polynomial.legendre.leggauss(12)
    sums = []
    for parts in (1, 3):
        low = (points[:-1, None] + np.diff(points)[:, None] * np.arange(parts) / parts).ravel()
        half = np.repeat(np.diff(points) / parts, parts)[:, None] / 2
        nodes = (low[:, None] + half * (x + 1)).ravel()
        sums.append(
            float(((half * w).ravel() * own.pdf(nodes)) @ np.exp(-(((nodes - middle) / spread) ** 2)))
        )
    assert sums[0] == pytest.approx(sums[1], abs=1e-12)


CLOSED_FORMS: list[tuple[Distribution, Callable[[FloatArray], FloatArray], float]] = [
    # characteristic functions and moments: any textbook of probability
    (Normal(mean=1.0, sd=2.0), lambda x: np.cos(x - 1), math.exp(-2)),
    (Normal(mean=0.0, sd=1.0), lambda x: x**4, 3.0),
    (HalfNormal(scale=2.0), lambda x: x**4, 48.0),
    (Exponential(rate=2.0), np.cos, 4 / 5),
    (Gamma(shape=0.3, rate=1.0), np.cos, 2**-0.15 * math.cos(0.3 * math.pi / 4)),
    (Gamma(shape=0.3, rate=2.0), lambda x: x**2, 0.3 * 1.3 / 4),
    (Gamma(shape=40.0, rate=10.0), np.cos, float(np.real((1 - 0.1j) ** -40))),
    (Lognormal(median=2.0, log_sd=0.8), np.sqrt, math.sqrt(2) * math.exp(0.08)),
    (Uniform(low=-1.0, high=3.0), np.cos, (math.sin(3) + math.sin(1)) / 4),
    (Beta(a=0.5, b=0.5), lambda x: np.cos(4 * (x - 0.5)), float(special.j0(2.0))),
    (Beta(a=1.3, b=2.6), lambda x: x**3, 1.3 * 2.3 * 3.3 / (3.9 * 4.9 * 5.9)),
    (Beta(a=300.0, b=0.7), lambda x: x**2, 300 * 301 / (300.7 * 301.7)),
    # 1 / (1 + x^2) against the Cauchy density: residues at i
    (Cauchy(location=0.0, scale=1.0), lambda x: 1 / (1 + x * x), 0.5),
    (StudentT(df=3.0, location=0.0, scale=1.0), lambda x: 1 / (1 + x * x / 3), 0.75),
    # mean above c of a normal: c + hazard form, Johnson, Kotz and Balakrishnan, vol. 1, section 13.10
    (Truncated(base=Normal(mean=0.0, sd=1.0), low=6.0, high=math.inf), lambda x: x,
     math.exp(-18) / math.sqrt(2 * math.pi) / float(special.ndtr(-6))),
    (Mixture(components=(Point(value=0.5), Normal(mean=0.0, sd=1.0)), weights=(0.25, 0.75)), np.cos,
     0.25 * math.cos(0.5) + 0.75 * math.exp(-0.5)),
]  # fmt: skip


@pytest.mark.parametrize(("own", "g", "exact"), CLOSED_FORMS, ids=describe)
def test_integrals_match_closed_forms(
    own: Distribution, g: Callable[[FloatArray], FloatArray], exact: float
) -> None:
    assert expect(own, g) == pytest.approx(exact, abs=1e-11)


@pytest.mark.parametrize("own", CONTINUOUS, ids=describe)
def test_integrals_match_adaptive_quadrature(own: Distribution) -> None:
    """By parts: E g(X) = -int g'(x) cdf(x) dx for a bell g; no density in it (scipy.integrate.quad)."""
    middle, spread = (
        float(own.ppf(np.asarray(0.5))),
        float(own.ppf(np.asarray(0.8)) - own.ppf(np.asarray(0.2))),
    )

    def g(x: FloatArray) -> FloatArray:
        return np.exp(-(((x - middle) / spread) ** 2))

    def integrand(x: float) -> float:
        return 2 * (x - middle) / spread**2 * float(g(np.asarray(x)) * own.cdf(np.asarray(x)))

    low, high = middle - 7 * spread, middle + 7 * spread  # g is 5e-22 there
    corners = own.ppf(np.array([0.0, 1e-4, 0.1, 0.5, 0.9, 1.0])).tolist() + own.atoms()[0].tolist()
    corners += list(getattr(getattr(own, "base", own), "edges", ()))
    stops = sorted({low, high, *(x for x in corners if low < x < high)})
    pieces = [
        integrate.quad(integrand, a, b, epsabs=1e-13, epsrel=1e-13, limit=200)[0] for a, b in pairwise(stops)
    ]
    assert expect(own, g) == pytest.approx(math.fsum(pieces), abs=1e-11)
