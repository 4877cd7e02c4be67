"""`interpret`: what a finished study's result is worth."""

from dataclasses import dataclass, replace
from typing import Any, final

import numpy as np
from scipy import special

from bayesdesign.core.errors import Fault, NotOffered, StudyError
from bayesdesign.design.estimate import known_error
from bayesdesign.evaluate import SEED, TOLERANCE, Route, evaluate, resolve_sizes
from bayesdesign.joint.evidence import decision_evidence, estimate_evidence, p_value_evidence
from bayesdesign.joint.posterior import Evidence, Posterior, posterior_by_integration
from bayesdesign.result import Result
from bayesdesign.study.study import Study
from bayesdesign.verdict import Verdict, verdict_of


@final
@dataclass(frozen=True, kw_only=True)
class Interpretation:
    """A finished study: its posterior, set beside the prior and what the design was worth.

    decision is the study's own, or the one its estimate or p-value amounts to; conflict the two-sided prior
    predictive tail probability of the estimate (Box 1980), None when only the decision or the p-value is known;
    `nuts` the same posterior by MCMC where a route asked for it.
    """

    study: Study
    given: str
    reported: dict[str, Any]
    decision: str | None
    posterior: Posterior
    prior_states: dict[str, float]
    conflict: float | None
    verdict: Verdict
    design: Result
    nuts: dict[str, Any] | None = None

    def to_dict(self) -> dict[str, Any]:
        """The JSON document: that of `evaluate` with posterior, given and verdict."""
        document = {**self.design.to_dict(), "command": "interpret"}
        messages, provenance = document.pop("messages"), document.pop("provenance")
        after = self.posterior
        mean, sd = _finite(after.mean), _finite(after.sd)
        return {
            **document,
            "given": self.given,
            "reported": self.reported,
            "decision": self.decision,
            "prior": {"state_probabilities": self.prior_states},
            "posterior": {
                "state_probabilities": after.states,
                "effect_mean": mean,
                "effect_sd": sd,
                "effect_median": after.median,
                "interval": {"low": after.low, "high": after.high, "mass": after.mass},
                "probability_above_null": after.above_null,
                "errors": {name: _finite(error) for name, error in after.errors.items()},
            },
            **({"posterior_by_sampling": self.nuts} if self.nuts is not None else {}),
            "prior_predictive_tail": self.conflict,
            "verdict": self.verdict.code,
            "verdict_sentence": self.verdict.sentence,
            "messages": messages,
            "provenance": provenance,
        }


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def interpret(
    study: Study,
    *,
    decision: str | None = None,
    estimate: float | None = None,
    se: float | None = None,
    p_value: float | str | None = None,
    n: int | None = None,
    mass: float = 0.95,
    route: Route = "integration",
    seed: int = SEED,
    tolerance: float = TOLERANCE,
) -> Interpretation:
    """The posterior after a finished study, from whatever is at hand.

    Args:
        study: the study as planned.
        decision: one of the rule's decisions; with `p_value`, it tells the side of a two-sided p-value.
        estimate: the estimate in natural units, with `se`, its standard error (of the logarithm, for ratios).
        p_value: the p-value of the study's own test; a string keeps the digits that were printed.
        n: the size the study ended with, if it is not the planned one.
        mass: posterior probability of the equal-tailed interval.
        route: `sampling` and `both` add the same posterior by MCMC, which must agree.

    Raises:
        StudyError: the report is incomplete or impossible.
        Refused: the evidence is practically impossible under the prior, a number misses the tolerance, or a sampler
        fails.
    """
    _check(study, decision, estimate, se, p_value, mass)
    size = resolve_sizes(study, n)[0]
    given, evidence, reached = _evidence(study, size, decision, estimate, se, p_value)
    after = posterior_by_integration(study, size, evidence, mass, tolerance)
    design = evaluate(
        study, None if size is None or n is None else [size], route="integration", seed=seed, tolerance=tolerance
    )
    before = np.array(design.answers[0].table.joint).sum(axis=1)
    conflict = _conflict(study, estimate, se, size) if estimate is not None and se is not None else None
    known = _without_moments(study, given, after)
    return Interpretation(
        study=study,
        given=given,
        reported={
            key: value
            for key, value in (
                ("decision", decision),
                ("estimate", estimate),
                ("se", se),
                ("p_value", p_value),
                ("n", size),
            )
            if value is not None
        },
        decision=reached,
        posterior=known,
        prior_states=dict(zip(study.states.names, map(float, before), strict=True)),
        conflict=conflict,
        verdict=verdict_of(study, given, reached, known, design.answers[0], conflict),
        design=design,
        nuts=_by_nuts(study, decision, estimate, se, given, known, size, seed, mass)
        if route != "integration"
        else None,
    )


