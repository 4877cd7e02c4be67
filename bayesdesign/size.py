"""`size`: the smallest n that meets the target, found and not approximated."""

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from bayesdesign.core.errors import Fault, StudyError
from bayesdesign.core.search import Found, SawTooth, monotone_search, saw_tooth_search
from bayesdesign.evaluate import DRAWS, SEED, TOLERANCE, Route, evaluate
from bayesdesign.joint.integration import integrate
from bayesdesign.joint.refined import at_planning_value, integrated, refine
from bayesdesign.joint.table import Cells, cells
from bayesdesign.measures.ratios import Ratio, planning_readings, readings
from bayesdesign.result import Result, SizeAnswer

if TYPE_CHECKING:
    from bayesdesign.core.arrays import FloatArray
    from bayesdesign.study.study import Study, Target

# measures that never exceed their limit by more than a trace
BOUNDED = ("assurance", "assurance_true_effect", "expected_power", "average_power", "power_at_planning_value")
QUICK = (1e-5, 1e-7)  # changes between refinements that are enough where the target is further off
CLEAR = 1e-9  # a measure this close below its target counts as meeting it
PLANNING = ("power_at_planning_value", "type_s_at_planning_value", "exaggeration_at_planning_value")
COSTLY_N = 1_000  # sizes beyond which a search that cannot succeed stops for designs with counts


def size(
    study: "Study",
    *,
    route: Route = "integration",
    seed: int = SEED,
    draws: int = DRAWS,
    tolerance: float = TOLERANCE,
) -> Result:
    """The least n that meets `study.target`, with everything at that n.

    `result.size` holds the first n that meets the target and, since designs with counts go up and down with n, the n
    from which every larger one (up to `searched_to`) does. Where the limit of the measure misses the target no n is
    claimed. The search is by integration; `route` is for the numbers at the n found.

    Raises:
        StudyError: no `[target]`, or a design without n.
        Refused: as `evaluate`.
    """
    target = study.target
    if target is None:
        raise StudyError(
            [
                Fault(
                    where="[target] measure", problem="missing", allowed="size needs a measure with at_least or at_most"
                )
            ],
            study.file,
        )
    if study.design.planned_n is None:
        raise StudyError(
            [
                Fault(
                    where="[design] standard_error",
                    problem="this design has no n to search",
                    allowed="give n and unit_sd instead",
                )
            ],
            study.file,
        )
    ceiling = limit_of(study, target.measure)
    found = _search(study, target, ceiling, tolerance)
    sizes = [found.first] if found.first is not None else [study.design.planned_n]
    if found.safe is not None and found.safe != found.first:
        sizes.append(found.safe)
    result = evaluate(study, sizes, route=route, seed=seed, draws=draws, tolerance=tolerance)
    achieved = None if found.first is None else result.answers[0].quantities[target.measure].value
    answer = SizeAnswer(
        measure=target.measure,
        target=_bound(target),
        direction="at_least" if target.at_least is not None else "at_most",
        first_n=found.first,
        safe_n=found.safe,
        achieved=achieved if isinstance(achieved, float) else None,
        ceiling=ceiling,
        searched_to=found.searched_to,
    )
    return replace(result, command="size", size=answer)


def _bound(target: "Target") -> float:
    return target.at_least if target.at_least is not None else float(target.at_most or 0.0)


def _margin(target: "Target", values: "FloatArray") -> "FloatArray":
    """How far the target is met; NaN counts as far from it."""
    gap = values - _bound(target) if target.at_least is not None else _bound(target) - values
    return np.nan_to_num(gap, nan=-1.0) + CLEAR


def _search(study: "Study", target: "Target", ceiling: float | None, tolerance: float) -> Found:
    least, step = study.design.minimum_n, study.design.sizes_at_once

    def margins(sizes: list[int]) -> list[float]:
        blocks = [sizes[i : i + step] for i in range(0, len(sizes), step)]
        values = [
            _margin(target, measured(study, block, target.measure, tolerance, _bound(target))) for block in blocks
        ]
        return [float(m) for block in values for m in block]

    most = target.max_n
    if not study.design.saw_tooth:
        return monotone_search(lambda sizes: [m >= 0 for m in margins(sizes)], least, most)
    bounded = target.at_least is not None and target.measure in BOUNDED
    hopeless = bounded and ceiling is not None and _margin(target, np.array(ceiling)) < 0
    return saw_tooth_search(
        SawTooth(
            margins,
            least,
            min(most, max(COSTLY_N, least)) if hopeless else most,
            lambda n: study.design.tooth(n, study.null),
        )
    )


def measured(study: "Study", n: Sequence[int], name: str, tolerance: float, bound: float | None = None) -> "FloatArray":
    """One measure at several n, by integration; no finer than it takes to tell on which side of `bound` it lies."""
    if name == "exaggeration_median":
        return integrated(study, n, tolerance).by_name[name].value
    fixed, every = (at_planning_value(study), planning_readings) if name in PLANNING else (study, readings)
    if isinstance(fixed, str):
        raise StudyError(
            [Fault(where="[target] measure", problem="cannot be computed", got=name, allowed=fixed)], study.file
        )

    def read(c: Cells, s: "Study") -> dict[str, Ratio]:
        return {name: every(c, s)[name]}

    if bound is None:
        return refine(fixed, n, read, tolerance).numbers[name].value
    for goal in QUICK:
        quick = refine(fixed, n, read, tolerance=1.0, goal=goal).numbers[name]
        if not (np.abs(quick.value - bound) < 5 * np.maximum(quick.error, CLEAR)).any():
            return quick.value
    return refine(fixed, n, read, tolerance).numbers[name].value


def limit_of(study: "Study", name: str) -> float | None:
    """Limit of a measure as n grows without bound: the readings of the table in which every decision is the limiting
    one.
    """
    if name == "exaggeration_median":
        return 1.0
    fixed = at_planning_value(study) if name in PLANNING else study
    if isinstance(fixed, str):
        return None
    table = integrate(fixed, [study.design.planned_n], 2)
    limiting = replace(table, probability=table.limit, absolute=table.limit * np.abs(table.distance)[..., None])
    read = planning_readings if name in PLANNING else readings
    value = float(read(cells(limiting), fixed)[name].value[0, 0])
    return value if np.isfinite(value) else None
