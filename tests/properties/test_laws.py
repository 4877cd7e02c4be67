"""Laws of the joint table and its readings, over random studies of every family."""

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from strategies import (
    centres,
    every_study,
    line_studies,
    lines,
    numbers,
    one_proportion_studies,
    rules,
    smooth,
    spikes,
    widths,
)
from studies import answer, cell, estimate_with, study

from bayesdesign.core.errors import Refused
from bayesdesign.design import Design, Estimate, OneMean, OneProportion, PairedMeans, TwoMeans, TwoProportions
from bayesdesign.evaluate import evaluate
from bayesdesign.interpret import interpret
from bayesdesign.measures.ratios import Frame
from bayesdesign.prior import Beta, Distribution, Gamma, Lognormal, Mixture, Normal, Point
from bayesdesign.result import Answer
from bayesdesign.rule import Significance
from bayesdesign.study.study import Prior, Study

few = settings(deadline=None, max_examples=12, derandomize=True)
more = settings(deadline=None, max_examples=16, derandomize=True)
MIRROR: dict[Any, Any] = {"higher": "lower", "lower": "higher"}
SUMS = 1e-12


def answered(made: Study) -> Answer:
    """The answer; an example whose conditions are too rare for the digits asked for is passed over."""
    try:
        return answer(made)
    except Refused:
        assume(False)
        raise


def number(given_: Answer, name: str) -> float:
    found = given_.quantities[name].value
    return found if isinstance(found, float) else math.nan


@more
@given(every_study)
def test_cells_are_a_distribution_and_both_conditionals_belong_to_it(made: Study) -> None:
    table = answered(made).table
    joint = np.array(table.joint)
    assert (joint >= 0).all()
    assert joint.sum() == pytest.approx(1.0, abs=SUMS)
    for row, given_state in zip(joint, table.given_state, strict=True):
        if given_state is None:
            assert row.sum() == 0
        else:
            assert sum(given_state) == pytest.approx(1.0, abs=SUMS)
            assert np.array(given_state) * row.sum() == pytest.approx(row, abs=SUMS)
    columns = np.array(table.given_decision, dtype=float)
    for j, total in enumerate(joint.sum(axis=0)):
        if total == 0:
            assert np.isnan(columns[:, j]).all()
        else:
            assert columns[:, j].sum() == pytest.approx(1.0, abs=SUMS)
            assert columns[:, j] * total == pytest.approx(joint[:, j], abs=SUMS)


@few
@given(every_study)
def test_each_truth_has_one_decision_and_weights_sum_to_one(made: Study) -> None:
    table = evaluate_or_skip(made)
    assert table["weight"].sum("truth").values == pytest.approx(1.0, abs=SUMS)
    assert (table["weight"].values >= 0).all()
    assert (table["probability"].values >= 0).all()
    assert table["probability"].sum("decision").values == pytest.approx(1.0, abs=SUMS)


def evaluate_or_skip(made: Study) -> Any:
    try:
        return evaluate(made).joint
    except Refused:
        assume(False)
        raise


@few
@given(every_study, rules)
def test_the_margin_of_states_does_not_depend_on_the_rule(made: Study, other: Significance) -> None:
    first, second = answered(made), answered(replace(made, rule=other))
    rows = [np.array(a.table.joint).sum(axis=1) for a in (first, second)]
    assert rows[0] == pytest.approx(rows[1], abs=1e-8)


@more
@given(every_study)
def test_risks_and_rates_are_one_table(made: Study) -> None:
    # P(R) splits by state, belief is a martingale, and odds move by the ratio of rates
    found = answered(made)
    joint, frame = np.array(found.table.joint), Frame.of(made)
    assume(frame.null_state is not None)
    null = joint.sum(axis=1) @ frame.null_state
    real, rejected = 1 - null, joint.sum(axis=0) @ frame.claims
    assume(1e-3 < null < 1 - 1e-3 and 1e-3 < rejected < 1 - 1e-3)
    type_1, power = number(found, "type_1_rate"), number(found, "average_power")
    false_positive, false_negative = number(found, "false_positive_risk"), number(found, "false_negative_risk")
    assert real * power + null * type_1 == pytest.approx(rejected, abs=1e-10)
    assert (1 - false_positive) * rejected + false_negative * (1 - rejected) == pytest.approx(real, abs=1e-10)
    if type_1 > 1e-6:
        assert (1 - false_positive) / false_positive == pytest.approx(real / null * power / type_1, rel=1e-8)
    assert false_negative * null * (1 - type_1) == pytest.approx((1 - false_negative) * real * (1 - power), abs=1e-10)
    assert number(found, "specificity") == pytest.approx(1 - type_1, abs=1e-10)
    assert number(found, "type_2_rate") == pytest.approx(1 - power, abs=1e-10)


