"""``driftline simulate``: curves whose truth is known, to try the program on."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any

import click

from driftline.cli.options import examples, force_option, names_option, quiet_option, seed_option
from driftline.cli.screen import show
from driftline.errors import ConfigurationError
from driftline.wording import shown

EXAMPLES = examples(
    "driftline simulate made.csv",
    "driftline simulate made.h5 --truth power-law --set W_c=4 --set nu=1.6 --error 0.001 --seed 7",
    "driftline simulate made.csv --truth power-law --set correction=0.1,0.02 --set omega=0.8",
    "driftline simulate drift.csv --truth linear-drift --set rate=0.2 --sizes 8,12,16,20",
    "driftline simulate made.h5 --disorder 2 6 31 --correlation 0.5",
)


def truth_names() -> Iterable[str]:
    """The truths on offer."""
    from driftline.truths import TRUTHS

    return TRUTHS


def function_names() -> Iterable[str]:
    """The scaling functions on offer."""
    from driftline.truths import FUNCTIONS

    return FUNCTIONS


@click.command(epilog=EXAMPLES)
@click.argument("file", type=click.Path(path_type=Path))
@names_option(
    "--truth", "truth", truth_names, "What the curves follow.", many=False, default="power-law", show_default=True
)
@click.option("--set", "parameters", multiple=True, metavar="NAME=VALUE", help="Parameter of the truth or function.")
@names_option(
    "--function", "function", function_names, "Scaling function: logistic, gompertz or slow-tails.", many=False
)
@click.option("--sizes", default="8,10,12,14,16,18", show_default=True, metavar="L,L,...", help="System sizes.")
@click.option("--disorder", type=(float, float, int), default=(1.0, 8.0, 21), show_default=True,
              metavar="LOW HIGH POINTS", help="Disorder grid.")  # fmt: skip
@click.option("--error", type=float, default=0.003, show_default=True, metavar="E", help="Standard error of each mean.")
@click.option("--correlation", type=float, default=0.0, show_default=True, metavar="R",
              help="Correlation of the points of one size, as from shared realisations; needs HDF5.")  # fmt: skip
@seed_option()
@force_option("Replace an earlier file.")
@quiet_option()
def simulate(file: Path, quiet: bool, force: bool, **options: Any) -> None:
    """Write synthetic curves with a known truth to FILE.

    The name ends in .csv or .h5 and decides the format. The truth stands in the comments of the CSV, or in the
    attributes of the group /curves, and the same options with the same seed make the same file.

    \b
    Truths, each with a transition unless said otherwise:
      power-law         W_c, nu, correction (g0,g1,...), omega
      kt                W_c, b: length growing as exp(b/sqrt|W - W_c|)
      inverse-drift     as power-law, W_c(L) = W_c + shift/L
      linear-drift      as power-law, W_c(L) = W_c + rate L: no transition
      log-drift         as power-law, W_c(L) = W_c + rate ln L: no transition
      size-ratio        ratio: scales as W/L, no transition
      departure         W_0, rate: leaves a plateau at W_0 + rate L, no transition
      finite-length     W_0, c, alpha: localised at all W, no transition
      size-independent  W_0: size does nothing
    The scaling function of each takes high, low and scale.
    """
    from driftline.report.simulated import check_target, simulated_blocks, write_simulated
    from driftline.truths import make_truth, synthetic

    check_target(file, force=force)
    truth = make_truth(options.pop("truth"), _assigned(options.pop("parameters")), options.pop("function"))
    sizes = _sizes(options.pop("sizes"))
    made = synthetic(truth, sizes, **{**options, "seed": options["seed"] or 0})
    write_simulated(made, file)
    if not quiet:
        show(simulated_blocks(made, file))


def _assigned(pairs: Iterable[str]) -> dict[str, str]:
    found: dict[str, str] = {}
    for pair in pairs:
        name, equals, value = pair.partition("=")
        if not equals or not name:
            raise ConfigurationError(f"option --set: {shown(pair)} is not of the form NAME=VALUE, for example nu=1.6")
        if name in found:
            raise ConfigurationError(f"option --set: {name} is given twice; give it once")
        found[name] = value.strip()
    return found


def _sizes(text: str) -> list[float]:
    try:
        return [float(part) for part in text.split(",")]
    except ValueError as reason:
        problem = f"option --sizes: must be numbers joined by commas, for example 8,12,16, not {shown(text)}"
        raise ConfigurationError(problem) from reason
