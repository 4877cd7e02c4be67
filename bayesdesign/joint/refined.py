"""The integration route with its error: the table is computed on finer and finer nodes until the readings stand
still.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray
from bayesdesign.core.errors import StudyError
from bayesdesign.joint.integration import LEVELS, Setting, integrate, set_up
from bayesdesign.joint.median import median_multiple
from bayesdesign.joint.numbers import POWER_LEVELS, Number, Numbers, missing
from bayesdesign.joint.power import FLAT, power_quantiles
from bayesdesign.joint.table import Cells, Joint, cells
from bayesdesign.measures.ratios import Ratio, planning_readings, readings
from bayesdesign.prior.point import Point
from bayesdesign.study.study import Prior, Study

GOAL = 5e-9  # change from one refinement to the next at which the route stops by default
COSTLY = 8_000_000  # elements of one table beyond which the tolerance itself is enough
SAFETY = (
    8.0  # stated error over last change: with heavy tails and few degrees of freedom a level gains less than one digit
)
MEMORY = 0.15  # share of the change before that is kept in the error of designs with counts
ROUNDING = 1e-13  # what accumulates in sums of some hundred terms, relative to the condition's probability

NO_MEAN = "the prior has no mean, so the ratio of expectations does not exist; see the median"
NO_CLAIM = "the rule never claims an effect that is not exactly null"

type Reader = Callable[[Cells, Study], dict[str, Ratio]]


def integrated(study: Study, n: Sequence[int | None], tolerance: float) -> Numbers:
    """Every quantity of the study at these sizes, by integration."""
    main = refine(study, n, _existing, tolerance)
    by_name = dict(main.numbers)
    by_name |= _planning(study, n, tolerance)
    by_name |= _distributions(study, main)
    return Numbers(by_name=by_name, cells=main.cells, cells_error=main.cells_error, joint=main.joint)


def _existing(sums: Cells, study: Study) -> dict[str, Ratio]:
    """The readings whose expectations exist; an infinite one would never stand still."""
    every = readings(sums, study)
    if not np.isfinite(study.prior.variable.expectation()):
        del every["exaggeration_ratio"]
    return every


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Refined:
    """Ratio readings at the last level, their change from the level before, and the tables of both levels."""

    numbers: dict[str, Number]
    cells: FloatArray
    cells_error: FloatArray
    joint: Joint
    level: int


def refine(study: Study, n: Sequence[int | None], read: Reader, tolerance: float, goal: float = GOAL) -> Refined:
    """Raise the level until no reading changes by more than the goal, or the last level is reached."""
    goal = min(goal, tolerance)
    before = cells(integrate(study, n, 0))
    last: dict[str, Number] = {}
    for level in range(1, len(LEVELS)):
        joint = integrate(study, n, level)
        now = cells(joint)
        numbers = _with_errors(read(now, study), read(before, study), 1.0 if study.design.saw_tooth else SAFETY)
        if study.design.saw_tooth:
            numbers, last = _no_luck(numbers, last), numbers
        cells_error = np.abs(now.by_state - before.by_state)[:, 0] + ROUNDING
        if _all_settled(numbers, goal):
            break
        costly = joint.effect.size * joint.work > COSTLY
        if costly and _all_settled(numbers, tolerance / 2):
            break
        if level + 1 < len(LEVELS):
            before = now
    return Refined(numbers=numbers, cells=now.by_state[:, 0], cells_error=cells_error, joint=joint, level=level)


def _no_luck(numbers: dict[str, Number], last: dict[str, Number]) -> dict[str, Number]:
    """With counts the change from level to level is partly chance, so one small change does not count against a
    large one before.
    """
    return {
        name: replace(number, error=np.fmax(number.error, last[name].error * MEMORY)) if name in last else number
        for name, number in numbers.items()
    }


def _all_settled(numbers: dict[str, Number], goal: float) -> bool:
    return all(bool(_settled(number, goal).all()) for number in numbers.values())


def _settled(number: Number, goal: float) -> BoolArray:
    """Whether the error is within the goal, relative to the number, or cannot be brought there because its condition
    is rare.
    """
    scale = np.maximum(1.0, np.abs(np.nan_to_num(number.value))) / np.maximum(np.minimum(number.weight, 1.0), 1e-4)
    return np.asarray(~np.isfinite(number.value) | (number.error <= goal * scale))


def _with_errors(now: dict[str, Ratio], before: dict[str, Ratio], safety: float) -> dict[str, Number]:
    numbers = {}
    for name, ratio in now.items():
        value, old = ratio.value[:, 0], before[name].value[:, 0]
        weight = ratio.denominator[:, 0]
        with np.errstate(invalid="ignore", divide="ignore"):
            rounding = ROUNDING * np.maximum(
                1.0, np.abs(value)
            )  # sums of positive terms keep their digits, rare or not
            numbers[name] = Number(value, safety * np.abs(value - old) + rounding, ratio.why_null, weight)
    return numbers


def _planning(study: Study, n: Sequence[int | None], tolerance: float) -> dict[str, Number]:
    names = ("power_at_planning_value", "type_s_at_planning_value", "exaggeration_at_planning_value")
    fixed = at_planning_value(study)
    if isinstance(fixed, str):
        return {name: missing(len(n), fixed) for name in names}
    numbers = refine(fixed, n, planning_readings, tolerance).numbers
    if study.is_null(study.effect.planning_value or np.nan):
        why = "the planning value is the null itself"
        numbers |= {name: missing(len(n), why) for name in names[1:]}
    return numbers


def at_planning_value(study: Study) -> Study | str:
    """The study with its effect fixed at the planning value, or the sentence that says why there is none."""
    value = study.effect.planning_value
    if value is None:
        return "[effect] planning_value is not given"
    try:
        return replace(study, prior=Prior(effect=Point(value=value)))
    except StudyError:
        return "the planning value is impossible for part of the nuisance prior"


def _distributions(study: Study, main: Refined) -> dict[str, Number]:
    """The median exaggeration and the quantiles of power, which are no ratios of sums."""
    ratio = main.numbers.get("exaggeration_ratio", missing(len(main.joint.n), NO_MEAN))
    # a search costs many tables, and the two coarsest already agree to six digits
    fine, coarse = set_up(study, main.joint.n, 1), set_up(study, main.joint.n, 0)
    power, change = _power(study, main.joint.n, fine, coarse)
    near = median_multiple(coarse)
    median = median_multiple(fine, near)
    rough = fine.outcomes.rough_error
    change_of_median = _change(median, near) * (3 if rough else 1) + rough
    return {
        "exaggeration_ratio": ratio,
        "exaggeration_median": Number(median, change_of_median, NO_CLAIM),
        "power_quantiles": Number(power, change),
    }


def _power(study: Study, n: Sequence[int | None], fine: Setting, coarse: Setting) -> tuple[FloatArray, FloatArray]:
    """Quantiles of power and their change from a coarser grid."""
    uncertain = [belief for belief in study.design.nuisance.values() if belief.breaks().size]
    if len(uncertain) == 1:  # a distribution over few nodes of the nuisance has steps: take panels, and many nodes
        fine, coarse = set_up(study, n, 1, fine_nuisance=4), set_up(study, n, 0, fine_nuisance=3)
    power = power_quantiles(fine, POWER_LEVELS)
    return power, np.abs(power - power_quantiles(coarse, POWER_LEVELS)) + FLAT


def _change(now: FloatArray, before: FloatArray) -> FloatArray:
    with np.errstate(invalid="ignore"):
        return np.abs(now - before) + 1e-11 * np.maximum(1.0, np.abs(now))
