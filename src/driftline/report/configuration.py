"""`analysis.toml`: the resolved configuration, which given to ``--config`` reproduces the result."""

from __future__ import annotations

import json
from dataclasses import fields
from pathlib import Path
from typing import TYPE_CHECKING, Any

from driftline.figure_options import FigureOptions
from driftline.report.base import Writer
from driftline.scaling.tables import form_table
from driftline.settings import Settings

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.partial import CollapseStudy, CrossingStudy
    from driftline.scaling.expression import ExpressionForm


def to_toml(settings: Settings) -> str:
    """All settings as TOML, which `Settings.resolve` reads back to an equal object."""
    lines = [
        f"ansatze = [{', '.join(_text(name) for name in settings.ansatze)}]",
        f"window = {_list(settings.window)}" if settings.window else "# window: all disorders",
        f"smallest_size = {settings.smallest_size!r}" if settings.smallest_size else "# smallest_size: all sizes",
        f"seed = {settings.seed}",
        f"quick = {str(settings.quick).lower()}",
        f"jobs = {settings.jobs}",
        f"draws = {settings.draws}",
    ]
    if settings.labels:
        lines += ["", "[labels]", *(f"{name} = {_value(value)}" for name, value in settings.labels.items())]
    if given := settings.input.given():
        lines += ["", "[input]", *(f"{name} = {_input(value)}" for name, value in given.items())]
    lines += ["", "[figure]", *_figure(settings.figure)]
    for form in settings.forms:
        lines += ["", *_form(form)]
    return "\n".join(lines) + "\n"


def _figure(options: FigureOptions) -> list[str]:
    lines = []
    for part in fields(options):
        value = getattr(options, part.name)
        if value is None:
            lines.append(f"# {part.name}: that of the house")
        elif isinstance(value, tuple):
            lines.append(f"{part.name} = [{', '.join(_text(each) for each in value)}]")
        else:
            lines.append(f"{part.name} = {_value(value)}")
    return lines


def _form(form: ExpressionForm) -> list[str]:
    """A form of the user's own as a table; its names are bare keys of TOML."""
    table = form_table(form)
    lines = [f"[ansatz.{form.name}]", *(f"{key} = {_text(table[key])}" for key in ("x", "hypothesis"))]
    if table["parameters"]:
        lines += [f"[ansatz.{form.name}.parameters]"]
    for name, prior in table["parameters"].items():
        lines.append(f"{name} = {{ {', '.join(f'{key} = {_value(value)}' for key, value in prior.items())} }}")
    return lines


class ConfigurationFile(Writer):
    """`analysis.toml`."""

    title = "analysis.toml"

    def write(self, analysis: Analysis | CrossingStudy | CollapseStudy, folder: Path) -> None:
        """Write `folder/analysis.toml`."""
        path = analysis.curves.origin.get("path")
        head = "# Resolved configuration; to repeat: driftline analyse DATA --config analysis.toml\n"
        head += "" if path is None else f"# DATA was {_text(str(path))}\n"
        (folder / "analysis.toml").write_text(head + to_toml(analysis.settings), encoding="utf-8", newline="\n")


def _input(value: Any) -> str:
    """An option of reading: a table in one line, a list, a switch, text or a number."""
    if isinstance(value, dict):
        return f"{{ {', '.join(f'{role} = {_text(place)}' for role, place in value.items())} }}"
    if isinstance(value, list):
        return f"[{', '.join(_value(item) for item in value)}]"
    return str(value).lower() if isinstance(value, bool) else _value(value)


def _value(value: Any) -> str:
    if value is None:
        return '"none"'
    return _text(value) if isinstance(value, str) else repr(value)


def _list(values: tuple[float, ...]) -> str:
    return f"[{', '.join(repr(value) for value in values)}]"


def _text(text: str) -> str:
    """A basic string: the escapes of JSON are those of TOML, except for DEL, which TOML wants escaped."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")
