"""From what a validator found to lines that say where, what came, and what is allowed."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from typing import Any

from bayesdesign.core.errors import Fault
from bayesdesign.prior import DISTRIBUTIONS
from bayesdesign.study.shown import cut, escaped, nearest, shown, shown_key

TAG = "bayesdesign:"  # opens those parts of a validator's path that name a branch, not a key

PLAIN = {
    "float_type": ("not a number", "a number"),
    "int_type": ("not a whole number", "a whole number"),
    "int_from_float": ("not a whole number", "a whole number"),
    "int_parsing_size": ("too large", "a smaller whole number"),
    "finite_number": ("not a finite number", "a finite number"),
    "string_type": ("not a text", "a text in quotes"),
    "string_unicode": ("not a text", "a text in quotes"),
    "bool_type": ("neither true nor false", "true or false"),
    "list_type": ("not a list", "a list in square brackets"),
    "model_type": ("not a table", "a table {key = value, ...}"),
    "recursion_loop": ("nested too deeply", "fewer tables inside tables"),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """One error of the validator: its type, path within the section, the value found there, and details."""

    kind: str
    path: tuple[int | str, ...]
    got: Any
    more: Mapping[str, Any]


def faults_of(section: str, problem: Problem, words: Mapping[str, str]) -> list[Fault]:
    """The faults that one problem stands for.

    Args:
        section: the section's name.
        problem: what the validator found.
        words: the keys of the table in which it was found, with their descriptions.
    """
    where, got = place(section, problem.path, keep_last=problem.kind == "extra_forbidden"), shown(problem.got)
    last = str(problem.path[-1]) if problem.path else ""
    match problem.kind:
        case "invalid":
            return [_of_object(where, problem.got, fault) for fault in problem.more["faults"]]
        case "missing":
            return [Fault(where=where, problem="missing", allowed=words.get(last) or "it is required")]
        case "extra_forbidden":
            return [unknown(where, "key", last, words, got)]
        case "union_tag_invalid" | "union_tag_not_found":
            return [_not_a_belief(where, problem.got)]
        case "literal_error" | "enum":
            return [_not_a_choice(where, problem, got)]
        case "less_than_equal" | "greater_than_equal":
            side, bound = (
                ("most", problem.more.get("le")) if problem.kind[0] == "l" else ("least", problem.more.get("ge"))
            )
            return [
                Fault(
                    where=where,
                    problem="value not allowed",
                    got=got,
                    allowed=f"a whole number of at {side} {bound}",
                )
            ]
        case "too_short" | "too_long":
            length = problem.more.get("min_length", problem.more.get("max_length"))
            return [
                Fault(
                    where=where,
                    problem=problem.kind.replace("_", " "),
                    got=got,
                    allowed=f"a list of {length}",
                )
            ]
    what, allowed = PLAIN.get(problem.kind, ("value not allowed", words.get(last, "")))
    hint = ", without quotes" if isinstance(problem.got, str) and "number" in allowed else ""
    return [Fault(where=where, problem=what, got=got, allowed=allowed + hint)]


def place(section: str, path: Iterable[int | str], *, keep_last: bool = False) -> str:
    """`[section] key.key[i].key`, without the names of branches; `keep_last` spares the last part."""
    parts = list(path)
    text = ""
    for i, part in enumerate(parts):
        if isinstance(part, int):
            text += f"[{part}]"
        elif not part.startswith(TAG) or (keep_last and i == len(parts) - 1):
            text += f".{shown_key(part)}" if text else shown_key(part)
    return f"[{section}] {text}".rstrip()


def unknown(where: str, what: str, name: str, known: Iterable[str], got: str = "") -> Fault:
    """A key, section or tag that does not exist, with the one that was probably meant and all there are."""
    known = list(known)
    return Fault(
        where=where,
        problem=f"unknown {what}",
        got=got,
        allowed=f"{nearest(name, known)}allowed: {', '.join(known)}",
    )


def _of_object(where: str, table: Any, fault: Fault) -> Fault:
    """A fault that an object raised about one of its own keys."""
    if not isinstance(table, dict):  # a bare number: the object's only key is not in the file
        return replace(fault, where=where, got=shown(table))
    inner = where if not fault.where else f"{where} {fault.where}" if " " not in where else f"{where}.{fault.where}"
    name = fault.where.partition(".")[0]
    if name in table:
        return replace(fault, where=inner, got=shown(table[name]))
    problem = "missing" if fault.got in ("None", "") and fault.problem == "value not allowed" else fault.problem
    return replace(fault, where=inner, problem=problem, got="" if fault.got == "None" else cut(escaped(fault.got)))


def _not_a_belief(where: str, value: Any) -> Fault:
    kinds = [cls.kind for cls in DISTRIBUTIONS]
    if not isinstance(value, dict):
        hint = ", without quotes" if isinstance(value, str) else ""
        example = '{distribution = "normal", mean = 0, sd = 1}'
        allowed = f"a number{hint}, or a table like {example}"
        return Fault(where=where, problem="neither a number nor a distribution", got=shown(value), allowed=allowed)
    if "distribution" not in value:
        return Fault(where=f"{where}.distribution", problem="missing", allowed=f"one of: {', '.join(kinds)}")
    return unknown(
        f"{where}.distribution",
        "distribution",
        str(value["distribution"]),
        kinds,
        shown(value["distribution"]),
    )


def _not_a_choice(where: str, problem: Problem, got: str) -> Fault:
    # pydantic words the choices as 'a', 'b' or 'c'
    choices = str(problem.more.get("expected", "")).replace(" or ", ", ").replace("'", "").split(", ")
    quoted = ", ".join(f'"{choice}"' for choice in choices)
    return Fault(
        where=where,
        problem="not one of the choices",
        got=got,
        allowed=f"{nearest(problem.got, choices)}allowed: {quoted}",
    )
