"""`new`: a commented starting file for a family.

The family says in its `example` what is its own; the rest is the same for all.
"""

import re
import textwrap

from bayesdesign.core.errors import StudyError
from bayesdesign.design import FAMILIES
from bayesdesign.study.problems import unknown
from bayesdesign.study.shown import shown
from bayesdesign.study.words import KEYS, SECTIONS, example_words

WIDTH = 78

STUDY = """
[study]
title = "My study"
# question = "Does the treatment help?"
# field = "agronomy"
"""
RULE = """
[rule]
type = "significance"
alpha = 0.05
sides = "two"
# tails = "central"
"""
TARGET = """
[target]
measure = "assurance"
at_least = 0.8
# at_most = 0.05
max_n = 5000
"""


def template(family: str) -> str:
    """A study file of this family that can be evaluated as it is; optional keys are there as comments.

    Raises:
        StudyError: there is no such family.
    """
    known = {cls.family: cls for cls in FAMILIES}
    if family not in known:
        raise StudyError([unknown("FAMILY", "family", family, known, shown(family))])
    example = known[family].example
    rule = "" if "\n[rule]" in example else RULE
    head = f"# A study of family {family}. Change the numbers; remove the # of a #key to use it."
    keys = example_words(example)
    lines = [head]
    section = ""
    for line in f"{STUDY}{example}{rule}{TARGET}".splitlines():
        if line.startswith("["):
            section = line.strip("[]")
            lines += ["", f"# {SECTIONS[section]}", line]
        elif found := re.match(r"(?P<option># )?(?P<key>\w+) = ", line):
            words = keys[found["key"]] if section == "design" and found["key"] in keys else KEYS[section][found["key"]]
            lines += _key(line.removeprefix("# "), words, optional=found["option"] is not None)
    return "\n".join(lines) + "\n"


def _key(line: str, words: str, *, optional: bool) -> list[str]:
    """The words as comment lines, then the key."""
    entry = re.sub(r"\s# .*$", "", line)
    return [
        "",
        *textwrap.wrap(words, WIDTH, initial_indent="# ", subsequent_indent="# "),
        f"#{entry}" if optional else entry,
    ]
