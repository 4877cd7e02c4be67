"""Likelihoods of what a finished study may report: a decision, an estimate, a p-value."""

from collections.abc import Sequence

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Fault, StudyError
from bayesdesign.core.region import Region
from bayesdesign.joint.integration import Setting, set_up
from bayesdesign.joint.posterior import Evidence
from bayesdesign.study.study import Study

NARROW = 1e-4  # relative half-width of the band of p-values that stands for one of a continuous statistic


def decision_evidence(study: Study, decision: str) -> Evidence:
    """Only the decision is known. The last decision is what the others leave."""
    index = study.rule.decisions.index(decision)

    def likelihood(setting: Setting, effect: FloatArray) -> FloatArray:
        probability = setting.decisions(effect)[0]
        if index < len(study.rule.decisions) - 1:
            return np.asarray(probability[..., index])
        return np.maximum(1 - probability.sum(axis=-1), 0.0)

    return Evidence(kind="decision", likelihood=likelihood)


def estimate_evidence(study: Study, estimate: float, se: float) -> Evidence:
    """An estimate (natural units) with its standard error (on the log scale for ratios), taken as normal around the
    truth.
    """
    centre = float(study.design.working(np.asarray(estimate)))
    marks = centre + se * np.array([-9.0, -6.0, -3.0, -1.0, 1.0, 3.0, 6.0, 9.0])
    cuts = np.exp(marks) if study.design.ratio_scale else marks

    def likelihood(_: Setting, effect: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore"):
            z = (study.design.working(effect) - centre) / se
        return np.asarray(np.exp(-z * z / 2) / (se * np.sqrt(2 * np.pi)))

    return Evidence(kind="estimate", likelihood=likelihood, cuts=tuple(map(float, cuts)))


def p_value_evidence(study: Study, n: int | None, p: float, decimals: int, decision: str | None) -> Evidence:
    """A p-value, as the probability that the study's own test gives one in a narrow band around it.

    With a continuous statistic the band is narrow enough to stand for its density. Counts give only some p-values;
    then the band is what rounds to the printed one, and a p-value that no outcome can give is a fault. A two-sided
    p-value does not tell the side; `decision` may.
    """
    printed = 0.5 * 10.0**-decimals
    for half in (NARROW * p, printed):
        band = (max(p - half, 1e-300), min(p + half, 1 - 1e-12))
        evidence = _band_evidence(study, band, decision)
        if _possible(study, n, evidence):
            return evidence
    raise StudyError(
        [Fault(where="--p-value", problem="no outcome of this design gives it", got=f"{p:g}",
               allowed=f"a p-value that the counts at n = {n} can give; were n, the sides or the analysis others?")],
        study.file,
    )  # fmt: skip


def _band_evidence(study: Study, band: tuple[float, float], decision: str | None) -> Evidence:
    named = decision if decision in study.rule.claims else None
    picks = [i for i, name in enumerate(study.rule.decisions[:-1]) if named in (None, name)]

    def regions(setting: Setting) -> Sequence[Region]:
        outer, inner = (study.rule.regions_at(setting.outcomes, study.null, level) for level in reversed(band))
        return [outer[i] for i in picks] + [inner[i] for i in picks]

    def likelihood(setting: Setting, effect: FloatArray) -> FloatArray:
        probability = setting.outcomes.probabilities(effect, setting.regions)[0]
        half = probability.shape[-1] // 2
        return np.maximum(probability[..., :half].sum(axis=-1) - probability[..., half:].sum(axis=-1), 0.0)

    return Evidence(kind="p_value", likelihood=likelihood, regions=regions)


def _possible(study: Study, n: int | None, evidence: Evidence) -> bool:
    """Whether any outcome lies in the band: the regions of its two levels differ."""
    setting = set_up(study, [n], 0)
    assert evidence.regions is not None
    regions = evidence.regions(setting)
    half = len(regions) // 2
    return any(
        not np.array_equal(a.lower, b.lower) or not np.array_equal(a.upper, b.upper)
        for a, b in zip(regions[:half], regions[half:], strict=True)
    )
