"""The numbers behind the figures, as tables: what is drawn can be drawn again by other means."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.figures.headline import headline_fit

if TYPE_CHECKING:
    from driftline.analysis import Analysis

Rows = list[dict[str, Any]]

#: Columns that a table has even without rows.
COLUMNS = {
    "points": ("size", "disorder", "mean", "error", "samples"),
    "smoothers": ("size", "disorder", "mean", "sd"),
    "drift-points": ("size", "disorder", "sd"),
    "drift-bands": ("law", "size", "median", "low68", "high68"),
    "scaling-functions": ("ansatz", "x", "mean", "sd"),
    "comparison": (
        "ansatz", "hypothesis", "log_evidence", "log_evidence_error", "probability", "held_out_size",
        "held_out_log_score", "held_out_log_score_error", "held_out_chi2_per_point",
    ),
    "posterior": ("ansatz",),
    "held-out": ("ansatz", "size", "disorder", "mean", "error", "predicted", "predicted_sd"),
}  # fmt: skip
BAND_SIZES = 60
FARTHEST = 20.0  # the bands of the drift laws go on to so many times the largest size


def figure_tables(analysis: Analysis) -> dict[str, Rows]:
    """Tables by file stem.

    `points` and `smoothers` stand behind the figure of the curves, `drift-points` and `drift-bands` behind that of the
    drift, `scaling-functions` behind that of the collapse, `comparison`, `posterior` (draws of the headline fit) and
    `held-out` behind those of the same name. The misfit is in the table of the collapsed points.
    """
    return {
        "points": list(_points(analysis)),
        "smoothers": list(_smoothers(analysis)),
        "drift-points": list(_drift_points(analysis)),
        "drift-bands": list(_drift_bands(analysis)),
        "scaling-functions": list(_functions(analysis)),
        "comparison": list(_comparison(analysis)),
        "posterior": list(_posterior(analysis)),
        "held-out": list(_held_out(analysis)),
    }


def _rows(columns: dict[str, Any], **same: Any) -> Iterator[dict[str, Any]]:
    """A row for each place of the columns, with cells that are the same in all rows in front."""
    lists = [np.asarray(values).tolist() for values in columns.values()]
    for cells in zip(*lists, strict=True):
        yield {**same, **dict(zip(columns, cells, strict=True))}


def _points(analysis: Analysis) -> Iterator[dict[str, Any]]:
    for curve in analysis.curves.curves:
        columns = {"disorder": curve.disorder, "mean": curve.mean, "error": curve.error}
        counted = {} if curve.samples is None else {"samples": curve.samples}
        yield from _rows({**columns, **counted}, size=curve.size)


def _smoothers(analysis: Analysis) -> Iterator[dict[str, Any]]:
    for smooth in analysis.crossings.smooth:
        yield from _rows({"disorder": smooth.grid, "mean": smooth.mean, "sd": smooth.sd}, size=float(smooth.size))


def _drift_points(analysis: Analysis) -> Iterator[dict[str, Any]]:
    drift = analysis.drift
    sd = np.sqrt(np.diag(drift.covariance))
    yield from _rows({"size": drift.sizes, "disorder": drift.positions, "sd": sd})


def _drift_bands(analysis: Analysis) -> Iterator[dict[str, Any]]:
    if not len(analysis.drift.sizes):
        return
    sizes = np.geomspace(analysis.drift.sizes.min(), FARTHEST * analysis.drift.sizes.max(), BAND_SIZES)
    for law in analysis.drift.laws:
        median, low, high = law.predict(sizes)
        yield from _rows({"size": sizes, "median": median, "low68": low, "high68": high}, law=law.name)


def _functions(analysis: Analysis) -> Iterator[dict[str, Any]]:
    for fit in analysis.comparison.fits:
        columns = {"x": fit.function_x, "mean": fit.function_mean, "sd": fit.function_sd}
        yield from _rows(columns, ansatz=fit.ansatz.name)


def _comparison(analysis: Analysis) -> Iterator[dict[str, Any]]:
    for fit, probability in zip(analysis.comparison.fits, analysis.comparison.probabilities, strict=True):
        names = ("size", "log_score", "log_score_error", "chi2_per_point")
        yield {
            "ansatz": fit.ansatz.name,
            "hypothesis": fit.ansatz.hypothesis,
            "log_evidence": fit.log_evidence,
            "log_evidence_error": fit.log_evidence_error,
            "probability": probability,
            **{f"held_out_{name}": getattr(fit.held_out, name, None) for name in names},
        }


def _posterior(analysis: Analysis) -> Iterator[dict[str, Any]]:
    fit = headline_fit(analysis)
    yield from _rows(dict(zip(fit.names, fit.samples.T, strict=True)), ansatz=fit.ansatz.name)


def _held_out(analysis: Analysis) -> Iterator[dict[str, Any]]:
    for fit in analysis.comparison.fits:
        if fit.held_out is None:
            continue
        largest, found = fit.curves.curves[-1], fit.held_out
        columns = {
            "disorder": largest.disorder, "mean": largest.mean, "error": largest.error,
            "predicted": found.predicted, "predicted_sd": found.predicted_sd,
        }  # fmt: skip
        yield from _rows(columns, ansatz=fit.ansatz.name, size=largest.size)
