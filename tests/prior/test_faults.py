"""Impossible distributions are refused, every fault at once and by the name of its key."""

import math
from collections.abc import Callable

import pytest

from bayesdesign.core.errors import Invalid
from bayesdesign.prior import (
    DISTRIBUTIONS,
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

NAN, INF = math.nan, math.inf
STANDARD = Normal(mean=0.0, sd=1.0)

REFUSED: list[tuple[Callable[[], Distribution], list[str]]] = [
    (lambda: Normal(mean=NAN, sd=0.0), ["mean", "sd"]),
    (lambda: Normal(mean=0.0, sd=INF), ["sd"]),
    (lambda: StudentT(df=0.0, location=INF, scale=-1.0), ["df", "location", "scale"]),
    (lambda: Cauchy(location=NAN, scale=0.0), ["location", "scale"]),
    (lambda: Gamma(shape=0.0, rate=-2.0), ["shape", "rate"]),
    (lambda: Lognormal(median=0.0, log_sd=0.0), ["median", "log_sd"]),
    (lambda: Lognormal(median=1.0, log_sd=NAN), ["log_sd"]),
    (lambda: HalfNormal(scale=-1.0), ["scale"]),
    (lambda: Exponential(rate=INF), ["rate"]),
    (lambda: Uniform(low=1.0, high=1.0), ["low"]),
    (lambda: Uniform(low=-INF, high=NAN), ["low", "high"]),
    (lambda: Beta(), ["a", "b"]),
    (lambda: Beta(a=1.0), ["b"]),
    (lambda: Beta(size=3.0), ["mean"]),
    (lambda: Beta(a=1.0, b=1.0, mean=0.5), ["mean"]),
    (lambda: Beta(a=0.0, b=INF), ["a", "b"]),
    (lambda: Beta(mean=1.0, size=-1.0), ["size", "mean"]),
    (lambda: Histogram(edges=(0.0,), weights=(0.0,)), ["edges", "weights", "weights"]),
    (lambda: Histogram(edges=(0.0, 0.0, 1.0), weights=(1.0, -1.0)), ["edges", "weights"]),
    (lambda: Histogram(edges=(0.0, 1.0), weights=(0.5, 0.5)), ["weights"]),
    (lambda: Point(value=INF), ["value"]),
    (lambda: Mixture(components=(), weights=()), ["components", "weights"]),
    (lambda: Mixture(components=(STANDARD,), weights=(0.5, 0.5)), ["weights"]),
    (lambda: Mixture(components=(STANDARD, STANDARD), weights=(1.5, -0.5)), ["weights"]),
    (lambda: Mixture(components=(STANDARD, STANDARD), weights=(0.5, 0.50001)), ["weights"]),
    (lambda: Truncated(base=STANDARD, low=1.0, high=1.0), ["truncated"]),
    (lambda: Truncated(base=STANDARD, low=NAN, high=1.0), ["truncated"]),
    (lambda: Truncated(base=STANDARD, low=8.0, high=9.0), ["truncated"]),
    (lambda: Truncated(base=Point(value=0.0), low=-1.0, high=1.0), ["truncated"]),
]


@pytest.mark.parametrize(("build", "keys"), REFUSED)
def test_every_fault_names_its_key(build: Callable[[], Distribution], keys: list[str]) -> None:
    with pytest.raises(Invalid) as caught:
        build()
    assert [fault.where for fault in caught.value.faults] == keys


def test_weights_are_scaled_when_their_sum_is_nearly_one() -> None:
    thirds = Mixture(components=(STANDARD,) * 3, weights=(0.333333, 0.333333, 0.333333))
    assert math.fsum(share for _, share in thirds.parts()) == pytest.approx(1, abs=1e-15)


def test_kinds_are_the_names_in_study_files() -> None:
    assert [distribution.kind for distribution in DISTRIBUTIONS] == [
        "normal", "student_t", "cauchy", "gamma", "lognormal", "half_normal", "exponential", "uniform",
        "beta", "histogram", "point", "mixture",
    ]  # fmt: skip
    assert Truncated.kind == "truncated"
    assert Truncated not in DISTRIBUTIONS
