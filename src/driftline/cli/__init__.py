"""The command line: parse, call the public functions, print. One file a command.

Exit codes: 0 done, whatever the verdict; 1 bad input or configuration, with one sentence on standard error; 2 wrong
usage; 130 interrupted. Any other exception is a bug of the program: it shows its traceback, and Python exits with 1.

Everything numerical is imported inside the commands, so that ``--help`` is immediate.
"""

from __future__ import annotations

import _thread
import errno
import io
import os
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from threading import Timer

import click

from driftline.cli.completion import complete
from driftline.cli.lazy import LazyGroup
from driftline.errors import DriftlineError
from driftline.wording import printable

DONE, BAD_INPUT, BAD_USAGE, INTERRUPTED = 0, 1, 2, 130

LATER = 0.02  # seconds after which an interrupt is raised again
#: The commands in the order in which the help lists them: each is the function of its name in the module of its name.
COMMANDS = ("analyse", "inspect", "reduce", "crossings", "collapse", "simulate", "ansatze", "calibrate", "fields")


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line and return the exit code.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; those of the process by default.
    """
    _survive_odd_encodings()
    if (answered := complete(driftline)) is not None:
        return answered
    try:
        code = _run(list(sys.argv[1:] if argv is None else argv))
        sys.stdout.flush()  # so that a closed pipe or a full disk shows here, not when the interpreter ends
    except BrokenPipeError:
        _stop_writing()  # whoever read the output has seen enough, as `head` does
        return DONE
    except OSError as reason:
        if reason.errno != errno.ENOSPC:
            raise
        _stop_writing()
        click.echo(f"driftline: the output cannot be written ({reason.strerror}); make room for it", err=True)
        return BAD_INPUT
    return code


def _run(arguments: list[str]) -> int:
    """Exit code of the command, with what went wrong on standard error."""
    try:
        with _interrupts_kept(), driftline.make_context("driftline", arguments) as context:
            driftline.invoke(context)
    except click.exceptions.Exit as finished:
        return finished.exit_code
    except click.ClickException as wrong:
        shown = io.StringIO()
        wrong.show(shown)
        click.echo(printable(shown.getvalue(), keep="\n"), err=True, nl=False)
        return wrong.exit_code
    except DriftlineError as wrong:
        click.echo(f"driftline: {printable(str(wrong))}", err=True)
        return BAD_INPUT
    except (KeyboardInterrupt, click.Abort):
        click.echo("driftline: interrupted, nothing was written", err=True)
        return INTERRUPTED
    return DONE


@click.group(cls=LazyGroup, package=__name__, names=COMMANDS, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="driftline", prog_name="driftline", message="%(prog)s %(version)s")
def driftline() -> None:
    """Finite-size crossovers of disordered systems: locate, collapse, compare, judge."""


@contextmanager
def _interrupts_kept() -> Iterator[None]:
    """Raise an interrupt again that came where Python can only report it, as while a module is being loaded.

    Else it would be lost, with a traceback on standard error, and the work would go on.
    """
    report, timers = sys.unraisablehook, []

    def keep(unraisable: sys.UnraisableHookArgs) -> None:
        if not isinstance(unraisable.exc_value, KeyboardInterrupt):
            report(unraisable)
            return
        timers.append(Timer(LATER, _thread.interrupt_main))  # raised in here it would be lost as well
        timers[-1].start()

    sys.unraisablehook = keep
    try:
        yield
    finally:
        for timer in timers:
            timer.cancel()
        sys.unraisablehook = report


def _survive_odd_encodings() -> None:
    """Write a question mark where the terminal's encoding lacks a character, rather than stop."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")


def _stop_writing() -> None:
    """Send what is left of the output nowhere, or the interpreter would complain when it ends."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