@few
@given(line_studies(priors=smooth))
def test_right_signs_are_the_claims_without_the_wrong_ones(made: Study) -> None:
    plain = replace(
        made,
        prior=Prior(effect=made.prior.effect),
        effect=replace(made.effect, favourable="either", smallest_relevant=None),
    )
    found = answered(plain)
    right = 0.0
    for name, side in plain.rule.claims.items():
        right += cell(found, [side], name)
    assume(number(found, "assurance") > 1e-6)
    assert number(found, "assurance") * (1 - number(found, "type_s_rate")) == pytest.approx(right, abs=1e-10)


@settings(deadline=None, max_examples=7, derandomize=True)
@given(every_study)
def test_the_prior_is_the_average_posterior_over_decisions(made: Study) -> None:
    found = answered(made)
    joint = np.array(found.table.joint)
    total = np.zeros(len(joint))
    mean = 0.0
    for j, decision in enumerate(made.rule.decisions):
        weight = joint[:, j].sum()
        if weight < 1e-6:
            continue
        after = interpret(made, decision=decision).posterior
        assert after.evidence == pytest.approx(weight, abs=1e-8)
        total += weight * np.array([after.states[s] for s in found.table.states])
        mean += weight * after.mean
    assert total == pytest.approx(joint.sum(axis=1), abs=1e-5)
    belief = made.prior.effect
    if belief is not None and made.design.family != "one_proportion" and (joint.sum(axis=0) > 1e-6).all():
        w = made.prior.probability_null
        assert mean == pytest.approx(w * made.null + (1 - w) * belief.expectation(), abs=1e-5)


@few
@given(lines(), st.builds(Normal, mean=numbers(0.01, 1.5), sd=widths), rules)
def test_assurance_of_a_one_sided_test_stays_below_its_ceiling(
    design: Design, belief: Normal, rule: Significance
) -> None:
    # at any n a true effect is claimed with probability below 1, and with a favourable mean the wrong claims weigh less
    made = study(design, belief, replace(rule, sides="higher"), null=0.0)
    found = answered(made)
    assert number(found, "assurance") <= number(found, "assurance_ceiling") + 1e-9


@few
@given(lines(), numbers(0.05, 1.5), rules)
def test_power_at_a_fixed_effect_rises_with_n(design: Design, effect: float, rule: Significance) -> None:
    made = study(design, Point(value=effect), replace(rule, sides="higher"), null=0.0)
    try:
        powers = [a.quantities["assurance"].value for a in evaluate(made, [2, 3, 5, 10, 20, 50, 200]).answers]
    except Refused:
        assume(False)
        raise
    assert (np.diff(np.array(powers, dtype=float)) >= -1e-9).all()


def mirrored(belief: Distribution) -> Distribution:
    match belief:
        case Normal(mean=mean, sd=sd):
            return Normal(mean=-mean, sd=sd)
        case Point(value=value):
            return Point(value=-value)
        case Mixture():
            return Mixture(components=tuple(mirrored(c) for c in belief.components), weights=belief.weights)
    raise AssertionError(belief)


plain_beliefs: st.SearchStrategy[Distribution] = st.one_of(
    st.builds(Normal, mean=centres, sd=widths),
    st.builds(
        lambda m, s, p, w: Mixture(components=(Normal(mean=m, sd=s), Point(value=p)), weights=(w, 1 - w)),
        centres, widths, centres, numbers(0.1, 0.9),
    ),
)  # fmt: skip


def same_quantities(first: Answer, second: Answer, scale: float = 1e-8) -> None:
    for name, one in first.quantities.items():
        other = second.quantities[name]
        if one.value is None or other.value is None:
            assert one.value is None, name
            assert other.value is None, name
            continue
        for key in one.value if isinstance(one.value, dict) else ("",):
            a, b, ea, eb = (
                v[key] if isinstance(v, dict) else v for v in (one.value, other.value, one.error, other.error)
            )
            assert a is not None
            assert b is not None
            assert abs(a - b) <= float(ea or 0) + float(eb or 0) + scale * max(1.0, abs(a)), (name, a, b)


@few
@given(
    lines(), plain_beliefs, rules, spikes, st.sampled_from(["higher", "lower", "either"]), st.sampled_from([None, 0.2])
)
def test_a_mirrored_study_has_the_same_answers(
    design: Design, belief: Distribution, rule: Significance, spike: float, favourable: str, relevant: float | None
) -> None:
    made = study(design, belief, rule, spike=spike, null=0.0, favourable=favourable, smallest_relevant=relevant)
    turned = replace(
        made,
        prior=Prior(effect=mirrored(belief), probability_null=spike),
        rule=replace(rule, sides=MIRROR.get(rule.sides, "two")),
        effect=replace(made.effect, favourable=MIRROR.get(favourable, "either")),
    )
    first, second = answered(made), answered(turned)
    same_quantities(first, second)
    there, back = np.array(first.table.joint), np.array(second.table.joint)[::-1]
    columns = (
        [first.table.decisions.index(_turned(name)) for name in second.table.decisions]
        if rule.sides == "two"
        else [0, 1]
    )
    assert there[:, columns] == pytest.approx(back, abs=1e-8)


