"""What a trap may ask about a study and its answers; what is costly is worked out once, when asked for."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, final

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import BayesdesignError, Invalid
from bayesdesign.design.base import Accuracy
from bayesdesign.prior.nodes import nuisance_nodes
from bayesdesign.prior.point import Point
from bayesdesign.result import Answer
from bayesdesign.study.study import Study

GRID = 400  # equally likely points of the prior; probabilities are then good to half a per cent
STEPS = 48  # distances at which the power is looked at


@final
@dataclass(frozen=True)
class Context:
    """A study with its answers (none before anything is computed), and helpers for conditions and sentences.

    Effects are in natural units, distances on the working scale (logarithms, for ratios).
    """

    study: Study
    answers: Sequence[Answer]

    @property
    def first(self) -> Answer | None:
        return self.answers[0] if self.answers else None

    def value(self, name: str, answer: Answer | None = None) -> float | None:
        """A quantity at the first n or in the given answer; None when it is no single number or undefined."""
        answer = answer or self.first
        found = answer.quantities[name].value if answer and name in answer.quantities else None
        return float(found) if isinstance(found, float | int) else None

    def error(self, name: str) -> float:
        found = self.first.quantities[name].error if self.first and name in self.first.quantities else None
        return float(found) if isinstance(found, float | int) else 0.0

    @property
    def n(self) -> int | None:
        """The size at hand: of the first answer, else the planned one."""
        return self.first.n if self.first else self.study.design.planned_n

    @cached_property
    def _cloud(self) -> tuple[FloatArray, FloatArray, float]:
        """Effects not exactly null, weights that sum to 1, and the mass of impossible pairs left out."""
        design, prior = self.study.design, self.study.prior
        nodes, weight = nuisance_nodes(design.nuisance, 8)
        variable = prior.variable.ppf((np.arange(GRID) + 0.5) / GRID)
        pairs = {name: np.repeat(values, GRID) for name, values in nodes.items()}
        spread = np.repeat(weight, GRID) / GRID
        effect = np.tile(variable, len(weight))
        if prior.treatment is not None:
            effect = design.effect_of(effect, pairs)
        low, high = (np.broadcast_to(end, weight.shape) for end in design.effect_bounds(nodes))
        inside = (effect >= np.repeat(low, GRID)) & (effect <= np.repeat(high, GRID)) & np.isfinite(effect)
        if design.ratio_scale:
            inside &= effect > 0
        kept = float(spread[inside].sum())
        return effect[inside], spread[inside] / max(kept, 1e-300), 1 - kept

    @property
    def effects(self) -> FloatArray:
        """Equally spaced points of the prior given that the effect is not exactly null."""
        return self._cloud[0]

    @property
    def weights(self) -> FloatArray:
        return self._cloud[1]

    @property
    def cut(self) -> float:
        """Prior mass on pairs of effect and nuisance that cannot exist together."""
        return self._cloud[2]

    @cached_property
    def distances(self) -> FloatArray:
        return np.asarray(self.study.design.working(self.effects) - self.study.working_null)

    def quantile(self, p: float) -> float:
        """Prior quantile of the effect given that it is not exactly null."""
        order = np.argsort(self.effects)
        at = int(np.searchsorted(np.cumsum(self.weights[order]), p - 1e-12))
        return float(self.effects[order][min(at, len(order) - 1)])

    @cached_property
    def good_side(self) -> float:
        """Prior probability of the favourable side given that the effect is not exactly null."""
        sign = {"higher": 1.0, "lower": -1.0}.get(self.study.favourable)
        return 1.0 if sign is None else float(self.weights[sign * self.distances > 0].sum())

    def typical(self) -> float:
        """The prior's median effect."""
        return self.quantile(0.5)

    def power(self, effect: float, *, n: int | None = None, study: Study | None = None) -> float | None:
        """P(any claim | effect), nuisance parameters averaged; None where the effect cannot exist."""
        found = self.powers(np.array([effect]), n=n, study=study)
        return None if found is None or not np.isfinite(found[0]) else float(found[0])

    def powers(self, effects: FloatArray, *, n: int | None = None, study: Study | None = None) -> FloatArray | None:
        """The same at several effects, NaN where one cannot exist; None when the design cannot say."""
        study = study or self.study
        size = n if n is not None else self.n
        try:
            nodes, weight = nuisance_nodes(study.design.nuisance, 4)
            accuracy = Accuracy(effect=8, nuisance=4, auxiliary=16, finest_level=study.rule.finest_level)
            outcomes = study.design.outcomes(np.array([float(size or 1)]), nodes, study.null, accuracy)
            grid = np.broadcast_to(effects, (1, len(weight), len(effects))).copy()
            low, high = (np.broadcast_to(end, weight.shape)[:, None] for end in study.design.effect_bounds(nodes))
            possible = (effects >= low) & (effects <= high)
            regions = study.rule.regions(outcomes, study.null)
            claims = [i for i, name in enumerate(study.rule.decisions[:-1]) if name in study.rule.claims]
            found = outcomes.probabilities(np.clip(grid, low, high), regions)[0][0][..., claims].sum(axis=-1)
        except (BayesdesignError, Invalid):
            return None
        share = weight @ possible
        with np.errstate(invalid="ignore"):
            return np.where(share > 0.5, (weight[:, None] * np.where(possible, found, 0.0)).sum(axis=0) / share, np.nan)

    def with_nuisance(self, name: str, value: float) -> Study | None:
        """The study with one nuisance parameter fixed elsewhere; None if that is impossible."""
        design: Any = self.study.design  # every design is a dataclass, which its base class cannot say
        try:
            return replace(self.study, design=replace(design, **{name: Point(value=value)}), target=None)
        except (BayesdesignError, Invalid, TypeError):
            return None

    @cached_property
    def resolution(self) -> float | None:
        """Distance that the test finds half of the time, on the prior's side; None beyond its reach."""
        far = float(np.max(np.abs(self.distances), initial=0.0))
        if far == 0:
            return None
        sign = 1.0 if self.weights[self.distances > 0].sum() >= 0.5 else -1.0
        steps = np.geomspace(far / 1e4, far, STEPS)
        found = self.powers(self.effect_at(sign * steps))
        if found is None:
            return None
        reached = np.flatnonzero(np.nan_to_num(found) >= 0.5)
        return float(steps[reached[0]]) if len(reached) else None

    def effect_at(self, distance: FloatArray) -> FloatArray:
        """Effects in natural units at distances on the working scale."""
        moved = self.study.working_null + distance
        return np.exp(moved) if self.study.design.ratio_scale else moved

    @cached_property
    def shares(self) -> dict[str, tuple[float, int]]:
        """Group -> (typical share, size) of a study that counts events among n; empty for others."""
        design = self.study.design
        if not design.saw_tooth or self.n is None:
            return {}
        sizes = list(design.group_sizes(self.n).values())
        centre = {name: float(np.ravel(belief.ppf(np.array([0.5])))[0]) for name, belief in design.nuisance.items()}
        if "control" not in centre:
            return {"the sample": (self.typical(), sizes[0])}
        at = {name: np.array([value]) for name, value in centre.items()}
        treated = float(design.treatment_of(np.array([self.typical()]), at)[0])
        return {
            "the treated": (min(max(treated, 0.0), 1.0), sizes[0]),
            "the controls": (centre["control"], sizes[-1]),
        }

    def unit(self, effect: float) -> str:
        """An effect in natural units, for a sentence."""
        if self.study.design.ratio_scale:
            return f"{effect:.3g}"
        return f"{effect:.3g} {self.study.effect.unit[:40]}".rstrip()


def hundred(p: float) -> str:
    """A probability as a count of 100 that never pretends to be certain."""
    if p <= 0:
        return "0"
    if p < 0.005:
        return "fewer than 1"
    if 0.995 < p < 1:
        return "more than 99"
    # shares of the 400 points often end on a half, which must not fall with the last bit
    return str(math.floor(100 * p + 0.5 + 1e-9))
