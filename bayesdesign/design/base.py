"""The contract of a family: what a study records, and how a rule may question it.

A rule asks an `Outcomes` object for claims ("the test of effect <= v at this level rejects") and gets regions; the
joint table asks it for the probability of regions at given truths. Neither knows the other. Axes: N sample sizes, M
nuisance nodes, K effects, A auxiliary nodes, I intervals of a region, R regions.
"""

import abc
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar, Literal

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.core.region import Region
from bayesdesign.prior.base import Distribution

type Side = Literal["higher", "lower"]
type Tails = Literal["central", "minimum_likelihood"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Accuracy:
    """How finely the integration route works: nodes per panel, and the smallest level any claim will use."""

    effect: int
    nuisance: int
    auxiliary: int
    finest_level: float


class Outcomes(abc.ABC):
    """What one design can record at N sizes and M nuisance nodes, as a line given an auxiliary statistic.

    The estimate and its distance from the null are on the working scale (the logarithm, for ratios).
    """

    @abc.abstractmethod
    def test(self, value: float, level: float, side: Side) -> Region:
        """Where the one-sided test of "the effect is not on this side of `value`" rejects at `level`."""

    @property
    def stepped(self) -> bool:
        """Whether `probabilities_within` jumps where a count enters the reach, and `landmarks` name every jump."""
        return False

    @property
    def rough_error(self) -> float:
        """What `probabilities_within` leaves unsure of a median, relative, where it jumps at more counts than
        landmarks name; else 0.
        """
        return 0.0

    @property
    def work(self) -> int:
        """About how many elements `measure` works on for each truth."""
        return 1

    def two_sided_test(self, value: float, level: float, tails: Tails) -> tuple[Region, Region]:
        """Where the two-sided test rejects: (towards higher, towards lower). Central: half the level in each tail."""
        if tails != "central":
            raise NotOffered(
                "tails = 'minimum_likelihood' is a definition for exact tests of counts; use 'central' here"
            )
        return self.test(value, level / 2, "higher"), self.test(value, level / 2, "lower")

    @abc.abstractmethod
    def measure(self, effect: FloatArray, lower: FloatArray, upper: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Probability of lower < outcome < upper, and E[(estimate - null); the same], each (I, N, M, K).

        `effect` is (N, M, K) in natural units, the bounds broadcast to (I, N, M, K, A); an empty interval counts 0.
        """

    @abc.abstractmethod
    def null_outcome(self) -> FloatArray:
        """The outcome whose estimate is the null, (N, M or 1, A or 1); estimates increase with the outcome."""

    @abc.abstractmethod
    def outcomes_within(self, reach: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Bounds of the outcomes whose estimate lies within `reach` (N, M, K) of the null, each (N, M, K, A or 1)."""

    @abc.abstractmethod
    def landmarks(self, regions: Sequence[Region], multiple: FloatArray | None = None) -> FloatArray:
        """Effects (N, M, L) between which the probabilities of the regions are smooth enough for one panel.

        With `multiple` (N,), also the kinks of `probabilities_within` where the reach is that multiple of the
        effect's distance.
        """

    def probabilities(self, effect: FloatArray, regions: Sequence[Region]) -> tuple[FloatArray, FloatArray]:
        """P(region | truth) and E[|estimate - null|; region | truth], each (N, M, K, R)."""
        probability = np.zeros((*effect.shape, len(regions)))
        absolute = np.zeros_like(probability)
        null = self.null_outcome()[None]
        for r, region in enumerate(regions):
            for sign, low, high in (
                (-1.0, region.lower, np.minimum(region.upper, null)),
                (1.0, np.maximum(region.lower, null), region.upper),
            ):
                part = Region(*np.broadcast_arrays(low, high)).pruned()
                if (part.lower < part.upper).any():
                    mass, moment = self.measure(effect, part.lower[..., None, :], part.upper[..., None, :])
                    probability[..., r] += mass.sum(axis=0)
                    absolute[..., r] += sign * moment.sum(axis=0)
        return probability, np.maximum(absolute, 0.0)

    def probabilities_within(self, effect: FloatArray, regions: Sequence[Region], reach: FloatArray) -> FloatArray:
        """P(region and |estimate - null| <= reach | truth), (N, M, K), summed over the regions; `reach` is (N, M,
        K).
        """
        low, high = self.outcomes_within(reach)
        total = np.zeros(effect.shape)
        for region in regions:
            lower = np.maximum(region.lower[..., None, :], low)
            upper = np.minimum(region.upper[..., None, :], high)
            total += self.measure(effect, lower, upper)[0].sum(axis=0)
        return total


class Analysis(abc.ABC):
    """What an analyst reports for each simulated study, with library functions; shares nothing with `Outcomes`."""

    @property
    @abc.abstractmethod
    def estimate(self) -> FloatArray:
        """Estimates on the working scale."""

    @abc.abstractmethod
    def p_value(self, value: float, side: Literal["higher", "lower", "two"], tails: Tails) -> FloatArray:
        """p-value of the test of effect = `value` (natural units) against this side."""


class Design(abc.ABC):
    """One family with its sample size and nuisance parameters, as the `[design]` table gives them.

    Subclasses are frozen keyword-only dataclasses; a field annotated `Distribution` takes a number or a distribution
    table.
    """

    family: ClassVar[str]
    example: ClassVar[str]  # its [effect], [design] and [prior] in TOML; the comments describe the [design] keys
    minimum_n: ClassVar[int] = 1
    saw_tooth: ClassVar[bool] = False  # power is not monotone in n, because outcomes are discrete
    sizes_at_once: ClassVar[int] = 4  # how many n one `outcomes` call takes, to bound memory

    @property
    @abc.abstractmethod
    def planned_n(self) -> int | None:
        """The size in the family's own n, or None when the design has none."""

    @property
    @abc.abstractmethod
    def n_label(self) -> str:
        """What one n counts, e.g. `per group`."""

    def group_sizes(self, n: int) -> dict[str, int]:
        """All sizes that follow from n, by their study-file key."""
        return {self.n_label: n}

    def tooth(self, n: int, null: float) -> int:
        """For designs with counts: a number of consecutive sizes around n that covers some ups and downs of the
        power.
        """
        del n, null
        return 1

    @property
    def ratio_scale(self) -> bool:
        """Whether distances between effects are measured on the log scale."""
        return False

    @property
    def default_null(self) -> float | None:
        """The null value when the study gives none; None if it must be given."""
        return 1.0 if self.ratio_scale else 0.0

    @property
    def effect_words(self) -> str:
        """What the effect is, in words."""
        return "effect"

    @property
    @abc.abstractmethod
    def nuisance(self) -> dict[str, Distribution]:
        """Every nuisance parameter with its belief (a `Point` when it is a number)."""

    def nuisance_bounds(self, name: str) -> tuple[float, float]:
        """Open range in which a nuisance parameter can lie; a scale unless the family says otherwise."""
        del name
        return 0.0, np.inf

    def working(self, effect: FloatArray) -> FloatArray:
        """Effect on the scale on which estimates are compared."""
        return np.log(effect) if self.ratio_scale else effect

    def effect_bounds(self, nuisance: Mapping[str, FloatArray]) -> tuple[FloatArray, FloatArray]:
        """Smallest and largest effect that can exist at each nuisance node, both (M,)."""
        size = np.shape(next(iter(nuisance.values()))) if nuisance else (1,)
        return np.full(size, 0.0 if self.ratio_scale else -np.inf), np.full(size, np.inf)

    def nuisance_kinks(self, effects: FloatArray) -> dict[str, FloatArray]:
        """Values of nuisance parameters at which one of these effects begins or ceases to be possible."""
        del effects
        return {}

    def nuisance_meets(self, effects: FloatArray, treatments: FloatArray) -> dict[str, FloatArray]:
        """Values of nuisance parameters at which one of these effects and one of these treated arms go together."""
        del effects, treatments
        return {}

    def treatment_of(self, effect: FloatArray, nuisance: Mapping[str, FloatArray]) -> FloatArray:
        """The treated arm's parameter that an effect implies; for families whose prior may be on both arms."""
        raise NotOffered(f"[prior] treatment is not available for family '{self.family}'; give [prior] effect")

    def effect_of(self, treatment: FloatArray, nuisance: Mapping[str, FloatArray]) -> FloatArray:
        """Inverse of `treatment_of`."""
        raise NotOffered(f"[prior] treatment is not available for family '{self.family}'; give [prior] effect")

    @abc.abstractmethod
    def outcomes(self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy) -> Outcomes:
        """What can be recorded at sizes n (N,) and nuisance nodes (M,)."""

    @abc.abstractmethod
    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        """Sufficient statistics of a simulated study as named variables of the PyMC model in context.

        `effect` and the nuisances are PyTensor variables that broadcast to `shape`, one simulated study for each
        element.
        """

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Callable[[Analysis], BoolArray]
    ) -> Callable[[Any], Any]:
        """A function from an effect to the log probability of a decision, all in PyTensor, for posteriors by NUTS.

        `decides` says which analysed studies led to the decision. May add variables for what is not recorded (a
        sample variance) to the model in context. Owes nothing to `outcomes`.
        """
        raise NotOffered(f"NUTS cannot use a decision alone for family '{self.family}'; use --route integration")

    def symbolic_effect(self, treatment: Any, nuisance: Mapping[str, Any]) -> Any:
        """`effect_of` for PyTensor variables."""
        raise NotOffered(f"[prior] treatment is not available for family '{self.family}'; give [prior] effect")

    @abc.abstractmethod
    def analyse(self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int) -> Analysis:
        """The analyst's view of drawn statistics; `nuisance` is only for analyses that know the parameter (z with
        known sd).
        """
