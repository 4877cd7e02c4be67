"""Fixed-width text for people: pure functions of a result, at most 80 columns, colour only if asked."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from bayesdesign.render import words
from bayesdesign.render.typeset import WIDTH, Page, figures, pad, safe, shorten, uncertainty, width, wrap

if TYPE_CHECKING:
    from bayesdesign.result import Answer, Comparison, DecisionTable, Message, Quantity, Result
    from bayesdesign.study.study import Study

CURVE = {
    "assurance": "assur.",
    "assurance_true_effect": "rightly",
    "expected_power": "exp.pow",
    "type_1_rate": "type I",
    "false_positive_risk": "false+",
    "false_negative_risk": "false-",
    "type_s_rate": "type S",
    "exaggeration_ratio": "exagg.",
}


def result_text(result: "Result", *, colour: bool = False) -> str:
    """The answer of `evaluate` or `size`."""
    page, study = Page(), result.study
    title(page, study, result.answers)
    if result.size is not None:
        _size(page, result)
    if len(result.answers) == 1:
        _one(page, study, result.answers[0])
    elif result.answers:
        _many(page, study, result.answers)
    for answer in result.answers:
        if answer.cross_check:
            _cross_check(page, answer, named=len(result.answers) > 1)
    _foot(page, study, result.messages, result.provenance, _routes(result.answers))
    return page.text(colour=colour)


def check_text(study: "Study", says: Sequence[str], messages: Sequence["Message"], *, colour: bool = False) -> str:
    """The answer of `check`: the study in plain words."""
    page = Page()
    title(page, study, (), question=False)
    for sentence in says:
        page.paragraph(safe(sentence, 2000), hang=2, first="·")
    page.gap()
    page.line("The file is sound.", "lead")
    _foot(page, study, messages, {}, "")
    return page.text(colour=colour)


def title(page: Page, study: "Study", answers: Sequence["Answer"], *, question: bool = True) -> None:
    """The study's name and size over a rule."""
    size = ""
    if len(answers) == 1 and answers[0].sizes:
        size = ", ".join(f"{words.label(name)} {n}" for name, n in answers[0].sizes.items())
    name = safe(study.title, WIDTH - width(size) - 3)
    page.line(pad(name, WIDTH - width(size)) + size, "title")
    if study.question and question:
        page.line(safe(study.question, WIDTH))
    page.line("─" * WIDTH, "faint")


def _one(page: Page, study: "Study", answer: "Answer") -> None:
    page.paragraph(words.headline(study, answer), "lead")
    page.paragraph(words.silence(study, answer))
    counts_table(page, study, answer.table)
    _conditionals(page, answer.table)
    _quantities(page, answer.quantities)


def headings(decisions: Sequence[str]) -> list[tuple[str, str]]:
    """Two short lines over each column."""
    found = []
    for name in decisions:
        lines = wrap(words.decision(name), 8)
        found.append((lines[0], " ".join(lines[1:])) if len(lines) > 1 else ("", lines[0]))
    return found


def counts_table(page: Page, study: "Study", table: "DecisionTable") -> None:
    """Truths down, decisions across, counts of 100 runs."""
    column = 9
    left = WIDTH - column * (len(table.decisions) + 1)
    page.section("of 100 runs")
    for upper_or_lower in (0, 1):
        heads = [pad(shorten(head[upper_or_lower], column), column, ">") for head in headings(table.decisions)]
        page.line(
            pad(("", "the truth")[upper_or_lower], left)
            + "".join(heads)
            + pad(("", "all")[upper_or_lower], column, ">"),
            "faint",
        )
    counts = words.hundred(table)
    for s in reversed(range(len(table.states))):  # higher above lower, as on a scale
        cells = [_cell(n, p) for n, p in zip(counts[s], table.joint[s], strict=True)] + [
            _cell(sum(counts[s]), sum(table.joint[s]))
        ]
        lines = wrap(words.state(table.states[s], study), left - 1)
        page.line(pad(lines[0], left) + "".join(pad(cell, column, ">") for cell in cells))
        for rest in lines[1:]:
            page.line("  " + shorten(rest, left - 3))
    totals = [sum(row[d] for row in counts) for d in range(len(table.decisions))]
    chances = [sum(row[d] for row in table.joint) for d in range(len(table.decisions))]
    cells = [_cell(n, p) for n, p in zip(totals, chances, strict=True)]
    page.line(pad("all", left) + "".join(pad(cell, column, ">") for cell in [*cells, "100"]), "faint")


