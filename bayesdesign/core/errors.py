"""Everything the program refuses, in one tree.

BayesdesignError
├── StudyError   the input is wrong; carries every fault found        (exit 2)
├── Refused      the computation cannot be trusted; says which check  (exit 3)
└── NotOffered   a family cannot answer what a rule or reading asks   (exit 2)

`Invalid` is raised while one object is built and is turned into a StudyError by whoever knows the file.
"""

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One thing wrong with the input: where it is, what came, what is allowed."""

    where: str  # "[section] key", or "" when the file as a whole is meant
    problem: str
    got: str = ""
    allowed: str = ""

    def __str__(self) -> str:
        text = f"{self.where}: {self.problem}" if self.where else self.problem
        if self.got:
            text += f" (got {self.got})"
        return f"{text}; {self.allowed}" if self.allowed else text


class BayesdesignError(Exception):
    """Base of all errors that a user can meet."""

    exit_code = 1


class StudyError(BayesdesignError):
    """Raised when a study, a file or an argument is wrong; nothing was computed or written."""

    exit_code = 2

    def __init__(self, faults: Sequence[Fault], file: str = "") -> None:
        self.faults = tuple(faults)
        self.file = file
        super().__init__("\n".join(f"{file}: {fault}" if file else str(fault) for fault in self.faults))


class Refused(BayesdesignError):
    """Raised when a number cannot be trusted: routes disagree, no convergence, tolerance missed."""

    exit_code = 3

    def __init__(self, check: str, advice: str) -> None:
        self.check, self.advice = check, advice
        super().__init__(f"{check}; {advice}")


class NotOffered(BayesdesignError):
    """Raised when a family cannot answer a claim; the sentence says which and why."""

    exit_code = 2


class Invalid(ValueError):
    """Raised while an object is built from values that do not fit; `faults` name keys relative to the object."""

    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("; ".join(map(str, self.faults)))


def check_values(*rules: tuple[bool, str, object, str]) -> None:
    """Raise `Invalid` with one fault for each (holds, key, value, allowed) that does not hold."""
    faults = [
        Fault(where=key, problem="value not allowed", got=repr(value), allowed=allowed)
        for holds, key, value, allowed in rules
        if not holds
    ]
    if faults:
        raise Invalid(faults)
