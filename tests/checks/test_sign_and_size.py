"""Wrong signs and exaggeration of significant results."""

import pytest
from scipy import optimize, stats
from studies import answer, estimate_with, study

from bayesdesign.prior import Normal
from bayesdesign.result import Answer


def at(effect: float, se: float) -> Answer:
    """The answer whose planning value is the true effect."""
    return answer(study(estimate_with(se), Normal(mean=0.0, sd=1.0), planning_value=effect))


def check(given: Answer, tolerance: dict[str, float], **printed: float) -> None:
    names = {
        "power": "power_at_planning_value",
        "type_s": "type_s_at_planning_value",
        "exaggeration": "exaggeration_at_planning_value",
    }
    for key, figure in printed.items():
        assert given.quantities[names[key]].value == pytest.approx(figure, abs=tolerance[key]), key


def test_beauty_and_relationship_example() -> None:
    # Gelman & Carlin 2014, second example (from memory); its simulated exaggeration ratio 9.7 is not used (exactly
    # 9.54)
    check(at(2.0, 8.1), {"power": 0.005, "type_s": 0.005}, power=0.06, type_s=0.24)


def test_sex_ratio_example() -> None:
    # Gelman & Carlin 2014, sex-ratio example, published from simulation (from memory)
    check(
        at(0.1, 3.28),
        {"power": 0.005, "type_s": 0.005, "exaggeration": 0.5},
        power=0.05,
        type_s=0.46,
        exaggeration=77.0,
    )


EXACT = dict.fromkeys(("power", "type_s", "exaggeration"), 1e-6)


@pytest.mark.parametrize(
    ("effect", "se", "power", "type_s", "exaggeration"),
    [
        # Truncated-normal moments (Lu, Qiu & Deng, British J. Math. Stat. Psychology 2019)
        (2.0, 8.1, 0.05701294063, 0.2396176545, 9.536627594),
        (1.0, 3.28, 0.06071472117, 0.193712287, 7.749186929),
        (1.959852921, 1.0, 0.5, 8.861626643e-05, 1.407124885),
    ],
)
def test_exact_sign_and_size_errors(effect: float, se: float, power: float, type_s: float, exaggeration: float) -> None:
    check(at(effect, se), EXACT, power=power, type_s=type_s, exaggeration=exaggeration)


def test_signal_and_exaggeration_at_power_080() -> None:
    # Gelman & Carlin 2014, general relation of power and exaggeration (from memory)
    for signal, side in ((2.8 - 0.005, -1), (2.8 + 0.005, 1)):
        power = at(signal, 1.0).quantities["power_at_planning_value"].value
        assert isinstance(power, float)
        assert side * (power - 0.8) > 0
    signal = optimize.brentq(lambda t: stats.norm.sf(1.959964 - t) - 0.8, 2.0, 4.0)
    check(at(signal, 1.0), {"type_s": 0.0001, "exaggeration": 0.0055}, type_s=0.0, exaggeration=1.12)


def test_significance_and_wrong_signs_averaged_over_a_prior() -> None:
    # Bivariate normal orthants
    given = answer(study(estimate_with(0.4), Normal(mean=0.2, sd=0.5)))
    assert given.quantities["assurance"].value == pytest.approx(0.2430559142, abs=2e-5)
    assert given.quantities["type_s_rate"].value == pytest.approx(0.02170815266, abs=2e-5)
