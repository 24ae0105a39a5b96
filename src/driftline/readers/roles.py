"""Which column holds what: the names that people use, and the sentences for what cannot be told from them.

A column gets a role from its name only if the name can mean nothing else and no other column claims the role.
Everything beyond that the user must say, above all whether a spread is a standard error or a standard deviation.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches

from driftline.errors import InputError
from driftline.reading import ROLES, InputOptions
from driftline.wording import listed, shown

#: Common practice: names under which people store things, in lower case. One letter counts as well: papers and scripts
#: call a size L or N and a disorder W, h, V or Delta. Names that papers use for both stand in both.
_NAMES: Mapping[str, tuple[str, ...]] = {
    "size": ("size", "l", "n", "length", "sites", "nsites", "system_size", "systemsize", "linear_size", "chain_length"),
    "disorder": ("disorder", "w", "h", "delta", "v", "lambda", "strength", "disorder_strength", "dis"),
    "mean": ("mean", "average", "avg"),
    "error": ("sem", "stderr", "std_err", "standard_error", "std_error", "stderror"),
    "samples": ("samples", "realisations", "realizations", "count", "counts", "n", "nsamples", "n_samples",
                "num_samples", "nreal", "n_real", "nrealisations", "nrealizations", "n_realisations",
                "n_realizations"),
    "realisation": ("realisation", "realization", "seed", "sample", "sample_id", "real", "realisation_id",
                    "realization_id", "disorder_realisation", "disorder_realization"),
}  # fmt: skip
#: An observable under its own name: a mean if an error stands beside it, raw values if labels of realisations do.
_OBSERVABLES = ("value", "r", "s", "y", "ratio", "gap_ratio", "gapratio", "entropy", "entanglement", "observable")
#: A spread of which nobody can tell whether it is a standard error or a standard deviation.
_SPREADS = ("err", "error", "std", "sd", "stdev", "stddev", "std_dev", "sigma", "dy", "uncertainty", "errorbar", "dev")
_STATISTICS = ("mean", "average", "avg", "sem", "stderr", "count", *_SPREADS)

OBSERVABLE, SPREAD = "observable", "spread"
LONGEST_SHOWN = 60  # characters of a name in an example
MOST_COMPARED = 200  # names looked at for a suggestion: comparing takes long


def known_as(name: str) -> tuple[str, ...]:
    """Everything a column of this name commonly holds: roles, or `OBSERVABLE`, or `SPREAD`.

    Examples
    --------
    >>> known_as("W"), known_as("r_sem"), known_as("std"), known_as("n")
    (('disorder',), ('error',), ('spread',), ('size', 'samples'))
    """
    if "{size}" in name:
        return _known_by_size(name)
    word = re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_")
    if word not in _STATISTICS:  # r_mean, mean(r), sem_r, as aggregations name their columns
        parts = [part for part in word.split("_") if part in _STATISTICS]
        word = parts[0] if len(parts) == 1 and len(word) > len(parts[0]) else word
    if word == "error" and name == "error":
        return ("error",)  # the name that the program's own files use
    if name == "deviation":
        return ("deviation",)
    if word in _SPREADS:
        return (SPREAD,)
    if word in _OBSERVABLES:
        return (OBSERVABLE,)
    return tuple(role for role, names in _NAMES.items() if word in names)


def size_word(word: str) -> str:
    """The end of `word` that names a size, or nothing: all of ``L`` or ``size``, the ``L`` of ``errL`` and ``rL``."""
    if "size" in known_as(word):
        return word
    known = word[:-1].lower() in (*_STATISTICS, *_OBSERVABLES)
    return word[-1] if known and word[-1:] in ("L", "N") else ""


def _known_by_size(name: str) -> tuple[str, ...]:
    """What the columns called `name` with a size for ``{size}`` hold: the word for size in it tells nothing else."""
    rest = re.sub(r"([A-Za-z]*)[=_ -]*\{size\}", lambda m: m[1][: len(m[1]) - len(size_word(m[1]))], name)
    return (known_as(rest) if re.search("[A-Za-z]", rest) else ()) or (OBSERVABLE,)


@dataclass(frozen=True)
class Scene:
    """What a layout tells about the place, for finding roles and wording faults.

    Parameters
    ----------
    where : str
        File, and line where there is one.
    options : InputOptions
        Of the user.
    elsewhere : collection of str
        Roles that do not come from columns, such as the placeholders of a pattern.
    word : str
        What a column is called here.
    """

    where: str
    options: InputOptions
    elsewhere: frozenset[str] = field(default_factory=frozenset)
    word: str = "column"


def assigned(names: Sequence[str], scene: Scene) -> dict[str, str]:
    """Role to column: those that the options name, then those that the names of the columns leave no doubt about.

    Parameters
    ----------
    names : sequence of str
        All columns; a name that occurs twice cannot be asked for.

    Raises
    ------
    InputError
        If a column that was asked for does not exist, or a role that is needed cannot be told.
    """
    roles = _asked(names, scene)
    free = [name for name in names if name and name not in roles.values()]
    open_roles = [role for role in (*_NAMES, "deviation") if role not in roles and role not in scene.elsewhere]
    if "error" in roles or "deviation" in roles or scene.options.error_each is not None:
        open_roles = [role for role in open_roles if role not in ("error", "deviation")]
    for role in open_roles:
        if (name := _only(role, free, open_roles)) is not None:
            roles[role] = name
    _take_observable(roles, [name for name in free if name not in roles.values()], scene)
    _check_complete(roles, names, scene)
    return {role: roles[role] for role in ROLES if role in roles}


def _asked(names: Sequence[str], scene: Scene) -> dict[str, str]:
    for role, name in scene.options.named.items():
        if name not in names:
            near = get_close_matches(name, names[:MOST_COMPARED], n=1)
            hint = f"did you mean {shown(near[0])}? " if near else ""
            problem = f"there is no {scene.word} {shown(name)} for the {role}; {hint}{_seen(names, scene)}"
            raise InputError(problem, where=scene.where)
        if names.count(name) > 1:
            problem = f"{scene.word} {shown(name)} occurs twice; give each {scene.word} its own name"
            raise InputError(problem, where=scene.where)
    return dict(scene.options.named)


def _only(role: str, free: Sequence[str], open_roles: Iterable[str]) -> str | None:
    """The one column that can be `role` and no other role that is still open."""
    if free.count(role) == 1:
        return role  # under the program's own name
    able = [name for name in free if role in known_as(name)]
    if len(able) != 1:
        return None
    others = [other for other in known_as(able[0]) if other in open_roles and other != role]
    if role in ("size", "disorder"):  # needed, so the one column that can be it is it, whatever else it could be
        others = [other for other in others if other in ("size", "disorder")]
    return able[0] if not others else None


def _take_observable(roles: dict[str, str], free: Sequence[str], scene: Scene) -> None:
    """Give the one observable under its own name the role that the columns beside it leave for it."""
    if "mean" in roles or "value" in roles:
        return
    able = [name for name in free if OBSERVABLE in known_as(name)]
    spread = any(SPREAD in known_as(name) for name in free)  # which kind of spread is asked for afterwards
    averaged = spread or "error" in roles or "deviation" in roles or scene.options.error_each is not None
    raw = "realisation" in roles or "realisation" in scene.elsewhere
    wide = len(able) == 1 and "{size}" in able[0]  # a row for each disorder: averaged, as long as nothing says raw
    if len(able) == 1 and averaged != raw:
        roles["mean" if averaged else "value"] = able[0]
    elif wide and not raw:
        roles["mean"] = able[0]


def _check_complete(roles: Mapping[str, str], names: Sequence[str], scene: Scene) -> None:
    missing = [role for role in ("size", "disorder") if role not in roles and role not in scene.elsewhere]
    if "mean" in roles and "value" in roles:
        problem = (
            f"{scene.word} {shown(roles['mean'])} would be a mean and {shown(roles['value'])} raw values, and only one "
            f"can be read; {_seen(names, scene)}; say which with --columns mean=... or --columns value=..."
        )
        raise InputError(problem, where=scene.where)
    if "mean" not in roles and "value" not in roles:
        missing.append("mean")
    if missing:
        _refuse_missing(missing, roles, names, scene)
    if "mean" in roles:
        _check_error(roles, names, scene)


def _refuse_missing(missing: Sequence[str], roles: Mapping[str, str], names: Sequence[str], scene: Scene) -> None:
    words = {"mean": "the means (or the raw values)"}
    asked = " and ".join(words.get(role, f"the {role}") for role in missing)
    spare = [name for name in names if name not in roles.values()][:MOST_COMPARED]

    def place(role: str) -> str:
        able = [name for name in spare if role in known_as(name)] or get_close_matches(role, spare, n=1, cutoff=0.8)
        name = roles.get(role, able[0] if len(able) == 1 else "...")
        return name if len(name) <= LONGEST_SHOWN else "..."

    example = [f"{role}={place(role)}" for role in ("size", "disorder") if role not in scene.elsewhere]
    example.append(f"value={place('value')}" if "value" in roles else f"mean={place('mean')}")
    if "value" not in roles:
        example.append(f"error={place('error')}")
    raw = " (value=... for raw values)" if "mean" in missing else ""
    raise InputError(
        f"the names do not tell which {scene.word} holds {asked}; {_seen(names, scene)}; say it with "
        f"--columns {','.join(example)}{raw}",
        where=scene.where,
    )


def _check_error(roles: Mapping[str, str], names: Sequence[str], scene: Scene) -> None:
    options = scene.options
    if "deviation" in roles and "error" not in roles:
        if "samples" not in roles and options.samples_each is None and "samples" not in scene.elsewhere:
            raise InputError(
                f"a standard deviation becomes a standard error only with the number of realisations; "
                f"{_seen(names, scene)}; give its {scene.word} with --columns samples=... or one number for all with "
                "--samples-each N",
                where=scene.where,
            )
        return
    if "error" in roles or options.error_each is not None:
        return
    spread = next((name for name in names if SPREAD in known_as(name)), None)
    if spread is not None:
        raise InputError(
            f"{scene.word} {shown(spread)} may hold the standard error of the mean or the standard deviation over "
            f"realisations; {_seen(names, scene)}; say which with --columns error={spread}, or with --columns "
            f"deviation={spread} and the number of realisations (samples=... there, or --samples-each N)",
            where=scene.where,
        )
    raise InputError(
        f"no {scene.word} holds the error of the mean; {_seen(names, scene)}; name it with --columns error=... "
        "(standard error) or deviation=... (standard deviation over realisations), or declare raw values with "
        "value=...; a standard error is the standard deviation over realisations divided by the square root of their "
        "number",
        where=scene.where,
    )


def _seen(names: Sequence[str], scene: Scene) -> str:
    return f"the {scene.word}s are {listed(name or 'one without a name' for name in names)}"
