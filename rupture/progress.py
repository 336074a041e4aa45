"""Progress on stderr: a bar on a terminal, one line a stage elsewhere; stages and their seconds are kept."""

from __future__ import annotations

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any, Protocol


class Report(Protocol):
    """Called by a stage as it goes: how many of how many steps are done."""

    def __call__(self, done: int, total: int) -> None:
        """Tell that `done` of `total` steps are done."""
        ...


class Progress:
    """Show stages as they run and remember how long each took.

    Parameters
    ----------
    quiet
        Show nothing; times are kept all the same.
    """

    def __init__(self, quiet: bool = False) -> None:
        self.quiet = quiet
        self.seconds: dict[str, float] = {}

    @contextmanager
    def stage(self, name: str) -> Iterator[Report]:
        """Run a stage; yields the function that the stage calls with (done, total)."""
        start = time.perf_counter()
        bar, task = self._bar(name)

        def report(done: int, total: int) -> None:
            if bar is not None:
                bar.update(task, completed=done, total=total)

        try:
            yield report
        finally:
            seconds = time.perf_counter() - start
            self.seconds[name] = round(self.seconds.get(name, 0.0) + seconds, 3)
            if bar is not None:
                bar.stop()
            if not self.quiet:
                print(f"{name}: {seconds:.1f} s", file=sys.stderr)

    def _bar(self, name: str) -> tuple[Any, Any]:
        if self.quiet or not sys.stderr.isatty():
            return None, None
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn, TimeRemainingColumn

        bar = Progress(
            TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn(), TimeRemainingColumn(),
            console=Console(stderr=True), transient=True,
        )  # fmt: skip
        bar.start()
        return bar, bar.add_task(name, total=None)
