"""Finite-size crossovers of disordered systems: locate, collapse, compare, judge.

    import driftline as dl

    curves = dl.read("curves.csv")
    analysis = dl.analyse(curves)
    print(dl.summary(analysis))
    dl.write_report(analysis, "out")

Names are loaded when they are first used, so that ``import driftline`` costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from driftline.analysis import Analysis as Analysis
    from driftline.analysis import Crossover as Crossover
    from driftline.analysis import analyse as analyse
    from driftline.calibration import Calibration as Calibration
    from driftline.calibration import calibrate as calibrate
    from driftline.collapse import CollapseFit as CollapseFit
    from driftline.collapse import Comparison as Comparison
    from driftline.collapse import compare_ansatze as compare_ansatze
    from driftline.collapse import fit_collapse as fit_collapse
    from driftline.costs import Cost as Cost
    from driftline.costs import collapse_costs as collapse_costs
    from driftline.crossings import Crossing as Crossing
    from driftline.crossings import Crossings as Crossings
    from driftline.crossings import find_crossings as find_crossings
    from driftline.curves import Curve as Curve
    from driftline.curves import Curves as Curves
    from driftline.curves import Labels as Labels
    from driftline.drift import Drift as Drift
    from driftline.drift import fit_drift as fit_drift
    from driftline.errors import ConfigurationError as ConfigurationError
    from driftline.errors import DriftlineError as DriftlineError
    from driftline.errors import InputError as InputError
    from driftline.figure_options import FigureOptions as FigureOptions
    from driftline.figures.collapse import draw_collapse as draw_collapse
    from driftline.figures.comparison import draw_comparison as draw_comparison
    from driftline.figures.curves import draw_curves as draw_curves
    from driftline.figures.drift import draw_drift as draw_drift
    from driftline.figures.held_out import draw_held_out as draw_held_out
    from driftline.figures.misfit import draw_misfit as draw_misfit
    from driftline.figures.posterior import draw_posterior as draw_posterior
    from driftline.figures.stability import draw_stability as draw_stability
    from driftline.inference.intervals import Interval as Interval
    from driftline.observables import page_entropy as page_entropy
    from driftline.partial import CollapseStudy as CollapseStudy
    from driftline.partial import CrossingStudy as CrossingStudy
    from driftline.partial import study_collapse as study_collapse
    from driftline.partial import study_crossings as study_crossings
    from driftline.readers import read as read
    from driftline.reading import InputOptions as InputOptions
    from driftline.reduction import Reduction as Reduction
    from driftline.reduction import reduce_spectra as reduce_spectra
    from driftline.report.record import record as record
    from driftline.report.summary import summary as summary
    from driftline.report.writers import write_report as write_report
    from driftline.scaling.expression import ExpressionForm as ExpressionForm
    from driftline.scaling.priors import LogNormal as LogNormal
    from driftline.scaling.priors import LogUniform as LogUniform
    from driftline.scaling.priors import Normal as Normal
    from driftline.scaling.priors import Uniform as Uniform
    from driftline.settings import Settings as Settings
    from driftline.spectra import Window as Window
    from driftline.spectra import mean_gap_ratio as mean_gap_ratio
    from driftline.verdict import Verdict as Verdict

_HOMES = {
    "analysis": ("Analysis", "Crossover", "analyse"),
    "calibration": ("Calibration", "calibrate"),
    "collapse": ("CollapseFit", "Comparison", "compare_ansatze", "fit_collapse"),
    "costs": ("Cost", "collapse_costs"),
    "crossings": ("Crossing", "Crossings", "find_crossings"),
    "curves": ("Curve", "Curves", "Labels"),
    "drift": ("Drift", "fit_drift"),
    "errors": ("ConfigurationError", "DriftlineError", "InputError"),
    "figure_options": ("FigureOptions",),
    "figures.collapse": ("draw_collapse",),
    "figures.comparison": ("draw_comparison",),
    "figures.curves": ("draw_curves",),
    "figures.drift": ("draw_drift",),
    "figures.held_out": ("draw_held_out",),
    "figures.misfit": ("draw_misfit",),
    "figures.posterior": ("draw_posterior",),
    "figures.stability": ("draw_stability",),
    "inference.intervals": ("Interval",),
    "partial": ("CollapseStudy", "CrossingStudy", "study_collapse", "study_crossings"),
    "readers": ("read",),
    "reading": ("InputOptions",),
    "report.record": ("record",),
    "report.summary": ("summary",),
    "report.writers": ("write_report",),
    "scaling.expression": ("ExpressionForm",),
    "scaling.priors": ("LogNormal", "LogUniform", "Normal", "Uniform"),
    "observables": ("page_entropy",),
    "reduction": ("Reduction", "reduce_spectra"),
    "settings": ("Settings",),
    "spectra": ("Window", "mean_gap_ratio"),
    "verdict": ("Verdict",),
}
_HOME = {name: module for module, names in _HOMES.items() for name in names}

__all__ = sorted([*_HOME, "__version__"])


def __getattr__(name: str) -> Any:
    if name == "__version__":
        from importlib.metadata import version

        return version("driftline")
    if name not in _HOME:
        raise AttributeError(f"module 'driftline' has no attribute {name!r}")
    value = getattr(import_module(f"driftline.{_HOME[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return __all__
