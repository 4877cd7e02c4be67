"""What a finished study is worth, as fixed-width text: verdict first, then belief before and after."""

from typing import TYPE_CHECKING

from bayesdesign.render import words
from bayesdesign.render.to_terminal import caution, foot_messages, provenance_line, title
from bayesdesign.render.typeset import WIDTH, Page, pad, safe, wrap

if TYPE_CHECKING:
    from bayesdesign.interpret import Interpretation

RARE = 0.05  # prior predictive tail probability below which data and prior are shown to disagree
BAR = 16  # columns of a bar that stands for all the probability
GIVEN = {"decision": "the decision", "estimate": "the estimate", "p_value": "the p-value", "data": "the data"}


def interpretation_text(found: "Interpretation", *, colour: bool = False) -> str:
    """The answer of `interpret`."""
    page, study = Page(), found.study
    title(page, study, found.design.answers)
    page.paragraph(safe(found.verdict.sentence, 2000), "lead")
    page.paragraph(_known(found))
    _states(page, found)
    _effect(page, found)
    page.paragraph(_open(found))
    _routes(page, found)
    foot_messages(page, found.design.messages)
    caution(page, study)
    provenance_line(
        page, study.sha256, found.design.provenance, "integration" if found.nuts is None else "integration and MCMC"
    )
    return page.text(colour=colour)


def _known(found: "Interpretation") -> str:
    said = ", ".join(f"{words.label(name)} {safe(str(value), 40)}" for name, value in found.reported.items())
    text = f"Known: {GIVEN.get(found.given, words.label(found.given))} ({said})."
    if found.decision is not None and found.given != "decision":
        text += f" By the study's own rule this {words.decision(found.decision)}."
    return text


def _states(page: Page, found: "Interpretation") -> None:
    """Prior and posterior of each state side by side, as numbers and as bars."""
    left = WIDTH - 2 * (BAR + 6)
    page.section("belief, in 100")
    page.line(pad("the truth", left) + pad("before", BAR + 6) + "after", "faint")
    names = list(found.prior_states)
    before, after = (
        [belief.get(name, 0.0) for name in names] for belief in (found.prior_states, found.posterior.states)
    )
    counts = [words.largest_remainder(shares, 100) for shares in (before, after)]
    for i in reversed(range(len(names))):
        lines = wrap(words.state(names[i], found.study), left - 1)
        bars = [_bar(counts[k][i], shares[i]) for k, shares in enumerate((before, after))]
        page.line(pad(lines[0], left) + pad(bars[0], BAR + 6) + bars[1])
        for rest in lines[1:]:
            page.line("  " + rest)


def _bar(count: int, probability: float) -> str:
    number = str(count) if count else "<1" if probability > words.NONE else "0"
    return pad(number, 4, ">") + " " + "─" * round(BAR * count / 100)


def _effect(page: Page, found: "Interpretation") -> None:
    after, study = found.posterior, found.study
    page.section("the effect")
    low, high = (words.natural(end, study) for end in (after.low, after.high))
    page.line(pad("median", 25) + words.natural(after.median, study))
    page.line(pad(f"{100 * after.mass:g}% interval", 25) + f"{low} to {high}")
    page.line(pad(f"chance that it is above {words.null(study)}", 25) + f" {_share(after.above_null)}")


def _routes(page: Page, found: "Interpretation") -> None:
    """The posterior by integration and by MCMC, with the difference in standard errors."""
    if found.nuts is None:
        return
    after, drawn = found.posterior, found.nuts
    pairs = [
        *((f"P({name})", after.states[name], number) for name, number in drawn["state_probabilities"].items()),
        ("mean", after.mean, drawn["effect_mean"]),
        ("sd", after.sd, drawn["effect_sd"]),
        ("median", after.median, drawn["effect_median"]),
        ("lower end", after.low, drawn["interval"]["low"]),
        ("upper end", after.high, drawn["interval"]["high"]),
    ]
    page.section("both routes")
    page.line(pad("", 24) + "".join(pad(head, 13, ">") for head in ("integration", "MCMC", "std. error", "difference")))
    for name, exact, number in pairs:
        if number is None:
            continue
        gap = (number["value"] - exact) / number["mcse"] if number["mcse"] else 0.0
        cells = (f"{exact:.4g}", f"{number['value']:.4g}", f"±{number['mcse']:.1g}", f"{gap:+.1f}")
        page.line(pad(name, 24) + "".join(pad(cell, 13, ">") for cell in cells))


def _share(p: float) -> str:
    return "practically 1" if 1 - p < 5e-5 else "practically 0" if p < 5e-5 else f"{p:.3g}"


def _open(found: "Interpretation") -> str:
    """What the result leaves open."""
    after, study = found.posterior, found.study
    middle = study.states.null
    if middle is None:
        text = "The interval says what is still possible; "
        text += f"that the effect is exactly {words.null(study)} was never on the table."
    else:
        real = 1 - after.states.get(study.states.names[middle], 0.0)
        relevant = study.effect.smallest_relevant is not None
        kind = "a relevant effect" if relevant else f"an effect other than {words.null(study)}"
        text = f"Left open: {kind} has a chance of {_share(real)}, and none of that size one of "
        text += f"{_share(1 - real)}."
    if found.conflict is not None and found.conflict < RARE:
        text += f" Such an estimate is rare under this prior (tail probability {found.conflict:.2g}): "
        text += "look at both before averaging."
    return text
