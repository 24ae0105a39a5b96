"""The options that say how PATH is read, shared by every command that reads data."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from driftline.cli.completion import Name
from driftline.reading import AVERAGES, KINDS, SEPARATORS, InputOptions

if TYPE_CHECKING:
    from driftline.curves import Curves
    from driftline.settings import Settings

Function = TypeVar("Function", bound=Callable[..., Any])

COLUMNS = "size=L,disorder=W,mean=r,error=sem, or the roles in the order of the columns: size,disorder,mean,error"

#: Fields of `InputOptions` that have a meaning for lists of energy levels
SPECTRA = ("columns", "pattern", "separator", "header", "skip_cut_lines", "paired")


def _layout_names() -> list[str]:
    from driftline.readers import LAYOUTS

    return [layout.name for layout in LAYOUTS]


option = click.option
_OPTIONS = (
    option("--layout", type=Name(_layout_names), metavar="NAME", help="Layout of the data [default: by content]."),
    option("--columns", metavar="ROLES", help=f"What the columns, datasets or arrays hold: {COLUMNS}."),
    option("--sizes", metavar="L,L,...", help="Sizes of the columns of a wide table without names."),
    option("--pattern", metavar="PATTERN", help="Paths in a folder or HDF5, such as L{size}/W{disorder}/r.dat."),
    option("--axes", metavar="AXES", help="Dimensions of an array, such as realisation,disorder,state."),
    option("--separator", type=click.Choice(list(SEPARATORS)), help="What stands between the columns of a text."),
    option("--header/--no-header", default=None, help="Whether the first row of a text file holds names."),
    option("--samples-each", type=int, metavar="N", help="Realisations behind every mean, if no column holds it."),
    option("--error-each", type=float, metavar="E", help="Standard error of every mean, if no column holds it."),
    option("--skip-cut-lines", is_flag=True, default=None, help="Leave out a last line that was cut short."),
    option("--average", type=click.Choice(AVERAGES), help="Average of raw values over realisations."),
    option("--kind", type=click.Choice(KINDS), help="What raw values are; counts and yes-no get binomial errors."),
    option("--paired/--unpaired", default=None, help="Whether raw values at several disorders share realisations."),
)  # fmt: skip


def reading_options(function: Function) -> Function:
    """Every field of `InputOptions` as an option; `taken` collects them again."""
    return _decorated(function, InputOptions.names())


def spectra_options(function: Function) -> Function:
    """Those of them that say where energy levels stand."""
    return _decorated(function, SPECTRA)


def _decorated(function: Function, names: Sequence[str]) -> Function:
    for name, decorate in reversed(list(zip(InputOptions.names(), _OPTIONS, strict=True))):
        if name in names:
            function = decorate(function)
    return function


def observable_option() -> Callable[[Any], Any]:
    """The option --observable, whose value the settings put among the labels."""
    text = "What the values are: gap-ratio[:CLASS], entanglement[:ratio], occupation=FILLING, or any name."
    return click.option("--observable", metavar="NAME", help=text)


def taken(options: dict[str, Any]) -> dict[str, Any]:
    """Take the options of `reading_options` out of `options`, as the field ``input`` of the settings."""
    return {name: options.pop(name) for name in InputOptions.names()}


def read_data(path: Path, settings: Settings, *, quiet: bool = False) -> Curves:
    """The curves at `path`, read as the settings say; a large file shows its progress."""
    from driftline.progress import terminal_progress
    from driftline.readers import read

    with terminal_progress(quiet=quiet) as progress:
        return read(path, input=settings.input, progress=progress, **settings.labels)
