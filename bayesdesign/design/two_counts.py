"""Outcomes of two independent binomial counts: the treated count on the line, the control count as auxiliary."""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import BoolArray, FloatArray, IntArray
from bayesdesign.core.binomial import log_choose_row
from bayesdesign.core.errors import NotOffered
from bayesdesign.core.region import Region
from bayesdesign.core.search import least_count
from bayesdesign.design.base import Outcomes, Side, Tails
from bayesdesign.design.fisher import conditional_bounds

STEPPED_TO = 30  # group size up to which every jump is given a panel of its own
THINNED = 80  # control counts looked at for the median, at most about twice as many
BLOCK = 2_000_000  # elements of one work array


def IDENTITY(target: FloatArray) -> FloatArray:  # noqa: N802 - a constant that happens to be a function
    """Estimate scale of the difference of two shares."""
    return target


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class TwoCounts(Outcomes):
    """x of sizes[0] treated and y of sizes[1] controls; estimate = transform(x, sizes[0]) - transform(y, sizes[1]).

    One sample size at a time (N = 1). For each y the tests reject beyond one x on either side, found by bisection;
    that they do is proved for the conditional test and checked by full enumeration in the tests for the z tests.
    """

    sizes: tuple[float, float]
    control: FloatArray
    null: float  # on the working scale
    null_effect: float  # in natural units
    treatment_of: Callable[[FloatArray, FloatArray], FloatArray]
    effect_of: Callable[[FloatArray, FloatArray], FloatArray]
    transform: Callable[[FloatArray, float], FloatArray]
    inverse: Callable[[FloatArray], FloatArray]
    conditional: bool
    rejects: Callable[[FloatArray, FloatArray, float, float, Side], BoolArray]

    def _y(self) -> FloatArray:
        """Control counts that matter at some nuisance node."""
        low, high = _window(self.sizes[1], np.array([self.control.min(), self.control.max()]))
        return np.arange(low[0], high[1] + 1)

    def test(self, value: float, level: float, side: Side) -> Region:
        y, top = self._y(), np.full_like(self._y(), self.sizes[0])
        if side == "higher":
            least = least_count(lambda x: self.rejects(x, y, value, level, side), np.zeros_like(y), top)
            return Region.above((least - 0.5)[None, None])
        least = least_count(lambda x: ~self.rejects(x, y, value, level, side), np.zeros_like(y), top)
        return Region.below((least - 0.5)[None, None])

    def two_sided_test(self, value: float, level: float, tails: Tails) -> tuple[Region, Region]:
        if tails == "central":
            return self.test(value, level / 2, "higher"), self.test(value, level / 2, "lower")
        if not self.conditional:
            raise NotOffered("tails = 'minimum_likelihood' is a definition for exact tests; use analysis = 'exact'")
        y, top = self._y(), np.full_like(self._y(), self.sizes[0])
        lower, upper = conditional_bounds(int(self.sizes[0]), int(self.sizes[1]), level, tails, y)
        zero = np.zeros_like(y)
        above = least_count(lambda x: x > upper[(x + y).astype(int)], zero, top)
        below = least_count(lambda x: x >= lower[(x + y).astype(int)], zero, top)
        return Region.above((above - 0.5)[None, None]), Region.below((below - 0.5)[None, None])

    @property
    def stepped(self) -> bool:
        # differences between equal groups fall on multiples of 1 / n; other estimates on far more, and closer, values
        return self.inverse is IDENTITY and self.sizes[0] == self.sizes[1] <= STEPPED_TO

    @property
    def rough_error(self) -> float:
        # measured against the stepped search at 10 to 60 per group: 1e-3 down to 3e-5, with a margin
        return 0.0 if self.stepped else 0.03 / min(self.sizes)

    @property
    def work(self) -> int:
        low, high = _window(self.sizes[0], np.array([0.5]))
        return int(high[0] - low[0]) + len(self._y())

    def _count_of(self, estimate: FloatArray, y: FloatArray) -> FloatArray:
        """Real x whose estimate (with y on the last axis) is this; outside 0..n beyond the least or largest
        estimate.
        """
        target = estimate + self.transform(y, self.sizes[1])
        ends = self.transform(np.array([0.0, self.sizes[0]]), self.sizes[0])
        with np.errstate(over="ignore"):  # an endless reach holds every count
            x = self.sizes[0] * self.inverse(target)
        return np.where(target < ends[0], -1.0, np.where(target > ends[1], self.sizes[0] + 1, x))

    def null_outcome(self) -> FloatArray:
        return self._count_of(np.full((1, 1, 1), self.null), self._y())

    def working_effect(self, effect: FloatArray) -> FloatArray:
        """Effect on the scale of the estimates."""
        with np.errstate(divide="ignore"):
            return effect if self.inverse is IDENTITY else np.log(effect)

    def natural_effect(self, working: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return working if self.inverse is IDENTITY else np.exp(working)

    def outcomes_within(self, reach: FloatArray) -> tuple[FloatArray, FloatArray]:
        return self._within(reach[..., None], self._y())

    def _within(self, reach: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        slack = 1e-9  # counts at exactly this distance are within it
        return self._count_of(self.null - reach, y) - slack, self._count_of(self.null + reach, y) + slack

    def probabilities_within(self, effect: FloatArray, regions: Sequence[Region], reach: FloatArray) -> FloatArray:
        # Only a probability is asked for, and of many control counts every k-th says enough: the sum over them is
        # smooth. Without a panel for every jump, the average over a jump's surroundings stands for it (see
        # `_CountTails.smooth`).
        y = self._y()
        picks = np.arange(0, len(y), max(1, len(y) // THINNED))
        log_choose_y = log_choose_row(int(self.sizes[1]))[y[picks].astype(np.int64)]
        total = np.zeros(effect.shape)
        for m, control in enumerate(self.control):
            pmf_y = _pmf(log_choose_y, y[picks], self.sizes[1], control)
            keep = pmf_y > 1e-12 * pmf_y.max()
            share = np.clip(self.treatment_of(effect[0, m], control), 0.0, 1.0)
            tails = _CountTails.build(self.sizes[0], share, None)
            low, high = self._within(reach[0, m][:, None], y[picks][keep])
            for region in regions:
                for lower, upper in zip(region.lower, region.upper, strict=True):
                    ends = (np.broadcast_to(b[0, 0], y.shape)[picks][keep] for b in (lower, upper))
                    lower_end, upper_end = np.maximum(next(ends), low), np.minimum(next(ends), high)
                    mass = (
                        tails.between(lower_end, upper_end)[0] if self.stepped else tails.smooth(lower_end, upper_end)
                    )
                    total[0, m] += mass @ pmf_y[keep] / pmf_y.sum()
        return total

    def measure(self, effect: FloatArray, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        shape = (len(lower), *effect.shape)
        mass, moment = np.zeros(shape), np.zeros(shape)
        y = self._y()
        lower, upper = (np.broadcast_to(b, (*b.shape[:4], len(y))) for b in (lower, upper))
        log_choose_y = log_choose_row(int(self.sizes[1]))[y.astype(np.int64)]
        centre = self.transform(y, self.sizes[1]) + self.null
        for m, control in enumerate(self.control):
            pmf_y = _pmf(log_choose_y, y, self.sizes[1], control)
            keep = pmf_y > 1e-18
            for rows in _blocks(effect.shape[2], len(y)):
                share = np.clip(self.treatment_of(effect[0, m, rows], control), 0.0, 1.0)
                share, back = np.unique(share, return_inverse=True) if lower.shape[3] == 1 else (share, slice(None))
                tails = _CountTails.build(self.sizes[0], share, self.transform)
                for i in range(len(lower)):
                    low, high = (
                        (b[i, 0, min(m, b.shape[2] - 1)][rows if b.shape[3] > 1 else slice(None)][:, keep])
                        for b in (lower, upper)
                    )
                    zeroth, first = tails.between(low, high)
                    mass[i, 0, m, rows] = (zeroth @ pmf_y[keep])[back]
                    moment[i, 0, m, rows] = (first @ pmf_y[keep] - zeroth @ (pmf_y * centre)[keep])[back]
        return mass, moment

    def landmarks(self, regions: Sequence[Region], multiple: FloatArray | None = None) -> FloatArray:
        y, control = self._y(), self.control
        nearest = np.clip(np.round(control * self.sizes[1]) - y[0], 0, len(y) - 1).astype(int)
        points = [self.treatment_of(np.full_like(control, self.null_effect), control)[:, None]]
        for bound in (bound for region in regions for side in (region.lower, region.upper) for bound in side):
            if np.isinf(bound).all():
                continue
            share = np.clip(np.broadcast_to(bound[0, 0], y.shape)[nearest] / self.sizes[0], 0.0, 1.0)[:, None]
            se = np.sqrt(
                np.maximum(share * (1 - share), 1 / self.sizes[0]) / self.sizes[0]
                + (control * (1 - control) / self.sizes[1])[:, None]
            )
            points.append(share + se * np.array([-7.0, -3.5, -1.2, 0.0, 1.2, 3.5, 7.0]))
        treatment = np.clip(np.concatenate(points, axis=1), 0.0, 1.0)
        effects = self.effect_of(treatment, control[:, None])
        if multiple is not None and not self.stepped:
            gaps = np.abs(self.working_effect(effects) - self.null) / multiple
            effects = np.concatenate(
                [effects, self.natural_effect(self.null + gaps), self.natural_effect(self.null - gaps)], axis=1
            )
        if multiple is not None and self.stepped:
            steps = np.arange(-self.sizes[0], self.sizes[0] + 1) / self.sizes[0] - self.null_effect
            effects = np.concatenate(
                [effects, np.broadcast_to(self.null_effect + steps / multiple, (len(control), len(steps)))], axis=1
            )
        return effects[None]


@dataclass(frozen=True, slots=True)
class _CountTails:
    """Sums of the binomial law of x below and above every count of a window, for K success shares."""

    start: FloatArray  # (K, 1) first count of the window
    below: FloatArray  # (K, W + 1) P(x < start + j)
    above: FloatArray  # (K, W + 1) P(x >= start + j)
    below_moment: FloatArray  # the same of transform(x)
    above_moment: FloatArray

    @classmethod
    def build(
        cls, n: float, share: FloatArray, transform: Callable[[FloatArray, float], FloatArray] | None
    ) -> "_CountTails":
        """Without `transform`, probabilities only: the moments are the probabilities again."""
        low, high = _window(n, share)
        width = int((high - low).max()) + 1
        start = np.minimum(low, n + 1 - width)[:, None]
        x = start + np.arange(float(width))
        pmf = _pmf(log_choose_row(int(n))[x.astype(np.int64)], x, n, share[:, None])
        if transform is None:
            below, above = _up(pmf), _down(pmf)
            return cls(start, below, above, below, above)
        value = pmf * transform(x, n)
        return cls(start, _up(pmf), _down(pmf), _up(value), _down(value))

    def between(self, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        """P(lower < x < upper) and E[transform(x); the same] for bounds (K or 1, Y), each (K, Y)."""
        if np.isposinf(upper).all():
            at = self._index(np.floor(lower) + 1)
            return np.take_along_axis(self.above, at, 1), np.take_along_axis(self.above_moment, at, 1)
        if np.isneginf(lower).all():
            at = self._index(np.ceil(upper))
            return np.take_along_axis(self.below, at, 1), np.take_along_axis(self.below_moment, at, 1)
        first = self._index(np.floor(lower) + 1)
        last = np.maximum(self._index(np.ceil(upper)), first)
        mass = np.take_along_axis(self.below, last, 1) - np.take_along_axis(self.below, first, 1)
        if self.below_moment is self.below:
            return mass, mass
        return mass, np.take_along_axis(self.below_moment, last, 1) - np.take_along_axis(self.below_moment, first, 1)

    def smooth(self, lower: FloatArray, upper: FloatArray) -> FloatArray:
        """P(lower < x < upper) with every jump spread evenly over the unit around it; exact for bounds between whole
        numbers.
        """
        return np.maximum(self._interpolated(upper) - self._interpolated(np.minimum(lower, upper)), 0.0)

    def _interpolated(self, bound: FloatArray) -> FloatArray:
        place = np.clip(bound + 0.5 - self.start, 0, self.below.shape[1] - 1)
        k = np.minimum(place.astype(np.int64), self.below.shape[1] - 2)
        left, right = (np.take_along_axis(self.below, at, 1) for at in (k, k + 1))
        return np.asarray(left + (place - k) * (right - left))

    def _index(self, count: FloatArray) -> IntArray:
        return np.clip(count - self.start, 0, self.below.shape[1] - 1).astype(np.int64)


def _window(n: float, share: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Counts outside which less than about 1e-17 of a binomial law lies: 9.5 sds, and more where it is Poisson-like."""
    reach = 9.5 * np.sqrt(n * share * (1 - share)) + 40
    return np.maximum(np.floor(n * share - reach), 0.0), np.minimum(np.ceil(n * share + reach), n)


def _pmf(log_choose_x: FloatArray, x: FloatArray, n: float, share: FloatArray | float) -> FloatArray:
    return np.asarray(np.exp(log_choose_x + special.xlogy(x, share) + special.xlog1py(n - x, -np.asarray(share))))


def _up(values: FloatArray) -> FloatArray:
    return np.concatenate([np.zeros((len(values), 1)), np.cumsum(values, axis=1)], axis=1)


def _down(values: FloatArray) -> FloatArray:
    return _up(values[:, ::-1])[:, ::-1]


def _blocks(count: int, width: int) -> Iterator[slice]:
    step = max(1, BLOCK // width)
    return (slice(start, start + step) for start in range(0, count, step))
