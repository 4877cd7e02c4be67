"""The command `bayesdesign`: arguments, files, exit codes; no arithmetic.

Exit codes: 0 answered, 2 the input is wrong, 3 refused, 4 the target cannot be met, 1 a bug, 130 interrupted.
"""

import os
import sys
from collections.abc import Callable, Sequence
from contextlib import AbstractContextManager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, ClassVar, Literal, final

import click

from bayesdesign.core.errors import BayesdesignError, Fault, NotOffered, StudyError
from bayesdesign.render import deliver
from bayesdesign.render.typeset import safe

if TYPE_CHECKING:
    from bayesdesign.study.study import Study

NAME = "bayesdesign"
TARGET_UNMET = 4
INTERRUPTED = 130


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Options:
    """What the common options say; a command that does not compute has only the first four."""

    as_json: bool
    out: str | None
    quiet: bool
    debug: bool
    route: Literal["integration", "sampling", "both"] = "integration"
    seed: int = 0
    draws: int = 0
    tolerance: float = 0.0

    @property
    def colour(self) -> bool:
        return (
            self.out is None
            and sys.stdout.isatty()
            and not os.environ.get("NO_COLOR")
            and os.environ.get("TERM") != "dumb"
        )

    def working(self, what: str) -> AbstractContextManager[None]:
        from bayesdesign.render.progress import working

        return working(what, shown=sys.stderr.isatty() and not self.quiet)

    @property
    def computing(self) -> dict[str, Any]:
        return {"route": self.route, "seed": self.seed, "draws": self.draws, "tolerance": self.tolerance}


@final
@dataclass(frozen=True, slots=True, kw_only=True)
class Output:
    """What a command has to say, where it goes, and the exit code."""

    text: str
    options: Options
    code: int = 0

    def deliver(self) -> int:
        if self.options.out is None:
            deliver.write_stream(self.text, utf8=self.options.as_json)
            return self.code
        deliver.write_file(self.options.out, self.text)
        if not self.options.quiet:
            deliver.write_stream(f"written to {safe(self.options.out, 200)}\n", sys.stderr)
        return self.code


class ManyValues(click.Command):
    """A command whose `--n` takes several numbers after one flag: `--n 40 80` means `--n 40 --n 80`."""

    flag: ClassVar[str] = "--n"

    def parse_args(self, ctx: click.Context, args: list[str]) -> list[str]:
        spread: list[str] = []
        state = "outside"
        for token in args:
            if token == "--":
                state = "over"
            elif state == "inside" and _like_number(token):
                spread.append(self.flag)
            elif state != "over":
                state = {self.flag: "first"}.get(
                    token, "inside" if state == "first" or token.startswith(f"{self.flag}=") else "outside"
                )
            spread.append(token)
        return super().parse_args(ctx, spread)


def _like_number(token: str) -> bool:
    try:
        float(token)
    except ValueError:
        return False
    return True


class Size(click.ParamType[int]):
    """A whole number; says so in one line."""

    name = "whole number"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> int:
        try:
            return int(value)
        except ValueError:
            self.fail(f"{value!r} is not a whole number; several sizes are given as --n 40 80", param, ctx)


