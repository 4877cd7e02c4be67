"""Posteriors by NUTS against quadrature, closed forms and the integration route; and their refusals."""

import numpy as np
import pytest
from scipy import special

from bayesdesign.core.errors import NotOffered, Refused
from bayesdesign.design import Estimate, TwoProportions
from bayesdesign.joint.evidence import decision_evidence
from bayesdesign.joint.integration import integrate
from bayesdesign.joint.nuts import (
    Decided,
    DrawnPosterior,
    Estimated,
    Observed,
    check_convergence,
    checked_posterior,
    posterior_by_nuts,
)
from bayesdesign.joint.posterior import posterior_by_integration
from bayesdesign.prior import Beta, Lognormal, Normal, Point
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior, Study

from .examples import ATOM, CAUCHY, CERTAIN, CUT, FISHER, SPIKE, STERNE, T_TEST, TWO_ARMS, WELCH, title

SEED = 11


def near(number: Estimated | None, exact: float) -> bool:
    """Within 4 standard errors, or equal where there is no error."""
    return number is not None and abs(number.value - exact) <= 4 * number.mcse + 1e-9


def normal_study(mean: float, sd: float, se: float) -> Study:
    return Study(
        title="normal",
        design=Estimate(standard_error=Point(value=se)),
        prior=Prior(effect=Normal(mean=mean, sd=sd)),
        rule=Significance(),
    )


@pytest.mark.slow
@pytest.mark.parametrize(
    ("mean", "sd", "se", "exact"),
    [
        (0.3, 0.2, 0.15, (0.17540, 0.14828, 0.87806)),
        (0.5, 0.5, 0.05, (0.01118, 0.07466, 0.56074)),
        (0.0, 1.0, 0.10, (0.00000, 0.14963, 0.50000)),
    ],
)
def test_not_significant_is_all_that_is_known(
    mean: float, sd: float, se: float, exact: tuple[float, float, float]
) -> None:
    """Exact values by adaptive quadrature over the prior, to five digits."""
    found = posterior_by_nuts(normal_study(mean, sd, se), Decided(decision="not_reject"), SEED)
    assert near(found.effect_mean, exact[0])
    assert near(found.effect_sd, exact[1])
    assert near(found.probability_above_null, exact[2])


@pytest.mark.slow
def test_an_estimate_on_a_ratio_scale_with_weight_on_the_null_has_a_closed_form() -> None:
    """Log effect normal(log 1.2, 0.3), estimate 1.5, log-scale error 0.2: normal densities and products."""
    study = Study(
        title="ratio",
        design=TwoProportions(n_per_group=50, control=Point(value=0.1), scale="ratio"),
        prior=Prior(effect=Lognormal(median=1.2, log_sd=0.3), probability_null=0.4),
        rule=Significance(),
    )
    found = posterior_by_nuts(study, Observed(estimate=1.5, standard_error=0.2), SEED)
    x, prior_mean, prior_sd, se = np.log(1.5), np.log(1.2), 0.3, 0.2
    width = np.hypot(prior_sd, se)
    null = 0.4 * np.exp(-((x / se) ** 2) / 2) / se
    real = 0.6 * np.exp(-(((x - prior_mean) / width) ** 2) / 2) / width
    weight, mean = null / (null + real), (prior_mean / prior_sd**2 + x / se**2) / (prior_sd**-2 + se**-2)
    sd = (prior_sd**-2 + se**-2) ** -0.5
    assert near(found.state_probabilities["null"], weight)
    assert near(found.state_probabilities["higher"], (1 - weight) * special.ndtr(mean / sd))
    assert near(found.effect_mean, weight + (1 - weight) * np.exp(mean + sd**2 / 2))
    top = np.exp(mean + sd * special.ndtri((0.975 - weight) / (1 - weight)))
    assert near(found.interval[1], top)
    assert found.effect_median.value > 1


@pytest.mark.slow
def test_an_estimate_conditions_both_arms() -> None:
    """An estimate bears on both arms: mean difference of Beta arms weighted by a normal likelihood."""
    study = Study(
        title="arms",
        design=TwoProportions(n_per_group=50, control=Beta(a=8.0, b=12.0)),
        prior=Prior(treatment=Beta(a=12.0, b=8.0)),
        rule=Significance(),
        effect=Effect(),
    )
    found = posterior_by_nuts(study, Observed(estimate=0.05, standard_error=0.1), SEED)
    x, w = np.polynomial.legendre.leggauss(200)
    share, w = (x + 1) / 2, w / 2
    weight = (w * share**11 * (1 - share) ** 7)[:, None] * (w * share**7 * (1 - share) ** 11)
    gap = share[:, None] - share
    weight = weight * np.exp(-(((gap - 0.05) / 0.1) ** 2) / 2)
    assert near(found.effect_mean, float((weight * gap).sum() / weight.sum()))


