"""The list of scaling ansätze for ``driftline ansatze``."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

import numpy as np

from driftline.blocks import WIDTH
from driftline.curves import Curve, Curves
from driftline.errors import ConfigurationError
from driftline.scaling.ansatz import available, compose, parse_ansatz
from driftline.scaling.forms import Form

EXAMPLE = "Priors that depend on the data are shown for sizes 8 to 16 and disorders from 1 to 11; give PATH for yours."


def listing(curves: Curves | None = None, forms: Sequence[Form] = (), *, width: int = WIDTH) -> str:
    """Every ansatz with formula, parameters and priors, as text.

    Parameters
    ----------
    curves : Curves, optional
        Data that the priors refer to; without them a made-up grid is used, and said so.
    forms : sequence of Form
        Forms of the user's own, listed last.
    width : int
        Columns to wrap at.
    """
    lines = [] if curves is not None else [*textwrap.wrap(EXAMPLE, width), ""]
    for name in available(forms):
        lines += [*_entry(name, curves, forms, width), ""]
    return "\n".join(lines)


def _entry(name: str, curves: Curves | None, forms: Sequence[Form], width: int) -> list[str]:
    try:
        # a form of the user's own need not be defined on a made-up grid, so only on real data it is tried
        ansatz = compose(name, _example(), forms) if curves is None else parse_ansatz(name, curves, forms)
    except ConfigurationError as reason:
        text = f"not for these data: {reason}"
        return [name, *textwrap.wrap(text, width, initial_indent="  ", subsequent_indent="    ")]
    lines = [f"{name}  ({ansatz.hypothesis})"]
    lines += textwrap.wrap(ansatz.formula, width, initial_indent="  ", subsequent_indent="    ")
    for each in ansatz.parameters:
        text = f"{each.name:6} {each.prior.describe()} ({each.meaning})"
        lines += textwrap.wrap(text, width, initial_indent="  ", subsequent_indent=" " * 9, break_on_hyphens=False)
    source = f"source: {ansatz.form.source}"
    return lines + textwrap.wrap(source, width, initial_indent="  ", subsequent_indent="    ")


def _example() -> Curves:
    grid = np.linspace(1.0, 11.0, 11)
    return Curves([Curve(size, grid, np.tanh((6 - grid) * size / 40), np.full(11, 0.01)) for size in (8, 12, 16)])
