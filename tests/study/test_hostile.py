"""Files that are no study files, and files made to do harm."""

import errno
import os
import time
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bayesdesign.core.errors import StudyError
from bayesdesign.study.read import LARGEST, load_study, parse_study
from bayesdesign.study.shown import LONGEST, shown
from tests.study.files import GOOD, SHARES, lines, written


def refusal(path: Path | str) -> str:
    with pytest.raises(StudyError) as caught:
        load_study(path)
    text = str(caught.value)
    assert "\n" not in text
    return text


BYTES = [
    (b"", "the file is empty; write a starting file with `bayesdesign new FAMILY`"),
    (b"  \n\n", "the file is empty"),
    (b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR", "this is a binary file; a study file is TOML, a text in UTF-8"),
    (b"[study]\ntitle = 'caf\xe9'\n", "not UTF-8 text in line 2 (got byte 0xe9); save the file as UTF-8"),
    ("\ufeff[study]".encode("utf-16-le"), "not UTF-8 text in line 1 (got byte 0xff)"),
    (b"[study]\ntitle = 'a", "not valid TOML, "),
    (b"[study]\ntitle = = 3\n", "not valid TOML, line 2, column 9: invalid value; correct the line"),
    (
        b"[study]\ntitle = 'a'\ntitle = 'b'\n",
        "not valid TOML, line 3, column 12: a key or table is given twice",
    ),
    (b"[study]\n[study]\n", "not valid TOML, line 2, column 7: a key or table is given twice"),
    (b"a = " + b"9" * 5000, "a number has too many digits"),
    (b"a = " + b"[" * 50_000, "nested too deeply; fewer tables or lists inside each other"),
    (b"a" + b".a" * 250_000 + b" = 1", "nested too deeply; keys of at most 16 dotted parts"),
    (b"#" * (LARGEST + 1), f"too large for a study file (got more than {LARGEST} bytes)"),
]


@pytest.mark.parametrize(("data", "line"), BYTES, ids=lambda value: repr(value)[:30])
def test_what_is_not_a_study_file_gets_one_line_soon(tmp_path: Path, data: bytes, line: str) -> None:
    file = tmp_path / "x.toml"
    file.write_bytes(data)
    start = time.perf_counter()
    assert refusal(file).startswith(f"{file}: {line}")
    assert time.perf_counter() - start < 2


def test_what_cannot_be_opened(tmp_path: Path) -> None:
    assert refusal(tmp_path / "no.toml").endswith(
        "no.toml: there is no such file; give the path of a study file, or write one with `bayesdesign new`"
    )
    assert ": this is a directory; " in refusal(tmp_path)
    assert ": cannot be read: " in refusal("a\0b")
    assert ": cannot be read: " in refusal("x" * 5000)
    (tmp_path / "loop").symlink_to(tmp_path / "loop")
    assert ": cannot be read: too many levels of symbolic links; " in refusal(tmp_path / "loop")


def test_an_unreadable_file(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:  # root, who runs the tests in containers, may read everything
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES))

    monkeypatch.setattr(Path, "open", refuse)
    assert (
        refusal("x.toml")
        == "x.toml: cannot be read: permission denied; give the path of a readable study file"
    )


def test_an_endless_device_is_refused_by_its_size() -> None:
    assert "too large" in refusal("/dev/zero")


def test_the_name_of_a_file_stays_on_one_line(tmp_path: Path) -> None:
    file = tmp_path / "a\nb\x1b[31m.toml"
    file.write_text("[study]")
    with pytest.raises(StudyError) as caught:
        load_study(file)
    assert "a\\nb\\x1b[31m.toml: [design]: missing section" in str(caught.value)


HOSTILE = [
    ('"' + "x" * 10_000 + '"', '"' + "x" * 58 + "…"),
    (r'"\u001b[31mred\u0007"', r'"\x1b[31mred\x07"'),
    (r'"one\ntwo"', r'"one\ntwo"'),
    (r'"\u202egnp"', r'"\u202egnp"'),
    ("0x" + "f" * 100_000, "a whole number of 400000 bits"),
    ("[" + "1," * 10_000 + "]", "[" + "1, " * 19 + "1" + "…"),
    ("{a = {b = {c = {d = 1}}}}", "{a = {b = {c = …}}}"),
]


@pytest.mark.parametrize(("value", "seen"), HOSTILE, ids=lambda value: value[:20])
def test_hostile_values_are_short_and_tame(value: str, seen: str) -> None:
    (line,) = lines(written(effect__null=value))
    assert f"(got {seen})" in line
    assert line.isprintable()


