"""The machine-readable result: `result.json` and the tables beside it.

The content is `Analysis.to_dict`, field by field in `result_fields.md` beside this file: numbers are in the user's
units, and what is missing is null, never NaN.
"""

from __future__ import annotations

import csv
import json
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.plain import plain
from driftline.report.base import Writer
from driftline.report.figure_tables import COLUMNS, figure_tables

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit
    from driftline.costs import Cost
    from driftline.partial import CollapseStudy, CrossingStudy


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
    return analysis.to_dict()


def to_json(result: Analysis | CrossingStudy | CollapseStudy) -> str:
    """`record`, or what a part of the job found, as the text of `result.json`."""
    return json.dumps(result.to_dict(), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def tables(analysis: Analysis) -> dict[str, list[dict[str, Any]]]:
    """The tables by file stem, each a list of rows with equal keys; missing cells are None."""
    return {
        **crossing_tables(analysis),
        **collapse_tables(analysis),
        "stability": [_flat(row) for row in _stability(analysis)],
        **plain(figure_tables(analysis)),
    }


def crossing_tables(found: Analysis | CrossingStudy) -> dict[str, list[dict[str, Any]]]:
    """The tables of crossings and drift laws."""
    return {
        "crossings": [_flat(row) for row in found.crossings.to_dict()],
        "drift": [_flat(row) for row in found.drift.to_dict()["laws"]],
    }


def collapse_tables(found: Analysis | CollapseStudy) -> dict[str, list[dict[str, Any]]]:
    """The tables of ansätze, cost functions and collapsed points."""
    return {
        "ansatze": [_flat({k: v for k, v in row.items() if k != "costs"}) for row in found.comparison.to_dict()],
        "costs": [row for name, costs in found.costs.items() for row in _costs(name, costs)],
        "collapsed-points": [row for fit in found.comparison.fits for row in _points(fit)],
    }


class ResultFile(Writer):
    """`result.json`."""

    title = "result.json"

    def write(self, analysis: Analysis | CrossingStudy | CollapseStudy, folder: Path) -> None:
        """Write `folder/result.json`."""
        (folder / "result.json").write_text(to_json(analysis), encoding="utf-8", newline="\n")


class Tables(Writer):
    """The tables as CSV: numbers in full precision, empty cells where there is no number."""

    title = "tables"

    def write(self, analysis: Analysis, folder: Path) -> None:
        """Write `folder/tables/*.csv`."""
        write_tables(tables(analysis), folder)


def write_tables(tables: Mapping[str, list[dict[str, Any]]], folder: Path) -> None:
    """Write `folder/tables/*.csv`; a table without rows is written with its first columns only."""
    place = folder / "tables"
    place.mkdir()
    for name, rows in tables.items():
        with (place / f"{name}.csv").open("w", encoding="utf-8", newline="") as stream:
            _write_csv(rows, _FIRST_COLUMNS[name], stream)


_FIRST_COLUMNS = {
    "crossings": ("size_1", "size_2", "probability", "separated"),
    "drift": ("name", "bounded", "log_evidence", "probability"),
    "ansatze": ("ansatz", "hypothesis", "log_evidence", "log_evidence_error", "probability"),
    "stability": ("ansatz", "smallest_size", "window_1", "window_2"),
    "costs": ("ansatz", "cost", "value", "ratio"),
    "collapsed-points": ("ansatz", "size", "disorder", "x", "y", "error", "fitted", "residual"),
    **COLUMNS,
}


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
        yield _flat(plain(cells))


def _stability(analysis: Analysis) -> Iterable[dict[str, Any]]:
    """Each refit with its shift against the fit to all data, in units of the standard deviation expected by chance."""
    for found in analysis.stability:
        shift = found.significance(analysis.comparison[found.ansatz].parameters["W_c"])
        yield {**plain(found), "shift_in_sd": shift}


def _points(fit: CollapseFit) -> Iterable[dict[str, Any]]:
    names = _FIRST_COLUMNS["collapsed-points"][1:]
    columns = [np.asarray(getattr(fit.points, name)).tolist() for name in names]
    for cells in zip(*columns, strict=True):
        yield {"ansatz": fit.ansatz.name, **plain(dict(zip(names, cells, strict=True)))}


def _write_csv(rows: list[dict[str, Any]], first: Sequence[str], stream: Any) -> None:
    # an interval that is null in one row is five cells in another, so the columns are those of all rows together
    columns = list(dict.fromkeys([*first, *(name for row in rows for name in row)]))
    columns = [name for name in columns if name in first or any(row.get(name) is not None for row in rows)]
    writer = csv.DictWriter(stream, columns, extrasaction="ignore", lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
