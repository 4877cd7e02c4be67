"""What an answer costs, as ratios measured in one run: `uv run python tests/benchmarks/run.py [WORD...]`.

Every goal is a ratio to something done on the same machine within the same minute, so that it holds on any
machine. Programs are timed whole, as fresh processes, best of several. Words restrict the run to the rows that
hold one of them. No test asserts these times; the table of the last run is kept in DEVELOPERS.md.
"""

import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import bayesdesign as bd
from bayesdesign.joint.sampling import sampled

ROOT = Path(__file__).resolve().parent.parent.parent
MODELS = ROOT / "models"
BEST_OF = 5
LONG = 6.0  # ratio beyond which one pair of runs tells enough
MCSE = 1e-4  # accuracy at which integration and simulation are compared
DRAWS = 1_000_000

LIGHT = "import numpy, scipy.special, pydantic"
FULL = "import numpy, scipy.stats, xarray, pydantic"

FISHER = """
[study]
title = "Exact test of two shares"
[effect]
favourable = "higher"
[design]
family = "two_proportions"
n_per_group = 1000
analysis = "exact"
[prior]
control = { distribution = "beta", a = 30.0, b = 70.0 }
treatment = { distribution = "beta", a = 35.0, b = 65.0 }
[rule]
type = "significance"
"""
FIXED = """
[study]
title = "Two means, sd known from elsewhere"
[effect]
favourable = "higher"
[design]
family = "two_means"
n_per_group = 40
sd = 5.0
[prior]
effect = { distribution = "normal", mean = 1.8, sd = 1.5 }
[rule]
type = "significance"
"""


@dataclass(frozen=True)
class Row:
    """One measurement: `measure` gives the ratio and the two times in seconds (ours, theirs)."""

    what: str
    against: str
    goal: str
    met: Callable[[float], bool]
    measure: Callable[[], tuple[float, float, float]]


def seconds(act: Callable[[], object], times: int = BEST_OF) -> float:
    """Best wall time of several runs."""
    best = np.inf
    for _ in range(times):
        start = time.perf_counter()
        act()
        best = min(best, time.perf_counter() - start)
    return float(best)


