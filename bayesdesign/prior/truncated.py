"""A belief cut off outside a range and scaled up again inside."""

import math
from dataclasses import dataclass
from typing import Any, ClassVar, final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import Invalid, check_values
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.bounded import Histogram, Uniform
from bayesdesign.prior.location_scale import Normal
from bayesdesign.prior.mixture import Mixture
from bayesdesign.prior.plain import Plain
from bayesdesign.prior.point import Point
from bayesdesign.prior.spacing import REST, first_reached, split, thin

LEAST_MASS = 1e-12  # less cannot be told from rounding in cdf differences, nor be drawn


@final
@dataclass(frozen=True, kw_only=True, slots=True)
class Truncated(Distribution):
    """The base distribution, given that the number lies between low and high, both included.

    base: any distribution with a density; point masses of a mixture stay if they are inside. low, high: the
    range; one end may be infinite. A study file writes `truncated = [low, high]` in the table of the base.
    """

    kind: ClassVar[str] = "truncated"
    base: Distribution
    low: float
    high: float

    def __post_init__(self) -> None:
        window = [self.low, self.high]
        check_values((self.low < self.high, "truncated", window, "two numbers, the first less than the second"))
        check_values(
            (self.base.breaks().size > 0, "truncated", window, "only a distribution with a density"),
            (self.mass() >= LEAST_MASS, "truncated", window, f"a range with mass at least {LEAST_MASS:g}"),
        )

    def _at_low(self) -> float:
        """Mass of an atom exactly at low, which the window keeps."""
        values, masses = self.base.atoms()
        return float(masses[values == self.low].sum())

    def _left(self) -> bool:
        """Whether differences of cdf are more accurate here than differences of sf."""
        return float(self.base.cdf(np.asarray(self.low))) < 0.5

    def _below(self, x: FloatArray) -> FloatArray:
        """Mass of the base in [low, x]."""
        low = np.asarray(self.low)
        if self._left():
            return self.base.cdf(x) - float(self.base.cdf(low)) + self._at_low()
        return float(self.base.sf(low)) + self._at_low() - self.base.sf(x)

    def _above(self, x: FloatArray) -> FloatArray:
        """Mass of the base in (x, high]."""
        high = np.asarray(self.high)
        by_cdf = float(self.base.cdf(high)) - self.base.cdf(x)
        return np.where(self.base.cdf(x) < 0.5, by_cdf, self.base.sf(x) - float(self.base.sf(high)))

    def mass(self) -> float:
        """Mass of the base inside the window."""
        return float(self._below(np.asarray(self.high)))

    def pdf(self, x: FloatArray) -> FloatArray:
        x = np.asarray(x)
        return np.where((x >= self.low) & (x <= self.high), self.base.pdf(x) / self.mass(), 0.0)

    def cdf(self, x: FloatArray) -> FloatArray:
        inside = np.clip(self._below(np.minimum(x, self.high)) / self.mass(), 0.0, 1.0)
        return np.where(np.asarray(x) < self.low, 0.0, inside)

    def sf(self, x: FloatArray) -> FloatArray:
        inside = np.clip(self._above(np.minimum(x, self.high)) / self.mass(), 0.0, 1.0)
        return np.where(np.asarray(x) < self.low, 1.0, inside)

    def ppf(self, p: FloatArray) -> FloatArray:
        p = np.asarray(p, dtype=float)
        low, high = self.support
        grid = self._grid()
        below, above = self.cdf(grid), self.sf(grid)

        def reached(x: FloatArray) -> BoolArray:
            return np.asarray(np.where(p < 0.5, self.cdf(x) >= p, self.sf(x) <= 1 - p))

        # Not the ppf of the base: it has lost all digits when the window is far in the upper tail.
        by_cdf, by_sf = np.searchsorted(below, p), np.searchsorted(-above, p - 1)
        place = np.where(p < 0.5, by_cdf, by_sf).clip(0, grid.size - 1)
        found = first_reached(reached, grid[np.maximum(place - 1, 0)], grid[place])
        return np.where(p == 0, low, np.where(p == 1, high, found))

    def _grid(self) -> FloatArray:
        """Finite points, the ends of the support as far as finite, between which quantiles are searched."""
        ends = [end for end in self.support if math.isfinite(end)]
        return np.unique(np.concatenate([self.breaks(), self.atoms()[0], ends]))

    @property
    def support(self) -> tuple[float, float]:
        low, high = self.base.support
        return max(low, self.low), min(high, self.high)

    def breaks(self) -> FloatArray:
        base = self.base.breaks()
        points = np.concatenate([base[(base > self.low) & (base < self.high)], self._last(base, 1)])
        points = thin(np.concatenate([points, self._last(-base[::-1], -1)]))
        if points.size == 1:  # the whole window is beyond the base's last break
            points = np.array(self.support)
        # The panels of the base serve an error relative to its whole mass and functions as smooth as itself;
        # a window that is small in either sense needs finer ones.
        return split(points, 4 if self.mass() < 0.05 or points.size <= 3 else 1)

    def _last(self, base: FloatArray, sign: int) -> FloatArray:
        """The last break on one side, and panels beyond the base's own if the window holds mass there.

        For the left side (sign -1) everything is mirrored.
        """
        edge, end = sorted(sign * value for value in (self.support if sign > 0 else self.support[::-1]))
        if end <= base[-1]:
            return np.array([sign * end])
        widths = np.diff(base)
        width = float(widths[-2:].max())
        growth = float(np.clip(widths[-1] / widths[-2], 0.25, 4.0)) if widths.size > 1 else 1.0
        points = [max(edge, float(base[-1]))]
        for _ in range(400):
            x = points[-1]
            # Next to a finite end other than 0 the floats are too coarse for more panels.
            if x >= end or self._rest(sign * x, sign) <= REST or abs(end - x) <= 1e-7 * abs(end) < math.inf:
                break
            width *= growth
            points.append(min(x + width, end))
        return sign * np.array(points)

    def _rest(self, x: float, sign: int) -> float:
        """Mass of the density beyond x on one side, without atoms."""
        values, masses = self.atoms()
        beyond = self.sf(np.asarray(x)) if sign > 0 else self.cdf(np.asarray(x))
        return max(float(beyond) - float(masses[values > x if sign > 0 else values <= x].sum()), 0.0)

    def atoms(self) -> tuple[FloatArray, FloatArray]:
        values, masses = self.base.atoms()
        inside = (values >= self.low) & (values <= self.high)
        return values[inside], masses[inside] / self.mass()

    def _moments(self) -> tuple[float, float]:
        """Mean and sd, by the panels, with the power law of the tail continued to an infinite end."""
        points = self.breaks()
        centre = float(self.base.ppf(np.asarray(0.5)))
        node, weight = np.polynomial.legendre.leggauss(12)
        half = np.diff(points)[:, None] / 2
        x = (points[:-1, None] + half * (1 + node)).ravel()
        values, masses = self.atoms()
        y = np.concatenate([x, values]) - centre
        mass = np.concatenate([self.pdf(x) * (half * weight).ravel(), masses])
        tails = np.array([self._tail(float(points[i]), sign, centre) for i, sign in ((-1, 1), (0, -1))])
        zeroth, first, second = tails.sum(axis=0)
        total = mass.sum() + zeroth
        mean = float(mass @ y + first) / total
        if not math.isfinite(mean):
            return math.nan, math.nan
        variance = float(mass @ (y - mean) ** 2 + second - 2 * mean * first + mean**2 * zeroth) / total
        return centre + mean, math.sqrt(variance)

    def _tail(self, x: float, sign: int, centre: float) -> tuple[float, float, float]:
        """Moments 0, 1, 2 about centre of what lies beyond x on one side."""
        rest, distance = self._rest(x, sign), x - centre
        if math.isfinite(self.support[sign > 0]):
            return rest, rest * distance, rest * distance**2
        farther = self._rest(x + distance, sign)
        if rest == 0 or farther == 0:
            return 0.0, 0.0, 0.0
        power = math.log2(rest / farther)
        first = rest * distance * power / (power - 1) if power > 1 + 1e-9 else sign * math.inf
        return rest, first, rest * distance**2 * power / (power - 2) if power > 2 + 1e-9 else math.inf

    def expectation(self) -> float:
        return self._moments()[0]

    def deviation(self) -> float:
        return self._moments()[1]

    def describe(self) -> str:
        if self.low == -math.inf:
            return f"{self.base.describe()}, at most {self.high:g}"
        if self.high == math.inf:
            return f"{self.base.describe()}, at least {self.low:g}"
        return f"{self.base.describe()}, cut to {self.low:g} to {self.high:g}"

    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        low, high = self.support
        match self.base:
            case Truncated(base=base):
                return Truncated(base=base, low=low, high=high).random_variable(pm, name, shape)
            case Mixture():
                return self._cut_mixture(self.base).random_variable(pm, name, shape)
            case Histogram():
                return self._cut_histogram(self.base).random_variable(pm, name, shape)
            case Uniform():
                return Uniform(low=low, high=high).random_variable(pm, name, shape)
            case Normal():
                return self._draw_normal(self.base, pm, name, shape)
            case Plain():
                natural = self.base.support  # where the window cuts nothing off, PyMC must not look for an end
                ends = [None if end == nature else end for end, nature in zip((low, high), natural, strict=True)]
                if ends == [None, None]:
                    return self.base.random_variable(pm, name, shape)
                law = self.base.unnamed(pm)
                return pm.Truncated(name, law, lower=_double(ends[0]), upper=_double(ends[1]), shape=shape)
            case _:
                raise TypeError(f"no draws from a truncated {self.base.kind}")

    def _draw_normal(self, normal: Normal, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        """Inversion of PyMC's own normal cdf.

        pm.TruncatedNormal draws in Python under numba, which warns at every compilation; PyMC's other
        truncated distributions invert the cdf too. A window above the mean is mirrored, because only small
        probabilities keep their digits: otherwise 6.5 sd and more gave 339,000 different values in a million.
        """
        mirrored = self.low > normal.mean
        low, high = (2 * normal.mean - self.high, 2 * normal.mean - self.low) if mirrored else (self.low, self.high)
        law = normal.unnamed(pm)
        first = pm.math.exp(pm.logcdf(law, np.float64(low))) if math.isfinite(low) else 0.0
        last = pm.math.exp(pm.logcdf(law, np.float64(high))) if math.isfinite(high) else 1.0
        share = pm.Uniform(f"{name}_share", lower=0.0, upper=1.0, shape=shape)
        x = pm.icdf(law, first + share * (last - first))
        return pm.Deterministic(name, 2 * normal.mean - x if mirrored else x)

    def _cut_mixture(self, mixture: Mixture) -> Mixture:
        """The same belief as a mixture of truncated parts."""
        parts: list[tuple[Distribution, float]] = []
        for part, share in mixture.parts():
            if isinstance(part, Point):
                if self.low <= part.value <= self.high:
                    parts.append((part, share))
                continue
            try:
                cut = Truncated(base=part, low=self.low, high=self.high)
            except Invalid:  # nothing of this part is left
                continue
            parts.append((cut, share * cut.mass()))
        total = math.fsum(mass for _, mass in parts)
        return Mixture(components=tuple(part for part, _ in parts), weights=tuple(mass / total for _, mass in parts))

    def _cut_histogram(self, histogram: Histogram) -> Histogram:
        """The same belief as a histogram whose outer bins are shorter."""
        low, high = self.support
        edges = (low, *(edge for edge in histogram.edges if low < edge < high), high)
        return Histogram(edges=edges, weights=tuple(np.diff(histogram.cdf(np.array(edges))).tolist()))

    def log_density(self, pm: Any, x: Any) -> Any:
        inside = self.base.log_density(pm, x) - math.log(self.mass())
        return pm.math.switch((x >= self.low) & (x <= self.high), inside, -math.inf)


def _double(end: float | None) -> np.float64 | None:
    return None if end is None else np.float64(end)  # PyTensor would keep a Python 2.0 in single precision
