"""Traps in what the study would record."""

import math
from itertools import pairwise

from bayesdesign.messages.context import Context, hundred
from bayesdesign.messages.trap import Trap, Values
from bayesdesign.prior.point import Point

FACTOR = 1.25  # how far a fixed nuisance parameter is moved, up and down, to see what hangs on it
AHEAD = 5  # how many larger sizes are looked at for a tooth of the saw
LARGE = 400  # beyond this size the teeth are too small to matter


def _moved(c: Context, *, share: bool) -> Values | None:
    """How the power at the typical effect moves with a nuisance parameter that the study fixes."""
    for name, belief in c.study.design.nuisance.items():
        low, high = c.study.design.nuisance_bounds(name)
        if not isinstance(belief, Point) or math.isfinite(high - low) != share:
            continue
        ends = [belief.value / FACTOR, belief.value * FACTOR]
        studies = [c.with_nuisance(name, value) for value in ends]
        powers = [None if study is None else c.power(c.typical(), study=study) for study in studies]
        known = [p for p in powers if p is not None]
        if len(known) == 2 and abs(known[1] - known[0]) > 0.1:
            return {
                "name": name.replace("_", " "),
                "value": f"{belief.value:.4g}",
                "low": f"{ends[0]:.3g}",
                "high": f"{ends[1]:.3g}",
                "at_low": f"{known[0]:.2f}",
                "at_high": f"{known[1]:.2f}",
                "effect": c.unit(c.typical()),
            }
    return None


def _saw(c: Context) -> Values | None:
    if not c.study.design.saw_tooth or c.n is None:
        return None
    found = {a.n: c.value("assurance", a) for a in c.answers}
    by_n = sorted((n, p) for n, p in found.items() if n is not None and p is not None)
    for (small, before), (large, after) in pairwise(by_n):
        if after < before - 1e-6:
            return {
                "small": small,
                "large": large,
                "before": f"{before:.4f}",
                "after": f"{after:.4f}",
                "what": "assurance",
            }
    if len(by_n) > 1 or c.n > LARGE:
        return None
    here = c.power(c.typical())
    for n in range(c.n + 1, c.n + AHEAD + 1):
        there = c.power(c.typical(), n=n)
        if here is not None and there is not None and there < here - 0.002:
            what = f"power at {c.unit(c.typical())}"
            return {"small": c.n, "large": n, "before": f"{here:.4f}", "after": f"{there:.4f}", "what": what}
    return None


def _few_for_approximation(c: Context) -> Values | None:
    if not str(getattr(c.study.design, "analysis", "")).startswith("z") or not c.shares:
        return None
    group, (share, size) = min(c.shares.items(), key=lambda item: item[1][1] * min(item[1][0], 1 - item[1][0]))
    least = size * min(share, 1 - share)
    return {"count": f"{least:.2g}", "group": group} if least < 5 else None


def _no_events(c: Context) -> Values | None:
    for group, (share, size) in c.shares.items():
        nothing = (1 - share) ** size
        if nothing > 0.05:
            return {"group": group, "p": hundred(nothing), "upper": f"{min(1.0, 3 / size):.2g}", "size": size}
    return None


def _level(c: Context) -> tuple[float, float] | None:
    """Chance of a claim exactly at the null, and the level the rule promises."""
    alpha = getattr(c.study.rule, "alpha", None)
    actual = c.power(c.study.null) if alpha is not None and c.study.design.saw_tooth and c.n is not None else None
    return None if actual is None or alpha is None else (actual, float(alpha))


def _level_exceeded(c: Context) -> Values | None:
    found = _level(c)
    if found is None or found[0] <= 1.1 * found[1]:
        return None
    return {"actual": f"{found[0]:.3f}", "alpha": f"{found[1]:g}"}


def _level_unspent(c: Context) -> Values | None:
    found = _level(c)
    if found is None or found[0] >= 0.6 * found[1]:
        return None
    return {"actual": f"{found[0]:.2g}", "alpha": f"{found[1]:g}"}


def _unresolved_zone(c: Context) -> Values | None:
    relevant, rule = c.study.relevant_distance, c.study.rule
    sides = {rule.claims.get(name) for name in rule.favourable(c.study.favourable)}
    if relevant is None or not sides:
        return None
    edge = c.study.working_null + (relevant if "higher" in sides else -relevant)
    effect = float(c.effect_at(edge - c.study.working_null))  # type: ignore[arg-type]
    power = c.power(effect)
    if power is None or power >= 0.5:
        return None
    return {"edge": c.unit(effect), "q": hundred(1 - power)}


DESIGN_TRAPS = (
    Trap(
        code="sd-known",
        severity="warning",
        condition=lambda c: _moved(c, share=False),
        text="The {name} is taken as exactly {value}. Were it {low} or {high}, the power at {effect} would "
        "be {at_low} or {at_high}.",
        advice="Give it a distribution that says how well it is known.",
    ),
    Trap(
        code="base-rate-fixed",
        severity="warning",
        condition=lambda c: _moved(c, share=True),
        text="The {name} share is taken as exactly {value}. Were it {low} or {high}, the power at {effect} "
        "would be {at_low} or {at_high}.",
        advice="Give it a distribution, so that n is not tuned to a guess.",
    ),
    Trap(
        code="saw-tooth",
        severity="warning",
        condition=_saw,
        text="Counts make the curve a saw: {what} is {before} at n = {small} but {after} at the larger n = {large}.",
        advice="Choose an n from which every larger one does at least as well; `bayesdesign size` gives it as safe_n.",
    ),
    Trap(
        code="approx-range",
        severity="warning",
        condition=_few_for_approximation,
        text="About {count} events (or non-events) are expected among {group}, too few for the normal "
        "approximation behind this z test.",
        advice='Use analysis = "exact", or a larger study.',
    ),
    Trap(
        code="zero-events",
        severity="warning",
        condition=_no_events,
        text="In {p} of 100 such studies no event at all would be seen among {group}; that is not a risk of "
        "zero, for with 0 of {size} the "
        "95% upper limit is still about {upper}.",
        advice="Enlarge the study, or plan what to say when nothing is seen.",
    ),
    Trap(
        code="level-exceeded",
        severity="warning",
        condition=_level_exceeded,
        text="With these counts the test claims an effect {actual} of the time where the null holds, more "
        "than its nominal {alpha}.",
        advice='Use analysis = "exact", or lower alpha.',
    ),
    Trap(
        code="level-unspent",
        severity="info",
        condition=_level_unspent,
        text="Counts are whole numbers, so the test spends only {actual} of its level of {alpha} where the "
        "null holds; power is lost with it.",
        advice="Look at neighbouring n, where more of the level may be spent.",
    ),
    Trap(
        code="zone-below-resolution",
        severity="warning",
        condition=_unresolved_zone,
        text="An effect just large enough to matter ({edge}) would be missed in {q} of 100 such studies: "
        "the test cannot tell it from none.",
        advice="Enlarge the study, or say what a missed effect of that size would cost.",
    ),
)
