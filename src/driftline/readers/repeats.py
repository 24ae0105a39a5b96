"""Values that stand in the data twice, as after a restart that wrote its realisations again.

Two equal numbers are no proof: of a thousand values printed with four digits some agree by chance. So the probability p
that two values agree is estimated first, from the digits they are written with, and only a run of equal values so long
that chance would give it once in a million data sets counts as a repetition.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from driftline.curves import FloatArray

BoolArray = npt.NDArray[np.bool_]
IntArray = npt.NDArray[np.int64]

#: Probability of a false alarm for each list of values.
FALSE_ALARM = 1e-6
#: Values that agree more often than this say nothing when they agree.
COMMONPLACE = 0.9
#: A value this many times as frequent as the median one is a common value (such as an exact 0), not a repetition.
COMMON = 3
_MOST_WORK = 10**9
_MULTIPLIER = np.uint64(0x9E3779B97F4A7C15)  # odd, so that powers of it keep all 64 bits busy


def repeated(values: FloatArray) -> BoolArray:
    """Which of `values`, shape (n,) in the order of the file, repeat earlier ones; shape (n,).

    Examples
    --------
    >>> values = np.random.default_rng(1).normal(size=100)
    >>> int(repeated(np.concatenate([values, values[20:50]])).sum())
    30
    """
    n = values.size
    none = np.zeros(n, dtype=np.bool_)
    p = agreement(values)
    if n < 2 or p >= COMMONPLACE:
        return none
    run = max(1, int(np.ceil(np.log(n**2 / 2 / FALSE_ALARM) / -np.log(max(p, 1e-300)))))
    # a sorted list holds long runs of whatever is common in it
    ordered = run > 1 and bool(np.all(np.diff(values) >= 0) or np.all(np.diff(values) <= 0))
    if 2 * run > n or n * run > _MOST_WORK or ordered:
        return none
    return _later_windows(values, run)


def _later_windows(values: FloatArray, run: int) -> BoolArray:
    """Positions inside a window of `run` values that stood, without overlap, earlier in `values`."""
    code = np.unique(values, return_inverse=True)[1].astype(np.uint64) + np.uint64(1)
    windows = values.size - run + 1
    digest = np.zeros(windows, dtype=np.uint64)
    for step in range(run):
        digest = digest * _MULTIPLIER + code[step : step + windows]  # modulo 2^64, as meant
    _, first, inverse = np.unique(digest, return_index=True, return_inverse=True)
    starts = np.flatnonzero(np.arange(windows) - first[inverse] >= run)
    edges = np.zeros(values.size + 1, dtype=np.int64)
    np.add.at(edges, starts, 1)
    np.add.at(edges, starts + run, -1)
    return np.asarray(np.cumsum(edges[:-1]) > 0)


def repeated_within(values: FloatArray, group: IntArray) -> BoolArray:
    """Which of `values`, shape (n,), stood earlier in the same group (0, 1, ...; shape (n,)), if not by chance.

    A realisation that was begun, cut short and written again has rows twice, which would count double in its average.
    """
    order = np.lexsort((np.arange(values.size), values, group))
    again = np.zeros(values.size, dtype=np.bool_)
    again[order[1:]] = (np.diff(values[order]) == 0) & (np.diff(group[order]) == 0)
    rows, repeats = np.bincount(group), np.bincount(group, weights=again)
    chance = rows * (rows - 1) / 2 * agreement(values)
    return np.asarray(again & (repeats > chance + 5 * np.sqrt(chance))[group])


def agreement(values: FloatArray) -> float:
    """Probability that two of `values`, shape (n,), agree by chance.

    Where the digits make agreement improbable, repetitions would themselves dominate a count of agreeing pairs, so the
    estimate is the spacing of representable values over the interquartile range, plus what common values contribute.
    """
    n = values.size
    _, counts = np.unique(values, return_counts=True)
    pairs = float(np.sum(counts * (counts - 1.0))) / (n * max(n - 1, 1))
    spread = float(np.subtract(*np.percentile(values, [75, 25])))
    spacing = _spacing(values)
    if spread <= 0 or n**2 / 2 * spacing / spread > 1e-3:
        return pairs
    common = counts[counts > max(COMMON * float(np.median(counts)), COMMON)]
    return float(spacing / spread + np.sum((common / n) ** 2))


def _spacing(values: FloatArray) -> float:
    """Typical distance between neighbouring numbers of the precision that `values` are written with."""
    some = values[values != 0][:2000]
    if some.size == 0:
        return np.inf
    exponent = np.floor(np.log10(np.abs(some)))
    single = np.abs(some) < 1e37  # beyond, float32 ends
    if np.all(single) and np.all(some.astype(np.float32) == some):
        narrow = float(np.median(np.abs(some))) * 2.0**-24
    else:
        narrow = float(np.median(np.abs(some))) * 2.0**-53
    for digits in range(1, 15):
        scaled = some / 10 ** (exponent - digits + 1)
        if np.all(np.abs(scaled - np.rint(scaled)) <= 8 * np.finfo(np.float64).eps * np.abs(scaled)):
            return max(narrow, float(np.median(10 ** (exponent - digits + 1))))
    return narrow
