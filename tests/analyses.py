"""Analyses built by hand, for tests of what is made of them: no estimator runs, so every number is known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from driftline.analysis import Analysis, Crossover, headline_basis
from driftline.cautions import Case, Caution
from driftline.collapse import CollapsedPoints, CollapseFit, Comparison, FitQuality, SamplerHealth, weigh
from driftline.costs import COST_FUNCTIONS, Cost
from driftline.crossings import Crossing, Crossings
from driftline.curves import Curve, Curves, Labels
from driftline.drift import LAWS, Drift, LawFit
from driftline.inference.intervals import Interval
from driftline.scaling.ansatz import parse_ansatz
from driftline.separation import Separation
from driftline.settings import Settings
from driftline.smoothing import SmoothCurve
from driftline.stability import StabilityRow
from driftline.verdict import Verdict

LABELS = Labels(
    observable="gap ratio",
    observable_symbol=r"\langle r\rangle",
    disorder_symbol="W",
    disorder_unit="t",
    ergodic_value=0.5307,
    localised_value=0.3863,
    dimension=3.0,
)
#: Without reference values nothing can be said about a plateau
UNREFERENCED = replace(LABELS, ergodic_value=None, localised_value=None)
OPENING = "Warning: no evidence of a transition in these data."


def made_curves(sizes=(6, 8, 10, 12, 14), *, labels=LABELS, scale=1.0, offset=0.0, error=0.001, points=13):
    """Curves of a logistic that steepens with size and crosses at 16.5, in units of `scale` above `offset`."""
    rng = np.random.default_rng(5)
    grid = np.linspace(13.0, 20.0, points)
    curves = []
    for size in sizes:
        mean = 0.39 + 0.14 / (1 + np.exp((grid - 16.5) * size**0.63 / 12)) + rng.normal(0, error, points)
        curves.append(Curve(size, grid, offset + scale * mean, np.full(points, scale * error)))
    return Curves(curves, labels, {"path": "made.csv", "sha256": "0" * 64})


def made_crossings(curves, *, probability=1.0, separated=0.99):
    """Crossings near 16.5 that drift a little, and smoothers that pass through the points."""
    smooth = tuple(
        SmoothCurve(
            c.size, c.disorder, c.mean, c.error / 2, np.tile(c.mean, (2, 1)), np.tile(np.gradient(c.mean), (2, 1))
        )
        for c in curves.curves
    )
    pairs = []
    for i, small in enumerate(curves.curves):
        for j, large in enumerate(curves.curves[i + 1 :], start=i + 1):
            position = 16.5 - 6 / (small.size + large.size)
            value = float(np.interp(position, small.disorder, small.mean))
            height = 2 * float(small.error[0])
            known = probability >= 0.05
            pairs.append(
                Crossing(
                    sizes=(small.size, large.size),
                    probability=probability,
                    separated=separated,
                    disorder=Interval.of_normal(position, 0.12) if known else None,
                    value=Interval.of_normal(value, height) if known else None,
                    inverse_nu=Interval.of_normal(0.63, 0.08) if known else None,
                    draws=np.full(10, position if known else np.nan),
                    adjacent=j == i + 1,
                )
            )
    return Crossings(tuple(pairs), smooth, curves.common_range, curves.labels, curves, 1)


def made_fit(curves, name="power-law:corrected", *, log_evidence=250.0):
    """A collapse fit with W_c = 16.53(12) and nu = 1.57(5) whose residuals are standard normal numbers."""
    size, disorder, mean, error = curves.flat()
    x = (disorder - 16.53) * (size / np.sqrt(curves.sizes[0] * curves.sizes[-1])) ** (1 / 1.57)
    order = np.argsort(x)
    residual = np.random.default_rng(6).normal(size=x.size)
    ansatz = parse_ansatz(name, curves)
    truth = {
        "W_c": (16.53, 0.12), "W_mid": (16.53, 0.12), "nu": (1.57, 0.05), "omega": (1.0, 0.5), "D": (0.3, 0.2),
        "tau": (0.02, 0.005), "s": (1.0, 0.08),
    }  # fmt: skip
    names = (*(each.name for each in ansatz.parameters), "tau", "s")
    centres = np.array([truth.get(each, (1.0, 0.1)) for each in names])
    rng = np.random.default_rng(7)
    return CollapseFit(
        ansatz=ansatz,
        curves=curves,
        log_evidence=log_evidence,
        log_evidence_error=0.05,
        parameters={each: Interval.of_normal(*truth.get(each, (1.0, 0.1))) for each in names},
        samples=rng.normal(centres[:, 0], centres[:, 1], size=(50, len(names))),
        names=names,
        quality=FitQuality(1.02, 0.44, 1.01, 2.6, (8.0, 15.0)),
        sampler=SamplerHealth("emcee", 1500.0, 40.0, True),
        prior_limited=(),
        points=CollapsedPoints(size, disorder, x, mean, error, mean - residual * error, residual),
        function_x=x[order],
        function_mean=(mean - residual * error)[order],
        function_sd=error[order] / 3,
    )


def made_drift(crossings, *, note="", laws=("constant", "inverse", "linear")):
    """Drift through the adjacent crossings by least squares, with bands of 0.1; with a `note`, nothing is fitted."""
    pairs = [each for each in crossings.adjacent if each.disorder is not None]
    sizes = np.array([np.sqrt(each.sizes[0] * each.sizes[1]) for each in pairs])
    positions = np.array([each.disorder.median for each in pairs])
    return Drift(
        source="crossings",
        sizes=sizes,
        positions=positions,
        covariance=np.diag(np.full(len(pairs), 0.12**2)),
        laws=() if note else tuple(_law(LAWS[name], sizes, positions, 1 / len(laws)) for name in laws),
        probability_bounded=None if note else 0.8,
        rate_per_site=None if note else Interval.of_normal(0.04, 0.01),
        deciding_size=None if note else 31.0,
        note=note,
    )


def _law(law, sizes, positions, probability):
    basis = law.basis(sizes, np.array(1.0))
    slope, level = np.polyfit(basis, positions, 1) if law.has_shift else (0.0, positions.mean())
    rng = np.random.default_rng(8)
    draws = np.column_stack([rng.normal(level, 0.1, 400), np.full(400, slope), np.ones(400)])[:, : len(law.symbols)]
    return LawFit(
        name=law.name,
        bounded=law.bounded,
        formula=law.formula,
        log_evidence=-3.0 - len(law.symbols),
        probability=probability,
        parameters={name: Interval.of_draws(draws[:, i]) for i, name in enumerate(law.symbols)},
        limit=Interval.of_draws(draws[:, 0]) if law.bounded else None,
        chi2_per_dof=1.1,
        coefficient_draws=draws,
        law=law,
    )


CAUTION = Caution(
    "DRIFT_UNRESOLVED",
    "the crossings alone give laws with a limit a probability of 0.80",
    "the two best laws differ by three errors from size 31 on",
    {"probability_bounded": 0.8},
)

COSTS = tuple(Cost(name, 1.25, Interval.of_normal(1.0, 0.1), 1.25) for name in COST_FUNCTIONS)


def made_analysis(
    curves=None, *, code="transition-supported", names=("power-law", "power-law:corrected"), warnings=(CAUTION,),
    note="", crossover=True, settings=None, **crossing,
):  # fmt: skip
    """An analysis with W_c = 16.53(12) and nu = 1.57(5), under the verdict `code`."""
    curves = made_curves() if curves is None else curves
    crossings = made_crossings(curves, **crossing)
    fits = tuple(made_fit(curves, name, log_evidence=250.0 + number) for number, name in enumerate(names))
    supported = code == "transition-supported"
    return Analysis(
        curves=curves,
        settings=settings or Settings(seed=3, ansatze=names),
        crossings=crossings,
        drift=made_drift(crossings, note=note),
        separation=None,
        comparison=Comparison(fits, weigh(fits)),
        crossover=Crossover(Interval.of_normal(16.53, 0.12), 0.05, Interval.of_normal(1.57, 0.05), (names[-1],))
        if crossover
        else None,
        stability=(StabilityRow(names[-1], 8.0, (13.0, 20.0), Interval.of_normal(16.5, 0.2), 0.3),),
        verdict=Verdict(
            code=code,
            statement="The data support a transition." if supported else f"{OPENING} The crossings drift.",
            reasons=() if supported else (f"{CAUTION.code}: {CAUTION.message}", "2 of 4 pairs cross"),
            probability_transition=0.97 if supported else 0.4,
            probability_drift=0.03 if supported else 0.6,
            warnings=tuple(warnings),
        ),
        timing={"crossings": 0.5, "collapse": 4.0},
        costs=dict.fromkeys(names, COSTS),
    )


def separation(below=5.0, above=-6.0, *, flat=None, at_reference=False):
    """Outcome of the separation test with these significances around 16.5."""
    resolved = flat is None
    return Separation(below, above, 15.0, 18.0, 16.5, below * above < 0, resolved, flat, at_reference)


def collapse(name="power-law:corrected", log_evidence=250.0, *, curves=None):
    """`made_fit` with the noise scale 1.00(8) among its intervals."""
    fit = made_fit(made_curves() if curves is None else curves, name, log_evidence=log_evidence)
    return replace(fit, parameters={**fit.parameters, "s": Interval.of_normal(1.0, 0.08)})


def moved(shift, error, *, ansatz="power-law:corrected", smallest=8.0, window=(13.0, 20.0)):
    """A refit whose W_c differs by `shift` from that of `made_fit`."""
    return StabilityRow(ansatz, smallest, window, Interval.of_normal(16.53 + shift, error), 0.3)


def case(*, sizes=(6, 8, 10, 12, 14), labels=UNREFERENCED, curves=None, fits=None, probability_bounded=0.97, **given):
    """What the verdict is made from: a transition at 16.53(12) without a flaw, but for the changes asked for.

    `probability_bounded`, `rate_per_site` and `deciding_size` change the drift; all else are fields of `Case`.
    """
    curves = made_curves(sizes, labels=labels) if curves is None else curves
    crossings = given.pop("crossings", None) or made_crossings(curves)
    drift = replace(
        made_drift(crossings, note="" if len(crossings.adjacent) > 1 else "a single crossing"),
        probability_bounded=probability_bounded,
        **{name: given.pop(name) for name in ("rate_per_site", "deciding_size") if name in given},
    )
    if fits is None:
        names = {"power-law:corrected": 250.0, "power-law:linear-drift:corrected": 240.0, "size-independent": 200.0}
        fits = tuple(collapse(name, value, curves=curves) for name, value in names.items())
    comparison = Comparison(fits, weigh(fits))
    basis = headline_basis(comparison)
    stability = tuple(moved(-0.03, 0.2, ansatz=fit.ansatz.name) for fit in basis)
    usual = {"separation": separation(), "basis": basis, "stability": stability}
    return Case(curves=curves, crossings=crossings, drift=drift, comparison=comparison, **{**usual, **given})
