"""The posterior as a PyMC model: log density of the prior, and the decision or the estimate as a potential.

Weight on single effects (exactly null, for one) is summed out: the potential is log(sum of weight *
likelihood) over the single effects and the continuous part.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.mixture import Mixture
from bayesdesign.prior.nodes import nuisance_nodes
from bayesdesign.prior.point import Point
from bayesdesign.prior.truncated import Truncated
from bayesdesign.study.study import Study


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Decided:
    """All that is known is which decision fell."""

    decision: str


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Observed:
    """The estimate in natural units; its standard error on the working scale (of the log, for ratios)."""

    estimate: float
    standard_error: float


def posterior_model(study: Study, given: Decided | Observed, n: int | None) -> Any:
    """The PyMC model of a posterior, with `effects` and `log_parts` of all parts recorded at each draw.

    A part is a single effect with prior weight, or the continuous rest; the log is of weight * likelihood.
    """
    import pymc as pm

    design, prior = study.design, study.prior
    with pm.Model() as model:
        needed = isinstance(given, Decided) or prior.treatment is not None
        nuisance = {
            name: _latent(pm, name, belief, design.nuisance_bounds(name)) if needed else None
            for name, belief in design.nuisance.items()
        }
        belief = continuous_part(prior.variable)
        values, masses = prior.variable.atoms()
        real = (1 - prior.probability_null) / _possible(study)
        single = [(np.float64(study.null), prior.probability_null)] if prior.probability_null > 0 else []
        single += [
            (_effect(study, np.float64(v), nuisance), real * m)
            for v, m in zip(values, masses, strict=True)
            if real * m > 0
        ]
        parts = [(pm.math.constant(v) if isinstance(v, np.float64) else v, weight) for v, weight in single]
        if belief is not None and real > 0:
            variable = _latent(pm, "variable", belief, _range(study))
            parts.append((_effect(study, variable, nuisance), real * (1 - masses.sum())))
        if not model.free_RVs:
            raise NotOffered("nothing here is uncertain on a continuous scale for NUTS; use --route integration")
        likelihood = _likelihood(pm, study, given, nuisance, n)
        logs = pm.math.stack([np.log(np.float64(weight)) + likelihood(effect) for effect, weight in parts])
        pm.Potential("given", pm.math.logsumexp(logs, keepdims=False))
        pm.Deterministic("log_parts", logs)
        pm.Deterministic("effects", pm.math.stack([effect for effect, _ in parts]))
    return model


def _effect(study: Study, variable: Any, nuisance: dict[str, Any]) -> Any:
    return variable if study.prior.treatment is None else study.design.symbolic_effect(variable, nuisance)


def _likelihood(
    pm: Any, study: Study, given: Decided | Observed, nuisance: dict[str, Any], n: int | None
) -> Callable[[Any], Any]:
    rule, design = study.rule, study.design
    match given:
        case Decided(decision=name):
            if name not in rule.decisions:
                raise NotOffered(f"'{name}' is not a decision of this rule; it has {', '.join(rule.decisions)}")
            index = rule.decisions.index(name)

            def decides(analysis: Any) -> Any:
                return rule.decide(analysis, study.null, study.working_null) == index

            return design.decision_likelihood(pm, nuisance, 1 if n is None else n, study.null, decides)
        case Observed(estimate=estimate, standard_error=se):
            centre = np.float64(design.working(np.asarray(estimate)))

            def log_density(effect: Any) -> Any:
                working = pm.math.log(effect) if design.ratio_scale else effect
                return -(((working - centre) / np.float64(se)) ** 2) / 2

            return log_density


def _range(study: Study) -> tuple[float, float]:
    """Widest range of the prior's variable; pairs in it that cannot exist have no likelihood."""
    low, high = _feasible(study)[0]
    return float(low.min()), float(high.max())


