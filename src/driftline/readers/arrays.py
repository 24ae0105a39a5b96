"""HDF5 of any shape and ``.npz``: which array holds what, from a pattern of paths, from names, or from the options.

Parameters stand in the names of groups or datasets (placeholders), in attributes (``@NAME``, looked for from the
dataset upwards), or in arrays of their own. Places without a slash in front are relative to what the pattern matches.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import ClassVar

from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.assemble import Assembled, Piece, assembled, averaged_blocks, without_labels
from driftline.readers.base import Contents, Layout, number
from driftline.readers.grids import rows_of
from driftline.readers.guard import hdf5_signed, opened
from driftline.readers.pattern import Pattern, inferred, is_fixed
from driftline.readers.roles import Scene, assigned
from driftline.readers.stores import Hdf5Store, NpzStore, Store, opened_store
from driftline.reading import InputOptions
from driftline.wording import listed

STREAMED = 2_000_000  # values from which a long table is read a piece at a time
ITSELF = "."  # the place of an array that the pattern matches itself


class ArrayLayout(Layout):
    """What HDF5 files and archives of arrays share."""

    store: ClassVar[type[Store]]

    def contents(
        self, path: Path, place: str, options: InputOptions, progress: Progress | None = None
    ) -> Contents:  # fmt: skip
        """Read the arrays; see `Layout.contents`."""
        with opened_store(path, place, self.store) as store:
            plan, labels = planned(store, options), store.labels()
            made = _streamed(store, plan, options, progress) or assembled(
                pieces_of_store(store, plan, options), options
            )
        again = InputOptions(layout=self.name, pattern=plan.base or None, columns=plan.roles).over(options)
        columns = {**dict.fromkeys(plan.placeholders, "the path"), **plan.shown()}
        notes = [f"{plan.count} {store.word}{'s' * (plan.count != 1)} read by {plan.main_text}"]
        return Contents(made.curves, labels, columns, made.rows, [*notes, *made.notes], made.realisations, again)


class Hdf5TreeLayout(ArrayLayout):
    """HDF5 in any arrangement."""

    name = "hdf5-tree"
    description = (
        "any other HDF5: sizes and disorders in names of groups, attributes or datasets of their own; means, values of "
        "realisations, or of realisations and eigenstates"
    )
    store = Hdf5Store

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """By the signature of HDF5."""
        return hdf5_signed(path, str(path))


class NpzLayout(ArrayLayout):
    """An archive of numpy arrays."""

    name = "npz"
    description = "an .npz archive with arrays for size, disorder and means or values, or an array for each size"
    store = NpzStore

    def recognises(self, path: Path, options: InputOptions) -> bool:
        """By the signature of a zip archive whose first member is an array; spreadsheets are zip archives too."""
        with opened(path, str(path)) as stream:
            start = stream.read(300)
        return start.startswith(b"PK\x03\x04") and b".npy" in start


@dataclass(frozen=True)
class Plan:
    """Where everything stands.

    Parameters
    ----------
    base : str
        Pattern of the groups (or arrays) that places are relative to; empty for the top.
    roles : mapping
        Role to place.
    matches : tuple of (path, texts)
        Arrays of means or values, with the text of the placeholders in their paths.
    """

    base: str
    roles: Mapping[str, str]
    matches: tuple[tuple[str, Mapping[str, str]], ...]

    @property
    def main(self) -> str:
        """Whether means or values are read."""
        return "mean" if "mean" in self.roles else "value"

    @property
    def main_text(self) -> str:
        """Pattern of the arrays that hold them."""
        return joined(self.base, self.roles[self.main])

    @property
    def count(self) -> int:
        """How many of them there are."""
        return len(self.matches)

    @property
    def placeholders(self) -> tuple[str, ...]:
        """Roles that the paths tell."""
        return Pattern(self.main_text).names

    def shown(self) -> dict[str, str]:
        """Role to the full place, for the record."""
        return {
            role: place if place.startswith("@") else joined(self.base, place) for role, place in self.roles.items()
        }


def joined(base: str, place: str) -> str:
    """The place below `base`; absolute with a slash in front, and `ITSELF` for the base."""
    if place == ITSELF:
        return base
    if place.startswith("/") or not base:
        return place.strip("/")
    return f"{base}/{place.strip('/')}"


# ---------------------------------------------------------------- finding the plan


def planned(store: Store, options: InputOptions) -> Plan:
    """Which array holds what.

    Raises
    ------
    InputError
        If that cannot be told, or nothing fits the options.
    """
    base, names = _base(store, options)
    main = options.named.get("mean", options.named.get("value", ""))
    told = frozenset(Pattern(joined(base, main)).names)
    for name in names:
        told |= frozenset(Pattern(name).names)
    roles = _roles(store, names, base, told, options)
    plan = Plan(base, roles, ())
    pattern = Pattern(plan.main_text)
    matches = [(path, texts) for path in store.shapes if (texts := pattern.match(path)) is not None]
    if not matches:
        problem = f"no {store.word} fits {plan.main}={plan.main_text}; the {store.word}s are {store.seen()}"
        raise InputError(problem, where=store.place)
    return replace(plan, matches=tuple(matches))


def _roles(
    store: Store, names: Sequence[str], base: str, told: frozenset[str], options: InputOptions
) -> Mapping[str, str]:
    if not options.named and {"size", "disorder"} <= told and len(names) == 1:
        return {"value": names[0]}  # nothing else can be meant
    if ITSELF in names and not {"mean", "value"} & set(options.named):
        options = replace(options, columns={**options.named, "value": ITSELF})
    every = list(dict.fromkeys([*names, *options.named.values()]))
    scene = Scene(_scene_place(store, base), options, told, store.word)
    try:
        return assigned(every, scene)
    except InputError as fault:
        raise InputError(f"{fault.problem}; {_help(store, names)}", where=fault.where) from fault


def _help(store: Store, names: Sequence[str]) -> str:
    """What else is in the file, and how to get at it."""
    told = [f"it holds {store.seen()}"]
    unknown = next((name for name in names if "{?}" in name), None)
    if unknown is not None:
        example = unknown.replace("{?}", "{size}", 1)
        told.append(
            f"a number in a path is read by a pattern, such as --pattern '{example.rpartition('/')[0] or example}'"
        )
    if store.attributes():
        told.append("an attribute by its name, such as --columns size=@L")
    return "; ".join(told)


def _scene_place(store: Store, base: str) -> str:
    return f"{store.place}, {base}" if base else store.place


def _base(store: Store, options: InputOptions) -> tuple[str, list[str]]:
    """Pattern of the groups that hold the arrays, and the names of the arrays in them."""
    if options.pattern is not None:
        base = Pattern.of(options.pattern.strip("/")).text
        return base, _names_below(store, base)
    sketches = inferred(list(store.shapes)).sketches
    parents = {sketch.rpartition("/")[0] for sketch in sketches}
    slashes = any("/" in place for place in options.named.values())
    if len(parents) == 1 and not slashes and "{?}" not in "".join(parents):
        base = parents.pop()
        return base, [sketch.rpartition("/")[2] for sketch in sketches]
    return "", [*sketches] if len(sketches) < len(store.shapes) and sketches else list(store.shapes)


def _names_below(store: Store, base: str) -> list[str]:
    """Names of the arrays in the first group that fits, or `ITSELF` if the pattern names arrays."""
    pattern = Pattern(base)
    if any(pattern.match(path) is not None for path in store.shapes):
        return [ITSELF]
    fitting = [group for group in store.groups if pattern.match(group) is not None]
    if not fitting:
        seen = store.seen()
        raise InputError(f"nothing fits the pattern {base}; the {store.word}s are {seen}", where=store.place)
    return list(dict.fromkeys(
        path.rpartition("/")[2] for path in store.shapes if path.rpartition("/")[0] in fitting
    ))  # fmt: skip


# ---------------------------------------------------------------- reading by the plan


def _streamed(store: Store, plan: Plan, options: InputOptions, progress: Progress | None) -> Assembled | None:
    """A long table of raw values, a dataset for each column, that is too large to be held at once; else None."""
    if not isinstance(store, Hdf5Store) or plan.main != "value" or plan.count != 1:
        return None
    path, texts = plan.matches[0]
    shape = store.shapes[path]
    if texts or len(shape) != 1 or shape[0] < STREAMED or any(place.startswith("@") for place in plan.roles.values()):
        return None
    paths = {role: path if role == plan.main else _companion(store, plan, path, texts, role) for role in plan.roles}
    if any(store.shapes[other] != shape for other in paths.values()):
        return None
    from driftline.readers.streaming import LongDatasets, stream

    source = LongDatasets(store.place, {role: store.dataset(other) for role, other in paths.items()})
    made = averaged_blocks(stream(source, progress=progress), options)
    made.notes.extend(source.notes if "realisation" in paths else [without_labels(options), *source.notes])
    return made


def pieces_of_store(store: Store, plan: Plan, options: InputOptions) -> Iterator[Piece]:
    """One piece for each array of means or values."""
    for path, texts in plan.matches:
        constants = {role: number(text, store.where(path)) for role, text in texts.items()}
        arrays: dict[str, FloatArray] = {}
        for role, place in plan.roles.items():
            if role == plan.main:
                continue
            if place.startswith("@"):
                constants[role] = _attribute(store, path, place[1:], role)
            else:
                arrays[role] = store.read(_companion(store, plan, path, texts, role))
        yield rows_of(store, path, plan.main, arrays, constants, options)


def _attribute(store: Store, path: str, name: str, role: str) -> float:
    value = store.parameter(path, name)
    if value is None:
        problem = f"there is no attribute '{name}' for the {role} here or in a group above"
        raise InputError(problem, where=store.where(path))
    return value


def _companion(store: Store, plan: Plan, path: str, texts: Mapping[str, str], role: str) -> str:
    """Path of the array that holds `role` for the means or values at `path`."""
    place = plan.roles[role]
    if place.startswith("/") or not plan.base:
        wanted = Pattern(place.strip("/")).filled(texts)
    else:
        above = "/".join(path.split("/")[: len(Pattern(plan.base).parts)])
        wanted = joined(above, Pattern(place).filled(texts))
    fitting = [wanted] if is_fixed(wanted) else [p for p in store.shapes if Pattern(wanted).match(p) is not None]
    if len(fitting) != 1 or fitting[0] not in store.shapes:
        found = f"{len(fitting)} fit" if len(fitting) > 1 else "there is none"
        raise InputError(
            f"one {store.word} must hold the {role} for {path}, but {found} ({wanted}); the {store.word}s are "
            f"{listed(store.shapes)}",
            where=store.place,
        )
    return fitting[0]
