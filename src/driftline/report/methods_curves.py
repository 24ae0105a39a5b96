"""The methods that go from the data to crossings and their drift, as sentences in LaTeX."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from driftline import separation as separation_module
from driftline import smoothing
from driftline.covariance import ENOUGH
from driftline.drift import MIN_PROBABILITY
from driftline.report.latex import escape, general, listed, mathematics, number_words

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.curves import Curve, Curves


def critical(curves: Curves, index: str = "c") -> str:
    """The disorder symbol with an index, for math mode."""
    return f"{mathematics(curves.labels.disorder_symbol)}_{{{index}}}"


def crossing(curves: Curves) -> str:
    """Symbol of the disorder of a crossing, for math mode."""
    return f"{mathematics(curves.labels.disorder_symbol)}^{{*}}"


def data(analysis: Analysis) -> str:
    """What was measured and how its errors are treated."""
    curves = analysis.curves
    labels = curves.labels
    unit = f" (in units of {escape(labels.disorder_unit)})" if labels.disorder_unit else ""
    sentences = [
        f"We analyse the {escape(labels.observable)} ${mathematics(labels.observable_symbol)}$ against the disorder "
        f"strength ${mathematics(labels.disorder_symbol)}${unit} for sizes $L$ = {_sizes(curves.curves)}, "
        f"{_grid(curves)}, {curves.points} points in all.",
        *_selection(analysis),
        *_errors(curves),
    ]
    return " ".join(sentences)


def _sizes(curves: Iterable[Curve]) -> str:
    return listed(general(curve.size) for curve in curves)


def _grid(curves: Curves) -> str:
    counts = sorted({curve.disorder.size for curve in curves.curves})
    low, high = curves.disorder_range
    each = str(counts[0]) if len(counts) == 1 else f"{counts[0]} to {counts[-1]}"
    return f"each at {each} disorders between {general(low)} and {general(high)}"


def _selection(analysis: Analysis) -> list[str]:
    settings, found = analysis.settings, []
    if settings.smallest_size is not None:
        found.append(f"Sizes below {general(settings.smallest_size)} were left out.")
    if settings.window is not None:
        low, high = settings.window
        found.append(f"Disorders outside the window from {general(low)} to {general(high)} were left out.")
    return found


def _errors(curves: Curves) -> list[str]:
    """Where the errors come from, and whether points are correlated."""
    raw: Sequence[Any] = curves.origin.get("realisations") or ()
    of_what = "samples" if curves.labels.disorder_kind == "none" else "disorder realisations"
    counts = [curve.samples for curve in curves.curves if curve.samples is not None]
    behind = ""
    if len(counts) == len(curves.curves):
        low, high = min(int(c.min()) for c in counts), max(int(c.max()) for c in counts)
        behind = (
            f", of which there are {low} a point" if low == high else f", of which there are {low} to {high} a point"
        )
    found = [_average(curves, of_what)] if raw else []
    found.append(f"Errors are standard errors over independent {of_what}{behind}.")
    return [*found, *_correlations(curves, of_what, raw)]


def _average(curves: Curves, of_what: str) -> str:
    options = curves.origin.get("input") or {}
    average = {"median": "the median", "log-mean": r"the logarithmic mean $\exp\langle\ln x\rangle$"}.get(
        str(options.get("average")), "the mean"
    )
    several = any(each.get("error_ratio") is not None for each in curves.origin["realisations"])
    first = "The values of one realisation are averaged first; then " if several else "For every point "
    return f"{first}{average} over {of_what} is taken."


def _correlations(curves: Curves, of_what: str, raw: Sequence[Any]) -> list[str]:
    shared = [curve for curve in curves.curves if curve.covariance is not None]
    if not shared:
        return ["All points are treated as independent."]
    which = "" if len(shared) == len(curves.curves) else f" of $L$ = {_sizes(shared)}"
    found = [
        f"The covariance of the points{which} that share {of_what} enters every fit~\\cite{{weigel2010}}; points of "
        "different sizes are independent."
    ]
    if raw:
        found.append(_shrinkage(raw))
    if any(curve.samples is not None for curve in shared):
        found.append(
            "It is an estimate, so it is multiplied by $1 + k/n$ for $k$ points from $n$ realisations~"
            "\\cite{dodelson2013}."
        )
    return found


def _shrinkage(raw: Sequence[Any]) -> str:
    """Which of the two formulas was used, as `driftline.covariance.shrunk` decides it."""
    known = [each for each in raw if each.get("shared")]
    enough = {each["realisations"] - 1 >= ENOUGH * each["points"] for each in known}
    keys = [key for key, used in (("ledoit2020", True), ("chen2010", False)) if used in enough]
    return f"Its correlations are estimated from the realisations and shrunk~\\cite{{{','.join(keys)}}}."


def crossings(analysis: Analysis) -> str:
    """Smooth curves and their crossings."""
    curves, found = analysis.curves, analysis.crossings
    w = mathematics(curves.labels.disorder_symbol)
    low, high = curves.disorder_range
    both = low > 0 and high / low > smoothing.WIDE_RANGE
    noise = "covariance" if curves.correlated else "errors"
    sentences = [
        f"Every curve is smoothed by a Gaussian process~\\cite{{rasmussen2006}} in ${w}$"
        + (rf" or $\ln {w}$" if both else "")
        + f" on a linear background, with the measured {noise}; its kernel (Mat\\'ern 5/2 or squared exponential), "
        "length and amplitude are averaged over with their marginal likelihood.",
    ]
    if any(curve.disorder.size < smoothing.ENOUGH_POINTS for curve in curves.curves):
        sentences.append(
            f"Sizes with fewer than {smoothing.ENOUGH_POINTS} points take these weights from all sizes together."
        )
    sentences.append(
        f"From {analysis.settings.draws} joint posterior draws of all curves~\\cite{{journel1978}} follow, for "
        f"each pair "
        f"of sizes $L_1<L_2$, the probability that the curves cross between {general(found.window[0])} and "
        f"{general(found.window[1])}, the position ${crossing(curves)}$, and "
        r"$1/\nu_{\mathrm{eff}} = \ln[y'(L_2)/y'(L_1)]/\ln(L_2/L_1)$ from the slopes there~\cite{nightingale1976}."
    )
    return " ".join(sentences)


def drift(analysis: Analysis) -> str:
    """The laws of the drift, or why there are none."""
    found, w = analysis.drift, crossing(analysis.curves)
    left_out = " ".join(escape(sentence) for sentence in found.excluded)
    if not found.laws:
        return " ".join(part for part in ("No law of the drift is fitted.", escape(found.note), left_out) if part)
    laws = listed(f"${law.law.tex}$ ({'bounded' if law.bounded else 'unbounded'})" for law in found.laws)
    sentences = [
        f"The crossings of neighbouring sizes, each at the geometric mean $L$ of its two sizes and with the covariance "
        f"that comes from shared sizes, are fitted by the laws ${w}(L)$ = {laws}; pairs count if they cross with "
        f"probability {MIN_PROBABILITY:g} or more and clear of the ends of the window.",
        left_out,
        r"A transition asks for a limit that is approached as $L^{-1/\nu-\omega}$~\cite{binder1981,luck1985}."
        if any(law.name in ("inverse", "inverse-power") for law in found.laws)
        else "",
        f"With $m$ the value at the middle size and $D$ the shift across all sizes the priors are "
        f"{_drift_prior(found.prior)}." if found.prior else "",
    ]  # fmt: skip
    if any(len(law.law.symbols) > 2 or law.name == "power" for law in found.laws):
        sentences.append("Powers and scales inside a law are log-uniform.")
    if len({law.bounded for law in found.laws}) == 2:
        sentences.append(
            "Bounded and unbounded laws have prior probability 1/2 each, split equally among their laws; the evidence "
            "of each is an integral over all its parameters."
        )
    return " ".join(sentence for sentence in sentences if sentence)


def _drift_prior(text: str) -> str:
    """The line of `driftline.drift.Prior.describe` in math mode."""
    return f"${text.replace('~', chr(92) + 'sim ').replace('^2', '^{2}')}$"


def separation(analysis: Analysis) -> str:
    """The test for size dependence on both sides."""
    curves = analysis.curves
    smooth = f"the smooth curves at {separation_module.SMOOTH_POINTS} disorders"
    of = smooth if separation_module.shared_disorders(curves) is None else "the means"
    held = (
        f"No single size decides: a significance is at most {separation_module.ODD_SIZE_FACTOR:g} times the one "
        f"without "
        "its most helpful size. "
    )
    return (
        r"Whether size matters on both sides of the crossing is tested by the trend with $\ln L$, by weighted least "
        f"squares over all sizes, of {of}, averaged over every run of neighbouring disorders. "
        f"{held if curves.sizes.size > 2 else ''}The search over all runs is "
        f"counted~\\cite{{gross2010,siegmund1995}} with "
        f"{number_words(separation_module.SIMULATED)} simulated sets without size dependence, and a side is "
        f"resolved at "
        f"{separation_module.THRESHOLD:g} standard deviations."
    )
