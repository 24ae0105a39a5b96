"""Which fits the headline is made of, and how they are averaged."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from analyses import collapse, moved

from driftline.analysis import _crossover, headline_basis
from driftline.collapse import CollapseFit, Comparison, weigh
from driftline.inference.intervals import Interval


def basis(**evidences: float) -> list[str]:
    """Names of the headline's fits among these, given by their short names with log evidences."""
    fits = tuple(collapse(NAMES[short], value) for short, value in evidences.items())
    return [fit.ansatz.name for fit in headline_basis(Comparison(fits, weigh(fits)))]


NAMES = {
    "plain": "power-law", "best": "power-law:corrected", "kt": "kt:corrected",
    "drift": "power-law:linear-drift:corrected", "none": "size-independent",
}  # fmt: skip


def test_plain_forms_stand_back_behind_corrected_ones() -> None:
    """Whatever the evidence says of the correction: it exists in every real system."""
    assert basis(plain=260.0, best=250.0, drift=255.0) == ["power-law:corrected"]
    assert basis(plain=250.0, drift=255.0, none=200.0) == ["power-law"]
    assert basis(drift=255.0, none=200.0) == []


def test_forms_without_weight_are_left_out() -> None:
    """From a hundredth of the best evidence on, ln 100 = 4.605, a form takes part."""
    assert basis(best=250.0, kt=245.4) == ["power-law:corrected", "kt:corrected"]
    assert basis(best=250.0, kt=245.39) == ["power-law:corrected"]


def with_draws(name: str, log_evidence: float, critical: float, nu: float | None = None) -> CollapseFit:
    """A fit whose draws all have the same values."""
    fit = collapse(name, log_evidence)
    samples = fit.samples.copy()
    samples[:, fit.names.index("W_c")] = critical
    if nu is not None:
        samples[:, fit.names.index("nu")] = nu
    return replace(fit, samples=samples)


def test_average_is_weighted_by_evidence() -> None:
    """Odds of 4 to 1 put four fifths of the draws at one value: the median there, the 95 % interval over both.

    A form without nu does not take part in its average.
    """
    fits = (
        with_draws("power-law:corrected", 250.0, 16.0, 1.5), with_draws("kt:corrected", 250.0 - np.log(4), 18.0)
    )  # fmt: skip
    found = _crossover(fits, ())
    assert found is not None
    assert (found.disorder.low95, found.disorder.median, found.disorder.high95) == (16.0, 16.0, 18.0)
    assert found.nu == Interval(1.5, 1.5, 1.5, 1.5, 1.5)
    assert found.systematic is None
    assert found.basis == ("power-law:corrected", "kt:corrected")
    only = _crossover(fits[1:], ())
    assert only is not None
    assert only.nu is None


def test_fits_weigh_by_evidence_and_not_by_their_draws() -> None:
    """A fit that brings ten times the draws has no more say."""
    many = with_draws("power-law:corrected", 250.0, 16.0)
    many = replace(many, samples=np.tile(many.samples, (10, 1)))
    found = _crossover((many, with_draws("kt:corrected", 250.0 + np.log(2), 18.0)), ())
    assert found is not None
    assert found.disorder.median == 18.0


def test_systematic_is_averaged_in_squares() -> None:
    """Shifts of 1 and 0 beyond chance at odds of 3 to 1: sqrt(3/4 (1 - scatter^2)); no basis, no headline."""
    fits = (collapse("power-law:corrected", 250.0 + np.log(3)), collapse("kt:corrected", 250.0))
    rows = (moved(1.0, 0.2), moved(0.0, 0.2, ansatz="kt:corrected"))
    found = _crossover(fits, rows)
    assert found is not None
    # scatter^2 = (0.2^2 - 0.12^2) 0.994457883^2, from the half widths of the intervals
    assert found.systematic == pytest.approx(np.sqrt(0.75 * (1 - 0.0256 * 0.994457883**2)), rel=1e-9)
    assert _crossover((), rows) is None


def test_forms_without_refits_do_not_dilute_the_systematic_part() -> None:
    """Where only one form could be refitted, its shift stands for all."""
    fits = (collapse("power-law:corrected", 250.0), collapse("kt:corrected", 252.0))
    found = _crossover(fits, (moved(1.0, 0.2),))
    assert found is not None
    assert found.systematic == pytest.approx(np.sqrt(1 - 0.0256 * 0.994457883**2), rel=1e-9)
