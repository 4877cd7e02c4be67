"""Power of t tests against arbitrary precision, by the regions and nodes that studies use."""

import math

import mpmath
import numpy as np
import pytest
from mpmath import mp, mpf
from scipy import special

from bayesdesign.design.base import Accuracy
from bayesdesign.design.means import student_line

ABSOLUTE, RELATIVE = 1e-12, 1e-8


def by_program(df: float, alpha: float, noncentrality: float, side: str, auxiliary: int = 16) -> float:
    """P(one-sided t test at alpha rejects) when the effect is `noncentrality` standard errors."""
    accuracy = Accuracy(effect=12, nuisance=12, auxiliary=auxiliary, finest_level=alpha)
    line = student_line(np.ones((1, 1)), np.array([df]), 0.0, accuracy)
    region = line.test(0.0, alpha, side)  # type: ignore[arg-type]
    effect = np.full((1, 1, 1), noncentrality)
    return float(line.probabilities(effect, [region])[0].item())


def by_definition(df: float, t: float, noncentrality: float) -> mpf:
    """P(Z + noncentrality > t u), df u^2 chi-square with df degrees of freedom, in 30 digits around the mode."""
    with mp.workdps(30):
        n, point, shift = mpf(df), mpf(t), mpf(noncentrality)
        log_constant = mpmath.log(2) + n / 2 * mpmath.log(n / 2) - mpmath.loggamma(n / 2)

        def log_integrand(u: mpf) -> mpf:
            return log_constant + (n - 1) * mpmath.log(u) - n * u * u / 2 + mpmath.log(mpmath.ncdf(shift - point * u))

        def kept(points: np.ndarray) -> tuple[int, int]:
            """First and last point that matter to 30 digits."""
            values = np.array([float(log_integrand(mpf(float(u)))) for u in points])
            matter = np.flatnonzero(values > values.max() - 75)
            return max(0, int(matter[0]) - 1), min(len(points) - 1, int(matter[-1]) + 1)

        coarse = np.exp(np.linspace(math.log(1e-7), math.log(12.0), 400))
        first, last = kept(coarse)
        fine = np.linspace(coarse[first], coarse[last], 200)
        low, high = kept(fine)
        ends = [mpf(float(u)) for u in np.linspace(fine[low], fine[high], 25)]
        if first == 0:
            ends = [mpf(0), *ends]
        return mpmath.quad(lambda u: mpmath.exp(log_integrand(u)), ends)


def check(df: float, alpha: float, noncentrality: float) -> None:
    t = -float(special.stdtrit(df, alpha))
    expected = by_definition(df, t, noncentrality)
    for side, shift in (("higher", noncentrality), ("lower", -noncentrality)):
        found = by_program(df, alpha, shift, side)
        gap = abs(mpf(found) - expected)
        case = (df, alpha, noncentrality, side, found, float(expected))
        assert gap < ABSOLUTE, case
        if expected > 1e-12:
            assert gap < RELATIVE * expected, case


@pytest.mark.parametrize("df", [1.0, 2.0, 3.0, 8.0, 25.0, 59.0, 60.0, 61.0, 400.0, 1e5])
@pytest.mark.parametrize(
    ("alpha", "noncentrality"),
    [(1e-6, 0.5), (1e-6, 12.0), (0.001, -2.0), (0.025, 2.8), (0.05, 40.0), (0.5, -6.0)],
)
def test_noncentral_t_power_to_the_last_digits(df: float, alpha: float, noncentrality: float) -> None:
    check(df, alpha, noncentrality)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(20))
def test_noncentral_t_power_over_random_points(seed: int) -> None:
    rng = np.random.default_rng(seed)
    for _ in range(15):
        df = float(np.floor(10 ** rng.uniform(0, 5)))
        alpha = float(10 ** rng.uniform(-6, math.log10(0.5)))
        t = -float(special.stdtrit(df, alpha))
        near = float(np.clip(t + rng.normal(0, 3), -40, 40))
        check(df, alpha, near if rng.random() < 0.5 else float(rng.uniform(-40, 40)))


@pytest.mark.parametrize("df", [1.0, 4.0, 30.0, 1000.0])
@pytest.mark.parametrize("alpha", [1e-6, 0.01, 0.3, 0.5, 0.7])
def test_a_t_test_of_a_true_null_rejects_at_its_level(df: float, alpha: float) -> None:
    assert by_program(df, alpha, 0.0, "higher") == pytest.approx(alpha, rel=1e-10)
