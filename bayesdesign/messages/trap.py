"""A trap: one small declared thing that looks at a study and says what is wrong with it."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import final

from bayesdesign.messages.context import Context
from bayesdesign.result import Message, Severity

type Values = dict[str, str | int]


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Trap:
    """`condition` gives the words that fill the text when the study has run into the trap, else None.

    text: what it does to the answer, with the study's own numbers; advice: what to do instead.
    """

    code: str
    severity: Severity
    condition: Callable[[Context], Values | None]
    text: str
    advice: str

    def message(self, context: Context) -> Message | None:
        values = self.condition(context)
        if values is None:
            return None
        return Message(
            code=self.code,
            severity=self.severity,
            text=self.text.format_map(values),
            advice=self.advice.format_map(values),
        )
