"""The study file as pydantic models, made from the dataclasses of families, rules and distributions.

The only file that imports pydantic. A family, rule or distribution that joins its table (`FAMILIES`, `RULES`,
`DISTRIBUTIONS`) is read, checked and in the JSON Schema without a line here. Models are built when first
needed, and only those that a file uses: all of them together would take longer than the rest of loading.
"""

import dataclasses
import functools
import operator
import types
from collections.abc import Iterator, Sequence
from typing import (
    Annotated,
    Any,
    ClassVar,
    ForwardRef,
    Literal,
    TypeAliasType,
    Union,
    cast,
    get_args,
    get_origin,
    get_type_hints,
)

import numpy as np
from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Discriminator,
    Field,
    Tag,
    ValidationError,
    create_model,
)
from pydantic.json_schema import GenerateJsonSchema
from pydantic_core import PydanticCustomError

from bayesdesign.core.errors import Fault, Invalid
from bayesdesign.design import FAMILIES, Design
from bayesdesign.prior import DISTRIBUTIONS, Distribution, Point, Truncated
from bayesdesign.rule import RULES, Rule
from bayesdesign.study.problems import TAG, Problem, faults_of
from bayesdesign.study.study import Effect, Prior, Target
from bayesdesign.study.words import SECTIONS, first_paragraph, words_of

LARGEST_WHOLE = 1_000_000_000  # the products of larger counts leave the 64-bit integers

type Keys = dict[str, tuple[Any, Any]]  # name: (annotation, pydantic's Field)

Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
End = Annotated[float, Field(strict=True)]  # of a truncated range: one may be infinite, and Truncated refuses NaN
Whole = Annotated[int, Field(strict=True, le=LARGEST_WHOLE)]
Text = Annotated[str, Field(strict=True)]
SCALARS = {float: Number, int: Whole, str: Text, bool: Annotated[bool, Field(strict=True)]}

FAMILY_OF: dict[str, type[Design]] = {cls.family: cls for cls in FAMILIES}
RULE_OF: dict[str, type[Rule]] = {cls.kind: cls for cls in RULES}
DISTRIBUTION_OF: dict[str, type[Distribution]] = {cls.kind: cls for cls in DISTRIBUTIONS}
DEFAULT_RULE = "significance"
REQUIRED = ("study", "design", "prior")
CONTROL = "control"  # the one nuisance parameter that may also stand in [prior]


@dataclasses.dataclass(frozen=True, kw_only=True)
class Heading:
    """`[study]`: what the study is about."""

    title: str
    question: str = ""
    field: str = ""

    def __post_init__(self) -> None:
        if not self.title.strip():
            raise Invalid([Fault(where="title", problem="empty", allowed="a short name of the study")])


class Table(BaseModel):
    """A table of the file; `source` is the dataclass that its keys build."""

    model_config = ConfigDict(extra="forbid", strict=True, protected_namespaces=())
    source: ClassVar[Any]

    def build(self) -> Any:
        """The dataclass. Raises `Invalid` when its values do not fit."""
        values = {field.name: getattr(self, field.name) for field in dataclasses.fields(self.source)}
        with np.errstate(all="ignore"):  # what extreme parameters lead to is judged, not warned about
            made = self.source(**values)
            window = getattr(self, "truncated", None)
            return made if window is None else Truncated(base=made, low=window[0], high=window[1])


def check(section: str, tag: str, table: dict[str, Any]) -> tuple[Any, list[Fault]]:
    """The dataclass of a section, or None and everything that is wrong with its table.

    Args:
        section: name of the section.
        tag: its family or rule, one of the known ones; "" for the other sections.
        table: the parsed table.
    """
    model = section_model(section, tag, frozenset(_kinds(table)))
    try:
        return model.model_validate(table).build(), []
    except ValidationError as bad:
        found = bad.errors(include_url=False)
        problems = [Problem(kind=e["type"], path=e["loc"], got=e["input"], more=e.get("ctx", {})) for e in found]
    except Invalid as bad:
        problems = [Problem(kind="invalid", path=(), got=table, more={"faults": bad.faults})]
    return None, [
        fault for problem in problems for fault in faults_of(section, problem, _words_at(model, problem.path))
    ]


def takes_control(family: str) -> bool:
    """Whether the family has the nuisance parameter `control`."""
    return family in FAMILY_OF and CONTROL in get_type_hints(FAMILY_OF[family])