def _check(
    study: Study,
    decision: str | None,
    estimate: float | None,
    se: float | None,
    p_value: float | str | None,
    mass: float,
) -> None:
    faults = []
    if decision is None and estimate is None and p_value is None:
        faults.append(
            Fault(
                where="--decision",
                problem="nothing is reported",
                allowed="give --decision, --p-value, or --estimate with --se",
            )
        )
    if decision is not None and decision not in study.rule.decisions:
        faults.append(
            Fault(
                where="--decision",
                problem="not a decision of this rule",
                got=str(decision)[:60],
                allowed=", ".join(study.rule.decisions),
            )
        )
    if (estimate is None) != (se is None):
        missing = "--se" if se is None else "--estimate"
        faults.append(Fault(where=missing, problem="missing", allowed="an estimate and its standard error go together"))
    if estimate is not None and not (np.isfinite(estimate) and (estimate > 0 or not study.design.ratio_scale)):
        faults.append(
            Fault(
                where="--estimate",
                problem="not a possible estimate",
                got=f"{estimate:g}",
                allowed="a finite number, above 0 for a ratio",
            )
        )
    if se is not None and not (np.isfinite(se) and se > 0):
        faults.append(
            Fault(where="--se", problem="not a standard error", got=f"{se:g}", allowed="a finite number above 0")
        )
    if p_value is not None and not 0 < _number(p_value) <= 1:
        faults.append(
            Fault(
                where="--p-value",
                problem="not a p-value",
                got=str(p_value)[:60],
                allowed="a number above 0 and at most 1",
            )
        )
    if estimate is not None and (p_value is not None or decision is not None):
        faults.append(
            Fault(
                where="--estimate",
                problem="given together with a p-value or a decision",
                allowed="the estimate alone says more than both",
            )
        )
    level = getattr(study.rule, "alpha", None)
    if (
        decision is not None
        and p_value is not None
        and level is not None
        and not faults
        and (_number(p_value) <= level) != (decision in study.rule.claims)
    ):
        faults.append(
                Fault(where="--p-value", problem=f"does not go with the decision {decision}", got=str(p_value)[:60],
                      allowed=f"the rule claims an effect at p <= {level:g}")
            )  # fmt: skip
    if not 0 < mass < 1:
        faults.append(
            Fault(where="--mass", problem="not a probability", got=f"{mass:g}", allowed="a number between 0 and 1")
        )
    if faults:
        raise StudyError(faults, study.file)


def _number(text: float | str) -> float:
    try:
        return float(text)
    except ValueError:
        return float("nan")


def _decimals(p: float | str) -> int:
    """Decimal places that were printed."""
    text = p if isinstance(p, str) else repr(float(p))
    digits, _, exponent = text.lower().partition("e")
    return len(digits.partition(".")[2]) - int(exponent or 0)


def _evidence(
    study: Study,
    n: int | None,
    decision: str | None,
    estimate: float | None,
    se: float | None,
    p_value: float | str | None,
) -> tuple[str, Evidence, str | None]:
    """What is known, its likelihood, and the decision it amounts to (None where that is not known)."""
    if estimate is not None and se is not None:
        return "estimate", estimate_evidence(study, estimate, se), _decision_of_estimate(study, estimate, se)
    if p_value is not None:
        p = _number(p_value)
        evidence = p_value_evidence(study, n, p, _decimals(p_value), decision)
        level = getattr(study.rule, "alpha", None)
        if level is None or decision is not None:
            return "p_value", evidence, decision
        if p > level:
            return "p_value", evidence, study.rule.decisions[-1]
        claims = list(study.rule.claims)
        return "p_value", evidence, claims[0] if len(claims) == 1 else None
    assert decision is not None
    return "decision", decision_evidence(study, decision), decision


def _decision_of_estimate(study: Study, estimate: float, se: float) -> str | None:
    """The decision of the study's rule on this estimate, by its normal approximation."""
    value = float(study.design.working(np.asarray(estimate)))
    line = replace(known_error(np.array([[se]]), study.working_null), working=study.design.working)
    try:
        regions = study.rule.regions(line, study.null)
    except NotOffered:  # a claim that only counts can answer
        return None
    inside = [bool(((r.lower <= value) & (value <= r.upper)).any()) for r in regions]
    return study.rule.decisions[inside.index(True) if any(inside) else -1]


def _conflict(study: Study, estimate: float, se: float, n: int | None) -> float:
    """Two-sided prior predictive tail probability of the estimate: 2 min(P(new estimate <= it), P(new estimate >=
    it)).
    """
    from bayesdesign.joint.integration import set_up, truth_nodes

    truths = truth_nodes(set_up(study, [n], 2))
    with np.errstate(divide="ignore"):
        z = (float(study.design.working(np.asarray(estimate))) - study.design.working(truths.effect)) / se
    below = float((truths.weight * special.ndtr(z)).sum())
    return 2 * min(below, 1 - below)


def _without_moments(study: Study, given: str, after: Posterior) -> Posterior:
    """A decision or a p-value does not bound the effect: where the prior has no mean, the posterior has none."""
    belief = study.prior.variable
    if given == "estimate" or np.isfinite(belief.deviation()):
        return after
    return replace(after, mean=after.mean if np.isfinite(belief.expectation()) else np.nan, sd=np.nan)


def _by_nuts(
    study: Study, decision: str | None, estimate: float | None, se: float | None, given: str, after: Posterior,
    n: int | None, seed: int, mass: float,
) -> dict[str, Any]:  # fmt: skip
    from bayesdesign.joint.nuts import checked_posterior

    return checked_posterior(
        study, n=n, decision=decision, estimate=estimate, se=se, given=given, against=after, seed=seed, mass=mass
    )
