"""The machine-readable result: `result.json` and the tables beside it.

The order of the keys is fixed here, numbers are in the user's units, and what is missing is null, never NaN.
"""

from __future__ import annotations

import csv
import json
import math
import platform
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import fields
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.inference.intervals import Interval
from driftline.report.base import Writer
from driftline.scaling.tables import form_table

if TYPE_CHECKING:
    from driftline.analysis import Analysis, Crossover
    from driftline.collapse import CollapseFit
    from driftline.costs import Cost
    from driftline.curves import Curves
    from driftline.settings import Settings

SCHEMA = "driftline-result/1"
PACKAGES = ("numpy", "scipy", "lmfit", "emcee", "numba")  # those whose version can change a number
LIMITS = tuple(part.name for part in fields(Interval))


def record(analysis: Analysis) -> dict[str, Any]:
    """The content of `result.json` as plain dicts, lists, numbers, text and None.

    Parameters
    ----------
    analysis : Analysis

    Returns
    -------
    dict
        Keys in the order of the file; `timing` is the last, and the only part that differs between two equal runs.
    """
    comparison = analysis.comparison
    return {
        "schema": SCHEMA,
        "software": _software(),
        "input": _input(analysis.curves),
        "seed": analysis.settings.seed,
        "config": _config(analysis.settings),
        "crossings": _plain(analysis.crossings.to_dict()),
        "drift": _plain(analysis.drift.to_dict()),
        "collapse": [
            _collapse(fit, probability, analysis.costs.get(fit.ansatz.name, ()))
            for fit, probability in zip(comparison.fits, comparison.probabilities, strict=True)
        ],
        "crossover": _crossover(analysis.crossover),
        "stability": _plain(
            [
                {
                    "ansatz": row.ansatz,
                    "smallest_size": row.smallest_size,
                    "window": row.window,
                    "disorder": row.disorder,
                    "p_value": row.p_value,
                }
                for row in analysis.stability
            ]
        ),
        "verdict": _verdict(analysis),
        "timing": _plain(analysis.timing),
    }


