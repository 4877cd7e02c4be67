"""The integration route: nodes on the prior, exact probabilities of every decision at each node."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.region import Region
from bayesdesign.design.base import Accuracy, Outcomes
from bayesdesign.joint.table import Joint
from bayesdesign.prior.nodes import nuisance_nodes, variable_nodes
from bayesdesign.study.study import Study

# Each refinement: nodes per panel of the effect, nodes of the Gauss rule of each nuisance, nodes per auxiliary panel.
# A result is compared with the level before it.
LEVELS = ((8, 8, 12), (12, 12, 16), (16, 18, 22), (20, 27, 28), (20, 40, 34), (24, 60, 40))
WEIGHTLESS = 1e-18
PANELS_FROM = 4  # level from which nuisance parameters are integrated by composite panels


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """One study at N sizes on one level of refinement: nuisance nodes, outcomes and the regions of its decisions."""

    study: Study
    n: tuple[int | None, ...]
    level: int
    nuisance: dict[str, FloatArray]
    nuisance_weight: FloatArray
    outcomes: Outcomes
    regions: Sequence[Region]

    @property
    def order(self) -> int:
        return LEVELS[self.level][0]

    @property
    def feasible(self) -> tuple[FloatArray, FloatArray]:
        """Range of the prior's variable (the effect, or the treated arm) that can exist at each nuisance node."""
        low, high = self.study.design.effect_bounds(self.nuisance)
        if self.study.prior.treatment is None:
            return low, high
        ends = (self.study.design.treatment_of(end, self.nuisance) for end in (low, high))
        return next(ends), next(ends)

    def to_effect(self, variable: FloatArray) -> FloatArray:
        """Effect of the prior's variable, both (N, M, K)."""
        if self.study.prior.treatment is None:
            return variable
        columns = {name: value[:, None] for name, value in self.nuisance.items()}
        return self.study.design.effect_of(variable, columns)

    def to_variable(self, effect: FloatArray) -> FloatArray:
        """Inverse of `to_effect`."""
        if self.study.prior.treatment is None:
            return effect
        columns = {name: value[:, None] for name, value in self.nuisance.items()}
        return self.study.design.treatment_of(effect, columns)

    def decisions(self, effect: FloatArray) -> tuple[FloatArray, FloatArray]:
        """P(decision | truth) and E[|estimate - null|; decision | truth] of every decision but the last."""
        return self.outcomes.probabilities(effect, self.regions)


def set_up(
    study: Study, n: Sequence[int | None], level: int, fine_nuisance: int | None = None, cuts: Sequence[float] = ()
) -> Setting:
    """Prepare the outcomes and regions of a study at these sizes; `fine_nuisance` nodes to a panel of the nuisances,
    `cuts` further effects at which truths will be told apart.
    """
    effect, nuisance_order, auxiliary = LEVELS[level]
    accuracy = Accuracy(
        effect=effect, nuisance=nuisance_order, auxiliary=auxiliary, finest_level=study.rule.finest_level
    )
    if fine_nuisance is None:
        order, panels = nuisance_order, False
    else:
        order, panels = fine_nuisance, True
    nuisance, weight = nuisance_nodes(
        study.design.nuisance, order, panels=panels, kinks=_nuisance_kinks(study, cuts), scales=_scales(study)
    )
    sizes = np.array([1.0 if k is None else float(k) for k in n])
    outcomes = study.design.outcomes(sizes, nuisance, study.null, accuracy)
    return Setting(
        study=study,
        n=tuple(n),
        level=level,
        nuisance=nuisance,
        nuisance_weight=weight,
        outcomes=outcomes,
        regions=study.rule.regions(outcomes, study.null),
    )


def _scales(study: Study) -> list[str]:
    """Nuisance parameters that can be any positive number."""
    return [name for name in study.design.nuisance if np.isinf(study.design.nuisance_bounds(name)[1])]


def _nuisance_kinks(study: Study, cuts: Sequence[float]) -> dict[str, FloatArray]:
    """Where the sums over the effect bend as functions of the nuisance parameters."""
    belief = study.prior.variable
    ends = np.unique([e for e in (*belief.support, *belief.atoms()[0]) if np.isfinite(e)])
    if study.prior.effect is not None:
        return study.design.nuisance_kinks(ends)
    return study.design.nuisance_meets(np.array([*_boundaries(study), *cuts]), ends)


