"""What can go wrong by the user's doing, as sentences: what, where, and what to do about it."""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches

from driftline.wording import printable


class DriftlineError(ValueError):
    """Base of every error a user can cause; its text is one clear sentence, fit to be shown as it is.

    Names from files may end up in the text, so characters that a terminal would obey are written out as escapes.
    """

    def __init__(self, text: str) -> None:
        super().__init__(printable(text))


class InputError(DriftlineError):
    """A data file or array cannot be used.

    Parameters
    ----------
    problem : str
        What is wrong and what to do, without the place.
    where : str, optional
        The place, for example ``"run.csv, line 3, column 'error'"``; it is put in front of the problem.
    """

    def __init__(self, problem: str, *, where: str | None = None) -> None:
        super().__init__(f"{where}: {problem}" if where else problem)
        self.problem = problem
        self.where = where


class ConfigurationError(DriftlineError):
    """An option, a configuration file or an output folder cannot be used."""


def suggestion(name: str, known: Iterable[str]) -> str:
    """Sentence part that offers the known names nearest to `name`, or all of them.

    Examples
    --------
    >>> suggestion("sead", ["seed", "jobs"])
    'did you mean seed?'
    """
    names = list(known)
    near = get_close_matches(name, names, n=3, cutoff=0.6)
    return f"did you mean {' or '.join(near)}?" if near else f"known are: {', '.join(names)}"
