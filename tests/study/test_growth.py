"""A rule with every kind of key is read from its dataclass alone, as the rules to come will be."""

from dataclasses import dataclass
from typing import Any, ClassVar, Literal

import pytest

from bayesdesign.core.errors import check_values
from bayesdesign.prior import Distribution, Normal, Point
from bayesdesign.study import schema


@dataclass(frozen=True, kw_only=True)
class Bar:
    """A bar to clear. beyond: a value. at_least: a probability."""

    beyond: float
    at_least: float = 0.5

    def __post_init__(self) -> None:
        check_values((0 <= self.at_least <= 1, "at_least", self.at_least, "0 to 1"))


@dataclass(frozen=True, kw_only=True)
class Zones:
    """A rule. go: the bar. belief: the analysis prior. levels: some numbers."""

    kind: ClassVar[str] = "zones"

    go: Bar
    belief: Distribution | Literal["flat", "design"] = "flat"
    levels: tuple[float, ...] = (0.1, 0.2)
    strict: bool = False
    count: int | None = None


@pytest.fixture(autouse=True)
def zones(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(schema.RULE_OF, "zones", Zones)  # type: ignore[misc]


def read(**keys: Any) -> tuple[Any, list[str]]:
    made, faults = schema.check("rule", "zones", {"type": "zones", "go": {"beyond": 1}, **keys})
    return made, [str(fault) for fault in faults]


def test_it_is_built() -> None:
    assert read() == (Zones(go=Bar(beyond=1.0)), [])
    assert read(belief="design", levels=[1], strict=True, count=3) == (
        Zones(go=Bar(beyond=1.0), belief="design", levels=(1.0,), strict=True, count=3), [],
    )  # fmt: skip
    assert read(belief=2)[0].belief == Point(value=2.0)
    assert read(belief={"distribution": "normal", "mean": 0, "sd": 1})[0].belief == Normal(mean=0, sd=1)


def test_its_faults_are_found() -> None:
    made, faults = read(
        go={"at_least": 2, "beyond": "x"}, belief="flatt", levels=[1, True], strict=1, count=1.5, stop=1
    )
    assert made is None
    assert faults == [
        '[rule] go.beyond: not a number (got "x"); a number, without quotes',
        '[rule] belief: not one of the choices (got "flatt"); did you mean flat? allowed: "flat", "design"',
        "[rule] levels[1]: not a number (got true); a number",
        "[rule] strict: neither true nor false (got 1); true or false",
        "[rule] count: not a whole number (got 1.5); a whole number",
        "[rule] stop: unknown key (got 1); allowed: type, go, belief, levels, strict, count",
    ]
    assert read(go={"beyond": 1, "at_least": 2})[1] == [
        "[rule] go.at_least: value not allowed (got 2); 0 to 1"
    ]
    assert read(go={"beyond": 1, "at_leas": 0})[1] == [
        "[rule] go.at_leas: unknown key (got 0); did you mean at_least? allowed: beyond, at_least"
    ]
    assert read(belief={"distribution": "normal", "mean": 0, "s": 1})[1] == [
        "[rule] belief.sd: missing; standard deviation, > 0; neither variance nor precision",
        "[rule] belief.s: unknown key (got 1); did you mean sd? allowed: distribution, mean, sd, truncated",
    ]
    assert read(go=3)[1] == ["[rule] go: not a table (got 3); a table {key = value, ...}"]


def test_a_second_rule_joins_the_schema() -> None:
    choices = schema.json_schema()["properties"]["rule"]
    assert {"$ref": "#/$defs/rule_zones"} in choices["oneOf"]
