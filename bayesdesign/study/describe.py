"""What a study says, in plain words, before anything is computed: for the command `check`."""

import dataclasses

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.prior.base import Distribution
from bayesdesign.prior.nodes import nuisance_nodes
from bayesdesign.prior.point import Point
from bayesdesign.study.study import Study

LEVELS = (0.05, 0.5, 0.95)
GRID = 2000  # equally likely points of the prior on one arm; quantiles of the effect get three digits right


def describe(study: Study) -> list[str]:
    """Sentences in the order of the study file's sections; each can stand alone, and the caller wraps it."""
    return [
        *([f"Question: {study.question}"] if study.question else []),
        *_effect(study),
        *_design(study),
        *_prior(study),
        *_rule(study),
        *_target(study),
    ]


def _figure(value: float) -> str:
    return f"{value:.4g}"


def _natural(value: float, study: Study) -> str:
    """A value of the effect with its unit."""
    unit = "" if study.design.ratio_scale else study.effect.unit
    return f"{_figure(value)} {unit}".rstrip()


def _label(key: str) -> str:
    return key.replace("_", " ")


def _effect(study: Study) -> list[str]:
    words = study.design.effect_words
    null, effect = study.null, study.effect
    good = {
        "higher": f"Values above {_figure(null)} are good news.",
        "lower": f"Values below {_figure(null)} are good news.",
        "either": "A difference in either direction counts as favourable.",
    }[study.favourable]
    said = [f"What is asked: {words}, against {_natural(null, study)}. {good}"]
    if effect.smallest_relevant is not None:
        low, high = _relevant(study)
        said.append(f"It is relevant from {_natural(high, study)} upwards or {_natural(low, study)} downwards.")
    if effect.planning_value is not None:
        said.append(f"The one guess for a classical power calculation is {_natural(effect.planning_value, study)}.")
    return said


def _relevant(study: Study) -> tuple[float, float]:
    """The effects from which on a deviation from the null is relevant."""
    least = study.effect.smallest_relevant or 0.0
    return (
        (study.null / least, study.null * least)
        if study.design.ratio_scale
        else (study.null - least, study.null + least)
    )


def _design(study: Study) -> list[str]:
    design = study.design
    n = design.planned_n
    sizes = ", ".join(f"{_label(key)} {size}" for key, size in design.group_sizes(n).items()) if n is not None else ""
    analysis = getattr(design, "analysis", "")
    known = [_label(design.family), sizes, f"analysis {_label(analysis)}" if analysis else ""]
    said = [f"Design {', '.join(filter(None, known))}."]
    for name, belief in design.nuisance.items():
        if isinstance(belief, Point):
            said.append(f"The {_label(name)} is taken to be exactly {_figure(belief.value)}.")
        else:
            said.append(f"The {_label(name)} is uncertain: {belief.describe()}; {_quantiles(belief)}.")
    return said


def _quantiles(belief: Distribution, unit: str = "") -> str:
    """The 5, 50 and 95 per cent points."""
    low, middle, high = belief.ppf(np.array(LEVELS))
    return _spread(low, middle, high, unit)


def _spread(low: float, middle: float, high: float, unit: str) -> str:
    text = f"5% below {_figure(low)}, half below {_figure(middle)}, 95% below {_figure(high)}"
    return f"{text} ({unit})" if unit else text


def _prior(study: Study) -> list[str]:
    prior, unit = study.prior, "" if study.design.ratio_scale else study.effect.unit
    weight = study.exact_null_weight
    given = f" if it is not exactly {_figure(study.null)}" if prior.probability_null > 0 else ""
    variable = prior.variable
    arm = prior.treatment is not None
    what = f"the {'treated arm' if arm else 'effect'}{given}"
    opening = f"Before the study, {what} is believed to be: {variable.describe()}"
    said = [
        f"{opening}." if isinstance(variable, Point) else f"{opening}; {_quantiles(variable, '' if arm else unit)}."
    ]
    if arm:
        said.append(f"With the control arm, this makes the effect {_spread(*_implied(study), unit)}.")
    if weight > 0:
        said.append(f"The prior weight on an effect of exactly {_natural(study.null, study)} is {_figure(weight)}.")
    else:
        said.append(f"The prior puts no weight on an effect of exactly {_natural(study.null, study)}.")
    return said


def _implied(study: Study) -> tuple[float, float, float]:
    """The 5, 50 and 95 per cent points of the effect that beliefs on both arms imply."""
    nodes, weight = nuisance_nodes(study.design.nuisance, 24)
    points = study.prior.variable.ppf((np.arange(GRID) + 0.5) / GRID)
    every = {name: np.repeat(values, GRID) for name, values in nodes.items()}
    effect = study.design.effect_of(np.tile(points, len(weight)), every)
    return _weighted(effect, np.repeat(weight, GRID) / GRID)


def _weighted(values: FloatArray, weight: FloatArray) -> tuple[float, float, float]:
    order = np.argsort(values)
    below = np.cumsum(weight[order])
    low, middle, high = (float(values[order][np.searchsorted(below, level)]) for level in LEVELS)
    return low, middle, high


def _rule(study: Study) -> list[str]:
    rule = study.rule
    good = [_label(name) for name in rule.favourable(study.favourable)]
    decisions = ", ".join(_label(name) for name in rule.decisions)
    favourable = (
        f"the favourable: {' or '.join(good)}" if good else "none of them is favourable, so this study cannot succeed"
    )
    states = ", ".join(_label(name) for name in study.states.names)
    return [
        f"The rule is {rule_words(study)}. Its decisions: {decisions}; {favourable}.",
        f"The truth may be in one of these states: {states}.",
    ]


def rule_words(study: Study) -> str:
    """The rule with its settings, e.g. `significance, alpha 0.05, sides two`."""
    rule = study.rule
    settings = []
    for field in dataclasses.fields(rule):  # type: ignore[arg-type]
        value = getattr(rule, field.name)
        if value is None or (value == field.default and isinstance(value, str) and field.name == "tails"):
            continue
        text = (
            value.describe()
            if isinstance(value, Distribution)
            else f"{value:g}"
            if isinstance(value, float)
            else _label(str(value))
        )
        settings.append(f"{_label(field.name)} {text}")
    return ", ".join([_label(rule.kind), *settings])


def _target(study: Study) -> list[str]:
    target = study.target
    if target is None:
        return []
    side, bound = ("at least", target.at_least) if target.at_least is not None else ("at most", target.at_most)
    said = f"The target: {_label(target.measure)} of {side} {_figure(bound if bound is not None else np.nan)}"
    label = _label(study.design.n_label)
    return [f"{said}, with {label} up to {target.max_n}."]
