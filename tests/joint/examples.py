"""Studies on which the routes are compared: every family, scale, analysis and kind of prior that matters."""

from bayesdesign.design import Estimate, OneMean, OneProportion, PairedMeans, TwoMeans, TwoProportions
from bayesdesign.prior import (
    Beta,
    Cauchy,
    Gamma,
    Lognormal,
    Mixture,
    Normal,
    Point,
    StudentT,
    Truncated,
    Uniform,
)
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior, Study

SPIKE = Study(
    title="spike",
    design=Estimate(n=100, unit_sd=Point(value=2**0.5)),
    prior=Prior(effect=Normal(mean=0.3, sd=0.2), probability_null=0.5),
    rule=Significance(),
    effect=Effect(favourable="higher", planning_value=0.3),
)
ZONE = Study(
    title="smallest relevant",
    design=Estimate(n=100, unit_sd=Point(value=2**0.5)),
    prior=Prior(effect=Normal(mean=0.3, sd=0.2)),
    rule=Significance(),
    effect=Effect(favourable="higher", smallest_relevant=0.1),
)
T_TEST = Study(
    title="t, sd prior",
    design=OneMean(n=12, sd=Lognormal(median=1.0, log_sd=0.3)),
    prior=Prior(effect=Normal(mean=0.5, sd=0.5)),
    rule=Significance(sides="higher", alpha=0.025),
    effect=Effect(planning_value=0.6),
)
PAIRED = Study(
    title="paired z, heavy prior",
    design=PairedMeans(n_pairs=20, sd_difference=Gamma(shape=9, rate=9), analysis="z"),
    prior=Prior(effect=StudentT(df=4, location=0.2, scale=0.3), probability_null=0.2),
    rule=Significance(),
    effect=Effect(favourable="lower"),
)
WELCH = Study(
    title="Welch, unequal groups",
    design=TwoMeans(
        n_treatment=8,
        n_control=20,
        sd_treatment=Point(value=1.5),
        sd_control=Point(value=0.7),
        analysis="welch",
    ),
    prior=Prior(effect=Normal(mean=0.8, sd=0.7), probability_null=0.1),
    rule=Significance(),
    effect=Effect(planning_value=1.0),
)
CAUCHY = Study(
    title="no prior mean",
    design=TwoMeans(n_per_group=5, sd=Point(value=1)),
    prior=Prior(effect=Cauchy(location=0, scale=0.7)),
    rule=Significance(),
)
BINOMIAL = Study(
    title="exact binomial",
    design=OneProportion(n=40),
    prior=Prior(effect=Beta(a=8, b=12)),
    rule=Significance(sides="higher"),
    effect=Effect(null=0.2, planning_value=0.4),
)
STERNE = Study(
    title="minimum likelihood",
    design=OneProportion(n=30),
    prior=Prior(effect=Uniform(low=0, high=1), probability_null=0.3),
    rule=Significance(tails="minimum_likelihood"),
    effect=Effect(null=0.3, planning_value=0.5),
)
TWO_ARMS = Study(
    title="prior on both arms",
    design=TwoProportions(n_per_group=50, control=Beta(a=8.0, b=12.0)),
    prior=Prior(treatment=Beta(a=12.0, b=8.0)),
    rule=Significance(sides="higher", alpha=0.025),
    effect=Effect(planning_value=0.2),
)
FISHER = Study(
    title="Fisher, ratio, unequal groups",
    design=TwoProportions(
        n_treatment=40, n_control=60, control=Point(value=0.3), scale="ratio", analysis="exact"
    ),
    prior=Prior(effect=Lognormal(median=1.2, log_sd=0.2), probability_null=0.25),
    rule=Significance(),
    effect=Effect(favourable="higher", smallest_relevant=1.1, planning_value=1.5),
)
ODDS = Study(
    title="odds ratio, control prior",
    design=TwoProportions(n_per_group=80, control=Beta(a=20.0, b=60.0), scale="odds_ratio"),
    prior=Prior(effect=Lognormal(median=1.4, log_sd=0.5)),
    rule=Significance(),
    effect=Effect(favourable="higher"),
)
CUT = Study(
    title="impossible pairs cut off",
    design=TwoProportions(n_per_group=60, control=Beta(a=3.0, b=9.0), analysis="z_unpooled"),
    prior=Prior(effect=Truncated(base=Normal(mean=-0.1, sd=0.2), low=-0.5, high=0.5), probability_null=0.3),
    rule=Significance(),
    effect=Effect(favourable="lower"),
)
CERTAIN = Study(
    title="one effect only",
    design=Estimate(standard_error=Point(value=0.2)),
    prior=Prior(effect=Point(value=0.5), probability_null=0.1),
    rule=Significance(),
)
RARE = Study(
    title="almost sure claim",
    design=Estimate(standard_error=Point(value=0.05)),
    prior=Prior(effect=Normal(mean=0.5, sd=0.1)),
    rule=Significance(),
)
ATOM = Study(
    title="prior with single effects",
    design=Estimate(standard_error=Point(value=0.2)),
    prior=Prior(
        effect=Mixture(
            components=(Point(value=0.0), Normal(mean=0.3, sd=0.2), Point(value=0.5)),
            weights=(0.3, 0.5, 0.2),
        ),
        probability_null=0.1,
    ),
    rule=Significance(),
)
STUDIES = [
    SPIKE, ZONE, T_TEST, PAIRED, WELCH, CAUCHY, BINOMIAL, STERNE, TWO_ARMS, FISHER, ODDS, CUT, CERTAIN, RARE,
    ATOM,
]  # fmt: skip


def title(study: Study) -> str:
    """Readable test ids."""
    return study.title
