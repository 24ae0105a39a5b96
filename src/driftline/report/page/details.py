"""Tables that only the page has room for: priors and parameters, sampler health, held-out size, sets of priors."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from driftline import numerals
from driftline.blocks import Table
from driftline.report.rows import disorder
from driftline.scaling.likelihood import CORRECTION_SD, NUISANCE

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit


def by_evidence(analysis: Analysis) -> list[CollapseFit]:
    """The fits, the one of highest evidence first."""
    return sorted(analysis.comparison.fits, key=lambda fit: -fit.log_evidence)


def priors(analysis: Analysis) -> Table:
    """One row for each prior, in the order in which the most probable forms bring them."""
    fits = by_evidence(analysis)
    users: dict[tuple[str, str, str], int] = {}
    for fit in fits:
        for each in (*fit.ansatz.parameters, *NUISANCE):
            row = each.name, each.meaning, each.prior.describe()
            users[row] = users.get(row, 0) + 1
    rows = tuple((*row, f"{count} of {len(fits)}") for row, count in users.items())
    return Table("Priors", ("parameter", "meaning", "prior", "ansätze with it"), rows)


def posteriors(analysis: Analysis) -> Table:
    """One row for each parameter of each ansatz: what the data made of its prior."""
    rows = tuple(row for fit in by_evidence(analysis) for row in _parameters(fit))
    columns = ("ansatz", "parameter", "value", "68 %", "95 %", "set by the prior")
    return Table("Parameters of every ansatz", columns, rows)


def _parameters(fit: CollapseFit) -> Iterator[tuple[str, ...]]:
    for each in (*fit.ansatz.parameters, *NUISANCE):
        found = fit.parameters.get(each.name)
        intervals = numerals.bracket(found, 68), numerals.bracket(found)
        limited = "yes" if each.name in fit.prior_limited else "no"
        yield (fit.ansatz.name, each.name, numerals.short(found), *intervals, limited)


#: What the table of priors does not hold, in sentences.
PRIORS_BESIDE = (
    "tau, the roughness, and s, the factor on the errors, belong to every ansatz. Of the correction G(x), constant and "
    f"linear part are Gaussian with a standard deviation of {CORRECTION_SD:g} of the spread at the smallest size. The "
    "coefficients of the scaling function and of G are integrated out exactly. Every hypothesis has the same prior "
    "weight, split equally among its ansätze."
)


def sampler(analysis: Analysis) -> Table:
    """One row for each ansatz: how the numbers were drawn, and whether they can be trusted."""
    rows = tuple(
        (
            fit.ansatz.name,
            fit.sampler.method,
            f"{fit.sampler.effective_samples:.0f}",
            numerals.fixed(fit.sampler.autocorrelation, 0),
            "yes" if fit.sampler.converged else "no",
            numerals.fixed(fit.log_evidence_error, 3),
            fit.sampler.note or numerals.MISSING,
        )
        for fit in by_evidence(analysis)
    )
    columns = ("ansatz", "method", "effective draws", "autocorrelation", "converged", "error of ln Z", "note")
    return Table("Sampler health", columns, rows)


def sampler_sentence(analysis: Analysis) -> str:
    """The table of sampler health in one sentence."""
    failed = [fit.ansatz.name for fit in analysis.comparison.fits if not fit.sampler.converged]
    if failed:
        return f"Do not rely on the numbers of {', '.join(failed)}: the sampler did not converge, see the note."
    return f"All {len(analysis.comparison.fits)} fits converged."


def held_out(analysis: Analysis) -> Table:
    """One row for each ansatz that predicted the largest size from the smaller ones, the best prediction first."""
    found = [(fit, fit.held_out) for fit in analysis.comparison.fits if fit.held_out is not None]
    found.sort(key=lambda pair: -pair[1].log_score)
    best = found[0][1].log_score if found else 0.0
    rows = tuple(
        (
            fit.ansatz.name,
            f"{test.size:g}",
            numerals.fixed(test.log_score - best, 1),
            numerals.fixed(test.log_score_error, 2),
            numerals.fixed(test.chi2_per_point, 2),
        )
        for fit, test in found
    )
    columns = ("ansatz", "size", "ln p", "error", "chi2/point")
    return Table("Largest size predicted from the smaller ones, ln p relative to the best", columns, rows)


def sensitivity(analysis: Analysis) -> Table:
    """One row for each ansatz with a critical disorder and each other set of priors."""
    rows = tuple(
        (
            fit.ansatz.name,
            shift.name,
            numerals.fixed(shift.log_evidence_shift, 2),
            numerals.short(shift.disorder),
            f"{shift.effective:.0f}",
        )
        for fit in by_evidence(analysis)
        for shift in fit.prior_sensitivity
        if shift.disorder is not None
    )
    columns = ("ansatz", "set of priors", "change of ln Z", f"{disorder(analysis)}_c", "effective draws")
    return Table("The same under other priors", columns, rows)
