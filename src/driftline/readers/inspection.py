"""The text of ``driftline inspect``: what was read, from where, and what looks wrong with it.

Each suspicion is a function in `CHECKS` that takes the curves and yields sentences; to add one, write it and add it
there. Nothing here changes the data.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from driftline.curves import Curve, Curves, FloatArray
from driftline.readers.findings import raw_findings

WIDTH = 80

#: Gap ratio of two independent orthogonal blocks read as one spectrum: Giraud, Mace, Vernier, Alet, PRX 12, 011006
#: (2022), from memory.
TWO_BLOCKS = 0.4234

ERROR_SPREAD = 30.0
OUTLIER = 5.0  # standard errors; by chance alone once in two million points
FEW_SIZES = 4
FEW_SAMPLES = 30  # an error from n samples is itself uncertain by 1/sqrt(2 (n - 1)), 13 % at 30


def inspect_text(curves: Curves) -> str:
    """Report on `curves` for a person: source, labels, a table of the sizes, and what looks wrong.

    Parameters
    ----------
    curves : Curves
        As `driftline.readers.read` returns them; without an origin the part about the file says so.

    Returns
    -------
    str
        Plain text, 80 columns wide, ending in a line break.
    """
    findings = what_looks_wrong(curves)
    head = "What looks wrong" if findings else "Nothing looks wrong."
    parts = [
        *_source(curves),
        "",
        *_meaning(curves),
        "",
        *_table(curves),
        "",
        *_ranges(curves),
        "",
        *_realisations(curves),
        head,
        *(line for finding in findings for line in _wrapped(finding, "  - ")),
    ]
    return "\n".join(parts) + "\n"


def what_looks_wrong(curves: Curves) -> list[str]:
    """Everything suspicious about `curves`, one sentence or two each, in the order of `CHECKS`."""
    return [finding for check in CHECKS for finding in check(curves)]


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=" " * len(indent)) or [""]


def _field(name: str, value: str) -> list[str]:
    return _wrapped(value or "-", f"{name:<13}")


def _source(curves: Curves) -> list[str]:
    origin = curves.origin
    if not origin:
        return _wrapped("These curves were made in memory; there is no file to name.")
    lines = _field("File", str(origin.get("path", "-")))
    lines += _field("SHA-256", str(origin.get("sha256", "-")))
    lines += _field("Layout", str(origin.get("layout", "-")))
    lines += _field("Rows", str(origin.get("rows", "-")))
    pairs = [name if name == column else f"{name} from {column}" for name, column in origin.get("columns", {}).items()]
    lines += _field("Columns", ", ".join(pairs))
    for note in origin.get("notes", ()):
        lines += _field("Note", str(note))
    return lines


def _meaning(curves: Curves) -> list[str]:
    labels = curves.labels
    unit = f" ({labels.disorder_unit})" if labels.disorder_unit else ""
    lines = _field("Observable", f"{labels.observable}, {labels.observable_symbol}")
    lines += _field("Disorder", f"{labels.disorder_symbol}{unit}, {labels.disorder_kind}")
    lines += _field("Ergodic", _known(labels.ergodic_value))
    lines += _field("Localised", _known(labels.localised_value))
    return lines + _field("Dimension", _known(labels.dimension))


def _known(value: float | None) -> str:
    return "not given" if value is None else f"{value:g}"


def _table(curves: Curves) -> list[str]:
    lines = [f"{'size':>10} {'points':>7} {'disorder from':>14} {'to':>10} {'median error':>13} {'realisations':>19}"]
    for curve in curves.curves:
        lines.append(
            f"{curve.size:>10g} {curve.disorder.size:>7} {curve.disorder[0]:>14g} {curve.disorder[-1]:>10g} "
            f"{np.median(curve.error):>13.3g} {_counts(curve):>19}"
        )
    return lines


def _counts(curve: Curve) -> str:
    if curve.samples is None:
        return "not given"
    low, high = int(curve.samples.min()), int(curve.samples.max())
    return f"{low}" if low == high else f"{low} to {high}"


def _ranges(curves: Curves) -> list[str]:
    low, high = curves.common_range
    first = curves.curves[0].disorder
    equal = all(np.array_equal(curve.disorder, first) for curve in curves.curves)
    correlated = sum(curve.covariance is not None for curve in curves.curves)
    grids = "the same at every size" if equal else "different between sizes"
    lines = _field("Common range", f"{low:g} to {high:g}")
    lines += _field("Disorders", grids)
    return lines + _field("Covariance", f"given at {correlated} of {len(curves.curves)} sizes")


def _realisations(curves: Curves) -> list[str]:
    """A table of what raw values showed, with a line on how to read it; nothing for averaged data."""
    sizes = curves.origin.get("realisations", ())
    if not sizes:
        return []
    lines = [f"{'size':>10} {'neighbours correlate':>21} {'points':>12} {'variance inflation':>19} {'stood twice':>12}"]
    for size in sizes:
        correlation, ratio = size["correlation"], size["error_ratio"]
        known = "unknown" if correlation is None else f"{correlation:.2f} ({size['correlation_z']:+.1f} sd)"
        inflation = "-" if ratio is None else f"{ratio**2:.3g}"
        points = "correlated" if size["shared"] else "independent"
        lines.append(f"{size['size']:>10g} {known:>21} {points:>12} {inflation:>19} {size['repeats']:>12}")
    if any(size["error_ratio"] for size in sizes):
        lines += _wrapped(
            "Variance inflation: of the means, against counting all values as independent (median over disorders). "
            "Errors over realisations, which are used, are its square root times larger."
        )
    return [*lines, ""]


# ---------------------------------------------------------------- what looks wrong


def _raw(curves: Curves) -> Iterator[str]:
    return (finding.sentence for finding in raw_findings(curves))


def _few_sizes(curves: Curves) -> Iterator[str]:
    count = len(curves.curves)
    if count < FEW_SIZES:
        crossings = "one crossing shows no drift" if count == 2 else "two successive crossings fit any law of drift"
        yield f"There are {count} sizes only: {crossings}. Add sizes before trusting an extrapolation."


def _constant_errors(curves: Curves) -> Iterator[str]:
    sizes = [f"{curve.size:g}" for curve in curves.curves if np.all(curve.error == curve.error[0])]
    if sizes:
        yield (
            f"All errors are exactly equal at size {', '.join(sizes)}: measured errors never are. Compute them from "
            "the realisations of each point."
        )


def _error_spread(curves: Curves) -> Iterator[str]:
    size, disorder, _, error = curves.flat()
    low, high = int(np.argmin(error)), int(np.argmax(error))
    if error[high] > ERROR_SPREAD * error[low]:
        yield (
            f"The errors differ by a factor of {error[high] / error[low]:.0f}: {error[low]:.3g} at size {size[low]:g}, "
            f"disorder {disorder[low]:g}, and {error[high]:.3g} at size {size[high]:g}, disorder {disorder[high]:g}. "
            "Check that both come from enough realisations and in the same way."
        )


def _samples(curves: Curves) -> Iterator[str]:
    missing = [f"{curve.size:g}" for curve in curves.curves if curve.samples is None]
    if missing:
        yield (
            f"The number of realisations is not given at size {', '.join(missing)}. Add a column 'samples', so that "
            "errors from too few realisations can be told."
        )
    few = [
        (int(curve.samples.min()), curve.size)
        for curve in curves.curves
        if curve.samples is not None and curve.samples.min() < FEW_SAMPLES
    ]
    if few:
        count, size = min(few)
        # Relative standard deviation of a standard error from n normal samples, to leading order (textbook result)
        doubt = f"uncertain by {100 / np.sqrt(2 * (count - 1)):.0f} %" if count > 1 else "unknowable"
        yield (
            f"Only {count} realisation{'s' * (count > 1)} at size {size:g}: an error from so few is itself {doubt}. "
            f"Run at least {FEW_SAMPLES}."
        )


@dataclass(frozen=True)
class _Residuals:
    """Each inner point against the cubic through its two neighbours on either side.

    `z` is standardised by the errors and by what a coarse grid hides: how much other interpolations disagree with the
    cubic beyond their noise. `plain` is standardised by the errors alone, at the points where little is hidden.
    """

    disorder: FloatArray
    z: FloatArray
    plain: FloatArray


def _residuals(curve: Curve) -> _Residuals | None:
    n = curve.disorder.size
    if n < 7:  # six neighbours are needed
        return None
    rows = [_residual(curve, i) for i in range(2, n - 2)]  # nearer the ends, a step cannot be told from an outlier
    z, plain, smooth = (np.array(column) for column in zip(*rows, strict=True))
    return _Residuals(curve.disorder[2:-2], z, plain[smooth.astype(bool)])


def _residual(curve: Curve, i: int) -> tuple[float, float, bool]:
    x, n = curve.disorder, curve.disorder.size
    cubic = _weights(x, i, _neighbours(n, i, 4))
    # A quintic sees curvature that the cubic misses; lopsided cubics see a step that every balanced one halves
    others = [_neighbours(n, i, 6), _neighbours(n, i, 4, shift=-1), _neighbours(n, i, 4, shift=1)]
    hidden = max(_disagreement(curve, cubic - _weights(x, i, nodes)) for nodes in others)
    sd = np.hypot(curve.error[i], _noise(curve, cubic))
    miss = curve.mean[i] - cubic @ curve.mean
    smooth = abs((cubic - _weights(x, i, others[0])) @ curve.mean) < sd / 2
    return miss / np.hypot(sd, hidden), miss / sd, bool(smooth)


def _disagreement(curve: Curve, difference: FloatArray) -> float:
    return max(0.0, float(abs(difference @ curve.mean)) - _noise(curve, difference))


def _noise(curve: Curve, weights: FloatArray) -> float:
    return float(np.sqrt(np.sum((weights * curve.error) ** 2)))


def _neighbours(n: int, i: int, count: int, *, shift: int = 0) -> list[int]:
    """The `count` indices nearest to `i` without `i`, as even on both sides (but for `shift`) as the ends allow."""
    start = min(max(i - count // 2 + shift, 0), n - count - 1)
    return [j for j in range(start, start + count + 1) if j != i]


def _weights(x: FloatArray, i: int, nodes: list[int]) -> FloatArray:
    """Weight of every value in the polynomial through `nodes`, at ``x[i]`` (Lagrange's formula), zero elsewhere."""
    weights = np.zeros(x.size)
    for k in nodes:
        rest = x[[j for j in nodes if j != k]]
        weights[k] = np.prod((x[i] - rest) / (x[k] - rest))
    return weights


def _outliers(curves: Curves) -> Iterator[str]:
    for curve in curves.curves:
        found: list[str] = []
        while (residuals := _residuals(curve)) is not None and len(found) < curve.disorder.size // 4:
            worst = int(np.argmax(np.abs(residuals.z)))
            if abs(residuals.z[worst]) < OUTLIER:
                break
            found.append(f"{residuals.disorder[worst]:g} ({residuals.z[worst]:+.1f})")
            # Without the worst point, its neighbours are judged fairly
            curve = curve.keep(curve.disorder != residuals.disorder[worst])
        if found:
            yield (
                f"At size {curve.size:g} a point lies far off the cubic through its neighbours, at disorder "
                f"{', '.join(found)} standard errors: it or the point beside it looks wrong. Check these runs."
            )


def _scatter(curves: Curves) -> Iterator[str]:
    if curves.correlated:  # the scatter of correlated points says nothing about their errors
        return
    every = [found.plain for curve in curves.curves if (found := _residuals(curve)) is not None]
    plain = np.concatenate(every) if every else np.empty(0)
    if plain.size < 20:  # neighbouring residuals share points; with 20 the mean square is known to about a third
        return
    scatter = float(np.sqrt(np.median(plain**2) / 0.4549))  # 0.4549: median of chi^2 with one degree of freedom
    if scatter < 0.4:
        yield (
            f"The points scatter {scatter:.2g} times as much as their errors say. Either 'error' holds a standard "
            "deviation instead of a standard error, or the same disorder realisations were used at several disorders "
            "(then give the covariance)."
        )
    elif scatter > 2.5:
        yield (
            f"The points scatter {scatter:.2g} times as much as their errors say. Were eigenstates of one realisation "
            "counted as independent? Average them first, then take the error over realisations."
        )


def _outside_references(curves: Curves) -> Iterator[str]:
    ergodic, localised = curves.labels.ergodic_value, curves.labels.localised_value
    if ergodic is None or localised is None:
        return
    low, high = sorted((ergodic, localised))
    size, disorder, mean, error = curves.flat()
    excess = np.maximum(mean - high, low - mean) / error
    count, worst = int(np.count_nonzero(excess > OUTLIER)), int(np.argmax(excess))
    if count:
        yield (
            f"{count} mean{'s lie' if count > 1 else ' lies'} more than {OUTLIER:g} errors outside the reference "
            f"values {low:g} and {high:g}; the worst is {mean[worst]:.5g} at size {size[worst]:g}, disorder "
            f"{disorder[worst]:g} ({excess[worst]:.1f} errors). Check the labels and the normalisation."
        )


def _plateau(curves: Curves) -> Iterator[str]:
    name = curves.labels.observable.lower()
    if "gap" not in name or "ratio" not in name:
        return
    flat = [f"{curve.size:g}" for curve in curves.curves if _sits_at_two_blocks(curve)]
    if len(flat) > len(curves.curves) / 2:
        yield (
            f"At weak disorder the gap ratio sits at {TWO_BLOCKS:g} (size {', '.join(flat)}), the value of two "
            "independent blocks (Giraud et al. 2022): a symmetry may be unresolved. Compute it within one sector."
        )


def _sits_at_two_blocks(curve: Curve) -> bool:
    """Whether the three weakest disorders agree with `TWO_BLOCKS` and with each other within three errors."""
    mean, error = curve.mean[:3], curve.error[:3]
    level = np.all(np.abs(mean - TWO_BLOCKS) < 3 * error + 0.002)  # 0.002: finite size; the limit is for large matrices
    steady = all(abs(mean[b] - mean[a]) < 3 * np.hypot(error[a], error[b]) for a, b in pairwise(range(3)))
    # With errors above 0.01 the ergodic value and the localised one could both be meant
    return bool(level and steady and np.all(error < 0.01))


CHECKS = (
    _raw,
    _few_sizes,
    _constant_errors,
    _error_spread,
    _samples,
    _outliers,
    _scatter,
    _outside_references,
    _plateau,
)
