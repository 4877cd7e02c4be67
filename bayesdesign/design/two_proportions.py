"""Family `two_proportions`: a treated and a control group with binary outcomes."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, Literal, final

import numpy as np
from scipy import special

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import NotOffered
from bayesdesign.design.base import Accuracy, Analysis, Design, Side, Tails
from bayesdesign.design.decided import Decides, LogLikelihood, log_binomial
from bayesdesign.design.fisher import conditional_bounds
from bayesdesign.design.groups import check_sizes, group_sizes
from bayesdesign.design.two_counts import IDENTITY, TwoCounts
from bayesdesign.prior.base import Distribution

MOST_TABLES = 250_000  # for NUTS, which sums over all of them some ten thousand times

type Scale = Literal["difference", "ratio", "odds_ratio"]


@final
@dataclass(frozen=True, kw_only=True)
class TwoProportions(Design):
    """Shares with an event, treatment against control; the effect is their difference, ratio or odds ratio.

    `z`: score test with pooled variance; `z_unpooled`: Wald test; `exact`: Fisher's exact test (Fisher 1935). All
    three are enumerated exactly over both counts. On every scale the test is the one of equal proportions. Counts of
    zero (and full counts, for odds) take half an event more when an estimate on a log scale is needed (Haldane 1956;
    Anscombe 1956).
    """

    family: ClassVar[str] = "two_proportions"
    example: ClassVar[str] = """
[effect]
null = 0.0
favourable = "higher"
# smallest_relevant = 0.05
planning_value = 0.15

[design]
family = "two_proportions"
n_per_group = 150 # number of units in each group
# n_treatment = 200 # number of treated units, with n_control instead of n_per_group
# n_control = 100 # number of control units, with n_treatment instead of n_per_group
control = { distribution = "beta", mean = 0.3, size = 100 } # the control group's proportion: number or distribution
# scale = "difference" # the effect: "difference" of proportions, or "ratio" or "odds_ratio", treatment over control
# analysis = "z" # the test: "z" (pooled), "exact" (Fisher) or "z_unpooled"

