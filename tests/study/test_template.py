"""Starting files, the JSON Schema, and the study in plain words."""

import json
import re
import tomllib
from typing import Any

import jsonschema
import pytest

from bayesdesign.core.errors import StudyError
from bayesdesign.design import FAMILIES, Design
from bayesdesign.evaluate import evaluate
from bayesdesign.study.describe import describe
from bayesdesign.study.read import parse_study
from bayesdesign.study.schema import json_schema
from bayesdesign.study.template import template
from tests.study.files import SHARES, written

FAMILY = pytest.mark.parametrize("cls", FAMILIES, ids=lambda cls: cls.family)


@pytest.fixture(scope="module")
def schema() -> dict[str, Any]:
    return json_schema()


def valid(schema: dict[str, Any], text: str) -> bool:
    return jsonschema.Draft202012Validator(schema).is_valid(tomllib.loads(text))


@FAMILY
def test_a_template_is_a_study_that_can_be_evaluated(cls: type[Design], schema: dict[str, Any]) -> None:
    text = template(cls.family)
    study = parse_study(text, "new.toml")
    assert type(study.design) is cls
    assert valid(schema, text)
    assert all(len(line) <= 95 for line in text.splitlines())
    assurance = evaluate(study).quantities["assurance"].value
    assert isinstance(assurance, float)
    assert 0.3 < assurance < 0.9


@FAMILY
def test_a_template_offers_every_key_with_words(cls: type[Design], schema: dict[str, Any]) -> None:
    text = template(cls.family)
    offered = {"design": set(), "rule": set()}  # type: dict[str, set[str]]
    section = ""
    before = ""
    for line in text.splitlines():
        if line.startswith("["):
            section = line.strip("[]")
        elif found := re.match(r"#?(\w+) = ", line):
            assert before.startswith("# ")
            offered.setdefault(section, set()).add(found[1])
        before = line
    definitions = schema["$defs"]
    assert offered["design"] == set(definitions[f"design_{cls.family}"]["properties"])
    assert offered["rule"] == set(definitions["rule_significance"]["properties"])
    for name in ("study", "effect", "prior", "target"):
        assert offered[name] <= set(definitions[name]["properties"])


@FAMILY
def test_optional_keys_of_a_template_are_well_typed(cls: type[Design]) -> None:
    """Uncommented one at a time they load, or clash with a key that the comment says they replace."""
    text = template(cls.family)
    for key in re.findall(r"^#(\w+) = ", text, re.MULTILINE):
        clash = ""
        try:
            parse_study(re.sub(rf"^#{key} = ", f"{key} = ", text, flags=re.MULTILINE))
        except StudyError as error:
            clash = str(error)
        assert not clash or re.search(r"do not fit|given together|one bound", clash), (key, clash)


def test_an_unknown_family_is_refused() -> None:
    with pytest.raises(
        StudyError,
        match=r'FAMILY: unknown family \(got "two_mean"\); did you mean two_means\? allowed: estimate, ',
    ):
        template("two_mean")


def test_the_schema_is_a_schema(schema: dict[str, Any]) -> None:
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    jsonschema.Draft202012Validator.check_schema(schema)
    text = json.dumps(schema)
    assert '"type": "null"' not in text  # TOML has no null
    assert ": null" not in text


def test_every_key_of_the_schema_is_described(schema: dict[str, Any]) -> None:
    for name, definition in schema["$defs"].items():
        assert definition["description"], name
        for key, value in definition["properties"].items():
            assert value.get("description"), (name, key)


def test_the_schema_knows_keys_types_and_tags(schema: dict[str, Any]) -> None:
    assert valid(schema, written())
    assert valid(schema, written(rule__type=None))
    assert valid(schema, written(SHARES, design__control=None, prior__control="0.3"))
    for changes in (
        {"design__sdd": "1"},
        {"design__n_per_group": "4.5"},
        {"design__n_per_group": '"4"'},
        {"design__family": '"x"'},
        {"prior__effect": '{distribution = "normal", mean = 1}'},
        {"prior__effect": '{distribution = "x"}'},
        {"rule__alpha": "true"},
        {"study__title": None},
        {"prior": None},
        {"target__measure": '"power_quantiles"'},
        {"effect__favourable": '"up"'},
    ):
        assert not valid(schema, written(**changes)), changes


def test_a_study_in_plain_words() -> None:
    text = written(
        study__question='"Is the fine nozzle better?"',
        prior__probability_null="0.25",
        effect__planning_value="2.5",
        design__sd='{distribution = "gamma", shape = 100, rate = 20}',
    )
    assert describe(parse_study(text)) == [
        "Question: Is the fine nozzle better?",
        (
            "What is asked: the difference of means, treatment minus control, against 0 kg per tree. "
            "Values above 0 are good news."
        ),
        "It is relevant from 1.5 kg per tree upwards or -1.5 kg per tree downwards.",
        "The one guess for a classical power calculation is 2.5 kg per tree.",
        "Design two means, n per group 40, analysis t.",
        "The sd is uncertain: gamma, shape 100, rate 20; 5% below 4.207, half below 4.983, 95% below 5.85.",
        (
            "Before the study, the effect if it is not exactly 0 is believed to be: "
            "normal, mean 1.8, sd 1.5; "
            "5% below -0.6673, half below 1.8, 95% below 4.267 (kg per tree)."
        ),
        "The prior weight on an effect of exactly 0 kg per tree is 0.25.",
        (
            "The rule is significance, alpha 0.05, sides two. "
            "Its decisions: reject higher, reject lower, not reject; "
            "the favourable: reject higher."
        ),
        "The truth may be in one of these states: lower, negligible, higher.",
        "The target: assurance of at least 0.8, with n per group up to 5000.",
    ]


def test_two_arms_in_plain_words() -> None:
    text = written(
        SHARES,
        prior__effect=None,
        prior__treatment='{distribution = "uniform", low = 0.4, high = 0.6}',
        design__scale='"ratio"',
        effect__null=None,
        effect__smallest_relevant="1.25",
        rule__sides='"lower"',
        effect__favourable='"higher"',
    )
    said = "\n".join(describe(parse_study(text)))
    assert "It is relevant from 1.25 upwards or 0.8 downwards." in said
    assert (
        "the treated arm is believed to be: uniform between 0.4 and 0.6; "
        "5% below 0.41, half below 0.5, 95% below 0.59." in said
    )
    assert "this makes the effect 5% below 1.025, half below 1.25, 95% below 1.475." in said
    assert "none of them is favourable, so this study cannot succeed" in said


@FAMILY
def test_nothing_is_ever_accepted(cls: type[Design]) -> None:
    said = " ".join(describe(parse_study(template(cls.family)))).lower()
    assert "accept" not in said