def to_json(analysis: Analysis) -> str:
    """`record` as the text of `result.json`."""
    return json.dumps(record(analysis), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def tables(analysis: Analysis) -> dict[str, list[dict[str, Any]]]:
    """The tables by file stem, each a list of rows with equal keys; missing cells are None."""
    result = record(analysis)
    return {
        "crossings": [_flat(row) for row in result["crossings"]],
        "drift": [_flat(row) for row in result["drift"]["laws"]],
        "ansatze": [_flat({name: cell for name, cell in row.items() if name != "costs"}) for row in result["collapse"]],
        "stability": [_flat(row) for row in result["stability"]],
        "costs": [row for name, costs in analysis.costs.items() for row in _costs(name, costs)],
        "collapsed-points": [row for fit in analysis.comparison.fits for row in _points(fit)],
    }


class ResultFile(Writer):
    """`result.json`."""

    title = "result.json"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/result.json`."""
        (folder / "result.json").write_text(to_json(analysis), encoding="utf-8", newline="\n")


class Tables(Writer):
    """The tables as CSV: numbers in full precision, empty cells where there is no number."""

    title = "tables"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/tables/*.csv`; a table without rows is written with its first columns only."""
        place = folder / "tables"
        place.mkdir()
        for name, rows in tables(analysis).items():
            with (place / f"{name}.csv").open("w", encoding="utf-8", newline="") as stream:
                _write_csv(rows, _FIRST_COLUMNS[name], stream)


_FIRST_COLUMNS = {
    "crossings": ("size_1", "size_2", "probability", "separated"),
    "drift": ("name", "bounded", "log_evidence", "probability"),
    "ansatze": ("ansatz", "hypothesis", "log_evidence", "log_evidence_error", "probability"),
    "stability": ("ansatz", "smallest_size", "window_1", "window_2"),
    "costs": ("ansatz", "cost", "value", "ratio"),
    "collapsed-points": ("ansatz", "size", "disorder", "x", "y", "error", "fitted", "residual"),
}


def _software() -> dict[str, Any]:
    return {
        "name": "driftline",
        "version": version("driftline"),
        "python": platform.python_version(),
        "packages": {name: version(name) for name in PACKAGES},
    }


def _input(curves: Curves) -> dict[str, Any]:
    return {
        "path": curves.origin.get("path"),
        "sha256": curves.origin.get("sha256"),
        "sizes": curves.sizes.tolist(),
        "points": curves.points,
        "disorder_range": list(curves.disorder_range),
        "observable": curves.labels.observable,
    }


def _config(settings: Settings) -> dict[str, Any]:
    """The settings that can change a number; the seed stands beside them, and the number of workers changes none."""
    names = (part.name for part in fields(settings) if part.name not in ("seed", "jobs", "forms"))
    config = {name: _plain(getattr(settings, name)) for name in names}
    return {**config, "forms": {form.name: form_table(form) for form in settings.forms}}


def _collapse(fit: CollapseFit, probability: float, costs: Sequence[Cost]) -> dict[str, Any]:
    quality, sampler, held_out = fit.quality, fit.sampler, fit.held_out
    entry = {
        "ansatz": fit.ansatz.name,
        "hypothesis": fit.ansatz.hypothesis,
        "log_evidence": fit.log_evidence,
        "log_evidence_error": fit.log_evidence_error,
        "probability": probability,
        "parameters": fit.parameters,
        "fit": {name: getattr(quality, name) for name in ("chi2_per_dof", "p_value", "noise_scale", "max_residual")},
        "held_out": {name: getattr(held_out, name, None) for name in ("log_score", "chi2_per_point")},
        "sampler": {name: getattr(sampler, name) for name in ("effective_samples", "autocorrelation", "converged")},
        "costs": [{"name": cost.name, "value": cost.value, "floor": cost.floor} for cost in costs],
    }
    return {name: _plain(value) for name, value in entry.items()}


def _crossover(crossover: Crossover | None) -> dict[str, Any]:
    if crossover is None:
        nothing = dict.fromkeys(LIMITS)
        return {"disorder": {**nothing, "systematic": None}, "nu": dict(nothing), "basis": []}
    return {
        "disorder": {**_plain(crossover.disorder), "systematic": _plain(crossover.systematic)},
        "nu": _plain(crossover.nu),
        "basis": list(crossover.basis),
    }


def _verdict(analysis: Analysis) -> dict[str, Any]:
    verdict = analysis.verdict
    return {
        "code": verdict.code,
        "statement": verdict.statement,
        "probability_transition": _plain(verdict.probability_transition),
        "probability_drift": _plain(verdict.probability_drift),
        "warnings": [
            {
                "code": each.code,
                "message": f"{each.message}. What to do: {each.action}.",
                "numbers": _plain(each.numbers),
            }
            for each in verdict.warnings
        ],
        "false_alarm": _plain(verdict.false_alarm),
    }


def _plain(value: Any) -> Any:
    """`value` in the types of JSON; a number that is not finite becomes None."""
    if isinstance(value, Interval):
        return _plain(value.to_dict())
    if isinstance(value, Mapping):
        return {str(name): _plain(part) for name, part in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        return _plain(value.tolist())
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_plain(part) for part in value]
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if value is None or isinstance(value, str | int):
        return value
    raise TypeError(f"cannot put a {type(value).__name__} into result.json")


def _flat(row: Mapping[str, Any]) -> dict[str, Any]:
    """One level of cells: nested names are joined by an underscore, the parts of a list numbered from 1."""
    cells: dict[str, Any] = {}
    for name, value in row.items():
        name = {"sizes": "size"}.get(name, name)
        if isinstance(value, list):
            value = {str(number): part for number, part in enumerate(value, start=1)}
        if isinstance(value, dict):
            cells.update({f"{name}_{inner}": cell for inner, cell in _flat(value).items()})
        else:
            cells[name] = value
    return cells


def _costs(ansatz: str, costs: Sequence[Cost]) -> Iterable[dict[str, Any]]:
    for cost in costs:
        cells = {"ansatz": ansatz, "cost": cost.name, "value": cost.value, "ratio": cost.ratio, "floor": cost.floor}
        yield _flat(_plain(cells))


def _points(fit: CollapseFit) -> Iterable[dict[str, Any]]:
    names = _FIRST_COLUMNS["collapsed-points"][1:]
    columns = [np.asarray(getattr(fit.points, name)).tolist() for name in names]
    for cells in zip(*columns, strict=True):
        yield {"ansatz": fit.ansatz.name, **_plain(dict(zip(names, cells, strict=True)))}


def _write_csv(rows: list[dict[str, Any]], first: Sequence[str], stream: Any) -> None:
    # an interval that is null in one row is five cells in another, so the columns are those of all rows together
    columns = list(dict.fromkeys([*first, *(name for row in rows for name in row)]))
    columns = [name for name in columns if name in first or any(row.get(name) is not None for row in rows)]
    writer = csv.DictWriter(stream, columns, extrasaction="ignore", lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
