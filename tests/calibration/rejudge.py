"""The verdict that a raw row would get under other thresholds, and the false alarms and power that follow.

The rules are those of `driftline.verdict` and `driftline.cautions`, read off the numbers of a row; a test compares the
two at the thresholds in use.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

from families import FAMILIES
from scipy.special import ndtri

from driftline.cautions import ESTABLISHED, POOR_P, UNSTABLE_P
from driftline.separation import THRESHOLD
from driftline.verdict import CONTRADICTED, SUPPORTED

#: Warnings that stand in the way of `transition-supported` and depend on no threshold varied here.
ALWAYS_BLOCKING = ("OUTSIDE_RANGE", "PRIOR_LIMITED", "SAMPLER_NOT_CONVERGED")
Row = Mapping[str, str]


@dataclass(frozen=True)
class Thresholds:
    """What the verdict asks for.

    Parameters
    ----------
    transition, drift, none : float
        Posterior probability from which each family counts as established.
    unbounded : float
        Probability of the unbounded laws of the crossings from which they forbid a transition.
    contradicted : float
        Probability of the bounded laws from which they contradict a drift.
    resolved : float
        Standard deviations of size dependence on either side.
    """

    transition: float = SUPPORTED
    drift: float = ESTABLISHED
    none: float = ESTABLISHED
    unbounded: float = ESTABLISHED
    contradicted: float = CONTRADICTED
    resolved: float = THRESHOLD


IN_USE = Thresholds()


def number(row: Row, name: str) -> float | None:
    """A column as a number; None where it is empty."""
    return float(row[name]) if row[name] else None


def rejudge(row: Row, thresholds: Thresholds = IN_USE) -> str:
    """Code of the verdict."""
    transition, drift, without = probabilities(row)
    if transition >= thresholds.transition and not _obstacles(row, thresholds):
        return "transition-supported"
    if without >= thresholds.none:
        return "size-independent"
    bounded = number(row, "p_bounded")
    size_matters = max(abs(float(row["z_below"])), abs(float(row["z_above"]))) >= thresholds.resolved
    if drift >= thresholds.drift and (bounded or 0.0) < thresholds.contradicted and size_matters:
        return "drifting"
    return "undecided"


def probabilities(row: Row) -> tuple[float, float, float]:
    """Transition, drift (no critical disorder at any finite value) and size independence."""
    transition, without = float(row["p_transition"]), size_independent(row)
    return transition, max(0.0, 1 - transition - without), without


def size_independent(row: Row) -> float:
    """Probability of the form in which size does nothing: its share of the hypothesis without critical disorder."""
    own, other = float(row["lz_size-independent"]), number(row, "lz_finite-length")
    share = 1.0 if other is None else 1 / (1 + 2.718281828459045 ** min(other - own, 700.0))
    return float(row["p_none"]) * share


def _obstacles(row: Row, thresholds: Thresholds) -> list[str]:
    """What forbids a transition, whatever its probability."""
    z = float(row["z_below"]), float(row["z_above"])
    p_value, bounded = number(row, "p_value"), number(row, "p_bounded")
    found = [code for code in ALWAYS_BLOCKING if code in row["warnings"].split()]
    if z[0] * z[1] >= 0 or min(abs(z[0]), abs(z[1])) < thresholds.resolved:
        found.append("ONE_SIDED")
    if row["crossing"] != row["pairs"]:
        found.append("NO_CROSSING")
    if bounded is not None and bounded <= 1 - thresholds.unbounded:
        found.append("DRIFT_UNBOUNDED")
    if p_value is None or p_value < POOR_P:
        found.append("POOR_FIT")
    if _size_unstable(row):
        found.append("SIZE_UNSTABLE")
    return found


def _size_unstable(row: Row) -> bool:
    """Whether W_c moves without the smallest size, or could not be seen not to."""
    worst, refits = number(row, "size_z"), len(row["basis"].split())  # one refit without the smallest size for each
    return worst is None or abs(worst) > float(ndtri(1 - UNSTABLE_P / (2 * refits)))


LADDER = (0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.98, 0.99)


@dataclass(frozen=True)
class Rates:
    """Counts at one setting of the thresholds: (how many, of how many)."""

    false_transition: tuple[int, int]
    false_drift: tuple[int, int]
    power_transition: tuple[int, int]
    power_drift: tuple[int, int]
    slow_transition: tuple[int, int]  # a transition seen where there is a drift too slow for these errors


def rates(rows: Iterable[Row], thresholds: Thresholds) -> Rates:
    """False alarms and power of all rows together."""
    kinds: dict[str, list[str]] = {"transition": [], "drift": [], "finite": [], "none": [], "slow": []}
    for row in rows:
        kinds[FAMILIES[row["family"]].kind].append(rejudge(row, thresholds))
    no_transition = kinds["drift"] + kinds["finite"] + kinds["none"]
    real, drifts = kinds["transition"], kinds["drift"]
    return Rates(
        (no_transition.count("transition-supported"), len(no_transition)),
        (real.count("drifting"), len(real)),
        (real.count("transition-supported"), len(real)),
        (drifts.count("drifting"), len(drifts)),
        (kinds["slow"].count("transition-supported"), len(kinds["slow"])),
    )


def ladder(rows: Sequence[Row], *names: str, base: Thresholds = IN_USE) -> dict[float, Rates]:
    """Rates as the thresholds called `names` climb together, all others being those of `base`."""
    return {step: rates(rows, replace(base, **dict.fromkeys(names, step))) for step in LADDER}
