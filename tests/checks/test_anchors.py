"""Anchors whose figures were computed once with scipy; each closed form is computed again here, and both must hold.

Setting of most of them: prior N(0.3, 0.2^2) on a difference of means with sd 1 and 100 per arm, z test, two-sided 5%.
The figures are printed with seven decimals.
"""

import math
from collections.abc import Callable
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from scipy import integrate, special, stats
from studies import TWO_SIDED, answer, cell, estimate_with, study, two_means, value

from bayesdesign.design import Estimate, OneProportion, TwoProportions
from bayesdesign.interpret import interpret
from bayesdesign.joint.integration import set_up
from bayesdesign.joint.power import power_quantiles
from bayesdesign.prior import Beta, Normal, Point
from bayesdesign.rule import Significance
from bayesdesign.size import size
from bayesdesign.study.study import Study, Target

M, T, S = 0.3, 0.2, math.sqrt(2 / 100)
Z = stats.norm.isf(0.025)
BELIEF = Normal(mean=M, sd=T)
DESIGN = Estimate(n=100, unit_sd=Point(value=math.sqrt(2)))
PRINTED = 5.1e-8  # half a unit of the seventh decimal
CLOSED = 1e-8


def setting(**question: Any) -> Study:
    return study(DESIGN, BELIEF, TWO_SIDED, favourable="higher", **question)


def up(theta: float) -> float:
    return float(special.ndtr(theta / S - Z))


def over_prior(function: Callable[[float], float], low: float, high: float) -> float:
    """Integral over the prior by scipy's adaptive rule, in pieces."""
    edges = np.unique(np.clip([low, -0.5, 0.0, 0.1, 0.3, 0.5, high], low, high))
    parts = [
        integrate.quad(lambda x: function(x) * stats.norm.pdf(x, M, T), a, b, epsabs=1e-13)[0]
        for a, b in pairwise(edges)
    ]
    return float(sum(parts))


def both(found: float, printed: float, closed: float, printed_tolerance: float = PRINTED) -> None:
    """The program agrees with the closed form to 1e-8, and with the printed figure to its last digit."""
    assert found == pytest.approx(closed, abs=CLOSED)
    assert found == pytest.approx(printed, abs=printed_tolerance)


def test_anchor_1_power_of_a_z_test() -> None:
    higher = study(estimate_with(1.0), BELIEF, favourable="higher", planning_value=2.8)
    both(value(higher, "power_at_planning_value"), 0.7995559, special.ndtr(2.8 - Z))
    either = study(estimate_with(1.0), BELIEF, favourable="either", planning_value=1.0)
    both(value(either, "power_at_planning_value"), 0.1700750, special.ndtr(1 - Z) + special.ndtr(-1 - Z))


def test_anchor_2_power_of_a_t_test() -> None:
    made = study(two_means(64), BELIEF, favourable="either", planning_value=0.5)
    t, nc = stats.t.isf(0.025, 126), 0.5 * math.sqrt(32)
    closed = stats.nct.sf(t, 126, nc) + stats.nct.cdf(-t, 126, nc)
    both(value(made, "power_at_planning_value"), 0.8014596, closed)


def test_anchor_3_assurance_and_its_ceiling() -> None:
    spread = math.hypot(S, T)
    one = special.ndtr((M - Z * S) / spread)
    made = setting(planning_value=M)
    both(value(made, "assurance"), 0.5371114, one)
    both(value(made, "assurance_ceiling"), 0.9331928, special.ndtr(1.5))
    both(value(made, "power_at_planning_value"), 0.5640936, up(M))
    two = study(DESIGN, BELIEF, favourable="either")
    both(value(two, "assurance"), 0.5463397, one + special.ndtr((-Z * S - M) / spread))


def test_anchor_4_assurance_with_the_right_sign() -> None:
    made = setting()
    joint = over_prior(up, 0.0, 3.0)
    both(value(made, "assurance_true_effect"), 0.5364998, joint)
    both(value(made, "expected_power"), 0.5749078, joint / special.ndtr(1.5))
    right = joint + over_prior(lambda x: up(-x), -3.0, 0.0)
    both(
        value(study(DESIGN, BELIEF, favourable="either"), "assurance") * (1 - value(made, "type_s_rate")),
        0.5445104,
        right,
    )


