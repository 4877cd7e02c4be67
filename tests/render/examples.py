"""Studies of every kind that a renderer must have words for, with answers that cost little."""

from functools import cache

from bayesdesign.design import Estimate, OneMean, OneProportion, PairedMeans, TwoMeans, TwoProportions
from bayesdesign.evaluate import evaluate
from bayesdesign.prior import Beta, Cauchy, Lognormal, Normal, Point, Truncated
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior, Study, Target

HOSTILE = "kg\x1b]0;owned\x07\u202e\x9b31m per\ntree" + "x" * 10_000
FIVE = Point(value=5.0)
POINT_RATIO = Truncated(base=Lognormal(median=0.7, log_sd=0.2), low=0.2, high=2.0)


def study(
    title="A study",
    design=None,
    belief=None,
    *,
    spike=0.0,
    sides="two",
    alpha=0.05,
    target=None,
    field="",
    **effect,
):
    return Study(
        title=title,
        design=design or TwoMeans(n_per_group=40, sd=FIVE, analysis="z"),
        prior=Prior(effect=belief or Normal(mean=1.8, sd=1.5), probability_null=spike),
        rule=Significance(sides=sides, alpha=alpha),
        effect=Effect(**({"favourable": "higher"} | effect)),
        target=target,
        field=field,
    )


STUDIES = {
    "zone": study(smallest_relevant=1.5, planning_value=2.5, unit="kg per tree", field="clinical"),
    "no null": study(unit="kg"),
    "spike": study(spike=0.5, field="safety"),
    "only spike": study(spike=1.0),
    "lower": study(
        design=PairedMeans(n_pairs=20, sd_difference=FIVE), favourable="lower", smallest_relevant=1.0
    ),
    "either": study(design=OneMean(n=20, sd=FIVE, analysis="z"), favourable="either", null=1.0),
    "one-sided": study(sides="higher", alpha=0.025),
    "against": study(sides="lower"),
    "no mean": study(belief=Cauchy(location=0.0, scale=0.7)),
    "point": study(belief=Point(value=2.0), planning_value=2.0),
    "never": study(design=OneProportion(n=3), belief=Beta(a=2.0, b=2.0), null=0.4),
    "share": study(
        design=OneProportion(n=42), belief=Beta(a=8.0, b=12.0), null=0.2, planning_value=0.4, spike=0.3
    ),
    "standard error": study(design=Estimate(standard_error=Point(value=1.0))),
    "ratio": study(
        design=TwoProportions(n_per_group=60, control=Point(value=0.3), scale="ratio"),
        belief=POINT_RATIO,
        favourable="lower",
        smallest_relevant=1.2,
    ),
    "hostile": study(
        title="\x1b[2J\u202e" + "A" * 10_000,
        unit=HOSTILE,
        smallest_relevant=1.0,
        target=Target(at_least=0.99),
    ),
    "wide letters": study(title="果樹園の試験" * 20, unit="キログラム", smallest_relevant=1.5),
}


@cache
def answer(name, n=None):
    """The result of a study at its own size, or at several."""
    return evaluate(STUDIES[name], None if n is None else list(n), tolerance=1e-2)
