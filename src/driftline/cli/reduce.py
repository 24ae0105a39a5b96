"""``driftline reduce``: from raw energy levels to a table of gap ratios."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from driftline.cli.options import data_path, examples, force_option, quiet_option
from driftline.cli.reading import spectra_options
from driftline.cli.screen import show
from driftline.reading import InputOptions
from driftline.wording import printable

if TYPE_CHECKING:
    from driftline.blocks import Block
    from driftline.reduction import Reduction

EXAMPLES = examples(
    "driftline reduce spectra --pattern 'L{size}/W{disorder}/{realisation}.dat' --out r.csv",
    "driftline reduce ed.h5 --pattern 'L{size}/W{disorder}/levels' --states 50 --centre middle",
    "driftline reduce levels.csv --fraction 0.2 --centre energy=0 --observable gap-ratio:unitary",
)


@click.command(epilog=EXAMPLES)
@data_path()
@click.option(
    "--out",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="CSV, or HDF5 if it ends in .h5 [default: NAME-gap-ratio.csv].",
)
@click.option("--fraction", type=float, metavar="F", help="Use this fraction of the levels [default: 1/3].")
@click.option("--states", type=int, metavar="N", help="Use this number of levels instead.")
@click.option(
    "--centre",
    default="quantile=0.5",
    show_default=True,
    metavar="WHERE",
    help="Where the window lies: quantile=Q, energy=E, or middle, which is (E_min + E_max)/2.",
)
@click.option(
    "--degenerate",
    type=click.Choice(("refuse", "merge", "keep")),
    default="refuse",
    show_default=True,
    help="Levels that coincide: an error, counted once, or a gap of zero.",
)
@click.option(
    "--observable",
    default="gap-ratio",
    show_default=True,
    metavar="NAME",
    help="Label of the table; gap-ratio:unitary and gap-ratio:symplectic bring other ergodic values.",
)
@force_option("Replace an earlier output file.")
@quiet_option()
@spectra_options
def reduce(
    path: Path, out: Path | None, fraction: float | None, states: int | None, centre: str, degenerate: Any,
    observable: str, force: bool, quiet: bool, **options: Any,
) -> None:  # fmt: skip
    """From raw energy levels to gap ratios.

    Reads the levels of every disorder realisation in PATH, takes the mean adjacent-gap ratio in an energy window, and
    writes a table with a row for each realisation, which analyse and inspect read.
    """
    from driftline.observables import references
    from driftline.progress import terminal_progress
    from driftline.readers.write import write_realisations
    from driftline.reduction import reduce_spectra
    from driftline.report.simulated import check_target
    from driftline.spectra import Window

    window = Window.of(fraction, states, centre)
    labels = references({"observable": observable})
    target = Path(f"{path.stem or path.name}-gap-ratio.csv") if out is None else out
    check_target(target, force=force)
    with terminal_progress(quiet=quiet) as progress:
        reduction = reduce_spectra(
            path, window=window, degenerate=degenerate, input=InputOptions().with_options(options), progress=progress
        )  # fmt: skip
        write_realisations(reduction.columns(), labels, target, f"Each value is the mean over {window}.")
    if not quiet:
        show(_report(reduction, labels))
        click.echo(f"\nWritten to {printable(str(target))}")


def _report(reduction: Reduction, labels: dict[str, Any]) -> list[Block]:
    """What was reduced: a row for each size, and what to compare its ends with."""
    from driftline.blocks import BLANK, HEADING, Paragraph, Table
    from driftline.observables import POISSON

    rows = tuple(
        (f"{s.size:g}", str(s.disorders), str(s.realisations), _span(s.levels), _span(s.used), f"{s.first:.4f}",
         f"{s.last:.4f}")
        for s in reduction.summary()
    )  # fmt: skip
    columns = ("size", "disorders", "realisations", "levels", "used", "weakest", "strongest")
    limits = f"independent levels have {POISSON:.4f}"
    if (ergodic := labels.get("ergodic_value")) is not None:
        limits += f", random matrices as in {labels['observable']} {ergodic:.4f}"
    blocks: list[Block] = [
        Paragraph(f"Gap ratio of {reduction.window}", HEADING),
        Table("Mean gap ratio at the weakest and the strongest disorder", columns, rows),
        BLANK,
        Paragraph(f"For comparison: {limits}."),
    ]
    if reduction.numbered:
        text = "Rows without labels were numbered apart; say --paired if row k is one realisation at all disorders."
        blocks.append(Paragraph(text))
    if reduction.coinciding:
        text = f"{reduction.coinciding} levels coincide with the one below: an unresolved symmetry, or too few digits."
        blocks.append(Paragraph(text, "warning"))
    return blocks


def _span(ends: tuple[int, int]) -> str:
    return str(ends[0]) if ends[0] == ends[1] else f"{ends[0]}-{ends[1]}"
