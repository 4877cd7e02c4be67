"""What people read: fits, tells the truth in whole numbers, and never says what a test cannot say."""

import re
from dataclasses import replace

import pytest

from bayesdesign.render import words
from bayesdesign.render.to_terminal import check_text, result_text
from bayesdesign.render.typeset import width
from bayesdesign.result import Comparison, DecisionTable, SizeAnswer

from .examples import STUDIES, answer

BANNED = re.compile(
    r"accept\w* the null|null( hypothesis)? is (true|accepted)|no effect\b|no difference\b|prove[sn]?\b",
    re.IGNORECASE,
)


def text_of(name, **options):
    return result_text(answer(name), **options)


def texts():
    for name in STUDIES:
        yield text_of(name)
        if STUDIES[name].design.planned_n is not None and name != "ratio":
            yield result_text(answer(name, (10, 20)))


@pytest.mark.parametrize("name", STUDIES)
def test_fits_the_screen(name):
    lines = text_of(name).split("\n")
    assert max(width(line) for line in lines) <= 80
    before_the_warnings = lines.index(
        next((line for line in lines if line.startswith("watch out")), lines[-1])
    )
    assert before_the_warnings <= 45


@pytest.mark.parametrize("name", STUDIES)
def test_nothing_drives_the_terminal(name):
    assert all(c.isprintable() or c == "\n" for c in text_of(name))


def test_no_banned_phrase_in_any_rendering():
    for text in texts():
        assert not BANNED.search(" ".join(text.split()))
    assert BANNED.search("so we accept the null")


def test_headline_comes_first_and_counts_like_the_table():
    text = " ".join(text_of("zone").split())
    head = re.search(
        r"drawn from the prior, about (\d+) runs would conclude that the difference of means, "
        r"treatment minus control, is higher than 0 kg per tree",
        text,
    )
    totals = re.search(r"all (\d+) (\d+) (\d+) 100 ", text)
    assert head is not None
    assert totals is not None
    assert head[1] == totals[1]
    assert sum(map(int, totals.groups())) == 100
    silent = re.search(r"Of 100 runs, about (\d+) do not reject", text)
    assert silent is not None
    assert silent[1] == totals[3]


@pytest.mark.parametrize("name", STUDIES)
def test_counts_sum_to_one_hundred(name):
    table = answer(name).answers[0].table
    counts = words.hundred(table)
    assert sum(map(sum, counts)) == 100
    for row, joint in zip(counts, table.joint, strict=True):
        for count, p in zip(row, joint, strict=True):
            assert abs(count - 100 * p) < 2


def test_rounding_keeps_every_total():
    third = 1 / 3
    table = DecisionTable(
        states=("lower", "higher"), decisions=("reject_higher", "reject_lower", "not_reject"),
        joint=[[third / 2] * 3, [third / 2] * 3], given_state=[None, None], given_decision=[[None] * 3] * 2,
    )  # fmt: skip
    assert words.hundred(table) == [[17, 17, 17], [17, 16, 16]]


@pytest.mark.parametrize(
    ("number", "p", "said"),
    [
        (0, 0.0, "none"),
        (0, 0.004, "fewer than 1"),
        (61, 0.61, "about 61"),
        (100, 0.999, "more than 99"),
        (100, 1.0, "all"),
    ],
)
def test_counts_do_not_pretend(number, p, said):
    assert words.count(number, p) == said


def test_direction_unit_and_scale_are_spoken():
    assert "is lower than 1." in " ".join(text_of("ratio").split())
    assert "relevant, higher (1.2 times or more)" in text_of("ratio")
    assert "the mean differs from 1." in " ".join(text_of("either").split())
    assert "can never claim what the study calls favourable" in " ".join(text_of("against").split())


def test_cautions_only_where_someone_can_be_hurt():
    assert "qualified statistician" in " ".join(text_of("zone").split())
    assert "local codes" in " ".join(text_of("spike").split())
    assert "statistician" not in text_of("no null")


def test_colour_only_on_request_and_only_ink():
    plain, inked = text_of("zone"), text_of("zone", colour=True)
    assert "\x1b" not in plain
    assert "\x1b[1m" in inked
    assert re.sub(r"\x1b\[[0-9;]*m", "", inked) == plain


def test_undefined_numbers_say_why():
    text = " ".join(text_of("no null").split())
    assert (
        "none type I rate; specificity; false-positive risk; false-negative risk: no state is the null"
        in text
    )


def test_several_sizes_one_row_each():
    lines = result_text(answer("zone", (20, 40, 80))).split("\n")
    rows = [line.split()[0] for line in lines if re.match(r" +\d+  0\.", line)]
    assert rows == ["20", "40", "80"]


def with_size(name="zone", **changes):
    size = {
        "measure": "assurance", "target": 0.8, "direction": "at_least", "first_n": 40, "safe_n": 40,
        "achieved": 0.8012, "ceiling": 0.885, "searched_to": 5000,
    }  # fmt: skip
    return " ".join(
        result_text(replace(answer(name), command="size", size=SizeAnswer(**(size | changes)))).split()
    )


def test_size_found():
    text = with_size()
    assert (
        "The smallest n per group that gives assurance of at least 0.8 is 40. Every larger one, up to 5000, "
        "gives it too."
        in text
    )
    assert "reached 0.8012 ceiling 0.8850" in text


def test_size_with_teeth():
    assert "From 44 on every one up to 5000 does; some between 40 and 44 fall short" in with_size(safe_n=44)
    assert "Not every larger one does" in with_size(safe_n=None)


def test_size_above_the_ceiling():
    text = with_size(first_n=None, safe_n=None, achieved=None, target=0.9)
    assert "No n per group up to 5000 gives assurance of at least 0.9. Its ceiling is 0.885" in text
    assert "weight on the hoped-for side" in text
    assert "planned n per group" in text


def test_size_beyond_the_search():
    assert "a larger [target] max_n will find one" in with_size(first_n=None, safe_n=None, achieved=None)


def test_routes_side_by_side():
    one = answer("zone").answers[0]
    compared = {"assurance": Comparison(integration=0.41181, sampling=0.4123, mcse=0.0005, z=0.98)}
    text = result_text(replace(answer("zone"), answers=[replace(one, cross_check=compared)]))
    assert re.search(r"assurance +0\.4118 +0\.4123 +±0\.0005 +\+1\.0", text)
    assert "the largest is 1.0" in text


def test_check_lists_what_the_study_says():
    text = check_text(STUDIES["zone"], ["One thing.", "Another\x1b[2J."], [])
    assert "· One thing." in text
    assert "\x1b" not in text
    assert "The file is sound." in text
