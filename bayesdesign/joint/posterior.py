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
    before = _at_level(study, n, evidence, mass, 0)
    for level in range(1, len(LEVELS)):
        now = _at_level(study, n, evidence, mass, level, before)
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


def _at_level(
    study: Study, n: int | None, evidence: Evidence, mass: float, level: int, before: dict[str, float] | None = None
) -> dict[str, float]:
    """The numbers at one level; those of the level `before` say where to look for the quantiles."""
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
    near = None if before is None else np.array([before["low"], before["median"], before["high"]])
    low, median, high = _quantiles(weigh, _atoms(study), ranks, near)
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


def _atoms(study: Study) -> FloatArray:
    """Effects with a point mass."""
    null = [study.null] if study.exact_null_weight > 0 else []
    return np.unique([*null, *(study.prior.effect.atoms()[0] if study.prior.effect is not None else [])])


def _quantiles(
    weigh: Callable[[Sequence[float]], tuple[FloatArray, FloatArray]],
    atoms: FloatArray,
    ranks: FloatArray,
    near: FloatArray | None,
) -> tuple[float, float, float]:
    """Quantiles of the effect: bracketed close to `near` or by the nodes, then sought with panels that end on the
    candidates.
    """
    effect, weight = weigh(tuple(atoms))

    def excess(points: FloatArray) -> FloatArray:
        nodes, weights = weigh(tuple(points))
        slack = 1e-14 * np.maximum(1.0, np.abs(points))
        return np.array([weights[nodes <= p + s].sum() for p, s in zip(points, slack, strict=True)]) - ranks

    low, high = _bracket(excess, effect, weight, ranks, near)
    for atom in atoms:
        inside = (weight[effect < atom].sum() < ranks) & (ranks <= weight[effect <= atom].sum())
        low, high = np.where(inside, atom, low), np.where(inside, atom, high)
    close = 1e-12 * max(1e-300, float(np.max(np.abs(high))))
    return tuple(map(float, root_of_increasing(excess, low, high, close)))  # type: ignore[return-value]


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
    reach = 4
    while True:  # nodes of different nuisance values interleave, so a quantile can lie some nodes off
        low, high = at[np.maximum(k - reach, 0)], at[np.minimum(k + reach, len(at) - 1)]
        if reach >= len(at) or holds(low, high):
            return low, high
        reach *= 4
