"""How numbers are written for people: as many digits as the uncertainty carries, and never more."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Decimal

from driftline.inference.intervals import Interval

MISSING = "-"
DIGITS = 2  # significant digits of an error, common practice in the tables of physics papers
PLAIN = range(-4, 6)  # powers of ten written without an exponent
#: Ratio of upper to lower error from which both are given. Ends of a 68 % interval from the 400 effective draws that
#: a posterior has at least scatter by 0.075 standard deviations each, their ratio by 0.12: this is twice that.
LOPSIDED = 1.25


def exponent(value: float) -> int:
    """Power of ten of the leading digit of `value`."""
    return Decimal(repr(abs(float(value)))).adjusted()


def rounded(value: float, error: float, digits: int = DIGITS) -> str:
    """`value` with the decimals that two significant digits of `error` ask for.

    Examples
    --------
    >>> rounded(16.52834, 0.1234), rounded(123456.0, 1234.0)
    ('16.53', '123500')
    """
    if not _usable(value):
        return MISSING
    if not _usable(error) or error == 0:
        return significant(value, 6)
    last = _last_digit(value, error, digits)
    if not _plain(value, error):
        shift = exponent(value) if value else exponent(error)
        return f"{_at(value, last).scaleb(-shift):f}e{shift:+03d}"
    return f"{_at(value, last):.{max(0, -last)}f}"


@dataclass(frozen=True)
class Quoted:
    """A rounded value with its errors, not yet written in a notation.

    Attributes
    ----------
    number : str
        The value.
    errors : tuple of str
        Errors in units of its last digit, or with a decimal point where 12.3(14) could be misread.
    power : int
        Power of ten that multiplies all of them.
    """

    number: str
    errors: tuple[str, ...] = ()
    power: int = 0

    @property
    def text(self) -> str:
        """As in 16.53(12), or 1.47(+36-26) for an upper and a lower error that differ."""
        signed = len(self.errors) > 1
        inside = "".join(sign * signed + error for sign, error in zip("+-", self.errors, strict=False))
        return self.number + (f"({inside})" if inside else "") + (f"e{self.power:+03d}" if self.power else "")


def quoted(value: float, *errors: float, decisive: float | None = None) -> Quoted:
    """`value` and its errors, rounded to two significant digits of the `decisive` one (by default the first).

    Examples
    --------
    >>> quoted(16.52834, 0.1234, 0.05)
    Quoted(number='16.53', errors=('12', '5'), power=0)
    """
    leading = errors[0] if decisive is None and errors else decisive
    text = rounded(value, math.nan if leading is None else leading)
    number, _, exponent_text = text.partition("e")
    power = int(exponent_text or 0)
    if leading is None or not all(_usable(each) for each in (value, leading, *errors)) or leading == 0:
        return Quoted(number, (), power)
    last = _last_digit(value, leading, DIGITS)
    spreads = [_at(each, last) for each in errors]
    if not power and last < 0 and max(spreads) >= 1:  # 12.3(1.4), since 12.3(14) could be misread
        return Quoted(number, tuple(f"{spread:.{-last}f}" for spread in spreads))
    unit = 0 if last >= 0 and not power else last
    return Quoted(number, tuple(f"{spread.scaleb(-unit):.0f}" for spread in spreads), power)


def plus_minus(value: float, error: float) -> str:
    """Value with its standard deviation in units of the last digits, as in 16.53(12).

    Examples
    --------
    >>> plus_minus(16.52834, 0.1234), plus_minus(3.2e-9, 4.1e-11), plus_minus(250.0, 31.0)
    ('16.53(12)', '3.200(41)e-09', '250(31)')
    """
    return quoted(value, error).text


def up_down(interval: Interval) -> Quoted:
    """Median with its error, or with an upper and a lower one where the 68 % interval is lopsided.

    Both go to two significant digits of the smaller one, or to three of the larger if that is fewer.

    Examples
    --------
    >>> up_down(Interval(16.53, 16.41, 16.65, 16.31, 16.78)).text, up_down(Interval(1.47, 1.21, 1.83, 1.0, 2.5)).text
    ('16.53(12)', '1.47(+36-26)')
    """
    up, down = interval.high68 - interval.median, interval.median - interval.low68
    small, large = sorted((up, down))
    if not large > LOPSIDED * small:  # NaN included
        return quoted(interval.median, interval.sd)
    return quoted(interval.median, up, down, decisive=max(small, large / 10))


def bracket(interval: Interval | None, level: int = 95) -> str:
    """Limits of the 68 or 95 % interval, as in [16.31, 16.78].

    Examples
    --------
    >>> bracket(Interval(16.53, 16.41, 16.65, 16.31, 16.78))
    '[16.31, 16.78]'
    """
    if interval is None:
        return MISSING
    low, high = (interval.low68, interval.high68) if level == 68 else (interval.low95, interval.high95)
    return f"[{rounded(low, interval.sd)}, {rounded(high, interval.sd)}]"


def short(interval: Interval | None) -> str:
    """Median with half the 68 % interval in brackets, as in 16.53(12); a dash where there is none."""
    return MISSING if interval is None else plus_minus(interval.median, interval.sd)


def median(interval: Interval | None) -> str:
    """Median alone, to the digits its interval carries."""
    return MISSING if interval is None else rounded(interval.median, interval.sd)


def sizes(values: Iterable[float]) -> list[str]:
    """Sizes with as few digits as tell them apart: whole numbers as they are, others from three digits on.

    Examples
    --------
    >>> sizes([8, 12.0]), sizes([4.852030263919617, 5.545177444479562]), sizes([10.12, 10.14])
    (['8', '12'], ['4.85', '5.55'], ['10.12', '10.14'])
    """
    numbers = [float(value) for value in values]
    for digits in range(3, 18):
        texts = [_size(value, digits) for value in numbers]
        if len(set(texts)) == len(set(numbers)):
            break
    return texts


def _size(value: float, digits: int) -> str:
    whole = value == round(value) and abs(value) < 1e6
    # no exponent where the digits before the point alone are more than asked for
    return f"{value:.0f}" if whole else f"{value:.{max(digits, min(exponent(value) + 1, 6))}g}"


def significant(value: float | None, digits: int = 3) -> str:
    """`value` with so many significant digits, trailing zeros dropped."""
    return MISSING if value is None or not _usable(value) else f"{value:.{digits}g}"


def fixed(value: float | None, decimals: int) -> str:
    """`value` with so many decimals; a dash where there is none; an exponent from ten million on."""
    if value is None or not _usable(value):
        return MISSING
    return f"{value:.{decimals}f}" if abs(value) < 1e7 else f"{value:.3g}"


def probability(value: float | None) -> str:
    """A probability or p-value with two decimals, and no zero or one that is not exact.

    Examples
    --------
    >>> probability(0.5), probability(0.0004), probability(0.9996), probability(1.0)
    ('0.50', '<0.01', '>0.99', '1.00')
    """
    if value is None or not _usable(value):
        return MISSING
    if 0 < value < 0.01:
        return "<0.01"
    return ">0.99" if 0.99 < value < 1 else f"{value:.2f}"


def _usable(value: float) -> bool:
    return math.isfinite(value)


def _last_digit(value: float, error: float, digits: int) -> int:
    """Power of ten of the last digit that is written: the error is rounded first, as 0.0996 becomes 0.10."""
    last = exponent(error) - digits + 1
    if exponent(float(_at(error, last))) > exponent(error):
        last += 1
    return max(last, exponent(value) - 15)  # a double carries no more


def _at(value: float, last: int) -> Decimal:
    return +Decimal(repr(float(value))).quantize(
        Decimal(1).scaleb(last), rounding=ROUND_HALF_EVEN
    )  # + drops minus zero


def _plain(value: float, error: float) -> bool:
    """Whether neither value nor error asks for an exponent."""
    top = max(exponent(value), exponent(error)) if value else exponent(error)
    return top in PLAIN and exponent(error) > -8
