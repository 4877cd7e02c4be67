"""Assurance: figures of the literature, each with its source and its tolerance."""

import math

import numpy as np
import pytest
from scipy import stats
from studies import ONE_SIDED, answer, cell, estimate_with, study, two_means, value

from bayesdesign.design import Estimate, TwoMeans
from bayesdesign.joint.integration import set_up
from bayesdesign.joint.power import power_quantiles
from bayesdesign.prior import Mixture, Normal, Point, Truncated
from bayesdesign.rule import Significance
from bayesdesign.size import size
from bayesdesign.study.study import Target

OHAGAN = Normal(mean=0.2, sd=0.2449489742783178)  # variance 0.06


def test_assurance_of_400_per_arm_is_595_in_1000() -> None:
    # O'Hagan, Stevens & Campbell, Pharmaceutical Statistics 2005, known-variance superiority example (from memory)
    assert value(study(two_means(400, analysis="z"), OHAGAN, ONE_SIDED), "assurance") == pytest.approx(
        0.595, abs=0.0005
    )


def test_power_at_the_prior_mean_of_that_example() -> None:
    # Normal power formula at the prior mean of the O'Hagan et al. 2005 example
    made = study(two_means(400, analysis="z"), OHAGAN, ONE_SIDED, planning_value=0.2)
    assert value(made, "power_at_planning_value") == pytest.approx(0.8074295788, abs=1e-6)


def test_assurance_of_that_example_cannot_exceed_its_ceiling() -> None:
    # Prior probability of a positive effect (O'Hagan et al. 2005 discuss the limit)
    made = study(two_means(400, analysis="z"), OHAGAN, ONE_SIDED)
    assert value(made, "assurance_ceiling") == pytest.approx(0.7928919109, abs=1e-6)


def test_assurance_070_needs_1560_per_arm() -> None:
    # Quadratic in the standard error obtained by inverting the normal-normal assurance
    made = study(two_means(400, analysis="z"), OHAGAN, ONE_SIDED, target=Target(at_least=0.7))
    found = size(made).size
    assert found is not None
    assert (found.first_n, found.safe_n) == (1560, 1560)


def test_expected_power_when_the_prior_is_an_equally_large_study() -> None:
    # Phi(z_0.9 / sqrt 2); setting of Chuang-Stein, Pharmaceutical Statistics 2006
    made = study(estimate_with(1.0), Normal(mean=3.2415155500846544, sd=1.0), ONE_SIDED)
    assert value(made, "assurance") == pytest.approx(0.8175833586, abs=1e-6)


@pytest.mark.parametrize(
    ("mean", "sd", "se", "right", "left", "total"),
    [
        # Two normal tails of the prior predictive distribution
        (0.1, 0.2, 0.08, 0.3960155642, 0.116601081, 0.5126166452),
        # Symmetry of the prior predictive normal
        (0.0, 0.3, 0.1, 0.2676963698, 0.2676963698, 0.5353927397),
    ],
)
def test_two_sided_rejections_split_by_direction(
    mean: float, sd: float, se: float, right: float, left: float, total: float
) -> None:
    given = answer(study(estimate_with(se), Normal(mean=mean, sd=sd)))
    both = ("lower", "higher")
    assert cell(given, both, "reject_higher") == pytest.approx(right, abs=1e-6)
    assert cell(given, both, "reject_lower") == pytest.approx(left, abs=1e-6)
    assert given.quantities["assurance"].value == pytest.approx(total, abs=1e-6)


def test_assurance_of_non_inferiority_as_a_test_of_the_shifted_null() -> None:
    # Normal-normal assurance against a shifted null
    made = study(estimate_with(0.06), Normal(mean=0.0, sd=0.1), ONE_SIDED, null=-0.15)
    assert value(made, "assurance") == pytest.approx(0.6094348023, abs=1e-6)


def test_significance_together_with_a_relevant_effect() -> None:
    # Bivariate normal orthant; definitions as distinguished in Kunzmann et al., The American Statistician 2021
    given = answer(study(estimate_with(0.08), Normal(mean=0.2, sd=0.2), ONE_SIDED, smallest_relevant=0.1))
    assert given.quantities["assurance_true_effect"].value == pytest.approx(0.5620090917, abs=2e-5)
    assert sum(given.table.joint[given.table.states.index("higher")]) == pytest.approx(0.6914624613, abs=2e-5)
    assert given.quantities["expected_power"].value == pytest.approx(0.8127832286, abs=2e-5)


