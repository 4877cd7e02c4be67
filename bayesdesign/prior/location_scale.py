"""Beliefs on the whole line: normal, Student's t, Cauchy."""

import math
from dataclasses import dataclass
from typing import Any, ClassVar, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import check_values
from bayesdesign.prior.plain import Plain
from bayesdesign.prior.spacing import BELL_REACH, REST, SD_STEP, even, walk
from bayesdesign.prior.stable import LOG_SQRT_2PI, deviance, gauss, stirling_error

FARTHEST = 1e150  # in scales; beyond, squares overflow
REAL_LINE = (-math.inf, math.inf)


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Normal(Plain):
    """Normal (Gaussian) distribution.

    mean: expectation, also median and mode. sd: standard deviation, > 0; neither variance nor precision.
    """

    kind: ClassVar[str] = "normal"
    mean: float
    sd: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.mean), "mean", self.mean, "a finite number"),
            (math.isfinite(self.sd) and self.sd > 0, "sd", self.sd, "a finite number > 0"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        return gauss((x - self.mean) / self.sd) / self.sd

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr((x - self.mean) / self.sd))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr((self.mean - x) / self.sd))

    def ppf(self, p: FloatArray) -> FloatArray:
        return np.asarray(self.mean + self.sd * special.ndtri(p))

    @property
    def support(self) -> tuple[float, float]:
        return REAL_LINE

    def breaks(self) -> FloatArray:
        return self.mean + self.sd * even(-BELL_REACH, BELL_REACH, SD_STEP)

    def expectation(self) -> float:
        return self.mean

    def deviation(self) -> float:
        return self.sd

    def describe(self) -> str:
        return f"normal, mean {self.mean:g}, sd {self.sd:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.Normal, {"mu": self.mean, "sigma": self.sd}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class StudentT(Plain):
    """Student's t distribution, moved and stretched: location + scale * t.

    df: degrees of freedom, > 0. location: median. scale: multiplier of t, > 0; the standard deviation is
    larger.
    """

    kind: ClassVar[str] = "student_t"
    df: float
    location: float
    scale: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.df) and self.df > 0, "df", self.df, "a finite number > 0"),
            (math.isfinite(self.location), "location", self.location, "a finite number"),
            (math.isfinite(self.scale) and self.scale > 0, "scale", self.scale, "a finite number > 0"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        n = self.df
        z = (x - self.location) / self.scale
        constant = stirling_error((n + 1) / 2) - stirling_error(n / 2) - LOG_SQRT_2PI
        constant -= float(deviance(n / 2, np.asarray((n + 1) / 2)))
        with np.errstate(over="ignore", under="ignore"):  # z**2 beyond 1e308 means density 0
            return np.exp(constant - (n + 1) / 2 * np.log1p(z * z / n)) / self.scale

    def cdf(self, x: FloatArray) -> FloatArray:
        return self._below((x - self.location) / self.scale)

    def sf(self, x: FloatArray) -> FloatArray:
        return self._below((self.location - x) / self.scale)

    def _below(self, z: FloatArray) -> FloatArray:
        if self.df == 1:  # stdtr returns exactly 0.5 for |z| < 3e-8 there
            return np.arctan2(1.0, -z) / np.pi
        return np.asarray(special.stdtr(self.df, z))

    def ppf(self, p: FloatArray) -> FloatArray:
        if self.df == 1:
            return self.location + self.scale * cauchy_quantile(p)
        p = np.asarray(p)
        z = special.stdtrit(self.df, p)  # NaN at the ends
        z = np.where(p == 0, -math.inf, np.where(p == 1, math.inf, z))
        return self.location + self.scale * z

    @property
    def support(self) -> tuple[float, float]:
        return REAL_LINE

    def breaks(self) -> FloatArray:
        # The density has poles at +-i sqrt(df), and falls by a factor e over about (df + z^2) / ((df + 1) z).
        core = min(SD_STEP, math.sqrt(self.df))

        def step(z: float) -> float:
            growth = z if z < 16 else 2 * z if z < 1e4 else 3 * z  # slow while much mass is left
            return max(core, min(growth, 6 * (self.df / z + z) / (self.df + 1))) if z > 0 else core

        z_far = min(-float(special.stdtrit(self.df, REST)), FARTHEST)
        right = walk(0.0, z_far, step)
        return self.location + self.scale * np.concatenate([-right[:0:-1], right])

    def expectation(self) -> float:
        return self.location if self.df > 1 else math.nan

    def deviation(self) -> float:
        if self.df <= 2:
            return math.inf if self.df > 1 else math.nan
        return self.scale * math.sqrt(self.df / (self.df - 2))

    def describe(self) -> str:
        return f"Student t, {self.df:g} df, location {self.location:g}, scale {self.scale:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.StudentT, {"nu": self.df, "mu": self.location, "sigma": self.scale}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Cauchy(Plain):
    """Cauchy distribution, Student's t with 1 degree of freedom.

    location: median. scale: half the distance between the quartiles, > 0. It has neither mean nor sd.
    """

    kind: ClassVar[str] = "cauchy"
    location: float
    scale: float

    def __post_init__(self) -> None:
        check_values(
            (math.isfinite(self.location), "location", self.location, "a finite number"),
            (math.isfinite(self.scale) and self.scale > 0, "scale", self.scale, "a finite number > 0"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        z = (x - self.location) / self.scale
        with np.errstate(over="ignore"):  # z**2 beyond 1e308 means density 0
            return 1 / (np.pi * self.scale * (1 + z * z))

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.arctan2(self.scale, self.location - x) / np.pi

    def sf(self, x: FloatArray) -> FloatArray:
        return np.arctan2(self.scale, x - self.location) / np.pi

    def ppf(self, p: FloatArray) -> FloatArray:
        return self.location + self.scale * cauchy_quantile(p)

    @property
    def support(self) -> tuple[float, float]:
        return REAL_LINE

    def breaks(self) -> FloatArray:
        return StudentT(df=1.0, location=self.location, scale=self.scale).breaks()

    def expectation(self) -> float:
        return math.nan

    def deviation(self) -> float:
        return math.nan

    def describe(self) -> str:
        return f"Cauchy, location {self.location:g}, scale {self.scale:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.Cauchy, {"alpha": self.location, "beta": self.scale}


def cauchy_quantile(p: FloatArray) -> FloatArray:
    """Quantile of the standard Cauchy, keeping all digits of a small p and of a small 1 - p."""
    p = np.asarray(p)
    low = p < 0.5
    with np.errstate(divide="ignore"):  # the ends are infinite
        far = 1 / np.tan(np.pi * np.where(low, p, 1 - p))
    return np.where(low, -far, far)
