"""The verdict on a finished study: exclusive, ordered, computed; none of them accepts the null."""

from dataclasses import dataclass
from typing import final

import numpy as np

from bayesdesign.joint.posterior import Posterior
from bayesdesign.result import Answer
from bayesdesign.study.study import Study

CONFLICT = 0.05  # prior predictive tail probability below which data and prior disagree
SURE = 0.95  # posterior probability that is called "probably"
UNLIKELY = 0.05
LEANING = 0.90
WEAK_POWER = 0.50
EXAGGERATED = 1.4  # the exaggeration that goes with a power of about one half


@final
@dataclass(frozen=True, slots=True)
class Verdict:
    """A stable code and a sentence that a decision maker may quote."""

    code: str
    sentence: str


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class _View:
    """What the verdicts look at."""

    study: Study
    after: Posterior
    answer: Answer
    decision: str | None
    conflict: float | None

    @property
    def good(self) -> str:
        """The side that would be good news; the likelier one where either would."""
        if self.study.favourable != "either":
            return self.study.favourable
        return "higher" if self.after.above_null >= self.after.below_null else "lower"

    def on(self, side: str) -> float:
        """Posterior probability of the effect being on this side of the null."""
        return self.after.above_null if side == "higher" else self.after.below_null

    def relevant(self, side: str) -> float:
        """Posterior probability of a relevant effect on this side (of any, where relevance is not defined)."""
        return self.after.states.get(side, self.on(side))

    @property
    def has_zone(self) -> bool:
        return self.study.effect.smallest_relevant is not None


def in_100(probability: float) -> str:
    """A probability as a count out of 100 (out of 1000 or 10,000 when it is small), never rounded to nothing or to
    everything.
    """
    for base in (100, 1_000, 10_000):
        count = round(probability * base)
        if 0 < count < base:
            return f"{count:,} in {base:,}"
    return "less than 1 in 10,000" if probability < 0.5 else "more than 9,999 in 10,000"


def _threshold(study: Study) -> str:
    """The smallest relevant effect in words."""
    relevant, unit = study.effect.smallest_relevant, f" {study.effect.unit}" if study.effect.unit else ""
    return f"a factor of {relevant:g}" if study.design.ratio_scale else f"{relevant:g}{unit}"


def verdict_of(
    study: Study, given: str, decision: str | None, after: Posterior, answer: Answer, conflict: float | None
) -> Verdict:
    """The first verdict that applies."""
    view = _View(study=study, after=after, answer=answer, decision=decision, conflict=conflict)
    claimed = decision is not None and decision in study.rule.claims
    verdict = _conflicting(view) or (_after_claim(view) if claimed else _after_silence(view))
    if given == "decision":
        return Verdict(verdict.code, f"Knowing only the decision: {verdict.sentence[0].lower()}{verdict.sentence[1:]}")
    return verdict


def _conflicting(view: _View) -> Verdict | None:
    if view.conflict is None or view.conflict >= CONFLICT:
        return None
    return Verdict(
        "conflict-with-prior",
        f"The data and the prior expectation disagree: an estimate this far out was expected in "
        f"{in_100(view.conflict)} such studies. "
        "Conclusions depend on which of the two is believed; settle that first.",
    )


def _after_silence(view: _View) -> Verdict:
    after, good = view.after, view.good
    bad = "lower" if good == "higher" else "higher"
    if view.has_zone and after.states["negligible"] >= SURE:
        return Verdict(
            "practically-negligible",
            f"Any effect is probably too small to matter: {in_100(after.states['negligible'])} that it lies within "
            f"{_threshold(view.study)} of the null.",
        )
    if view.has_zone and view.relevant(good) <= UNLIKELY:
        return Verdict(
            "worthwhile-unlikely",
            f"An effect of {_threshold(view.study)} or more on the {good} side is now unlikely "
            f"({in_100(view.relevant(good))}); smaller ones stay possible.",
        )
    for side in (bad, good):
        if view.on(side) >= LEANING:
            kind = "either" if view.study.favourable == "either" else ("favourable" if side == good else "unfavourable")
            return Verdict(
                f"leaning-{side if kind == 'either' else kind}",
                f"The evidence points to the {side} side ({in_100(view.on(side))}) but missed the agreed bar; "
                "it is no proof.",
            )
    power, factor = _weakness(view)
    if power is not None and power < WEAK_POWER and 1 / 3 <= factor <= 1:
        what = "relevant" if view.has_zone else "real"
        return Verdict(
            "study-too-weak",
            f"A {what} effect would also have been missed {in_100(1 - power)} times; this silence tells little. "
            f"Still {in_100(view.relevant(good))} for a {what} effect on the {good} side.",
        )
    return Verdict(
        "unresolved",
        f"The result leaves the question open: with {in_100(after.mass)} probability the effect lies between "
        f"{after.low:.4g} and {after.high:.4g}, and it is {in_100(view.relevant(good))} that it is "
        f"{'relevant' if view.has_zone else 'real'} and on the {good} side.",
    )


def _weakness(view: _View) -> tuple[float | None, float]:
    """Chance that an effect worth finding would have been claimed, and how much a silence speaks for it (Bayes
    factor).
    """
    table = view.answer.table
    joint = np.array(table.joint)
    worth = np.array([name not in ("null", "negligible") for name in table.states])
    claims = np.array([name in view.study.rule.claims for name in table.decisions])
    real = joint[worth].sum()
    if real <= 0:
        return None, 1.0
    power = float(joint[worth][:, claims].sum() / real)
    rest = joint[~worth].sum()
    if rest <= 0:
        return power, 1.0 - power
    silence = 1 - float(joint[~worth][:, claims].sum() / rest)
    return power, (1 - power) / silence if silence > 0 else np.inf


def _after_claim(view: _View) -> Verdict:
    after = view.after
    side = view.study.rule.claims[view.decision or ""]
    right = view.on(side)
    if right < LEANING:
        return Verdict(
            "sign-in-doubt",
            f"The result passed the bar, yet it is only {in_100(right)} that the effect really lies on the "
            f"{side} side.",
        )
    if view.has_zone and after.states["negligible"] >= 0.5:
        return Verdict(
            "significant-but-small",
            f"The effect passed the bar but is probably too small to matter: {in_100(after.states['negligible'])} "
            f"that it lies within {_threshold(view.study)} of the null.",
        )
    if view.has_zone and view.relevant(side) >= SURE:
        return Verdict(
            "relevant-effect-likely",
            f"A relevant effect on the {side} side is likely: {in_100(view.relevant(side))} for "
            f"{_threshold(view.study)} or more.",
        )
    exaggeration = view.answer.quantities["exaggeration_ratio"].value
    if isinstance(exaggeration, float) and exaggeration >= EXAGGERATED:
        return Verdict(
            "likely-exaggerated",
            f"An effect on the {side} side is likely ({in_100(right)}), but studies like this one overstate what "
            "they find "
            f"{exaggeration:.1f}-fold on average; plan with the posterior, not with the estimate.",
        )
    if view.has_zone:
        return Verdict(
            "real-relevance-open",
            f"An effect on the {side} side is likely ({in_100(right)}); whether it reaches "
            f"{_threshold(view.study)} is open ({in_100(view.relevant(side))}).",
        )
    return Verdict("effect-likely", f"An effect on the {side} side is likely: {in_100(right)}.")
