"""The rules of the verdict, the outcome, and the programs behind it, as sentences in LaTeX."""

from __future__ import annotations

from typing import TYPE_CHECKING

from driftline import cautions, numerals, versions
from driftline import separation as separation_module
from driftline import verdict as verdict_module
from driftline.report.latex import escape, limits, listed, name, plain_number, value, with_systematic
from driftline.report.methods_curves import critical
from driftline.verdict import FINITE_SIZES, slowest_drift

if TYPE_CHECKING:
    from driftline.analysis import Analysis, Crossover

SUPPORTED = "transition-supported"
_CITATIONS = {"numpy": "harris2020", "scipy": "virtanen2020"}
_BOUNDS = {"quenched": ("2/d", "chayes1986"), "quasiperiodic": ("1/d", "luck1993")}
_CALLED = {"numpy": "NumPy", "scipy": "SciPy", "numba": "Numba"}


def rules(analysis: Analysis) -> str:
    """When a transition counts as supported, and the bound that the exponent is held against."""
    wc = critical(analysis.curves)
    rivals = len({fit.ansatz.hypothesis for fit in analysis.comparison.fits}) > 1
    models, asked = ("forms", verdict_module.SUPPORTED) if rivals else ("laws of the drift", cautions.ESTABLISHED)
    ending = "critical disorder" if rivals else "limit"
    text = (
        f"A transition counts as supported only if the {models} with a {ending} hold a probability of {asked:g} "
        f"or more, "
        f"every pair of neighbouring sizes crosses with probability {cautions.CROSSES:g} or more, size dependence of "
        f"opposite sign is resolved at {separation_module.THRESHOLD:g} standard deviations on both sides, the fit has "
        f"$p \\geq {cautions.POOR_P:g}$, ${wc}$ lies inside the measured range but for "
        f"{cautions.OUTSIDE_SHARE:g} of its "
        f"posterior, and it does not move significantly (at {cautions.UNSTABLE_P:g}, all refits counted) without the "
        "smallest sizes; further, the crossings must not establish an unbounded drift, the values must not be set by "
        "their priors, and the sampler must have converged. A drift is established if the "
        f"{models} without a {ending} hold {cautions.ESTABLISHED:g}"
        + (" and the crossings do not establish a limit." if rivals else ".")
    )
    labels, found = analysis.curves.labels, analysis.crossover
    if found is not None and found.nu is not None and cautions.exponent_limit(analysis.curves) is not None:
        bound, source = _BOUNDS[labels.disorder_kind]
        text += (
            rf" The exponent is held against the bound $\nu \geq {bound}$ with $d = "
            rf"{labels.dimension:g}$~\cite{{{source}}}: "
            "a value below it is pre-asymptotic."
        )
    return text


def outcome(analysis: Analysis) -> str:
    """The verdict with its numbers; a critical disorder is quoted as such only where a transition is supported."""
    verdict, found = analysis.verdict, analysis.crossover
    if verdict.code == SUPPORTED and found is not None:
        text = f"Outcome: the data support a transition, with {_headline(analysis, found)}."
        text += f"{escape(slowest_drift(analysis.comparison))} {FINITE_SIZES}"
    else:
        text = f"Outcome ({name(verdict.code)}): {escape(verdict.statement)}"
        if found is not None:
            text += (
                f" The forms with a critical disorder would give {_headline(analysis, found)}, which is no "
                f"evidence that "
                "there is one."
            )
    parts = (
        ("a transition", verdict.probability_transition),
        ("no critical disorder at a finite value", verdict.probability_drift),
    )
    known = [f"{what} {plain_number(numerals.probability(p))}" for what, p in parts if p is not None]
    if known:
        text += f" Posterior probabilities: {listed(known)}."
    if verdict.warnings:
        text += f" Warnings raised: {listed(name(each.code) for each in verdict.warnings)}."
    return text if verdict.false_alarm is None else f"{text} {escape(verdict.false_alarm.sentence)}"


def _headline(analysis: Analysis, found: Crossover) -> str:
    """Critical disorder with statistical and systematic error, exponent, and their 95 % intervals."""
    unit = analysis.curves.labels.disorder_unit
    dimension = f"\\,{escape(unit)}" if unit else ""
    if found.systematic is None:
        critical_value, errors = value(found.disorder), "statistical error"
    else:
        critical_value = with_systematic(found.disorder, found.systematic)
        errors = "statistical and systematic error"
    text = (
        f"${critical(analysis.curves)}$ = {critical_value}{dimension} ({errors}; 95\\,\\% interval "
        f"{limits(found.disorder)})"
    )
    if found.nu is not None:
        text += f" and $\\nu$ = {value(found.nu)} (95\\,\\% interval {limits(found.nu)})"
    return text


def software(analysis: Analysis) -> str:
    """The versions behind the numbers, the seed, and how long a run was allowed to be."""
    used = versions.software()
    packages = dict(used["packages"])
    if not analysis.drift.laws:
        packages.pop("lmfit")
    if not any(fit.sampler.method == "chain" for fit in analysis.comparison.fits):
        packages.pop("emcee")
    sources = {each: f"~\\cite{{{key}}}" for each, key in _CITATIONS.items()}
    texts = [f"{_CALLED.get(each, each)} {escape(it)}{sources.get(each, '')}" for each, it in packages.items()]
    quick = " in its quick mode" if analysis.settings.quick else ""
    return (
        f"Computed with driftline {escape(used['version'])}{quick} (Python {escape(used['python'])}, {listed(texts)}), "
        f"seed {analysis.settings.seed}."
    )