class Share(click.FloatRange):
    """A number in a range, which NaN is not, although it compares as no number does."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        found = super().convert(value, param, ctx)
        if found != found:
            self.fail(f"{value!r} is not a number", param, ctx)
        return found


def _options(*, computes: bool) -> Callable[[Callable[..., Any]], Callable[..., Any]]:
    """The common options, handed to the command as one `Options`."""
    shown = [
        click.option("--json", "as_json", is_flag=True, help="One JSON document on standard output and nothing else."),
        click.option("--out", metavar="FILE", help="Write to FILE, whole or not at all."),
        click.option("--quiet", is_flag=True, help="No progress and no remarks on standard error."),
        click.option("--debug", is_flag=True, help="Show the traceback of a bug."),
    ]
    if computes:
        shown += [
            click.option(
                "--route",
                type=click.Choice(["integration", "sampling", "both"]),
                default="integration",
                show_default=True,
                help="How the decision table is computed; both compares the two.",
            ),
            click.option(
                "--seed",
                type=click.IntRange(0, 2**63 - 1),
                default=20260101,
                show_default=True,
                help="Seed of the sampling route.",
            ),
            click.option(
                "--draws",
                type=click.IntRange(1000, 10**9),
                default=1_000_000,
                show_default=True,
                help="Simulated studies of the sampling route.",
            ),
            click.option(
                "--tolerance",
                type=Share(0, 1, min_open=True),
                default=1e-6,
                show_default=True,
                help="Integration error beyond which a number is refused.",
            ),
        ]

    def decorate(command: Callable[..., Any]) -> Callable[..., Any]:
        names = (
            "as_json",
            "out",
            "quiet",
            "debug",
            *(("route", "seed", "draws", "tolerance") if computes else ()),
        )

        def wrapped(**given: Any) -> Any:
            options = Options(**{name: given.pop(name) for name in names})
            if options.out is not None:
                deliver.check_target(options.out, given.get("study", ""))
            return command(options=options, **given)

        wrapped.__name__, wrapped.__doc__ = command.__name__, command.__doc__
        for option in reversed(shown):
            option(wrapped)
        for parameter in getattr(command, "__click_params__", []):
            wrapped.__click_params__.append(parameter)  # type: ignore[attr-defined]
        return wrapped

    return decorate


@click.group(name=NAME, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80})
@click.version_option(package_name="bayesdesign-toolkit", prog_name=NAME)
def program() -> None:
    """What a planned or finished hypothesis test is worth.

    Start with `bayesdesign new two_means --out study.toml`, edit the file, then
    `bayesdesign check study.toml` and `bayesdesign evaluate study.toml`.
    """


@program.command()
@_options(computes=True)
@click.argument("study", metavar="STUDY.toml")
def check(*, study: str, options: Options) -> Output:
    """Is the file sound, and what does the study say?"""
    from bayesdesign.messages import messages_for
    from bayesdesign.result import study_entry
    from bayesdesign.study.describe import describe

    read = _read(study)
    lines, messages = describe(read), messages_for(read, [])
    if options.as_json:
        document = {
            "format": "bayesdesign/1",
            "command": "check",
            "study": study_entry(read),
            "says": lines,
            "messages": [message.to_dict() for message in messages],
        }
        return _json(document, options)
    from bayesdesign.render.to_terminal import check_text

    return Output(text=check_text(read, lines, messages, colour=options.colour), options=options)


@program.command(cls=ManyValues)
@_options(computes=True)
@click.argument("study", metavar="STUDY.toml")
@click.option(
    "--n",
    "sizes",
    type=Size(),
    multiple=True,
    metavar="N...",
    help="One size or several, e.g. --n 40 80; default the study's own.",
)
def evaluate(*, study: str, sizes: tuple[int, ...], options: Options) -> Output:
    """The decision table and every measure, at one size or several."""
    read = _read(study)
    with options.working("computing"):
        from bayesdesign.evaluate import evaluate as compute

        result = compute(read, list(sizes) or None, **options.computing)
    return _answer(result, options)


@program.command()
@_options(computes=True)
@click.argument("study", metavar="STUDY.toml")
def size(*, study: str, options: Options) -> Output:
    """The smallest size that meets [target]."""
    read = _read(study)
    with options.working("searching"):
        from bayesdesign.size import size as search

        result = search(read, **options.computing)
    unmet = result.size is not None and result.size.first_n is None
    return _answer(result, options, code=TARGET_UNMET if unmet else 0)


@program.command()
@_options(computes=True)
@click.argument("study", metavar="STUDY.toml")
@click.option("--decision", metavar="NAME", help="Only the decision is known, e.g. not_reject.")
@click.option("--estimate", type=float, metavar="X", help="The estimate of the effect, on its own scale.")
@click.option("--se", type=float, metavar="S", help="Its standard error (of the logarithm, on a ratio scale).")
@click.option("--p-value", metavar="P", help="Only the p-value of the study's test is known.")
@click.option("--data", metavar="FILE.csv", help="The study's data.")
@click.option("--n", "n", type=Size(), metavar="N", help="The size the study had; default the planned one.")
@click.option(
    "--mass",
    type=Share(0, 1, min_open=True, max_open=True),
    default=0.95,
    show_default=True,
    help="Probability inside the reported interval.",
)
def interpret(*, study: str, options: Options, data: str | None, **known: Any) -> Output:
    """What the finished study's result is worth."""
    read = _read(study)
    if data is not None:
        raise NotOffered(
            "--data: reading raw data is not available yet; give --estimate and --se, --p-value or --decision"
        )
    with options.working("computing"):
        from bayesdesign.interpret import interpret as compute

        computing = {name: value for name, value in options.computing.items() if name != "draws"}
        found = compute(read, **known, **computing)
    if options.as_json:
        return _json(found.to_dict(), options)
    from bayesdesign.render.after import interpretation_text

    return Output(text=interpretation_text(found, colour=options.colour), options=options)


