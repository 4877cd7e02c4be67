"""Bytes to where they belong: standard output, or a file that is written whole or not at all."""

import contextlib
import errno
import os
import secrets
import sys
from pathlib import Path
from typing import TextIO

from bayesdesign.core.errors import Fault, StudyError

# for terminals and pipes whose encoding has no typographic signs
_PLAIN = str.maketrans({"─": "-", "│": "|", "±": "+-", "·": ".", "×": "x", "–": "-", "…": "...", "≥": ">=", "≤": "<="})


def check_target(out: str, study_file: str = "") -> None:
    """Raise `StudyError` when the file could not be written, before anything is computed."""
    target = Path(out).resolve()
    folder = target.parent
    if out.endswith(("/", os.sep)) or target.is_dir():
        raise _fault(out, "is a folder", "name a file in it")
    if not folder.is_dir():
        raise _fault(out, "its folder does not exist", "make the folder first")
    if target.exists() and not target.is_file():
        raise _fault(out, "is not a regular file", "leave --out away to write to standard output")
    if not os.access(folder, os.W_OK) or (target.exists() and not os.access(target, os.W_OK)):
        raise _fault(out, "cannot be written (permission denied)", "choose another place")
    if study_file and target == Path(study_file).resolve():
        raise _fault(out, "is the study file itself", "choose another name")


def write_file(out: str, text: str) -> None:
    """Write the text beside the target, flush it to disk, then move it into place."""
    target = Path(out).resolve()  # a symbolic link keeps pointing to its file
    beside = target.with_name(f".{target.name[:100]}.{secrets.token_hex(4)}.part")
    try:
        with beside.open("xb") as stream:
            stream.write(text.encode("utf-8", errors="backslashreplace"))
            stream.flush()
            os.fsync(stream.fileno())
        if target.exists():
            beside.chmod(target.stat().st_mode & 0o777)
        beside.replace(target)
    except OSError as failure:
        raise _fault(out, f"cannot be written ({failure.strerror or failure})", "choose another place") from failure
    finally:
        beside.unlink(missing_ok=True)


def write_stream(text: str, stream: TextIO | None = None, *, utf8: bool = False) -> None:
    """Write to standard output (or another stream). A reader that has gone away ends this quietly.

    `utf8` forces that encoding, which JSON needs; other text is spelt with what the stream can show.
    """
    stream = stream or sys.stdout
    encoding = "utf-8" if utf8 else (getattr(stream, "encoding", None) or "utf-8")
    try:
        try:
            data = text.encode(encoding)
        except UnicodeEncodeError:
            data = text.translate(_PLAIN).encode(encoding, errors="backslashreplace")
        stream.flush()
        if hasattr(stream, "buffer"):
            stream.buffer.write(data)
        else:
            stream.write(data.decode(encoding))
        stream.flush()
    except OSError as failure:
        if failure.errno not in (errno.EPIPE, errno.EINVAL):  # Windows reports a closed pipe as EINVAL
            raise StudyError(
                [Fault(where="standard output", problem=f"cannot be written ({failure.strerror or failure})")]
            ) from failure
        forget(stream)


def forget(stream: TextIO) -> None:
    """Point the stream elsewhere, so that the interpreter's last flush does not complain either."""
    with contextlib.suppress(OSError, ValueError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _fault(out: str, problem: str, allowed: str) -> StudyError:
    return StudyError([Fault(where="--out", problem=problem, got=out, allowed=allowed)])
