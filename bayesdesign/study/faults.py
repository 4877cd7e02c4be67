"""Faults that only show when the parts of a study are seen together."""

import math
from typing import TYPE_CHECKING

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Fault, NotOffered
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.nodes import nuisance_nodes
from bayesdesign.prior.point import Point

if TYPE_CHECKING:
    from bayesdesign.study.study import Study

TRACE = 1e-6  # prior mass off the possible values that is taken as rounding


def study_faults(study: "Study") -> list[Fault]:
    """Every fault of the study as a whole, in the order of its sections."""
    nuisance = [
        fault
        for name, belief in study.design.nuisance.items()
        for fault in _support_faults(f"[design] {name}", belief, *study.design.nuisance_bounds(name))
    ]
    known = not nuisance  # impossible nuisance values make nonsense of the range of effects
    return [*_effect_faults(study, known), *nuisance, *_prior_faults(study, known), *_target_faults(study)]


def _effect_faults(study: "Study", nuisance_known: bool) -> list[Fault]:
    effect, design = study.effect, study.design
    faults = []
    null = effect.null if effect.null is not None else design.default_null
    if null is None:
        return [
            Fault(
                where="[effect] null",
                problem="missing",
                allowed=f"family '{design.family}' needs the value to compare with",
            )
        ]
    low, high = _range_of_effects(study) if nuisance_known else (-math.inf, math.inf)
    if not math.isfinite(null) or not low < null < high:
        faults.append(
            Fault(
                where="[effect] null",
                problem="not a possible effect",
                got=f"{null:g}",
                allowed=_between(low, high),
            )
        )
    if effect.smallest_relevant is not None:
        least = 1.0 if design.ratio_scale else 0.0
        if not least < effect.smallest_relevant < math.inf:
            kind = (
                "a ratio above 1 (1.2 means beyond 1.2 times the null, or below the null / 1.2)"
                if least
                else "a distance above 0"
            )
            faults.append(
                Fault(
                    where="[effect] smallest_relevant",
                    problem="not a distance from the null",
                    got=f"{effect.smallest_relevant:g}",
                    allowed=kind,
                )
            )
    if effect.planning_value is not None and not low <= effect.planning_value <= high:
        faults.append(
            Fault(
                where="[effect] planning_value",
                problem="not a possible effect",
                got=f"{effect.planning_value:g}",
                allowed=_between(low, high),
            )
        )
    return faults


def _range_of_effects(study: "Study") -> tuple[float, float]:
    """Effects that can exist at some nuisance value."""
    nodes, _ = nuisance_nodes(study.design.nuisance, 8)
    low, high = study.design.effect_bounds(nodes)
    return float(low.min()), float(high.max())


def _between(low: float, high: float) -> str:
    if math.isinf(low) and math.isinf(high):
        return "a finite number"
    return f"above {low:g}" if math.isinf(high) else f"strictly between {low:g} and {high:g}"


def _prior_faults(study: "Study", nuisance_known: bool) -> list[Fault]:
    prior, faults = study.prior, []
    if (prior.effect is None) == (prior.treatment is None):
        problem = "missing" if prior.effect is None else "given together with [prior] treatment"
        return [
            Fault(
                where="[prior] effect",
                problem=problem,
                allowed="give the prior on the effect or on the treated arm, one of them",
            )
        ]
    if not 0 <= prior.probability_null <= 1:
        faults.append(
            Fault(
                where="[prior] probability_null",
                problem="not a probability",
                got=f"{prior.probability_null:g}",
                allowed="0 to 1",
            )
        )
    if nuisance_known and not faults:
        try:
            faults += _variable_faults(study)
        except NotOffered:  # no other family knows a treated arm
            faults.append(
                Fault(
                    where="[prior] treatment",
                    problem=f"not for family {study.design.family}",
                    allowed="give the prior on [prior] effect",
                )
            )
    return faults


