"""The whole job as one function: curves in, one result object out."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, fields
from typing import Any

import numpy as np

from driftline import numerals
from driftline.blocks import Table
from driftline.collapse import CollapseFit, Comparison, averaged, fit_collapse, weigh
from driftline.costs import Cost, collapse_costs
from driftline.crossings import Crossings, find_crossings
from driftline.curves import Curves
from driftline.display import Shown, symbol
from driftline.drift import Drift, fit_drift
from driftline.inference.intervals import Interval
from driftline.parallel import Task, run_tasks
from driftline.plain import attributes, plain
from driftline.scaling.ansatz import applicable, parse_ansatz
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.separation import Separation, separation_test
from driftline.settings import Settings
from driftline.stability import StabilityRow, cuts, refit, systematic
from driftline.verdict import Case, Verdict, judge
from driftline.versions import software

Progress = Callable[[str, float], None]

#: Forms whose evidence is less than this part of the best one are left out of the headline average.
LEAST_WEIGHT = 0.01
#: Parts of the whole job, for the progress display: rough, for a full run.
SHARES = {"crossings": 0.06, "collapse": 0.84, "stability": 0.10}
#: Of the layout of `result.json`.
SCHEMA = "driftline-result/1"
_NOTHING = dict.fromkeys(part.name for part in fields(Interval))


@dataclass(frozen=True)
class Crossover:
    """The headline numbers.

    Parameters
    ----------
    disorder : Interval
        Critical disorder, averaged over the `basis` by evidence.
    systematic : float or None
        What the stability refits add to its error.
    nu : Interval or None
        Correlation-length exponent, averaged over those forms of the basis that have one.
    basis : tuple of str
        The ansätze averaged over: transition forms with the leading correction where any was fitted, since
        corrections to scaling exist in every real system whatever the evidence says of their size.
    """

    disorder: Interval
    systematic: float | None
    nu: Interval | None
    basis: tuple[str, ...]

    @property
    def systematic_text(self) -> str:
        """The systematic part to the digits of the statistical one; a dash where there is none."""
        if self.systematic is None:
            return numerals.MISSING
        return "+-" + numerals.rounded(self.systematic, self.disorder.sd)

    def to_dict(self) -> dict[str, Any]:
        """The object ``crossover`` of `result.json`."""
        disorder = {**plain(self.disorder), "systematic": plain(self.systematic)}
        return {"disorder": disorder, "nu": plain(self.nu), "basis": list(self.basis)}


@dataclass(frozen=True, eq=False)
class Analysis(Shown):
    """Everything found out about one set of curves; built by `analyse`."""

    curves: Curves
    settings: Settings
    crossings: Crossings
    drift: Drift
    separation: Separation
    comparison: Comparison
    crossover: Crossover | None
    stability: tuple[StabilityRow, ...]
    verdict: Verdict
    timing: dict[str, float] = field(default_factory=dict)
    costs: dict[str, tuple[Cost, ...]] = field(default_factory=dict)

    def summary(self) -> str:
        """What the terminal shows: verdict first, then numbers, then what to do."""
        # the one import of a floor above, so that every result is asked for its summary in the same way
        from driftline.report.summary import summary

        return summary(self)

    def crossover_table(self) -> Table:
        """Crossover disorder and exponent with both intervals and the systematic part; no rows where there is none."""
        columns = ("quantity", "value", "68 %", "95 %", "systematic")
        found, labels = self.crossover, self.curves.labels
        if found is None:
            return Table("Crossover", columns, ())
        unit = f" ({labels.disorder_unit})" if labels.disorder_unit else ""
        name = f"{symbol(labels.disorder_symbol)}_c{unit}"
        rows = ((name, *_value_and_limits(found.disorder), found.systematic_text),
                ("nu", *_value_and_limits(found.nu), numerals.MISSING))  # fmt: skip
        return Table(f"Crossover, from {' and '.join(found.basis)}", columns, rows)

    def shown(self) -> tuple[Table | str, ...]:
        """The verdict, the headline numbers, and the ansätze behind them."""
        return (*self.verdict.shown(), self.crossover_table(), *self.comparison.shown())

    def to_dict(self) -> dict[str, Any]:
        """The content of `result.json` as plain dicts, lists, numbers, text and None.

        Keys are in the order of the file; `timing` is the last, and the only part that differs between two equal runs.
        """
        return {
            "schema": SCHEMA,
            "software": software(),
            "input": described(self.curves),
            "seed": self.settings.seed,
            "config": self.settings.to_dict(),
            "crossings": self.crossings.to_dict(),
            "drift": self.drift.to_dict(),
            "collapse": self.comparison.to_dict(self.costs),
            "crossover": self.crossover.to_dict() if self.crossover else _no_crossover(),
            "stability": plain(self.stability),
            "verdict": self.verdict.to_dict(),
            "timing": plain(self.timing),
        }


def _value_and_limits(interval: Interval | None) -> tuple[str, str, str]:
    return numerals.short(interval), numerals.bracket(interval, 68), numerals.bracket(interval)


def _no_crossover() -> dict[str, Any]:
    """The same keys as `Crossover.to_dict`, all null."""
    return {"disorder": {**_NOTHING, "systematic": None}, "nu": {**_NOTHING}, "basis": []}


def described(curves: Curves) -> dict[str, Any]:
    """The object ``input`` of `result.json`."""
    return {
        "path": curves.origin.get("path"),
        "sha256": curves.origin.get("sha256"),
        **attributes(curves, "sizes", "points", "disorder_range"),
        "observable": curves.labels.observable,
    }


def analyse(curves: Curves, *, settings: Settings | None = None, progress: Progress | None = None) -> Analysis:
    """Locate, collapse, compare and judge.

    Parameters
    ----------
    curves : Curves
        Measured curves, for example from `driftline.read`.
    settings : Settings, optional
        Ansätze, window, seed and so on.
    progress : callable, optional
        Called with (what is being done, fraction of the whole job).

    Returns
    -------
    Analysis
        The same numbers for the same seed, whatever the number of jobs.

    Raises
    ------
    InputError, ConfigurationError
        If window or smallest size leave too little, or an ansatz is unknown.

    Examples
    --------
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 9), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> found = analyse(curves, settings=Settings(ansatze=["power-law"], quick=True, draws=200))
    >>> found.crossover.basis, round(found.crossover.disorder.median)
    (('power-law',), 4)
    """
    chosen = (settings or Settings()).with_reading(curves)
    tell = progress or (lambda _text, _fraction: None)
    timing: dict[str, float] = {}
    used = chosen.select(curves)
    for_crossings, for_collapse, for_stability, for_costs = streams(chosen)
    with timed(timing, "crossings"):
        tell("finding crossings", 0.0)
        crossings = find_crossings(used, draws=chosen.draws, seed=for_crossings)
        drift = fit_drift(crossings)
        separation = separation_test(crossings)
    with timed(timing, "collapse"):
        comparison = compared(used, chosen, for_collapse, _within(tell, "crossings", "collapse"))
        costs = costs_of(comparison, for_costs)
    basis = headline_basis(comparison)
    with timed(timing, "stability"):
        stability = _stability(used, basis, chosen, for_stability, _within(tell, "collapse", "stability"))
    crossover = _crossover(basis, stability)
    case = Case(used, crossings, drift, separation, comparison, basis, stability)
    tell("judging", 1.0)
    return Analysis(
        used, chosen, crossings, drift, separation, comparison, crossover, stability, judge(case), timing, costs
    )  # fmt: skip


def streams(settings: Settings) -> list[np.random.Generator]:
    """Independent random streams of the parts: crossings, collapse, stability, cost functions."""
    return np.random.default_rng(settings.seed).spawn(4)


@contextmanager
def timed(timing: dict[str, float], name: str) -> Iterator[None]:
    """Note under `name` how many seconds the block took."""
    start = time.perf_counter()
    yield
    timing[name] = time.perf_counter() - start


def _within(tell: Progress, after: str, part: str) -> Progress:
    """Progress of one part as progress of the whole."""
    names = list(SHARES)
    start = sum(SHARES[name] for name in names[: names.index(after) + 1])
    return lambda text, fraction: tell(text, start + SHARES[part] * fraction)


def compared(curves: Curves, settings: Settings, rng: np.random.Generator, tell: Progress) -> Comparison:
    """Every ansatz of the settings fitted, on as many processes as they ask for."""
    names = settings.ansatze
    if names == DEFAULT_ANSATZE:  # what the user asked for by name must run or be refused; the default set adapts
        names = applicable(names, curves)
    forms = [parse_ansatz(name, curves, settings.forms) for name in names]  # all names are checked before any work
    tasks = [
        Task(f"collapse {form.name}", fit_collapse, (curves, form), {"seed": stream, "quick": settings.quick})
        for form, stream in zip(forms, rng.spawn(len(forms)), strict=True)
    ]
    fits = run_tasks(tasks, settings.jobs, tell)
    return Comparison(tuple(fits), weigh(fits))


def costs_of(comparison: Comparison, rng: np.random.Generator) -> dict[str, tuple[Cost, ...]]:
    """Cost functions of the literature by ansatz: for the report, never for the verdict."""
    pairs = zip(comparison.fits, rng.spawn(len(comparison.fits)), strict=True)
    return {fit.ansatz.name: collapse_costs(fit, seed=stream) for fit, stream in pairs}


def headline_basis(comparison: Comparison) -> tuple[CollapseFit, ...]:
    """The fits behind the headline: transition forms with correction, else plain ones, else none.

    Forms that carry no weight in the average are left out, so that nothing is said about their stability; so are forms
    of the user's own without a critical disorder W_c to average.
    """
    transition = [fit for fit in comparison.fits if fit.ansatz.hypothesis == "transition" and "W_c" in fit.names]
    candidates = [fit for fit in transition if fit.ansatz.corrected] or transition
    best = max((fit.log_evidence for fit in candidates), default=0.0)
    return tuple(fit for fit in candidates if fit.log_evidence > best + np.log(LEAST_WEIGHT))


def _stability(
    curves: Curves, basis: Sequence[CollapseFit], settings: Settings, rng: np.random.Generator, tell: Progress
) -> tuple[StabilityRow, ...]:
    pairs = [(fit, cut) for fit in basis for cut in cuts(curves, fit.parameters["W_c"].median, quick=settings.quick)]
    tasks = [
        Task(f"stability of {fit.ansatz.name}", refit, (curves, fit.ansatz, cut, stream), {})
        for (fit, cut), stream in zip(pairs, rng.spawn(len(pairs)), strict=True)
    ]
    return tuple(run_tasks(tasks, settings.jobs, tell))


def _crossover(basis: Sequence[CollapseFit], stability: Sequence[StabilityRow]) -> Crossover | None:
    """Average of the basis by evidence."""
    if not basis:
        return None
    extra = [(w, systematic(fit, stability)) for w, fit in zip(weigh(basis), basis, strict=True)]
    known = [(w, value) for w, value in extra if value is not None]
    with_exponent = [fit for fit in basis if "nu" in fit.names]
    return Crossover(
        disorder=averaged(basis, "W_c"),
        systematic=float(np.sqrt(sum(w * v**2 for w, v in known) / sum(w for w, _ in known))) if known else None,
        nu=averaged(with_exponent, "nu") if with_exponent else None,
        basis=tuple(fit.ansatz.name for fit in basis),
    )