def _turned(decision: str) -> str:
    return {"reject_higher": "reject_lower", "reject_lower": "reject_higher"}.get(decision, decision)


@few
@given(one_proportion_studies())
def test_counting_the_other_outcome_mirrors_a_proportion(made: Study) -> None:
    assume(isinstance(made.prior.effect, Beta))
    assert isinstance(made.prior.effect, Beta)
    a, b = made.prior.effect.shapes
    sides = MIRROR.get(made.rule.sides, "two")  # type: ignore[attr-defined]
    turned = replace(
        made,
        prior=Prior(effect=Beta(a=b, b=a), probability_null=made.prior.probability_null),
        rule=replace(made.rule, sides=sides),  # type: ignore[type-var]
        effect=replace(made.effect, null=1 - made.null, favourable=MIRROR.get(made.effect.favourable, "either")),
    )
    same_quantities(answered(made), answered(turned))


def in_units(design: Design, factor: float) -> Design:
    """The same design measured in a unit that is `factor` times smaller."""

    def scaled(belief: Distribution | None) -> Any:
        match belief:
            case Point(value=value):
                return Point(value=value * factor)
            case Gamma(shape=shape, rate=rate):
                return Gamma(shape=shape, rate=rate / factor)
            case Lognormal(median=median, log_sd=log_sd):
                return Lognormal(median=median * factor, log_sd=log_sd)
        return None

    match design:
        case Estimate():
            return replace(design, unit_sd=scaled(design.unit_sd))
        case OneMean():
            return replace(design, sd=scaled(design.sd))
        case PairedMeans():
            return replace(design, sd_difference=scaled(design.sd_difference))
        case TwoMeans():
            return replace(design, sd=scaled(design.sd))
    raise AssertionError(design)


@few
@given(lines(), centres, widths, rules, spikes, st.sampled_from([1e-4, 60.0, 1e6]))
def test_answers_do_not_depend_on_the_unit(
    design: Design, mean: float, sd: float, rule: Significance, spike: float, factor: float
) -> None:
    def made(design: Design, unit: float) -> Study:
        belief = Normal(mean=mean * unit, sd=sd * unit)
        return study(
            design, belief, rule, spike=spike, null=0.1 * unit, smallest_relevant=0.3 * unit, planning_value=0.7 * unit
        )

    same_quantities(answered(made(design, 1.0)), answered(made(in_units(design, factor), factor)))


@few
@given(centres, widths, rules)
def test_a_known_sd_makes_all_families_the_same_z_test(mean: float, sd: float, rule: Significance) -> None:
    belief = Normal(mean=mean, sd=sd)
    designs: list[Design] = [
        estimate_with(0.5),
        OneMean(n=16, sd=Point(value=2.0), analysis="z"),
        PairedMeans(n_pairs=16, sd_difference=Point(value=2.0), analysis="z"),
        TwoMeans(n_per_group=32, sd=Point(value=2.0), analysis="z"),
        TwoMeans(n_treatment=40, n_control=10, sd=Point(value=math.sqrt(2.0)), analysis="z"),
    ]
    answers = [answered(study(design, belief, rule, null=0.0)) for design in designs]
    for other in answers[1:]:
        same_quantities(answers[0], other)


def test_one_observation_can_be_decided_about() -> None:
    given_ = answer(study(OneProportion(n=1), Beta(a=1.0, b=1.0), Significance(alpha=0.3, sides="higher"), null=0.3))
    assert number(given_, "assurance") == pytest.approx(0.5, abs=1e-12)  # rejects on the one success
    given_ = answer(study(OneProportion(n=1), Beta(a=1.0, b=1.0), Significance(alpha=0.05), null=0.3))
    assert number(given_, "assurance") == 0.0
    assert given_.quantities["type_s_rate"].value is None
    given_ = answer(study(OneMean(n=2, sd=Point(value=1.0)), Normal(mean=0.0, sd=1.0), spike=0.5, null=0.0))
    assert number(given_, "type_1_rate") == pytest.approx(0.05, abs=1e-10)


@pytest.mark.parametrize("analysis", ["z", "exact"])
def test_the_scale_of_two_proportions_does_not_change_the_decision(analysis: Any) -> None:
    scales: tuple[Any, ...] = ("difference", "ratio", "odds_ratio")
    prior = Prior(treatment=Beta(a=6.0, b=3.0))
    found = [
        answer(study(TwoProportions(n_per_group=15, control=Beta(a=4.0, b=6.0), scale=s, analysis=analysis), prior))
        for s in scales
    ]
    for other in found[1:]:
        assert np.array(other.table.joint) == pytest.approx(np.array(found[0].table.joint), abs=1e-8)
