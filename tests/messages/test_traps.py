"""Each trap fires on a study that has run into it and stays silent on one that has not."""

from dataclasses import replace
from functools import cache

import pytest

from bayesdesign.design import Estimate, OneProportion, PairedMeans, TwoMeans, TwoProportions
from bayesdesign.evaluate import evaluate
from bayesdesign.messages import ORDER, TRAPS, messages_for
from bayesdesign.messages.context import Context
from bayesdesign.prior import Beta, Cauchy, Gamma, Lognormal, Normal, Point, Truncated
from bayesdesign.result import Quantity
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior, Study, Target


def means(n=200, sd=5.0, belief=None, *, alpha=0.05, sides="two", spike=0.0, target=None, **effect):
    """A sound two-group study unless told otherwise."""
    sd = Gamma(shape=100.0, rate=20.0) if sd == 5.0 else Point(value=sd)
    effect = {"favourable": "higher", "smallest_relevant": 1.0, "unit": "kg"} | effect
    return Study(
        title="means",
        design=TwoMeans(n_per_group=n, sd=sd, analysis="z"),
        prior=Prior(effect=belief or Normal(mean=2.0, sd=1.0), probability_null=spike),
        rule=Significance(alpha=alpha, sides=sides),
        effect=Effect(**effect),
        target=target,
    )


def share(n=42, belief=None, *, analysis="exact", sides="two", alpha=0.05, null=0.3):
    return Study(
        title="share",
        design=OneProportion(n=n, analysis=analysis),
        prior=Prior(effect=belief or Beta(a=30.0, b=30.0)),
        rule=Significance(sides=sides, alpha=alpha),
        effect=Effect(null=null, favourable="higher"),
    )


def shares(control=None, *, scale="difference", belief=None, n=300, analysis="z", spike=0.0):
    return Study(
        title="shares",
        design=TwoProportions(
            n_per_group=n, control=control or Beta(a=40.0, b=60.0), scale=scale, analysis=analysis
        ),
        prior=Prior(effect=belief or Normal(mean=0.1, sd=0.05), probability_null=spike),
        rule=Significance(),
        effect=Effect(favourable="higher"),
    )


rising = Truncated(base=Lognormal(median=1.3, log_sd=0.1), low=0.5, high=2.0)
ratio = {"scale": "ratio", "belief": rising}
log_ratio = Estimate(n=50, unit_sd=Point(value=2.0))


def estimate(null, belief, unit=""):
    return Study(
        title="estimate",
        design=log_ratio,
        prior=Prior(effect=belief),
        rule=Significance(),
        effect=Effect(null=null, unit=unit),
    )


CASES = {
    "sign-flip": (means(belief=Normal(mean=-2.0, sd=1.0)), means()),
    "prior-mass-at-null": (means(smallest_relevant=None), means()),
    "prior-too-wide": (means(belief=Normal(mean=2.0, sd=10.0)), means()),
    "prior-too-narrow": (
        means(n=30, sd=6.0, belief=Normal(mean=2.0, sd=0.02), smallest_relevant=None),
        means(n=30),
    ),
    "spike-by-default": (means(spike=0.5, smallest_relevant=None), means(spike=0.4, smallest_relevant=None)),
    "vague-slab": (means(belief=Normal(mean=0.0, sd=200.0), spike=0.3), means(spike=0.3)),
    "ratio-on-linear": (estimate(1.0, Normal(mean=1.3, sd=0.1)), estimate(0.0, Normal(mean=1.3, sd=0.1))),
    "symmetric-prior-on-ratio": (
        shares(scale="ratio", belief=Truncated(base=Normal(mean=1.3, sd=0.4), low=0.3, high=2.0)),
        shares(**ratio),
    ),
    "prior-cut": (
        shares(Beta(a=8.0, b=2.0), belief=Truncated(base=Normal(mean=0.1, sd=0.1), low=-0.5, high=0.5)),
        shares(belief=Truncated(base=Normal(mean=0.1, sd=0.05), low=-0.1, high=0.3)),
    ),
    "prior-without-mean": (means(belief=Cauchy(location=2.0, scale=1.0)), means()),
    "planning-value-in-tail": (means(planning_value=4.0), means(planning_value=2.5)),
    "sd-known": (means(n=60, sd=6.0), means(n=60)),
    "base-rate-fixed": (shares(Point(value=0.3), **ratio), shares(**ratio)),
    "saw-tooth": (share(n=40, sides="higher"), means()),
    "approx-range": (share(n=10, belief=Beta(a=3.0, b=27.0), analysis="z", null=0.05), share(analysis="z")),
    "zero-events": (share(n=10, belief=Beta(a=3.0, b=27.0), null=0.05), share()),
    "level-exceeded": (share(n=10, belief=Beta(a=3.0, b=27.0), analysis="z", null=0.05), share()),
    "level-unspent": (share(n=10, null=0.2), share(n=400)),
    "zone-below-resolution": (means(n=20), means()),
    "ceiling-below-target": (means(target=Target(at_least=0.99)), means(target=Target(at_least=0.9))),
    "decision-never": (share(n=3, alpha=0.01), share()),
    "rule-against-favourable": (means(sides="lower"), means(sides="higher", alpha=0.025)),
    "decision-always": (means(n=5000, belief=Normal(mean=4.0, sd=0.2), smallest_relevant=None), means()),
    "planning-value-optimistic": (means(n=60, planning_value=3.0), means(planning_value=1.5)),
    "assurance-vs-power": (means(planning_value=0.7), means(planning_value=2.0)),
    "weak-study": (means(n=20), means()),
    "raw-winner": (means(n=15), means()),
    "type-s-high": (means(n=10, belief=Normal(mean=0.2, sd=1.0)), means()),
    "alpha-is-not-risk": (means(spike=0.9, smallest_relevant=None), means(spike=0.1, smallest_relevant=None)),
    "tail-mixup": (means(sides="higher"), means(sides="higher", alpha=0.025)),
    "coin-toss": (means(n=55), means()),
}