class TestUncertainPower:
    """63 per arm, effect N(0.5, 0.1^2), sd N(1, 0.3^2): Spiegelhalter, Abrams & Myles 2004, chapter 6 (from memory)."""

    made = study(
        TwoMeans(n_per_group=63, sd=Truncated(base=Normal(mean=1.0, sd=0.3), low=0.0, high=math.inf), analysis="z"),
        Normal(mean=0.5, sd=0.1),
        favourable="higher",
    )

    def power(self, level: float) -> float:
        """The quantile of power at `level` when a negative sd counts as high power, as in the source's ratio."""
        possible = stats.norm.sf(-1 / 0.3)
        return float(power_quantiles(set_up(self.made, [63], 3), (level / possible,))[0, 0])

    def test_chance_of_power_below_070_is_37_in_100(self) -> None:
        # published from simulation
        assert self.power(0.37 - 0.005) <= 0.7 <= self.power(0.37 + 0.005)

    def test_exact_quantiles_of_power(self) -> None:
        # Distribution of a ratio of independent normals pushed through monotone maps
        assert self.power(0.3650495654 - 0.0005) < 0.7 < self.power(0.3650495654 + 0.0005)
        assert self.power(0.5) == pytest.approx(0.8013014554, abs=0.0001)
        assert self.power(0.025) == pytest.approx(0.2959429342, abs=0.0005)


def test_median_power_of_published_trials_is_13_in_100() -> None:
    # van Zwet, Schwab & Senn, Statistics in Medicine 2021 (mixture values from memory, median seen in the abstract)
    sds, weights = (0.61, 1.42, 2.16, 5.64), (0.32, 0.31, 0.30, 0.07)
    signal = Mixture(components=tuple(Normal(mean=0.0, sd=sd) for sd in sds), weights=weights)
    quantiles = answer(study(estimate_with(1.0), signal, favourable="either")).quantities["power_quantiles"].value
    assert isinstance(quantiles, dict)
    assert quantiles["0.5"] == pytest.approx(0.13, abs=0.005)


def test_average_power_of_the_t_test_over_a_normal_prior() -> None:
    # Noncentral t with a normally distributed noncentrality rescales to another noncentral t
    made = study(two_means(30), Normal(mean=0.5, sd=0.2), ONE_SIDED)
    assert value(made, "assurance") == pytest.approx(0.4823572045, abs=1e-6)


@pytest.mark.parametrize(("p", "printed"), [(0.05, 0.5), (0.01, 0.73), (0.005, 0.8)])
def test_chance_to_replicate_if_the_estimate_is_the_truth(p: float, printed: float) -> None:
    # Goodman, Statistics in Medicine 1992, table (from memory)
    z = stats.norm.isf(p / 2)
    made = study(estimate_with(1.0), Normal(mean=0.0, sd=1.0), favourable="higher", planning_value=z)
    assert value(made, "power_at_planning_value") == pytest.approx(printed, abs=0.005)


def test_chance_to_replicate_after_a_flat_prior() -> None:
    # Phi((z - 1.96) / sqrt 2); assurance with the posterior of the first study as prior
    z = stats.norm.isf(0.005)
    made = study(estimate_with(1.0), Normal(mean=z, sd=1.0), favourable="higher", planning_value=z)
    assert value(made, "assurance") == pytest.approx(0.6683938964, abs=1e-9)
    assert value(made, "power_at_planning_value") == pytest.approx(0.7310082937, abs=1e-9)


@pytest.mark.parametrize(
    ("one_sided_p", "same_sign", "tolerance"),
    [
        (0.05, 0.878, 0.0005),  # Killeen, Psychological Science 2005 (from memory)
        (0.005, 0.965725927, 1e-9),  # Held 2019: flat-prior chance of the same sign after an ordinary p = 0.01
    ],
)
def test_chance_of_the_same_sign_in_a_replication(one_sided_p: float, same_sign: float, tolerance: float) -> None:
    made = study(
        estimate_with(1.0), Normal(mean=stats.norm.isf(one_sided_p), sd=1.0), Significance(alpha=0.5, sides="higher")
    )
    assert value(made, "assurance") == pytest.approx(same_sign, abs=tolerance)


