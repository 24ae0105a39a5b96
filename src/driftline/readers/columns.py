"""Which columns of a table hold what, as one `Choice`: long tables, and wide ones with columns for each size.

In a wide table the columns of one kind, ``L8, L10, L12``, count as one column ``L{size}``; roles are then found as in a
long table. Names tell sizes by themselves only if a word for size stands before the number: columns called 8, 10 and 12
might be realisations as well.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from driftline.errors import ConfigurationError, InputError
from driftline.readers.pattern import Pattern
from driftline.readers.roles import Scene, assigned, known_as, size_word
from driftline.reading import SKIPPED, InputOptions
from driftline.wording import listed, shown

_SLOT = re.compile(r"([A-Za-z]*)([=_ -]*)(\d+(?:\.\d+)?)", re.ASCII)
HOLE = "{size}"
LONGEST = 200  # characters of a name that are searched for a size: the search takes the square of the length
#: Roles that a column can have beside others, in the order in which they are shown
_PER_SIZE = ("mean", "value", "error", "deviation", "samples")


@dataclass(frozen=True)
class Choice:
    """What every used column holds.

    Parameters
    ----------
    sets : tuple of (size or None, mapping)
        Role to the index of its column from 0; one set in a long table, one for each size in a wide one.
    columns : mapping
        Role to the name of its column, for the record.
    unused : tuple of str
        Columns without a role.
    named : mapping or tuple
        The option `columns` that makes the same choice again.
    """

    sets: tuple[tuple[float | None, Mapping[str, int]], ...]
    columns: Mapping[str, str]
    unused: tuple[str, ...]
    named: Mapping[str, str] | tuple[str, ...]

    @property
    def raw(self) -> bool:
        """Whether the values are those of single realisations."""
        return "value" in self.columns

    @property
    def wide(self) -> bool:
        """Whether there are columns for each size."""
        return self.sets[0][0] is not None


def choose(names: Sequence[str], scene: Scene, *, named: bool = True) -> Choice:
    """Find the roles of columns called `names`.

    Parameters
    ----------
    names : sequence of str
        In order; their numbers from 1 if the table names none.
    scene : Scene
        Options, place and what comes from elsewhere.
    named : bool
        Whether the table names its columns.

    Raises
    ------
    InputError
        If the roles cannot be told.
    ConfigurationError
        If the options do not fit the columns.
    """
    choice = _chosen(names, scene, named)
    if named:
        return choice
    return replace(choice, columns={role: f"column {place}" for role, place in choice.columns.items()})


def _chosen(names: Sequence[str], scene: Scene, named: bool) -> Choice:
    if scene.options.ordered:
        return _in_order(names, scene)
    if len(names) == 1 and {"size", "disorder"} <= scene.elsewhere and not scene.options.named:
        roles = {"value": names[0]}  # nothing else can be meant
        return Choice(((None, {"value": 0}),), roles, (), roles)
    scene = _numbers_replaced(names, scene)
    if not named:
        _refuse_nameless(names, scene)
    return _by_size(names, scene) or _long(names, scene)


def wide_names(names: Sequence[str], options: InputOptions) -> bool:
    """Whether the options or the names of the columns say that there are columns for each size."""
    if options.ordered:
        return bool(options.sizes)
    if any(HOLE in place for place in options.named.values()):
        return True
    return bool(not _holds_size(names, options) and _templates(names, trusted=True))


def _long(names: Sequence[str], scene: Scene) -> Choice:
    roles = assigned(names, scene)
    unused = tuple(name for name in names if name not in roles.values())
    return Choice(((None, {role: names.index(name) for role, name in roles.items()}),), roles, unused, roles)


# ---------------------------------------------------------------- roles in order, numbers for names


def _in_order(names: Sequence[str], scene: Scene) -> Choice:
    order = scene.options.ordered
    if len(order) > len(names):
        raise ConfigurationError(
            f"columns: {len(order)} roles are given ({listed(order)}), but {scene.where} has {len(names)} "
            f"{scene.word}{'s' * (len(names) != 1)} ({listed(names)})"
        )
    places: dict[str, list[int]] = {}
    for index, role in enumerate(order):
        if role != SKIPPED:
            places.setdefault(role, []).append(index)
    unused = tuple(name for i, name in enumerate(names) if i >= len(order) or order[i] == SKIPPED)
    columns = {role: ", ".join(names[i] for i in found) for role, found in places.items()}
    _check_roles(places, scene)
    if not scene.options.sizes:
        if twice := next((role for role, found in places.items() if len(found) > 1), None):
            raise ConfigurationError(
                f"columns: {twice!r} is given {len(places[twice])} times; for columns of several sizes give --sizes too"
            )
        return Choice(((None, {role: found[0] for role, found in places.items()}),), columns, unused, order)
    return Choice(tuple(_sets_in_order(places, scene.options)), columns, unused, order)


def _check_roles(places: Mapping[str, Sequence[int]], scene: Scene) -> None:
    """Every needed role is there; the check of `assigned`, with each role as the name of its column."""
    elsewhere = scene.elsewhere | ({"size"} if scene.options.sizes else frozenset())
    named = replace(scene.options, columns={role: role for role in places})
    assigned(list(places), replace(scene, options=named, elsewhere=elsewhere))


def _sets_in_order(
    places: Mapping[str, Sequence[int]], options: InputOptions
) -> Iterator[tuple[float | None, Mapping[str, int]]]:
    for role, found in places.items():
        allowed = (len(options.sizes), 1) if role not in ("mean", "value") else (len(options.sizes),)
        if len(found) not in allowed:
            raise ConfigurationError(
                f"columns: there {'are' if len(found) > 1 else 'is'} {len(found)} of {role!r}, but "
                f"{len(options.sizes)} sizes are given; give one for each size"
            )
    for index, size in enumerate(options.sizes):
        yield size, {role: found[index if len(found) > 1 else 0] for role, found in places.items()}


def _numbers_replaced(names: Sequence[str], scene: Scene) -> Scene:
    """Places given by number become names, unless a column is called so."""
    columns = dict(scene.options.named)
    for role, place in columns.items():
        if place not in names and place.isdecimal() and 1 <= int(place) <= len(names):
            columns[role] = names[int(place) - 1]
    return replace(scene, options=replace(scene.options, columns=columns))


def _refuse_nameless(names: Sequence[str], scene: Scene) -> None:
    """Columns without names hold what the options say; nothing else can be told."""
    if scene.options.named:
        return
    example = [role for role in ("size", "disorder") if role not in scene.elsewhere]
    example += ["mean", "error"] if example and len(names) >= len(example) + 2 else ["value"]
    example += [SKIPPED] * min(len(names) - len(example), 4)  # those behind the last role are skipped anyhow
    if len(names) == 1:
        missing = " and ".join(role for role in ("size", "disorder") if role not in scene.elsewhere)
        problem = (
            f"there is one {scene.word}, so {missing} must stand in the paths of such files; give the folder, with "
            "--pattern 'L{size}/W{disorder}/r.dat' or whatever the paths are"
        )
    else:
        problem = (
            f"the {len(names)} {scene.word}s have no names; say what they hold, in their order, for example --columns "
            f"{','.join(example[:12])}{',...' if len(example) > 12 else ''}"
        )
    raise InputError(problem, where=scene.where)


# ---------------------------------------------------------------- wide tables


def _by_size(names: Sequence[str], scene: Scene) -> Choice | None:
    """The choice for a wide table, or None if this is not one."""
    given = [place for place in scene.options.named.values() if HOLE in place]
    groups = {place: _matches(place, names) for place in given}
    if given:
        groups |= _companions(groups, names)
    else:
        if "size" in scene.elsewhere or _holds_size(names, scene.options):
            return None
        groups = _templates(names, trusted=True)
        if not groups:
            _refuse_untold(_templates(names, trusted=False), names, scene)
            return None
    inside = {index for group in groups.values() for index in group.values()}
    collapsed = [*groups, *(name for index, name in enumerate(names) if index not in inside)]
    roles = assigned(collapsed, replace(scene, elsewhere=scene.elsewhere | {"size"}))
    unused = tuple(name for name in collapsed if name not in roles.values())
    return Choice(tuple(_sets_by_name(roles, groups, names, scene)), {"size": "the names", **roles}, unused, roles)


def _companions(groups: Mapping[str, Mapping[float, int]], names: Sequence[str]) -> dict[str, dict[float, int]]:
    """Further columns, one for each of the sizes that were asked for: errors beside means, for example."""
    taken = {index for group in groups.values() for index in group.values()}
    sizes = {size for group in groups.values() for size in group}
    others = _templates([name if index not in taken else "" for index, name in enumerate(names)], trusted=False)
    return {name: group for name, group in others.items() if set(group) == sizes}


def _holds_size(names: Sequence[str], options: InputOptions) -> bool:
    return "size" in options.named or any("size" in known_as(name) for name in names)


def _matches(place: str, names: Sequence[str]) -> dict[float, int]:
    """Size to index of the columns whose names fit the pattern `place`."""
    pattern = Pattern.of(place, "columns")
    found = {}
    for index, name in enumerate(names):
        if (match := pattern.match(name)) is not None:
            found[float(match["size"].lower().replace("d", "e"))] = index
    return found


def _templates(names: Sequence[str], *, trusted: bool) -> dict[str, dict[float, int]]:
    """Columns that differ by a number only, two or more of a kind: name with `HOLE` to size to index.

    If `trusted`, only those in which a word for size stands before the number.
    """
    groups: dict[str, dict[float, int]] = {}
    for index, name in enumerate(names):
        slots = [m for m in _SLOT.finditer(name[:LONGEST]) if not trusted or size_word(m[1])]
        if len(slots) == 1:
            slot = slots[0]
            groups.setdefault(f"{name[: slot.start(3)]}{HOLE}{name[slot.end(3) :]}", {})[float(slot[3])] = index
    return {name: group for name, group in groups.items() if len(group) > 1}


def _refuse_untold(groups: Mapping[str, Mapping[float, int]], names: Sequence[str], scene: Scene) -> None:
    if not groups:
        return
    disorder = scene.options.named.get("disorder") or next((n for n in names if "disorder" in known_as(n)), "...")
    first = next(iter(groups))
    raise InputError(
        f"the {scene.word}s are {listed(name or 'one without a name' for name in names)}; if there is one for each "
        f"size, say so with --columns disorder={disorder},mean={first} (and error=... or deviation=... in the same "
        "way)",
        where=scene.where,
    )


def _sets_by_name(
    roles: Mapping[str, str], groups: Mapping[str, Mapping[float, int]], names: Sequence[str], scene: Scene
) -> Iterator[tuple[float, Mapping[str, int]]]:
    main = roles.get("mean", roles.get("value", ""))
    if not groups.get(main):
        what = "mean" if "mean" in roles else "value"
        raise InputError(
            f"no {scene.word} fits {what}={main}; the {scene.word}s are {listed(names)}", where=scene.where
        )
    for size in sorted(groups[main]):
        chosen = {}
        for role, place in roles.items():
            if place in groups and size not in groups[place]:
                raise InputError(
                    f"size {size:g} has the {scene.word} {shown(names[groups[main][size]])}, but none that fits "
                    f"{role}={place}",
                    where=scene.where,
                )
            chosen[role] = groups[place][size] if place in groups else names.index(place)
        yield size, chosen
