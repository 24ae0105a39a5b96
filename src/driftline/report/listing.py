"""The list of scaling ansätze for ``driftline ansatze``."""

from __future__ import annotations

import textwrap

import numpy as np

from driftline.curves import Curve, Curves
from driftline.report.summary import WIDTH
from driftline.scaling.ansatz import available, parse_ansatz

EXAMPLE = "Priors that depend on the data are shown for sizes 8 to 16 and disorders from 1 to 11; give PATH for yours."


def listing(curves: Curves | None = None) -> str:
    """Every ansatz with formula, parameters and priors, as text.

    Parameters
    ----------
    curves : Curves, optional
        Data that the priors refer to; without them a made-up grid is used, and said so.
    """
    lines = [] if curves is not None else [*textwrap.wrap(EXAMPLE, WIDTH), ""]
    for name in available():
        ansatz = parse_ansatz(name, curves or _example())
        lines.append(f"{name}  ({ansatz.hypothesis})")
        lines += textwrap.wrap(ansatz.formula, WIDTH, initial_indent="  ", subsequent_indent="    ")
        for each in ansatz.parameters:
            text = f"{each.name:6} {each.prior.describe()} ({each.meaning})"
            lines += textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent=" " * 9, break_on_hyphens=False)
        lines.append("")
    return "\n".join(lines)


def _example() -> Curves:
    grid = np.linspace(1.0, 11.0, 11)
    return Curves([Curve(size, grid, np.tanh((6 - grid) * size / 40), np.full(11, 0.01)) for size in (8, 12, 16)])
