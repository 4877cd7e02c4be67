"""Traps: each is one small declared thing that looks at a study and its answers."""

from collections.abc import Sequence

from bayesdesign.result import Answer, Message
from bayesdesign.study.study import Study


def messages_for(study: Study, answers: Sequence[Answer]) -> list[Message]:
    """Every trap the study has run into, worst first."""
    del study, answers
    return []
