"""The methods of the scaling collapse, as sentences in LaTeX."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from driftline import analysis as analysis_module
from driftline import collapse as fitting
from driftline.costs import BOOTSTRAP
from driftline.inference import importance, modes
from driftline.inference import sampling as chains
from driftline.report.latex import general, listed, mathematics, name, number_words, plain_number
from driftline.report.methods_curves import critical
from driftline.scaling import likelihood
from driftline.scaling.expression import ExpressionForm
from driftline.scaling.function import LINEAR_SD, SplineFunction
from driftline.scaling.parameters import Parameter
from driftline.sensitivity import PRIOR_SETS, WIDENED

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.collapse import CollapseFit
    from driftline.scaling.forms import Form

HYPOTHESES = {
    "transition": "with a critical disorder",
    "drift": "whose crossover moves on with size",
    "none": "without a critical disorder",
}
_NUMBER = re.compile(r"-?\d+(?:\.\d+)?(?:e[-+]?\d+)?")


def model(analysis: Analysis) -> str:
    """The scaling function and the forms fitted."""
    ansatze = [fit.ansatz for fit in analysis.comparison.fits]
    corrected, amplitude = any(each.corrected for each in ansatze), any(each.has_amplitude for each in ansatze)
    y = mathematics(analysis.curves.labels.observable_symbol)
    right = r"F(x) + (L/L_{\min})^{-\omega}G(x)" if corrected else "F(x)"
    right = rf"(L/L_0)^{{\kappa_A}}[{right}]" if amplitude else right
    sentences = [
        f"All points are fitted at once by ${y} = {right}$ with a scaled variable "
        f"$x({mathematics(analysis.curves.labels.disorder_symbol)}, L)$ for each scaling form. $F$ is a cubic "
        f"B-spline of {SplineFunction().count} "
        f"functions~\\cite{{eilers1996}} whose "
        f"second differences are Gaussian with scale $\\tau$ and whose constant and linear part have standard "
        f"deviation "
        f"{LINEAR_SD:g}, in units of the range of the data.",
    ]
    if corrected:
        sentences.append(
            f"$G$, the leading correction to scaling~\\cite{{slevin1999}}, is linear with standard deviation "
            f"{likelihood.CORRECTION_SD:g} in units of the range at the smallest size, and is part of the forms called "
            f"{name('corrected')}; the others have $F$ alone."
        )
    if amplitude:
        sentences.append(f"The amplitude, with $L_0$ a typical size, is part of the forms called {name('amplitude')}.")
    sentences.append(
        f"The coefficients of {'$F$ and $G$' if corrected else '$F$'} are integrated out exactly. Measured errors are "
        "multiplied by a common factor $s$."
    )
    return " ".join([*sentences, *_forms(analysis)])


def _forms(analysis: Analysis) -> list[str]:
    """One sentence for each hypothesis: each form with its formula and source, and its variants by name."""
    found = []
    for hypothesis, words in HYPOTHESES.items():
        forms: dict[str, list[CollapseFit]] = {}
        for fit in analysis.comparison.fits:
            if fit.ansatz.hypothesis == hypothesis:
                forms.setdefault(fit.ansatz.form.name, []).append(fit)
        if forms:
            parts = listed(_form(analysis, fits) for fits in forms.values())
            found.append(f"Forms {words}: {parts}.")
    missing = [
        each for each in analysis.settings.ansatze if each not in {f.ansatz.name for f in analysis.comparison.fits}
    ]
    if missing:
        found.append(f"Left out because they do not suit these data: {listed(name(each) for each in missing)}.")
    return found


def _form(analysis: Analysis, fits: list[CollapseFit]) -> str:
    form = fits[0].ansatz.form
    names = listed(name(fit.ansatz.name) for fit in fits)
    if isinstance(form, ExpressionForm):
        return f"{name(form.formula)} of our own ({names})"
    source = f"~\\cite{{{','.join(form.citations)}}}" if form.citations else ""
    return f"${_formula(analysis, form)}${source} ({names})"


def _formula(analysis: Analysis, form: Form) -> str:
    return form.tex.format(W=mathematics(analysis.curves.labels.disorder_symbol))


def priors(analysis: Analysis) -> str:
    """The prior of every parameter, said once where forms share it."""
    said: dict[tuple[str, str], list[str]] = {}
    for fit in analysis.comparison.fits:
        for parameter in fit.ansatz.parameters:
            said.setdefault((_symbol(analysis, fit, parameter), parameter.prior.describe()), []).append(fit.ansatz.name)
    for nuisance in likelihood.NUISANCE:
        said[f"${nuisance.symbol}$", nuisance.prior.describe()] = []
    symbols = [each for each, _ in said]
    texts = []
    for (symbol, prior), users in said.items():
        where = f" in {listed(map(name, users))}" if symbols.count(symbol) > 1 else ""
        texts.append(f"{symbol}{where} {_NUMBER.sub(lambda found: plain_number(found[0]), prior)}")
    text = f"Priors: {'; '.join(texts)}."
    if any(each.name == "W_mid" for fit in analysis.comparison.fits for each in fit.ansatz.parameters):
        middle = critical(analysis.curves, r"\mathrm{mid}")
        text += (
            f" A moving critical disorder is given by its value ${middle}$ at the middle size and its shift $D$ "
            f"from the "
            "smallest to the largest."
        )
    return text


def _symbol(analysis: Analysis, fit: CollapseFit, parameter: Parameter) -> str:
    if isinstance(fit.ansatz.form, ExpressionForm) and parameter.name in fit.ansatz.form.priors:
        return name(parameter.name)
    w = mathematics(analysis.curves.labels.disorder_symbol)
    return f"${re.sub('^W_', lambda _: w + '_', parameter.symbol)}$"


def sampling(analysis: Analysis) -> str:
    """How posterior and evidence are computed, and whether that went well."""
    fits = analysis.comparison.fits
    chained = [fit for fit in fits if fit.sampler.method == "chain"]
    sentences = [
        f"The maxima of each posterior are sought from $2^{{{modes.SCAN_POWER}}}$ quasi-random points of the "
        f"prior, and "
        f"mixtures of Student-$t$ densities with {importance.DEGREES:g} degrees of freedom are adapted to it by "
        f"importance "
        "sampling~\\cite{cappe2008,cornuet2012}.",
        _chains() if chained else
        f"There is no Markov chain: evidence and posterior are those of the adapted importance samples, with up to "
        f"{importance.ROUNDS} rounds of {number_words(importance.ROUND_DRAWS)} draws.",
        f"Their effective number of draws~\\cite{{kong1994}} has to be at least {fitting.EFFECTIVE_LEAST:g}"
        f"{_failures(fits)}. The Monte Carlo errors of $\\ln Z$ are {_range(fit.log_evidence_error for fit in fits)}.",
        rf"The evidence $Z$ has $\tau$ sampled; parameters are inferred with $\tau$ held at "
        rf"{plain_number(f'{np.exp(fitting.UNDERSMOOTHING):.3g}')} times its median, because the smoothness of highest "
        rf"evidence "
        r"biases them (undersmoothing~\cite{hall1992}).",
    ]  # fmt: skip
    return " ".join(sentences)


def _chains() -> str:
    return (
        f"The posterior is then sampled by {chains.WALKERS} walkers~\\cite{{foremanmackey2013}} with "
        r"differential-evolution~\cite{terbraak2006}, snooker~\cite{terbraak2008} and stretch~\cite{goodman2010} moves"
        r", and in half of the steps with independent proposals from the adapted mixture~\cite{tierney1994}, "
        f"until the chain is {chains.LENGTHS_WANTED:g} autocorrelation times long and holds "
        f"{number_words(int(chains.EFFECTIVE_WANTED))} effective draws; the evidence comes from "
        f"{number_words(fitting.EVIDENCE_DRAWS)} draws or more of a mixture fitted to the chain."
    )


def _failures(fits: Iterable[CollapseFit]) -> str:
    failed = [name(fit.ansatz.name) for fit in fits if not fit.sampler.converged]
    return f"; the fits of {listed(failed)} did not converge" if failed else ""


def _range(values: Iterable[float]) -> str:
    known = sorted(values)
    low, high = f"{known[0]:.2g}", f"{known[-1]:.2g}"
    return plain_number(low) if low == high else f"{plain_number(low)} to {plain_number(high)}"


def weights(analysis: Analysis) -> str:
    """How forms are compared, and what the headline averages over."""
    hypotheses = {fit.ansatz.hypothesis for fit in analysis.comparison.fits}
    found = []
    if len(hypotheses) > 1:
        found.append(
            f"The {len(hypotheses)} hypotheses have equal prior probability, split equally among their forms, and are "
            "weighed by their evidence~\\cite{kass1995}."
        )
    else:
        found.append("Forms of one hypothesis alone are fitted, so that no rival is compared.")
    crossover = analysis.crossover
    if crossover is None:
        found.append("None of the forms has a critical disorder, so none is quoted.")
        return " ".join(found)
    what = f"${critical(analysis.curves)}$" + (r" and $\nu$" if crossover.nu else "")
    which = listed(name(each) for each in crossover.basis)
    plain = [fit for fit in analysis.comparison.fits if fit.ansatz.name in crossover.basis and not fit.ansatz.corrected]
    why = (
        "no form with a correction to scaling was fitted" if plain else
        "the evidence has no say in whether a correction to scaling exists, and forms without one give intervals that "
        "are too narrow"
    )  # fmt: skip
    found.append(
        f"The values of {what} that we quote average over {which} by evidence; {why}. Forms with less than "
        f"{plain_number(f'{analysis_module.LEAST_WEIGHT:g}')} of the best evidence are left out."
    )
    return " ".join(found)


def checks(analysis: Analysis) -> str:
    """Goodness of fit, held-out size, priors, stability, and the costs of the literature."""
    fits = analysis.comparison.fits
    found = [r"Goodness of fit is the posterior-predictive $p$ of $\chi^2$~\cite{gelman1996} with the errors as given."]
    held = [fit.held_out for fit in fits if fit.held_out is not None]
    if held:
        found.append(
            f"The means of the largest size, $L$ = {general(held[0].size)}, are predicted from the smaller ones "
            f"by each "
            "form: the score is the difference of the log evidences with and without them."
        )
    if any(fit.prior_sensitivity for fit in fits) and len(PRIOR_SETS) > 1:
        found.append(
            "The influence of the priors is seen by reweighting to logarithmic parameters uniform in their value "
            "and to "
            f"Gaussian priors {WIDENED:g} times as wide."
        )
    return " ".join([*found, *_stability(analysis), *_costs(analysis)])


def _stability(analysis: Analysis) -> list[str]:
    rows = analysis.stability
    if not rows:
        return []
    sizes = listed(general(size) for size in sorted({row.smallest_size for row in rows}))
    low, high = analysis.curves.disorder_range
    narrowest = min((row.window[1] - row.window[0]) / (high - low) for row in rows)
    narrowed = f" and windows down to {plain_number(f'{narrowest:.2g}')} of the range" if narrowest < 1 else ""
    plural = "s" * (len(rows) > 1)
    return [
        f"Stability rests on {len(rows)} refit{plural} with smallest size {sizes}{narrowed}; what the shifts of "
        f"${critical(analysis.curves)}$ exceed the scatter expected of a part of the data~\\cite{{hausman1978}} is its "
        "systematic error."
    ]


def _costs(analysis: Analysis) -> list[str]:
    if not any(analysis.costs.values()):
        return []
    return [
        "Cost functions of the literature~\\cite{kawashima1993,bhattacharjee2001,houdayer2004,suntajs2020} are "
        "computed "
        f"for comparison, with what noise alone gives from {BOOTSTRAP} parametric bootstrap sets~\\cite{{efron1993}}; "
        "no conclusion rests on them."
    ]
