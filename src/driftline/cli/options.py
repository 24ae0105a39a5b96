"""Arguments and options that several commands share, so that they are called and explained alike."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

Function = TypeVar("Function", bound=Callable[..., Any])
Decorator = Callable[[Any], Any]


def data_path(*, required: bool = True) -> Decorator:
    """The argument PATH: where the data are."""
    return click.argument("path", type=click.Path(path_type=Path), required=required)


def config_option(text: str = "TOML file with settings.") -> Decorator:
    """The option --config."""
    return click.option("--config", type=click.Path(path_type=Path), metavar="FILE", help=text)


def ansatz_option() -> Decorator:
    """The option --ansatz, which may be repeated."""
    text = "Scaling ansatz; may be given repeatedly."
    return click.option("--ansatz", "ansatze", multiple=True, metavar="NAME", help=text)


def selection_options(function: Function) -> Function:
    """The options that say which part of the data is used: --window and --smallest-size."""
    smallest = click.option("--smallest-size", type=float, metavar="L", help="Leave out sizes below this one.")
    window = click.option("--window", type=float, nargs=2, metavar="LOW HIGH", help="Disorder range to use.")
    return window(smallest(function))


def seed_option() -> Decorator:
    """The option --seed."""
    return click.option("--seed", type=int, metavar="N", help="Seed of the random numbers [default: 0].")


def jobs_option() -> Decorator:
    """The option --jobs."""
    return click.option("--jobs", type=int, metavar="N", help="Worker processes [default: all cores]; same numbers.")


def cores() -> int:
    """Processor cores that this process may use."""
    affinity = getattr(os, "sched_getaffinity", None)  # not on every system
    return len(affinity(0)) if affinity else os.cpu_count() or 1
