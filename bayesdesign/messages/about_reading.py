"""Traps in what the rule does and in how its answers are read."""

from bayesdesign.messages.context import Context, hundred
from bayesdesign.messages.trap import Trap, Values

NEVER = 1e-9
INFLATED = 1.25  # average exaggeration from which a claimed estimate should not be taken at its word


def _ceiling(c: Context) -> Values | None:
    target, ceiling = c.study.target, c.value("assurance_ceiling")
    if (
        target is None
        or target.at_least is None
        or target.measure != "assurance"
        or ceiling is None
        or ceiling >= target.at_least
    ):
        return None
    return {"target": f"{target.at_least:g}", "ceiling": f"{ceiling:.3f}"}


def _power_gap(c: Context) -> float | None:
    power, assurance = c.value("power_at_planning_value"), c.value("assurance")
    return None if power is None or assurance is None else power - assurance


def _gap_values(c: Context) -> Values:
    power, assurance = c.value("power_at_planning_value") or 0.0, c.value("assurance") or 0.0
    plan = c.study.effect.planning_value
    return {
        "power": f"{power:.2f}",
        "assurance": f"{assurance:.2f}",
        "plan": c.unit(0.0 if plan is None else plan),
    }


def _optimistic(c: Context) -> Values | None:
    gap = _power_gap(c)
    return _gap_values(c) if gap is not None and gap > 0.05 else None


def _pessimistic(c: Context) -> Values | None:
    gap = _power_gap(c)
    return _gap_values(c) if gap is not None and gap < -0.05 else None


def _claims(c: Context) -> float | None:
    """Probability of any claim at the first n."""
    if c.first is None:
        return None
    table = c.first.table
    marks = [name in c.study.rule.claims for name in table.decisions]
    return sum(p for row in table.joint for p, claims in zip(row, marks, strict=True) if claims)


def _never(c: Context) -> Values | None:
    claims = _claims(c)
    return {"n": "" if c.n is None else f" at n = {c.n}"} if claims is not None and claims < NEVER else None


def _always(c: Context) -> Values | None:
    claims = _claims(c)
    return {} if claims is not None and claims > 1 - NEVER else None


def _against(c: Context) -> Values | None:
    if c.study.rule.favourable(c.study.favourable) or not c.study.rule.claims:
        return None
    return {"good": c.study.favourable, "side": next(iter(c.study.rule.claims.values()))}


def _inflated(c: Context) -> Values | None:
    for name, how in (("exaggeration_ratio", "on average"), ("exaggeration_median", "typically")):
        times = c.value(name)
        if times is not None:
            return {"times": f"{times:.2f}", "how": how} if times >= INFLATED else None
    return None


def _wrong_sign(c: Context) -> Values | None:
    rate = c.value("type_s_rate")
    return {"p": hundred(rate)} if rate is not None and rate > 0.05 else None


def _weak(c: Context) -> Values | None:
    power = c.value("average_power")
    return {"q": hundred(1 - power)} if power is not None and power < 0.5 else None


def _one_tail(c: Context) -> Values | None:
    alpha = getattr(c.study.rule, "alpha", None)
    if getattr(c.study.rule, "sides", "two") == "two" or alpha is None or alpha <= 0.025 + 1e-12:
        return None
    return {"alpha": f"{alpha:g}", "double": f"{2 * alpha:g}"}


def _risk_above_level(c: Context) -> Values | None:
    risk, alpha = c.value("false_positive_risk"), getattr(c.study.rule, "alpha", None)
    if risk is None or alpha is None or risk <= 2 * alpha:
        return None
    return {"p": hundred(risk), "alpha": f"{alpha:g}"}


def _coin(c: Context) -> Values | None:
    assurance = c.value("assurance")
    return {"p": hundred(assurance)} if assurance is not None and abs(assurance - 0.5) < 0.05 else None