def test_hostile_keys_are_short_and_tame() -> None:
    key = r'"\u001b[2J' + "k" * 1000 + '"'
    (line,) = lines(written() + f"{key} = 1\n")
    assert line.startswith('[target] "\\x1b[2Jkkk')
    assert line.isprintable()
    assert len(line) < 300


@given(
    st.recursive(
        st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
        lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
    )
)
def test_any_value_is_shown_on_one_short_line(value: object) -> None:
    text = shown(value)
    assert len(text) <= LONGEST
    assert text.isprintable()


def accepted_or_refused(text: str) -> None:
    """Nothing but a study or a StudyError, and then printable lines."""
    try:
        parse_study(text, "x.toml")
        return
    except StudyError as error:
        refused = error
    assert refused.faults
    assert all(line.isprintable() for line in str(refused).split("\n"))


VALUES = st.sampled_from(
    [
        "0",
        "-1",
        "1e308",
        "-1e308",
        "1e-320",
        "5e-324",
        "nan",
        "inf",
        "-inf",
        "true",
        '""',
        '"z"',
        "[]",
        "{}",
        "[1, 2]",
        "1979-05-27",
        "10000000000000000000000",
        "0.5",
        "1",
        "1000000000",
        "[[]]",
        "'higher'",
        "1" + "0" * 400,
        '{distribution = "normal"}',
        "2",
        '{distribution = "normal", mean = 0, sd = 1e308}',
        '{distribution = "normal", mean = 1e308, sd = 1e-300}',
        '{distribution = "student_t", df = 1e-3, location = 0, scale = 1}',
        '{distribution = "cauchy", location = 0, scale = 1e300}',
        '{distribution = "gamma", shape = 1e-3, rate = 1e3}',
        '{distribution = "gamma", shape = 1e12, rate = 1e12}',
        '{distribution = "beta", a = 1e-3, b = 1e-3}',
        '{distribution = "beta", mean = 0.5, size = 1e9}',
        '{distribution = "lognormal", median = 1, log_sd = 50}',
        '{distribution = "half_normal", scale = 5e-324}',
        '{distribution = "exponential", rate = 1e308}',
        '{distribution = "uniform", low = -1e308, high = 1e308}',
        '{distribution = "histogram", edges = [0, 1, 1e300], weights = [0, 1e-300]}',
        '{distribution = "mixture", components = [0, 1], weights = [0.5, 0.5]}',
        '{distribution = "mixture", components = [], weights = []}',
        '{distribution = "normal", mean = 0, sd = 1, truncated = [0, inf]}',
        '{distribution = "normal", mean = 0, sd = 1, truncated = [-inf, 1e-9]}',
        (
            '{distribution = "mixture", components = [0, {distribution = "uniform", low = 0, high = 1}], '
            "weights = [0.5, 0.5], "
            "truncated = [0, 0.5]}"
        ),
    ]
)
KEYS = [f"{section}__{key}" for section, table in {**GOOD, **SHARES}.items() for key in table]
KEYS += [
    "prior__treatment",
    "prior__control",
    "prior__probability_null",
    "design__sd",
    "design__standard_error",
    "design__unit_sd",
]
KEYS += [
    "design__n",
    "design__scale",
    "design__analysis",
    "effect__planning_value",
    "target__at_most",
    "design__sd_control",
    "design__n_control",
]


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(st.sampled_from([GOOD, SHARES]), st.dictionaries(st.sampled_from(KEYS), VALUES, max_size=4))
def test_extreme_values_at_any_key(base: dict[str, dict[str, str]], changes: dict[str, str]) -> None:
    accepted_or_refused(written(base, **changes))


@settings(max_examples=200, deadline=None)
@given(
    st.sampled_from([GOOD, SHARES]),
    st.lists(st.tuples(st.integers(0, 600), st.integers(0, 8), st.text(max_size=8)), min_size=1, max_size=4),
)
def test_damaged_text(base: dict[str, dict[str, str]], wounds: list[tuple[int, int, str]]) -> None:
    text = written(base)
    for start, length, patch in wounds:
        text = text[:start] + patch + text[start + length :]
    accepted_or_refused(text)


@settings(max_examples=100, deadline=None)
@given(st.text())
def test_any_text(text: str) -> None:
    accepted_or_refused(text)


def test_mixtures_in_mixtures_end_somewhere() -> None:
    for depth in (30, 90, 300, 3000):
        inner = '{distribution = "mixture", components = [' * depth + "1.0" + "], weights = [1.0]}" * depth
        accepted_or_refused(written(prior__effect=inner))
