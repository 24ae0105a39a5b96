"""What is taken over realisations: mean, median or log-mean of numbers, the rate of counts, the share of yes/no values.

Which to take: the mean, unless single realisations dominate it (heavy tails); then the median, or the log-mean of
positive values, which is what papers on localisation call the typical value (common practice). Errors of median and
log-mean are bootstrap errors (B. Efron, Annals of Statistics 7, 1 (1979)), in closed form rather than by resampling:
for these two the bootstrap distribution is known.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy.special import betainc

from driftline.curves import FloatArray
from driftline.errors import ConfigurationError, InputError


@dataclass(frozen=True, eq=False)
class Estimate:
    """An average over realisations.

    Attributes
    ----------
    value, error : float
        The average and its standard error.
    influence : array, shape (n,)
        What each realisation contributes to the average, up to a common factor; the mean is zero.
    """

    value: float
    error: float
    influence: FloatArray


class Average(ABC):
    """One way to average."""

    name: ClassVar[str]
    moments: ClassVar[bool] = True  #: whether single large values can dominate it

    def check(self, values: FloatArray, where: str) -> None:
        """Refuse values, of any shape, that cannot be averaged in this way."""
        return

    def scale(self, values: FloatArray) -> FloatArray:
        """The scale on which the rows of a realisation are averaged, of the shape of `values`."""
        return values

    @abstractmethod
    def estimate(self, values: FloatArray) -> Estimate:
        """The average over realisations of `values`, shape (n,), which are on `scale`; n is at least 2."""


class Mean(Average):
    """The mean, with the standard error s/sqrt(n)."""

    name = "mean"

    def estimate(self, values: FloatArray) -> Estimate:
        return Estimate(float(values.mean()), _standard_error(values), values - values.mean())


class Median(Average):
    """The median over realisations of their own means.

    Its bootstrap distribution is known: resampled, the median is the k-th smallest value with the probability that a
    beta distribution gives to [(k-1)/n, k/n] (J. S. Maritz, R. G. Jarrett, JASA 73, 194 (1978)).
    """

    name = "median"
    moments = False

    def estimate(self, values: FloatArray) -> Estimate:
        n, ordered, middle = values.size, np.sort(values), float(np.median(values))
        weights = np.diff(betainc((n + 1) / 2, (n + 1) / 2, np.arange(n + 1) / n))
        offset = ordered - middle
        variance = max(float(weights @ offset**2 - (weights @ offset) ** 2), 0.0)
        # influence of a value on a median: its side (Bahadur, Annals of Mathematical Statistics 37, 577 (1966))
        side = np.sign(values - middle)
        return Estimate(middle, float(np.sqrt(variance)), side - side.mean())


class LogMean(Average):
    """The typical value exp <ln x>; logarithms are averaged within realisations too.

    With n values resampled from x_1 ... x_n, <exp(t m)> of the mean m of their logarithms is (<x^(t/n)>)^n, so that the
    bootstrap variance of exp(m) is known; n/(n-1) of it is taken, as in the standard error of a mean.
    """

    name = "log-mean"

    def check(self, values: FloatArray, where: str) -> None:
        bad = np.argwhere(values <= 0)
        if len(bad):
            problem = f"row {bad[0][0] + 1} holds {values[tuple(bad[0])]:g}, but a log-mean needs positive values"
            raise InputError(f"{problem}; take the mean or the median", where=where)

    def scale(self, values: FloatArray) -> FloatArray:
        return np.asarray(np.log(values))

    def estimate(self, values: FloatArray) -> Estimate:
        n, centre = values.size, float(values.mean())
        offset = values - centre
        first, second = (n * np.log1p(np.mean(np.expm1(t * offset / n))) for t in (1, 2))
        error = np.exp(centre + first) * np.sqrt(np.expm1(max(second - 2 * first, 0.0)) * n / (n - 1))
        return Estimate(float(np.exp(centre)), float(error), offset)


class Rate(Average):
    """Events per realisation: the mean of counts.

    The error is that over realisations, which for counts out of a fixed number of trials is the binomial one. Where
    nothing happened it would be zero, so half an event is added to all of them (Jeffreys' prior for a rate; textbook).
    """

    name = "rate"
    moments = False

    def check(self, values: FloatArray, where: str) -> None:
        bad = np.argwhere((values < 0) | (values != np.floor(values)))
        if len(bad):
            raise InputError(_not_a(values, bad[0], "a count (a whole number from 0 on)"), where=where)

    def estimate(self, values: FloatArray) -> Estimate:
        n, mean = values.size, float(values.mean())
        spread = float(values.var(ddof=1)) / mean if mean > 0 else 1.0
        return Estimate(mean, float(np.sqrt(spread * (mean * n + 0.5))) / n, values - mean)


class Share(Average):
    """The share of yes: the mean of values that are 0 or 1, with a binomial error.

    The error is the standard deviation of the posterior from Jeffreys' prior, sqrt(q (1 - q) / (n + 2)) with
    q = (yes + 1/2) / (n + 1), which stays positive where all answers are the same (L. D. Brown, T. T. Cai, A. DasGupta,
    Statistical Science 16, 101 (2001)). Where a realisation has several answers, its own share is a number between,
    and the error shrinks as the scatter of these numbers does.
    """

    name = "share"
    moments = False

    def check(self, values: FloatArray, where: str) -> None:
        bad = np.argwhere((values != 0) & (values != 1))
        if len(bad):
            raise InputError(_not_a(values, bad[0], "0 (no) or 1 (yes)"), where=where)

    def estimate(self, values: FloatArray) -> Estimate:
        n, mean = values.size, float(values.mean())
        q = (mean * n + 0.5) / (n + 1)
        # 1 with one answer a realisation; n/(n-1) turns the variance of n answers into that of the distribution
        gained = float(values.var()) / (mean * (1 - mean)) if 0 < mean < 1 else 1.0
        return Estimate(mean, float(np.sqrt(gained * q * (1 - q) / (n + 2))), values - mean)


_NUMBERS: dict[str, Average] = {average.name: average for average in (Mean(), Median(), LogMean())}
_OTHERS: dict[str, Average] = {"counts": Rate(), "yes-no": Share()}

AVERAGES = tuple(_NUMBERS)
KINDS = ("numbers", *_OTHERS)


def chosen(average: str, kind: str) -> Average:
    """The average of that name for values of that kind.

    Raises
    ------
    ConfigurationError
        If there is none.
    """
    for name, value, choices in (("average", average, AVERAGES), ("kind", kind, KINDS)):
        if value not in choices:
            raise ConfigurationError(f"{name} must be {', '.join(choices[:-1])} or {choices[-1]}, not {value!r}")
    if kind != "numbers" and average != "mean":
        raise ConfigurationError(f"the {average} of values of kind {kind} is not defined; take the mean")
    return _NUMBERS[average] if kind == "numbers" else _OTHERS[kind]


def _standard_error(values: FloatArray) -> float:
    return float(values.std(ddof=1) / np.sqrt(values.size))


def _not_a(values: FloatArray, at: np.typing.NDArray[np.intp], what: str) -> str:
    return (
        f"row {at[0] + 1} holds {values[tuple(at)]:g}, which is not {what}; correct it, or say that these are numbers"
    )
