"""Beliefs about a number between two bounds: uniform, beta, histogram."""

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, ClassVar, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import check_values
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.plain import Plain
from bayesdesign.prior.spacing import EDGE_RATIO, REST, TINY, even, smooth_power, walk
from bayesdesign.prior.stable import deviance, stirling_error

# Nearest distance d of a panel to 1. Where the density is infinite there, rounding of x costs about
# 1e-16 * d^(b - 1), and leaving the rest in one lump costs d^(b + 1) / width of g; measured
# for b = 0.5, 1e-9 keeps both below 1e-12. The balance moves with the square root of the width.
NEAREST_POLE = 1e-9
NEAREST_ONE = 1e-15
_NOTHING = dict.fromkeys(("a", "b", "mean", "size"))


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Uniform(Plain):
    """Uniform distribution: every value between low and high is equally likely.

    low, high: the bounds, low < high.
    """

    kind: ClassVar[str] = "uniform"
    low: float
    high: float

    def __post_init__(self) -> None:
        finite = math.isfinite(self.low), math.isfinite(self.high)
        check_values(
            (finite[0], "low", self.low, "a finite number"),
            (finite[1], "high", self.high, "a finite number"),
            (not all(finite) or self.low < self.high, "low", self.low, f"less than high = {self.high!r}"),
        )

    def pdf(self, x: FloatArray) -> FloatArray:
        x = np.asarray(x)
        return np.where((x >= self.low) & (x <= self.high), 1 / (self.high - self.low), 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.clip((x - self.low) / (self.high - self.low), 0.0, 1.0)

    def sf(self, x: FloatArray) -> FloatArray:
        return np.clip((self.high - x) / (self.high - self.low), 0.0, 1.0)

    def ppf(self, p: FloatArray) -> FloatArray:
        p = np.asarray(p)  # either form is exact at its own end
        width = self.high - self.low
        return np.where(p < 0.5, self.low + p * width, self.high - (1 - p) * width)

    @property
    def support(self) -> tuple[float, float]:
        return self.low, self.high

    def breaks(self) -> FloatArray:
        return np.linspace(self.low, self.high, 5)  # 0.9 sd each

    def expectation(self) -> float:
        return self.low + (self.high - self.low) / 2

    def deviation(self) -> float:
        return (self.high - self.low) / math.sqrt(12)

    def describe(self) -> str:
        return f"uniform between {self.low:g} and {self.high:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        return pm.Uniform, {"lower": self.low, "upper": self.high}


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Beta(Plain):
    """Beta distribution on 0 to 1, density proportional to x^(a - 1) (1 - x)^(b - 1).

    Either a and b, or mean and size. a, b: exponents, > 0. mean: expectation, a / (a + b), between 0 and 1.
    size: a + b, > 0; it counts like a number of earlier observations.
    """

    kind: ClassVar[str] = "beta"
    a: float | None = None
    b: float | None = None
    mean: float | None = None
    size: float | None = None

    def __post_init__(self) -> None:
        values = {"a": self.a, "b": self.b, "mean": self.mean, "size": self.size}
        pair = ("mean", "size") if self.a is None and self.b is None and values != _NOTHING else ("a", "b")
        allowed = "either a and b, or mean and size"
        check_values(
            *(((value is not None) == (key in pair), key, value, allowed) for key, value in values.items()),
            *((_positive(values[key]), key, values[key], "a finite number > 0") for key in ("a", "b", "size")),
            (self.mean is None or 0 < self.mean < 1, "mean", self.mean, "between 0 and 1, ends excluded"),
        )

    @property
    def shapes(self) -> tuple[float, float]:
        """The exponents a and b, however they were given."""
        if self.a is not None and self.b is not None:
            return self.a, self.b
        assert self.mean is not None and self.size is not None  # noqa: PT018
        return self.mean * self.size, (1 - self.mean) * self.size

    def pdf(self, x: FloatArray) -> FloatArray:
        a, b = self.shapes
        n = a + b
        x = np.asarray(x)
        inside = (x > 0) & (x < 1)
        y = np.where(inside, x, 0.5)
        log_term = stirling_error(n) - stirling_error(a) - stirling_error(b)
        with np.errstate(over="ignore", under="ignore"):  # exp(-huge) is 0; near an infinite end it may overflow
            kernel = np.exp(log_term - deviance(a, n * y) - deviance(b, n * (1 - y)) - np.log(y) - np.log1p(-y))
        density = math.sqrt(a / n * b / (2 * math.pi)) * kernel
        return np.select([inside, x == 0, x == 1], [density, _edge(a, b), _edge(b, a)], 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.betainc(*self.shapes, np.clip(x, 0.0, 1.0)))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.betaincc(*self.shapes, np.clip(x, 0.0, 1.0)))

    def ppf(self, p: FloatArray) -> FloatArray:
        return np.asarray(special.betaincinv(*self.shapes, p))

    @property
    def support(self) -> tuple[float, float]:
        return 0.0, 1.0

    def breaks(self) -> FloatArray:
        a, b = self.shapes
        free_low, free_high = smooth_power(a), smooth_power(b)
        low = 0.0 if free_low else max(float(special.betaincinv(a, b, REST)), TINY)
        nearest = NEAREST_ONE if b > 1 else NEAREST_POLE * math.sqrt(2 * self.deviation())
        high = 1.0 if free_high else 1 - max(float(special.betaincinv(b, a, REST)), nearest)
        widest = max(self.deviation(), 1.6 / (a + b))

        def step(x: float) -> float:
            from_low = widest if free_low else (EDGE_RATIO - 1) * x
            from_high = widest if free_high else (1 - 1 / EDGE_RATIO) * (1 - x)
            return min(widest, from_low, from_high)

        return walk(low, high, step)

    def expectation(self) -> float:
        a, b = self.shapes
        return a / (a + b)

    def deviation(self) -> float:
        a, b = self.shapes
        return math.sqrt(a / (a + b) * (b / (a + b)) / (a + b + 1))

    def describe(self) -> str:
        if self.mean is not None:
            return f"beta, mean {self.mean:g}, size {self.size:g}"
        return f"beta, a {self.a:g}, b {self.b:g}"

    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        a, b = self.shapes
        return pm.Beta, {"alpha": a, "beta": b}


