"""What every layout of a data file shares: the base class, the parsing of numbers and labels, the wording of faults.

A layout turns one path into a `Contents`. Everything around that (its hash, the labels given by the caller, the record
of where the numbers came from) is done here once.
"""

from __future__ import annotations

import hashlib
import io
import math
import re
from abc import ABC, abstractmethod
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, fields
from difflib import get_close_matches
from pathlib import Path
from typing import Any, ClassVar, cast

from driftline.curves import LARGEST, Curve, Curves, Labels
from driftline.errors import InputError
from driftline.observables import named, of_file, references
from driftline.progress import Progress
from driftline.readers.guard.files import opened
from driftline.reading import InputOptions
from driftline.wording import listed, printable, shown

NEEDED = ("size", "disorder", "mean", "error")
OPTIONAL = ("samples",)
LABEL_NAMES = tuple(item.name for item in fields(Labels))
NUMERIC_LABELS = ("ergodic_value", "localised_value", "dimension")

#: Names that people give to the columns (common practice), only ever used to suggest a new name, never to read.
_HABITS = {
    "size": ("l", "n", "length", "sites", "system_size", "nsites"),
    "disorder": ("w", "h", "delta", "v", "lambda", "strength", "disorder_strength"),
    "mean": ("r", "s", "y", "value", "average", "avg", "ratio", "entropy"),
    "error": ("err", "sem", "stderr", "standard_error", "std_err", "dy", "uncertainty"),
    "samples": ("realisations", "realizations", "count", "n_samples", "nreal"),
}
_DEVIATIONS = ("std", "sd", "stdev", "sigma", "standard_deviation", "std_dev")

# Fortran writes 1.0D-03; ASCII digits only, since float() would also take other scripts, underscores and "nan"
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eEdD][+-]?\d+)?", re.ASCII)
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)", re.IGNORECASE | re.ASCII)
_DECIMAL_COMMA = re.compile(r"[+-]?\d+,\d+", re.ASCII)


@dataclass(frozen=True)
class Contents:
    """What a layout found in a file: curves, labels, and the record of where the numbers stood.

    Parameters
    ----------
    curves : sequence of Curve
        One per size, in any order.
    labels : mapping
        Values for fields of `Labels`, as far as the file names them.
    columns : mapping
        Meaning of a number (``"disorder"``) to its name in the file.
    rows : int
        Number of data rows (points) read.
    notes : sequence of str
        What was ignored or rearranged, one sentence each.
    realisations : sequence of mapping
        What raw values showed, as `driftline.readers.samples.Sampled.record` gives it; empty for averaged data.
    options : InputOptions
        With which the file is read again in the same way, whatever was found out by itself this time.
    sha256 : str, optional
        Hash of what was read, where it is not that of a single file.
    """

    curves: Sequence[Curve]
    labels: Mapping[str, str | float | None]
    columns: Mapping[str, str]
    rows: int
    notes: Sequence[str] = ()
    realisations: Sequence[Mapping[str, Any]] = ()
    options: InputOptions = field(default_factory=InputOptions)
    sha256: str | None = None


