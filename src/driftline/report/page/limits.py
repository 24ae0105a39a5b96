"""What a result does not show: sentences that depend on the data and on what was asked for."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from driftline import numerals
from driftline.report.rows import disorder

if TYPE_CHECKING:
    from driftline.analysis import Analysis

SUPPORTED = "transition-supported"
_HYPOTHESES = {
    "transition": "with a critical disorder",
    "drift": "whose crossover moves on with size",
    "none": "without any critical disorder",
}


def limits(analysis: Analysis) -> Iterator[str]:
    """Sentences in order of importance."""
    yield _sizes(analysis)
    if analysis.crossover is not None and analysis.verdict.code != SUPPORTED:
        yield (
            f"Whether there is a transition at all: the interval of {disorder(analysis)}_c is an average over forms "
            "that have a critical disorder, and holds only if one exists."
        )
    yield from _rivals(analysis)
    low, high = analysis.curves.disorder_range
    yield f"Anything outside the disorders from {low:g} to {high:g}."
    yield (
        f"Any other observable. The {analysis.curves.labels.observable} is one of several that a transition "
        "should show up in at the same place."
    )
    yield _errors(analysis)
    if analysis.settings.quick:
        yield (
            "What a full run adds: with --quick there is no chain to check the posterior, and there are fewer "
            "stability refits. Leave it out for numbers to publish."
        )
    if analysis.verdict.false_alarm is None or not analysis.verdict.false_alarm.alike:
        yield (
            "How often this verdict is wrong on data like these: no false-alarm rate was measured for this grid and "
            "these errors; driftline calibrate does it."
        )


def _sizes(analysis: Analysis) -> str:
    sizes = analysis.curves.sizes
    sentence = (
        f"The thermodynamic limit: the sizes run from {sizes[0]:g} to {sizes[-1]:g}, and a crossover that looks "
        "settled there may still move, or vanish, at larger ones."
    )
    deciding = analysis.drift.deciding_size
    if deciding is not None and deciding > sizes[-1]:
        sentence += f" The two best drift laws part only at size {numerals.significant(deciding)}."
    return sentence


def _rivals(analysis: Analysis) -> Iterator[str]:
    """The forms that were not compared."""
    fitted = {fit.ansatz.hypothesis for fit in analysis.comparison.fits}
    missing = [meaning for hypothesis, meaning in _HYPOTHESES.items() if hypothesis not in fitted]
    if missing:
        yield f"How forms {' or forms '.join(missing)} would do: none was fitted."
    yield (
        f"That a form is true. Probabilities compare the {len(analysis.comparison.fits)} forms fitted with each other, "
        "under the priors above; a form that is not among them is not judged."
    )


def _errors(analysis: Analysis) -> str:
    covariance = (
        "their covariances are used as given"
        if analysis.curves.correlated
        else "points at different disorders are taken as independent"
    )
    return (
        "Faults of the data themselves, such as an unresolved symmetry, a window of energies that changes with size, "
        f"or realisations that did not finish: errors are taken as standard errors of the mean, and {covariance}."
    )
