"""`evaluate`: the decision table and every quantity of a study, at one n or many, by either route or both."""

import platform
import sys
from collections.abc import Sequence
from importlib import metadata
from typing import Any, Literal

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Fault, Refused, StudyError
from bayesdesign.joint.numbers import POWER_LEVELS, Number, Numbers
from bayesdesign.joint.refined import integrated
from bayesdesign.result import Answer, Comparison, DecisionTable, Quantity, Result, Value
from bayesdesign.study.study import Study

type Route = Literal["integration", "sampling", "both"]

SEED = 20260101
DRAWS = 1_000_000
TOLERANCE = 1e-6
# Judged one by one, by `COARSE`, instead of refusing the run: the multiples and quantiles, which are no probabilities.
ON_THEIR_OWN = ("exaggeration_ratio", "exaggeration_at_planning_value", "exaggeration_median", "power_quantiles")
RARE = 1e-4  # a number under a condition less likely than this is withheld on its own, too
COARSE = 5e-3  # relative error beyond which one of those is withheld
DISAGREEMENT = 5.0  # standard errors between the routes beyond which both numbers are refused


def evaluate(
    study: Study,
    n: int | Sequence[int] | None = None,
    *,
    route: Route = "integration",
    seed: int = SEED,
    draws: int = DRAWS,
    tolerance: float = TOLERANCE,
) -> Result:
    """The joint decision table of a study and every reading of it.

    Args:
        study: the study.
        n: one or several sizes in the family's own n; the study's own when omitted.
        route: `integration` (exact up to a stated error), `sampling` (PyMC draws with standard errors) or `both`,
        compared. seed: seed of the sampling route, recorded either way.
        draws: simulated studies of the sampling route.
        tolerance: integration error, relative to max(1, value), beyond which a number is refused.

    Returns:
        The result; `result.joint` is the labelled table, `result.quantities` the numbers at the first n.

    Raises:
        StudyError: an n that the design cannot have.
        Refused: a number misses the tolerance, or the routes disagree by more than 5 standard errors.
    """
    sizes = resolve_sizes(study, n)
    answers: list[Answer] = []
    tables: list[Any] = []
    step = study.design.sizes_at_once
    for start in range(0, len(sizes), step):
        block = sizes[start : start + step]
        exact = integrated(study, block, tolerance) if route != "sampling" else None
        if exact is not None:
            check_tolerance(exact, tolerance)
        drawn = _sampled(study, block, seed, draws) if route != "integration" else None
        answers += _answers(study, block, exact, drawn, tolerance)
        tables.append((exact or _given(drawn)).joint)
    check_agreement(answers)
    from bayesdesign.messages import messages_for

    return Result(
        study=study, command="evaluate", answers=answers, messages=messages_for(study, answers),
        provenance=provenance(seed, draws if route != "integration" else None), tables=tables,
    )  # fmt: skip


def resolve_sizes(study: Study, n: int | Sequence[int] | None) -> list[int | None]:
    """The sizes asked for, checked; the study's own when none are."""
    if n is None:
        return [study.design.planned_n]
    wanted = [n] if isinstance(n, int | np.integer) else list(n)
    least, label = study.design.minimum_n, study.design.n_label
    if study.design.planned_n is None:
        raise StudyError(
            [
                Fault(
                    where="--n", problem="this design has no n", allowed="give n and unit_sd instead of standard_error"
                )
            ],
            study.file,
        )
    faults = [
        Fault(
            where="--n",
            problem="not a possible size",
            got=str(k),
            allowed=f"whole numbers of at least {least} ({label})",
        )
        for k in wanted
        if isinstance(k, bool) or not isinstance(k, int | np.integer) or k < least
    ]
    if faults or not wanted:
        raise StudyError(
            faults or [Fault(where="--n", problem="empty", allowed="one whole number or more")], study.file
        )
    return [int(k) for k in wanted]


def _sampled(study: Study, block: list[int | None], seed: int, draws: int) -> Numbers:
    from bayesdesign.joint.sampling import sampled

    return sampled(study, block, seed, draws)


def _given(numbers: Numbers | None) -> Numbers:
    assert numbers is not None
    return numbers


def check_tolerance(numbers: Numbers, tolerance: float) -> None:
    """Refuse when a number's integration error exceeds the tolerance."""
    for name, number in numbers.by_name.items():
        if name in ON_THEIR_OWN:
            continue
        value = np.nan_to_num(number.value, posinf=0.0)
        counts = np.isfinite(number.value) & (np.asarray(number.weight) >= RARE)
        excess = np.where(counts, number.error, 0.0) / np.maximum(1.0, np.abs(value))
        if np.max(excess) > tolerance:
            raise Refused(
                f"{name}: integration error {np.max(excess):.2g} exceeds the tolerance {tolerance:.2g}",
                "try --route sampling, or accept a larger --tolerance",
            )


def check_agreement(answers: Sequence[Answer]) -> None:
    """Refuse when the two routes differ beyond chance."""
    for answer in answers:
        for name, comparison in answer.cross_check.items():
            if abs(comparison.z) > DISAGREEMENT:
                raise Refused(
                    f"{name} at n = {answer.n}: the routes disagree, integration {comparison.integration:.6g}, "
                    f"sampling {comparison.sampling:.6g}, {comparison.z:+.1f} standard errors apart",
                    "try another --seed and more --draws; if it stays, please report the study file",
                )