@program.command()
@_options(computes=False)
@click.argument("family", metavar="FAMILY")
def new(*, family: str, options: Options) -> Output:
    """A commented starting file for FAMILY."""
    from bayesdesign.study.template import template

    text = template(family)
    if options.as_json:
        return _json({"format": "bayesdesign/1", "command": "new", "family": family, "text": text}, options)
    return Output(text=text, options=options)


@program.command()
@_options(computes=False)
def schema(*, options: Options) -> Output:
    """The JSON Schema of the study file, for editors."""
    from bayesdesign.study.schema import json_schema

    return _json(json_schema(), options)


def _read(path: str) -> "Study":
    from bayesdesign.study.read import load_study

    try:
        return load_study(path)
    except OSError as failure:
        raise StudyError(
            [Fault(where="", problem=f"cannot be read ({failure.strerror or failure})")], path
        ) from failure


def _json(document: dict[str, Any], options: Options) -> Output:
    from dataclasses import replace

    from bayesdesign.render.to_json import to_json

    return Output(text=to_json(document), options=replace(options, as_json=True))


def _answer(result: Any, options: Options, code: int = 0) -> Output:
    from dataclasses import replace

    if options.as_json:
        return replace(_json(result.to_dict(), options), code=code)
    from bayesdesign.render.to_terminal import result_text

    return Output(text=result_text(result, colour=options.colour), options=options, code=code)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command and return the exit code; an exception gets out only with `--debug`."""
    given = list(sys.argv[1:] if arguments is None else arguments)
    try:
        answer = program.main(given, prog_name=NAME, standalone_mode=False)
        return answer.deliver() if isinstance(answer, Output) else int(answer or 0)
    except (KeyboardInterrupt, click.Abort):
        return _complain(["interrupted; nothing was written"], INTERRUPTED)
    except SystemExit as leaving:  # click leaves this way when standard output is closed
        deliver.forget(sys.stdout)
        return 0 if leaving.code == 1 else int(leaving.code or 0)
    except click.exceptions.NoArgsIsHelpError as asked:
        deliver.write_stream(asked.format_message() + "\n", sys.stderr)
        return 2
    except click.ClickException as wrong:
        return _complain([f"{NAME}: {wrong.format_message()}"], 2)
    except StudyError as wrong:
        return _complain(
            [f"{wrong.file}: {fault}" if wrong.file else str(fault) for fault in wrong.faults],
            wrong.exit_code,
        )
    except BayesdesignError as wrong:
        return _complain([f"{NAME}: {wrong}"], wrong.exit_code)
    except MemoryError:
        return _complain([f"{NAME}: not enough memory for this size; try a smaller n or fewer --draws"], 3)
    except Exception as bug:
        if "--debug" in given:
            raise
        what = f"{type(bug).__name__}: {bug}"
        return _complain([f"{NAME}: a bug, please report it ({what}); --debug shows where"], 1)


def _complain(lines: Sequence[str], code: int) -> int:
    for line in lines:
        deliver.write_stream(safe(line, 1000) + "\n", sys.stderr)
    return code