@final
@dataclass(frozen=True, slots=True)
class Truths:
    """Effects and their weights (N, M, K); the weights of each n sum to 1."""

    effect: FloatArray
    weight: FloatArray


def truth_nodes(
    setting: Setting, cuts: Sequence[float] = (), multiple: FloatArray | None = None, order: int | None = None
) -> Truths:
    """Nodes of the joint prior, with panels that end on the null, the state boundaries, `cuts` and the bends of the
    power curve (with `multiple`, on those of the probability within that multiple of the effect's distance too)."""
    study = setting.study
    low, high = setting.feasible
    marks = setting.outcomes.landmarks(setting.regions, multiple)
    fixed = np.array([*_boundaries(study), *cuts])
    rows, columns = len(setting.n), len(setting.nuisance_weight)
    edges = np.concatenate([np.broadcast_to(fixed, (rows, columns, fixed.size)), marks], axis=2)
    edges = np.nan_to_num(setting.to_variable(edges), nan=float(low[0]) if np.isfinite(low[0]) else 0.0)
    variable, weight = variable_nodes(study.prior.variable, edges, low, high, order or setting.order)
    weight = weight * setting.nuisance_weight[:, None]
    # impossible pairs are cut off and the rest scaled up (the study was refused if more than a trace is cut)
    weight = weight / weight.sum(axis=(1, 2), keepdims=True) * (1 - study.prior.probability_null)
    effect = setting.to_effect(variable)
    # nodes without weight (empty panels, far tails) all become the null, so that a design need not work them out one
    # by one
    effect = np.where(weight > WEIGHTLESS, effect, study.null)
    if study.prior.probability_null > 0:
        null_weight = study.prior.probability_null * np.broadcast_to(
            setting.nuisance_weight[:, None], (rows, columns, 1)
        )
        effect = np.concatenate([np.full((rows, columns, 1), study.null), effect], axis=2)
        weight = np.concatenate([null_weight, weight], axis=2)
    return Truths(effect=effect, weight=weight)


def _boundaries(study: Study) -> list[float]:
    """Effects in natural units at which the null or a state begins."""
    edges = sorted({0.0, *study.states.edges})
    if study.design.ratio_scale:
        return [study.null * float(np.exp(edge)) for edge in edges]
    return [study.null + edge for edge in edges]


def integrate(study: Study, n: Sequence[int | None], level: int) -> Joint:
    """The joint table of a study at these sizes, on one level of refinement of `LEVELS`."""
    setting = set_up(study, n, level)
    truths = truth_nodes(setting)
    probability, absolute = setting.decisions(truths.effect)
    probability = np.concatenate([probability, np.maximum(1 - probability.sum(-1, keepdims=True), 0.0)], axis=-1)
    absolute = np.concatenate([absolute, np.zeros((*absolute.shape[:-1], 1))], axis=-1)
    rows = len(setting.n)
    distance, exactly_null = distances(study, truths.effect)
    shape = truths.effect.shape
    return Joint(
        n=setting.n,
        decisions=study.rule.decisions,
        effect=truths.effect.reshape(rows, -1),
        distance=distance.reshape(rows, -1),
        exactly_null=exactly_null.reshape(rows, -1),
        nuisance={k: np.broadcast_to(v[:, None], shape).reshape(rows, -1) for k, v in setting.nuisance.items()},
        state=study.states.classify(distance, exactly_null).reshape(rows, -1),
        states=study.states.names,
        weight=truths.weight.reshape(rows, -1),
        probability=probability.reshape(rows, -1, probability.shape[-1]),
        absolute=absolute.reshape(rows, -1, probability.shape[-1]),
        work=setting.outcomes.work,
        limit=study.rule.limit(distance).reshape(rows, -1, probability.shape[-1]),
    )


def distances(study: Study, effect: FloatArray) -> tuple[FloatArray, BoolArray]:
    """Distance from the null on the working scale, and whether it is exactly 0."""
    exactly_null = np.abs(effect - study.null) <= 1e-12 * max(1.0, abs(study.null))
    with np.errstate(divide="ignore"):
        distance = study.design.working(effect) - study.working_null
    return np.where(exactly_null, 0.0, distance), exactly_null
