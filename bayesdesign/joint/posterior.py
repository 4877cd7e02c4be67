"""Belief after the study: the same nodes as the joint table, weighted with what was learned."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Refused
from bayesdesign.core.region import Region
from bayesdesign.core.search import root_of_increasing
from bayesdesign.joint.integration import LEVELS, Setting, distances, set_up, truth_nodes
from bayesdesign.study.study import Study

GOAL = 5e-9  # change between levels at which the refinement stops
COSTLY = 8_000_000  # elements of one table beyond which the tolerance itself is enough
QUANTILES = ("low", "median", "high")
LEAST_LIKELIHOOD = 1e-250  # evidence with less probability than this cannot be told from rounding


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """What was learned: a likelihood of the truths, the regions whose edges bend it, and effects on which panels
    must end.
    """

    kind: str  # "decision" | "estimate" | "p_value"
    likelihood: Callable[[Setting, FloatArray], FloatArray]
    regions: Callable[[Setting], Sequence[Region]] | None = None
    cuts: tuple[float, ...] = ()


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Posterior:
    """Posterior of the effect and the states, with the probability (density) of the evidence under the prior.

    `errors` holds the change of each number at the last refinement, under the same names.
    """

    states: dict[str, float]
    mean: float
    sd: float
    median: float
    low: float
    high: float
    mass: float
    above_null: float
    below_null: float
    evidence: float
    errors: dict[str, float]


def posterior_by_integration(
    study: Study, n: int | None, evidence: Evidence, mass: float, tolerance: float
) -> Posterior:
    """Posterior by integration, refined until its numbers stand still.

    Raises:
        Refused: the evidence is practically impossible under the prior, or the tolerance is missed.
    """
    coarse = _Weighing(study, n, evidence, 0)
    before = coarse.numbers()
    for level in range(1, len(LEVELS)):
        fine = _Weighing(study, n, evidence, level)
        now = fine.numbers()
        worst = max(_relative_errors(now, before).values())
        enough = tolerance / 2 if fine.work > COSTLY else min(GOAL, tolerance)
        if worst <= enough or level + 1 == len(LEVELS):
            break
        coarse, before = fine, now
    # the quantiles cost a search each time, so only the last levels are asked for them
    ranks = np.array([(1 - mass) / 2, 0.5, (1 + mass) / 2])
    near = coarse.quantiles(ranks, None)
    before |= dict(zip(QUANTILES, near.tolist(), strict=True))
    while True:
        near = fine.quantiles(ranks, near)
        now |= dict(zip(QUANTILES, near.tolist(), strict=True))
        errors = _relative_errors(now, before)
        if max(errors.values()) <= tolerance or level + 1 == len(LEVELS):
            break
        level += 1
        fine, before = _Weighing(study, n, evidence, level), now
        now = fine.numbers()
    name = max(errors, key=lambda key: errors[key])
    if errors[name] > tolerance:
        raise Refused(
            f"posterior {name}: integration error {errors[name]:.2g} exceeds the tolerance {tolerance:.2g}",
            "try --route sampling, or accept a larger --tolerance",
        )
    plain = {key: now[key] for key in ("mean", "sd", "median", "low", "high", "above_null", "below_null", "evidence")}
    return Posterior(
        states={name: now[f"P({name})"] for name in study.states.names},
        mass=mass,
        errors={key: abs(now[key] - before[key]) + 1e-13 * max(1.0, abs(now[key])) for key in now},
        **plain,
    )


def _relative_errors(now: dict[str, float], before: dict[str, float]) -> dict[str, float]:
    """Change of every number: of probabilities as it is, of effects relative to where the posterior lies."""
    scale = max(1.0, abs(now["mean"]) + now["sd"])
    effects = ("mean", "sd", "low", "median", "high")
    return {key: abs(now[key] - before[key]) / (scale if key in effects else 1.0) for key in now if key != "evidence"}


class _Weighing:
    """The nodes of one level, weighted with the evidence; panels may be made to end on given effects."""

    def __init__(self, study: Study, n: int | None, evidence: Evidence, level: int) -> None:
        self.study, self.n, self.evidence, self.level = study, n, evidence, level
        self.plain = self._set_up(())
        self.work = 0

    def _set_up(self, cuts: Sequence[float]) -> Setting:
        setting = set_up(self.study, [self.n], self.level, cuts=cuts)
        return (
            replace(setting, regions=self.evidence.regions(setting)) if self.evidence.regions is not None else setting
        )

    def weigh(self, cuts: Sequence[float] = ()) -> tuple[FloatArray, FloatArray, float]:
        """Effects, their posterior weights, and the probability (density) of the evidence."""
        # with a belief about the treated arm the nuisance nodes depend on the cuts, too
        setting = self._set_up(cuts) if cuts and self.study.prior.treatment is not None else self.plain
        truths = truth_nodes(setting, (*self.evidence.cuts, *cuts))
        self.work = truths.effect.size * setting.outcomes.work
        weight = (truths.weight * self.evidence.likelihood(setting, truths.effect)).ravel()
        total = float(weight.sum())
        if not total > LEAST_LIKELIHOOD:
            raise Refused(
                "the evidence is practically impossible under the prior",
                "check the numbers and their direction; if they are right, the prior is wrong",
            )
        return truths.effect.ravel(), weight / total, total

    def numbers(self) -> dict[str, float]:
        """Everything but the quantiles."""
        effect, weight, total = self.weigh()
        distance, exactly_null = distances(self.study, effect)
        state = self.study.states.classify(distance, exactly_null)
        mean = float(weight @ effect)
        return {
            **{f"P({name})": float(weight[state == i].sum()) for i, name in enumerate(self.study.states.names)},
            "mean": mean,
            "sd": float(np.sqrt(weight @ (effect - mean) ** 2)),
            "above_null": float(weight[distance > 0].sum()),
            "below_null": float(weight[distance < 0].sum()),
            "evidence": total,
        }

    def quantiles(self, ranks: FloatArray, near: FloatArray | None) -> FloatArray:
        """Quantiles of the effect: bracketed close to `near` or by the nodes, then sought with panels that end on the
        candidates.
        """
        atoms = _atoms(self.study)
        effect, weight, _ = self.weigh(tuple(atoms))

        def excess(points: FloatArray) -> FloatArray:
            nodes, weights, _ = self.weigh(tuple(points))
            slack = 1e-14 * np.maximum(1.0, np.abs(points))
            return np.array([weights[nodes <= p + s].sum() for p, s in zip(points, slack, strict=True)]) - ranks

        low, high = _bracket(excess, effect, weight, ranks, near)
        for atom in atoms:
            inside = (weight[effect < atom].sum() < ranks) & (ranks <= weight[effect <= atom].sum())
            low, high = np.where(inside, atom, low), np.where(inside, atom, high)
        return root_of_increasing(excess, low, high, 1e-11 * max(1e-300, float(np.max(np.abs(high)))))


def _atoms(study: Study) -> FloatArray:
    """Effects with a point mass."""
    null = [study.null] if study.exact_null_weight > 0 else []
    return np.unique([*null, *(study.prior.effect.atoms()[0] if study.prior.effect is not None else [])])


def _bracket(
    excess: Callable[[FloatArray], FloatArray],
    effect: FloatArray,
    weight: FloatArray,
    ranks: FloatArray,
    near: FloatArray | None,
) -> tuple[FloatArray, FloatArray]:
    """Effects on either side of each quantile: close to `near` if that holds, else a few nodes apart."""

    def holds(low: FloatArray, high: FloatArray) -> bool:
        return bool((excess(low) <= 0).all() and (excess(high) >= 0).all())

    if near is not None:
        margin = 1e-5 * float(np.sqrt(weight @ (effect - weight @ effect) ** 2))
        if holds(near - margin, near + margin):
            return near - margin, near + margin
    order = np.argsort(effect, kind="stable")
    at = effect[order]
    k = np.clip(np.searchsorted(np.cumsum(weight[order]), ranks), 0, len(at) - 1)
    low, high, reach = np.full(len(ranks), at[0]), np.full(len(ranks), at[-1]), 4
    while reach < 4 * len(at):  # nodes of different nuisance values interleave, so a quantile can lie some nodes off
        low, high = at[np.maximum(k - reach, 0)], at[np.minimum(k + reach, len(at) - 1)]
        if holds(low, high):
            return low, high
        reach *= 4
    margin = float(at[-1] - at[0]) or abs(float(at[0])) or 1.0
    for _ in range(60):  # or beyond the outermost node
        if holds(low, high):
            break
        low, high = low - margin, high + margin
        margin *= 2
    return low, high
