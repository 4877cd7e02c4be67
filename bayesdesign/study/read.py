"""From a file, which may come from a stranger, to a `Study`; or to every fault in it at once."""

import hashlib
import re
import tomllib
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from bayesdesign.core.errors import Fault, StudyError
from bayesdesign.study import schema
from bayesdesign.study.problems import unknown
from bayesdesign.study.shown import LONGEST_PATH, cut, escaped, shown, shown_key
from bayesdesign.study.study import Effect, Study
from bayesdesign.study.words import SECTIONS

LARGEST = 1_000_000  # bytes; a study with a long histogram has a thousandth of it
DEEP_KEY = re.compile(r"""(?<![\w"'-])(?:[\w"'-]++[ \t]*+\.[ \t]*+){16}""")  # tomllib takes quadratic time for these

Tables = dict[str, Any]


def load_study(path: str | Path) -> Study:
    """Read a study file.

    Args:
        path: the TOML file, UTF-8, with or without a byte order mark.

    Raises:
        StudyError: the file cannot be read, or is wrong; it carries every fault that could be found.
    """
    try:
        with Path(path).open("rb") as file:
            data = file.read(LARGEST + 1)
    except FileNotFoundError:
        raise _refusal(
            path,
            Fault(
                where="",
                problem="there is no such file",
                allowed="give the path of a study file, or write one with `bayesdesign new`",
            ),
        ) from None
    except IsADirectoryError:
        raise _refusal(
            path, Fault(where="", problem="this is a directory", allowed="give the path of a study file")
        ) from None
    except (OSError, ValueError) as bad:  # ValueError: a path with a NUL
        why = (bad.strerror if isinstance(bad, OSError) else str(bad)) or type(bad).__name__
        raise _refusal(
            path,
            Fault(
                where="",
                problem=f"cannot be read: {why.lower()}",
                allowed="give the path of a readable study file",
            ),
        ) from None
    if len(data) > LARGEST:
        raise _refusal(
            path,
            Fault(
                where="",
                problem="too large for a study file",
                got=f"more than {LARGEST} bytes",
                allowed=f"at most {LARGEST} bytes",
            ),
        )
    return parse_study(_decoded(data, path), str(path), sha256=hashlib.sha256(data).hexdigest())


def parse_study(text: str, file: str = "", *, sha256: str = "") -> Study:
    """Read the text of a study file.

    Args:
        text: TOML.
        file: what to call it in faults and in `Study.file`.
        sha256: of the file's bytes; that of the text in UTF-8 when not given.

    Raises:
        StudyError: with every fault that could be found.
    """
    source = {
        "file": file,
        "sha256": sha256 or hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest(),
    }
    try:
        tables, faults = _sections(_parsed(text, file))
        parts, more = _parts(tables)
        faults += more
        study, more = _assembled(tables, parts, source)
    except RecursionError:
        raise _refusal(
            file,
            Fault(where="", problem="nested too deeply", allowed="fewer tables or lists inside each other"),
        ) from None
    faults += [fault for fault in more if fault not in faults]
    if study is None or faults:
        raise StudyError(sorted(faults, key=_position), _label(file))
    return study


def _refusal(path: object, fault: Fault) -> StudyError:
    return StudyError([fault], _label(path))


def _label(path: object) -> str:
    """The path as it may be printed."""
    return cut(escaped(str(path)), LONGEST_PATH)


def _position(fault: Fault) -> int:
    """Sections in their usual order, unknown ones first."""
    name = fault.where.removeprefix("[").partition("]")[0]
    return list(SECTIONS).index(name) if name in SECTIONS else -1


def _decoded(data: bytes, path: object) -> str:
    if not data.startswith((b"\xff\xfe", b"\xfe\xff")) and b"\0" in data:
        raise _refusal(
            path,
            Fault(where="", problem="this is a binary file", allowed="a study file is TOML, a text in UTF-8"),
        )
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as bad:
        line = data.count(b"\n", 0, bad.start) + 1
        fault = Fault(
            where="",
            problem=f"not UTF-8 text in line {line}",
            got=f"byte 0x{data[bad.start]:02x}",
            allowed="save the file as UTF-8",
        )
        raise _refusal(path, fault) from None


def _parsed(text: str, file: str) -> Tables:
    if not text.strip():
        raise _refusal(
            file,
            Fault(
                where="",
                problem="the file is empty",
                allowed="write a starting file with `bayesdesign new FAMILY`",
            ),
        )
    if DEEP_KEY.search(text):
        raise _refusal(file, Fault(where="", problem="nested too deeply", allowed="keys of at most 16 dotted parts"))
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as bad:
        what, place = _toml_words(str(bad))
        raise _refusal(
            file, Fault(where="", problem=f"not valid TOML{place}: {what}", allowed="correct the line")
        ) from None
    except ValueError:  # an integer with more digits than Python converts
        raise _refusal(
            file,
            Fault(where="", problem="a number has too many digits", allowed="numbers of at most 4300 digits"),
        ) from None


