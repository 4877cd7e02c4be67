"""Whether reports/ still says what the command says: a number that drifts is a bug or wants a reason."""

import copy
import json
import math
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
REPORTS = ROOT / "reports"
STUDIES = sorted(path.stem for path in (ROOT / "models").glob("*.toml"))
SLOW = {"checkout-button", "clinic-reminder", "spindle-runout"}  # half a minute and more

SAME = 1e-7  # relative; between processors the last bits differ, and with them whatever a search or a sum ends on
NOTHING = 1e-12  # probabilities below it are rounding
ROUNDING = 1e-11  # stated errors below it say only that nothing moved but the last bits
TOLERANCE = 1e-6  # what `evaluate` refuses beyond, relative to max(1, value) ...
BY_SEARCH = 5e-3  # ... but for these two, which it withholds beyond
SEARCHED = ("exaggeration_median", "power_quantiles")


def masked(text):
    """Without the stated errors, whose digits hang on the last bits of the processor."""
    return re.sub(r"integration error [\d.e+-]+", "integration error", re.sub(r"±[\d.e+-]+ *", "± ", text))


def drifts(new, old, at=""):
    """Where two documents differ, one line each."""
    if isinstance(new, dict) and isinstance(old, dict):
        if list(new) != list(old):
            return [f"{at}: keys {list(new)}, were {list(old)}"]
        if at == ".provenance":
            return [f"{at}.{key}: {new[key]}, was {old[key]}" for key in ("version", "seed") if new[key] != old[key]]
        return [line for key in new for line in drifts(new[key], old[key], f"{at}.{key}")]
    if isinstance(new, list) and isinstance(old, list):
        if len(new) != len(old):
            return [f"{at}: {len(new)} entries, were {len(old)}"]
        return [line for i, pair in enumerate(zip(new, old, strict=True)) for line in drifts(*pair, f"{at}[{i}]")]
    return [] if alike(new, old, at) else [f"{at}: {new}, was {old}"]


def alike(new, old, at):
    if type(new) is not type(old):
        return False
    if isinstance(new, float):
        return magnitude_alike(new, old) if ".error" in at else value_alike(new, old)
    return masked(new) == masked(old) if at.endswith(".why_null") else new == old


def value_alike(new, old):
    return abs(new - old) <= max(SAME * abs(old), NOTHING)


def magnitude_alike(new, old):
    return abs(math.log10(max(new, ROUNDING) / max(old, ROUNDING))) <= 1


def too_uncertain(document):
    """Quantities whose stated error is beyond what the program allows itself."""
    found = []
    for result in document["results"]:
        for name, quantity in result["quantities"].items():
            values, errors = (q if isinstance(q, dict) else {"": q} for q in (quantity["value"], quantity["error"]))
            allowed = BY_SEARCH if name in SEARCHED else TOLERANCE
            found += [
                f"{name}: error {errors[key]}"
                for key, value in values.items()
                if value is not None and not 0 <= errors[key] <= allowed * max(1.0, abs(value))
            ]
    return found


def read(folder, name):
    text = (folder / f"{name}.txt").read_text(encoding="utf-8")
    return text, json.loads((folder / f"{name}.json").read_text(encoding="utf-8"))


@pytest.mark.parametrize("name", [pytest.param(n, marks=[pytest.mark.slow] if n in SLOW else []) for n in STUDIES])
def test_report_is_still_true(name, tmp_path):
    command = [sys.executable, REPORTS / "regenerate.py", name, "--into", tmp_path]
    subprocess.run(command, check=True, timeout=600, capture_output=True, text=True, cwd=tmp_path)
    text, document = read(tmp_path, name)
    old_text, old_document = read(REPORTS, name)
    assert masked(text).splitlines() == masked(old_text).splitlines()
    assert drifts(document, old_document) == []
    assert too_uncertain(document) == []
    index = "README.md"
    assert (tmp_path / index).read_text(encoding="utf-8") == (REPORTS / index).read_text(encoding="utf-8")


def test_every_study_has_its_report_and_no_other_is_left():
    assert {path.name for path in REPORTS.iterdir() if path.suffix in (".txt", ".json")} == {
        f"{name}.{kind}" for name in STUDIES for kind in ("txt", "json")
    }


def changed(document, value, *keys):
    new = copy.deepcopy(document)
    place = new
    for key in keys[:-1]:
        place = place[key]
    place[keys[-1]] = value(place[keys[-1]])
    return new


QUANTITIES = ("results", 0, "quantities")


@pytest.mark.parametrize(
    ("value", "keys"),
    [
        (lambda v: v * (1 + 1e-6), (*QUANTITIES, "assurance", "value")),
        (lambda v: v + 1e-7, (*QUANTITIES, "power_quantiles", "value", "0.5")),
        (lambda v: v + 1e-7, ("results", 0, "decision_table", "joint", 0, 0)),
        (lambda _: None, (*QUANTITIES, "type_s_rate", "value")),
        (lambda _: 1e-9, (*QUANTITIES, "assurance", "error")),
        (lambda v: v + 1, ("results", 0, "n")),
        (lambda v: v[:-1], ("messages",)),
        (lambda v: v + " ", ("messages", 0, "text")),
        (lambda v: v[::-1], ("study", "sha256")),
        (lambda v: v + 1, ("provenance", "seed")),
        (lambda _: {}, (*QUANTITIES, "expected_power")),
    ],
)
def test_a_drift_is_found(value, keys):
    document = read(REPORTS, "orchard-nozzle")[1]
    assert len(drifts(changed(document, value, *keys), document)) == 1


@pytest.mark.parametrize(
    ("value", "keys"),
    [
        (lambda v: v * (1 + 1e-9), (*QUANTITIES, "assurance", "value")),
        (lambda v: v * 3, (*QUANTITIES, "exaggeration_median", "error")),
        (lambda _: 4e-12, (*QUANTITIES, "assurance", "error")),
        (lambda _: "3.99.0", ("provenance", "python")),
    ],
)
def test_last_bits_and_versions_of_others_are_no_drift(value, keys):
    document = read(REPORTS, "orchard-nozzle")[1]
    assert drifts(changed(document, value, *keys), document) == []


@pytest.mark.parametrize(
    ("value", "keys"),
    [
        (lambda _: 2e-6, (*QUANTITIES, "assurance", "error")),
        (lambda _: 6e-3, (*QUANTITIES, "power_quantiles", "error", "0.5")),
        (lambda _: float("nan"), (*QUANTITIES, "type_s_rate", "error")),
    ],
)
def test_an_error_beyond_the_tolerance_is_found(value, keys):
    document = read(REPORTS, "orchard-nozzle")[1]
    assert too_uncertain(document) == []
    assert len(too_uncertain(changed(document, value, *keys))) == 1


def test_masking_hides_errors_and_nothing_else():
    text, _ = read(REPORTS, "orchard-nozzle")
    line = next(line for line in text.splitlines() if line.startswith("assurance  "))
    error = re.search(r"±\S+", line)[0]
    assert masked(line) == masked(line.replace(error, "±4e-10"))
    for digit in re.finditer(r"\d", line[: line.index("±")]):
        other = line[: digit.start()] + str((int(digit[0]) + 1) % 10) + line[digit.end() :]
        assert masked(other) != masked(line)
