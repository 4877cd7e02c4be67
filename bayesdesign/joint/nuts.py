"""Posteriors by NUTS (Hoffman and Gelman 2014), compiled by nutpie from a PyMC model: the referee of `interpret`.

The prior is written by its log density, the decision or the estimate as a potential. Weight on single effects (exactly null, for
one) is summed out: the potential is log(sum of weight * likelihood) over the single effects and the continuous part, and every
answer is the mean over draws of its expectation given the draw (Rao-Blackwell).
"""

import warnings
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered, Refused
from bayesdesign.joint.integration import distances
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.mixture import Mixture
from bayesdesign.prior.nodes import nuisance_nodes
from bayesdesign.prior.point import Point
from bayesdesign.prior.truncated import Truncated
from bayesdesign.study.study import Study

CHAINS, DRAWS, TUNE = 4, 2000, 1000
R_HAT, LEAST_ESS = 1.01, 400.0  # Vehtari, Gelman, Simpson, Carpenter and Buerkner (2021)
MASS = 0.95


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Decided:
    """All that is known is which decision fell."""

    decision: str


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Observed:
    """The estimate in natural units, and its standard error on the working scale (of the logarithm, for ratios)."""

    estimate: float
    standard_error: float


@final
@dataclass(frozen=True, slots=True)
class Estimated:
    """A number and its Monte Carlo standard error."""

    value: float
    mcse: float


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Diagnostics:
    """The worst of every sampled quantity: rank R-hat, bulk and tail effective sample size; and the divergent transitions."""

    r_hat: float
    ess_bulk: float
    ess_tail: float
    divergences: int
    chains: int
    draws: int


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class DrawnPosterior:
    """A posterior of the effect, in natural units. `interval` is equal-tailed with this `mass`.

    `effect_mean` and `effect_sd` are None where a decision alone cannot give them: the prior has none, nor has the posterior.
    """

    state_probabilities: dict[str, Estimated]
    effect_mean: Estimated | None
    effect_sd: Estimated | None
    effect_median: Estimated
    interval: tuple[Estimated, Estimated]
    mass: float
    probability_above_null: Estimated
    diagnostics: Diagnostics


def posterior_by_nuts(
    study: Study, given: Decided | Observed, seed: int, n: int | None = None, mass: float = MASS
) -> DrawnPosterior:
    """Posterior of the effect given a decision, or an estimate with its standard error, at n (the study's own when omitted).

    Raises `Refused` when the chains have not converged, `NotOffered` where NUTS has nothing to sample or the likelihood is not at
    hand; the sentence says which.
    """
    model = _model(study, given, study.design.planned_n if n is None else n)
    trace = _sample(model, seed)
    diagnostics = check_convergence(
        {variable.name: trace.posterior[variable.name].values for variable in model.free_RVs},
        int(trace.sample_stats.diverging.sum()),
    )
    effects = trace.posterior["effects"].values  # (chains, draws, parts): the continuous part last, if there is one
    logs = trace.posterior["log_parts"].values
    share = np.exp(logs - logs.max(axis=-1, keepdims=True))
    share /= share.sum(axis=-1, keepdims=True)
    return _summary(study, given, effects, share, diagnostics, mass)


def _sample(model: Any, seed: int) -> Any:
    import nutpie

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of Numba and nutpie, about their own work; convergence is checked by numbers
        return nutpie.sample(
            nutpie.compile_pymc_model(model), draws=DRAWS, tune=TUNE, chains=CHAINS, cores=1, seed=seed,
            progress_bar=False, target_accept=0.95,
        )  # fmt: skip


def check_convergence(chains: dict[str, FloatArray], divergences: int) -> Diagnostics:
    """Diagnostics of the sampled quantities, each (chains, draws). Raises `Refused` when they cannot be trusted."""
    import arviz as az

    r_hat = max(float(az.rhat(x)) for x in chains.values())
    bulk = min(float(az.ess(x, method="bulk")) for x in chains.values())
    tail = min(float(az.ess(x, method="tail", prob=(0.05, 0.95))) for x in chains.values())
    advice = "try another --seed, a prior with lighter tails, or --route integration"
    if not r_hat <= R_HAT:
        raise Refused(f"NUTS: the chains disagree, R-hat {r_hat:.3f} exceeds {R_HAT}", advice)
    if not min(bulk, tail) >= LEAST_ESS:
        raise Refused(
            f"NUTS: effective sample size {min(bulk, tail):.0f} is less than {LEAST_ESS:.0f} (bulk {bulk:.0f}, tail {tail:.0f})", advice
        )
    if divergences:
        raise Refused(f"NUTS: {divergences} divergent transitions, part of the posterior was not reached", advice)
    first = next(iter(chains.values()))
    return Diagnostics(
        r_hat=r_hat, ess_bulk=bulk, ess_tail=tail, divergences=divergences, chains=first.shape[0], draws=first.shape[1]
    )