def _possible(study: Study) -> float:
    """Prior probability, nuisance included, of the effects that can exist."""
    (low, high), weight = _feasible(study)
    belief = study.prior.variable
    values, masses = belief.atoms()
    at_low = np.array([masses[values == v].sum() for v in low])
    return float(weight @ (belief.cdf(high) - belief.cdf(low) + at_low))


def _feasible(study: Study) -> tuple[tuple[FloatArray, FloatArray], FloatArray]:
    """Bounds of the prior's variable at nodes of the nuisance parameters, and the nodes' weights."""
    nodes, weight = nuisance_nodes(study.design.nuisance, 24, panels=True)
    low, high = study.design.effect_bounds(nodes)
    if study.prior.treatment is not None:
        low, high = (study.design.treatment_of(np.minimum(end, 1e150), nodes) for end in (low, high))
    return (low, high), weight


def continuous_part(belief: Distribution) -> Distribution | None:
    """The belief given that it is none of its single values; None if it has only those."""
    match belief:
        case Point():
            return None
        case Mixture():
            found = [
                (part, share * (1 - float(whole.atoms()[1].sum())))
                for whole, share in belief.parts()
                if (part := continuous_part(whole)) is not None
            ]
            if not found:
                return None
            total = sum(share for _, share in found)
            return Mixture(components=tuple(p for p, _ in found), weights=tuple(s / total for _, s in found))
        case Truncated():
            base = continuous_part(belief.base)
            return None if base is None else replace(belief, base=base)
        case _:
            return belief


def _latent(pm: Any, name: str, belief: Distribution, bounds: tuple[float, float]) -> Any:
    """A number with this belief: a constant, or a free variable on the whole line, mapped to the support.

    The free variable is 0 at the belief's median and about -1 and 1 at its 16 % and 84 % points, so that the
    chains begin well. A belief without an sd is stretched by sinh, which makes power tails exponential.
    """
    values, masses = belief.atoms()
    if len(values):
        if len(values) > 1 or masses[0] < 1:
            raise NotOffered(f"NUTS cannot sample '{name}', which has single values; use --route integration")
        return np.float64(values[0])
    low, high = max(belief.support[0], bounds[0]), min(belief.support[1], bounds[1])
    first, middle, last = (float(q) for q in belief.ppf(np.array([0.16, 0.5, 0.84])))
    free = pm.Flat(f"free_{name}", initval=np.float64(0))
    value, log_slope = _mapped(pm, free, (low, high), (first, middle, last), heavy=not np.isfinite(belief.deviation()))
    pm.Potential(f"prior_{name}", belief.log_density(pm, value) + log_slope)
    return value


def _mapped(
    pm: Any, free: Any, ends: tuple[float, float], quantiles: tuple[float, float, float], *, heavy: bool
) -> tuple[Any, Any]:
    """The free variable on the support, and the log of the slope but for a constant."""
    (low, high), (first, middle, last) = ends, quantiles
    if np.isinf(low) and np.isinf(high):
        scale = np.float64((last - first) / 2)
        if not heavy:
            return np.float64(middle) + scale * free, np.float64(0)
        return np.float64(middle) + scale * pm.math.sinh(free), pm.math.log(pm.math.cosh(free))
    if np.isinf(low) or np.isinf(high):
        end, sign = (low, 1.0) if np.isinf(high) else (high, -1.0)
        near, far = sorted(abs(q - end) for q in (first, last))
        rate = np.float64(np.clip(np.log(far / near) / 2, 1e-3, 10.0))
        return np.float64(end) + np.float64(sign * abs(middle - end)) * pm.math.exp(rate * free), rate * free
    share = [np.clip((q - low) / (high - low), 1e-9, 1 - 1e-9) for q in quantiles]
    a, centre, b = (float(np.log(s / (1 - s))) for s in share)
    logit = np.float64(centre) + np.float64(np.clip((b - a) / 2, 1e-3, 10.0)) * free
    inside = pm.math.sigmoid(logit)
    return np.float64(low) + np.float64(high - low) * inside, pm.math.log(inside) + pm.math.log(pm.math.sigmoid(-logit))
