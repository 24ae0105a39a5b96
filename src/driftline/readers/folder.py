"""Folders of files whose names, or the names of whose folders, carry the parameters: ``L8/W1.0/r.dat``.

Each file holds a value per line (or array element), or a table of which columns are chosen; what the path does not tell
comes from the columns. The pattern of the paths is found where the names leave one reading only.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.assemble import Piece, assembled
from driftline.readers.base import Contents, Layout, number, sha256
from driftline.readers.columns import Choice
from driftline.readers.guard import matching_files, read_npy
from driftline.readers.pattern import Pattern, inferred
from driftline.readers.table import choice_of, pieces_of, unused_note
from driftline.readers.text import read_text
from driftline.reading import InputOptions
from driftline.wording import listed

DEPTH = 6  # folders inside folders that are looked through for a pattern
PLACES = frozenset({"size", "disorder", "realisation"})


class FolderLayout(Layout):
    """Files in a folder, found by a pattern of their paths."""

    name = "folder"
    description = (
        "a folder of text or .npy files found by a pattern such as L{size}/W{disorder}/r.dat, with a value per line or "
        "columns"
    )
    folder = True

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """Any folder."""
        return path.is_dir()

    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read all files that fit the pattern; see `Layout.contents`."""
        pattern = Pattern.of(options.pattern) if options.pattern else found_pattern(path, place)
        files = files_of(path, pattern, place)
        gathered = _Gathered()
        for file in files:
            gathered.take(file, options)
        made = assembled(gathered.pieces, options)
        columns = {**dict.fromkeys(pattern.names, "the path"), **gathered.columns}
        notes = [f"{len(files)} file{'s' * (len(files) != 1)} read by the pattern {pattern.text}", *gathered.told()]
        again = InputOptions(layout=self.name, pattern=pattern.text, columns=gathered.named).over(options)
        return Contents(
            made.curves, gathered.labels, columns, made.rows, [*notes, *made.notes], made.realisations, again,
            _fingerprint(files),
        )  # fmt: skip


@dataclass(frozen=True)
class _File:
    """One file, its place in the user's words, and the text of the placeholders in its path."""

    path: Path
    relative: str
    place: str
    texts: Mapping[str, str]

    @property
    def constants(self) -> dict[str, float]:
        return {role: number(text, self.place) for role, text in self.texts.items()}


def files_of(root: Path, pattern: Pattern, place: str) -> list[_File]:
    """Files that fit `pattern`, in the order of size, disorder and realisation."""
    parts = [pattern.part(index) for index in range(len(pattern.parts))]
    found = []
    for path, matches in matching_files(root, parts, place):
        relative = "/".join(match.string for match in matches)
        texts = pattern.match(relative)
        if texts is not None:  # a placeholder in two parts may have read different numbers
            found.append(_File(path, relative, f"{place.rstrip('/')}/{relative}", texts))
    if not found:
        _refuse_pattern(root, pattern, place)
    return sorted(
        found, key=lambda file: (tuple(file.constants.get(name, 0.0) for name in sorted(PLACES)), file.relative)
    )


def _refuse_pattern(root: Path, pattern: Pattern, place: str) -> None:
    seen = _all_files(root, place)
    inside = f"; the files are {listed(seen, most=4)}" if seen else "; there is no file in it"
    hint = ""
    if root.name and pattern.parts[0] == root.name:
        hint = f"; the pattern begins below the folder, so leave out {root.name}/"
    raise InputError(f"no file fits the pattern {pattern.text}{inside}{hint}", where=place)


def _all_files(root: Path, place: str) -> list[str]:
    """Paths of all files down to `DEPTH`, but for hidden ones."""
    visible = re.compile(r"[^.].*", re.DOTALL)
    return [
        "/".join(match.string for match in matches)
        for depth in range(1, DEPTH + 1)
        for _, matches in matching_files(root, [visible] * depth, place)
    ]


def found_pattern(root: Path, place: str) -> Pattern:
    """The pattern that the names of the files leave no doubt about."""
    names = _all_files(root, place)
    numbered = [name for name in names if re.search(r"\d", name)]  # a README carries no parameters
    if not numbered:
        seen = listed(names, most=4) or "nothing"
        raise InputError(f"no file in this folder has a number in its path; it holds {seen}", where=place)
    guess = inferred(numbered)
    if not guess.sketches:
        raise InputError("a path in this folder is too long; give the pattern with --pattern", where=place)
    if guess.pattern is None or "size" not in Pattern.of(guess.pattern).names:
        raise InputError(f"{_open_question(guess.sketches)}; the files are {listed(numbered, most=4)}", where=place)
    return Pattern.of(guess.pattern)