def _noisy(c: Context) -> Values | None:
    target, assurance = c.study.target, c.value("assurance")
    if (
        target is None
        or target.at_least is None
        or target.measure != "assurance"
        or assurance is None
        or c.first is None
    ):
        return None
    error, gap = c.error("assurance"), abs(assurance - target.at_least)
    if c.first.quantities["assurance"].route != "sampling" or error <= gap / 4:
        return None
    return {"error": f"{error:.1g}", "gap": f"{gap:.1g}", "target": f"{target.at_least:g}"}


READING_TRAPS = (
    Trap(
        code="ceiling-below-target",
        severity="block",
        condition=_ceiling,
        text="The target assurance of {target} is above the ceiling of {ceiling}, which the prior sets: no "
        "sample size can reach it.",
        advice="Lower the target, change the rule, or find an idea with better prospects.",
    ),
    Trap(
        code="decision-never",
        severity="block",
        condition=_never,
        text="The rule claims nothing{n}, whatever the data: not one outcome that can occur is extreme enough.",
        advice="Enlarge the study, or loosen alpha, before asking anything else of it.",
    ),
    Trap(
        code="rule-against-favourable",
        severity="block",
        condition=_against,
        text="The study calls {good} favourable, but the rule can only claim {side}: the assurance is 0 by "
        "construction.",
        advice="Correct [rule] sides or [effect] favourable.",
    ),
    Trap(
        code="decision-always",
        severity="warning",
        condition=_always,
        text="The rule claims an effect in practically every run under this prior: the study would tell "
        "nobody anything new.",
        advice="Ask for a smaller study, or a sharper question.",
    ),
    Trap(
        code="planning-value-optimistic",
        severity="warning",
        condition=_optimistic,
        text="Power is {power} if the effect is exactly {plan}, but the chance of the favourable decision "
        "over the prior is {assurance}.",
        advice="Plan on the assurance; quote the power only together with it.",
    ),
    Trap(
        code="assurance-vs-power",
        severity="info",
        condition=_pessimistic,
        text="Power at the planning value {plan} is {power}, less than the assurance of {assurance}: the "
        "prior hopes for more than the plan.",
        advice="Show both, and say which one decides.",
    ),
    Trap(
        code="weak-study",
        severity="warning",
        condition=_weak,
        text="An effect that is there would be missed {q} times in 100, so silence from this study says little.",
        advice="Enlarge it, measure more precisely, or announce beforehand that a non-rejection will not be "
        "read as evidence.",
    ),
    Trap(
        code="raw-winner",
        severity="warning",
        condition=_inflated,
        text="Estimates that lead to a claim will be {how} {times} times as large as the effect behind them.",
        advice="Report the posterior with its interval, not the raw estimate of a claimed effect.",
    ),
    Trap(
        code="type-s-high",
        severity="warning",
        condition=_wrong_sign,
        text="About {p} in 100 claims would point to the wrong side of the null.",
        advice="Enlarge the study, or claim no direction.",
    ),
    Trap(
        code="alpha-is-not-risk",
        severity="warning",
        condition=_risk_above_level,
        text="Of 100 claims about {p} would be false, although alpha is {alpha}: alpha speaks of studies "
        "without an effect, not of claims.",
        advice="Quote the false-positive risk beside alpha; a smaller alpha or a more promising question lowers it.",
    ),
    Trap(
        code="tail-mixup",
        severity="warning",
        condition=_one_tail,
        text="A one-sided test at {alpha} is as lenient as a two-sided one at {double} on that side.",
        advice="Say so wherever the result is compared with two-sided tests, or use 0.025.",
    ),
    Trap(
        code="mc-noise",
        severity="warning",
        condition=_noisy,
        text="The standard error of the assurance, {error}, is large beside its gap of {gap} to the target "
        "{target}: which side it falls on is luck.",
        advice="Raise --draws, or use --route integration.",
    ),
    Trap(
        code="coin-toss",
        severity="info",
        condition=_coin,
        text="The favourable decision falls in about {p} of 100 runs: before the data it is hardly better "
        "known than the toss of a coin.",
        advice="Agree now what each outcome will lead to.",
    ),
)
