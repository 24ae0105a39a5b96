"""The tables that people read, in the terminal and in the page: text, rounded to what the errors carry.

A result that stands by itself makes its own table; those of the whole analysis are made here.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeAlias

from driftline import numerals
from driftline.blocks import Table as Table
from driftline.display import symbol

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.partial import CollapseStudy, CrossingStudy

    # what a table needs, whether it comes from the whole job or from a part of it
    Located: TypeAlias = Analysis | CrossingStudy
    Fitted: TypeAlias = Analysis | CollapseStudy


def disorder(analysis: Located | Fitted) -> str:
    """Symbol of the disorder as plain text."""
    return symbol(analysis.curves.labels.disorder_symbol)


def reasons(analysis: Analysis) -> list[str]:
    """The reasons of the verdict; those that repeat a warning are shortened to a pointer, for it is given below."""
    return analysis.verdict.short_reasons()


def crossover(analysis: Analysis) -> Table:
    """Crossover disorder and exponent with both intervals and the systematic part."""
    return analysis.crossover_table()


def collapse(analysis: Fitted) -> Table:
    """One row for each ansatz, the most probable first."""
    return analysis.comparison.table()


def checks(analysis: Fitted) -> Table:
    """One row for each ansatz: residuals, how well it predicts the largest size, and the health of the sampler."""
    rows = tuple(
        (
            fit.ansatz.name,
            numerals.plus_minus(fit.log_evidence, fit.log_evidence_error),
            numerals.fixed(fit.quality.noise_scale, 2),
            "{:+.1f} at {:g}, {:g}".format(fit.quality.max_residual, *fit.quality.max_residual_at),
            numerals.fixed(fit.held_out.chi2_per_point if fit.held_out else None, 2),
            numerals.fixed(fit.held_out.log_score if fit.held_out else None, 1),
            f"{fit.sampler.effective_samples:.0f}{'' if fit.sampler.converged else ', not converged'}",
        )
        for fit in sorted(analysis.comparison.fits, key=lambda fit: -fit.log_evidence)
    )
    columns = ("ansatz", "ln Z", "noise", f"worst at L, {disorder(analysis)}", "held-out", "score", "draws")
    return Table("Checks", columns, rows)


def crossings(analysis: Located, *, every: bool = False) -> Table:
    """One row for each pair of adjacent sizes, or for `every` pair."""
    return analysis.crossings.table(every=every)


def drift(analysis: Located) -> Table:
    """One row for each drift law, the most probable first."""
    return analysis.drift.table()


def drift_sentences(analysis: Located) -> list[str]:
    """What the drift says beyond its table."""
    return analysis.drift.sentences()


def stability(analysis: Analysis) -> Table:
    """One row for each refit with fewer sizes or a narrower window."""
    rows = tuple(
        (
            row.ansatz,
            f"{row.smallest_size:g}",
            f"{row.window[0]:g} to {row.window[1]:g}",
            numerals.short(row.disorder),
            numerals.bracket(row.disorder),
            numerals.probability(row.p_value),
        )
        for row in analysis.stability
    )
    name = disorder(analysis)
    return Table("Stability", ("ansatz", "smallest size", f"{name} range", f"{name}_c", "95 %", "p"), rows)


def costs(analysis: Fitted) -> Table:
    """One row for each ansatz: the cost functions of the literature, each with its multiple of the noise floor."""
    rows = tuple(
        (name, *(f"{numerals.significant(cost.value)} ({numerals.fixed(cost.ratio, 2)})" for cost in found))
        for name, found in analysis.costs.items()
    )
    names = next((tuple(cost.name for cost in found) for found in analysis.costs.values()), ())
    heading = "Cost functions of the literature, for comparison only (in brackets: multiple of what noise alone gives)"
    return Table(heading, ("ansatz", *names), rows)


def data(analysis: Located | Fitted) -> str:
    """One sentence on what was analysed and how to repeat it."""
    curves, labels = analysis.curves, analysis.curves.labels
    low, high = curves.disorder_range
    sizes = ", ".join(f"{size:g}" for size in curves.sizes)
    unit = f" {labels.disorder_unit}" if labels.disorder_unit else ""
    quick = ", quick" if analysis.settings.quick else ""
    return (
        f"{labels.observable} at sizes {sizes}: {curves.points} points, {disorder(analysis)} from {low:g} to "
        f"{high:g}{unit}; seed {analysis.settings.seed}{quick}."
    )