# The model


def _model(study: Study, given: Decided | Observed, n: int | None) -> Any:
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
        single = [(study.null, prior.probability_null)] if prior.probability_null > 0 else []
        single += [(_effect(study, np.float64(v), nuisance), real * m) for v, m in zip(values, masses, strict=True) if real * m > 0]
        parts = [(pm.math.constant(np.float64(v)) if isinstance(v, float) else v, weight) for v, weight in single]
        if belief is not None and real > 0:
            variable = _latent(pm, "variable", belief, _range(study))
            parts.append((_effect(study, variable, nuisance), real * (1 - masses.sum())))
        if not model.free_RVs:
            raise NotOffered("nothing in this study is uncertain on a continuous scale, so NUTS has nothing to sample; use --route integration")
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
            smooth = [(part, share) for whole, share in belief.parts() for part in [continuous_part(whole)] if part is not None]
            shares = [
                share * (1 - float(whole.atoms()[1].sum()))
                for whole, share in belief.parts()
                if continuous_part(whole) is not None
            ]
            if not smooth:
                return None
            return Mixture(components=tuple(p for p, _ in smooth), weights=tuple(s / sum(shares) for s in shares))
        case Truncated():
            base = continuous_part(belief.base)
            return None if base is None else replace(belief, base=base)
        case _:
            return belief


def _latent(pm: Any, name: str, belief: Distribution, bounds: tuple[float, float]) -> Any:
    """A number with this belief: a constant, or a free variable on the whole line, mapped to the support.

    The free variable is 0 at the belief's median and about -1 and 1 at its 16 % and 84 % points, so that the chains begin well. A
    belief without an sd is stretched by sinh, which turns power tails into exponential ones.
    """
    values, masses = belief.atoms()
    if len(values):
        if len(values) > 1 or masses[0] < 1:
            raise NotOffered(f"NUTS cannot sample '{name}', which has single values; use --route integration")
        return np.float64(values[0])
    low, high = (float(f(pair)) for f, pair in zip((max, min), zip(belief.support, bounds, strict=True), strict=True))
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


# The answers


def _summary(
    study: Study, given: Decided | Observed, effects: FloatArray, share: FloatArray, diagnostics: Diagnostics, mass: float
) -> DrawnPosterior:
    """Expectations over the draws; effects and share (of the posterior, sum 1 over parts) are (chains, draws, parts)."""
    belief = study.prior.variable
    distance, exactly_null = distances(study, effects)
    state = study.states.classify(distance, exactly_null)

    def mean(values: FloatArray) -> Estimated:
        per_draw = (share * values).sum(axis=-1)
        return Estimated(float(per_draw.mean()), _mcse(per_draw))

    centre = mean(effects)
    variance = mean((effects - centre.value) ** 2)
    sd = float(np.sqrt(variance.value))
    tails = [_weighted_quantile(effects, share, p) for p in ((1 - mass) / 2, 0.5, (1 + mass) / 2)]
    known = isinstance(given, Observed)  # a normal likelihood gives every prior a mean and an sd
    return DrawnPosterior(
        state_probabilities={name: mean((state == i).astype(float)) for i, name in enumerate(study.states.names)},
        effect_mean=centre if known or np.isfinite(belief.expectation()) else None,
        effect_sd=Estimated(sd, variance.mcse / (2 * sd)) if sd > 0 and (known or np.isfinite(belief.deviation())) else None,
        effect_median=tails[1],
        interval=(tails[0], tails[2]),
        mass=mass,
        probability_above_null=mean(((distance > 0) & ~exactly_null).astype(float)),
        diagnostics=diagnostics,
    )


def _mcse(per_draw: FloatArray) -> float:
    """Monte Carlo standard error of the mean of (chains, draws), at least that of two events among all independent draws."""
    import arviz as az

    spread = float(np.ptp(per_draw))
    error = float(az.mcse(per_draw)) if spread > 0 else 0.0
    return float(np.hypot(np.nan_to_num(error), 2 * spread / per_draw.size))


def _weighted_quantile(effects: FloatArray, share: FloatArray, level: float) -> Estimated:
    """Quantile of the draws, each part with its share; its error is that of the share below it, carried over (Woodruff 1952)."""
    order = np.argsort(effects, axis=None, kind="stable")
    values, cumulative = effects.ravel()[order], np.cumsum(share.ravel()[order])
    cumulative /= cumulative[-1]

    def at(p: float) -> float:
        return float(values[min(int(np.searchsorted(cumulative, p)), len(values) - 1)])

    found = at(level)
    error = _mcse((share * (effects <= found)).sum(axis=-1))
    return Estimated(found, (at(min(level + error, 1.0)) - at(max(level - error, 0.0))) / 2)
