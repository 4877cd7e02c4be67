"""The sampling route: studies drawn from a PyMC model and decided one by one, as an analyst would.

It shares with the integration route only the names of states and decisions and the readings of the table: no
region, no critical value and no node. Each draw is a row of the joint table with weight 1 / draws and
probability 1 in one column.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any, final

import numpy as np

from bayesdesign.core.arrays import BoolArray, FloatArray, IntArray
from bayesdesign.core.errors import Refused
from bayesdesign.joint.integration import distances
from bayesdesign.joint.monte_carlo import (
    BATCHES,
    cells_error,
    jackknife,
    power_quantile,
    quantile,
    quantile_error,
)
from bayesdesign.joint.numbers import POWER_LEVELS, Number, Numbers, missing
from bayesdesign.joint.refined import Reader, at_planning_value
from bayesdesign.joint.table import Cells, Joint, cells
from bayesdesign.measures.ratios import Frame, planning_readings, readings
from bayesdesign.study.study import Study

# Rows, over all n of a call, of the table that goes with the result (bounds memory; numbers use all draws).
KEPT = 1_000_000
ROUNDS = 100  # draws of the prior after which a truth that is still impossible ends the run
PLANNING = ("power_at_planning_value", "type_s_at_planning_value", "exaggeration_at_planning_value")
NEVER = "the rule never claims an effect that is not exactly null"
NO_MEAN = "the prior has no mean, so the ratio of expectations does not exist; see the median"


def sampled(study: Study, n: Sequence[int | None], seed: int, draws: int) -> Numbers:
    """Every quantity of the study at these sizes, with Monte Carlo standard errors.

    `draws` is raised to a multiple of 100 (the batches of the standard errors). The same seed gives the same
    numbers in any process; each n has its own stream, derived from the seed and n alone, so that it does not
    matter which others are asked for. Raises `Refused` when the prior hardly ever gives a possible truth.
    """
    draws = max(1, -(-draws // BATCHES)) * BATCHES
    runs = [_run(study, size, np.random.SeedSequence(seed, spawn_key=(size or 0,)), draws) for size in n]
    rows = max(BATCHES, KEPT // len(runs))
    return Numbers(
        by_name={name: _beside([run.numbers[name] for run in runs]) for name in runs[0].numbers},
        cells=np.concatenate([run.cells for run in runs]),
        cells_error=np.concatenate([run.cells_error for run in runs]),
        joint=_stacked([run.joint for run in runs], min(rows, draws)),
    )


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Truths:
    """Drawn effects and nuisance parameters, each (T,)."""

    effect: FloatArray
    nuisance: dict[str, FloatArray]

    def repeated(self, times: int) -> "Truths":
        """Every truth `times` times in a row."""
        return Truths(
            effect=np.repeat(self.effect, times),
            nuisance={name: np.repeat(value, times) for name, value in self.nuisance.items()},
        )


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """`count` truths to be drawn from the prior of a study; `real` leaves out those exactly null."""

    study: Study
    count: int
    real: bool = False


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Decided:
    """Truths, the decision each simulated study led to, and its estimate on the working scale, each (T,)."""

    truths: Truths
    decision: IntArray
    estimate: FloatArray


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Run:
    """All numbers at one n, each with leading axis 1."""

    numbers: dict[str, Number]
    cells: FloatArray
    cells_error: FloatArray
    joint: Joint


def _run(study: Study, n: int | None, seed: np.random.SeedSequence, draws: int) -> Run:
    """Draw the truths of all three blocks at once, then all their studies at once, and read the tables."""
    fixed = at_planning_value(study)
    outer = inner = 2 * max(1, int(np.sqrt(draws)) // 2)  # even, so that the studies of one truth have two halves
    without_spike = replace(study, prior=replace(study.prior, probability_null=0.0))
    nested = Block(study=without_spike, count=outer, real=_spread(study))
    blocks = [Block(study=study, count=draws), nested]
    if isinstance(fixed, Study):
        blocks.append(Block(study=fixed, count=draws))
    of_truths, of_studies = seed.spawn(2)
    main, outer_truths, *planned = _truths(blocks, of_truths)
    parts = _studies(study, n, [main, outer_truths.repeated(inner), *planned], of_studies)
    table = _joint(study, n, parts[0])
    batches = cells(table, BATCHES)
    numbers = _numbers(study, batches, readings, draws)
    favourable = np.flatnonzero(Frame.of(study).favourable)
    successes = np.isin(parts[1].decision, favourable).reshape(outer, 2, inner // 2)
    if isinstance(fixed, Study):
        numbers |= _at_planning_value(fixed, _joint(fixed, n, parts[2]), draws)
    else:
        numbers |= {name: missing(1, fixed) for name in PLANNING}
    if not np.isfinite(study.prior.variable.expectation()):
        numbers["exaggeration_ratio"] = missing(1, NO_MEAN)
    numbers["exaggeration_median"] = _median(study, table)
    numbers["power_quantiles"] = _power(successes, POWER_LEVELS)
    return Run(
        numbers=numbers,
        cells=batches.by_state.sum(axis=1),
        cells_error=cells_error(batches, draws),
        joint=table,
    )


def _truths(blocks: Sequence[Block], seed: np.random.SeedSequence) -> list[Truths]:
    """Truths of every block.

    A pair of effect and nuisance that cannot exist is drawn anew, as the integration route leaves it out.
    """
    null, drawn = _prior_draws(blocks, [block.count for block in blocks], seed.spawn(1)[0])
    usable = [_usable(block, found) | at_null for block, found, at_null in zip(blocks, drawn, null, strict=True)]
    truths = [
        Truths(effect=np.where(at_null, block.study.null, found.effect), nuisance=found.nuisance)
        for block, found, at_null in zip(blocks, drawn, null, strict=True)
    ]
    for _ in range(ROUNDS):
        gaps = [np.flatnonzero(~good) for good in usable]
        if not any(len(gap) for gap in gaps):
            return truths
        # as many as are likely to fill the gaps; the possible ones are used in the order in which they came
        counts = [
            min(4 * block.count, int(1.2 * len(gap) / max(good.mean(), 0.02)) + 20) if len(gap) else 1
            for block, gap, good in zip(blocks, gaps, usable, strict=True)
        ]
        _, more = _prior_draws(blocks, counts, seed.spawn(1)[0])
        for block, gap, new, into, good in zip(blocks, gaps, more, truths, usable, strict=True):
            found = np.flatnonzero(_usable(block, new))[: len(gap)]
            place = gap[: len(found)]
            into.effect[place] = new.effect[found]
            for name, value in into.nuisance.items():
                value[place] = new.nuisance[name][found]
            good[place] = True
    raise Refused(
        "the prior hardly ever gives a possible truth",
        "narrow [prior] or a nuisance parameter with truncated = [low, high]",
    )


def _spread(study: Study) -> bool:
    """Whether the prior's own distribution can give an effect that is not exactly null."""
    values, masses = study.prior.variable.atoms()
    at_null = [study.prior.treatment is None and study.is_null(float(value)) for value in values]
    return float(masses[at_null].sum()) < 1 - 1e-12


