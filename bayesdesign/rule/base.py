"""The contract of a rule: which decision a record leads to."""

import abc
from typing import ClassVar

import numpy as np

from bayesdesign.core.arrays import FloatArray, IntArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.core.region import Region
from bayesdesign.design.base import Analysis, Outcomes
from bayesdesign.truth import Favourable


class Rule(abc.ABC):
    """A rule names its decisions, says for each which outcomes lead to it, and what happens with endless data.

    Subclasses are frozen keyword-only dataclasses whose fields are the keys of `[rule]` and whose `kind` is its `type`.
    """

    kind: ClassVar[str]

    @property
    @abc.abstractmethod
    def decisions(self) -> tuple[str, ...]:
        """Names of the decisions; the last one is what is left over."""

    @property
    @abc.abstractmethod
    def claims(self) -> dict[str, str]:
        """Decisions that claim an effect (R), each with the side of the null it points to, "higher" or "lower"."""

    @abc.abstractmethod
    def favourable(self, favourable: Favourable) -> tuple[str, ...]:
        """The favourable decisions F among `decisions`."""

    @property
    def default_favourable(self) -> Favourable:
        """The good direction when the study does not name one."""
        return "either"

    @property
    @abc.abstractmethod
    def finest_level(self) -> float:
        """Smallest level of a one-sided test that the rule asks for."""

    @abc.abstractmethod
    def regions(self, outcomes: Outcomes, null: float) -> list[Region]:
        """Regions of all decisions but the last, disjoint and in order."""

    def regions_at(self, outcomes: Outcomes, null: float, level: float) -> list[Region]:
        """The regions that `level` would give: outcomes with a p-value of at most that."""
        del outcomes, null, level
        raise NotOffered(f"rule '{self.kind}' decides by no p-value; give --decision or --estimate with --se")

    @abc.abstractmethod
    def limit(self, distance: FloatArray) -> FloatArray:
        """P(decision | truth) as n grows without bound, shape (*distance.shape, decisions); distance 0 is exactly
        the null.
        """

    @abc.abstractmethod
    def decide(self, analysis: Analysis, null: float, working_null: float) -> IntArray:
        """Index of the decision for each simulated study, from what an analyst would report; never from `regions`."""


def one_hot(index: IntArray, width: int) -> FloatArray:
    """Rows of the identity matrix."""
    return np.eye(width)[index]
