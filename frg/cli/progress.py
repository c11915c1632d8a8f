"""A progress bar on standard error: quick to start, silent when not wanted or not on a terminal."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Bar:
    """`advance(n)` moves it; without a terminal it prints nothing."""

    progress: Any
    task: Any

    def advance(self, count: int) -> None:
        if self.progress is not None:
            self.progress.advance(self.task, count)


@contextmanager
def progress(what: str, *, total: int | None, visible: bool) -> Iterator[Bar]:
    """A bar over `total` steps, or a pulse where the number is not known."""
    if not visible or not sys.stderr.isatty():
        yield Bar(None, None)
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    columns = [TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn()]
    if total is not None:
        columns.insert(2, MofNCompleteColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as shown:
        yield Bar(shown, shown.add_task(what, total=total))