def _prior_draws(
    blocks: Sequence[Block], counts: Sequence[int], seed: np.random.SeedSequence
) -> tuple[list[BoolArray], list[Truths]]:
    """For every block, which truths are null by `probability_null`, and draws, possible or not."""
    import pymc as pm

    variables = []
    with pm.Model():
        for i, (block, count) in enumerate(zip(blocks, counts, strict=True)):
            prior, nuisance = block.study.prior, block.study.design.nuisance
            variables.append(
                {
                    "null": pm.Bernoulli(f"null_{i}", p=np.float64(prior.probability_null), shape=(count,)),
                    "variable": prior.variable.random_variable(pm, f"variable_{i}", (count,)),
                    **{f"by {k}": belief.random_variable(pm, f"{k}_{i}", (count,)) for k, belief in nuisance.items()},
                }
            )
        flat = _draw([v for found in variables for v in found.values()], seed)
    null, truths = [], []
    for block, found in zip(blocks, variables, strict=True):
        values = {name: np.array(flat.pop(0)) for name in found}
        nuisance_values = {name: values[f"by {name}"] for name in block.study.design.nuisance}
        effect = values["variable"]
        if block.study.prior.treatment is not None:
            effect = block.study.design.effect_of(effect, nuisance_values)
        null.append(values["null"] == 1)
        truths.append(Truths(effect=effect, nuisance=nuisance_values))
    return null, truths


def _draw(variables: list[object], seed: np.random.SeedSequence) -> list[FloatArray]:
    """One draw of all variables, by NumPy's generators.

    FAST_COMPILE leaves the few operations to NumPy: as quick for arrays of this size as compiled code
    (measured: 0.05 s against 0.06 s a million), without its compilation of half a second to two for every n.
    """
    import pymc as pm

    return list(pm.draw(variables, draws=1, random_seed=np.random.default_rng(seed), mode="FAST_COMPILE"))


def _usable(block: Block, truths: Truths) -> BoolArray:
    low, high = block.study.design.effect_bounds(truths.nuisance)
    possible = np.isfinite(truths.effect) & (truths.effect >= low) & (truths.effect <= high)
    for name, value in truths.nuisance.items():
        bottom, top = block.study.design.nuisance_bounds(name)
        possible &= (value > bottom) & (value < top)
    if block.real:
        possible &= ~distances(block.study, np.where(possible, truths.effect, block.study.null))[1]
    return possible


