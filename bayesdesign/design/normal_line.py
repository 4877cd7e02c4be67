"""Outcomes whose estimate is normal around the truth, given an estimated or known standard error."""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Literal, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.core.region import Region
from bayesdesign.design.base import Analysis, Outcomes, Side, Tails

CHUNK = 60_000  # elements of one work array: about half a megabyte


def _identity(x: FloatArray) -> FloatArray:
    return x


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class NormalLine(Outcomes):
    """Estimate ~ normal(effect, se); its test divides by `estimated_se`, whose law is given by nodes and `weight`.

    se: (N, M) true standard error; estimated_se: (N, M, A); df: (N, 1 or M, 1 or A), infinite for a z test;
    weight: (N, A), each row sums to 1; null: on the working scale.
    """

    se: FloatArray
    estimated_se: FloatArray
    df: FloatArray
    weight: FloatArray
    null: float
    working: Callable[[FloatArray], FloatArray] = _identity
    natural: Callable[[FloatArray], FloatArray] = _identity

    def test(self, value: float, level: float, side: Side) -> Region:
        reach = critical_value(self.df, level) * self.estimated_se
        centre = float(self.working(np.asarray(value)))
        return Region.above(centre + reach) if side == "higher" else Region.below(centre - reach)

    @property
    def work(self) -> int:
        return int(self.weight.shape[1])

    def null_outcome(self) -> FloatArray:
        return np.full((1, 1, 1), self.null)

    def outcomes_within(self, reach: FloatArray) -> tuple[FloatArray, FloatArray]:
        return (self.null - reach)[..., None], (self.null + reach)[..., None]

    def measure(self, effect: FloatArray, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        theta = self.working(effect)
        mass, moment = np.zeros((len(lower), *theta.shape)), np.zeros((len(lower), *theta.shape))
        for n, columns in self._blocks(theta):
            for i in range(len(lower)):
                bounds = (_cut(bound[i], n, columns) for bound in (lower, upper))
                at = (i, n, columns)
                mass[at], moment[at] = self._measure(theta[n, columns], n, columns, *bounds)
        return mass, moment

    def _blocks(self, theta: FloatArray) -> Iterator[tuple[int, slice]]:
        """One size and some nuisance nodes at a time, so that the work arrays stay in the processor's cache."""
        step = max(1, CHUNK // max(1, theta.shape[2] * self.weight.shape[1]))
        for n in range(len(theta)):
            for start in range(0, theta.shape[1], step):
                yield n, slice(start, start + step)

    def _measure(
        self, theta: FloatArray, n: int, columns: slice, lower: FloatArray, upper: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        se = self.se[n, columns, None, None]
        low, high = (lower - theta[..., None]) / se, (upper - theta[..., None]) / se
        if np.isposinf(upper).all():
            mass, slope = special.ndtr(-low), np.exp(-low * low / 2)
        elif np.isneginf(lower).all():
            mass, slope = special.ndtr(high), -np.exp(-high * high / 2)
        else:
            low, high = np.minimum(low, high), np.where(lower < upper, high, np.minimum(low, high))
            # in the upper half both tails are mirrored, so that a small difference keeps its digits
            with np.errstate(invalid="ignore"):
                mirror = low + high > 0
            mass = special.ndtr(np.where(mirror, -low, high)) - special.ndtr(np.where(mirror, -high, low))
            slope = np.exp(-low * low / 2) - np.exp(-high * high / 2)
        mass, slope = self._averaged(mass, n), self._averaged(slope, n) / np.sqrt(2 * np.pi)
        return mass, (theta - self.null) * mass + self.se[n, columns, None] * slope

    def _averaged(self, values: FloatArray, n: int) -> FloatArray:
        """Mean over the auxiliary nodes, on the last axis (of length 1 where nothing depends on them)."""
        return np.asarray(values @ self.weight[n] if values.shape[-1] > 1 else values[..., 0])

    def probabilities_within(self, effect: FloatArray, regions: Sequence[Region], reach: FloatArray) -> FloatArray:
        # absolute accuracy is enough here, and half of the normal integrals do not depend on the auxiliary node
        theta = self.working(effect)
        total = np.zeros(effect.shape)
        for n, columns in self._blocks(theta):
            centre, se = theta[n, columns, :, None], self.se[n, columns, None, None]
            at_near, at_far = (
                special.ndtr((self.null + sign * reach[n, columns, :, None] - centre) / se) for sign in (-1, 1)
            )
            for region in regions:
                for bounds in zip(region.lower, region.upper, strict=True):
                    lower, upper = (_cut(bound[..., None, :], n, columns) for bound in bounds)
                    low, high = at_near, at_far
                    if not np.isneginf(lower).all():
                        low = np.maximum(low, special.ndtr((lower - centre) / se))
                    if not np.isposinf(upper).all():
                        high = np.minimum(high, special.ndtr((upper - centre) / se))
                    total[n, columns] += self._averaged(np.maximum(high - low, 0.0), n)
        return total

    def landmarks(self, regions: Sequence[Region], multiple: FloatArray | None = None) -> FloatArray:
        cumulative = np.cumsum(self.weight, axis=1)
        picks = [np.argmax(cumulative > q * cumulative[:, -1:], axis=1) for q in (0.02, 0.5, 0.98)]
        se = self.se[..., None]
        points = []
        for bound in (bound for region in regions for side in (region.lower, region.upper) for bound in side):
            if np.isinf(bound).all():
                continue
            full = np.broadcast_to(bound, (*self.se.shape, self.weight.shape[1]))
            low, middle, high = (np.take_along_axis(full, p[:, None, None], axis=2) for p in picks)
            first, last = np.minimum(low, high), np.maximum(low, high)
            points.append(first + se * np.array([-6.5, -3.0]))
            points.append(middle + se * np.array([-1.2, 1.2]))
            points.append(last + se * np.array([3.0, 6.5]))
            if multiple is not None:
                # an interval within the reach opens where the reach arrives at the bound
                near = np.concatenate([low, middle, high], axis=2) - self.null
                points += [self.null + near / multiple[:, None, None], self.null - near / multiple[:, None, None]]
        return self.natural(np.concatenate(points, axis=2)) if points else np.empty((*self.se.shape, 0))


def _cut(bound: FloatArray, n: int, columns: slice) -> FloatArray:
    """Bounds (N or 1, M or 1, K or 1, A or 1) of one size and some nuisance nodes."""
    row: FloatArray = bound[n if bound.shape[0] > 1 else 0]
    return row[columns] if row.shape[0] > 1 else row


def critical_value(df: FloatArray, level: float) -> FloatArray:
    """Upper `level` point of Student t with df degrees of freedom, of the standard normal where df is infinite."""
    finite = np.isfinite(df)
    return np.asarray(np.where(finite, -special.stdtrit(np.where(finite, df, 1.0), level), -special.ndtri(level)))


@final
@dataclass(frozen=True, slots=True)
class NormalAnalysis(Analysis):
    """Wald or t tests on an estimate (working scale) with its standard error; df infinite for z."""

    value: FloatArray
    standard_error: FloatArray
    df: FloatArray | float
    working: Callable[[FloatArray], FloatArray] = _identity

    @property
    def estimate(self) -> FloatArray:
        return self.value

    def p_value(self, value: float, side: Literal["higher", "lower", "two"], tails: Tails) -> FloatArray:
        from scipy import stats

        if tails != "central":
            raise NotOffered("tails = 'minimum_likelihood' is a definition for exact tests of counts")
        statistic = (self.value - float(self.working(np.asarray(value)))) / self.standard_error
        law = stats.norm if np.all(np.isinf(self.df)) else stats.t(self.df)
        if side == "two":
            return np.asarray(2 * law.sf(np.abs(statistic)))
        return np.asarray(law.sf(statistic) if side == "higher" else law.cdf(statistic))
