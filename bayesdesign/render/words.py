"""The sentences that every format shares; each is a function of a study and its answer."""

import math
from typing import TYPE_CHECKING

from bayesdesign.render.typeset import safe

if TYPE_CHECKING:
    from bayesdesign.result import Answer, DecisionTable, SizeAnswer
    from bayesdesign.study.study import Study

RARE = 0.05  # a share of the silent runs below which silence speaks against an effect
NONE = 1e-12  # a probability below this is called none; the routes do not see further

DECISIONS = {
    "reject_higher": "claims higher",
    "reject_lower": "claims lower",
    "not_reject": "does not reject",
    "non_inferior": "claims non-inferior",
    "not_shown": "shows nothing",
    "equivalent": "claims equivalent",
    "superior": "claims superior",
    "shown": "claims it",
    "for_effect": "for an effect",
    "for_null": "for the null",
    "undecided": "undecided",
    "go": "go",
    "consider": "consider",
    "stop": "stop",
    "precise": "precise",
    "not_precise": "not precise",
    "accept_lot": "passes the lot",
    "reject_lot": "rejects the lot",
}

# name: (short name, meaning in a few words)
QUANTITIES = {
    "assurance": ("assurance", "chance of the favourable decision"),
    "assurance_true_effect": ("assurance, rightly", "chance of deciding so and being right"),
    "expected_power": ("expected power", "the same if the effect is as hoped"),
    "assurance_ceiling": ("assurance ceiling", "what no sample size can exceed"),
    "power_at_planning_value": ("power at planning value", "classical power, at the one guess"),
    "power_quantiles": ("power over the prior", "its 5%, 50% and 95% points"),
    "type_1_rate": ("type I rate", "claims where the null state holds"),
    "specificity": ("specificity", "silence where the null state holds"),
    "type_2_rate": ("type II rate", "silence where an effect is there"),
    "average_power": ("average power", "claims where an effect is there"),
    "false_positive_risk": ("false-positive risk", "claims that are wrong about the null"),
    "false_negative_risk": ("false-negative risk", "silences that hide an effect"),
    "type_s_rate": ("type S rate", "claims that point to the wrong side"),
    "exaggeration_ratio": ("exaggeration ratio", "how many times too large on average"),
    "exaggeration_median": ("exaggeration, median", "how many times too large typically"),
    "type_s_at_planning_value": ("type S at planning value", "wrong side, were the guess true"),
    "exaggeration_at_planning_value": ("exaggeration at plan. v.", "times too large, were the guess true"),
}

SEVERITY = {"block": "stop", "warning": "warning", "info": "note"}

CAUTION = {
    "clinical": "Clinical study: these numbers prepare a decision and do not make one. Licensed practice and "
    "local rules come first; have a qualified statistician check the study before anyone is treated by it.",
    "safety": "Safety matter: these numbers prepare a decision and do not make one. Licensed practice and "
    "local codes come first; have a qualified statistician check the study before anyone relies on it.",
}


def label(name: str) -> str:
    """A key of the study file in words."""
    return name.replace("_", " ")


def quantity_name(name: str) -> str:
    base, _, level = name.partition("[")
    return QUANTITIES.get(base, (label(base), ""))[0] + (f" [{level}" if level else "")


def decision(name: str) -> str:
    return DECISIONS.get(name, label(name))


def natural(value: float, study: "Study") -> str:
    """A value of the effect in natural units."""
    if study.design.ratio_scale:
        return f"{value:.4g} times"
    unit = safe(study.effect.unit, 24)
    return f"{value:.4g} {unit}" if unit else f"{value:.4g}"


def null(study: "Study") -> str:
    return f"{study.null:.4g}" if study.design.ratio_scale else natural(study.null, study)


def effect(study: "Study") -> str:
    """What is compared, with a comma closing what follows it in the family's words."""
    words = study.design.effect_words
    return f"{words}," if "," in words else words