def _positive(value: float | None) -> bool:
    return value is None or (math.isfinite(value) and value > 0)


def _edge(own: float, other: float) -> float:
    """Density at the end where the power is own - 1."""
    return math.inf if own < 1 else other if own == 1 else 0.0


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Histogram(Distribution):
    """Piecewise constant density, for a belief given as a table.

    edges: bounds of the bins, strictly increasing. weights: mass of each bin, one fewer than edges, in any
    common unit (counts, per cent); they are divided by their sum.
    """

    kind: ClassVar[str] = "histogram"
    edges: tuple[float, ...]
    weights: tuple[float, ...]

    def __post_init__(self) -> None:
        rising = all(math.isfinite(e) for e in self.edges) and all(a < b for a, b in pairwise(self.edges))
        masses = all(math.isfinite(w) and w >= 0 for w in self.weights) and sum(self.weights) > 0
        one_fewer = len(self.weights) == len(self.edges) - 1
        check_values(
            (len(self.edges) >= 2, "edges", self.edges, "at least two numbers"),
            (rising, "edges", self.edges, "finite numbers, each larger than the one before"),
            (one_fewer, "weights", self.weights, "one number fewer than edges"),
            (masses, "weights", self.weights, "finite numbers >= 0, not all 0"),
        )

    def _bins(self) -> tuple[FloatArray, FloatArray]:
        """Edges and masses without the empty bins at either end."""
        weights = np.array(self.weights, dtype=float)
        used = np.flatnonzero(weights)
        first, last = used[0], used[-1] + 1
        return np.array(self.edges[first : last + 1], dtype=float), weights[first:last] / weights.sum()

    def pdf(self, x: FloatArray) -> FloatArray:
        edges, masses = self._bins()
        x = np.asarray(x)
        inside = (x >= edges[0]) & (x <= edges[-1])
        place = np.clip(np.searchsorted(edges, x, side="right") - 1, 0, masses.size - 1)
        return np.where(inside, (masses / np.diff(edges))[place], 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        edges, masses = self._bins()
        below = np.concatenate([[0.0], np.cumsum(masses)[:-1], [1.0]])
        return np.asarray(np.interp(x, edges, below))

    def sf(self, x: FloatArray) -> FloatArray:
        edges, masses = self._bins()
        return np.asarray(np.interp(x, edges, np.concatenate([[1.0], np.cumsum(masses[::-1])[-2::-1], [0.0]])))

    def ppf(self, p: FloatArray) -> FloatArray:
        edges, masses = self._bins()
        p = np.asarray(p)
        below = np.concatenate([[0.0], np.cumsum(masses)[:-1], [1.0]])
        place = np.clip(np.searchsorted(below, p, side="left") - 1, 0, masses.size - 1)  # first bin that reaches p
        share = np.where(masses[place] > 0, (p - below[place]) / np.where(masses[place] > 0, masses[place], 1.0), 0.0)
        return edges[place] + np.clip(share, 0.0, 1.0) * np.diff(edges)[place]

    @property
    def support(self) -> tuple[float, float]:
        edges, _ = self._bins()
        return float(edges[0]), float(edges[-1])

    def breaks(self) -> FloatArray:
        edges, _ = self._bins()
        widest = self.deviation()  # g varies at that scale, even inside a flat bin
        return np.unique(np.concatenate([even(low, high, widest) for low, high in pairwise(edges.tolist())]))

    def expectation(self) -> float:
        edges, masses = self._bins()
        return float(masses @ (edges[1:] + edges[:-1])) / 2

    def deviation(self) -> float:
        edges, masses = self._bins()
        middle, width = (edges[1:] + edges[:-1]) / 2 - self.expectation(), np.diff(edges)
        return math.sqrt(masses @ (middle**2 + width**2 / 12))

    def describe(self) -> str:
        low, high = self.support
        return f"histogram with {len(self.weights)} bins between {low:g} and {high:g}"

    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        edges, masses = self._bins()
        place = pm.Categorical(f"{name}_bin", p=masses, shape=shape)
        within = pm.Uniform(f"{name}_within", lower=0.0, upper=1.0, shape=shape)
        as_constant = pm.math.constant
        return pm.Deterministic(name, as_constant(edges[:-1])[place] + within * as_constant(np.diff(edges))[place])

    def log_density(self, pm: Any, x: Any) -> Any:
        edges, masses = self._bins()
        density = -math.inf
        for low, high, mass in zip(edges[:-1], edges[1:], masses, strict=True):
            height = math.log(mass / (high - low)) if mass > 0 else -math.inf
            density = pm.math.switch((x >= low) & (x <= high), height, density)
        return density
