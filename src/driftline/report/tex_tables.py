r"""`tables/*.tex`: the tables of a paper, with values as in 16.53(12).

Each file is a `tabular` of the package booktabs, to be put into a table of your own with ``\input``.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from driftline import numerals
from driftline.report.base import Writer
from driftline.report.latex import NOTHING, escape, general, limits, mathematics, name, number, plain_number, value
from driftline.report.methods_curves import critical
from driftline.report.methods_curves import crossing as crossing_symbol

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit
    from driftline.crossings import Crossing
    from driftline.drift import LawFit


@dataclass(frozen=True)
class TexTable:
    """A tabular: what it shows, head of each column, rows of LaTeX, and what stands there where there are no rows."""

    caption: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    nothing: str

    def text(self) -> str:
        """The tabular, with its caption and what it needs as comments."""
        width = len(self.columns)
        body = [_line(row) for row in self.rows] or [rf"\multicolumn{{{width}}}{{l}}{{{self.nothing}}} \\"]
        return "\n".join([
            f"% {self.caption}",
            r"% Needs \usepackage{booktabs}. Errors in brackets are in units of the last digit: 68 % of the posterior.",
            rf"\begin{{tabular}}{{{'l' * width}}}", r"\toprule", _line(self.columns), r"\midrule", *body,
            r"\bottomrule", r"\end{tabular}", "",
        ])  # fmt: skip


def _line(cells: Iterable[str]) -> str:
    return " & ".join(cells) + r" \\"


class TexTables(Writer):
    """`tables/crossover.tex`, `ansatze.tex`, `crossings.tex` and `drift.tex`."""

    title = "tables/*.tex"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write them into `folder/tables`."""
        place = folder / "tables"
        place.mkdir(exist_ok=True)
        for stem, table in tex_tables(analysis).items():
            (place / f"{stem}.tex").write_text(table.text(), encoding="utf-8", newline="\n")


def tex_tables(analysis: Analysis) -> dict[str, TexTable]:
    """The tables by file stem."""
    made = {"crossover": crossover, "ansatze": ansatze, "crossings": crossings, "drift": drift}
    return {stem: make(analysis) for stem, make in made.items()}


_PROBABILITY = "$P$"
_LIMITS_95 = r"95\,\%"


def _probability(p: float | None) -> str:
    return plain_number(numerals.probability(p))


def crossover(analysis: Analysis) -> TexTable:
    """The headline numbers."""
    found, unit = analysis.crossover, analysis.curves.labels.disorder_unit
    rows: tuple[tuple[str, ...], ...] = ()
    if found is not None:
        wide = partial(limits, level=68)
        systematic = NOTHING
        if found.systematic is not None:
            systematic = plain_number(numerals.rounded(found.systematic, found.disorder.sd))
        quantity = f"${critical(analysis.curves)}$" + (f" ({escape(unit)})" if unit else "")
        rows = ((quantity, *(write(found.disorder) for write in (value, wide, limits)), systematic),)
        if found.nu is not None:
            rows = (*rows, (r"$\nu$", *(write(found.nu) for write in (value, wide, limits)), NOTHING))
    basis = " and ".join(found.basis) if found else "no form"
    return TexTable(
        f"Crossover, averaged by evidence over {basis}. Verdict: {analysis.verdict.code}.",
        ("", "value", r"68\,\%", _LIMITS_95, "systematic"),
        rows,
        "no form with a critical disorder was fitted",
    )


