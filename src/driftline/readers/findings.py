"""What raw realisations showed that a reader must know: one rule each, with numbers and a remedy.

`inspect` prints them, and `driftline.cautions` puts them among the warnings of an analysis. They come from
``Curves.origin["realisations"]``, so curves from averaged data have none.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from driftline.curves import Curves
from driftline.wording import listed

Sizes = Sequence[Mapping[str, Any]]

#: A correlation this many standard errors from zero is no chance; for independent values, once in 16 000 sizes.
CORRELATED = 4.0
#: The same for values that follow one another, whose lists are longer; one-sided, once in 3 million sizes.
SERIAL = 5.0
#: Excess kurtosis from which tails are called heavy (3 and 6 are those of Laplace's and the exponential distribution).
HEAVY = 10.0
#: Relative uncertainty of an error from which heavy tails matter. Below it, 95 % intervals of means of log-normal and
#: power-law distributed values held the truth in 92 % of the cases or more, above it in 64 to 92 %.
DOUBTFUL = 0.2
#: Realisations a point below which a covariance is too uncertain for the intervals of a collapse.
FEW = 4.0


@dataclass(frozen=True)
class Finding:
    """What was found, what to do, and the numbers behind it."""

    code: str
    message: str
    action: str
    numbers: Mapping[str, float]

    @property
    def sentence(self) -> str:
        """Message and action as text."""
        return f"{self.message[0].upper()}{self.message[1:]}: {self.action}."


def raw_findings(curves: Curves) -> tuple[Finding, ...]:
    """All findings about the sizes that are in `curves`, in the order of the rules."""
    present = set(curves.sizes.tolist())
    sizes = [size for size in curves.origin.get("realisations", ()) if size["size"] in present]
    return tuple(finding for rule in RULES for finding in rule(sizes))


def undeclared_correlation(sizes: Sizes) -> Iterator[Finding]:
    """Values at neighbouring disorders are correlated, but nothing said that they share realisations."""
    found = [s for s in sizes if not s["shared"] and abs(s["correlation_z"] or 0.0) > CORRELATED]
    if found:
        worst = max(found, key=lambda size: abs(size["correlation_z"]))
        yield Finding(
            "CORRELATION_UNDECLARED",
            f"values at neighbouring disorders correlate by {worst['correlation']:.2f} at size {worst['size']:g} "
            f"({abs(worst['correlation_z']):.0f} standard errors from zero), so the same disorder realisations were "
            f"used at several disorders, but the points of size {_names(found)} count as independent",
            "give realisation labels, or declare the values paired (`--paired`); otherwise all intervals are wrong",
            {"correlation": worst["correlation"], "standard_errors": worst["correlation_z"]},
        )


def states_as_realisations(sizes: Sizes) -> Iterator[Finding]:
    """Values that follow one another are correlated, as states of one realisation are."""
    found = [s for s in sizes if (s["serial_z"] or 0.0) > SERIAL]
    if found:
        worst = max(found, key=lambda size: float(size["serial_z"]))
        yield Finding(
            "VALUES_NOT_INDEPENDENT",
            f"values that follow one another in the data correlate by {worst['serial']:.2f} at size {worst['size']:g} "
            f"({worst['serial_z']:.0f} standard errors from zero), so those of size {_names(found)} are no independent "
            "realisations, and their errors are too small",
            "give every value the label of its realisation, so that states of one realisation are averaged first",
            {"correlation": worst["serial"], "standard_errors": worst["serial_z"]},
        )


def repeats(sizes: Sizes) -> Iterator[Finding]:
    """Values stood in the data twice."""
    found = [s for s in sizes if s["repeats"]]
    if found:
        total = sum(size["repeats"] for size in found)
        yield Finding(
            "REALISATIONS_REPEATED",
            f"{total} value{'s' * (total > 1)} of size {_names(found)} stood in the data twice and {_were(total)} "
            "counted once",
            "their places stand in the notes of `inspect`; check how the runs were restarted, and that other "
            "realisations got seeds of their own",
            {"repeats": float(total)},
        )


def heavy_tails(sizes: Sizes) -> Iterator[Finding]:
    """A few realisations decide the mean and its error."""
    found = [s for s in sizes if (s["kurtosis"] or 0.0) > HEAVY and s["error_doubt"] > DOUBTFUL]
    if found:
        worst = max(found, key=lambda size: size["error_doubt"])
        yield Finding(
            "HEAVY_TAILS",
            f"a few realisations decide the mean at size {_names(found)}; at size {worst['size']:g}, disorder "
            f"{worst['kurtosis_at']:g} the excess kurtosis is {worst['kurtosis']:.0f} and the error uncertain by "
            f"{100 * worst['error_doubt']:.0f} %",
            "take the median or the log-mean (`--average median`, `--average log-mean`), or many more realisations",
            {"kurtosis": worst["kurtosis"], "error_uncertainty": worst["error_doubt"]},
        )


def few_realisations(sizes: Sizes) -> Iterator[Finding]:
    """A covariance from hardly more realisations than points."""
    found = [s for s in sizes if s["shared"] and s["realisations"] < FEW * s["points"]]
    if found:
        worst = min(found, key=lambda size: size["realisations"] / size["points"])
        yield Finding(
            "FEW_REALISATIONS",
            f"the covariance of the {worst['points']} points of size {worst['size']:g} rests on "
            f"{worst['realisations']} realisations (size {_names(found)} in all)",
            f"run at least {FEW:g} realisations a point; until then the intervals of a collapse may be too narrow",
            {"realisations": float(worst["realisations"]), "points": float(worst["points"])},
        )


RULES: tuple[Callable[[Sizes], Iterator[Finding]], ...] = (
    undeclared_correlation,
    states_as_realisations,
    repeats,
    heavy_tails,
    few_realisations,
)


def _names(sizes: Sizes) -> str:
    return listed(f"{size['size']:g}" for size in sizes)


def _were(count: int) -> str:
    return "were" if count > 1 else "was"