@cache
def answers_of(study):
    return evaluate(study, tolerance=1e-2).answers  # the sentences need two digits


BY_STUDY_ALONE = (
    "symmetric-prior-on-ratio",
    "prior-cut",
    "base-rate-fixed",
)  # costly to evaluate, and needless


def codes(code, study):
    answers = [] if code in BY_STUDY_ALONE else answers_of(study)
    return [message.code for message in messages_for(study, answers)]


@pytest.mark.parametrize("code", CASES)
def test_fires(code):
    assert code in codes(code, CASES[code][0])


@pytest.mark.parametrize("code", CASES)
def test_stays_silent(code):
    assert code not in codes(code, CASES[code][1])


def with_sampling_error(error):
    study = means(target=Target(at_least=0.9))
    answer = answers_of(study)[0]
    drawn = Quantity(value=0.89, error=error, route="sampling")
    return messages_for(study, [replace(answer, quantities=answer.quantities | {"assurance": drawn})])


def test_noise_beside_the_target():
    assert "mc-noise" in [m.code for m in with_sampling_error(0.005)]
    assert "mc-noise" not in [m.code for m in with_sampling_error(0.0005)]


def test_every_trap_is_tested_and_named_once():
    declared = [trap.code for trap in TRAPS]
    assert len(declared) == len(set(declared))
    assert set(declared) == {*CASES, "mc-noise"}


def test_order_and_completeness_of_words():
    for code, pair in CASES.items():
        for study in pair:
            messages = messages_for(study, [] if code in BY_STUDY_ALONE else answers_of(study))
            severities = [ORDER.index(m.severity) for m in messages]
            assert severities == sorted(severities)
            for m in messages:
                assert m.text.endswith(".")
                assert m.advice.endswith(".")
                assert "{" not in m.text + m.advice
                assert "None" not in m.text + m.advice
                assert "nan" not in m.text


def test_hostile_unit_is_no_template():
    study = means(belief=Normal(mean=-2.0, sd=1.0), unit="{0} {x.__class__}")
    text = next(m.text for m in messages_for(study, []) if m.code == "sign-flip")
    assert "{x.__class__}" in text


def test_without_answers_only_the_study_speaks():
    study = means(sides="higher", n=20, target=Target(at_least=0.99))
    assert {m.code for m in messages_for(study, [])} == {"zone-below-resolution", "tail-mixup"}


def test_saw_tooth_among_the_sizes_asked_for():
    study = share(n=40, sides="higher")
    messages = messages_for(study, evaluate(study, [39, 40]).answers)
    text = next(m.text for m in messages if m.code == "saw-tooth")
    assert text.startswith("Counts make the curve a saw: assurance is 0.")


def test_power_helper_agrees_with_the_table():
    study = Study(
        title="pairs",
        design=PairedMeans(n_pairs=30, sd_difference=Point(value=4.0)),
        prior=Prior(effect=Point(value=2.0)),
        rule=Significance(),
    )
    answers = answers_of(study)
    assert Context(study, answers).power(2.0) == pytest.approx(
        answers[0].quantities["average_power"].value, abs=1e-6
    )


def test_power_helper_averages_nuisance():
    study = means(n=30, belief=Point(value=2.0), favourable="either")
    answers = answers_of(study)
    assert Context(study, answers).power(2.0) == pytest.approx(
        answers[0].quantities["assurance"].value, abs=1e-4
    )


def test_prior_quantile_of_two_arms():
    study = Study(
        title="arms",
        design=TwoProportions(n_per_group=50, control=Beta(a=8.0, b=12.0)),
        prior=Prior(treatment=Beta(a=12.0, b=8.0)),
        rule=Significance(),
    )
    # by symmetry the difference of these two is centred on 0.2
    assert Context(study, []).quantile(0.5) == pytest.approx(0.2, abs=0.01)
