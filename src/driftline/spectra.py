"""Observables of a spectrum: the adjacent-gap ratio of the levels in an energy window.

    r_n = min(d_n, d_{n+1}) / max(d_n, d_{n+1}),    d_n = E_{n+1} - E_n

(Oganesyan, Huse, PRB 75, 155111 (2007), from memory.) It needs no unfolding, because the density of states drops out.
Its mean is 2 ln 2 - 1 for uncorrelated levels and 0.5307, 0.5996 or 0.6744 for random matrices of the orthogonal,
unitary and symplectic class (Atas, Bogomolny, Giraud, Roux, PRL 110, 084101 (2013), numbers from memory).

What to use when: all levels of a realisation, with a window of a fraction of them, compares sizes at the same part of
the spectrum; a number of states around an energy is what shift-and-invert gives, for which `Window(fraction=1)` takes
what there is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from driftline.curves import LARGEST, FloatArray
from driftline.errors import ConfigurationError, InputError

DEGENERACY = ("refuse", "merge", "keep")
CENTRES = ("quantile", "energy", "middle")

#: Levels closer than this, relative to the largest |E|, count as the same: eigensolvers are accurate to a few machine
#: precisions times the norm of the matrix (LAPACK Users' Guide, section 4.7), and a gap made of rounding is no gap.
RESOLUTION = 64 * float(np.finfo(np.float64).eps)
LEAST = 3  # levels, two gaps, one ratio


@dataclass(frozen=True)
class Window:
    """Which levels of a realisation are used.

    Parameters
    ----------
    fraction : float, optional
        Fraction of the levels, above 0 and up to 1, rounded to the nearest number. Where neither this nor `states` is
        given a third is used, the middle third being a common choice (Pal, Huse, PRB 82, 174411 (2010), from memory).
    states : int, optional
        Number of levels, at least 3; instead of a fraction.
    centre : {"quantile", "energy", "middle"}
        Where the window lies: around a quantile of the levels; at the levels next to an energy; or next to
        (E_min + E_max) / 2 of the realisation.
    at : float, optional
        The quantile, from 0 to 1 (0.5 unless given), or the energy.

    Raises
    ------
    ConfigurationError
        If the values do not make a window.

    Examples
    --------
    >>> levels = np.array([0.0, 1.0, 3.0, 4.0, 9.0, 10.0])
    >>> Window(states=3, centre="energy", at=3.2).cut(levels)
    array([1., 3., 4.])
    >>> Window(fraction=0.5).cut(levels)
    array([1., 3., 4.])
    """

    fraction: float | None = None
    states: int | None = None
    centre: Literal["quantile", "energy", "middle"] = "quantile"
    at: float | None = None

    def __post_init__(self) -> None:
        if self.fraction is not None and self.states is not None:
            raise ConfigurationError("window: give a fraction of the levels or a number of states, not both")
        if self.fraction is not None and not 0 < self.fraction <= 1:
            raise ConfigurationError(f"fraction must lie above 0 and not above 1, not {self.fraction:g}")
        if self.states is not None and self.states < LEAST:
            raise ConfigurationError(f"states must be at least {LEAST}, which make one gap ratio, not {self.states}")
        _check_centre(self.centre, self.at)

    @classmethod
    def of(cls, fraction: float | None, states: int | None, centre: str = "quantile=0.5") -> Window:
        """The window whose centre is written ``middle``, ``quantile=0.5`` or ``energy=-1.2``.

        Raises
        ------
        ConfigurationError
            If it cannot be understood.
        """
        kind, equals, text = (part.strip() for part in centre.partition("="))
        try:
            at = float(text) if equals else None
        except ValueError as reason:
            raise ConfigurationError(f"centre: {text!r} is not a number") from reason
        return cls(fraction, states, kind, at)  # type: ignore[arg-type]

    def cut(self, levels: FloatArray) -> FloatArray:
        """The levels inside, of `levels` in increasing order, shape (n,).

        Raises
        ------
        InputError
            If there are too few levels, or the energy lies outside of them.
        """
        count = self._count(levels.size)
        if self.centre == "quantile":
            quantile = 0.5 if self.at is None else self.at
            # symmetric about the quantile as far as the ends allow; half a level to the lower side where it is odd
            first = math.floor(quantile * (levels.size - 1) - (count - 1) / 2)
            first = min(max(first, 0), levels.size - count)
        else:
            first = _nearest(levels, count, self._energy(levels))
        return levels[first : first + count]

    def __str__(self) -> str:
        share = f"{1 / 3 if self.fraction is None else self.fraction:.4g} of the levels"
        number = share if self.states is None else f"{self.states} levels"
        if self.centre == "middle":
            return f"{number} next to (E_min + E_max)/2"
        if self.centre == "energy":
            return f"{number} next to energy {self.at:g}"
        return f"{number} around quantile {0.5 if self.at is None else self.at:g}"

    def _count(self, levels: int) -> int:
        if self.states is not None:
            if self.states > levels:
                raise InputError(f"{self.states} states are asked for, but there are {levels} levels; ask for fewer")
            return self.states
        count = round((1 / 3 if self.fraction is None else self.fraction) * levels)
        if count < LEAST:
            raise InputError(
                f"the window holds {count} of {levels} levels, but a gap ratio needs {LEAST}; use a larger fraction"
            )
        return count

    def _energy(self, levels: FloatArray) -> float:
        if self.centre == "middle":
            return float(levels[0] / 2 + levels[-1] / 2)
        assert self.at is not None
        if not levels[0] <= self.at <= levels[-1]:
            raise InputError(
                f"the energy {self.at:g} lies outside the spectrum, which runs from {levels[0]:g} to {levels[-1]:g}; "
                "choose an energy inside, or centre the window by a quantile"
            )
        return self.at


@dataclass(frozen=True)
class GapRatio:
    """The mean gap ratio of one realisation.

    Parameters
    ----------
    mean : float
        Mean over the window.
    levels, used : int
        Levels there are (each once, where coinciding ones were merged), and those inside the window.
    coinciding : int
        Levels that coincide with the one below them.
    """

    mean: float
    levels: int
    used: int
    coinciding: int


def mean_gap_ratio(
    levels: npt.ArrayLike, window: Window | None = None, *, degenerate: Literal["refuse", "merge", "keep"] = "refuse"
) -> GapRatio:
    """Mean adjacent-gap ratio of the levels of one realisation inside a window.

    Parameters
    ----------
    levels : array, shape (n,)
        Energies in any order and unit.
    window : Window, optional
        The middle third unless given.
    degenerate : {"refuse", "merge", "keep"}
        What to do with levels inside the window that coincide within the accuracy of double precision. They mean a
        symmetry that was not resolved, or numbers written with too few digits, so they are refused. ``merge`` counts
        levels that coincide once (Kramers pairs); ``keep`` takes their gap as exactly zero, so its ratios are zero.

    Raises
    ------
    InputError
        If a level is not a finite number, levels coincide and are refused, three coincide and are kept (0/0), or too
        few are left.

    Examples
    --------
    >>> round(mean_gap_ratio([0.0, 1.0, 3.0, 4.0], Window(fraction=1)).mean, 6)  # (1/2 + 1/2) / 2
    0.5
    """
    if degenerate not in DEGENERACY:
        raise ConfigurationError(f"degenerate must be refuse, merge or keep, not {degenerate!r}")
    energies = _sorted(levels)
    window = window or Window()
    distinct = _distinct(energies)
    coinciding = energies.size - int(np.count_nonzero(distinct))
    if degenerate == "merge":
        energies = energies[distinct]
    inside = window.cut(energies)
    gaps = np.diff(inside)
    zero = gaps <= _tolerance(energies)
    if degenerate == "refuse" and zero.any():
        _refuse(inside, zero)
    return GapRatio(_mean_ratio(np.where(zero, 0.0, gaps), inside), energies.size, inside.size, coinciding)


def _mean_ratio(gaps: FloatArray, inside: FloatArray) -> float:
    low, high = np.minimum(gaps[1:], gaps[:-1]), np.maximum(gaps[1:], gaps[:-1])
    if not high.all():
        at = inside[int(np.argmin(high))]
        raise InputError(
            f"three levels coincide at {at:.10g}, and their gap ratio 0/0 has no value; resolve the symmetry behind "
            "it, or merge levels that coincide"
        )
    return float(np.mean(low / high))


def _sorted(levels: npt.ArrayLike) -> FloatArray:
    energies = np.sort(np.asarray(levels, dtype=np.float64), axis=None)
    bad = np.flatnonzero(~(np.abs(energies) <= LARGEST))  # NaN included
    if bad.size:
        raise InputError(f"a level is {energies[bad[0]]:g}; correct it, or leave out the realisation")
    if energies.size < LEAST:
        counted = f"{energies.size} level{'s' * (energies.size != 1)}"
        raise InputError(f"there {'is' if energies.size == 1 else 'are'} {counted}, but a gap ratio needs {LEAST}")
    return energies


def _tolerance(energies: FloatArray) -> float:
    return RESOLUTION * float(max(abs(energies[0]), abs(energies[-1])))


def _distinct(energies: FloatArray) -> npt.NDArray[np.bool_]:
    """The first of each group of coinciding levels."""
    return np.concatenate([[True], np.diff(energies) > _tolerance(energies)])


def _refuse(inside: FloatArray, zero: npt.NDArray[np.bool_]) -> None:
    where = inside[int(np.argmax(zero))]
    count = int(np.count_nonzero(zero))
    raise InputError(
        f"{count} of {zero.size} gaps in the window {'is' if count == 1 else 'are'} zero, the first at energy "
        f"{where:.10g}: a symmetry is not resolved, or the levels have too few digits; resolve it or write more "
        "digits, or say --degenerate merge (count coinciding levels once) or --degenerate keep (their gap is 0)"
    )


def _check_centre(centre: str, at: float | None) -> None:
    if centre not in CENTRES:
        raise ConfigurationError(f"centre must be quantile=Q, energy=E or middle, not {centre!r}")
    if at is not None and (centre == "middle" or not abs(at) <= LARGEST):
        problem = "takes no number" if centre == "middle" else f"must be a finite number, not {at:g}"
        raise ConfigurationError(f"centre: {centre} {problem}")
    if centre == "energy" and at is None:
        raise ConfigurationError("centre: say which energy, as in energy=0")
    if centre == "quantile" and at is not None and not 0 <= at <= 1:
        raise ConfigurationError(f"centre: a quantile lies between 0 and 1, not at {at:g}")


def _nearest(levels: FloatArray, count: int, energy: float) -> int:
    """First of the `count` levels that are nearest to `energy`; the lower one where two are equally near."""
    last = levels.size - count
    # moving the window up by one drops levels[k] and takes levels[k + count]: worth it while that one is nearer
    nearer = levels[count:] - energy < energy - levels[:last]
    return int(np.count_nonzero(nearer))
