"""What a calibration found, for people and as a file."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from driftline.blocks import BLANK, HEADING, Block, Paragraph, Table
from driftline.errors import InputError

if TYPE_CHECKING:
    from driftline.calibration import Assumed, Calibration


def blocks(calibration: Calibration) -> Iterator[Block]:
    """Table of verdicts, then what each truth says of wrong verdicts and of the intervals."""
    yield Table(
        "Verdicts on simulated data with these sizes, disorders and errors",
        ("if true", "sets", *(_short(code) for code in next(iter(calibration.truths)).verdicts)),
        tuple((truth.ansatz, str(truth.sets), *map(str, truth.verdicts.values())) for truth in calibration.truths),
    )
    for truth in calibration.truths:
        yield BLANK
        yield Paragraph(_named(truth), HEADING)
        yield Paragraph(f"wrong verdict: {truth.wrong}", indent="  ")
        yield Paragraph(f"right verdict: {truth.right}", indent="  ")
        for name, count in truth.covered.items():
            if count.sets:
                yield Paragraph(f"{name} % interval held the true value: {count}", indent="  ")
    yield BLANK
    yield Paragraph(
        f"Verdict on the data themselves: {calibration.analysis.verdict.code}. Ranges are 95 % binomial intervals; the "
        "truths are fits to these data: a form that misses them badly says little, and a drift whose shift D is near "
        "zero cannot be told from a transition."
    )


def _short(code: str) -> str:
    return {"transition-supported": "transition", "size-independent": "no size", "insufficient-data": "too few"}.get(
        code, code
    )


def _named(truth: Assumed) -> str:
    values = "".join(f", {name} = {value:.4g}" for name, value in truth.values.items())
    return f"{truth.ansatz}{values} ({truth.hypothesis}; probability {truth.probability:.2g} on these data)"


def write(calibration: Calibration, path: Path, *, force: bool = False) -> None:
    """Write the calibration as JSON, under a temporary name first.

    Raises
    ------
    InputError
        If `path` exists and `force` is not given, or cannot be written.
    """
    check_target(path, force=force)
    part = path.with_name(path.name + ".part")
    try:
        part.write_text(json.dumps(calibration.to_dict(), indent=1) + "\n", encoding="utf-8")
        part.replace(path)
    except OSError as reason:
        part.unlink(missing_ok=True)
        raise InputError(f"the file cannot be written ({reason.strerror or reason})", where=str(path)) from reason


def check_target(path: Path, *, force: bool) -> None:
    """Refuse to replace a file that is there, before any work is done for it.

    Raises
    ------
    InputError
        If `path` exists and `force` is not given, or its folder does not.
    """
    if path.is_dir():
        raise InputError("this is a folder; name a file for the calibration", where=str(path))
    if path.exists() and not force:
        raise InputError("the file exists; choose another name or give --force", where=str(path))
    if not path.parent.is_dir():
        raise InputError("there is no such folder to write into; make it first", where=str(path.parent))
