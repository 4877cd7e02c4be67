"""What `interpret` shows a person when two routes were asked for."""

from dataclasses import replace

from bayesdesign.interpret import interpret
from bayesdesign.render.after import interpretation_text
from bayesdesign.render.typeset import width

from .examples import STUDIES


def drawn(value, mcse=0.01):
    return {"value": value, "mcse": mcse}


def test_both_routes_stand_side_by_side_with_their_difference_in_standard_errors():
    name = next(name for name, study in STUDIES.items() if study.rule.sides == "two")
    found = interpret(STUDIES[name], decision="not_reject")
    after = found.posterior
    text = interpretation_text(found)
    assert "both routes" not in text
    document = {
        "state_probabilities": {state: drawn(p) for state, p in after.states.items()},
        "effect_mean": drawn(after.mean + 0.02),
        "effect_sd": None,
        "effect_median": drawn(after.median),
        "interval": {"low": drawn(after.low), "high": drawn(after.high), "mass": after.mass},
    }
    text = interpretation_text(replace(found, nuts=document))
    row = next(line for line in text.split("\n") if line.startswith("mean "))
    assert row.split()[-1] == "+2.0"
    assert not any(line.startswith("sd ") for line in text.split("\n"))
    assert "integration and MCMC" in text
    assert max(map(width, text.split("\n"))) <= 80