def _cell(count: int, probability: float) -> str:
    if count:
        return str(count)
    return "<1" if probability > words.NONE else "0"


def _conditionals(page: Page, table: "DecisionTable") -> None:
    """Both conditionals side by side, in per cent."""
    across = len(table.decisions)
    column = min(9, (WIDTH - 16) // (2 * across))
    if column < 7:
        return  # eight columns of numbers are what 80 columns can hold
    left = WIDTH - 2 * across * column - 2
    truth, chosen = (
        f" {name} {'─' * (across * column - width(name) - 2)}" for name in ("of each truth", "of each decision")
    )
    page.line(f"per cent {'─' * (left - 9)}{truth}──{chosen}", "faint")
    for part in (0, 1):
        heads = "".join(pad(shorten(head[part], column - 1), column, ">") for head in headings(table.decisions))
        page.line(pad("", left) + heads + "  " + heads, "faint")
    for s in reversed(range(len(table.states))):
        row: list[float] | list[None] = table.given_state[s] or [None] * across
        shown = ["".join(pad(_per_cent(p), column, ">") for p in line) for line in (row, table.given_decision[s])]
        page.line(pad(shorten(words.label(table.states[s]), left - 1), left) + "  ".join(shown))


def _per_cent(p: float | None) -> str:
    if p is None:
        return "–"
    if words.NONE < p < 0.005:
        return "<1"
    return ">99" if 0.995 <= p < 1 - words.NONE else f"{100 * p:.0f}"


def _quantities(page: Page, quantities: dict[str, "Quantity"]) -> None:
    page.section("measures")
    missing: dict[str, list[str]] = {}
    for name, quantity in quantities.items():
        short, meaning = words.QUANTITIES.get(name, (words.label(name), ""))
        if quantity.value is None:
            missing.setdefault(quantity.why_null or "undefined", []).append(short)
        elif isinstance(quantity.value, dict):
            errors = quantity.error if isinstance(quantity.error, dict) else {}
            picked = [
                figures(quantity.value[level], errors.get(level))
                for level in ("0.05", "0.5", "0.95")
                if level in quantity.value
            ]
            page.line(pad(short, 25) + pad("  ".join(picked), 24) + shorten(meaning, WIDTH - 49))
        else:
            error = quantity.error if isinstance(quantity.error, float | int) else None
            page.line(
                pad(short, 25)
                + pad(figures(quantity.value, error), 8)
                + pad(uncertainty(error), 8)
                + shorten(meaning, WIDTH - 41)
            )
    for why, names in missing.items():
        page.paragraph(f"{'; '.join(names)}: {why.split(':')[0]}", "faint", hang=6, first="none")


def _many(page: Page, study: "Study", answers: Sequence["Answer"]) -> None:
    page.paragraph(
        f"Runs with effects drawn from the prior; a favourable decision concludes that {words.claim(study)}.",
        "lead",
    )
    page.section("by size")
    names = [
        name for name in CURVE if any(a.quantities[name].value is not None for a in answers if name in a.quantities)
    ]
    label = words.label(study.design.n_label)
    left = max(width(label), *(len(str(a.n)) for a in answers)) + 1
    page.line(pad(label, left, ">") + "".join(pad(CURVE[name], 8, ">") for name in names), "faint")
    for answer in answers:
        cells = [_plain(answer.quantities.get(name)) for name in names]
        page.line(pad(str(answer.n), left, ">") + "".join(pad(cell, 8, ">") for cell in cells))
    errors = [q.error for a in answers for name in names if isinstance((q := a.quantities[name]).error, float | int)]
    if errors:
        page.line(f"largest error {uncertainty(max(e for e in errors if isinstance(e, float | int)))}", "faint")
    page.gap()
    for name in names:
        page.line(pad(CURVE[name], 9) + pad(words.QUANTITIES[name][0], 24) + words.QUANTITIES[name][1], "faint")


def _plain(quantity: "Quantity | None") -> str:
    if quantity is None or not isinstance(quantity.value, float | int):
        return "–"
    error = quantity.error if isinstance(quantity.error, float | int) else None
    return figures(quantity.value, max(error or 0.0, 1e-4 if quantity.value < 10 else 1e-2))


def _cross_check(page: Page, answer: "Answer", *, named: bool) -> None:
    page.section(f"both routes{f', n = {answer.n}' if named else ''}")
    page.line(
        pad("", 30) + "".join(pad(head, 12, ">") for head in ("integration", "sampling", "std. error", "difference")),
        "faint",
    )
    for name, comparison in answer.cross_check.items():
        page.line(
            pad(shorten(words.quantity_name(name), 30), 30)
            + "".join(pad(cell, 12, ">") for cell in _compared(comparison))
        )
    worst = max((abs(c.z) for c in answer.cross_check.values()), default=0.0)
    page.line(f"difference in standard errors; the largest is {worst:.1f}", "faint")


def _compared(comparison: "Comparison") -> tuple[str, str, str, str]:
    exact, drawn, error = comparison.integration, comparison.sampling, comparison.mcse
    z = "–" if error == 0 else f"{comparison.z:+.1f}"
    return figures(exact, error), figures(drawn, error), uncertainty(error), z


def _size(page: Page, result: "Result") -> None:
    size = result.size
    assert size is not None
    first, *rest = words.size_sentences(result.study, size)
    page.paragraph(first, "lead")
    for sentence in rest:
        page.paragraph(sentence)
    if size.first_n is not None:
        facts = [
            ("first that meets it", str(size.first_n)),
            ("safe from", "–" if size.safe_n is None else str(size.safe_n)),
        ]
        facts += [("reached", figures(size.achieved))] if size.achieved is not None else []
        facts += [("ceiling", figures(size.ceiling))] if size.ceiling is not None else []
        page.line("   ".join(f"{name} {value}" for name, value in facts), "faint")
    elif result.answers:
        page.paragraph(f"Below is the study at its planned {words.label(result.study.design.n_label)}.")
    page.gap()


def _routes(answers: Sequence["Answer"]) -> str:
    if any(answer.cross_check for answer in answers):
        return "integration and sampling"
    return ", ".join(dict.fromkeys(q.route for answer in answers for q in answer.quantities.values()))


def foot_messages(page: Page, messages: Sequence["Message"]) -> None:
    """Every trap: how bad, what, and what to do."""
    if messages:
        page.section("watch out")
    for message in messages:
        body = f"{message.text} {message.advice}"
        page.paragraph(safe(body, 2000), message.severity, hang=9, first=words.SEVERITY[message.severity])


def _foot(page: Page, study: "Study", messages: Sequence["Message"], provenance: dict[str, Any], routes: str) -> None:
    foot_messages(page, messages)
    caution(page, study)
    provenance_line(page, study.sha256, provenance, routes)


def caution(page: Page, study: "Study") -> None:
    """Where a result can hurt someone, who has the last word."""
    if study.field in words.CAUTION:
        page.gap()
        page.paragraph(words.CAUTION[study.field])


def provenance_line(page: Page, sha256: str, provenance: dict[str, Any], routes: str) -> None:
    parts = [f"bayesdesign {provenance['version']}"] if "version" in provenance else []
    parts += [routes] if routes else []
    parts += [f"seed {provenance['seed']}"] if "seed" in provenance else []
    parts += [f"study {sha256[:12]}"] if sha256 else []
    if parts:
        page.section("")
        page.line(shorten(" · ".join(parts), WIDTH), "faint")
