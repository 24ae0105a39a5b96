"""Parts of the job by themselves: crossings with their drift, or the collapse under chosen ansätze.

Each uses the random stream that it has in the whole job, so that the same seed and settings give the numbers that
`driftline.analyse` gives for this part.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

from driftline.analysis import Progress, compared, costs_of, described, streams, timed
from driftline.collapse import Comparison
from driftline.costs import Cost
from driftline.crossings import Crossings, find_crossings
from driftline.curves import Curves
from driftline.drift import Drift, fit_drift
from driftline.plain import plain
from driftline.settings import Settings
from driftline.versions import software

CROSSINGS_SCHEMA, COLLAPSE_SCHEMA = "driftline-crossings/1", "driftline-collapse/1"


@dataclass(frozen=True, eq=False)
class CrossingStudy:
    """Crossings and drift of one set of curves; built by `study_crossings`."""

    curves: Curves
    settings: Settings
    crossings: Crossings
    drift: Drift
    timing: dict[str, float] = field(default_factory=dict)

    def to_dict(self) -> dict[str, Any]:
        """The part of `result.json` that belongs to crossings, under a schema of its own; each key has its meaning."""
        parts = {"crossings": self.crossings.to_dict(), "drift": self.drift.to_dict()}
        config = _config(self.settings, "window", "smallest_size", "labels", "draws", "input")
        return _document(CROSSINGS_SCHEMA, self, config, parts)


@dataclass(frozen=True, eq=False)
class CollapseStudy:
    """Collapse fits of one set of curves; built by `study_collapse`."""

    curves: Curves
    settings: Settings
    comparison: Comparison
    costs: dict[str, tuple[Cost, ...]]
    timing: dict[str, float] = field(default_factory=dict)

    def to_dict(self) -> dict[str, Any]:
        """The part of `result.json` that belongs to the collapse, under a schema of its own; each key has its meaning.

        The probabilities are those among the ansätze that were fitted.
        """
        parts = {"collapse": self.comparison.to_dict(self.costs)}
        config = _config(self.settings, "ansatze", "window", "smallest_size", "quick", "labels", "forms", "input")
        return _document(COLLAPSE_SCHEMA, self, config, parts)


def study_crossings(
    curves: Curves,
    *,
    settings: Settings | None = None,
    laws: Sequence[str] | None = None,
    progress: Progress | None = None,
) -> CrossingStudy:
    """Find the crossings of all pairs of sizes and fit drift laws to those of adjacent sizes.

    Parameters
    ----------
    curves : Curves
        Measured curves.
    settings : Settings, optional
        Window, smallest size, labels, draws and seed are used.
    laws : sequence of str, optional
        Names of drift laws; by default all of `driftline.drift.DEFAULT_LAWS`.
    progress : callable, optional
        Called with (what is being done, fraction of the job).

    Raises
    ------
    InputError, ConfigurationError
        If window or smallest size leave too little, or a law is unknown.

    Examples
    --------
    >>> import numpy as np
    >>> from driftline.simulate import PowerLawTruth, simulate
    >>> curves = simulate([8, 12, 16], np.linspace(2, 6, 15), PowerLawTruth(W_c=4.0), 0.003, 1)
    >>> study_crossings(curves, laws=["constant"]).drift.laws[0].limit.contains(4.0)
    True
    """
    chosen, tell = settings or Settings(), progress or _silent
    timing: dict[str, float] = {}
    used = chosen.select(curves)
    with timed(timing, "crossings"):
        tell("finding crossings", 0.0)
        crossings = find_crossings(used, draws=chosen.draws, seed=streams(chosen)[0])
        tell("fitting the drift", 0.5)
        drift = fit_drift(crossings, laws=laws)
    return CrossingStudy(used, chosen, crossings, drift, timing)


def study_collapse(
    curves: Curves, *, settings: Settings | None = None, progress: Progress | None = None
) -> CollapseStudy:
    """Fit every ansatz of the settings and weigh them by their evidence.

    Parameters
    ----------
    curves : Curves
        Measured curves.
    settings : Settings, optional
        Ansätze, window, smallest size, labels, seed, quick and jobs are used.
    progress : callable, optional
        Called with (what is being done, fraction of the job).

    Raises
    ------
    InputError, ConfigurationError
        If window or smallest size leave too little, or an ansatz cannot be fitted to these curves.
    """
    chosen, tell = settings or Settings(), progress or _silent
    timing: dict[str, float] = {}
    used = chosen.select(curves)
    _, for_collapse, _, for_costs = streams(chosen)
    with timed(timing, "collapse"):
        comparison = compared(used, chosen, for_collapse, tell)
        costs = costs_of(comparison, for_costs)
    return CollapseStudy(used, chosen, comparison, costs, timing)


def _silent(_text: str, _fraction: float) -> None:
    pass


def _config(settings: Settings, *names: str) -> dict[str, Any]:
    every = settings.to_dict()
    return {name: every[name] for name in names}


def _document(
    schema: str, study: CrossingStudy | CollapseStudy, config: dict[str, Any], parts: dict[str, Any]
) -> dict[str, Any]:
    return {
        "schema": schema,
        "software": software(),
        "input": described(study.curves),
        "seed": study.settings.seed,
        "config": config,
        **parts,
        "timing": plain(study.timing),
    }
