"""Certainty: all mass on one value."""

import math
from dataclasses import dataclass
from typing import Any, ClassVar, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered, check_values
from bayesdesign.prior.base import Distribution


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Point(Distribution):
    """Point mass: the number is exactly value. It has no density.

    value: the number itself.
    """

    kind: ClassVar[str] = "point"
    value: float

    def __post_init__(self) -> None:
        check_values((math.isfinite(self.value), "value", self.value, "a finite number"))

    def pdf(self, x: FloatArray) -> FloatArray:
        return np.where(np.isnan(x), np.nan, 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.where(np.asarray(x) >= self.value, 1.0, 0.0)

    def sf(self, x: FloatArray) -> FloatArray:
        return np.where(np.asarray(x) >= self.value, 0.0, 1.0)

    def ppf(self, p: FloatArray) -> FloatArray:
        return np.full(np.shape(p), float(self.value))

    @property
    def support(self) -> tuple[float, float]:
        return self.value, self.value

    def breaks(self) -> FloatArray:
        return np.empty(0)

    def atoms(self) -> tuple[FloatArray, FloatArray]:
        return np.array([float(self.value)]), np.ones(1)

    def expectation(self) -> float:
        return self.value

    def deviation(self) -> float:
        return 0.0

    def describe(self) -> str:
        return f"exactly {self.value:g}"

    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        return pm.Deterministic(name, pm.math.constant(np.full(shape, float(self.value))))

    def log_density(self, pm: Any, x: Any) -> Any:
        raise NotOffered(f"a point mass ({self.describe()}) has no density, so it cannot be sampled by NUTS")
