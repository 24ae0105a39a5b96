"""When a warning is raised: one small rule for each code, with the numbers behind it and what to do.

Adding a warning is one function under `@rule` here, or a rule in `driftline.readers.findings` if it is about the raw
realisations that the curves were made of.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from scipy.special import ndtri

from driftline import numerals
from driftline.collapse import CollapseFit, Comparison
from driftline.crossings import Crossings
from driftline.curves import Curves
from driftline.drift import Drift
from driftline.plain import plain
from driftline.readers.findings import raw_findings
from driftline.separation import Separation
from driftline.stability import StabilityRow

#: A pair of sizes counts as crossing from this probability on.
CROSSES = 0.5
#: Posterior probability from which a family counts as established (design decision, to be calibrated).
ESTABLISHED = 0.95
POOR_P = 0.01
UNSTABLE_P = 0.01
MATTERS = 0.01  # posterior probability from which a form can move a headline or a verdict
UNDERSTATED_FROM = 1.1
ASSUMED_INDEPENDENT_BELOW = 0.85
PLATEAU_SIGMAS = 5.0
PLATEAU_SHARE = 0.05  # of the distance between the two reference values
CLOSE_EVIDENCE = (
    3.0  # difference of log evidences below which it is not strong (Kass, Raftery, J. Am. Stat. Assoc. 90, 773 (1995))
)
TWO_BLOCKS = 0.4234  # gap ratio of two unresolved orthogonal blocks (Giraud et al., PRX 12, 011006 (2022), from memory)
OUTSIDE_SHARE = 0.05
ENOUGH_SIZES = 4  # three sizes give two neighbouring crossings: a line through them leaves nothing to check it with


@dataclass(frozen=True)
class Caution:
    """One warning: what was found, with its numbers, and what to do about it."""

    code: str
    message: str
    action: str
    numbers: dict[str, float] = field(default_factory=dict)

    def to_dict(self) -> dict[str, Any]:
        """This warning as `result.json` holds it: finding and remedy in one message."""
        message = f"{self.message}. What to do: {self.action}."
        return {"code": self.code, "message": message, "numbers": plain(self.numbers)}


@dataclass(frozen=True, eq=False)
class Case:
    """All that is known when the verdict is made."""

    curves: Curves
    crossings: Crossings
    drift: Drift
    separation: Separation
    comparison: Comparison
    basis: tuple[CollapseFit, ...]
    stability: tuple[StabilityRow, ...]

    @property
    def headline(self) -> CollapseFit | None:
        """The fit of the basis with the highest evidence."""
        return max(self.basis, key=lambda fit: fit.log_evidence, default=None)


Rule = Callable[[Case], Caution | None]
RULES: list[Rule] = []


def rule(function: Rule) -> Rule:
    """Add a rule to the registry; rules are tried in the order of this file."""
    RULES.append(function)
    return function


def cautions(case: Case) -> tuple[Caution, ...]:
    """All warnings that apply, in the order of the rules, then what the raw realisations showed."""
    found = tuple(caution for caution in (check(case) for check in RULES) if caution is not None)
    raw = raw_findings(case.curves)
    return found + tuple(Caution(f.code, f.message, f.action, dict(f.numbers)) for f in raw)


@rule
def few_sizes(case: Case) -> Caution | None:
    """Too few sizes to tell a drift from its curvature."""
    count = case.curves.sizes.size
    if count >= ENOUGH_SIZES:
        return None
    return Caution(
        "FEW_SIZES",
        f"only {count} sizes, so at most {count - 1} crossing{'s' * (count > 2)} of neighbouring sizes",
        f"add sizes; {ENOUGH_SIZES} are the least from which a drift and its law can be told apart",
        {"sizes": count},
    )


@rule
def no_crossing(case: Case) -> Caution | None:
    """No neighbouring sizes cross inside the common window."""
    best = max(case.crossings.adjacent, key=lambda pair: pair.probability)
    if best.probability >= CROSSES:
        return None
    low, high = case.crossings.window
    return Caution(
        "NO_CROSSING",
        f"no curves of neighbouring sizes cross between {low:g} and {high:g}; the likeliest pair, "
        f"{best.sizes[0]:g} and {best.sizes[1]:g}, does so with probability {best.probability:.2g}",
        "widen the disorder range if the curves approach each other at its end, else treat the data as a crossover "
        "without a critical point",
        {"highest_probability": best.probability},
    )


@rule
def crossing_at_reference(case: Case) -> Caution | None:
    """One side of the crossing is flat in size and sits on a reference value."""
    test = case.separation
    if test.separated or not test.flat_at_reference:
        return None
    return Caution(
        "CROSSING_AT_REFERENCE",
        f"{_flat_side(test)} the curves of all sizes lie on a reference value within their errors, so the crossing "
        f"there is not a crossing of resolved curves (size dependence {_sigmas(test)})",
        "reduce the errors on that side, or add larger sizes, until the curves separate; coinciding curves do not "
        "show a transition",
        {"z_below": test.z_below, "z_above": test.z_above},
    )


@rule
def one_sided(case: Case) -> Caution | None:
    """Size dependence of opposite sign is not resolved on both sides."""
    test = case.separation
    if test.separated or test.flat_at_reference:
        return None
    return Caution(
        "ONE_SIDED",
        f"size dependence of opposite sign is not resolved on both sides of a crossing ({_sigmas(test)})",
        "take more realisations or larger sizes where the curves coincide; a transition needs three standard "
        "deviations on both sides",
        {"z_below": test.z_below, "z_above": test.z_above},
    )


def _flat_side(test: Separation) -> str:
    return {"below": "below the crossing", "above": "above the crossing"}.get(test.flat_side or "", "on one side")


def _sigmas(test: Separation) -> str:
    return f"{test.z_below:+.1f} standard deviations below and {test.z_above:+.1f} above"


@rule
def drift_unbounded(case: Case) -> Caution | None:
    """Crossings move away with size under every law that is likely."""
    p = case.drift.probability_bounded
    if p is None or p > 1 - ESTABLISHED:
        return None
    rate = case.drift.rate_per_site
    speed = f" by {numerals.median(rate)} per unit of size" if rate else ""
    return Caution(
        "DRIFT_UNBOUNDED",
        f"the crossings move with size{speed} and laws without a limit hold {1 - p:.3f} of the probability",
        "do not quote a critical disorder; report the drift, and extend the sizes to see whether it bends",
        {"probability_bounded": p},
    )


@rule
def drift_unresolved(case: Case) -> Caution | None:
    """The crossings alone do not tell a limit from unbounded growth."""
    p = case.drift.probability_bounded
    if p is None or not 1 - ESTABLISHED < p < ESTABLISHED:
        return None
    size = case.drift.deciding_size
    where = (
        f"the two best laws differ by three errors from size {size:.0f} on" if size else "no size tells them apart soon"
    )
    return Caution(
        "DRIFT_UNRESOLVED",
        f"the crossings alone give laws with a limit a probability of {p:.2f}",
        f"{where}; smaller errors at the crossings of the largest sizes help first",
        {"probability_bounded": p, **({"deciding_size": size} if size else {})},
    )


@rule
def poor_fit(case: Case) -> Caution | None:
    """The form behind the headline does not describe the data."""
    fit = case.headline
    if fit is None or fit.quality.p_value >= POOR_P:
        return None
    size, disorder = fit.quality.max_residual_at
    return Caution(
        "POOR_FIT",
        f"{fit.ansatz.name} misses the data: p = {fit.quality.p_value:.2g}, chi2/dof = {fit.quality.chi2_per_dof:.2f}, "
        f"worst point {fit.quality.max_residual:+.1f} errors at size {size:g}, disorder {disorder:g}",
        "narrow the disorder window, drop the smallest size, or check the errors (they may be too small)",
        {"p_value": fit.quality.p_value, "chi2_per_dof": fit.quality.chi2_per_dof},
    )


@rule
def size_unstable(case: Case) -> Caution | None:
    """W_c moves when the smallest size is dropped."""
    row = _worst(case, sizes=True)
    return (
        None
        if row is None
        else _unstable(
            case,
            row,
            "SIZE_UNSTABLE",
            f"without sizes below {row.smallest_size:g}",
            "the smallest sizes are outside the scaling regime; leave them out (--smallest-size) and add larger ones",
        )
    )


@rule
def window_unstable(case: Case) -> Caution | None:
    """W_c moves when the disorder window is narrowed."""
    row = _worst(case, sizes=False)
    return (
        None
        if row is None
        else _unstable(
            case,
            row,
            "WINDOW_UNSTABLE",
            f"with disorders from {row.window[0]:.4g} to {row.window[1]:.4g} only",
            "fit a window around the crossing (--window), where the scaling form holds",
        )
    )


def _unstable(case: Case, row: StabilityRow, code: str, cut: str, action: str) -> Caution:
    full = case.comparison[row.ansatz].parameters["W_c"]
    shift, significance = row.shift(full), row.significance(full)
    message = f"{cut}, W_c of {row.ansatz} moves by {shift:+.3g}, {abs(significance):.1f} times the expected scatter"
    return Caution(code, message, action, {"shift": shift, "significance": significance})


def _worst(case: Case, *, sizes: bool) -> StabilityRow | None:
    """The most significant unstable refit with only the sizes, or only the window, cut; None if all are stable."""
    smallest, full = case.curves.sizes[0], case.curves.disorder_range
    rows = [
        row for row in case.stability if (row.smallest_size > smallest) == sizes and (row.window != full) == (not sizes)
    ]

    def strength(row: StabilityRow) -> float:
        return abs(row.significance(case.comparison[row.ansatz].parameters["W_c"]))

    worst = max(rows, key=strength, default=None)
    # the more refits, the larger the largest shift by chance (Bonferroni)
    return worst if worst is not None and strength(worst) > float(ndtri(1 - UNSTABLE_P / (2 * len(rows)))) else None


@rule
def outside_range(case: Case) -> Caution | None:
    """The critical disorder may lie where nothing was measured."""
    fit = case.headline
    if fit is None:
        return None
    low, high = case.curves.disorder_range
    draws = fit.draws("W_c")
    share = float(np.mean((draws < low) | (draws > high)))
    if share <= OUTSIDE_SHARE:
        return None
    interval = fit.parameters["W_c"]
    return Caution(
        "OUTSIDE_RANGE",
        f"W_c in {numerals.bracket(interval)} (95 %) reaches beyond the measured disorders {low:g} to {high:g} "
        f"with probability {share:.2f}",
        "measure beyond that end before quoting a critical disorder",
        {"probability_outside": share},
    )


@rule
def prior_limited(case: Case) -> Caution | None:
    """W_c or nu of the headline is set by its prior."""
    fit = case.headline
    named = [name for name in ("W_c", "nu") if fit is not None and name in fit.prior_limited]
    if fit is None or not named:
        return None
    return Caution(
        "PRIOR_LIMITED",
        f"{' and '.join(named)} of {fit.ansatz.name} {'are' if len(named) > 1 else 'is'} known hardly better than "
        "before the data",
        "do not quote a value; more sizes or smaller errors are needed",
        {name: fit.parameters[name].sd for name in named},
    )


@rule
def exponent_bound(case: Case) -> Caution | None:
    """nu lies below the bound for this kind of disorder."""
    fit, bound = case.headline, exponent_limit(case.curves)
    if fit is None or bound is None or "nu" not in fit.names:
        return None
    limit, source = bound
    share = float(np.mean(fit.draws("nu") < limit))
    if share < ESTABLISHED:
        return None
    return Caution(
        "EXPONENT_BOUND",
        f"nu = {numerals.short(fit.parameters['nu'])} lies below the bound {limit:.3g} for "
        f"{case.curves.labels.disorder_kind} disorder in d = {case.curves.labels.dimension:g} ({source}) "
        f"with probability {share:.3f}",
        "read the exponent as pre-asymptotic: these sizes do not show the critical behaviour of the infinite system",
        {"nu": fit.parameters["nu"].median, "bound": limit, "probability": share},
    )


def exponent_limit(curves: Curves) -> tuple[float, str] | None:
    """Lower bound on nu with its source; None where none is known.

    Chayes, Chayes, Fisher, Spencer, PRL 57, 2999 (1986); Luck, Europhys. Lett. 24, 359 (1993).
    """
    d = curves.labels.dimension
    if d is None or curves.labels.disorder_kind == "none":
        return None
    if curves.labels.disorder_kind == "quenched":
        return 2 / d, "Chayes et al. 1986"
    return 1 / d, "Luck 1993"


@rule
def sampler_not_converged(case: Case) -> Caution | None:
    """The sampler of a form that matters did not reach the length it needs.

    A form that the data exclude by far often has an awkward posterior; unless it is in the headline, its numbers enter
    nothing.
    """
    pairs = zip(case.comparison.fits, case.comparison.probabilities, strict=True)
    bad: Sequence[CollapseFit] = [
        fit for fit, p in pairs if not fit.sampler.converged and (p >= MATTERS or fit in case.basis)
    ]
    if not bad:
        return None
    named = "; ".join(f"{fit.ansatz.name}: {fit.sampler.note}" for fit in bad)
    return Caution(
        "SAMPLER_NOT_CONVERGED",
        f"the numbers of these fits are not reliable: {named}",
        "run again with another seed; if it stays, the posterior is badly shaped: narrow the window or leave this "
        "ansatz out",
        {fit.ansatz.name: fit.sampler.effective_samples for fit in bad},
    )


@rule
def errors_understated(case: Case) -> Caution | None:
    """Every form finds the points to scatter more than their errors."""
    scale = min((fit.parameters["s"] for fit in case.comparison.fits), key=lambda s: s.median)
    if scale.low95 <= UNDERSTATED_FROM:
        return None
    return Caution(
        "ERRORS_UNDERSTATED",
        f"the points scatter about every form by {numerals.short(scale)} times their errors",
        "check that the errors are standard errors over independent realisations (eigenstates of one realisation are "
        "not independent), and that the forms can describe these data at all",
        {"noise_scale": scale.median},
    )


@rule
def errors_assumed_independent(case: Case) -> Caution | None:
    """Points scatter less than their errors, as points that share realisations do."""
    fit = max(case.comparison.fits, key=lambda each: each.log_evidence)
    scale = fit.parameters["s"]
    if case.curves.correlated or scale.high95 >= ASSUMED_INDEPENDENT_BELOW:
        return None
    return Caution(
        "ERRORS_ASSUMED_INDEPENDENT",
        f"the points scatter about {fit.ansatz.name} by only {numerals.short(scale)} times their errors, as they do "
        "when the same disorder realisations were used at several disorders",
        "give the covariance of the points (HDF5); treated as independent, such points give wrong intervals",
        {"noise_scale": scale.median},
    )


@rule
def plateau_mismatch(case: Case) -> Caution | None:
    """At the weakest disorder the curves agree with each other but not with the ergodic value."""
    labels = case.curves.labels
    if labels.ergodic_value is None:
        return None
    first, last = case.curves.curves[-2], case.curves.curves[-1]
    value = (first.mean[0] / first.error[0] ** 2 + last.mean[0] / last.error[0] ** 2) / (
        first.error[0] ** -2 + last.error[0] ** -2
    )
    error = float((first.error[0] ** -2 + last.error[0] ** -2) ** -0.5)
    apart = abs(first.mean[0] - last.mean[0]) / float(np.hypot(first.error[0], last.error[0]))
    other = labels.localised_value
    distance = np.inf if other is None else abs(labels.ergodic_value - other)
    off = abs(value - labels.ergodic_value)
    if apart > 2 or off < PLATEAU_SIGMAS * error or off < PLATEAU_SHARE * distance:
        return None
    name = labels.observable.lower()  # "gap-ratio", "mean gap ratio"
    blocks = "gap" in name and "ratio" in name and abs(value - TWO_BLOCKS) < PLATEAU_SIGMAS * error
    return Caution(
        "PLATEAU_MISMATCH",
        f"at the weakest disorder the two largest sizes agree on {numerals.plus_minus(value, error)}, not on the "
        f"ergodic value {labels.ergodic_value:g}"
        + (", but on that of two unresolved symmetry blocks" if blocks else ""),
        "resolve the symmetries of the model, or correct the reference value"
        if blocks
        else "check the reference value and the symmetries, or measure at weaker disorder",
        {"plateau": float(value), "ergodic_value": labels.ergodic_value},
    )


@rule
def evidence_close(case: Case) -> Caution | None:
    """The best forms of two hypotheses are about equally good."""
    best: dict[str, CollapseFit] = {}
    for fit in sorted(case.comparison.fits, key=lambda each: each.log_evidence):
        best[fit.ansatz.hypothesis] = fit
    ranked = sorted(best.values(), key=lambda each: -each.log_evidence)
    if len(ranked) < 2 or ranked[0].log_evidence - ranked[1].log_evidence >= CLOSE_EVIDENCE:
        return None
    gap = ranked[0].log_evidence - ranked[1].log_evidence
    return Caution(
        "EVIDENCE_CLOSE",
        f"{ranked[0].ansatz.name} ({ranked[0].ansatz.hypothesis}) and {ranked[1].ansatz.name} "
        f"({ranked[1].ansatz.hypothesis}) differ by only {gap:.1f} in log evidence",
        "do not decide between them on these data; larger sizes tell them apart sooner than smaller errors",
        {"log_evidence_difference": gap},
    )
