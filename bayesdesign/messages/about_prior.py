"""Traps in what is believed before the study."""

import math

import numpy as np

from bayesdesign.messages.context import Context, hundred
from bayesdesign.messages.trap import Trap, Values

WIDE = 5.0  # multiples of the smallest relevant effect beyond which an effect is called absurd
VAGUE = 15.0  # multiples of the test's resolution beyond which a prior beside a spike is called vague


def _no_null(c: Context) -> Values | None:
    if c.study.states.null is not None:
        return None
    return {"null": c.unit(c.study.null)}


def _side(c: Context) -> Values | None:
    if c.good_side >= 0.5:
        return None
    return {"good": c.study.favourable, "p": hundred(c.good_side), "null": c.unit(c.study.null)}


def _too_wide(c: Context) -> Values | None:
    relevant = c.study.relevant_distance
    if relevant is None:
        return None
    far = float(c.weights[np.abs(c.distances) > WIDE * relevant].sum())
    return {"p": hundred(far), "times": f"{WIDE:g}"} if far > 0.2 else None


def _too_narrow(c: Context) -> Values | None:
    found = c.first.quantities["power_quantiles"].value if c.first and "power_quantiles" in c.first.quantities else None
    if not isinstance(found, dict) or c.study.rule.favourable(c.study.favourable) == ():
        return None
    low, high = found["0.05"], found["0.95"]
    # near 0 and 1 power cannot vary, whatever the prior
    if high - low >= 0.05 or high < 0.1 or low > 0.95:
        return None
    return {"low": f"{low:.2f}", "high": f"{high:.2f}"}


def _even_spike(c: Context) -> Values | None:
    if c.study.prior.probability_null != 0.5:
        return None
    false, power = c.value("type_1_rate"), c.value("average_power")
    if false is None or power is None or false + power <= 0 or not c.study.states.own_null:
        return {"sweep": "the risk that a claim is false moves with it one for one"}

    def risk(w: float) -> str:
        return hundred(w * false / (w * false + (1 - w) * power))

    return {
        "sweep": f"at 0.3 and 0.7 instead, {risk(0.3)} and {risk(0.7)} in 100 claims would be false, "
        f"against {risk(0.5)} at 0.5"
    }


def _vague(c: Context) -> Values | None:
    if c.study.prior.probability_null <= 0 or c.resolution is None:
        return None
    spread = _half_width(c) / c.resolution
    return {"times": f"{spread:.0f}"} if spread > VAGUE else None


def _half_width(c: Context) -> float:
    """Half the width of the middle two thirds of the prior: its sd, if it is normal."""
    order = np.argsort(c.distances)
    total = np.cumsum(c.weights[order])
    low, high = (c.distances[order][min(int(np.searchsorted(total, p)), len(order) - 1)] for p in (1 / 6, 5 / 6))
    return float(high - low) / 1.935


def _ratio_as_difference(c: Context) -> Values | None:
    unit = c.study.effect.unit.lower()
    named = ("ratio" in unit or "fold" in unit) and "log" not in unit
    around_one = c.study.null == 1.0 and not unit and c.quantile(0.01) > 0
    if c.study.design.ratio_scale or not (named or around_one):
        return None
    return {"null": f"{c.study.null:g}", "low": f"{c.quantile(0.05):.3g}", "high": f"{c.quantile(0.95):.3g}"}


def _symmetric_on_ratio(c: Context) -> Values | None:
    effect = c.study.prior.effect
    if not c.study.design.ratio_scale or effect is None:
        return None
    if getattr(effect, "base", effect).kind not in ("normal", "student_t", "cauchy"):
        return None
    centre = c.quantile(0.5)
    down, up = centre / c.quantile(0.05), c.quantile(0.95) / centre
    return {"down": f"{down:.2g}", "up": f"{up:.2g}"} if down > 1.15 * up else None


def _cut(c: Context) -> Values | None:
    return {"p": f"{100 * c.cut:.2g}"} if c.cut > 0.005 else None