class Layout(ABC):
    """One way in which data lie in a file.

    To add one: write a subclass in a file of its own and add a line to `LAYOUTS` in ``readers/__init__.py``.
    """

    name: ClassVar[str]
    description: ClassVar[str]
    folder: ClassVar[bool] = False  #: whether it reads a folder rather than a single file

    @abstractmethod
    def recognises(self, path: Path, options: InputOptions) -> bool:
        """Whether the file at `path` looks like this layout; the first of the registry that says yes reads it."""

    @abstractmethod
    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read `path`; faults name it as `place`, the path in the user's own words.

        Layouts for large files tell `progress` what is being done and the fraction done.

        Raises
        ------
        InputError
            If the file cannot be used.
        """

    def read(
        self, path: Path, place: str, labels: Mapping[str, Any], options: InputOptions,
        progress: Progress | None = None,
    ) -> Curves:  # fmt: skip
        """The curves at `path`, with `labels` put over those of the file and the origin recorded."""
        found = self.contents(path, place, options, progress)
        # The hash comes last: it would take long on a file too large to be read
        origin = {
            "path": printable(place),
            "sha256": found.sha256 or sha256(path, place),
            "layout": self.name,
        }
        return built(found, place, labels, origin)


def sha256(path: Path, place: str) -> str:
    """SHA-256 of a file, in hexadecimal."""
    with opened(path, place) as stream:
        return hashlib.file_digest(cast("io.BufferedReader", stream), "sha256").hexdigest()


def built(found: Contents, place: str, labels: Mapping[str, Any], origin: Mapping[str, Any]) -> Curves:
    """Curves of what a layout found, with `labels` put over those of the file and the origin completed."""
    record: dict[str, Any] = {**origin, "columns": dict(found.columns), "rows": found.rows, "notes": list(found.notes)}
    if given := found.options.given():
        record["input"] = given
    if found.realisations:
        record["realisations"] = [dict(size) for size in found.realisations]
    own, remarks = of_file(found.labels)
    record["notes"] += remarks
    with located(place):
        curves = Curves(found.curves, Labels(**own), record)
    if not labels:
        return curves
    known = named(labels.get("observable"))
    curves = curves.relabel(**references(labels))
    if known is None:
        return curves
    with located(place):
        return known.applied(curves)  # never because of a comment in the file: what the data are, the user must say


@contextmanager
def located(place: str) -> Iterator[None]:
    """Put the file in front of faults that `Curve`, `Curves` and `Labels` find inside the block."""
    try:
        yield
    except InputError as fault:
        inner = fault.where if fault.where not in (None, "curves", "labels") else None
        raise InputError(fault.problem, where=f"{place}, {inner}" if inner else place) from fault


def number(text: str, where: str) -> float:
    """A finite number from text; `where` names the place in faults.

    Raises
    ------
    InputError
        If `text` is empty, not a number, not finite, or beyond ``LARGEST``.
    """
    text = text.strip()
    if _NUMBER.fullmatch(text):
        value = float(text.replace("d", "e").replace("D", "e"))
        if abs(value) > LARGEST:
            raise InputError(f"{shown(text)} is larger than {LARGEST:g}; use other units", where=where)
        return value
    if not text:
        raise InputError("the cell is empty; give a number or remove the row", where=where)
    if _NOT_FINITE.fullmatch(text):
        raise InputError(f"{shown(text)} is not a finite number; correct it or remove the row", where=where)
    hint = "; write a decimal point" if _DECIMAL_COMMA.fullmatch(text) else ""
    raise InputError(f"{shown(text)} is not a number{hint}", where=where)


def whole_number(text: str, where: str) -> int:
    """A positive whole number from text such as ``200``, ``200.0`` or ``2e2``.

    Raises
    ------
    InputError
        If `text` is not one.
    """
    value = number(text, where)
    # 2**53: beyond it, double precision no longer holds every whole number
    if value < 1 or value != math.floor(value) or value > 2**53:
        raise InputError(f"{shown(text.strip())} is not a positive whole number", where=where)
    return int(value)


def label(name: str, value: str | float, where: str) -> str | float | None:
    """The value of the label `name` (a field of `Labels`) as a file gives it: text, a number, or ``none``.

    Raises
    ------
    InputError
        If the value does not suit the label.
    """
    result: str | float | None = value
    if isinstance(value, str) and name in NUMERIC_LABELS:
        result = None if value.strip().lower() == "none" else number(value, where)
    try:
        Labels(**{name: result})  # type: ignore[arg-type]
    except InputError as fault:
        raise InputError(fault.problem, where=where) from fault
    return result


def check_columns(found: Sequence[str], where: str, *, word: str = "column", needed: Sequence[str] = NEEDED) -> None:
    """Refuse a table that lacks one of the `needed` columns, with what to rename or to add.

    Raises
    ------
    InputError
        Naming the missing columns, those that exist, and the remedy.
    """
    missing = [name for name in needed if name not in found]
    if not missing:
        return
    quoted = " and ".join(f"'{name}'" for name in missing)
    verb = f"{word}{'s' * (len(missing) > 1)} {quoted} {'are' if len(missing) > 1 else 'is'} missing"
    raise InputError(f"{verb}; the {word}s are {listed(found)}{_remedy(missing, found)}", where=where)


def _remedy(missing: Sequence[str], found: Sequence[str]) -> str:
    spare = [name for name in found if name not in NEEDED + OPTIONAL]
    twins = [(name, twin) for name in missing if (twin := _near(name, spare))]
    parts = []
    if twins:
        renames = " and ".join(f"{shown(twin)} to '{name}'" for name, twin in twins)
        parts.append(f"rename {renames} if that is what {'they hold' if len(twins) > 1 else 'it holds'}")
    if "error" in missing and "error" not in dict(twins):
        deviation = next((name for name in spare if name.lower() in _DEVIATIONS), None)
        source = f"{shown(deviation)}" if deviation else "the standard deviation over disorder realisations"
        parts.append(
            f"add 'error', the standard error of the mean ({source} divided by the square root of the number of "
            "realisations)"
        )
    return "; " + "; ".join(parts) if parts else ""


def _near(name: str, spare: Sequence[str]) -> str | None:
    lower = {other.lower(): other for other in reversed(spare)}
    habit = next((lower[other] for other in (name, *_HABITS[name]) if other in lower), None)
    close = [other for other in get_close_matches(name, lower, n=1, cutoff=0.7) if other not in _DEVIATIONS]
    return habit or (lower[close[0]] if close else None)
