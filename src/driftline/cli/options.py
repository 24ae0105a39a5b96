"""Arguments and options that several commands share, so that they are called and explained alike."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

from driftline.cli.completion import Name, Names, ansatz_names

Function = TypeVar("Function", bound=Callable[..., Any])
Decorator = Callable[[Any], Any]


def examples(*lines: str) -> str:
    """The end of a help text: commands as one would type them, which click shall not wrap."""
    return "\b\nExamples:\n" + "\n".join(f"  {line}" for line in lines)


def data_path(*, required: bool = True) -> Decorator:
    """The argument PATH: where the data are."""
    return click.argument("path", type=click.Path(path_type=Path), required=required)


def config_option(text: str = "TOML file with settings.") -> Decorator:
    """The option --config."""
    return click.option("--config", type=click.Path(path_type=Path), metavar="FILE", help=text)


def out_option(text: str) -> Decorator:
    """The option --out."""
    return click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help=text)


def ansatz_option(text: str = "Scaling ansatz; may be given repeatedly.") -> Decorator:
    """The option --ansatz, which may be repeated."""
    return names_option("--ansatz", "ansatze", ansatz_names, text)


def names_option(option: str, parameter: str, names: Names, text: str, *, many: bool = True, **more: Any) -> Decorator:
    """An option that takes a name out of a registry, or `many` when repeated; the shell completes it."""
    return click.option(option, parameter, type=Name(names), multiple=many, metavar="NAME", help=text, **more)


def selection_options(function: Function) -> Function:
    """The options that say which part of the data is used: --window and --smallest-size."""
    smallest = click.option("--smallest-size", type=float, metavar="L", help="Leave out sizes below this one.")
    window = click.option("--window", type=float, nargs=2, metavar="LOW HIGH", help="Disorder range to use.")
    return window(smallest(function))


def seed_option() -> Decorator:
    """The option --seed."""
    return click.option("--seed", type=int, metavar="N", help="Seed of the random numbers [default: 0].")


def quick_option() -> Decorator:
    """The option --quick."""
    text = "A first look: shorter chains, fewer refits."
    return click.option("--quick", is_flag=True, default=None, help=text)


def jobs_option() -> Decorator:
    """The option --jobs."""
    return click.option("--jobs", type=int, metavar="N", help="Worker processes [default: all cores]; same numbers.")


def force_option(text: str = "Replace an earlier output folder.") -> Decorator:
    """The option --force."""
    return click.option("--force", is_flag=True, help=text)


def quiet_option() -> Decorator:
    """The option --quiet."""
    return click.option("-q", "--quiet", is_flag=True, help="Print nothing but errors; no progress either.")


def json_option(text: str) -> Decorator:
    """The option --json."""
    return click.option("--json", "as_json", is_flag=True, help=text)


def cores() -> int:
    """Processor cores that this process may use."""
    affinity = getattr(os, "sched_getaffinity", None)  # not on every system
    return len(affinity(0)) if affinity else os.cpu_count() or 1
