"""Searches over whole numbers: the least count that satisfies a monotone predicate, and the least n that meets a
target.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray


def least_count(holds: Callable[[FloatArray], BoolArray], low: FloatArray, high: FloatArray) -> FloatArray:
    """Elementwise least whole number in low..high for which the predicate, false then true, holds; high + 1 if none."""
    low, high = low.astype(float).copy(), high.astype(float) + 1
    top = high.copy()
    while (low < high).any():
        middle = np.floor((low + high) / 2)
        yes = (middle < top) & holds(np.minimum(middle, top - 1))
        open_ = low < high
        high = np.where(open_ & yes, middle, high)
        low = np.where(open_ & ~yes, middle + 1, low)
    return low


def root_of_increasing(
    excess: Callable[[FloatArray], FloatArray], low: FloatArray, high: FloatArray, close: float
) -> FloatArray:
    """Roots of increasing functions, one in each bracket low..high, all worked on at once until every bracket is
    `close`.

    False position that halves the value kept at a retained end (Illinois method, Dowell and Jarratt 1971).
    """
    at_low, at_high = excess(low), excess(high)
    last = np.zeros(len(low))
    for _ in range(60):
        if (high - low).max() <= close:
            break
        gap = at_high - at_low
        share = np.clip(np.where(gap > 0, at_high / np.where(gap > 0, gap, 1.0), 0.5), 1e-3, 1 - 1e-3)
        middle = high - share * (high - low)
        value = excess(middle)
        up = value >= 0
        at_high, at_low = (
            np.where(up, value, np.where(last < 0, at_high / 2, at_high)),
            np.where(up, np.where(last > 0, at_low / 2, at_low), value),
        )
        high, low = np.where(up, middle, high), np.where(up, low, middle)
        last = np.where(up, 1.0, -1.0)
        exact = np.abs(value) < 1e-14
        low, high = np.where(exact, middle, low), np.where(exact, middle, high)
    return (low + high) / 2


type Meets = Callable[[list[int]], list[bool]]


@final
@dataclass(frozen=True, slots=True)
class Found:
    """`first` is the least n that meets the target, `safe` the least from which all up to `searched_to` do; None if
    there is none.
    """

    first: int | None
    safe: int | None
    searched_to: int


def monotone_search(meets: Meets, least: int, most: int) -> Found:
    """First and safe n where the measure is smooth in n: a geometric grid up to `most`, then bisection between grid
    points.
    """
    grid = _grid(least, most, dense=1)
    answers = meets(grid)
    if not any(answers):
        return Found(None, None, grid[-1])
    i = answers.index(True)
    first = grid[i] if i == 0 else _bisect(meets, grid[i - 1], grid[i])
    failing = [j for j, yes in enumerate(answers) if not yes]
    last = failing[-1] if failing else -1
    if last == len(grid) - 1:
        return Found(first, None, grid[-1])
    safe = first if last < i else _bisect(meets, grid[last], grid[last + 1])
    return Found(first, safe, grid[-1])


def _grid(least: int, most: int, dense: int) -> list[int]:
    grid = list(range(least, min(least + dense, most) + 1))
    while grid[-1] < most:
        grid.append(min(max(grid[-1] + 1, int(grid[-1] * 1.2)), most))
    return grid


def _bisect(meets: Meets, low: int, high: int) -> int:
    """Least n in low + 1..high that meets the target, low failing and high meeting it; eight points at a time."""
    while high - low > 1:
        points = sorted({low + round((high - low) * k / 9) for k in range(1, 9)} - {low, high})
        answers = meets(points)
        hit = answers.index(True) if any(answers) else len(points)
        low, high = ([low, *points][hit], [*points, high][hit])
    return high


@final
@dataclass(frozen=True, slots=True)
class SawTooth:
    """How far a search among discrete outcomes must look around a crossing: `block` n at a time, which must cover a
    tooth.
    """

    values: Callable[[list[int]], list[float]]  # signed margin: at least 0 where the target is met
    least: int
    most: int
    block: Callable[[int], int]


def saw_tooth_search(teeth: SawTooth) -> Found:
    """First and safe n where the measure goes up and down with n.

    A geometric grid and bisection find one n that meets the target close to where it is first met. From there every
    n is worked out, downwards until a whole block fails by more than its own up and down, and upwards until a whole
    block meets the target by more than that.
    """
    margins: dict[int, float] = {}

    def scan(low: int, high: int) -> list[float]:
        wanted = range(max(low, teeth.least), min(high, teeth.most) + 1)
        new = [n for n in wanted if n not in margins]
        margins.update(zip(new, teeth.values(new), strict=True))
        return [margins[n] for n in wanted]

    hit, before = None, teeth.least
    for n in _grid(teeth.least, teeth.most, dense=15):
        if scan(n, n)[0] >= 0:
            hit = n
            break
        before = n
    while hit is not None and hit - before > teeth.block(hit):
        middle = (before + hit) // 2
        before, hit = (before, middle) if scan(middle, middle)[0] >= 0 else (middle, hit)
    if hit is None:
        low = max(teeth.least, n - 2 * teeth.block(n))
        scan(low, n)
        hits = [k for k in range(low, n + 1) if margins[k] >= 0]
        if not hits:
            return Found(None, None, n)
        hit = hits[0]
    low = _walk(teeth, scan, hit, down=True)
    high = _walk(teeth, scan, hit, down=False)
    scanned = range(low, high + 1)
    first = next(k for k in scanned if margins[k] >= 0)
    failing = [k for k in scanned if margins[k] < 0]
    safe = failing[-1] + 1 if failing else first
    return Found(first, max(safe, first) if safe <= high else None, high)


def _walk(teeth: SawTooth, scan: Callable[[int, int], list[float]], start: int, *, down: bool) -> int:
    """Work out blocks from `start` until one is clear of the target; the last n worked out."""
    at = start
    while teeth.least < at if down else at < teeth.most:
        size = teeth.block(at)
        low, high = (max(at - size, teeth.least), at - 1) if down else (at, min(at + size, teeth.most))
        margins = scan(low, high)
        spread = max(margins) - min(margins)
        at = low if down else high
        if (max(margins) < -spread) if down else (min(margins) > spread):
            break
    return at