[prior]
effect = { distribution = "normal", mean = 0.15, sd = 0.06 }
# treatment = { distribution = "beta", mean = 0.45, size = 40 }
# probability_null = 0.1
"""
    saw_tooth: ClassVar[bool] = True
    sizes_at_once: ClassVar[int] = 1

    n_per_group: int | None = None
    n_treatment: int | None = None
    n_control: int | None = None
    control: Distribution
    scale: Scale = "difference"
    analysis: Literal["z", "exact", "z_unpooled"] = "z"

    def __post_init__(self) -> None:
        check_sizes(self.n_per_group, self.n_treatment, self.n_control, 1)

    @property
    def planned_n(self) -> int | None:
        return self.n_per_group if self.n_per_group is not None else self.n_treatment

    @property
    def n_label(self) -> str:
        return "n_per_group" if self.n_per_group is not None else "n_treatment"

    def group_sizes(self, n: int) -> dict[str, int]:
        if self.n_per_group is not None:
            return {"n_per_group": n}
        return dict(zip(("n_treatment", "n_control"), map(int, self._sizes(np.asarray(float(n)))), strict=True))

    @property
    def ratio_scale(self) -> bool:
        return self.scale != "difference"

    @property
    def effect_words(self) -> str:
        return {
            "difference": "the difference of proportions, treatment minus control",
            "ratio": "the ratio of proportions, treatment over control",
            "odds_ratio": "the odds ratio, treatment over control",
        }[self.scale]

    @property
    def nuisance(self) -> dict[str, Distribution]:
        return {"control": self.control}

    def tooth(self, n: int, null: float) -> int:
        del n, null  # with two counts the teeth are short at every size
        return 16

    def nuisance_bounds(self, name: str) -> tuple[float, float]:
        return 0.0, 1.0

    def _sizes(self, n: FloatArray) -> tuple[FloatArray, FloatArray]:
        return group_sizes(n, self.n_treatment, self.n_control, 1)

    def effect_bounds(self, nuisance: Mapping[str, FloatArray]) -> tuple[FloatArray, FloatArray]:
        control = nuisance["control"]
        if self.scale == "difference":
            return -control, 1 - control
        with np.errstate(divide="ignore"):
            top = 1 / control if self.scale == "ratio" else np.full_like(control, np.inf)
        return np.zeros_like(control), top

    def nuisance_kinks(self, effects: FloatArray) -> dict[str, FloatArray]:
        if self.scale == "difference":
            return {"control": np.concatenate([-effects, 1 - effects])}
        return {"control": 1 / effects[effects > 1]} if self.scale == "ratio" else {}

    def nuisance_meets(self, effects: FloatArray, treatments: FloatArray) -> dict[str, FloatArray]:
        effect, treatment = effects[:, None], treatments[None, :]
        if self.scale == "difference":
            return {"control": (treatment - effect).ravel()}
        if self.scale == "ratio":
            return {"control": (treatment / effect[effect[:, 0] > 0]).ravel()}
        return {}  # odds ratios meet the ends of the treated arm at those of the control only

    def treatment_of(self, effect: FloatArray, nuisance: Mapping[str, Any]) -> FloatArray:
        control = nuisance["control"]
        if self.scale == "difference":
            return np.asarray(control + effect)
        if self.scale == "ratio":
            return np.asarray(control * effect)
        with np.errstate(divide="ignore"):  # the odds ratio may be 0 or infinite
            return np.asarray(1 / (1 + (1 - control) / (effect * control)))

    def effect_of(self, treatment: FloatArray, nuisance: Mapping[str, Any]) -> FloatArray:
        control = nuisance["control"]
        if self.scale == "difference":
            return np.asarray(treatment - control)
        with np.errstate(divide="ignore", invalid="ignore"):
            if self.scale == "ratio":
                return np.asarray(treatment / control)
            return np.asarray(treatment * (1 - control) / ((1 - treatment) * control))

    def outcomes(self, n: FloatArray, nuisance: Mapping[str, FloatArray], null: float, accuracy: Accuracy) -> TwoCounts:
        del accuracy  # both counts are enumerated
        sizes = tuple(float(size[0]) for size in self._sizes(n))
        return TwoCounts(
            sizes=(sizes[0], sizes[1]),
            control=nuisance["control"],
            null=float(self.working(np.asarray(null))),
            null_effect=null,
            treatment_of=lambda effect, control: self.treatment_of(effect, {"control": control}),
            effect_of=lambda treatment, control: self.effect_of(treatment, {"control": control}),
            transform=TRANSFORMS[self.scale],
            inverse=INVERSES[self.scale],
            conditional=self.analysis == "exact",
            rejects=self._rejects(sizes[0], sizes[1]),
        )

    def _rejects(self, n_treated: float, n_control: float) -> Any:
        """The analysis as a predicate on arrays of counts, true where the one-sided test rejects."""

        def rejects(x: FloatArray, y: FloatArray, value: float, level: float, side: Side) -> BoolArray:
            statistic = self._z(x / n_treated, y / n_control, n_treated, n_control, value)
            return np.asarray((statistic if side == "higher" else -statistic) >= -special.ndtri(level) * (1 - 1e-12))

        def by_fisher(x: FloatArray, y: FloatArray, value: float, level: float, side: Side) -> BoolArray:
            self._need_equality(value)
            lower, upper = conditional_bounds(int(n_treated), int(n_control), level, "central", y)
            total = (x + y).astype(int)
            return np.asarray(x > upper[total] if side == "higher" else x < lower[total])

        return by_fisher if self.analysis == "exact" else rejects

    def _z(self, p: FloatArray, q: FloatArray, n_treated: float, n_control: float, value: float) -> FloatArray:
        """Wald or pooled statistic; 0 / 0 (no variation, no difference) counts as 0 and never rejects."""
        factor = 1.0
        if self.analysis == "z":
            self._need_equality(value)
            pooled = (p * n_treated + q * n_control) / (n_treated + n_control)
            variance = pooled * (1 - pooled) * (1 / n_treated + 1 / n_control)
            gap = p - q
        else:
            if self.scale == "odds_ratio":
                self._need_equality(value)
            factor, shift = (value, 0.0) if self.ratio_scale else (1.0, value)
            variance = p * (1 - p) / n_treated + factor**2 * q * (1 - q) / n_control
            gap = p - factor * q - shift
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(np.abs(gap) < 1e-15, 0.0, gap / np.sqrt(np.maximum(variance, 0.0)))

    def _need_equality(self, value: float) -> None:
        if value != self.default_null:
            raise NotOffered(
                f"analysis '{self.analysis}' tests equal proportions on the {self.scale.replace('_', ' ')} scale, "
                f"not a null of {value:g}; use null = {self.default_null:g}, or analysis = 'z_unpooled' on the "
                "difference or ratio scale"
            )

    def forward(
        self, pm: Any, effect: Any, nuisance: Mapping[str, Any], n: int, shape: tuple[int, ...]
    ) -> dict[str, Any]:
        treated, control = (int(size) for size in self._sizes(np.asarray(float(n))))
        # control + (treatment - control) can round to just above 1
        share = pm.math.clip(self._symbolic_treatment(effect, nuisance["control"]), np.float64(0), np.float64(1))
        return {
            "treated_events": pm.Binomial("treated_events", n=treated, p=share, shape=shape),
            "control_events": pm.Binomial("control_events", n=control, p=nuisance["control"], shape=shape),
        }

    def _symbolic_treatment(self, effect: Any, control: Any) -> Any:
        if self.scale == "difference":
            return control + effect
        return control * effect if self.scale == "ratio" else effect * control / (1 - control + effect * control)

    def analyse(
        self, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray], n: int
    ) -> "TwoCountsAnalysis":
        treated, control = (int(size) for size in self._sizes(np.asarray(float(n))))
        return TwoCountsAnalysis(data["treated_events"], data["control_events"], treated, control, self)

    def symbolic_effect(self, treatment: Any, nuisance: Mapping[str, Any]) -> Any:
        control = nuisance["control"]
        if self.scale == "difference":
            return treatment - control
        return treatment / control if self.scale == "ratio" else treatment * (1 - control) / ((1 - treatment) * control)

    def decision_likelihood(
        self, pm: Any, nuisance: Mapping[str, Any], n: int, null: float, decides: Decides
    ) -> LogLikelihood:
        treated, control = (int(size) for size in self._sizes(np.asarray(float(n))))
        if (treated + 1) * (control + 1) > MOST_TABLES:
            raise NotOffered(
                f"NUTS sums over every table, up to {MOST_TABLES}; use --route integration for groups this large"
            )
        x, y = (np.arange(size + 1.0) for size in (treated, control))
        tables = dict(zip(("treated_events", "control_events"), np.meshgrid(x, y, indexing="ij"), strict=True))
        flat = {name: counts.ravel() for name, counts in tables.items()}
        chosen = decides(self.analyse(flat, nuisance, n)).reshape(len(x), len(y)).astype(float)
        if not chosen.any():
            raise NotOffered("this decision never falls, so there is no posterior given it")
        least = np.float64(1e-300)  # keeps the logarithm finite for a row of tables that never leads to the decision

        def log_probability(effect: Any) -> Any:
            share = self._symbolic_treatment(effect, nuisance["control"])
            given_x = pm.math.dot(chosen, pm.math.exp(log_binomial(pm, y, control, nuisance["control"])))
            return pm.math.logsumexp(log_binomial(pm, x, treated, share) + pm.math.log(given_x + least), keepdims=False)

        return log_probability


def _log_share(x: FloatArray, n: float) -> FloatArray:
    return np.asarray(np.log(np.where(x <= 0, 0.5 / (n + 1), x / n)))


def _log_odds(x: FloatArray, n: float) -> FloatArray:
    share = np.where((x <= 0) | (x >= n), (x + 0.5) / (n + 1), x / n)
    return np.asarray(np.log(share / (1 - share)))


TRANSFORMS = {"difference": lambda x, n: x / n, "ratio": _log_share, "odds_ratio": _log_odds}
INVERSES = {"difference": IDENTITY, "ratio": np.exp, "odds_ratio": special.expit}


@final
@dataclass(frozen=True, slots=True)
class TwoCountsAnalysis(Analysis):
    """z or Fisher test of each simulated table, by the distributions of scipy.stats."""

    treated: FloatArray
    control: FloatArray
    n_treated: int
    n_control: int
    design: TwoProportions

    @property
    def estimate(self) -> FloatArray:
        transform = TRANSFORMS[self.design.scale]
        return np.asarray(transform(self.treated, self.n_treated) - transform(self.control, self.n_control))

    def p_value(self, value: float, side: Literal["higher", "lower", "two"], tails: Tails) -> FloatArray:
        from scipy import stats

        if self.design.analysis != "exact":
            p, q = self.treated / self.n_treated, self.control / self.n_control
            if self.design.analysis == "z":
                pooled = (self.treated + self.control) / (self.n_treated + self.n_control)
                variance, gap = pooled * (1 - pooled) * (1 / self.n_treated + 1 / self.n_control), p - q
            else:
                times, minus = (value, 0.0) if self.design.ratio_scale else (1.0, value)
                variance = p * (1 - p) / self.n_treated + times**2 * q * (1 - q) / self.n_control
                gap = p - times * q - minus
            with np.errstate(divide="ignore", invalid="ignore"):
                z = np.nan_to_num(gap / np.sqrt(variance), posinf=np.inf, neginf=-np.inf)
            return np.asarray(
                2 * stats.norm.sf(np.abs(z)) if side == "two" else stats.norm.sf(z if side == "higher" else -z)
            )
        # one number for each table: np.unique over pairs takes twelve times as long
        key = self.treated.astype(np.int64) * (self.n_control + 1) + self.control.astype(np.int64)
        seen = np.unique(key)
        back = np.searchsorted(seen, key)
        x, y = np.divmod(seen, self.n_control + 1)
        if side == "two" and tails == "minimum_likelihood":
            exact = [
                stats.fisher_exact([[a, self.n_treated - a], [b, self.n_control - b]]).pvalue
                for a, b in zip(x, y, strict=True)
            ]
            return np.asarray(exact)[back]
        law = stats.hypergeom(self.n_treated + self.n_control, self.n_treated, x + y)
        higher, lower = law.sf(x - 1), law.cdf(x)
        both = np.minimum(1.0, 2 * np.minimum(higher, lower))
        return np.asarray({"higher": higher, "lower": lower, "two": both}[side])[back]
