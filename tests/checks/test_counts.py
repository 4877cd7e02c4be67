"""Counts: exact designs, limits by inverting the tests, Fisher's test and assurance by enumeration."""

from typing import Literal

import numpy as np
import pytest
from scipy import stats
from studies import answer, cell, study, value

from bayesdesign.core.region import Region
from bayesdesign.design import OneProportion, TwoProportions
from bayesdesign.design.base import Accuracy, Side
from bayesdesign.design.one_proportion import BinomialAnalysis, BinomialCount
from bayesdesign.design.two_proportions import TwoCountsAnalysis
from bayesdesign.prior import Beta, Point
from bayesdesign.rule import Significance
from bayesdesign.size import size
from bayesdesign.study.study import Prior, Target

ROUGH = Accuracy(effect=8, nuisance=8, auxiliary=8, finest_level=0.001)


def counts(n: int, null: float, *, exact: bool = True) -> BinomialCount:
    return BinomialCount(n=np.array([float(n)]), null=null, exact=exact)


def holds(region: Region, x: float) -> bool:
    """Whether a count of a one-sample region (one n, one node) is in it."""
    return bool(((region.lower < x) & (x < region.upper)).any())


def rejects(x: int, n: int, null: float, level: float, side: Side, *, exact: bool = True) -> bool:
    return holds(counts(n, null, exact=exact).test(null, level, side), x)


@pytest.mark.parametrize(
    ("n", "count", "printed_size"), [(10, 1, 0.0215), (15, 3, 0.0352), (20, 5, 0.0414), (25, 7, 0.0433)]
)
def test_critical_counts_and_sizes_of_the_sign_test(n: int, count: int, printed_size: float) -> None:
    # Binomial tables, e.g. Siegel, Nonparametric Statistics, 1956, table D, doubled tail (from memory)
    higher, lower = counts(n, 0.5).two_sided_test(0.5, 0.05, "central")
    assert (lower.upper.item(), higher.lower.item()) == (count + 0.5, n - count - 0.5)
    made = study(OneProportion(n=n), Beta(a=1.0, b=1.0), spike=0.5, null=0.5)
    assert value(made, "type_1_rate") == pytest.approx(printed_size, abs=6e-5)


@pytest.mark.parametrize(
    ("p0", "p1", "n", "r"),
    [
        (0.05, 0.2, 27, 4),
        (0.05, 0.25, 16, 3),
        (0.1, 0.3, 25, 6),
        (0.2, 0.4, 35, 12),
        (0.3, 0.5, 39, 17),
        (0.5, 0.7, 37, 24),
    ],
)
def test_exact_single_stage_designs(p0: float, p1: float, n: int, r: int) -> None:
    # A'Hern, Statistics in Medicine 20:859-866, 2001, exact single-stage tables (from memory)
    made = study(
        OneProportion(n=20), Beta(a=1.0, b=1.0), Significance(sides="higher"), null=p0, planning_value=p1,
        target=Target(measure="power_at_planning_value", at_least=0.8),
    )  # fmt: skip
    found = size(made).size
    assert found is not None
    assert found.first_n == n
    assert counts(n, p0).test(p0, 0.05, "higher").lower.item() == r - 0.5


@pytest.mark.parametrize(
    ("x", "n", "tail", "lower", "upper", "tolerance"),
    [
        (4, 20, 0.05, 0.071354, 0.401029, 2e-6),  # NIST/SEMATECH e-Handbook, sec. 7.2.4.1, exact interval example
        (81, 263, 0.025, 0.2527, 0.3676, 6e-5),  # Newcombe, Statistics in Medicine 1998, table I (from memory)
        (15, 148, 0.025, 0.0578, 0.1617, 6e-5),  # the same
        (0, 20, 0.025, None, 0.1684, 6e-5),  # the same; the lower limit is 0
    ],
)
def test_exact_limits_are_where_the_exact_test_begins_to_reject(
    x: int, n: int, tail: float, lower: float | None, upper: float, tolerance: float
) -> None:
    if lower is not None:
        assert rejects(x, n, lower - tolerance, tail, "higher")
        assert not rejects(x, n, lower + tolerance, tail, "higher")
    assert rejects(x, n, upper + tolerance, tail, "lower")
    assert not rejects(x, n, upper - tolerance, tail, "lower")


@pytest.mark.parametrize(
    ("x", "n", "tail", "lower", "upper", "tolerance"),
    [
        (81, 263, 0.025, 0.2553, 0.3662, 6e-5),  # Newcombe 1998, table I, score method (from memory)
        (0, 20, 0.025, None, 0.1611, 6e-5),  # the same
        (1, 29, 0.025, 0.0061, 0.1718, 6e-5),  # the same
        (26, 200, 0.05, 0.09577, None, 1e-5),  # NIST/SEMATECH e-Handbook, sec. 7.2.4.1, one-sided example
    ],
)
def test_score_limits_are_where_the_z_test_begins_to_reject(
    x: int, n: int, tail: float, lower: float | None, upper: float | None, tolerance: float
) -> None:
    if lower is not None:
        assert rejects(x, n, lower - tolerance, tail, "higher", exact=False)
        assert not rejects(x, n, lower + tolerance, tail, "higher", exact=False)
    if upper is not None:
        assert rejects(x, n, upper + tolerance, tail, "lower", exact=False)
        assert not rejects(x, n, upper - tolerance, tail, "lower", exact=False)