def _answers(
    study: Study, block: list[int | None], exact: Numbers | None, drawn: Numbers | None, tolerance: float
) -> list[Answer]:
    shown = _given(exact or drawn)
    route = "integration" if exact is not None else "sampling"
    return [
        Answer(
            n=n,
            sizes=study.design.group_sizes(n) if n is not None else {},
            quantities={name: quantity(number, i, route, tolerance) for name, number in ordered(shown.by_name).items()},
            table=decision_table(study, shown.cells[i]),
            cross_check=_comparisons(exact, drawn, i) if exact is not None and drawn is not None else {},
        )
        for i, n in enumerate(block)
    ]


ORDER = (
    "assurance",
    "assurance_true_effect",
    "expected_power",
    "assurance_ceiling",
    "power_at_planning_value",
    "power_quantiles",
    "type_1_rate",
    "specificity",
    "type_2_rate",
    "average_power",
    "false_positive_risk",
    "false_negative_risk",
    "type_s_rate",
    "exaggeration_ratio",
    "exaggeration_median",
    "type_s_at_planning_value",
    "exaggeration_at_planning_value",
)


def ordered(by_name: dict[str, Number]) -> dict[str, Number]:
    """Quantities in the order of the contract."""
    return {name: by_name[name] for name in ORDER if name in by_name}


def quantity(number: Number, i: int, route: str, tolerance: float) -> Quantity:
    """The number at the i-th size; what is not finite becomes None with its reason."""
    value, error = number.value[i], number.error[i]
    rare = (
        route == "integration"
        and np.ndim(value) == 0
        and bool(np.broadcast_to(number.weight, number.value.shape)[i] < RARE)
    )
    if rare and np.isfinite(value) and error > tolerance * max(1.0, abs(value)):
        why = f"its condition is so unlikely that the integration error {error:.2g} exceeds the tolerance"
        return Quantity(value=None, error=None, route=route, why_null=why)
    if route == "integration" and np.max(error) > COARSE * max(1.0, float(np.max(np.abs(value)))):
        why = f"its integration error {np.max(error):.2g} is too large; use --route sampling"
        return Quantity(value=None, error=None, route=route, why_null=why)
    if np.ndim(value):
        return Quantity(value=_by_level(value), error=_by_level(error), route=route)
    if 1 < value < 1 + 1e-12:
        value = 1.0  # a certainty, summed
    if np.isfinite(value):
        return Quantity(value=float(value), error=float(error), route=route)
    why = "infinite" if np.isinf(value) else number.why_null or "undefined"
    return Quantity(value=None, error=None, route=route, why_null=why)


def _by_level(values: FloatArray) -> Value:
    return {f"{level:g}": float(v) for level, v in zip(POWER_LEVELS, values, strict=True)}


def decision_table(study: Study, joint: FloatArray) -> DecisionTable:
    """Cell probabilities (S, D) with both conditionals."""
    rows, columns = joint.sum(axis=1), joint.sum(axis=0)
    given_state = [(row / total).tolist() if total > 0 else None for row, total in zip(joint, rows, strict=True)]
    given_decision = [
        [float(cell / total) if total > 0 else None for cell, total in zip(row, columns, strict=True)] for row in joint
    ]
    return DecisionTable(
        states=study.states.names, decisions=study.rule.decisions, joint=joint.tolist(),
        given_state=given_state, given_decision=given_decision,
    )  # fmt: skip


def _comparisons(exact: Numbers, drawn: Numbers, i: int) -> dict[str, Comparison]:
    found = {}
    for name, number in ordered(exact.by_name).items():
        other = drawn.by_name.get(name)
        if other is None:
            continue
        both = np.hypot(number.error[i], other.error[i])
        pairs = [(name, number.value[i], other.value[i], both)]
        if np.ndim(number.value[i]):
            pairs = [
                (f"{name}[{level:g}]", number.value[i, j], other.value[i, j], both[j])
                for j, level in enumerate(POWER_LEVELS)
            ]
        for label, one, two, error in pairs:
            if np.isfinite(one) and np.isfinite(two) and np.isfinite(error):
                gap = float(two - one)
                z = gap / float(error) if error > 0 else (0.0 if abs(gap) < 1e-9 else np.copysign(1e9, gap))
                found[label] = Comparison(integration=float(one), sampling=float(two), mcse=float(error), z=float(z))
    return found


def provenance(seed: int, draws: int | None) -> dict[str, Any]:
    """What is needed to get the same bytes again."""
    packages = ["numpy", "scipy", "pydantic", "xarray"]
    if draws is not None:
        packages += ["pymc", "pytensor", "nutpie", "arviz"]
    return {
        "version": metadata.version("bayesdesign-toolkit"),
        "seed": seed,
        **({"draws": draws} if draws is not None else {}),
        "python": platform.python_version(),
        "platform": sys.platform,
        "packages": {name: metadata.version(name) for name in packages},
    }