def _open_question(sketches: Sequence[str]) -> str:
    """What the user must say about files of these shapes."""
    choices = " or ".join(f"--pattern '{sketch}'" for sketch in sketches[:3])
    becomes = ", where each {?} becomes {size}, {disorder}, {realisation} or *" if "{?}" in choices else ""
    if len(sketches) > 1:
        more = f" (or {len(sketches) - 3} more)" if len(sketches) > 3 else ""
        return f"the paths have {len(sketches)} forms; choose one with {choices}{more}{becomes}"
    return f"the paths do not tell which numbers are size and disorder; say it with {choices}{becomes}"


@dataclass
class _Gathered:
    """What the files gave so far."""

    pieces: list[Piece] = field(default_factory=list)
    labels: dict[str, str | float | None] = field(default_factory=dict)
    notes: dict[str, list[str]] = field(default_factory=dict)
    unclosed: list[str] = field(default_factory=list)
    columns: dict[str, str] = field(default_factory=dict)
    named: Mapping[str, str] | tuple[str, ...] = field(default_factory=dict)

    def take(self, file: _File, options: InputOptions) -> None:
        """Read one file."""
        if file.path.suffix == ".npy":
            self.pieces.append(_array_piece(file, options))
            self.columns.setdefault("value", "the array")
            return
        table = read_text(file.path, file.place, options)
        choice = choice_of(table, options, frozenset(file.texts))
        notes = [*table.notes, *unused_note(choice)]
        self.pieces += pieces_of(table, choice, file.constants, notes)
        for note in notes:
            self.notes.setdefault(note, []).append(file.relative)
        if choice.raw and not table.closed:
            self.unclosed.append(file.relative)
        self._take_labels(table.labels, file)
        self._take_choice(choice, file)

    def _take_labels(self, labels: Mapping[str, str | float | None], file: _File) -> None:
        for name, value in labels.items():
            if self.labels.setdefault(name, value) != value:
                problem = f"the label {name} is {value!r} here and {self.labels[name]!r} in a file before"
                raise InputError(f"{problem}; make them alike or remove them", where=file.place)

    def _take_choice(self, choice: Choice, file: _File) -> None:
        if self.columns and dict(choice.columns) != self.columns:
            raise InputError(
                f"the columns are {_pairs(choice.columns)} here and {_pairs(self.columns)} in a file before; choose "
                "one form with --pattern or --columns",
                where=file.place,
            )
        self.columns, self.named = dict(choice.columns), choice.named

    def told(self) -> Iterator[str]:
        """The notes, each once, with the files it concerns."""
        for note, files in self.notes.items():
            yield f"{_which(files)}: {note}"
        if self.unclosed:
            yield (
                f"{_which(self.unclosed)}: no line end at the end of the file, so the last value may be cut short; "
                "--skip-cut-lines leaves it out"
            )


def _pairs(columns: Mapping[str, str]) -> str:
    return listed(f"{role}={place}" for role, place in columns.items())


def _which(files: Sequence[str]) -> str:
    return listed(files, most=3)


def _array_piece(file: _File, options: InputOptions) -> Piece:
    """The values in a ``.npy`` file: one for each realisation, or a row for each as the axes say."""
    values = np.asarray(read_npy(file.path, file.place), dtype=np.float64)
    missing = [role for role in ("size", "disorder") if role not in file.texts]
    if missing:
        raise InputError(f"the path tells no {missing[0]}; add {{{missing[0]}}} to the pattern", where=file.place)
    if values.ndim == 2:
        if set(options.axes) != {"realisation", "state"}:
            raise InputError(
                f"the array has the shape {values.shape}; say which dimension is which with --axes realisation,state "
                "or --axes state,realisation",
                where=file.place,
            )
        values = values if options.axes[0] == "realisation" else values.T
    if values.ndim not in (1, 2) or not values.size:
        problem = f"the array must hold a value for each realisation, not have the shape {values.shape}"
        raise InputError(problem, where=file.place)
    constants = {role: np.full(len(values), value) for role, value in file.constants.items()}
    return Piece(file.place, {**constants, "value": values}, lambda row, _: f"{file.place}, row {row + 1}")


def _fingerprint(files: Sequence[_File]) -> str:
    """SHA-256 of the paths and contents of all files, as ``sha256sum`` would list them."""
    total = hashlib.sha256()
    for file in sorted(files, key=lambda file: file.relative):
        # a name that is not UTF-8 counts as the bytes that it is
        line = f"{sha256(file.path, file.place)}  {file.relative}\n"
        total.update(line.encode("utf-8", "surrogateescape"))
    return total.hexdigest()