def test_anchor_5_distribution_of_power() -> None:
    fine = set_up(setting(), [100], 3)
    low, high = power_quantiles(fine, (0.1, 0.9))[0]
    both(low, 0.0493661, up(M + T * special.ndtri(0.1)))
    both(high, 0.9757946, up(M + T * special.ndtri(0.9)))
    below = special.ndtr((S * (Z + special.ndtri(0.8)) - M) / T)
    assert below == pytest.approx(0.6847488, abs=PRINTED)
    assert power_quantiles(fine, (below,))[0, 0] == pytest.approx(0.8, abs=CLOSED)


def test_anchor_6_smallest_n_for_assurance_and_for_power() -> None:
    by_assurance = size(setting(target=Target(at_least=0.8)))
    assert by_assurance.size is not None
    assert by_assurance.size.first_n == 504
    assert by_assurance.size.achieved == pytest.approx(0.8000769, abs=PRINTED)
    by_power = size(setting(planning_value=M, target=Target(measure="power_at_planning_value", at_least=0.8)))
    assert by_power.size is not None
    assert by_power.size.first_n == 175
    assert value(setting(), "assurance", 175) == pytest.approx(0.6550312, abs=PRINTED)


def test_anchor_7_posterior_after_no_claim_upwards() -> None:
    made = study(DESIGN, BELIEF, Significance(alpha=0.025, sides="higher"), smallest_relevant=0.3)
    after = interpret(made, decision="not_reject").posterior
    silent = 1 - over_prior(up, -3.0, 3.0)
    both(after.mean, 0.1598693, over_prior(lambda x: x * (1 - up(x)), -3.0, 3.0) / silent)
    both(after.states["higher"], 0.1736359, over_prior(lambda x: 1 - up(x), 0.3, 3.0) / silent)


def test_anchor_8_posterior_after_an_estimate() -> None:
    after = interpret(setting(smallest_relevant=0.3), estimate=0.2, se=S).posterior
    precision = 1 / T**2 + 1 / S**2
    mean, sd = (M / T**2 + 0.2 / S**2) / precision, precision**-0.5
    both(after.mean, 0.2333333, mean)
    both(after.sd, 0.1154701, sd)
    both(after.above_null, 0.9783459, special.ndtr(mean / sd))
    both(after.states["higher"], 0.2818514, special.ndtr((mean - 0.3) / sd))
    observed = study(DESIGN, BELIEF, favourable="either", planning_value=0.2)
    both(value(observed, "power_at_planning_value"), 0.2929889, up(0.2) + up(-0.2))


def test_anchor_9_conflict_of_prior_and_data() -> None:
    conflict = interpret(setting(), estimate=-0.2, se=S).conflict
    assert conflict is not None
    both(conflict, 0.0412268, 2 * special.ndtr(-0.5 / math.hypot(S, T)))


def test_anchor_10_cells_with_a_spike() -> None:
    given = answer(study(DESIGN, BELIEF, spike=0.5))
    spread = math.hypot(S, T)
    power = special.ndtr((M - Z * S) / spread) + special.ndtr((-Z * S - M) / spread)
    effect, rejections = ("lower", "higher"), ("reject_higher", "reject_lower")
    both(sum(cell(given, effect, d) for d in rejections), 0.2731698, power / 2)
    both(sum(cell(given, ["null"], d) for d in rejections), 0.025, 0.025)
    both(cell(given, effect, "not_reject"), 0.2268302, (1 - power) / 2)
    both(cell(given, ["null"], "not_reject"), 0.475, 0.475)
    risk, miss = (given.quantities[name].value for name in ("false_positive_risk", "false_negative_risk"))
    assert isinstance(risk, float)
    assert isinstance(miss, float)
    both(1 - risk, 0.9161552, power / (power + 0.05))
    both(miss, 0.3231981, (1 - power) / (1 - power + 0.95))
    both(miss / (1 - miss), 0.4775372, (1 - power) / 0.95)


def test_anchor_11_cells_with_a_zone() -> None:
    given = answer(study(DESIGN, BELIEF, smallest_relevant=0.1))
    claims = ("reject_higher", "reject_lower")

    def rejected(x: float) -> float:
        return up(x) + up(-x)

    inside = over_prior(rejected, -0.1, 0.1)
    outside = over_prior(rejected, -3.0, 3.0) - inside
    weight = special.ndtr(-1.0) - special.ndtr(-2.0)
    both(sum(cell(given, ["negligible"], d) for d in claims), 0.0095358, inside)
    both(cell(given, ["negligible"], "not_reject"), 0.1263694, weight - inside)
    both(sum(cell(given, ["lower", "higher"], d) for d in claims), 0.5368039, outside)
    both(cell(given, ["lower", "higher"], "not_reject"), 0.3272910, 1 - weight - outside)


