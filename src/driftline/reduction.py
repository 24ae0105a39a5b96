"""Spectra to a realisation table: the mean gap ratio of every realisation, ready for analysis."""

from __future__ import annotations

import os
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from driftline.curves import FloatArray
from driftline.errors import InputError
from driftline.progress import Progress
from driftline.readers.base import located
from driftline.readers.levels import Spectrum, spectra
from driftline.readers.streaming.runs import IntArray
from driftline.reading import InputOptions
from driftline.spectra import GapRatio, Window, mean_gap_ratio


@dataclass(frozen=True)
class SizeSummary:
    """What was reduced at one size.

    Parameters
    ----------
    size : float
        The size.
    disorders, realisations : int
        How many points and realisations.
    levels, used : tuple of int
        Fewest and most levels of a realisation, and of them in the window.
    first, last : float
        Mean gap ratio at the smallest and the largest disorder.
    """

    size: float
    disorders: int
    realisations: int
    levels: tuple[int, int]
    used: tuple[int, int]
    first: float
    last: float


@dataclass(frozen=True, eq=False)
class Reduction:
    """A realisation table of mean gap ratios, ordered by size, disorder and realisation.

    Parameters
    ----------
    size, disorder, value : array, shape (n,)
        Where each realisation belongs, and its mean gap ratio.
    realisation : array of int, shape (n,)
        Its label.
    levels, used : array of int, shape (n,)
        Its levels, and those inside the window.
    window : Window
        Which levels were used.
    coinciding : int
        Levels that coincide with another, of all realisations.
    numbered : bool
        Whether realisations had no labels and got a number each, different at every disorder.
    """

    size: FloatArray
    disorder: FloatArray
    realisation: IntArray
    value: FloatArray
    levels: IntArray
    used: IntArray
    window: Window
    coinciding: int
    numbered: bool

    def columns(self) -> dict[str, npt.NDArray[Any]]:
        """The columns of the table, by name."""
        return {name: getattr(self, name) for name in ("size", "disorder", "realisation", "value")}

    def summary(self) -> list[SizeSummary]:
        """One line for each size."""
        return [self._of_size(float(size)) for size in np.unique(self.size)]

    def _of_size(self, size: float) -> SizeSummary:
        here = self.size == size
        disorder, value = self.disorder[here], self.value[here]
        levels, used = ((int(a[here].min()), int(a[here].max())) for a in (self.levels, self.used))
        first, last = (float(value[disorder == end].mean()) for end in (disorder.min(), disorder.max()))
        return SizeSummary(size, np.unique(disorder).size, value.size, levels, used, first, last)


def reduce_spectra(
    path: str | os.PathLike[str], *, window: Window | None = None,
    degenerate: Literal["refuse", "merge", "keep"] = "refuse", input: InputOptions | None = None,
    progress: Progress | None = None,
) -> Reduction:  # fmt: skip
    """Mean gap ratio of every realisation whose levels stand at `path`.

    Parameters
    ----------
    path : path
        A folder, an HDF5 file or a long table; see `driftline.readers.levels`.
    window : Window, optional
        Which levels to use; the middle third unless given.
    degenerate : {"refuse", "merge", "keep"}
        What to do with levels that coincide; see `driftline.spectra.mean_gap_ratio`.
    input : InputOptions, optional
        Pattern, columns, separator and header of the files; `paired` where row k of every matrix is the same
        disorder realisation.
    progress : function, optional
        Called with what is done and the fraction done.

    Raises
    ------
    InputError
        If a file or a spectrum cannot be used; the text says which.
    ConfigurationError
        If the options do not suit the files.
    """
    window = window or Window()
    input = input or InputOptions()
    gathered = _Gathered(bool(input.paired))
    for spectrum in spectra(Path(path), os.fspath(path), input, progress):
        with located(spectrum.where):
            gathered.take(spectrum, mean_gap_ratio(spectrum.levels, window, degenerate=degenerate))
    if not gathered.found:
        raise InputError("there is no spectrum", where=os.fspath(path))
    return gathered.table(window)


@dataclass
class _Gathered:
    """Gap ratios by size, disorder and realisation, with the place of each for naming repetitions."""

    paired: bool
    found: dict[tuple[float, float, int], tuple[GapRatio, str]] = field(default_factory=dict)
    numbered: Counter[float] = field(default_factory=Counter)

    def take(self, spectrum: Spectrum, ratio: GapRatio) -> None:
        label = spectrum.realisation
        if not spectrum.labelled and not self.paired:  # a number of its own, so that nothing looks shared
            label = self.numbered[spectrum.size]
            self.numbered[spectrum.size] += 1
        key = spectrum.size, spectrum.disorder, label
        earlier = self.found.setdefault(key, (ratio, spectrum.where))
        if earlier[0] is not ratio:
            raise InputError(
                f"size {key[0]:g}, disorder {key[1]:g}, realisation {key[2]} stands in {earlier[1]} already; keep one"
            )

    def table(self, window: Window) -> Reduction:
        ordered = sorted(self.found.items())
        size, disorder, label = (np.array([key[i] for key, _ in ordered]) for i in range(3))
        ratios = [ratio for _, (ratio, _) in ordered]
        value = np.array([ratio.mean for ratio in ratios])
        levels, used = (np.array([getattr(ratio, name) for ratio in ratios]) for name in ("levels", "used"))
        coinciding = sum(ratio.coinciding for ratio in ratios)
        apart = bool(self.numbered)
        return Reduction(size, disorder, label.astype(np.int64), value, levels, used, window, coinciding, apart)
