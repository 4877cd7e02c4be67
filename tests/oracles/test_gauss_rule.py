"""Gauss rules of discrete measures against the known rules of their laws."""

import numpy as np
import pytest
from scipy import special

from bayesdesign.prior import Beta, Gamma, Normal
from bayesdesign.prior.nodes import gauss_rule, nuisance_nodes

FINE = 60  # a Gauss rule of so many points is, to a rule of at most FINE / 2, its law itself


@pytest.mark.parametrize("order", [1, 2, 5, 8, 12, 18])
def test_rule_of_a_normal_law_is_gauss_hermite(order: int) -> None:
    x, w = special.roots_hermitenorm(FINE)
    nodes, weights = special.roots_hermitenorm(order)
    found, share = gauss_rule(1.5 + 0.2 * x, w / w.sum(), order)
    assert np.sort(found) == pytest.approx(1.5 + 0.2 * nodes, abs=1e-10)
    assert share[np.argsort(found)] == pytest.approx(weights / weights.sum(), abs=1e-12)


@pytest.mark.parametrize("order", [1, 2, 5, 8, 12, 18])
@pytest.mark.parametrize(("a", "b"), [(8.0, 12.0), (1.0, 1.0), (2.5, 40.0), (0.7, 3.0)])
def test_rule_of_a_beta_law_is_gauss_jacobi(order: int, a: float, b: float) -> None:
    x, w = special.roots_jacobi(FINE, b - 1, a - 1)
    nodes, weights = special.roots_jacobi(order, b - 1, a - 1)
    found, share = gauss_rule((1 + x) / 2, w / w.sum(), order)
    assert np.sort(found) == pytest.approx((1 + nodes) / 2, abs=1e-10)
    assert share[np.argsort(found)] == pytest.approx(weights / weights.sum(), abs=1e-11)


@pytest.mark.parametrize("order", [4, 8, 12])
def test_rule_needs_no_more_points_than_the_measure_has(order: int) -> None:
    x, w = np.array([0.1, 0.4, 0.9]), np.array([0.2, 0.5, 0.3])
    found, share = gauss_rule(x, w, order)
    assert np.sort(found) == pytest.approx(x, abs=1e-12)
    assert share[np.argsort(found)] == pytest.approx(w, abs=1e-12)


@pytest.mark.parametrize("panels", [False, True])
def test_product_rule_integrates_products_of_smooth_functions(panels: bool) -> None:
    nodes, weight = nuisance_nodes({"p": Beta(a=2.0, b=3.0), "q": Normal(mean=1.0, sd=2.0)}, 8, panels=panels)
    moment = float(weight @ (nodes["p"] ** 5 * nodes["q"] ** 3))
    assert moment == pytest.approx(special.beta(7, 3) / special.beta(2, 3) * (1 + 3 * 4), rel=1e-11)
    assert weight.sum() == pytest.approx(1.0, abs=1e-13)


@pytest.mark.parametrize("power", [-2.0, -1.0, 0.5, 1.0, 2.0])
def test_rule_of_a_scale_integrates_its_powers(power: float) -> None:
    # a scale is integrated on its logarithm, where powers are smooth
    nodes, weight = nuisance_nodes({"sd": Gamma(shape=30.0, rate=10.0)}, 12, scales={"sd"})
    expected = np.exp(special.gammaln(30 + power) - special.gammaln(30)) / 10**power
    assert float(weight @ nodes["sd"] ** power) == pytest.approx(expected, rel=1e-11)
