"""The command line: parse, call the public functions, print.

Exit codes: 0 done, whatever the verdict; 1 bad input or configuration, with one sentence on standard error; 2 wrong
usage; 130 interrupted. Any other exception is a bug of the program: it shows its traceback, and Python exits with 1.

Everything numerical is imported inside the commands, so that ``--help`` is immediate.
"""

from __future__ import annotations

import io
import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import click

from driftline.errors import DriftlineError

DONE, BAD_INPUT, BAD_USAGE, INTERRUPTED = 0, 1, 2, 130
WRITING_FROM = 0.93  # share of the wall time after which only files are written, for the progress bar


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line and return the exit code.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; those of the process by default.
    """
    _survive_odd_encodings()
    try:
        with driftline.make_context("driftline", list(sys.argv[1:] if argv is None else argv)) as context:
            driftline.invoke(context)
    except click.exceptions.Exit as finished:
        return finished.exit_code
    except click.ClickException as wrong:
        wrong.show()
        return wrong.exit_code
    except DriftlineError as wrong:
        click.echo(f"driftline: {wrong}", err=True)
        return BAD_INPUT
    except (KeyboardInterrupt, click.Abort):
        click.echo("driftline: interrupted, nothing was written", err=True)
        return INTERRUPTED
    return DONE


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="driftline", prog_name="driftline", message="%(prog)s %(version)s")
def driftline() -> None:
    """Finite-size crossovers of disordered systems: locate, collapse, compare, judge."""


@driftline.command()
@click.argument("path", type=click.Path(path_type=Path))
@click.option("--config", type=click.Path(path_type=Path), metavar="FILE", help="TOML file with settings.")
@click.option("--out", type=click.Path(path_type=Path), metavar="DIR", help="Output folder [default: NAME-driftline].")
@click.option("--ansatz", "ansatze", multiple=True, metavar="NAME", help="Scaling ansatz; may be given repeatedly.")
@click.option("--window", type=float, nargs=2, metavar="LOW HIGH", help="Disorder range to use.")
@click.option("--smallest-size", type=float, metavar="L", help="Leave out sizes below this one.")
@click.option("--seed", type=int, metavar="N", help="Seed of the random numbers [default: 0].")
@click.option("--quick", is_flag=True, default=None, help="A first look: shorter chains, fewer refits.")
@click.option("--jobs", type=int, metavar="N", help="Worker processes [default: all cores]; same numbers.")
@click.option("--force", is_flag=True, help="Replace an earlier output folder.")
def analyse(path: Path, config: Path | None, out: Path | None, force: bool, **options: Any) -> None:
    """The whole job, from curves to a verdict.

    Reads the curves in PATH, finds crossings and their drift, collapses them under each ansatz, judges, draws, and
    writes everything into one folder.
    """
    from driftline.report.folder import check_folder, default_folder
    from driftline.settings import Settings

    folder = default_folder(path) if out is None else out
    options["ansatze"] = options["ansatze"] or None
    settings = Settings.resolve(config, options, {"jobs": _cores()})
    check_folder(folder, force=force)
    _analyse(path, settings, folder, force)


@driftline.command()
@click.argument("path", type=click.Path(path_type=Path))
def inspect(path: Path) -> None:
    """Say what is read from PATH.

    From which columns the numbers come, and what looks wrong; computes and writes nothing.
    """
    from driftline.readers import read
    from driftline.readers.inspection import inspect_text

    click.echo(inspect_text(read(path)), nl=False)


@driftline.command()
@click.argument("path", type=click.Path(path_type=Path), required=False)
@click.option("--config", type=click.Path(path_type=Path), metavar="FILE", help="TOML file with forms of your own.")
def ansatze(path: Path | None, config: Path | None) -> None:
    """List the scaling ansätze.

    With formula, parameters and priors; if PATH is given, the priors for the curves in it.
    """
    from driftline.report.listing import listing
    from driftline.settings import Settings

    settings = Settings.resolve(config)
    if path is None:
        curves = None
    else:
        from driftline.readers import read

        curves = settings.select(read(path, **settings.labels))
    click.echo(listing(curves, settings.forms), nl=False)


def _cores() -> int:
    """Processor cores that this process may use."""
    affinity = getattr(os, "sched_getaffinity", None)  # not on every system
    return len(affinity(0)) if affinity else os.cpu_count() or 1


def _analyse(path: Path, settings: Any, folder: Path, force: bool) -> None:
    from driftline.analysis import analyse
    from driftline.progress import part, terminal_progress
    from driftline.readers import read
    from driftline.report.writers import write_report

    curves = read(path, **settings.labels)
    settings.select(curves)  # says what is wrong with a window before anything else happens
    with terminal_progress() as progress:
        analysis = analyse(curves, settings=settings, progress=part(progress, 0.0, WRITING_FROM))
        write_report(analysis, folder, force=force, progress=part(progress, WRITING_FROM, 1.0))
    _print_summary(analysis)
    click.echo(f"\nWritten to {folder}{os.sep}")


def _print_summary(analysis: Any) -> None:
    from driftline.report import summary

    colours: dict[str, dict[str, Any]] = {
        summary.GOOD: {"fg": "green", "bold": True},
        summary.BAD: {"fg": "red", "bold": True},
        summary.HEADING: {"bold": True},
        summary.WARNING: {"fg": "yellow"},
        summary.TEXT: {},
    }
    plain = bool(os.environ.get("NO_COLOR"))  # https://no-color.org: any text that is not empty
    for role, line in summary.lines(analysis):
        click.echo(line if plain else click.style(line, **colours[role]) if colours[role] else line)


def _survive_odd_encodings() -> None:
    """Write a question mark where the terminal's encoding lacks a character, rather than stop."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")
