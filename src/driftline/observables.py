"""Known observables: naming one as the label ``observable`` brings its symbol and its reference values.

A name may carry a choice behind a colon and a number behind an equals sign, as in ``gap-ratio:unitary`` or
``occupation=0.5``. A label that is no known name is free text and brings nothing. What a file or the user says besides
goes before what is known here.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from driftline.errors import ConfigurationError, InputError, suggestion

if TYPE_CHECKING:
    from driftline.curves import Curves

#: Independent energy levels: Atas, Bogomolny, Giraud, Roux, PRL 110, 084101 (2013), exact
POISSON = 2 * math.log(2) - 1
#: Large random matrices: the same paper, numbers from memory
RANDOM_MATRICES = {"orthogonal": 0.5307, "unitary": 0.5996, "symplectic": 0.6744}


LARGEST_LOG = 700.0  # of the dimension of the whole chain: beyond, double precision ends


@dataclass(frozen=True)
class Observable:
    """What is known about an observable.

    Parameters
    ----------
    name, description : str
        How it is named, and what the data are.
    symbol : str
        For axes, in mathtext without dollar signs.
    ergodic : mapping
        Ergodic value for each choice behind the colon, the first being the default; None where it is the number.
    localised : float
        Localised value.
    number : str
        Meaning of the number behind the equals sign; empty where there is none.
    source : str
        Where the values come from.
    """

    name: str
    description: str
    symbol: str
    ergodic: Mapping[str, float | None]
    localised: float
    number: str
    source: str


#: To add one, write it here; one that changes the data when it is read needs a function as `divided_by_page` as well.
OBSERVABLES: tuple[Observable, ...] = (
    Observable(
        "gap-ratio", "adjacent-gap ratio of levels; the class of the random matrices behind the colon",
        r"\langle r\rangle", RANDOM_MATRICES, POISSON, "",
        "Atas, Bogomolny, Giraud, Roux, PRL 110, 084101 (2013)",
    ),
    Observable(
        "entanglement", "half-chain entanglement entropy in natural units, divided by Page's value of each size; with "
        ":ratio it is divided already", r"S/S_{\mathrm{Page}}", {"page": 1.0, "ratio": 1.0}, 0.0, "states of a site",
        "Page, PRL 71, 1291 (1993)",
    ),
    Observable(
        "occupation", "occupation of the sites that were filled at the start", r"\langle n\rangle", {"": None}, 1.0,
        "filling", "infinite temperature fills all sites alike; complete localisation keeps the start",
    ),
)  # fmt: skip


@dataclass(frozen=True)
class Named:
    """A known observable as it was named: with the choice behind the colon and the number behind the equals sign."""

    known: Observable
    choice: str
    number: float | None

    @property
    def labels(self) -> dict[str, Any]:
        """Symbol and reference values, as fields of `driftline.curves.Labels`."""
        value = self.known.ergodic[self.choice]
        return {
            "observable_symbol": self.known.symbol,
            "ergodic_value": self.number if value is None else value,
            "localised_value": self.known.localised,
        }

    @property
    def divides(self) -> bool:
        """Whether the data are entropies that are still to be divided."""
        return self.known.name == "entanglement" and self.choice == "page"

    def applied(self, curves: Curves) -> Curves:
        """The curves as the observable wants them: entropies are divided by Page's value.

        Raises
        ------
        InputError
            If a size is no number of sites, or a mean exceeds the largest entropy there can be.
        """
        if not self.divides:
            return curves
        return divided_by_page(curves, 2.0 if self.number is None else self.number)


def named(text: object) -> Named | None:
    """The known observable that `text` names, or None where it is free text.

    Raises
    ------
    ConfigurationError
        If what stands behind a known name cannot be used.

    Examples
    --------
    >>> named("gap-ratio:unitary").labels["ergodic_value"], named("occupation=0.25").labels["ergodic_value"]
    (0.5996, 0.25)
    >>> named("mean gap ratio") is None
    True
    """
    if not isinstance(text, str):
        return None
    head, equals, number = (part.strip() for part in text.partition("="))
    name, colon, choice = (part.strip() for part in head.partition(":"))
    known = next((each for each in OBSERVABLES if each.name == name), None)
    if known is None:
        return None
    choice = choice if colon else next(iter(known.ergodic))
    if choice not in known.ergodic:
        raise ConfigurationError(f"observable: {text!r} has no choice {choice!r}; {_choices(known, choice)}")
    return Named(known, choice, _number(known, number if equals else None))


def references(labels: Mapping[str, Any]) -> dict[str, Any]:
    """`labels`, completed by what the known observable among them brings."""
    found = named(labels.get("observable"))
    return dict(labels) if found is None else {**labels, **found.labels, **labels}


def of_file(labels: Mapping[str, Any]) -> tuple[dict[str, Any], list[str]]:
    """Labels of a file completed as in `references`, and notes.

    A comment in a file may be free text that happens to begin like a known name, so it is never refused, and never
    changes the data.
    """
    try:
        found = named(labels.get("observable"))
    except ConfigurationError as fault:
        return dict(labels), [f"no reference values were taken from the label ({fault})"]
    if found is not None and found.divides:
        return dict(labels), [
            "the label entanglement brings no reference values by itself; say --observable entanglement to have "
            "half-chain entropies divided by Page's value, or entanglement:ratio if they are"
        ]
    return references(labels), []


def page_entropy(m: int, n: int) -> float:
    """Mean entanglement entropy, in natural units, of random pure states in dimensions m and n.

        S = sum_{k=n+1}^{mn} 1/k - (m - 1) / (2 n),    m <= n

    Parameters
    ----------
    m, n : int
        Dimensions of the two parts, in either order.

    Raises
    ------
    ConfigurationError
        If a dimension is below 1.

    Notes
    -----
    D. N. Page, PRL 71, 1291 (1993), conjectured; proved by Foong, Kanno, PRL 72, 1148 (1994) (from memory). The sum is
    a difference of digamma functions. States with a conserved charge have less room, and real ones a little less too.

    Examples
    --------
    >>> round(page_entropy(2, 2), 12)  # 1/3 + 1/4 - 1/4
    0.333333333333
    """
    from scipy.special import digamma  # imported where it is needed: nobody else should wait for it

    m, n = min(m, n), max(m, n)
    if m < 1:
        raise ConfigurationError(f"a dimension must be at least 1, not {m}")
    return float(digamma(m * n + 1.0) - digamma(n + 1.0) - (m - 1) / (2 * n))


def divided_by_page(curves: Curves, states: float = 2.0) -> Curves:
    """Half-chain entropies over Page's value of each size.

    Parameters
    ----------
    curves : Curves
        Entropies in natural units of floor(L/2) of L sites.
    states : float
        States of a site, 2 for spins 1/2 and for hard-core particles.

    Raises
    ------
    InputError
        If a size is no whole number of at least 2, or a mean exceeds the largest possible entropy.
    """
    from driftline.curves import Curve, Curves

    scaled = []
    for curve in curves.curves:
        where = f"size {curve.size:g}"
        sites = round(curve.size)
        if sites != curve.size or sites < 2 or sites * math.log(states) > LARGEST_LOG:
            raise InputError("Page's value needs a number of sites as size, 2 or more", where=where)
        least = int(states) ** (sites // 2)
        largest = math.log(least)
        if (peak := float(curve.mean.max())) > largest * (1 + 1e-9):  # beyond rounding
            problem = (
                f"an entropy of {peak:g} exceeds {sites // 2} ln {states:g} = {largest:g}; give natural units (nats)"
            )
            raise InputError(problem, where=where)
        page = page_entropy(least, int(states) ** (sites - sites // 2))
        covariance = None if curve.covariance is None else curve.covariance / page**2
        scaled.append(
            Curve(curve.size, curve.disorder, curve.mean / page, curve.error / page, covariance, curve.samples)
        )  # fmt: skip
    notes = [*curves.origin.get("notes", ()), "entropies were divided by Page's value of each size"]
    return Curves(scaled, curves.labels, {**curves.origin, "notes": notes})


def _number(known: Observable, text: str | None) -> float | None:
    where = f"observable: {known.name}"
    if text is None:
        if None in known.ergodic.values():
            raise ConfigurationError(f"{where} needs the {known.number}, as in {known.name}=0.5")
        return None
    if not known.number:
        raise ConfigurationError(f"{where} takes no number, but has {text!r}")
    try:
        value = float(text)
    except ValueError as reason:
        raise ConfigurationError(f"{where}: the {known.number} must be a number, not {text!r}") from reason
    if known.name == "occupation" and not 0 < value < 1:
        raise ConfigurationError(f"{where}: the filling must lie between 0 and 1, not at {value:g}")
    if known.name == "entanglement" and not (value == value // 1 and 2 <= value <= 1e6):
        raise ConfigurationError(f"{where}: the states of a site must be a whole number from 2 on, not {value:g}")
    return value


def _choices(known: Observable, given: str) -> str:
    choices = [choice for choice in known.ergodic if choice]
    return suggestion(given, choices) if choices else f"write {known.name} without a colon"
