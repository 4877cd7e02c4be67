"""Nodes and weights of a belief: composite Gauss-Legendre panels on the smooth pieces, point masses as they are."""

from collections.abc import Collection, Mapping

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.prior.base import Distribution

FAINT = 1e-10  # a bend with less of the nuisance's mass beyond it needs no panel of its own
NEGLIGIBLE = 1e-16  # nuisance nodes below this weight are dropped; the rest is scaled up


def variable_nodes(
    belief: Distribution, edges: FloatArray, low: FloatArray, high: FloatArray, order: int
) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights (N, M, K) of the part of `belief` that lies in low..high (M,), with panels that end on
    `edges` (N, M, E).

    The weights sum to the probability of low..high. Mass outside the distribution's own breaks is put on its
    outermost break.
    """
    rows, columns = edges.shape[:2]
    parts = [_atom_nodes(belief, low, high, rows)]
    breaks = belief.breaks()
    if breaks.size:
        bottom, top = np.maximum(breaks[0], low)[:, None], np.minimum(breaks[-1], high)[:, None]
        every = np.concatenate([np.broadcast_to(breaks, (rows, columns, breaks.size)), edges], axis=2)
        every = np.sort(np.clip(every, bottom, np.maximum(top, bottom)), axis=2)
        x, w = np.polynomial.legendre.leggauss(order)
        half = np.diff(every, axis=2)[..., None] / 2
        nodes = (every[..., :-1, None] + half * (x + 1)).reshape(rows, columns, -1)
        weights = (half * w).reshape(rows, columns, -1) * belief.pdf(nodes)
        # an edge with an infinite density has no finite density exactly on it, and a panel of no width no weight
        parts.append((nodes, np.where(np.isfinite(weights), weights, 0.0)))
        parts.append(_outside(belief, breaks, low, high, rows))
    return np.concatenate([p[0] for p in parts], axis=2), np.concatenate([p[1] for p in parts], axis=2)


def _atom_nodes(belief: Distribution, low: FloatArray, high: FloatArray, rows: int) -> tuple[FloatArray, FloatArray]:
    values, masses = belief.atoms()
    shape = (rows, len(low), len(values))
    inside = (values >= low[:, None]) & (values <= high[:, None])
    return np.broadcast_to(values, shape), np.broadcast_to(np.where(inside, masses, 0.0), shape)


def _outside(
    belief: Distribution, breaks: FloatArray, low: FloatArray, high: FloatArray, rows: int
) -> tuple[FloatArray, FloatArray]:
    """The mass beyond the first and the last break."""
    values, masses = belief.atoms()
    first, last = breaks[:1], breaks[-1:]
    below = max(0.0, float(belief.cdf(first)[0] - masses[values <= first].sum()))
    above = max(0.0, float(belief.sf(last)[0] - masses[values > last].sum()))
    ends = np.concatenate([first, last])
    inside = np.stack([low <= first, high >= last], axis=1)
    shape = (rows, len(low), 2)
    return np.broadcast_to(ends, shape), np.broadcast_to(np.where(inside, [below, above], 0.0), shape)


def nuisance_nodes(
    nuisance: Mapping[str, Distribution],
    order: int,
    *,
    panels: bool = False,
    kinks: Mapping[str, FloatArray] | None = None,
    scales: Collection[str] = (),
) -> tuple[dict[str, FloatArray], FloatArray]:
    """Product nodes of independent nuisance parameters, each (M,), with weights (M,) that sum to 1.

    By default the `order`-point Gauss rule of each distribution itself, which is enough where the answer varies
    smoothly with the parameter; with `panels`, or where `kinks` lie inside a distribution, composite panels of
    `order` nodes, for answers that bend sharply. Parameters named in `scales` are taken on the log scale.
    """
    grids: list[FloatArray] = []
    weight = np.ones(1)
    for name, belief in nuisance.items():
        cuts = (kinks or {}).get(name, np.empty(0))
        cuts = cuts[(belief.cdf(cuts) > FAINT) & (belief.sf(cuts) > FAINT)]
        cut = cuts.size > 0 and not panels
        x, w = _one_nuisance(belief, max(3, order // 3) if cut else order, cuts, panels or cut, name in scales)
        grids = [np.repeat(g, len(x)) for g in grids] + [np.tile(x, len(weight))]
        weight = np.repeat(weight, len(x)) * np.tile(w, len(weight))
    keep = weight > NEGLIGIBLE
    return dict(zip(nuisance, (g[keep] for g in grids), strict=True)), weight[keep] / weight[keep].sum()


def _one_nuisance(
    belief: Distribution, order: int, cuts: FloatArray, panels: bool, scale: bool
) -> tuple[FloatArray, FloatArray]:
    everywhere = np.full(1, -np.inf), np.full(1, np.inf)
    x, w = (a[0, 0] for a in variable_nodes(belief, cuts[None, None], *everywhere, order if panels else max(12, order)))
    keep = w > NEGLIGIBLE
    x, w = x[keep], w[keep] / w[keep].sum()
    if panels or len(x) <= order:
        return x, w
    if scale:
        values, weights = gauss_rule(np.log(x), w, order)
        return np.exp(values), weights
    return gauss_rule(x, w, order)


def gauss_rule(x: FloatArray, w: FloatArray, order: int) -> tuple[FloatArray, FloatArray]:
    """The `order`-point Gauss rule of a discrete measure with points x and weights w that sum to 1.

    Lanczos tridiagonalisation with full orthogonalisation (Golub and Welsch 1969; Gautschi 2004, Orthogonal
    Polynomials, 2.2.3).
    """
    centre, spread = w @ x, np.sqrt(w @ (x - w @ x) ** 2)
    t = (x - centre) / spread
    basis = [np.sqrt(w)]
    diagonal, off = [], []
    for k in range(order):
        image = t * basis[k]
        diagonal.append(float(image @ basis[k]))
        for _ in range(2):  # twice is enough
            image = image - np.array(basis).T @ (np.array(basis) @ image)
        norm = float(np.linalg.norm(image))
        if k + 1 == order or norm < 1e-13:
            break
        off.append(norm)
        basis.append(image / norm)
    values, vectors = np.linalg.eigh(np.diag(diagonal) + np.diag(off, 1) + np.diag(off, -1))
    return centre + spread * values, vectors[0] ** 2
