"""A progress bar on standard error, where somebody is watching and nowhere else."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager

Progress = Callable[[str, float], None]


@contextmanager
def terminal_progress() -> Iterator[Progress | None]:
    """A function to be called with what is being done and the fraction done, 0 to 1; None without a terminal."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeElapsedColumn, TimeRemainingColumn
    from rich.progress import Progress as Bar

    console = Console(stderr=True)
    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        TimeElapsedColumn(),
        TextColumn("left"),
        TimeRemainingColumn(),
    )
    with Bar(*columns, console=console, transient=True) as bar:
        task = bar.add_task("starting", total=1.0)
        yield lambda text, fraction: bar.update(task, description=text, completed=fraction)


def part(progress: Progress | None, low: float, high: float) -> Progress | None:
    """The progress of a job that is the part from `low` to `high` of a larger one."""
    if progress is None:
        return None
    return lambda text, fraction: progress(text, low + (high - low) * fraction)
