"""Study files under test: one sound file, cut up so that any key can be replaced."""

import pytest

from bayesdesign.core.errors import StudyError
from bayesdesign.study.read import parse_study

GOOD = {
    "study": {"title": '"Spray nozzle trial"'},
    "effect": {"null": "0.0", "favourable": '"higher"', "smallest_relevant": "1.5", "unit": '"kg per tree"'},
    "design": {"family": '"two_means"', "n_per_group": "40", "sd": "5.0"},
    "prior": {"effect": '{distribution = "normal", mean = 1.8, sd = 1.5}'},
    "rule": {"type": '"significance"', "alpha": "0.05", "sides": '"two"'},
    "target": {"measure": '"assurance"', "at_least": "0.8", "max_n": "5000"},
}
SHARES = {
    **GOOD,
    "effect": {"null": "0.0"},
    "design": {"family": '"two_proportions"', "n_per_group": "40", "control": "0.4"},
    "prior": {"effect": '{distribution = "uniform", low = -0.2, high = 0.2}'},
}


def written(base: dict[str, dict[str, str]] = GOOD, **changes: str | None) -> str:
    """The file with keys replaced (`design__sd="3"`), added, or taken out (None), or without a section."""
    tables = {name: dict(table) for name, table in base.items()}
    for name, value in changes.items():
        section, _, key = name.partition("__")
        if not key:
            del tables[section]
        elif value is None:
            del tables[section][key]
        else:
            tables[section][key] = value
    return "\n".join(
        f"[{name}]\n" + "".join(f"{key} = {value}\n" for key, value in table.items())
        for name, table in tables.items()
    )


def lines(text: str) -> list[str]:
    """The lines that a user would read about a faulty file, without the name of the file."""
    with pytest.raises(StudyError) as caught:
        parse_study(text, "bad.toml")
    every = str(caught.value).split("\n")
    assert all(line.startswith("bad.toml: ") for line in every)
    return [line.removeprefix("bad.toml: ") for line in every]