def state(name: str, study: "Study") -> str:
    """A row of the decision table with what it means, e.g. `relevant, higher (at least 1.5 kg above 0)`."""
    relevant = study.effect.smallest_relevant
    if relevant is None:
        meaning = {
            "lower": f"below {null(study)}",
            "null": f"exactly {null(study)}",
            "higher": f"above {null(study)}",
        }
        return f"{label(name)} ({meaning[name]})" if name in meaning else label(name)
    if study.design.ratio_scale:
        low, high = natural(study.null / relevant, study), natural(study.null * relevant, study)
        between = f"{study.null / relevant:.4g} to {high}"
        meaning = {"lower": f"{low} or less", "negligible": between, "higher": f"{high} or more"}
    else:
        distance, origin = natural(relevant, study), f"{study.null:.4g}"
        meaning = {
            "lower": f"at least {distance} below {origin}",
            "negligible": f"less than {distance} from {origin}",
            "higher": f"at least {distance} above {origin}",
        }
    if name not in meaning:
        return label(name)
    return f"{'' if name == 'negligible' else 'relevant, '}{name} ({meaning[name]})"


def largest_remainder(shares: list[float], total: int) -> list[int]:
    """Whole numbers in proportion to the shares that sum to `total`; ties go to the earlier one."""
    scale = total / sum(shares) if sum(shares) > 0 else 0.0
    exact = [share * scale for share in shares]
    counts = [math.floor(x + 1e-9) for x in exact]
    by_rest = sorted(range(len(shares)), key=lambda i: (round(counts[i] - exact[i], 9), i))
    for i in by_rest[: total - sum(counts)]:
        counts[i] += 1
    return counts


def hundred(table: "DecisionTable") -> list[list[int]]:
    """The joint table as counts of 100 runs: decisions are rounded first, then the states within each."""
    columns = [sum(row[d] for row in table.joint) for d in range(len(table.decisions))]
    totals = largest_remainder(columns, 100)
    split = [largest_remainder([row[d] for row in table.joint], totals[d]) for d in range(len(totals))]
    return [[split[d][s] if sum(split[d]) else 0 for d in range(len(totals))] for s in range(len(table.states))]


def count(number: int, probability: float) -> str:
    """A count out of 100 that does not pretend: `about 61`, `fewer than 1`, `more than 99`, `none`, `all`."""
    if probability <= NONE:
        return "none"
    if probability >= 1 - NONE and number == 100:
        return "all"
    if number == 0:
        return "fewer than 1"
    return "more than 99" if number == 100 else f"about {number}"


def claim(study: "Study") -> str:
    """What the favourable decision says, as a clause: `the mean is higher than 0 kg`."""
    favourable = study.rule.favourable(study.favourable)
    sides = {study.rule.claims.get(name, "") for name in favourable}
    if sides == {"higher", "lower"}:
        return f"{effect(study)} differs from {null(study)}"
    if len(sides) == 1 and "" not in sides:
        return f"{effect(study)} is {sides.pop()} than {null(study)}"
    return f"the answer is '{' or '.join(map(decision, favourable))}'"


def headline(study: "Study", answer: "Answer") -> str:
    """The first sentence: how often the study ends well, and how often rightly."""
    names, counts, joint = answer.table.decisions, hundred(answer.table), answer.table.joint
    good = [d for d, name in enumerate(names) if name in study.rule.favourable(study.favourable)]
    if not good:
        return (
            f"This rule can never claim what the study calls favourable ({study.favourable}): of 100 runs "
            "with effects drawn from the "
            f"prior, none would."
        )
    runs = sum(row[d] for row in counts for d in good)
    chance = sum(row[d] for row in joint for d in good)
    text = f"If this study were run 100 times with effects drawn from the prior, {count(runs, chance)} "
    text += f"{'run' if chance > NONE and runs < 2 else 'runs'} would conclude that {claim(study)}."
    right = study.states.favourable
    hits = sum(counts[s][d] for s in right for d in good)
    sure = sum(joint[s][d] for s in right for d in good)
    if runs:
        kind = "relevant and on that side" if study.effect.smallest_relevant is not None else "on that side"
        kind = kind if len(right) == 1 else "relevant" if study.effect.smallest_relevant is not None else "really there"
        everywhere = "all" if hits == runs else count(hits, sure)
        text += f" In {everywhere} of those the effect is {kind}."
    return text


