"""Random studies of every family, for property tests."""

from typing import Any

from hypothesis import strategies as st

from bayesdesign.design import Design, Estimate, OneMean, OneProportion, PairedMeans, TwoMeans, TwoProportions
from bayesdesign.prior import (
    Beta,
    Distribution,
    Gamma,
    Histogram,
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


def numbers(low: float, high: float) -> st.SearchStrategy[float]:
    """Numbers of three digits, so that a failing example can be read."""
    return st.floats(low, high, allow_nan=False).map(lambda x: float(f"{x:.3g}"))


centres = numbers(-1.5, 1.5)
widths = numbers(0.01, 2.0)


@st.composite
def histograms(draw: st.DrawFn, low: float, high: float) -> Histogram:
    cuts = sorted(draw(st.lists(numbers(0.02, 0.98), min_size=1, max_size=4, unique=True)))
    weights = draw(st.lists(st.integers(0, 5), min_size=len(cuts) + 1, max_size=len(cuts) + 1).filter(any))
    edges = [low, *(low + c * (high - low) for c in cuts), high]
    return Histogram(edges=tuple(edges), weights=tuple(map(float, weights)))


normals = st.builds(Normal, mean=centres, sd=widths)
smooth: st.SearchStrategy[Distribution] = st.one_of(
    normals,
    st.builds(StudentT, df=numbers(2.5, 30.0), location=centres, scale=widths),
    st.builds(lambda a, w: Uniform(low=a, high=a + w), centres, widths),
    st.builds(
        lambda m, s, a, w: Truncated(base=Normal(mean=m, sd=s), low=a, high=a + w),
        numbers(-0.3, 0.3),
        numbers(0.3, 1.0),
        numbers(-0.6, 0.1),
        widths,
    ),
    histograms(-1.5, 1.5),
)
"""Beliefs about an effect, about 1 in size, all with a mean."""

lumpy: st.SearchStrategy[Distribution] = st.one_of(
    smooth,
    st.builds(Point, value=centres.filter(lambda x: abs(x) > 1e-3)),
    st.builds(
        lambda a, b, p, w: Mixture(components=(a, b, Point(value=p)), weights=(w, (1 - w) / 2, (1 - w) / 2)),
        normals, normals, centres, numbers(0.1, 0.9),
    ),
)  # fmt: skip
"""The same, with point masses."""

scales: st.SearchStrategy[Distribution] = st.one_of(
    st.builds(Point, value=numbers(0.5, 3.0)),
    st.builds(Gamma, shape=numbers(5.0, 50.0), rate=numbers(5.0, 30.0)),
    st.builds(Lognormal, median=numbers(0.5, 3.0), log_sd=numbers(0.05, 0.5)),
)

sizes = st.integers(2, 60)


@st.composite
def lines(draw: st.DrawFn, *, uncertain: bool = False, welch: bool = False) -> Design:
    """Designs whose estimate is normal around the truth."""
    n, sd = draw(sizes), draw(scales if uncertain else st.builds(Point, value=numbers(0.5, 3.0)))
    analysis: Any = draw(st.sampled_from(["t", "z"]))
    family = draw(st.sampled_from(["estimate", "one", "paired", "two", "unequal", *(["welch"] if welch else [])]))
    match family:
        case "estimate":
            return Estimate(n=n, unit_sd=sd)
        case "one":
            return OneMean(n=n, sd=sd, analysis=analysis)
        case "paired":
            return PairedMeans(n_pairs=n, sd_difference=sd, analysis=analysis)
        case "two":
            return TwoMeans(n_per_group=n, sd=sd, analysis=analysis)
        case "unequal":
            return TwoMeans(n_treatment=n, n_control=draw(sizes), sd=sd, analysis=analysis)
        case _:
            return TwoMeans(
                n_per_group=n, sd_treatment=sd, sd_control=Point(value=draw(numbers(0.5, 3.0))), analysis="welch"
            )


rules = st.builds(
    Significance,
    alpha=st.sampled_from([0.001, 0.01, 0.025, 0.05, 0.1, 0.2]),
    sides=st.sampled_from(["two", "higher", "lower"]),
)
spikes = st.sampled_from([0.0, 0.0, 0.1, 0.5, 0.9])
shares = st.one_of(
    st.builds(Beta, a=numbers(0.5, 30.0), b=numbers(0.5, 30.0)),
    histograms(0.0, 1.0),
    st.builds(lambda a, w: Uniform(low=a, high=min(1.0, a + w)), numbers(0.0, 0.8), numbers(0.05, 0.9)),
)


@st.composite
def questions(draw: st.DrawFn, null: float, relevant: tuple[float, float]) -> Effect:
    return Effect(
        null=null,
        favourable=draw(st.sampled_from(["higher", "lower", "either"])),
        smallest_relevant=draw(st.one_of(st.none(), numbers(*relevant))),
    )


@st.composite
def line_studies(
    draw: st.DrawFn, *, priors: st.SearchStrategy[Distribution] = lumpy, uncertain: bool = False, welch: bool = False
) -> Study:
    return Study(
        title="random",
        design=draw(lines(uncertain=uncertain, welch=welch)),
        prior=Prior(effect=draw(priors), probability_null=draw(spikes)),
        rule=draw(rules),
        effect=draw(questions(draw(st.sampled_from([0.0, 0.3])), (0.05, 0.8))),
    )


@st.composite
def one_proportion_studies(draw: st.DrawFn, most: int = 60) -> Study:
    analysis: Any = draw(st.sampled_from(["exact", "z"]))
    return Study(
        title="random",
        design=OneProportion(n=draw(st.integers(1, most)), analysis=analysis),
        prior=Prior(effect=draw(shares), probability_null=draw(spikes)),
        rule=draw(rules),
        effect=draw(questions(draw(st.sampled_from([0.1, 0.3, 0.5])), (0.02, 0.2))),
    )


@st.composite
def two_proportion_studies(draw: st.DrawFn, most: int = 20) -> Study:
    scale: Any = draw(st.sampled_from(["difference", "ratio", "odds_ratio"]))
    analysis: Any = draw(st.sampled_from(["z", "exact", "z_unpooled"]))
    beta = st.builds(Beta, a=numbers(1.0, 30.0), b=numbers(1.0, 30.0))
    control = draw(st.one_of(st.builds(Point, value=numbers(0.2, 0.8)), beta))
    ratio = scale != "difference"
    return Study(
        title="random",
        design=TwoProportions(
            n_treatment=draw(st.integers(1, most)), n_control=draw(st.integers(1, most)),
            control=control, scale=scale, analysis=analysis,
        ),
        prior=Prior(treatment=draw(beta), probability_null=draw(spikes)),
        rule=draw(rules),
        effect=draw(questions(1.0 if ratio else 0.0, (1.05, 2.0) if ratio else (0.02, 0.3))),
    )  # fmt: skip


every_study = st.one_of(line_studies(), one_proportion_studies(), two_proportion_studies())
