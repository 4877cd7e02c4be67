"""Characters, widths and figures."""

import json
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from bayesdesign.render.to_json import to_json
from bayesdesign.render.typeset import figures, pad, safe, shorten, uncertainty, width, wrap


@pytest.mark.parametrize(
    ("value", "error", "shown"),
    [
        (0.612345, 1e-12, "0.6123"), (0.612345, 0.0005, "0.6123"), (0.612345, 0.002, "0.612"),
        (0.612345, 0.05, "0.61"), (0.0000397, 1e-12, "4.0e-05"), (0.00002, 0.00003, "2e-05"),
        (1.23456, 1e-9, "1.235"), (123.456, 1e-9, "123.5"), (0.0, 0.0, "0"), (0.0, 0.001, "0.000"),
        (5.3e7, 1.0, "5.300e+07"), (-0.25, 1e-9, "-0.2500"), (17.4, 3.0, "17"),
    ],
)  # fmt: skip
def test_no_more_digits_than_the_error_supports(value, error, shown):
    assert figures(value, error) == shown


@pytest.mark.parametrize(
    ("error", "shown"),
    [
        (1.2e-12, "±2e-12"),
        (0.0005, "±0.0005"),
        (0.00051, "±0.0006"),
        (0.0, "±0"),
        (None, ""),
        (2.1, "±3"),
        (0.95, "±1"),
        (9.6e-13, "±1e-12"),
    ],
)
def test_errors_are_rounded_up(error, shown):
    assert uncertainty(error) == shown


@given(st.floats(1e-15, 1e5))
def test_shown_error_is_never_smaller(error):
    assert float(uncertainty(error)[1:]) >= error * (1 - 1e-5)


@given(st.floats(-1e5, 1e5), st.floats(1e-12, 10))
def test_shown_value_is_right_to_its_last_digit(value, error):
    shown = figures(value, error)
    mantissa, _, power = shown.partition("e")
    last = 10.0 ** (int(power or 0) - len(mantissa.partition(".")[2]))
    assert abs(float(shown) - value) <= 0.5001 * last
    # finer than the error only where whole numbers are shown anyway
    assert last * 1.0001 >= min(error / 10, 1.0) or math.isclose(last, error / 10)


@given(st.text(max_size=300), st.integers(2, 100))
def test_safe_is_printable_and_short(text, limit):
    shown = safe(text, limit)
    assert all(c.isprintable() for c in shown)
    assert width(shown) <= limit


@pytest.mark.parametrize(
    "text", ["\x1b[31m", "\x9b31m", "a\nb", "\u202e", "\u2066", "\u200b", "\ud800", "\x00", "\U000e0041"]
)
def test_what_drives_a_terminal_is_spelt_out(text):
    assert "\\" in safe(text)


def test_letters_of_all_scripts_stay():
    assert safe("Größe µg ≥ 5 °C, 果樹, Ωραία") == "Größe µg ≥ 5 °C, 果樹, Ωραία"


def test_long_text_is_cut_and_says_so():
    assert safe("x" * 10_000, 20) == "x" * 19 + "…"
    assert len(safe("e" + "\u0301" * 10_000, 20)) <= 40


@given(st.text(st.characters(categories=["L", "N", "P", "Zs"]), max_size=300), st.integers(2, 80))
def test_wrapped_lines_fit_and_lose_nothing(text, columns):
    lines = wrap(text, columns)
    assert all(width(line) <= columns for line in lines)
    assert "".join("".join(lines).split(" ")) == "".join(text.split(" "))


def test_columns_count_wide_letters_twice():
    assert width("果樹") == 4
    assert pad("果樹", 6) == "果樹  "
    assert pad("ab", 4, ">") == "  ab"
    assert shorten("果樹園", 4) == "果…"


@pytest.mark.parametrize("bad", [math.nan, math.inf])
def test_json_has_no_infinity(bad):
    with pytest.raises(ValueError, match="not JSON compliant"):
        to_json({"value": bad})


@given(st.text())
def test_json_says_the_same_without_driving_a_terminal(text):
    shown = to_json({"title": text})
    assert json.loads(shown)["title"] == text
    assert not any(127 <= ord(c) < 160 or (ord(c) < 32 and c != "\n") for c in shown)
    assert not set(shown) & set("\u202e\u2066\u200f\x9b\x1b")
    shown.encode("utf-8")
