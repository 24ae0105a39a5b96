"""What stands on the page, section by section, in the order in which a group meeting asks for it."""

from __future__ import annotations

import shlex
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from driftline import numerals
from driftline.report import rows
from driftline.report.configuration import to_toml
from driftline.report.page import details
from driftline.report.page.elements import bullets, paragraph, section, table, text
from driftline.report.page.limits import SUPPORTED, limits
from driftline.report.page.panel import panel
from driftline.report.page.pictures import figures
from driftline.report.page.symbols import mathtext_to_html
from driftline.versions import software

if TYPE_CHECKING:
    from driftline.analysis import Analysis

#: Name and heading of each section, as the contents list them.
HEADINGS = {
    "verdict": "Verdict", "numbers": "Headline numbers", "warnings": "Warnings", "figures": "Figures",
    "panel-section": "Move the collapse yourself", "tables": "Tables", "priors": "Priors and parameters",
    "sampler": "Sampler health", "limits": "What this result does not show", "reproduce": "How to reproduce it",
    "versions": "Versions",
}  # fmt: skip


def sections(analysis: Analysis, pictures: Path) -> dict[str, str]:
    """The sections that have something to say, as HTML by name; `pictures` is the folder of the drawn figures."""
    content = {
        "verdict": _verdict(analysis),
        "numbers": _numbers(analysis),
        "warnings": _warnings(analysis),
        "figures": figures(analysis, pictures),
        "panel-section": panel(analysis),
        "tables": _tables(analysis),
        "priors": _priors(analysis),
        "sampler": paragraph(details.sampler_sentence(analysis)) + table(details.sampler(analysis), "prose"),
        "limits": bullets(limits(analysis)),
        "reproduce": _reproduce(analysis),
        "versions": bullets(_versions()),
    }
    return {name: section(name, HEADINGS[name], part) for name, part in content.items() if part}


def _verdict(analysis: Analysis) -> str:
    verdict = analysis.verdict
    role = "verdict good" if verdict.code == SUPPORTED else "verdict"
    return (
        f'<div class="{role}">\n{paragraph(verdict.statement)}\n<p>Verdict: <code>{text(verdict.code)}</code></p>\n'
        + bullets(rows.reasons(analysis))
        + ("" if verdict.false_alarm is None else paragraph(verdict.false_alarm.sentence))
        + "</div>"
    )


def _numbers(analysis: Analysis) -> str:
    items = "".join(_number(*each) for each in _headline(analysis))
    found, note = analysis.crossover, ""
    if found is not None:
        note = f"The crossover is an average over {' and '.join(found.basis)}, by evidence."
        if analysis.verdict.code != SUPPORTED:
            note += " It means something only if there is a transition, which these data do not establish."
    return (f'<dl class="numbers">\n{items}</dl>' if items else "") + (paragraph(note, "note") if note else "")


def _number(label: str, value: str, lines: list[str]) -> str:
    below = "".join(f"<dd>{text(line)}</dd>" for line in lines)
    return f'<div><dt>{label}</dt><dd class="value">{text(value)}</dd>{below}</div>\n'


def _headline(analysis: Analysis) -> Iterator[tuple[str, str, list[str]]]:
    """Label (HTML), value and further lines (text) of each headline number."""
    labels, verdict = analysis.curves.labels, analysis.verdict
    symbols = mathtext_to_html(f"{{{labels.disorder_symbol}}}_c"), mathtext_to_html(r"\nu")
    unit = f" ({text(labels.disorder_unit)})" if labels.disorder_unit else ""
    names = f"crossover disorder {symbols[0]}{unit}", f"exponent {symbols[1]}"
    # the very cells of the table below, so that the two agree to the digit
    for name, (_, cell, _, limits95, systematic) in zip(names, rows.crossover(analysis).rows, strict=False):
        if cell != numerals.MISSING:
            beside = [] if systematic == numerals.MISSING else [f"systematic {systematic.replace('+-', '±')}"]
            yield name, cell, [f"95 % {limits95}", *beside]
    laws = "among the drift laws"  # which also speak where no rival form was fitted
    among = laws if analysis.comparison.probability("transition") is None else "among the forms fitted"
    for label, value, whole in (
        ("probability of a critical disorder", verdict.probability_transition, among),
        ("probability of a crossover that moves on", verdict.probability_drift, among),
        ("probability that the crossings have a limit", analysis.drift.probability_bounded, laws),
    ):
        if value is not None:
            yield label, numerals.probability(value), [whole]


def _warnings(analysis: Analysis) -> str:
    items = "".join(
        f"<li><h3><code>{text(each.code)}</code></h3><p>{text(each.message)}.</p>"
        f"<p><strong>What to do:</strong> {text(each.action)}.</p></li>\n"
        for each in analysis.verdict.warnings
    )
    return f'<ul class="warnings">\n{items}</ul>' if items else ""


def _tables(analysis: Analysis) -> str:
    found = (
        rows.crossover(analysis), rows.collapse(analysis), details.held_out(analysis), rows.crossings(analysis),
        rows.drift(analysis), rows.stability(analysis), details.sensitivity(analysis), rows.costs(analysis),
    )  # fmt: skip
    sentences = rows.drift_sentences(analysis)
    return "\n".join([*(table(each) for each in found), *map(paragraph, sentences)])


def _priors(analysis: Analysis) -> str:
    tables = table(details.priors(analysis), "prose"), table(details.posteriors(analysis))
    return paragraph(details.PRIORS_BESIDE, "note").join(tables)


def _reproduce(analysis: Analysis) -> str:
    origin = analysis.curves.origin
    path, digest = origin.get("path"), origin.get("sha256")
    command = f"driftline analyse {'DATA' if path is None else shlex.quote(str(path))} --config analysis.toml"
    return "\n".join(
        [
            paragraph(rows.data(analysis)),
            *([f"<p>SHA-256 of the data file: <code>{text(str(digest))}</code></p>"] if digest else []),
            "<p>The file <code>analysis.toml</code> stands beside this page, and here in full:</p>",
            f"<pre>{text(to_toml(analysis.settings))}</pre>",
            "<p>The same numbers come from this command, with the path as it was given then:</p>",
            f"<pre>{text(command)}</pre>",
        ]
    )


def _versions() -> Iterator[str]:
    found = software()
    yield f"{found['name']} {found['version']}"
    yield f"Python {found['python']}"
    yield from (f"{name} {number}" for name, number in found["packages"].items())
