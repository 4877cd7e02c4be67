"""What a command answers: plain data, with an error beside every number. Renderers read it and compute nothing."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Literal, final

if TYPE_CHECKING:
    import xarray as xr

    from bayesdesign.study.study import Study

type Value = float | dict[str, float] | None
type Severity = Literal["block", "warning", "info"]


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Quantity:
    """One number (or one for each level) with its error: an integration error bound or a Monte Carlo standard error.

    value is None exactly when `why_null` says why.
    """

    value: Value
    error: Value
    route: str
    why_null: str = ""

    def to_dict(self) -> dict[str, Any]:
        document: dict[str, Any] = {"value": self.value, "error": self.error, "route": self.route}
        return {**document, "why_null": self.why_null} if self.value is None else document


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class DecisionTable:
    """Joint probabilities and both conditionals; a row or column without weight is None in its conditional."""

    states: tuple[str, ...]
    decisions: tuple[str, ...]
    joint: list[list[float]]
    given_state: list[list[float] | None]
    given_decision: list[list[float | None]]  # rows are states; a column of None belongs to a decision that never falls

    def to_dict(self) -> dict[str, Any]:
        return {
            "states": list(self.states),
            "decisions": list(self.decisions),
            "joint": self.joint,
            "given_state": self.given_state,
            "given_decision": self.given_decision,
        }


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """The two routes to one number, and their difference in standard errors."""

    integration: float
    sampling: float
    mcse: float
    z: float

    def to_dict(self) -> dict[str, float]:
        return {"integration": self.integration, "sampling": self.sampling, "mcse": self.mcse, "z": self.z}


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Answer:
    """Everything at one n."""

    n: int | None
    sizes: dict[str, int]
    quantities: dict[str, Quantity]
    table: DecisionTable
    cross_check: dict[str, Comparison] = field(default_factory=dict)

    def to_dict(self) -> dict[str, Any]:
        document: dict[str, Any] = {"n": self.n, "sizes": self.sizes}
        document["quantities"] = {name: quantity.to_dict() for name, quantity in self.quantities.items()}
        document["decision_table"] = self.table.to_dict()
        if self.cross_check:
            document["cross_check"] = {name: c.to_dict() for name, c in self.cross_check.items()}
        return document


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Message:
    """One trap the study has run into: what it is and what to do."""

    code: str
    severity: Severity
    text: str
    advice: str

    def to_dict(self) -> dict[str, str]:
        return {"code": self.code, "severity": self.severity, "text": self.text, "advice": self.advice}


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class SizeAnswer:
    """Result of the size search; `first_n` is None when no n up to `searched_to` meets the target.

    first_n: least n that meets it; safe_n: least n from which every n up to `searched_to` does (None if the last one
    fails). ceiling: limit of the measure as n grows, where it is known.
    """

    measure: str
    target: float
    direction: Literal["at_least", "at_most"]
    first_n: int | None
    safe_n: int | None
    achieved: float | None
    ceiling: float | None
    searched_to: int

    def to_dict(self) -> dict[str, Any]:
        return {
            "measure": self.measure,
            self.direction: self.target,
            "first_n": self.first_n,
            "safe_n": self.safe_n,
            "achieved": self.achieved,
            "ceiling": self.ceiling,
            "searched_to": self.searched_to,
        }


@final
@dataclass(frozen=True, kw_only=True)
class Result:
    """Answer to `evaluate` or `size`. `joint` is the labelled joint table (dimensions n, truth, decision)."""

    study: "Study"
    command: str
    answers: Sequence[Answer]
    messages: Sequence[Message]
    provenance: dict[str, Any]
    size: SizeAnswer | None = None
    tables: Sequence[Any] = ()  # joint tables, one for each block of n

    @property
    def quantities(self) -> dict[str, Quantity]:
        """Quantities at the only n, or at the first."""
        return self.answers[0].quantities

    @property
    def joint(self) -> "xr.Dataset":
        """The joint table as an xarray Dataset."""
        import xarray as xr

        parts: list[xr.Dataset] = [table.dataset() for table in self.tables]
        return parts[0] if len(parts) == 1 else xr.concat(parts, dim="n")

    def to_dict(self) -> dict[str, Any]:
        """The JSON document."""
        document: dict[str, Any] = {
            "format": "bayesdesign/1",
            "command": self.command,
            "study": study_entry(self.study),
            "results": [answer.to_dict() for answer in self.answers],
        }
        if self.size is not None:
            document["size"] = self.size.to_dict()
        document["messages"] = [message.to_dict() for message in self.messages]
        document["provenance"] = self.provenance
        return document


def study_entry(study: "Study") -> dict[str, Any]:
    """How a document names its study."""
    return {"title": study.title, "file": study.file, "sha256": study.sha256}
