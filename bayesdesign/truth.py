"""The rows of the decision table: which truths count as which state."""

from dataclasses import dataclass
from typing import Literal, Self, final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray, IntArray

type Favourable = Literal["higher", "lower", "either"]

EDGE = 1e-12  # an effect this close (relatively) to a boundary lies on it: 0.6 - 0.5 must count as 0.1


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class States:
    """Named states in order of the effect, split at `edges` on the distance scale (0 is the null).

    `own_null` gives exact nulls a state of their own, in the middle. `null` is the index of the null state (None if
    there is none); `favourable` the indices of the states in which the favourable decision is the right one.
    """

    names: tuple[str, ...]
    edges: tuple[float, ...]
    own_null: bool
    null: int | None
    favourable: tuple[int, ...]

    @classmethod
    def about_null(cls, *, smallest_relevant: float | None, exact_null: bool, favourable: Favourable) -> Self:
        """States around the null; `smallest_relevant` is a distance on the working scale."""
        right = {"higher": (-1,), "lower": (0,), "either": (0, -1)}[favourable]
        names: tuple[str, ...]
        edges: tuple[float, ...]
        if smallest_relevant is not None:
            names, edges = ("lower", "negligible", "higher"), (-smallest_relevant, smallest_relevant)
        elif exact_null:
            names, edges = ("lower", "null", "higher"), (0.0,)
        else:
            names, edges = ("lower", "higher"), (0.0,)
        middle = 1 if len(names) == 3 else None
        return cls(
            names=names,
            edges=edges,
            own_null=smallest_relevant is None and exact_null,
            null=middle,
            favourable=tuple(i % len(names) for i in right),
        )

    def classify(self, distance: FloatArray, exactly_null: BoolArray) -> IntArray:
        """Index of the state of each truth. A distance on an edge belongs to the outer state, away from the null."""
        index = np.zeros(distance.shape, dtype=np.int64)
        for edge in self.edges:
            slack = EDGE * max(1.0, abs(edge))
            beyond = distance >= edge - slack if edge >= 0 else distance > edge + slack
            index += np.where(beyond, 1, 0)
        if self.own_null:
            index = np.where(exactly_null, 1, np.where(index > 0, 2, 0))
        return index
