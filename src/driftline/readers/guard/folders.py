"""Files in a folder whose names fit a pattern, found without leaving the folder."""

from __future__ import annotations

import os
import re
from collections.abc import Iterator, Sequence
from pathlib import Path, PurePosixPath, PureWindowsPath

from driftline.errors import ConfigurationError, InputError
from driftline.readers.guard.files import refusals
from driftline.readers.guard.limits import MAX_FILES
from driftline.wording import shown


def pattern_parts(pattern: str, where: str) -> tuple[str, ...]:
    """The parts of a path pattern such as ``runs/L{size}/W{disorder}/r.dat`` between the slashes.

    Raises
    ------
    ConfigurationError
        If the pattern is empty or absolute, leads upwards or to a home folder, or holds a zero byte: whatever it
        names must lie inside the folder it is applied to. `where` names the option or key in the text.
    """
    plain = pattern.replace("\\", "/") if os.name == "nt" else pattern
    parts = tuple(part for part in plain.split("/") if part not in ("", "."))
    absolute = PurePosixPath(pattern).is_absolute() or bool(os.name == "nt" and PureWindowsPath(pattern).anchor)
    if not parts or absolute or ".." in parts or "\0" in pattern or parts[0].startswith("~"):
        raise ConfigurationError(
            f"{where}: the pattern {shown(pattern)} must name files inside the folder, without a leading slash, '..' "
            "or '~'; give the folder itself as the path"
        )
    return parts


def matching_files(
    root: Path, parts: Sequence[re.Pattern[str]], place: str, *, most: int = MAX_FILES
) -> Iterator[tuple[Path, tuple[re.Match[str], ...]]]:
    """Regular files below `root`, in the order of their names, whose path fits `parts` one by one.

    Parameters
    ----------
    root, place : path, str
        The folder that the user named, and how.
    parts : sequence of re.Pattern
        For each level a regular expression that the whole name must match; the last one is for files. So the depth is
        bounded; and a link to a folder that holds it is passed over.
    most : int
        Most entries to look at.

    Yields
    ------
    (Path, matches)
        The file and the match of every level, from which the parameters are taken.

    Raises
    ------
    InputError
        If a name that fits is a link out of the folder or a broken link, is a FIFO or a device, or may not be read,
        and if there are too many entries. Names that do not fit are passed over, whatever they are.
    """
    budget = _Budget(most, place)
    with refusals(place):
        top = Path(os.path.realpath(root))
    yield from _matching(root, parts, (), _Root(top, place), budget)


class _Budget:
    """Counts the entries that were looked at."""

    def __init__(self, most: int, place: str) -> None:
        self._left, self._most, self._place = most, most, place

    def spend(self) -> None:
        self._left -= 1
        if self._left < 0:
            problem = f"the folder holds more than {self._most} entries; give a folder further down"
            raise InputError(problem, where=self._place)


class _Root:
    """The folder that nothing may lead out of."""

    def __init__(self, top: Path, place: str) -> None:
        self._top, self.place = top, place

    def check(self, entry: os.DirEntry[str], where: str) -> None:
        """Refuse a link that leads out of the folder or to nothing."""
        if not entry.is_symlink():
            return
        target = Path(os.path.realpath(entry.path))
        if not target.is_relative_to(self._top):
            raise InputError(
                "this link leads out of the folder, which is not followed; copy the data here or give the folder that "
                "holds them",
                where=where,
            )
        if not target.exists():
            raise InputError("this link leads nowhere; remove it or restore what it led to", where=where)


def _matching(
    folder: Path, parts: Sequence[re.Pattern[str]], found: tuple[re.Match[str], ...], root: _Root, budget: _Budget
) -> Iterator[tuple[Path, tuple[re.Match[str], ...]]]:
    where = os.path.join(root.place, *(match.string for match in found))  # noqa: PTH118 -- the user's own words
    wanted, last = parts[len(found)], len(found) == len(parts) - 1
    for entry in _entries(folder, where, budget):
        match = wanted.fullmatch(entry.name)
        if match is None:
            continue
        below = os.path.join(where, entry.name)  # noqa: PTH118
        root.check(entry, below)
        with refusals(below):
            is_folder, is_file = entry.is_dir(), entry.is_file()
        if last and not is_folder:
            if not is_file:
                raise InputError("this is not a regular file; move it away or narrow the pattern", where=below)
            yield Path(entry.path), (*found, match)
        elif not last and is_folder and not _leads_upwards(entry, folder):
            yield from _matching(Path(entry.path), parts, (*found, match), root, budget)


def _leads_upwards(entry: os.DirEntry[str], folder: Path) -> bool:
    """Whether a link leads to a folder that holds it: twenty of them six deep would be millions of ways to one file."""
    return entry.is_symlink() and Path(os.path.realpath(folder)).is_relative_to(os.path.realpath(entry.path))


def _entries(folder: Path, where: str, budget: _Budget) -> list[os.DirEntry[str]]:
    entries = []
    with refusals(where), os.scandir(folder) as found:
        for entry in found:
            budget.spend()
            entries.append(entry)
    return sorted(entries, key=lambda entry: entry.name)