def program(*arguments: str | Path) -> Callable[[], object]:
    return lambda: subprocess.run([sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL, timeout=600)


def against_import(imports: str, *arguments: str | Path) -> Callable[[], tuple[float, float, float]]:
    """Our command beside a process that only imports, both fresh; the first run of each fills caches."""

    def measure() -> tuple[float, float, float]:
        ours, theirs = program("-m", "bayesdesign", *arguments), program("-c", imports)
        theirs(), ours()
        mine = base = np.inf
        for _ in range(BEST_OF):  # by turns, so that a busy moment of the machine falls on both
            base, mine = min(base, seconds(theirs, 1)), min(mine, seconds(ours, 1))
            if mine > LONG * base:
                break
        return mine / base, mine, base

    return measure


def simulate_means(n: int, sd: float, draws: int, *, raw: bool, seed: int = 1) -> tuple[float, float]:
    """Assurance of FIXED as anyone would simulate it in NumPy: truth, data, t test; and the type S rate."""
    from scipy import special

    rng = np.random.default_rng(seed)
    effect = rng.normal(1.8, 1.5, draws)
    if raw:
        treated = rng.normal(effect[:, None], sd, (draws, n))
        control = rng.normal(0.0, sd, (draws, n))
        difference = treated.mean(axis=1) - control.mean(axis=1)
        variances = treated.var(axis=1, ddof=1), control.var(axis=1, ddof=1)
    else:
        difference = rng.normal(effect, sd * np.sqrt(2 / n))
        variances = sd**2 * rng.chisquare(n - 1, draws) / (n - 1), sd**2 * rng.chisquare(n - 1, draws) / (n - 1)
    t = difference / np.sqrt((variances[0] + variances[1]) / n)
    p = 2 * special.stdtr(2 * n - 2, -np.abs(t))
    rejected = p <= 0.05
    higher = rejected & (difference > 0)
    wrong = rejected & ((difference > 0) != (effect > 0))
    return float(higher.mean()), float(wrong.sum() / rejected.sum())


def equal_accuracy(*, raw: bool, single: bool) -> Callable[[], tuple[float, float, float]]:
    """Time to assurance within MCSE: simulation, extrapolated by 1 / sqrt(draws), over integration (warm, in process).

    `single`: only the joint table and its ratio readings with their errors; otherwise all that `evaluate` gives,
    median, quantiles and messages included.
    """

    def measure() -> tuple[float, float, float]:
        from bayesdesign.joint.refined import refine
        from bayesdesign.measures.ratios import readings

        study = bd.parse_study(FIXED)
        fine = bd.evaluate(study).quantities["assurance"].value
        assert isinstance(fine, float)
        act: Callable[[], object] = lambda: bd.evaluate(study)  # noqa: E731
        if single:
            act = lambda: refine(study, [40], readings, 1e-6)  # noqa: E731
        ours = seconds(act, 20)
        draws = DRAWS // 5 if raw else DRAWS  # raw data of a million studies would not fit everywhere
        found, _ = simulate_means(40, 5.0, draws, raw=raw)
        assert abs(found - fine) < 6 * np.sqrt(fine * (1 - fine) / draws), "the two do not compute the same"
        needed = fine * (1 - fine) / MCSE**2
        theirs = seconds(lambda: simulate_means(40, 5.0, draws, raw=raw), 3) * needed / draws
        return theirs / ours, ours, theirs

    return measure


def drawing() -> tuple[float, float, float]:
    """A million studies drawn by PyMC and read, over the same by NumPy; second call, so that nothing is imported."""
    study = bd.parse_study(FIXED)
    sampled(study, [40], 1, 100_000)
    ours = seconds(lambda: sampled(study, [40], 1, DRAWS), 3)
    theirs = seconds(lambda: simulate_means(40, 5.0, DRAWS, raw=False), 3)
    return ours / theirs, ours, theirs


def rows(folder: Path) -> Iterator[Row]:
    orchard = MODELS / "orchard-nozzle.toml"
    fixed, fisher = folder / "fixed.toml", folder / "fisher.toml"
    fixed.write_text(FIXED, encoding="utf-8")
    fisher.write_text(FISHER, encoding="utf-8")

    def at_most(what: str, against: str, goal: float, measure: Callable[[], tuple[float, float, float]]) -> Row:
        return Row(what, against, f"<= {goal:g}", lambda ratio: ratio <= goal, measure)

    light, full = LIGHT.removeprefix("import "), FULL.removeprefix("import ")
    yield at_most("check orchard-nozzle", light, 2, against_import(LIGHT, "check", orchard))
    yield at_most("evaluate two means, sd fixed", full, 1.6, against_import(FULL, "evaluate", fixed))
    for model in sorted(MODELS.glob("*.toml")):
        yield at_most(f"evaluate {model.stem}", full, 1.6, against_import(FULL, "evaluate", model))
    sizes = [str(n) for n in range(10, 210)]
    yield at_most("evaluate two means at 200 n", full, 3, against_import(FULL, "evaluate", fixed, "--n", *sizes))
    yield at_most("evaluate Fisher, 1000 per group, betas", full, 5, against_import(FULL, "evaluate", fisher))
    for label, raw, single in (
        ("raw data / the table with its errors", True, True),
        ("statistics / the table with its errors", False, True),
        ("raw data / whole of evaluate", True, False),
        ("statistics / whole of evaluate", False, False),
    ):
        yield Row(
            f"simulate to 1e-4: {label}",
            "integration",
            ">= 1000",
            lambda ratio: ratio >= 1000,
            equal_accuracy(raw=raw, single=single),
        )
    yield at_most("a million PyMC draws", "the same in NumPy", 5, drawing)


def main() -> None:
    """Measure and print the table, as Markdown."""
    words = sys.argv[1:]
    print("| measured | against | ratio | goal | met | seconds, ours and theirs |\n|---|---|---:|---|---|---|")
    with tempfile.TemporaryDirectory() as folder:
        for row in rows(Path(folder)):
            if words and not any(word in row.what for word in words):
                continue
            ratio, ours, theirs = row.measure()
            met = "yes" if row.met(ratio) else "**no**"
            print(
                f"| {row.what} | {row.against} | {ratio:.3g} | {row.goal} | {met} | {ours:.3g}, {theirs:.3g} |",
                flush=True,
            )


if __name__ == "__main__":
    main()
