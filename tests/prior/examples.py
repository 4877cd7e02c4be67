"""Distributions under test, each beside scipy's own version of it."""

from typing import Any

from scipy import stats

from bayesdesign.prior import (
    Beta,
    Cauchy,
    Distribution,
    Exponential,
    Gamma,
    HalfNormal,
    Histogram,
    Lognormal,
    Mixture,
    Normal,
    Point,
    StudentT,
    Truncated,
    Uniform,
)

PLAIN: list[tuple[Distribution, Any]] = [
    (Normal(mean=1.8, sd=1.5), stats.norm(1.8, 1.5)),
    (Normal(mean=-40.0, sd=0.01), stats.norm(-40.0, 0.01)),
    (StudentT(df=0.7, location=0.2, scale=2.0), stats.t(0.7, 0.2, 2.0)),
    (StudentT(df=1.0, location=0.2, scale=2.0), stats.cauchy(0.2, 2.0)),
    (StudentT(df=3.0, location=-1.0, scale=0.5), stats.t(3.0, -1.0, 0.5)),
    (StudentT(df=30.0, location=0.0, scale=1.0), stats.t(30.0, 0.0, 1.0)),
    (StudentT(df=5e3, location=0.0, scale=1.0), stats.t(5e3, 0.0, 1.0)),
    (Cauchy(location=-0.3, scale=0.707), stats.cauchy(-0.3, 0.707)),
    (Gamma(shape=0.3, rate=2.0), stats.gamma(0.3, scale=0.5)),
    (Gamma(shape=1.0, rate=2.0), stats.gamma(1.0, scale=0.5)),
    (Gamma(shape=2.4, rate=0.01), stats.gamma(2.4, scale=100.0)),
    (Gamma(shape=350.0, rate=7.0), stats.gamma(350.0, scale=1 / 7.0)),
    (Lognormal(median=0.5, log_sd=0.1), stats.lognorm(0.1, scale=0.5)),
    (Lognormal(median=20.0, log_sd=1.4), stats.lognorm(1.4, scale=20.0)),
    (HalfNormal(scale=3.0), stats.halfnorm(scale=3.0)),
    (Exponential(rate=0.2), stats.expon(scale=5.0)),
    (Uniform(low=-1.0, high=4.0), stats.uniform(-1.0, 5.0)),
    (Beta(a=0.5, b=0.5), stats.beta(0.5, 0.5)),
    (Beta(a=1.0, b=1.0), stats.beta(1.0, 1.0)),
    (Beta(a=1.3, b=2.6), stats.beta(1.3, 2.6)),
    (Beta(a=2.6, b=0.8), stats.beta(2.6, 0.8)),
    (Beta(mean=0.02, size=150.0), stats.beta(3.0, 147.0)),
    (Beta(mean=0.7, size=4000.0), stats.beta(2800.0, 1200.0)),
    (
        Histogram(edges=(0.0, 1.0, 1.5, 4.0), weights=(2.0, 5.0, 3.0)),
        stats.rv_histogram(([2.0, 5.0, 3.0], [0.0, 1.0, 1.5, 4.0]), density=False),
    ),
]

SPIKE = Mixture(
    components=(
        Point(value=0.0),
        Normal(mean=0.4, sd=0.3),
        Mixture(components=(Point(value=0.0), Cauchy(location=0, scale=1)), weights=(0.5, 0.5)),
    ),
    weights=(0.2, 0.5, 0.3),
)
BETAS = Mixture(components=(Beta(a=0.5, b=0.5), Beta(a=3.0, b=2.0)), weights=(0.25, 0.75))
FAR = Truncated(base=Normal(mean=0.0, sd=1.0), low=6.5, high=9.5)
COMPOSITE: list[Distribution] = [
    SPIKE,
    BETAS,
    FAR,
    Mixture(components=(Gamma(shape=0.6, rate=1.0), Lognormal(median=3.0, log_sd=0.4)), weights=(0.4, 0.6)),
    Truncated(base=Normal(mean=1.0, sd=2.0), low=0.0, high=float("inf")),
    Truncated(base=Normal(mean=0.0, sd=1.0), low=-8.0, high=-6.0),
    Truncated(base=StudentT(df=3.0, location=0.0, scale=1.0), low=2.0, high=50.0),
    Truncated(base=Cauchy(location=0.0, scale=1.0), low=-1.0, high=1e6),
    Truncated(base=Gamma(shape=2.5, rate=1.0), low=0.5, high=3.0),
    Truncated(base=Beta(a=0.5, b=0.5), low=0.9, high=1.0),
    Truncated(base=Lognormal(median=1.0, log_sd=1.0), low=0.0, high=1e-3),
    Truncated(base=Exponential(rate=1.0), low=20.0, high=25.0),
    Truncated(base=HalfNormal(scale=2.0), low=0.0, high=1.0),
    Truncated(base=Uniform(low=0.0, high=1.0), low=0.25, high=3.0),
    Truncated(base=Histogram(edges=(0.0, 1.0, 1.5, 4.0), weights=(2.0, 5.0, 3.0)), low=0.5, high=2.0),
    Truncated(base=SPIKE, low=0.0, high=2.0),
]
EVERY = [distribution for distribution, _ in PLAIN] + COMPOSITE + [Point(value=-2.5)]


def describe(value: object) -> str | None:
    """Readable test ids."""
    return value.describe() if isinstance(value, Distribution) else ""
