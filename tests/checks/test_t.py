"""t tests: sizes, power and p-values of the literature."""

import numpy as np
import pytest
from scipy import stats
from studies import TWO_SIDED, answer, study, two_means, value

from bayesdesign.design import Design, OneMean, PairedMeans, TwoMeans
from bayesdesign.design.estimate import known_error
from bayesdesign.design.normal_line import critical_value
from bayesdesign.prior import Normal, Point
from bayesdesign.size import size
from bayesdesign.study.study import Study, Target

SOMEWHERE = Normal(mean=0.0, sd=1.0)


def planned(design: Design, d: float, power: float | None = None) -> Study:
    target = None if power is None else Target(measure="power_at_planning_value", at_least=power)
    return study(design, SOMEWHERE, TWO_SIDED, null=0.0, favourable="either", planning_value=d, target=target)


def first_n(made: Study) -> int | None:
    found = size(made).size
    assert found is not None
    return found.first_n


@pytest.mark.parametrize(
    ("p", "printed"), [(0.9, 1.282), (0.95, 1.645), (0.975, 1.96), (0.99, 2.326), (0.995, 2.576), (0.999, 3.09)]
)
def test_percentage_points_of_the_normal(p: float, printed: float) -> None:
    # NIST/SEMATECH e-Handbook of Statistical Methods, sec. 1.3.6.7.2, infinite-df row of the t table
    region = known_error(np.ones((1, 1)), 0.0).test(0.0, 1 - p, "higher")
    assert region.lower.item() == pytest.approx(printed, abs=0.0005)


@pytest.mark.parametrize(
    ("df", "printed"),
    [(1, 12.706), (2, 4.303), (5, 2.571), (10, 2.228), (20, 2.086), (30, 2.042), (60, 2.0), (100, 1.984)],
)
def test_percentage_points_of_student_t(df: float, printed: float) -> None:
    # NIST/SEMATECH e-Handbook, sec. 1.3.6.7.2, upper critical values of t
    assert critical_value(np.array([df]), 0.025).item() == pytest.approx(printed, abs=0.0006)


def test_cohen_medium_effect_needs_64_per_group() -> None:
    # Cohen, Statistical Power Analysis, 2nd ed., 1988, table 2.4.1; Psychol. Bull. 1992, table 2 (from memory)
    assert first_n(planned(two_means(20), 0.5, 0.8)) == 64


def test_cohen_small_effect_needs_394_per_group_and_393_comes_nearest() -> None:
    # Cohen 1988, table 2.4.1 prints 393; 394 is the exact smallest n (from memory)
    made = planned(two_means(20), 0.2, 0.8)
    assert first_n(made) == 394
    miss = {n: abs(value(made, "power_at_planning_value", n) - 0.8) for n in (392, 393, 394)}
    assert min(miss, key=lambda n: miss[n]) == 393


@pytest.mark.parametrize(("d", "printed"), [(0.2, 199), (0.5, 34), (0.8, 15)])
@pytest.mark.parametrize(
    "design", [OneMean(n=20, sd=Point(value=1.0)), PairedMeans(n_pairs=20, sd_difference=Point(value=1.0))]
)
def test_n_of_one_sample_and_paired_t_tests(design: Design, d: float, printed: int) -> None:
    # Widely tabled values for the one-sample t test (from memory)
    assert first_n(planned(design, d, 0.8)) == printed


@pytest.mark.parametrize(("total", "per_cent"), [(34, 29), (60, 47), (96, 67), (136, 82)])
def test_power_by_effective_size(total: int, per_cent: int) -> None:
    # Killip, Mahfoud & Pearce, Ann. Fam. Med. 2004, table of power by cluster size (whole per cents, truncated)
    power = value(planned(two_means(total // 2), 0.5), "power_at_planning_value")
    assert 100 * power == pytest.approx(per_cent, abs=1.0)


def test_64_per_group_have_power_080() -> None:
    # Cohen 1988, t-test tables (from memory)
    assert value(planned(two_means(64), 0.5), "power_at_planning_value") == pytest.approx(0.8, abs=0.005)


DRUG_1 = np.array([0.7, -1.6, -0.2, -1.2, -0.1, 3.4, 3.7, 0.8, 0.0, 2.0])
DRUG_2 = np.array([1.9, 0.8, 1.1, 0.1, -0.1, 4.4, 5.5, 1.6, 4.6, 3.4])


def test_paired_analysis_of_the_sleep_data() -> None:
    # Student, Biometrika 6:1-25, 1908 (from memory)
    gain = DRUG_1 - DRUG_2
    design = PairedMeans(n_pairs=10, sd_difference=Point(value=1.0))
    analysis = design.analyse({"mean": np.asarray(gain.mean()), "variance": np.asarray(gain.var(ddof=1))}, {}, 10)
    p = float(analysis.p_value(0.0, "two", "central"))
    assert p == pytest.approx(0.002833, abs=6e-7)
    assert -stats.t.isf(p / 2, 9) == pytest.approx(-4.0621, abs=6e-5)


def test_welch_analysis_of_the_sleep_data() -> None:
    # Student, Biometrika 6:1-25, 1908; results as in the R data set sleep (from memory)
    design = TwoMeans(n_per_group=10, sd=Point(value=2.0), analysis="welch")
    data = {
        "difference": np.asarray(DRUG_1.mean() - DRUG_2.mean()),
        "variance_treatment": np.asarray(DRUG_1.var(ddof=1)),
        "variance_control": np.asarray(DRUG_2.var(ddof=1)),
    }
    analysis = design.analyse(data, {}, 10)
    assert float(analysis.df) == pytest.approx(17.776, abs=0.0006)
    p = float(analysis.p_value(0.0, "two", "central"))
    assert p == pytest.approx(0.07939, abs=6e-6)
    assert -stats.t.isf(p / 2, float(analysis.df)) == pytest.approx(-1.8608, abs=6e-5)


def test_pooled_t_of_the_calcium_trial() -> None:
    # Moore & McCabe, Introduction to the Practice of Statistics, calcium data (Lyle et al. 1987) (from memory)
    design = TwoMeans(n_treatment=10, n_control=11, sd=Point(value=7.0))
    figures = {"difference": 5.0 + 0.273, "variance_treatment": 8.743**2, "variance_control": 5.901**2}
    data = {name: np.asarray(figure) for name, figure in figures.items()}
    p = float(design.analyse(data, {}, 10).p_value(0.0, "two", "central"))
    assert stats.t.isf(p / 2, 19) == pytest.approx(1.634, abs=0.0006)


def test_a_t_test_keeps_its_level() -> None:
    made = study(two_means(4), SOMEWHERE, TWO_SIDED, spike=0.5)
    assert answer(made).quantities["type_1_rate"].value == pytest.approx(0.05, abs=1e-12)