def _support_faults(where: str, belief: Distribution, low: float, high: float) -> list[Fault]:
    values, masses = belief.atoms()
    ends = masses[(values == low) | (values == high)].sum()  # both ends are excluded
    outside = _outside(belief, np.array([low]), np.array([high]))[0] + ends
    if outside <= TRACE:
        return _node_faults(where, belief)
    allowed = f"values strictly between {low:g} and {high:g}" if math.isfinite(high) else f"values above {low:g}"
    if isinstance(belief, Point):
        return [Fault(where=where, problem="not a possible value", got=f"{belief.value:g}", allowed=allowed)]
    return [
        Fault(
            where=where,
            problem=f"{outside:.2g} of its probability lies on impossible values",
            got=belief.describe(),
            allowed=f"{allowed}; choose another distribution, or add truncated = [low, high]",
        )
    ]


def _node_faults(where: str, belief: Distribution) -> list[Fault]:
    """A distribution of which rounding leaves nothing to integrate over, e.g. with a scale of 1e-320."""
    try:
        nodes = nuisance_nodes({where: belief}, 8)[0][where]
    except (ValueError, ArithmeticError, np.linalg.LinAlgError):
        nodes = np.empty(0)
    if nodes.size and np.isfinite(nodes).all():
        return []
    return [
        Fault(
            where=where,
            problem="too extreme to compute with",
            got=belief.describe(),
            allowed="numbers of an ordinary size",
        )
    ]


def _outside(belief: Distribution, low: FloatArray, high: FloatArray) -> FloatArray:
    """Mass of a belief outside low..high, an atom on either end counting as inside."""
    values, masses = belief.atoms()
    at_low = np.array([masses[np.abs(values - v) <= 1e-12].sum() for v in low])
    return np.asarray(belief.cdf(low) - at_low + belief.sf(high))


def _variable_faults(study: "Study") -> list[Fault]:
    """The prior on the effect (or the treated arm) must lie on values that the nuisance allows."""
    prior, design = study.prior, study.design
    nodes, weight = nuisance_nodes(design.nuisance, 8)
    low, high = design.effect_bounds(nodes)
    where = "[prior] effect"
    if prior.treatment is not None:
        where, (low, high) = (
            "[prior] treatment",
            (design.treatment_of(low, nodes), design.treatment_of(high, nodes)),
        )
    outside = _outside(prior.variable, low, high)
    lost = float(weight @ outside)
    # a cut that the study asked for, and a single effect, are taken where they are possible
    if lost <= TRACE or (prior.variable.kind in ("truncated", "point") and lost < 0.5):
        return []
    example = f"{low[0]:.4g} to {high[0]:.4g}" + (" (it depends on the nuisance parameters)" if len(weight) > 1 else "")
    if isinstance(prior.variable, Point):
        return [
            Fault(
                where=where,
                problem="not a possible value",
                got=f"{prior.variable.value:g}",
                allowed=f"possible values are {example}",
            )
        ]
    return [
        Fault(
            where=where,
            problem=f"{lost:.2g} of its probability lies on impossible values",
            got=prior.variable.describe(),
            allowed=f"possible values are {example}; choose another distribution, or add truncated = [low, high]",
        )
    ]


def _target_faults(study: "Study") -> list[Fault]:
    target = study.target
    if target is None:
        return []
    faults = []
    if (target.at_least is None) == (target.at_most is None):
        faults.append(
            Fault(
                where="[target] at_least",
                problem="sizes need one bound",
                allowed="give at_least or at_most, one of them",
            )
        )
    bounds = {"at_least": target.at_least, "at_most": target.at_most}
    for key, bound in bounds.items():
        if bound is not None and not 0 <= bound <= (math.inf if target.measure.startswith("exaggeration") else 1):
            allowed = (
                "a number above 0"
                if target.measure.startswith("exaggeration")
                else "a probability, 0 to 1 (0.8, not 80)"
            )
            faults.append(
                Fault(where=f"[target] {key}", problem="not a possible value", got=f"{bound:g}", allowed=allowed)
            )
    if target.max_n < study.design.minimum_n:
        faults.append(
            Fault(
                where="[target] max_n",
                problem="too small",
                got=str(target.max_n),
                allowed=f"at least {study.design.minimum_n}",
            )
        )
    return faults
