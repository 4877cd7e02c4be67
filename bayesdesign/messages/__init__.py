"""Traps: each is one small declared thing that looks at a study and its answers."""

from collections.abc import Sequence

from bayesdesign.messages.about_design import DESIGN_TRAPS
from bayesdesign.messages.about_prior import PRIOR_TRAPS
from bayesdesign.messages.about_reading import READING_TRAPS
from bayesdesign.messages.context import Context
from bayesdesign.messages.trap import Trap
from bayesdesign.result import Answer, Message
from bayesdesign.study.study import Study

TRAPS: tuple[Trap, ...] = (*PRIOR_TRAPS, *DESIGN_TRAPS, *READING_TRAPS)
ORDER = ("block", "warning", "info")


def messages_for(study: Study, answers: Sequence[Answer]) -> list[Message]:
    """Every trap the study has run into, worst first; without answers only what the study alone shows."""
    context = Context(study, answers)
    found = [message for trap in TRAPS if (message := trap.message(context)) is not None]
    return sorted(found, key=lambda message: ORDER.index(message.severity))
