"""Characters, widths and figures: how anything is put on a page of fixed-width type."""

import math
import unicodedata
from typing import ClassVar

WIDTH = 78  # columns; two less than the narrowest terminal we promise to fit


def safe(text: str, limit: int = 200) -> str:
    """Text from outside, shortened; what could drive a terminal or turn the reading direction is spelt out.

    Letters of all scripts stay; control, format, surrogate and separating characters appear as escapes.
    `limit` is in columns.
    """
    head = text[: 4 * limit]  # nobody reads on; and ten megabytes need not be escaped to find that out
    shown = "".join(_visible(c) for c in head)
    return shorten(shown, limit) if len(text) == len(head) else shorten(shown + "…", limit)


def _visible(c: str) -> str:
    if c == " " or (c.isprintable() and unicodedata.category(c) not in ("Cf", "Zl", "Zp", "Co", "Cn")):
        return c
    code = ord(c)
    return f"\\x{code:02x}" if code < 256 else f"\\u{code:04x}" if code < 65536 else f"\\U{code:08x}"


def width(text: str) -> int:
    """Columns the text takes on a terminal: wide characters take two, combining ones none."""
    if text.isascii():
        return len(text)
    return sum(0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text)


def shorten(text: str, limit: int) -> str:
    """At most `limit` columns, the cut marked by an ellipsis. Runs of combining marks are cut too."""
    if width(text) <= limit and len(text) <= 2 * limit:
        return text
    kept = ""
    for c in text[: 2 * limit - 1]:
        if width(kept) + width(c) > limit - 1:
            break
        kept += c
    return kept.rstrip() + "…"


def pad(text: str, columns: int, align: str = "<") -> str:
    """The text with blanks on one side, counted in columns."""
    blanks = " " * max(0, columns - width(text))
    return text + blanks if align == "<" else blanks + text


def wrap(text: str, columns: int) -> list[str]:
    """Lines of at most so many columns; a word that is longer is broken."""
    lines, line = [], ""
    for word in text.split(" "):
        if line and width(line) + 1 + width(word) > columns:
            lines.append(line)
            line = ""
        line = f"{line} {word}" if line else word
        while width(line) > columns:
            at = next(i for i in range(len(line), 0, -1) if width(line[:i]) <= columns)
            lines.append(line[:at])
            line = line[at:]
    return [*lines, line] if line or not lines else lines


def figures(value: float, error: float | None = None) -> str:
    """The value with no more digits than its error supports, and never more than four significant ones."""
    supported = 15 if not error else math.ceil(-math.log10(error) - 1e-9)
    if value == 0:
        return "0" if supported > 4 else f"{0:.{max(0, supported)}f}"
    magnitude = math.floor(math.log10(abs(value)))
    if magnitude >= 6:
        return f"{value:.{max(0, min(3, supported + magnitude))}e}"
    if magnitude < -3 and supported > -magnitude - 1 and supported > 4:
        return f"{value:.{min(1, supported + magnitude)}e}"
    # three decimals are enough for numbers above 1, four for shares
    decimals = min(supported, 4 if magnitude < 0 else 3 - magnitude)
    return f"{value:.{max(0, decimals)}f}"


def uncertainty(error: float | None) -> str:
    """One digit, rounded up: an error must never look smaller than it is."""
    if error is None:
        return ""
    if error == 0:
        return "±0"
    magnitude = math.floor(math.log10(error))
    digit = math.ceil(error / 10.0**magnitude - 1e-6)
    if digit == 10:
        magnitude, digit = magnitude + 1, 1
    if magnitude < -4:
        return f"±{digit}e{magnitude:03d}"
    return f"±{digit * 10.0**magnitude:.{max(0, -magnitude)}f}"


class Page:
    """Lines with a style each; colour is added last, so that it can never disturb the columns."""

    INK: ClassVar[dict[str, str]] = {
        "title": "\x1b[1m",
        "lead": "\x1b[1m",
        "faint": "\x1b[2m",
        "block": "\x1b[1;31m",
        "warning": "\x1b[33m",
        "info": "\x1b[2m",
    }

    def __init__(self) -> None:
        self.lines: list[tuple[str, str]] = []

    def line(self, text: str = "", style: str = "") -> None:
        self.lines.append((text.rstrip(), style))

    def paragraph(self, text: str, style: str = "", *, hang: int = 0, first: str = "") -> None:
        """Wrapped text; `first` opens the first line, the others hang by so many columns."""
        for i, part in enumerate(wrap(text, WIDTH - hang)):
            self.line((pad(first, hang) if i == 0 else " " * hang) + part, style)

    def gap(self) -> None:
        if self.lines and self.lines[-1][0]:
            self.line()

    def section(self, name: str) -> None:
        """A name, then a thin rule to the margin, which sets it apart from what came before."""
        self.line(f"{name} {'─' * (WIDTH - width(name) - 1)}" if name else "─" * WIDTH, "faint")

    def text(self, *, colour: bool = False) -> str:
        if not colour:
            return "\n".join(text for text, _ in self.lines) + "\n"
        return "\n".join(f"{self.INK[s]}{t}\x1b[0m" if s in self.INK and t else t for t, s in self.lines) + "\n"