def silence(study: "Study", answer: "Answer") -> str:
    """What a run without a claim leaves open, in natural frequencies."""
    table, counts = answer.table, hundred(answer.table)
    quiet = [d for d, name in enumerate(table.decisions) if name not in study.rule.claims]
    runs = [sum(row[d] for d in quiet) for row in counts]
    chance = [sum(row[d] for d in quiet) for row in table.joint]
    verb = " or ".join(
        {"does not reject": "do not reject"}.get(decision(table.decisions[d]), decision(table.decisions[d]))
        for d in quiet
    )
    text = f"Of 100 runs, {count(sum(runs), sum(chance))} {verb}"
    if sum(chance) <= NONE:
        return f"{text}."
    middle = study.states.null
    if middle is None:
        each = ", ".join(f"{count(runs[s], chance[s])} {name}" for s, name in reversed(list(enumerate(table.states))))
        return (
            f"{text}; in every one of those the effect still differs from {null(study)}, for the prior puts "
            "no weight exactly "
            f"there ({each}). Silence leaves the question open."
        )
    hidden, chance_hidden = sum(runs) - runs[middle], sum(chance) - chance[middle]
    if study.effect.smallest_relevant is None:
        kind = f"nevertheless differs from {null(study)}"
    else:
        distance = natural(study.effect.smallest_relevant, study)
        origin = "" if study.design.ratio_scale else f" from {study.null:.4g}"
        kind = f"is nevertheless relevant ({distance}{origin}, or more)"
    rare = chance_hidden <= RARE * sum(chance)
    moral = "After silence that is unlikely." if rare else "Silence leaves that open."
    return f"{text}; in {count(hidden, chance_hidden)} of those the effect {kind}. {moral}"


def size_sentences(study: "Study", size: "SizeAnswer") -> list[str]:
    """The answer of the size search, and what it would take when there is none."""
    what, unit = quantity_name(size.measure), label(study.design.n_label)
    goal = f"{what} of {label(size.direction)} {size.target:g}"
    if size.first_n is None:
        return [f"No {unit} up to {size.searched_to} gives {goal}.", *_unmet(size)]
    said = [f"The smallest {unit} that gives {goal} is {size.first_n}."]
    if size.safe_n == size.first_n:
        said.append(f"Every larger one, up to {size.searched_to}, gives it too.")
    elif size.safe_n is not None:
        said.append(
            f"From {size.safe_n} on every one up to {size.searched_to} does; some between {size.first_n} "
            f"and {size.safe_n} fall "
            "short, because counts are whole numbers and the curve rises like the teeth of a saw. Prefer "
            "the safe one."
        )
    else:
        said.append(f"Not every larger one does, right up to {size.searched_to}: the curve goes up and down with n.")
    return said


def _unmet(size: "SizeAnswer") -> list[str]:
    reached = [] if size.achieved is None else [f"The nearest it comes is {size.achieved:.4g}."]
    if size.ceiling is None:
        return [*reached, "Raise [target] max_n, or ask for less."]
    within = size.ceiling > size.target if size.direction == "at_least" else size.ceiling < size.target
    if within:
        return [
            *reached,
            f"Its limit with endless data is {size.ceiling:.4g}, so a larger [target] max_n will find one.",
        ]
    if size.direction == "at_most":
        limit = (
            f"With endless data it settles at {size.ceiling:.4g}, which the prior and the rule alone decide. A prior "
            "with more weight on a real effect, a stricter rule, or a humbler target would be needed."
        )
        return [*reached, limit]
    ceiling = (
        f"Its ceiling is {size.ceiling:.4g}: with endless data the prior alone decides, and no sample size goes "
        "beyond. Only a prior with more weight on the hoped-for side, a rule that claims more readily, or a "
        "humbler target can "
        "raise the answer."
    )
    return [*reached, ceiling]
