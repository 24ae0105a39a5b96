"""How often would the verdict be wrong, and the intervals miss, for this very grid and these errors?

The best form of every hypothesis that was fitted is taken for the truth in turn: its curves, with the noise of the data
put on them, are analysed like the data themselves (a parametric bootstrap: Efron, Tibshirani, An Introduction to the
Bootstrap (1993), section 6.5), and what comes out is held against what went in.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from driftline.analysis import Analysis, Crossover, analyse
from driftline.collapse import CollapseFit
from driftline.curves import Curves
from driftline.errors import ConfigurationError
from driftline.inference.intervals import Interval
from driftline.parallel import Task, run_tasks
from driftline.plain import attributes, plain
from driftline.rates import Count
from driftline.settings import Settings

Progress = Callable[[str, float], None]

SETS = 20
#: Share of the work that goes into the analysis of the data themselves, for the progress display.
FIRST = 0.05
VERDICTS = ("transition-supported", "drifting", "undecided", "size-independent", "insufficient-data")
EXPECTED = {"transition": ("transition-supported",), "drift": ("drifting",), "none": ("size-independent", "drifting")}
WRONG = {"transition": "drifting", "drift": "transition-supported", "none": "transition-supported"}


@dataclass(frozen=True)
class Assumed:
    """What was found when one form was the truth.

    Parameters
    ----------
    ansatz, hypothesis : str
        The form, and what it means.
    probability : float
        Its posterior probability on the data.
    values : dict
        True W_c and nu of a transition, true shift D of a drift, as far as the form has them.
    verdicts : dict
        How many sets got each verdict.
    covered : dict
        For W_c and nu: how often the headline's 68 % and 95 % intervals held the true value, by ``"W_c 68"`` and so on.
    sets : int
    """

    ansatz: str
    hypothesis: str
    probability: float
    values: dict[str, float]
    verdicts: dict[str, int]
    covered: dict[str, Count]
    sets: int

    @property
    def wrong(self) -> Count:
        """Verdicts that contradict the truth: a drift for a transition, or a transition for anything else."""
        return Count(self.verdicts[WRONG[self.hypothesis]], self.sets)

    @property
    def right(self) -> Count:
        """Verdicts that say what is true; ``undecided`` is never wrong but says nothing."""
        return Count(sum(self.verdicts[code] for code in EXPECTED[self.hypothesis]), self.sets)

    def to_dict(self) -> dict[str, Any]:
        """Plain data; counts as ``hits`` and ``sets``."""
        covered = {name: {"hits": count.hits, "sets": count.sets} for name, count in self.covered.items()}
        known = attributes(self, "ansatz", "hypothesis", "probability", "values", "verdicts", "sets")
        return known | {"covered": plain(covered)}


@dataclass(frozen=True, eq=False)
class Calibration:
    """Verdicts and intervals on simulated data with the sizes, disorders and errors of the real ones."""

    analysis: Analysis
    truths: tuple[Assumed, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain data: the verdict on the real data, seed and number of sets, and what was found for each truth."""
        return {
            "schema": "driftline-calibration/1",
            "verdict": self.analysis.verdict.code,
            "seed": self.analysis.settings.seed,
            "truths": [truth.to_dict() for truth in self.truths],
        }


