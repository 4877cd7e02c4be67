"""Where to put the panels of a composite 12-node Gauss rule, and how to invert a distribution function.

A Gauss rule on [x, r x] meets a singularity at 0 with relative error about rho^-24, where
rho = (sqrt r + 1) / (sqrt r - 1) (Bernstein ellipse): 3e-12 for r = 4, 2e-14 for r = 3. Hence the ratio 3
towards edges, and 4 only where little mass is left.
"""

from collections.abc import Callable

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray

REST = 1e-17  # mass that the outermost breaks leave outside, each side
EDGE_RATIO = 3.0  # growth of the distance to an edge where the density is not analytic
SD_STEP = 1.66  # panel width in standard deviations for bell shapes: ten panels over +-8.3
BELL_REACH = 8.5  # ndtr(-8.5) = 9.5e-18
TINY = 1e-290  # nearest useful distance to an edge at 0


def even(low: float, high: float, step: float) -> FloatArray:
    """Equal panels from low to high, none wider than step."""
    return np.linspace(low, high, max(1, int(np.ceil((high - low) / step - 1e-9))) + 1)


def walk(low: float, high: float, step: Callable[[float], float]) -> FloatArray:
    """Points from low to high where step(x) is the width of the panel that starts at x."""
    points = [low]
    while (x := points[-1]) < high:
        h = step(x)
        points.append(high if high - x < 1.2 * h else x + h)  # no sliver at the end
    return np.array(points)


def thin(points: FloatArray) -> FloatArray:
    """Sorted points without those closer than 1e-12 (relative) to their left neighbour."""
    points = np.unique(points)
    gap = 1e-12 * np.maximum(np.abs(points[1:]), np.abs(points[:-1]))
    keep = np.concatenate([[True], np.diff(points) > gap])[: points.size]
    return np.asarray(points[keep])


def split(points: FloatArray, parts: int) -> FloatArray:
    """Every panel cut into equal parts."""
    if points.size < 2 or parts == 1:
        return points
    share: FloatArray = np.arange(parts) / parts
    inner: FloatArray = points[:-1, None] + np.diff(points)[:, None] * share
    return np.append(inner.ravel(), points[-1])


def first_reached(reached: Callable[[FloatArray], BoolArray], low: FloatArray, high: FloatArray) -> FloatArray:
    """Smallest float in [low, high] for which the monotone `reached` holds, by bisection; else high."""
    low, high = low.copy(), high.copy()
    high = np.where(reached(low), low, high)
    for _ in range(1200):  # enough to cross all of double precision; about 60 in practice
        middle = low + 0.5 * (high - low)
        if not np.any((middle > low) & (middle < high)):
            break
        done = reached(middle)
        low, high = np.where(done, low, middle), np.where(done, middle, high)
    return high


def smooth_power(shape: float) -> bool:
    """Whether x^(shape - 1) is a polynomial of low degree, so that its zero at 0 needs no small panels."""
    return shape <= 12 and float(shape).is_integer()
