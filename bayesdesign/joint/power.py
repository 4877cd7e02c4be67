"""Distribution of power: P(F | truth) as a random variable under the prior."""

from typing import TYPE_CHECKING

import numpy as np

from bayesdesign.core.arrays import FloatArray

if TYPE_CHECKING:
    from bayesdesign.joint.integration import Setting

CELLS = 256  # prior-probability cells at the lowest refinement; doubled at each level
FLAT = 1e-9  # power that varies less over a cell is a jump of its distribution


def power_quantiles(setting: "Setting", levels: tuple[float, ...]) -> FloatArray:
    """Quantiles (N, P) of P(F | effect, nuisance) given that the effect is not exactly null.

    Power is interpolated linearly in prior probability between the quantiles of the prior, at each nuisance node.
    The levels themselves are among the grid points, so that the answer is exact where power is monotone and no
    nuisance is uncertain.
    """
    from bayesdesign.joint.integration import distances

    study = setting.study
    favourable = study.rule.favourable(study.favourable)
    regions = [setting.regions[i] for i, name in enumerate(study.rule.decisions[:-1]) if name in favourable]
    belief = study.prior.variable
    low, high = setting.feasible
    first, last = belief.cdf(low), belief.cdf(high)  # (M,)
    grid = _grid(setting, levels)
    quantile = belief.ppf(np.clip(first[:, None] + (last - first)[:, None] * grid, 1e-300, 1 - 1e-16))
    variable = np.clip(quantile, np.nextafter(low, np.inf)[:, None], np.nextafter(high, -np.inf)[:, None])
    effect = setting.to_effect(np.broadcast_to(variable, (len(setting.n), *variable.shape)).copy())
    if regions:
        power = np.clip(setting.outcomes.probabilities(effect, regions)[0].sum(axis=-1), 0.0, 1.0)
    else:
        power = np.zeros(effect.shape)
    mass = setting.nuisance_weight * (last - first)
    cells = (mass / mass.sum())[:, None] * np.diff(grid)
    at_null = distances(study, effect)[1]
    real = np.where(at_null[..., 1:] & at_null[..., :-1], 0.0, cells)  # without an atom exactly at the null
    return np.array(
        [_quantiles(p, c if c.any() else cells, np.asarray(levels)) for p, c in zip(power, real, strict=True)]
    )


def _grid(setting: "Setting", levels: tuple[float, ...]) -> FloatArray:
    count = CELLS * 2**setting.level
    marks = [np.linspace(0, 1, count + 1), np.asarray(levels), 1 - np.asarray(levels)]
    values, masses = setting.study.prior.variable.atoms()
    if len(values):
        upper = setting.study.prior.variable.cdf(values)
        marks += [upper - masses + 1e-13, upper - 1e-13]
    return np.unique(np.clip(np.concatenate(marks), 1e-12, 1 - 1e-12))


def _quantiles(power: FloatArray, cells: FloatArray, levels: FloatArray) -> FloatArray:
    """Quantiles of a mixture of uniform laws, one between the two ends of each cell; power (M, G + 1), cells (M, G)."""
    left, right = np.minimum(power[:, :-1], power[:, 1:]).ravel(), np.maximum(power[:, :-1], power[:, 1:]).ravel()
    mass = cells.ravel()
    flat = right - left < FLAT
    slope = np.where(flat, 0.0, mass / np.where(flat, 1.0, right - left))
    at = np.concatenate([left, right])
    order = np.argsort(at, kind="stable")
    at = at[order]
    rate = np.cumsum(np.concatenate([slope, -slope])[order])
    jump = np.concatenate([np.where(flat, mass / 2, 0.0)] * 2)[order]
    before = np.concatenate([[0.0], np.cumsum(jump[:-1] + np.diff(at) * rate[:-1])])  # cdf just below each knot
    total = before[-1] + jump[-1]
    wanted = levels * total
    k = np.minimum(np.searchsorted(before + jump, wanted * (1 - 1e-13)), len(at) - 1)
    rise = rate[k - 1]
    short = np.maximum(before[k] - wanted, 0.0)
    back = np.where((k > 0) & (rise > 0), short / np.where(rise > 0, rise, 1.0), 0.0)
    return np.asarray(at[k] - back)
