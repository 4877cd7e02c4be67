"""Sets of outcomes on one line, as unions of intervals that combine with & | ^ ~.

What a study records is reduced to one number on a line (an estimate, a count), given an auxiliary statistic (a
sample sd, the other arm's count). A rule's claim is then, for each auxiliary node, a union of intervals of that
line. For counts the bounds lie between whole numbers, so open and closed ends never matter.
"""

from dataclasses import dataclass
from functools import reduce
from operator import and_
from typing import Self, final

import numpy as np

from bayesdesign.core.arrays import FloatArray


@final
@dataclass(frozen=True, slots=True)
class Region:
    """Union of disjoint intervals; `lower`, `upper` have shape (I, N, M or 1, A or 1), empty where lower >= upper."""

    lower: FloatArray
    upper: FloatArray

    @classmethod
    def between(cls, lower: FloatArray, upper: FloatArray) -> Self:
        """One interval for each (n, nuisance, auxiliary) node."""
        low, high = np.broadcast_arrays(lower, upper)
        return cls(low[None], high[None])

    @classmethod
    def above(cls, bound: FloatArray) -> Self:
        return cls.between(bound, np.full_like(bound, np.inf))

    @classmethod
    def below(cls, bound: FloatArray) -> Self:
        return cls.between(np.full_like(bound, -np.inf), bound)

    def __and__(self, other: "Region") -> "Region":
        low = np.maximum(self.lower[:, None], other.lower[None])
        high = np.minimum(self.upper[:, None], other.upper[None])
        return Region(low.reshape(-1, *low.shape[2:]), high.reshape(-1, *high.shape[2:])).pruned()

    def __invert__(self) -> "Region":
        low, high = self.lower, np.maximum(self.lower, self.upper)
        outside = [
            Region(np.stack([np.full_like(a, -np.inf), b]), np.stack([a, np.full_like(b, np.inf)]))
            for a, b in zip(low, high, strict=True)
        ]
        return reduce(and_, outside)

    def __or__(self, other: "Region") -> "Region":
        return ~(~self & ~other)

    def __xor__(self, other: "Region") -> "Region":
        return (self & ~other) | (other & ~self)

    def pruned(self) -> "Region":
        """Without the intervals that are empty at every node (one is kept, so that the shape stays readable)."""
        full = (self.lower < self.upper).reshape(len(self.lower), -1).any(axis=1)
        if not full.any():
            full[0] = True
        return Region(self.lower[full], self.upper[full])
