"""Outcomes whose estimate is normal around the truth, given an estimated or known standard error."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.core.region import Region
from bayesdesign.design.base import Analysis, Outcomes, Side, Tails

CHUNK = 4_000_000  # elements of one work array: about 32 MB


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
        shape = (len(lower), *theta.shape)
        mass, moment = np.zeros(shape), np.zeros(shape)
        step = max(1, CHUNK // max(1, theta[0].size * self.weight.shape[1]))
        for start in range(0, len(theta), step):
            rows = slice(start, start + step)
            for i in range(len(lower)):
                cut = [b[i, rows] if b.shape[1] > 1 else b[i] for b in (lower, upper)]
                mass[i, rows], moment[i, rows] = self._measure(theta[rows], rows, *cut)
        return mass, moment

    def _measure(
        self, theta: FloatArray, rows: slice, lower: FloatArray, upper: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        se = self.se[rows, :, None, None]
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
        weight = self.weight[rows, None, None, :]
        mass, slope = (mass * weight).sum(axis=-1), (slope * weight).sum(axis=-1) / np.sqrt(2 * np.pi)
        return mass, (theta - self.null) * mass + self.se[rows, :, None] * slope

    def probabilities_within(self, effect: FloatArray, regions: Sequence[Region], reach: FloatArray) -> FloatArray:
        # absolute accuracy is enough here, and half of the normal integrals do not depend on the auxiliary node
        theta, se = self.working(effect)[..., None], self.se[..., None, None]
        near, far = ((self.null + sign * reach[..., None] - theta) / se for sign in (-1, 1))
        at_near, at_far = special.ndtr(near), special.ndtr(far)
        total = np.zeros(effect.shape)
        for region in regions:
            for lower, upper in zip(region.lower, region.upper, strict=True):
                low = (
                    at_near
                    if np.isneginf(lower).all()
                    else np.maximum(at_near, special.ndtr((lower[..., None, :] - theta) / se))
                )
                high = (
                    at_far
                    if np.isposinf(upper).all()
                    else np.minimum(at_far, special.ndtr((upper[..., None, :] - theta) / se))
                )
                total += (np.maximum(high - low, 0.0) * self.weight[:, None, None, :]).sum(axis=-1)
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
