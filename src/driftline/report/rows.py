"""Rows of the tables that people read, in the terminal and in the page: text, rounded to what the errors carry."""

from __future__ import annotations

from functools import partial
from typing import TYPE_CHECKING

from driftline import numerals
from driftline.drift import limit_text
from driftline.report.blocks import Table as Table

if TYPE_CHECKING:
    from driftline.analysis import Analysis


def symbol(text: str) -> str:
    """A mathtext symbol as plain text.

    Examples
    --------
    >>> symbol(r"\\\\langle r\\\\rangle"), symbol(r"S_{\\\\mathrm{half}}")
    ('<r>', 'S_half')
    """
    for mathtext, plain in ((r"\langle", "<"), (r"\rangle", ">"), (r"\mathrm", ""), (r"\,", " "), (r"\overline", "")):
        text = text.replace(mathtext, plain)
    for character in "\\{}$":
        text = text.replace(character, "")
    return text.replace("< ", "<").replace(" >", ">").strip()


def disorder(analysis: Analysis) -> str:
    """Symbol of the disorder as plain text."""
    return symbol(analysis.curves.labels.disorder_symbol)


def reasons(analysis: Analysis) -> list[str]:
    """The reasons of the verdict; those that repeat a warning are shortened to a pointer, for it is given below."""
    codes = [caution.code for caution in analysis.verdict.warnings]
    repeated = [code for code in codes if any(each.startswith(f"{code}:") for each in analysis.verdict.reasons)]
    new = [each for each in analysis.verdict.reasons if not any(each.startswith(f"{code}:") for code in codes)]
    return new + ([f"see below: {', '.join(repeated)}"] if repeated else [])


_VALUE_AND_LIMITS = (numerals.short, partial(numerals.bracket, level=68), numerals.bracket)


def crossover(analysis: Analysis) -> Table:
    """Crossover disorder and exponent with both intervals and the systematic part."""
    found = analysis.crossover
    columns = ("quantity", "value", "68 %", "95 %", "systematic")
    if found is None:
        return Table("Crossover", columns, ())
    unit = analysis.curves.labels.disorder_unit
    rows = (
        (
            f"{disorder(analysis)}_c" + (f" ({unit})" if unit else ""),
            *(write(found.disorder) for write in _VALUE_AND_LIMITS),
            systematic(analysis),
        ),
        (
            "nu",
            numerals.short(found.nu),
            numerals.bracket(found.nu, 68),
            numerals.bracket(found.nu, 95),
            numerals.MISSING,
        ),
    )
    return Table(f"Crossover, from {' and '.join(found.basis)}", columns, rows)


def systematic(analysis: Analysis) -> str:
    """Systematic part of the crossover disorder, to the digits of the statistical one."""
    found = analysis.crossover
    if found is None or found.systematic is None:
        return numerals.MISSING
    return "+-" + numerals.rounded(found.systematic, found.disorder.sd)


def collapse(analysis: Analysis) -> Table:
    """One row for each ansatz, the most probable first."""
    fits = analysis.comparison.fits
    best = max(fit.log_evidence for fit in fits)
    order = sorted(range(len(fits)), key=lambda index: -fits[index].log_evidence)
    rows = tuple(
        (
            fits[index].ansatz.name,
            numerals.fixed(fits[index].log_evidence - best, 1),
            numerals.probability(analysis.comparison.probabilities[index]),
            numerals.short(fits[index].parameters.get("W_c")),
            numerals.short(fits[index].parameters.get("nu")),
            numerals.fixed(fits[index].quality.chi2_per_dof, 2),
            numerals.probability(fits[index].quality.p_value),
        )
        for index in order
    )
    columns = ("ansatz", "ln Z", "prob.", f"{disorder(analysis)}_c", "nu", "chi2/dof", "p")
    return Table("Collapse, ln Z relative to the best", columns, rows)


def crossings(analysis: Analysis) -> Table:
    """One row for each pair of adjacent sizes."""
    rows = tuple(
        (
            f"{each.sizes[0]:g}, {each.sizes[1]:g}",
            numerals.probability(each.probability),
            numerals.probability(each.separated),
            numerals.short(each.disorder),
            numerals.bracket(each.disorder),
            numerals.short(each.inverse_nu),
        )
        for each in analysis.crossings.adjacent
    )
    columns = ("sizes", "prob.", "separated", disorder(analysis), "95 %", "1/nu")
    return Table("Crossings of adjacent sizes", columns, rows)


def drift(analysis: Analysis) -> Table:
    """One row for each drift law, the most probable first."""
    laws = sorted(analysis.drift.laws, key=lambda law: -law.log_evidence)
    rows = tuple(
        (
            law.name,
            law.formula,
            "yes" if law.bounded else "no",
            numerals.probability(law.probability),
            numerals.MISSING if law.limit is None else limit_text(law),
            numerals.MISSING if law.limit is None or law.one_sided else numerals.bracket(law.limit),
            numerals.fixed(law.chi2_per_dof, 2),
        )
        for law in laws
    )
    columns = ("law", "formula", "bounded", "prob.", "limit", "95 %", "chi2/dof")
    return Table("Drift of the crossings with size", columns, rows)


def drift_sentences(analysis: Analysis) -> list[str]:
    """What the drift says beyond its table."""
    found = analysis.drift
    # where nothing was fitted at all, the note says so, and the table of crossings shows why
    sentences = [found.note] if found.note else list(found.excluded)
    if found.probability_bounded is not None:
        sentences.append(f"Bounded as L grows: probability {numerals.probability(found.probability_bounded)}.")
    if found.rate_per_site is not None:
        rate, limits = numerals.short(found.rate_per_site), numerals.bracket(found.rate_per_site)
        sentences.append(f"Drift per unit of size: {rate}, 95 % {limits}.")
    if found.deciding_size is not None:
        sentences.append(
            f"The two best laws part at L = {numerals.significant(found.deciding_size)} at today's errors."
        )
    return sentences


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


def costs(analysis: Analysis) -> Table:
    """One row for each ansatz: the cost functions of the literature, each with its multiple of the noise floor."""
    rows = tuple(
        (name, *(f"{numerals.significant(cost.value)} ({numerals.fixed(cost.ratio, 2)})" for cost in found))
        for name, found in analysis.costs.items()
    )
    names = next((tuple(cost.name for cost in found) for found in analysis.costs.values()), ())
    heading = "Cost functions of the literature, for comparison only (in brackets: multiple of what noise alone gives)"
    return Table(heading, ("ansatz", *names), rows)


def data(analysis: Analysis) -> str:
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
