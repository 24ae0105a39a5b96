"""A progress bar on standard error, where somebody is watching and nowhere else."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import timedelta
from typing import IO, TYPE_CHECKING

if TYPE_CHECKING:
    from rich.progress import Progress as Bar
    from rich.progress import Task

Progress = Callable[[str, float], None]

BAR = 24  # characters
TEXT = 36  # characters of what is being done; with bar, share and time left the line fits into 80
UNKNOWN_COLUMNS = 80


def columns_of(stream: IO[str]) -> int:
    """Width of the terminal that `stream` writes to; COLUMNS in the environment goes first, as in other programs."""
    given = os.environ.get("COLUMNS", "")
    try:
        found = int(given) if given.isdecimal() else os.get_terminal_size(stream.fileno()).columns
    except (OSError, ValueError):
        found = 0
    return found or UNKNOWN_COLUMNS  # some terminals say 0


def time_left(fraction: float, reached_after: float, elapsed: float) -> float | None:
    """Seconds left, if the work goes on at the pace at which `fraction` was reached `reached_after` seconds from start.

    Examples
    --------
    >>> time_left(0.25, 10.0, 12.0), time_left(0.25, 10.0, 50.0), time_left(0.0, 0.0, 5.0)
    (28.0, 0.0, None)
    """
    if fraction <= 0:
        return None
    return max(0.0, reached_after / fraction - elapsed)


def left_text(seconds: float | None) -> str:
    """Time left in words; an estimate that has run out is not shown as nothing left.

    Examples
    --------
    >>> left_text(65.2), left_text(0.0), left_text(None)
    ('0:01:05 left', 'a little longer', '')
    """
    if seconds is None:
        return ""
    return f"{timedelta(seconds=round(seconds))} left" if seconds >= 0.5 else "a little longer"


@contextmanager
def terminal_progress(*, quiet: bool = False) -> Iterator[Progress | None]:
    """A function to be called with what is being done and the fraction done, 0 to 1; None without a terminal.

    Parameters
    ----------
    quiet : bool
        Show nothing on a terminal either.
    """
    if quiet or not sys.stderr.isatty():
        yield None
        return
    bar = _bar()
    with bar:
        task = bar.add_task("starting", total=1.0)

        def tell(text: str, fraction: float) -> None:
            bar.update(task, description=text, completed=fraction, reached_after=bar.tasks[0].elapsed or 0.0)

        yield tell


def part(progress: Progress | None, low: float, high: float) -> Progress | None:
    """The progress of a job that is the part from `low` to `high` of a larger one."""
    if progress is None:
        return None
    return lambda text, fraction: progress(text, low + (high - low) * fraction)


def _bar() -> Bar:
    from rich.console import Console
    from rich.progress import BarColumn, ProgressColumn, TextColumn
    from rich.progress import Progress as Bar
    from rich.table import Column
    from rich.text import Text

    class Left(ProgressColumn):
        """Time left, counted down between the reports."""

        max_refresh = 0.5

        def render(self, task: Task) -> Text:
            seconds = time_left(task.completed, task.fields.get("reached_after", 0.0), task.elapsed or 0.0)
            return Text(left_text(seconds))

    colours = None if os.environ.get("NO_COLOR") else "auto"
    console = Console(stderr=True, width=columns_of(sys.stderr), color_system=colours)  # type: ignore[arg-type]
    return Bar(
        TextColumn("{task.description}", markup=False, table_column=Column(max_width=TEXT, no_wrap=True)),
        BarColumn(bar_width=BAR),
        TextColumn("{task.percentage:>3.0f}%", table_column=Column(no_wrap=True)),
        Left(table_column=Column(no_wrap=True)),
        console=console,
        transient=True,
    )