def _needed(design: Estimate | TwoMeans, rule: Significance, planning: float, power: float, null: float = 0.0) -> int:
    made = study(
        design, Normal(mean=planning, sd=1.0), rule, null=null, planning_value=planning,
        favourable="higher" if planning > null else "lower",
        target=Target(measure="power_at_planning_value", at_least=power),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert found.first_n is not None
    return found.first_n


@pytest.mark.parametrize(
    ("alpha", "beta", "printed"),
    [(0.05, 0.05, 13.0), (0.05, 0.1, 10.5), (0.05, 0.2, 7.9), (0.05, 0.5, 3.8), (0.01, 0.1, 14.9), (0.01, 0.2, 11.7)],
)
def test_multipliers_for_hand_sample_size_work(alpha: float, beta: float, printed: float) -> None:
    # Pocock, Clinical Trials: A Practical Approach, 1983, table 9.1, 7.85 printed as 7.9 (from memory)
    n = _needed(Estimate(n=10, unit_sd=Point(value=1.0)), Significance(alpha=alpha), 0.02, 1 - beta)
    assert n * 0.02**2 == pytest.approx(printed, abs=0.055)


def test_numerator_of_the_rule_of_sixteen() -> None:
    # Lehr, Statistics in Medicine 1992 (rounded there to 16); van Belle, Statistical Rules of Thumb, 2002 (from memory)
    n = _needed(two_means(10, analysis="z"), Significance(), 0.02, 0.8)
    assert n * 0.02**2 == pytest.approx(15.7, abs=0.05)


@pytest.mark.parametrize(("r", "printed"), [(0.1, 783), (0.2, 194), (0.3, 85), (0.4, 47)])
def test_n_to_detect_a_correlation_by_fisher_z(r: float, printed: int) -> None:
    # Hulley et al., Designing Clinical Research, appendix table 6C; Cohen 1992 table 2 (from memory). Var(z) = 1 / (n
    # - 3)
    assert _needed(Estimate(n=10, unit_sd=Point(value=1.0)), Significance(), math.atanh(r), 0.8) + 3 == printed


def test_events_for_a_log_rank_test_of_hazard_ratio_2() -> None:
    # Schoenfeld, Biometrika 1981 and Biometrics 1983, the common worked value (from memory); variance 4 / events
    assert _needed(Estimate(n=10, unit_sd=Point(value=2.0)), Significance(), np.log(2.0), 0.8) == 66


def test_deaths_for_a_log_rank_test_of_hazard_ratio_057() -> None:
    # Collett, Modelling Survival Data in Medical Research, hepatitis example (from memory), rounded from 133.02 to
    # 133, so that 133 is where the power comes nearest 90%
    made = study(
        Estimate(n=10, unit_sd=Point(value=2.0)),
        Normal(mean=0.0, sd=1.0),
        favourable="lower",
        planning_value=np.log(0.57),
    )
    miss = {n: abs(value(made, "power_at_planning_value", n) - 0.9) for n in (132, 133, 134)}
    assert min(miss, key=lambda n: miss[n]) == 133


def test_n_with_unequal_sds() -> None:
    # Rosner, Fundamentals of Biostatistics, ch. 8, oral-contraceptive blood-pressure example (from memory)
    design = TwoMeans(n_per_group=50, sd_treatment=Point(value=15.34), sd_control=Point(value=18.23), analysis="z")
    assert _needed(design, Significance(), 5.42, 0.8) == 152


def test_n_for_non_inferiority_of_means() -> None:
    # Chow, Shao & Wang, Sample Size Calculations in Clinical Research, 2003, ch. 3 worked example (from memory)
    design = two_means(10, sd=0.1, analysis="z")
    assert _needed(design, Significance(alpha=0.05, sides="higher"), 0.0, 0.8, null=-0.05) == 50