def _no_mean(c: Context) -> Values | None:
    return (
        None if math.isfinite(c.study.prior.variable.expectation()) else {"belief": c.study.prior.variable.describe()}
    )


def _guess_in_tail(c: Context) -> Values | None:
    plan, sign = c.study.effect.planning_value, {"higher": 1.0, "lower": -1.0}.get(c.study.favourable)
    if plan is None or sign is None:
        return None
    beyond = float(c.weights[sign * (c.effects - plan) >= 0].sum())
    return {"plan": c.unit(plan), "p": hundred(beyond)} if beyond < 0.1 else None


PRIOR_TRAPS = (
    Trap(
        code="sign-flip",
        severity="block",
        condition=_side,
        text="The study calls {good} favourable, yet only {p} in 100 of the prior lie on that side of "
        "{null}: the prior expects bad news.",
        advice="Check the sign (treatment minus control, or over control) and [effect] favourable.",
    ),
    Trap(
        code="prior-mass-at-null",
        severity="warning",
        condition=_no_null,
        text="The prior puts no weight exactly on {null}, so every claim counts as real and no claim can be "
        "false about the null by construction.",
        advice="Give [effect] smallest_relevant, or [prior] probability_null, to ask how often a claim is false.",
    ),
    Trap(
        code="prior-too-wide",
        severity="warning",
        condition=_too_wide,
        text="{p} in 100 of the prior are effects more than {times} times the smallest relevant one; such "
        "giants win the assurance for it.",
        advice="Narrow the prior to effects someone would believe, or reconsider smallest_relevant.",
    ),
    Trap(
        code="prior-too-narrow",
        severity="warning",
        condition=_too_narrow,
        text="Over nearly all of the prior the power stays between {low} and {high}: assurance is then "
        "hardly more than power at one guess, "
        "and data can change no mind.",
        advice="Widen the prior by what differs between its source and this study.",
    ),
    Trap(
        code="spike-by-default",
        severity="warning",
        condition=_even_spike,
        text="probability_null is 0.5, the figure people give when they have none: {sweep}.",
        advice="Say where the 0.5 comes from, or report the answer over a range of it.",
    ),
    Trap(
        code="vague-slab",
        severity="warning",
        condition=_vague,
        text="Beside the weight on the null, the prior spreads over about {times} times what the test can "
        "resolve: whatever is not rejected "
        "will look like the null, however small a real effect would be.",
        advice="Tie the width of the prior to effects that are plausible if there is one.",
    ),
    Trap(
        code="ratio-on-linear",
        severity="warning",
        condition=_ratio_as_difference,
        text="The effect looks like a ratio (null {null}, prior {low} to {high}) but is analysed as a "
        "difference, where doubling and halving "
        "are not equally far from the null.",
        advice="Use the logarithm of the ratio with null 0, or a family with a ratio scale.",
    ),
    Trap(
        code="symmetric-prior-on-ratio",
        severity="info",
        condition=_symmetric_on_ratio,
        text="The prior is symmetric in the ratio, so it reaches {down} times down but only {up} times up "
        "from its middle.",
        advice="A lognormal prior treats doubling and halving alike.",
    ),
    Trap(
        code="prior-cut",
        severity="info",
        condition=_cut,
        text="{p} in 100 of the prior lie on combinations that cannot exist (an arm below 0 or above 1) and "
        "are left out; the rest is scaled up.",
        advice="Give the prior on the treated arm, or on a ratio, so that nothing has to be left out.",
    ),
    Trap(
        code="prior-without-mean",
        severity="info",
        condition=_no_mean,
        text="The prior ({belief}) has no mean, so an average exaggeration does not exist.",
        advice="Read the median exaggeration, or truncate the prior to believable effects.",
    ),
    Trap(
        code="planning-value-in-tail",
        severity="warning",
        condition=_guess_in_tail,
        text="The planning value {plan} is one the prior hardly believes: only {p} in 100 of it are at least as good.",
        advice="Plan on the assurance, or explain why the one guess and the prior differ.",
    ),
)
