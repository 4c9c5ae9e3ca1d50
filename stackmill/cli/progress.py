"""How a long run gets on, on standard error: a bar with the time left where that is a terminal, else nothing much."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

from stackmill.relief.watch import Watch

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID


class _Told(Watch):
    """Says when the kernel is compiled; on a terminal, shows a bar from the first news on."""

    def __init__(self) -> None:
        self._bar: Progress | None = None
        self._task: TaskID | None = None

    def compiling(self) -> None:
        """One line, since nothing else happens for some seconds."""
        sys.stderr.write("note: compiling the surface's kernel, once on this machine: some seconds\n")

    def done(self, share: float) -> None:
        """Move the bar; start it when there is one to show."""
        if not sys.stderr.isatty():
            return
        if self._bar is None:
            self._bar = _bar()
            self._task = self._bar.add_task("surface", total=1.0)
            self._bar.start()
        assert self._task is not None
        self._bar.update(self._task, completed=share)

    def close(self) -> None:
        """Take the bar away."""
        if self._bar is not None:
            self._bar.stop()


def _bar() -> Progress:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn

    return Progress(
        TextColumn("{task.description}"),
        BarColumn(),
        TaskProgressColumn(),
        TimeRemainingColumn(),
        console=Console(stderr=True),
        transient=True,
    )


@contextmanager
def progress(*, quiet: bool) -> Iterator[Watch]:
    """A watch for a long run; one that keeps still if quiet."""
    told = _Told()
    try:
        yield Watch() if quiet else told
    finally:
        told.close()
