"""Posteriors by NUTS (Hoffman and Gelman 2014), run by nutpie on a PyMC model: the referee of `interpret`.

Every answer is the mean over draws of its expectation given the draw, single effects included
(Rao-Blackwell).
"""

import warnings
from dataclasses import asdict, dataclass
from typing import Any, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import NotOffered, Refused
from bayesdesign.joint.integration import distances
from bayesdesign.joint.nuts_model import Decided as Decided
from bayesdesign.joint.nuts_model import Observed as Observed
from bayesdesign.joint.nuts_model import posterior_model
from bayesdesign.joint.posterior import Posterior
from bayesdesign.study.study import Study

CHAINS, DRAWS, TUNE = 4, 2000, 1000
R_HAT, LEAST_ESS = 1.01, 400.0  # Vehtari, Gelman, Simpson, Carpenter and Buerkner (2021)
MASS = 0.95
DISAGREEMENT = 5.0  # standard errors beyond which the routes disagree
ROUNDING = 1e-9  # what a number without any Monte Carlo error may differ by


@final
@dataclass(frozen=True, slots=True)
class Estimated:
    """A number and its Monte Carlo standard error."""

    value: float
    mcse: float


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Diagnostics:
    """Worst rank R-hat and effective sample sizes of all sampled quantities; divergent transitions."""

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

    `effect_mean` and `effect_sd` are None where neither the prior nor the posterior has any.
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
    """Posterior of the effect given a decision, or an estimate with its standard error.

    n is the study's own when omitted. Raises `Refused` when the chains have not converged, `NotOffered` where
    NUTS has nothing to sample or the likelihood is not at hand; the sentence says which.
    """
    model = posterior_model(study, given, study.design.planned_n if n is None else n)
    trace = _sample(model, seed)
    diagnostics = check_convergence(
        {variable.name: trace.posterior[variable.name].values for variable in model.free_RVs},
        int(trace.sample_stats.diverging.sum()),
    )
    effects = trace.posterior["effects"].values  # (chains, draws, parts)
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
    """Diagnostics of the sampled quantities, each (chains, draws); `Refused` when they cannot be trusted."""
    import arviz as az

    r_hat = max(float(az.rhat(x)) for x in chains.values())
    bulk = min(float(az.ess(x, method="bulk")) for x in chains.values())
    tail = min(float(az.ess(x, method="tail", prob=(0.05, 0.95))) for x in chains.values())
    advice = "try another --seed, a prior with lighter tails, or --route integration"
    if not r_hat <= R_HAT:
        raise Refused(f"NUTS: the chains disagree, R-hat {r_hat:.3f} exceeds {R_HAT}", advice)
    if not min(bulk, tail) >= LEAST_ESS:
        raise Refused(f"NUTS: effective sample size below {LEAST_ESS:.0f} (bulk {bulk:.0f}, tail {tail:.0f})", advice)
    if divergences:
        raise Refused(f"NUTS: {divergences} divergent transitions, part of the posterior was not reached", advice)
    first = next(iter(chains.values()))
    return Diagnostics(
        r_hat=r_hat,
        ess_bulk=bulk,
        ess_tail=tail,
        divergences=divergences,
        chains=first.shape[0],
        draws=first.shape[1],
    )


def checked_posterior(
    study: Study,
    *,
    n: int | None,
    decision: str | None,
    estimate: float | None,
    se: float | None,
    given: str,
    against: Posterior,
    seed: int,
    mass: float,
) -> dict[str, Any]:
    """The posterior by NUTS as a document, once it agrees with the one by integration.

    Raises `Refused` when a number differs from `against` by more than 5 standard errors.
    """
    if given == "decision" and decision is not None:
        evidence: Decided | Observed = Decided(decision=decision)
    elif estimate is not None and se is not None:
        evidence = Observed(estimate=estimate, standard_error=se)
    else:
        raise NotOffered(
            "NUTS takes a decision, or an estimate and its standard error, not a p-value; use --route integration"
        )
    drawn = posterior_by_nuts(study, evidence, seed, n, mass)
    low, high = drawn.interval
    pairs = [
        *((f"P({name})", number, against.states[name]) for name, number in drawn.state_probabilities.items()),
        ("mean", drawn.effect_mean, against.mean),
        ("sd", drawn.effect_sd, against.sd),
        ("median", drawn.effect_median, against.median),
        ("lower end", low, against.low),
        ("upper end", high, against.high),
        ("P(above the null)", drawn.probability_above_null, against.above_null),
    ]
    for name, number, exact in pairs:
        if number is not None and not abs(number.value - exact) <= DISAGREEMENT * number.mcse + ROUNDING:
            raise Refused(
                f"posterior {name}: the routes disagree, integration {exact:.6g}, NUTS {number.value:.6g} "
                f"with standard error {number.mcse:.2g}",
                "try another --seed; if it stays, please report the study file",
            )
    return _document(drawn)


def _document(drawn: DrawnPosterior) -> dict[str, Any]:
    return {
        "state_probabilities": {name: asdict(number) for name, number in drawn.state_probabilities.items()},
        "effect_mean": None if drawn.effect_mean is None else asdict(drawn.effect_mean),
        "effect_sd": None if drawn.effect_sd is None else asdict(drawn.effect_sd),
        "effect_median": asdict(drawn.effect_median),
        "interval": {"low": asdict(drawn.interval[0]), "high": asdict(drawn.interval[1]), "mass": drawn.mass},
        "probability_above_null": asdict(drawn.probability_above_null),
        "diagnostics": asdict(drawn.diagnostics),
    }


def _summary(
    study: Study,
    given: Decided | Observed,
    effects: FloatArray,
    share: FloatArray,
    diagnostics: Diagnostics,
    mass: float,
) -> DrawnPosterior:
    """Expectations over the draws; effects and share (sum 1 over parts) are (chains, draws, parts)."""
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
        effect_sd=Estimated(sd, variance.mcse / (2 * sd)) if known or np.isfinite(belief.deviation()) else None,
        effect_median=tails[1],
        interval=(tails[0], tails[2]),
        mass=mass,
        probability_above_null=mean(((distance > 0) & ~exactly_null).astype(float)),
        diagnostics=diagnostics,
    )


def _mcse(per_draw: FloatArray) -> float:
    """Monte Carlo standard error of the mean of (chains, draws), at least two draws' worth."""
    import arviz as az

    spread = float(np.ptp(per_draw))
    error = float(az.mcse(per_draw)) if spread > 0 else 0.0
    return float(np.hypot(np.nan_to_num(error), 2 * spread / per_draw.size))


def _weighted_quantile(effects: FloatArray, share: FloatArray, level: float) -> Estimated:
    """Quantile of the draws, each part with its share; error by that of the share below (Woodruff 1952)."""
    order = np.argsort(effects, axis=None, kind="stable")
    values, cumulative = effects.ravel()[order], np.cumsum(share.ravel()[order])
    cumulative /= cumulative[-1]

    def at(p: float) -> float:
        return float(values[min(int(np.searchsorted(cumulative, p)), len(values) - 1)])

    found = at(level)
    error = _mcse((share * (effects <= found)).sum(axis=-1))
    return Estimated(found, (at(min(level + error, 1.0)) - at(max(level - error, 0.0))) / 2)
