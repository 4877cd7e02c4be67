"""`Joint`: truths down, decisions across, a probability in each cell. Both routes fill it; every reading is taken
from it.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray, IntArray

if TYPE_CHECKING:
    import xarray as xr


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Joint:
    """Axes: N sizes, T truths, D decisions. On the integration route a truth is a node, on the sampling route a draw.

    distance is effect minus null on the working scale, 0 exactly where the effect is exactly null. absolute is
    E[|estimate - null|; decision | truth] on that scale, for every decision but the one left over (0 there: no
    reading asks for it). `median_multiple()` is the median of |estimate - null| / |distance| over claims of an
    effect that is not exactly null, (N,); `power_quantiles(p)` the quantiles of P(F | truth) over truths not exactly
    null, (N, P).
    """

    n: tuple[int | None, ...]
    decisions: tuple[str, ...]
    effect: FloatArray  # (N, T)
    distance: FloatArray  # (N, T)
    exactly_null: BoolArray  # (N, T)
    nuisance: dict[str, FloatArray]  # each (N, T)
    state: IntArray  # (N, T) index into `states`
    states: tuple[str, ...]
    weight: FloatArray  # (N, T), each row sums to 1
    probability: FloatArray  # (N, T, D), each row sums to 1
    absolute: FloatArray  # (N, T, D)
    limit: FloatArray  # (N, T, D) probability as n grows without bound
    work: int = 1  # elements worked on for each truth
    median_multiple: Callable[[], FloatArray] | None = None
    power_quantiles: Callable[[tuple[float, ...]], FloatArray] | None = None

    def dataset(self) -> "xr.Dataset":
        """The table with labels: dimensions n, truth, decision; coordinates effect, distance, state, weight and
        nuisances.
        """
        import xarray as xr

        truth = ("n", "truth")
        cell = ("n", "truth", "decision")
        return xr.Dataset(
            {
                "joint": (cell, self.weight[..., None] * self.probability, {"long_name": "P(truth, decision)"}),
                "probability": (cell, self.probability, {"long_name": "P(decision | truth)"}),
                "absolute_estimate": (cell, self.absolute, {"long_name": "E[|estimate - null|; decision | truth]"}),
                "weight": (truth, self.weight, {"long_name": "P(truth)"}),
            },
            coords={
                "n": [0 if n is None else n for n in self.n],
                "decision": list(self.decisions),
                "effect": (truth, self.effect),
                "distance": (truth, self.distance),
                "exactly_null": (truth, self.exactly_null),
                "state": (truth, np.asarray(self.states)[self.state]),
                **{name: (truth, value) for name, value in self.nuisance.items()},
            },
        )


@final
@dataclass(frozen=True, slots=True)
class Cells:
    """Sums of a joint table over its truths, from which every ratio reading is made; leading axes are kept.

    by_state (..., S, D), by_side (..., 2, D) for truths not exactly null below and above it, absolute and distance
    (..., D): sums of |estimate - null| and |distance| over truths not exactly null; limit (..., D); weight (..., S).
    """

    by_state: FloatArray
    by_side: FloatArray
    absolute: FloatArray
    distance: FloatArray
    limit: FloatArray
    weight: FloatArray

    def __sub__(self, other: "Cells") -> "Cells":
        return Cells(*(getattr(self, f) - getattr(other, f) for f in self.__slots__))

    def total(self, axis: int) -> "Cells":
        return Cells(*(getattr(self, f).sum(axis=axis, keepdims=True) for f in self.__slots__))


def cells(joint: Joint, batches: int = 1) -> Cells:
    """Sums over all truths, leading axes (N, batches): batch b holds the b-th run of truths of equal length."""

    def split(values: FloatArray) -> FloatArray:
        return values.reshape(len(values), batches, -1, *values.shape[2:])

    weight, probability = split(joint.weight), split(joint.probability)
    state = np.eye(len(joint.states))[joint.state.reshape(len(joint.state), batches, -1)]
    real = split(np.where(joint.exactly_null, 0.0, joint.weight))
    below = split(np.asarray(joint.distance < 0, dtype=float))
    sides = np.stack([real * below, real * (1 - below)], axis=-1)

    def sums(weights: FloatArray, values: FloatArray) -> FloatArray:
        return np.asarray(np.swapaxes(weights, -1, -2) @ values)

    return Cells(
        by_state=sums(state * weight[..., None], probability),
        by_side=sums(sides, probability),
        absolute=sums(real[..., None], split(joint.absolute))[..., 0, :],
        distance=sums((real * np.abs(split(joint.distance)))[..., None], probability)[..., 0, :],
        limit=sums(weight[..., None], split(joint.limit))[..., 0, :],
        weight=(state * weight[..., None]).sum(axis=-2),
    )
