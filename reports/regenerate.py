"""Writes what the command says about every study in models/: `uv run python reports/regenerate.py`.

For models/NAME.toml that is NAME.txt, the commands with what they print, and NAME.json, the document of
`evaluate --json`; README.md lists them. Names after the command restrict it to these studies; `--into FOLDER`
writes elsewhere, which is how tests/test_reports.py finds out whether the files here are still true.
"""

import argparse
import contextlib
import io
import tomllib
from pathlib import Path

from bayesdesign.cli import main as bayesdesign

ROOT = Path(__file__).resolve().parent.parent
COMMANDS = ("evaluate {}", "size {}", "interpret {} --decision not_reject")
ANSWERED = (0, 4)  # 4: answered, but no size meets the target


def run(command: str) -> tuple[str, int]:
    """Standard output and exit code. Raises RuntimeError when the command gives no answer."""
    printed, complaints = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(printed), contextlib.redirect_stderr(complaints):
        code = bayesdesign(command.split())
    if code not in ANSWERED or complaints.getvalue():
        raise RuntimeError(f"bayesdesign {command} ended with {code}: {complaints.getvalue()}")
    return printed.getvalue(), code


def session(study: str) -> str:
    """The commands as one would type them at the top of the repository, each with what it prints."""
    parts = []
    for template in COMMANDS:
        command = template.format(study)
        printed, code = run(command)
        parts.append(f"$ bayesdesign {command}\n{printed}" + (f"(exit code {code})\n" if code else ""))
    return "\n".join(parts)


def index(studies: list[Path]) -> str:
    """README.md of the reports: two lines for each study."""
    lines = [
        "# Reports",
        "",
        "Written by `uv run python reports/regenerate.py`; a test compares them with what it writes now.",
    ]
    for study in studies:
        text = tomllib.loads(study.read_text(encoding="utf-8"))["study"]
        name = study.stem
        lines += [
            "",
            f"**{text['title']}** ([study](../models/{name}.toml), [text]({name}.txt), [JSON]({name}.json))  ",
            text["question"],
        ]
    return "\n".join(lines) + "\n"


def main() -> None:
    """Write the files of the studies named, and the index."""
    asked = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    asked.add_argument("names", nargs="*", metavar="NAME", help="a study in models/; all when none is given")
    asked.add_argument("--into", type=Path, default=ROOT / "reports", metavar="FOLDER")
    given = asked.parse_args()
    into = given.into.resolve()
    with contextlib.chdir(ROOT):  # so that documents name their study models/NAME.toml wherever this is run
        studies = sorted(Path("models").glob("*.toml"))
        unknown = set(given.names) - {study.stem for study in studies}
        if unknown:
            asked.error(f"no such study in models/: {', '.join(sorted(unknown))}")
        (into / "README.md").write_text(index(studies), encoding="utf-8")
        for study in studies:
            if given.names and study.stem not in given.names:
                continue
            (into / f"{study.stem}.txt").write_text(session(study.as_posix()), encoding="utf-8")
            document, _ = run(f"evaluate {study.as_posix()} --json")
            (into / f"{study.stem}.json").write_text(document, encoding="utf-8")
            print(study.stem, flush=True)


if __name__ == "__main__":
    main()
