"""Patterns of paths that carry parameters, such as ``L{size}/W{disorder}/r.dat``, below a folder or inside HDF5.

``{size}``, ``{disorder}`` and ``{realisation}`` stand for a number each, ``*`` for anything within one part of the
path. A placeholder that occurs twice must read the same both times. `inferred` finds the pattern of a set of paths
where their names leave one reading only.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import chain

from driftline.errors import ConfigurationError
from driftline.readers.guard import pattern_parts
from driftline.readers.roles import known_as
from driftline.wording import shown

LONGEST = 1000  # characters of a path that is looked at
PLACEHOLDERS = ("size", "disorder", "realisation")
# Lengths are bounded, so that a long row of digits is not divided between placeholders in ever so many ways
_NUMBER = r"[+-]?(?:\d{1,20}(?:\.\d{0,20})?|\.\d{1,20})(?:[eEdD][+-]?\d{1,3})?"
_WHOLE = r"\d{1,20}"
MOST_STARS = 2  # in one part: each multiplies the time by the length of the name
_TOKEN = re.compile(r"\{([^{}]*)\}|\*")
#: A number with the word in front of it, as in ``L8``, ``W=1.0``, ``seed_003``. A hyphen is no sign and joins nothing:
#: whether ``h-0.5`` is negative cannot be told, so no meaning is found there.
_SLOT = re.compile(r"(?:([A-Za-z]+)[=_]?)?(\d+(?:\.\d+)?(?:[eE][+-]?\d+)?)")


@dataclass(frozen=True)
class Pattern:
    """A pattern whose placeholders are known to be sound.

    Parameters
    ----------
    text : str
        As the user wrote it, without needless slashes.
    """

    text: str

    @classmethod
    def of(cls, text: str, where: str = "pattern") -> Pattern:
        """Check `text`.

        Raises
        ------
        ConfigurationError
            If a placeholder is unknown, there are too many ``*``, or the path leads upwards or nowhere.
        """
        for match in _TOKEN.finditer(text):
            if match[1] is not None and match[1] not in PLACEHOLDERS:
                names = ", ".join(f"{{{name}}}" for name in PLACEHOLDERS)
                raise ConfigurationError(f"{where}: there is no placeholder {match[0]!r}; they are {names} and *")
        pattern = cls("/".join(pattern_parts(text, where)))
        crowded = next((part for part in pattern.parts if part.count("*") > MOST_STARS), None)
        if crowded is not None:
            raise ConfigurationError(f"{where}: there are more than {MOST_STARS} * in {shown(crowded)}; write out more")
        return pattern

    @property
    def parts(self) -> list[str]:
        """The parts between slashes."""
        return self.text.split("/")

    @property
    def names(self) -> tuple[str, ...]:
        """The placeholders in it, each once, in order."""
        return tuple(dict.fromkeys(match[1] for match in _TOKEN.finditer(self.text) if match[1] is not None))

    def part(self, index: int) -> re.Pattern[str]:
        """What the part number `index` of a path must look like, on its own."""
        return re.compile(_expression(self.parts[index], set()), re.ASCII)

    def match(self, path: str) -> dict[str, str] | None:
        """Text of each placeholder in `path`, or None if it does not fit or is beyond all length."""
        if len(path) > LONGEST:
            return None
        found = re.compile(_expression(self.text, set()), re.ASCII).fullmatch(path)
        return None if found is None else found.groupdict()

    def filled(self, values: Mapping[str, str]) -> str:
        """The pattern with the placeholders that `values` holds put in; the others, and ``*``, stay."""
        return _TOKEN.sub(lambda match: values.get(match[1] or "", match[0]), self.text)


def is_fixed(text: str) -> bool:
    """Whether there is neither a placeholder nor ``*`` in `text`."""
    return _TOKEN.search(text) is None


def _expression(text: str, seen: set[str]) -> str:
    pieces, last = [], 0
    for match in _TOKEN.finditer(text):
        pieces.append(re.escape(text[last : match.start()]))
        if match.start() == last and last:
            pieces.append(r"(?!\d)" if match[1] is None else r"(?<!\d)")  # no number is cut in two
        pieces.append(_group(match[1], seen))
        last = match.end()
    return "".join([*pieces, re.escape(text[last:])])


def _group(name: str | None, seen: set[str]) -> str:
    if name is None:
        return "[^/]*"
    if name in seen:
        return f"(?P={name})"
    seen.add(name)
    return f"(?P<{name}>{_WHOLE if name == 'realisation' else _NUMBER})"


@dataclass(frozen=True)
class Inference:
    """What the names of a set of paths tell.

    Parameters
    ----------
    pattern : str or None
        The one pattern that reads them all, if there is one.
    sketches : tuple of str
        For each shape of path, the most frequent first, a pattern to begin with, with ``{?}`` where a number varies and
        its meaning is not known.
    """

    pattern: str | None
    sketches: tuple[str, ...]


def inferred(paths: Sequence[str]) -> Inference:
    """The pattern of `paths`, if every number that varies has a word in front that can mean one thing only.

    Paths of several shapes have no pattern in common: which of them to read, the user must say.
    """
    shapes: dict[str, list[str]] = {}
    for path in paths:
        if len(path) > LONGEST:  # the search for numbers takes the square of the length
            return Inference(None, ())
        shapes.setdefault(_shape(path), []).append(path)
    sketches = [_sketch(shape, alike) for shape, alike in sorted(shapes.items(), key=lambda item: -len(item[1]))]
    certain = len(sketches) == 1 and "{?}" not in sketches[0]
    return Inference(sketches[0] if certain else None, tuple(sketches))


def _sketch(shape: str, paths: Sequence[str]) -> str:
    """The pattern of paths of one shape, with ``{?}`` for what is not known."""
    values = list(zip(*map(_numbers, paths), strict=True))
    varying = [index for index, column in enumerate(values) if len(set(column)) > 1]
    roles = _meanings(_words(paths[0]), varying, values)
    return _filled_in(shape, values, {index: roles.get(index, "?") for index in varying})


def _shape(path: str) -> str:
    """The path with every number taken out, marked by a NUL, which no path can hold."""
    return _SLOT.sub(lambda match: match[0][: -len(match[2])] + "\0", path)


def _numbers(path: str) -> list[str]:
    return [match[2] for match in _SLOT.finditer(path)]


def _words(path: str) -> list[str]:
    return [match[1] or "" for match in _SLOT.finditer(path)]


def _meanings(words: Sequence[str], varying: Iterable[int], values: Sequence[Sequence[str]]) -> dict[int, str]:
    """Role of each varying number; those whose word could mean several roles, or that share a role, are left out."""
    found: dict[str, list[int]] = {}
    for index in varying:
        for role in known_as(words[index]):
            if role in PLACEHOLDERS:
                found.setdefault(role, []).append(index)
    claims = list(chain.from_iterable(found.values()))
    roles: dict[int, str] = {}
    for role, indices in found.items():
        same = all(values[i] == values[indices[0]] for i in indices)  # runs/L8/r_L8.dat says its size twice
        if same and all(claims.count(i) == 1 for i in indices):
            roles |= dict.fromkeys(indices, role)
    return roles


def _filled_in(shape: str, values: Sequence[Sequence[str]], roles: Mapping[int, str]) -> str:
    pieces = shape.split("\0")
    filled = [f"{{{roles[i]}}}" if i in roles else column[0] for i, column in enumerate(values)]
    return "".join(chain.from_iterable(zip(pieces, [*filled, ""], strict=True)))
