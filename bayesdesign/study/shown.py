"""How a value from a stranger's file is shown on one line.

In TOML's own way, short, and with nothing that a terminal would obey.
"""

import datetime as dt
import difflib
import re
from collections.abc import Iterable, Iterator

LONGEST = 60  # characters of a value, cut or not
LONGEST_PATH = 200
DEEPEST = 3  # tables or lists within each other; what lies deeper is an ellipsis
ELLIPSIS = "…"


def shown(value: object) -> str:
    """The value as TOML would write it, at most 60 printable characters."""
    return cut(escaped("".join(_pieces(value, 0))))


def shown_key(key: object) -> str:
    """A key as it is, when it is a plain one; otherwise quoted, escaped and shortened."""
    text = str(key)
    return text if re.fullmatch(r"[A-Za-z0-9_-]{1,60}", text) else shown(text)


def escaped(text: str) -> str:
    """The text with every character that does not print, or that reorders others, as its escape."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)


def cut(text: str, longest: int = LONGEST) -> str:
    """The text, or its beginning and an ellipsis, within `longest` characters."""
    return text if len(text) <= longest else text[: longest - 1] + ELLIPSIS


def nearest(word: object, known: Iterable[str]) -> str:
    """A hint at the known word that was probably meant, or nothing."""
    # 60 characters are compared: the time grows with the square of the length, and the word is a stranger's
    close = difflib.get_close_matches(str(word)[:LONGEST].lower(), list(known), n=1, cutoff=0.6)
    return f"did you mean {close[0]}? " if close else ""


def _pieces(value: object, depth: int) -> Iterator[str]:
    """Parts of the text; long containers stop early, since only the beginning is shown."""
    match value:
        case bool():
            yield "true" if value else "false"
        case str():
            start = value[: LONGEST + 1].replace("\\", "\\\\").replace('"', '\\"')
            yield f'"{start}"'
        case int() if value.bit_length() > 200:  # Python refuses to write very long integers out
            yield f"a whole number of {value.bit_length()} bits"
        case dt.datetime() | dt.date() | dt.time():
            yield value.isoformat()
        case dict() | list() | tuple() if depth >= DEEPEST:
            yield ELLIPSIS
        case dict():
            entries = (
                f"{shown_key(key)} = {''.join(_pieces(inner, depth + 1))}"
                for key, inner in list(value.items())[:LONGEST]
            )
            yield "{" + ", ".join(entries) + "}"
        case list() | tuple():
            yield "[" + ", ".join("".join(_pieces(inner, depth + 1)) for inner in value[:LONGEST]) + "]"
        case _:
            yield repr(value)
