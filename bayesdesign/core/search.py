"""Searches over whole numbers: the least count that satisfies a monotone predicate, and the least n that meets a target."""

from collections.abc import Callable

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
