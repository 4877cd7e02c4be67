"""What each key of a study file means, in words: for the JSON Schema, for templates and for faults.

Sections and rules are worded here. The keys of a family are worded in its own `example`, and those of a
distribution in its docstring, so that a new family or distribution brings its words along.
"""

import inspect
import re
from dataclasses import fields
from typing import Any

SECTIONS = {
    "study": "what the study is about",
    "effect": "the effect that is asked about, on its own scale",
    "design": "what the study will record: a family, its sample size and its nuisance parameters",
    "prior": "what is believed before the study",
    "rule": "which decision a result leads to; a two-sided test at 0.05 when absent",
    "target": "what the command `size` must reach",
}

KEYS = {
    "study": {
        "title": "a short name of the study, required",
        "question": "the question in one sentence",
        "field": 'the trade, e.g. "agronomy"; "clinical" or "safety" turns the cautions on',
    },
    "effect": {
        "null": "the value to compare with; 0, or 1 for ratios, unless the family needs another",
        "favourable": 'which direction is good news: "higher", "lower" or "either"',
        "smallest_relevant": "the least distance from the null that matters, > 0 (for ratios, a ratio > 1)",
        "planning_value": "the one effect a classical power calculation would use",
        "unit": "the unit of the effect, in words",
    },
    "prior": {
        "probability_null": "weight exactly at the null, 0 to 1",
        "effect": "the effect, given that it is not exactly null: a number or a distribution",
        "treatment": "the treated arm instead of the effect: a number or a distribution",
        "control": "the control arm, instead of [design] control: a number or a distribution",
    },
    "rule": {
        "alpha": "level of the test, between 0 and 1; a two-sided test has half of it in each tail",
        "sides": 'the side on which the test may reject: "two", "higher" or "lower"',
        "tails": 'two-sided p of exact tests: "central" (twice the smaller tail) or "minimum_likelihood"',
        "type": "the rule",
    },
    "target": {
        "measure": "the quantity to bring to its bound",
        "at_least": "lower bound of the measure; give this or at_most",
        "at_most": "upper bound of the measure; give this or at_least",
        "max_n": "where the search stops, in the family's own n",
    },
    "design": {"family": "what kind of study it is"},
    "distribution": {
        "distribution": "the shape of the belief",
        "truncated": "[low, high]: cut off outside, scaled up inside; one end may be infinite",
    },
}


def first_paragraph(cls: type) -> str:
    """The opening words of a class's docstring, on one line."""
    return " ".join(inspect.cleandoc(cls.__doc__ or "").split("\n\n")[0].split())


def words_of(cls: Any, section: str) -> dict[str, str]:
    """Description of the keys of a family, rule, distribution or section, as far as there is one."""
    return {**docstring_words(cls), **example_words(getattr(cls, "example", "")), **KEYS.get(section, {})}


def docstring_words(cls: Any) -> dict[str, str]:
    """Words of the fields that a docstring explains as `name: words.`, or as `name, other: words.`"""
    names = [field.name for field in fields(cls)]
    text = " ".join(inspect.cleandoc(cls.__doc__ or "").split())
    label = rf"\b((?:{'|'.join(names)})(?:, (?:{'|'.join(names)}))*): "
    parts = re.split(label, text)[1:] if names else []
    found = {}
    for labels, words in zip(parts[::2], parts[1::2], strict=True):
        found.update(dict.fromkeys(labels.split(", "), words.strip().rstrip(".")))
    return found


def example_words(example: str) -> dict[str, str]:
    """Comments of the `[design]` keys in a family's example."""
    design = example.partition("[design]")[2].partition("\n[")[0]
    return {key: words.strip() for key, words in re.findall(r"^(?:# )?(\w+) = .*?\s# (.+)$", design, re.MULTILINE)}
