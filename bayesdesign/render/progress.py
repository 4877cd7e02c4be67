"""A sign of life on a terminal while a long computation runs."""

import threading
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

PATIENCE = 0.7  # seconds of silence before anything is shown


@contextmanager
def working(what: str, *, shown: bool) -> Iterator[None]:
    """Show a transient bar on stderr once the work outlasts `PATIENCE`; nothing at all unless `shown`."""
    if not shown:
        yield
        return
    running: list[Any] = []
    lock, over = threading.Lock(), threading.Event()

    def begin() -> None:
        if over.wait(PATIENCE):
            return
        bar = _bar()  # loads rich, which short work never pays for
        with lock:
            if not over.is_set():
                bar.add_task(what, total=None)
                bar.start()
                running.append(bar)

    thread = threading.Thread(target=begin, daemon=True)
    thread.start()
    try:
        yield
    finally:
        over.set()
        with lock:
            for bar in running:
                bar.stop()


def _bar() -> Any:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}"), BarColumn(bar_width=24), TimeElapsedColumn())
    return Progress(*columns, console=Console(stderr=True), transient=True)