def ansatze(analysis: Analysis) -> TexTable:
    """One row for each scaling form, the one of highest evidence first."""
    pairs = zip(analysis.comparison.fits, analysis.comparison.probabilities, strict=True)
    ranked = sorted(pairs, key=lambda pair: -pair[0].log_evidence)
    best = ranked[0][0]
    rows = tuple(
        (
            name(fit.ansatz.name),
            _evidence(fit, best),
            _probability(probability),
            value(fit.parameters.get("W_c")),
            value(fit.parameters.get("nu")),
            plain_number(numerals.fixed(fit.quality.chi2_per_dof, 2)),
            _probability(fit.quality.p_value),
            NOTHING if fit.held_out is None else plain_number(numerals.fixed(fit.held_out.log_score, 1)),
        )
        for fit, probability in ranked
    )
    columns = (
        "form", r"$\ln(Z/Z_{\mathrm{best}})$", _PROBABILITY, f"${critical(analysis.curves)}$", r"$\nu$",
        r"$\chi^2/\mathrm{dof}$", "$p$", "held out",
    )  # fmt: skip
    caption = (
        "Scaling forms: evidence relative to the best (Monte Carlo error in brackets), posterior probability, "
        "posterior-predictive p, and log score of the largest size predicted from the smaller ones."
    )
    return TexTable(caption, columns, rows, "no form was fitted")


def _evidence(fit: CollapseFit, best: CollapseFit) -> str:
    if fit is best:
        return "$0$"
    error = float((fit.log_evidence_error**2 + best.log_evidence_error**2) ** 0.5)
    return number(numerals.quoted(fit.log_evidence - best.log_evidence, error))


def crossings(analysis: Analysis) -> TexTable:
    """One row for each pair of sizes."""
    rows = tuple(_crossing(each) for each in analysis.crossings.pairs)
    labels = analysis.curves.labels
    y = mathematics(labels.observable_symbol)
    columns = (
        "$L_1$", "$L_2$", r"$P_{\mathrm{cross}}$", r"$P_{\mathrm{sep}}$", f"${crossing_symbol(analysis.curves)}$",
        _LIMITS_95, f"${y}$", r"$1/\nu_{\mathrm{eff}}$",
    )  # fmt: skip
    caption = (
        "Crossings of all pairs of sizes: probability of a crossing, of separation on both sides, position, observable "
        "and effective exponent there."
    )
    return TexTable(caption, columns, rows, "no pairs of sizes")


def _crossing(each: Crossing) -> tuple[str, ...]:
    return (
        *(general(size) for size in each.sizes),
        _probability(each.probability),
        _probability(each.separated),
        value(each.disorder),
        limits(each.disorder),
        value(each.value),
        value(each.inverse_nu),
    )


def drift(analysis: Analysis) -> TexTable:
    """One row for each law of the drift, the most probable first."""
    rows = tuple(_law(law) for law in sorted(analysis.drift.laws, key=lambda law: -law.probability))
    columns = (
        f"${crossing_symbol(analysis.curves)}(L)$", "bounded", r"$\ln Z$", _PROBABILITY,
        f"${critical(analysis.curves, chr(92) + 'infty')}$", _LIMITS_95, r"$\chi^2/\mathrm{dof}$",
    )  # fmt: skip
    caption = "Laws of the drift of the crossings with size, with the position at infinite size where there is one."
    return TexTable(caption, columns, rows, escape(analysis.drift.note or "no law was fitted"))


def _law(law: LawFit) -> tuple[str, ...]:
    return (
        f"${law.law.tex}$",
        "yes" if law.bounded else "no",
        plain_number(numerals.fixed(law.log_evidence, 1)),
        _probability(law.probability),
        *_limit(law),
        plain_number(numerals.fixed(law.chi2_per_dof, 2)),
    )


def _limit(law: LawFit) -> tuple[str, str]:
    """Value and 95 % interval of the limit, or the one side of it that the data constrain."""
    if law.limit is None:
        return NOTHING, NOTHING
    if law.one_sided is None:
        return value(law.limit), limits(law.limit)
    above = law.one_sided == "above"
    end = law.limit.low95 if above else law.limit.high95
    bound = numerals.rounded(end, abs(law.limit.median - end))
    return plain_number(f"{'>' if above else '<'}{bound}") + r" (97.5\,\%)", NOTHING
