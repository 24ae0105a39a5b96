"""Independent tasks on one or several processes, with the same results either way."""

from __future__ import annotations

import multiprocessing
import signal
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from multiprocessing.process import BaseProcess
from typing import Any

Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False)
class Task:
    """A call to make, and what to say while it runs.  Its random stream must be among its arguments."""

    text: str
    function: Callable[..., Any]
    arguments: tuple[Any, ...]
    options: Mapping[str, Any]

    def __call__(self) -> Any:
        return self.function(*self.arguments, **self.options)


def run_tasks(tasks: Sequence[Task], jobs: int, progress: Progress) -> list[Any]:
    """Results in the order of the tasks.

    Parameters
    ----------
    tasks : sequence of Task
    jobs : int
        Processes at most; with one, everything runs in this process.
    progress : callable
        Called with (text, fraction of the tasks done).
    """
    if jobs == 1 or len(tasks) < 2:
        results = []
        for i, task in enumerate(tasks):
            progress(task.text, i / len(tasks))
            results.append(task())
        return results
    others = frozenset(multiprocessing.active_children())
    with ProcessPoolExecutor(min(jobs, len(tasks)), initializer=_leave_interrupts_to_parent) as pool:
        try:
            futures = {pool.submit(task): i for i, task in enumerate(tasks)}
            progress(f"{len(tasks)} fits on {min(jobs, len(tasks))} processes", 0.0)
            for done, future in enumerate(as_completed(futures), 1):
                progress(tasks[futures[future]].text, done / len(tasks))
                future.result()  # an error ends the whole at once, not after the slowest task
        except BaseException:
            _end_workers(pool, others)
            raise
        return [future.result() for future in futures]


def _leave_interrupts_to_parent() -> None:
    """Ctrl-C reaches every process of a terminal; only the parent shall answer it."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def _end_workers(pool: ProcessPoolExecutor, others: frozenset[BaseProcess]) -> None:
    """End the processes of the pool, but not `others`, which a program that uses this package may have started."""
    for child in multiprocessing.active_children():
        if child not in others:
            child.terminate()
    # the pool's own thread notices and waits for them; a second one that waited too could miss the end of a process
    pool.shutdown(wait=True, cancel_futures=True)