def _toml_words(message: str) -> tuple[str, str]:
    """The parser's complaint in the words of the trade, and `, line L, column C`."""
    match = re.fullmatch(r"(.*) \(at (line \d+, column \d+|end of document)\)", message, re.DOTALL)
    what, place = (match[1], match[2]) if match else (message, "")
    twice = what.startswith(
        ("Cannot overwrite", "Cannot declare", "Duplicate inline table key", "Cannot mutate immutable")
    )
    plain = "a key or table is given twice" if twice else cut(escaped(what[:1].lower() + what[1:]), 100)
    return plain, f", {place}" if place else ""


def _sections(raw: Tables) -> tuple[Tables, list[Fault]]:
    """The known sections that are tables, and what is wrong with the rest."""
    tables, faults = {}, []
    for name, table in raw.items():
        if name not in SECTIONS and not isinstance(table, dict):
            faults.append(unknown(shown_key(name), "key, outside of any section", name, SECTIONS, shown(table)))
        elif name not in SECTIONS:
            faults.append(unknown(f"[{shown_key(name)}]", "section", name, SECTIONS))
        elif not isinstance(table, dict):
            faults.append(
                Fault(
                    where=f"[{name}]",
                    problem="not a table",
                    got=shown(table),
                    allowed=f"a line [{name}], once, and its keys below it",
                )
            )
        else:
            tables[name] = table
    missing = [name for name in schema.REQUIRED if name not in raw]
    return tables, faults + [
        Fault(where=f"[{name}]", problem="missing section", allowed=SECTIONS[name]) for name in missing
    ]


def _parts(tables: Tables) -> tuple[Tables, list[Fault]]:
    """Each section's object, as far as it could be built, and the faults of all."""
    moved, faults = _with_control(tables)
    parts = {}
    for name, table in moved.items():
        tag, wrong = _tag(name, table)
        part = None
        if not wrong:
            part, wrong = schema.check(name, tag, table)
        faults += _from_prior(wrong, tables)
        if part is not None:
            parts[name] = part
    return parts, faults


def _with_control(tables: Tables) -> tuple[Tables, list[Fault]]:
    """The tables with `[prior] control` moved to `[design]`, where families have it."""
    prior, design = tables.get("prior", {}), tables.get("design", {})
    family = design.get("family")
    if schema.CONTROL not in prior or not isinstance(family, str) or family not in schema.FAMILY_OF:
        return tables, []
    got, where = shown(prior[schema.CONTROL]), f"[prior] {schema.CONTROL}"
    rest = {key: value for key, value in prior.items() if key != schema.CONTROL}
    if not schema.takes_control(family):
        return {**tables, "prior": rest}, [
            Fault(where=where, problem=f"not a key for family {family}", got=got, allowed="leave it out")
        ]
    if schema.CONTROL in design:
        return {**tables, "prior": rest}, [
            Fault(
                where=where,
                problem="given twice",
                got=got,
                allowed="give it here or in [design], not in both",
            )
        ]
    return {**tables, "prior": rest, "design": {**design, schema.CONTROL: prior[schema.CONTROL]}}, []


def _from_prior(faults: list[Fault], tables: Tables) -> list[Fault]:
    """Faults of a control arm that the file has in [prior], placed there."""
    here, there = f"[design] {schema.CONTROL}", f"[prior] {schema.CONTROL}"
    if schema.CONTROL in tables.get("design", {}) or schema.CONTROL not in tables.get("prior", {}):
        return faults
    return [replace(fault, where=fault.where.replace(here, there, 1)) for fault in faults]


def _tag(section: str, table: Tables) -> tuple[str, list[Fault]]:
    """The family or the rule that a table names."""
    if section not in ("design", "rule"):
        return "", []
    key, what, known = (
        ("family", "family", schema.FAMILY_OF) if section == "design" else ("type", "rule", schema.RULE_OF)
    )
    where = f"[{section}] {key}"
    tag = table.get(key, schema.DEFAULT_RULE if section == "rule" else None)
    if tag is None:
        return "", [Fault(where=where, problem="missing", allowed=f"one of: {', '.join(known)}")]
    if not isinstance(tag, str) or tag not in known:
        return "", [unknown(where, what, str(tag) if isinstance(tag, str) else "", known, shown(tag))]
    return tag, []


def _assembled(tables: Tables, parts: Tables, source: dict[str, str]) -> tuple[Study | None, list[Fault]]:
    """The study of these parts, or None and the faults that show when they are seen together.

    A wrong title or target does not keep the rest from being looked at.
    """
    if (
        any(name in tables and name not in parts for name in ("design", "prior", "rule", "effect"))
        or not {"design", "prior"} <= parts.keys()
    ):
        return None, []
    heading = parts.get("study", schema.Heading(title="untitled"))
    try:
        with np.errstate(all="ignore"):
            study = Study(
                title=heading.title, question=heading.question, field=heading.field,
                effect=parts.get("effect", Effect()), design=parts["design"], prior=parts["prior"],
                rule=parts.get("rule") or schema.RULE_OF[schema.DEFAULT_RULE](),
                target=parts.get("target"), **source,
            )  # fmt: skip
    except StudyError as bad:
        return None, _from_prior([replace(fault, got=cut(escaped(fault.got))) for fault in bad.faults], tables)
    except (ArithmeticError, np.linalg.LinAlgError, MemoryError):
        return None, [
            Fault(
                where="[prior]",
                problem="its numbers are too extreme to compute with",
                allowed="numbers of an ordinary size",
            )
        ]
    return study, []