def json_schema() -> dict[str, Any]:
    """The JSON Schema (draft 2020-12) of a study file, for editors.

    It knows keys and types; what only shows when values are seen together is left to `load_study`.
    """
    every = frozenset(DISTRIBUTION_OF)
    choices: dict[str, Any] = {
        "design": _choice("family", [section_model("design", tag, every) for tag in FAMILY_OF]),
        "rule": _choice("type", [section_model("rule", tag, every) for tag in RULE_OF]),
    }
    keys: Keys = {
        name: (
            choices.get(name) or section_model(name, "", every),
            _key(words, dataclasses.MISSING if name in REQUIRED else None),
        )
        for name, words in SECTIONS.items()
    }
    schema = _model("study file", "A study: question, belief, design and rule.", keys).model_json_schema(
        schema_generator=_Untitled
    )
    for family in filter(takes_control, FAMILY_OF):  # [prior] may hold it instead
        schema["$defs"][f"design_{family}"]["required"].remove(CONTROL)
    return {"$schema": GenerateJsonSchema.schema_dialect, **schema}


class _Untitled(GenerateJsonSchema):
    """Without titles that only repeat the key."""

    def field_title_should_be_set(self, schema: Any) -> bool:
        del schema
        return False


@functools.lru_cache(maxsize=64)
def section_model(section: str, tag: str, kinds: frozenset[str]) -> type[Table]:
    """The model of a section that can read the given kinds of distributions."""
    belief = _belief(kinds)
    match section:
        case "design":
            return _table(FAMILY_OF[tag], section, {"family": _tag_key(section, "family", tag)}, belief, tag)
        case "rule":
            return _table(RULE_OF[tag], section, {"type": _tag_key(section, "type", tag)}, belief, tag)
        case "target":
            return _table(
                Target,
                section,
                {
                    "measure": (
                        Literal[_measures()],
                        _key(words_of(Target, section)["measure"], Target.measure),
                    )
                },
                belief,
            )
        case "prior":
            return _table(Prior, section, {CONTROL: (belief, _key(words_of(Prior, section)[CONTROL], None))}, belief)
        case _:
            return _table({"study": Heading, "effect": Effect}[section], section, {}, belief)


def _measures() -> tuple[str, ...]:
    """The quantities that are one number."""
    from bayesdesign.evaluate import ORDER

    return tuple(name for name in ORDER if name != "power_quantiles")


def _tag_key(section: str, key: str, tag: str) -> tuple[Any, Any]:
    return Literal[tag], _key(
        words_of(Heading, section).get(key, ""), tag if tag == DEFAULT_RULE else dataclasses.MISSING
    )


def _key(words: str, default: Any) -> Any:
    """A key with its description. Without a default it is required; with None or "" it may be absent."""
    about = words or None
    if default is dataclasses.MISSING:
        return Field(description=about)
    if default is None or default == "":  # as a factory it stays out of the JSON Schema: TOML has no null
        return Field(default_factory=lambda: default, description=about)
    return Field(default=default, description=about)


def _either(annotations: Sequence[Any]) -> Any:
    """The union of annotations that are only known at run time."""
    return functools.reduce(operator.or_, annotations)


def _choice(key: str, models: Sequence[Any]) -> Any:
    """One of the models, told apart by the key; a single one needs no telling."""
    return Annotated[_either(models), Field(discriminator=key)] if len(models) > 1 else models[0]


def _model(name: str, about: str, keys: Keys) -> type[Table]:
    return cast("type[Table]", create_model(name, __base__=Table, __doc__=about, **cast("dict[str, Any]", keys)))


def _table(cls: Any, section: str, more: Keys, belief: Any, tag: str = "") -> type[Table]:
    """The model of a dataclass: `more`, then a key for each field that `more` does not have."""
    hints, words = get_type_hints(cls), words_of(cls, section)
    keys = dict(more)
    for field in dataclasses.fields(cls):
        if field.name not in keys:
            keys[field.name] = (
                _in_file(hints[field.name], belief),
                _key(words.get(field.name, ""), field.default),
            )
    model = _model(f"{section}_{tag}" if tag else section, first_paragraph(cls), keys)
    model.source = cls
    return model


