"""Several beliefs at once, each with a weight."""

import math
from dataclasses import dataclass
from typing import Any, ClassVar, final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import check_values
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.spacing import first_reached, thin

SUM_TOLERANCE = 1e-6 + 1e-12  # 0.333333 three times is just accepted


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Mixture(Distribution):
    """Mixture: the number follows one of the components, chosen with the given probabilities.

    components: any distributions, point masses and mixtures among them. weights: one each, >= 0, with sum 1.
    """

    kind: ClassVar[str] = "mixture"
    components: tuple[Distribution, ...]
    weights: tuple[float, ...]

    def __post_init__(self) -> None:
        usable = all(math.isfinite(w) and w >= 0 for w in self.weights)
        total = math.fsum(self.weights) if usable else math.nan
        one_each = len(self.weights) == len(self.components)
        check_values(
            (len(self.components) > 0, "components", self.components, "at least one distribution"),
            (one_each, "weights", self.weights, f"one for each of the {len(self.components)} components"),
            (usable, "weights", self.weights, "finite numbers >= 0"),
            (
                not usable or abs(total - 1) <= SUM_TOLERANCE,
                "weights",
                self.weights,
                f"sum 1, not {total:.9g}",
            ),
        )

    def parts(self) -> list[tuple[Distribution, float]]:
        """Components with a positive weight, nested mixtures dissolved, and weights with sum exactly 1."""
        total = math.fsum(self.weights)
        found: list[tuple[Distribution, float]] = []
        for component, weight in zip(self.components, self.weights, strict=True):
            inner = component.parts() if isinstance(component, Mixture) else [(component, 1.0)]
            found += [(part, share * weight / total) for part, share in inner if weight > 0]
        return found

    def pdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(sum(share * part.pdf(x) for part, share in self.parts()))

    def cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(sum(share * part.cdf(x) for part, share in self.parts()))

    def sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(sum(share * part.sf(x) for part, share in self.parts()))

    def ppf(self, p: FloatArray) -> FloatArray:
        p = np.asarray(p, dtype=float)
        # The quantile of a mixture lies between the smallest and the largest quantile of its parts.
        quantiles = np.array([part.ppf(p) for part, _ in self.parts()])
        low, high = quantiles.min(axis=0), quantiles.max(axis=0)
        ends = ~np.isfinite(low) | ~np.isfinite(high)

        def reached(x: FloatArray) -> BoolArray:
            return np.asarray(np.where(p < 0.5, self.cdf(x) >= p, self.sf(x) <= 1 - p))

        found = first_reached(reached, np.where(ends, 0.0, low), np.where(ends, 0.0, high))
        found = np.where(ends, np.where(p < 0.5, low, high), found)
        return np.where(p == 0, self.support[0], np.where(p == 1, self.support[1], found))

    @property
    def support(self) -> tuple[float, float]:
        ends = [part.support for part, _ in self.parts()]
        return min(low for low, _ in ends), max(high for _, high in ends)

    def breaks(self) -> FloatArray:
        parts = [part for part, _ in self.parts()]
        found = [part.breaks() for part in parts]
        points = thin(np.concatenate(found))
        # A part whose density is infinite at 1 leaves mass between its last break and 1. No panel may reach
        # over it: at the end of the support all of it stays outside, elsewhere its end becomes a break.
        for part, own in zip(parts, found, strict=True):
            if own.size and float(part.sf(own[-1])) > 1e-15 and math.isfinite(end := part.support[1]):
                inside = points[points <= own[-1]]
                points = inside if end == self.support[1] else thin(np.append(points, end))
        return points

    def atoms(self) -> tuple[FloatArray, FloatArray]:
        pairs = [(part.atoms(), share) for part, share in self.parts()]
        values = np.concatenate([values for (values, _), _ in pairs])
        masses = np.concatenate([share * masses for (_, masses), share in pairs])
        merged, place = np.unique(values, return_inverse=True)
        return merged, np.bincount(place, weights=masses, minlength=merged.size).astype(float)

    def expectation(self) -> float:
        return sum(share * part.expectation() for part, share in self.parts())

    def deviation(self) -> float:
        centre = self.expectation()
        if not math.isfinite(centre):
            return math.nan
        moments = [part.deviation() ** 2 + (part.expectation() - centre) ** 2 for part, _ in self.parts()]
        return math.sqrt(sum(share * m for (_, share), m in zip(self.parts(), moments, strict=True)))

    def describe(self) -> str:
        return "mixture: " + "; ".join(f"{100 * share:g} % {part.describe()}" for part, share in self.parts())

    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        parts = self.parts()
        which = pm.Categorical(f"{name}_component", p=np.array([share for _, share in parts]), shape=shape)
        drawn = [part.random_variable(pm, f"{name}_{i}", shape) for i, (part, _) in enumerate(parts)]
        chosen = drawn[0]
        for i, draws in enumerate(drawn[1:], start=1):
            chosen = pm.math.switch(pm.math.eq(which, i), draws, chosen)
        return pm.Deterministic(name, chosen)

    def log_density(self, pm: Any, x: Any) -> Any:
        terms = [math.log(share) + part.log_density(pm, x) for part, share in self.parts()]
        return pm.math.logsumexp(pm.math.stack(terms), axis=0, keepdims=False)