def _studies(study: Study, n: int | None, parts: Sequence[Truths], seed: np.random.SeedSequence) -> list[Decided]:
    """One study for every truth of every part, all drawn side by side along one axis, and decided."""
    import pymc as pm

    effect = np.concatenate([part.effect for part in parts])
    nuisance = {name: np.concatenate([part.nuisance[name] for part in parts]) for name in parts[0].nuisance}
    size = 1 if n is None else n
    with pm.Model():
        known = {name: pm.Data(f"true_{name}", value) for name, value in nuisance.items()}
        variables = study.design.forward(pm, pm.Data("true_effect", effect), known, size, effect.shape)
        data = dict(zip(variables, _draw(list(variables.values()), seed), strict=True))
    decision, estimate = _decide(study, size, data, nuisance)
    ends = np.cumsum([len(part.effect) for part in parts])[:-1]
    return [
        Decided(truths=part, decision=d, estimate=e)
        for part, d, e in zip(parts, np.split(decision, ends), np.split(estimate, ends), strict=True)
    ]


def _decide(
    study: Study, n: int, data: Mapping[str, FloatArray], nuisance: Mapping[str, FloatArray]
) -> tuple[IntArray, FloatArray]:
    analysis = study.design.analyse(data, nuisance, n)
    return study.rule.decide(analysis, study.null, study.working_null), analysis.estimate


def _joint(study: Study, n: int | None, part: Decided) -> Joint:
    """The joint table whose rows are the draws."""
    count, width = len(part.decision), len(study.rule.decisions)
    distance, exactly_null = distances(study, part.truths.effect)
    probability = np.eye(width)[part.decision]
    absolute = probability * np.abs(part.estimate - study.working_null)[:, None]
    absolute[:, -1] = 0.0  # by agreement with the integration route
    return Joint(
        n=(n,),
        decisions=study.rule.decisions,
        effect=part.truths.effect[None],
        distance=distance[None],
        exactly_null=exactly_null[None],
        nuisance={name: value[None] for name, value in part.truths.nuisance.items()},
        state=study.states.classify(distance, exactly_null)[None],
        states=study.states.names,
        weight=np.full((1, count), 1 / count),
        probability=probability[None],
        absolute=absolute[None],
        limit=study.rule.limit(distance)[None],
    )


def _numbers(study: Study, batches: Cells, read: Reader, draws: int) -> dict[str, Number]:
    """Readings of the sums of all batches, with jackknife standard errors."""
    total = batches.total(axis=1)
    whole, without = read(total, study), read(total - batches, study)
    real_claims = draws * (total.by_side.sum(axis=-2) @ Frame.of(study).claims)[:, 0]
    numbers = {}
    for name, ratio in whole.items():
        value, weight = ratio.value[:, 0], ratio.denominator[:, 0]
        mean = name.startswith("exaggeration")  # of claims of a real effect; all others are rates
        count, scale = (real_claims, np.abs(value)) if mean else (draws * weight, 1.0)
        numbers[name] = Number(value, jackknife(ratio, without[name], count, scale), ratio.why_null, weight)
    return numbers


def _at_planning_value(fixed: Study, table: Joint, draws: int) -> dict[str, Number]:
    numbers = _numbers(fixed, cells(table, BATCHES), planning_readings, draws)
    if fixed.is_null(fixed.effect.planning_value or np.nan):
        numbers |= {name: missing(1, "the planning value is the null itself") for name in PLANNING[1:]}
    return numbers


def _median(study: Study, table: Joint) -> Number:
    """Median of |estimate - null| / |distance| over the claims of an effect that is not exactly null."""
    claims = Frame.of(study).claims > 0
    chosen = table.probability[0][:, claims].any(axis=1) & ~table.exactly_null[0]
    size = table.absolute[0][chosen].sum(axis=1)
    if not len(size):
        return missing(1, NEVER)
    multiples = np.sort(size / np.abs(table.distance[0][chosen]))
    middle, error = quantile(multiples, 0.5), quantile_error(multiples, 0.5)
    return Number(np.array([middle]), np.array([error]), NEVER, np.array([chosen.mean()]))


def _power(successes: BoolArray, levels: Sequence[float]) -> Number:
    pairs = np.array([power_quantile(successes, level) for level in levels])
    return Number(pairs[None, :, 0], pairs[None, :, 1])


def _beside(numbers: Sequence[Number]) -> Number:
    """The numbers of several n as one, in order."""
    return Number(
        np.concatenate([number.value for number in numbers]),
        np.concatenate([number.error for number in numbers]),
        next((number.why_null for number in numbers if number.why_null), ""),
        np.concatenate([np.broadcast_to(np.asarray(number.weight), (1,)) for number in numbers]),
    )


def _stacked(tables: Sequence[Joint], rows: int) -> Joint:
    """One table over all n, of the first `rows` draws of each."""

    def stack(field: str) -> Any:
        return np.concatenate([getattr(table, field)[:, :rows] for table in tables])

    first = tables[0]
    return replace(
        first,
        n=tuple(size for table in tables for size in table.n),
        effect=stack("effect"),
        distance=stack("distance"),
        exactly_null=stack("exactly_null"),
        nuisance={name: np.concatenate([t.nuisance[name][:, :rows] for t in tables]) for name in first.nuisance},
        state=stack("state"),
        weight=np.full((len(tables), rows), 1 / rows),
        probability=stack("probability"),
        absolute=stack("absolute"),
        limit=stack("limit"),
    )