def calibrate(
    curves: Curves, *, settings: Settings | None = None, sets: int = SETS, progress: Progress | None = None
) -> Calibration:
    """Analyse the data, then simulated data whose truth is the best form of each hypothesis.

    Parameters
    ----------
    curves : Curves
        The data: their sizes, disorders and noise are those of the simulated sets.
    settings : Settings, optional
        As for `analyse`; every analysis is a quick one.
    sets : int
        Simulated data sets for each truth.  Twenty tell a rate of 5 % from one of 30 %; a hundred are for a paper.
    progress : callable, optional
        Called with (text, fraction done).

    Returns
    -------
    Calibration
        The same numbers for the same seed, whatever the number of jobs.

    Raises
    ------
    ConfigurationError
        If `sets` is not positive.
    InputError
        As `analyse`.
    """
    if sets < 1:
        raise ConfigurationError(f"the number of simulated sets must be at least 1, not {sets}")
    tell = progress or (lambda _text, _fraction: None)
    chosen = replace(settings or Settings(), quick=True)
    analysis = analyse(curves, settings=chosen, progress=lambda text, fraction: tell(text, FIRST * fraction))
    inner = replace(chosen, jobs=1, window=None, smallest_size=None, labels={})  # those have been applied
    fits = assumed(analysis)
    streams = np.random.default_rng([chosen.seed, sets]).spawn(len(fits) * sets)
    tasks = [
        Task(f"{fit.ansatz.name} as the truth", outcome, (fit, inner, stream), {})
        for fit, stream in zip([fit for fit in fits for _ in range(sets)], streams, strict=True)
    ]
    found = run_tasks(tasks, chosen.jobs, lambda text, fraction: tell(text, FIRST + (1 - FIRST) * fraction))
    pairs = zip(analysis.comparison.fits, analysis.comparison.probabilities, strict=True)
    shares = {fit.ansatz.name: p for fit, p in pairs}
    return Calibration(
        analysis,
        tuple(_gathered(fit, shares[fit.ansatz.name], found[i * sets : (i + 1) * sets]) for i, fit in enumerate(fits)),
    )


def assumed(analysis: Analysis) -> tuple[CollapseFit, ...]:
    """The form of each hypothesis with the highest evidence; of transitions, one of those behind the headline."""
    best: dict[str, CollapseFit] = {}
    basis = () if analysis.crossover is None else analysis.crossover.basis
    for fit in sorted(analysis.comparison.fits, key=lambda each: (each.ansatz.name in basis, each.log_evidence)):
        best[fit.ansatz.hypothesis] = fit
    return tuple(best[name] for name in EXPECTED if name in best)


Outcome = tuple[str, Crossover | None]


def outcome(fit: CollapseFit, settings: Settings, rng: np.random.Generator) -> Outcome:
    """Verdict and headline of one simulated set whose truth is the posterior median of `fit`."""
    seed = int(rng.integers(2**32))
    result = analyse(simulated(fit, rng), settings=replace(settings, seed=seed))
    return result.verdict.code, result.crossover


def simulated(fit: CollapseFit, rng: np.random.Generator) -> Curves:
    """The fitted curves with noise of the measured covariance."""
    made, start = [], 0
    for curve in fit.curves.curves:
        part = slice(start, start + curve.mean.size)
        noise = np.linalg.cholesky(curve.noise) @ rng.standard_normal(curve.mean.size)
        made.append(replace(curve, mean=fit.points.fitted[part] + noise))
        start = part.stop
    return Curves(made, fit.curves.labels)


def _gathered(fit: CollapseFit, probability: float, found: Sequence[Outcome]) -> Assumed:
    real = fit.ansatz.hypothesis == "transition"
    told = ("W_c", "nu") if real else ("D",)  # the nu of a drifting form is none that the headline estimates
    values = {name: fit.parameters[name].median for name in told if name in fit.parameters}
    codes = [code for code, _ in found]
    return Assumed(
        ansatz=fit.ansatz.name,
        hypothesis=fit.ansatz.hypothesis,
        probability=probability,
        values=values,
        verdicts={code: codes.count(code) for code in VERDICTS},
        covered={
            f"{name} {level}": _covered([_headline(crossover, name) for _, crossover in found], value, level)
            for name, value in values.items()
            if real
            for level in (68, 95)
        },
        sets=len(found),
    )


def _headline(crossover: Crossover | None, name: str) -> Interval | None:
    if crossover is None:
        return None
    return crossover.disorder if name == "W_c" else crossover.nu


def _covered(intervals: Sequence[Interval | None], value: float, level: int) -> Count:
    known = [interval for interval in intervals if interval is not None]
    return Count(sum(interval.contains(value, level=level) for interval in known), len(known))
