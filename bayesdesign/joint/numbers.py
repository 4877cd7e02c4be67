"""All quantities of one route with their errors, as arrays over n."""

from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.joint.table import Joint

POWER_LEVELS = (0.05, 0.25, 0.5, 0.75, 0.95)


@final
@dataclass(frozen=True, slots=True)
class Number:
    """value and error (N,), or (N, P) for the power quantiles; NaN or infinity where `why_null` applies.

    `weight` (N,) is the probability of the condition the number is taken under (1 if it has none).
    """

    value: FloatArray
    error: FloatArray
    why_null: str = ""
    weight: FloatArray | float = 1.0


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Numbers:
    """One route's answer for N sizes: quantities by name, cell probabilities (N, S, D) with their errors, and the
    table.
    """

    by_name: dict[str, Number]
    cells: FloatArray
    cells_error: FloatArray
    joint: Joint


def missing(count: int, why: str) -> Number:
    """A number that cannot be given at any of `count` sizes."""
    return Number(np.full(count, np.nan), np.full(count, np.nan), why)
