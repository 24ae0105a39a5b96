"""Which of the fits is shown where one has to stand for all."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit


def headline_fit(analysis: Analysis) -> CollapseFit:
    """The most probable fit among those that the crossover rests on, or among all where it rests on none."""
    basis = analysis.crossover.basis if analysis.crossover is not None else ()
    fits = [fit for fit in analysis.comparison.fits if fit.ansatz.name in basis] or analysis.comparison.fits
    return max(fits, key=lambda fit: fit.log_evidence)
