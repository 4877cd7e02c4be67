"""Belief after the study: the same nodes as the joint table, weighted with what was learned."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Refused
from bayesdesign.core.region import Region
from bayesdesign.joint.integration import LEVELS, Setting, distances, set_up, truth_nodes
from bayesdesign.study.study import Study

LEAST_LIKELIHOOD = 1e-250  # evidence with less probability than this cannot be told from rounding


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """What was learned: a likelihood of the truths, the regions whose edges bend it, and effects on which panels must end."""

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


def posterior_by_integration(study: Study, n: int | None, evidence: Evidence, mass: float, tolerance: float) -> Posterior:
    """Posterior by integration, refined until its numbers stand still.

    Raises:
        Refused: the evidence is practically impossible under the prior, or the tolerance is missed.
    """
    before = _at_level(study, n, evidence, mass, 0)
    for level in range(1, len(LEVELS)):
        now = _at_level(study, n, evidence, mass, level)
        errors = {name: abs(value - before[name]) + 1e-13 * max(1.0, abs(value)) for name, value in now.items()}
        scale = max(1.0, abs(now["mean"]), now["sd"])
        if max(error for name, error in errors.items() if name != "evidence") <= min(5e-9, tolerance) * scale:
            break
        before = now
    worst = max((name for name in errors if name != "evidence"), key=lambda name: errors[name])
    if errors[worst] > tolerance * scale:
        raise Refused(
            f"posterior {worst}: integration error {errors[worst]:.2g} exceeds the tolerance {tolerance:.2g}",
            "try --route sampling, or accept a larger --tolerance",
        )
    names = study.states.names
    plain = {key: now[key] for key in ("mean", "sd", "median", "low", "high", "above_null", "below_null", "evidence")}
    return Posterior(states={name: now[f"P({name})"] for name in names}, mass=mass, errors=errors, **plain)


def _at_level(study: Study, n: int | None, evidence: Evidence, mass: float, level: int) -> dict[str, float]:
    setting = set_up(study, [n], level)
    if evidence.regions is not None:
        setting = replace(setting, regions=evidence.regions(setting))
    total = 0.0

    def weigh(cuts: Sequence[float]) -> tuple[FloatArray, FloatArray]:
        nonlocal total
        truths = truth_nodes(setting, (*evidence.cuts, *cuts))
        weight = (truths.weight * evidence.likelihood(setting, truths.effect)).ravel()
        total = float(weight.sum())
        if not total > LEAST_LIKELIHOOD:
            raise Refused(
                "the evidence is practically impossible under the prior",
                "check the numbers and their direction; if they are right, the prior is wrong",
            )
        return truths.effect.ravel(), weight / total

    effect, weight = weigh(())
    evidence_weight = total
    distance, exactly_null = distances(study, effect)
    state = study.states.classify(distance, exactly_null)
    mean = float(weight @ effect)
    ranks = np.array([(1 - mass) / 2, 0.5, (1 + mass) / 2])
    low, median, high = _quantiles(weigh, effect, weight, ranks)
    return {
        **{f"P({name})": float(weight[state == i].sum()) for i, name in enumerate(study.states.names)},
        "mean": mean,
        "sd": float(np.sqrt(weight @ (effect - mean) ** 2)),
        "median": median,
        "low": low,
        "high": high,
        "above_null": float(weight[distance > 0].sum()),
        "below_null": float(weight[distance < 0].sum()),
        "evidence": evidence_weight,
    }


def _quantiles(
    weigh: Callable[[Sequence[float]], tuple[FloatArray, FloatArray]], effect: FloatArray, weight: FloatArray, ranks: FloatArray
) -> tuple[float, float, float]:
    """Quantiles of the effect: bracketed by the nodes, then sought with panels that end on the candidates themselves."""
    order = np.argsort(effect, kind="stable")
    at, below = effect[order], np.cumsum(weight[order])
    k = np.clip(np.searchsorted(below, ranks), 0, len(at) - 1)
    def excess(points: FloatArray) -> FloatArray:
        nodes, weights = weigh(tuple(points))
        slack = 1e-14 * np.maximum(1.0, np.abs(points))
        return np.array([weights[nodes <= p + s].sum() for p, s in zip(points, slack, strict=True)]) - ranks

    reach, last = 4, np.zeros(3)
    while True:
        low, high = at[np.maximum(k - reach, 0)], at[np.minimum(k + reach, len(at) - 1)]
        at_low, at_high = excess(low), excess(high)
        if reach >= len(at) or ((at_low <= 0).all() and (at_high >= 0).all()):
            break
        reach *= 4
    close = 1e-12 * max(1e-300, float(np.max(np.abs(high))), float(np.ptp(at)) * 1e-3)
    for step in range(120):
        gap = at_high - at_low
        share = np.clip(np.where(gap > 0, at_high / np.where(gap > 0, gap, 1.0), 0.5), 0.02, 0.98)
        # every third step halves, for a quantile that sits in the jump at a point mass
        middle = np.where(high > low, high - (0.5 if step % 3 == 2 else share) * (high - low), high)
        if (high - low).max() <= close:
            break
        value = excess(middle)
        up = value >= 0
        at_high, at_low = (
            np.where(up, value, np.where(last < 0, at_high / 2, at_high)),
            np.where(up, np.where(last > 0, at_low / 2, at_low), value),
        )
        high, low = np.where(up, middle, high), np.where(up, low, middle)
        last = np.where(up, 1.0, -1.0)
        found = np.abs(value) < 1e-13
        low, high = np.where(found, middle, low), np.where(found, middle, high)
    return tuple(map(float, high))  # type: ignore[return-value]