def check_against_nodes(study: Study, decision: str, found: DrawnPosterior) -> None:
    """Against the column of the decision in the integration route's table."""
    table = integrate(study, [study.design.planned_n], 3)
    weight = table.weight[0] * table.probability[0, :, study.rule.decisions.index(decision)]
    weight = weight / weight.sum()
    mean = float(weight @ table.effect[0])
    for i, name in enumerate(study.states.names):
        assert near(found.state_probabilities[name], float(weight[table.state[0] == i].sum())), name
    if found.effect_mean is not None:
        assert near(found.effect_mean, mean)
        assert near(found.effect_sd, float(weight @ (table.effect[0] - mean) ** 2) ** 0.5)


@pytest.mark.slow
@pytest.mark.parametrize("study", [SPIKE, T_TEST, WELCH, STERNE, TWO_ARMS, FISHER, ATOM, CAUCHY], ids=title)
def test_posterior_given_the_first_decision_is_that_column_of_the_table(study: Study) -> None:
    decision = study.rule.decisions[0]
    found = posterior_by_nuts(study, Decided(decision=decision), SEED)
    check_against_nodes(study, decision, found)
    assert found.diagnostics.r_hat <= 1.01
    assert min(found.diagnostics.ess_bulk, found.diagnostics.ess_tail) >= 400


@pytest.mark.slow
def test_no_mean_is_reported_where_there_is_none() -> None:
    found = posterior_by_nuts(CAUCHY, Decided(decision="reject_higher"), SEED)
    assert found.effect_mean is None
    assert found.effect_sd is None
    assert found.interval[0].value < found.effect_median.value < found.interval[1].value


@pytest.mark.slow
def test_same_seed_same_posterior() -> None:
    study = normal_study(0.3, 0.2, 0.15)
    assert posterior_by_nuts(study, Decided(decision="not_reject"), 3) == posterior_by_nuts(
        study, Decided(decision="not_reject"), 3
    )


@pytest.mark.slow
def test_agreement_is_checked_and_a_wrong_posterior_refused() -> None:
    right = posterior_by_integration(SPIKE, 100, decision_evidence(SPIKE, "not_reject"), 0.95, 1e-6)
    wrong = posterior_by_integration(SPIKE, 100, decision_evidence(SPIKE, "reject_higher"), 0.95, 1e-6)
    asked = {"n": 100, "decision": "not_reject", "estimate": None, "se": None, "seed": SEED, "mass": 0.95}
    document = checked_posterior(SPIKE, given="decision", against=right, **asked)
    assert document["state_probabilities"]["null"]["value"] == pytest.approx(right.states["null"], abs=0.05)
    with pytest.raises(Refused, match="the routes disagree"):
        checked_posterior(SPIKE, given="decision", against=wrong, **asked)


@pytest.mark.slow
def test_a_real_run_that_cannot_be_trusted_is_refused() -> None:
    """The prior is cut where pairs become impossible: a cliff in the posterior that the sampler runs into."""
    with pytest.raises(Refused, match="divergent transitions"):
        posterior_by_nuts(CUT, Decided(decision="reject_higher"), SEED)


def test_bad_chains_are_refused_by_name() -> None:
    rng = np.random.default_rng(4)
    good = rng.normal(size=(4, 1000))
    assert check_convergence({"x": good}, 0).ess_bulk > 1000
    with pytest.raises(Refused, match="R-hat"):
        check_convergence({"x": good, "y": good + np.arange(4)[:, None]}, 0)
    slow = rng.normal(size=(4, 1000))
    for i in range(1, 1000):
        slow[:, i] += 0.9 * slow[:, i - 1]
    with pytest.raises(Refused, match=r"effective sample size|R-hat"):
        check_convergence({"x": slow}, 0)
    with pytest.raises(Refused, match="effective sample size below 400"):
        check_convergence({"x": good[:, :60]}, 0)
    with pytest.raises(Refused, match="1 divergent"):
        check_convergence({"x": good}, 1)


def test_what_nuts_cannot_answer_is_said_in_a_sentence() -> None:
    with pytest.raises(NotOffered, match="nothing here is uncertain"):
        posterior_by_nuts(CERTAIN, Decided(decision="not_reject"), SEED)
    with pytest.raises(NotOffered, match="not a decision of this rule"):
        posterior_by_nuts(SPIKE, Decided(decision="accept"), SEED)
