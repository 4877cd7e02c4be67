"""Beliefs about a positive number: gamma, lognormal, half-normal, exponential."""

import math
from dataclasses import dataclass
from typing import Any, ClassVar, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import check_values
from bayesdesign.prior.plain import Plain
from bayesdesign.prior.spacing import BELL_REACH, EDGE_RATIO, REST, SD_STEP, TINY, even, smooth_power, walk
from bayesdesign.prior.stable import deviance, gauss, stirling_error

POSITIVE = (0.0, math.inf)


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Gamma(Plain):
    """Gamma distribution, density proportional to x^(shape - 1) exp(-rate x).

    shape: > 0; mean = shape / rate. rate: > 0, in 1 / unit of the number; the reciprocal of what others call
    scale.
    """

    kind: ClassVar[str] = "gamma"
    shape: float
    rate: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.shape) and self.shape > 0, "shape", self.shape, "a finite number > 0"),
            (math.isfinite(self.rate) and self.rate > 0, "rate", self.rate, "a finite number > 0"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        k = self.shape
        y = self.rate * np.asarray(x)
        inside = (y > 0) & (y < math.inf)
        y = np.where(inside, y, 1.0)
        with np.errstate(over="ignore", under="ignore"):  # exp(-huge) is 0; huge / tiny is an infinite density
            log_term = -stirling_error(k) - deviance(k, y) - np.log(y)
            density = self.rate * math.sqrt(k / (2 * math.pi)) * np.exp(log_term)
        at_zero = math.inf if k < 1 else self.rate if k == 1 else 0.0
        return np.where(inside, density, np.where(np.asarray(x) == 0, at_zero, 0.0))

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.gammainc(self.shape, np.maximum(self.rate * x, 0.0)))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.gammaincc(self.shape, np.maximum(self.rate * x, 0.0)))

    def ppf(self, p: FloatArray) -> FloatArray:
        return np.asarray(special.gammaincinv(self.shape, p) / self.rate)

    @property
    def support(self) -> tuple[float, float]:
        return POSITIVE

    def breaks(self) -> FloatArray:
        k = self.shape
        smooth = smooth_power(k)
        low = 0.0 if smooth else max(float(special.gammaincinv(k, REST)), TINY)
        high = float(special.gammainccinv(k, REST))
        high = high if high > low else 2 * low  # all mass below TINY
        widest = 1.25 * math.sqrt(max(k, 1.6))
        return walk(low, high, lambda y: widest if smooth else min(widest, (EDGE_RATIO - 1) * y)) / self.rate

    def expectation(self) -> float:
        return self.shape / self.rate

    def deviation(self) -> float:
        return math.sqrt(self.shape) / self.rate

    def describe(self) -> str:
        return f"gamma, shape {self.shape:g}, rate {self.rate:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.Gamma, {"alpha": self.shape, "beta": self.rate}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Lognormal(Plain):
    """Lognormal distribution: the natural logarithm is normal with mean log(median) and sd log_sd.

    median: > 0, in the unit of the number. log_sd: standard deviation of the natural logarithm, > 0.
    """

    kind: ClassVar[str] = "lognormal"
    median: float
    log_sd: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.median) and self.median > 0, "median", self.median, "a finite number > 0"),
            (0 < self.log_sd <= 50, "log_sd", self.log_sd, "a number > 0 and at most 50"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        inside = np.asarray(x) > 0
        with np.errstate(over="ignore"):  # at the smallest positive x the divisor underflows; gauss is 0 there
            divisor = self.log_sd * np.where(inside & np.isfinite(x), x, 1.0)
            return np.where(inside & (divisor > 0), gauss(self._z(x)) / np.where(divisor > 0, divisor, 1.0), 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr(self._z(x)))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr(-self._z(x)))

    def _z(self, x: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore"):  # log 0 = -inf is meant
            return (np.log(np.maximum(x, 0.0)) - math.log(self.median)) / self.log_sd

    def ppf(self, p: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(self.median * np.exp(self.log_sd * special.ndtri(p)))

    @property
    def support(self) -> tuple[float, float]:
        return POSITIVE

    def breaks(self) -> FloatArray:
        # log x has its own singularity at 0, so no panel grows by more than 2.5, however wide the bell.
        step = min(SD_STEP, math.log(2.5) / self.log_sd)
        log_points = math.log(self.median) + self.log_sd * even(-BELL_REACH, BELL_REACH, step)
        return np.exp(log_points[np.abs(log_points) < -math.log(TINY)])  # others do not fit into a double

    def expectation(self) -> float:
        return self.median * math.exp(self.log_sd**2 / 2) if self.log_sd < 37 else math.inf

    def deviation(self) -> float:
        if self.log_sd >= 26:  # beyond the largest double
            return math.inf
        return self.expectation() * math.sqrt(math.expm1(self.log_sd**2))

    def describe(self) -> str:
        return f"lognormal, median {self.median:g}, sd of the logarithm {self.log_sd:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.LogNormal, {"mu": math.log(self.median), "sigma": self.log_sd}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class HalfNormal(Plain):
    """Half-normal distribution: absolute value of a normal with mean 0.

    scale: standard deviation of that normal, > 0; the mean is 0.798 and the sd 0.603 of it.
    """

    kind: ClassVar[str] = "half_normal"
    scale: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.scale) and self.scale > 0, "scale", self.scale, "a finite number > 0"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        x = np.asarray(x)
        return np.where(x >= 0, 2 * gauss(x / self.scale) / self.scale, 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.erf(np.maximum(x, 0.0) / (self.scale * math.sqrt(2))))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.erfc(np.maximum(x, 0.0) / (self.scale * math.sqrt(2))))

    def ppf(self, p: FloatArray) -> FloatArray:
        return np.asarray(self.scale * math.sqrt(2) * special.erfinv(p))

    @property
    def support(self) -> tuple[float, float]:
        return POSITIVE

    def breaks(self) -> FloatArray:
        return self.scale * even(0.0, BELL_REACH, 1.1)

    def expectation(self) -> float:
        return self.scale * math.sqrt(2 / math.pi)

    def deviation(self) -> float:
        return self.scale * math.sqrt(1 - 2 / math.pi)

    def describe(self) -> str:
        return f"half-normal, scale {self.scale:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.HalfNormal, {"sigma": self.scale}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Exponential(Plain):
    """Exponential distribution.

    rate: > 0, in 1 / unit of the number; mean and sd are 1 / rate.
    """

    kind: ClassVar[str] = "exponential"
    rate: float

    def __post_init__(self) -> None:
        check_values((math.isfinite(self.rate) and self.rate > 0, "rate", self.rate, "a finite number > 0"))

    def pdf(self, x: FloatArray) -> FloatArray:
        x = np.asarray(x)
        with np.errstate(under="ignore"):
            return np.where(x >= 0, self.rate * np.exp(-self.rate * np.maximum(x, 0.0)), 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(-np.expm1(-self.rate * np.maximum(x, 0.0)))

    def sf(self, x: FloatArray) -> FloatArray:
        with np.errstate(under="ignore"):
            return np.asarray(np.exp(-self.rate * np.maximum(x, 0.0)))

    def ppf(self, p: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore"):  # ppf(1) is infinite
            return np.asarray(-np.log1p(-np.asarray(p)) / self.rate)

    @property
    def support(self) -> tuple[float, float]:
        return POSITIVE

    def breaks(self) -> FloatArray:
        return even(0.0, -math.log(REST), 1.6) / self.rate

    def expectation(self) -> float:
        return 1 / self.rate

    def deviation(self) -> float:
        return 1 / self.rate

    def describe(self) -> str:
        return f"exponential, rate {self.rate:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.Exponential, {"lam": self.rate}