@pytest.mark.parametrize(
    ("n", "limit", "tolerance"),
    [
        # Hanley & Lippman-Hand, JAMA 1983 (0 of 14; other n by the same formula), per cent (from memory)
        (10, 25.9, 0.06), (14, 19.3, 0.06), (30, 9.5, 0.06), (100, 2.95, 0.06),
    ],
)  # fmt: skip
def test_largest_share_compatible_with_no_event(n: int, limit: float, tolerance: float) -> None:
    assert rejects(0, n, (limit + tolerance) / 100, 0.05, "lower")
    assert not rejects(0, n, (limit - tolerance) / 100, 0.05, "lower")


@pytest.mark.parametrize(
    ("bad", "level", "failures", "n"),
    [
        # Success-run theorem, e.g. Lipson & Sheth 1973; standard reliability practice (from memory)
        (0.1, 0.1, 0, 22), (0.1, 0.05, 0, 29), (0.05, 0.1, 0, 45),
        (0.05, 0.05, 0, 59), (0.01, 0.05, 0, 299), (0.01, 0.1, 0, 230),
        # Wilks sample sizes and binomial demonstration tables (from memory)
        (0.1, 0.1, 1, 38), (0.1, 0.05, 1, 46), (0.05, 0.05, 1, 93),
        (0.01, 0.05, 1, 473), (0.05, 0.05, 2, 124), (0.1, 0.05, 2, 61),
        # MIL-S-19500 / MIL-M-38510 LTPD sampling table, columns 10 and 20 (from memory)
        (0.1, 0.1, 2, 52), (0.1, 0.1, 3, 65), (0.1, 0.1, 4, 78), (0.1, 0.1, 5, 91), (0.2, 0.1, 0, 11),
        (0.2, 0.1, 1, 18), (0.2, 0.1, 2, 25), (0.2, 0.1, 3, 32), (0.2, 0.1, 4, 38), (0.2, 0.1, 5, 45),
    ],
)  # fmt: skip
def test_smallest_n_at_which_so_few_failures_demonstrate_the_share(
    bad: float, level: float, failures: int, n: int
) -> None:
    assert rejects(failures, n, bad, level, "lower")
    assert not rejects(failures, n - 1, bad, level, "lower")


def test_passing_a_zero_failure_demonstration_under_a_prior() -> None:
    # Ratio of beta functions: b / (b + n) for a = 1, here 30 / 52
    made = study(OneProportion(n=22), Beta(a=1.0, b=30.0), Significance(alpha=0.1, sides="lower"), null=0.1)
    assert value(made, "assurance") == pytest.approx(0.5769230769, abs=1e-8)


@pytest.mark.parametrize(
    ("p", "printed"), [(0.01, 0.998), (0.02, 0.98), (0.03, 0.93), (0.04, 0.845), (0.05, 0.739), (0.06, 0.62)]
)
def test_acceptance_curve_of_52_with_3_allowed(p: float, printed: float) -> None:
    # NIST/SEMATECH e-Handbook, sec. 6.2.3.2 (.845 and .739 are printed with a last-digit slip). The one-sided 25%
    # test of 10% defective accepts at 3 or fewer of 52.
    rule = Significance(alpha=0.25, sides="lower")
    made = study(OneProportion(n=52), Beta(a=1.0, b=1.0), rule, null=0.1, planning_value=p)
    assert counts(52, 0.1).test(0.1, 0.25, "lower").upper.item() == 3.5
    assert value(made, "power_at_planning_value") == pytest.approx(printed, abs=0.001)


def test_critical_count_and_assurance_of_a_single_arm() -> None:
    # Beta-binomial tail
    made = study(OneProportion(n=40), Beta(a=6.0, b=12.0), Significance(sides="higher"), null=0.2)
    assert counts(40, 0.2).test(0.2, 0.05, "higher").lower.item() == 13 - 0.5
    assert value(made, "assurance") == pytest.approx(0.5388439387, abs=1e-8)


def test_sign_test_of_82_years() -> None:
    # Arbuthnot, Phil. Trans. 27:186-190, 1710 (from memory)
    p = BinomialAnalysis(np.array([82]), 82, exact=True).p_value(0.5, "higher", "central")
    assert np.log10(p.item()) == pytest.approx(-24.684, abs=0.001)


