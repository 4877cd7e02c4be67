"""PyMC draws and log densities against the distribution's own cdf and pdf."""

import math

import numpy as np
import pytest

from bayesdesign.core.errors import NotOffered
from bayesdesign.prior import Distribution, Histogram, Mixture, Normal, Point, Truncated, Uniform

from .examples import EVERY, SPIKE

DRAWS = 200_000
CONTINUOUS = [d for d in EVERY if not d.atoms()[0].size]
NESTED = Truncated(base=Truncated(base=Normal(mean=0.0, sd=1.0), low=-1.0, high=math.inf), low=-3.0, high=2.0)


def check_draws(own: Distribution, x: np.ndarray) -> None:
    """Shares below quantiles, mean and sd within 5 standard errors; atoms drawn exactly."""
    low, high = own.support
    assert low <= x.min()
    assert x.max() <= high
    at = own.ppf(np.array([0.001, 0.02, 0.1, 0.3, 0.5, 0.8, 0.95, 0.999]))
    exact = own.cdf(at)
    share = (x[:, None] <= at).mean(axis=0)
    assert (np.abs(share - exact) <= 5 * np.sqrt(exact * (1 - exact) / x.size)).all(), own.describe()
    for value, mass in zip(*own.atoms(), strict=True):
        assert abs((x == value).mean() - mass) <= 5 * math.sqrt(mass * (1 - mass) / x.size)
    if math.isfinite(own.deviation()) and own.deviation() > 0:
        assert abs(x.mean() - own.expectation()) <= 5 * own.deviation() / math.sqrt(x.size)


@pytest.mark.slow
def test_draws_follow_the_distribution() -> None:
    import pymc as pm

    every = [*EVERY, NESTED]
    with pm.Model():
        variables = [own.random_variable(pm, f"v{i}", (DRAWS,)) for i, own in enumerate(every)]
    drawn = pm.draw(variables, draws=1, random_seed=7)
    for own, x in zip(every, drawn, strict=True):
        assert x.shape == (DRAWS,)
        check_draws(own, x)


@pytest.mark.slow
def test_draws_take_any_shape_and_are_independent() -> None:
    import pymc as pm

    with pm.Model():
        column = SPIKE.random_variable(pm, "column", (1000, 1))
        row = SPIKE.random_variable(pm, "row", (1000,))
    drawn = pm.draw([column, row], draws=1, random_seed=7)
    assert [x.shape for x in drawn] == [(1000, 1), (1000,)]
    assert len(np.unique(drawn[0])) > 500
    assert (
        np.mean((drawn[0].ravel() > 0.4) == (drawn[1] > 0.4)) < 0.7
    )  # equal seeds must not give equal draws


@pytest.mark.slow
def test_log_density_is_the_logarithm_of_pdf_and_its_slope_is_finite() -> None:
    import pymc as pm
    import pytensor
    import pytensor.tensor as pt

    places = [own.ppf(np.array([0.01, 0.3, 0.6, 0.99])) for own in CONTINUOUS]
    variables = [pt.vector(f"x{i}") for i in range(len(CONTINUOUS))]
    logs = [own.log_density(pm, x) for own, x in zip(CONTINUOUS, variables, strict=True)]
    slopes = [
        pt.grad(log.sum(), x, disconnected_inputs="ignore") for log, x in zip(logs, variables, strict=True)
    ]
    computed = pytensor.function(variables, logs + slopes, mode="FAST_COMPILE", on_unused_input="ignore")(
        *places
    )
    for own, x, log, slope in zip(
        CONTINUOUS, places, computed[: len(places)], computed[len(places) :], strict=True
    ):
        exact = np.log(own.pdf(x))
        assert log == pytest.approx(exact, abs=1e-10), own.describe()
        step = 1e-5 * np.minimum(own.ppf(np.asarray(0.6)) - own.ppf(np.asarray(0.5)), np.abs(x))
        central = (np.log(own.pdf(x + step)) - np.log(own.pdf(x - step))) / (2 * step)
        assert slope == pytest.approx(central, rel=1e-4, abs=1e-4 / float(step.max())), own.describe()


def test_log_density_is_minus_infinity_outside() -> None:
    import pymc as pm

    for own in (NESTED, Uniform(low=0.0, high=1.0), Histogram(edges=(0.0, 1.0), weights=(1.0,))):
        assert own.log_density(pm, pm.math.constant(np.array([-1.5, 2.5]))).eval().tolist() == [
            -math.inf,
            -math.inf,
        ]


def test_point_masses_have_no_log_density() -> None:
    import pymc as pm

    mixed = Mixture(components=(Point(value=0.0), Normal(mean=0.0, sd=1.0)), weights=(0.5, 0.5))
    for own in (Point(value=0.0), mixed, Truncated(base=mixed, low=-1.0, high=1.0)):
        with pytest.raises(NotOffered, match="point mass"):
            own.log_density(pm, pm.math.constant(0.0))