def _in_file(annotation: Any, belief: Any) -> Any:
    """What the file may hold for a field of this type; None only says that the key may be absent."""
    if isinstance(annotation, TypeAliasType):
        return _in_file(annotation.__value__, belief)
    if annotation is Distribution:
        return belief
    if annotation in SCALARS:
        return SCALARS[annotation]
    if get_origin(annotation) is tuple:  # TOML has lists only
        element: Any = _in_file(get_args(annotation)[0], belief)
        return Annotated[list[element], AfterValidator(tuple)]
    if get_origin(annotation) in (Union, types.UnionType):
        parts = [_in_file(part, belief) for part in get_args(annotation) if part is not type(None)]
        if Distribution in get_args(annotation) and len(parts) == 2:  # or one of some words
            tagged = Annotated[parts[0], Tag(f"{TAG}belief")], Annotated[parts[1], Tag(f"{TAG}word")]
            return Annotated[_either(tagged), Discriminator(_word_or_belief)]
        return _either(parts)
    if dataclasses.is_dataclass(annotation):
        return Annotated[
            _table(annotation, str(getattr(annotation, "__name__", "table")), {}, belief),
            AfterValidator(_build),
        ]
    return annotation


@functools.lru_cache(maxsize=64)
def _belief(kinds: frozenset[str]) -> Any:
    """A number, or a table of one of these kinds; validation gives the distribution."""
    tables = {kind: _distribution(kind) for kind in sorted(kinds)}
    tagged = [Annotated[table, AfterValidator(_build), Tag(TAG + kind)] for kind, table in tables.items()]
    number = Annotated[Number, AfterValidator(lambda value: Point(value=value)), Tag(f"{TAG}number")]
    whole: Any = Annotated[_either([number, *tagged]), Discriminator(_tag_of)]
    for table in tables.values():  # a mixture holds what it is one of
        table.model_rebuild(_types_namespace={"Belief": whole})
    return whole


def _distribution(kind: str) -> type[Table]:
    cls = DISTRIBUTION_OF[kind]
    words = words_of(cls, "distribution")
    tag: Keys = {"distribution": (Literal[kind], _key(words["distribution"], dataclasses.MISSING))}
    model = _table(cls, "distribution", tag, ForwardRef("Belief"), kind)
    if cls is Point:
        return model
    window = Annotated[list[End], Field(min_length=2, max_length=2)]
    cut = (window, _key(words["truncated"], None))
    return create_model(model.__name__, __base__=model, __doc__=model.__doc__, truncated=cut)


def _tag_of(value: Any) -> str | None:
    if isinstance(value, dict):
        kind = value.get("distribution")
        return TAG + kind if isinstance(kind, str) else None
    return f"{TAG}number" if isinstance(value, int | float) and not isinstance(value, bool) else None


def _word_or_belief(value: Any) -> str:
    return f"{TAG}word" if isinstance(value, str) else f"{TAG}belief"


def _build(table: Table) -> Any:
    """The dataclass of an inner table; its faults travel inside pydantic's error, and no others are lost."""
    try:
        return table.build()
    except Invalid as bad:
        raise PydanticCustomError("invalid", "invalid", {"faults": bad.faults}) from None


def _kinds(table: Any) -> Iterator[str]:
    """Every known kind of distribution that is named anywhere in the table."""
    waiting = [table]
    while waiting:
        value = waiting.pop()
        if isinstance(value, dict):
            kind = value.get("distribution")
            if isinstance(kind, str) and kind in DISTRIBUTION_OF:
                yield kind
            waiting += value.values()
        elif isinstance(value, list):
            waiting += value


def _words_at(model: type[Table], path: tuple[int | str, ...]) -> dict[str, str]:
    """The keys, with their descriptions, of the table that holds the last part of the path."""
    table = model
    for part in path[:-1]:
        inside = list(_tables(table.model_fields[part].annotation)) if part in table.model_fields else []
        if isinstance(part, str) and part.removeprefix(TAG) in DISTRIBUTION_OF and part.startswith(TAG):
            table = _distribution(part.removeprefix(TAG))
        elif len(inside) == 1:
            table = inside[0]
    return {name: field.description or "" for name, field in table.model_fields.items()}


def _tables(annotation: Any) -> Iterator[type[Table]]:
    if isinstance(annotation, type) and issubclass(annotation, Table):
        yield annotation
    for part in get_args(annotation):
        yield from _tables(part)
