"""A group of commands that live in a module each and are loaded when they are asked for."""

from __future__ import annotations

from collections.abc import Sequence
from importlib import import_module
from typing import Any

import click

from driftline.errors import suggestion


class LazyGroup(click.Group):
    """Commands by name: ``NAME`` is the function ``NAME`` in the module ``PACKAGE.NAME``.

    Parameters
    ----------
    package : str
        Where the modules are.
    names : sequence of str
        The commands, in the order in which the help lists them.
    """

    def __init__(self, *args: Any, package: str, names: Sequence[str], **options: Any) -> None:
        super().__init__(*args, **options)
        self.package, self.names = package, tuple(names)

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Every name, in the order of the program's author."""
        return list(self.names)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of this name, or None; only its own module is loaded."""
        if cmd_name not in self.names:
            return None
        command = getattr(import_module(f"{self.package}.{cmd_name}"), cmd_name)
        assert isinstance(command, click.Command)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """As click does it, with a suggestion for a name that is not known (older versions of click have none)."""
        name = args[0]
        known = name in self.names or name.startswith("-") or ctx.resilient_parsing
        if not known:
            ctx.fail(f"there is no command {name!r}; {suggestion(name, self.names)}")
        return super().resolve_command(ctx, args)
