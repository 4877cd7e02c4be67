"""Quadrature over the sample standard deviation: nodes of u = s / sigma, where df * u^2 is chi-square with df
degrees of freedom.

Averaging a normal tail over u gives the noncentral t distribution (its definition as a scale mixture, e.g. Johnson,
Kotz and Balakrishnan, Continuous Univariate Distributions vol. 2, ch. 31) without the library tail functions, which
lose their digits or return NaN at large noncentrality.
"""

import numpy as np
from scipy import special

from bayesdesign.core.arrays import FloatArray

LAGUERRE_FROM_DF = 60.0  # above it u is so narrow that every integrand met here is nearly a polynomial in it
ROUGH_FROM_DF = 10.0  # the same where absolute accuracy is enough, as for pairs of sds
LEAST_EDGE = 1e-9  # a level of one half has its bound at 0, where u makes no edge at all
OUTSIDE = 1e-26  # chi-square mass left out on either side of the panels
ROUGH_OUTSIDE = 1e-15


def sd_ratio_nodes(
    df: FloatArray, critical: FloatArray, order: int, *, rough: bool = False
) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of u for each of N degrees of freedom, padded with zero weights to one width: two (N, A)
    arrays.

    `critical` (N,) is the largest multiple of the standard error that a region will use: a bound at `critical * u`
    makes an edge of width 1 / critical in u, and the panels must resolve it. `order` is the number of nodes in a panel.
    `rough` gives up the digits of probabilities far below 1e-8, and needs fewer nodes.
    """
    threshold, more, outside = (ROUGH_FROM_DF, 8, ROUGH_OUTSIDE) if rough else (LAGUERRE_FROM_DF, 16, OUTSIDE)
    fewer = max(8, 2 * order // 3) if rough else order
    parts = [
        _laguerre(d, order + more) if d >= threshold else _panels(d, max(abs(c), LEAST_EDGE), fewer, outside)
        for d, c in zip(df, critical, strict=True)
    ]
    width = max(len(nodes) for nodes, _ in parts)
    nodes, weights = np.ones((len(parts), width)), np.zeros((len(parts), width))
    for i, (u, w) in enumerate(parts):
        nodes[i, : len(u)], weights[i, : len(w)] = u, w
    return nodes, weights


def _laguerre(df: float, order: int) -> tuple[FloatArray, FloatArray]:
    """Gauss rule of the gamma law of df * u^2 / 2 by the eigenvalues of its Jacobi matrix (Golub and Welsch 1969)."""
    if np.isinf(df):
        return np.ones(1), np.ones(1)
    k, a = np.arange(order), df / 2 - 1
    off = np.sqrt(k[1:] * (k[1:] + a))
    values, vectors = np.linalg.eigh(np.diag(2 * k + a + 1) + np.diag(off, 1) + np.diag(off, -1))
    return np.sqrt(2 * values / df), vectors[0] ** 2


def _panels(df: float, critical: float, order: int, outside: float) -> tuple[FloatArray, FloatArray]:
    """Composite Gauss-Legendre where the chi density or the edge of a region is too sharp for one polynomial."""
    low = np.sqrt(2 * special.gammaincinv(df / 2, outside) / df)
    high = np.sqrt(2 * special.gammainccinv(df / 2, outside) / df)
    step, edges = min(2.0 / np.sqrt(2 * df), 3.0 / critical), [low]
    while edges[-1] < high:
        # beyond 60 standard errors an edge is wide against its distance, so panels may grow with u
        grow = 0.05 * edges[-1] if edges[-1] * critical > 60 else 0.0
        edges.append(min(edges[-1] + min(max(step, grow), 2.0 / np.sqrt(2 * df)), high))
    x, w = np.polynomial.legendre.leggauss(order)
    half = np.diff(edges)[:, None] / 2
    u = (np.asarray(edges[:-1])[:, None] + half * (x + 1)).ravel()
    log_density = (
        np.log(2) + (df / 2) * np.log(df / 2) - special.gammaln(df / 2) + (df - 1) * np.log(u) - df * u * u / 2
    )
    weight = (half * w).ravel() * np.exp(log_density)
    return u, weight / weight.sum()
