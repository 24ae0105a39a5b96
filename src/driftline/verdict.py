"""The decision: is there evidence of a transition, of a drift, or of neither?

`transition-supported` needs every one of the conditions in `transition_conditions`; a single failure makes it
`undecided`, with the failure as its reason.  Evidence between scaling forms alone is never enough.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from driftline import numerals
from driftline.cautions import CROSSES, ESTABLISHED, POOR_P, Case, Caution, cautions
from driftline.collapse import Comparison, averaged
from driftline.display import Shown
from driftline.plain import attributes
from driftline.rates import FalseAlarm, nearest
from driftline.scaling.forms import SizeIndependent
from driftline.separation import THRESHOLD

__all__ = ["Case", "Caution", "Verdict", "judge"]

NO_EVIDENCE = "Warning: no evidence of a transition in these data."
FINITE_SIZES = "Finite sizes alone do not decide the thermodynamic limit."
#: Probability of the forms with a critical disorder that `transition-supported` asks for.  Forms whose critical
#: disorder moves contain those in which it stays, so that honest data of a transition seldom reach 0.9: the Occam
#: factor against a shift that is not needed is only the ratio of its prior width to its error.  The other conditions,
#: the separation of the curves on both sides first, keep false alarms away.  The calibration study has none
#: at any value from 0.05 on; this one is as high as the power for nu = 1 at an error of 0.003 allows, which keeps out
#: seven in ten drifts of 0.05 per site, which are too slow to be seen.
SUPPORTED = 0.6
#: A drift seen by the collapse is contradicted by crossings only if these establish a limit; a few crossings rarely do.
CONTRADICTED = ESTABLISHED
LEAST_SIZES = 3  # two sizes have one crossing, which cannot be seen to drift or to stay


@dataclass(frozen=True)
class Verdict(Shown):
    """What the data show.

    Parameters
    ----------
    code : str
        ``transition-supported``, ``drifting``, ``undecided``, ``size-independent`` or ``insufficient-data``.
    statement : str
        Sentences for people; opens with the warning sentence unless a transition is supported.
    reasons : tuple of str
        Why it is not more than it is.
    probability_transition, probability_drift : float or None
        Posterior probabilities of the two hypotheses among the forms fitted.
    warnings : tuple of Caution
    false_alarm : FalseAlarm or None
        Rates of wrong and right verdicts measured on simulated data like these.
    """

    code: str
    statement: str
    reasons: tuple[str, ...]
    probability_transition: float | None
    probability_drift: float | None
    warnings: tuple[Caution, ...] = ()
    false_alarm: FalseAlarm | None = None

    def short_reasons(self) -> list[str]:
        """The reasons; those that repeat a warning are shortened to a pointer to it."""
        codes = [caution.code for caution in self.warnings]
        repeated = [code for code in codes if any(each.startswith(f"{code}:") for each in self.reasons)]
        new = [each for each in self.reasons if not any(each.startswith(f"{code}:") for code in codes)]
        return new + ([f"see below: {', '.join(repeated)}"] if repeated else [])

    def shown(self) -> tuple[str, ...]:
        """Statement, reasons, and the warnings with what to do."""
        return (
            self.statement,
            f"Verdict: {self.code}",
            *(f"- {reason}" for reason in self.short_reasons()),
            *(f"{each.code}: {each.message}. What to do: {each.action}." for each in self.warnings),
        )

    def to_dict(self) -> dict[str, Any]:
        """The object ``verdict`` of `result.json`."""
        known = ("code", "statement", "probability_transition", "probability_drift", "warnings", "false_alarm")
        found = attributes(self, *known)
        return found | {"false_alarm": found["false_alarm"] or {}}


def judge(case: Case) -> Verdict:
    """The verdict on one case."""
    transition, drift = probability_of_transition(case), probability_of_drift(case)
    warnings = cautions(case)
    failed = tuple(reason for holds, reason in transition_conditions(case, transition, warnings) if not holds)
    code, shown = _decide(case, failed, drift)
    opening = "" if code == "transition-supported" else f"{NO_EVIDENCE} "
    rates = nearest(case.curves)
    return Verdict(code, f"{opening}{shown} {FINITE_SIZES}", failed, transition, drift, warnings, rates)


def _decide(case: Case, failed: tuple[str, ...], drift: float | None) -> tuple[str, str]:
    """Code and the sentence that says what the data show."""
    if case.curves.sizes.size < LEAST_SIZES:
        return "insufficient-data", "Two sizes have a single crossing, which cannot be seen to drift or to stay."
    if not failed:
        return "transition-supported", _transition_statement(case)
    if _without_size(case) >= ESTABLISHED:
        return "size-independent", _size_independent_statement(case)
    contradicted = (case.drift.probability_bounded or 0.0) >= CONTRADICTED
    if drift is not None and drift >= ESTABLISHED and not contradicted and _size_matters(case):
        return "drifting", _drift_statement(case, drift)
    return "undecided", "The data neither support a critical disorder nor establish a drift."


def _size_matters(case: Case) -> bool:
    """Whether any dependence on size is resolved; without one, evidence between forms is about their flexibility."""
    return max(abs(case.separation.z_below), abs(case.separation.z_above)) >= THRESHOLD


def probability_of_transition(case: Case) -> float | None:
    """From the evidences of the collapse if rival hypotheses were fitted, else from the laws of the drift."""
    return case.comparison.probability("transition") if _compared(case) else case.drift.probability_bounded


def _compared(case: Case) -> bool:
    """Whether forms of more than one hypothesis were fitted, so that their evidences say something."""
    return case.comparison.probability("transition") is not None


def probability_of_drift(case: Case) -> float | None:
    """Probability that there is no critical disorder at any finite value: it moves on, or there is none at all."""
    transition = probability_of_transition(case)
    return None if transition is None else max(0.0, 1 - transition - _without_size(case))


def _without_size(case: Case) -> float:
    """Probability of the form in which size does nothing; 0 unless it was compared with other hypotheses."""
    if not _compared(case):
        return 0.0
    pairs = zip(case.comparison.fits, case.comparison.probabilities, strict=True)
    return float(sum(p for fit, p in pairs if isinstance(fit.ansatz.form, SizeIndependent)))


def transition_conditions(
    case: Case, probability: float | None, warnings: tuple[Caution, ...]
) -> list[tuple[bool, str]]:
    """Each condition of `transition-supported` with the reason to give if it does not hold."""
    codes = {caution.code: caution for caution in warnings}
    models = "forms with a critical disorder" if _compared(case) else "laws of the crossings with a limit"
    asked = SUPPORTED if _compared(case) else ESTABLISHED  # the study behind the lower one compared forms
    crossing = sum(pair.probability >= CROSSES for pair in case.crossings.adjacent)
    pairs = len(case.crossings.adjacent)
    conditions = [
        (
            probability is not None and probability >= asked,
            "no rival form was fitted, so nothing was compared" if probability is None else
            f"{models} hold {probability:.3f} of the probability; {asked} are asked for",
        ),
        (crossing == pairs, f"{crossing} of {pairs} pairs of neighbouring sizes cross inside the common window"),
        (case.headline is not None, "no form with a critical disorder was fitted"),
        (
            case.headline is None or any(row.smallest_size > case.curves.sizes[0] for row in case.stability),
            "too few sizes or disorders to see whether W_c stays without the smallest size",
        ),
    ]  # fmt: skip
    blocking = (
        "ONE_SIDED", "CROSSING_AT_REFERENCE", "DRIFT_UNBOUNDED", "POOR_FIT", "SIZE_UNSTABLE", "OUTSIDE_RANGE",
        "PRIOR_LIMITED", "SAMPLER_NOT_CONVERGED",
    )  # fmt: skip
    conditions += [(False, f"{code}: {codes[code].message}") for code in blocking if code in codes]
    return conditions


def _transition_statement(case: Case) -> str:
    wc = averaged(case.basis, "W_c")  # the headline; that there is a basis is a condition of this verdict
    return (
        "The data support a transition: curves separate on both sides of a crossing, and forms with a critical "
        f"disorder describe them best, with {case.curves.labels.disorder_symbol}_c in {numerals.bracket(wc)} (95 %)."
        + slowest_drift(case.comparison)
    )


def slowest_drift(comparison: Comparison) -> str:
    """What these data do not exclude: the fastest drift inside the 95 % interval of the linearly drifting forms."""
    moving = [fit for fit in comparison.fits if "linear-drift" in fit.ansatz.name.split(":")]
    if not moving:
        return ""
    shift, sizes = averaged(moving, "D"), moving[0].curves.sizes
    fastest = max(abs(shift.low95), abs(shift.high95)) / float(sizes[-1] - sizes[0])
    return f" A critical disorder that moves by less than {fastest:.2g} per unit of size is not excluded."


def _drift_statement(case: Case, drift: float) -> str:
    rate = case.drift.rate_per_site
    speed = f" by {numerals.median(rate)} per unit of size, {numerals.bracket(rate)} (95 %)" if rate else ""
    models = "forms without a critical disorder" if _compared(case) else "laws of the crossings without a limit"
    return f"The crossover moves with size{speed}; {models} hold {drift:.3f} of the probability."


def _size_independent_statement(case: Case) -> str:
    fits = [fit for fit in case.comparison.fits if isinstance(fit.ansatz.form, SizeIndependent)]
    if max(fit.quality.p_value for fit in fits) >= POOR_P:
        return "The curves of all sizes are the same within their errors."
    return "The form in which size does nothing describes the curves best, but misses them by more than their errors."
