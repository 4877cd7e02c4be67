"""Median exaggeration: where half of the claims of a real effect lie, as a multiple of that effect."""

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.search import root_of_increasing

if TYPE_CHECKING:
    from bayesdesign.joint.integration import Setting, Truths

FARTHEST = 60.0  # log multiple beyond which the median is reported as infinite
ROUNDS = (1e-3, 1e-6)  # width in log multiple at which a round of the search stops and the panels are laid anew
STEPPED = 1e-7  # the same where the panels are laid anew at every step
ROUGH = 1e-5  # the last round where jumps are only averaged
CLOSE = 1e-11  # the same for the last round


def median_multiple(setting: "Setting", near: FloatArray | None = None) -> FloatArray:
    """Least multiple c with P(claim, |estimate - null| <= c |distance|, not exactly null) at half of P(claim, not
    exactly null), (N,).

    Sought in rounds, each with panels that end on the kinks at the multiple found before, from `near` if something
    is known. NaN where nothing is claimed, infinite where no multiple suffices.
    """
    from bayesdesign.joint.integration import truth_nodes

    excess, claimed = _excess(setting, truth_nodes(setting))
    known = near is not None and bool(np.isfinite(near).all() and (near > 0).all())
    start, step = (np.log(near), 1e-3) if near is not None and known else (np.zeros(len(claimed)), 0.5)
    if setting.outcomes.stepped:
        low, high = _bracket(excess, claimed, start, 10 * step)  # by the panels at hand: about right, and cheap
        rough = root_of_increasing(excess, low, high, 1e-3)

        def relaid(at: FloatArray) -> FloatArray:
            return _relaid(setting, at)

        low, high = _bracket(relaid, claimed, rough if not known else start, 1e-4 if known else 3e-3)
        return _finish(root_of_increasing(relaid, low, high, STEPPED), claimed)
    low, high = _bracket(excess, claimed, start, step)
    rounds, last = (ROUNDS[:1], ROUGH) if setting.outcomes.rough_error else (ROUNDS, CLOSE)
    for close in rounds:
        found = root_of_increasing(excess, low, high, close)
        excess, claimed = _excess(setting, truth_nodes(setting, multiple=np.exp(np.clip(found, -FARTHEST, FARTHEST))))
        low, high = _bracket(excess, claimed, found, 4 * close)
    return _finish(root_of_increasing(excess, low, high, last), claimed)


def _relaid(setting: "Setting", at: FloatArray) -> FloatArray:
    """The excess with panels that end on the jumps at this very multiple."""
    from bayesdesign.joint.integration import truth_nodes

    # panels between neighbouring jumps are narrow, so few nodes do
    nodes = truth_nodes(setting, multiple=np.exp(np.clip(at, -FARTHEST, FARTHEST)), order=max(3, setting.order // 3))
    excess, _ = _excess(setting, nodes)
    return excess(at)


def _finish(log_multiple: FloatArray, claimed: FloatArray) -> FloatArray:
    with np.errstate(over="ignore"):
        return np.where(claimed > 0, np.where(log_multiple > FARTHEST / 2, np.inf, np.exp(log_multiple)), np.nan)


def _excess(setting: "Setting", truths: "Truths") -> tuple[Callable[[FloatArray], FloatArray], FloatArray]:
    """P(claim within the multiple) minus half of P(claim), as a function of the log multiple (N,); and P(claim)."""
    from bayesdesign.joint.integration import distances

    study = setting.study
    claims = [setting.regions[i] for i, name in enumerate(study.rule.decisions[:-1]) if name in study.rule.claims]
    distance, exactly_null = distances(study, truths.effect)
    weight = np.where(exactly_null, 0.0, truths.weight)
    reach = np.abs(distance)
    claimed = (weight * setting.outcomes.probabilities(truths.effect, claims)[0].sum(axis=-1)).sum(axis=(1, 2))

    def excess(log_multiple: FloatArray) -> FloatArray:
        within = reach * np.exp(log_multiple)[:, None, None]
        mass = setting.outcomes.probabilities_within(truths.effect, claims, within)
        return np.asarray((weight * mass).sum(axis=(1, 2)) - claimed / 2)

    return excess, claimed


def _bracket(
    excess: Callable[[FloatArray], FloatArray], claimed: FloatArray, start: FloatArray, step: float
) -> tuple[FloatArray, FloatArray]:
    """Log multiples on either side of the root, from `start` by steps that grow fourfold."""
    low, high = start - step, start + step
    while step < FARTHEST:
        too_high = (excess(low) >= 0) & (claimed > 0)
        too_low = (excess(high) < 0) & (claimed > 0)
        if not (too_high | too_low).any():
            break
        step *= 4
        low, high = np.where(too_high, low - step, low), np.where(too_low, high + step, high)
    return low, high
