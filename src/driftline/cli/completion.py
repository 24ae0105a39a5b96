"""Completion in bash, zsh and fish, by the mechanism of click.

The shell calls ``driftline`` with the variable `VARIABLE` set and gets suggestions, or a script to install them. Bash
needs help: it breaks words at the colon and the equals sign, which names such as ``kt:linear-drift`` hold, so it gets
the line as it stands and only the part of a suggestion that follows the last break. Fish wants the whole token back.
"""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterable

import click
from click.shell_completion import (
    BashComplete,
    CompletionItem,
    FishComplete,
    add_completion_class,
    shell_complete,
    split_arg_string,
)

VARIABLE = "_DRIFTLINE_COMPLETE"

Names = Callable[[], Iterable[str]]


def complete(group: click.Group) -> int | None:
    """Answer the shell if it is the one that calls, and return the exit code; else None."""
    instruction = os.environ.get(VARIABLE)
    return shell_complete(group, {}, "driftline", VARIABLE, instruction) if instruction else None


class Name(click.ParamType):  # type: ignore[type-arg] # generic in newer versions of click only
    """A name out of a registry that is only loaded to complete it; whoever uses the name checks it.

    Parameters
    ----------
    names : callable
        Returns the names that can be offered.
    """

    name = "name"

    def __init__(self, names: Names) -> None:
        self.names = names

    def shell_complete(self, ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem[str]]:
        """The names that begin with what is there, but for those given before."""
        given = ctx.params.get(param.name or "")
        taken = given if isinstance(given, tuple) else ()  # an option that is given once holds its default here
        return [CompletionItem(name) for name in self.names() if name.startswith(incomplete) and name not in taken]


def ansatz_names() -> Iterable[str]:
    """Every scaling form on offer, plain, corrected, and with an amplitude."""
    from driftline.scaling.ansatz import AMPLITUDE, available

    names = available()
    return [*names, *(f"{name}:{AMPLITUDE}" for name in names)]


@add_completion_class
class WholeLineBash(BashComplete):
    """Bash completion that looks at the line, not at the words that bash makes of it."""

    source_template = r"""
%(complete_func)s() {
    local type value
    COMPREPLY=()
    while IFS=, read -r type value; do
        case $type in
            file) compopt -o default ;;
            dir) compopt -o dirnames ;;
            plain) COMPREPLY+=("$value") ;;
        esac
    done < <(COMP_WORDS="${COMP_LINE:0:COMP_POINT}" %(complete_var)s=bash_complete "$1")
}
complete -o nosort -F %(complete_func)s %(prog_name)s
"""

    def get_completion_args(self) -> tuple[list[str], str]:
        """Finished words after the program's name, and the unfinished one."""
        line = os.environ["COMP_WORDS"]
        words = split_arg_string(line)[1:]
        if line[-1:].isspace() or not words:
            words.append("")
        self.unfinished = words[-1]
        return words[:-1], words[-1]

    def format_completion(self, item: CompletionItem[str]) -> str:
        """The suggestion without what bash keeps of the unfinished word."""
        value = self.unfinished.partition("=")[2] if self.unfinished.startswith("--") else self.unfinished
        kept = re.match(r".*[:=]", value) if item.type == "plain" else None
        return f"{item.type},{item.value[kept.end() if kept else 0 :]}"


@add_completion_class
class WholeTokenFish(FishComplete):
    """Fish completion of ``--option=value``, of which fish wants the whole back."""

    def get_completion_args(self) -> tuple[list[str], str]:
        """As in click; what stands before the value is kept."""
        words, unfinished = super().get_completion_args()
        option, equals, _ = unfinished.partition("=")
        self.before = option + equals if equals and option.startswith("--") else ""
        return words, unfinished

    def format_completion(self, item: CompletionItem[str]) -> str:
        """As in click, after what stood before the value."""
        if item.type == "plain":
            item.value = self.before + item.value
        return super().format_completion(item)