def fisher(x: int, n: int, y: int, m: int) -> tuple[TwoCountsAnalysis, TwoProportions]:
    design = TwoProportions(n_treatment=n, n_control=m, control=Point(value=0.5), analysis="exact")
    return TwoCountsAnalysis(np.array([x]), np.array([y]), n, m, design), design


@pytest.mark.parametrize(
    ("table", "p", "tolerance"),
    [
        ((4, 4, 0, 4), 0.014286, 1e-6),  # Fisher, The Design of Experiments, 1935, ch. II, 1 / 70 (from memory)
        (
            (10, 13, 2, 17),
            0.0004652,
            1e-7,
        ),  # Fisher, JRSS 1935, criminal twins (data of Lange); R's fisher.test (from memory)
        ((4, 10, 0, 9), 0.054, 0.0005),  # Ware, Statistical Science 1989, Harvard ECMO trial, phase 1 (from memory)
    ],
)
def test_one_sided_fisher_p_value_and_where_the_region_begins(
    table: tuple[int, int, int, int], p: float, tolerance: float
) -> None:
    x, n, y, m = table
    analysis, design = fisher(*table)
    assert analysis.p_value(0.0, "higher", "central").item() == pytest.approx(p, abs=tolerance)
    outcomes = design.outcomes(np.array([float(n)]), {"control": np.array([0.5])}, 0.0, ROUGH)
    for level, expected in ((p + tolerance, True), (p - tolerance, False)):
        region = outcomes.test(0.0, level, "higher")
        assert (x > region.lower[0, 0, 0, y]) == expected, m


def test_two_sided_fisher_p_value_of_the_twins_and_where_the_region_begins() -> None:
    # p values as printed by the fisher.test help example of R (from memory)
    analysis, design = fisher(10, 13, 2, 17)
    assert analysis.p_value(0.0, "two", "minimum_likelihood").item() == pytest.approx(0.0005367, abs=1e-7)
    outcomes = design.outcomes(np.array([13.0]), {"control": np.array([0.5])}, 0.0, ROUGH)
    for level, expected in ((0.0005367 + 1e-7, True), (0.0005367 - 1e-7, False)):
        higher, _ = outcomes.two_sided_test(0.0, level, "minimum_likelihood")
        assert (higher.lower[0, 0, 0, 2] < 10) == expected


def test_chi_square_and_ratios_of_the_aspirin_trial() -> None:
    # Physicians' Health Study; Agresti, An Introduction to Categorical Data Analysis, 1996, table 2.3, sec. 2.4 (from
    # memory)
    scales: tuple[tuple[Literal["ratio", "odds_ratio"], float], ...] = (("ratio", 1.82), ("odds_ratio", 1.83))
    for scale, printed in scales:
        design = TwoProportions(n_treatment=11034, n_control=11037, control=Point(value=0.01), scale=scale)
        analysis = TwoCountsAnalysis(np.array([189]), np.array([104]), 11034, 11037, design)
        assert np.exp(analysis.estimate.item()) == pytest.approx(printed, abs=0.006)
        p = analysis.p_value(1.0, "two", "central").item()
        assert stats.chi2.isf(p, 1) == pytest.approx(25.01, abs=0.006)


def test_assurance_of_the_pooled_z_test_by_enumeration() -> None:
    # Sum over the rejection region of beta-binomial probabilities (ties with zero variance do not reject)
    made = study(
        TwoProportions(n_per_group=50, control=Beta(a=8.0, b=12.0)),
        Prior(treatment=Beta(a=12.0, b=8.0)),
        Significance(alpha=0.025, sides="higher"),
    )
    assert value(made, "assurance") == pytest.approx(0.5315716492, abs=1e-8)


@pytest.mark.parametrize(
    ("treatment", "control", "printed", "tolerance"),
    [
        # Finite sum of beta functions (Cook, exact beta inequalities, technical report 2005)
        ((31.0, 171.0), (21.0, 181.0), 0.9333052932, 1e-8),
        # Baeten et al., Lancet 2013: 14/23 with Beta(0.5, 1), 1/6 with Beta(11, 32); reported 99.8% (from memory)
        ((14.5, 10.0), (12.0, 37.0), 0.998, 0.0006),
    ],
)
def test_probability_that_one_rate_exceeds_another(
    treatment: tuple[float, float], control: tuple[float, float], printed: float, tolerance: float
) -> None:
    given = answer(
        study(
            TwoProportions(n_per_group=20, control=Beta(a=control[0], b=control[1])),
            Prior(treatment=Beta(a=treatment[0], b=treatment[1])),
            Significance(alpha=0.025, sides="higher"),
        )
    )
    above = sum(cell(given, ["higher"], d) for d in ("reject_higher", "not_reject"))
    assert above == pytest.approx(printed, abs=tolerance)
    assert given.quantities["assurance_ceiling"].value == pytest.approx(printed, abs=tolerance)
