"""Tasks on one or several processes: order, progress, and what is left after an error."""

from __future__ import annotations

import multiprocessing
import time
from collections.abc import Callable
from typing import Any

import pytest

from driftline.parallel import Task, run_tasks


def task(function: Callable[..., Any], *arguments: Any, **options: Any) -> Task:
    """A call of a function that every process can import."""
    return Task(function.__name__, function, arguments, options)


def silent(_text: str, _fraction: float) -> None:
    """Progress that nobody sees."""


@pytest.mark.parametrize("jobs", [1, 2, 5])
def test_results_keep_the_order_of_the_tasks(jobs: int) -> None:
    """A slow first task does not come last; options reach the call."""
    tasks = [task(time.sleep, 0.3), *(task(int, str(n), base=8) for n in (10, 7, 11))]
    assert run_tasks(tasks, jobs, silent) == [None, 8, 7, 9]


@pytest.mark.parametrize("jobs", [1, 2])
def test_no_tasks_no_results(jobs: int) -> None:
    """Nothing to do is no error."""
    assert run_tasks([], jobs, silent) == []


@pytest.mark.parametrize("jobs", [1, 2])
def test_progress_is_monotone(jobs: int) -> None:
    """It begins at zero, never falls or exceeds one, and names the tasks."""
    told: list[tuple[str, float]] = []
    run_tasks([task(pow, 2, n) for n in range(6)], jobs, lambda text, fraction: told.append((text, fraction)))
    fractions = [fraction for _, fraction in told]
    assert fractions[0] == 0
    assert fractions == sorted(fractions)
    assert fractions[-1] <= 1
    assert "pow" in {text for text, _ in told}


def test_an_error_ends_the_whole_at_once() -> None:
    """The error of a worker reaches the caller long before the slow task beside it is done, and leaves no process."""
    before = time.monotonic()
    with pytest.raises(ZeroDivisionError):
        run_tasks([task(time.sleep, 60), task(divmod, 1, 0), *[task(time.sleep, 60)] * 5], 2, silent)
    # starting two processes takes well under a second; 20 leaves room for a busy machine and is a third of the sleep
    assert time.monotonic() - before < 20
    assert multiprocessing.active_children() == []


def test_an_interruption_ends_the_whole_at_once() -> None:
    """What the progress display raises, Ctrl-C among it, ends the workers as well, even before the first result."""

    def interrupt(_text: str, _fraction: float) -> None:
        raise KeyboardInterrupt

    before = time.monotonic()
    with pytest.raises(KeyboardInterrupt):
        run_tasks([task(time.sleep, 60)] * 3, 2, interrupt)
    assert time.monotonic() - before < 20  # as above
    assert multiprocessing.active_children() == []


def test_processes_of_others_are_left_alone() -> None:
    """A process that the surrounding program had started survives an error in a task."""
    other = multiprocessing.get_context("spawn").Process(target=time.sleep, args=(60,))
    other.start()
    try:
        with pytest.raises(ZeroDivisionError):
            run_tasks([task(divmod, 1, 0), task(time.sleep, 60)], 2, silent)
        assert multiprocessing.active_children() == [other]
        assert other.is_alive()
    finally:
        other.terminate()
        other.join()


def test_error_in_this_process() -> None:
    """With one job the error comes from the task itself, and later tasks are not run."""
    told: list[float] = []
    with pytest.raises(ZeroDivisionError):
        run_tasks([task(divmod, 1, 0), task(pow, 2, 2)], 1, lambda _text, fraction: told.append(fraction))
    assert told == [0.0]
