"""Short ways to build a study by hand and to read one number of its answer."""

from collections.abc import Sequence
from typing import Any, Literal

from bayesdesign.design import Design, Estimate, OneProportion, TwoMeans
from bayesdesign.evaluate import evaluate
from bayesdesign.joint.evidence import p_value_evidence
from bayesdesign.joint.posterior import Posterior, posterior_by_integration
from bayesdesign.prior import Distribution, Point
from bayesdesign.result import Answer
from bayesdesign.rule import Significance
from bayesdesign.study.study import Effect, Prior, Study, Target

TWO_SIDED = Significance(alpha=0.05)
ONE_SIDED = Significance(alpha=0.025, sides="higher")


def study(
    design: Design,
    effect: Distribution | Prior,
    rule: Significance = TWO_SIDED,
    *,
    spike: float = 0.0,
    target: Target | None = None,
    **question: Any,
) -> Study:
    """A study; `effect` is the prior (or its distribution, with `spike` at the null), `question` is `[effect]`."""
    prior = effect if isinstance(effect, Prior) else Prior(effect=effect, probability_null=spike)
    return Study(title="test", design=design, prior=prior, rule=rule, effect=Effect(**question), target=target)


def estimate_with(se: float) -> Estimate:
    """An estimate with this standard error."""
    return Estimate(standard_error=Point(value=se))


def two_means(n: int, sd: float = 1.0, analysis: Literal["t", "z", "welch"] = "t") -> TwoMeans:
    return TwoMeans(n_per_group=n, sd=Point(value=sd), analysis=analysis)


def answer(made: Study, n: int | None = None) -> Answer:
    return evaluate(made, n).answers[0]


def value(made: Study, name: str, n: int | None = None) -> float:
    """One quantity, which must exist."""
    found = answer(made, n).quantities[name].value
    assert isinstance(found, float), f"{name} is {found}"
    return found


def error(made: Study, name: str) -> float:
    """The error stated with a quantity."""
    found = answer(made).quantities[name].error
    assert isinstance(found, float), f"{name} has error {found}"
    return found


def cell(given: Answer, states: Sequence[str], decision: str) -> float:
    """Joint probability of a decision with any of these states."""
    column = given.table.decisions.index(decision)
    return sum(given.table.joint[given.table.states.index(s)][column] for s in states)


def count_study(x: int, n: int, null: float, prior: Distribution, *, spike: float = 0.0) -> tuple[Study, float]:
    """A one-sided exact binomial study and the p-value of x of n by scipy, which tells the count exactly."""
    from scipy import stats

    made = study(OneProportion(n=n), prior, Significance(sides="higher"), spike=spike, null=null)
    return made, float(stats.binom.sf(x - 1, n, null))


def after_count(
    x: int, n: int, null: float, prior: Distribution, *, spike: float = 0.0, mass: float = 0.95
) -> Posterior:
    """The posterior after x of n, as `interpret` finds it from the p-value alone."""
    made, p = count_study(x, n, null, prior, spike=spike)
    return posterior_by_integration(made, n, p_value_evidence(made, n, p, 17, None), mass, 1e-6)