@pytest.mark.parametrize(
    ("signal", "type_s", "exaggeration", "median"),
    [(0.5, 0.0878352, 4.788594, 4.575797), (1.0, 0.0090453, 2.490928, 2.374343), (2.0, 0.00007264, 1.386265, 1.324760)],
)
def test_anchor_12_sign_and_size_at_a_fixed_effect(
    signal: float, type_s: float, exaggeration: float, median: float
) -> None:
    quantities = answer(study(estimate_with(1.0), Point(value=signal), planning_value=signal)).quantities
    above, below = special.ndtr(signal - Z), special.ndtr(-signal - Z)
    size_of = (signal * (above - below) + stats.norm.pdf(Z - signal) + stats.norm.pdf(Z + signal)) / (above + below)
    for name in ("type_s_rate", "type_s_at_planning_value"):
        both(quantities[name].value, type_s, below / (above + below), 5.1e-8)  # type: ignore[arg-type]
    for name in ("exaggeration_ratio", "exaggeration_at_planning_value"):
        both(quantities[name].value, exaggeration, size_of / signal, 5.1e-7)  # type: ignore[arg-type]
    found = quantities["exaggeration_median"].value
    assert found == pytest.approx(median, abs=5.1e-7)
    assert isinstance(found, float)
    reach = found * signal
    within = (
        special.ndtr(reach - signal)
        - special.ndtr(Z - signal)
        + special.ndtr(-Z - signal)
        - special.ndtr(-reach - signal)
    )
    assert within / (above + below) == pytest.approx(0.5, abs=CLOSED)


@pytest.mark.parametrize(("mean", "type_s", "ratio"), [(0.3, 0.0033483, 1.1506526), (0.0, 0.0196658, 1.4901171)])
def test_anchors_13_and_14_sign_and_size_over_a_prior(mean: float, type_s: float, ratio: float) -> None:
    quantities = answer(study(DESIGN, Normal(mean=mean, sd=T))).quantities
    assert quantities["type_s_rate"].value == pytest.approx(type_s, abs=PRINTED)
    assert quantities["exaggeration_ratio"].value == pytest.approx(ratio, abs=PRINTED)


def test_anchor_14_assurance_and_median_exaggeration_about_the_null() -> None:
    quantities = answer(study(DESIGN, Normal(mean=0.0, sd=T))).quantities
    both(quantities["assurance"].value, 0.2578086, 2 * special.ndtr(-Z * S / math.hypot(S, T)))  # type: ignore[arg-type]
    assert quantities["exaggeration_median"].value == pytest.approx(1.4998435, abs=PRINTED)


def test_anchor_16_saw_tooth_of_a_single_arm() -> None:
    rule = Significance(sides="higher")
    made = study(OneProportion(n=40), Beta(a=8.0, b=12.0), rule, null=0.2, planning_value=0.4)
    spiked = study(OneProportion(n=40), Beta(a=8.0, b=12.0), rule, spike=0.5, null=0.2)
    both(value(spiked, "type_1_rate"), 0.0432416, stats.binom.sf(12, 40, 0.2))
    both(value(made, "power_at_planning_value"), 0.8714903, stats.binom.sf(12, 40, 0.4))
    both(value(made, "assurance"), 0.7354772, stats.betabinom.sf(12, 40, 8, 12))
    both(value(made, "power_at_planning_value", 41), 0.8219000, stats.binom.sf(13, 41, 0.4))
    both(value(made, "assurance", 41), 0.6920837, stats.betabinom.sf(13, 41, 8, 12))


@pytest.mark.parametrize(
    ("analysis", "printed_size", "printed_power"), [("exact", 0.0228518, 0.5059485), ("z", 0.0537132, 0.6223985)]
)
def test_anchor_32_size_and_power_of_two_proportions(analysis: str, printed_size: float, printed_power: float) -> None:
    design = TwoProportions(n_per_group=25, control=Point(value=0.3), analysis=analysis)  # type: ignore[arg-type]
    tails = "minimum_likelihood" if analysis == "exact" else "central"
    rule = Significance(tails=tails)  # type: ignore[arg-type]
    quantities = answer(study(design, Point(value=0.3), rule, spike=0.5)).quantities
    assert quantities["type_1_rate"].value == pytest.approx(printed_size, abs=PRINTED)
    assert quantities["average_power"].value == pytest.approx(printed_power, abs=PRINTED)
